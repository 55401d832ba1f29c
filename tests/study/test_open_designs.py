"""Open data of every design from the summaries alone: each F, sum of squares and index, and no honest row accused.

The summaries are unrounded, so what the package gives must agree with exact arithmetic on the raw values to the last
digits of a double. Sources and licences stand in the files under ``data``.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from extractor.api import audit_sheet, convert, read
from extractor.catalogue.groups import error_sum_from_sds
from extractor.routes.choice import choose
from extractor.study.cell_means import factorial_table

DATA = Path(__file__).parent / "data"
FACTORIAL = json.loads((DATA / "factorial.json").read_text(encoding="utf-8"))["analyses"]
WITHIN = json.loads((DATA / "within.json").read_text(encoding="utf-8"))["analyses"]
REPEATED = json.loads((DATA / "repeated.json").read_text(encoding="utf-8"))
CHICKS, OATS = REPEATED["chicks"], REPEATED["oats"]
CLOSE = {"rtol": 1e-9, "atol": 0.0}
GRAVE = {"inconsistent", "impossible"}

Rows = Sequence[Mapping[str, object]]


def sheet(rows: Rows) -> pd.DataFrame:
    """Coded rows as a coder's sheet: text, numbers to their last digit, blanks where nothing is said."""
    return pd.DataFrame(
        [{k: v if isinstance(v, str) else repr(v) for k, v in row.items()} for row in rows]
    ).fillna("")


def values(name: str, rows: Rows, groups: Rows = ()) -> np.ndarray:
    """What the best route of each row gives for any quantity of the vocabulary, NaN where there is none."""
    evidence = read(sheet(rows), groups=sheet(groups) if groups else None).evidence
    assert not evidence.blocked.any()
    found = np.full(len(rows), np.nan)
    for block in evidence.blocks:
        chosen = choose(block, name)
        for index, estimate in enumerate(chosen.estimates):
            mine = chosen.which == index
            found[block.positions[mine]] = estimate.value[mine]
    return found


def estimates(metric: str, rows: Rows, groups: Rows = ()) -> np.ndarray:
    """Effects of one metric; every row must be converted and none accused."""
    result = convert(sheet(rows), metric, groups=sheet(groups) if groups else None)
    assert set(result.effects["status"]) == {"converted"}, list(result.effects["reason"])
    assert not set(result.findings["severity"]) & GRAVE
    return result.effects["estimate"].to_numpy()


def severities(rows: Rows, groups: Rows = ()) -> list[str]:
    return list(audit_sheet(sheet(rows), groups=sheet(groups) if groups else None).frame["severity"])


# ---- factorial designs -----------------------------------------------------------------------------

TABLES = [
    (name, kind, table)
    for name, analysis in FACTORIAL.items()
    for kinds, table in analysis["tables"].items()
    for kind in kinds.split(", ")
]
each_table = pytest.mark.parametrize(
    ("name", "kind", "table"), TABLES, ids=[f"{n} {k}" for n, k, _ in TABLES]
)
BALANCED = [name for name, analysis in FACTORIAL.items() if "I, II, III" in analysis["tables"]]


def cells_of(name: str) -> list[dict[str, object]]:
    return [{"analysis": name, **cell} for cell in FACTORIAL[name]["cells"]]


def terms_of(name: str, table: Mapping[str, Any], *reported: str) -> list[dict[str, object]]:
    """One row per term, with some columns of the source table."""
    analysis = FACTORIAL[name]
    shared = {"design": "factorial", "study": name, "analysis": name}
    whole = {key: analysis[key] for key in ("ss_error", "df_error", "ss_total")}
    n = sum(cell["n"] for cell in analysis["cells"])
    columns = {"ss_effect": "ss", "df_effect": "df", "f_value": "f", "ms_effect": "ms"}
    rows = []
    for term, line in table.items():
        known = {**whole, "n_total": n, **{c: line[k] for c, k in columns.items()}}
        rows.append({**shared, "term": term, **{c: known[c] for c in reported}})
    return rows


def column(table: Mapping[str, Any], key: str) -> np.ndarray:
    return np.array([line[key] for line in table.values()], dtype=float)


