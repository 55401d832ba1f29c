"""Can the printed numbers of a row hold together at all? Decided exactly, by other means than the audit's own.

In a one-way or two-group row with known group sizes everything printed is a condition on two numbers, x = SS_effect
and y = SS_error. The means reach an interval of x and the spreads one of y, and as different numbers decide the two,
together they reach the rectangle. F, t, p, d, g, r and the indices of explained variance fix the ratio x/y up to
rounding (cones through the origin), sums of squares and mean squares are strips, the total a diagonal strip. The row
is possible when the polygon they leave has a point; eliminating x (Fourier and Motzkin) leaves linear conditions on y.
With two groups the signs are kept by looking at each sign of M1 - M2 in turn.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from itertools import product

import numpy as np
from scipy import special, stats

from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray, Variable
from tests.evidence.printing import Printed, Sheet

MOST_PARTICIPANTS = 3000
"""A group size nobody printed is searched for up to this number."""

_LOOSE = 1e-12
Ends = tuple[float, float]
_UNKNOWN: Ends = (-np.inf, np.inf)


@dataclass(frozen=True)
class Row:
    """The rounding intervals of one printed row, all its groups coded."""

    groups: int
    ends: dict[Variable, Ends]

    def without(self, cell: Variable) -> Row:
        return Row(self.groups, {v: e for v, e in self.ends.items() if v != cell})

    def of(self, name: str, group: int | None = None) -> Ends:
        return self.ends.get((name, group), _UNKNOWN)


def row_of(sheet: Sheet, position: int) -> Row:
    """One row of a printed sheet that codes every group."""
    ends = {variable: _ends(variable[0], printed, position) for variable, printed in sheet.columns.items()}
    return Row(max(group or 0 for _, group in ends), ends)


def _ends(name: str, printed: Printed, position: int) -> Ends:
    quantity = VOCABULARY[name]
    value = float(printed.value[position])
    if printed.below is not None and printed.below[position]:
        return quantity.low, value
    if printed.above is not None and printed.above[position]:
        return value, quantity.high
    decimals = int(np.broadcast_to(printed.decimals, printed.value.shape)[position])
    half = 0.0 if quantity.exact else 0.5 * 10.0**-decimals
    return max(value - half, quantity.low), min(value + half, quantity.high)


def feasible(row: Row) -> bool:
    """Whether some data could print this row."""
    return bool(_holds(row, _sizes(row)).any())


def feasible_without(row: Row, cell: Variable) -> bool:
    """Whether some data could print the rest of the row, whatever this cell says."""
    return feasible(row.without(cell))


def _sizes(row: Row) -> FloatArray:
    """Every set of group sizes that agrees with the printed counts, shape (candidates, groups)."""
    printed = [row.of("n", j + 1) for j in range(row.groups)]
    sizes = np.array([[low if np.isfinite(low) else np.nan for low, _ in printed]])
    unknown = np.flatnonzero(np.isnan(sizes[0]))
    assert len(unknown) <= 1, "the sizes of at most one group may be unknown"
    if len(unknown):
        sizes = np.repeat(sizes, MOST_PARTICIPANTS, axis=0)
        sizes[:, unknown[0]] = np.arange(1, MOST_PARTICIPANTS + 1)
    total, k = sizes.sum(axis=1), float(row.groups)
    agrees = np.ones(len(sizes), dtype=bool)
    counts = {
        "n_total": total,
        "df_error": total - k,
        "df": total - k,
        "k_groups": np.full_like(total, k),
        "df_effect": np.full_like(total, k - 1),
    }
    for name, value in counts.items():
        low, high = row.of(name)
        agrees &= (value >= low) & (value <= high)
    return np.asarray(sizes[agrees & (total > k)])


def _holds(row: Row, n: FloatArray) -> BoolArray:
    if not len(n):
        return np.zeros(0, dtype=bool)
    low = np.array([row.of("mean", j + 1)[0] for j in range(row.groups)])
    high = np.array([row.of("mean", j + 1)[1] for j in range(row.groups)])
    errors = _error_range(row, n)
    if row.groups != 2:
        between = _least_between(n, low, high), _most_between(n, low, high)
        return _meets(row, n, between, errors, _ratios(row, n, None))
    difference = row.of("mean_difference")
    least, most = max(low[0] - high[1], difference[0]), min(high[0] - low[1], difference[1])
    share = n[:, 0] * n[:, 1] / n.sum(axis=1)
    found = np.zeros(len(n), dtype=bool)
    for sign in (1.0, -1.0):
        near, far = (max(least, 0.0), most) if sign > 0 else (max(-most, 0.0), -least)
        between = near**2 * share, far**2 * share
        ratios = _ratios(row, n, sign)
        # the tolerance is against rounding of the ends, as in 0.25 - 0.15
        open_side = near <= far + _LOOSE * max(abs(near), abs(least), abs(low).max(), abs(high).max())
        if open_side:
            found |= _meets(row, n, between, errors, ratios)
    return found


def _least_between(n: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """Least sum of n·(M - c)² over the box and over c.

    Between two neighbouring ends of intervals the sum is one parabola in c, so the least value lies at an end or at
    the vertex of a parabola inside its piece: all of them are looked at.
    """
    finite = np.isfinite(low) & np.isfinite(high)
    if finite.sum() < 2:
        return np.zeros(len(n))
    n, low, high = n[:, finite], low[finite], high[finite]
    ends = np.sort(np.concatenate([low, high]))
    middle = ((ends[1:] + ends[:-1]) / 2)[:, None]
    target = np.where(low > middle, low, high)
    pulls = (low > middle) | (high < middle)
    weight = n @ pulls.T
    with np.errstate(divide="ignore", invalid="ignore"):
        vertex = np.where(weight > 0, (n @ (pulls * target).T) / weight, middle[:, 0])
    centres = np.concatenate(
        [np.clip(vertex, ends[:-1], ends[1:]), np.broadcast_to(ends, (len(n), len(ends)))], axis=1
    )
    gap = np.maximum(np.maximum(low - centres[:, :, None], centres[:, :, None] - high), 0)
    return np.asarray((n[:, None, :] * gap**2).sum(axis=2).min(axis=1))


def _most_between(n: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """Greatest between-group sum of squares: convex in the means, so it lies on a corner of the box."""
    if not (np.isfinite(low) & np.isfinite(high)).all():
        return np.full(len(n), np.inf)
    corners = np.array(list(product(*zip(low, high, strict=True)))) - (low + high).mean() / 2
    total = n.sum(axis=1, keepdims=True)
    return np.asarray((n @ (corners**2).T - (n @ corners.T) ** 2 / total).max(axis=1))


def _error_range(row: Row, n: FloatArray) -> tuple[FloatArray, FloatArray]:
    low, high = np.zeros_like(n), np.zeros_like(n)
    for j in range(row.groups):
        sd, se, root = row.of("sd", j + 1), row.of("se", j + 1), np.sqrt(n[:, j])
        low[:, j] = np.maximum(np.maximum(sd[0], 0), np.maximum(se[0], 0) * root)
        high[:, j] = np.minimum(sd[1], se[1] * root)
    impossible = (low > high * (1 + _LOOSE)).any(axis=1)
    with np.errstate(invalid="ignore"):
        least = ((n - 1) * low**2).sum(axis=1)
        most = np.where(n > 1, (n - 1) * high**2, 0.0).sum(axis=1)
    return np.where(impossible, np.inf, least), np.where(impossible, -np.inf, most)


def _ratios(row: Row, n: FloatArray, sign: float | None) -> tuple[FloatArray, FloatArray]:
    """Interval of x/y left by everything that fixes a ratio; an interval upside down where a sign forbids all."""
    total, v1 = n.sum(axis=1), row.groups - 1.0
    v2 = total - row.groups
    per_f = v1 / v2
    low, high = np.zeros(len(n)), np.full(len(n), np.inf)

    def cut(least: FloatArray, most: FloatArray) -> None:
        nonlocal low, high
        low, high = np.fmax(low, least), np.fmin(high, most)

    with np.errstate(divide="ignore", invalid="ignore"):
        a, b = row.of("f_value")
        cut(a * per_f, b * per_f)
        a, b = row.of("p_value")
        if (a, b) != _UNKNOWN:
            cut(_f_of_p(b, v1, v2) * per_f, _f_of_p(a, v1, v2) * per_f)
        for name in ("eta_squared", "partial_eta_squared", "generalized_eta_squared"):
            a, b = row.of(name)
            if (a, b) != _UNKNOWN:
                cut(np.full_like(v2, a / (1 - a)), np.full_like(v2, b / (1 - b) if b < 1 else np.inf))
        for name in ("omega_squared", "partial_omega_squared"):
            a, b = row.of(name)
            if (a, b) != _UNKNOWN:
                cut((1 + _odds(a) * total / v1) * per_f, (1 + _odds(b) * total / v1) * per_f)
        a, b = row.of("epsilon_squared")
        if (a, b) != _UNKNOWN:
            # x/y = (1 + e·(v2/v1)) / (1 - e) · v1/v2
            cut((1 + a * v2 / v1) / (1 - a) * per_f, (1 + b * v2 / v1) / (1 - b) * per_f)
        a, b = row.of("cohens_f")
        cut(np.full_like(v2, max(a, 0.0) ** 2), np.full_like(v2, b**2))
        if sign is not None:
            for least, most in _signed(row, n, v2):
                least, most = (least, most) if sign > 0 else (-most, -least)
                barred = most < 0
                cut(
                    np.where(barred, np.inf, np.maximum(least, 0) ** 2 / v2),
                    np.where(barred, -np.inf, most**2 / v2),
                )
    return low, high


def _f_of_p(p: float, v1: float, v2: FloatArray) -> FloatArray:
    return np.array([_quantile(p, v1, float(v)) for v in v2])


@lru_cache(maxsize=20_000)
def _quantile(p: float, v1: float, v2: float) -> float:
    return float(stats.f.isf(p, v1, v2))


def _odds(index: float) -> float:
    return index / (1 - index) if index < 1 else np.inf


def _signed(row: Row, n: FloatArray, v2: FloatArray) -> list[tuple[FloatArray, FloatArray]]:
    """Intervals of t from each signed statistic of two groups."""
    root = np.sqrt(1 / n[:, 0] + 1 / n[:, 1])
    factor = np.exp(special.gammaln(v2 / 2) - special.gammaln((v2 - 1) / 2)) / np.sqrt(v2 / 2)
    found = []
    for name, to_t in (
        ("t_value", np.ones_like(v2)),
        ("cohens_d", 1 / root),
        ("hedges_g", 1 / (root * factor)),
    ):
        a, b = row.of(name)
        if (a, b) != _UNKNOWN:
            found.append((a * to_t, b * to_t))
    a, b = row.of("r")
    if (a, b) != _UNKNOWN:
        found.append((a / np.sqrt(1 - a**2) * np.sqrt(v2), b / np.sqrt(1 - b**2) * np.sqrt(v2)))
    return found


def _meets(
    row: Row,
    n: FloatArray,
    between: tuple[FloatArray, FloatArray],
    errors: tuple[FloatArray, FloatArray],
    ratios: tuple[FloatArray, FloatArray],
) -> BoolArray:
    """Whether rectangle, cone and strips have a point in common, per candidate."""
    v1 = row.groups - 1.0
    v2 = n.sum(axis=1) - row.groups
    x, y = [between[0], between[1]], [errors[0], errors[1]]
    for name, edge, factor in (
        ("ss_effect", x, 1.0),
        ("ms_effect", x, v1),
        ("ss_error", y, 1.0),
        ("ms_error", y, v2),
    ):
        low, high = row.of(name)
        edge[0], edge[1] = np.maximum(edge[0], low * factor), np.minimum(edge[1], high * factor)
    if row.groups == 2:
        low, high = row.of("se_difference")
        factor = v2 / (1 / n).sum(axis=1)
        y[0], y[1] = np.maximum(y[0], max(low, 0.0) ** 2 * factor), np.minimum(y[1], high**2 * factor)
    total = row.of("ss_total")
    zero, one = np.zeros_like(v2), np.ones_like(v2)
    # x >= a + b·y and x <= a + b·y
    above = [(x[0], zero), (zero, ratios[0]), (total[0] * one, -one)]
    below = [(x[1], zero), (zero, ratios[1]), (total[1] * one, -one)]
    least, most = y
    fits = (ratios[0] <= ratios[1] * (1 + _LOOSE)) & np.isfinite(ratios[0])
    with np.errstate(divide="ignore", invalid="ignore"):
        for a, b in above:
            for c, d in below:
                slope, needed = d - b, a - c
                needed = needed - _LOOSE * (np.abs(a) + np.abs(c))
                bound = np.where(np.isfinite(slope) & np.isfinite(needed), needed / slope, np.nan)
                least = np.where(slope > 0, np.fmax(least, bound), least)
                most = np.where(slope < 0, np.fmin(most, bound), most)
                fits &= ~((slope == 0) & (needed > 0))
    return np.asarray(fits & (least <= most * (1 + _LOOSE)))
