"""One group's number from the sums and the other groups'. These only narrow intervals: they serve the audit."""

from __future__ import annotations

import numpy as np

from extractor.catalogue.groups import least_between
from extractor.catalogue.relation import BETWEEN, ONE_FACTOR, PAIRED, WITHIN, FloatArray, Interval, relation

_PARTITION = "SS_effect = SS_others + n_j(N - n_j)/N · (M_j - M_others)² (textbook identity)"
_POOLED = "SS_error = Σ (n_j - 1)·SD_j², solved for one group (textbook identity)"
_TOTAL = "N = Σ n_j, solved for one group"
_CONTRAST = "definition of a contrast of means, solved for one group"
_WIDEN = 1e-9
MOST_GROUPS = 30
"""Above this many groups no single mean is solved for: the work grows with the cube of their number."""


def _others(values: FloatArray, group: int) -> FloatArray:
    return np.delete(values, group, axis=-1)


def _sums_of_others(values: FloatArray) -> FloatArray:
    """For each group the sum over all others, shape (rows, groups); added up from both sides, nothing subtracted."""
    before, after = np.zeros_like(values), np.zeros_like(values)
    before[:, 1:] = values.cumsum(axis=1)[:, :-1]
    after[:, :-1] = values[:, ::-1].cumsum(axis=1)[:, -2::-1]
    return before + after


def _mean_image(mean: Interval, n: Interval, ss_effect: Interval) -> Interval:
    low, high = np.array(mean[0]), np.array(mean[1])
    if low.shape[1] > MOST_GROUPS:
        return np.full_like(low, -np.inf), np.full_like(high, np.inf)
    for j in range(low.shape[1]):
        rest_low, rest_high = _others(mean[0], j), _others(mean[1], j)
        size_low, size_high = _others(n[0], j), _others(n[1], j)
        own_low, own_high = n[0][:, j], n[1][:, j]
        known = (size_low == size_high).all(axis=-1)
        weight = size_low / size_low.sum(axis=-1, keepdims=True)
        centre_low = np.where(known, (weight * rest_low).sum(axis=-1), rest_low.min(axis=-1))
        centre_high = np.where(known, (weight * rest_high).sum(axis=-1), rest_high.max(axis=-1))
        middle = ((centre_low + centre_high) / 2)[:, None]
        most_rest = (size_high * np.maximum((rest_low - middle) ** 2, (rest_high - middle) ** 2)).sum(axis=-1)
        share_low = 1 / (1 / own_low + 1 / size_low.sum(axis=-1))
        share_high = 1 / (1 / own_high + 1 / size_high.sum(axis=-1))
        # the others' own sum of squares narrows the reach, which is worth its price where this could cut an end
        rest_middle = (rest_low + rest_high) / 2
        some_rest = (size_low * (rest_middle - middle) ** 2).sum(axis=-1)
        shortest = np.sqrt(np.maximum(ss_effect[1] - some_rest, 0) / share_low)
        inside = (centre_low - shortest <= mean[0][:, j]) & (mean[1][:, j] <= centre_high + shortest)
        least_rest, cut = np.zeros(len(low)), np.flatnonzero(~inside)
        least_rest[cut] = least_between(*(v.T[:, cut].T for v in (size_low, rest_low, rest_high)))
        reach = np.sqrt(np.maximum(ss_effect[1] - least_rest * (1 - _WIDEN), 0) / share_low) * (1 + _WIDEN)
        away = np.sqrt(np.maximum(ss_effect[0] - most_rest * (1 + _WIDEN), 0) / share_high) * (1 - _WIDEN)
        away = np.where(np.isfinite(away), away, 0.0)
        slack = _WIDEN * (np.abs(centre_low) + np.abs(centre_high))
        hole_low, hole_high = centre_high - away + slack, centre_low + away - slack
        # the mean is farther than `away` from the others' mean: a current end inside the hole moves to its edge
        own_l, own_h = mean[0][:, j], mean[1][:, j]
        holed = (away > 0) & (hole_low < hole_high)
        new_low = np.where(holed & (own_l > hole_low) & (own_l < hole_high), hole_high, centre_low - reach)
        new_high = np.where(holed & (own_h > hole_low) & (own_h < hole_high), hole_low, centre_high + reach)
        low[:, j] = np.where(np.isnan(new_low), -np.inf, new_low - slack)
        high[:, j] = np.where(np.isnan(new_high), np.inf, new_high + slack)
    return low, high


@relation(gives="mean", image=_mean_image, designs=BETWEEN | WITHIN, source=_PARTITION)
def mean_from_effect_sum(mean: FloatArray, n: FloatArray, ss_effect: FloatArray) -> FloatArray:
    """M_j = M_others ± sqrt((SS_effect - SS_others)·N / (n_j·(N - n_j)))."""
    return mean


def _sd_image(sd: Interval, n: Interval, ss_error: Interval) -> Interval:
    least, most = (n[0] - 1) * sd[0] ** 2, (n[1] - 1) * sd[1] ** 2
    upper = (ss_error[1][:, None] - _sums_of_others(least)) / (n[0] - 1)
    lower = (ss_error[0][:, None] - _sums_of_others(most)) / (n[1] - 1)
    scale = _WIDEN * ss_error[1][:, None] / (n[0] - 1)
    # a negative upper end leaves no standard deviation at all
    high = np.where(upper + scale < 0, -1.0, np.sqrt(np.maximum(upper + scale, 0)))
    return np.sqrt(np.maximum(np.where(np.isfinite(scale), lower - scale, 0), 0)), high


@relation(gives="sd", image=_sd_image, designs=BETWEEN, source=_POOLED)
def sd_from_error_sum(sd: FloatArray, n: FloatArray, ss_error: FloatArray) -> FloatArray:
    """SD_j = sqrt((SS_error - Σ_others (n - 1)·SD²) / (n_j - 1))."""
    return sd


def _size_image(n: Interval, n_total: Interval) -> Interval:
    return n_total[0][:, None] - _sums_of_others(n[1]), n_total[1][:, None] - _sums_of_others(n[0])


@relation(gives="n", image=_size_image, designs=BETWEEN, source=_TOTAL)
def size_from_total(n: FloatArray, n_total: FloatArray) -> FloatArray:
    """n_j = N - Σ_others n."""
    return n


def _contrasted_image(mean: Interval, contrast_weight: Interval, mean_difference: Interval) -> Interval:
    weight = contrast_weight[0]
    ends = np.where(weight == 0, 0.0, weight * mean[0]), np.where(weight == 0, 0.0, weight * mean[1])
    least, most = np.minimum(*ends), np.maximum(*ends)
    scale = _WIDEN * (_sums_of_others(np.abs(most)) + _sums_of_others(np.abs(least)))
    below = mean_difference[0][:, None] - _sums_of_others(most) - scale
    above = mean_difference[1][:, None] - _sums_of_others(least) + scale
    low = np.where(weight == 0, -np.inf, np.where(weight > 0, below, above) / weight)
    return low, np.where(weight == 0, np.inf, np.where(weight > 0, above, below) / weight)


@relation(gives="mean", image=_contrasted_image, designs=ONE_FACTOR | PAIRED | WITHIN, source=_CONTRAST)
def mean_from_difference(
    mean: FloatArray, contrast_weight: FloatArray, mean_difference: FloatArray
) -> FloatArray:
    """M_j = (Σ w·M - Σ_others w·M) / w_j."""
    return mean