@pytest.mark.parametrize("name", FACTORIAL)
def test_cells_alone_give_type_iii(name: str) -> None:
    table = next(t for kinds, t in FACTORIAL[name]["tables"].items() if "III" in kinds.split(", "))
    rows, cells = terms_of(name, table), cells_of(name)
    for quantity, key in (("ss_effect", "ss"), ("f_value", "f"), ("df_effect", "df"), ("ms_effect", "ms")):
        np.testing.assert_allclose(
            values(quantity, rows, cells), column(table, key), **CLOSE, err_msg=quantity
        )
    np.testing.assert_allclose(
        estimates("partial_eta_squared", rows, cells), column(table, "partial_eta_squared"), **CLOSE
    )
    total = FACTORIAL[name]["ss_total"]
    np.testing.assert_allclose(estimates("eta_squared", rows, cells), column(table, "ss") / total, **CLOSE)
    mean_square = FACTORIAL[name]["ss_error"] / FACTORIAL[name]["df_error"]
    omega = (column(table, "ss") - column(table, "df") * mean_square) / (total + mean_square)
    np.testing.assert_allclose(estimates("omega_squared", rows, cells), omega, rtol=1e-9, atol=1e-13)


@each_table
def test_lines_of_a_source_table_give_f_and_every_index(name: str, kind: str, table: dict[str, Any]) -> None:
    rows = terms_of(name, table, "ss_effect", "df_effect", "ss_error", "df_error", "ss_total", "n_total")
    f, df, ss = (column(table, key) for key in ("f", "df", "ss"))
    partial = column(table, "partial_eta_squared")
    n, total = float(str(rows[0]["n_total"])), FACTORIAL[name]["ss_total"]
    np.testing.assert_allclose(values("f_value", rows), f, **CLOSE)
    np.testing.assert_allclose(values("p_two_sided", rows), column(table, "p"), rtol=1e-7)
    np.testing.assert_allclose(estimates("partial_eta_squared", rows), partial, **CLOSE)
    np.testing.assert_allclose(estimates("eta_squared", rows), ss / total, **CLOSE)
    np.testing.assert_allclose(estimates("cohens_f", rows), np.sqrt(partial / (1 - partial)), **CLOSE)
    excess = df * (f - 1)
    np.testing.assert_allclose(
        estimates("partial_omega_squared", rows), excess / (excess + n), rtol=1e-9, atol=1e-13
    )


@each_table
def test_f_and_dfs_alone_give_the_partial_index(name: str, kind: str, table: dict[str, Any]) -> None:
    rows = terms_of(name, table, "f_value", "df_effect", "df_error")
    np.testing.assert_allclose(
        estimates("partial_eta_squared", rows), column(table, "partial_eta_squared"), **CLOSE
    )


@pytest.mark.parametrize("name", BALANCED)
def test_all_f_of_a_balanced_model_give_the_classical_index(name: str) -> None:
    table = FACTORIAL[name]["tables"]["I, II, III"]
    rows = terms_of(name, table, "f_value", "df_effect", "df_error")
    found = estimates("eta_squared", rows)
    np.testing.assert_allclose(found, column(table, "ss") / FACTORIAL[name]["ss_total"], **CLOSE)


@each_table
def test_the_audit_names_the_type_behind_an_f(name: str, kind: str, table: dict[str, Any]) -> None:
    """F printed to four decimals, cells beside it: no type is an error, and the right one is among those named."""
    rows = [
        {**row, "f_value": f"{row['f_value']:.4f}"} for row in terms_of(name, table, "f_value", "df_effect")
    ]
    found = audit_sheet(sheet(rows), groups=sheet(cells_of(name))).frame
    assert not set(found["severity"]) & GRAVE
    named = found[found["rule"] == "type of sums of squares"]
    assert len(named) == (0 if name in BALANCED else len(rows))
    said = [message.partition(" (")[0] for message in named["message"]]
    if kind == "I":
        kind = f"I, order {', '.join(FACTORIAL[name]['factors'])}"
    assert all(f"type {kind}" in words for words in said)


