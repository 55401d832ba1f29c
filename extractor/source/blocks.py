"""A large csv or parquet file as grids of some thousand rows each, so that memory stays bounded.

Rows that share a key (a study, an analysis) stay in one block. The file is read twice: first only for the keys, to see
where it can be cut; then block by block. Where rows of one key lie far apart, the block between them grows with it.
"""

from __future__ import annotations

import codecs
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import TextIO

import numpy as np
from numpy.typing import NDArray

from extractor.errors import UnreadableInput
from extractor.labels import plain_label
from extractor.printed.reading import quoted
from extractor.source import parquet
from extractor.source.columns import factorized
from extractor.source.delimited import BOMS, DECLARED, HEAD, NOT_UTF8, Known, delimiter_of
from extractor.source.grid import Grid, is_blank, one_below_the_other, part_of
from extractor.source.pieces import grids_of

KeyColumns = Callable[[Sequence[str]], list[int]]
"""Which columns hold keys, from the headings."""

_CHUNK = 1 << 20
_PIECE = 1 << 21
"""Letters that are read at once."""
_DELIMITED = (".csv", ".tsv", ".tab", ".txt")
_MUCH_LARGER = 3.0
"""A block so many times larger than asked for is worth a note."""


@dataclass(frozen=True, slots=True)
class Cuts:
    """Where a file is cut: the number of rows before each cut, the last being all of them."""

    ends: list[int]

    @property
    def rows(self) -> int:
        """Rows of the file."""
        return self.ends[-1] if self.ends else 0

    @property
    def largest(self) -> int:
        """Rows of the largest block."""
        return int(np.diff([0, *self.ends]).max(initial=0))


@dataclass(frozen=True, slots=True)
class Blocks:
    """A file that is read in blocks. ``notes`` say what was noticed while it was looked through."""

    cuts: Cuts
    notes: list[str]
    grids: Iterator[Grid]


def can_be_cut(path: Path) -> bool:
    """Whether a file is of a kind that can be read in blocks; its content may still turn out otherwise."""
    try:
        if not path.is_file() or path.suffix.lower() not in (*_DELIMITED, parquet.ENDING):
            return False
        with path.open("rb") as stream:
            return not stream.read(4).startswith((b"PK\x03\x04", b"\xd0\xcf\x11\xe0"))
    except (OSError, ValueError):
        # whoever reads the file as a whole says what is the matter with it
        return False


def blocks_of(path: Path, known: Known, key_columns: KeyColumns, size: int) -> Blocks:
    """The file in blocks of about ``size`` rows.

    Raises
    ------
    UnreadableInput : with one line naming the file, the fault and the remedy; before the first block is given.
    """
    if path.suffix.lower() == parquet.ENDING:
        return _parquet_blocks(path, key_columns, size)
    text = _Text(path, known)
    cuts = _cuts(text.look(key_columns), size)
    return Blocks(cuts, [*text.notes, *_scattered(cuts, size)], text.blocks(cuts))


def _scattered(cuts: Cuts, size: int) -> list[str]:
    if cuts.largest <= _MUCH_LARGER * size:
        return []
    return [
        f"rows of one study or analysis lie far apart: up to {cuts.largest} rows are held at once to keep them "
        "together; sort the sheet by study and analysis to need less memory"
    ]


def _cuts(keys: list[NDArray[np.int64]], size: int) -> Cuts:
    """The first place at or after every ``size`` rows at which no key is open; 0 stands for no key."""
    rows = len(keys[0])
    reach = np.arange(rows)
    for key in keys:
        values, from_end = np.unique(key[::-1], return_index=True)
        latest = (rows - 1 - from_end)[np.searchsorted(values, key)]
        reach = np.where(key == 0, reach, np.maximum(reach, latest))
    closed = np.flatnonzero(np.maximum.accumulate(reach) == np.arange(rows)) + 1
    ends: list[int] = []
    while not ends or ends[-1] < rows:
        wanted = (ends[-1] if ends else 0) + size
        at = int(np.searchsorted(closed, wanted))
        ends.append(int(closed[min(at, len(closed) - 1)]))
    return Cuts(ends)


@lru_cache(maxsize=4096)
def _coded(text: object) -> int:
    """A number that stands for a key, however spelled; 0 for none. Two keys of one number would only stay together."""
    return 0 if is_blank(text) else hash(plain_label(str(text))) or 1


