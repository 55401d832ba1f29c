"""One arm or one sample behind several rows: what is said, and what is left unsaid. All data are invented."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd
import pytest

from extractor.api import read
from extractor.audit.plausibility import implausible
from extractor.findings import Finding, Severity
from extractor.overlap.double_counting import ARM, CONTRASTS, SAMPLE, TEST, double_counted

Row = Mapping[str, object]


def groups(*arms: tuple[int, str, str]) -> dict[str, object]:
    """Columns of groups given as (n, mean, SD)."""
    return {
        f"{name}_{group}": value
        for group, arm in enumerate(arms, 1)
        for name, value in zip(("n", "mean", "sd"), arm, strict=True)
    }


CONTROL = (22, "12.60", "3.41")
DRUG = (20, "10.21", "3.12")
DIET = (25, "11.30", "3.30")


def row(study: str, outcome: str = "recall", design: str = "two-group", **cells: object) -> Row:
    return {"study": study, "outcome": outcome, "design": design, **cells}


def findings(*rows: Row) -> list[Finding]:
    return list(double_counted(read(pd.DataFrame(rows)).evidence))


def said(*rows: Row) -> list[tuple[int, str]]:
    return [(finding.row, finding.rule) for finding in findings(*rows)]


def test_an_arm_compared_twice_is_named_with_its_rows_and_groups() -> None:
    """A control group of 22 stands in two comparisons of one study, printed once as 12.60 and once as 12.6."""
    found = findings(
        row("North Quay", **groups(DRUG, CONTROL)), row("North Quay", **groups((22, "12.6", "3.41"), DIET))
    )
    assert [(f.row, f.rule, f.cells) for f in found] == [
        (2, ARM, ("mean_2 [H2]",)),
        (3, ARM, ("mean_1 [E3]",)),
    ]
    assert "group 2 (n = 22, M = 12.60) also is group 1 of row 3" in found[0].message
    assert "group 1 (n = 22, M = 12.6) also is group 2 of row 2" in found[1].message


def test_a_comparison_coded_twice_within_a_study_is_said_once_per_row_whatever_the_order_of_groups() -> None:
    found = findings(row("Site 7", **groups(DRUG, CONTROL)), row("Site 7", **groups(CONTROL, DRUG)))
    assert [(f.row, f.rule) for f in found] == [(2, ARM), (3, ARM)]
    assert "both groups also stand in row 3" in found[0].message


def test_contrasts_of_one_analysis_share_the_groups_they_weigh() -> None:
    arms = groups(DRUG, DIET, CONTROL)
    found = findings(
        row("Mill Lane", design="one-way", analysis="m1", contrast="1 - 3", **arms),
        row("Mill Lane", design="one-way", analysis="m1", contrast="2 - 3", **arms),
    )
    assert [(f.row, f.rule) for f in found] == [(2, CONTRASTS), (3, CONTRASTS)]
    assert "group 3 in common with that of row 3" in found[0].message


def test_contrasts_without_a_common_group_are_not_mentioned() -> None:
    arms = groups(DRUG, DIET, CONTROL, (30, "9.75", "2.20"))
    assert not said(
        row("Mill Lane", design="one-way", analysis="m1", contrast="1 - 2", **arms),
        row("Mill Lane", design="one-way", analysis="m1", contrast="3 - 4", **arms),
    )


@pytest.mark.parametrize(
    "cells",
    [
        [groups(DRUG, CONTROL), groups((20, "1.20", "0.31"), (22, "2.61", "0.42"))],
        [groups(DRUG, CONTROL), groups((22, "2.61", "0.42"), (20, "1.20", "0.31"))],
        [{"n_total": 60, "p_value": ".01"}, {"n_total": 60, "p_value": ".20"}],
        [{"f_value": "2.2", "df_effect": 1, "df_error": 58}, {"t_value": "1.9", "df": 58}],
    ],
    ids=["sizes", "sizes in another order", "total", "total from dfs"],
)
def test_outcomes_of_one_sample_are_recognised_by_its_size(cells: list[dict[str, object]]) -> None:
    rows = [
        row("East Gate", outcome, **each) for outcome, each in zip(("recall", "sleep"), cells, strict=True)
    ]
    assert said(*rows) == [(2, SAMPLE), (3, SAMPLE)]


def test_other_studies_other_sizes_and_rows_of_one_named_analysis_are_not_mentioned() -> None:
    other = groups((20, "1.20", "0.31"), (23, "2.61", "0.42"))
    assert not said(row("East Gate", **groups(DRUG, CONTROL)), row("East Gate", "sleep", **other))
    assert not said(row("East Gate", n_total=60), row("West Gate", "sleep", n_total=60))
    assert not said(row("", n_total=60), row("", "sleep", n_total=60))
    term = {"design": "factorial", "analysis": "m1", "df_effect": 1, "df_error": 56, "n_total": 60}
    assert not said(
        row("East Gate", **term, term="age", f_value="4.31"),
        row("East Gate", **term, term="sex", f_value="1.02"),
    )


def test_one_test_in_two_studies_is_recognised_without_means() -> None:
    test = {"design": "one-way", "f_value": "4.31", "df_effect": 2, "df_error": 57}
    found = findings(row("Site 7", **test), row("Site 8", **test))
    assert [(f.row, f.rule) for f in found] == [(2, TEST), (3, TEST)]
    assert "F = 4.31, df1 = 2 and df2 = 57 also stand in row 3 (Site 8)" in found[0].message
    coarse = {**test, "f_value": "4.3"}
    assert not said(row("Site 7", **coarse), row("Site 8", **coarse))


def test_what_the_rule_about_means_of_different_studies_says_is_not_said_again() -> None:
    rows = pd.DataFrame(
        [
            row(name, f_value="4.31", df_effect=1, df_error=40, **groups(DRUG, CONTROL))
            for name in ("Site 7", "Site 8")
        ]
    )
    evidence = read(rows).evidence
    assert "same sizes and means" in {finding.rule for finding in implausible(evidence)}
    assert not list(double_counted(evidence))


def test_every_finding_is_a_note_and_names_cells_of_its_row() -> None:
    found = findings(
        row("Site 7", **groups(DRUG, CONTROL)),
        row("Site 7", **groups(DIET, CONTROL)),
        row("Site 7", "sleep", **groups((20, "1.20", "0.31"), (22, "2.61", "0.42"))),
    )
    assert {f.severity for f in found} == {Severity.NOTE}
    assert {f.rule for f in found} == {ARM, SAMPLE}
    for finding in found:
        assert finding.cells
        assert all(cell.endswith(f"{finding.row}]") for cell in finding.cells)
        assert "not independent evidence" in finding.explanation


def test_unrelated_studies_stay_silent() -> None:
    """200 invented studies with numbers of their own: nothing to say."""
    rng = np.random.default_rng(3)
    rows = [
        row(
            f"Site {i}",
            **groups(
                *(
                    (int(rng.integers(12, 60)), f"{rng.normal(10, 3):.2f}", f"{rng.gamma(9, 0.4):.2f}")
                    for _ in "ab"
                )
            ),
        )
        for i in range(200)
    ]
    assert not findings(*rows)


def test_a_sheet_without_studies_or_numbers_is_no_error() -> None:
    assert not said({"study": "Site 7", "design": "one-way"}, {"study": "Site 7", "design": "one-way"})
    assert not said({"f_value": "4.31", "df_effect": 2, "df_error": 57})
