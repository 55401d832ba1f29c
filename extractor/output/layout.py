"""Places for the boxes of a small layered graph, left to right (after Sugiyama, Tagawa & Toda 1981).

Every box stands one column left of the first box that needs it. An arrow that passes columns gets a bend in each,
which takes part in the ordering, so that arrows do not run through boxes.
"""

from __future__ import annotations

from collections.abc import Mapping
from itertools import pairwise

Point = tuple[float, float]
Edge = tuple[str, str]

_SWEEPS = 6
_BEND_HEIGHT = 8.0


def arrange(
    needs: Mapping[str, tuple[str, ...]],
    target: str,
    sizes: Mapping[str, tuple[float, float]],
    column_gap: float,
    row_gap: float,
) -> tuple[dict[str, Point], dict[Edge, list[Point]]]:
    """Top left corners of the boxes, and the points at which every arrow enters and leaves columns.

    Parameters
    ----------
    needs : the boxes each box is made from; every box leads to ``target``, without cycles.
    sizes : width and height of each box.
    """
    depths = _depths(needs, target)
    deepest = max(depths.values())
    columns: list[list[str]] = [[] for _ in range(deepest + 1)]
    for name in needs:
        columns[deepest - depths[name]].append(name)
    chains: dict[Edge, list[str]] = {}
    for end, starts in needs.items():
        for start in starts:
            passed = range(deepest - depths[start] + 1, deepest - depths[end])
            chains[start, end] = [f"{start}>{end}@{at}" for at in passed]
            for at, bend in zip(passed, chains[start, end], strict=True):
                columns[at].append(bend)
    _order(columns, _neighbours(chains))
    return _place(columns, chains, sizes, column_gap, row_gap)


def _depths(needs: Mapping[str, tuple[str, ...]], target: str) -> dict[str, int]:
    """Longest way from each box to the target."""
    depths = {target: 0}
    left = [target]
    while left:
        name = left.pop()
        for need in needs[name]:
            if depths.get(need, -1) < depths[name] + 1:
                depths[need] = depths[name] + 1
                left.append(need)
    return depths


def _neighbours(chains: Mapping[Edge, list[str]]) -> dict[str, list[str]]:
    """Boxes and bends next to each box and bend."""
    found: dict[str, list[str]] = {}
    for (start, end), bends in chains.items():
        way = [start, *bends, end]
        for one, other in pairwise(way):
            found.setdefault(one, []).append(other)
            found.setdefault(other, []).append(one)
    return found


def _order(columns: list[list[str]], neighbours: Mapping[str, list[str]]) -> None:
    """Sort each column by the mean place of its neighbours in the column before, there and back."""
    for sweep in range(_SWEEPS):
        forth = sweep % 2 == 0
        order = range(1, len(columns)) if forth else range(len(columns) - 2, -1, -1)
        for at in order:
            fixed = columns[at - 1 if forth else at + 1]
            places = {name: place / max(len(fixed) - 1, 1) for place, name in enumerate(fixed)}
            own = {name: place / max(len(columns[at]) - 1, 1) for place, name in enumerate(columns[at])}

            def centre(
                name: str, places: Mapping[str, float] = places, own: Mapping[str, float] = own
            ) -> tuple[float, float]:
                known = [places[n] for n in neighbours.get(name, ()) if n in places]
                return (sum(known) / len(known) if known else own[name], own[name])

            columns[at].sort(key=centre)


def _place(
    columns: list[list[str]],
    chains: Mapping[Edge, list[str]],
    sizes: Mapping[str, tuple[float, float]],
    column_gap: float,
    row_gap: float,
) -> tuple[dict[str, Point], dict[Edge, list[Point]]]:
    """Coordinates: columns side by side, each centred, their boxes flush right.

    An arrow so leaves at the edge of a column, and enters one level with its box: it never runs under another.
    """

    def height(name: str) -> float:
        return sizes[name][1] if name in sizes else _BEND_HEIGHT

    heights = [sum(map(height, column)) + row_gap * (len(column) - 1) for column in columns]
    tallest = max(heights)
    places: dict[str, Point] = {}
    passages: dict[str, list[Point]] = {}
    x = 0.0
    for column, own in zip(columns, heights, strict=True):
        width = max((sizes[name][0] for name in column if name in sizes), default=0.0)
        y = (tallest - own) / 2
        for name in column:
            if name in sizes:
                places[name] = (x + width - sizes[name][0], y)
                passages[name] = [(x, y + sizes[name][1] / 2)]
            else:
                middle = y + _BEND_HEIGHT / 2
                passages[name] = [(x, middle), (x + width, middle)]
            y += height(name) + row_gap
        x += width + column_gap
    bends = {
        edge: [p for name in (*chain, edge[1]) for p in passages[name]] for edge, chain in chains.items()
    }
    return places, bends
