"""One table into a workbook, with the same bytes every time.

Numbers keep every digit, texts are never formulas, and what a workbook cannot hold is said.
"""

from __future__ import annotations

import io
import math
import re
import zipfile
from pathlib import Path

import pandas as pd
from openpyxl import Workbook
from openpyxl.cell import Cell, WriteOnlyCell
from openpyxl.styles import Font
from openpyxl.utils import get_column_letter
from openpyxl.worksheet._write_only import WriteOnlyWorksheet

from extractor.errors import UsageError
from extractor.output.columns import is_text, texts
from extractor.output.files import fixed_time

_UNPRINTABLE = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")
_LONGEST = 32_767
_MOST_ROWS = 1_048_576
_WIDEST = 40
_SAMPLE = 200
"""Rows looked at for the width of a column."""


def write_xlsx(frame: pd.DataFrame, path: Path) -> list[str]:
    """One sheet named after the file, the heading row frozen.

    Raises
    ------
    UsageError : the table has more rows than a workbook can hold.
    """
    if len(frame) >= _MOST_ROWS:
        raise UsageError(f"--format xlsx holds at most {_MOST_ROWS - 1} rows, these are {len(frame)}")
    book = Workbook(write_only=True)
    book.properties.creator = "Extractor"
    sheet = book.create_sheet(path.stem)
    words = _Words(sheet)
    columns = [frame.iloc[:, at] for at in range(frame.shape[1])]
    # a write-only sheet loses panes and widths that are set after its first row
    sheet.freeze_panes = "A2"
    for at, column in enumerate(columns, 1):
        sheet.column_dimensions[get_column_letter(at)].width = _width(column)
    bold = Font(bold=True)
    headings = [words.cell(str(name)) for name in frame.columns]
    for heading in headings:
        if heading is not None:
            heading.font = bold
    sheet.append(headings)
    made = [
        map(words.cell, texts(column))
        if is_text(column)
        else (_number(sheet, v) for v in column.astype(object))
        for column in columns
    ]
    for cells in zip(*made, strict=True):
        sheet.append(cells)
    save(book, path)
    return words.notes()


class _Words:
    """Makes cells of text and counts what had to be changed."""

    def __init__(self, sheet: WriteOnlyWorksheet) -> None:
        self.sheet = sheet
        self.cleaned = self.cut = 0

    def cell(self, text: str) -> Cell | None:
        """A cell that shows the text as it is; None where blank."""
        clean = _UNPRINTABLE.sub("", text)
        self.cleaned += clean != text
        self.cut += len(clean) > _LONGEST
        if not clean:
            return None
        made = WriteOnlyCell(self.sheet, value=clean[:_LONGEST])
        # "=1+1" would be a formula and "#N/A" an error
        made.data_type = "s"
        return made

    def notes(self) -> list[str]:
        """What was changed, in words."""
        said = []
        if self.cleaned:
            said.append(f"xlsx: control characters removed from {self.cleaned} cells")
        if self.cut:
            said.append(f"xlsx: {self.cut} texts cut after {_LONGEST} characters, the most a cell holds")
        return said


def _number(sheet: WriteOnlyWorksheet, value: object) -> Cell | None:
    """A cell with every digit: a workbook's own writer keeps 16 of them, and some numbers need 17."""
    if value is pd.NA or (isinstance(value, float) and not math.isfinite(value)):
        return None
    made = WriteOnlyCell(sheet, value=repr(float(value)) if isinstance(value, float) else str(value))
    made.data_type = "n"
    return made


def _width(column: pd.Series) -> float:
    shown = column.iloc[:_SAMPLE]
    if not is_text(column):
        return max(len(str(column.name)), 10) + 2
    longest = max((len(str(value)) for value in shown), default=0)
    return min(max(len(str(column.name)), longest), _WIDEST) + 2


def save(book: Workbook, path: Path) -> None:
    """Write a workbook with the same bytes every time."""
    path.write_bytes(without_clock(saved(book)))


def saved(book: Workbook) -> bytes:
    """The workbook as openpyxl writes it, with the time of the clock in it."""
    stream = io.BytesIO()
    book.save(stream)
    return stream.getvalue()


def without_clock(content: bytes) -> bytes:
    """A saved workbook with sorted members and a fixed time in place of the clock's: equal content, equal bytes."""
    stamp = fixed_time()
    moment = stamp.timetuple()[:6]
    dated = stamp.strftime("%Y-%m-%dT%H:%M:%SZ").encode()
    stream = io.BytesIO()
    with (
        zipfile.ZipFile(io.BytesIO(content)) as old,
        zipfile.ZipFile(stream, "w", zipfile.ZIP_DEFLATED, compresslevel=6) as new,
    ):
        for name in sorted(old.namelist(), key=lambda n: (n != "[Content_Types].xml", n)):
            member = zipfile.ZipInfo(name, moment)
            member.compress_type = zipfile.ZIP_DEFLATED
            member.create_system, member.external_attr = 3, 0o600 << 16
            body = old.read(name)
            if name == "docProps/core.xml":
                body = re.sub(rb"(<dcterms:(created|modified)[^>]*>)[^<]*", rb"\g<1>" + dated, body)
            new.writestr(member, body)
    return stream.getvalue()
