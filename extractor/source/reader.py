"""A path, standard input or a data frame -> raw cells."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pandas as pd

from extractor.errors import UnreadableInput
from extractor.reading import quoted
from extractor.source.delimited import Known, from_text
from extractor.source.grid import Grid, ObjectArray, is_blank, object_array
from extractor.source.workbook import from_workbook

_ZIP = b"PK\x03\x04"
_OLD = b"\xd0\xcf\x11\xe0"


def read_grid(source: str | Path | pd.DataFrame, known: Known, sheets: tuple[str, ...] = ()) -> Grid:
    """The cells of a source.

    Parameters
    ----------
    source : a path (.xlsx, .xlsm, .csv, .tsv, .txt), "-" for delimited text on standard input, or a frame.
    known : whether a heading is understood; the delimiter of text is the one that gives most such headings.
    sheets : names of the sheet to prefer, in any case, before the first visible one.

    Raises
    ------
    UnreadableInput : with one line naming the file, the fault and the remedy.
    """
    if isinstance(source, pd.DataFrame):
        return _from_frame(source)
    if str(source) == "-":
        return from_text(sys.stdin.buffer.read(), "standard input", "", known)
    path, name = Path(source), quoted(source, 200)
    if path.is_dir():
        raise UnreadableInput(f"{name} is a folder; name the sheet in it")
    try:
        with path.open("rb") as stream:
            head = stream.read(8)
            content = b"" if head.startswith(_ZIP) else head + stream.read()
    except FileNotFoundError as fault:
        raise UnreadableInput(f"{name}: no such file") from fault
    except (OSError, ValueError) as fault:
        reason = getattr(fault, "strerror", None) or str(fault)
        raise UnreadableInput(f"{name} cannot be opened: {reason}") from fault
    if head.startswith(_ZIP):
        return from_workbook(path, name, sheets)
    if head.startswith(_OLD):
        raise UnreadableInput(
            f"{name} is an old .xls or a password-protected workbook; save it as plain .xlsx"
        )
    if path.suffix.lower() in (".xlsx", ".xlsm", ".xls", ".ods") and content:
        raise UnreadableInput(f"{name} is no workbook, whatever its name says; open it and save it as .xlsx")
    return from_text(content, name, path.suffix.lower(), known)


def _from_frame(frame: pd.DataFrame) -> Grid:
    """The cells of a frame; its first row counts as row 2, below the headings."""
    columns: list[ObjectArray] = []
    filled = np.zeros(len(frame), dtype=bool)
    for position in range(frame.shape[1]):
        series = frame.iloc[:, position]
        narrow = series.dtype in (np.float16, np.float32)
        column = object_array(list(series.to_numpy()) if narrow else list(series.astype(object)), len(frame))
        column[series.isna().to_numpy(dtype=bool)] = None
        columns.append(column)
        filled |= np.fromiter((not is_blank(value) for value in column), dtype=bool, count=len(frame))
    if not filled.any():
        raise UnreadableInput("the data frame has no rows with a value")
    kept = np.flatnonzero(filled)
    return Grid(
        source="data frame",
        sheet="",
        headings=[str(label).strip() for label in frame.columns],
        header_row=1,
        row_numbers=kept.astype(np.int64) + 2,
        columns=[column[kept] for column in columns],
        formats=[None] * len(columns),
        stored=False,
    )
