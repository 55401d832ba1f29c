"""One sheet out of several coders': what they agree on, and what they settled where they did not."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
from openpyxl import Workbook

from extractor.coders.agreement import MISSING
from extractor.coders.comparison import Column, extra_headings, extra_texts, from_groups_sheet
from extractor.coders.matching import ABSENT
from extractor.coders.reconcile import Reconciliation
from extractor.groups_sheet import SHEET
from extractor.output.consensus import Settled
from extractor.output.sheets import write_table
from extractor.output.terminal import counted
from extractor.output.workbook import save
from extractor.quantities import FACTS, group_heading
from extractor.table import ObjectArray

TITLE = "merged"
_LEFT_OUT = ("coder", "reported")
_OF_CELLS = ("n", "mean", "sd")


def write_merged(found: Reconciliation, settled: Settled, path: Path) -> list[str]:
    """Write the merged sheet as a workbook under canonical headings; notes say what is still open.

    Numbers are texts, so that no printed decimal is lost. A cell in dispute that was not settled is left blank, a row
    that not every coder has is left out unless it was settled to keep it.
    """
    frame, notes = merged(found, settled)
    book = Workbook()
    book.remove(book.worksheets[0])
    write_table(book.create_sheet(TITLE), frame, {})
    cells = merged_groups(found, frame)
    if len(cells):
        write_table(book.create_sheet(SHEET), cells, {})
    save(book, path)
    return notes


def merged(found: Reconciliation, settled: Settled) -> tuple[pd.DataFrame, list[str]]:
    """The merged sheet, all cells as texts under canonical headings, and what is still open."""
    rows = found.matching.rows
    single = np.zeros(len(rows), dtype=bool)
    single[found.single["of_effect"].to_numpy(dtype=int)] = True
    kept = ~single
    kept[[effect for effect, keep in settled.rows.items() if keep]] = True
    columns: dict[str, ObjectArray] = {"study": _first_word(found, found.stack.word("study"))}
    for at, column in enumerate(found.columns):
        columns[column.name] = _agreed_cells(found, settled, at, column)
    for name in found.stack.table.facts:
        if name not in columns and name not in _LEFT_OUT:
            columns[name] = _first_word(found, found.stack.word(name))
    for name, headings in extra_headings(found.stack):
        if name not in columns:
            columns[name] = _first_word(found, extra_texts(found.stack, headings))
    order = [*(name for name in FACTS if name in columns), *(name for name in columns if name not in FACTS)]
    frame = pd.DataFrame({name: columns[name][kept] for name in order})
    return frame, _still_open(found, settled, kept, single)


def _still_open(found: Reconciliation, settled: Settled, kept: np.ndarray, single: np.ndarray) -> list[str]:
    places = found.disputes[["of_effect", "of_column"]].itertuples(index=False)
    cells = sum(bool(kept[e]) and (int(e), int(c)) not in settled.cells for e, c in places)
    rows = int(single.sum()) - len(settled.rows)
    notes = []
    if cells:
        notes.append(f"{counted(cells, 'dispute')} not settled: left blank in the merged sheet")
    if rows:
        notes.append(f"{counted(rows, 'single row')} not settled: left out of the merged sheet")
    if "reported" in found.stack.table.facts:
        notes.append(
            "numbers read from the column 'reported' stand in columns of their own in the merged sheet"
        )
    return notes


def _first_word(found: Reconciliation, words: ObjectArray) -> ObjectArray:
    """What the first coder who wrote anything says, by effect; ``words`` are those of the stack."""
    said = np.where(found.matching.rows == ABSENT, "", np.append(words, "")[found.matching.rows])
    return np.asarray(said[np.arange(len(said)), (said != "").argmax(axis=1)], dtype=object)


def _agreed_cells(found: Reconciliation, settled: Settled, at: int, column: Column) -> ObjectArray:
    """One column: the most exact of agreeing numbers, the first of agreeing words, what was settled, or nothing."""
    rows = found.matching.rows
    disputed = column.apart.any(axis=1)
    if isinstance(column.variable, str):
        texts = np.where(disputed, "", _first_word(found, found.stack.word(column.variable)))
        if column.variable == "analysis" and column.codes is not None:
            texts = _one_name(np.where(column.blank, MISSING, column.codes).max(axis=1), texts)
    else:
        texts = np.full(len(rows), "", dtype=object)
        best = _most_exact(column)
        for effect in np.flatnonzero(~disputed & ~column.blank.all(axis=1)).tolist():
            coder = int(best[effect])
            row = int(rows[effect, coder] - found.stack.starts[coder])
            texts[effect] = found.sheets[coder].said(column, row)[0]
    throughout = isinstance(column.variable, tuple) and from_groups_sheet(found.stack, column.variable)
    base = rows[np.arange(len(rows)), (rows != ABSENT).argmax(axis=1)]
    model = found.stack.model[base]
    for (effect, of_column), text in settled.cells.items():
        if of_column == at:
            same = disputed & (model == model[effect]) if throughout else np.arange(len(rows)) == effect
            texts[same] = text
    return texts


def _most_exact(column: Column) -> np.ndarray:
    """The coder whose number has the narrowest rounding interval, else the first who wrote anything; per effect."""
    first = (~column.blank).argmax(axis=1)
    if column.numbers is None:
        return np.asarray(first)
    points = column.numbers.kind == 1
    width = np.where(points, column.numbers.high - column.numbers.low, np.inf)
    return np.asarray(np.where(points.any(axis=1), width.argmin(axis=1), first))


def _one_name(codes: np.ndarray, texts: ObjectArray) -> ObjectArray:
    """One spelling for each label that the coders spelled or named differently: the first."""
    first: dict[int, str] = {}
    for code, text in zip(codes.tolist(), texts.tolist(), strict=True):
        if text:
            first.setdefault(code, text)
    named = [
        first.get(code, "") if text else "" for code, text in zip(codes.tolist(), texts.tolist(), strict=True)
    ]
    return np.array(named, dtype=object)


def merged_groups(found: Reconciliation, frame: pd.DataFrame) -> pd.DataFrame:
    """The lines of the sheet of groups for the factorial models whose cells the coders gave."""
    lines: list[dict[str, str]] = []
    seen: set[str] = set()
    for table in found.stack.tables:
        for label, cells in table.cells.items():
            mine = frame[frame["analysis"] == label] if "analysis" in frame else frame.iloc[:0]
            if label in seen or not len(mine):
                continue
            seen.add(label)
            for at in range(len(cells.n)):
                line = {"analysis": label, "group": str(at + 1)}
                line |= {factor: levels[at] for factor, levels in cells.levels.items()}
                headings = {name: group_heading(name, at + 1) for name in _OF_CELLS}
                line |= {name: str(mine[h].iloc[0]) for name, h in headings.items() if h in mine}
                lines.append(line)
    return pd.DataFrame(lines).fillna("")
