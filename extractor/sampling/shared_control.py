"""Precision of one of several comparisons with the same control group, whose participants are divided among them.

Dividing keeps participants from being counted more than once, and only partly removes the dependence of the
comparisons (Cochrane Handbook, ch. 23, 23.3.4; locator from memory). The effect itself keeps all participants.
"""

from __future__ import annotations

from extractor.catalogue.relation import TWO_GROUP, FloatArray, Interval
from extractor.sampling import association_precision
from extractor.sampling import difference_precision as undivided
from extractor.sampling.precision import EXACT, LARGE, enter_limits, enter_variance

_DIVIDED = "the control group divided among the comparisons (Cochrane Handbook, ch. 23)"
_WHERE = "control_comparisons"


def divided_large(estimate: FloatArray, inverse_divided_n: FloatArray, n_divided: FloatArray) -> FloatArray:
    """Variance of d."""
    return undivided.pooled_large(estimate, inverse_divided_n, n_divided)


def divided_exact(estimate: FloatArray, inverse_divided_n: FloatArray, df_error: FloatArray) -> FloatArray:
    """Variance of d, delta estimated by g."""
    return undivided.pooled_exact(estimate, inverse_divided_n, df_error)


def divided_g_large(
    estimate: FloatArray, inverse_divided_n: FloatArray, n_divided: FloatArray, df_error: FloatArray
) -> FloatArray:
    """Variance of g."""
    return undivided.pooled_g_large(estimate, inverse_divided_n, n_divided, df_error)


def divided_g_exact(estimate: FloatArray, inverse_divided_n: FloatArray, df_error: FloatArray) -> FloatArray:
    """Variance of g."""
    return undivided.pooled_g_exact(estimate, inverse_divided_n, df_error)


def divided_raw(estimate: FloatArray, inverse_divided_n: FloatArray, pooled_sd: FloatArray) -> FloatArray:
    """Variance of a mean difference."""
    return association_precision.raw_variance(estimate, pooled_sd * inverse_divided_n**0.5)


def divided_limits(
    estimate: FloatArray, inverse_divided_n: FloatArray, df_error: FloatArray, level: float
) -> Interval:
    """Limits of delta from d."""
    return undivided.pooled_limits(estimate, inverse_divided_n, df_error, level)


def divided_g_limits(
    estimate: FloatArray, inverse_divided_n: FloatArray, df_error: FloatArray, level: float
) -> Interval:
    """Limits of delta from g."""
    return undivided.pooled_g_limits(estimate, inverse_divided_n, df_error, level)


def divided_raw_limits(
    estimate: FloatArray,
    inverse_divided_n: FloatArray,
    pooled_sd: FloatArray,
    df_error: FloatArray,
    level: float,
) -> Interval:
    """Limits of a mean difference."""
    return association_precision.raw_limits(estimate, pooled_sd * inverse_divided_n**0.5, df_error, level)


for _metric, _large, _exact, _limits in (
    ("cohens_d", divided_large, divided_exact, divided_limits),
    ("hedges_g", divided_g_large, divided_g_exact, divided_g_limits),
):
    enter_variance(_metric, LARGE, f"large sample, {_DIVIDED}", TWO_GROUP, _large, where=_WHERE)
    enter_variance(_metric, EXACT, f"exact moments, {_DIVIDED}", TWO_GROUP, _exact, where=_WHERE)
    enter_limits(_metric, f"noncentral t, {_DIVIDED}", TWO_GROUP, _limits, where=_WHERE)
enter_variance(
    "mean_difference", EXACT, f"squared standard error, {_DIVIDED}", TWO_GROUP, divided_raw, where=_WHERE
)
enter_limits("mean_difference", f"Student's t, {_DIVIDED}", TWO_GROUP, divided_raw_limits, where=_WHERE)
