"""A sheet of a workbook (.xlsx, .xlsm) -> raw cells. Entities are refused, sizes capped, macros ignored."""

from __future__ import annotations

import re
import warnings
import zipfile
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import zip_longest
from pathlib import Path
from typing import IO, Any

import openpyxl
from defusedxml import ElementTree
from openpyxl.cell.read_only import EMPTY_CELL

from extractor.errors import UnreadableInput
from extractor.printed.reading import quoted
from extractor.printed.reported import CellError, UncachedFormula
from extractor.source.grid import MOST_COLUMNS, Grid, Rows

MOST_BYTES = 1 << 30
"""Unzipped size of a workbook above which it is taken for a bomb."""
_LARGE, _MOST_PACKED = 1 << 26, 200
"""Larger workbooks are taken for bombs when they unzip to so many times their size; sheets pack about twelvefold."""
_MOST_PARTS = 10_000
_MOST_ELEMENTS = 500_000
"""Elements of a file of settings, such as styles; spreadsheet programs stop at 65,490 styles."""
MOST_CELLS = 60_000_000
MOST_ROWS = 1_048_576

RESERVED = frozenset({"groups", "decisions", "read me", "readme", "how to code"})
"""Sheets that hold something other than coded rows."""

Cell = Any
"""A read-only cell; the stubs know only the cells of workbooks opened for writing."""