class _Text:
    """Delimited text that is read piece by piece."""

    def __init__(self, path: Path, known: Known) -> None:
        self.path, self.name, self.known = path, quoted(path, 200), known
        self.notes: list[str] = []
        self.encoding = self._encoding()
        with self._open() as stream:
            head = stream.read(HEAD)
        declared = DECLARED.match(head)
        self.declared = declared is not None
        self.delimiter = declared[1] if declared else delimiter_of(head, known, path.suffix.lower())

    def _encoding(self) -> str:
        with self.path.open("rb") as stream:
            head = stream.read(4)
        for mark, encoding in BOMS:
            if head.startswith(mark):
                return encoding
        for encoding, called in (("utf-8", ""), ("cp1252", "Windows-1252"), ("latin-1", "Latin-1")):
            if self._decodes(encoding):
                self.notes += [NOT_UTF8.format(called)] if called else []
                return encoding
        raise AssertionError("every byte is a letter of Latin-1")

    def _decodes(self, encoding: str) -> bool:
        decoder = codecs.getincrementaldecoder(encoding)()
        try:
            with self.path.open("rb") as stream:
                while chunk := stream.read(_CHUNK):
                    decoder.decode(chunk)
            decoder.decode(b"", final=True)
        except UnicodeDecodeError:
            return False
        return True

    @contextmanager
    def _open(self) -> Iterator[TextIO]:
        """The text; damage met anywhere in it is said."""
        try:
            with self.path.open(encoding=self.encoding, newline="") as stream:
                yield stream
        except UnicodeDecodeError as fault:
            coding = self.encoding.upper()
            raise UnreadableInput(f"{self.name} is damaged {coding} text; save it as UTF-8") from fault

    def grids(self, only: KeyColumns | None = None) -> Iterator[Grid]:
        """The rows as grids one below the other; of the columns those that are asked for, from the headings."""
        with self._open() as stream:
            if self.declared:
                stream.readline()
            yield from grids_of(stream, self.delimiter, self.name, _PIECE, only)

    def look(self, key_columns: KeyColumns) -> list[NDArray[np.int64]]:
        """The keys of all rows."""
        keys: list[list[NDArray[np.int64]]] = []
        for grid in self.grids(key_columns):
            found = [np.zeros(len(grid.row_numbers), dtype=np.int64)]
            for index in key_columns(grid.headings):
                cells, _, codes = factorized(grid.columns[index])
                found.append(np.array([_coded(cell) for cell in cells], dtype=np.int64)[codes])
            keys.append(found)
        return [np.concatenate(column) for column in zip(*keys, strict=True)]

    def blocks(self, cuts: Cuts) -> Iterator[Grid]:
        """The blocks."""
        grids = self.grids()
        held: list[Grid] = []
        start = rows = 0
        for end in cuts.ends:
            while rows < end - start and (grid := next(grids, None)) is not None:
                held.append(grid)
                rows += len(grid.row_numbers)
            last = held.pop()
            # the last rows of it belong to the next block
            spare = max(rows - (end - start), 0)
            size = len(last.row_numbers)
            yield one_below_the_other([*held, part_of(last, 0, size - spare)])
            held, start, rows = [part_of(last, size - spare, size)], end, spare


def _parquet_blocks(path: Path, key_columns: KeyColumns, size: int) -> Blocks:
    file = parquet.opened(path)
    headings = [str(name) for name in file.schema_arrow.names]
    at = [headings[column] for column in key_columns(headings)]
    rows = file.metadata.num_rows
    keys = [np.zeros(rows, dtype=np.int64)]
    with parquet.whole(path):
        known = file.read(columns=at).to_pydict() if at else {}
    for values in known.values():
        keys.append(np.fromiter(map(_coded, values), dtype=np.int64, count=rows))
    cuts = _cuts(keys, size)

    def grids() -> Iterator[Grid]:
        import pyarrow

        batches = file.iter_batches(batch_size=size)
        held = file.schema_arrow.empty_table()
        first = done = 0
        for end in cuts.ends:
            while done < end:
                with parquet.whole(path):
                    batch = next(batches)
                    held = pyarrow.concat_tables([held, pyarrow.Table.from_batches([batch])])
                done += batch.num_rows
            grid = parquet.cells(held.slice(0, end - first), path, first + 2)
            held, first = held.slice(end - first), end
            if grid is not None:
                yield grid

    return Blocks(cuts, _scattered(cuts, size), grids())
