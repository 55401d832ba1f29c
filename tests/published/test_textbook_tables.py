"""One-way analyses printed in textbooks: from raw scores, printed summaries or source tables to F, p and the indices.

Ids, sources, licences and confidence stand in ``data/worked_examples.json``; ``test_checks`` says what is left out.
"""

from __future__ import annotations

import numpy as np
import pytest

from extractor.catalogue import contrasts, groups, homogeneity, p_values, source_table
from extractor.catalogue.relation import FloatArray, Interval, catalogue
from extractor.routes.intervals import image
from tests.published.support import (
    agrees,
    assert_prints,
    box,
    converted,
    group,
    inputs,
    interval,
    one,
    published,
    reference,
    summaries,
)


def anova(n: FloatArray, mean: FloatArray, sd: FloatArray) -> dict[str, FloatArray]:
    """The source table from group summaries, step by step through the catalogue."""
    v1, v2 = one(n.shape[1] - 1, n.sum() - n.shape[1])
    between, within = groups.effect_sum_from_means(n, mean), groups.error_sum_from_sds(n, sd)
    ms_between = source_table.effect_mean_square(between, v1)
    ms_within = source_table.error_mean_square(within, v2)
    f = source_table.f_from_mean_squares(ms_between, ms_within)
    return {
        "SSB": between,
        "SSW": within,
        "SST": source_table.total_sum(between, within),
        "MSB": ms_between,
        "MSW": ms_within,
        "F": f,
        "p": p_values.p_from_f(f, v1, v2),
    }


def _scores(name: str) -> list[list[float]]:
    given = inputs(name).get("groups", inputs(name))
    return list(given.values()) if isinstance(given, dict) else given


@pytest.mark.parametrize(
    ("name", "printed"),
    [
        ("T3-18", ["SST", "SSB", "SSW", "MSW", "F"]),
        ("T13-03", ["SSB", "SSW", "SST", "MSW", "F", "p"]),
        ("T13-04", ["SSB", "MSB", "SSW", "MSW", "F", "p"]),
        ("T13-06", ["SSB", "MSB", "F"]),
        ("T13-09", ["SSW", "MSW", "p"]),
        ("T13-11", ["SSB", "SSW", "MSB", "MSW", "F", "p"]),
    ],
)
def test_table_from_raw_scores(name: str, printed: list[str]) -> None:
    found = anova(*summaries(_scores(name)))
    assert_prints([found[symbol] for symbol in printed], published(name))


def test_table_whose_p_was_taken_at_the_printed_f() -> None:
    """T13-05: means, variances, MSW and F from the scores; p from F as printed, .134, as the book does."""
    n, mean, sd = summaries(_scores("T13-05"))
    found = anova(n, mean, sd)
    texts = published("T13-05")
    assert_prints([*mean[0], *sd[0] ** 2, found["MSW"], found["F"]], texts[:-1])
    assert_prints([p_values.p_from_f(*one(float(texts[-2]), 2, 12))], texts[-1:])


def test_f_and_p_to_full_precision() -> None:
    """T13-13: five groups of unequal size; the sixteen printed digits are those of doubles, of which thirteen hold."""
    found = anova(*summaries(_scores("T13-13")))
    for symbol, text in zip(("F", "p"), published("T13-13"), strict=True):
        assert found[symbol][0] == pytest.approx(float(text), rel=1e-13)


def test_whole_conversion_from_raw_scores() -> None:
    """T13-11: F and p of the printed analysis lead to the same indices as its group summaries."""
    n, mean, sd = summaries(_scores("T13-11"))
    found = anova(n, mean, sd)
    from_groups = converted("one-way", "omega_squared", {"n": [*n[0]], "mean": [*mean[0]], "sd": [*sd[0]]})
    from_f = converted("one-way", "omega_squared", {"f_value": found["F"][0], "df_effect": 2, "df_error": 15})
    assert from_groups.estimate == pytest.approx(from_f.estimate, rel=1e-12)
    assert from_groups.variance == pytest.approx(from_f.variance, rel=1e-9)
    # the book prints F = 18.611: its envelope holds the exact value
    rounded = converted(
        "one-way", "omega_squared", {"f_value": published("T13-11")[4], "df_effect": 2, "df_error": 15}
    )
    assert rounded.estimate_low <= from_f.estimate <= rounded.estimate_high


