"""What procedures for several comparisons print: an LSD or HSD, which says MS_error, and Bonferroni's p.

An LSD or HSD is one number for all pairs only when groups are of equal size; with unequal sizes nothing is
given. Other adjustments of p depend on the other p values of the family and are not undone.
"""

from __future__ import annotations

import warnings
from functools import lru_cache

import numpy as np
from scipy import special

from extractor.catalogue.relation import (
    BETWEEN,
    SEVERAL_GROUPS,
    TWO_GROUP,
    FloatArray,
    Interval,
    relation,
)

_LSD = "Fisher (1935), least significant difference t(1 - α/2; df2)·sqrt(2·MS_error/n)"
_HSD = "Tukey (1953), honestly significant difference q(1 - α; k, df2)·sqrt(MS_error/n)"
_BONFERRONI = "Bonferroni adjustment: the printed p is m·p, cut at 1 (Dunn 1961)"
_ONE_SIZE = 1e-9


def _common_size(n: FloatArray) -> FloatArray:
    """The size of the groups, NaN where they differ; shape (rows,)."""
    equal = (n.max(axis=-1) - n.min(axis=-1)) <= _ONE_SIZE
    return np.where(equal, n[:, 0], np.nan)


@lru_cache(maxsize=4096)
def _studentized_range(alpha: float, groups: float, df: float) -> float:
    """Upper quantile of the studentized range; NaN outside its definition or where the integral fails."""
    if not (0 < alpha < 1 and 2 <= groups < np.inf and 1 <= df < np.inf):
        return float("nan")
    from scipy import integrate, stats  # slow to import, and few sheets need them

    with warnings.catch_warnings():
        warnings.simplefilter("error", integrate.IntegrationWarning)
        try:
            return float(stats.studentized_range.isf(alpha, groups, df))
        except integrate.IntegrationWarning:
            return float("nan")


def _range_quantile(alpha: FloatArray, groups: FloatArray, df: FloatArray) -> FloatArray:
    """Upper quantiles of the studentized range, each distinct one computed once; shape (rows,)."""
    # the quantile is a slow double integral, and a sheet has few distinct designs
    cases, which = np.unique(np.stack([alpha, groups, df], axis=-1), axis=0, return_inverse=True)
    return np.array([_studentized_range(*case) for case in cases.tolist()])[which.ravel()]


@relation(
    gives="ms_error",
    rising=["lsd_value"],
    exact=["n", "df_error", "significance_level"],
    designs=BETWEEN,
    source=_LSD,
    accuracy=1e-9,
)
def mean_square_from_lsd(
    lsd_value: FloatArray, n: FloatArray, df_error: FloatArray, significance_level: FloatArray
) -> FloatArray:
    """MS_error = n·LSD² / (2·t_crit(df2)²)."""
    critical = special.stdtrit(df_error, 1 - significance_level / 2)
    return np.asarray(_common_size(n) * (lsd_value / critical) ** 2 / 2)


@relation(
    gives="lsd_value",
    rising=["ms_error"],
    exact=["n", "df_error", "significance_level"],
    designs=BETWEEN,
    source=_LSD,
    accuracy=1e-9,
)
def lsd_from_mean_square(
    ms_error: FloatArray, n: FloatArray, df_error: FloatArray, significance_level: FloatArray
) -> FloatArray:
    """LSD = t_crit(df2) · sqrt(2·MS_error / n)."""
    critical = special.stdtrit(df_error, 1 - significance_level / 2)
    return critical * np.sqrt(2 * ms_error / _common_size(n))


@relation(
    gives="ms_error",
    rising=["hsd_value"],
    exact=["n", "k_groups", "df_error", "significance_level"],
    designs=BETWEEN,
    source=_HSD,
    accuracy=1e-6,
)
def mean_square_from_hsd(
    hsd_value: FloatArray,
    n: FloatArray,
    k_groups: FloatArray,
    df_error: FloatArray,
    significance_level: FloatArray,
) -> FloatArray:
    """MS_error = n·HSD² / q_crit(k, df2)²."""
    return _common_size(n) * (hsd_value / _range_quantile(significance_level, k_groups, df_error)) ** 2


@relation(
    gives="hsd_value",
    rising=["ms_error"],
    exact=["n", "k_groups", "df_error", "significance_level"],
    designs=BETWEEN,
    source=_HSD,
    accuracy=1e-6,
)
def hsd_from_mean_square(
    ms_error: FloatArray,
    n: FloatArray,
    k_groups: FloatArray,
    df_error: FloatArray,
    significance_level: FloatArray,
) -> FloatArray:
    """HSD = q_crit(k, df2) · sqrt(MS_error / n)."""
    return _range_quantile(significance_level, k_groups, df_error) * np.sqrt(ms_error / _common_size(n))


def _divided(adjusted_p: FloatArray, comparisons: FloatArray) -> FloatArray:
    # a printed 1 may have been cut there: it says nothing but a lower bound
    return np.where(adjusted_p < 1, adjusted_p / comparisons, np.nan)


def _divided_image(adjusted_p: Interval, comparisons: Interval) -> Interval:
    low, high = adjusted_p[0] / comparisons[1], adjusted_p[1] / comparisons[0]
    return low, np.where(adjusted_p[1] < 1, high, 1.0)


@relation(gives="p_contrast", image=_divided_image, designs=SEVERAL_GROUPS, source=_BONFERRONI)
def contrast_p_from_bonferroni(adjusted_p: FloatArray, comparisons: FloatArray) -> FloatArray:
    """p = p_adj / m, for p_adj < 1."""
    return _divided(adjusted_p, comparisons)


@relation(gives="p_two_sided", image=_divided_image, designs=TWO_GROUP, source=_BONFERRONI)
def two_sided_p_from_bonferroni(adjusted_p: FloatArray, comparisons: FloatArray) -> FloatArray:
    """p = p_adj / m, for p_adj < 1."""
    return _divided(adjusted_p, comparisons)
