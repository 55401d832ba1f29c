"""Two groups measured before and after; group 1 is treatment, group 2 control.

The raw metric (over the SD before treatment) and the change metric (over the SD of change scores) are different
quantities; nothing turns one into the other without the correlation of the two measurements.
"""

from __future__ import annotations

import numpy as np

from extractor.catalogue.branches import square_image
from extractor.catalogue.relation import PRE_POST, FloatArray, Grade, Interval, relation

_GAIN = "difference of the groups' mean changes (Morris 2008)"
_D = "Morris (2008), d_ppc2 before its small-sample factor"
_G = "Morris (2008), d_ppc2 with c = 1 - 3/(4(n_T + n_C - 2) - 1)"
_POOLED = "pooled standard deviation of two groups (textbook identity)"
_CHANGE = "SD of change: s_c² = s_pre² + s_post² - 2·r·s_pre·s_post (Cochrane Handbook, ch. 6)"
_LIMITS = "the correlation of the two measurements lies in [-1, 1] in each group (textbook identity)"
_F = "with two groups and two times the interaction F is the square of the t of the change scores"


def _gain_image(mean_pre: Interval, mean_post: Interval) -> Interval:
    low = (mean_post[0][:, 0] - mean_pre[1][:, 0]) - (mean_post[1][:, 1] - mean_pre[0][:, 1])
    high = (mean_post[1][:, 0] - mean_pre[0][:, 0]) - (mean_post[0][:, 1] - mean_pre[1][:, 1])
    scale = 1e-12 * sum(np.abs(end).sum(axis=-1) for pair in (mean_pre, mean_post) for end in pair)
    return low - scale, high + scale


@relation(gives="mean_difference", image=_gain_image, designs=PRE_POST, source=_GAIN)
def difference_of_gains(mean_pre: FloatArray, mean_post: FloatArray) -> FloatArray:
    """ΔM = (M_post,T - M_pre,T) - (M_post,C - M_pre,C)."""
    gain = mean_post - mean_pre
    return np.asarray(gain[:, 0] - gain[:, 1])


def _first_less_second(mean_change: Interval) -> Interval:
    return mean_change[0][:, 0] - mean_change[1][:, 1], mean_change[1][:, 0] - mean_change[0][:, 1]


@relation(gives="mean_difference", image=_first_less_second, designs=PRE_POST, source=_GAIN)
def difference_of_changes(mean_change: FloatArray) -> FloatArray:
    """ΔM = M_change,T - M_change,C."""
    return np.asarray(mean_change[:, 0] - mean_change[:, 1])


def _pooled(n: FloatArray, sd: FloatArray) -> FloatArray:
    return np.asarray(np.sqrt(((n - 1) * sd**2).sum(axis=-1) / (n.sum(axis=-1) - n.shape[1])))


@relation(gives="pre_sd", rising=["sd_pre"], exact=["n"], designs=PRE_POST, source=_POOLED)
def pooled_pre_sd(sd_pre: FloatArray, n: FloatArray) -> FloatArray:
    """s_pre = sqrt(Σ (n - 1)·SD_pre² / (N - 2))."""
    return _pooled(n, sd_pre)


@relation(gives="change_sd", rising=["sd_change"], exact=["n"], designs=PRE_POST, source=_POOLED)
def pooled_change_sd(sd_change: FloatArray, n: FloatArray) -> FloatArray:
    """s_change = sqrt(Σ (n - 1)·SD_change² / (N - 2))."""
    return _pooled(n, sd_change)


@relation(gives="d_pre", rising=["mean_difference"], either=["pre_sd"], designs=PRE_POST, source=_D)
def d_pre_from_gains(mean_difference: FloatArray, pre_sd: FloatArray) -> FloatArray:
    """d_ppc2 = ΔM / s_pre."""
    return mean_difference / pre_sd


@relation(
    gives="d_difference", rising=["mean_difference"], either=["change_sd"], designs=PRE_POST, source=_GAIN
)
def d_change_from_gains(mean_difference: FloatArray, change_sd: FloatArray) -> FloatArray:
    """d = ΔM / s_change."""
    return mean_difference / change_sd


@relation(
    gives="d_difference",
    rising=["t_value"],
    either=["inverse_effective_n"],
    designs=PRE_POST | {"mixed"},
    source=_F,
)
def d_change_from_t(t_value: FloatArray, inverse_effective_n: FloatArray) -> FloatArray:
    """d = t · sqrt(1/n1 + 1/n2), over the SD of the change scores."""
    return t_value * np.sqrt(inverse_effective_n)


