"""Rows of one analysis are the terms of one model: what the other terms add up to, for each row.

Terms join factor names by " x ". A model is complete when every interaction of its main effects is there; only then
do sums over the others exist.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from extractor.routes.engine import Estimate
from extractor.table import BoolArray, FloatArray, ObjectArray, ReportedTable, Variable

TERM_DESIGNS = ("factorial", "within", "mixed")
_JOINT = " x "
_NO_FACTOR = frozenset({"", "none"})


def factors_of(term: str) -> frozenset[str]:
    """Factor names of a term, in lower case."""
    return frozenset(part.strip().lower() for part in term.replace("×", "x").split(_JOINT) if part.strip())


def analysis_ids(table: ReportedTable, design: ObjectArray) -> NDArray[np.int64]:
    """One number per model, -1 for rows that belong to none; shape (rows,)."""
    labels = pd.Series(table.fact("study").astype(str)) + "\x1f" + table.fact("analysis").astype(str)
    codes = pd.factorize(labels)[0].astype(np.int64)
    belongs = np.isin(design, TERM_DESIGNS) & (table.fact("analysis") != "")
    return np.where(belongs, codes, -1)


def terms_per_row(table: ReportedTable, design: ObjectArray) -> NDArray[np.int64]:
    """How many rows the row's model has; 1 for rows that stand alone."""
    ids = analysis_ids(table, design)
    counts = np.bincount(ids[ids >= 0], minlength=1)
    return np.where(ids >= 0, counts[np.maximum(ids, 0)], 1)


def sums_over_terms(
    table: ReportedTable, use: Mapping[Variable, BoolArray], design: ObjectArray
) -> dict[str, Estimate]:
    """Sums over the other terms of each row's model; NaN where they cannot be formed.

    Returns
    -------
    df_others, explained_by_others, ss_others, ss_measured, explained_by_measured, ss_strata, each of shape (rows,).
    """
    return _Models(table, use, design).sums()


class _Models:
    def __init__(self, table: ReportedTable, use: Mapping[Variable, BoolArray], design: ObjectArray) -> None:
        self.table, self.use, self.design = table, use, design
        self.ids = analysis_ids(table, design)
        self.inside = self.ids >= 0
        self.models = int(self.ids.max(initial=-1)) + 1
        self.term = table.fact("term").astype(str)

    def sums(self) -> dict[str, Estimate]:
        df, f = self._cell("df_effect"), self._cell("f_value")
        ss, ss_error = self._cell("ss_effect"), self._cell("ss_error")
        explained = Estimate(df.value * f.value, df.low * f.low, df.high * f.high)
        complete = self._complete()
        measured = self._measured()
        alone = ~self.inside & (self.design == "within")
        one_stratum = complete & (self.design == "factorial")
        found = {
            "df_others": self._others(df, one_stratum),
            "explained_by_others": self._others(explained, one_stratum),
            "ss_others": self._others(ss, one_stratum),
            "ss_measured": self._others(ss, complete, measured),
            "explained_by_measured": self._others(explained, one_stratum, measured),
            "ss_strata": self._strata(ss_error, complete),
        }
        # a single within factor has no other sources
        for end in (found["ss_measured"].value, found["ss_measured"].low, found["ss_measured"].high):
            end[alone | self._single()] = 0.0
        return found

    def _cell(self, name: str) -> Estimate:
        numbers = self.table.numbers.get((name, None))
        nothing = np.full(self.table.rows, np.nan)
        if numbers is None:
            return Estimate(nothing, nothing, nothing)
        used = self.use[name, None]
        return Estimate(*(np.where(used, end, np.nan) for end in (numbers.value, numbers.low, numbers.high)))

    def _total(self, values: FloatArray, rows: BoolArray) -> FloatArray:
        """Sum over each model's rows, back on every row; NaN where any of them is unknown."""
        sums = np.zeros(self.models)
        np.add.at(sums, self.ids[rows], values[rows])
        return np.where(self.inside, sums[np.maximum(self.ids, 0)] if self.models else np.nan, np.nan)

    def _others(self, each: Estimate, where: BoolArray, counted: BoolArray | None = None) -> Estimate:
        """The sum over a model's other rows, of those counted."""
        rows = self.inside if counted is None else self.inside & counted
        own = np.where(rows, 1.0, 0.0)
        ends = []
        for values, outward in ((each.value, 0.0), (each.low, -1e-12), (each.high, 1e-12)):
            mine = np.where(own > 0, values, 0.0)
            total = self._total(values, rows)
            rest = np.maximum(total - mine, 0.0)
            ends.append(np.where(where, rest + outward * np.abs(total), np.nan))
        return Estimate(ends[0], np.maximum(ends[1], 0.0), ends[2])

    def _complete(self) -> BoolArray:
        """Models that hold all main effects and all their interactions, each once."""
        codes, unique = pd.factorize(self.term)
        main = np.array([len(factors_of(t)) == 1 for t in unique], dtype=bool)[codes]
        terms = self._total(np.ones(self.table.rows), self.inside)
        mains = self._total(np.ones(self.table.rows), self.inside & main)
        labels = pd.DataFrame({"id": self.ids, "term": self.term})
        twice = labels.duplicated(keep=False).to_numpy() & self.inside
        repeated = self._total(np.ones(self.table.rows), twice) > 0
        with np.errstate(invalid="ignore"):
            return np.asarray(self.inside & (terms == 2.0**mains - 1) & (mains > 0) & ~repeated)

    def _single(self) -> BoolArray:
        terms = self._total(np.ones(self.table.rows), self.inside)
        return np.asarray((self.design == "within") & (terms == 1))

    def _measured(self) -> BoolArray:
        """Terms that involve a measured factor; a model's list may stand in any of its rows."""
        said = pd.Series(self.table.fact("measured_factors").astype(str)).replace("", None)
        spread = said.groupby(self.ids).transform("first").fillna("").to_numpy()
        pairs = pd.MultiIndex.from_arrays([self.term, spread])
        codes, unique = pairs.factorize()
        involved = [bool(factors_of(term) & _listed(names)) for term, names in unique]
        return np.asarray(np.array(involved, dtype=bool)[codes]) if len(involved) else self.inside

    def _strata(self, ss_error: Estimate, complete: BoolArray) -> Estimate:
        """Sum of the distinct error terms of a model, participants included, in within and mixed models."""
        several = complete & np.isin(self.design, ("within", "mixed")) & ~self._single()
        frame = pd.DataFrame({"id": self.ids, "ss": ss_error.value})
        first = ~frame.duplicated().to_numpy() & several
        subjects = self._cell("ss_subjects")
        named = (
            pd.DataFrame({"id": self.ids, "ss": subjects.value})
            .groupby("id")["ss"]
            .transform("max")
            .to_numpy()
        )
        within = self.design == "within"
        ends = []
        for values, participants in zip(
            (ss_error.value, ss_error.low, ss_error.high),
            (subjects.value, subjects.low, subjects.high),
            strict=True,
        ):
            spread = pd.Series(participants).groupby(self.ids).transform("max").to_numpy()
            extra = np.where(within, np.where(np.isnan(named), np.nan, spread), 0.0)
            ends.append(np.where(several, self._total(values, first) + extra, np.nan))
        return Estimate(*ends)


def _listed(names: str) -> frozenset[str]:
    words = {part.strip().lower() for part in names.split(",")}
    return frozenset(words - _NO_FACTOR)
