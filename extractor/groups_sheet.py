"""The sheet ``groups``: one line per group or cell, joined to the coded rows by ``analysis``.

Rows of designs with one factor get the lines as their numbered groups, in the order of the lines. Rows of factorial
designs get them as cells, with one column per factor.
"""

from __future__ import annotations

import zipfile
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from extractor.codebook import MOST_GROUPS, Codebook
from extractor.distinct import distinct, spread
from extractor.errors import UnreadableInput
from extractor.printed.reading import quoted
from extractor.quantities import VOCABULARY, Role, Shape
from extractor.sheet import read_table
from extractor.source.columns import filled, take_rows
from extractor.source.grid import Grid, NoRows
from extractor.study.subgroups import merged_lines
from extractor.study.terms import factors_of
from extractor.table import Cells, FloatArray, Numbers, ObjectArray, Place, ReportedTable, Variable

if TYPE_CHECKING:
    import pandas as pd

SHEET = "groups"
_GROUP = "group"
_ONE_FACTOR = ("one-way", "two-group", "within", "paired", "pre-post-control", "ancova")
_CELLED = ("factorial",)
_ARRAYS = ("value", "low", "high", "unit", "decimals", "given", "comparator", "understood", "problem")


def with_groups(
    table: ReportedTable,
    source: str | Path | pd.DataFrame | Grid,
    codebook: Codebook,
    groups: str | Path | pd.DataFrame | Grid | None,
) -> ReportedTable:
    """The table with the lines of its groups sheet joined.

    Parameters
    ----------
    source : what the table was read from; a workbook may hold the sheet itself.
    groups : the lines, where they stand in a file or frame of their own.

    Raises
    ------
    UnreadableInput
        when the sheet has no column ``analysis`` or no group quantity.
    """
    if groups is None:
        if not isinstance(source, (str, Path)) or str(source) == "-" or not _has_sheet(source):
            return table
        groups = source
    try:
        long = read_table(groups, _book(codebook))
    except NoRows:
        # headings without lines, as in a fresh coding sheet, are no groups
        if groups is source:
            return table
        raise
    where = f"{long.source}, sheet {long.sheet or SHEET}"
    if "analysis" not in long.facts:
        raise UnreadableInput(f"{where}: no column 'analysis' says which rows the lines belong to; add it")
    if not any(group == 1 for _, group in long.numbers):
        raise UnreadableInput(
            f"{where}: no column of group numbers is known; known are n, mean, sd, se and so on"
        )
    named = [c for c in long.carried if c.strip().lower() == _GROUP]
    if named:
        words = long.carried[named[0]]
        labels = np.fromiter((str(word).strip() for word in words), dtype=object, count=len(words))
        long = merged_lines(long, labels)
    return _Joining(table, long).joined()


def _has_sheet(source: str | Path) -> bool:
    # what reads workbooks is heavy, and comes only for what may be one
    if not zipfile.is_zipfile(source):
        return False
    from extractor.source.workbook import has_sheet

    return has_sheet(Path(source), SHEET)


def _book(codebook: Codebook) -> Codebook:
    """The codebook of the long sheet: its group quantities have no number."""
    columns: dict[str, Variable | str] = {}
    for name, quantity in VOCABULARY.items():
        if quantity.shape is Shape.GROUP and quantity.role is Role.REPORTED:
            columns |= dict.fromkeys((name, name.upper(), name.capitalize()), (name, 1))
    return replace(
        codebook, title=SHEET, design="", columns=columns, patterns=(), scale={}, path=SHEET, responses=""
    )


