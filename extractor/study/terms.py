"""Rows of one analysis are the terms of one model: what the other terms add up to, for each row.

Terms join factor names by " x ". A model is complete when every interaction of its main effects is there; only then
do sums over the others exist.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from extractor.distinct import distinct
from extractor.routes.engine import Estimate
from extractor.table import BoolArray, FloatArray, ObjectArray, ReportedTable, Variable

TERM_DESIGNS = ("factorial", "within", "mixed")
SUMS = (
    "df_others",
    "explained_by_others",
    "ss_others",
    "ss_measured",
    "explained_by_measured",
    "ss_strata",
    "only_factor",
    "levels",
)
_JOINT = " x "
_NO_FACTOR = frozenset({"", "none"})


def factors_of(term: str) -> frozenset[str]:
    """Factor names of a term, in lower case."""
    return frozenset(part.strip().lower() for part in term.replace("×", "x").split(_JOINT) if part.strip())


def analysis_ids(table: ReportedTable, design: ObjectArray) -> NDArray[np.int64]:
    """One number per model, -1 for rows that belong to none; shape (rows,)."""
    study, analysis = table.fact("study"), table.fact("analysis")
    belongs = np.isin(design, TERM_DESIGNS) & (analysis != "")
    ids = np.full(table.rows, -1, dtype=np.int64)
    ids[belongs] = distinct(list(zip(study[belongs].tolist(), analysis[belongs].tolist(), strict=True)))[1]
    return ids


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
    The quantities of ``SUMS``, each of shape (rows,).
    """
    return _Models(table, use, design).sums()


