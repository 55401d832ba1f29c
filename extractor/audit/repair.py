"""What a repair is: one usual slip undone, or another reading of the row, as domains to be propagated."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from extractor.audit.constraints import Cell, Constraints
from extractor.audit.propagation import Domain, judges_of
from extractor.catalogue.relation import Interval, Relation
from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray

Changes = dict[Cell, Interval]


@dataclass(frozen=True, slots=True)
class Repair:
    """One way of undoing one slip, for all rows of a block.

    cells : the cells it changes. domain : the repaired intervals. value : what the first cell would say, shape
    (rows,), NaN where there is no single number. applies : rows in which the repair is another reading at all.
    gauge : the quantity in whose interval, once the cells are freed, a chance match is measured.
    readings : how many readings of this kind are tried on these cells, shape (rows,).
    share : how often a random wrong value would fit, where the gauge does not tell; shape (rows,) or None.
    design : another design, in which the row as printed holds together; "" where the repair changes a number.
    """

    kind: str
    words: str
    cells: tuple[Cell, ...]
    domain: Domain
    value: FloatArray
    applies: BoolArray
    gauge: str
    readings: FloatArray
    share: FloatArray | None = None
    design: str = ""


Kind = Callable[[Constraints], Iterator[Repair]]


def middle(low: FloatArray, high: FloatArray) -> FloatArray:
    """The middle of intervals."""
    return (low + high) / 2


def repair_of(
    constraints: Constraints,
    kind: str,
    words: str,
    changes: Changes,
    *,
    readings: float | FloatArray = 1.0,
    applies: BoolArray | None = None,
    gauge: str = "",
    share: FloatArray | None = None,
    design: str = "",
) -> Repair:
    """A repair that puts ``changes`` into the printed domain; one reading that applies everywhere unless said."""
    domain = constraints.domain.copy()
    for cell, (low, high) in changes.items():
        constraints.put(domain, cell, low, high)
    first = next(iter(changes))
    low, high = changes[first]
    # a bound repaired is still a bound, not a number
    value = np.where(is_bound(constraints, first), np.nan, middle(low, high))
    if applies is None:
        applies = np.ones(len(value), dtype=bool)
    tried = np.broadcast_to(np.asarray(readings, dtype=float), value.shape)
    return Repair(
        kind, words, tuple(changes), domain, value, applies, gauge or first.quantity, tried, share, design
    )


def cells_of(constraints: Constraints, quantity: str) -> list[Cell]:
    """The printed cells of a quantity."""
    return [cell for cell in constraints.cells if cell.quantity == quantity]


def is_count(cell: Cell) -> bool:
    """Whether the cell holds an exact number."""
    return VOCABULARY[cell.quantity].exact


def is_bound(constraints: Constraints, cell: Cell) -> BoolArray:
    """Rows in which the cell is printed as an inequality."""
    low, high = constraints.interval(cell)
    return np.asarray(high - low > 1.5 * constraints.units[cell])


def free(like: FloatArray) -> Interval:
    """Intervals that say nothing."""
    return np.full_like(like, -np.inf), np.full_like(like, np.inf)


def relation_of(design: str, gives: str, *needs: str) -> Relation | None:
    """The relation of a design that gives a quantity from exactly these."""
    return next((r for r in judges_of(design) if r.gives == gives and set(r.needs) == set(needs)), None)
