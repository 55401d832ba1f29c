"""Decisions: what a coder recorded about findings, honoured on every further run.

A correction replaces one cell's number as if the sheet had said so; what was printed stays visible beside it.
A finding that was kept or waived becomes a note that says by whom and why. Nothing is deleted.
"""

from __future__ import annotations

import datetime
import re
import zipfile
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields, replace
from pathlib import Path

import numpy as np

from extractor.codebook import MOST_GROUPS, Codebook, canonical, canonical_names, normalised
from extractor.errors import UnreadableInput
from extractor.findings import Finding, Severity
from extractor.printed.reading import BLANK, Reading, quoted, tidy
from extractor.printed.reported import read_number
from extractor.quantities import VOCABULARY, close_matches
from extractor.source.columns import numbers_from
from extractor.source.grid import Grid, NoRows, column_letters, heading_text, is_blank
from extractor.source.reader import read_grid
from extractor.table import Numbers, Place, ReportedTable, Variable
from extractor.words import listed, printed_text

SHEET = "decisions"
COLUMNS = ("row", "cell", "decision", "value", "source", "by", "on", "why")
DIRECTION = "direction"
KEEP, CORRECT, WAIVE = WORDS = ("keep", "correct", "waive")
_NEEDED = {KEEP: ("by",), CORRECT: ("cell", "value", "source", "by"), WAIVE: ("by", "why")}
_ADDRESS = re.compile(
    r"\$?(?P<column>[A-Za-z]{1,3})\$?(?P<row>[1-9][0-9]{0,9})|row (?P<only>[1-9][0-9]{0,9})"
)
_NAMED = re.compile(r"(?P<heading>.*?)\s*\[(?P<address>[^\[\]]*)\]")
_LONGEST = 1000
"""Longer cells hold more than a heading and its address."""
_NO_FINDING = "decision without a finding"
_DONE = {KEEP: "kept", CORRECT: "corrected", WAIVE: "waived"}
_PARTS = tuple(field.name for field in fields(Numbers) if field.name != "place")


@dataclass(frozen=True, slots=True)
class Decision:
    """One line of the decisions.

    row : the coded sheet's own row number.
    cell : a heading, an address such as H12, or a cell as findings write it; "" for a finding without a cell.
    value, number_format : the raw cell with the corrected number, read like any cell of the sheet.
    where, addresses : file and sheet, and the decision's cells by column, for messages.
    """

    row: int
    cell: str
    decision: str
    value: object
    number_format: str | None
    source: str
    by: str
    on: str
    why: str
    where: str
    addresses: Mapping[str, str]

    def fault(self, column: str, problem: str) -> UnreadableInput:
        """The error about one of the decision's cells."""
        spot = f"cell {self.addresses[column]}" if column in self.addresses else f"no column {column}"
        return UnreadableInput(f"{self.where}, {spot}: {problem}")

    @property
    def signed(self) -> str:
        """Who decided, when and why, in one clause."""
        when = f" on {self.on}" if self.on else ""
        reasons = "; ".join(filter(None, (self.source, self.why)))
        return f"by {self.by}{when}{f' ({reasons})' if reasons else ''}"


def read_decisions(path: str | Path) -> list[Decision]:
    """The decisions in a workbook's sheet ``decisions``, or in a csv or tsv file of their own.

    A workbook without such a sheet holds none.

    Raises
    ------
    UnreadableInput : the file cannot be read, or a column or line is not valid; the message names the cell.
    """
    workbook = Path(path).is_file() and zipfile.is_zipfile(path)
    if workbook:
        from extractor.source.workbook import sheet_names

        if SHEET not in sheet_names(Path(path)):
            return []
    try:
        grid = read_grid(path, lambda heading: normalised(heading) in COLUMNS, (SHEET,))
    except NoRows:
        if workbook:
            return []
        raise
    at: dict[str, int] = {}
    for index, heading in enumerate(grid.headings):
        name = normalised(heading)
        if name in at or (name and name not in COLUMNS):
            address = f"{column_letters(index)}{grid.header_row}"
            problem = "stands twice" if name in at else f"is none of the columns {', '.join(COLUMNS)}"
            raise UnreadableInput(f"{grid.where}, cell {address}: {quoted(heading)} {problem}")
        if name:
            at[name] = index
    missing = [name for name in ("row", "cell", "decision", "by") if name not in at]
    if missing:
        raise UnreadableInput(f"{grid.where}, row {grid.header_row}: there is no column {listed(missing)}")
    if grid.ragged:
        raise UnreadableInput(
            f"{grid.where}, row {min(grid.ragged)}: more cells than headings; quote the commas"
        )
    return [_decision(grid, at, line) for line in range(len(grid.row_numbers))]


