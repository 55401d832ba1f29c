"""Raw cells with their addresses, whatever they were read from. Knows nothing of what they mean."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from extractor.errors import UnreadableInput
from extractor.printed.reading import quoted, shortest
from extractor.printed.reported import CellError, UncachedFormula
from extractor.source.coded import Column, joined
from extractor.table import ObjectArray

MOST_COLUMNS = 16_384
"""Columns of a spreadsheet (common to the programs in use); addresses end there."""


class NoRows(UnreadableInput):
    """A sheet without a row below its headings."""


@dataclass(slots=True)
class Grid:
    """Cells below a heading row; fully blank rows left out.

    source, sheet : for messages; ``sheet`` is "" where there is only one.
    headings : text of the heading row, "" where blank.
    header_row, row_numbers : the file's own numbers, the first row of a file being 1.
    columns : raw cells of each column, shape (rows,), see ``coded.Column``: str, int, float, bool, dates, None,
        UncachedFormula, CellError.
    formats : number formats of each column's cells, or None where the source has none.
    stored : whether numbers are stored as such, so that text shows every digit that was typed.
    ragged : row numbers with more cells than headings.
    """

    source: str
    sheet: str
    headings: list[str]
    header_row: int
    row_numbers: NDArray[np.int64]
    columns: Sequence[Column]
    formats: list[ObjectArray | None]
    stored: bool
    ragged: dict[int, int] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)

    @property
    def where(self) -> str:
        """File and sheet, for messages."""
        return f"{self.source}, sheet {quoted(self.sheet)}" if self.sheet else self.source


def column_letters(index: int) -> str:
    """The letters of a column, counted from 0: A to Z, then AA and so on."""
    letters = ""
    while index >= 0:
        index, rest = divmod(index, 26)
        letters = chr(ord("A") + rest) + letters
        index -= 1
    return letters


def is_blank(value: object) -> bool:
    """Whether a cell holds nothing but space."""
    return value is None or (isinstance(value, str) and not value.strip())


def object_array(values: list[object], count: int) -> ObjectArray:
    """An object array of exactly these values, even where they are sequences."""
    return np.fromiter(values, dtype=object, count=count)


def typed_row(cells: Mapping[str, str]) -> Grid:
    """Cells typed on the command line, by heading, as the only row of a sheet."""
    return Grid(
        source="command line",
        sheet="",
        headings=list(cells),
        header_row=1,
        row_numbers=np.array([2], dtype=np.int64),
        columns=[object_array([cell], 1) for cell in cells.values()],
        formats=[None] * len(cells),
        stored=False,
    )


class Rows:
    """Gathers rows; the first that is not blank is the heading row, blank ones below are left out."""

    def __init__(self, source: str, sheet: str, *, stored: bool) -> None:
        self.source, self.sheet, self.stored = source, sheet, stored
        self.header: list[str] | None = None
        self.header_row = 0
        self.numbers: list[int] = []
        self.records: list[list[object]] = []
        self.codes: list[list[str | None]] = []
        self.ragged: dict[int, int] = {}

    def add(self, number: int, values: list[object], codes: list[str | None] | None = None) -> None:
        """One row of the file, from its first column on."""
        if all(map(is_blank, values)):
            return
        if self.header is None:
            texts = ["" if is_blank(value) else heading_text(value) for value in values]
            while not texts[-1]:
                texts.pop()
            if len(texts) > MOST_COLUMNS:
                where = f"{self.source}, row {number}"
                raise UnreadableInput(
                    f"{where}: more than {MOST_COLUMNS} headings; no spreadsheet has so many"
                )
            self.header, self.header_row = texts, number
            return
        width = len(self.header)
        if len(values) > width and not all(map(is_blank, values[width:])):
            self.ragged[number] = sum(not is_blank(value) for value in values[width:])
        values = values[:width] + [None] * (width - len(values))
        self.numbers.append(number)
        self.records.append(values)
        if codes is not None:
            self.codes.append(codes[:width] + [None] * (width - len(codes)))

    def grid(self) -> Grid:
        """The finished grid; raises where there is none."""
        where = f"{self.source}, sheet {quoted(self.sheet)}" if self.sheet else self.source
        if self.header is None:
            raise NoRows(f"{where} is empty; the first row must hold the headings")
        if not self.records:
            raise NoRows(f"{where} has headings in row {self.header_row} and no rows below them")
        count = len(self.records)
        columns = [object_array(list(column), count) for column in zip(*self.records, strict=True)]
        grid = self.grid_with(np.asarray(self.numbers, dtype=np.int64), columns)
        if self.codes:
            grid.formats = [object_array(list(column), count) for column in zip(*self.codes, strict=True)]
        if self.ragged and self.stored:
            first = min(self.ragged)
            grid.notes.append(f"cells to the right of the last heading are left out, first in row {first}")
        elif self.ragged:
            grid.ragged = self.ragged
        return grid

    def grid_with(self, numbers: NDArray[np.int64], columns: Sequence[Column]) -> Grid:
        """A grid of these rows below the heading row."""
        return Grid(
            source=self.source,
            sheet=self.sheet,
            headings=self.header or [],
            header_row=self.header_row,
            row_numbers=numbers,
            columns=columns,
            formats=[None] * len(columns),
            stored=self.stored,
        )

    def below(self) -> Rows:
        """An empty gathering of further rows below the same headings."""
        further = Rows(self.source, self.sheet, stored=self.stored)
        further.header, further.header_row = self.header, self.header_row
        return further


def part_of(grid: Grid, start: int, stop: int) -> Grid:
    """Some rows of a grid of delimited text."""
    numbers = grid.row_numbers[start:stop]
    here = set(numbers.tolist()) if grid.ragged else set()
    return replace(
        grid,
        row_numbers=numbers,
        columns=[column[start:stop] for column in grid.columns],
        ragged={number: extra for number, extra in grid.ragged.items() if number in here},
    )


def one_below_the_other(grids: Sequence[Grid]) -> Grid:
    """Grids of delimited text under the same headings as one."""
    return replace(
        grids[0],
        row_numbers=np.concatenate([grid.row_numbers for grid in grids]),
        columns=[joined(columns) for columns in zip(*(grid.columns for grid in grids), strict=True)],
        ragged={number: extra for grid in grids for number, extra in grid.ragged.items()},
    )


def heading_text(value: object) -> str:
    """A heading or a label as text; a whole number without its ``.0``."""
    if isinstance(value, CellError):
        return value.code
    if isinstance(value, UncachedFormula):
        return value.formula
    if isinstance(value, float) and value.is_integer():
        return shortest(value)
    return str(value)
