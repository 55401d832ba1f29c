"""The coder's own workbook with marks on the cells that findings name, and sheets of results after it.

The source file is read, never written.
"""

from __future__ import annotations

from pathlib import Path

import pandas as pd
from openpyxl import Workbook
from openpyxl.comments import Comment
from openpyxl.styles import Font, PatternFill
from openpyxl.worksheet.hyperlink import Hyperlink
from openpyxl.worksheet.worksheet import Worksheet

from extractor import cautions
from extractor.api import Result
from extractor.errors import UsageError
from extractor.findings import Finding
from extractor.output.chart import write_chart
from extractor.output.marks import COMPANION, FILLS, SIGNS, address_of, marks_of, show, unmark
from extractor.output.record import settings_frame
from extractor.output.request import Request, effects_as_written
from extractor.output.results import AnyCell, cached_results, cells_there, loaded, with_results
from extractor.output.sheets import (
    AUTHOR,
    PLAIN,
    SANS,
    free_title,
    landscape,
    put_text,
    write_table,
)
from extractor.output.workbook import saved, without_clock
from extractor.source.reader import read_grid
from extractor.source.workbook import DAMAGE
from extractor.table import ReportedTable

MOST = 20_000
"""Rows above which a workbook with every step of every route is of no use."""

_OURS = ("effects", "chart", "findings", "routes", "routes not taken", "settings")
_SHADE_OF_STATUS = {"bounded": "FFFBEBB5", "blocked": "FFE9E9E4"}
_CODES = {
    **dict.fromkeys(
        ("estimate", "variance", "standard_error", "ci_low", "ci_high", "estimate_low", "estimate_high"),
        "0.0000",
    ),
    **dict.fromkeys(("n_total", "row"), "0"),
    **dict.fromkeys(("low", "high", "value", "expected_low", "expected_high"), PLAIN),
    "distance": "0.0000",
    "slack": "0.0",
}
_SENTENCES = ("reason", "assumptions", "message", "explanation", "cells", "source", "equation", "meaning")


def write_annotated(result: Result, request: Request, path: Path) -> list[str]:
    """Write the annotated workbook.

    Parameters
    ----------
    request : what was asked for; ``request.sheet`` is the file whose sheets are copied. Delimited text
        becomes a sheet of text cells with the same addresses; where the input is no file there is no copy.

    Returns
    -------
    What the workbook could not hold as it was, in words.

    Raises
    ------
    UsageError
        with more rows than a spreadsheet program shows with ease.
    """
    if len(result.effects) > MOST:
        raise UsageError(
            f"an annotated workbook holds at most {MOST} rows, these are {len(result.effects)}: split the sheet"
        )
    table = result.conversion.evidence.table
    book, coded, results, notes = _copy(request, table)
    if coded is not None:
        for address, mark in marks_of(result.audit.findings, book, coded).items():
            show(book[address[0]][address[1]], mark)
    changed = _add_results(book, result, request, coded)
    if changed:
        notes.append(f"annotated.xlsx: {changed} texts were cut or cleaned to fit into cells")
    content = with_results(saved(book), book.sheetnames, results)
    path.write_bytes(without_clock(content))
    return notes


def _copy(
    request: Request, table: ReportedTable
) -> tuple[Workbook, Worksheet | None, dict[str, dict[str, AnyCell]], list[str]]:
    """The coder's sheets in a new workbook, the coded one of them, results of formulas, and notes."""
    source = Path(request.sheet)
    if request.sheet == "-" or not source.is_file():
        note = "annotated.xlsx: the input was not a file, so there is no copy of it to mark"
        book = Workbook()
        book.remove(book.worksheets[0])
        return book, None, {}, [note]
    if not table.sheet:
        return (*_from_text(source, table), {}, [])
    try:
        book = loaded(source, rich_text=True)
    except DAMAGE as fault:
        # its numbers could be read, but not how it looks
        advice = "open it in a spreadsheet program and save it again"
        said = f"the workbook cannot be copied ({type(fault).__name__}), so its cells stand as text"
        book, coded = _from_text(source, table)
        coded.title = table.sheet
        return book, coded, {}, [f"annotated.xlsx: {said}; {advice}"]
    for title in _OURS:
        if title in book.sheetnames and title != table.sheet and _is_ours(book[title]):
            book.remove(book[title])
    for sheet in book.worksheets:
        _keep_digits(sheet)
    for cell in cells_there(book[table.sheet]):
        unmark(cell)
    notes = []
    if source.suffix.lower() == ".xlsm":
        notes.append("annotated.xlsx: the macros of the source are not in the copy")
    return book, book[table.sheet], cached_results(source, book), notes


