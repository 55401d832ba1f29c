"""Which effects of two runs are the same one, although rows were added, removed, moved or given other labels."""

from __future__ import annotations

import numpy as np
import pandas as pd

from extractor.runs.folder import Run

KEYS = ["study", "outcome", "effect"]
_STEPS = (
    [*KEYS, "cells", "number"],
    [*KEYS, "cells"],
    [*KEYS, "number"],
    KEYS,
    ["cells", "number"],
    ["cells"],
)


def pairs(old: Run, new: Run) -> pd.DataFrame:
    """Positions of the same effect in both effect tables, ``at_old`` and ``at_new``; NaN where one run lacks it.

    Effects are the same where labels and cells are; then, of what is left, where labels and row number are; then
    where labels are, in the order of the sheet; and last where all cells are and only the labels were rewritten.
    """
    left = [
        run.effects[KEYS].assign(
            number=run.effects["row"].to_numpy(),
            cells=[_cells(run, row) for row in run.effects["row"].tolist()],
            **{at: np.arange(len(run.effects))},
        )
        for run, at in ((old, "at_old"), (new, "at_new"))
    ]
    found = []
    for keys in _STEPS:
        # rows without cells are alike in nothing
        usable = [frame[frame["cells"] != ""] if keys[0] == "cells" else frame for frame in left]
        turned = [frame.assign(turn=frame.groupby(keys).cumcount()) for frame in usable]
        same = turned[0].merge(turned[1], on=[*keys, "turn"])[["at_old", "at_new"]]
        found.append(same)
        left = [frame[~frame[at].isin(same[at])] for frame, at in zip(left, same.columns, strict=True)]
    lone = [frame[[at]] for frame, at in zip(left, ("at_old", "at_new"), strict=True)]
    return pd.concat([*found, *lone], ignore_index=True)[["at_old", "at_new"]]


def _cells(run: Run, row: int) -> str:
    """What stood in the cells of a row, wherever it stood; "" where that was not recorded."""
    cells = run.cells(row) or {}
    return "\n".join(sorted(f"{cell.rpartition(' [')[0] or cell}\t{text}" for cell, text in cells.items()))
