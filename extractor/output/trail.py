"""The derivations as JSON: for every row its steps and the routes not taken, written many rows at a time.

Rows of one block that took one route have the same steps with other numbers in them, so that a step is put together
once and its numbers are filled in for all these rows together.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from itertools import chain, repeat
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from extractor.api import Result
from extractor.catalogue.relation import catalogue
from extractor.distinct import distinct, spread
from extractor.output.files import batches, write_parts
from extractor.output.pieces import Piece, Recurring, assembled
from extractor.output.tables import as_json
from extractor.quantities import VOCABULARY, Shape
from extractor.routes.choice import NOTHING, Chosen
from extractor.routes.conversion import Conversion, route_words
from extractor.routes.derivations import Step, steps_of
from extractor.runs.recorded import recorded_columns
from extractor.table import FloatArray, Variable

_CHUNK, _BATCH = 20_000, 200
"""Rows put together at a time, so that memory stays flat, and those of them that are written at a time."""

Tick = Callable[[int], None]
"""Told how many rows were written since it was last told."""


def write_derivations(result: Result, path: Path, tick: Tick) -> None:
    """``rows``: how each row's estimate came about; ``relations``: what each relation used is.

    A step names its relation, whose ``needs`` are its inputs. Ends without a limit are null.
    """
    rows = rows_in_parts(result.conversion, tick)
    write_parts(path, chain([OPENING], rows, [closing(relations_used(result.conversion))]))


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


def rows_in_parts(conversion: Conversion, tick: Tick = lambda _: None) -> Iterator[str]:
    """Every row as JSON, in sheet order, with what stands between them."""
    for at, rows in enumerate(_row_texts(conversion)):
        for within, batch in enumerate(batches(rows, _BATCH, ",\n")):
            yield ",\n" + batch if at or within else batch
        tick(len(rows))


def _row_texts(conversion: Conversion) -> Iterator[list[str]]:
    """Every row as JSON, in sheet order, some thousand rows at a time."""
    table, printed = conversion.evidence.table, Recurring()
    routes: dict[tuple[int, int], list[Step]] = {}
    for start in range(0, table.rows, _CHUNK):
        chunk = _Chunk(conversion, slice(start, min(start + _CHUNK, table.rows)), printed)
        texts = [""] * chunk.count
        for block, chosen in enumerate(conversion.chosen):
            here = _within(chosen.block.positions, start, start + _CHUNK)
            for index in np.unique(chosen.which[here]).tolist():
                mine = here.start + np.flatnonzero(chosen.which[here] == index)
                places = chosen.block.positions[mine] - start
                if (block, index) not in routes:
                    routes[block, index] = [] if index == NOTHING else list(steps_of(chosen, index))
                alternatives = _alternatives(conversion, chosen, index, mine)
                steps = _steps(chunk, routes[block, index], mine, chosen.block.positions[mine])
                chunk.put_together(texts, places, alternatives, steps)
        left = np.flatnonzero([not text for text in texts])
        chunk.put_together(texts, left, [], [])
        yield texts


def _within(positions: NDArray[np.intp], start: int, stop: int) -> slice:
    """Where the ascending positions lie between two."""
    first, last = np.searchsorted(positions, [start, stop])
    return slice(int(first), int(last))


class _Chunk:
    """Some thousand rows, and what all of their texts draw upon. A place is a row's among them."""

    def __init__(self, conversion: Conversion, rows: slice, printed: Recurring) -> None:
        self.table, self.start, self.count = conversion.evidence.table, rows.start, rows.stop - rows.start
        self.printed, columns = printed, conversion.columns
        self.numbers = np.array([str(number) for number in columns["row"][rows].tolist()], dtype=object)
        self.addressed = self.numbers + ']"'
        self.metric = as_json(conversion.metric)
        words, codes = distinct(columns["status"][rows])
        self.status = spread(map(as_json, words), codes)
        self.estimate = np.asarray(columns["estimate"][rows], dtype=float)
        self.recorded = recorded_columns(self.table, rows)
        self.keys = [as_json(column.before)[:-1] for column in self.recorded]
        self.given = np.array([column.given for column in self.recorded]).reshape(-1, self.count)

    def put_together(
        self, texts: list[str], places: NDArray[np.intp], alternatives: list[Piece], steps: list[Piece]
    ) -> None:
        """Enter the texts of some rows, whose alternatives and steps are given in pieces."""
        if not len(places):
            return
        numbers, addressed = self.numbers[places].tolist(), self.addressed[places].tolist()
        pieces: list[Piece] = ['{"alternatives": [', *alternatives, '], "cells": {']
        pieces += [*self._cells(places, addressed), '}, "estimate": ', self.estimate[places]]
        pieces += [
            f', "metric": {self.metric}, "row": ',
            numbers,
            ', "status": ',
            self.status[places].tolist(),
        ]
        pieces += [', "steps": [', *steps, "]}"]
        for place, text in zip(places.tolist(), assembled(pieces, len(places)), strict=True):
            texts[place] = text

    def _cells(self, places: NDArray[np.intp], addressed: list[str]) -> list[Piece]:
        """What stood in the cells of some rows; columns that only some of these rows have bring their own commas."""
        given = self.given[:, places]
        some, every = np.any(given, axis=1), np.all(given, axis=1)
        first = int(every.argmax()) if every.any() else -1
        pieces: list[Piece] = []
        for at in np.flatnonzero(some).tolist():
            key, texts = self.keys[at], self.recorded[at].texts[places].tolist()
            if every[at]:
                pieces += [key if at == first else f", {key}", addressed, ": ", texts]
                continue
            before, after = ("", ", ") if at < first else (", ", "")
            pieces.append(
                [
                    f"{before}{key}{number}: {text}{after}" if text else ""
                    for number, text in zip(addressed, texts, strict=True)
                ]
            )
        if first < 0 and pieces:
            return [[text[2:] for text in assembled(pieces, len(places))]]
        return pieces

    def ends(self, high: FloatArray, low: FloatArray, value: FloatArray) -> Iterator[Piece]:
        """The ends of printed or coded numbers and their values; of counts they are the same."""
        if np.array_equal(low, value) and np.array_equal(high, value):
            return repeat(self.printed.of(value), 3)
        return map(self.printed.of, (high, low, value))

    def cells(self, variable: Variable, positions: NDArray[np.intp]) -> list[Piece]:
        """The cells of one variable in some rows, as a member of a step."""
        numbers = self.table.numbers.get(variable)
        if numbers is None:
            return []
        if variable in self.table.settings.get("from_reported", {}):
            cells = self.table.wheres(variable, positions).tolist()
            return [[f'"cell": {as_json(cell)}, ' for cell in cells]]
        before = as_json(numbers.place.before_row())[:-1]
        return [f'"cell": {before}', self.addressed[positions - self.start].tolist(), ", "]

    def understood(self, quantity: str, group: int | None, positions: NDArray[np.intp]) -> list[Piece]:
        """How the cells of one variable were read, as a member of a step, where that was not plain."""
        numbers = self.table.numbers.get((quantity, group))
        said = [] if numbers is None else numbers.understood[positions].tolist()
        if not any(said):
            return []
        return [[f', "understood": {as_json(words)}' if words else "" for words in said]]