def test_kelleys_epsilon_squared_from_sums() -> None:
    """T3-16: not printed in the source; worked out from the scores of T13-11, whose sums are given to six decimals."""
    x, found = inputs("T3-16"), anova(*summaries(_scores("T13-11")))
    v1, v2 = x["df"]
    exact = {"ss_effect": found["SSB"][0], "ss_error": found["SSW"][0], "df_effect": v1, "df_error": v2}
    assert converted("one-way", "epsilon_squared", exact).estimate == pytest.approx(
        reference("T3-16"), rel=1e-9
    )
    printed = {"ss_effect": f"{x['SSb']:.6f}", "ss_error": f"{x['SSw']:.6f}", "df_effect": v1, "df_error": v2}
    row = converted("one-way", "epsilon_squared", printed)
    assert row.estimate_low <= reference("T3-16") <= row.estimate_high


def test_f_and_eta_squared_from_sums() -> None:
    """T3-26, value from memory: the between-subjects analysis, F(1, 18)."""
    x = inputs("T3-26")
    cells = {"ss_effect": x["SS_effect"], "ss_total": x["SS_total"], "df_effect": 1, "df_error": 18}
    eta = converted("one-way", "eta_squared", cells).estimate
    within = source_table.error_sum_from_total(*one(x["SS_total"], x["SS_effect"]))
    f = source_table.f_from_mean_squares(
        *one(x["SS_effect"]), source_table.error_mean_square(within, *one(18))
    )
    assert_prints([f, eta], published("T3-26")[:2])
    assert_prints([converted("one-way", "generalized_eta_squared", cells).estimate], published("T3-26")[4:])


# ---- Welch ---------------------------------------------------------------------------------------


def test_welch_f_from_raw_scores() -> None:
    """T10-01: F, error df and p."""
    n, mean, sd = summaries(_scores("T10-01"))
    f, df = homogeneity.welch_f_from_summaries(n, mean, sd), homogeneity.welch_df_from_summaries(n, sd)
    assert_prints([f, df, p_values.p_from_f(f, *one(2), df)], published("T10-01"))


def test_welch_f_from_printed_summaries() -> None:
    """T10-02: seven printed digits of each mean and SD; their boxes hold the printed F and df."""
    x = inputs("T10-02")
    n = group(*[x["n"]] * 3)
    mean, sd = group(*map(float, x["means"])), group(*map(float, x["sds"]))
    f, df = homogeneity.welch_f_from_summaries(n, mean, sd), homogeneity.welch_df_from_summaries(n, sd)
    assert_prints([f, df], published("T10-02"))
    around = image(
        catalogue()["welch_f_from_summaries"], {"n": (n, n), "mean": box(*x["means"]), "sd": box(*x["sds"])}
    )
    exact = homogeneity.welch_f_from_summaries(*summaries(_scores("T10-01")))
    assert around[0] <= exact <= around[1]


# ---- F from rounded summaries --------------------------------------------------------------------

ROUNDED = ["T13-14", "T13-15", "T13-16", "T13-17", "T13-19", "T13-20"]


def _f_from_boxes(x: dict[str, list[str]]) -> Interval:
    n = group(*x["n"])
    v1, v2 = one(n.shape[1] - 1, n.sum() - n.shape[1])
    steps = catalogue()
    between = image(steps["effect_sum_from_means"], {"n": (n, n), "mean": box(*x["means"])})
    within = image(steps["error_sum_from_sds"], {"n": (n, n), "sd": box(*x["sds"])})
    effect = image(steps["effect_mean_square"], {"ss_effect": between, "df_effect": (v1, v1)})
    error = image(steps["error_mean_square"], {"ss_error": within, "df_error": (v2, v2)})
    return image(steps["f_from_mean_squares"], {"ms_effect": effect, "ms_error": error})


@pytest.mark.parametrize("name", ROUNDED)
def test_printed_f_lies_in_the_range_of_its_rounded_summaries(name: str) -> None:
    """Means and SDs stand for boxes; the range of F over them is known from an independent computation.

    Means enter the effect alone and SDs the error alone, so the two sums reach their extremes together and the
    range is exact, not only safe.
    """
    x, expected = inputs(name), reference(name)
    low, high = _f_from_boxes(x)
    found = anova(group(*x["n"]), group(*map(float, x["means"])), group(*map(float, x["sds"])))["F"]
    assert found[0] == pytest.approx(expected["value"], rel=1e-9)
    assert low[0] == pytest.approx(expected["low"], rel=1e-8)
    assert high[0] == pytest.approx(expected["high"], rel=1e-8)
    printed_low, printed_high = interval(published(name)[0])
    assert printed_low[0] <= high[0] and printed_high[0] >= low[0]


