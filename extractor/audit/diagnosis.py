"""Which cell could be at fault, what it should have said, and how far rounding would have to be stretched.

Freeing a cell lets its interval become its support. If the row is then consistent, that cell alone could be the
fault, and the interval it gets is what the others imply (minimal diagnoses: Reiter 1987; de Kleer & Williams 1987).
The true values survive every narrowing, so with one fault its cell is always among the suspects. Freeing more leaves
more room, so cells of one quantity are freed together first, and one by one only where that helped.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from itertools import combinations_with_replacement

import numpy as np
from numpy.typing import NDArray

from extractor.audit.constraints import Cell, Constraints
from extractor.audit.propagation import Domain, propagate
from extractor.catalogue.relation import Interval
from extractor.catalogue.solving_for_groups import MOST_GROUPS
from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray

SLACK_LIMIT = 4096.0
"""Widening by more units in the last place than this is not looked for: the slack is infinite."""

_BATCH = 40_000
_REACHES = np.array([1.0, 16.0, 256.0, 4096.0])
_BETWEEN = np.array([0.25, 0.5, 0.75])
_REFINEMENTS = 2
_MOST_COUPLES = 100
"""Pairs of cells of two quantities beyond which only the quantities are looked at."""


@dataclass(frozen=True, slots=True)
class Suspect:
    """A cell that could alone be the fault, per row of the contradictory rows.

    frees : rows that are consistent without the cell. low, high : what the others imply, where it frees.
    """

    cell: Cell
    frees: BoolArray
    low: FloatArray
    high: FloatArray


@dataclass(frozen=True, slots=True)
class Trial:
    """A domain to be propagated for some rows of a block, and what came of it."""

    rows: NDArray[np.intp]
    consistent: BoolArray
    narrowed: Domain


def attempt(design: str, domains: Iterable[tuple[NDArray[np.intp], Domain]]) -> Iterator[Trial]:
    """Propagate many domains, each for the rows named, in as few passes as memory allows; in their order."""
    waiting: list[tuple[NDArray[np.intp], Domain]] = []
    size = 0
    for rows, domain in domains:
        waiting.append((rows, domain.take(rows)))
        size += len(rows)
        if size >= _BATCH:
            yield from _together(design, waiting)
            waiting, size = [], 0
    if waiting:
        yield from _together(design, waiting)


def _together(design: str, some: list[tuple[NDArray[np.intp], Domain]]) -> Iterator[Trial]:
    names = sorted({q for _, domain in some for q in domain.low})
    joined = Domain(
        {q: np.concatenate([d.low[q] if q in d.low else _unknown(q, d, -1) for _, d in some]) for q in names},
        {
            q: np.concatenate([d.high[q] if q in d.high else _unknown(q, d, 1) for _, d in some])
            for q in names
        },
    )
    consistent = ~propagate(design, joined)
    start = 0
    for rows, _ in some:
        part = slice(start, start + len(rows))
        yield Trial(rows, consistent[part], joined.take(part))
        start += len(rows)


def _unknown(quantity: str, like: Domain, side: int) -> FloatArray:
    """The end of a scalar's support for every row; only scalars are added to some domains of a block."""
    support = VOCABULARY[quantity]
    return np.full(len(next(iter(like.low.values()))), support.low if side < 0 else support.high)


def suspects(constraints: Constraints) -> tuple[list[Suspect], dict[str, BoolArray]]:
    """Every cell that could alone be at fault in some row, with the interval the others imply.

    Also, for each printed quantity, the rows that are consistent once all its cells are freed.
    """
    everywhere = np.arange(constraints.rows)
    names = list(dict.fromkeys(cell.quantity for cell in constraints.cells))
    together = [[cell for cell in constraints.cells if cell.quantity == name] for name in names]
    trials = attempt(constraints.design, ((everywhere, constraints.freed(cells)) for cells in together))
    found: dict[Cell, Suspect] = {}
    without: dict[str, BoolArray] = {}
    single: list[tuple[Cell, NDArray[np.intp]]] = []
    for name, cells, trial in zip(names, together, trials, strict=True):
        without[name] = trial.consistent
        if not trial.consistent.any():
            continue
        if len(cells) == 1:
            found[cells[0]] = Suspect(cells[0], trial.consistent, *interval_of(trial.narrowed, cells[0]))
        elif len(cells) <= MOST_GROUPS:
            single.extend((cell, np.flatnonzero(trial.consistent)) for cell in cells)
    apart = attempt(constraints.design, ((rows, constraints.freed([cell])) for cell, rows in single))
    for (cell, rows), trial in zip(single, apart, strict=True):
        if trial.consistent.any():
            frees = np.zeros(constraints.rows, dtype=bool)
            frees[rows] = trial.consistent
            low, high = np.full(constraints.rows, np.nan), np.full(constraints.rows, np.nan)
            low[rows], high[rows] = interval_of(trial.narrowed, cell)
            found[cell] = Suspect(cell, frees, low, high)
    return [found[cell] for cell in constraints.cells if cell in found], without