def test_an_f_of_no_type_is_called_so() -> None:
    name = "anes96.income~vote*educ"
    rows = terms_of(name, FACTORIAL[name]["tables"]["II"], "f_value", "df_effect")
    rows[0]["f_value"] = "33.3333"
    found = audit_sheet(sheet(rows), groups=sheet(cells_of(name))).frame
    assert "fits no type" in found[found["severity"] == "inconsistent"]["message"].iloc[0]


# ---- one within factor -----------------------------------------------------------------------------


def conditions_of(name: str, *reported: str) -> list[dict[str, object]]:
    """One row with the condition summaries and some lines of the analysis."""
    a = WITHIN[name]
    row: dict[str, object] = {"design": "within", "study": name}
    for j, (mean, sd) in enumerate(zip(a["mean"], a["sd"], strict=True), start=1):
        row |= {f"n_{j}": a["n"], f"mean_{j}": mean, f"sd_{j}": sd}
    columns = {"f_value": "f", "df_effect": "df_effect", "df_error": "df_error"}
    return [{**row, **{c: a["expected"][columns[c]] for c in reported}}]


@pytest.mark.parametrize("name", WITHIN)
def test_condition_summaries_and_f_give_the_table(name: str) -> None:
    """Means and SDs give SS_effect and the generalized index; with F they give the error terms."""
    expected = WITHIN[name]["expected"]
    rows = conditions_of(name, "f_value")
    for quantity in ("ss_effect", "ss_error", "ms_error", "ss_subjects", "df_effect", "df_error"):
        np.testing.assert_allclose(values(quantity, rows), expected[quantity], **CLOSE, err_msg=quantity)
    found = estimates("partial_eta_squared", rows)
    np.testing.assert_allclose(found, expected["partial_eta_squared"], **CLOSE)
    for given in (rows, conditions_of(name)):
        found = estimates("generalized_eta_squared", given)
        np.testing.assert_allclose(found, expected["generalized_eta_squared"], **CLOSE)


@pytest.mark.parametrize("name", WITHIN)
def test_classical_index_of_one_within_factor(name: str) -> None:
    """SS_effect over the total of all scores, from means and SDs alone or from the lines of the source table."""
    expected = WITHIN[name]["expected"]
    shared = {"design": "within", "study": name}
    lines = {column: expected[column] for column in ("ss_effect", "ss_error", "ss_subjects")}
    for row in (conditions_of(name)[0], {**shared, **lines}):
        found = estimates("eta_squared", [row])
        np.testing.assert_allclose(found, expected["ss_effect"] / expected["ss_total"], **CLOSE)
        # unlabelled, the row may be one term of a larger model; alone in an analysis it is coded as the whole
        grades = [
            convert(sheet([r]), "eta_squared").effects["grade"][0] for r in (row, {**row, "analysis": "a"})
        ]
        assert grades == ["assumption", "identity"]


@pytest.mark.parametrize("name", WITHIN)
def test_f_and_dfs_of_a_within_factor(name: str) -> None:
    expected = WITHIN[name]["expected"]
    row = {
        "design": "within",
        "f_value": expected["f"],
        "df_effect": expected["df_effect"],
        "df_error": expected["df_error"],
    }
    found = estimates("partial_eta_squared", [row])
    np.testing.assert_allclose(found, expected["partial_eta_squared"], **CLOSE)
    np.testing.assert_allclose(values("n_total", [row]), WITHIN[name]["n"])


def test_correlation_implied_by_f() -> None:
    """Student (1908): r of the two drugs is .7951702 (exact arithmetic on the raw values)."""
    found = values("correlation", conditions_of("sleep.extra~group|ID", "f_value"))
    np.testing.assert_allclose(found, 0.7951702058335778, **CLOSE)


# ---- a between and a within factor -----------------------------------------------------------------


