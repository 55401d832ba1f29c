"""One route, from the reported cells step by step to the effect: as lines of text, and as a drawing (SVG).

Rows whose routes have one shape share boxes, formulas and arrows; only the values differ. The report holds the lines
of every row but each shape once, and its script puts the lines of a row into the shape when somebody looks, so that a
thousand rows stay light. Without the script the lines are there to read.
"""

from __future__ import annotations

import math
import re
from collections.abc import Hashable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from html import escape
from itertools import pairwise
from typing import Any

from extractor.catalogue.relation import catalogue
from extractor.output.layout import arrange
from extractor.quantities import VOCABULARY
from extractor.words import plain

_LETTER, _LINE, _PAD = 7.3, 16, 9
"""Width of a letter, height of a line and room around the text, in pixels."""
_COLUMN_GAP, _ROW_GAP, _MARGIN = 36, 12, 6
_PIECE = re.compile(r"\S.{0,33}(?= |$)|\S+")
"""A line of a box: as many words as go into 34 letters, or one long word; the script of the report breaks alike."""
_PAPER = 960
"""Width in pixels up to which a drawing can still be read on paper; instead of a wider one its lines are printed."""
_SHOWN_GROUPS = 4
_COLUMN = re.compile(r"(\[[A-Z]{1,3})\]\Z")
"""The column of a cell, whose row completes the address."""

STYLE = (
    ".route{font:12px/1 ui-monospace,Menlo,Consolas,'DejaVu Sans Mono',monospace;fill:#1f2933}"
    ".route rect{fill:#fff;stroke:#8a97a5}.route .leaf rect{fill:#eef1f4;stroke:none}"
    ".route .aim rect{stroke:#0b5563;stroke-width:2}.route .loss rect{stroke-dasharray:5 3}"
    ".route path{fill:none;stroke:#8a97a5}.route .tip{fill:#8a97a5;stroke:none}"
    ".route .how{fill:#52606d}"
)


@dataclass(frozen=True, slots=True)
class Step:
    """One quantity of a route.

    shown : its value or values, with the interval that rounding leaves. lines : what stands below it.
    """

    quantity: str
    symbol: str
    shown: str
    lines: tuple[str, ...]
    reported: bool
    grade: str
    needs: tuple[str, ...]
    source: str
    equation: str


@dataclass(frozen=True, slots=True)
class Box:
    """A step with its place."""

    step: Step
    x: float
    y: float
    width: float
    height: float


@dataclass(frozen=True, slots=True)
class Arrow:
    """A path, and where its tip stands."""

    path: str
    x: float
    y: float


@dataclass(frozen=True, slots=True)
class Shape:
    """Boxes and arrows of a route, without values."""

    boxes: tuple[Box, ...]
    arrows: tuple[Arrow, ...]
    width: float
    height: float


Record = Mapping[Hashable, Any]
"""One line of the derivations table."""


def route_steps(lines: Sequence[Record], numbers: Mapping[str, int] | None = None) -> dict[str, Step]:
    """The steps of one row by quantity, in the order they ran.

    Parameters
    ----------
    lines : the row's part of the derivations table, as records.
    numbers : number by relation in a list of sources, to refer to; without it the source itself is shown.
    """
    parts: dict[str, list[Record]] = {}
    for line in lines:
        parts.setdefault(str(line["quantity"]), []).append(line)
    return {quantity: _step(quantity, part, numbers) for quantity, part in parts.items()}


def _step(quantity: str, part: Sequence[Record], numbers: Mapping[str, int] | None) -> Step:
    first = part[0]
    relation = str(first["relation"])
    if relation:
        where = f"[{numbers[relation]}]" if numbers else str(first["source"])
        grade = "" if first["grade"] == "identity" else f" {first['grade']}"
        below = (*_pieces(str(first["equation"])), *_pieces(where + grade))
    else:
        below = _pieces(_origin(part))
    return Step(
        quantity=quantity,
        symbol=VOCABULARY[quantity].symbol,
        shown=_values(part),
        lines=below,
        reported=not relation,
        grade=str(first["grade"]),
        needs=catalogue()[relation].needs if relation else (),
        source=str(first["source"]),
        equation=str(first["equation"]),
    )


def _pieces(text: str) -> tuple[str, ...]:
    """Text in lines of a box."""
    return tuple(_PIECE.findall(" ".join(text.split())))


def _origin(part: Sequence[Record]) -> str:
    """Where a value that was not derived comes from."""
    cells = [_COLUMN.sub(f"\\g<1>{line['row']}]", str(line["cell"])) for line in part if line["cell"]]
    if cells:
        return ", ".join(cells if len(cells) < 4 else [*cells[:2], f"{len(cells) - 2} more"])
    if part[0]["role"] == "assumed":
        return f"assumed: {part[0]['source']}"
    return "as coded"


def _values(part: Sequence[Record]) -> str:
    """The values of all groups, or one value with its interval."""
    triples = [(line["value"], line["low"], line["high"]) for line in part]
    if len(triples) > 1:
        shown = [_value(*triple, interval=False) for triple in triples[:_SHOWN_GROUPS]]
        more = f" … ({len(triples)})" if len(triples) > _SHOWN_GROUPS else ""
        return ", ".join(shown) + more
    return _value(*triples[0], interval=True)


