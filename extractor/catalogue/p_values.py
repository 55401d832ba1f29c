"""p values: exact ones inverted to F or t, bounds carried as bounds."""

from __future__ import annotations

import numpy as np
from scipy import special

from extractor.catalogue.branches import signed_image
from extractor.catalogue.relation import (
    SEVERAL_GROUPS,
    WITH_F,
    FloatArray,
    Interval,
    relation,
)

_TAILS = "definition of one- and two-tailed p values; a one-tailed p above .5 belongs to the other tail"
_F_TAIL = "upper tail of the F distribution, as the incomplete beta function (Abramowitz & Stegun 1964, 26.6)"
_T_TAIL = "two tails of Student's t, as the incomplete beta function (Abramowitz & Stegun 1964, 26.7)"
_ACCURACY = 1e-7


def _two_sided_image(p_value: Interval, tails: Interval) -> Interval:
    low, high = p_value
    peak = np.where((low <= 0.5) & (high >= 0.5), 1.0, np.where(high < 0.5, 2 * high, 2 * (1 - low)))
    one, known = tails[1] == 1, tails[0] == tails[1]
    least = np.where(one, 2 * np.minimum(low, 1 - high), low)
    most = np.where(one, peak, high)
    return np.where(known, least, 0.0), np.where(known, most, 1.0)


@relation(gives="p_two_sided", image=_two_sided_image, designs=WITH_F, source=_TAILS)
def two_sided_p(p_value: FloatArray, tails: FloatArray) -> FloatArray:
    """p = printed p, doubled where it is one-tailed."""
    return np.where(tails == 1, 2 * np.minimum(p_value, 1 - p_value), p_value)


def _printed_image(p_two_sided: Interval, tails: Interval) -> Interval:
    low, high = p_two_sided
    two, one = tails[0] == 2, tails[1] == 1
    # a one-tailed p lies in [low/2, high/2] or in the mirror image of that; the hull holds both
    return np.where(two, low, np.where(one, low / 2, 0.0)), np.where(
        two, high, np.where(one, 1 - low / 2, 1.0)
    )


@relation(gives="p_value", image=_printed_image, designs=WITH_F, source=_TAILS)
def printed_p(p_two_sided: FloatArray, tails: FloatArray) -> FloatArray:
    """printed p = p, halved where it is one-tailed."""
    return np.where(tails == 1, p_two_sided / 2, p_two_sided)


def _upper_tail(explained: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    """P(F ≥ f) from df1·f; through whichever of the beta variable and its complement keeps its digits."""
    explained, a, b = np.broadcast_arrays(explained, df_effect / 2, df_error / 2)
    share, rest = explained / (explained + df_error), df_error / (explained + df_error)
    rest = np.where(np.isposinf(explained), 0.0, rest)
    tail, near_one = np.empty(share.shape), share < 0.5
    tail[near_one] = special.betaincc(a[near_one], b[near_one], share[near_one])
    tail[~near_one] = special.betainc(b[~near_one], a[~near_one], rest[~near_one])
    return tail


@relation(
    gives="p_two_sided",
    falling=["f_value"],
    exact=["df_effect", "df_error"],
    designs=WITH_F,
    source=_F_TAIL,
    accuracy=_ACCURACY,
    costly=True,
    beside=["p_value", "adjusted_p"],
)
def p_from_f(f_value: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    """p = P(F(df1, df2) ≥ F)."""
    return _upper_tail(f_value * df_effect, df_effect, df_error)


def _f_at_upper_tail(p: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    # the beta quantile and its complement, so that neither a tiny p nor a p near 1 loses digits
    p, a, b = np.broadcast_arrays(p, df_effect / 2, df_error / 2)
    beta = special.betaincinv(b, a, p)
    odds, upper = (1 - beta) / beta, ~(beta < 0.5)
    complement = special.betainccinv(a[upper], b[upper], p[upper])
    odds[upper] = complement / (1 - complement)
    return np.asarray(odds * df_error / df_effect)


@relation(
    gives="f_value",
    falling=["p_two_sided"],
    exact=["df_effect", "df_error"],
    designs=WITH_F,
    source=_F_TAIL,
    accuracy=_ACCURACY,
    costly=True,
)
def f_from_p(p_two_sided: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    """F such that P(F(df1, df2) ≥ F) = p."""
    return _f_at_upper_tail(p_two_sided, df_effect, df_error)


def _contrast_p_image(t_value: Interval, df_error: Interval) -> Interval:
    low, high = t_value
    nearest = np.where((low <= 0) & (high >= 0), 0.0, np.minimum(np.abs(low), np.abs(high)))
    farthest = np.maximum(np.abs(low), np.abs(high))
    known = df_error[0] == df_error[1]
    return (
        np.where(known, contrast_p(farthest, df_error[0]), 0.0),
        np.where(known, contrast_p(nearest, df_error[0]), 1.0),
    )


@relation(
    gives="p_contrast",
    image=_contrast_p_image,
    designs=SEVERAL_GROUPS,
    source=_T_TAIL,
    accuracy=_ACCURACY,
    costly=True,
    beside=["p_contrast", "adjusted_p"],
)
def contrast_p(t_value: FloatArray, df_error: FloatArray) -> FloatArray:
    """p = P(|t(df2)| ≥ |t|)."""
    return _upper_tail(t_value**2, np.ones_like(df_error), df_error)


def _contrast_t_image(
    p_contrast: Interval, df_error: Interval, direction: Interval, current: Interval | None
) -> Interval:
    known = df_error[0] == df_error[1]
    one = np.ones_like(df_error[0])
    least = np.where(known, np.sqrt(_f_at_upper_tail(p_contrast[1], one, df_error[0])), 0.0)
    most = np.where(known, np.sqrt(_f_at_upper_tail(p_contrast[0], one, df_error[0])), np.inf)
    return signed_image((least, most), direction, current)


@relation(
    gives="t_value",
    image=_contrast_t_image,
    narrows=True,
    designs=SEVERAL_GROUPS,
    source=_T_TAIL,
    accuracy=_ACCURACY,
    costly=True,
)
def contrast_t_from_p(p_contrast: FloatArray, df_error: FloatArray, direction: FloatArray) -> FloatArray:
    """t = sign · (value with P(|t(df2)| ≥ t) = p)."""
    return direction * np.sqrt(_f_at_upper_tail(p_contrast, np.ones_like(df_error), df_error))