def strata_of_chicks() -> tuple[float, float]:
    """Error sums of squares between and within participants, from the summaries alone."""

    def within(groups: Rows) -> float:
        n, sd = (np.array([[g[key] for g in groups]], dtype=float) for key in ("n", "sd"))
        return float(error_sum_from_sds(n, sd)[0])

    times = len({cell["label"] for cell in CHICKS["cells"]})
    between = times * within(CHICKS["participant_means"])
    return between, within(CHICKS["cells"]) - between


CHICK_LINES = {line["source"]: line for line in CHICKS["anova"]}
CHICK_TERMS = {"diet": "Between", "time": "Within", "diet x time": "Between:Within"}


def chick_rows(*, reported: Sequence[str], measured: str = "") -> list[dict[str, object]]:
    """The three terms with their own error terms."""
    lines = [CHICK_LINES[source] for source in CHICK_TERMS.values()]
    errors = [
        CHICK_LINES["Subjects within groups"]["ss"],
        *[CHICK_LINES["Error (Within x Subjects within groups)"]["ss"]] * 2,
    ]
    rows = []
    for term, line, error in zip(CHICK_TERMS, lines, errors, strict=True):
        known = {"f_value": line["F"], "ss_effect": line["ss"], "ss_error": error,
                 "df_effect": line["df"], "df_error": line["error_df"]}  # fmt: skip
        shared = {"design": "mixed", "study": "chicks", "analysis": "chicks", "measured_factors": measured}
        rows.append({**shared, "term": term, **{c: known[c] for c in reported}})
    return rows


def test_cell_summaries_give_the_sums_of_squares_of_a_mixed_design() -> None:
    """Weighted by group size as in types I and II, and unweighted as in type III."""
    cells = CHICKS["cells"]
    n, mean, sd = ([cell[key] for cell in cells] for key in ("n", "mean", "sd"))
    levels = {"diet": [cell["group"] for cell in cells], "time": [cell["label"] for cell in cells]}
    second = {row.term: row for row in factorial_table(n, mean, sd, levels, "II")}
    third = {row.term: row for row in factorial_table(n, mean, sd, levels, "III")}
    for term, source in CHICK_TERMS.items():
        np.testing.assert_allclose(second[term].ss, CHICK_LINES[source]["ss"], **CLOSE)
        assert second[term].df == CHICK_LINES[source]["df"]
    np.testing.assert_allclose(third["time"].ss, CHICKS["within_type_III"]["ss"], **CLOSE)
    np.testing.assert_allclose(second["time"].ss_total, CHICK_LINES["Total"]["ss"], **CLOSE)
    between, within = strata_of_chicks()
    np.testing.assert_allclose(between, CHICK_LINES["Subjects within groups"]["ss"], **CLOSE)
    np.testing.assert_allclose(within, CHICK_LINES["Error (Within x Subjects within groups)"]["ss"], **CLOSE)
    for term, error, df in (("diet", between, 41), ("time", within, 451), ("diet x time", within, 451)):
        f = second[term].ss / second[term].df / (error / df)
        np.testing.assert_allclose(f, CHICK_LINES[CHICK_TERMS[term]]["F"], **CLOSE)
    np.testing.assert_allclose(
        third["time"].ss / 11 / (within / 451), CHICKS["within_type_III"]["F"], **CLOSE
    )


@pytest.mark.parametrize("reported", [("f_value",), ("ss_effect", "ss_error")])
def test_terms_of_a_mixed_design(reported: tuple[str, ...]) -> None:
    rows = chick_rows(reported=(*reported, "df_effect", "df_error"))
    lines = [CHICK_LINES[source] for source in CHICK_TERMS.values()]
    np.testing.assert_allclose(values("f_value", rows), [line["F"] for line in lines], **CLOSE)
    np.testing.assert_allclose(values("p_two_sided", rows), [line["p"] for line in lines], rtol=1e-7)
    found = estimates("partial_eta_squared", rows)
    np.testing.assert_allclose(found, [line["partial_eta_sq"] for line in lines], **CLOSE)