class _Joining:
    def __init__(self, table: ReportedTable, long: ReportedTable) -> None:
        self.table, self.long = table, long
        self.design = table.fact("design")
        self.key = long.fact("analysis")
        analyses, codes = distinct(self.key)
        wanted = set(table.fact("analysis").tolist()) - {""}
        joined = np.array([label in wanted for label in analyses], dtype=np.bool_)[codes]
        self.number = np.where(joined, _turns(codes) + 1, 0)
        if self.number.max(initial=0) > MOST_GROUPS:
            where = f"{long.source}, sheet {long.sheet or SHEET}"
            most = int(np.argmax(self.number > MOST_GROUPS))
            raise UnreadableInput(
                f"{where}, row {long.row_numbers[most]}: more than {MOST_GROUPS} lines of the analysis "
                f"{quoted(self.key[most])}"
            )
        self.contrast: ObjectArray = table.fact("contrast").copy()

    def joined(self) -> ReportedTable:
        numbers = dict(self.table.numbers)
        here = np.isin(self.design, _ONE_FACTOR)
        for group in range(1, int(self.number.max(initial=0)) + 1):
            self._fill(numbers, group, here)
        cells = self._cells()
        celled = np.isin(self.design, _CELLED) & np.isin(self.table.fact("analysis"), list(cells))
        for group in range(1, int(self.number.max(initial=0)) + 1):
            self._fill(numbers, group, celled)
        self._resolve_contrasts(cells, celled)
        facts = {**self.table.facts, "contrast": self.contrast}
        return replace(self.table, numbers=numbers, facts=facts, cells=cells)

    def _lines(self, group: int) -> NDArray[np.int64]:
        """For each row of the table the long line that is its group; -1 where there is none."""
        found = dict(zip(self.key[self.number == group], np.flatnonzero(self.number == group), strict=True))
        analyses, codes = distinct(self.table.fact("analysis"))
        return np.array([found.get(a, -1) if a else -1 for a in analyses], dtype=np.int64)[codes]

    def _fill(self, numbers: dict[Variable, Numbers], group: int, where: NDArray[np.bool_]) -> None:
        line = np.where(where, self._lines(group), -1)
        has = line >= 0
        if not has.any():
            return
        for (name, number), long in self.long.numbers.items():
            if number != 1:
                continue
            place = Place(f"{name} of group {group} in sheet {SHEET}", "")
            taken = Numbers(**{a: getattr(long, a)[np.maximum(line, 0)] for a in _ARRAYS}, place=place)
            column = numbers.get((name, group))
            if column is None:
                blank = _blank_like(taken)
                take_rows(blank, taken, has)
                numbers[name, group] = blank
            else:
                copy = Numbers(**{a: getattr(column, a).copy() for a in _ARRAYS}, place=column.place)
                take_rows(copy, taken, has & ~filled(column))
                numbers[name, group] = copy

    def _cells(self) -> dict[str, Cells]:
        """Cells of the factorial analyses whose lines name their levels."""
        wanted = sorted({str(a) for a in self.table.fact("analysis")[np.isin(self.design, _CELLED)]} - {""})
        factors = [c for c in self.long.carried if c.strip().lower() != _GROUP]
        cells = {}
        for analysis in wanted:
            lines = np.flatnonzero(self.key == analysis)
            levels = {
                c.strip().lower(): [str(v).strip() for v in self.long.carried[c][lines]] for c in factors
            }
            levels = {name: values for name, values in levels.items() if all(values) and len(set(values)) > 1}
            n, mean, sd = (self._ends(name, lines) for name in ("n", "mean", "sd"))
            if len(lines) > 1 and levels and all(np.isfinite(x[0]).all() for x in (n, mean, sd)):
                cells[analysis] = Cells(n[0], mean, sd, levels, self.long.row_numbers[lines])
        return cells

    def _ends(self, name: str, lines: NDArray[np.intp]) -> tuple[FloatArray, FloatArray, FloatArray]:
        numbers = self.long.numbers.get((name, 1))
        if numbers is None:
            nothing = np.full(len(lines), np.nan)
            return nothing, nothing, nothing
        return numbers.value[lines], numbers.low[lines], numbers.high[lines]

    def _resolve_contrasts(self, cells: dict[str, Cells], celled: NDArray[np.bool_]) -> None:
        """Write contrasts of levels, and main effects of two levels, as weights of the cells."""
        analysis, term = self.table.fact("analysis").tolist(), self.table.fact("term").tolist()
        found, codes = distinct(list(zip(analysis, term, self.contrast.tolist(), strict=True)))
        words = [_weights_of(cells[a], t, c) if a in cells else c for a, t, c in found]
        self.contrast[celled] = spread(words, codes)[celled]


def _turns(codes: NDArray[np.int64]) -> NDArray[np.int64]:
    """For each row how many rows before it have its code."""
    order = np.argsort(codes, kind="stable")
    first = np.searchsorted(codes[order], codes[order], side="left")
    turns = np.empty(len(codes), dtype=np.int64)
    turns[order] = np.arange(len(codes)) - first
    return turns


def _weights_of(cells: Cells, term: str, contrast: str) -> str:
    """Weights in words: of two levels "x - y", else of the term's own factor where it has two; "none" otherwise."""
    sides = [part.strip() for part in contrast.replace("−", "-").split(" - ")] if contrast else []
    if not contrast:
        own = [levels for name, levels in cells.levels.items() if frozenset([name]) == factors_of(term)]
        if not own or len(set(own[0])) != 2:
            return "none"
        levels, sides = own[0], list(dict.fromkeys(own[0]))
    else:
        fitting = [
            levels for levels in cells.levels.values() if len(sides) == 2 and set(sides) <= set(levels)
        ]
        if not fitting:
            return contrast
        levels = fitting[0]
    weights = [
        1 / levels.count(v) if v == sides[0] else -1 / levels.count(v) if v == sides[1] else 0.0
        for v in levels
    ]
    return ", ".join(f"{w:.17g}" for w in weights)


def _blank_like(numbers: Numbers) -> Numbers:
    rows = len(numbers.value)
    nothing = np.full(rows, np.nan)
    words = np.full(rows, "", dtype=object)
    return Numbers(
        nothing,
        nothing.copy(),
        nothing.copy(),
        nothing.copy(),
        np.full(rows, -1, dtype=np.int64),
        np.zeros(rows, dtype=bool),
        words,
        words.copy(),
        words.copy(),
        numbers.place,
    )