def _decision(grid: Grid, at: Mapping[str, int], line: int) -> Decision:
    raw = {name: grid.columns[index][line] for name, index in at.items()}
    texts = {name: _text(raw.get(name)) for name in COLUMNS}
    formats = grid.formats[at["value"]] if "value" in at else None
    row = re.fullmatch(r"[1-9][0-9]{0,9}", texts["row"])
    found = Decision(
        row=int(row[0]) if row else 0,
        cell=texts["cell"],
        decision=texts["decision"].casefold(),
        value=raw.get("value"),
        number_format=formats[line] if formats is not None else None,
        source=texts["source"],
        by=texts["by"],
        on=texts["on"],
        why=texts["why"],
        where=grid.where,
        addresses={n: f"{column_letters(i)}{grid.row_numbers[line]}" for n, i in at.items()},
    )
    if row is None:
        raise found.fault("row", f"{quoted(texts['row'])} is no row number of the coded sheet")
    if found.decision not in WORDS:
        raise found.fault("decision", f"{quoted(texts['decision'])} is none of {', '.join(WORDS)}")
    for name in _NEEDED[found.decision]:
        if not texts[name]:
            raise found.fault(name, f"the decision to {found.decision} needs its {name}")
    return found


def _text(raw: object) -> str:
    if isinstance(raw, datetime.datetime) and raw.time() == datetime.time():
        raw = raw.date()
    return "" if raw is None or is_blank(raw) else heading_text(raw).strip()


def apply_decisions(
    table: ReportedTable, decisions: Sequence[Decision], codebook: Codebook
) -> tuple[ReportedTable, list[str]]:
    """The table with every correction made, and a note on each that keeps what was printed.

    A correction may name a quantity for which the sheet has no column, as authors' replies often do; the table
    then gets one. Of the coded words the direction alone can be corrected.

    Raises UnreadableInput where a decision names no row or cell of the table, or a correction is no number.
    """
    table = _with_columns(table, decisions, codebook)
    numbers, notes, facts = dict(table.numbers), list[str](), dict(table.facts)
    settled: set[tuple[int, str]] = set()
    for decision, position in _turned(table, decisions, codebook):
        facts[DIRECTION] = facts.get(DIRECTION, table.fact(DIRECTION)).copy()
        facts[DIRECTION][position] = _sign(decision)
        notes.append(f"{_direction_cell(decision)} {_redirected(table, decision, position)}")
    for decision, position, variables in _resolved(table, decisions, codebook):
        if decision.decision != CORRECT:
            continue
        variable = variables[0]
        note = _correction(table, decision, position, variable)
        reading = replace(_reading(decision, variable, codebook), understood=note)
        if numbers[variable] is table.numbers[variable]:
            copies = {name: getattr(numbers[variable], name).copy() for name in _PARTS}
            numbers[variable] = replace(numbers[variable], **copies)
        for name in _PARTS:
            getattr(numbers[variable], name)[position] = getattr(reading, name)
        cell = numbers[variable].place.at(decision.row)
        settled.add((decision.row, cell))
        notes.append(f"{cell} {note}")
    conflicts = [
        (row, cells, message)
        for row, cells, message in table.settings.get("conflicts", ())
        if not any((row, cell) in settled for cell in cells.split("; "))
    ]
    settings = {**table.settings, "conflicts": conflicts}
    notes_now = [*table.notes, *notes]
    return replace(table, numbers=numbers, facts=facts, settings=settings, notes=notes_now), notes


