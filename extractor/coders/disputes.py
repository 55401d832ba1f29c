"""Cells in which coders differ, what each of them says there, and what the difference does to the effect."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from extractor.coders.comparison import LABEL, Column, from_groups_sheet
from extractor.coders.displacement import MOVES_IN_WORDS, NOTHING
from extractor.coders.matching import ABSENT, FROM_CODEBOOK, Matching, plain_label
from extractor.coders.stack import Stack, Swap
from extractor.printed.reading import Reading
from extractor.table import Numbers, Place, ReportedTable
from extractor.words import listed

NAMED = ("study", "outcome", "effect")
NO_ROW = "no such row"
_FINEST = 1e-12


@dataclass(frozen=True, slots=True)
class Sheet:
    """One coder's sheet as it was read. places : where coded words and unknown columns stand."""

    table: ReportedTable
    places: dict[str, Place]

    def words_at(self, name: str, known: bool, row: int) -> tuple[str, str]:
        """What a cell of words says, and its address; an unknown column is named as labels are compared."""
        place = self.places.get(name)
        if known:
            text = str(self.table.fact(name)[row])
        else:
            headings = [h for h in self.table.extras.columns if plain_label(h) == name]
            text = str(self.table.extras[headings[0]].iloc[row]) if headings else ""
        return text, place.at(int(self.table.row_numbers[row])) if place else ""

    def said(self, column: Column, row: int) -> tuple[str, str]:
        """What a cell says, as exactly as it was printed, and its address; row counts from 0."""
        if not isinstance(column.variable, tuple):
            name = column.variable if column.variable is not None else plain_label(column.name)
            return self.words_at(name, column.variable is not None, row)
        numbers = self.table.numbers.get(column.variable)
        if numbers is None:
            return "", ""
        mark = str(self.table.settings.get("decimal_mark", "."))
        return number_text(numbers, row, mark), numbers.place.at(int(self.table.row_numbers[row]))


def number_text(numbers: Numbers, row: int, mark: str = ".") -> str:
    """A cell as text that reads back to the same value and rounding interval; blank where it is blank."""
    if numbers.understood[row] == FROM_CODEBOOK:
        return ""
    return reading_text(
        Reading(
            value=float(numbers.value[row]),
            low=float(numbers.low[row]),
            high=float(numbers.high[row]),
            unit=float(numbers.unit[row]),
            decimals=int(numbers.decimals[row]),
            comparator=str(numbers.comparator[row]),
            problem=str(numbers.problem[row]),
        ),
        mark,
    )


def reading_text(reading: Reading, mark: str = ".") -> str:
    """A reading as text that reads back to it; blank where it is blank."""
    if not reading.given:
        return f"not understood: {reading.problem}" if reading.problem else ""
    if reading.comparator != "=":
        bound = reading.high if reading.comparator == "<" else reading.low
        return f"{reading.comparator} {bound:.12g}".replace(".", mark)
    if reading.decimals < 0:
        # computed rather than printed: as many decimals as it is known to
        known = _FINEST <= reading.unit < 1
        text = f"{reading.value:.{round(-math.log10(reading.unit))}f}" if known else repr(reading.value)
    elif reading.unit > 1:
        text = f"{reading.value / reading.unit:.0f}e{round(math.log10(reading.unit))}"
    else:
        text = f"{reading.value:.{reading.decimals}f}"
    return text.replace(".", mark)


