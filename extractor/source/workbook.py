"""A sheet of a workbook (.xlsx, .xlsm) -> raw cells. Entities are refused, sizes capped, macros ignored."""

from __future__ import annotations

import re
import warnings
import zipfile
import zlib
from collections.abc import Iterator
from itertools import zip_longest
from pathlib import Path
from typing import IO, Any

import openpyxl

from extractor.errors import UnreadableInput
from extractor.reading import quoted
from extractor.reported import CellError, UncachedFormula
from extractor.source.grid import Grid, Rows

MOST_BYTES = 1 << 30
"""Unzipped size of a workbook above which it is taken for a bomb."""
MOST_CELLS = 60_000_000
MOST_ROWS = 1_048_576
MOST_COLUMNS = 16_384

RESERVED = frozenset({"groups", "decisions", "read me", "readme", "how to code"})
"""Sheets that hold something other than coded rows."""

Cell = Any
"""A read-only cell; the stubs know only the cells of workbooks opened for writing."""

# openpyxl lets nearly any error through on a damaged workbook: of the zip, the XML, of its own look-ups
_DAMAGE = (
    ArithmeticError,
    AssertionError,
    AttributeError,
    EOFError,
    LookupError,
    NotImplementedError,
    OSError,
    RuntimeError,
    SyntaxError,
    TypeError,
    ValueError,
    zipfile.BadZipFile,
    zipfile.LargeZipFile,
    zlib.error,
)
_FORMULA = re.compile(rb"<(?:\w+:)?f[\s>/]")
_MERGED = re.compile(rb'<(?:\w+:)?mergeCell\s[^>]*?ref="([A-Z0-9:]{1,20})"')
_CHUNK = 1 << 20


def from_workbook(path: Path, name: str, sheets: tuple[str, ...]) -> Grid:
    """The cells of a workbook's sheet; ``sheets`` names the ones to prefer.

    Raises UnreadableInput for whatever is wrong with the file.
    """
    if not openpyxl.DEFUSEDXML:
        raise UnreadableInput(
            f"{name}: workbooks are read only with defusedxml, which is missing or switched off"
        )
    try:
        with warnings.catch_warnings(), path.open("rb") as stream:
            # openpyxl warns about extensions it drops and dates it cannot hold; neither matters here
            warnings.simplefilter("ignore")
            formulas, merged = _inspect(stream, name)
            grid = _sheet(stream, name, sheets, formulas)
    except UnreadableInput:
        raise
    except _DAMAGE as fault:
        cause = fault.__cause__ or fault
        reason = " ".join(f"{type(cause).__name__} {cause}".split())
        advice = "open it in a spreadsheet program and save it again as .xlsx"
        raise UnreadableInput(
            f"{name} is not a readable workbook ({quoted(reason, 80)}); {advice}"
        ) from fault
    if merged:
        grid.notes.append(
            f"merged cells, such as {merged}, hold a value in their first cell only; the rest are blank"
        )
    return grid


def has_sheet(path: Path, title: str) -> bool:
    """Whether a file is a workbook with a visible sheet of this name; False for anything else or unreadable."""
    if not zipfile.is_zipfile(path):
        return False
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            book = openpyxl.load_workbook(path, read_only=True)
            names = [sheet.title.strip().casefold() for sheet in book.worksheets if sheet.sheet_state == "visible"]
            book.close()
    except (OSError, *_DAMAGE):
        return False
    return title in names


def _inspect(stream: IO[bytes], name: str) -> tuple[bool, str]:
    """Refuse bombs; then whether any sheet has formulas, and one merged range."""
    with zipfile.ZipFile(stream) as archive:
        members = archive.infolist()
        if sum(member.file_size for member in members) > MOST_BYTES:
            raise UnreadableInput(
                f"{name} would unzip to more than {MOST_BYTES >> 30} GiB; save only the sheet itself"
            )
        formulas, merged = False, ""
        for member in members:
            if not re.fullmatch(r"xl/worksheets/[^/]+\.xml", member.filename):
                continue
            with archive.open(member) as part:
                tail = b""
                while chunk := part.read(_CHUNK):
                    text = tail + chunk
                    formulas = formulas or _FORMULA.search(text) is not None
                    if not merged and (found := _MERGED.search(text)) is not None:
                        merged = found.group(1).decode("ascii")
                    tail = text[-100:]
    return formulas, merged


def _pick(book: openpyxl.Workbook, name: str, sheets: tuple[str, ...]) -> str:
    """The sheet to read: one of the preferred names, else the first visible one that is not reserved.

    A reserved sheet is read only when it is asked for by name.
    """
    visible = [sheet.title for sheet in book.worksheets if sheet.sheet_state == "visible"]
    wanted = {sheet.strip().casefold() for sheet in sheets} - {""}
    coded = [title for title in visible if title.strip().casefold() not in RESERVED]
    preferred = [title for title in visible if title.strip().casefold() in wanted]
    if not coded and not preferred:
        reason = "only sheets that hold no coded rows" if visible else "no visible sheet"
        raise UnreadableInput(f"{name} has {reason}; add or unhide the coded sheet")
    return (preferred or coded)[0]


def _cells(book: openpyxl.Workbook, title: str, name: str) -> Iterator[tuple[Cell, ...]]:
    """Rows of a sheet from row 1 on, as far as there are cells, whatever size the file claims."""
    sheet = book[title]
    sheet.reset_dimensions()
    cells = 0
    for number, row in enumerate(sheet.iter_rows(), 1):
        cells += len(row)
        if number > MOST_ROWS or len(row) > MOST_COLUMNS or cells > MOST_CELLS:
            raise UnreadableInput(
                f"{name}, sheet {quoted(title)}: too large to be a coded sheet (row {number})"
            )
        yield row


def _raw(cell: Cell, formula: Cell | None) -> object:
    """A cell's value; errors, and formulas without a result, told apart from text and blanks."""
    value: object = cell.value
    if value is None:
        # a stored empty text is a result, too; openpyxl then calls the cell's type "str"
        if formula is not None and formula.data_type == "f" and cell.data_type != "str":
            return UncachedFormula(str(getattr(formula.value, "text", formula.value)))
        return None
    return CellError(str(value)) if cell.data_type == "e" else value


def _code(cell: Cell, value: object) -> str | None:
    """The number format of a cell that holds a number."""
    if isinstance(value, (int, float)) and not isinstance(value, bool):
        return str(cell.number_format)
    return None


def _sheet(stream: IO[bytes], name: str, sheets: tuple[str, ...], formulas: bool) -> Grid:
    """One sheet's cells; read a second time for its formulas where there are any."""
    book = openpyxl.load_workbook(stream, read_only=True, data_only=True, keep_links=False)
    title = _pick(book, name, sheets)
    second: Iterator[tuple[Cell, ...]] = iter(())
    if formulas:
        second = _cells(openpyxl.load_workbook(stream, read_only=True, keep_links=False), title, name)
    rows = Rows(name, title, stored=True)
    for number, row in enumerate(_cells(book, title, name), 1):
        twins = next(second, ())
        values = [_raw(cell, twin) for cell, twin in zip_longest(row, twins[: len(row)])]
        rows.add(number, values, [_code(cell, value) for cell, value in zip(row, values, strict=True)])
    return rows.grid()