def mark(
    findings: Sequence[Finding], decisions: Sequence[Decision], table: ReportedTable, codebook: Codebook
) -> list[Finding]:
    """Findings of a run on the corrected table, with what was decided about them.

    A decision belongs to the findings of its row that name its cell first. Those kept or waived become notes.
    Every correction is added as a note, and so is a decision that no longer has a finding.
    ``table`` is the one that was read, before ``apply_decisions``.
    """
    table = _with_columns(table, decisions, codebook)
    marked = list(findings)
    by_row: dict[int, list[int]] = {}
    for i, finding in enumerate(findings):
        by_row.setdefault(finding.row, []).append(i)
    for decision, position, variables in _resolved(table, decisions, codebook):
        cells = {table.numbers[variable].place.at(decision.row) for variable in variables}
        firsts = {i: findings[i].cells[:1] for i in by_row.get(decision.row, ())}
        mine = [i for i, first in firsts.items() if cells.issuperset(first) and bool(first) == bool(cells)]
        said = f"{_DONE[decision.decision]} {decision.signed}"
        for i in mine:
            severity = marked[i].severity if decision.decision == CORRECT else Severity.NOTE
            explanation = "; ".join(filter(None, (said, marked[i].explanation)))
            marked[i] = marked[i]._replace(severity=severity, explanation=explanation)
        rule, message = _NO_FINDING, ""
        if decision.decision == CORRECT:
            old, new = table.numbers[variables[0]], _reading(decision, variables[0], codebook)
            rule, message = "corrected", _correction(table, decision, position, variables[0])
            if (old.low[position], old.high[position]) == (new.low, new.high):
                rule, message = _NO_FINDING, f"the sheet itself now says {new}: the decision can be deleted"
        elif not mine:
            named = listed(sorted({cell for first in firsts.values() for cell in first})) or "no cell"
            message = f"{decision.decision} was decided, but the findings of this row name {named} first"
        if message:
            study = str(table.fact("study")[position])
            printed = printed_text(table, variables[0], position) if variables else ""
            place = tuple(sorted(cells))
            marked.append(Finding(decision.row, study, Severity.NOTE, rule, place, printed, message, said))
    for decision, position in _turned(table, decisions, codebook):
        study, before = (str(table.fact(name)[position]) for name in ("study", DIRECTION))
        place, said = (_direction_cell(decision),), f"{_DONE[CORRECT]} {decision.signed}"
        message = _redirected(table, decision, position)
        marked.append(Finding(decision.row, study, Severity.NOTE, "corrected", place, before, message, said))
    return sorted(marked, key=lambda f: (f.row, -f.severity, f.rule, f.cells))


def _correction(table: ReportedTable, decision: Decision, position: int, variable: Variable) -> str:
    numbers = table.numbers[variable]
    before = printed_text(table, variable, position) or str(numbers.problem[position]) or "blank"
    return f"corrected from {before} to {_text(decision.value)} {decision.signed}"


def _reading(decision: Decision, variable: Variable, codebook: Codebook) -> Reading:
    reading = read_number(
        decision.value,
        VOCABULARY[variable[0]],
        decimal_mark=codebook.decimal_mark,
        rounding=codebook.rounding,
        missing=codebook.missing,
        decimals=codebook.decimals_of(variable),
        number_format=decision.number_format,
        alpha=codebook.alpha,
    )
    if not reading.given:
        raise decision.fault("value", reading.problem or "the corrected value is a code for a missing one")
    return reading


def _resolved(
    table: ReportedTable, decisions: Sequence[Decision], codebook: Codebook
) -> list[tuple[Decision, int, list[Variable]]]:
    """Each decision with its position in the table and the variables of its cell."""
    position_of = {int(row): i for i, row in enumerate(table.row_numbers)}
    seen: set[tuple[int, frozenset[Variable]]] = set()
    found = []
    for decision in decisions:
        if _turns(decision, codebook):
            continue
        if decision.row not in position_of:
            raise decision.fault("row", f"the coded sheet has no row {decision.row}")
        variables = _variables(table, decision, codebook)
        if decision.decision == CORRECT and len(variables) > 1:
            names = listed(sorted(name for name, _ in variables))
            raise decision.fault("cell", f"{quoted(decision.cell)} holds {names}; name the one to correct")
        key = decision.row, frozenset(variables)
        if key in seen:
            raise decision.fault("cell", f"{quoted(decision.cell)} of row {decision.row} is decided twice")
        seen.add(key)
        found.append((decision, position_of[decision.row], variables))
    return found


