"""A scale for plots of effects: round ticks around what is to be shown."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pandas as pd

_STEPS = (1.0, 2.0, 2.5, 5.0, 10.0)


@dataclass(frozen=True, slots=True)
class Scale:
    """Ends of an axis, and its ticks."""

    low: float
    high: float
    ticks: tuple[float, ...]
    step: float

    def share(self, value: float) -> float:
        """Where a value lies: 0 at the low end, 1 at the high end; values beyond an end are at it."""
        return min(max((value - self.low) / (self.high - self.low), 0.0), 1.0)

    def label(self, tick: float) -> str:
        """A tick as it is printed, with the decimals of the step."""
        decimals = max(0, -math.floor(math.log10(self.step) + 1e-9))
        if abs(self.step * 10**decimals % 1) > 1e-6:
            decimals += 1
        return f"{tick:.{decimals}f}".replace("-", "−")


def round_scale(low: float, high: float, most: int = 7) -> Scale:
    """A scale with at most ``most`` round ticks that reaches over low and high."""
    if not high > low:
        low, high = low - 0.5, high + 0.5
    raw = (high - low) / (most - 1)
    power = 10.0 ** math.floor(math.log10(raw))
    step = next(s * power for s in _STEPS if s * power >= raw * (1 - 1e-9))
    first, last = math.floor(low / step + 1e-9), math.ceil(high / step - 1e-9)
    ticks = tuple(round(at * step, 12) + 0.0 for at in range(first, last + 1))
    return Scale(ticks[0], ticks[-1], ticks, step)


def scale_of(effects: pd.DataFrame, most: int = 7) -> Scale:
    """The scale of an effect table: all estimates, zero, and the limits that do not lie far outside.

    A limit is far outside where it is beyond every estimate by more than three times the spread of the
    estimates and of the inner nine tenths of the limits; it is then drawn as running off the plot.
    """
    ends = effects[["estimate_low", "estimate_high"]].to_numpy(dtype=float)
    bounds = ends[effects["status"].to_numpy() == "bounded"]
    # of a bound the end nearer to zero says something; the other may be the end of what is possible
    nearer = np.abs(bounds) == np.fmin(np.abs(bounds[:, :1]), np.abs(bounds[:, 1:]))
    pointed = effects.loc[effects["status"] == "converted", ["estimate", "estimate_low", "estimate_high"]]
    estimates = np.concatenate([_finite(pointed.to_numpy(dtype=float)), _finite(bounds[nearer])])
    limits = _finite(effects[["ci_low", "ci_high"]].to_numpy(dtype=float))
    shown = np.concatenate([estimates, [0.0]])
    low, high = float(shown.min()), float(shown.max())
    if len(limits):
        inner = np.quantile(limits, [0.05, 0.95])
        spread = max(high - low, float(inner[1] - inner[0]), 1e-9)
        inside = limits[(limits >= low - 3 * spread) & (limits <= high + 3 * spread)]
        low, high = min([low, *inside.tolist()]), max([high, *inside.tolist()])
    return round_scale(low, high, most)


def _finite(
    values: np.ndarray[tuple[int, ...], np.dtype[np.float64]],
) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    flat = values.ravel()
    return flat[np.isfinite(flat)]
