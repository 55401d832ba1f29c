"""The forest plot as a figure for a manuscript or supplement: SVG, PDF or PNG, with the same bytes every time.

Rows are grouped by outcome or by another column. The square is the estimate, larger the more precise it is, the
line its confidence limits, the pale band what the rounding of the printed numbers allows. Bounds are dashed and
open; rows without an effect are left out and counted.
"""

from __future__ import annotations

import io
import math
import os
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import matplotlib
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle

from extractor.errors import UsageError
from extractor.output.columns import is_text
from extractor.output.files import fixed_time
from extractor.output.labels import short_labels
from extractor.output.report_rows import shown
from extractor.output.scale import Scale, scale_of
from extractor.output.strips import sides
from extractor.output.terminal import counted
from extractor.printed.reading import quoted
from extractor.quantities import VOCABULARY, close_matches

ENDINGS = (".svg", ".pdf", ".png")
MOST = 400
"""Rows beyond which no page is high enough."""

_INK, _SOFT, _RULE, _ACCENT, _BAND = "#1f2933", "#52606d", "#c4ccd4", "#0b5563", "#9cc3c9"
_ROW, _HEAD, _FOOT, _WIDTH = 0.21, 0.42, 0.8, 7.2
"""Height of a row, of the head and of the foot, and width of the figure, in inches."""
_LEFT, _RIGHT = 0.31, 0.75
"""Where the plot begins and ends, as shares of the width."""
_SETTINGS: Any = {
    # the font that comes with matplotlib: every machine draws the same
    "font.family": ["DejaVu Sans"],
    "font.size": 8,
    # text stays text, with its font inside the file
    "pdf.fonttype": 42,
    "svg.fonttype": "path",
    "svg.hashsalt": "extractor",
    "text.color": _INK,
    "axes.edgecolor": _INK,
    "text.usetex": False,
    "text.parse_math": False,
    "axes.unicode_minus": True,
}


@dataclass(frozen=True, slots=True)
class _Row:
    """A line of the figure: a heading of a group where ``effect`` is None."""

    text: str
    effect: dict[str, Any] | None
    side: float


def write_figure(effects: pd.DataFrame, path: Path, *, level: float = 0.95, by: str = "outcome") -> None:
    """Draw the forest plot of an effect table.

    Parameters
    ----------
    effects : an effect table of one metric, with whatever columns the sheet added.
    path : ends in .svg, .pdf or .png.
    level : of the confidence limits, as a proportion.
    by : column to group by, such as outcome or a moderator; "" for one group.

    Raises
    ------
    UsageError
        for another ending, a column that is not there, a table without an effect or with too many.
    """
    kind = path.suffix.lower()
    if kind not in ENDINGS:
        raise UsageError(f"--figure writes {', '.join(ENDINGS)}, not '{path.suffix}'")
    if by and by not in effects.columns:
        near = close_matches(by, [str(name) for name in effects.columns])
        words = [str(name) for name in effects.columns if is_text(effects[name])]
        hint = (
            f"did you mean {near[0]}?"
            if near
            else f"it has {', '.join(words)}, and any column the sheet adds"
        )
        raise UsageError(f"the effect table has no column {quoted(by)} to group the figure by; {hint}")
    drawn = effects[effects["status"].isin(["converted", "bounded"])]
    if drawn.empty:
        raise UsageError("no row has an effect to draw")
    if len(drawn) > MOST:
        raise UsageError(f"a figure shows at most {MOST} rows, these are {len(drawn)}: the report shows all")
    with matplotlib.rc_context(_SETTINGS), _fixed_date(), warnings.catch_warnings():
        # a letter that the font lacks shows as a box
        warnings.filterwarnings("ignore", "Glyph")
        figure = _figure(_rows(drawn, by), scale_of(drawn), effects, level)
        stream = io.BytesIO()
        figure.savefig(stream, format=kind[1:], dpi=200, metadata=_metadata(kind))
    path.write_bytes(stream.getvalue())


@contextmanager
def _fixed_date() -> Iterator[None]:
    """Let PDF files carry the fixed time in place of the clock's; matplotlib reads it from the environment."""
    before = os.environ.get("SOURCE_DATE_EPOCH")
    os.environ["SOURCE_DATE_EPOCH"] = str(int(fixed_time().timestamp()))
    try:
        yield
    finally:
        if before is None:
            del os.environ["SOURCE_DATE_EPOCH"]
        else:
            os.environ["SOURCE_DATE_EPOCH"] = before


def _metadata(kind: str) -> dict[str, Any]:
    """Who made the file; no date in SVG."""
    if kind == ".png":
        return {"Software": "Extractor"}
    return {"Creator": "Extractor", **({"Date": None} if kind == ".svg" else {})}


def _rows(drawn: pd.DataFrame, by: str) -> list[_Row]:
    """Lines from the top down, groups in the order they first appear."""
    found: dict[str, list[_Row]] = {}
    for effect, side, label in zip(drawn.to_dict("records"), sides(drawn), short_labels(drawn), strict=True):
        group = str(effect[by]) if by and not pd.isna(effect[by]) else ""
        row = _Row(_cut(label, 40), {str(name): value for name, value in effect.items()}, side)
        found.setdefault(group, []).append(row)
    rows: list[_Row] = []
    for group, own in found.items():
        rows += [_Row(_cut(group, 60), None, 0.0)] if group else []
        rows += own
    return rows