def _value(value: float, low: float, high: float, *, interval: bool) -> str:
    known = not math.isnan(value)
    exact = known and not high - low > 1e-9 * max(abs(low), abs(high))
    ends = f"{_end(low, '-∞')} to {_end(high, '∞')}"
    if not known:
        return ends
    return plain(float(value)) if exact or not interval else f"{plain(float(value))} ({ends})"


def _end(value: float, without: str) -> str:
    return plain(float(value)) if not math.isnan(value) and abs(value) != float("inf") else without


def ancestors(steps: Mapping[str, Step], target: str) -> dict[str, Step]:
    """The steps the target rests on, itself included, in their order; the others serve its variance."""
    wanted: set[str] = set()
    left = [target] if target in steps else []
    while left:
        name = left.pop()
        if name not in wanted:
            wanted.add(name)
            left += [need for need in steps[name].needs if need in steps]
    return {name: step for name, step in steps.items() if name in wanted}


def shape(rows: Sequence[Mapping[str, Step]], target: str) -> Shape:
    """Boxes and arrows for rows whose steps are the same, wide enough for the values of all of them."""
    steps = rows[0]
    sizes = {}
    for name, step in steps.items():
        heads = (f"{row[name].symbol} = {row[name].shown}" for row in rows)
        below = (line for row in rows for line in (row[name].lines if step.reported else step.lines))
        letters = max(len(text) for text in (*heads, *below))
        lines = 1 + max(len(row[name].lines) for row in rows)
        sizes[name] = (letters * _LETTER + 2 * _PAD, lines * _LINE + 2 * _PAD - 4)
    needs = {name: tuple(n for n in step.needs if n in steps) for name, step in steps.items()}
    places, bends = arrange(needs, target, sizes, _COLUMN_GAP, _ROW_GAP)
    boxes = tuple(Box(steps[name], *places[name], *sizes[name]) for name in steps)
    arrows = []
    for (start, end), between in bends.items():
        (x, y), (width, height) = places[start], sizes[start]
        (to_x, to_y), (_, to_height) = places[end], sizes[end]
        enter = (to_x - 5, to_y + to_height / 2)
        points = [(x + width, y + height / 2), *((min(at, enter[0]), over) for at, over in between), enter]
        arrows.append(Arrow(_curve(points), *enter))
    right = max(box.x + box.width for box in boxes)
    bottom = max(
        [
            *(box.y + box.height for box in boxes),
            *(y + _ROW_GAP / 2 for way in bends.values() for _, y in way),
        ]
    )
    return Shape(boxes, tuple(arrows), right + 2 * _MARGIN, bottom + 2 * _MARGIN)


def _curve(points: Sequence[tuple[float, float]]) -> str:
    """A path through points, level at each of them."""
    parts = [f"M{points[0][0]:.0f} {points[0][1]:.0f}"]
    for (x, y), (to_x, to_y) in pairwise(points):
        if y == to_y:
            parts.append(f"H{to_x:.0f}")
            continue
        middle = (x + to_x) / 2
        parts.append(f"C{middle:.0f} {y:.0f} {middle:.0f} {to_y:.0f} {to_x:.0f} {to_y:.0f}")
    return "".join(parts)


def in_lines(steps: Iterable[Step]) -> str:
    """The route as text, one step a line: the value, a tab, and where it comes from."""
    return "\n".join(f"{step.symbol} = {step.shown}\t{' '.join(step.lines)}" for step in steps)


def outline(drawn: Shape, target: str) -> str:
    """What all rows of a shape share, as SVG: one box for each line of text, with formula and source where derived."""
    size = f'width="{drawn.width:.0f}" height="{drawn.height:.0f}" viewBox="0 0 {drawn.width:.0f} {drawn.height:.0f}"'
    parts = [f'<path d="{arrow.path}"/>' for arrow in drawn.arrows]
    for arrow in drawn.arrows:
        parts.append(f'<path class="tip" d="M{arrow.x:.0f} {arrow.y - 4:.0f}l6 4l-6 4z"/>')
    parts += [_box(box, target) for box in drawn.boxes]
    group = f'<g transform="translate({_MARGIN} {_MARGIN})">{"".join(parts)}</g>'
    kind = "route" if drawn.width <= _PAPER else "route wide"
    return f'<svg class="{kind}" aria-hidden="true" {size}>{group}</svg>'


def _box(box: Box, target: str) -> str:
    """A box with its formula; the place of the value, and below it that of the cells, is left open."""
    step = box.step
    kinds = ["leaf"] if step.reported else []
    kinds += ["aim"] if step.quantity == target else []
    kinds += ["loss"] if step.grade != "identity" else []
    x, y = f"{box.x + _PAD:.0f}", f"{box.y + _PAD + 9:.0f}"
    below = (
        ""
        if step.reported
        else "".join(f'<tspan class="how" x="{x}" dy="{_LINE}">{escape(line)}</tspan>' for line in step.lines)
    )
    return (
        (f'<g class="{" ".join(kinds)}">' if kinds else "<g>")
        + f'<rect x="{box.x:.0f}" y="{box.y:.0f}" width="{box.width:.0f}" height="{box.height:.0f}" rx="2">'
        + f"<title>{escape(VOCABULARY[step.quantity].meaning)}</title></rect>"
        + f'<text x="{x}" y="{y}">{below}</text></g>'
    )
