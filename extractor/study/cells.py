"""Factorial rows whose cells are known: what the cells say of each term, with the rounding of means and SDs.

A term's sum of squares is a sum of squared linear forms of the cell means. Its square root is a norm, so moving each
mean within its rounding interval moves it by at most the sum of the half-widths times the norms of the forms'
columns: an interval that contains every true value.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import permutations

import numpy as np

from extractor.routes.engine import Estimate
from extractor.study.cell_means import term_forms
from extractor.study.terms import factors_of
from extractor.table import Cells, ObjectArray, ReportedTable

Ends = tuple[float, float, float]
_MOST_ORDERS = 24


@dataclass(frozen=True, slots=True)
class TermFromCells:
    """A term as the cells give it: df and, by type of sums of squares, (value, low, high).

    alone : the sum of squares of a main effect with the other factors ignored; None for interactions.
    """

    df: int
    sums: dict[str, Ends]
    alone: Ends | None = None


def balanced(cells: Cells) -> bool:
    """Whether all cells have one size, so that the types of sums of squares agree."""
    return bool((cells.n == cells.n[0]).all())


def error_of(cells: Cells) -> tuple[Ends, int]:
    """SS_error as (value, low, high), and its df."""
    df = cells.n - 1
    value, low, high = (float((df * np.where(df > 0, end, 0.0) ** 2).sum()) for end in cells.sd)
    return (value, low * (1 - 1e-12), high * (1 + 1e-12)), int(df.sum())


def terms_of(cells: Cells) -> dict[frozenset[str], TermFromCells]:
    """Every term of the model under types I (each order of the factors), II and III.

    Raises
    ------
    ValueError
        when cells are missing or repeated (see ``cell_means``).
    """
    alone = {}
    for factor in cells.levels:
        order = [factor, *(other for other in cells.levels if other != factor)]
        alone[frozenset([factor])] = _sum(cells, term_forms(cells.n, cells.levels, "I", order)[factor])
    found: dict[frozenset[str], TermFromCells] = {}
    for kind, forms in _typed_forms(cells):
        for term, rows in forms.items():
            key = factors_of(term)
            entry = found.setdefault(key, TermFromCells(len(rows), {}, alone.get(key)))
            entry.sums[kind] = _sum(cells, rows)
    return found


def _typed_forms(cells: Cells) -> Iterator[tuple[str, dict[str, np.ndarray]]]:
    yield "III", term_forms(cells.n, cells.levels, "III")
    if balanced(cells):
        return
    yield "II", term_forms(cells.n, cells.levels, "II")
    for count, order in enumerate(permutations(cells.levels)):
        if count < _MOST_ORDERS:
            yield f"I, order {', '.join(order)}", term_forms(cells.n, cells.levels, "I", order)


def _sum(cells: Cells, rows: np.ndarray) -> Ends:
    value, low, high = cells.mean
    centre = (low + high) / 2
    centred = centre - centre.mean()
    norm = float(np.sqrt(((rows @ centred) ** 2).sum()))
    reach = float(((high - low) / 2 * np.sqrt((rows**2).sum(axis=0))).sum()) * (1 + 1e-9) + 1e-12 * abs(norm)
    point = float(((rows @ (value - value.mean())) ** 2).sum())
    return point, max(norm - reach, 0.0) ** 2, (norm + reach) ** 2


def between_cells(cells: Cells) -> Ends:
    """Sum of squares between all cells."""
    weights = np.sqrt(cells.n)
    rows = np.diag(weights) - np.outer(weights, cells.n) / cells.n.sum()
    return _sum(cells, rows)


def leaves_from_cells(table: ReportedTable, design: ObjectArray) -> dict[str, Estimate]:
    """What the cells say of each factorial row: see the quantities ``cells_...``; NaN where there are none."""
    names = (
        "cells_ss_effect",
        "cells_ss_effect_unbalanced",
        "cells_ss_alone",
        "cells_ss_error",
        "cells_ss_total",
        "cells_df_effect",
        "cells_df_error",
        "cells_n_total",
    )
    found = {name: Estimate(*(np.full(table.rows, np.nan) for _ in range(3))) for name in names}
    if not table.cells:
        return found
    analysis, terms = table.fact("analysis").astype(str), table.fact("term").astype(str)
    for label, cells in table.cells.items():
        rows = np.flatnonzero((analysis == label) & (design == "factorial"))
        try:
            by_term = terms_of(cells)
        except ValueError:
            continue
        (error, df_error), between = error_of(cells), between_cells(cells)
        total = tuple(a + b for a, b in zip(error, between, strict=True))
        for row in rows:
            entry = by_term.get(factors_of(terms[row]))
            if entry is None:
                continue
            effect = "cells_ss_effect" if balanced(cells) else "cells_ss_effect_unbalanced"
            for name, ends in (
                (effect, entry.sums["III"]),
                ("cells_ss_alone", entry.alone or (np.nan,) * 3),
                ("cells_ss_error", error),
                ("cells_ss_total", total),
                ("cells_df_effect", (entry.df,) * 3),
                ("cells_df_error", (df_error,) * 3),
                ("cells_n_total", (float(cells.n.sum()),) * 3),
            ):
                for array, end in zip(
                    (found[name].value, found[name].low, found[name].high), ends, strict=True
                ):
                    array[row] = end
    return found
