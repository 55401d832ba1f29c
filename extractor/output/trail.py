"""The derivations as JSON: for every row its steps and the routes not taken, written many rows at a time.

Rows of one block that took one route have the same steps with other numbers in them, so that a step is put together
once and its numbers are filled in for all these rows together.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from extractor.api import Result
from extractor.catalogue.relation import catalogue
from extractor.output.tables import as_json, number_texts
from extractor.quantities import VOCABULARY, Shape
from extractor.routes.choice import NOTHING, Chosen
from extractor.routes.conversion import Conversion, route_words
from extractor.routes.derivations import Step, steps_of
from extractor.routes.engine import Estimate
from extractor.runs.recorded import recorded_texts
from extractor.table import FloatArray, ReportedTable, Variable

_CHUNK = 10_000
"""Rows put together at a time, so that memory stays flat."""
_NO_LIMIT = ("null", "null", "null")

Tick = Callable[[int], None]
"""Told how many rows were written since it was last told."""


def write_derivations(result: Result, path: Path, tick: Tick) -> None:
    """``rows``: how each row's estimate came about; ``relations``: what each relation used is.

    A step names its relation, whose ``needs`` are its inputs. Ends without a limit are null.
    """
    with path.open("w", encoding="utf-8", errors="backslashreplace", newline="") as stream:
        stream.write(OPENING)
        for at, rows in enumerate(row_texts(result.conversion)):
            stream.write((",\n" if at else "") + ",\n".join(rows))
            tick(len(rows))
        stream.write(closing(relations_used(result.conversion)))


OPENING = '{"rows": [\n'
"""What stands before the first row."""


def closing(relations: set[str]) -> str:
    """What stands after the last row, from the names of the relations in any of them."""
    lines = ",\n".join(f"{as_json(name)}: {as_json(_relation(name))}" for name in sorted(relations))
    return f'\n],\n"relations": {{\n{lines}\n}}}}\n'


def relations_used(conversion: Conversion) -> set[str]:
    """The relations on the route of any row, or on those of its variance."""
    return {
        step.relation
        for chosen in conversion.chosen
        for index in np.unique(chosen.which[chosen.which != NOTHING]).tolist()
        for step in steps_of(chosen, index)
        if step.relation
    }


def row_texts(conversion: Conversion) -> Iterator[list[str]]:
    """Every row as JSON, in sheet order, some thousand rows at a time."""
    table = conversion.evidence.table
    for start in range(0, table.rows, _CHUNK):
        rows = np.arange(start, min(start + _CHUNK, table.rows))
        steps, others = [""] * len(rows), [""] * len(rows)
        for chosen in conversion.chosen:
            here = _within(chosen.block.positions, start, start + _CHUNK)
            if here.stop == here.start:
                continue
            places = (chosen.block.positions[here] - start).tolist()
            _place(others, places, _alternatives(conversion, chosen, here))
            for index in np.unique(chosen.which[here]).tolist():
                if index != NOTHING:
                    mine = here.start + np.flatnonzero(chosen.which[here] == index)
                    taken = _steps(table, chosen, index, mine)
                    _place(steps, (chosen.block.positions[mine] - start).tolist(), taken)
        yield _joined(conversion, rows, steps, others)


def _within(positions: NDArray[np.intp], start: int, stop: int) -> slice:
    """Where the ascending positions lie between two."""
    first, last = np.searchsorted(positions, [start, stop])
    return slice(int(first), int(last))


def _place(into: list[str], places: list[int], texts: list[str]) -> None:
    for place, text in zip(places, texts, strict=True):
        into[place] = text


def _joined(conversion: Conversion, rows: NDArray[np.intp], steps: list[str], others: list[str]) -> list[str]:
    columns, table = conversion.columns, conversion.evidence.table
    estimate = number_texts(np.asarray(columns["estimate"][rows], dtype=float), _NO_LIMIT)
    parts = zip(
        others,
        recorded_texts(table, rows),
        estimate,
        map(as_json, columns["metric"][rows].tolist()),
        columns["row"][rows].tolist(),
        map(as_json, columns["status"][rows].tolist()),
        steps,
        strict=True,
    )
    return [
        f'{{"alternatives": [{a}], "cells": {{{c}}}, "estimate": {e}, "metric": {m}, "row": {r}, "status": {s}, '
        f'"steps": [{t}]}}'
        for a, c, e, m, r, s, t in parts
    ]


def _alternatives(conversion: Conversion, chosen: Chosen, here: slice) -> list[str]:
    """Every admissible route of some rows with what it gives; ``distance`` is from the chosen one's estimate."""
    which, parts = chosen.which[here], []
    taken = np.full(len(which), np.nan)
    for index, estimate in enumerate(chosen.estimates):
        taken = np.where(which == index, estimate.value[here], taken)
    for rank, (route, estimate) in enumerate(zip(chosen.routes, chosen.estimates, strict=True)):
        value = estimate.value[here]
        ends = _three(value, estimate.low[here], estimate.high[here])
        words = as_json(route_words(route.leaves, conversion.metric))
        numbers = zip(which == rank, _texts(np.abs(value - taken)), *ends, strict=True)
        grade = as_json(route.grade.word)
        parts.append(
            [
                f'{{"chosen": {"true" if own else "false"}, "distance": {d}, "estimate": {e}, "grade": {grade}, '
                f'"high": {h}, "low": {low}, "rank": {rank + 1}, "route": {words}}}'
                for own, d, e, low, h in numbers
            ]
        )
    return list(map(", ".join, zip(*parts, strict=True))) if parts else [""] * len(which)


