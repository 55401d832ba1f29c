"""Precision of r, Fisher's z, log odds ratios and raw differences."""

from __future__ import annotations

import numpy as np
from scipy import special

from extractor.catalogue.relation import ANCOVA, ONE_FACTOR, PAIRED, TWO_GROUP, FloatArray, Interval
from extractor.sampling.difference_precision import normal_limits, pooled_large, pooled_limits
from extractor.sampling.precision import EXACT, LARGE, enter_limits, enter_variance

_FISHER = "Fisher (1921): normal limits of z"


def r_large(estimate: FloatArray, n_total: FloatArray) -> FloatArray:
    """Variance of r."""
    return (1 - estimate**2) ** 2 / (n_total - 1)


def z_large(estimate: FloatArray, n_total: FloatArray) -> FloatArray:
    """Variance of Fisher's z."""
    return np.where(np.isnan(estimate), np.nan, 1 / (n_total - 3))


def z_limits(estimate: FloatArray, n_total: FloatArray, level: float) -> Interval:
    """Limits of Fisher's z."""
    return normal_limits(estimate, 1 / (n_total - 3), level)


def r_limits(estimate: FloatArray, n_total: FloatArray, level: float) -> Interval:
    """Limits of r."""
    low, high = z_limits(np.arctanh(estimate), n_total, level)
    return np.tanh(low), np.tanh(high)


_LOGISTIC = float(np.pi / np.sqrt(3))


def log_odds_large(estimate: FloatArray, inverse_effective_n: FloatArray, n_total: FloatArray) -> FloatArray:
    """Variance of a log odds ratio that stands for d."""
    return pooled_large(estimate / _LOGISTIC, inverse_effective_n, n_total) * _LOGISTIC**2


def log_odds_limits(
    estimate: FloatArray, inverse_effective_n: FloatArray, df_error: FloatArray, level: float
) -> Interval:
    """Limits of the same."""
    low, high = pooled_limits(estimate / _LOGISTIC, inverse_effective_n, df_error, level)
    return low * _LOGISTIC, high * _LOGISTIC


def raw_variance(estimate: FloatArray, se_difference: FloatArray) -> FloatArray:
    """Variance of a mean difference."""
    return np.where(np.isnan(estimate), np.nan, se_difference**2)


def raw_limits(
    estimate: FloatArray, se_difference: FloatArray, df_error: FloatArray, level: float
) -> Interval:
    """Limits of a mean difference."""
    half = special.stdtrit(df_error, (1 + level) / 2) * se_difference
    return estimate - half, estimate + half


enter_variance("r", LARGE, "large sample: (1 - r²)² / (N - 1) (Borenstein et al. 2009)", TWO_GROUP, r_large)
enter_limits("r", f"{_FISHER}, transformed back", TWO_GROUP, r_limits)
enter_variance("fisher_z", LARGE, "large sample: 1 / (N - 3) (Fisher 1921)", TWO_GROUP, z_large)
enter_limits("fisher_z", _FISHER, TWO_GROUP, z_limits)


def printed_log_odds_variance(estimate: FloatArray, se_log_odds_ratio: FloatArray) -> FloatArray:
    """Variance of a log odds ratio whose standard error is known."""
    return np.where(np.isnan(estimate), np.nan, se_log_odds_ratio**2)


def printed_log_odds_limits(estimate: FloatArray, se_log_odds_ratio: FloatArray, level: float) -> Interval:
    """Normal limits of the same."""
    return normal_limits(estimate, se_log_odds_ratio**2, level)


_SQUARED = "squared standard error of the log odds ratio (Woolf 1955 where it comes from counts)"
enter_variance("log_odds_ratio", LARGE, _SQUARED, TWO_GROUP, printed_log_odds_variance)
enter_limits("log_odds_ratio", "normal limits of the log odds ratio", TWO_GROUP, printed_log_odds_limits)
_LOGISTIC_NAME = "large-sample variance of d times π²/3 (Hasselblad & Hedges 1995)"
enter_variance("log_odds_ratio", LARGE, _LOGISTIC_NAME, TWO_GROUP, log_odds_large)
enter_limits("log_odds_ratio", "limits of d (noncentral t) times π/sqrt(3)", TWO_GROUP, log_odds_limits)
_PLAIN = ONE_FACTOR | PAIRED | ANCOVA
for _standardizer in ("pooled", "average"):
    enter_variance(
        "mean_difference",
        EXACT,
        "squared standard error of the difference",
        _PLAIN,
        raw_variance,
        [_standardizer],
    )
    enter_limits("mean_difference", "Student's t with the error df", _PLAIN, raw_limits, [_standardizer])