class Disputes:
    """The cells in dispute between coders; ``pairs`` are their effect and column, in the order of the sheet."""

    def __init__(
        self,
        coders: Sequence[str],
        sheets: Sequence[Sheet],
        given: Stack,
        matching: Matching,
        columns: Sequence[Column],
    ) -> None:
        self.coders, self.sheets, self.given, self.columns = coders, sheets, given, columns
        self.rows = matching.rows
        self.first = (self.rows != ABSENT).argmax(axis=1)
        self.throughout = [
            isinstance(c.variable, tuple) and from_groups_sheet(given, c.variable) for c in columns
        ]
        self.pairs = sorted(
            (effect, at)
            for at, column in enumerate(columns)
            for effect in self._once(at, np.flatnonzero(column.apart.any(axis=1)).tolist())
        )

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
        """The first coder's cell changed to what each coder who differs says, and the dispute it belongs to."""
        swaps: list[Swap] = []
        of_dispute: list[int] = []
        for dispute, (effect, at) in enumerate(self.pairs):
            column, own = self.columns[at], int(self.rows[effect, self.first[effect]])
            if column.variable is None or (column.kind == LABEL and column.variable not in _MATTER):
                continue
            for coder in np.flatnonzero(column.apart[effect]).tolist():
                swaps.append(Swap(own, int(self.rows[effect, coder]), column.variable, self.throughout[at]))
                of_dispute.append(dispute)
        return swaps, of_dispute

    def frame(self, moved: pd.DataFrame, of_dispute: list[int], *, weighed: bool) -> pd.DataFrame:
        """One line per cell in dispute.

        Parameters
        ----------
        moved : what each swap does, see ``displacement.displaced``.
        weighed : the effects were converted, so that the cells can be put in order.

        Returns
        -------
        ``of_effect`` and ``of_column`` (positions), the labels of the row, ``variable``, what every coder says and
        where, ``moves`` in words, the ``estimate`` as the first coder has it and ``changed`` with the other value, the
        ``shift`` between them and ``shift_in_se`` (blank where one of them does not exist), and ``fits``: with whose
        values the printed numbers of the first coder's row can all be true, blank where with all.
        """
        said = [name for coder in self.coders for name in (coder, f"{coder} cell")]
        names = ["of_effect", "of_column", *NAMED, "variable", *said]
        lines = pd.DataFrame([self._line(effect, at) for effect, at in self.pairs], columns=names)
        # a cell that no effect can depend on comes after those that turned out not to matter
        gravity = pd.Series(NOTHING + 1, index=lines.index)
        for name in ("estimate", "changed", "shift", "shift_in_se"):
            lines[name] = np.nan
        keyed = moved.assign(dispute=of_dispute)
        if weighed and len(keyed):
            worst = ranked(keyed, "moves").groupby("dispute").head(1).set_index("dispute")
            gravity[worst.index] = worst["moves"].astype(int)
            lines.loc[worst.index, "estimate"] = worst["before"]
            lines.loc[worst.index, "changed"] = worst["after"]
            lines.loc[worst.index, ["shift", "shift_in_se"]] = worst[["shift", "shift_in_se"]]
        lines["fits"] = self._fits(keyed, len(lines))
        lines.insert(
            len(names), "moves", [MOVES_IN_WORDS[min(code, NOTHING)] if weighed else "" for code in gravity]
        )
        if weighed:
            lines = ranked(lines.assign(gravity=gravity), "gravity").drop(columns="gravity")
        return lines.reset_index(drop=True)

    def _line(self, effect: int, at: int) -> list[object]:
        labels = [self.given.word(name)[self.rows[effect, self.first[effect]]] for name in NAMED]
        cells = [cell for coder in range(len(self.coders)) for cell in self._said(effect, at, coder)]
        return [effect, at, *labels, self.columns[at].name, *cells]

    def _said(self, effect: int, at: int, coder: int) -> tuple[str, str]:
        row = int(self.rows[effect, coder])
        if row == ABSENT:
            return NO_ROW, ""
        return self.sheets[coder].said(self.columns[at], row - int(self.given.starts[coder]))

    def _fits(self, keyed: pd.DataFrame, count: int) -> list[str]:
        found = [""] * count
        for dispute, lines in keyed.groupby("dispute"):
            effect, at = self.pairs[int(str(dispute))]
            others = np.flatnonzero(self.columns[at].apart[effect]).tolist()
            fits = [bool(lines["fits_before"].iloc[0]), *lines["fits_after"].astype(bool)]
            coders = [self.coders[c] for c in (int(self.first[effect]), *others)]
            fitting = [coder for coder, good in zip(coders, fits, strict=True) if good]
            if len(fitting) < len(coders):
                found[int(str(dispute))] = listed(fitting) or "none"
        return found


_MATTER = ("term", "contrast")
"""Labels that the effect depends on."""


def ranked(lines: pd.DataFrame, first: str) -> pd.DataFrame:
    """Lines by a code, then by how far the effect moves, in the metric and then in standard errors."""
    keys = lines[[first]].assign(far=-lines["shift"].fillna(0.0), far_in_se=-lines["shift_in_se"].fillna(0.0))
    return lines.loc[keys.sort_values([first, "far", "far_in_se"], kind="stable").index]
