"""Open data sets, one-way and two-group: every route to every metric gives the same number, and the right one.

The summaries are unrounded, so routes that start from different reports of one analysis must agree to 1e-10. Each
expected value was computed in exact rational arithmetic from the raw data. Citations and licences stand in
``data/open_data.json``.
"""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import pytest
from scipy import special

from extractor.catalogue import homogeneity, p_values
from extractor.catalogue.relation import FloatArray
from extractor.evidence import gather
from extractor.routes.choice import choose
from tests.published.support import DATA, converted_rows, group, one, unrounded_sheet

READ: dict[str, Any] = json.loads((DATA / "open_data.json").read_text(encoding="utf-8"))
ANALYSES = READ["analyses"]
BY_SIZE = {k: [a for a in ANALYSES if len(a["n"]) == k] for k in sorted({len(a["n"]) for a in ANALYSES})}
PAIRS = [(a, pair) for a in ANALYSES for pair in a["pairs"]]
INDICES = {
    "eta_squared": "eta_sq",
    "partial_eta_squared": "eta_sq",
    "generalized_eta_squared": "eta_sq",
    "omega_squared": "omega_sq",
    "partial_omega_squared": "omega_sq",
    "epsilon_squared": "epsilon_sq",
    "cohens_f": "cohen_f",
}
Columns = dict[str, FloatArray]
each_analysis = pytest.mark.parametrize("a", ANALYSES, ids=[a["name"] for a in ANALYSES])


def column(analyses: list[dict[str, Any]], part: str, name: str) -> FloatArray:
    return np.array([a[part][name] for a in analyses], dtype=float)


def reports(analyses: list[dict[str, Any]]) -> dict[str, Columns]:
    """The ways in which a paper can report one and the same analysis, each enough for the indices."""
    n, mean, sd = (np.array([a[name] for a in analyses], dtype=float) for name in ("n", "mean", "sd"))
    t = {name: column(analyses, "anova", name) for name in ANALYSES[0]["anova"]}
    index = {name: column(analyses, "by_definition", name) for name in ANALYSES[0]["by_definition"]}
    groups = {"n": n, "mean": mean}
    dfs = {"df_effect": t["df_effect"], "df_error": t["df_error"]}
    counts = {"n_total": n.sum(axis=1), "k_groups": np.full(len(n), float(n.shape[1]))}
    tails = {"tails": np.full(len(n), 2.0)}

    def some(*names: str) -> Columns:
        return {name: t[name] for name in names}

    return {
        "groups": {**groups, "sd": sd},
        "groups with SE": {**groups, "se": sd / np.sqrt(n)},
        "means and F": {**groups, **some("f_value")},
        "means and MSE": {**groups, **some("ms_error")},
        "F and dfs": {**some("f_value"), **dfs},
        "F, N and k": {**some("f_value"), **counts},
        "p and dfs": {**some("p_value"), **tails, **dfs},
        "p, N and k": {**some("p_value"), **tails, **counts},
        "sums of squares": {**some("ss_effect", "ss_error"), **dfs},
        "effect and total": {**some("ss_effect", "ss_total"), **dfs},
        "error and total": {**some("ss_error", "ss_total"), **counts},
        "mean squares": {**some("ms_effect", "ms_error"), **dfs},
        "eta squared": {"eta_squared": index["eta_sq"], **dfs},
        "partial eta squared": {"partial_eta_squared": index["eta_sq"], **dfs},
        "omega squared": {"omega_squared": index["omega_sq"], **dfs},
        "epsilon squared": {"epsilon_squared": index["epsilon_sq"], **dfs},
        "Cohen's f": {"cohens_f": index["cohen_f"], **dfs},
    }


@pytest.mark.parametrize("metric", INDICES)
@pytest.mark.parametrize("k", BY_SIZE)
def test_every_report_of_an_analysis_gives_the_same_index(k: int, metric: str) -> None:
    analyses = BY_SIZE[k]
    expected = column(analyses, "by_definition", INDICES[metric])
    first = None
    for name, columns in reports(analyses).items():
        found = converted_rows(metric, columns, design=[a["design"] for a in analyses])
        assert set(found.status) == {"converted"}, name
        np.testing.assert_allclose(found.estimate, expected, rtol=1e-10, atol=0, err_msg=name)
        # an end that is not known is blank
        assert not (found.estimate_low > expected * (1 + 1e-12)).any(), name
        assert not (found.estimate_high < expected * (1 - 1e-12)).any(), name
        first = found if first is None else first
        assert np.isfinite(found.variance).all(), name
        np.testing.assert_allclose(found.variance, first.variance, rtol=1e-8, err_msg=name)
        for end in ("ci_low", "ci_high"):
            np.testing.assert_allclose(found[end], first[end], rtol=0, atol=1e-8, err_msg=name)


@each_analysis
def test_all_routes_of_one_row_agree(a: dict[str, Any]) -> None:
    """The row reports everything at once; each admissible route is run, not only the one that is chosen."""
    columns: Columns = {}
    for report in reports([a]).values():
        columns |= report
    blocks = gather(unrounded_sheet(columns, design=a["design"])).blocks
    assert len(blocks) == 1
    for metric, key in INDICES.items():
        chosen = choose(blocks[0], metric)
        assert len(chosen.routes) >= 4
        for route, estimate in zip(chosen.routes, chosen.estimates, strict=True):
            assert estimate.value[0] == pytest.approx(a["by_definition"][key], rel=1e-10), sorted(
                route.leaves
            )