# openpyxl lets nearly any error through on a damaged workbook: of the zip, the XML, of its own look-ups
DAMAGE: tuple[type[Exception], ...] = (
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
_SETTINGS = re.compile(r"(?:.*/)?(?:styles|workbook)\.xml|.*\.rels|\[Content_Types\]\.xml", re.IGNORECASE)
# no longer than a tag is, so that a text of nothing but beginnings of tags takes no longer either
_FORMULA = re.compile(rb"<(?:\w{1,20}:)?f[\s>/]")
_MERGED = re.compile(rb'<(?:\w{1,20}:)?mergeCell\s[^<>]{0,200}?ref="([A-Z0-9:]{1,20})"')
_HIDDEN_ROW = re.compile(
    rb'<(?:\w{1,20}:)?row\s(?=[^<>]{0,400}?\bhidden="(?:1|true)")[^<>]{0,400}?\br="([0-9]{1,7})"'
)
_CHUNK, _OVERLAP = 1 << 20, 1000


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
            _refuse_bombs(stream, name)
            grid = _sheet(stream, name, sheets)
    except UnreadableInput:
        raise
    except DAMAGE as fault:
        raise _damaged(name, fault) from fault
    return grid


def _damaged(name: str, fault: BaseException) -> UnreadableInput:
    cause = fault.__cause__ or fault
    reason = " ".join(f"{type(cause).__name__} {cause}".split())
    advice = "open it in a spreadsheet program and save it again as .xlsx"
    return UnreadableInput(f"{name} is not a readable workbook ({quoted(reason, 80)}); {advice}")


def has_sheet(path: Path, title: str) -> bool:
    """Whether a file is a workbook with a visible sheet of this name; False for anything else or unreadable."""
    try:
        return path.is_file() and zipfile.is_zipfile(path) and title in sheet_names(path)
    except (UnreadableInput, OSError, ValueError):
        return False


def sheet_names(path: Path) -> list[str]:
    """Names of the visible sheets of a workbook, as they are compared; raises UnreadableInput."""
    name = quoted(path, 200)
    try:
        with path.open("rb") as stream:
            _refuse_bombs(stream, name)
            return _visible(stream)
    except DAMAGE as fault:
        raise _damaged(name, fault) from fault


def _visible(stream: IO[bytes]) -> list[str]:
    """Names of the visible sheets, as they are compared; reads no sheet, no texts and no styles."""
    with zipfile.ZipFile(stream) as archive:
        kinds = ElementTree.fromstring(archive.read("[Content_Types].xml"))
        parts = [part.get("PartName", "") for part in kinds if _BOOK.search(part.get("ContentType", ""))]
        book = ElementTree.fromstring(archive.read(parts[0].lstrip("/")))
    return [
        element.get("name", "").strip().casefold()
        for element in book.iter()
        if element.tag.rpartition("}")[2] == "sheet" and element.get("state", "visible") == "visible"
    ]


_BOOK = re.compile(r"(?:sheet|template)(?:\.macroEnabled)?\.main\+xml$")


def _refuse_bombs(stream: IO[bytes], name: str) -> None:
    """Refuse archives that would take all memory or all day; nothing is unpacked but the files of settings."""
    with zipfile.ZipFile(stream) as archive:
        members = archive.infolist()
        size = sum(member.file_size for member in members)
        packed = sum(member.compress_size for member in members)
        if size > MOST_BYTES:
            raise UnreadableInput(
                f"{name} would unzip to more than {MOST_BYTES >> 30} GiB; save only the sheet itself"
            )
        if len(members) > _MOST_PARTS or (size > _LARGE and size > _MOST_PACKED * packed):
            raise UnreadableInput(
                f"{name} would unzip to {len(members)} files and {size >> 20} MiB, {size // max(packed, 1)} times its "
                "size; no workbook does that, so it is not opened"
            )
        for member in members:
            if _SETTINGS.fullmatch(member.filename) and archive.read(member).count(b"<") > _MOST_ELEMENTS:
                raise UnreadableInput(
                    f"{name} has more settings in {quoted(member.filename)} than any spreadsheet program writes; "
                    "copy the sheet into a new workbook"
                )


@dataclass
class _Marks:
    """What cannot be seen from cells: whether any has a formula, one merged range, one hidden row."""

    formulas: bool = False
    merged: str = ""
    hidden: str = ""

    def notes(self) -> list[str]:
        """What a reader of the table must know."""
        said = []
        if self.merged:
            said.append(
                f"merged cells, such as {self.merged}, hold a value in their first cell only; the rest are blank"
            )
        if self.hidden:
            said.append(f"hidden rows, such as row {self.hidden}, are read like the others")
        return said


def _marks(archive: zipfile.ZipFile, part: str) -> _Marks:
    """Look through the text of a sheet; of all sheets where the part is not known."""
    found = _Marks()
    for member in archive.infolist():
        if member.filename != part and (
            part or not re.fullmatch(r"xl/worksheets/[^/]+\.xml", member.filename)
        ):
            continue
        with archive.open(member) as stream:
            tail = b""
            while chunk := stream.read(_CHUNK):
                text = tail + chunk
                found.formulas = found.formulas or _FORMULA.search(text) is not None
                for name, pattern in (("merged", _MERGED), ("hidden", _HIDDEN_ROW)):
                    if not getattr(found, name) and (seen := pattern.search(text)) is not None:
                        setattr(found, name, seen.group(1).decode("ascii"))
                tail = text[-_OVERLAP:]
    return found


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
    found: Iterator[tuple[Cell, ...]] = sheet.iter_rows()
    for number, row in enumerate(found, 1):
        cells += len(row)
        # one cell far to the right fills the row up to it with blanks
        width = len(row)
        while width and row[width - 1] is EMPTY_CELL:
            width -= 1
        if number > MOST_ROWS or width > MOST_COLUMNS or cells > MOST_CELLS:
            raise UnreadableInput(
                f"{name}, sheet {quoted(title)}: too large to be a coded sheet (row {number})"
            )
        yield row[:width]


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


def _sheet(stream: IO[bytes], name: str, sheets: tuple[str, ...]) -> Grid:
    """One sheet's cells; read a second time for its formulas where there are any."""
    book = openpyxl.load_workbook(stream, read_only=True, data_only=True, keep_links=False)
    title = _pick(book, name, sheets)
    with zipfile.ZipFile(stream) as archive:
        marks = _marks(archive, str(getattr(book[title], "_worksheet_path", "")))
    second: Iterator[tuple[Cell, ...]] = iter(())
    if marks.formulas:
        second = _cells(openpyxl.load_workbook(stream, read_only=True, keep_links=False), title, name)
    rows = Rows(name, title, stored=True)
    for number, row in enumerate(_cells(book, title, name), 1):
        twins = next(second, ())
        values = [_raw(cell, twin) for cell, twin in zip_longest(row, twins[: len(row)])]
        rows.add(number, values, [_code(cell, value) for cell, value in zip(row, values, strict=True)])
    grid = rows.grid()
    hidden = [quoted(sheet.title) for sheet in book.worksheets if sheet.sheet_state != "visible"]
    if hidden:
        grid.notes.append(f"sheets that are hidden are not read: {', '.join(hidden)}")
    grid.notes += marks.notes()
    return grid
