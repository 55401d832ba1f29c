"""Results of formulas: a workbook loaded for copying loses them, and they are put back."""

from __future__ import annotations

import io
import re
import warnings
import zipfile
from collections.abc import Mapping, Sequence
from functools import partial
from pathlib import Path
from xml.sax.saxutils import escape

from openpyxl import Workbook, load_workbook
from openpyxl.cell import Cell, MergedCell
from openpyxl.worksheet.worksheet import Worksheet

AnyCell = Cell | MergedCell
Results = Mapping[str, Mapping[str, AnyCell]]
"""Cells that hold results, by sheet title and address."""

_FORMULA = re.compile(
    r'<c r="(?P<at>[A-Z]+[0-9]+)"(?P<style>(?: s="[0-9]+")?)(?: t="[a-z]+")?>'
    r"(?P<formula><f[^>]*(?:/>|>[^<]*</f>))<v\s*(?:/>|></v>)</c>"
)


def loaded(source: Path, *, rich_text: bool = False, data_only: bool = False) -> Workbook:
    """A workbook to be copied, whatever its name ends in."""
    with warnings.catch_warnings(), source.open("rb") as stream:
        # what a workbook cannot keep was said when it was read
        warnings.simplefilter("ignore")
        return load_workbook(stream, rich_text=rich_text, data_only=data_only, keep_links=False)


def cached_results(source: Path, book: Workbook) -> dict[str, dict[str, AnyCell]]:
    """The stored results of the formulas of ``book``, which was loaded from ``source``."""
    wanted = {
        sheet.title: {cell.coordinate for cell in cells_there(sheet) if cell.data_type == "f"}
        for sheet in book.worksheets
    }
    if not any(wanted.values()):
        return {}
    values = loaded(source, data_only=True)
    return {
        title: {cell.coordinate: cell for cell in cells_there(values[title]) if cell.coordinate in found}
        for title, found in wanted.items()
        if found
    }


def cells_there(sheet: Worksheet) -> list[AnyCell]:
    """The cells that a sheet has; going through its rows would make all those between them and the first."""
    return list(sheet._cells.values())


def with_results(content: bytes, titles: Sequence[str], results: Results) -> bytes:
    """The saved workbook with the results put back.

    Parameters
    ----------
    titles : of all its sheets, in order; the writer numbers their parts in that order.
    """
    if not results:
        return content
    parts = {f"xl/worksheets/sheet{at}.xml": results.get(title, {}) for at, title in enumerate(titles, 1)}
    stream = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as old, zipfile.ZipFile(stream, "w") as new:
        for name in old.namelist():
            body = old.read(name)
            if parts.get(name):
                filled = partial(_filled, parts[name])
                body = _FORMULA.sub(filled, body.decode("utf-8")).encode("utf-8")
            new.writestr(name, body)
    return stream.getvalue()


def _filled(known: Mapping[str, AnyCell], match: re.Match[str]) -> str:
    """One formula's cell with its result."""
    cell = known.get(match["at"])
    if cell is None or cell.value is None:
        return match.group()
    value: object = cell.value
    if isinstance(value, bool):
        kind, text = ' t="b"', str(int(value))
    elif isinstance(value, (int, float)):
        kind, text = "", repr(value)
    elif cell.data_type == "e":
        kind, text = ' t="e"', escape(str(value))
    elif isinstance(value, str):
        kind, text = ' t="str"', escape(value)
    else:
        # dates are shown by the program that opens the workbook
        return match.group()
    return f'<c r="{match["at"]}"{match["style"]}{kind}>{match["formula"]}<v>{text}</v></c>'
