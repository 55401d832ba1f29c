"""Interval propagation: every relation narrows what it gives, for a whole block of rows, until nothing shrinks.

Each printed number starts as its rounding interval, each unknown as its support. A relation contracts the interval
of what it gives to the part its image allows (Davis 1987; Benhamou et al. 1999). No true value is ever cut away, so
an empty interval proves that the row's numbers cannot all be true under the stated design.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from extractor.catalogue.relation import FloatArray, Interval, Relation, catalogue
from extractor.quantities import VOCABULARY
from extractor.routes.intervals import image
from extractor.table import BoolArray

_NEAR = 1e-9
_SHRINKS = 1e-3
_ROUNDS = 40
_WORTH_DROPPING = 0.7
"""Rows that are done with are dropped when fewer than this share are left."""


@dataclass(slots=True)
class Domain:
    """Intervals of the quantities of a block; arrays of shape (rows,) or (rows, groups)."""

    low: dict[str, FloatArray]
    high: dict[str, FloatArray]

    def copy(self) -> Domain:
        """A domain that can be narrowed without touching this one; the arrays are shared until replaced."""
        return Domain(dict(self.low), dict(self.high))

    def take(self, rows: NDArray[np.intp] | BoolArray | slice) -> Domain:
        """The rows named, in that order."""
        return Domain({q: a[rows] for q, a in self.low.items()}, {q: a[rows] for q, a in self.high.items()})

    def pair(self, quantity: str) -> Interval:
        """(low, high)."""
        return self.low[quantity], self.high[quantity]


@lru_cache(maxsize=64)
def judges_of(design: str) -> tuple[Relation, ...]:
    """Relations that hold in a design and may contradict a printed number."""
    return tuple(r for _, r in sorted(catalogue().items()) if design in r.designs and r.judges)


@lru_cache(maxsize=64)
def _tiers(design: str) -> tuple[tuple[Relation, ...], tuple[Relation, ...]]:
    """The relations that give something new, and those that only narrow: costly, and seldom what empties a row."""
    judges = judges_of(design)
    return tuple(r for r in judges if r.routes), tuple(r for r in judges if not r.routes)


def propagate(design: str, domain: Domain) -> BoolArray:
    """Narrow ``domain`` in place to a fixpoint; True in the rows where an interval became empty, shape (rows,).

    A row is done with once it is empty; its intervals then mean nothing.
    """
    rows = len(next(iter(domain.low.values())))
    empty = np.zeros(rows, dtype=bool)
    for quantity in domain.low:
        empty |= _any(domain.low[quantity] > domain.high[quantity])
    work = _Work(design, domain)
    left = np.arange(rows)
    for _ in range(_ROUNDS):
        for tier in _tiers(design):
            gone = work.narrow(tier, empty[left])
            empty[left] |= gone
            alive = ~empty[left]
            if alive.sum() < _WORTH_DROPPING * len(left):
                left = left[alive]
                work.domain = work.domain.take(alive)
                if not len(left):
                    return empty
        if not work.moved:
            break
    if len(left) < rows:
        _spread(work.domain, domain, left, rows)
    return empty


class _Work:
    """A domain being narrowed, with what has changed since each relation last ran."""

    def __init__(self, design: str, domain: Domain) -> None:
        self.design, self.domain = design, domain
        self.version = dict.fromkeys(domain.low, 1)
        self.done: dict[str, int] = {}
        self.clock = 1
        self.moved = False

    def narrow(self, tier: tuple[Relation, ...], empty: BoolArray) -> BoolArray:
        """Run the relations of a tier until none of them changes anything; True in the rows that became empty."""
        empty = empty.copy()
        self.moved = False
        for _ in range(_ROUNDS):
            again = False
            for relation in tier:
                if any(need not in self.version for need in relation.needs):
                    continue
                if max(self.version[need] for need in relation.needs) <= self.done.get(relation.name, 0):
                    continue
                self.done[relation.name] = self.clock
                changed = _contract(relation, self.domain)
                if changed is None:
                    continue
                low, high = self.domain.pair(relation.gives)
                empty |= _any(low > high)
                if (changed & ~empty).any():
                    self.clock += 1
                    self.version[relation.gives] = self.clock
                    self.moved = again = True
            if not again:
                break
        return empty


def _spread(narrowed: Domain, domain: Domain, left: NDArray[np.intp], rows: int) -> None:
    """Put the rows that were left back among all rows."""
    for ends, into, side in ((narrowed.low, domain.low, "low"), (narrowed.high, domain.high, "high")):
        for quantity, values in ends.items():
            known = into.get(quantity)
            if known is None:
                support = getattr(VOCABULARY[quantity], side)
                whole = np.full((rows, *values.shape[1:]), support)
            else:
                whole = known.copy()
            whole[left] = values
            into[quantity] = whole


def _contract(relation: Relation, domain: Domain) -> BoolArray | None:
    """Cut what the relation gives to its image; True in the rows that shrank enough to matter, None if none did."""
    gives = relation.gives
    inputs = {need: domain.pair(need) for need in relation.needs}
    known = gives in domain.low
    low, high = image(relation, inputs, domain.pair(gives) if known else None)
    quantity = VOCABULARY[gives]
    if quantity.integer:
        low, high = np.ceil(low - _NEAR), np.floor(high + _NEAR)
    if not known:
        if not (np.any(low > quantity.low) or np.any(high < quantity.high)):
            return None
        domain.low[gives], domain.high[gives] = low, high
        return _any((low > quantity.low) | (high < quantity.high))
    old_low, old_high = domain.pair(gives)
    new_low, new_high = np.maximum(old_low, low), np.minimum(old_high, high)
    with np.errstate(invalid="ignore", over="ignore"):
        enough = _SHRINKS * (old_high - old_low)
        shrunk = (new_low > old_low + enough) | (new_high < old_high - enough)
        shrunk |= (np.isinf(old_low) & np.isfinite(new_low)) | (np.isinf(old_high) & np.isfinite(new_high))
    shrunk |= new_low > new_high
    if not shrunk.any():
        return None
    domain.low[gives], domain.high[gives] = new_low, new_high
    return _any(shrunk)


def _any(rows: BoolArray) -> BoolArray:
    return np.asarray(rows.any(axis=-1)) if rows.ndim > 1 else rows
