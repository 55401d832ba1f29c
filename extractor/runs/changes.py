"""Two runs compared: which effects moved, and why.

An effect moves because a cell was changed, a decision corrected it, the codebook assumes or reads something else, the
options differ, or the program does. The first causes that a row shows itself are named; a row that shows none is
looked up in the other rows of its study, since the terms of one model depend on each other.
"""

from __future__ import annotations

import math
from collections.abc import Hashable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from extractor.runs.causes import Causes, arrow, differ, value_of
from extractor.runs.folder import NUMBERS, WORDS, Run
from extractor.runs.matching import KEYS, pairs
from extractor.table import BoolArray

COLUMNS = [
    *("row", "old_row", "study", "outcome", "effect", "change", "estimate_old", "estimate_new", "shift"),
    *("shift_in_se", "status_old", "status_new", "cause", "why"),
]
STILL = PRECISION, WORDING, LABELS = "precision", "route or wording", "labels"
"""Changes that leave the estimate where it was."""
_SAME = 1e-9
"""Numbers closer than this, relatively, are the same number computed on another machine."""


@dataclass(frozen=True)
class Comparison:
    """What differs between two runs.

    effects : one line per effect that moved, appeared or went. unmoved : cells that changed without moving an effect.
    settings : what differs between the runs as a whole, in words. incomparable : why estimates cannot be compared.
    """

    effects: pd.DataFrame
    unmoved: list[str]
    settings: list[str]
    incomparable: str = ""


def compare(old: Run, new: Run) -> Comparison:
    """Compare two runs of one review, effects matched as ``matching.pairs`` says."""
    found = pairs(old, new)
    settings = _settings(old, new)
    metrics = [str(run.settings.get("metric", "")) for run in (old, new)]
    incomparable = f"the metrics differ: {metrics[0]} and {metrics[1]}" if metrics[0] != metrics[1] else ""
    both = found[found["at_old"].notna() & found["at_new"].notna()].astype(int)
    rows = [
        run.effects["row"].to_numpy()[both[at]].tolist() for run, at in ((old, "at_old"), (new, "at_new"))
    ]
    matched = list(zip(*rows, strict=True))
    causes = Causes(old, new, matched)
    moved = _moved(old.effects, new.effects, both)
    lines = [_line(old, new, pair, causes) for pair in both[moved].to_dict("records")]
    lines += [_lone(new.effects, int(at), "appeared") for at in found.loc[found["at_old"].isna(), "at_new"]]
    lines += [_lone(old.effects, int(at), "gone") for at in found.loc[found["at_new"].isna(), "at_old"]]
    frame = pd.DataFrame(lines, columns=COLUMNS)
    still = [pair for pair, changed in zip(matched, moved, strict=True) if not changed]
    unmoved = [text for pair in still for text in causes.cells(*pair)]
    named = {text for why in frame["why"] for text in str(why).split("; ")}
    order = frame.assign(key=frame["row"].fillna(frame["old_row"])).sort_values("key", kind="stable").index
    return Comparison(
        frame.loc[order].reset_index(drop=True),
        [t for t in unmoved if t not in named],
        settings,
        incomparable,
    )


def _moved(old: pd.DataFrame, new: pd.DataFrame, both: pd.DataFrame) -> BoolArray:
    """Which pairs differ in a number, a word or a label of their effect; shape (pairs,)."""
    before, after = old.iloc[both["at_old"]], new.iloc[both["at_new"]]
    moved = np.zeros(len(both), dtype=bool)
    for name in NUMBERS:
        a, b = before[name].to_numpy(dtype=float), after[name].to_numpy(dtype=float)
        with np.errstate(invalid="ignore"):
            near = np.abs(a - b) <= _SAME * np.maximum(np.abs(a), np.abs(b))
        moved |= ~(near | (np.isnan(a) & np.isnan(b)) | (a == b))
    for name in (*WORDS, *KEYS):
        moved |= before[name].to_numpy() != after[name].to_numpy()
    return moved


def _line(old: Run, new: Run, pair: Mapping[Hashable, Any], causes: Causes) -> dict[str, object]:
    before = old.effects.iloc[pair["at_old"]]
    after = new.effects.iloc[pair["at_new"]]
    shift = float(after["estimate"]) - float(before["estimate"])
    cause, why = causes.of(before, after)
    return {
        "row": int(after["row"]),
        "old_row": int(before["row"]),
        **{name: after[name] for name in KEYS},
        "change": _change(before, after, shift),
        "estimate_old": before["estimate"],
        "estimate_new": after["estimate"],
        "shift": shift,
        "shift_in_se": shift / math.sqrt(before["variance"]) if before["variance"] > 0 else math.nan,
        "status_old": before["status"],
        "status_new": after["status"],
        "cause": cause,
        "why": "; ".join(why),
    }


def _lone(frame: pd.DataFrame, at: int, change: str) -> dict[str, object]:
    """A row that only one run has."""
    row, new = frame.iloc[at], change == "appeared"
    side = "new" if new else "old"
    return {
        ("row" if new else "old_row"): int(row["row"]),
        **{name: row[name] for name in KEYS},
        "change": change,
        f"estimate_{side}": row["estimate"],
        f"status_{side}": row["status"],
        "cause": "input",
        "why": "the row was added to the sheet" if new else "the row is no longer in the sheet",
    }


def _change(before: pd.Series, after: pd.Series, shift: float) -> str:
    if before["status"] != after["status"]:
        return f"{before['status']} -> {after['status']}"
    if abs(shift) > _SAME * max(abs(before["estimate"]), abs(after["estimate"]), 1e-300):
        return "moved"
    if any(differ(before[name], after[name]) for name in NUMBERS):
        return PRECISION
    return WORDING if any(before[name] != after[name] for name in WORDS) else LABELS


def _settings(old: Run, new: Run) -> list[str]:
    """What differs between the runs as a whole."""
    said = []
    if old.version != new.version:
        said.append(f"version {old.version} -> {new.version}")
    names = sorted((old.settings.keys() | new.settings.keys()) - {"assumptions"})
    said += [
        arrow(n, old.settings.get(n), new.settings.get(n))
        for n in names
        if old.settings.get(n) != new.settings.get(n)
    ]
    before, after = (run.settings.get("assumptions") for run in (old, new))
    if isinstance(before, dict) and isinstance(after, dict):
        said += [
            arrow(f"assumed {n}", value_of(before.get(n)), value_of(after.get(n)))
            for n in sorted(before.keys() | after.keys())
            if before.get(n) != after.get(n)
        ]
    files = [{str(s.get("title")): s for s in run.sources} for run in (old, new)]
    for title in sorted(files[0].keys() | files[1].keys()):
        pair = [f.get(title, {}).get("extractor:hash") for f in files]
        if pair[0] != pair[1]:
            said.append(f"the {title} is not the same file")
    return said