def _steps(table: ReportedTable, chosen: Chosen, index: int, mine: NDArray[np.intp]) -> list[str]:
    """The steps of some rows that took one route."""
    parts = [texts for step in steps_of(chosen, index) for texts in _step_texts(table, chosen, step, mine)]
    return list(map(", ".join, zip(*parts, strict=True)))


def _step_texts(
    table: ReportedTable, chosen: Chosen, step: Step, mine: NDArray[np.intp]
) -> Iterator[list[str]]:
    """One step of some rows, once for each group; without what is blank or said once under ``relations``."""
    positions, estimate = chosen.block.positions[mine], step.estimate
    grouped = VOCABULARY[step.quantity].shape is Shape.GROUP
    about = {"quantity": step.quantity, "relation": step.relation, "role": step.role, "step": step.number}
    tail = as_json({name: value for name, value in about.items() if value != ""})[1:-1]
    graded = f'"grade": {as_json(step.grade)}, ' if not step.relation else ""
    source = f', "source": {as_json(step.source)}' if step.source and not step.relation else ""
    # the keys stand in alphabetical order: source between role and step
    before, _, number = tail.rpartition(', "step": ')
    for column in range(estimate.value.shape[1] if grouped else 1):
        value, low, high = _three(*_ends(estimate, column if grouped else None, mine))
        group = f'"group": {column + 1}, ' if grouped else ""
        cell = [""] * len(mine)
        understood = [""] * len(mine)
        if column < len(step.cells):
            cell = _cells(table, step.cells[column], positions)
        if step.role == "reported":
            understood = _understood(table, step.quantity, column + 1 if grouped else None, positions)
        lines = zip(cell, high, low, understood, value, strict=True)
        yield [
            f'{{{c}{graded}{group}"high": {h}, "low": {lo}, {before}{source}, "step": {number}{u}, "value": {v}}}'
            for c, h, lo, u, v in lines
        ]


def _cells(table: ReportedTable, variable: Variable, positions: NDArray[np.intp]) -> list[str]:
    places = table.wheres(variable, positions).tolist()
    joined = "".join(places)
    # where nothing in them needs escaping, none of them does
    if all(places) and as_json(joined) == f'"{joined}"':
        return [f'"cell": "{place}", ' for place in places]
    return [f'"cell": {as_json(place)}, ' if place else "" for place in places]


def _understood(
    table: ReportedTable, quantity: str, group: int | None, positions: NDArray[np.intp]
) -> list[str]:
    numbers = table.numbers.get((quantity, group))
    if numbers is None:
        return [""] * len(positions)
    return [
        f', "understood": {as_json(said)}' if said else "" for said in numbers.understood[positions].tolist()
    ]


def _ends(
    estimate: Estimate, column: int | None, mine: NDArray[np.intp]
) -> tuple[FloatArray, FloatArray, FloatArray]:
    value, low, high = estimate.value, estimate.low, estimate.high
    if column is None:
        return value[mine], low[mine], high[mine]
    return value[mine, column], low[mine, column], high[mine, column]


def _three(value: FloatArray, low: FloatArray, high: FloatArray) -> tuple[list[str], list[str], list[str]]:
    """The texts of values and their ends; of a count that is known they are the same."""
    found = _texts(value)
    if np.array_equal(value, low) and np.array_equal(value, high):
        return found, found, found
    return found, _texts(low), _texts(high)


def _texts(values: FloatArray) -> list[str]:
    return number_texts(values, _NO_LIMIT)


def _relation(name: str) -> dict[str, object]:
    relation = catalogue()[name]
    return {
        "equation": relation.equation,
        "source": relation.source,
        "grade": relation.grade.word,
        "gives": relation.gives,
        "needs": list(relation.needs),
    }
