"""Interval propagation: every relation narrows what it gives, for a whole block of rows, until nothing shrinks.

Each printed number starts as its rounding interval, each unknown as its support. A relation contracts the interval
of what it gives to the part its image allows (Davis 1987; Benhamou et al. 1999). No true value is ever cut away, so
an empty interval proves that the row's numbers cannot all be true under the stated design.

Every row goes its own way: a relation runs in the rows in which something it needs has changed since it last ran there,
and in no other, so that what becomes of a row does not depend on the rows beside it.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from extractor.catalogue.relation import FloatArray, Interval, Relation, catalogue
from extractor.quantities import VOCABULARY
from extractor.routes.intervals import image
from extractor.table import BoolArray

_NEAR = 1e-9
_SHRINKS = 1e-3
_ROUNDS = 200
_EVERY = slice(None)
_WORTH_DROPPING = 0.7
"""Rows that are done with are dropped when fewer than this share are left."""
_WORTH_CHOOSING = 0.5
"""A relation runs over chosen rows when they are fewer than this share, else over all and the others are kept."""

Clock = NDArray[np.int32]
Number = TypeVar("Number", np.float64, np.int32)


@dataclass(slots=True)
class Domain:
    """Intervals of the quantities of a block; arrays of shape (rows,) or (rows, groups).

    The numbers of one group lie side by side in memory (Fortran order), which makes sums over groups many times faster.
    """

    low: dict[str, FloatArray]
    high: dict[str, FloatArray]

    def copy(self) -> Domain:
        """A domain that can be narrowed without touching this one; the arrays are shared until replaced."""
        return Domain(dict(self.low), dict(self.high))

    def take(self, rows: NDArray[np.intp] | BoolArray | slice) -> Domain:
        """The rows named, in that order."""
        return Domain(
            {q: _at(ends, rows) for q, ends in self.low.items()},
            {q: _at(ends, rows) for q, ends in self.high.items()},
        )

    def pair(self, quantity: str) -> Interval:
        """(low, high)."""
        return self.low[quantity], self.high[quantity]


@lru_cache(maxsize=64)
def judges_of(design: str) -> tuple[Relation, ...]:
    """Relations that hold in a design and may contradict a printed number."""
    return tuple(r for _, r in sorted(catalogue().items()) if design in r.designs and r.judges)


@lru_cache(maxsize=64)
def _tiers(design: str) -> tuple[tuple[Relation, ...], ...]:
    """The relations in the order in which they settle: the cheap ones, special functions, and what only narrows.

    The last are costly, too, and seldom what empties a row.
    """
    new = [r for r in judges_of(design) if r.routes]
    narrowing = tuple(r for r in judges_of(design) if not r.routes)
    return tuple(r for r in new if not r.costly), tuple(r for r in new if r.costly), narrowing


@lru_cache(maxsize=1024)
def _equation(relation: Relation) -> tuple[Relation, ...]:
    """The relations that solve the same equation and need what this one gives."""
    return tuple(
        r
        for r in catalogue().values()
        if relation.gives in r.needs and {*r.needs, r.gives} == {*relation.needs, relation.gives}
    )


def propagate(design: str, domain: Domain, unknown: Mapping[str, BoolArray] | None = None) -> BoolArray:
    """Narrow ``domain`` in place to a fixpoint; True in the rows where an interval became empty, shape (rows,).

    A row is done with once it is empty; its intervals then mean nothing.

    Parameters
    ----------
    unknown : rows in which a quantity of the domain takes no part until something is known of it.
    """
    rows = len(next(iter(domain.low.values())))
    empty = np.zeros(rows, dtype=bool)
    for quantity in domain.low:
        empty |= _any(domain.low[quantity] > domain.high[quantity])
    work = _Work(domain, rows, unknown or {})
    left = np.arange(rows)
    tiers = _tiers(design)
    at = 0
    for _ in range(_ROUNDS * len(tiers)):
        moved = work.narrow(tiers[at], empty, left)
        alive = ~empty[left]
        if alive.sum() < _WORTH_DROPPING * len(left):
            left = left[alive]
            if not len(left):
                return empty
            work.keep(alive)
        # what a costly relation gave is passed on by the cheap ones first
        at = 0 if moved else at + 1
        if at == len(tiers):
            break
    if len(left) < rows:
        _spread(work.domain, domain, left, rows)
    return empty


class _Work:
    """A domain being narrowed, with when each row of it last changed and when each relation last ran there.

    changed : by quantity, shape (rows,); 0 where nothing is known of it yet. done : by relation.
    patchy : quantities of which nothing is known in some row.
    """

    def __init__(self, domain: Domain, rows: int, unknown: Mapping[str, BoolArray]) -> None:
        self.domain, self.rows = domain, rows
        self.changed: dict[str, Clock] = {q: np.ones(rows, dtype=np.int32) for q in domain.low}
        for quantity, where in unknown.items():
            self.changed[quantity][where] = 0
        self.patchy = {q for q in unknown if not self.changed[q].all()}
        self.given = {q: when > 0 for q, when in self.changed.items()}
        self.done: dict[str, Clock] = {}
        self.latest = dict.fromkeys(domain.low, 1)
        self.looked: dict[str, int] = {}
        self.own: set[str] = set()
        self.clock = 1

    def keep(self, rows: BoolArray) -> None:
        """Go on with some rows only."""
        self.domain = self.domain.take(rows)
        self.changed = {quantity: when[rows] for quantity, when in self.changed.items()}
        self.given = {quantity: known[rows] for quantity, known in self.given.items()}
        self.done = {name: when[rows] for name, when in self.done.items()}
        self.own = set(self.changed)
        self.rows = int(rows.sum())

    def narrow(self, tier: tuple[Relation, ...], empty: BoolArray, left: NDArray[np.intp]) -> bool:
        """Run each relation of a tier once; whether any changed anything. Marks rows that become empty.

        Parameters
        ----------
        empty, left : over all rows, and which of them are being worked on.
        """
        gone = empty[left]
        moved = False
        for relation in tier:
            rows = self._due(relation, gone)
            if rows is not None and self._run(relation, rows, gone):
                moved = True
        empty[left] = gone
        return moved

    def _due(self, relation: Relation, gone: BoolArray) -> NDArray[np.intp] | None:
        """The rows in which a relation has something new to say; None where there is none."""
        latest = self.latest
        if not all(need in latest for need in relation.needs):
            return None
        # most relations have nothing new in any row, which the latest change of each need says at once
        if max(latest[need] for need in relation.needs) <= self.looked.get(relation.name, 0):
            return None
        self.looked[relation.name] = self.clock
        last = self.done.get(relation.name)
        if last is None:
            last = self.done[relation.name] = np.zeros(self.rows, dtype=np.int32)
        due = (self._newest(relation) > last) & ~gone
        for need in self.patchy.intersection(relation.needs):
            due &= self.changed[need] > 0
        if relation.beside:
            due &= self._beside(relation)
        last[due] = self.clock
        rows = np.flatnonzero(due)
        return rows if len(rows) else None

    def _newest(self, relation: Relation, rows: NDArray[np.intp] | slice = _EVERY) -> Clock:
        """When something that a relation needs last changed, in some rows."""
        first, *others = (self.changed[need][rows] for need in relation.needs)
        for other in others:
            first = np.maximum(first, other)
        return first

    def _beside(self, relation: Relation) -> BoolArray:
        """Rows in which something was known from the start of what a relation is used beside."""
        known = [self.given[q] for q in relation.beside if q in self.given]
        return np.logical_or.reduce(known) if known else np.zeros(self.rows, dtype=bool)

    def _run(self, relation: Relation, rows: NDArray[np.intp], gone: BoolArray) -> bool:
        """Cut what a relation gives to its image in these rows; whether that mattered in any."""
        gives, domain = relation.gives, self.domain
        quantity = VOCABULARY[gives]
        whole = len(rows) >= _WORTH_CHOOSING * self.rows

        def chosen(values: NDArray[Number]) -> NDArray[Number]:
            return values if whole else _at(values, rows)

        inputs = {n: (chosen(domain.low[n]), chosen(domain.high[n])) for n in relation.needs}
        known = gives in domain.low
        old = (chosen(domain.low[gives]), chosen(domain.high[gives])) if known else None
        low, high = image(relation, inputs, old if known else _support(relation, inputs))
        if quantity.integer:
            low, high = np.ceil(low - _NEAR), np.floor(high + _NEAR)
        if old is None:
            old = np.full(low.shape, quantity.low), np.full(low.shape, quantity.high)
        new = np.maximum(old[0], low), np.minimum(old[1], high)
        shrunk = _shrunk(old, new)
        if not known or gives in self.patchy:
            # where nothing was known, anything tighter than the support matters
            first = chosen(self.changed[gives]) == 0 if known else np.ones(len(new[0]), dtype=bool)
            tighter = (new[0] > quantity.low) | (new[1] < quantity.high)
            shrunk |= (first if shrunk.ndim == 1 else first[:, None]) & tighter
        where = _any(shrunk)
        if whole:
            where = where.copy()
            mask = np.zeros(self.rows, dtype=bool)
            mask[rows] = True
            where &= mask
        if not where.any():
            return False
        if not known:
            shape = (self.rows, *low.shape[1:])
            domain.low[gives], domain.high[gives] = (
                np.full(shape, end, order="F") for end in (quantity.low, quantity.high)
            )
            self.changed[gives] = np.zeros(self.rows, dtype=np.int32)
            self.patchy.add(gives)
            self.own.add(gives)
        elif gives not in self.own:
            domain.low[gives], domain.high[gives] = (end.copy("K") for end in domain.pair(gives))
            self.own.add(gives)
        at = np.flatnonzero(where)
        into = at if whole else rows[at]
        domain.low[gives][into], domain.high[gives][into] = new[0][at], new[1][at]
        emptied = _any(new[0][at] > new[1][at])
        gone[into[emptied]] = True
        settled = [] if quantity.integer else list(self._settled(relation, into))
        self.clock += 1
        self.changed[gives][into] = self.clock
        self.latest[gives] = self.clock
        if gives in self.patchy and self.changed[gives].all():
            self.patchy.remove(gives)
        for last, there in settled:
            last[there] = self.clock
        return not bool(emptied.all())

    def _settled(
        self, relation: Relation, rows: NDArray[np.intp]
    ) -> Iterator[tuple[Clock, NDArray[np.intp]]]:
        """When relations of the same equation last ran, and in which rows they have nothing new to say.

        What is left of each of an equation's quantities goes with something left of the others. What the equation
        itself takes from one of them therefore takes no more from the others, unless it was made whole as well.
        """
        for other in _equation(relation):
            last = self.done.get(other.name)
            if last is not None:
                yield last, rows[self._newest(other, rows) <= last[rows]]


def _support(relation: Relation, inputs: dict[str, Interval]) -> Interval | None:
    """The support of what a relation gives, where its image asks what is known of it."""
    if not relation.narrows:
        return None
    quantity, rows = VOCABULARY[relation.gives], len(next(iter(inputs.values()))[0])
    return np.full(rows, quantity.low), np.full(rows, quantity.high)


def _shrunk(old: Interval, new: Interval) -> BoolArray:
    """Where an interval lost enough to matter: a share of its width or, where that is infinite, of the new end."""
    with np.errstate(invalid="ignore", over="ignore"):
        width = old[1] - old[0]
        below = above = _SHRINKS * width
        open_ended = np.isinf(width)
        if open_ended.any():
            below = np.where(open_ended, _SHRINKS * np.abs(new[0]), below)
            above = np.where(open_ended, _SHRINKS * np.abs(new[1]), above)
        shrunk = (new[0] > old[0] + below) | (new[1] < old[1] - above)
    return np.asarray(shrunk | (new[0] > new[1]))


def _spread(narrowed: Domain, domain: Domain, left: NDArray[np.intp], rows: int) -> None:
    """Put the rows that were left back among all rows."""
    for ends, into, side in ((narrowed.low, domain.low, "low"), (narrowed.high, domain.high, "high")):
        for quantity, values in ends.items():
            known = into.get(quantity)
            if known is None:
                support = getattr(VOCABULARY[quantity], side)
                whole = np.full((rows, *values.shape[1:]), support, order="F")
            else:
                whole = known.copy("K")
            whole[left] = values
            into[quantity] = whole


def _at(values: NDArray[Number], rows: NDArray[np.intp] | BoolArray | slice) -> NDArray[Number]:
    """Some rows; choosing from one group after the other keeps each group's numbers side by side."""
    return values[rows] if values.ndim == 1 else values.T[:, rows].T


def _any(rows: BoolArray) -> BoolArray:
    return np.asarray(rows.any(axis=-1)) if rows.ndim > 1 else rows
