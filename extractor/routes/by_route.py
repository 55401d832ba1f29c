"""The effect of every row along each admissible route, and the rows in which the choice of route matters."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pandas as pd

from extractor.catalogue.relation import Grade
from extractor.routes.choice import Chosen
from extractor.routes.conversion import Conversion, route_words
from extractor.routes.planner import Route
from extractor.routes.sensitivity import (
    LABELS,
    flipped_rows,
    in_sheet_order,
    in_standard_errors,
    labelled,
    variance_of_rows,
)
from extractor.sampling.precision import standardizer_of

COLUMNS = [
    *("row", *LABELS, "metric", "routes", "estimate", "lowest", "highest", "spread", "spread_in_se"),
    *("beyond_rounding", "lowest_route", "highest_route"),
]


def by_route(conversion: Conversion) -> pd.DataFrame:
    """Per row with a point: how many routes there are, what they give at least and at most, and how far apart.

    Only routes that divide by the same standard deviation as the chosen one are compared, and no bounds.
    ``beyond_rounding`` marks the rows in which the choice matters: some route's interval lies apart from the
    chosen one's, so that rounding does not explain the difference.
    """
    parts = [part for chosen in conversion.chosen for part in _by_route(conversion, chosen)]
    return in_sheet_order(parts, COLUMNS)


def _by_route(conversion: Conversion, chosen: Chosen) -> Iterator[pd.DataFrame]:
    """The rows of each chosen route with what the comparable routes give."""
    design = chosen.block.design
    for index in np.unique(chosen.which[chosen.pointed]):
        own = standardizer_of(chosen.routes[index].standardizer, design)
        alike = [
            at
            for at, route in enumerate(chosen.routes)
            if standardizer_of(route.standardizer, design) == own and route.grade is not Grade.BOUND
        ]
        rows = (chosen.which == index) & chosen.pointed
        values = np.stack([chosen.estimates[at].value[rows] for at in alike])
        ends = [[chosen.estimates[at].interval[end][rows] for at in alike] for end in (0, 1)]
        low, high = (np.where(np.isfinite(values), np.stack(end), np.nan) for end in ends)
        mine = alike.index(int(index))
        with np.errstate(invalid="ignore"):
            apart = ((low > high[mine]) | (high < low[mine])).any(axis=0)
        lowest, highest = np.fmin.reduce(values), np.fmax.reduce(values)
        words = np.array([_words(chosen.routes[at], conversion.metric) for at in alike])
        first = words[np.where(np.isfinite(values), values, np.inf).argmin(axis=0)]
        last = words[np.where(np.isfinite(values), values, -np.inf).argmax(axis=0)]
        flipped = flipped_rows(conversion, chosen)[rows]
        yield labelled(
            conversion,
            chosen.block.positions[rows],
            routes=np.isfinite(values).sum(axis=0),
            estimate=np.where(flipped, -1, 1) * values[mine],
            lowest=np.where(flipped, -highest, lowest),
            highest=np.where(flipped, -lowest, highest),
            spread=highest - lowest,
            spread_in_se=in_standard_errors(highest - lowest, variance_of_rows(chosen, int(index))),
            beyond_rounding=apart,
            lowest_route=np.where(flipped, last, first),
            highest_route=np.where(flipped, first, last),
        )


def _words(route: Route, metric: str) -> str:
    """A route by what it starts from; what it loses is said where it is more than rounding."""
    lost = "" if route.grade is Grade.IDENTITY else f" ({route.grade.word})"
    return route_words(route.leaves, metric) + lost
