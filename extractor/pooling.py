"""A glance at the pooled result: how far findings, grades and single rows move it. A check, no synthesis.

Effects y_i with known sampling variances v_i are taken as y_i ~ N(mu, v_i + tau²). tau² is estimated by
restricted maximum likelihood (REML; Harville 1977, Raudenbush 2009); mu is the mean with weights
1 / (v_i + tau²), and its interval is that of Hartung & Knapp (2001).
"""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy import stats

from extractor.quantities import VOCABULARY, is_signed
from extractor.table import BoolArray, FloatArray

MOST = 1_500
"""Rows above which no row is left out in turn: the work grows with the square of the rows."""

_GRID = 80


@dataclass(frozen=True, slots=True)
class Pooled:
    """A random-effects mean.

    count : effects pooled. low, high : Hartung-Knapp interval; NaN for a single effect.
    tau_squared : variance between effects; 0 for a single one.
    """

    count: int
    mean: float
    standard_error: float
    low: float
    high: float
    tau_squared: float


@dataclass(frozen=True, slots=True)
class Line:
    """One line of the glance: the mean of the rows that are left when some are left out."""

    what: str
    left_out: int
    pooled: Pooled | None


@dataclass(frozen=True, slots=True)
class Glance:
    """The pooled result of one outcome.

    lines : all rows, then without rows of each kind of doubt.
    mover : the row whose absence moves the mean most, and the mean without it; None with fewer than three rows,
        or too many.
    bounded, without_variance : rows that cannot be pooled.
    warnings : why even this glance may mislead.
    """

    outcome: str
    lines: tuple[Line, ...]
    mover: tuple[int, float] | None
    bounded: int
    without_variance: int
    warnings: tuple[str, ...] = field(default=())


def tau_squared(
    estimates: FloatArray, variances: FloatArray, kept: BoolArray | None = None, halvings: int = 60
) -> FloatArray:
    """REML estimate of the variance between effects.

    The restricted likelihood is looked at on a grid over the whole range tau² can have, since it may have
    several maxima, and the highest is refined by halving on the sign of its derivative.

    Parameters
    ----------
    estimates, variances : shape (effects,); variances above 0.
    kept : shape (sets, effects); which effects belong to each set. By default one set of all.
    halvings : of an interval whose ends differ by 60 %.

    Returns
    -------
    tau², shape (sets,); 0 for a set of one effect.
    """
    sets = np.ones((1, len(estimates))) if kept is None else kept.astype(float)
    # beyond this no set has its maximum: tau² cannot exceed the spread of the effects by much
    most = 4 * float(np.ptp(estimates)) ** 2 + 1e-12 * float(variances.max())
    grid = np.concatenate([[0.0], np.geomspace(1e-8 * most, most, _GRID)])
    centred = estimates - estimates.mean()
    best = np.stack([_likelihood(at, centred, variances, sets) for at in grid]).argmax(axis=0)
    low, high = grid[np.maximum(best - 1, 0)], grid[np.minimum(best + 1, _GRID)]
    for _ in range(halvings):
        middle = (low + high) / 2
        rising = _slope(middle, centred, variances, sets) > 0
        low, high = np.where(rising, middle, low), np.where(rising, high, middle)
    return np.asarray(np.where(sets.sum(axis=1) > 1, low, 0.0))


def _likelihood(tau: float, centred: FloatArray, variances: FloatArray, sets: FloatArray) -> FloatArray:
    """Twice the restricted log-likelihood of each set at one tau², but for a constant."""
    weights = 1 / (variances + tau)
    terms = np.stack([weights, weights * centred, weights * centred**2, -np.log(weights)])
    total, first, second, spread = terms @ sets.T
    return np.asarray(-(spread + np.log(total) + second - first**2 / total))


def _slope(tau: FloatArray, centred: FloatArray, variances: FloatArray, sets: FloatArray) -> FloatArray:
    """Derivative of ``_likelihood`` by tau², each set at its own."""
    weights = sets / (variances + tau[:, None])
    total, squared = weights.sum(axis=1), weights**2
    means = (weights @ centred) / total
    squares = squared @ centred**2 - 2 * means * (squared @ centred) + means**2 * squared.sum(axis=1)
    return np.asarray(squares - total + squared.sum(axis=1) / total)


def combine(estimates: FloatArray, variances: FloatArray, tau: float, level: float = 0.95) -> Pooled:
    """The mean with weights 1 / (v + tau²) and its Hartung-Knapp interval, for a given tau²."""
    weights = 1 / (variances + tau)
    count, total = len(estimates), float(weights.sum())
    mean = float(weights @ estimates) / total
    if count < 2:
        return Pooled(count, mean, float(np.sqrt(1 / total)), np.nan, np.nan, tau)
    error = float(np.sqrt((weights * (estimates - mean) ** 2).sum() / ((count - 1) * total)))
    reach = float(stats.t.ppf((1 + level) / 2, count - 1)) * error
    return Pooled(count, mean, error, mean - reach, mean + reach, tau)