@pytest.mark.parametrize("name", ROUNDED)
def test_envelope_of_the_whole_conversion_holds_the_printed_f(name: str) -> None:
    """The same from n, means and SDs to eta² in one go: the envelope meets that of the printed F."""
    x = inputs(name)
    v1, v2 = len(x["n"]) - 1, sum(x["n"]) - len(x["n"])
    by_groups = converted("one-way", "eta_squared", {"n": x["n"], "mean": x["means"], "sd": x["sds"]})
    by_f = converted("one-way", "eta_squared", {"f_value": x["printed_F"], "df_effect": v1, "df_error": v2})
    assert by_groups.status == by_f.status == "converted"
    assert by_groups.estimate_low <= by_f.estimate_high
    assert by_f.estimate_low <= by_groups.estimate_high
    low, high = _f_from_boxes(x)
    for end, f in ((by_groups.estimate_low, low[0]), (by_groups.estimate_high, high[0])):
        assert end == pytest.approx(v1 * f / (v1 * f + v2), rel=1e-8)


# ---- printed source tables -----------------------------------------------------------------------


@pytest.mark.parametrize("name", ["T13-21", "T13-26"])
def test_mean_squares_f_and_p_from_printed_sums(name: str) -> None:
    (ss_effect, ss_error), (v1, v2) = inputs(name)["SS"], inputs(name)["df"]
    effect = source_table.effect_mean_square(*one(ss_effect, v1))
    error = source_table.error_mean_square(*one(ss_error, v2))
    f = source_table.f_from_mean_squares(effect, error)
    assert_prints([effect, error, f, p_values.p_from_f(f, *one(v1, v2))], published(name))


def test_table_completed_by_its_exercise() -> None:
    """T13-20: MSG 501.54 and SSE 267,382 on 4 and 1167 df give the entry F = 2.19 and the printed p = .0682."""
    x = inputs("T13-20")
    v1, v2 = len(x["n"]) - 1, sum(x["n"]) - len(x["n"])
    error = source_table.error_mean_square(*one(float(x["SSE"].replace(",", "")), v2))
    f = source_table.f_from_mean_squares(*one(float(x["MSG"])), error)
    assert_prints([f, p_values.p_from_f(f, *one(v1, v2))], [published("T13-20")[0], x["p"]])


def test_contrasts_with_the_error_term_of_all_groups() -> None:
    """T13-29: the book takes t from the rounded SE and p from the rounded t."""
    x, texts = inputs("T13-29"), published("T13-29")
    pairs = [(0, 1), (0, 2), (2, 1)]
    for i, (se_text, t_text, p_text) in enumerate(zip(texts[::3], texts[1::3], texts[2::3], strict=True)):
        first, second = sorted(pairs[i])
        weight = np.zeros((1, 3))
        weight[0, second], weight[0, first] = 1.0, -1.0
        inverse_n = contrasts.inverse_effective_size(group(*x["n"]), weight)
        se = contrasts.standard_error_of_difference(*one(x["s"]), inverse_n)
        difference = contrasts.difference_of_means(group(*x["means"]), weight)
        t = np.abs(contrasts.t_from_difference(difference, *one(float(se_text))))
        p = p_values.contrast_p(*one(float(t_text), x["df"]))
        assert_prints([se, t, p], [se_text, t_text, p_text])


def test_contrast_through_the_whole_conversion() -> None:
    """T13-29: d of the first and third group over the root of the error mean square of the printed table, 185.16."""
    x = inputs("T13-29")
    cells = {"n": x["n"], "mean": [f"{m:.1f}" for m in x["means"]], "ms_error": "185.16"}
    row = converted("one-way", "cohens_d", cells, contrast="3 - 1")
    assert row.estimate == pytest.approx((78.9 - 75.1) / np.sqrt(185.16), rel=1e-12)
    assert row.grade == "identity"
    # the book divides by its rounded standard error, 2.61
    t = row.estimate * np.sqrt(185.16) / float(published("T13-29")[3])
    assert agrees(t, published("T13-29")[4])
