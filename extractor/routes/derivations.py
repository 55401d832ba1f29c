"""How every effect came about, as tables: the steps of each route, and the routes not taken."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from extractor.catalogue.relation import catalogue
from extractor.quantities import VOCABULARY, Shape
from extractor.routes.choice import NOTHING, Chosen
from extractor.routes.conversion import Conversion, route_words
from extractor.routes.engine import Estimate
from extractor.table import FloatArray, ObjectArray, Variable

if TYPE_CHECKING:
    import pandas as pd

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


@dataclass(frozen=True, slots=True)
class Step:
    """One step of a route, for the rows of a block that took it.

    number : counted from 1. role : reported, coded, assumed, derived, or "for the variance" for steps that only the
    sampling variance and the confidence limits need. relation : "" for what the route starts from.
    cells : the printed cells behind it, in group order.
    """

    number: int
    role: str
    quantity: str
    relation: str
    equation: str
    grade: str
    source: str
    cells: tuple[Variable, ...]
    estimate: Estimate


def steps_of(chosen: Chosen, index: int) -> Iterator[Step]:
    """The steps of a chosen route and of those its variance needs: reported cells first, relations as they ran."""
    supported = chosen.precisions.get(index)
    routes = [(chosen.routes[index], "derived")]
    routes += [(further, "for the variance") for further in (supported.further if supported else ())]
    seen: set[str] = set()
    relations = catalogue()
    for route, role in routes:
        found = chosen.engine.all_steps(route)
        for leaf in sorted(route.leaves - seen):
            seen.add(leaf)
            yield _leaf(chosen, leaf, len(seen), found[leaf])
        for name in route.ordered():
            relation = relations[name]
            if relation.gives in seen:
                continue
            seen.add(relation.gives)
            yield Step(
                len(seen),
                role,
                relation.gives,
                name,
                relation.equation,
                relation.grade.word,
                relation.source,
                (),
                found[relation.gives],
            )


def _leaf(chosen: Chosen, leaf: str, number: int, estimate: Estimate) -> Step:
    block = chosen.block
    assumption, cells = block.assumed.get(leaf), block.origins.get(leaf, ())
    role = "assumed" if assumption else "reported" if cells else "coded"
    grade = "assumption" if assumption else "bound" if leaf in block.bounds else "identity"
    return Step(number, role, leaf, "", "", grade, assumption.by if assumption else "", cells, estimate)


def steps_frame(conversion: Conversion) -> pd.DataFrame:
    """One line per row, step and group: reported cells first, then each relation in the order it ran.

    See ``Step`` for the columns.
    """
    import pandas as pd

    parts = [
        _lines(conversion, chosen, step, mine)
        for chosen in conversion.chosen
        for index in range(len(chosen.routes))
        if len(mine := np.flatnonzero(chosen.which == index))
        for step in steps_of(chosen, index)
    ]
    if not parts:
        return pd.DataFrame(columns=STEP_COLUMNS)
    frame = pd.concat(parts, ignore_index=True)
    return frame.sort_values(["row", "step", "group"], kind="stable", ignore_index=True)[STEP_COLUMNS]


def alternatives_frame(conversion: Conversion) -> pd.DataFrame:
    """Every admissible route of every row with what it gives; ``distance`` is from the chosen one's estimate."""
    import pandas as pd

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


def _lines(conversion: Conversion, chosen: Chosen, step: Step, mine: NDArray[np.intp]) -> pd.DataFrame:
    import pandas as pd

    table, estimate = conversion.evidence.table, step.estimate
    positions = chosen.block.positions[mine]
    grouped = VOCABULARY[step.quantity].shape is Shape.GROUP
    groups = estimate.value.shape[1] if grouped else 1

    def flat(values: FloatArray) -> FloatArray:
        return np.asarray(values[mine].ravel())

    places: ObjectArray = np.full((len(mine), groups), "", dtype=object)
    for column, cell in enumerate(step.cells):
        places[:, column] = table.wheres(cell, positions)
    return pd.DataFrame(
        {
            "step": step.number,
            "role": step.role,
            "quantity": step.quantity,
            "relation": step.relation,
            "equation": step.equation,
            "grade": step.grade,
            "source": step.source,
            "row": np.repeat(table.row_numbers[positions], groups),
            "group": np.tile(np.arange(1, groups + 1), len(mine)) if grouped else 0,
            "value": flat(estimate.value),
            "low": flat(estimate.low),
            "high": flat(estimate.high),
            "cell": places.ravel(),
        }
    )
