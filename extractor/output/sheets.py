"""Sheets of a workbook that people look at: tables with frozen headings, filters and number formats.

Texts are never formulas or errors, numbers keep every digit, and what a cell cannot hold is counted.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping

import pandas as pd
from openpyxl import Workbook
from openpyxl.cell import Cell, MergedCell
from openpyxl.styles import Alignment, Border, Font, PatternFill, Side
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.properties import PageSetupProperties
from openpyxl.worksheet.worksheet import Worksheet

from extractor.output.columns import is_text, texts

PLAIN = "plain"
"""In place of a format code: whole numbers without decimals, others with four."""
AUTHOR = "Extractor"
INK, RULE, SHADE = "FF1F2933", "FF8A97A5", "FFEEF1F4"
SANS = "Calibri"

_UNPRINTABLE = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")
_LONGEST = 32_767
_WIDEST, _NARROWEST = 40, 8
_SENTENCE, _PARAGRAPH, _LINES = 48, 96, 4
"""Letters on a line of sentences: at least, at most, and lines beyond which the column becomes wider."""
_LINE = 15.0
"""Height of a line of text in points."""
_SAMPLE = 400
"""Rows looked at for the width of a column."""


def clean(text: str) -> str:
    """Text as a cell can hold it: no control characters, not longer than a cell."""
    return _UNPRINTABLE.sub("", text)[:_LONGEST]


def put_text(cell: Cell | MergedCell, text: str) -> None:
    """Show the text as it is: ``=1+1`` stays no formula and ``#N/A`` no error."""
    kept = clean(text)
    if kept and isinstance(cell, Cell):
        cell.value = kept
        cell.data_type = "s"


def put_number(cell: Cell | MergedCell, value: object, code: str) -> None:
    """A number with all its digits, shown by a format code; blank where it is not finite."""
    if isinstance(cell, MergedCell) or value is None or value is pd.NA:
        return
    if isinstance(value, float) and not math.isfinite(value):
        return
    # the workbook writer itself keeps 16 digits, and some numbers need 17
    cell.value = repr(float(value)) if isinstance(value, float) else str(value)
    cell.data_type = "n"
    cell.number_format = code


def write_table(
    sheet: Worksheet, frame: pd.DataFrame, codes: Mapping[str, str], wrapped: tuple[str, ...] = ()
) -> int:
    """Fill a sheet with a table: heading row frozen, filters, widths.

    Parameters
    ----------
    codes : number format by column; other numbers are shown in general format.
    wrapped : columns of sentences, shown on several lines.

    Returns
    -------
    How many texts had to be changed to fit into a cell.
    """
    changed = 0
    top = Alignment(vertical="top")
    words = Alignment(horizontal="left", vertical="top", indent=1)
    wrap = Alignment(horizontal="left", vertical="top", indent=1, wrap_text=True)
    for at, name in enumerate(frame.columns, 1):
        column = frame.iloc[:, at - 1]
        put_text(sheet.cell(1, at), str(name))
        alignment = wrap if name in wrapped else words
        if is_text(column):
            shown = texts(column)
            for row, text in enumerate(shown, 2):
                if text:
                    cell = sheet.cell(row, at)
                    put_text(cell, text)
                    cell.alignment = alignment
                    changed += cell.value != text
        else:
            code = codes.get(str(name), "General")
            for row, value in enumerate(column.astype(object), 2):
                cell = sheet.cell(row, at)
                put_number(cell, value, _shown(value) if code == PLAIN else code)
                cell.alignment = top
        sheet.column_dimensions[get_column_letter(at)].width = _width(column, name in wrapped)
    style_headings(sheet, len(frame.columns))
    for at in range(1, len(frame.columns) + 1):
        if not is_text(frame.iloc[:, at - 1]):
            sheet.cell(1, at).alignment = Alignment(horizontal="right", vertical="top", wrap_text=True)
    _heighten(sheet, frame, wrapped)
    sheet.freeze_panes = "A2"
    sheet.auto_filter.ref = f"A1:{get_column_letter(max(len(frame.columns), 1))}{len(frame) + 1}"
    landscape(sheet)
    return changed


def _shown(value: object) -> str:
    """A format for one number: whole ones plain, others with four decimals, tiny and huge ones by powers."""
    if not isinstance(value, float) or value.is_integer():
        return "0"
    return "0.0000" if 1e-3 <= abs(value) < 1e6 else "0.000E+00"


def style_headings(sheet: Worksheet, columns: int, row: int = 1) -> None:
    """Bold headings on a rule."""
    for at in range(1, columns + 1):
        cell = sheet.cell(row, at)
        cell.font = Font(name=SANS, bold=True, color=INK)
        cell.fill = PatternFill("solid", fgColor=SHADE)
        cell.border = Border(bottom=Side("thin", color=RULE))
        cell.alignment = Alignment(horizontal="left", vertical="top", indent=1, wrap_text=True)


def landscape(sheet: Worksheet, across: int = 1) -> None:
    """Print on landscape pages, all columns on so many side by side, the heading row on each."""
    sheet.page_setup.orientation = "landscape"
    sheet.page_setup.fitToWidth, sheet.page_setup.fitToHeight = across, 0
    sheet.sheet_properties.pageSetUpPr = PageSetupProperties(fitToPage=True)
    sheet.print_title_rows = "1:1"


def _heighten(sheet: Worksheet, frame: pd.DataFrame, wrapped: tuple[str, ...]) -> None:
    """Rows as high as their longest sentence; not every program finds that out by itself."""
    lines = [1] * len(frame)
    for name in wrapped:
        if name in frame:
            said = texts(frame[name])
            letters = _letters(said) - 4
            lines = [max(most, -(-len(text) // letters)) for most, text in zip(lines, said, strict=True)]
    for row, count in enumerate(lines, 2):
        if count > 1:
            sheet.row_dimensions[row].height = _LINE * min(count, 24)


def _letters(said: list[str]) -> int:
    """Letters on a line of a column of sentences: long ones get longer lines, so that rows stay low."""
    return min(max(_SENTENCE, max(map(len, said), default=0) // _LINES), _PARAGRAPH)


def _width(column: pd.Series, wrapped: bool) -> float:
    name = str(column.name)
    if wrapped:
        said = texts(column)
        return min(max(len(name), *map(len, said), _NARROWEST), _letters(said)) + 2
    if not is_text(column):
        return max(len(name), _NARROWEST) + 3
    longest = max((len(text) for text in texts(column.iloc[:_SAMPLE])), default=0)
    return min(max(len(name), longest, _NARROWEST), _WIDEST) + 3


def free_title(book: Workbook, title: str) -> str:
    """A sheet title nobody has yet, at most 31 characters (ECMA-376 Part 1, section 18.2.19)."""
    taken = {name.casefold() for name in book.sheetnames}
    found, count = title, 2
    while found.casefold() in taken:
        found, count = f"{title} {count}", count + 1
    return found
