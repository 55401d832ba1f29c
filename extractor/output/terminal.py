"""Tables and sentences for the terminal. Words of a sheet are never taken for markup."""

from __future__ import annotations

import math
import os
import sys
from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import pandas as pd
from rich.console import Console
from rich.text import Text
from rich.tree import Tree

from extractor.api import Result
from extractor.audit.run import Audit
from extractor.findings import Finding, Severity
from extractor.quantities import VOCABULARY
from extractor.routes.conversion import Column
from extractor.words import listed, plain

MOST_ROWS = 1_000
"""Longer effect tables belong into a file."""

_WIDTH = 120
"""Columns where the output is not a terminal and COLUMNS does not say."""
_STYLES = {
    "impossible": "bold red",
    "inconsistent": "red",
    "doubtful": "yellow",
    "note": "dim",
    "converted": "green",
    "bounded": "yellow",
    "blocked": "red",
}
_MOST_RANGES = 8


def console(*, stderr: bool = False) -> Console:
    """A console on standard output or standard error: plain and of fixed width unless that is a terminal."""
    stream = sys.stderr if stderr else sys.stdout
    live = stream.isatty()
    return Console(
        file=stream,
        width=None if live else _fixed_width(),
        force_terminal=live,
        color_system="auto" if live else None,
        markup=False,
        highlight=False,
        emoji=False,
    )


def _fixed_width() -> int:
    said = os.environ.get("COLUMNS", "")
    return max(int(said), 40) if said.isascii() and said.isdigit() and len(said) < 6 else _WIDTH


def printable(text: str) -> str:
    """Text in which nothing can move a terminal's cursor or change its colours."""
    return text if text.isprintable() else "".join(c if c.isprintable() else " " for c in text)


def say(to: Console, text: Text | str, indent: int = 0, hang: int = 0) -> None:
    """Print a sentence, wrapped, the first line ``indent`` from the left and further ones ``hang`` more."""
    words = Text(text) if isinstance(text, str) else text
    words.plain = printable(words.plain)
    lines = words.wrap(to, max(to.width - indent - hang, 20))
    for at, line in enumerate(lines):
        line.rstrip()
        to.print(Text(" " * (indent + (hang if at else 0))).append_text(line), soft_wrap=True)


def show_tree(to: Console, tree: Tree) -> None:
    """Print a tree without the blanks that wrapping leaves at line ends."""
    with to.capture() as captured:
        to.print(tree)
    for line in captured.get().splitlines():
        to.out(line.rstrip(), highlight=False)


def counted(count: int, noun: str) -> str:
    """ "1 row", "2 rows"."""
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"


def rows_in_words(rows: Iterable[int]) -> str:
    """ "row 4", "rows 4-7 and 9"; long lists are cut and say so."""
    ranges: list[list[int]] = []
    count = 0
    for row in sorted(rows):
        count += 1
        if ranges and row == ranges[-1][1] + 1:
            ranges[-1][1] = row
        else:
            ranges.append([row, row])
    shown = [str(a) if a == b else f"{a}-{b}" for a, b in ranges[:_MOST_RANGES]]
    left = sum(b - a + 1 for a, b in ranges[_MOST_RANGES:])
    if left:
        shown.append(f"{left} more")
    return f"row{'s' if count > 1 else ''} {listed(shown)}"


def number(value: Any) -> str:
    """A number as tables show it; blank where there is none or it has no limit."""
    return "" if pd.isna(value) or math.isinf(value) else plain(float(value))


def show_effects(to: Console, result: Result, level: float) -> None:
    """The effect table, what became of the rows, and why some have no effect."""
    rows = result.conversion.evidence.table.rows
    metric = result.conversion.metric
    say(to, Text(f"{metric} ({VOCABULARY[metric].symbol})", "bold"))
    headings = ["row", "study", "estimate", f"{level * 100:g} % CI"]
    headings += ["variance", "grade", "findings", "status"]
    _show_table(to, headings, _effect_lines(result))
    if rows > MOST_ROWS:
        say(to, f"... and {counted(rows - MOST_ROWS, 'row')} more; --out DIR writes all of them")
    to.print()
    show_summary(to, result)


_RIGHT = frozenset({0, 2, 4})
_LABEL, _GAP, _LEAST = 24, 2, 9
_SHRINKING = ((1, 8), (6, 4), (5, 6))
"""Columns that give way on a narrow terminal, in this order, each down to so many characters."""


def _effect_lines(result: Result) -> list[list[Text]]:
    """The cells of the effect table, the column of reasons last."""
    worst = _worst_by_row(result.audit)
    lines: list[list[Text]] = []
    for row in result.effects.head(MOST_ROWS).to_dict("records"):
        status = Text(str(row["status"]), _STYLES[str(row["status"])])
        if row["reason"]:
            status.append(printable(f": {row['reason']}"), "default")
        estimate = number(row["estimate"])
        if row["status"] == "bounded":
            estimate = between(row["estimate_low"], row["estimate_high"])
        limits = "" if pd.isna(row["ci_low"]) else between(row["ci_low"], row["ci_high"])
        study = Text(" ".join(printable(str(row["study"])).split()))
        study.truncate(_LABEL, overflow="ellipsis")
        words = (estimate, limits, number(row["variance"]), str(row["grade"]))
        lines.append(
            [
                Text(str(row["row"])),
                study,
                *map(Text, words),
                worst.get(int(row["row"]), Text("")),
                status,
            ]
        )
    return lines


