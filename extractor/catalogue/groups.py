"""Sums of squares from group sizes, means and standard deviations; standard deviations from standard errors.

The between-group sum of squares over a box of rounded means has an exact image: its least value is a convex problem
in one unknown, the common centre, and its greatest value lies on a vertex of the box.
"""

from __future__ import annotations

import numpy as np
from scipy import special

from extractor.catalogue.relation import (
    BETWEEN,
    ONE_FACTOR,
    PAIRED,
    WITHIN,
    FloatArray,
    Grade,
    Interval,
    relation,
)

_SUMMARIES = "one-way analysis of variance from summaries (textbook identity)"
_SE = "standard error of a mean (textbook identity)"
_VERTEX_GROUPS = 10


def least_between(n: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """Least between-group sum of squares with each mean anywhere in [low, high].

    All arrays have shape (rows, groups); the result has shape (rows,). The sum of squares is the least over a centre c
    of Σ n·(M - c)², so the means are clamped to a common centre and the centre solves a piecewise linear equation.
    """
    left, right = high.min(axis=-1), low.max(axis=-1)
    if n.shape[1] <= 2:
        return np.asarray(np.where(left < right, n.prod(axis=-1) / n.sum(axis=-1) * (right - left) ** 2, 0.0))
    # the centre lies between the smallest upper end and the largest lower end, else the means can all be equal
    apart = left < right
    left, right = np.where(apart, left, 0.0), np.where(apart, right, 0.0)
    low, high = np.where(apart[:, None], low, 0.0), np.where(apart[:, None], high, 0.0)
    knots = np.sort(np.clip(np.concatenate([low, high], axis=-1), left[:, None], right[:, None]), axis=-1)

    def slope(at: FloatArray) -> FloatArray:
        return np.asarray((n * (np.maximum(at - high, 0) - np.maximum(low - at, 0))).sum(axis=-1))

    slopes = np.stack([slope(knots[:, [i]]) for i in range(knots.shape[1])], axis=-1)
    after = np.clip((slopes < 0).sum(axis=-1), 1, knots.shape[1] - 1)[:, None]
    start, end = (np.take_along_axis(knots, after - step, axis=-1)[:, 0] for step in (1, 0))
    rise0, rise1 = (np.take_along_axis(slopes, after - step, axis=-1)[:, 0] for step in (1, 0))
    flat = rise1 <= rise0
    centre = np.where(flat, start, start - rise0 * (end - start) / np.where(flat, 1.0, rise1 - rise0))[
        :, None
    ]
    gap = np.maximum(centre - high, 0) + np.maximum(low - centre, 0)
    return np.asarray((n * gap**2).sum(axis=-1))


def greatest_between(n: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """Greatest between-group sum of squares with each mean anywhere in [low, high]; shapes as in ``least_between``.

    Up to ten groups all vertices are visited, one mean changing ends at each step (a Gray code). Sorting the means
    and switching ends at a threshold is not enough: with unequal sizes it misses the maximum in some boxes. Above
    ten groups the result is an upper bound, Σ n·max((low - c)², (high - c)²) for one centre c.
    """
    groups = n.shape[1]
    middle = (low + high) / 2
    centre = ((n * middle).sum(axis=-1) / n.sum(axis=-1))[:, None]
    low, high = low - centre, high - centre
    if groups > _VERTEX_GROUPS:
        return np.asarray((n * np.maximum(low**2, high**2)).sum(axis=-1))
    total = n.sum(axis=-1)
    first, second = (n * low).sum(axis=-1), (n * low**2).sum(axis=-1)
    step_first, step_second = n * (high - low), n * (high**2 - low**2)
    best = second - first**2 / total
    for visit in range(1, 2**groups):
        changed = (visit & -visit).bit_length() - 1
        sign = 1.0 if ((visit ^ (visit >> 1)) >> changed) & 1 else -1.0
        first = first + sign * step_first[:, changed]
        second = second + sign * step_second[:, changed]
        best = np.maximum(best, second - first**2 / total)
    return np.asarray(best)


def _between_image(n: Interval, mean: Interval) -> Interval:
    # Σ n·(M - c)² grows with every n for each c, hence so does its least value over c
    low, high = mean
    finite = np.where(np.isfinite(low) & np.isfinite(high), np.maximum(np.abs(low), np.abs(high)), 0.0)
    error = 4 * np.finfo(float).eps * finite.max(axis=-1, keepdims=True)
    return least_between(n[0], low - error, high + error), greatest_between(n[1], low - error, high + error)


@relation(gives="ss_effect", image=_between_image, designs=BETWEEN | WITHIN, source=_SUMMARIES, accuracy=1e-9)
def effect_sum_from_means(n: FloatArray, mean: FloatArray) -> FloatArray:
    """SS_effect = Σ n_j·(M_j - GM)², GM = Σ n_j·M_j / N."""
    grand = ((n * mean).sum(axis=-1) / n.sum(axis=-1))[:, None]
    return np.asarray((n * (mean - grand) ** 2).sum(axis=-1))


@relation(gives="ss_error", rising=["n", "sd"], designs=BETWEEN, source=_SUMMARIES)
def error_sum_from_sds(n: FloatArray, sd: FloatArray) -> FloatArray:
    """SS_error = Σ (n_j - 1)·SD_j²."""
    return np.asarray(((n - 1) * sd**2).sum(axis=-1))


@relation(gives="sd", rising=["se", "n"], designs=ONE_FACTOR | PAIRED | WITHIN, source=_SE)
def sd_from_standard_error(se: FloatArray, n: FloatArray) -> FloatArray:
    """SD = SE · sqrt(n)."""
    return se * np.sqrt(n)


@relation(gives="se", rising=["sd"], falling=["n"], designs=ONE_FACTOR | PAIRED | WITHIN, source=_SE)
def standard_error_from_sd(sd: FloatArray, n: FloatArray) -> FloatArray:
    """SE = SD / sqrt(n)."""
    return sd / np.sqrt(n)


@relation(gives="n", rising=["sd"], falling=["se"], designs=ONE_FACTOR, source=_SE)
def size_from_standard_error(sd: FloatArray, se: FloatArray) -> FloatArray:
    """n = (SD / SE)²."""
    return (sd / se) ** 2


@relation(
    gives="sd",
    rising=["ci_high"],
    falling=["ci_low"],
    exact=["n", "confidence_level"],
    designs=ONE_FACTOR,
    grade=Grade.APPROXIMATION,
    assumes="confidence limits of each mean from Student's t with the group's own SD",
    source="Cochrane Handbook, ch. 6: SD = sqrt(n)·(U - L) / (2·t_crit(n - 1))",
)
def sd_from_limits(
    ci_low: FloatArray, ci_high: FloatArray, n: FloatArray, confidence_level: FloatArray
) -> FloatArray:
    """SD = sqrt(n)·(U - L) / (2·t_crit(n - 1))."""
    critical = special.stdtrit(n - 1, (1 + confidence_level[:, None]) / 2)
    return np.asarray(np.sqrt(n) * (ci_high - ci_low) / (2 * critical))
