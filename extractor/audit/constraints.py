"""A block of evidence as intervals to be propagated: printed cells, how far they can be widened, and freed."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from extractor.audit.propagation import Domain
from extractor.evidence import Block, coded_k
from extractor.quantities import VOCABULARY
from extractor.table import FloatArray, ReportedTable, Variable

_FACTS = ("contrast_weight", "direction", "k_groups", "tails", "df_effect", "one_factor", "only_factor")


@dataclass(frozen=True, slots=True)
class Cell:
    """A printed cell of a block: the quantity it feeds, its column among the groups, and where it stands."""

    quantity: str
    column: int | None
    variable: Variable


@dataclass(slots=True)
class Constraints:
    """Intervals of a block's printed numbers.

    cells : the printed cells, in the sheet's vocabulary order.
    domain : intervals as printed. units : one unit in the last place of each cell, shape (rows,).
    implied : counts known from how the row was coded, whatever is printed.
    """

    design: str
    cells: list[Cell]
    domain: Domain
    units: dict[Cell, FloatArray]
    implied: dict[str, FloatArray]

    def take(self, rows: NDArray[np.intp]) -> Constraints:
        """The rows named, in that order."""
        return Constraints(
            self.design,
            self.cells,
            self.domain.take(rows),
            {cell: unit[rows] for cell, unit in self.units.items()},
            {name: values[rows] for name, values in self.implied.items()},
        )

    def widened(self, by: FloatArray) -> Domain:
        """All cells widened by ``by`` units in the last place, shape (rows,)."""
        domain = self.domain.copy()
        for cell in self.cells:
            extra = by * self.units[cell]
            low, high = self.interval(cell)
            self.put(domain, cell, low - extra, high + extra)
        return domain

    def interval(self, cell: Cell) -> tuple[FloatArray, FloatArray]:
        """(low, high) of a cell as printed."""
        low, high = self.domain.pair(cell.quantity)
        return (low, high) if cell.column is None else (low[:, cell.column], high[:, cell.column])

    def put(self, domain: Domain, cell: Cell, low: FloatArray, high: FloatArray) -> None:
        """Replace a cell's interval in ``domain``, cut to its support and to what the coding implies."""
        support = VOCABULARY[cell.quantity]
        low, high = np.maximum(low, support.low), np.minimum(high, support.high)
        implied = self.implied.get(cell.quantity)
        if implied is not None:
            low, high = np.maximum(low, implied), np.minimum(high, implied)
        if cell.column is None:
            domain.low[cell.quantity], domain.high[cell.quantity] = low, high
            return
        for ends, new in ((domain.low, low), (domain.high, high)):
            ends[cell.quantity] = ends[cell.quantity].copy("K")
            ends[cell.quantity][:, cell.column] = new

    @property
    def rows(self) -> int:
        """Number of rows."""
        return len(next(iter(self.domain.low.values())))

    def freed(self, cells: Iterable[Cell]) -> Domain:
        """The domain without some cells: the interval of each becomes its support."""
        domain = self.domain.copy()
        free = np.full(self.rows, -np.inf), np.full(self.rows, np.inf)
        for cell in cells:
            self.put(domain, cell, *free)
        return domain


def constraints_of(block: Block, table: ReportedTable) -> Constraints:
    """The block's printed numbers as constraints; assumptions take no part, except that p values are two-tailed."""
    low: dict[str, FloatArray] = {}
    high: dict[str, FloatArray] = {}
    cells: list[Cell] = []
    units: dict[Cell, FloatArray] = {}
    for name, estimate in {**block.leaves, **block.partial}.items():
        if name in block.assumed and name not in _FACTS:
            continue
        if name not in block.origins and name not in _FACTS:
            continue
        low[name], high[name] = np.asfortranarray(estimate.low), np.asfortranarray(estimate.high)
        for column, variable in enumerate(block.origins.get(name, ())):
            numbers = table.numbers.get(variable)
            scalar = VOCABULARY[name].shape.value == "scalar"
            cell = Cell(name, None if scalar else column, variable)
            if numbers is None:
                continue
            unit = numbers.unit[block.positions]
            if not scalar and name in block.partial and not np.isfinite(unit).any():
                continue
            cells.append(cell)
            units[cell] = np.where(np.isfinite(unit), unit, 0.0)
    if "direction" not in low:
        size = len(block.positions)
        low["direction"], high["direction"] = np.full(size, -1.0), np.full(size, 1.0)
    constraints = Constraints(block.design, cells, Domain(low, high), units, {})
    coded = coded_k(block)
    if "k_groups" in block.leaves and coded:
        constraints.implied["k_groups"] = np.full(len(block.positions), coded)
        for ends, pick in ((low, np.maximum), (high, np.minimum)):
            ends["k_groups"] = pick(ends["k_groups"], coded)
    return constraints
