"""A path, standard input or a data frame -> raw cells."""

from __future__ import annotations

import stat
import sys
from pathlib import Path
from typing import IO, TYPE_CHECKING

from extractor.errors import UnreadableInput
from extractor.printed.reading import quoted
from extractor.source.delimited import Known, from_text
from extractor.source.frame import from_frame
from extractor.source.grid import Grid

if TYPE_CHECKING:
    import pandas as pd

MOST_TEXT = 1 << 30
"""Bytes of delimited text above which it is taken for endless."""
_CHUNK = 1 << 20
_ZIP = b"PK\x03\x04"
_OLD = b"\xd0\xcf\x11\xe0"


def read_grid(source: str | Path | pd.DataFrame | Grid, known: Known, sheets: tuple[str, ...] = ()) -> Grid:
    """The cells of a source.

    Parameters
    ----------
    source : a path (.xlsx, .xlsm, .csv, .tsv, .txt, .parquet), "-" for delimited text on standard input, a frame, or
        cells read already.
    known : whether a heading is understood; the delimiter of text is the one that gives most such headings.
    sheets : names of the sheet to prefer, in any case, before the first visible one.

    Raises
    ------
    UnreadableInput : with one line naming the file, the fault and the remedy.
    """
    if isinstance(source, Grid):
        return source
    if not isinstance(source, (str, Path)):
        grid = from_frame(source, "data frame")
        if grid is None:
            raise UnreadableInput("the data frame has no rows with a value")
        return grid
    if str(source) == "-":
        return from_text(_standard_input(), "standard input", "", known)
    path, name = Path(source), quoted(source, 200)
    if path.suffix.lower() == ".parquet" and path.is_file():
        from extractor.source.parquet import read_parquet

        return read_parquet(path)
    try:
        kind = path.stat().st_mode
        if stat.S_ISDIR(kind):
            raise UnreadableInput(f"{name} is a folder; name the sheet in it")
        if stat.S_ISCHR(kind) or stat.S_ISBLK(kind):
            raise UnreadableInput(f"{name} is a device, not a sheet; pipe its text and name - as the sheet")
        with path.open("rb") as stream:
            head = stream.read(8)
            zipped = head.startswith(_ZIP) and stat.S_ISREG(kind)
            content = b"" if zipped else head + _all(stream, name)
    except FileNotFoundError as fault:
        raise UnreadableInput(f"{name}: no such file") from fault
    except (OSError, ValueError) as fault:
        reason = getattr(fault, "strerror", None) or str(fault)
        raise UnreadableInput(f"{name} cannot be opened: {reason}") from fault
    if zipped:
        from extractor.source.workbook import from_workbook

        return from_workbook(path, name, sheets)
    if head.startswith(_OLD):
        raise UnreadableInput(
            f"{name} is an old .xls or a password-protected workbook; save it as plain .xlsx"
        )
    if path.suffix.lower() in (".xlsx", ".xlsm", ".xls", ".ods") and content:
        raise UnreadableInput(f"{name} is no workbook, whatever its name says; open it and save it as .xlsx")
    return from_text(content, name, path.suffix.lower(), known)


def _standard_input() -> bytes:
    """All of standard input."""
    if sys.stdin is None:
        raise UnreadableInput("standard input is closed; pipe the text of the sheet into the command")
    try:
        return _all(sys.stdin.buffer, "standard input")
    except OSError as fault:
        raise UnreadableInput(f"standard input cannot be read: {fault.strerror}") from fault


def _all(stream: IO[bytes], name: str) -> bytes:
    """Everything in a stream that may have no end."""
    chunks, size = list[bytes](), 0
    while chunk := stream.read(_CHUNK):
        chunks.append(chunk)
        size += len(chunk)
        if size > MOST_TEXT:
            raise UnreadableInput(
                f"{name} has more than {MOST_TEXT >> 30} GiB of text; divide it into several sheets"
            )
    return b"".join(chunks)
