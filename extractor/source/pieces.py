"""Delimited text piece by piece, as grids one below the other: as fast as it is regular, with bounded memory.

A piece ends where a record ends. It is split all at once where that is safe, and read by ``csv.reader`` elsewhere;
where no end of a record can be found, the rest of the text is left to that.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Callable, Iterable, Iterator, Sequence
from itertools import chain
from typing import TextIO

from extractor.errors import UnreadableInput
from extractor.source.grid import Grid, NoRows, Rows
from extractor.source.splitting import LONGEST_CELL, Split, grid_of, split

_MOST_HELD, _MOST_RECORDS = 1 << 24, 5000
"""Letters in which a record must end to be split, records of a piece that is not split."""

Piece = Split | list[list[str]]


def grids_of(
    stream: TextIO,
    delimiter: str,
    name: str,
    size: int,
    only: Callable[[Sequence[str]], list[int]] | None = None,
) -> Iterator[Grid]:
    """The rows of a text in grids one below the other, at least one.

    Parameters
    ----------
    stream : text with its line ends as they stand, open before the first record.
    size : letters of a piece.
    only : which columns are wanted, from the headings; the others may be left blank.

    Raises
    ------
    UnreadableInput : no delimited text, or no row below a heading row.
    """
    rows = Rows(name, "", stored=False)
    anything = False
    for number, piece in _pieces(stream, delimiter, name, size):
        rows = rows.below()
        try:
            if isinstance(piece, Split):
                yield grid_of(piece, rows, number, only)
            else:
                for at, record in enumerate(piece, number + 1):
                    rows.add(at, list(record))
                yield rows.grid()
            anything = True
        except NoRows:
            continue
    if not anything:
        rows.grid()  # says what is missing


def records(stream: Iterable[str], delimiter: str) -> Iterator[list[str]]:
    """Records of delimited text (RFC 4180); a blank line is a record without cells."""
    # one limit for the whole process, which other packages lift
    csv.field_size_limit(LONGEST_CELL)
    return csv.reader(stream, delimiter=delimiter, strict=True)


def _pieces(stream: TextIO, delimiter: str, name: str, size: int) -> Iterator[tuple[int, Piece]]:
    """Whole records, blank ones too, and the number of records before them."""
    number, held = 0, ""
    while chunk := stream.read(size):
        held += chunk
        end = _end_of_records(held) if len(chunk) == size else len(held)
        piece = split(held[:end], delimiter) or _read(held[:end], delimiter)
        if piece is not None:
            yield number, piece
            number += piece.records if isinstance(piece, Split) else len(piece)
            held = held[end:]
        elif len(held) >= _MOST_HELD:
            break
    yield from _rest(held, stream, delimiter, name, number)


def _read(text: str, delimiter: str) -> list[list[str]] | None:
    """The records of a text; None where they may go on behind its end."""
    try:
        return list(records(io.StringIO(text, newline=""), delimiter)) or None
    except csv.Error:
        return None


def _rest(
    held: str, stream: TextIO, delimiter: str, name: str, number: int
) -> Iterator[tuple[int, list[list[str]]]]:
    """What nobody could cut, and all that follows, record by record."""
    lines = chain(io.StringIO(held + stream.readline(), newline=""), stream)
    piece: list[list[str]] = []
    try:
        for record in records(lines, delimiter):
            piece.append(record)
            if len(piece) == _MOST_RECORDS:
                yield number, piece
                number, piece = number + len(piece), []
    except csv.Error as fault:
        advice = "look for a quotation mark left open"
        raise UnreadableInput(f"{name}, after row {number + len(piece)}: {fault}; {advice}") from fault
    yield number, piece


def _end_of_records(text: str) -> int:
    """Behind the last line end with an even number of quotation marks before it; 0 where there is none."""
    end = text.rfind("\n") + 1
    marks = text.count('"', 0, end)
    while marks % 2:
        before = text.rfind("\n", 0, text.rfind('"', 0, end)) + 1
        marks -= text.count('"', before, end)
        end = before
    return end
