"""Welch's F from summaries: the heteroscedastic alternative to F. It leads to no index of explained variance."""

from __future__ import annotations

import numpy as np

from extractor.catalogue.groups import greatest_between, least_between
from extractor.catalogue.relation import BETWEEN, FloatArray, Interval, relation

_WELCH = "Welch (1951), weights n/SD²"


def _weights(n: Interval, sd: Interval) -> Interval:
    return n[0] / sd[1] ** 2, n[1] / sd[0] ** 2


def _imbalance(n: Interval, weight: Interval) -> Interval:
    """Interval of Σ (1 - w_j/W)² / (n_j - 1)."""
    low, high = weight
    others_low = low.sum(axis=-1, keepdims=True) - low
    others_high = high.sum(axis=-1, keepdims=True) - high
    rest_low = 1 - high / (high + others_low)
    rest_high = 1 - low / (low + others_high)
    return (rest_low**2 / (n[1] - 1)).sum(axis=-1), (rest_high**2 / (n[0] - 1)).sum(axis=-1)


def _welch_f_image(n: Interval, mean: Interval, sd: Interval) -> Interval:
    k = n[0].shape[1]
    weight = _weights(n, sd)
    penalty = 2 * (k - 2) / (k**2 - 1)
    imbalance = _imbalance(n, weight)
    low = least_between(weight[0], *mean) / (k - 1) / (1 + penalty * imbalance[1])
    high = greatest_between(weight[1], *mean) / (k - 1) / (1 + penalty * imbalance[0])
    return low, high


@relation(gives="welch_f", image=_welch_f_image, designs=BETWEEN, source=_WELCH, accuracy=1e-9)
def welch_f_from_summaries(n: FloatArray, mean: FloatArray, sd: FloatArray) -> FloatArray:
    """F_W = Σ w(M - M_w)²/(k - 1) / (1 + 2(k - 2)/(k² - 1)·Σ (1 - w/W)²/(n - 1)), w = n/SD²."""
    k = n.shape[1]
    weight = n / sd**2
    total = weight.sum(axis=-1, keepdims=True)
    centre = (weight * mean).sum(axis=-1, keepdims=True) / total
    between = (weight * (mean - centre) ** 2).sum(axis=-1) / (k - 1)
    imbalance = ((1 - weight / total) ** 2 / (n - 1)).sum(axis=-1)
    return np.asarray(between / (1 + 2 * (k - 2) / (k**2 - 1) * imbalance))


def _welch_df_image(n: Interval, sd: Interval) -> Interval:
    k = n[0].shape[1]
    low, high = _imbalance(n, _weights(n, sd))
    return (k**2 - 1) / (3 * high), (k**2 - 1) / (3 * low)


@relation(gives="welch_df_error", image=_welch_df_image, designs=BETWEEN, source=_WELCH, accuracy=1e-9)
def welch_df_from_summaries(n: FloatArray, sd: FloatArray) -> FloatArray:
    """df2_W = (k² - 1) / (3·Σ (1 - w/W)²/(n - 1))."""
    k = n.shape[1]
    weight = n / sd**2
    share = weight / weight.sum(axis=-1, keepdims=True)
    return np.asarray((k**2 - 1) / (3 * ((1 - share) ** 2 / (n - 1)).sum(axis=-1)))