@relation(gives="df_error", rising=["n_total"], designs=PRE_POST, source=_POOLED)
def change_error_df(n_total: FloatArray) -> FloatArray:
    """df2 = N - 2."""
    return n_total - 2


def _change_image(sd_pre: Interval, sd_post: Interval, correlation: Interval) -> Interval:
    r_low, r_high = correlation[0][:, None], correlation[1][:, None]
    gap_least = np.maximum(np.maximum(sd_pre[0] - sd_post[1], sd_post[0] - sd_pre[1]), 0)
    gap_most = np.maximum(sd_pre[1] - sd_post[0], sd_post[1] - sd_pre[0])
    least = gap_least**2 + 2 * (1 - r_high) * sd_pre[0] * sd_post[0]
    most = gap_most**2 + 2 * (1 - r_low) * sd_pre[1] * sd_post[1]
    return np.sqrt(least), np.sqrt(most)


@relation(
    gives="sd_change",
    image=_change_image,
    designs=PRE_POST,
    grade=Grade.APPROXIMATION,
    assumes="the same correlation of the two measurements in both groups",
    source=_CHANGE,
    accuracy=1e-12,
)
def change_sd_from_correlation(
    sd_pre: FloatArray, sd_post: FloatArray, correlation: FloatArray
) -> FloatArray:
    """SD_change = sqrt(s_pre² + s_post² - 2·r·s_pre·s_post)."""
    r = correlation[:, None]
    return np.asarray(np.sqrt((sd_pre - sd_post) ** 2 + 2 * (1 - r) * sd_pre * sd_post))


def _change_limits(sd_change: Interval, sd_pre: Interval, sd_post: Interval) -> Interval:
    least = np.maximum(np.maximum(sd_pre[0] - sd_post[1], sd_post[0] - sd_pre[1]), 0.0)
    return least, sd_pre[1] + sd_post[1]


@relation(gives="sd_change", image=_change_limits, designs=PRE_POST, source=_LIMITS, accuracy=1e-12)
def change_sd_within_limits(sd_change: FloatArray, sd_pre: FloatArray, sd_post: FloatArray) -> FloatArray:
    """|s_pre - s_post| ≤ SD_change ≤ s_pre + s_post, in each group."""
    return sd_change


def _correlation_image(sd_pre: Interval, sd_post: Interval, sd_change: Interval, n: Interval) -> Interval:
    weight = n[0] - 1
    change = square_image(sd_change)
    low = (weight * (sd_pre[0] ** 2 + sd_post[0] ** 2 - change[1])).sum(axis=-1)
    high = (weight * (sd_pre[1] ** 2 + sd_post[1] ** 2 - change[0])).sum(axis=-1)
    small, large = (2 * (weight * sd_pre[e] * sd_post[e]).sum(axis=-1) for e in (0, 1))
    return np.where(low >= 0, low / large, low / small), np.where(high >= 0, high / small, high / large)


@relation(
    gives="correlation",
    image=_correlation_image,
    designs=PRE_POST,
    grade=Grade.APPROXIMATION,
    assumes="one correlation of the two measurements, pooled over the groups",
    source=_CHANGE,
    accuracy=1e-9,
)
def correlation_from_change_sd(
    sd_pre: FloatArray, sd_post: FloatArray, sd_change: FloatArray, n: FloatArray
) -> FloatArray:
    """r = Σ (n - 1)(s_pre² + s_post² - s_change²) / (2·Σ (n - 1)·s_pre·s_post)."""
    weight = n - 1
    top = (weight * (sd_pre**2 + sd_post**2 - sd_change**2)).sum(axis=-1)
    return np.asarray(top / (2 * (weight * sd_pre * sd_post).sum(axis=-1)))


def morris_factor(n_total: FloatArray) -> FloatArray:
    """c = 1 - 3/(4(N - 2) - 1), the small-sample factor of Morris (2008)."""
    return 1 - 3 / (4 * (n_total - 2) - 1)


@relation(gives="hedges_g", rising=["cohens_d"], exact=["n_total"], designs=PRE_POST, source=_G)
def g_from_d_pre_post(cohens_d: FloatArray, n_total: FloatArray) -> FloatArray:
    """g = c·d, c = 1 - 3/(4(N - 2) - 1)."""
    return cohens_d * morris_factor(n_total)
