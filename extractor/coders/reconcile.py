"""Two or more coders' sheets, row by row and cell by cell: where they differ, and what each difference does.

A dispute is a cell in which a coder says something else than the first coder who has the row. How much it matters is
measured, not guessed: the first coder's row is converted again with that one cell changed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations
from pathlib import Path
from string import ascii_uppercase

import numpy as np
import pandas as pd
from openpyxl.utils import get_column_letter

from extractor.codebook import Codebook, default_codebook, load_codebook
from extractor.coders.agreement_table import agreement_table
from extractor.coders.comparison import Column, columns_of, effect_column
from extractor.coders.displacement import displaced
from extractor.coders.disputes import Disputes, Sheet
from extractor.coders.matching import ABSENT, KEYS, Matching, compared, match, plain_label
from extractor.coders.stack import Stack, stack
from extractor.errors import UsageError
from extractor.groups_sheet import with_groups
from extractor.printed.reading import quoted
from extractor.quantities import close_matches
from extractor.routes.conversion import check_method, check_metric, check_standardizer
from extractor.sheet import read_table
from extractor.source.reader import read_grid
from extractor.table import Place
from extractor.words import listed


@dataclass(frozen=True)
class Reconciliation:
    """What a comparison of sheets gives.

    coders : A, B, ... in the order of the sheets.
    agreement : one line per variable, before anything is settled (see ``agreement_table``).
    disputes : one line per cell in dispute, the one that moves the effect most first (see ``Disputes.frame``).
    effects : one line per effect: every coder's row, how the rows were matched where that was not by equal labels,
        and what each row gives where a metric was asked for. single : those of them that not every coder has.
    sheets, stack, matching, columns : what was compared; effects and columns are counted as in ``disputes``.
    """

    coders: tuple[str, ...]
    metric: str | None
    tolerance: float
    level: float
    agreement: pd.DataFrame
    disputes: pd.DataFrame
    effects: pd.DataFrame
    single: pd.DataFrame
    sheets: tuple[Sheet, ...]
    stack: Stack
    matching: Matching
    columns: tuple[Column, ...]
    notes: tuple[str, ...]


def reconcile(
    sources: Sequence[str | Path | pd.DataFrame],
    to: str | None = None,
    codebook: str | Path | Codebook | None = None,
    *,
    variance: str | None = None,
    level: float = 0.95,
    standardizer: str = "",
    tolerance: float = 0.0,
    groups: Sequence[str | Path | pd.DataFrame] = (),
) -> Reconciliation:
    """Compare the sheets of two or more coders who coded the same studies.

    Parameters
    ----------
    sources : the sheets, each a file or a data frame, read with one codebook.
    to : metric in which disputes are weighed; without it they stand in the order of the sheet.
    variance, level, standardizer : as for ``extractor.convert``; ``level`` is also that of the coefficients' limits.
    tolerance : numbers also agree when they differ by at most this share of the larger; at 0 they agree where their
        rounding intervals overlap.
    groups : the lines of groups of every sheet, in the order of the sheets, where they stand in files of their own.

    Raises
    ------
    UsageError, UnreadableInput, InvalidCodebook
        each with one sentence naming what is wrong, where, and the remedy.
    """
    if not 2 <= len(sources) <= len(ascii_uppercase):
        raise UsageError(f"a comparison takes 2 to {len(ascii_uppercase)} sheets, these are {len(sources)}")
    if groups and len(groups) != len(sources):
        raise UsageError(
            f"{len(sources)} sheets need {len(sources)} sheets of groups, in the same order, or none"
        )
    if not 0 <= tolerance < 1:
        raise UsageError(f"tolerance {tolerance:g} is not a share from 0 to below 1, such as 0.01")
    if to is not None:
        check_metric(to)
        check_method(to, variance)
        check_standardizer(standardizer)
    if codebook is None:
        book = default_codebook()
    else:
        book = codebook if isinstance(codebook, Codebook) else load_codebook(codebook)
    of_groups = groups or (None,) * len(sources)
    sheets = tuple(read_sheet(source, book, lines) for source, lines in zip(sources, of_groups, strict=True))
    coders = tuple(ascii_uppercase[: len(sheets)])
    given = stack([sheet.table for sheet in sheets])
    matching = match(given)
    headed = {name for sheet in sheets for name in sheet.places}
    columns, notes = columns_of(given, matching, headed, tolerance)
    disputes = Disputes(coders, sheets, given, matching, columns)
    swaps, of_dispute = disputes.swaps()
    moved, effects = displaced(given, swaps, to, method=variance, level=level, standardizer=standardizer)
    compared_in = [] if effects is None else [effect_column(str(to), effects, matching.rows)]
    said = [f"{c}: {note}" for c, sheet in zip(coders, sheets, strict=True) for note in sheet.table.notes]
    lines = _effects(coders, given, matching, effects)
    return Reconciliation(
        coders,
        to,
        tolerance,
        level,
        agreement_table([*compared_in, *columns], matching.rows, level, tolerance),
        disputes.frame(moved, of_dispute, weighed=to is not None),
        lines,
        _single(coders, given, matching, lines),
        sheets,
        given,
        matching,
        tuple(columns),
        (*said, *matching.notes, *notes),
    )


def read_sheet(
    source: str | Path | pd.DataFrame, codebook: Codebook, groups: str | Path | pd.DataFrame | None = None
) -> Sheet:
    """A coded sheet with its lines of groups, and the columns its words stand in; raises as ``read_table`` does.

    ``groups`` : the lines, where they are not a sheet of the source itself.
    """
    if not isinstance(source, pd.DataFrame) and str(source) == "-":
        raise UsageError("sheets to be compared are read from files, not from standard input")
    table = with_groups(read_table(source, codebook), source, codebook, groups)
    stem = Path(codebook.path).stem if codebook.path else ""
    grid = read_grid(source, lambda heading: codebook.meaning(heading) is not None, (stem, codebook.title))
    places: dict[str, Place] = {}
    for index, heading in enumerate(grid.headings):
        meaning = codebook.meaning(heading) if heading.strip() else None
        if not isinstance(meaning, tuple):
            name = meaning or plain_label(heading)
            places.setdefault(name, Place(heading.strip(), get_column_letter(index + 1)))
    return Sheet(table, places)


def _labels(given: Stack, rows: np.ndarray) -> dict[str, np.ndarray]:
    """The labels of each effect, from the first coder who has it."""
    base = rows[np.arange(len(rows)), (rows != ABSENT).argmax(axis=1)]
    return {name: given.word(name)[base] for name in KEYS}


def _row_numbers(given: Stack, rows: np.ndarray, coder: int) -> pd.Series:
    """The spreadsheet's row numbers of one coder's rows; blank where there is none."""
    at = np.maximum(rows[:, coder] - given.starts[coder], 0)
    numbers = pd.Series(given.tables[coder].row_numbers[at], dtype="Int64")
    return numbers.mask(rows[:, coder] == ABSENT)


def _effects(
    coders: tuple[str, ...], given: Stack, matching: Matching, effects: pd.DataFrame | None
) -> pd.DataFrame:
    """Every coder's row and effect side by side, and the largest difference of two effects."""
    rows = matching.rows
    frame = pd.DataFrame(_labels(given, rows))
    for coder, name in enumerate(coders):
        frame[f"row {name}"] = _row_numbers(given, rows, coder)
    frame["matched"] = matching.how
    if effects is None:
        return frame
    estimates = []
    for coder, name in enumerate(coders):
        absent = rows[:, coder] == ABSENT
        mine = effects.iloc[np.maximum(rows[:, coder], 0)].reset_index(drop=True)
        for column in ("estimate", "standard_error"):
            frame[f"{column} {name}"] = mine[column].mask(absent)
        frame[f"status {name}"] = mine["status"].mask(absent, "")
        estimates.append(frame[f"estimate {name}"].to_numpy(dtype=float))
    apart = np.stack([np.abs(one - other) for one, other in combinations(estimates, 2)])
    frame["difference"] = np.fmax.reduce(apart, axis=0)
    return frame


