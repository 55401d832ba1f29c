"""Error df that are wrong under the coded design and right under another one are diagnosed, not accused.

Every number is of an open data set (sources and licences in ``tests/study/data``), analysed in one way and coded in
another; the df of the other way are textbook identities.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from extractor.api import audit_sheet

DATA = Path(__file__).parents[1] / "study" / "data"
REPEATED = json.loads((DATA / "repeated.json").read_text(encoding="utf-8"))
WITHIN = json.loads((DATA / "within.json").read_text(encoding="utf-8"))["analyses"]
OATS = {line["source"]: line for line in REPEATED["oats"]["split_plot"]}
CHICKS = {line["source"]: line for line in REPEATED["chicks"]["anova"]}
SLEEP = WITHIN["sleep.extra~group|ID"]


def findings(**cells: object) -> pd.DataFrame:
    """The contradictions of one row."""
    found = audit_sheet(pd.DataFrame([{name: str(cell) for name, cell in cells.items()}])).frame
    return found[found["rule"] == "contradiction"]


def line_of(table: dict[str, Any], source: str, *more: str) -> dict[str, object]:
    line = table[source]
    known = {"ss_effect": line.get("ss"), "ss_error": line.get("error_ss")}
    p = f"{line['p']:.4f}" if line["p"] > 1e-4 else "< .0001"
    return {
        "f_value": f"{line['F']:.2f}",
        "df_effect": line["df"],
        "df_error": line["error_df"],
        "p_value": p,
        **{name: f"{known[name]:.3f}" for name in more},
    }


def diagnosed(found: pd.DataFrame, *words: str) -> None:
    assert list(found["severity"]) == ["doubtful"]
    said = f"{found['message'].iloc[0]} {found['explanation'].iloc[0]}"
    assert all(word in said for word in words), said


@pytest.mark.parametrize("more", [(), ("ss_effect", "ss_error")])
@pytest.mark.parametrize(("term", "source"), [("nitrogen", "N"), ("variety x nitrogen", "V:N")])
def test_a_split_plot_coded_as_within(term: str, source: str, more: tuple[str, ...]) -> None:
    """Yates's (1935) oats: nitrogen within three varieties has 45 error df, and 15 or 30 as a within factor."""
    row = {"design": "within", "term": term, "n_total": 6, **line_of(OATS, source, *more)}
    diagnosed(findings(**row), "an error term pooled over the 3 levels of another factor", "split plot")


def test_two_groups_of_participants_coded_as_within() -> None:
    """Crowder & Hand (1990), chicks on four diets: 45 chicks, time with 11·(45 - 4) = 451 error df."""
    row = {"design": "within", "term": "time", "n_total": 45, **line_of(CHICKS, "Within")}
    diagnosed(findings(**row), "the error term within participants of 4 groups", "design mixed")
    row["term"], row = "diet x time", {**row, "term": "diet x time", **line_of(CHICKS, "Between:Within")}
    diagnosed(findings(**row), "the error term within participants of 4 groups", "design mixed")
    row = {"design": "within", "term": "diet", "n_total": 45, **line_of(CHICKS, "Between")}
    diagnosed(findings(**row), "the error term between participants")


def sleep(**cells: object) -> dict[str, object]:
    groups = {f"n_{j}": 10 for j in (1, 2)}
    for j in (1, 2):
        groups |= {f"mean_{j}": f"{SLEEP['mean'][j - 1]:.2f}", f"sd_{j}": f"{SLEEP['sd'][j - 1]:.2f}"}
    return {**groups, **cells}


def pooled_t() -> tuple[float, float]:
    """Student's (1908) two drugs as if taken by different patients."""
    t, p = stats.ttest_ind_from_stats(
        SLEEP["mean"][0], SLEEP["sd"][0], 10, SLEEP["mean"][1], SLEEP["sd"][1], 10
    )
    return float(t), float(p)


def test_pairs_analysed_as_independent_groups() -> None:
    t, p = pooled_t()
    row = sleep(design="paired", t_value=f"{t:.2f}", df=18, p_value=f"{p:.3f}")
    diagnosed(findings(**row), "df of independent groups", "design two-group")


def test_pairs_coded_as_independent_groups() -> None:
    expected = SLEEP["expected"]
    t, p = -np.sqrt(expected["f"]), expected["p"]
    row = sleep(design="two-group", t_value=f"{t:.2f}", df=9, p_value=f"{p:.4f}")
    diagnosed(findings(**row), "df of the same participants in every group", "design paired")


def test_the_other_design_must_fit_the_whole_row() -> None:
    """With the df of independent groups but a t that these means and SDs do not give, the row is not excused."""
    t, _ = pooled_t()
    row = sleep(design="paired", t_value=f"{t - 1:.2f}", df=18)
    assert list(findings(**row)["severity"]) == ["inconsistent"]


@pytest.mark.parametrize(
    ("row", "people"),
    [
        ({"design": "one-way", "df_effect": 1, "df_error": 36 * 40 - 2}, 36),
        ({"design": "within", "df_effect": 1, "df_error": 36 * 40 - 1}, 36),
        ({"design": "within", "df_effect": 2, "df_error": 2 * (12 * 25 - 1)}, 12),
    ],
)
def test_trials_counted_as_participants(row: dict[str, object], people: int) -> None:
    """N·m scores of N participants give N·m - k, or df1·(N·m - 1), error df (textbook identities)."""
    found = findings(**row, f_value="7.20", n_total=people)
    diagnosed(found, "trials counted as participants")
    off = {**row, "df_error": int(str(row["df_error"])) + 7}
    assert list(findings(**off, f_value="7.20", n_total=people)["severity"]) == ["inconsistent"]


def test_f_squared_printed_as_f() -> None:
    """Cohen (1988): f² = df1·F/df2 of one term, here .16."""
    found = findings(design="factorial", cohens_f=".16", f_value="4.56", df_effect=2, df_error=57)
    assert list(found["severity"]) == ["inconsistent"]
    assert "Cohen's f squared labelled Cohen's f, 0.4," in found["message"].iloc[0]


def test_values_that_only_together_are_wrong_are_named_together() -> None:
    """Each of these numbers could be right beside two of the others: no interval for one of them tells more."""
    found = findings(design="mixed", f_value="4.56", df_effect=3, df_error=58, p_value=".2").iloc[0]
    assert found["message"].startswith("df1 = 3, df2 = 58, F = 4.56 and p = 0.2 cannot hold together")
    assert np.isnan([found["expected_low"], found["expected_high"]]).all()


def test_two_f_of_one_term_are_pointed_out() -> None:
    """Both analyses of the oats in one sheet: nitrogen has F = 55.98 on 15 error df and F = 37.69 on 45."""
    within = {line["source"]: line for line in REPEATED["oats"]["two_within"]}
    rows = [
        {
            "study": "oats",
            "outcome": "yield",
            "design": design,
            "term": "nitrogen",
            "n_total": 6,
            **line_of(t, "N"),
        }
        for t, design in ((within, "within"), (OATS, "mixed"))
    ]
    found = audit_sheet(pd.DataFrame(rows).astype(str)).frame
    assert set(found["severity"]) == {"note"}
    said = found[found["rule"] == "two error terms"]["message"].iloc[0]
    assert "55.98 on 3 and 15 df (row 2) and 37.69 on 3 and 45 df (row 3)" in said
