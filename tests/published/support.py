"""What the checks against published sources share: the records, "agrees as printed", and a row to convert."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from decimal import Decimal
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from extractor.catalogue.relation import FloatArray
from extractor.evidence import gather
from extractor.quantities import VOCABULARY
from extractor.routes.conversion import convert_evidence
from extractor.table import ReportedTable, Variable
from tests.evidence.printing import Printed, Sheet, table

DATA = Path(__file__).parent / "data"

UNROUNDED = 15
"""Decimals to which values count as given when they are not printed ones."""

Cell = str | int | float
"""A printed number as text, a count, or a value known to full precision."""


@cache
def records() -> dict[str, Any]:
    """The worked examples by id."""
    read = json.loads((DATA / "worked_examples.json").read_text(encoding="utf-8"))
    return {record["id"]: record for record in read["records"]}


def inputs(name: str) -> Any:
    return records()[name]["inputs"]


def published(name: str) -> list[str]:
    return list(records()[name]["published"])


def reference(name: str) -> Any:
    return records()[name]["reference"]


def half_unit(text: str) -> float:
    """Half a unit in the last printed place."""
    return 0.5 * 10.0 ** float(Decimal(text).as_tuple().exponent)


def agrees(value: float | FloatArray, text: str) -> bool:
    """Whether a value prints as ``text``: within half a unit in the last place, and no more than rounding beyond it."""
    off = abs(float(np.asarray(value).item()) - float(text))
    return off <= half_unit(text) + 1e-15 * abs(float(text))


def assert_prints(values: Sequence[float | FloatArray], texts: Sequence[str]) -> None:
    """Every value agrees with its printed text."""
    shown = [float(np.asarray(value).item()) for value in values]
    assert len(shown) == len(texts)
    assert [agrees(v, t) for v, t in zip(shown, texts, strict=True)] == [True] * len(texts), list(
        zip(shown, texts, strict=True)
    )


def one(*values: float) -> tuple[FloatArray, ...]:
    """Numbers as columns of one row."""
    return tuple(np.array([float(value)]) for value in values)


def group(*values: float) -> FloatArray:
    """Numbers as one row of groups."""
    return np.array([[float(value) for value in values]])


def box(*texts: str) -> tuple[FloatArray, FloatArray]:
    """The numbers that print as the texts do, as one row of groups."""
    middle = group(*(float(text) for text in texts))
    half = group(*(half_unit(text) for text in texts))
    return middle - half, middle + half


def interval(text: str) -> tuple[FloatArray, FloatArray]:
    """The numbers that print as the text does, as one row."""
    low, high = box(text)
    return low[:, 0], high[:, 0]


def summaries(groups: Sequence[Sequence[float]]) -> tuple[FloatArray, FloatArray, FloatArray]:
    """n, mean and SD of raw scores, one row of groups each."""
    scores = [np.array(g, dtype=float) for g in groups]
    return (
        group(*(len(g) for g in scores)),
        group(*(g.mean() for g in scores)),
        group(*(g.std(ddof=1) for g in scores)),
    )


def converted(
    design: str,
    metric: str,
    cells: Mapping[str, Cell | Sequence[Cell]],
    *,
    level: float = 0.95,
    method: str | None = None,
    **facts: str,
) -> pd.Series[Any]:
    """One row through the whole conversion: its line of the effect table.

    Parameters
    ----------
    cells : by quantity, one cell or one for each group. Text keeps its printed decimals; any other number is taken
        as exact if it is a count, and to the fifteenth decimal if not.
    """
    columns: dict[Variable, Printed] = {}
    for name, cell in cells.items():
        if isinstance(cell, str | int | float):
            columns[name, None] = _printed(name, cell)
        else:
            columns |= {(name, number): _printed(name, each) for number, each in enumerate(cell, start=1)}
    evidence = gather(table(Sheet(columns, {"design": design, **facts})))
    return convert_evidence(evidence, metric, level=level, method=method).effects.iloc[0]


def _printed(name: str, cell: Cell) -> Printed:
    if isinstance(cell, str):
        return Printed(np.array([float(cell)]), max(0, -int(Decimal(cell).as_tuple().exponent)))
    return Printed(np.array([float(cell)]), 0 if VOCABULARY[name].exact else UNROUNDED)


def unrounded_sheet(columns: Mapping[str, FloatArray], **facts: str | Sequence[str]) -> ReportedTable:
    """Rows of unrounded values: arrays of shape (rows,), or (rows, groups) for group quantities."""
    cells: dict[Variable, Printed] = {}
    for name, values in columns.items():
        decimals = 0 if VOCABULARY[name].exact else UNROUNDED
        if values.ndim == 1:
            cells[name, None] = Printed(values, decimals)
        else:
            cells |= {(name, j + 1): Printed(values[:, j], decimals) for j in range(values.shape[1])}
    read = table(Sheet(cells, {}))
    read.facts = {
        name: np.array([word] * read.rows if isinstance(word, str) else word, dtype=object)
        for name, word in facts.items()
    }
    return read


def converted_rows(
    metric: str, columns: Mapping[str, FloatArray], *, method: str | None = None, **facts: str | Sequence[str]
) -> pd.DataFrame:
    """Rows of unrounded values through the whole conversion: the effect table."""
    return convert_evidence(gather(unrounded_sheet(columns, **facts)), metric, method=method).effects
