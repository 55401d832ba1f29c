"""Which repairs make a contradictory row consistent, and how often each would have done so by chance."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from extractor.audit.constraints import Cell, Constraints
from extractor.audit.diagnosis import Suspect, attempt, interval_of
from extractor.audit.explanations import repairs
from extractor.audit.repair import Repair
from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray

LIKELY = 0.5
"""Repairs that a random wrong value would fit more often than this explain nothing."""

_P_VALUES = frozenset({"p_value", "p_contrast"})
_LEAST_P = 1e-4


@dataclass(frozen=True, slots=True)
class Fit:
    """A repair after which a row is consistent, and how often it would have fitted by chance."""

    repair: Repair
    value: float
    chance: float

    @property
    def cells(self) -> tuple[Cell, ...]:
        """The cells the repair changes."""
        return self.repair.cells


@dataclass(frozen=True, slots=True)
class Candidate:
    """A repair and the rows it may help; low, high : what the rest implies for its gauge in those rows."""

    repair: Repair
    rows: NDArray[np.intp]
    low: FloatArray
    high: FloatArray


def fits_of(
    constraints: Constraints, single: list[Suspect], without: dict[str, BoolArray]
) -> list[list[Fit]]:
    """Repairs that make each row consistent, those a random value would hardly meet first.

    Parameters
    ----------
    single, without : as ``suspects`` gives them.
    """
    candidates = list(_candidates(constraints, single, without))
    trials = attempt(constraints.design, ((c.rows, c.repair.domain) for c in candidates))
    found: list[list[Fit]] = [[] for _ in range(constraints.rows)]
    for candidate, trial in zip(candidates, trials, strict=True):
        fitting = np.flatnonzero(trial.consistent)
        if not len(fitting):
            continue
        share = chance(constraints, candidate)
        for i in fitting:
            row = candidate.rows[i]
            found[row].append(Fit(candidate.repair, float(candidate.repair.value[row]), float(share[i])))
    return [_ranked(fits) for fits in found]


def _ranked(fits: list[Fit]) -> list[Fit]:
    """One fit per wording and cells, by chance; of one kind, what changes fewer cells goes first."""
    best: dict[tuple[str, tuple[Cell, ...]], Fit] = {}
    for fit in sorted(fits, key=lambda f: f.chance):
        best.setdefault((fit.repair.words, fit.cells), fit)
    kept = list(best.values())
    wider = [
        any(set(other.cells) < set(fit.cells) and other.repair.kind == fit.repair.kind for other in kept)
        for fit in kept
    ]
    order = sorted(range(len(kept)), key=lambda i: (wider[i], kept[i].chance))
    return [kept[i] for i in order]


def _candidates(
    constraints: Constraints, single: list[Suspect], without: dict[str, BoolArray]
) -> Iterator[Candidate]:
    """The repairs worth trying: a row stays contradictory unless freeing the repaired cells resolves it."""
    suspect = {s.cell: s for s in single}
    several: list[tuple[Repair, NDArray[np.intp]]] = []
    for repair in repairs(constraints):
        possible = repair.applies
        for name in {cell.quantity for cell in repair.cells}:
            if len({cell.quantity for cell in repair.cells}) == 1:
                possible = possible & without[name]
        if len(repair.cells) > 1 or repair.gauge != repair.cells[0].quantity:
            several.append((repair, np.flatnonzero(possible)))
            continue
        alone = suspect.get(repair.cells[0])
        if alone is None:
            continue
        low, high = interval_of(repair.domain, alone.cell)
        rows = np.flatnonzero(possible & alone.frees & (low <= alone.high) & (high >= alone.low))
        if len(rows):
            yield Candidate(repair, rows, alone.low[rows], alone.high[rows])
    yield from _released(constraints, several)


def _released(
    constraints: Constraints, several: list[tuple[Repair, NDArray[np.intp]]]
) -> Iterator[Candidate]:
    """Repairs of several cells, or measured elsewhere, in the rows that are consistent with those cells free."""
    wanted: dict[tuple[Cell, ...], BoolArray] = {}
    for repair, rows in several:
        wanted.setdefault(repair.cells, np.zeros(constraints.rows, dtype=bool))[rows] = True
    sets = [(cells, np.flatnonzero(where)) for cells, where in wanted.items() if where.any()]
    trials = attempt(constraints.design, ((rows, constraints.freed(cells)) for cells, rows in sets))
    for (cells, rows), trial in zip(sets, trials, strict=True):
        place = np.full(constraints.rows, -1)
        place[rows[trial.consistent]] = np.flatnonzero(trial.consistent)
        for repair, asked in several:
            if repair.cells == cells:
                helped = asked[place[asked] >= 0]
                if len(helped):
                    low, high = _gauged(trial.narrowed.low, repair), _gauged(trial.narrowed.high, repair)
                    yield Candidate(repair, helped, low[place[helped]], high[place[helped]])


def _gauged(ends: dict[str, FloatArray], repair: Repair) -> FloatArray:
    if repair.gauge not in ends:
        return np.full(len(next(iter(ends.values()))), np.nan)
    column = repair.cells[0].column
    return (
        ends[repair.gauge]
        if column is None or ends[repair.gauge].ndim == 1
        else ends[repair.gauge][:, column]
    )


def chance(constraints: Constraints, candidate: Candidate) -> FloatArray:
    """How often a random wrong value would also have been explained by this kind of slip, shape (candidate.rows,).

    A random wrong value of a positive quantity is taken as uniform on a log scale within a factor of ten of the
    printed one; of a p value, as uniform on a log scale down to .0001; of another proportion, as uniform on its
    range; of any other quantity, as uniform within twice the size of what is printed or implied in any group. The
    share of such values that one reading, as wide as its rounding, would bring to meet what the other numbers imply
    is multiplied by the number of readings tried.
    """
    repair, rows = candidate.repair, candidate.rows
    if repair.share is not None:
        return np.clip(repair.readings[rows] * repair.share[rows], 0.0, 1.0)
    quantity = VOCABULARY[repair.gauge]
    with np.errstate(all="ignore"):
        width = _width(repair)[rows]
        low, high = candidate.low - width / 2, candidate.high + width / 2
        printed = _printed(constraints, repair, candidate)
        size = np.max(np.abs(printed), axis=0)
        if quantity.exact:
            share = (np.floor(candidate.high) - np.ceil(candidate.low) + 1) / np.maximum(1.5 * size, 1)
        elif repair.gauge in _P_VALUES:
            share = np.log(np.maximum(high, _LEAST_P) / np.maximum(low, _LEAST_P)) / -np.log(_LEAST_P)
        elif quantity.low == 0 and quantity.high == np.inf:
            # an implied interval that is open to one side is cut where wrong values are hardly expected
            least, most = np.min(printed, axis=0), np.max(printed, axis=0)
            low = np.maximum(low, np.where(least < 10 * candidate.high, least, candidate.high) / 10)
            high = np.minimum(high, np.where(most > candidate.low / 10, most, candidate.low) * 10)
            share = np.log(high / low) / np.log(100)
        elif quantity.high <= 1:
            share = (high - low) / (1 - max(quantity.low, -1.0))
        else:
            implied = [np.abs(end) for end in (candidate.low, candidate.high)]
            size = np.max([size, *(np.where(np.isfinite(end), end, 0.0) for end in implied)], axis=0)
            share = (np.minimum(high, 2 * size) - np.maximum(low, -2 * size)) / (4 * size)
    share = np.where(np.isfinite(share), share, 1.0)
    return np.clip(repair.readings[rows] * share, 0.0, 1.0)


def _width(repair: Repair) -> FloatArray:
    """Width of the repaired reading where it is one number and measures itself, else 0."""
    name, column = repair.gauge, repair.cells[0].column
    if len(repair.cells) > 1 or name not in repair.domain.low:
        return np.zeros(len(repair.applies))
    low, high = repair.domain.pair(name)
    if low.ndim > 1:
        low, high = low[:, column or 0], high[:, column or 0]
    return np.where(np.isfinite(high - low), high - low, 0.0)


def _printed(constraints: Constraints, repair: Repair, candidate: Candidate) -> FloatArray:
    """What the gauge says as printed, in each group where it has groups; else the middle of what is implied."""
    if repair.gauge not in constraints.domain.low:
        return np.asarray((candidate.low + candidate.high) / 2)[None]
    low, high = (end[candidate.rows] for end in constraints.domain.pair(repair.gauge))
    values = (low + high) / 2
    if values.ndim == 1:
        return np.asarray(values)[None]
    # a single cell of a positive quantity is measured against itself, a mean against all means
    if VOCABULARY[repair.gauge].low >= 0 and repair.cells[0].column is not None:
        return np.asarray(values[:, repair.cells[0].column])[None]
    return np.asarray(values.T)
