"""Rows of different studies with the same printed numbers: one sample may be reported, and counted, twice."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from extractor.table import BoolArray, FloatArray, ReportedTable
from extractor.words import listed, printed_text

COLUMNS = ["row_a", "study_a", "row_b", "study_b", "alike", "numbers", "shown"]
_QUANTITIES = {
    "group sizes": ("n",),
    "means": ("mean",),
    "SDs": ("sd",),
    "F": ("f_value", "df_effect", "df_error"),
    "t": ("t_value", "df", "n_total"),
}
_TWO_SIZES = ("group sizes", 2)
_MOST_ALIKE = 20
"""A combination that more rows share is a habit of the field (20 per group), not a copy."""


def duplicate_reports(table: ReportedTable) -> pd.DataFrame:
    """Pairs of rows of different studies that agree in group sizes, means, SDs, F or t.

    Group sizes count only where they differ within the row, and alone only from three groups on: equal or few sizes
    agree by chance. Means and SDs count from two groups on, F and t where they are printed with their df or with two
    decimals. ``numbers`` is how many printed numbers agree; the pairs with most come first. A pair is a question:
    two arms of one trial, or one sample reported twice?
    """
    found: dict[tuple[int, int], list[tuple[str, int]]] = {}
    for word, key, count in _keys(table):
        for pair in _pairs(table, key):
            found.setdefault(pair, []).append((word, int(count[pair[0]])))
    rows, study = table.row_numbers, table.fact("study").astype(str)
    lines = [
        {
            "row_a": int(rows[a]),
            "study_a": study[a],
            "row_b": int(rows[b]),
            "study_b": study[b],
            "alike": listed([word for word, _ in alike]),
            "numbers": sum(count for _, count in alike),
            "shown": _shown(table, a, [word for word, _ in alike]),
        }
        for (a, b), alike in found.items()
        if alike != [_TWO_SIZES]
    ]
    frame = pd.DataFrame(lines, columns=COLUMNS)
    return frame.sort_values(
        ["numbers", "row_a", "row_b"], ascending=[False, True, True], kind="stable", ignore_index=True
    )


def _matrix(table: ReportedTable, name: str) -> FloatArray:
    """Printed values of a group quantity, shape (rows, groups); NaN where there is none."""
    groups = sorted({group for _, group in table.numbers if group is not None})
    columns = [
        table.numbers[name, g].value if (name, g) in table.numbers else np.full(table.rows, np.nan)
        for g in groups
    ]
    return np.column_stack(columns) if columns else np.empty((table.rows, 0))


def _keys(table: ReportedTable) -> Iterator[tuple[str, NDArray[np.int64], NDArray[np.int64]]]:
    """What may agree: its name, a code per row (-1 where the numbers say nothing), and how many numbers it is."""
    sizes = _matrix(table, "n")
    count = np.isfinite(sizes).sum(axis=1)
    with np.errstate(invalid="ignore"):
        unequal = np.fmax.reduce(sizes, axis=1, initial=-np.inf) > np.fmin.reduce(
            sizes, axis=1, initial=np.inf
        )
    # the same groups in another order are the same groups
    yield "group sizes", _codes(np.sort(sizes, axis=1), (count >= 2) & unequal), count
    for word, name in (("means", "mean"), ("SDs", "sd")):
        values = _matrix(table, name)
        count = np.isfinite(values).sum(axis=1)
        fractional = (np.isfinite(values) & (values != np.rint(values))).any(axis=1)
        yield word, _codes(np.sort(values, axis=1), (count >= 2) & fractional), count
    for word in ("F", "t"):
        names = _QUANTITIES[word]
        columns = [_scalar(table, name) for name in names]
        stated = np.isfinite(columns[0]) & (
            np.isfinite(columns[1]) | np.isfinite(columns[2]) | _fine(table, names[0])
        )
        count = sum(
            (np.isfinite(column).astype(np.int64) for column in columns), np.zeros(table.rows, dtype=np.int64)
        )
        yield word, _codes(np.column_stack(columns), stated & (columns[0] != 0)), count


def _scalar(table: ReportedTable, name: str) -> FloatArray:
    numbers = table.numbers.get((name, None))
    return np.full(table.rows, np.nan) if numbers is None else numbers.value


def _fine(table: ReportedTable, name: str) -> BoolArray:
    numbers = table.numbers.get((name, None))
    return np.zeros(table.rows, dtype=bool) if numbers is None else np.asarray(numbers.decimals >= 2)


def _codes(values: FloatArray, where: BoolArray) -> NDArray[np.int64]:
    """One number per row, the same where every value agrees; -1 where the values say nothing."""
    if not values.shape[1]:
        return np.full(len(values), -1)
    _, codes = np.unique(np.where(np.isnan(values), np.inf, values), axis=0, return_inverse=True)
    return np.where(where, codes.ravel(), -1)


def _pairs(table: ReportedTable, key: NDArray[np.int64]) -> Iterator[tuple[int, int]]:
    """Positions of rows of different studies with the same numbers."""
    study = table.fact("study").astype(str)
    frame = pd.DataFrame({"key": key, "at": np.arange(len(key)), "study": study})
    frame = frame[(key >= 0) & (study != "")]
    size = frame.groupby("key")["at"].transform("size")
    frame = frame[(size > 1) & (size <= _MOST_ALIKE)]
    both = frame.merge(frame, on="key", suffixes=("_a", "_b"))
    both = both[(both["at_a"] < both["at_b"]) & (both["study_a"] != both["study_b"])]
    yield from zip(both["at_a"].tolist(), both["at_b"].tolist(), strict=True)


def _shown(table: ReportedTable, position: int, alike: list[str]) -> str:
    """The numbers that agree, as they are printed."""
    texts = []
    for word in alike:
        cells = [v for v in table.numbers if v[0] in _QUANTITIES[word] and table.numbers[v].given[position]]
        cells.sort(key=lambda v: (_QUANTITIES[word].index(v[0]), v[1] or 0))
        texts.append(f"{word} {', '.join(printed_text(table, v, position) for v in cells)}")
    return "; ".join(texts)