@each_analysis
def test_welch_f(a: dict[str, Any]) -> None:
    n, mean, sd = group(*a["n"]), group(*a["mean"]), group(*a["sd"])
    f, df = homogeneity.welch_f_from_summaries(n, mean, sd), homogeneity.welch_df_from_summaries(n, sd)
    expected = a["welch"]
    assert f.item() == pytest.approx(expected["F"], rel=1e-10)
    assert df.item() == pytest.approx(expected["df2"], rel=1e-12)
    assert p_values.p_from_f(f, *one(expected["df1"]), df).item() == pytest.approx(expected["p"], rel=1e-9)


@each_analysis
def test_p_of_the_omnibus_test(a: dict[str, Any]) -> None:
    t = a["anova"]
    p = p_values.p_from_f(*one(t["f_value"], t["df_effect"], t["df_error"])).item()
    assert p == pytest.approx(t["p_value"], rel=1e-10)


# ---- two groups ----------------------------------------------------------------------------------


def pair_column(name: str) -> FloatArray:
    return np.array([pair[name] for _, pair in PAIRS], dtype=float)


def pair_reports() -> dict[str, Columns]:
    """The ways in which a paper can report the comparison of two groups, each enough for signed metrics."""
    n, mean, sd = (
        np.array([[a[name][j] for j in pair["groups"]] for a, pair in PAIRS], dtype=float)
        for name in ("n", "mean", "sd")
    )
    t, difference = pair_column("t"), pair_column("mean_difference")
    se = pair_column("pooled_sd") * np.sqrt((1 / n).sum(axis=1))
    half = special.stdtrit(pair_column("df"), 0.975) * se
    level = np.full(len(n), 0.95)
    limits = {"ci_low_difference": difference - half, "ci_high_difference": difference + half}
    return {
        "groups": {"n": n, "mean": mean, "sd": sd},
        "groups with SE": {"n": n, "mean": mean, "se": sd / np.sqrt(n)},
        "means and t": {"n": n, "mean": mean, "t_value": t},
        "t": {"n": n, "t_value": t},
        "F": {"n": n, "f_value": t**2},
        "p": {"n": n, "p_value": pair_column("p"), "tails": np.full(len(n), 2.0)},
        "difference and SE": {"n": n, "mean_difference": difference, "se_difference": se},
        "limits of the difference": {"n": n, **limits, "confidence_level": level},
        "d": {"n": n, "cohens_d": pair_column("d")},
        "g": {"n": n, "hedges_g": pair_column("g")},
        "r": {"n": n, "r": pair_column("r")},
    }


@pytest.mark.parametrize(("metric", "key"), [("cohens_d", "d"), ("hedges_g", "g"), ("r", "r")])
def test_every_report_of_two_groups_gives_the_same_effect(metric: str, key: str) -> None:
    expected = pair_column(key)
    signs = ["+" if d > 0 else "-" for d in pair_column("mean_difference")]
    first = None
    for name, columns in pair_reports().items():
        found = converted_rows(metric, columns, design="two-group", direction=signs, standardizer="pooled")
        assert set(found.status) == {"converted"}, name
        # a difference that nearly vanishes has lost digits in the double-precision means before it comes here
        off = np.abs(found.estimate - expected) / np.maximum(np.abs(expected), 1e-2)
        assert off.max() <= 1e-10, name
        first = found if first is None else first
        np.testing.assert_allclose(found.variance, first.variance, rtol=1e-9, err_msg=name)


def test_pooled_t_df_and_p_of_every_pair() -> None:
    f, df = pair_column("t") ** 2, pair_column("df")
    np.testing.assert_allclose(p_values.p_from_f(f, np.ones_like(f), df), pair_column("p"), rtol=1e-9)


def test_welch_t_of_every_pair() -> None:
    """With two groups Welch's F is the square of Welch's t."""
    groups = pair_reports()["groups"]
    f = homogeneity.welch_f_from_summaries(groups["n"], groups["mean"], groups["sd"])
    df = homogeneity.welch_df_from_summaries(groups["n"], groups["sd"])
    np.testing.assert_allclose(np.sqrt(f), np.abs(pair_column("welch_t")), rtol=1e-9)
    np.testing.assert_allclose(df, pair_column("welch_df"), rtol=1e-12)


@pytest.mark.parametrize("k", [k for k in BY_SIZE if k > 2])
@pytest.mark.parametrize(("first", "second"), [(1, 2), (1, 3), (3, 2)])
def test_contrasts_with_the_pooled_error_of_all_groups(k: int, first: int, second: int) -> None:
    """d over the root of the error mean square of the whole model, from SDs, from F and from the source table."""
    analyses = BY_SIZE[k]
    ways = reports(analyses)
    n, mean = ways["groups"]["n"], ways["groups"]["mean"]
    error = column(analyses, "anova", "ms_error")
    expected = (mean[:, first - 1] - mean[:, second - 1]) / np.sqrt(error)
    # all participants share the error term (Borenstein et al. 2009)
    variance = 1 / n[:, first - 1] + 1 / n[:, second - 1] + expected**2 / (2 * n.sum(axis=1))
    sums = {"n": n, "mean": mean, "ss_error": column(analyses, "anova", "ss_error")}
    for columns in (ways["groups"], ways["groups with SE"], ways["means and F"], ways["means and MSE"], sums):
        found = converted_rows(
            "cohens_d", columns, design="one-way", contrast=f"{first} - {second}", method="large-sample"
        )
        assert set(found.grade) == {"identity"}
        np.testing.assert_allclose(found.estimate, expected, rtol=1e-10)
        np.testing.assert_allclose(found.variance, variance, rtol=1e-9)
