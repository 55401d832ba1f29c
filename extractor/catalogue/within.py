"""One factor within participants: the error mean square is the mean variance less the mean covariance."""

from __future__ import annotations

import numpy as np

from extractor.catalogue.p_values import p_from_f
from extractor.catalogue.relation import MIXED, WITHIN, FloatArray, Interval, relation

_ERROR = "one-factor within design: MS_error = mean variance - mean covariance (textbook identity)"
_PARTIAL = (
    "a sphericity correction multiplies both df alike: F and the ratio of the df stay (textbook identity)"
)
_BOX = "Greenhouse & Geisser (1959): df multiplied by epsilon, 1/df1 ≤ epsilon ≤ 1 for one factor"
_LIMITS = "the sum of k scores has no negative variance: mean covariance ≥ -mean variance/(k - 1) (textbook identity)"


def _mean_product(sd: FloatArray) -> FloatArray:
    """Mean of s_i·s_j over pairs of conditions."""
    k = sd.shape[1]
    return np.asarray((sd.sum(axis=-1) ** 2 - (sd**2).sum(axis=-1)) / (k * (k - 1)))


def _correlation_image(sd: Interval, ms_error: Interval) -> Interval:
    """Bounds of the mean covariance over bounds of the mean product of SDs."""
    low = (sd[0] ** 2).mean(axis=-1) - ms_error[1]
    high = (sd[1] ** 2).mean(axis=-1) - ms_error[0]
    small, large = _mean_product(sd[0]), _mean_product(sd[1])
    return np.where(low >= 0, low / large, low / small), np.where(high >= 0, high / small, high / large)


@relation(gives="correlation", image=_correlation_image, designs=WITHIN, source=_ERROR, accuracy=1e-9)
def mean_correlation(sd: FloatArray, ms_error: FloatArray) -> FloatArray:
    """r = (mean SD² - MS_error) / mean of s_i·s_j over pairs."""
    return np.asarray(((sd**2).mean(axis=-1) - ms_error) / _mean_product(sd))


def _error_image(sd: Interval, correlation: Interval) -> Interval:
    least = (sd[0] ** 2).mean(axis=-1), (sd[1] ** 2).mean(axis=-1)
    small, large = _mean_product(sd[0]), _mean_product(sd[1])
    covariance_low = np.where(correlation[0] >= 0, correlation[0] * small, correlation[0] * large)
    covariance_high = np.where(correlation[1] >= 0, correlation[1] * large, correlation[1] * small)
    return least[0] - covariance_high, least[1] - covariance_low


@relation(gives="ms_error", image=_error_image, designs=WITHIN, source=_ERROR, accuracy=1e-9)
def error_mean_square_within(sd: FloatArray, correlation: FloatArray) -> FloatArray:
    """MS_error = mean SD² - r · mean of s_i·s_j over pairs."""
    return np.asarray((sd**2).mean(axis=-1) - correlation * _mean_product(sd))


def _limited(correlation: Interval, sd: Interval) -> Interval:
    k = sd[0].shape[1]
    low = -(sd[1] ** 2).mean(axis=-1) / ((k - 1) * _mean_product(sd[0]))
    return low, np.ones_like(low)


@relation(gives="correlation", image=_limited, designs=WITHIN, source=_LIMITS, accuracy=1e-9)
def correlation_within_limits(correlation: FloatArray, sd: FloatArray) -> FloatArray:
    """-mean SD² / ((k - 1) · mean of s_i·s_j) ≤ r ≤ 1."""
    return correlation


@relation(
    gives="partial_eta_squared",
    rising=["f_value", "corrected_df_effect"],
    falling=["corrected_df_error"],
    designs=WITHIN | MIXED,
    source=_PARTIAL,
)
def partial_eta_from_corrected_dfs(
    f_value: FloatArray, corrected_df_effect: FloatArray, corrected_df_error: FloatArray
) -> FloatArray:
    """η²p = ε·df1·F / (ε·df1·F + ε·df2)."""
    explained = corrected_df_effect * f_value
    return explained / (explained + corrected_df_error)


@relation(
    gives="epsilon",
    rising=["corrected_df_effect"],
    falling=["df_effect"],
    designs=WITHIN | MIXED,
    source=_BOX,
)
def epsilon_from_effect_df(corrected_df_effect: FloatArray, df_effect: FloatArray) -> FloatArray:
    """ε = corrected df1 / df1."""
    return corrected_df_effect / df_effect


@relation(
    gives="epsilon",
    rising=["corrected_df_error"],
    falling=["df_error"],
    designs=WITHIN | MIXED,
    source=_BOX,
)
def epsilon_from_error_df(corrected_df_error: FloatArray, df_error: FloatArray) -> FloatArray:
    """ε = corrected df2 / df2."""
    return corrected_df_error / df_error


@relation(
    gives="df_effect",
    rising=["corrected_df_effect"],
    falling=["epsilon"],
    designs=WITHIN | MIXED,
    source=_BOX,
)
def whole_effect_df(corrected_df_effect: FloatArray, epsilon: FloatArray) -> FloatArray:
    """df1 = corrected df1 / ε."""
    return corrected_df_effect / epsilon


@relation(
    gives="df_error",
    rising=["corrected_df_error", "df_effect"],
    falling=["corrected_df_effect"],
    designs=WITHIN | MIXED,
    source=_PARTIAL,
)
def whole_error_df(
    corrected_df_error: FloatArray, df_effect: FloatArray, corrected_df_effect: FloatArray
) -> FloatArray:
    """df2 = corrected df2 · df1 / corrected df1."""
    return corrected_df_error * df_effect / corrected_df_effect


def _corrected_p_image(
    f_value: Interval, corrected_df_effect: Interval, corrected_df_error: Interval
) -> Interval:
    """The tail is not monotone in rounded df: a margin of four times what moving either df by its rounding does."""
    (f0, f1), (a0, a1), (b0, b1) = f_value, corrected_df_effect, corrected_df_error
    corners = [p_from_f(f, a, b) for f in (f0, f1) for a in (a0, a1) for b in (b0, b1)]
    low, high = np.minimum.reduce(corners), np.maximum.reduce(corners)
    inner = [p_from_f(f, (a0 + a1) / 2, (b0 + b1) / 2) for f in (f0, f1)]
    low, high = np.minimum(low, np.minimum(*inner)), np.maximum(high, np.maximum(*inner))
    margin = 3 * (high - low)
    wide = (a1 - a0 > 0.25 * a0) | (b1 - b0 > 0.25 * b0)
    return np.where(wide, 0.0, np.maximum(low - margin, 0)), np.where(wide, 1.0, np.minimum(high + margin, 1))


@relation(
    gives="p_corrected",
    image=_corrected_p_image,
    designs=WITHIN | MIXED,
    source="upper tail of F at the corrected df",
    accuracy=1e-9,
)
def p_from_corrected_dfs(
    f_value: FloatArray, corrected_df_effect: FloatArray, corrected_df_error: FloatArray
) -> FloatArray:
    """p = P(F(ε·df1, ε·df2) ≥ F)."""
    return p_from_f(f_value, corrected_df_effect, corrected_df_error)


def _epsilon_limits(epsilon: Interval, k_groups: Interval) -> Interval:
    return 1 / (k_groups[1] - 1), np.ones_like(k_groups[0])


@relation(gives="epsilon", image=_epsilon_limits, designs=WITHIN, source=_BOX)
def epsilon_within_limits(epsilon: FloatArray, k_groups: FloatArray) -> FloatArray:
    """1/(k - 1) ≤ ε ≤ 1."""
    return epsilon
