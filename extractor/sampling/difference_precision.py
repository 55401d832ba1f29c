"""Precision of d and g with each standardizer.

The letters d and g hide what was divided by; each standardizer has its own sampling distribution, and the formulas of
one are not interchangeable with those of another.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from scipy import special

from extractor.catalogue.pre_post import morris_factor
from extractor.catalogue.relation import (
    ANCOVA,
    FACTORIAL,
    MIXED,
    ONE_FACTOR,
    PAIRED,
    PRE_POST,
    WITHIN,
    FloatArray,
    Interval,
)
from extractor.sampling import moments
from extractor.sampling.noncentral import t_noncentrality_limits
from extractor.sampling.precision import EXACT, LARGE, enter_limits, enter_variance

_BORENSTEIN = "large sample: 1/ñ + d²/(2N), times J² for g (Borenstein et al. 2009)"
_HEDGES = "exact moments of the noncentral t at the estimate (Hedges 1981)"
_CUMMING = "noncentral t inverted (Cumming & Finch 2001)"
_NORMAL = "normal limits from the large-sample variance"
_PAIR = "large sample: 1/n + d²/(2n), d over the SD of differences, times J² for g (Borenstein et al. 2009)"
_MATCHED = "large sample: (1/n + d²/(2n))·2(1 - r), times J² for g (Borenstein et al. 2009)"
_BONETT = "large sample: d²(1 + r²)/(4(n - 1)) + 2(1 - r)/(n - 1), times J² for g (Bonett 2008)"
_ADJUSTED = "large sample: (1 - R²)/ñ + d²/(2N), times J² for g (Borenstein 2009)"
_RESTORED = "large sample: (MS_error/s²)/ñ + d²/(2N), s with the other terms put back, times J² for g"
_MORRIS = "Morris (2008), exact variance of d_ppc2 at the estimate"

Scale = Callable[..., FloatArray]
J = moments.small_sample_factor


def normal_limits(estimate: FloatArray, variance: FloatArray, level: float) -> Interval:
    """Limits of an estimate whose sampling distribution is taken as normal."""
    half = special.ndtri((1 + level) / 2) * np.sqrt(variance)
    return estimate - half, estimate + half


# Independent groups, standardised by the SD of the error term


def pooled_large(estimate: FloatArray, inverse_effective_n: FloatArray, n_total: FloatArray) -> FloatArray:
    """Variance of d."""
    return inverse_effective_n + estimate**2 / (2 * n_total)


def pooled_exact(estimate: FloatArray, inverse_effective_n: FloatArray, df_error: FloatArray) -> FloatArray:
    """Variance of d, delta estimated by g."""
    return moments.cohens_d_moments(estimate * J(df_error), inverse_effective_n, df_error)[1]


def pooled_g_large(
    estimate: FloatArray, inverse_effective_n: FloatArray, n_total: FloatArray, df_error: FloatArray
) -> FloatArray:
    """Variance of g."""
    factor = J(df_error)
    return factor**2 * pooled_large(estimate / factor, inverse_effective_n, n_total)


def pooled_g_exact(estimate: FloatArray, inverse_effective_n: FloatArray, df_error: FloatArray) -> FloatArray:
    """Variance of g."""
    return moments.hedges_g_variance(estimate, inverse_effective_n, df_error)


def pooled_limits(
    estimate: FloatArray, inverse_effective_n: FloatArray, df_error: FloatArray, level: float
) -> Interval:
    """Limits of delta from d."""
    scale = np.sqrt(inverse_effective_n)
    low, high = t_noncentrality_limits(estimate / scale, df_error, level)
    return low * scale, high * scale


def pooled_g_limits(
    estimate: FloatArray, inverse_effective_n: FloatArray, df_error: FloatArray, level: float
) -> Interval:
    """Limits of delta from g: d and g estimate the same delta."""
    return pooled_limits(estimate / J(df_error), inverse_effective_n, df_error, level)


for _designs, _standardizers in (
    (ONE_FACTOR, ("pooled", "unstated")),
    (PRE_POST | MIXED, ("difference",)),
    (FACTORIAL, ("residual",)),
):
    enter_variance("cohens_d", LARGE, _BORENSTEIN, _designs, pooled_large, _standardizers)
    enter_variance("cohens_d", EXACT, _HEDGES, _designs, pooled_exact, _standardizers)
    enter_limits("cohens_d", _CUMMING, _designs, pooled_limits, _standardizers)
    enter_variance("hedges_g", LARGE, _BORENSTEIN, _designs, pooled_g_large, _standardizers)
    enter_variance("hedges_g", EXACT, _HEDGES, _designs, pooled_g_exact, _standardizers)
    enter_limits("hedges_g", _CUMMING, _designs, pooled_g_limits, _standardizers)


# Pairs


def difference_large(estimate: FloatArray, n_total: FloatArray) -> FloatArray:
    """Variance of d over the SD of differences."""
    return 1 / n_total + estimate**2 / (2 * n_total)


def difference_exact(estimate: FloatArray, n_total: FloatArray) -> FloatArray:
    """The same by exact moments: a one-sample d with N - 1 df."""
    return moments.cohens_d_moments(estimate * J(n_total - 1), 1 / n_total, n_total - 1)[1]


def difference_limits(estimate: FloatArray, n_total: FloatArray, level: float) -> Interval:
    """Limits of d over the SD of differences."""
    low, high = t_noncentrality_limits(estimate * np.sqrt(n_total), n_total - 1, level)
    return low / np.sqrt(n_total), high / np.sqrt(n_total)


def matched_large(estimate: FloatArray, n_total: FloatArray, correlation: FloatArray) -> FloatArray:
    """Variance of d over the SD that differences and r imply."""
    return difference_large(estimate, n_total) * 2 * (1 - correlation)


def matched_limits(
    estimate: FloatArray, n_total: FloatArray, correlation: FloatArray, level: float
) -> Interval:
    """Limits of the same, r taken as known."""
    scale = np.sqrt(2 * (1 - correlation))
    low, high = difference_limits(estimate / scale, n_total, level)
    return low * scale, high * scale


def average_large(estimate: FloatArray, n_total: FloatArray, correlation: FloatArray) -> FloatArray:
    """Variance of d over the average SD."""
    df = n_total - 1
    return estimate**2 * (1 + correlation**2) / (4 * df) + 2 * (1 - correlation) / df


def average_limits(
    estimate: FloatArray, n_total: FloatArray, correlation: FloatArray, level: float
) -> Interval:
    """Limits of the same."""
    return normal_limits(estimate, average_large(estimate, n_total, correlation), level)


def _corrected_variance(of_d: Scale) -> Scale:
    """Variance of g = J·d from that of d, for functions of (d, N, r)."""

    def of_g(estimate: FloatArray, n_total: FloatArray, correlation: FloatArray) -> FloatArray:
        factor = J(n_total - 1)
        return factor**2 * of_d(estimate / factor, n_total, correlation)

    return of_g


def _corrected_limits(of_d: Callable[..., Interval]) -> Callable[..., Interval]:
    """Limits from g = J·d: d and g estimate the same quantity."""

    def of_g(estimate: FloatArray, n_total: FloatArray, correlation: FloatArray, level: float) -> Interval:
        return of_d(estimate / J(n_total - 1), n_total, correlation, level)

    return of_g


def difference_g_large(estimate: FloatArray, n_total: FloatArray) -> FloatArray:
    """Variance of g over the SD of differences."""
    factor = J(n_total - 1)
    return factor**2 * difference_large(estimate / factor, n_total)


def difference_g_exact(estimate: FloatArray, n_total: FloatArray) -> FloatArray:
    """The same by exact moments."""
    return moments.hedges_g_variance(estimate, 1 / n_total, n_total - 1)


def difference_g_limits(estimate: FloatArray, n_total: FloatArray, level: float) -> Interval:
    """Limits of d over the SD of differences, from g."""
    return difference_limits(estimate / J(n_total - 1), n_total, level)


enter_variance("cohens_d", LARGE, _PAIR, PAIRED, difference_large, ["difference"])
enter_variance("cohens_d", EXACT, _HEDGES, PAIRED, difference_exact, ["difference"])
enter_limits("cohens_d", _CUMMING, PAIRED, difference_limits, ["difference"])
enter_variance("hedges_g", LARGE, _PAIR, PAIRED, difference_g_large, ["difference"])
enter_variance("hedges_g", EXACT, _HEDGES, PAIRED, difference_g_exact, ["difference"])
enter_limits("hedges_g", _CUMMING, PAIRED, difference_g_limits, ["difference"])
for _large, _limits, _name, _standardizer in (
    (matched_large, matched_limits, _MATCHED, "within"),
    (average_large, average_limits, _BONETT, "average"),
):
    _source = _CUMMING if _standardizer == "within" else _NORMAL
    enter_variance("cohens_d", LARGE, _name, PAIRED | WITHIN, _large, [_standardizer])
    enter_variance("hedges_g", LARGE, _name, PAIRED | WITHIN, _corrected_variance(_large), [_standardizer])
    enter_limits("cohens_d", _source, PAIRED | WITHIN, _limits, [_standardizer])
    enter_limits("hedges_g", _source, PAIRED | WITHIN, _corrected_limits(_limits), [_standardizer])


# Restored standardizers


def adjusted_large(
    estimate: FloatArray, inverse_effective_n: FloatArray, n_total: FloatArray, covariate_r: FloatArray
) -> FloatArray:
    """Variance of d of a covariance-adjusted difference over the unadjusted SD."""
    return (1 - covariate_r**2) * inverse_effective_n + estimate**2 / (2 * n_total)


def adjusted_g_large(
    estimate: FloatArray,
    inverse_effective_n: FloatArray,
    n_total: FloatArray,
    covariate_r: FloatArray,
    df_error: FloatArray,
) -> FloatArray:
    """Variance of the corresponding g."""
    factor = J(df_error)
    return factor**2 * adjusted_large(estimate / factor, inverse_effective_n, n_total, covariate_r)


def adjusted_limits(
    estimate: FloatArray,
    inverse_effective_n: FloatArray,
    n_total: FloatArray,
    covariate_r: FloatArray,
    level: float,
) -> Interval:
    """Limits of d."""
    return normal_limits(estimate, adjusted_large(estimate, inverse_effective_n, n_total, covariate_r), level)


def restored_large(
    estimate: FloatArray, inverse_effective_n: FloatArray, n_total: FloatArray, error_share: FloatArray
) -> FloatArray:
    """Variance of d of a factorial main effect over the restored SD."""
    return error_share * inverse_effective_n + estimate**2 / (2 * n_total)


def restored_g_large(
    estimate: FloatArray,
    inverse_effective_n: FloatArray,
    n_total: FloatArray,
    error_share: FloatArray,
    df_standardizer: FloatArray,
) -> FloatArray:
    """Variance of the corresponding g."""
    factor = J(df_standardizer)
    return factor**2 * restored_large(estimate / factor, inverse_effective_n, n_total, error_share)


def restored_limits(
    estimate: FloatArray,
    inverse_effective_n: FloatArray,
    n_total: FloatArray,
    error_share: FloatArray,
    level: float,
) -> Interval:
    """Limits of d."""
    return normal_limits(estimate, restored_large(estimate, inverse_effective_n, n_total, error_share), level)


for _metric, _adjusted, _restored in (
    ("cohens_d", adjusted_large, restored_large),
    ("hedges_g", adjusted_g_large, restored_g_large),
):
    enter_variance(_metric, LARGE, _ADJUSTED, ANCOVA, _adjusted)
    enter_limits(_metric, _NORMAL, ANCOVA, adjusted_limits)
    enter_variance(_metric, LARGE, _RESTORED, FACTORIAL, _restored)
    enter_limits(_metric, _NORMAL, FACTORIAL, restored_limits)


# Pretest, posttest, control


def morris_g(
    estimate: FloatArray, inverse_effective_n: FloatArray, n_total: FloatArray, correlation: FloatArray
) -> FloatArray:
    """Variance of d_ppc2 with its small-sample factor, delta estimated by itself."""
    factor = morris_factor(n_total)
    twice = 2 * (1 - correlation) * inverse_effective_n
    df = n_total - 2
    return factor**2 * df / (df - 2) * (twice + estimate**2) - estimate**2


def morris_d(
    estimate: FloatArray, inverse_effective_n: FloatArray, n_total: FloatArray, correlation: FloatArray
) -> FloatArray:
    """Variance of d_ppc2 before its small-sample factor."""
    factor = morris_factor(n_total)
    return morris_g(estimate * factor, inverse_effective_n, n_total, correlation) / factor**2


def _morris_limits(variance: Scale) -> Callable[..., Interval]:
    def limits(
        estimate: FloatArray,
        inverse_effective_n: FloatArray,
        n_total: FloatArray,
        correlation: FloatArray,
        level: float,
    ) -> Interval:
        return normal_limits(estimate, variance(estimate, inverse_effective_n, n_total, correlation), level)

    return limits


for _metric, _morris in (("cohens_d", morris_d), ("hedges_g", morris_g)):
    enter_variance(_metric, EXACT, _MORRIS, PRE_POST, _morris, ["pre"])
    enter_limits(
        _metric,
        "normal limits from the variance of Morris (2008)",
        PRE_POST,
        _morris_limits(_morris),
        ["pre"],
    )
