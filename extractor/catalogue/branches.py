"""Interval images with two branches: a magnitude and its sign."""

from __future__ import annotations

import numpy as np

from extractor.catalogue.relation import Interval

_WIDEN = 1e-9
EMPTY = (np.finfo(float).max, -np.finfo(float).max)
"""An interval without a member; finite, because an infinite end stands for "nothing is known"."""


def signed_image(magnitude: Interval, direction: Interval, current: Interval | None) -> Interval:
    """Interval of a signed value from that of its magnitude, its sign where known, and what is known of it.

    The set is [-most, -least] and [least, most]; a branch is dropped when the sign or ``current`` excludes it.
    """
    # widened before the branches are compared with what is known, so that no rounding error drops the true one
    least, most = np.maximum(magnitude[0] * (1 - _WIDEN), 0.0), magnitude[1] * (1 + _WIDEN)
    positive, negative = direction[1] > 0, direction[0] < 0
    if current is not None:
        positive &= current[1] >= least
        negative &= current[0] <= -least
    low = np.where(negative, -most, least)
    high = np.where(positive, most, -least)
    neither = ~positive & ~negative
    return np.where(neither, EMPTY[0], low), np.where(neither, EMPTY[1], high)


def square_image(value: Interval) -> Interval:
    """Interval of the square of a signed value."""
    low, high = value
    nearest = np.where((low <= 0) & (high >= 0), 0.0, np.minimum(np.abs(low), np.abs(high)))
    return nearest**2, np.maximum(np.abs(low), np.abs(high)) ** 2