def _single(coders: tuple[str, ...], given: Stack, matching: Matching, effects: pd.DataFrame) -> pd.DataFrame:
    """Lines of rows that some coder lacks, with whose they are and a study that may be meant instead."""
    some = np.flatnonzero((matching.rows == ABSENT).any(axis=1))
    frame = effects.iloc[some].drop(columns="matched").reset_index(drop=True)
    present = matching.rows[some] != ABSENT
    whose = [listed([c for c, has in zip(coders, line, strict=True) if has]) for line in present]
    lacks = [listed([c for c, has in zip(coders, line, strict=True) if not has]) for line in present]
    frame.insert(0, "of_effect", some)
    frame["present"], frame["absent"] = np.array(whose, dtype=object), np.array(lacks, dtype=object)
    frame["hint"] = np.array(_hints(coders, given, frame["study"].tolist(), present), dtype=object)
    return frame


def _hints(coders: tuple[str, ...], given: Stack, studies: list[str], present: np.ndarray) -> list[str]:
    known = [
        dict(zip(compared(t.fact("study"), plain_label), t.fact("study"), strict=True)) for t in given.tables
    ]
    hints = []
    for study, line in zip(studies, present, strict=True):
        said = []
        for coder in np.flatnonzero(~line).tolist():
            if study and plain_label(study) not in known[coder]:
                near = close_matches(plain_label(study), known[coder])
                meant = f"; is {quoted(known[coder][near[0]])} meant?" if near else ""
                said.append(f"{coders[coder]} has no study of this name{meant}")
        hints.append("; ".join(said))
    return hints