def _turned(
    table: ReportedTable, decisions: Sequence[Decision], codebook: Codebook
) -> list[tuple[Decision, int]]:
    """The corrections of directions, each with its position in the table."""
    found = [decision for decision in decisions if _turns(decision, codebook)]
    position_of = {int(row): i for i, row in enumerate(table.row_numbers)}
    for decision in found:
        if decision.row not in position_of:
            raise decision.fault("row", f"the coded sheet has no row {decision.row}")
        if [other.row for other in found].count(decision.row) > 1:
            raise decision.fault("cell", f"the direction of row {decision.row} is decided twice")
        if _sign(decision) not in ("+", "-"):
            raise decision.fault("value", f"direction {quoted(_text(decision.value))} is neither + nor -")
    return [(decision, position_of[decision.row]) for decision in found]


def _turns(decision: Decision, codebook: Codebook) -> bool:
    return decision.decision == CORRECT and codebook.meaning(_named(decision.cell)[0]) == DIRECTION


def _sign(decision: Decision) -> str:
    # csv files of this program put an apostrophe before a sign, which spreadsheets take for a formula
    return tidy(_text(decision.value).removeprefix("'"))


def _direction_cell(decision: Decision) -> str:
    return f"{_named(decision.cell)[0]} [row {decision.row}]"


def _redirected(table: ReportedTable, decision: Decision, position: int) -> str:
    before = str(table.fact(DIRECTION)[position]) or "blank"
    return f"corrected from {before} to {_sign(decision)} {decision.signed}"


def _with_columns(table: ReportedTable, decisions: Sequence[Decision], codebook: Codebook) -> ReportedTable:
    """The table with blank columns for the quantities that corrections name and the sheet lacks."""
    numbers = dict(table.numbers)
    letters = {n.place.column for n in numbers.values()}
    for decision in decisions:
        heading, spot = _named(decision.cell)
        meaning, address = codebook.meaning(heading), _ADDRESS.fullmatch(spot)
        if decision.decision != CORRECT or not isinstance(meaning, tuple) or meaning in numbers:
            continue
        if address and address["column"] and address["column"].upper() in letters:
            continue
        if (meaning[1] or 0) > MOST_GROUPS:
            raise decision.fault("cell", f"{quoted(heading)}: a row holds at most {MOST_GROUPS} groups")
        blank = np.zeros(table.rows, dtype=np.int64)
        heading = heading.strip()
        place = Place(normalised(heading) if canonical(heading) == meaning else heading, "")
        numbers[meaning] = numbers_from([BLANK], blank, place)
    return replace(table, numbers=numbers) if len(numbers) > len(table.numbers) else table


def _named(cell: str) -> tuple[str, str]:
    """Heading and address of a cell as findings write it; elsewhere the whole text may be either."""
    named = _NAMED.fullmatch(cell) if len(cell) <= _LONGEST else None
    return (named["heading"], named["address"]) if named else (cell, cell)


def _variables(table: ReportedTable, decision: Decision, codebook: Codebook) -> list[Variable]:
    """What stands in the decision's cell; several numbers where it is running text."""
    text = decision.cell
    if not text:
        return []
    heading, spot = _named(text)
    meaning, address = codebook.meaning(heading), _ADDRESS.fullmatch(spot)
    known = isinstance(meaning, tuple) and meaning in table.numbers
    same = [v for v, n in table.numbers.items() if normalised(n.place.heading) == normalised(heading)]
    if address and (spot != heading or not (known or same)):
        row = int(address["row"] or address["only"])
        if row != decision.row:
            raise decision.fault(
                "cell", f"{quoted(text)} is in row {row}, the decision in row {decision.row}"
            )
    if isinstance(meaning, tuple) and known:
        return [meaning]
    if not same and address and address["column"]:
        if meaning is not None and spot == heading:
            advice = f"write it as '{heading} [row {decision.row}]', or the column's heading"
            raise decision.fault("cell", f"{quoted(text)} is an address and the name of a quantity; {advice}")
        column = address["column"].upper()
        same = [v for v, n in table.numbers.items() if n.place.column == column]
    if not same:
        raise decision.fault("cell", _unknown(text, heading, meaning, codebook))
    return same


def _unknown(text: str, heading: str, meaning: object, codebook: Codebook) -> str:
    """Why nothing stands in a cell, and what to write instead."""
    if isinstance(meaning, str):
        return f"{quoted(text)} is no heading or address of a number; words are corrected in the sheet itself"
    near = close_matches(normalised(heading), [*canonical_names(), *codebook.folded])[:1]
    advice = f"did you mean {near[0]}?" if near else "name a heading of the sheet or a quantity, such as n_1"
    return f"{quoted(text)} is no heading or address of a number; {advice}"