class _Models:
    def __init__(self, table: ReportedTable, use: Mapping[Variable, BoolArray], design: ObjectArray) -> None:
        self.table, self.use, self.design = table, use, design
        self.ids = analysis_ids(table, design)
        self.inside = self.ids >= 0
        self.models = int(self.ids.max(initial=-1)) + 1
        self.term = table.fact("term")
        unique, self.which = distinct(self.term)
        self.factors = np.array([len(factors_of(t)) for t in unique], dtype=np.int64)[self.which]
        self.joint = self.factors > 1

    def sums(self) -> dict[str, Estimate]:
        lone = ~self.inside & (self.design == "within") & ~self.joint
        if not self.models:
            return self._without_models(lone)
        df, f = self._cell("df_effect"), self._cell("f_value")
        ss, ss_error = self._cell("ss_effect"), self._cell("ss_error")
        explained = Estimate(df.value * f.value, df.low * f.low, df.high * f.high)
        complete = self._complete()
        measured = self._measured()
        one_stratum = complete & (self.design == "factorial")
        single = self._single()
        found = {
            "df_others": self._others(df, one_stratum),
            "explained_by_others": self._others(explained, one_stratum),
            "ss_others": self._others(ss, complete),
            "ss_measured": self._others(ss, complete, measured),
            "explained_by_measured": self._others(explained, one_stratum, measured),
            "ss_strata": self._strata(ss_error, complete),
            "only_factor": _known(lone | single),
            "levels": self._levels(df.value),
        }
        # a single within factor has no other sources
        for name in ("ss_others", "ss_measured"):
            for end in (found[name].value, found[name].low, found[name].high):
                end[single] = 0.0
        return found

    def _without_models(self, lone: BoolArray) -> dict[str, Estimate]:
        """The sums of rows that all stand alone."""
        unknown = np.full(self.table.rows, np.nan)
        found = {name: Estimate(unknown, unknown, unknown) for name in SUMS}
        return found | {"only_factor": _known(lone)}

    def _levels(self, df: FloatArray) -> Estimate:
        """Combinations of levels of each joint within term, where all main effects of its factors are rows, too."""
        within = self.inside & (self.design == "within") & ~np.isnan(df)
        main = np.flatnonzero(within & ~self.joint).tolist()
        of_factor = {(int(self.ids[i]), factors_of(self.term[i])): df[i] for i in main}
        found = np.full(self.table.rows, np.nan)
        for i in np.flatnonzero(within & self.joint).tolist():
            each = [
                of_factor.get((int(self.ids[i]), frozenset([f])), np.nan) for f in factors_of(self.term[i])
            ]
            # the df of the term are the product of those of its factors (textbook identity)
            if np.prod(each) == df[i]:
                found[i] = np.prod(np.array(each) + 1)
        return Estimate(found, found, found)

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
            # a bound without an upper end leaves the sum of the others without one, too
            rest = np.maximum(np.subtract(total, mine, where=~np.isinf(total), out=total.copy()), 0.0)
            ends.append(np.where(where, rest + outward * np.abs(total), np.nan))
        return Estimate(ends[0], np.maximum(ends[1], 0.0), ends[2])

    def _complete(self) -> BoolArray:
        """Models that hold all main effects and all their interactions, each once."""
        terms = self._total(np.ones(self.table.rows), self.inside)
        mains = self._total(np.ones(self.table.rows), self.inside & (self.factors == 1))
        numbered = self.ids * (self.which.max(initial=0) + 1) + self.which
        _, pairs = np.unique(numbered, return_inverse=True)
        twice = (np.bincount(pairs)[pairs] > 1) & self.inside
        repeated = self._total(np.ones(self.table.rows), twice) > 0
        with np.errstate(invalid="ignore"):
            return np.asarray(self.inside & (terms == 2.0**mains - 1) & (mains > 0) & ~repeated)

    def _single(self) -> BoolArray:
        """Rows that are the only term of a model of one factor within participants."""
        terms = self._total(np.ones(self.table.rows), self.inside)
        return np.asarray((self.design == "within") & (terms == 1) & ~self.joint)

    def _measured(self) -> BoolArray:
        """Terms that involve a measured factor; a model's list may stand in any of its rows."""
        said = self.table.fact("measured_factors")
        lists: dict[int, str] = {}
        for at in np.flatnonzero(self.inside & (said != "")).tolist():
            lists.setdefault(int(self.ids[at]), str(said[at]))
        if not lists:
            return np.zeros(self.table.rows, dtype=bool)
        spread = [lists.get(model, "") for model in self.ids.tolist()]
        unique, codes = distinct(list(zip(self.term.tolist(), spread, strict=True)))
        return np.array([bool(factors_of(term) & _listed(names)) for term, names in unique], dtype=bool)[
            codes
        ]

    def _greatest(self, values: FloatArray) -> FloatArray:
        """The greatest known value of each model, on every row of it; NaN where none is known."""
        greatest = np.full(self.models + 1, -np.inf)
        known = ~np.isnan(values)
        np.maximum.at(greatest, self.ids[known], values[known])  # rows of no model share the last place
        return np.where(greatest[self.ids] == -np.inf, np.nan, greatest[self.ids])

    def _strata(self, ss_error: Estimate, complete: BoolArray) -> Estimate:
        """Sum of the distinct error terms of a model, participants included, in within and mixed models."""
        several = complete & np.isin(self.design, ("within", "mixed")) & ~self._single()
        first = np.zeros(self.table.rows, dtype=bool)
        terms = np.stack([self.ids, np.where(np.isnan(ss_error.value), -1.0, ss_error.value)])
        first[np.unique(terms, axis=1, return_index=True)[1]] = True
        first &= several
        subjects = self._cell("ss_subjects")
        named = self._greatest(subjects.value)
        within = self.design == "within"
        ends = []
        for values, participants in zip(
            (ss_error.value, ss_error.low, ss_error.high),
            (subjects.value, subjects.low, subjects.high),
            strict=True,
        ):
            spread = self._greatest(participants)
            extra = np.where(within, np.where(np.isnan(named), np.nan, spread), 0.0)
            ends.append(np.where(several, self._total(values, first) + extra, np.nan))
        return Estimate(*ends)


def _known(where: BoolArray) -> Estimate:
    """1 where something holds, NaN elsewhere."""
    ones = np.where(where, 1.0, np.nan)
    return Estimate(ones, ones, ones)


def _listed(names: str) -> frozenset[str]:
    words = {part.strip().lower() for part in names.split(",")}
    return frozenset(words - _NO_FACTOR)
