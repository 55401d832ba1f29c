"""Which cell could be at fault, what it should have said, and how far rounding would have to be stretched.

Freeing a cell lets its interval become its support. If the row is then consistent, that cell alone could be the
fault, and the interval it gets is what the others imply (minimal diagnoses: Reiter 1987; de Kleer & Williams 1987).
The true values survive every narrowing, so with one fault its cell is always among the suspects.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from extractor.audit.constraints import Cell, Constraints
from extractor.audit.propagation import Domain, propagate
from extractor.catalogue.relation import Interval
from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray

SLACK_LIMIT = 4096.0
"""Widening by more units in the last place than this is not looked for: the slack is infinite."""

_BATCH = 40_000


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


def suspects(constraints: Constraints) -> list[Suspect]:
    """Every cell that could alone be at fault in some row, with the interval the others imply."""
    everywhere = np.arange(constraints.rows)
    trials = attempt(
        constraints.design, ((everywhere, constraints.freed([cell])) for cell in constraints.cells)
    )
    found = []
    for cell, trial in zip(constraints.cells, trials, strict=True):
        if trial.consistent.any():
            low, high = interval_of(trial.narrowed, cell)
            found.append(Suspect(cell, trial.consistent, low, high))
    return found


def interval_of(domain: Domain, cell: Cell) -> Interval:
    """(low, high) of a cell's quantity in a domain."""
    low, high = domain.pair(cell.quantity)
    return (low, high) if cell.column is None else (low[:, cell.column], high[:, cell.column])


def pairs(constraints: Constraints, rows: NDArray[np.intp]) -> list[tuple[Cell, Cell, NDArray[np.intp]]]:
    """Pairs of cells that together could be at fault, and in which of ``rows``; for rows no single cell frees."""
    couples = list(combinations(constraints.cells, 2))
    trials = attempt(constraints.design, ((rows, constraints.freed(couple)) for couple in couples))
    return [
        (*couple, rows[trial.consistent])
        for couple, trial in zip(couples, trials, strict=True)
        if trial.consistent.any()
    ]


def slack(constraints: Constraints) -> FloatArray:
    """Units in the last place by which all printed values must be widened before they agree, shape (rows,).

    Found to about 5 %, from above; infinite where ``SLACK_LIMIT`` is not enough, as where only counts disagree.
    """
    rows = constraints.rows
    low, high = np.zeros(rows), np.full(rows, np.inf)
    reach = 1.0
    while reach <= SLACK_LIMIT:
        open_rows = np.flatnonzero(np.isinf(high))
        if not len(open_rows):
            break
        fits = _fits(constraints, open_rows, np.full(len(open_rows), reach))
        high[open_rows[fits]] = reach
        low[open_rows[~fits]] = reach
        reach *= 4.0
    while True:
        wide = np.flatnonzero(np.isfinite(high) & (high - low > np.maximum(0.05 * high, 0.02)))
        if not len(wide):
            return high
        middle = np.where(
            low[wide] >= 1, np.sqrt(np.maximum(low[wide], 1) * high[wide]), (low[wide] + high[wide]) / 2
        )
        fits = _fits(constraints, wide, middle)
        high[wide[fits]] = middle[fits]
        low[wide[~fits]] = middle[~fits]


def _fits(constraints: Constraints, rows: NDArray[np.intp], by: FloatArray) -> BoolArray:
    some = constraints.take(rows)
    return ~propagate(some.design, some.widened(by))
