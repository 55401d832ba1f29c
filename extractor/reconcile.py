"""Two or more coders' sheets, row by row and cell by cell: where they differ, and what each difference does.

A dispute is a cell in which a coder says something else than the first coder who has the row. How much it matters is
measured, not guessed: the first coder's row is converted again with that one cell changed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from string import ascii_uppercase

import numpy as np
import pandas as pd
from openpyxl.utils import get_column_letter

from extractor.agreement_table import agreement_table, effects_agreement
from extractor.codebook import Codebook, default_codebook, load_codebook
from extractor.comparison import Column, columns_of, from_groups_sheet
from extractor.conversion import check_method, check_metric, check_standardizer
from extractor.displacement import DECIDES, MOVES, MOVES_IN_WORDS, NOTHING, SWAP_COLUMNS, displaced
from extractor.errors import UsageError
from extractor.groups_sheet import with_groups
from extractor.matching import ABSENT, KEYS, Matching, match, plain_label
from extractor.quantities import close_matches
from extractor.sheet import read_table
from extractor.source.reader import read_grid
from extractor.stack import Stack, Swap, stack
from extractor.table import Numbers, Place, ReportedTable
from extractor.words import listed

_EFFECT = ("study", "outcome", "effect", "analysis", "term", "contrast")
_UNREAD = "?"


@dataclass(frozen=True, slots=True)
class Sheet:
    """One coder's sheet as it was read, and where its words stand."""

    table: ReportedTable
    places: dict[str, Place]


@dataclass(frozen=True)
class Reconciliation:
    """What a comparison of sheets gives.

    coders : A, B, ... in the order of the sheets. sheets : the sheets.
    agreement : one line per variable, before anything is settled (see ``agreement_table``).
    disputes : one line per cell in dispute, the one that moves the effect most first (see ``disputes_frame``).
    single : rows that not every coder has. effects : every coder's effect, where a metric was asked for.
    columns, matching, stack : the material, for writing.
    """

    coders: tuple[str, ...]
    sheets: tuple[Sheet, ...]
    metric: str | None
    tolerance: float
    agreement: pd.DataFrame
    disputes: pd.DataFrame
    single: pd.DataFrame
    effects: pd.DataFrame
    columns: tuple[Column, ...]
    matching: Matching
    stack: Stack
    notes: tuple[str, ...]


def read_sheet(source: str | Path | pd.DataFrame, codebook: Codebook) -> Sheet:
    """A coded sheet with its lines of groups, and the columns its words stand in; raises as ``read_table`` does."""
    if not isinstance(source, pd.DataFrame) and str(source) == "-":
        raise UsageError("sheets to be compared are read from files, not from standard input")
    table = with_groups(read_table(source, codebook), source, codebook, None)
    stem = Path(codebook.path).stem if codebook.path else ""
    grid = read_grid(source, lambda heading: codebook.meaning(heading) is not None, (stem, codebook.title))
    places: dict[str, Place] = {}
    for index, heading in enumerate(grid.headings):
        meaning = codebook.meaning(heading) if heading.strip() else None
        if not isinstance(meaning, tuple):
            places[meaning or plain_label(heading)] = Place(heading.strip(), get_column_letter(index + 1))
    return Sheet(table, places)


def reconcile(
    sources: Sequence[str | Path | pd.DataFrame],
    to: str | None = None,
    codebook: str | Path | Codebook | None = None,
    *,
    variance: str | None = None,
    level: float = 0.95,
    standardizer: str = "",
    tolerance: float = 0.0,
) -> Reconciliation:
    """Compare the sheets of two or more coders who coded the same studies.

    Parameters
    ----------
    sources : the sheets, each a file or a data frame, read with one codebook.
    to : metric in which disputes are weighed; without it they stand in the order of the sheet.
    variance, level, standardizer : as for ``extractor.convert``; ``level`` also of the coefficients' limits.
    tolerance : numbers also agree when they differ by at most this share of the larger; 0 asks that their rounding
        intervals overlap.

    Raises
    ------
    UsageError, UnreadableInput, InvalidCodebook
        each with one sentence naming what is wrong, where, and the remedy.
    """
    if not 2 <= len(sources) <= len(ascii_uppercase):
        raise UsageError(f"a comparison takes 2 to {len(ascii_uppercase)} sheets, these are {len(sources)}")
    if not 0 <= tolerance < 1:
        raise UsageError(f"a tolerance of {tolerance:g} is not a share from 0 to below 1, such as 0.01")
    if to is not None:
        check_metric(to)
        check_method(to, variance)
        check_standardizer(standardizer)
    if codebook is None:
        book = default_codebook()
    else:
        book = codebook if isinstance(codebook, Codebook) else load_codebook(codebook)
    sheets = tuple(read_sheet(source, book) for source in sources)
    coders = tuple(ascii_uppercase[: len(sheets)])
    given = stack([sheet.table for sheet in sheets])
    matching = match(given)
    headed = {name for sheet in sheets for name in sheet.places}
    columns, notes = columns_of(given, matching, headed, tolerance)
    cells = _Cells(coders, sheets, given, matching, columns)
    swaps, of_dispute = cells.swaps()
    moved, effects = displaced(given, swaps, to, method=variance, level=level, standardizer=standardizer)
    agreement = agreement_table(columns, matching.rows, level, tolerance)
    compared = pd.DataFrame()
    if to is not None and effects is not None:
        compared = _effects(coders, given, matching, effects)
        more = effects_agreement(to, effects, matching.rows, level)
        agreement = pd.concat([more, agreement], ignore_index=True) if len(more) else agreement
    said = [f"{coder}: {note}" for coder, sheet in zip(coders, sheets, strict=True) for note in sheet.table.notes]
    return Reconciliation(
        coders,
        sheets,
        to,
        tolerance,
        agreement,
        cells.disputes(moved, of_dispute, to),
        _single(coders, given, matching),
        compared,
        tuple(columns),
        matching,
        given,
        (*said, *matching.notes, *notes),
    )


