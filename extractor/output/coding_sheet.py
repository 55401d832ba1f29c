"""A blank coding sheet for a codebook: a workbook that keeps digits as they are typed and says what belongs where.

Cells are in text format, so that 5.10 keeps its zero and 3-5 does not become a date. Headings are locked and carry
their meaning as a note; words are chosen from lists, which stand in ranges of a hidden sheet.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from openpyxl import Workbook
from openpyxl.comments import Comment
from openpyxl.styles import Alignment, Border, Font, PatternFill, Protection, Side
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.datavalidation import DataValidation
from openpyxl.worksheet.properties import PageSetupProperties
from openpyxl.worksheet.worksheet import Worksheet

from extractor.codebook import Codebook
from extractor.decisions import COLUMNS as DECISION_COLUMNS
from extractor.decisions import WORDS as DECISIONS
from extractor.errors import UsageError
from extractor.output.coding_columns import WORDS, Column, columns_of
from extractor.output.coding_guide import guide_lines
from extractor.output.sheets import AUTHOR, INK, RULE, SANS, landscape, put_text
from extractor.output.workbook import save
from extractor.quantities import VOCABULARY

CODED, GROUPS, DECIDED, GUIDE, LISTS = "coded", "groups", "decisions", "how to code", "lists"
MOST_GROUPS = 20
"""More groups belong into the sheet ``groups``."""

_ROWS = 2_000
"""Rows the lists reach down to."""
_SPARE = 12
"""Free columns to the right, for a team's own."""
_FILLS = {
    "effect": "FFE4EAEE",
    "test": "FFDCE9E8",
    "group": "FFEFE9DA",
    "printed": "FFE7E3EE",
    "model": "FFE9ECE0",
    "place": "FFE4EAEE",
}
_OTHER_GROUP = "FFF7F3E8"
_DECISION_NOTES = {
    "row": "row of the coded sheet, as the spreadsheet numbers it",
    "cell": "heading of the cell, or its address such as H12; blank for a finding without a cell",
    "decision": "keep: the article does say so; correct: use the value to the right; waive: the finding does not apply",
    "value": "what the cell should say; for correct",
    "source": "where the right value comes from: page, erratum, author's letter",
    "by": "who decided",
    "on": "date, such as 2024-05-31",
    "why": "the reason, in a sentence",
}
_GROUP_COLUMNS = {
    "analysis": "the label that rows of the coded sheet have in their column analysis",
    "group": "label of the group or cell",
    **{name: VOCABULARY[name].meaning for name in ("n", "mean", "sd", "se")},
}


def write_coding_sheet(codebook: Codebook, path: Path, *, groups: int = 3) -> None:
    """Write a blank coding sheet.

    Parameters
    ----------
    codebook : names the headings; its title, design and decimal mark stand on the page ``how to code``.
    groups : how many numbered groups there are columns for, where the codebook has one column a group.

    Raises
    ------
    UsageError
        when the codebook names no columns, or for a number of groups no sheet has.
    """
    if not codebook.columns:
        raise UsageError("the codebook names no columns under [columns]; a sheet needs their headings")
    if not 1 <= groups <= MOST_GROUPS:
        raise UsageError(
            f"a coding sheet has 1 to {MOST_GROUPS} groups side by side, not {groups}; use {GROUPS}"
        )
    columns = columns_of(codebook, groups)
    book = Workbook()
    book.properties.creator = AUTHOR
    guide = book.worksheets[0]
    guide.title = GUIDE
    _write_guide(guide, guide_lines(codebook, columns))
    lists = {**WORDS, "decision": DECISIONS}
    coded = book.create_sheet(CODED)
    _blank(coded, columns, lists)
    _blank(book.create_sheet(GROUPS), [_plain(*item) for item in _GROUP_COLUMNS.items()], lists)
    note = "Name of a factor, such as dose; the cells below hold its levels."
    book[GROUPS].cell(1, len(_GROUP_COLUMNS) + 1).comment = _note(note)
    decided = [_plain(name, _DECISION_NOTES[name]) for name in DECISION_COLUMNS]
    _blank(book.create_sheet(DECIDED), decided, lists)
    _write_lists(book.create_sheet(LISTS), lists)
    book.active = book.sheetnames.index(CODED)
    # a new workbook shows its first sheet as chosen, too
    for sheet in book.worksheets:
        sheet.sheet_view.tabSelected = sheet is coded
    save(book, path)


def _plain(name: str, meaning: str) -> Column:
    """A column of the sheets beside the coded one."""
    words = DECISIONS if name == "decision" else ()
    return Column(name, name, "", meaning, name in VOCABULARY, words, "effect", 0)


