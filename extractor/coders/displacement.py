"""How far an effect moves when one cell says what another coder read: all cells in one batch of conversions."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from extractor.audit.constraints import constraints_of
from extractor.audit.propagation import propagate
from extractor.coders.stack import Stack, Swap, swapped
from extractor.evidence import Evidence, gather
from extractor.routes.conversion import convert_evidence
from extractor.table import BoolArray, FloatArray

DECIDES, MOVES, BOUND, VARIANCE, NOTHING = range(5)
MOVES_IN_WORDS = {
    DECIDES: "decides whether there is an effect",
    MOVES: "moves the effect",
    BOUND: "moves a bound",
    VARIANCE: "moves only the variance",
    NOTHING: "does not touch the effect",
}
"""What a swap does to the effects of its model, the gravest first."""
_SAME = 1e-9
"""Relative difference below which two results of the same formula are one."""
SWAP_COLUMNS = ["moves", "row", "before", "after", "shift", "shift_in_se", "fits_before", "fits_after"]


def displaced(
    given: Stack,
    swaps: Sequence[Swap],
    metric: str | None,
    *,
    method: str | None = None,
    level: float = 0.95,
    standardizer: str = "",
) -> tuple[pd.DataFrame, pd.DataFrame | None]:
    """What every swap does to the effects, and every coder's own effects.

    Returns
    -------
    One line per swap: ``moves`` (DECIDES to NOTHING), ``row`` of the stack whose effect moves most, its estimate
    ``before`` and ``after``, ``shift`` in the metric and ``shift_in_se`` in standard errors of the effect (NaN where
    one of the two does not exist), and whether the row's printed numbers could all be true before and after. Then the
    effect table of the stack. Without a metric only the last two columns are filled, and there is no effect table.
    """
    batch, members, which = swapped(given, swaps)
    evidence = gather(batch)
    rows = len(given.coder)
    found = pd.DataFrame(np.nan, index=pd.RangeIndex(len(swaps)), columns=SWAP_COLUMNS)
    changed = np.array([swap.row for swap in swaps], dtype=np.intp)
    fits = ~_contradictory(evidence)
    found["fits_before"] = fits[changed]
    found["fits_after"] = fits[rows + np.flatnonzero(members == changed[which])] if len(swaps) else False
    if metric is None:
        return found, None
    effects = convert_evidence(
        evidence, metric, method=method, level=level, standardizer=standardizer
    ).effects
    if len(swaps):
        first = _gravest(_each_row(effects, members, which, rows))
        found[list(first.columns)] = first
    return found, effects.iloc[:rows]


def _each_row(
    effects: pd.DataFrame, members: NDArray[np.intp], which: NDArray[np.intp], rows: int
) -> pd.DataFrame:
    """One line per row of every variant."""
    variant = rows + np.arange(len(members))

    def both(name: str) -> tuple[FloatArray, FloatArray]:
        column = effects[name].to_numpy(dtype=float)
        return column[members], column[variant]

    before, after = both("estimate")
    error, changed_error = both("standard_error")
    has, keeps = np.isfinite(before), np.isfinite(after)
    moved = ~_same(before, after)
    status = effects["status"].to_numpy(dtype=str)
    bound = (
        (status[members] != status[variant]) | ~_same(*both("estimate_low")) | ~_same(*both("estimate_high"))
    )
    moves = np.select(
        [
            has != keeps,
            has & keeps & moved,
            ~has & ~keeps & bound,
            has & keeps & ~_same(error, changed_error),
        ],
        [DECIDES, MOVES, BOUND, VARIANCE],
        NOTHING,
    )
    shift = np.where(moved, np.abs(after - before), 0.0)
    scale = np.where(np.isfinite(error) & (error > 0), error, changed_error)
    with np.errstate(divide="ignore", invalid="ignore"):
        in_se = np.where(shift > 0, shift / np.where(scale > 0, scale, np.nan), shift)
    columns = {"moves": moves, "row": members, "before": before, "after": after, "shift": shift}
    return pd.DataFrame({"swap": which, **columns, "shift_in_se": in_se})


def _gravest(lines: pd.DataFrame) -> pd.DataFrame:
    """Of every swap the row that it moves most."""
    keys = lines.assign(far=-lines["shift"].fillna(0.0), far_in_se=-lines["shift_in_se"].fillna(0.0))
    ordered = keys.sort_values(["swap", "moves", "far", "far_in_se"], kind="stable")
    return ordered.groupby("swap").head(1).set_index("swap")[SWAP_COLUMNS[:6]]


def _same(one: FloatArray, other: FloatArray) -> BoolArray:
    with np.errstate(invalid="ignore"):
        near = np.abs(one - other) <= _SAME * np.maximum(np.abs(one), np.abs(other))
    return np.asarray(near | (one == other) | (np.isnan(one) & np.isnan(other)))


def _contradictory(evidence: Evidence) -> BoolArray:
    """Rows whose printed numbers cannot all be true under the coded design, shape (rows,)."""
    found = np.zeros(evidence.table.rows, dtype=bool)
    for block in evidence.blocks:
        constraints = constraints_of(block, evidence.table)
        if constraints.cells:
            found[block.positions] = propagate(constraints.design, constraints.domain.copy())
    return found
