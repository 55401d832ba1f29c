"""Lines of the sheet of groups that are parts of one group: merged into the group they make up, exactly.

Lines of one analysis with the same label in the column ``group`` are subgroups (Cochrane Handbook, ch. 6, 6.5.2.10,
gives the formula for two; locator from memory). The interval of the merged SD takes the least and the greatest sum of
squares between the subgroups' rounded means.
"""

from __future__ import annotations

from dataclasses import fields, replace

import numpy as np
from numpy.typing import NDArray

from extractor.catalogue.groups import greatest_between, least_between
from extractor.catalogue.merging import merged_groups
from extractor.distinct import distinct
from extractor.table import FloatArray, Numbers, ReportedTable

_MERGED = ("n", "mean", "sd")
_WIDEN = 1e-12
_PARTS = tuple(field.name for field in fields(Numbers) if field.name != "place")
_NOTHING = (np.nan, np.nan, np.nan)
Ends = tuple[FloatArray, FloatArray, FloatArray]


def merged_lines(long: ReportedTable, labels: NDArray[np.object_]) -> ReportedTable:
    """The sheet with one line for each group; ``labels`` are the lines' group labels, "" where there is none."""
    pairs = list(zip(long.fact("analysis").tolist(), labels.tolist(), strict=True))
    _, code = distinct(pairs)
    alone = labels == ""
    code = np.where(alone, len(code) + np.arange(len(code)), code)
    parts = [np.flatnonzero(code == each) for each in dict.fromkeys(code[~alone].tolist())]
    parts = [lines for lines in parts if len(lines) > 1]
    if not parts:
        return long
    numbers = {
        variable: Numbers(**{name: getattr(column, name).copy() for name in _PARTS}, place=column.place)
        for variable, column in long.numbers.items()
    }
    for lines in parts:
        merged = _merged([_ends(long, name, lines) for name in _MERGED])
        where = ", ".join(str(long.row_numbers[line]) for line in lines)
        for (name, _), column in numbers.items():
            value = merged[_MERGED.index(name)] if name in _MERGED else _NOTHING
            _put(column, int(lines[0]), value, f"merged from lines {where}")
            if name == "n" and value is _NOTHING:
                column.problem[lines[0]] = f"lines {where} are not merged: each needs an n of 0 or more"
    keep = np.setdiff1d(np.arange(len(code)), np.concatenate([lines[1:] for lines in parts]))
    kept = {
        variable: Numbers(**{name: getattr(column, name)[keep] for name in _PARTS}, place=column.place)
        for variable, column in numbers.items()
    }
    facts = {name: words[keep] for name, words in long.facts.items()}
    carried = {heading: words[keep] for heading, words in long.carried.items()}
    return replace(long, row_numbers=long.row_numbers[keep], numbers=kept, facts=facts, carried=carried)


def _ends(long: ReportedTable, name: str, lines: NDArray[np.intp]) -> Ends:
    column = long.numbers.get((name, 1))
    if column is None:
        nothing = np.full((1, len(lines)), np.nan)
        return nothing, nothing, nothing
    value, low, high = (
        np.where(column.given[lines], end[lines], np.nan)[None, :]
        for end in (column.value, column.low, column.high)
    )
    return value, low, high


def _merged(ends: list[Ends]) -> list[tuple[float, float, float]]:
    """n, mean and SD of the union as (value, low, high); NaN where a part lacks a number."""
    (n, _, _), mean, sd = ends
    # without the size of one part nothing is known of the whole, and a negative one is a slip
    if not (n >= 0).all():
        return [_NOTHING] * len(ends)
    total, middle, spread = merged_groups(n, mean[0], sd[0])
    centres = [float((n * end).sum() / total[0]) for end in mean[1:]]
    within = [((n - 1) * end**2).sum(axis=-1) for end in sd[1:]]
    with np.errstate(invalid="ignore"):
        # a mean of which only a bound is known has no greatest sum
        between = least_between(n, *mean[1:]), greatest_between(n, *mean[1:])
    low, high = (np.sqrt((w + b) / (total - 1)) for w, b in zip(within, between, strict=True))
    return [
        (float(total[0]),) * 3,
        (float(middle[0]), centres[0] - _WIDEN * abs(centres[0]), centres[1] + _WIDEN * abs(centres[1])),
        (float(spread[0]), float(low[0]) * (1 - _WIDEN), float(high[0]) * (1 + _WIDEN)),
    ]


def _put(column: Numbers, line: int, ends: tuple[float, float, float], how: str) -> None:
    known = bool(np.isfinite(ends).all())
    column.value[line], column.low[line], column.high[line] = ends
    column.given[line] = known
    column.unit[line] = ends[2] - ends[1] if known else np.nan
    column.comparator[line] = "=" if known else ""
    column.understood[line] = how if known else ""
    column.problem[line] = ""