def pool(estimates: FloatArray, variances: FloatArray, level: float = 0.95) -> Pooled:
    """Random-effects mean of effects with their sampling variances, each of shape (effects,).

    Raises
    ------
    ValueError
        without effects, or where one is not finite or a variance not above 0.
    """
    if not len(estimates) or not (np.isfinite(estimates).all() and np.isfinite(variances).all()):
        raise ValueError("only finite effects with finite variances can be pooled, and at least one")
    if not (variances > 0).all():
        raise ValueError("a sampling variance must be above 0")
    return combine(estimates, variances, float(tau_squared(estimates, variances)[0]), level)


def leave_one_out(estimates: FloatArray, variances: FloatArray) -> FloatArray:
    """The random-effects mean without each effect in turn, tau² estimated anew: shape (effects,)."""
    sets = ~np.eye(len(estimates), dtype=bool)
    tau = tau_squared(estimates, variances, sets, halvings=24)
    weights = sets / (variances + tau[:, None])
    return np.asarray((weights @ estimates) / weights.sum(axis=1))


def glance(
    effects: pd.DataFrame, doubted: Collection[int], designs: NDArray[np.object_], level: float = 0.95
) -> list[Glance]:
    """The glance for every outcome, in the order the outcomes first appear.

    Parameters
    ----------
    effects : an effect table.
    doubted : row numbers with a finding.
    designs : design of each row, in the table's order.
    """
    found = []
    for outcome in dict.fromkeys(effects["outcome"].astype(str)):
        mine = (effects["outcome"].astype(str) == outcome).to_numpy()
        found.append(_of_outcome(outcome, effects[mine], doubted, designs[mine], level))
    return found


def _of_outcome(
    outcome: str,
    effects: pd.DataFrame,
    doubted: Collection[int],
    designs: NDArray[np.object_],
    level: float,
) -> Glance:
    converted = (effects["status"] == "converted").to_numpy()
    usable = converted & (effects["variance"].to_numpy(dtype=float) > 0)
    estimates = effects["estimate"].to_numpy(dtype=float)[usable]
    variances = effects["variance"].to_numpy(dtype=float)[usable]
    rows = effects["row"].to_numpy()[usable]
    grades = effects["grade"].to_numpy(dtype=object)[usable]
    questioned = np.isin(rows, list(doubted))
    assumed = grades == "assumption"
    low = assumed | (grades == "approximation")

    def line(what: str, out: BoolArray) -> Line:
        kept = ~out
        pooled = pool(estimates[kept], variances[kept], level) if kept.any() else None
        return Line(what, int(out.sum()), pooled)

    lines = [line("all rows with an estimate and a variance", np.zeros(len(rows), dtype=bool))]
    doubts = [
        ("without rows that carry findings", questioned),
        ("without rows that rest on assumptions", assumed),
        ("without rows that rest on assumptions or approximations", low),
        ("without any of these", questioned | low),
    ]
    for at, (what, out) in enumerate(doubts):
        # a line that leaves out the same rows as one before it says nothing new
        if out.any() and not any(np.array_equal(out, other) for _, other in doubts[:at]):
            lines.append(line(what, out))
    warnings = _warnings(effects[usable], designs[usable])
    whole = lines[0].pooled
    if whole is not None and whole.count > 1 and whole.standard_error < float((1 / variances).sum()) ** -0.5:
        warnings.append(
            "the effects are more alike than their sampling variances lead one to expect: the interval is narrower "
            "than those variances alone would make it"
        )
    return Glance(
        outcome,
        tuple(lines),
        _mover(rows, estimates, variances, whole),
        int((effects["status"] == "bounded").sum()),
        int((converted & ~usable).sum()),
        tuple(warnings),
    )


def _mover(
    rows: FloatArray, estimates: FloatArray, variances: FloatArray, whole: Pooled | None
) -> tuple[int, float] | None:
    if whole is None or not 3 <= len(rows) <= MOST:
        return None
    means = leave_one_out(estimates, variances)
    most = int(np.abs(means - whole.mean).argmax())
    return int(rows[most]), float(means[most])


_REPEATED = frozenset({"within", "paired", "mixed"})


def _warnings(effects: pd.DataFrame, designs: NDArray[np.object_]) -> list[str]:
    """Why the rows should not be pooled as they stand."""
    if effects.empty:
        return []
    said = []
    metric = str(effects["metric"].iloc[0])
    symbol = VOCABULARY[metric].symbol
    if not is_signed(metric):
        said.append(
            f"{symbol} has no direction: effects in opposite directions add up, and pooled it is biased upward; "
            "its variance depends on the estimate, so that small estimates weigh too much"
        )
    repeated = np.isin(designs.astype(str), list(_REPEATED))
    if not is_signed(metric) and repeated.any() and not repeated.all():
        said.append(f"{symbol} of within-participant and of between-participant designs do not mix")
    standardizers = sorted(set(effects["standardizer"].astype(str)) - {""})
    if len(standardizers) > 1:
        said.append(f"the effects are divided by unlike standard deviations: {', '.join(standardizers)}")
    studies = effects["study"].astype(str)
    again = studies[studies != ""].duplicated()
    if again.any():
        said.append("some studies give several rows; rows of one sample are not independent evidence")
    return said
