"""Checks over the rows of one model: the type of sums of squares behind an F, shares that exceed the whole."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from extractor.distinct import distinct, together
from extractor.evidence import Evidence
from extractor.findings import Finding, Severity
from extractor.study.cells import TermFromCells, balanced, error_of, terms_of
from extractor.study.terms import TERM_DESIGNS, analysis_ids, factors_of
from extractor.table import Cells, Numbers
from extractor.words import listed, plain, printed_text

_CLOSE = 1e-9


def sums_of_squares_types(evidence: Evidence) -> Iterator[Finding]:
    """Which type of sums of squares the printed F of a factorial row with unequal cells fits, or that none does."""
    table = evidence.table
    printed = table.numbers.get(("f_value", None))
    if printed is None:
        return
    analysis, terms = table.fact("analysis").astype(str), table.fact("term").astype(str)
    for label, cells in table.cells.items():
        rows = np.flatnonzero((analysis == label) & (table.fact("design") == "factorial") & printed.given)
        if balanced(cells) or not len(rows):
            continue
        try:
            by_term = terms_of(cells)
        except ValueError as problem:
            first = int(rows[0])
            yield _finding(
                evidence, first, printed, Severity.NOTE, f"the cells give no sums of squares: {problem}"
            )
            continue
        for row in rows:
            entry = by_term.get(factors_of(terms[row]))
            if entry is not None:
                yield _judged(evidence, int(row), printed, cells, entry)


def _judged(evidence: Evidence, row: int, printed: Numbers, cells: Cells, entry: TermFromCells) -> Finding:
    (_, error_low, error_high), df_error = error_of(cells)
    allowed = {
        kind: (low / entry.df / (error_high / df_error), high / entry.df / (error_low / df_error))
        for kind, (_, low, high) in entry.sums.items()
    }
    unit = float(printed.unit[row])
    fits = _fitting(allowed, float(printed.low[row]), float(printed.high[row]))
    ranges = "; ".join(f"type {kind}: {plain(a)} to {plain(b)}" for kind, (a, b) in allowed.items())
    said = printed_text(evidence.table, ("f_value", None), row)
    if fits:
        kinds = listed([f"type {kind}" for kind in fits])
        return _finding(
            evidence, row, printed, Severity.NOTE, f"F = {said} fits sums of squares of {kinds} ({ranges})"
        )
    near = _fitting(allowed, float(printed.low[row]) - unit, float(printed.high[row]) + unit)
    severity = Severity.DOUBTFUL if near else Severity.INCONSISTENT
    return _finding(
        evidence,
        row,
        printed,
        severity,
        f"F = {said} fits no type of sums of squares from the cells ({ranges})",
    )


def _fitting(allowed: dict[str, tuple[float, float]], low: float, high: float) -> list[str]:
    return [k for k, (a, b) in allowed.items() if a * (1 - _CLOSE) <= high and b * (1 + _CLOSE) >= low]


def _finding(evidence: Evidence, row: int, printed: Numbers, severity: Severity, message: str) -> Finding:
    table = evidence.table
    number = int(table.row_numbers[row])
    return Finding(
        row=number,
        study=str(table.fact("study")[row]),
        severity=severity,
        rule="type of sums of squares",
        cells=(table.where(("f_value", None), row),),
        printed=printed_text(table, ("f_value", None), row),
        message=message,
    )


def shares_of_the_total(evidence: Evidence) -> Iterator[Finding]:
    """Classical eta squared of a model's terms adding up to more than the whole: partial ones, most likely."""
    table = evidence.table
    printed = table.numbers.get(("eta_squared", None))
    if printed is None:
        return
    ids = analysis_ids(table, table.fact("design"))
    sums = np.bincount(ids + 1, np.where(printed.given, printed.low, 0.0))[ids + 1]
    first = np.zeros(table.rows, dtype=bool)
    first[np.unique(ids, return_index=True)[1]] = True
    for row in np.flatnonzero((ids >= 0) & (sums > 1 + _CLOSE) & first):
        members = np.flatnonzero((ids == ids[row]) & printed.given)
        numbers = [int(table.row_numbers[m]) for m in members]
        cells = table.cells.get(str(table.fact("analysis")[row]))
        # with unequal cells the sums of squares of types II and III overlap and need not stay below the total
        certain = cells is not None and balanced(cells)
        yield Finding(
            row=numbers[0],
            study=str(table.fact("study")[row]),
            severity=Severity.INCONSISTENT if certain else Severity.DOUBTFUL,
            rule="shares of the total",
            cells=tuple(table.where(("eta_squared", None), int(m)) for m in members),
            printed=", ".join(printed_text(table, ("eta_squared", None), int(m)) for m in members),
            message=f"the eta squared of the terms of one model add up to at least {plain(float(sums[row]))}, "
            "more than the whole",
            explanation="partial eta squared labelled eta squared",
        )


def two_error_terms(evidence: Evidence) -> Iterator[Finding]:
    """One term of one study with two F on different error df: two analyses of one data set, no contradiction."""
    table = evidence.table
    printed = [table.numbers.get((name, None)) for name in ("f_value", "df_error", "df_effect", "n_total")]
    tests = [numbers for numbers in printed if numbers is not None]
    if table.rows < 2 or len(tests) < len(printed):
        return
    _, error, effect, size = tests
    study, outcome, term = (table.fact(name) for name in ("study", "outcome", "term"))
    rows = np.flatnonzero(
        np.logical_and.reduce([numbers.given for numbers in tests])
        & np.isin(table.fact("design"), TERM_DESIGNS)
        & (study != "")
        & (term != "")
    )
    keys = [
        (study[i], outcome[i], factors_of(str(term[i])), effect.value[i], size.value[i])
        for i in rows.tolist()
    ]
    for members in together(rows, distinct(keys)[1]):
        if len(set(error.value[members].tolist())) < 2:
            continue
        first = int(members[0])
        said = [
            f"{printed_text(table, ('f_value', None), i)} on {plain(effect.value[i])} and "
            f"{plain(error.value[i])} df (row {table.row_numbers[i]})"
            for i in members.tolist()
        ]
        yield Finding(
            row=int(table.row_numbers[first]),
            study=str(study[first]),
            severity=Severity.NOTE,
            rule="two error terms",
            cells=tuple(table.where(("df_error", None), i) for i in members.tolist()),
            printed=printed_text(table, ("f_value", None), first),
            message=f"F of {term[first]} is {listed(said)}: one data set has both where a term is tested "
            "against the error term of its own stratum and against a pooled one; use one of them",
            explanation="error terms of two strata, as in a within and a split-plot analysis",
        )
