"""Do a row's F, p or error df agree with a Welch test of its own means, SDs and ns? For the diagnosis only."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from extractor.audit.constraints import Cell, Constraints
from extractor.catalogue.branches import square_image
from extractor.catalogue.relation import Interval, Relation
from extractor.routes.intervals import image
from extractor.table import BoolArray, FloatArray

_DECADES = np.log(100)


@dataclass(frozen=True, slots=True)
class Mark:
    """How a printed quantity stands to a Welch test.

    fits : rows in which it agrees. share : how often a random value would; both of shape (rows,).
    """

    fits: BoolArray
    share: FloatArray


def welch_marks(constraints: Constraints, welch_f: Relation, welch_df: Relation) -> dict[str, Mark]:
    """Marks by quantity; none where the row does not print ns, means and spreads of all groups."""
    inputs = _summaries(constraints)
    if inputs is None:
        return {}
    f = image(welch_f, inputs)
    df = image(welch_df, {name: inputs[name] for name in welch_df.needs})
    marks: dict[str, Mark] = {}
    agrees = np.ones(constraints.rows, dtype=bool)
    for cell in constraints.cells:
        if cell.quantity in ("f_value", "t_value"):
            printed = constraints.interval(cell)
            printed = printed if cell.quantity == "f_value" else square_image(printed)
            agrees &= (printed[0] <= f[1]) & (printed[1] >= f[0])
            share = np.log((f[1] + (printed[1] - printed[0]) / 2) / np.maximum(f[0], 1e-300)) / _DECADES
            marks[cell.quantity] = Mark(agrees, share)
            f = np.maximum(f[0], printed[0]), np.minimum(f[1], printed[1])
    for cell in constraints.cells:
        if cell.quantity == "p_value":
            marks[cell.quantity] = _p_mark(constraints, cell, f, df, inputs["n"][0].shape[1])
        if cell.quantity in ("df_error", "df"):
            marks[cell.quantity] = _df_mark(constraints, cell, df, inputs["n"])
    return {name: Mark(mark.fits & agrees, np.clip(mark.share, 0, 1)) for name, mark in marks.items()}


def _summaries(constraints: Constraints) -> dict[str, Interval] | None:
    known = constraints.domain.low
    if not {"n", "mean"} <= known.keys() or not {"sd", "se"} & known.keys():
        return None
    found = {name: constraints.domain.pair(name) for name in ("n", "mean")}
    if "sd" in known:
        found["sd"] = constraints.domain.pair("sd")
    else:
        least, most = constraints.domain.pair("se")
        found["sd"] = least * np.sqrt(found["n"][0]), most * np.sqrt(found["n"][1])
    return found


def _p_mark(constraints: Constraints, cell: Cell, f: Interval, df: Interval, groups: int) -> Mark:
    ends = [
        special.fdtrc(groups - 1.0, v2, np.maximum(at, 0.0))
        for at in f
        for v2 in (df[0], (df[0] + df[1]) / 2, df[1])
    ]
    least, most = np.min(ends, axis=0), np.max(ends, axis=0)
    low, high = constraints.interval(cell)
    share = most - least + np.minimum(high - low, constraints.units[cell])
    return Mark((low <= most) & (high >= least), np.asarray(share))


def _df_mark(constraints: Constraints, cell: Cell, df: Interval, n: Interval) -> Mark:
    least, most = np.floor(df[0]), np.ceil(df[1])
    printed, _ = constraints.interval(cell)
    classical = n[0].sum(axis=-1) - n[0].shape[1]
    share = (most - least + 1) / np.maximum(1.5 * printed, 1.0)
    return Mark((printed >= least) & (printed <= most) & (printed != classical), np.asarray(share))
