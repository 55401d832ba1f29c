"""How every effect came about, as tables: the steps of each route, and the routes not taken."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from extractor.catalogue.relation import catalogue
from extractor.quantities import VOCABULARY, Shape
from extractor.routes.choice import NOTHING, Chosen
from extractor.routes.conversion import Conversion, route_words
from extractor.routes.engine import Estimate
from extractor.routes.planner import Route
from extractor.table import FloatArray, ObjectArray

STEP_COLUMNS = [
    "row",
    "step",
    "role",
    "quantity",
    "group",
    "value",
    "low",
    "high",
    "relation",
    "equation",
    "grade",
    "source",
    "cell",
]
ALTERNATIVE_COLUMNS = ["row", "rank", "route", "grade", "chosen", "estimate", "low", "high", "distance"]


def steps_frame(conversion: Conversion) -> pd.DataFrame:
    """One line per row, step and group: reported cells first, then each relation in the order it ran.

    ``role`` is reported, coded, assumed, derived, or "for the variance" for steps that only the sampling variance
    and the confidence limits need.
    """
    parts = [part for chosen in conversion.chosen for part in _steps(conversion, chosen)]
    if not parts:
        return pd.DataFrame(columns=STEP_COLUMNS)
    frame = pd.concat(parts, ignore_index=True)
    return frame.sort_values(["row", "step", "group"], kind="stable", ignore_index=True)[STEP_COLUMNS]


def alternatives_frame(conversion: Conversion) -> pd.DataFrame:
    """Every admissible route of every row with what it gives; ``distance`` is from the chosen one's estimate."""
    parts = []
    for chosen in conversion.chosen:
        if not chosen.routes:
            continue
        rows = conversion.evidence.table.row_numbers[chosen.block.positions]
        values = np.stack([e.value for e in chosen.estimates])
        taken = np.where(
            chosen.which == NOTHING,
            np.nan,
            np.take_along_axis(values, np.maximum(chosen.which, 0)[None], axis=0)[0],
        )
        for rank, (route, estimate) in enumerate(zip(chosen.routes, chosen.estimates, strict=True)):
            parts.append(
                pd.DataFrame(
                    {
                        "row": rows,
                        "rank": rank + 1,
                        "route": route_words(route.leaves, conversion.metric),
                        "grade": route.grade.word,
                        "chosen": chosen.which == rank,
                        "estimate": estimate.value,
                        "low": estimate.low,
                        "high": estimate.high,
                        "distance": np.abs(estimate.value - taken),
                    }
                )
            )
    if not parts:
        return pd.DataFrame(columns=ALTERNATIVE_COLUMNS)
    frame = pd.concat(parts, ignore_index=True)
    return frame.sort_values(["row", "rank"], kind="stable", ignore_index=True)[ALTERNATIVE_COLUMNS]


def _steps(conversion: Conversion, chosen: Chosen) -> Iterator[pd.DataFrame]:
    for index, route in enumerate(chosen.routes):
        mine = np.flatnonzero(chosen.which == index)
        if not len(mine):
            continue
        supported = chosen.precisions.get(index)
        seen: dict[str, int] = {}
        routes = [(route, "derived")]
        routes += [(further, "for the variance") for further in (supported.further if supported else ())]
        for each, role in routes:
            yield from _route_steps(conversion, chosen, each, role, mine, seen)


def _route_steps(
    conversion: Conversion,
    chosen: Chosen,
    route: Route,
    role: str,
    mine: NDArray[np.intp],
    seen: dict[str, int],
) -> Iterator[pd.DataFrame]:
    relations = catalogue()
    found = chosen.engine.all_steps(route)
    for leaf in sorted(route.leaves):
        if leaf not in seen:
            seen[leaf] = len(seen) + 1
            yield _leaf_lines(conversion, chosen, leaf, found[leaf], mine, seen[leaf])
    for name in route.ordered():
        relation = relations[name]
        if relation.gives in seen:
            continue
        seen[relation.gives] = len(seen) + 1
        about = {
            "step": seen[relation.gives],
            "role": role,
            "quantity": relation.gives,
            "relation": name,
            "equation": relation.equation,
            "grade": relation.grade.word,
            "source": relation.source,
        }
        yield _lines(conversion, chosen, found[relation.gives], mine, about, None)


def _leaf_lines(
    conversion: Conversion, chosen: Chosen, leaf: str, estimate: Estimate, mine: NDArray[np.intp], step: int
) -> pd.DataFrame:
    block = chosen.block
    assumption = block.assumed.get(leaf)
    cells = block.origins.get(leaf)
    role = "assumed" if assumption else "reported" if cells else "coded"
    about = {
        "step": step,
        "role": role,
        "quantity": leaf,
        "relation": "",
        "equation": "",
        "grade": "assumption" if assumption else "bound" if leaf in block.bounds else "identity",
        "source": assumption.by if assumption else "",
    }
    return _lines(conversion, chosen, estimate, mine, about, cells)


def _lines(
    conversion: Conversion,
    chosen: Chosen,
    estimate: Estimate,
    mine: NDArray[np.intp],
    about: dict[str, object],
    cells: tuple[tuple[str, int | None], ...] | None,
) -> pd.DataFrame:
    table = conversion.evidence.table
    rows = table.row_numbers[chosen.block.positions[mine]]
    grouped = VOCABULARY[str(about["quantity"])].shape is Shape.GROUP
    groups = estimate.value.shape[1] if grouped else 1

    def flat(values: FloatArray) -> FloatArray:
        return np.asarray(values[mine].ravel())

    positions = chosen.block.positions[mine]
    places: ObjectArray = np.full((len(rows), groups), "", dtype=object)
    for column, cell in enumerate(cells or ()):
        places[:, column] = table.wheres(cell, positions)
    return pd.DataFrame(
        {
            **about,
            "row": np.repeat(rows, groups),
            "group": np.tile(np.arange(1, groups + 1), len(rows)) if grouped else 0,
            "value": flat(estimate.value),
            "low": flat(estimate.low),
            "high": flat(estimate.high),
            "cell": places.ravel(),
        }
    )
