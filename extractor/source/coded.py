"""A column as its distinct cells and which of them each row holds: what a large sheet needs instead of its cells."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, overload

import numpy as np
from numpy.typing import NDArray

from extractor.distinct import distinct
from extractor.table import ObjectArray


@dataclass(frozen=True, slots=True)
class Coded:
    """Cells of a column of text. cells : the distinct ones. codes : which of them each row holds, shape (rows,)."""

    cells: list[str]
    codes: NDArray[np.int32]

    def __len__(self) -> int:
        return len(self.codes)

    @overload
    def __getitem__(self, at: int) -> str: ...
    @overload
    def __getitem__(self, at: slice | NDArray[Any]) -> Coded: ...
    def __getitem__(self, at: int | slice | NDArray[Any]) -> str | Coded:
        if isinstance(at, (slice, np.ndarray)):
            return Coded(self.cells, self.codes[at])
        return self.cells[int(self.codes[at])]

    def tolist(self) -> list[str]:
        """The cell of every row."""
        return [self.cells[code] for code in self.codes.tolist()]


Column = ObjectArray | Coded
"""The raw cells of a column, however they are held; both give a cell by its row, and some rows by an array."""


def joined(parts: Sequence[Column]) -> Column:
    """Columns of text one below the other; cells that no row holds are left out."""
    known: dict[str, int] = {}
    codes = []
    for part in parts:
        cells, held = (part.cells, part.codes) if isinstance(part, Coded) else distinct(part)
        number = np.zeros(len(cells), dtype=np.int32)
        used = np.flatnonzero(np.bincount(held, minlength=len(cells)))
        number[used] = [known.setdefault(cells[at], len(known)) for at in used.tolist()]
        codes.append(number[held])
    return Coded(list(known), np.concatenate(codes))