def interval_of(domain: Domain, cell: Cell) -> Interval:
    """(low, high) of a cell's quantity in a domain."""
    low, high = domain.pair(cell.quantity)
    return (low, high) if cell.column is None else (low[:, cell.column], high[:, cell.column])


def pairs(constraints: Constraints, rows: NDArray[np.intp]) -> list[tuple[Cell, Cell, NDArray[np.intp]]]:
    """Pairs of cells that together could be at fault, and in which of ``rows``; for rows no single cell frees."""
    by_name: dict[str, list[Cell]] = {}
    for cell in constraints.cells:
        by_name.setdefault(cell.quantity, []).append(cell)
    coarse = [
        (one, other)
        for one, other in combinations_with_replacement(by_name, 2)
        if one != other or len(by_name[one]) > 1
    ]
    trials = attempt(
        constraints.design, ((rows, constraints.freed(by_name[a] + by_name[b])) for a, b in coarse)
    )
    couples: list[tuple[Cell, Cell, NDArray[np.intp]]] = []
    for (one, other), trial in zip(coarse, trials, strict=True):
        left = rows[trial.consistent]
        few = len(by_name[one]) * len(by_name[other]) <= _MOST_COUPLES
        for i, first in enumerate(by_name[one]) if len(left) and few else ():
            rest = by_name[other] if one != other else by_name[one][i + 1 :]
            couples.extend((first, second, left) for second in rest)
    fine = attempt(constraints.design, ((left, constraints.freed([a, b])) for a, b, left in couples))
    return [
        (first, second, left[trial.consistent])
        for (first, second, left), trial in zip(couples, fine, strict=True)
        if trial.consistent.any()
    ]


def slack(constraints: Constraints) -> FloatArray:
    """Units in the last place by which all printed values must be widened before they agree, shape (rows,).

    Found from above, to a fifth of itself and to a sixteenth below 1; infinite where ``SLACK_LIMIT`` is not enough,
    as where only counts disagree.
    """
    rows = constraints.rows
    low, high = np.zeros(rows), np.full(rows, np.inf)
    _narrow(
        constraints, low, high, np.arange(rows), np.broadcast_to(_REACHES[:, None], (len(_REACHES), rows))
    )
    some = np.flatnonzero(np.isfinite(high))
    for _ in range(_REFINEMENTS if len(some) else 0):
        least, most = low[some], high[some]
        steps = _BETWEEN[:, None]
        even, by_ratio = least + (most - least) * steps, most**steps * np.maximum(least, 1) ** (1 - steps)
        _narrow(constraints, low, high, some, np.where(least >= 1, by_ratio, even))
    return high


def _narrow(
    constraints: Constraints, low: FloatArray, high: FloatArray, rows: NDArray[np.intp], reaches: FloatArray
) -> None:
    """Try rising ``reaches``, shape (tries, rows), in some rows, and move ``low`` and ``high`` to them in place."""
    some = constraints.take(rows)
    every = np.arange(len(rows))
    trials = attempt(constraints.design, ((every, some.widened(reach)) for reach in reaches))
    fits = np.array([trial.consistent for trial in trials])
    for reach, fit in zip(reaches[::-1], fits[::-1], strict=True):
        high[rows[fit]] = reach[fit]
    for reach, fit in zip(reaches, fits, strict=True):
        below = ~fit & (reach < high[rows])
        low[rows[below]] = reach[below]
