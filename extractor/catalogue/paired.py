"""Two measurements of the same participants, and pairs of conditions of a within design."""

from __future__ import annotations

import numpy as np

from extractor.catalogue.branches import square_image
from extractor.catalogue.relation import PAIRED, WITHIN, FloatArray, Interval, relation
from extractor.sampling.moments import small_sample_factor

_SD = "variance of a difference: s_d² = s1² + s2² - 2·r·s1·s2 (textbook identity)"
_SE = "standard error of a mean difference of pairs (textbook identity)"
_Z = "d_z = mean difference over the SD of the differences = t / sqrt(n) (Rosenthal 1991; textbook identity)"
_AVERAGE = (
    "d over the root of the mean variance (Cochrane Handbook, ch. 6; Cumming 2012 uses the same average)"
)
_WITHIN_SD = "Borenstein et al. (2009), ch. 4: s_within = s_diff / sqrt(2(1 - r)); Dunlap et al. (1996)"


@relation(gives="sd_difference", rising=["se_difference", "n_total"], designs=PAIRED, source=_SE)
def difference_sd_from_se(se_difference: FloatArray, n_total: FloatArray) -> FloatArray:
    """SD_diff = SE_diff · sqrt(N)."""
    return se_difference * np.sqrt(n_total)


@relation(gives="se_difference", rising=["sd_difference"], falling=["n_total"], designs=PAIRED, source=_SE)
def se_from_difference_sd(sd_difference: FloatArray, n_total: FloatArray) -> FloatArray:
    """SE_diff = SD_diff / sqrt(N)."""
    return sd_difference / np.sqrt(n_total)


def _difference_sd(sd: FloatArray, correlation: FloatArray) -> FloatArray:
    # (s1 - s2)² + 2(1 - r)·s1·s2 cannot turn negative by cancellation
    return np.sqrt((sd[:, 0] - sd[:, 1]) ** 2 + 2 * (1 - correlation) * sd[:, 0] * sd[:, 1])


def _difference_sd_image(sd: Interval, correlation: Interval) -> Interval:
    """The square is convex in either SD alone for a fixed r, and falls with r."""
    low, high = sd
    gap_least = np.maximum(np.maximum(low[:, 0] - high[:, 1], low[:, 1] - high[:, 0]), 0)
    gap_most = np.maximum(high[:, 0] - low[:, 1], high[:, 1] - low[:, 0])
    least = gap_least**2 + 2 * (1 - correlation[1]) * low[:, 0] * low[:, 1]
    most = gap_most**2 + 2 * (1 - correlation[0]) * high[:, 0] * high[:, 1]
    return np.sqrt(least), np.sqrt(most)


@relation(gives="sd_difference", image=_difference_sd_image, designs=PAIRED, source=_SD, accuracy=1e-12)
def difference_sd_from_correlation(sd: FloatArray, correlation: FloatArray) -> FloatArray:
    """SD_diff = sqrt(s1² + s2² - 2·r·s1·s2)."""
    return _difference_sd(sd, correlation)


def _correlation_image(sd: Interval, sd_difference: Interval) -> Interval:
    """r = (a/b + b/a)/2 - s_d²/(2ab): bounded by its two parts; the first depends on a/b alone."""
    (a0, b0), (a1, b1) = (sd[0][:, 0], sd[0][:, 1]), (sd[1][:, 0], sd[1][:, 1])
    ratio0, ratio1 = a0 / b1, a1 / b0
    ends = (ratio0 + 1 / ratio0) / 2, (ratio1 + 1 / ratio1) / 2
    sum_low = np.where((ratio0 <= 1) & (ratio1 >= 1), 1.0, np.minimum(*ends))
    spread = square_image(sd_difference)
    low = sum_low - spread[1] / (2 * a0 * b0)
    high = np.maximum(*ends) - spread[0] / (2 * a1 * b1)
    return low, high


@relation(gives="correlation", image=_correlation_image, designs=PAIRED, source=_SD, accuracy=1e-9)
def correlation_from_difference_sd(sd: FloatArray, sd_difference: FloatArray) -> FloatArray:
    """r = (s1² + s2² - SD_diff²) / (2·s1·s2)."""
    first, second = sd[:, 0], sd[:, 1]
    return np.asarray((first**2 + second**2 - sd_difference**2) / (2 * first * second))


@relation(gives="d_difference", rising=["t_value"], either=["n_total"], designs=PAIRED, source=_Z)
def d_difference_from_t(t_value: FloatArray, n_total: FloatArray) -> FloatArray:
    """d_z = t / sqrt(N)."""
    return t_value / np.sqrt(n_total)


@relation(gives="t_value", rising=["d_difference"], either=["n_total"], designs=PAIRED, source=_Z)
def t_from_d_difference(d_difference: FloatArray, n_total: FloatArray) -> FloatArray:
    """t = d_z · sqrt(N)."""
    return d_difference * np.sqrt(n_total)


@relation(
    gives="d_difference", rising=["mean_difference"], either=["sd_difference"], designs=PAIRED, source=_Z
)
def d_difference_from_means(mean_difference: FloatArray, sd_difference: FloatArray) -> FloatArray:
    """d_z = (M1 - M2) / SD_diff."""
    return mean_difference / sd_difference


@relation(
    gives="d_within", rising=["d_difference"], either=["correlation"], designs=PAIRED, source=_WITHIN_SD
)
def d_within_from_d_difference(d_difference: FloatArray, correlation: FloatArray) -> FloatArray:
    """d_rm = d_z · sqrt(2(1 - r))."""
    return d_difference * np.sqrt(2 * (1 - correlation))


@relation(gives="average_sd", rising=["sd"], designs=PAIRED, source=_AVERAGE)
def average_of_two(sd: FloatArray) -> FloatArray:
    """s_av = sqrt((s1² + s2²) / 2)."""
    return np.asarray(np.sqrt((sd**2).mean(axis=-1)))


@relation(gives="average_sd", rising=["sd"], exact=["contrast_weight"], designs=WITHIN, source=_AVERAGE)
def average_of_contrasted(sd: FloatArray, contrast_weight: FloatArray) -> FloatArray:
    """s_av = sqrt(Σ|w|·s² / Σ|w|), over the conditions of the contrast."""
    weight = np.abs(contrast_weight)
    return np.asarray(np.sqrt((weight * sd**2).sum(axis=-1) / weight.sum(axis=-1)))


@relation(
    gives="d_average",
    rising=["mean_difference"],
    either=["average_sd"],
    designs=PAIRED | WITHIN,
    source=_AVERAGE,
)
def d_average_from_means(mean_difference: FloatArray, average_sd: FloatArray) -> FloatArray:
    """d_av = (M1 - M2) / s_av."""
    return mean_difference / average_sd


@relation(
    gives="hedges_g",
    rising=["cohens_d"],
    exact=["n_total"],
    designs=WITHIN,
    source="Hedges (1981), df = N - 1",
)
def g_of_condition_pair(cohens_d: FloatArray, n_total: FloatArray) -> FloatArray:
    """g = J(N - 1) · d."""
    return cohens_d * small_sample_factor(n_total - 1)
