"""Rows whose error df are right under another design than the coded one: a diagnosis, no accusation.

One data set has two F for one term when it can be analysed with two error terms, and a test may treat trials as
participants, or the same participants as independent groups. The df of such a test do not fit the coded design, but
they fit another one exactly, and so does the rest of the row; each reading below is tried on both.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from extractor.audit.constraints import Cell, Constraints
from extractor.audit.propagation import Domain, propagate
from extractor.audit.repair import Repair, free, repair_of
from extractor.table import BoolArray, FloatArray

_ERROR_DFS = ("df_error", "df")
_LEVELS = range(2, 10)
_GROUPS = range(2, 7)
_SIZES = ("n_total",)
_ALL_SIZES = ("n_total", "n")


@dataclass(frozen=True, slots=True)
class _Row:
    """What the readings start from, each of shape (rows,); NaN where it is not known.

    people : participants. error : the printed error df. effect : the df of the effect. equal : whether all groups
    are of one size, ``size``. joint : whether the term has several factors.
    """

    design: str
    people: FloatArray
    error: FloatArray
    effect: FloatArray
    size: FloatArray
    joint: bool


@dataclass(frozen=True, slots=True)
class _Reading:
    """Error df that another design would give.

    fits : rows whose printed df are these. share : how often a random df would be. design : that design, under whose
    relations the rest of the row must hold. without : sizes that mean something else there.
    """

    words: str
    fits: BoolArray
    share: FloatArray
    design: str
    without: tuple[str, ...]


def another_design(constraints: Constraints) -> Iterator[Repair]:
    """Error df of another stratum, a pooled error term, trials counted as participants, pairs taken as groups."""
    cells = [cell for cell in constraints.cells if cell.quantity in _ERROR_DFS]
    for cell in cells:
        row = _row_of(constraints, cell)
        for reading in _readings(row):
            holds = reading.fits & np.isfinite(row.error)
            if not holds.any():
                continue
            holds &= _coherent(constraints, reading)
            # the df alone, or with all that was computed with them
            test = [c for c in constraints.cells if c.column is None and c.quantity not in _KEPT]
            for freed in ([cell], [cell, *(c for c in test if c != cell)]):
                yield repair_of(
                    constraints,
                    "another design",
                    reading.words,
                    dict.fromkeys(freed, free(row.error)),
                    applies=holds,
                    share=reading.share,
                    design=reading.design,
                )


_KEPT = frozenset({"n_total", "n", "k_groups", "df_effect", "tails", "scale_items"})
"""What a test is not computed from but with."""


def _row_of(constraints: Constraints, cell: Cell) -> _Row:
    domain, rows = constraints.domain, constraints.rows
    low, high = domain.pair("n") if "n" in domain.low else (np.full((rows, 1), np.nan),) * 2
    even = (low == high).all(axis=-1) & (low == low[:, :1]).all(axis=-1) & (low.shape[1] > 1)
    repeated = constraints.design in ("within", "paired")
    counted = np.where(even, low[:, 0], np.nan) if repeated else low.sum(axis=-1)
    printed, effect, groups = (_exact(domain, name, rows) for name in ("n_total", "df_effect", "k_groups"))
    return _Row(
        constraints.design,
        np.where(np.isnan(printed), counted, printed),
        _only(*constraints.interval(cell)),
        np.where(np.isnan(effect), groups - 1, effect),
        np.where(even, low[:, 0], np.nan),
        "one_factor" not in domain.low,
    )


def _exact(domain: Domain, name: str, rows: int) -> FloatArray:
    return _only(*domain.pair(name)) if name in domain.low else np.full(rows, np.nan)


def _only(low: FloatArray, high: FloatArray) -> FloatArray:
    return np.where((low == high) & np.isfinite(low), low, np.nan)


def _coherent(constraints: Constraints, reading: _Reading) -> BoolArray:
    """Rows that hold together under the relations of the other design, the sizes that it reads otherwise set aside."""
    printed = constraints.domain
    kept = [name for name in printed.low if name not in reading.without]
    domain = Domain({q: printed.low[q] for q in kept}, {q: printed.high[q] for q in kept})
    return ~propagate(reading.design, domain)


def _readings(row: _Row) -> Iterator[_Reading]:
    with np.errstate(invalid="ignore", divide="ignore"):
        if row.design in ("within", "paired"):
            yield from _of_repeated(row)
        if row.design in ("one-way", "two-group"):
            yield from _of_groups(row)


def _equal(row: _Row, df: FloatArray, words: str, design: str, without: tuple[str, ...]) -> _Reading:
    share = 1 / np.maximum(1.5 * row.error, 1)
    return _Reading(words, row.error == df, share, design, without)


def _of_repeated(row: _Row) -> Iterator[_Reading]:
    """The row is coded as repeated measurements of N participants, so that df2 = df1·(N - 1) is expected."""
    expected = row.effect * (row.people - 1)
    if not row.joint:
        pairs = row.design == "paired"
        words = "df of independent groups, the same participants counted in each"
        other = "two-group" if pairs else "one-way"
        yield _equal(row, expected + row.people - 1, f"{words} (design {other})", other, _SIZES)
    if row.design == "within":
        for levels in _LEVELS:
            pooled = expected * levels / (levels - 1 if row.joint else 1)
            words = f"an error term pooled over the {levels} levels of another factor, as in a split plot"
            yield _pooled(row, pooled, f"{words} (design mixed)")
    for groups in _GROUPS:
        apart = row.effect * (row.people - groups) / (groups - 1 if row.joint else 1)
        words = f"the error term within participants of {groups} groups (design mixed)"
        yield _equal(row, apart, words, "mixed", _ALL_SIZES)
    between = np.where(row.effect > 1, row.people - row.effect - 1, np.nan)
    yield _equal(row, between, "the error term between participants (design mixed)", "mixed", _ALL_SIZES)
    trials = (row.error + row.effect) / (row.effect * row.people)
    yield _of_trials(row, trials, row.effect * row.people, "mixed")


def _pooled(row: _Row, df: FloatArray, words: str) -> _Reading:
    """As many readings as there are numbers of levels whose df are not beyond those a random one is drawn from."""
    least = row.effect * (row.people - 1)
    tried = np.clip(np.floor(1.5 * row.error / least) - 1, 1, len(_LEVELS))
    return _Reading(words, row.error == df, tried / np.maximum(1.5 * row.error, 1), "mixed", _ALL_SIZES)


def _of_groups(row: _Row) -> Iterator[_Reading]:
    """The row is coded as independent groups, so that df2 = N - k is expected."""
    words = "df of the same participants in every group"
    design = "paired" if row.design == "two-group" else "within"
    yield _equal(row, row.effect * (row.size - 1), f"{words} (design {design})", design, _SIZES)
    trials = (row.error + row.effect + 1) / row.people
    yield _of_trials(row, trials, row.people, row.design)


def _of_trials(row: _Row, trials: FloatArray, step: FloatArray, design: str) -> _Reading:
    """Each participant gave a whole number of scores, two at least, and every score was counted as a participant."""
    whole = (trials >= 2) & (trials == np.round(trials))
    return _Reading("trials counted as participants", whole, 1 / step, design, _ALL_SIZES)