def _cut(text: str, most: int) -> str:
    flat = " ".join(text.split())
    return flat if len(flat) <= most else f"{flat[: most - 1]}…"


def _figure(rows: list[_Row], scale: Scale, effects: pd.DataFrame, level: float) -> Figure:
    """The whole figure."""
    height = _HEAD + _ROW * len(rows) + _FOOT
    figure = Figure(figsize=(_WIDTH, height))
    FigureCanvasAgg(figure)
    axes = figure.add_axes((_LEFT, _FOOT / height, _RIGHT - _LEFT, _ROW * len(rows) / height))
    axes.set_xlim(scale.low, scale.high)
    axes.set_ylim(len(rows) - 0.5, -0.5)
    axes.set_yticks([])
    axes.set_xticks(scale.ticks, [scale.label(tick) for tick in scale.ticks])
    for side in ("left", "right", "top"):
        axes.spines[side].set_visible(False)
    if scale.low <= 0 <= scale.high:
        axes.axvline(0, color=_RULE, linewidth=0.8, zorder=0)
    metric = str(effects["metric"].iloc[0])
    symbol = VOCABULARY[metric].symbol
    axes.set_xlabel(symbol)
    for at, row in enumerate(rows):
        _draw(figure, axes, row, at, scale)
    top = 1 - _HEAD / 2 / height
    figure.text(0.01, top, "study, effect", color=_SOFT, va="center")
    figure.text(0.99, top, f"{symbol} [{level * 100:g} % CI]", color=_SOFT, va="center", ha="right")
    figure.text(0.01, 0.12 / height, _note(effects), color=_SOFT, va="bottom", fontsize=6.5)
    return figure


def _draw(figure: Figure, axes: Axes, row: _Row, at: int, scale: Scale) -> None:
    """One line: its name, its marks, its numbers."""
    across = axes.get_yaxis_transform()
    left, right = (0.01 - _LEFT) / (_RIGHT - _LEFT), (0.99 - _LEFT) / (_RIGHT - _LEFT)
    weight = "bold" if row.effect is None else "normal"
    indent = 0.0 if row.effect is None else 0.02
    axes.text(left + indent, at, row.text, transform=across, va="center", fontweight=weight, clip_on=False)
    if row.effect is None:
        return
    effect = row.effect
    low, high = effect["estimate_low"], effect["estimate_high"]
    if effect["status"] == "bounded":
        numbers = _bound(axes, low, high, at, scale)
    else:
        numbers = shown(effect["estimate"])
        if math.isfinite(effect["ci_low"]):
            _line(axes, effect["ci_low"], effect["ci_high"], at, scale, "solid")
            numbers += f" [{shown(effect['ci_low'])}, {shown(effect['ci_high'])}]"
        if math.isfinite(low) and math.isfinite(high):
            start, end = max(low, scale.low), min(high, scale.high)
            # higher than the largest square, so that a band narrower than its square still looks out
            axes.add_patch(
                Rectangle((start, at - 0.36), end - start, 0.72, facecolor=_BAND, linewidth=0, zorder=2)
            )
        axes.plot(
            [effect["estimate"]], [at], marker="s", markersize=row.side * 0.55, color=_ACCENT, zorder=3, mew=0
        )
    axes.text(right, at, numbers, transform=across, va="center", ha="right", clip_on=False)


def _bound(axes: Axes, low: float, high: float, at: int, scale: Scale) -> str:
    """A bound: dashed, with a stop where there is a limit; returns its words."""
    known_low, known_high = math.isfinite(low), math.isfinite(high)
    start, end = low if known_low else scale.low - 1, high if known_high else scale.high + 1
    _line(axes, start, end, at, scale, (0, (3, 2)))
    for value in (low, high):
        if math.isfinite(value) and scale.low <= value <= scale.high:
            axes.plot([value, value], [at - 0.22, at + 0.22], color=_INK, linewidth=0.9)
    if known_low and known_high:
        return f"{shown(low)} to {shown(high)}"
    return f"at least {shown(low)}" if known_low else f"at most {shown(high)}"


def _line(axes: Axes, low: float, high: float, at: int, scale: Scale, style: Any) -> None:
    """A horizontal line, with a tip where it goes on beyond the scale."""
    start, end = max(low, scale.low), min(high, scale.high)
    axes.plot(
        [start, end], [at, at], color=_INK, linewidth=0.9, linestyle=style, zorder=1, solid_capstyle="butt"
    )
    if low < scale.low:
        axes.plot([scale.low], [at], marker="<", markersize=3.5, color=_INK, mew=0, clip_on=False)
    if high > scale.high:
        axes.plot([scale.high], [at], marker=">", markersize=3.5, color=_INK, mew=0, clip_on=False)


def _note(effects: pd.DataFrame) -> str:
    """What the marks are, and how many rows are not shown."""
    left = int((effects["status"] == "blocked").sum())
    said = "Square: estimate, larger the more precise. Band: what rounding of the printed numbers allows."
    if (effects["status"] == "bounded").any():
        said += " Dashed: only a bound."
    return said + (f"\n{counted(left, 'row')} without an effect not shown." if left else "")