def _blank(sheet: Worksheet, columns: Sequence[Column], lists: dict[str, tuple[str, ...]]) -> None:
    """Headings with notes and lists; everything below them free, in text format."""
    for at, column in enumerate(columns, 1):
        letter = get_column_letter(at)
        _free(sheet, letter, right=column.number)
        sheet.column_dimensions[letter].width = _width(column)
        heading = sheet.cell(1, at)
        put_text(heading, column.heading)
        heading.font = Font(name=SANS, bold=True, color=INK)
        fill = _OTHER_GROUP if column.group % 2 == 0 and column.group else _FILLS[column.part]
        heading.fill = PatternFill("solid", fgColor=fill)
        heading.border = Border(bottom=Side("thin", color=RULE))
        heading.alignment = Alignment(horizontal="right" if column.number else "left", wrap_text=True)
        heading.number_format = "@"
        heading.comment = _note(_told(column))
        if column.words:
            name = next(name for name, words in lists.items() if words == column.words)
            sheet.add_data_validation(_choice(name, lists, f"{letter}2:{letter}{_ROWS}"))
    for at in range(len(columns) + 1, len(columns) + 1 + _SPARE):
        letter = get_column_letter(at)
        _free(sheet, letter, right=False)
        spare = sheet.cell(1, at)
        spare.protection = Protection(locked=False)
        spare.font = Font(name=SANS, bold=True, color=INK)
        spare.number_format = "@"
    sheet.freeze_panes = "B2"
    landscape(sheet, across=max(1, len(columns) // 14))
    _lock(sheet)


def _free(sheet: Worksheet, letter: str, *, right: bool) -> None:
    """A column in text format that can be filled in."""
    dimension = sheet.column_dimensions[letter]
    dimension.number_format = "@"
    dimension.protection = Protection(locked=False)
    dimension.alignment = Alignment(horizontal="right" if right else "left", vertical="top")
    dimension.width = 12


def _lock(sheet: Worksheet) -> None:
    """Keep the headings; leave formats, widths, rows, sorting and filters to the coder. There is no password."""
    sheet.protection.sheet = True
    for allowed in (
        "formatCells",
        "formatColumns",
        "formatRows",
        "insertRows",
        "deleteRows",
        "sort",
        "autoFilter",
    ):
        setattr(sheet.protection, allowed, False)


def _width(column: Column) -> float:
    if column.name in ("quote", "reported", "why", "source"):
        return 32.0
    if column.name in ("study", "outcome", "effect"):
        return 20.0
    return max(len(column.heading) + 3.0, 9.0 if column.number else 13.0)


def _told(column: Column) -> str:
    """The note of a heading."""
    symbol = f"{column.symbol}: " if column.symbol else ""
    lines = [f"{symbol}{column.meaning}"]
    if column.words:
        lines.append(f"One of: {', '.join(column.words)}")
    elif column.number:
        lines.append("Type the digits as printed, zeros included.")
    if column.heading != column.name:
        lines.append(f"({column.name})")
    return "\n".join(lines)


def _note(text: str) -> Comment:
    lines = sum(1 + len(line) // 40 for line in text.split("\n"))
    return Comment(text, AUTHOR, height=14 + 18 * lines, width=280)


def _choice(name: str, lists: dict[str, tuple[str, ...]], cells: str) -> DataValidation:
    """A list to choose from, by reference to its range: a list in the rule itself ends at 255 characters."""
    letter = get_column_letter(list(lists).index(name) + 1)
    found = DataValidation(
        type="list",
        formula1=f"{LISTS}!${letter}$2:${letter}${len(lists[name]) + 1}",
        allow_blank=True,
        showErrorMessage=True,
        errorTitle="Not in the list",
        error=f"Choose one of: {', '.join(lists[name])}"[:225],
    )
    found.add(cells)
    return found


def _write_lists(sheet: Worksheet, lists: dict[str, tuple[str, ...]]) -> None:
    for at, (name, words) in enumerate(lists.items(), 1):
        for row, word in enumerate((name, *words), 1):
            put_text(sheet.cell(row, at), word)
            sheet.cell(row, at).number_format = "@"
    sheet.sheet_state = "hidden"


def _write_guide(sheet: Worksheet, lines: Sequence[tuple[str, ...]]) -> None:
    """The page that explains: a heading, or one to four cells a line."""
    for row, cells in enumerate(lines, 1):
        for at, text in enumerate(cells, 1):
            cell = sheet.cell(row, at)
            put_text(cell, text.removeprefix("# "))
            cell.font = Font(name=SANS, bold=text.startswith("# "), size=16 if row == 1 else 11, color=INK)
            cell.alignment = Alignment(horizontal="left", vertical="top", wrap_text=len(cells) > 1)
        if len(cells) == 1 and not cells[0].startswith("# "):
            sheet.merge_cells(start_row=row, end_row=row, start_column=1, end_column=4)
            sheet.cell(row, 1).alignment = Alignment(horizontal="left", vertical="top", wrap_text=True)
            sheet.row_dimensions[row].height = 15.0 * (1 + len(cells[0]) // 105)
        elif len(cells) > 1:
            sheet.row_dimensions[row].height = 15.0 * max(1 + len(t) // 58 for t in cells)
    for letter, width in zip("ABCD", (24, 14, 60, 26), strict=True):
        sheet.column_dimensions[letter].width = width
    sheet.sheet_view.showGridLines = False
    sheet.page_setup.orientation = "portrait"
    sheet.page_setup.fitToWidth, sheet.page_setup.fitToHeight = 1, 0
    sheet.sheet_properties.pageSetUpPr = PageSetupProperties(fitToPage=True)
    sheet.row_dimensions[1].height = 26.0
