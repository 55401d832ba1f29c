"""Delimited text split without a look at each cell by Python.

A large sheet is mostly blank: of the millions of cells only those that hold something become texts, and of these only
the distinct ones of a column. ``split`` answers None wherever it cannot be sure to find the cells that ``csv.reader``
finds, or where that would refuse the text.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from extractor.distinct import distinct
from extractor.source.coded import Coded
from extractor.source.grid import MOST_COLUMNS, Grid, Rows, is_blank

LONGEST_CELL = 131_072
"""Letters of a cell beyond which delimited text is refused."""

_MOST_BYTES = 1 << 31
_NEWLINE, _RETURN, _QUOTE, _SPACE, _LAST_SIGN = 10, 13, 34, 32, 126
_QUOTED = re.compile(rb'"(?:[^"]+|"")*+"')
_WORD = 8
"""Bytes that are compared as one number; printed numbers are seldom longer."""
_MASKS = np.array([(1 << 8 * size) - 1 for size in range(_WORD + 1)], dtype="<u8")

Integers = NDArray[np.int64]


def split(text: str, delimiter: str) -> Split | None:
    """Where the cells of whole records stand; None where ``csv.reader`` has to look.

    A cell is quoted from its first letter to its last, or holds no quotation mark. Then, and only then, a delimiter
    or line end with an even number of marks before it ends a cell.
    """
    data = text.encode()
    if not data or b"\0" in data or len(data) + _WORD >= _MOST_BYTES:
        return None
    # room for the last cell to be looked at as a whole word
    data += (b"" if data.endswith(b"\n") else b"\n") + bytes(_WORD)
    letters = np.frombuffer(data, dtype=np.uint8)[:-_WORD]
    separators = (letters == ord(delimiter)) | (letters == _NEWLINE)
    returns = np.flatnonzero(letters == _RETURN) if b"\r" in data else np.zeros(0, dtype=np.int64)
    if b'"' in data:
        quotes = letters == _QUOTE
        outside = np.add.accumulate(quotes, dtype=np.uint8) & 1 == 0
        separators &= outside
        ends = np.flatnonzero(separators).astype(np.int32)
        returns = returns[outside[returns]]
        if not outside[-1] or not _well_quoted(data, ends, np.flatnonzero(quotes)):
            return None
    else:
        ends = np.flatnonzero(separators).astype(np.int32)
    if (letters[returns + 1] != _NEWLINE).any():
        return None
    found = Split(data, ends, returns=len(returns) > 0)
    return found if found.longest <= LONGEST_CELL and found.width <= MOST_COLUMNS else None


def _well_quoted(data: bytes, ends: NDArray[np.int32], quotes: Integers) -> bool:
    """Whether every cell with a quotation mark is quoted from its first letter to its last."""
    cells = np.unique(np.searchsorted(ends, quotes))
    stops = ends[cells]
    starts = np.where(cells > 0, ends[cells - 1] + 1, 0)
    return all(
        _QUOTED.fullmatch(data, start, stop - (data[stop - 1] == _RETURN)) is not None
        for start, stop in zip(starts.tolist(), stops.tolist(), strict=True)
    )


class Split:
    """Cells that are not empty, column after column, rows ascending.

    records : the number of records, blank ones too. width : cells of the widest. longest : bytes of the longest cell.
    """

    def __init__(self, data: bytes, ends: NDArray[np.int32], *, returns: bool) -> None:
        self.data = data
        letters = np.frombuffer(data, dtype=np.uint8)
        last = np.flatnonzero(letters[ends] == _NEWLINE).astype(np.int32)
        widths = np.diff(last, prepend=np.int32(-1))
        self.records, self.width = len(last), int(widths.max())
        sizes = np.diff(ends, prepend=np.int32(-1)) - 1
        at = np.flatnonzero(sizes)
        stops, sizes = ends[at], sizes[at]
        starts = stops - sizes
        record = np.repeat(np.arange(self.records, dtype=np.int32), widths)[at]
        column = at - (last - widths + 1)[record]
        if returns:
            sizes -= (letters[stops] == _NEWLINE) & (letters[stops - 1] == _RETURN)
        # short integers are sorted in one pass
        order = np.argsort(np.minimum(column, MOST_COLUMNS).astype(np.int16), kind="stable")
        order = order[sizes[order] > 0]
        self.starts, self.sizes, self.record = starts[order], sizes[order], record[order]
        self.first = np.concatenate([[0], np.cumsum(np.bincount(column[order], minlength=self.width))])
        self.longest = int(self.sizes.max(initial=0))
        self.filled = self._filled()

    def _filled(self) -> NDArray[np.bool_]:
        """Records that are not blank; nearly all have a cell that begins with a letter or digit."""
        first = np.frombuffer(self.data, dtype=np.uint8)[self.starts]
        sure = (first > _SPACE) & (first <= _LAST_SIGN) & (first != _QUOTE)
        filled = np.zeros(self.records, dtype=np.bool_)
        filled[self.record[sure]] = True
        for at in np.flatnonzero(~filled[self.record]).tolist():
            filled[self.record[at]] |= not is_blank(*_texts([self._bytes(at)]))
        return filled

    def _bytes(self, at: int) -> bytes:
        start = int(self.starts[at])
        return self.data[start : start + int(self.sizes[at])]

    def cells_of(self, record: int) -> list[str]:
        """The cells of one record."""
        cells = [""] * self.width
        for at in np.flatnonzero(self.record == record).tolist():
            column = int(np.searchsorted(self.first, at, side="right")) - 1
            cells[column] = _texts([self._bytes(at)])[0]
        return cells

    def filled_beyond(self, width: int) -> Integers:
        """The record of each cell to the right of so many that is not blank, ascending."""
        cells = range(int(self.first[width]), len(self.starts))
        found = [int(self.record[at]) for at in cells if not is_blank(*_texts([self._bytes(at)]))]
        return np.sort(np.array(found, dtype=np.int64))

    def column(self, index: int, position: Integers, count: int) -> Coded:
        """One column.

        Parameters
        ----------
        position : the row of the grid that a record becomes, -1 for none; shape (records,).
        count : rows of the grid.
        """
        within = slice(self.first[index], self.first[index + 1])
        rows = position[self.record[within]]
        kept = rows >= 0
        starts, sizes, rows = self.starts[within][kept], self.sizes[within][kept], rows[kept]
        texts, which = self._distinct(starts, sizes)
        codes = np.zeros(count, dtype=np.int32)
        codes[rows] = which + 1
        return Coded(["", *_texts(texts)], codes)

    def _distinct(self, starts: NDArray[np.int32], sizes: NDArray[np.int32]) -> tuple[list[bytes], Integers]:
        """The distinct texts of some cells, and which each has."""
        if sizes.max(initial=0) > _WORD:
            stops = (starts + sizes).tolist()
            return distinct([self.data[a:b] for a, b in zip(starts.tolist(), stops, strict=True)])
        # a word from every byte on: only those at the beginnings of cells are looked at
        words: NDArray[np.uint64] = np.ndarray(
            len(self.data) - _WORD, dtype="<u8", buffer=self.data, strides=(1,)
        )
        keys, which = np.unique(words[starts] & _MASKS[sizes], return_inverse=True)
        return keys.astype("<u8").view(f"S{_WORD}").tolist(), which


def _texts(cells: list[bytes]) -> list[str]:
    """The texts of cells as they stand in the file."""
    if not cells:
        return []
    # no cell has a NUL in it
    together = b"\0".join(cells).decode()
    texts = together.split("\0")
    if '"' not in together:
        return texts
    return [text[1:-1].replace('""', '"') if text.startswith('"') else text for text in texts]


def grid_of(
    found: Split, rows: Rows, number: int, only: Callable[[Sequence[str]], list[int]] | None = None
) -> Grid:
    """The grid of some records.

    Parameters
    ----------
    rows : takes the heading row where it has none yet; where there are no rows it says so, see ``Rows.grid``.
    number : records before these.
    only : which columns are wanted, from the headings; the others are left blank.
    """
    kept = np.flatnonzero(found.filled)
    if rows.header is None and len(kept):
        rows.add(number + int(kept[0]) + 1, list(found.cells_of(int(kept[0]))))
        kept = kept[1:]
    if rows.header is None or not len(kept):
        return rows.grid()
    position = np.full(found.records, -1, dtype=np.int64)
    position[kept] = np.arange(len(kept))
    width = len(rows.header)
    wanted = set(range(width) if only is None else only(rows.header)) & set(range(found.width))
    blank = Coded([""], np.zeros(len(kept), dtype=np.int32))
    grid = rows.grid_with(
        kept + number + 1,
        [found.column(index, position, len(kept)) if index in wanted else blank for index in range(width)],
    )
    if found.width > width:
        beyond = found.filled_beyond(width)
        grid.ragged = Counter((beyond[position[beyond] >= 0] + number + 1).tolist())
    return grid