@pytest.mark.parametrize("measured", ["", "diet"])
def test_generalized_index_of_a_mixed_design(measured: str) -> None:
    rows = chick_rows(reported=("ss_effect", "ss_error", "df_effect", "df_error"), measured=measured)
    expected = [
        CHICKS["generalized_measured"][source]
        if measured
        else CHICK_LINES[source]["generalized_eta_sq_between_manipulated"]
        for source in CHICK_TERMS.values()
    ]
    np.testing.assert_allclose(estimates("generalized_eta_squared", rows), expected, **CLOSE)


@pytest.mark.parametrize("correction", ["gg_epsilon", "hf_epsilon_unclipped"])
def test_corrected_dfs_of_a_mixed_design(correction: str) -> None:
    """dfs multiplied by epsilon and printed to four decimals: F keeps its index, and p is that of the corrected dfs."""
    for term in ("time", "diet x time"):
        line = CHICK_LINES[CHICK_TERMS[term]]
        epsilon = line["sphericity"][correction]
        p = line["sphericity"]["p_gg" if correction == "gg_epsilon" else "p_hf"]
        printed = f"{p:.4f}" if p > 0.001 else "< .001"
        row = {"design": "mixed", "term": term, "f_value": line["F"], "p_value": printed,
               "df_effect": f"{line['df'] * epsilon:.4f}", "df_error": f"{line['error_df'] * epsilon:.4f}"}  # fmt: skip
        found = estimates("partial_eta_squared", [row])
        np.testing.assert_allclose(found, line["partial_eta_sq"], rtol=2e-4)
        if p > 0.001:
            assert "inconsistent" in severities([{**row, "p_value": f"{p + 0.002:.4f}"}])


# ---- two within factors, or a split plot: one data set, two F for one term --------------------------

OAT_TERMS = {"variety": "V", "nitrogen": "N", "variety x nitrogen": "V:N"}
TWO_WITHIN = {line["source"]: line for line in OATS["two_within"]}
SPLIT_PLOT = {line["source"]: line for line in OATS["split_plot"]}


def oat_rows(table: Mapping[str, Any], design: str, *reported: str) -> list[dict[str, object]]:
    """The three terms as one of the two analyses reports them; blocks are the participants."""
    rows = []
    for term, source in OAT_TERMS.items():
        line = table[source]
        known = {"f_value": line["F"], "ss_effect": line["ss"], "ss_error": line["error_ss"],
                 "df_effect": line["df"], "df_error": line["error_df"], "n_total": 6}  # fmt: skip
        shared = {"design": design, "study": "oats", "outcome": "yield", "analysis": design, "term": term}
        rows.append({**shared, **{c: known[c] for c in reported}})
    return rows


def test_cell_summaries_give_the_sums_of_squares_of_both() -> None:
    """Both analyses share effects, total and generalized index; cells give these, for Σ (n - 1)·SD² is all error."""
    cells = OATS["cells"]
    n, mean, sd = ([cell[key] for cell in cells] for key in ("n", "mean", "sd"))
    levels = {"variety": [cell["V"] for cell in cells], "nitrogen": [cell["N"] for cell in cells]}
    table = {row.term: row for row in factorial_table(n, mean, sd, levels, "III", measured=[])}
    for term, source in OAT_TERMS.items():
        np.testing.assert_allclose(table[term].ss, TWO_WITHIN[source]["ss"], **CLOSE)
        np.testing.assert_allclose(table[term].ss_total, TWO_WITHIN["Total"]["ss"], **CLOSE)
        np.testing.assert_allclose(
            table[term].generalized_eta_squared, SPLIT_PLOT[source]["generalized_eta_sq"], **CLOSE
        )


@pytest.mark.parametrize(("table", "design"), [(TWO_WITHIN, "within"), (SPLIT_PLOT, "mixed")])
@pytest.mark.parametrize("reported", [("f_value",), ("ss_effect", "ss_error")])
def test_each_analysis_of_the_oats(table: dict[str, Any], design: str, reported: tuple[str, ...]) -> None:
    rows = oat_rows(table, design, *reported, "df_effect", "df_error", "n_total")
    lines = [table[source] for source in OAT_TERMS.values()]
    np.testing.assert_allclose(values("f_value", rows), [line["F"] for line in lines], **CLOSE)
    np.testing.assert_allclose(values("p_two_sided", rows), [line["p"] for line in lines], rtol=1e-7)
    found = estimates("partial_eta_squared", rows)
    np.testing.assert_allclose(found, [line["partial_eta_sq"] for line in lines], **CLOSE)