class _Cells:
    """The cells in dispute."""

    def __init__(
        self,
        coders: tuple[str, ...],
        sheets: tuple[Sheet, ...],
        given: Stack,
        matching: Matching,
        columns: Sequence[Column],
    ) -> None:
        self.coders, self.sheets, self.given, self.columns = coders, sheets, given, columns
        self.rows = matching.rows
        self.base = self.rows[np.arange(len(self.rows)), (self.rows != ABSENT).argmax(axis=1)]
        self.throughout = [
            isinstance(c.variable, tuple) and from_groups_sheet(given, c.variable) for c in columns
        ]
        pairs = [
            (effect, at)
            for at, column in enumerate(columns)
            for effect in self._once(at, np.flatnonzero(column.apart.any(axis=1)).tolist())
        ]
        self.pairs: list[tuple[int, int]] = sorted(pairs)

    def _once(self, at: int, effects: list[int]) -> list[int]:
        """A cell of the sheet of groups is one dispute, although all rows of its model have it."""
        if not self.throughout[at]:
            return effects
        seen: dict[tuple[int, ...], int] = {}
        for effect in effects:
            models = [int(self.given.model[row]) if row != ABSENT else ABSENT for row in self.rows[effect]]
            seen.setdefault(tuple(models), effect)
        return list(seen.values())

    def swaps(self) -> tuple[list[Swap], list[int]]:
        """One swap for every coder who differs, and the dispute it belongs to."""
        swaps, of_dispute = [], []
        for dispute, (effect, at) in enumerate(self.pairs):
            column = self.columns[at]
            if column.variable is None or not column.shared:
                continue
            for coder in np.flatnonzero(column.apart[effect]).tolist():
                base, source = int(self.base[effect]), int(self.rows[effect, coder])
                swaps.append(Swap(base, source, column.variable, self.throughout[at]))
                of_dispute.append(dispute)
        return swaps, of_dispute

    def disputes(self, moved: pd.DataFrame, of_dispute: list[int], metric: str | None) -> pd.DataFrame:
        """One line per cell, see ``disputes_frame``."""
        lines = pd.DataFrame([self._line(effect, at) for effect, at in self.pairs], columns=self._names())
        weights = pd.DataFrame(np.nan, index=lines.index, columns=SWAP_COLUMNS)
        weights["moves"] = float(NOTHING)
        if len(moved):
            keyed = moved.assign(dispute=of_dispute)
            ranked = _ranked(keyed, ["moves", "shift", "shift_in_se"]) if metric else keyed
            first = ranked.groupby("dispute").head(1).set_index("dispute")
            weights.loc[first.index, SWAP_COLUMNS] = first[SWAP_COLUMNS].astype(float)
        lines["fits"] = self._fits(moved, of_dispute, len(lines))
        if metric is None:
            return lines.assign(moves="", estimate=np.nan, changed=np.nan, shift=np.nan, shift_in_se=np.nan)
        lines["moves"] = [MOVES_IN_WORDS[int(code)] for code in weights["moves"]]
        lines["estimate"], lines["changed"] = weights["before"], weights["after"]
        lines["shift"] = weights["shift"].where(weights["moves"] != NOTHING, 0.0)
        lines["shift_in_se"] = weights["shift_in_se"].where(weights["moves"] != NOTHING, 0.0)
        lines["gravity"] = weights["moves"]
        ordered = _ranked(lines, ["gravity", "shift", "shift_in_se"])
        return ordered.drop(columns="gravity").reset_index(drop=True)

    def _names(self) -> list[str]:
        said = [name for coder in self.coders for name in (coder, f"{coder} cell")]
        return ["of_effect", "of_column", *_EFFECT[:3], "variable", *said]

    def _line(self, effect: int, at: int) -> list[object]:
        table, column = self.given.table, self.columns[at]
        words = [self.given.word(name)[self.base[effect]] for name in _EFFECT[:3]]
        del table
        said: list[object] = []
        for coder in range(len(self.coders)):
            said += self._said(effect, column, coder)
        return [effect, at, *words, column.name, *said]

    def _said(self, effect: int, column: Column, coder: int) -> tuple[str, str]:
        """What a coder's cell says and where it stands."""
        row = int(self.rows[effect, coder])
        if row == ABSENT:
            return "no such row", ""
        return cell_of(self.sheets[coder], column, row - int(self.given.starts[coder]))

    def _fits(self, moved: pd.DataFrame, of_dispute: list[int], count: int) -> list[str]:
        """Whose value the row's other printed numbers allow; blank where all or where it says nothing."""
        found = [""] * count
        by_dispute = moved.assign(dispute=of_dispute).groupby("dispute") if len(moved) else []
        for dispute, lines in by_dispute:
            effect, at = self.pairs[dispute]
            others = np.flatnonzero(self.columns[at].apart[effect])
            before = bool(lines["fits_before"].iloc[0])
            after = lines["fits_after"].astype(bool).tolist()
            if before == all(after) == any(after):
                found[dispute] = "" if before else "none"
                continue
            base = self.coders[int((self.rows[effect] != ABSENT).argmax())]
            fitting = ([base] if before else []) + [
                self.coders[c] for c, fits in zip(others, after, strict=True) if fits
            ]
            found[dispute] = listed(fitting) or "none"
        return found
