"""The forest plot of the report, one strip (SVG) per row: it stretches with the page, and its marks keep their form.

Places along the scale are percentages; everything else is in pixels.
"""

from __future__ import annotations

import math
from collections.abc import Hashable, Mapping
from typing import Any

import pandas as pd

from extractor.output.scale import Scale, round_scale

_HEIGHT, _MIDDLE = 22, 11
_SMALLEST, _LARGEST = 5.0, 13.0
"""Side of the square of the least and the most precise effect."""


def strip(row: Mapping[Hashable, Any], scale: Scale, side: float) -> str:
    """The limits, the envelope of rounding and the estimate of one row; "" where it has none of them.

    Parameters
    ----------
    row : a line of the effect table.
    side : of the square at the estimate, in pixels.
    """
    low, high = row["estimate_low"], row["estimate_high"]
    if row["status"] == "blocked":
        return ""
    parts = []
    if row["status"] == "bounded":
        start = scale.share(low) if math.isfinite(low) else 0.0
        end = scale.share(high) if math.isfinite(high) else 1.0
        parts.append(_line("bound", start, end))
        parts += _end(low, scale, start, -1) + _end(high, scale, end, 1)
    else:
        if math.isfinite(row["ci_low"]):
            start, end = scale.share(row["ci_low"]), scale.share(row["ci_high"])
            parts.append(_line("ci", start, end))
            parts += _beyond(row["ci_low"] < scale.low, 0.0, -1) + _beyond(
                row["ci_high"] > scale.high, 1.0, 1
            )
        if math.isfinite(low) and math.isfinite(high):
            parts.append(_line("envelope", scale.share(low), scale.share(high)))
        half = side / 2
        parts.append(
            f'<rect class="point" x="{_percent(scale.share(row["estimate"]))}" y="{_MIDDLE - half:.1f}" '
            f'width="{side:.1f}" height="{side:.1f}" transform="translate(-{half:.1f} 0)"/>'
        )
    return f'<svg class="strip" aria-hidden="true">{"".join(parts)}</svg>'


def zero_line(scale: Scale) -> str:
    """A rule of style that draws the line of no effect behind all rows at once; "" where zero is an end."""
    if not scale.low < 0 < scale.high:
        return ""
    place = f"{_percent(scale.share(0.0))} 0/1px 100% content-box"
    line = f"linear-gradient(var(--rule),var(--rule)) {place} no-repeat"
    return f".forest [data-row]>:nth-child(2){{background:{line}}}"


def _line(kind: str, start: float, end: float, top: float = _MIDDLE, bottom: float = _MIDDLE) -> str:
    ends = f'x1="{_percent(start)}" x2="{_percent(end)}" y1="{top}" y2="{bottom}"'
    return f'<line class="{kind}" {ends}/>'


def _percent(share: float) -> str:
    return f"{100 * share:.2f}%"


def _end(value: float, scale: Scale, share: float, side: int) -> list[str]:
    """The end of a bound: a stop where there is a limit on the scale, a tip where it goes on."""
    if math.isfinite(value) and scale.low <= value <= scale.high:
        return [_line("stop", share, share, _MIDDLE - 5, _MIDDLE + 5)]
    return _beyond(True, share, side)


def _beyond(is_so: bool, share: float, side: int) -> list[str]:
    """A tip where a line goes on beyond the scale."""
    if not is_so:
        return []
    tip = f'<path class="tip" d="M{-7 * side} -4L0 0L{-7 * side} 4z"/>'
    return [f'<svg x="{_percent(share)}" y="{_MIDDLE}" overflow="visible">{tip}</svg>']


def axis(scale: Scale) -> str:
    """The ticks with their numbers."""
    parts = []
    for tick in scale.ticks:
        share = scale.share(tick)
        parts.append(_line("tick", share, share, 0, 5))
        parts.append(f'<text x="{_percent(share)}" y="18">{scale.label(tick)}</text>')
    return f'<svg class="strip axis" aria-hidden="true">{"".join(parts)}</svg>'


def sides(effects: pd.DataFrame) -> list[float]:
    """The side of each row's square: its area grows with the weight, 1 / variance."""
    weights = 1 / effects["variance"].where(effects["variance"] > 0)
    share = (weights / weights.max()) ** 0.5
    return [_SMALLEST if math.isnan(s) else _SMALLEST + (_LARGEST - _SMALLEST) * s for s in share]


def allowed(printed: float, low: float, high: float) -> str:
    """What the other numbers allow and what is printed, on one line.

    "" where an end is missing, or where the printed number lies between the ends and only fails together with others.
    """
    if not (math.isfinite(printed) and math.isfinite(low) and math.isfinite(high)) or low <= printed <= high:
        return ""
    reach = max(high - low, abs(printed - low), abs(printed - high), 1e-12)
    scale = round_scale(min(low, printed) - 0.1 * reach, max(high, printed) + 0.1 * reach)
    parts = [
        _line("span", 0.0, 1.0),
        _line("allowed", scale.share(low), scale.share(high)),
        _line("printed", scale.share(printed), scale.share(printed), 3, _HEIGHT - 3),
    ]
    return f'<svg class="strip narrow" aria-hidden="true">{"".join(parts)}</svg>'
