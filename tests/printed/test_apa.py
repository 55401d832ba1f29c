"""Statistics in running text, in the notation of the APA Publication Manual; the sentences are invented."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from extractor.printed.apa import columns_from_text, read_statistics
from extractor.printed.reading import Reading
from extractor.printed.reported import read_number
from extractor.quantities import VOCABULARY


def said(reading: Reading) -> str:
    return str(reading)


def read(text: str, mark: str = ".") -> dict[str, str]:
    readings, _, problem = columns_from_text(text, mark)
    assert problem == ""
    return {name: said(reading) for name, reading in readings.items()}


F_TEST = {"f_value": "4.31", "df_effect": "2", "df_error": "57"}


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("F(2, 57) = 4.31, p = .018, η² = .13", {**F_TEST, "p_value": "0.018", "eta_squared": "0.13"}),
        ("F(2,57)=4.31,p=.018,η²=.13", {**F_TEST, "p_value": "0.018", "eta_squared": "0.13"}),
        ("F (2; 57) = 4.31; p < .05", {**F_TEST, "p_value": "< 0.05"}),
        ("F[2, 57] = 4.31", F_TEST),
        ("F2,57 = 4.31", F_TEST),
        ("F_{2,57} = 4.31", F_TEST),
        ("F(2/57) = 4.31", F_TEST),
        ("F = 4.31, df = 2, 57", F_TEST),
        ("F = 4.31, df1 = 2, df2 = 57", F_TEST),
        ("F(2, 57) = 4.31***", F_TEST),
        ("F(2, 57) = 4.31.", F_TEST),
        ("F(2, 57) = 4.31, F(2, 57) = 4.31", F_TEST),
        ("F(2, 31.4) = 4.31", {"f_value": "4.31", "df_effect": "2", "df_error": "31.4"}),
        ("Welch's F(2, 31.4) = 4.31", {"welch_f": "4.31", "df_effect": "2", "welch_df_error": "31.4"}),
        ("F(2, 57) < 1, ns", {"f_value": "< 1", "df_effect": "2", "df_error": "57", "p_value": "> 0.05"}),
        ("F(2, 57) = 4.31, MSE = 3.2", {**F_TEST, "ms_error": "3.2"}),
        ("F(2, 57) = 4.31, MSe = 1,234.5", {**F_TEST, "ms_error": "1234.5"}),
        ("t(38) = -2.1", {"t_value": "-2.1", "df": "38"}),
        (
            "t(38) = −2.10, p = .042, d = 0.66",
            {"t_value": "-2.1", "df": "38", "p_value": "0.042", "cohens_d": "0.66"},
        ),
        ("t38 = 2.1", {"t_value": "2.1", "df": "38"}),
        ("t = 2.1, df = 38", {"t_value": "2.1", "df": "38"}),
        ("r(38) = .31", {"r": "0.31", "df": "38"}),
        ("r_pb = -.31", {"r": "-0.31"}),
        ("p < .001", {"p_value": "< 0.001"}),
        ("p = < .001", {"p_value": "< 0.001"}),
        ("p = .000", {"p_value": "< 0.0005"}),
        ("p = ns", {"p_value": "> 0.05"}),
        ("n.s.", {"p_value": "> 0.05"}),
        ("p = 3.1 × 10⁻⁵", {"p_value": "3.1e-05"}),
        ("p (one-tailed) = .03", {"p_value": "0.03", "tails": "1"}),
        ("p = .03, two-tailed", {"p_value": "0.03", "tails": "2"}),
        ("p = .018, p < .05", {"p_value": "0.018"}),
        ("ηp² = .13", {"partial_eta_squared": "0.13"}),
        ("η_p^2 = .13", {"partial_eta_squared": "0.13"}),
        ("η²p = .13", {"partial_eta_squared": "0.13"}),
        ("η2p = .13", {"partial_eta_squared": "0.13"}),
        ("ηₚ² = .13", {"partial_eta_squared": "0.13"}),
        ("partial η² = .13", {"partial_eta_squared": "0.13"}),
        ("partial eta squared = .13", {"partial_eta_squared": "0.13"}),
        ("partial eta-squared = .13", {"partial_eta_squared": "0.13"}),
        ("eta squared = .13", {"eta_squared": "0.13"}),
        ("eta2 = .13", {"eta_squared": "0.13"}),
        ("η²G = .13", {"generalized_eta_squared": "0.13"}),
        ("generalised eta squared = .13", {"generalized_eta_squared": "0.13"}),
        ("ω² = -.01", {"omega_squared": "-0.01"}),
        ("ωp² = .10", {"partial_omega_squared": "0.1"}),
        ("ε² = .11", {"epsilon_squared": "0.11"}),
        ("f = .25", {"cohens_f": "0.25"}),
        ("Cohen’s f = .25", {"cohens_f": "0.25"}),
        ("Cohen's d = 0.55", {"cohens_d": "0.55"}),
        ("Hedges’ g = 0.55", {"hedges_g": "0.55"}),
        ("g = 0.55", {"hedges_g": "0.55"}),
        ("OR = 2.1", {"odds_ratio": "2.1"}),
        ("log OR = 0.74", {"log_odds_ratio": "0.74"}),
        ("N = 60", {"n_total": "60"}),
        ("χ²(1, N = 90) = 3.4", {"chi_squared": "3.4", "n_total": "90"}),
        ("chi-square(1) = 3.4", {"chi_squared": "3.4"}),
        ("z = 2.1, U = 123.5, H(2) = 5.1", {"z_value": "2.1", "u_value": "123.5", "h_value": "5.1"}),
        (
            "SS_effect = 12.3, SS_error = 80.1, SS_total = 92.4",
            {"ss_effect": "12.3", "ss_error": "80.1", "ss_total": "92.4"},
        ),
        ("f_value = 4.31, n_total = 60", {"f_value": "4.31", "n_total": "60"}),
    ],
)
def test_statistics(text: str, expected: dict[str, str]) -> None:
    assert read(text) == expected


LIMITS = {"effect_ci_low": "0.1", "effect_ci_high": "0.9", "confidence_level": "0.95"}


@pytest.mark.parametrize(
    "text",
    [
        "d = 0.55, 95% CI [0.1, 0.9]",
        "d = 0.55,95% CI[0.1,0.9]",
        "d = 0.55, 95 % CI: 0.1–0.9",
        "d = 0.55 (95% CI 0.1 to 0.9)",
        "d = 0.55, 95% confidence interval [0.1; 0.9]",
        "d = 0.55, CI95 [0.1, 0.9]",
        "d = 0.55, p = .03, 95% CI for d [0.1, 0.9]",
    ],
)
def test_confidence_limits(text: str) -> None:
    found = read(text)
    found.pop("p_value", None)
    assert found == {"cohens_d": "0.55", **LIMITS}


def test_confidence_limits_belong_to_what_they_follow() -> None:
    assert read("MD = 2.1, 95% CI [-0.3, 4.5]") == {
        "mean_difference": "2.1",
        "ci_low_difference": "-0.3",
        "ci_high_difference": "4.5",
        "confidence_level": "0.95",
    }
    readings, understood, _ = columns_from_text("F(2, 57) = 4.31, 95% CI [0.1, 0.9]")
    assert "effect_ci_low" not in readings
    assert understood == "not read: '95% CI [0.1, 0.9]'"
    # limits that are the wrong way round, and limits with a blank before a minus, are left alone
    assert "effect_ci_low" not in read("d = 0.55, 95% CI [0.9, 0.1]")
    assert "effect_ci_low" not in read("d = -0.55, 95% CI [-0.9 -0.1]")


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("F(2; 57) = 4,31; p = ,018", {**F_TEST, "p_value": "0.018"}),
        ("F(2, 57) = 4,31, p = 0,018", {**F_TEST, "p_value": "0.018"}),
        ("F(2,57) = 4,31; p = 0,018", {**F_TEST, "p_value": "0.018"}),
        ("t(31,4) = 2,1", {"t_value": "2.1", "df": "31.4"}),
        ("d = 0,55, 95% CI [0,1; 0,9]", {"cohens_d": "0.55", **LIMITS}),
    ],
)
def test_decimal_comma(text: str, expected: dict[str, str]) -> None:
    assert read(text, ",") == expected


def test_decimal_comma_where_a_point_was_declared() -> None:
    readings, _, _ = columns_from_text("F(2, 57) = 4,31, p = ,018")
    assert said(readings["f_value"]) == "4.31"
    assert "comma taken as the decimal mark" in readings["f_value"].understood
    refused = columns_from_text("F(2, 57) = 1,234")[0]["f_value"]
    assert "thousands (1234) or decimals (1.234)" in refused.problem
    assert not refused.given


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("F(2, 57) = 4.31; F(1, 57) = 2.2", ("two F", "'F(2, 57) = 4.31'", "'F(1, 57) = 2.2'")),
        ("t(38) = 2.1, r(37) = .3", ("two df", "'t(38) = 2.1'", "'r(37) = .3'")),
        ("p = .018, p = .03", ("two p",)),
        ("p = .06, p < .05", ("two p",)),
        ("d = 0.5, d = 0.6", ("two d",)),
        ("Wilks' Λ = .83, F(4, 112) = 2.9", ("multivariate",)),
        ("Pillai's trace = .2, F(4, 112) = 2.9", ("multivariate",)),
        ("Levene's test: F(2, 57) = 0.8", ("test of variances",)),
        ("x" * 6000, ("more than 5000 characters",)),
    ],
)
def test_refused_as_a_whole(text: str, words: tuple[str, ...]) -> None:
    readings, _, problem = columns_from_text(text)
    assert readings == {}
    assert all(word in problem for word in words)


@pytest.mark.parametrize(
    "text",
    [
        "M = 5.2, SD = 1.1",
        "partial r = .3",
        "adjusted R² = .2",
        "dz = .4",
        "d_z = .4",
        "F1(1, 23) = 4.2",
        "F(57) = 4.31",
        "F(2, 57, ε = .8) = 4.31",
        "Welch's t(31.4) = 2.0",
        "Glass's d = 0.5",
        "adjusted p = .03",
        "p_rep = .9",
        "R² = .3",
        "n = 30",
        "see Table 2",
    ],
)
def test_other_statistics_are_left_and_said(text: str) -> None:
    readings, understood, problem = columns_from_text(text)
    assert readings == {}
    assert problem == ""
    assert understood == f"not read: '{text}'".replace("’", "'")


def test_the_remainder_is_said() -> None:
    text = "The schedules differed, F(2, 57) = 4.31, p = .018, and so did the sites."
    assert columns_from_text(text)[1] == "not read: 'The schedules differed … and so did the sites'"
    assert columns_from_text("F(2, 57) = 4.31, p = .018")[1] == ""
    assert columns_from_text("")[0] == {}


def test_a_large_table_gives_no_effect_of_one_contrast() -> None:
    readings, understood, _ = columns_from_text("χ²(2, N = 90) = 3.4, p = .18")
    assert "chi_squared" not in readings
    assert "more than two groups" in understood


def test_each_reading_names_its_words() -> None:
    readings, _, _ = columns_from_text("F(2, 57) = 4.31, p = .018")
    assert readings["df_error"].understood == "from 'F(2, 57) = 4.31'"
    assert readings["p_value"].understood == "from 'p = .018'"


def test_order_and_dfs() -> None:
    found = read_statistics("F(2, 57) = 4.31, p = .018, η² = .13, 90% CI [.01, .27]")
    names = ["f_value", "p_value", "eta_squared", "effect_ci_low", "effect_ci_high", "confidence_level"]
    assert [statistic.name for statistic in found] == names
    assert [df.value for df in found[0].dfs] == [2.0, 57.0]
    assert found[0].text == "F(2, 57) = 4.31"


def test_readings_are_those_of_cells() -> None:
    """A number in text stands for the same interval as the same number in a column."""
    readings, _, _ = columns_from_text("F(2, 57) = 4.31, p = .018", rounding="truncated")
    for name, raw in (("f_value", "4.31"), ("p_value", ".018"), ("df_error", "57")):
        cell = read_number(raw, VOCABULARY[name], rounding="truncated")
        assert (readings[name].low, readings[name].high) == (cell.low, cell.high)


COUNTS = st.integers(1, 999)


@given(
    COUNTS,
    COUNTS,
    st.decimals(0, 999, places=2),
    st.decimals("0.001", "0.999", places=3),
    st.sampled_from(".,"),
)
def test_round_trip(a: int, b: int, f: object, p: object, mark: str) -> None:
    text = f"F({a}; {b}) = {f}; p = {p}".replace(".", mark)
    readings, understood, problem = columns_from_text(text, mark)
    assert (understood, problem) == ("", "")
    assert readings["df_effect"].value == a
    assert readings["df_error"].value == b
    assert math.isclose(readings["f_value"].value, float(str(f)))
    assert math.isclose(readings["p_value"].value, float(str(p)))


PIECES = st.sampled_from(
    [
        "F",
        "t",
        "p",
        "η²",
        "ηp²",
        "χ²",
        "d",
        "r",
        "CI",
        "95%",
        "N",
        "df",
        "Welch's ",
        "ns",
        "partial ",
        "×10⁻⁵",
    ]
)
MARKS = st.sampled_from("()[]{}=<>≤,;. 012.3-−_*^\x00")


@given(
    st.one_of(st.text(max_size=60), st.lists(st.one_of(PIECES, MARKS), max_size=25).map("".join)),
    st.sampled_from(".,"),
)
def test_any_text_is_answered(text: str, mark: str) -> None:
    readings, _, problem = columns_from_text(text, mark)
    assert not (readings and problem)
    for name, reading in readings.items():
        assert name in VOCABULARY
        assert reading.given or reading.problem
        assert not reading.given or reading.low <= reading.high


def test_long_text_is_read_in_no_time() -> None:
    for text in ("F(" * 2400, "95% CI " * 700, "1 234 567 " * 480, "η" * 4900, "p = ." * 900):
        columns_from_text(text)
