"""Means and standard deviations estimated from medians, quartiles and extremes, behind a skewness gate.

The estimates suppose normal scores, and a median is often reported because they are not. So each group's five
numbers are tested for skewness first (Shi et al. 2023), at the 5 % level; where the test rejects, there is no
estimate. A small group can be skewed without being seen to be: hence the named assumption.
"""

from __future__ import annotations

import numpy as np
from scipy import special

from extractor.catalogue.relation import ONE_FACTOR, FloatArray, Formula, Grade, Image, Interval, relation

_LUO = "Luo, Wan, Liu & Tong (2018), Statistical Methods in Medical Research 27, 1785-1805"
_WAN = "Wan, Wang, Liu & Tong (2014), BMC Medical Research Methodology 14:135"
_SHI = "Shi, Luo, Weng, Zeng, Lin, Chu & Tong (2020), Research Synthesis Methods 11, 641-654"
_NORMAL = "normal scores in each group; a group whose numbers are visibly skewed is refused"
_SMALLEST = 5
"""Below five scores the five numbers are the scores themselves, and the published fits do not reach there."""


def _z(share: FloatArray) -> FloatArray:
    return np.asarray(special.ndtri(share))


def _range_divisor(n: FloatArray) -> FloatArray:
    """Expected range of n normal scores in units of the SD, 2·z((n - .375)/(n + .25))."""
    return 2 * _z((n - 0.375) / (n + 0.25))


def _quartile_divisor(n: FloatArray) -> FloatArray:
    """Expected distance of the quartiles in units of the SD, 2·z((.75·n - .125)/(n + .25))."""
    return 2 * _z((0.75 * n - 0.125) / (n + 0.25))


def _asymmetry(low: FloatArray, median: FloatArray, high: FloatArray) -> FloatArray:
    """|low + high - 2·Mdn| / (high - low): 0 when symmetric, 1 when the median lies on an end, else NaN."""
    ordered = (low <= median) & (median <= high) & (low < high)
    return np.where(ordered, np.abs(low + high - 2 * median) / (high - low), np.nan)


def unskewed_by_range(
    n: FloatArray, minimum: FloatArray, median: FloatArray, maximum: FloatArray
) -> FloatArray:
    """Whether the skewness test of minimum, median and maximum passes; any shape, False where undefined.

    |a + b - 2·Mdn| / (b - a) stays below 1.01/ln(n + 9) + 2.43/(n + 1). Shi, Luo, Wan, Liu, Liu, Bian & Tong
    (2023), Statistical Methods in Medical Research 32, 1338-1360; constants from memory, and checked by
    simulation to reject about 5 % of normal samples.
    """
    with np.errstate(all="ignore"):
        critical = 1.01 / np.log(n + 9) + 2.43 / (n + 1)
        return np.asarray((n >= _SMALLEST) & (_asymmetry(minimum, median, maximum) < critical))


def unskewed_by_quartiles(n: FloatArray, q1: FloatArray, median: FloatArray, q3: FloatArray) -> FloatArray:
    """Whether the skewness test of the quartiles and the median passes; any shape, False where undefined.

    |q1 + q3 - 2·Mdn| / (q3 - q1) stays below 2.65/sqrt(n) - 6/n². Source as in ``unskewed_by_range``.
    """
    with np.errstate(all="ignore"):
        critical = 2.65 / np.sqrt(n) - 6 / n**2
        return np.asarray((n >= _SMALLEST) & (_asymmetry(q1, median, q3) < critical))


def unskewed_by_five(
    n: FloatArray,
    minimum: FloatArray,
    q1: FloatArray,
    median: FloatArray,
    q3: FloatArray,
    maximum: FloatArray,
) -> FloatArray:
    """Whether the skewness test of all five numbers passes; any shape, False where undefined.

    The greater of 2.65·ln(.6·n)/sqrt(n) · |a + b - 2·Mdn|/(b - a) and |q1 + q3 - 2·Mdn|/(q3 - q1) stays below
    3/sqrt(n) - 40/n³. Source as in ``unskewed_by_range``.
    """
    with np.errstate(all="ignore"):
        ends = 2.65 * np.log(0.6 * n) / np.sqrt(n) * _asymmetry(minimum, median, maximum)
        statistic = np.maximum(ends, _asymmetry(q1, median, q3))
        return np.asarray((n >= _SMALLEST) & (statistic < 3 / np.sqrt(n) - 40 / n**3))


# The estimates without the gate. For n of at least 5 they are monotone in every printed number, and the gated
# estimate is one of their values or none, so that their image holds the gated one.


def _mean_by_range(n: FloatArray, minimum: FloatArray, median: FloatArray, maximum: FloatArray) -> FloatArray:
    weight = 4 / (4 + n**0.75)
    return weight * (minimum + maximum) / 2 + (1 - weight) * median


def _mean_by_quartiles(n: FloatArray, q1: FloatArray, median: FloatArray, q3: FloatArray) -> FloatArray:
    weight = 0.7 + 0.39 / n
    return weight * (q1 + q3) / 2 + (1 - weight) * median


def _mean_by_five(
    n: FloatArray,
    minimum: FloatArray,
    q1: FloatArray,
    median: FloatArray,
    q3: FloatArray,
    maximum: FloatArray,
) -> FloatArray:
    ends = 2.2 / (2.2 + n**0.75)
    middle = 0.7 - 0.72 / n**0.55
    return ends * (minimum + maximum) / 2 + middle * (q1 + q3) / 2 + (1 - ends - middle) * median


def _sd_by_range(n: FloatArray, minimum: FloatArray, maximum: FloatArray) -> FloatArray:
    return (maximum - minimum) / _range_divisor(n)