def _show_table(to: Console, headings: list[str], lines: list[list[Text]]) -> None:
    """A table whose last column takes the room that the others leave, and is cut there."""
    widths = [max(map(len, (*(line[at].plain for line in lines), word))) for at, word in enumerate(headings)]
    gaps = _GAP * (len(widths) - 1)
    widths[-1] = min(widths[-1], max(to.width - sum(widths[:-1]) - gaps, _LEAST))
    for at, least in _SHRINKING:
        over = sum(widths) + gaps - to.width
        if over > 0:
            widths[at] = max(min(widths[at], least), widths[at] - over)
    heading = [Text(word, "bold") for word in headings]
    rule = [Text("─" * width, "dim") for width in widths]
    for cells in (heading, rule, *lines):
        joined = Text()
        for at, (cell, width) in enumerate(zip(cells, widths, strict=True)):
            cell.truncate(width, overflow="ellipsis")
            cell.align("right" if at in _RIGHT else "left", width)
            joined.append_text(cell).append(" " * _GAP)
        joined.rstrip()
        to.print(joined, soft_wrap=True)


def between(low: object, high: object) -> str:
    """ "0.1 to 0.2", "≥ 0.1" or "≤ 0.2"."""
    below, above = number(low), number(high)
    if below and above:
        return f"{below} to {above}"
    return f"≥ {below}" if below else f"≤ {above}"


def _worst_by_row(audit: Audit) -> dict[int, Text]:
    found: dict[int, list[Severity]] = {}
    for finding in audit.findings:
        found.setdefault(finding.row, []).append(finding.severity)
    words: dict[int, Text] = {}
    for row, severities in found.items():
        worst = max(severities).word
        words[row] = Text(f"{len(severities)}: {worst}", _STYLES[worst])
    return words


def show_summary(to: Console, result: Result) -> None:
    """Counts by status, grade and severity, and the reasons of rows without an effect."""
    columns = result.conversion.columns
    statuses, grades = (Counter(columns[name].tolist()) for name in ("status", "grade"))
    by_status = [f"{statuses[word]} {word}" for word in ("converted", "bounded", "blocked")]
    say(to, f"{counted(statuses.total(), 'row')}: {listed(by_status)}.")
    if by_grade := [f"{grades[word]} {word}" for word in sorted(grades) if word]:
        say(to, f"Grades: {listed(by_grade)}.")
    for (status, reason), rows in _reasons(columns).items():
        label = Text(f"{status}, {rows_in_words(rows)}: ", _STYLES[status])
        say(to, label.append(reason, "default"), 2, 2)
    more = "; extractor audit shows them in full." if result.audit.findings else "."
    say(to, _finding_counts(result.audit) + more)


def _reasons(effects: Mapping[str, Column]) -> dict[tuple[str, str], list[int]]:
    found: dict[tuple[str, str], list[int]] = {}
    said = zip(*(effects[name].tolist() for name in ("status", "reason", "row")), strict=True)
    for status, reason, row in said:
        if reason:
            found.setdefault((status, reason), []).append(row)
    return found


def _finding_counts(audit: Audit) -> str:
    if not audit.findings:
        return "Findings: none"
    severities = [finding.severity for finding in audit.findings]
    counts = [f"{severities.count(s)} {s.word}" for s in reversed(Severity) if s in severities]
    rows = len({finding.row for finding in audit.findings})
    return f"Findings: {listed(counts)}, in {counted(rows, 'row')}"


def show_findings(to: Console, audit: Audit) -> None:
    """Every finding in a sentence, by study, then how much was checked."""
    by_study: dict[str, list[Finding]] = {}
    for finding in audit.findings:
        by_study.setdefault(finding.study or f"row {finding.row}, no study named", []).append(finding)
    for study, findings in by_study.items():
        say(to, Text(" ".join(study.split()), "bold"))
        for finding in findings:
            show_finding(to, finding)
        to.print()
    _show_checks(to, audit)


def show_finding(to: Console, finding: Finding) -> None:
    """One finding: its sentence, its cells, its explanation."""
    word = finding.severity.word
    head = Text.assemble(f"row {finding.row} ", (word, _STYLES[word]), f": {finding.message}")
    say(to, head, 2, 2)
    about = [f"cells: {'; '.join(finding.cells)}"]
    if finding.explanation:
        about.append(f"explanation: {finding.explanation}")
    for line in about:
        say(to, Text(line, "dim"), 4, 2)


def _show_checks(to: Console, audit: Audit) -> None:
    checked = audit.rows - len(audit.unchecked)
    checks = f"{counted(audit.checks, 'check')} over {checked} of {counted(audit.rows, 'row')}"
    say(to, f"{checks}. {_finding_counts(audit)}.")
    if not audit.unchecked:
        return
    why: dict[str, list[int]] = {}
    for row, reason in audit.unchecked:
        why.setdefault(reason, []).append(row)
    say(to, f"{counted(len(audit.unchecked), 'row')} could not be checked:")
    for reason, rows in why.items():
        say(to, f"{rows_in_words(rows)}: {reason}", 2, 2)


def show_cautions(to: Console, cautions: Sequence[str]) -> None:
    """The cautions, one a line."""
    to.print()
    for caution in cautions:
        say(to, Text(f"- {caution}", "dim"), 0, 2)
