"""The derivations as JSON: for every row its steps and the routes not taken, written row by row."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import pandas as pd

from extractor.api import Result
from extractor.catalogue.relation import catalogue
from extractor.output.cells import understood
from extractor.output.tables import as_json, records
from extractor.runs.recorded import recorded_cells
from extractor.table import ReportedTable

_CHUNK = 2_000
"""Rows of the effect table turned into plain values at a time."""

Tick = Callable[[int], None]
"""Told how many rows were written since it was last told."""


def write_derivations(result: Result, path: Path, tick: Tick) -> None:
    """``relations``: what each relation used is; ``rows``: how each row's estimate came about.

    A step names its relation, whose ``needs`` are its inputs. Ends without a limit are null.
    """
    with path.open("w", encoding="utf-8", errors="backslashreplace", newline="") as stream:
        stream.write('{"relations": {')
        for at, name in enumerate(sorted(set(result.derivations["relation"]) - {""})):
            stream.write(",\n" if at else "\n")
            stream.write(f"{as_json(name)}: {as_json(_relation(name))}")
        stream.write('\n},\n"rows": [')
        for at, row in enumerate(_rows(result)):
            stream.write(",\n" if at else "\n")
            stream.write(as_json(row))
            tick(1)
        stream.write("\n]}\n")


def _relation(name: str) -> dict[str, object]:
    relation = catalogue()[name]
    return {
        "equation": relation.equation,
        "source": relation.source,
        "grade": relation.grade.word,
        "gives": relation.gives,
        "needs": list(relation.needs),
    }


def _rows(result: Result) -> Iterator[dict[str, object]]:
    effects, table = result.effects, result.conversion.evidence.table
    cells = recorded_cells(table)
    for start in range(0, len(effects), _CHUNK):
        part = effects.iloc[start : start + _CHUNK]
        steps = _by_row(result.derivations, part)
        alternatives = _by_row(result.alternatives, part)
        about = records(part[["row", "metric", "status", "estimate"]])
        for at, (record, own, others) in enumerate(zip(about, steps, alternatives, strict=True)):
            taken = [_step(step, table, start + at) for step in own]
            yield {
                **record,
                "cells": cells[start + at],
                "steps": taken,
                "alternatives": [_without_row(other) for other in others],
            }


def _by_row(lines: pd.DataFrame, part: pd.DataFrame) -> Iterator[list[dict[str, object]]]:
    """The lines of each row of ``part``; both are in sheet order."""
    rows = part["row"].to_numpy()
    keys = lines["row"].to_numpy(dtype=rows.dtype)
    first, last = keys.searchsorted(rows, side="left"), keys.searchsorted(rows, side="right")
    found = list(records(lines.iloc[first[0] : last[-1]])) if len(rows) else []
    for begin, end in zip(first, last, strict=True):
        yield found[begin - first[0] : end - first[0]]


def _step(record: dict[str, object], table: ReportedTable, position: int) -> dict[str, object]:
    """A step without what is blank, or said once under ``relations``."""
    said_once = ("row", "equation", *(("source", "grade") if record["relation"] else ()))
    kept = {name: value for name, value in record.items() if name not in said_once and value != ""}
    if record["role"] == "reported":
        where = str(record["quantity"]), int(str(record["group"])), position
        kept["understood"] = understood(table, *where)
    return {name: value for name, value in kept.items() if value != "" and (name, value) != ("group", 0)}


def _without_row(record: dict[str, object]) -> dict[str, object]:
    return {name: value for name, value in record.items() if name != "row"}