def test_generalized_index_of_two_within_factors() -> None:
    rows = oat_rows(TWO_WITHIN, "within", "ss_effect", "ss_error", "df_effect", "df_error")
    rows[0]["ss_subjects"] = TWO_WITHIN["Subjects (B)"]["ss"]
    expected = [TWO_WITHIN[source]["generalized_eta_sq"] for source in OAT_TERMS.values()]
    np.testing.assert_allclose(estimates("generalized_eta_squared", rows), expected, **CLOSE)


def test_classical_index_of_two_within_factors() -> None:
    rows = oat_rows(TWO_WITHIN, "within", "ss_effect", "ss_error", "df_effect", "df_error")
    rows[0]["ss_subjects"] = TWO_WITHIN["Subjects (B)"]["ss"]
    expected = [TWO_WITHIN[source]["ss"] / TWO_WITHIN["Total"]["ss"] for source in OAT_TERMS.values()]
    np.testing.assert_allclose(estimates("eta_squared", rows), expected, **CLOSE)


def test_observations_of_a_joint_term_within() -> None:
    """Six blocks, three varieties, four doses: 72 observations behind the interaction, known from its main effects."""
    rows = oat_rows(TWO_WITHIN, "within", "f_value", "df_effect", "df_error")
    assert list(values("n_observations", rows)) == [6 * 3, 6 * 4, 6 * 3 * 4]
    f = TWO_WITHIN["V:N"]["F"]
    found = estimates("partial_omega_squared", rows)[2]
    np.testing.assert_allclose(found, 6 * (f - 1) / (6 * (f - 1) + 72), **CLOSE)
    without = convert(sheet(rows[1:]), "partial_omega_squared").effects
    assert list(without["status"]) == ["converted", "blocked"]
    assert "levels of its factors" in without["reason"][1]


def test_a_lone_joint_term_is_not_taken_for_the_whole_model() -> None:
    row = oat_rows(TWO_WITHIN, "within", "ss_effect", "ss_error", "df_effect", "df_error")[2]
    row |= {"analysis": "", "ss_subjects": TWO_WITHIN["Subjects (B)"]["ss"]}
    for metric in ("eta_squared", "generalized_eta_squared"):
        assert list(convert(sheet([row]), metric).effects["status"]) == ["blocked"]


def test_two_honest_f_of_one_term_are_not_accused() -> None:
    """Both analyses in one sheet, printed to two decimals: F of nitrogen is 55.98 in one and 37.69 in the other."""
    rows = [
        {**row, "f_value": f"{row['f_value']:.2f}"}
        for table, design in ((TWO_WITHIN, "within"), (SPLIT_PLOT, "mixed"))
        for row in oat_rows(table, design, "f_value", "df_effect", "df_error", "n_total")
    ]
    assert [row["f_value"] for row in rows if row["term"] == "nitrogen"] == ["55.98", "37.69"]
    assert not set(severities(rows)) & {*GRAVE, "doubtful"}


def test_a_split_plot_coded_as_within_is_diagnosed() -> None:
    """The pooled error term has 45 df; with nitrogen within six participants it would have 3·5."""
    rows = oat_rows(SPLIT_PLOT, "within", "f_value", "df_effect", "df_error", "n_total")
    found = audit_sheet(sheet(rows)).frame
    doubted = found[found["severity"] == "doubtful"]
    # variety has the same error term in both analyses
    assert list(doubted["row"]) == [3, 4]
    assert all("pooled over the 3 levels of another factor" in words for words in doubted["message"])
    assert not set(found["severity"]) & GRAVE


def test_two_within_factors_coded_as_mixed_are_not_accused() -> None:
    """Nothing in a mixed design ties the error df of a term to N."""
    rows = oat_rows(TWO_WITHIN, "mixed", "f_value", "df_effect", "df_error", "n_total")
    assert not set(severities(rows)) & GRAVE