def _alternatives(conversion: Conversion, chosen: Chosen, index: int, mine: NDArray[np.intp]) -> list[Piece]:
    """Every admissible route of some rows that took one of them, with what it gives.

    ``distance`` is from the chosen one's estimate.
    """
    pieces: list[Piece] = []
    taken = np.full(len(mine), np.nan) if index == NOTHING else chosen.estimates[index].value[mine]
    for rank, (route, estimate) in enumerate(zip(chosen.routes, chosen.estimates, strict=True)):
        value, low, high = estimate.value[mine], estimate.low[mine], estimate.high[mine]
        own = "true" if rank == index else "false"
        words = route_words(route.leaves, conversion.metric)
        pieces += [", {" if rank else "{", f'"chosen": {own}, "distance": ', np.abs(value - taken)]
        pieces += [', "estimate": ', value, f', "grade": "{route.grade.word}", "high": ', high]
        pieces += [', "low": ', low, f', "rank": {rank + 1}, "route": "{words}"}}']
    return pieces


def _steps(
    chunk: _Chunk, steps: list[Step], mine: NDArray[np.intp], positions: NDArray[np.intp]
) -> list[Piece]:
    """The steps of some rows that took one route: ``mine`` in their block, ``positions`` in the sheet."""
    found = [pieces for step in steps for pieces in _step(chunk, step, mine, positions)]
    return [piece for at, pieces in enumerate(found) for piece in (", {" if at else "{", *pieces, "}")]


def _step(
    chunk: _Chunk, step: Step, mine: NDArray[np.intp], positions: NDArray[np.intp]
) -> Iterator[list[Piece]]:
    """One step of some rows, once for each group; without what is blank or said once under ``relations``."""
    estimate = step.estimate
    grouped = VOCABULARY[step.quantity].shape is Shape.GROUP
    derived = bool(step.relation)
    about = f', "quantity": "{step.quantity}"'
    about += f', "relation": "{step.relation}"' if derived else ""
    about += f', "role": "{step.role}"'
    about += f', "source": {as_json(step.source)}' if step.source and not derived else ""
    about += f', "step": {step.number}'
    graded = "" if derived else f'"grade": "{step.grade}", '
    for column in range(estimate.value.shape[1] if grouped else 1):
        of_group = (mine, column) if grouped else (mine,)
        ends = [each[of_group] for each in (estimate.high, estimate.low, estimate.value)]
        high, low, value = ends if derived else chunk.ends(*ends)
        cell: list[Piece] = []
        understood: list[Piece] = []
        if column < len(step.cells):
            cell = chunk.cells(step.cells[column], positions)
        if step.role == "reported":
            understood = chunk.understood(step.quantity, column + 1 if grouped else None, positions)
        group = f'"group": {column + 1}, ' if grouped else ""
        yield [
            *cell,
            f'{graded}{group}"high": ',
            high,
            ', "low": ',
            low,
            about,
            *understood,
            ', "value": ',
            value,
        ]


def _relation(name: str) -> dict[str, object]:
    relation = catalogue()[name]
    return {
        "equation": relation.equation,
        "source": relation.source,
        "grade": relation.grade.word,
        "gives": relation.gives,
        "needs": list(relation.needs),
    }
