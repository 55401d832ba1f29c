"""What must not change a finding: order of rows and columns, units, and more correct numbers."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from extractor.audit.run import audit_evidence
from extractor.evidence import gather
from extractor.findings import Finding
from extractor.table import Numbers, ReportedTable
from tests.evidence.honest import honest_sheet
from tests.evidence.honest_designs import honest_design_sheet
from tests.evidence.planted import KINDS, plant
from tests.evidence.printing import Sheet, table

ROWS = 6
_SCALED = ("mean", "sd", "se", "ci_low", "ci_high", "mean_difference", "se_difference")
_SQUARED = ("ss_effect", "ss_error", "ss_total", "ms_effect", "ms_error", "ss_subjects")
_ARRAYS = ("value", "low", "high", "unit", "decimals", "given", "comparator", "understood", "problem")

seeds = st.integers(0, 2**32 - 1)
kinds = st.sampled_from(sorted(KINDS))


def _findings(reported: ReportedTable) -> list[Finding]:
    return audit_evidence(gather(reported), None).findings


def _said(findings: list[Finding]) -> list[tuple[object, ...]]:
    """What each finding claims."""
    return sorted((f.row, f.severity, f.rule, tuple(sorted(f.cells))) for f in findings)


def _planted(kind: str, seed: int) -> ReportedTable:
    reported = table(plant(kind, np.random.default_rng(seed), ROWS).sheet)
    return replace(
        reported, facts={**reported.facts, "study": np.arange(reported.rows).astype(str).astype(object)}
    )


@given(kinds, seeds)
@settings(max_examples=40, deadline=None)
def test_order_of_rows(kind: str, seed: int) -> None:
    reported = _planted(kind, seed)
    order = np.random.default_rng(seed).permutation(reported.rows)
    numbers = {
        v: Numbers(**{a: getattr(n, a)[order] for a in _ARRAYS}, place=n.place)
        for v, n in reported.numbers.items()
    }
    facts = {name: words[order] for name, words in reported.facts.items()}
    shuffled = replace(reported, numbers=numbers, facts=facts, row_numbers=reported.row_numbers[order])
    assert _said(_findings(shuffled)) == _said(_findings(reported))


@given(kinds, seeds)
@settings(max_examples=40, deadline=None)
def test_order_of_columns(kind: str, seed: int) -> None:
    reported = _planted(kind, seed)
    names = list(reported.numbers)
    order = np.random.default_rng(seed).permutation(len(names))
    shuffled = replace(reported, numbers={names[i]: reported.numbers[names[i]] for i in order})
    assert _findings(shuffled) == _findings(reported)


def _in_units(numbers: Numbers, factor: float) -> Numbers:
    scaled = {a: getattr(numbers, a) * factor for a in ("value", "low", "high", "unit")}
    return replace(numbers, **scaled)


@given(kinds, seeds, st.sampled_from([0.125, 8.0, 1024.0]))
@settings(max_examples=40, deadline=None)
def test_units(kind: str, seed: int, factor: float) -> None:
    """Powers of two, so that no digit of the scaled numbers is lost.

    Which cells come first may change: "a variance in the place of an SD" is a repair that depends on the unit.
    """
    reported = _planted(kind, seed)
    numbers = dict(reported.numbers)
    for variable, column in reported.numbers.items():
        if variable[0] in _SCALED:
            numbers[variable] = _in_units(column, factor)
        elif variable[0] in _SQUARED:
            numbers[variable] = _in_units(column, factor**2)
    scaled = [said[:3] for said in _said(_findings(replace(reported, numbers=numbers)))]
    assert scaled == [said[:3] for said in _said(_findings(reported))]


def _contradictions(sheet: Sheet) -> list[Finding]:
    return [f for f in _findings(table(sheet)) if f.rule == "contradiction"]


@given(seeds, st.booleans())
@settings(max_examples=60, deadline=None)
def test_a_further_correct_number_adds_no_contradiction(seed: int, other_design: bool) -> None:
    rng = np.random.default_rng(seed)
    sheet = honest_design_sheet(rng, ROWS) if other_design else honest_sheet(rng, ROWS)
    # whole quantities are left out: groups that are coded in part would be another study
    names = sorted({name for name, _ in sheet.columns})
    left = {name for name in names if rng.random() < 0.7}
    kept = {v: p for v, p in sheet.columns.items() if v[0] in left}
    if kept:
        assert _contradictions(Sheet(kept, sheet.facts)) == []
    assert _contradictions(sheet) == []
