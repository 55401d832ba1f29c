"""Marks on cells that findings name: a sign before the value, a fill, an edge and a note.

The sign stands in the number format: it is shown and printed, and the value stays as it is.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field

from openpyxl import Workbook
from openpyxl.cell import Cell, MergedCell
from openpyxl.comments import Comment
from openpyxl.styles import Border, PatternFill, Side
from openpyxl.worksheet.worksheet import Worksheet

from extractor.findings import Finding, Severity
from extractor.output.sheets import AUTHOR, clean

SIGNS = {
    Severity.IMPOSSIBLE: "!!!",
    Severity.INCONSISTENT: "!!",
    Severity.DOUBTFUL: "!",
    Severity.NOTE: "i",
}
"""What stands before the value of the most suspect cell of a finding."""
COMPANION = "·"
"""What stands before the values that the suspect one was compared with."""

FILLS = {
    Severity.IMPOSSIBLE: "FFF4B9A7",
    Severity.INCONSISTENT: "FFF9D3A8",
    Severity.DOUBTFUL: "FFFBEBB5",
    Severity.NOTE: "FFE3EAF1",
}
_COMPANION_FILL = "FFF3F3EE"
_ADDRESS = re.compile(r"(?:\[(?:(?P<sheet>[^\[\]!]+)!)?(?P<cell>[A-Z]{1,3}[1-9][0-9]*)\])\Z")
_MARK = re.compile(r'"(?:!{1,3}|i|·) "')
_SECTION = re.compile(r'"[^"]*"?|\\.|[_*].|\[[^\]]*\]|;', re.DOTALL)
_DIVIDER = "— Extractor —"


@dataclass(slots=True)
class Mark:
    """What is to be shown at one cell."""

    severity: Severity
    suspect: bool
    sentences: list[str] = field(default_factory=list)


def unmark(cell: Cell | MergedCell) -> None:
    """Take off what an earlier run showed at a cell; a fill that the mark covered is not restored."""
    if isinstance(cell, MergedCell):
        return
    if _MARK.search(cell.number_format):
        cell.number_format = _MARK.sub("", cell.number_format)
        cell.fill = PatternFill()
        cell.border = Border()
    if cell.comment is not None and _DIVIDER in cell.comment.text:
        own = cell.comment.text.split(_DIVIDER)[0].rstrip()
        author = cell.comment.author
        cell.comment = Comment(own, author) if own else None


def marks_of(findings: list[Finding], book: Workbook, coded: Worksheet) -> dict[tuple[str, str], Mark]:
    """What to show, by sheet and cell."""
    marks: dict[tuple[str, str], Mark] = {}
    for finding in findings:
        for position, cell in enumerate(finding.cells):
            found = address_of(cell, book, coded)
            if found is None:
                continue
            suspect = position == 0
            mark = marks.setdefault(found, Mark(finding.severity, suspect))
            if (suspect, finding.severity) > (mark.suspect, mark.severity):
                mark.suspect, mark.severity = suspect, finding.severity
            word = finding.severity.word.capitalize()
            sentence = (
                f"{word}: {finding.message}."
                if suspect
                else f"Compared with {finding.cells[0]} ({finding.severity.word})."
            )
            if sentence not in mark.sentences:
                mark.sentences.append(sentence)
    return marks


def address_of(cell: str, book: Workbook, coded: Worksheet) -> tuple[str, str] | None:
    """Sheet and cell at the end of a heading with its address."""
    found = _ADDRESS.search(cell)
    if found is None:
        return None
    title = found["sheet"] or coded.title
    return (title, found["cell"]) if title in book.sheetnames else None


def show(cell: Cell | MergedCell, mark: Mark) -> None:
    """Mark one cell."""
    if isinstance(cell, MergedCell):
        return
    sign = SIGNS[mark.severity] if mark.suspect else COMPANION
    cell.number_format = _signed(cell.number_format, sign, text=cell.data_type in ("s", "inlineStr"))
    colour = FILLS[mark.severity] if mark.suspect else _COMPANION_FILL
    cell.fill = PatternFill("solid", fgColor=colour)
    if mark.suspect:
        edge = Side("medium" if mark.severity >= Severity.INCONSISTENT else "thin", color="FF7A3B2E")
        cell.border = Border(edge, edge, edge, edge)
    text = "\n".join(mark.sentences)
    if mark.suspect:
        text += "\nA question for the article, not a verdict: read the page again first."
    own = f"{cell.comment.text.rstrip()}\n\n" if cell.comment is not None else ""
    text = f"{own}{_DIVIDER}\n{text}"
    lines = sum(1 + len(line) // 46 for line in text.split("\n"))
    cell.comment = Comment(clean(text), AUTHOR, height=18 * lines + 12, width=330)


def _signed(code: str, sign: str, *, text: bool) -> str:
    """A number format that shows a sign before what ``code`` shows; decimals are as they were."""
    literal = f'"{sign} "'
    if text:
        return f"{literal}@"
    if code in ("@", ""):
        return f"{literal}General"
    parts, start = [], 0
    for token in _SECTION.finditer(code):
        if token.group() == ";":
            parts.append(code[start : token.start()])
            start = token.end()
    parts.append(code[start:])
    return ";".join(_led(part, literal) for part in parts)


def _led(section: str, literal: str) -> str:
    """A section with the literal after its leading brackets, which must stay first."""
    brackets = re.match(r"(?:\[[^\]]*\])*", section)
    lead = brackets.group() if brackets else ""
    return lead + literal + section[len(lead) :] if section else section