def _from_text(source: Path, table: ReportedTable) -> tuple[Workbook, Worksheet]:
    """Delimited text as a sheet: every cell as text, at the address that findings name."""
    headings = {numbers.place.heading for numbers in table.numbers.values()} | set(table.extras.columns)
    grid = read_grid(source, lambda heading: heading.strip() in headings)
    book = Workbook()
    sheet = book.worksheets[0]
    sheet.title = "coded"
    for at, (heading, column) in enumerate(zip(grid.headings, grid.columns, strict=True), 1):
        put_text(sheet.cell(grid.header_row, at), heading)
        sheet.cell(grid.header_row, at).font = Font(name=SANS, bold=True)
        for row, value in zip(grid.row_numbers.tolist(), column.tolist(), strict=True):
            put_text(sheet.cell(row, at), "" if value is None else str(value))
            sheet.cell(row, at).number_format = "@"
    sheet.freeze_panes = f"A{grid.header_row + 1}"
    return book, sheet


def _keep_digits(sheet: Worksheet) -> None:
    """Write numbers back with all their digits; the workbook writer itself keeps 16."""
    for cell in cells_there(sheet):
        if cell.data_type == "n" and isinstance(cell.value, float):
            cell.value = repr(cell.value)
            cell.data_type = "n"


def _is_ours(sheet: Worksheet) -> bool:
    """Whether an earlier run made the sheet: its first heading carries our note."""
    note = sheet["A1"].comment
    return note is not None and str(note.author) == AUTHOR


def _add_results(book: Workbook, result: Result, request: Request, coded: Worksheet | None) -> int:
    """The sheets of results; returns how many texts had to be changed."""
    effects = effects_as_written(result, request.rename)
    named = dict(zip(result.effects.columns, effects.columns, strict=True))
    codes = {named.get(name, name): code for name, code in _CODES.items()}
    wide = tuple(str(named.get(name, name)) for name in _SENTENCES)
    changed = 0
    made = _new(book, "effects")
    changed += write_table(made, effects, codes, wide)
    made.freeze_panes = "C2"
    _shade_statuses(made, result.effects)
    landscape(made, across=2)
    _sign(made, "One line per row of the coded sheet, in its order. Blank estimates have a reason.")
    made = _new(book, "chart")
    write_chart(made, result.effects, result.conversion.metric, request.level)
    _sign(made, "The first converted effects with their confidence limits.")
    made = _new(book, "findings")
    changed += write_table(made, result.findings, _CODES, wide)
    _link(made, result.audit.findings, book, coded)
    signs = ", ".join(f"{sign} {severity.word}" for severity, sign in SIGNS.items())
    legend = f"Signs before values in the coded sheet: {signs}, {COMPANION} compared with it."
    leads = "The word of the severity leads to the most suspect cell."
    _sign(made, "\n".join((leads, legend, *cautions.FINDINGS)))
    for title, frame, note in (
        ("routes", _steps(result.derivations), "How each estimate came about: one line per step and group."),
        ("routes not taken", _not_taken(result.alternatives), "What the other admissible routes would give."),
        ("settings", settings_frame(result, request), "What was run, with what, and on which file."),
    ):
        made = _new(book, title)
        changed += write_table(made, frame, _CODES, wide)
        _sign(made, note)
    made.column_dimensions["B"].width = 100
    return changed


def _steps(derivations: pd.DataFrame) -> pd.DataFrame:
    """The steps, with the number of the group only where there are groups."""
    return derivations.assign(group=derivations["group"].where(derivations["group"] != 0).astype("Int64"))


def _not_taken(alternatives: pd.DataFrame) -> pd.DataFrame:
    others = alternatives[~alternatives["chosen"].astype(bool)]
    return others.drop(columns="chosen").reset_index(drop=True)


def _new(book: Workbook, title: str) -> Worksheet:
    sheet: Worksheet = book.create_sheet(free_title(book, title))
    return sheet


def _sign(sheet: Worksheet, note: str) -> None:
    """Say what the sheet is, and by that that this program made it."""
    sheet["A1"].comment = Comment(
        note, AUTHOR, height=40 + 16 * (len(note) // 40 + note.count("\n")), width=330
    )


def _shade_statuses(sheet: Worksheet, effects: pd.DataFrame) -> None:
    at = list(effects.columns).index("status") + 1
    for row, status in enumerate(effects["status"], 2):
        if status in _SHADE_OF_STATUS:
            sheet.cell(row, at).fill = PatternFill("solid", fgColor=_SHADE_OF_STATUS[status])


def _link(sheet: Worksheet, findings: list[Finding], book: Workbook, coded: Worksheet | None) -> None:
    """Shade severities, and lead from each finding to its most suspect cell."""
    at = {str(cell.value): position for position, cell in enumerate(sheet[1], 1)}
    for row, finding in enumerate(findings, 2):
        sheet.cell(row, at["severity"]).fill = PatternFill("solid", fgColor=FILLS[finding.severity])
        found = address_of(finding.cells[0], book, coded) if coded is not None and finding.cells else None
        if found is not None:
            # not the cells themselves: some programs do not wrap a text that leads somewhere
            cell = sheet.cell(row, at["severity"])
            title = found[0].replace("'", "''")
            cell.hyperlink = Hyperlink(ref=cell.coordinate, location=f"'{title}'!{found[1]}")
            cell.font = Font(name=SANS, underline="single")