def _sd_by_quartiles(n: FloatArray, q1: FloatArray, q3: FloatArray) -> FloatArray:
    return (q3 - q1) / _quartile_divisor(n)


def _sd_by_five(
    n: FloatArray, minimum: FloatArray, q1: FloatArray, q3: FloatArray, maximum: FloatArray
) -> FloatArray:
    ends = (1 + 0.07 * n**0.6) * _range_divisor(n)
    middle = (1 + 1 / (0.07 * n**0.6)) * _quartile_divisor(n)
    return (maximum - minimum) / ends + (q3 - q1) / middle


def _ungated(estimate: Formula, *signs: int) -> Image:
    """Image of an estimate that rises (+1) or falls (-1) with each printed number, or does not use it (0)."""

    def image(n: Interval, *numbers: Interval) -> Interval:
        used = [(pair, sign) for pair, sign in zip(numbers, signs, strict=True) if sign]
        low = estimate(n[0], *(pair[0] if sign > 0 else pair[1] for pair, sign in used))
        high = estimate(n[0], *(pair[1] if sign > 0 else pair[0] for pair, sign in used))
        return low, high

    return image


@relation(
    gives="mean",
    image=_ungated(_mean_by_range, 1, 1, 1),
    exact=["n"],
    designs=ONE_FACTOR,
    grade=Grade.APPROXIMATION,
    assumes=_NORMAL,
    source=_LUO,
    accuracy=1e-12,
)
def mean_from_range(
    n: FloatArray, minimum: FloatArray, median: FloatArray, maximum: FloatArray
) -> FloatArray:
    """M = w·(min + max)/2 + (1 - w)·Mdn, w = 4 / (4 + n^.75)."""
    passes = unskewed_by_range(n, minimum, median, maximum)
    return np.where(passes, _mean_by_range(n, minimum, median, maximum), np.nan)


@relation(
    gives="mean",
    image=_ungated(_mean_by_quartiles, 1, 1, 1),
    exact=["n"],
    designs=ONE_FACTOR,
    grade=Grade.APPROXIMATION,
    assumes=_NORMAL,
    source=_LUO,
    accuracy=1e-12,
)
def mean_from_quartiles(n: FloatArray, q1: FloatArray, median: FloatArray, q3: FloatArray) -> FloatArray:
    """M = w·(Q1 + Q3)/2 + (1 - w)·Mdn, w = .7 + .39/n."""
    passes = unskewed_by_quartiles(n, q1, median, q3)
    return np.where(passes, _mean_by_quartiles(n, q1, median, q3), np.nan)


@relation(
    gives="mean",
    image=_ungated(_mean_by_five, 1, 1, 1, 1, 1),
    exact=["n"],
    designs=ONE_FACTOR,
    grade=Grade.APPROXIMATION,
    assumes=_NORMAL,
    source=_LUO,
    accuracy=1e-12,
)
def mean_from_five_numbers(
    n: FloatArray,
    minimum: FloatArray,
    q1: FloatArray,
    median: FloatArray,
    q3: FloatArray,
    maximum: FloatArray,
) -> FloatArray:
    """M = w1·(min + max)/2 + w2·(Q1 + Q3)/2 + (1 - w1 - w2)·Mdn.

    w1 = 2.2/(2.2 + n^.75), w2 = .7 - .72/n^.55.
    """
    passes = unskewed_by_five(n, minimum, q1, median, q3, maximum)
    return np.where(passes, _mean_by_five(n, minimum, q1, median, q3, maximum), np.nan)


@relation(
    gives="sd",
    image=_ungated(_sd_by_range, -1, 0, 1),
    exact=["n"],
    designs=ONE_FACTOR,
    grade=Grade.APPROXIMATION,
    assumes=_NORMAL,
    source=_WAN,
    accuracy=1e-12,
)
def sd_from_range(n: FloatArray, minimum: FloatArray, median: FloatArray, maximum: FloatArray) -> FloatArray:
    """SD = (max - min) / (2·z((n - .375)/(n + .25)))."""
    passes = unskewed_by_range(n, minimum, median, maximum)
    return np.where(passes, _sd_by_range(n, minimum, maximum), np.nan)


@relation(
    gives="sd",
    image=_ungated(_sd_by_quartiles, -1, 0, 1),
    exact=["n"],
    designs=ONE_FACTOR,
    grade=Grade.APPROXIMATION,
    assumes=_NORMAL,
    source=_WAN,
    accuracy=1e-12,
)
def sd_from_quartiles(n: FloatArray, q1: FloatArray, median: FloatArray, q3: FloatArray) -> FloatArray:
    """SD = (Q3 - Q1) / (2·z((.75·n - .125)/(n + .25)))."""
    passes = unskewed_by_quartiles(n, q1, median, q3)
    return np.where(passes, _sd_by_quartiles(n, q1, q3), np.nan)


@relation(
    gives="sd",
    image=_ungated(_sd_by_five, -1, -1, 0, 1, 1),
    exact=["n"],
    designs=ONE_FACTOR,
    grade=Grade.APPROXIMATION,
    assumes=_NORMAL,
    source=_SHI,
    accuracy=1e-12,
)
def sd_from_five_numbers(
    n: FloatArray,
    minimum: FloatArray,
    q1: FloatArray,
    median: FloatArray,
    q3: FloatArray,
    maximum: FloatArray,
) -> FloatArray:
    """SD = (max - min)/θ1 + (Q3 - Q1)/θ2.

    θ1 = (2 + .14·n^.6)·z((n - .375)/(n + .25)), θ2 = (2 + 2/(.07·n^.6))·z((.75·n - .125)/(n + .25)).
    """
    passes = unskewed_by_five(n, minimum, q1, median, q3, maximum)
    return np.where(passes, _sd_by_five(n, minimum, q1, q3, maximum), np.nan)
