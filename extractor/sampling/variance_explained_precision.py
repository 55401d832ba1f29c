"""Precision of the variance-explained family and of f: exact moments and limits of the noncentral F.

The usual large-sample variance goes to zero as F approaches 1 and would hand that study an enormous weight; the
exact one never falls below the variance under no effect.
"""

from __future__ import annotations

import numpy as np

from extractor.catalogue.relation import ONE_FACTOR, PARTIAL, PRE_POST, FloatArray, Interval
from extractor.sampling import moments
from extractor.sampling.noncentral import f_noncentrality_limits
from extractor.sampling.precision import EXACT, LARGE, enter_limits, enter_variance

_MOMENTS = "exact moments of the noncentral F at the estimate"
_OLKIN = "large sample (Olkin & Finn 1995), carried over by the derivative"
_DELTA = "noncentral F moments of the partial index, carried over with the other sums of squares fixed"
_STEIGER = "noncentral F inverted (Steiger & Fouladi 1997; Steiger 2004)"
_CARRIED = "noncentral F limits of the partial index, carried over with the other sums of squares fixed"
_ZERO = -1e-9
_TERM = PARTIAL | PRE_POST
_ALL = ONE_FACTOR | _TERM


def _f_from_eta(eta: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    return eta / (1 - eta) * df_error / df_effect


def _without_error(f: FloatArray) -> FloatArray:
    """An F of 0 may come back from the smallest index it gives as a little less."""
    return np.where((f < 0) & (f > _ZERO), 0.0, f)


def _f_from_omega(omega: FloatArray, df_effect: FloatArray, total: FloatArray) -> FloatArray:
    return _without_error(1 + omega / (1 - omega) * total / df_effect)


def _f_from_epsilon(epsilon: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    return _without_error((df_effect + epsilon * df_error) / (df_effect * (1 - epsilon)))


def _population(
    f: FloatArray, df_effect: FloatArray, df_error: FloatArray, total: FloatArray, level: float
) -> Interval:
    """Limits of λ/(λ + N), the population value that eta, omega and epsilon squared share."""
    low, high = f_noncentrality_limits(f, df_effect, df_error, level)
    return low / (low + total), high / (high + total)


def eta_exact(estimate: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    """Variance of eta squared of an effect and its own error term."""
    plug_in = moments.plug_in_noncentrality(_f_from_eta(estimate, df_effect, df_error), df_effect, df_error)
    return moments.eta_squared_moments(plug_in, df_effect, df_error)[1]


def eta_large(estimate: FloatArray, df_effect: FloatArray, n_observations: FloatArray) -> FloatArray:
    """The same by the large-sample formula."""
    return moments.large_sample_eta_variance(estimate, df_effect, n_observations)


def eta_limits(
    estimate: FloatArray,
    df_effect: FloatArray,
    df_error: FloatArray,
    n_observations: FloatArray,
    level: float,
) -> Interval:
    """Limits of the population value."""
    return _population(_f_from_eta(estimate, df_effect, df_error), df_effect, df_error, n_observations, level)


def omega_exact(
    estimate: FloatArray, df_effect: FloatArray, df_error: FloatArray, n_observations: FloatArray
) -> FloatArray:
    """Variance of omega squared of an effect and its own error term."""
    f = _f_from_omega(estimate, df_effect, n_observations)
    plug_in = moments.plug_in_noncentrality(f, df_effect, df_error)
    return moments.omega_squared_moments(plug_in, df_effect, df_error, n_observations)[1]


def omega_large(
    estimate: FloatArray, df_effect: FloatArray, df_error: FloatArray, n_observations: FloatArray
) -> FloatArray:
    """The same by the large-sample formula; dω²/dη² is the ratio of the derivatives with respect to F."""
    f = _f_from_omega(estimate, df_effect, n_observations)
    explained = df_effect * f
    slope_omega = n_observations / (df_effect * (f - 1) + n_observations) ** 2
    slope_eta = df_error / (explained + df_error) ** 2
    eta = explained / (explained + df_error)
    return moments.large_sample_eta_variance(eta, df_effect, n_observations) * (slope_omega / slope_eta) ** 2


def omega_limits(
    estimate: FloatArray,
    df_effect: FloatArray,
    df_error: FloatArray,
    n_observations: FloatArray,
    level: float,
) -> Interval:
    """Limits of the population value."""
    f = _f_from_omega(estimate, df_effect, n_observations)
    return _population(f, df_effect, df_error, n_observations, level)


def epsilon_exact(estimate: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    """Variance of epsilon squared."""
    f = _f_from_epsilon(estimate, df_effect, df_error)
    return moments.epsilon_squared_moments(
        moments.plug_in_noncentrality(f, df_effect, df_error), df_effect, df_error
    )[1]


def epsilon_large(
    estimate: FloatArray, df_effect: FloatArray, df_error: FloatArray, n_observations: FloatArray
) -> FloatArray:
    """The same by the large-sample formula; ε² is linear in η²: 1 - (1 - η²)(df1 + df2)/df2."""
    slope = (df_effect + df_error) / df_error
    eta = 1 - (1 - estimate) / slope
    return moments.large_sample_eta_variance(eta, df_effect, n_observations) * slope**2


def epsilon_limits(
    estimate: FloatArray,
    df_effect: FloatArray,
    df_error: FloatArray,
    n_observations: FloatArray,
    level: float,
) -> Interval:
    """Limits of the population value."""
    f = _f_from_epsilon(estimate, df_effect, df_error)
    return _population(f, df_effect, df_error, n_observations, level)


def f_exact(estimate: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    """Variance of Cohen's f."""
    plug_in = moments.plug_in_noncentrality(estimate**2 * df_error / df_effect, df_effect, df_error)
    return moments.cohens_f_moments(plug_in, df_effect, df_error)[1]


def f_large(estimate: FloatArray, df_effect: FloatArray, n_observations: FloatArray) -> FloatArray:
    """The same by the large-sample formula; df/dη² = 1 / (2·sqrt(η²)·(1 - η²)^1.5)."""
    eta = estimate**2 / (1 + estimate**2)
    slope = 1 / (2 * np.sqrt(eta) * (1 - eta) ** 1.5)
    return moments.large_sample_eta_variance(eta, df_effect, n_observations) * slope**2


def f_limits(
    estimate: FloatArray,
    df_effect: FloatArray,
    df_error: FloatArray,
    n_observations: FloatArray,
    level: float,
) -> Interval:
    """Limits of sqrt(λ/N)."""
    f = estimate**2 * df_error / df_effect
    low, high = f_noncentrality_limits(f, df_effect, df_error, level)
    return np.sqrt(low / n_observations), np.sqrt(high / n_observations)


def _share(odds: FloatArray, others: FloatArray) -> FloatArray:
    """SS_effect / (SS_effect + others), both over SS_error."""
    return odds / (odds + others)


def whole_exact(
    estimate: FloatArray, partial_eta_squared: FloatArray, df_effect: FloatArray, df_error: FloatArray
) -> FloatArray:
    """Variance of an eta squared with more in its denominator than the effect's own error term.

    With x = SS_effect/SS_error the index is x/(x + c); c follows from the estimate and stays fixed.
    """
    odds = partial_eta_squared / (1 - partial_eta_squared)
    others = odds * (1 - estimate) / estimate
    # d index / dx times dx / dη²p
    slope = others / (odds + others) ** 2 / (1 - partial_eta_squared) ** 2
    return slope**2 * eta_exact(partial_eta_squared, df_effect, df_error)


def whole_limits(
    estimate: FloatArray,
    partial_eta_squared: FloatArray,
    df_effect: FloatArray,
    df_error: FloatArray,
    n_observations: FloatArray,
    level: float,
) -> Interval:
    """Limits of the same index, from those of the partial one."""
    odds = partial_eta_squared / (1 - partial_eta_squared)
    others = odds * (1 - estimate) / estimate
    low, high = eta_limits(partial_eta_squared, df_effect, df_error, n_observations, level)
    return _share(low / (1 - low), others), _share(high / (1 - high), others)


def whole_omega_exact(
    estimate: FloatArray,
    eta_squared: FloatArray,
    partial_eta_squared: FloatArray,
    df_effect: FloatArray,
    df_error: FloatArray,
) -> FloatArray:
    """Variance of classical omega squared of one term; the other sums of squares stay fixed.

    With D = (SS_total + MS_error)/MS_error the index is df1·(F - 1)/D, and D = df1·F/η² + 1.
    """
    f = _f_from_eta(partial_eta_squared, df_effect, df_error)
    whole = df_effect * f / eta_squared + 1
    slope_f = df_effect * (whole - df_effect * (f - 1)) / whole**2
    slope = slope_f * df_error / df_effect / (1 - partial_eta_squared) ** 2
    # the estimate enters through F and η² alone; where it was printed by itself they are derived from it
    return np.where(
        np.isnan(estimate), np.nan, slope**2 * eta_exact(partial_eta_squared, df_effect, df_error)
    )


def whole_omega_limits(
    eta_squared: FloatArray,
    partial_eta_squared: FloatArray,
    df_effect: FloatArray,
    df_error: FloatArray,
    n_observations: FloatArray,
    level: float,
) -> Interval:
    """Limits of the population value that classical eta and omega squared share."""
    return whole_limits(eta_squared, partial_eta_squared, df_effect, df_error, n_observations, level)


for _metric in ("eta_squared", "partial_eta_squared", "generalized_eta_squared"):
    _designs = _ALL if _metric == "partial_eta_squared" else ONE_FACTOR
    enter_variance(_metric, EXACT, _MOMENTS, _designs, eta_exact)
    enter_variance(_metric, LARGE, _OLKIN, _designs, eta_large)
    enter_limits(_metric, _STEIGER, _designs, eta_limits)
    if _designs is ONE_FACTOR:
        enter_variance(_metric, EXACT, _DELTA, _TERM, whole_exact)
        enter_limits(_metric, _CARRIED, _TERM, whole_limits)
for _metric in ("omega_squared", "partial_omega_squared"):
    _designs = _ALL if _metric == "partial_omega_squared" else ONE_FACTOR
    enter_variance(_metric, EXACT, _MOMENTS, _designs, omega_exact)
    enter_variance(_metric, LARGE, _OLKIN, _designs, omega_large)
    enter_limits(_metric, _STEIGER, _designs, omega_limits)
enter_variance("omega_squared", EXACT, _DELTA, _TERM, whole_omega_exact)
enter_limits("omega_squared", _CARRIED, _TERM, whole_omega_limits)
enter_variance("epsilon_squared", EXACT, _MOMENTS, ONE_FACTOR, epsilon_exact)
enter_variance("epsilon_squared", LARGE, _OLKIN, ONE_FACTOR, epsilon_large)
enter_limits("epsilon_squared", _STEIGER, ONE_FACTOR, epsilon_limits)
enter_variance("cohens_f", EXACT, _MOMENTS, _ALL, f_exact)
enter_variance("cohens_f", LARGE, _OLKIN, _ALL, f_large)
enter_limits("cohens_f", _STEIGER, _ALL, f_limits)
