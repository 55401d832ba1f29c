"""Support checks: each rule on a row that breaks it and on the nearest honest one, and on drawn studies."""

import math

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from extractor.audit.support import unsupported
from extractor.codebook import default_codebook
from extractor.evidence import gather
from extractor.findings import Severity
from extractor.sheet import read_table
from tests.evidence.printing import Sheet, rounded, table


def audited(*rows):
    frame = pd.DataFrame(list(rows), dtype=object)
    return list(unsupported(gather(read_table(frame, default_codebook()))))


def found(*rows):
    return [(f.severity.word, f.rule, f.cells[0].partition(" [")[0]) for f in audited(*rows)]


ONE_WAY = {"study": "Study 1", "design": "one-way"}

OUTSIDE = [
    # the definition of each quantity: a sum of squares, a probability, a share of a total, a correlation
    ({"f_value": "-4.31"}, {"f_value": "0.00"}),
    ({"ss_error": "-12.5"}, {"ss_error": "0"}),
    ({"p_value": "1.02"}, {"p_value": "1.00"}),
    ({"eta_squared": "1.3"}, {"eta_squared": "1.0"}),
    ({"omega_squared": "1.02"}, {"omega_squared": "1.00"}),
    ({"r": "-1.2"}, {"r": "-1.0"}),
    ({"sd_1": "-0.5"}, {"sd_1": "0.0"}),
    ({"n_1": "0"}, {"n_1": "1"}),
    ({"n_total": "1"}, {"n_total": "2"}),
    ({"df_error": "0"}, {"df_error": "1"}),
]


@pytest.mark.parametrize(("broken", "honest"), OUTSIDE)
def test_outside_the_definition(broken, honest):
    (column,) = broken
    assert found(ONE_WAY | broken) == [("impossible", "outside its definition", column)]
    assert found(ONE_WAY | honest) == []


def test_message_and_expectation_name_the_limits():
    (finding,) = audited(ONE_WAY | {"eta_squared": "1.30"})
    assert finding.message.startswith("η² = 1.30, but η² (proportion of the total sum of squares")
    assert "never below 0 or above 1" in finding.message
    assert (finding.expected_low, finding.expected_high, finding.printed) == (0.0, 1.0, "1.30")
    (finding,) = audited(ONE_WAY | {"f_value": "-4.31"})
    assert finding.expected_low == 0
    assert math.isnan(finding.expected_high)


def test_rows_without_a_usable_design_are_judged_too():
    assert found({"study": "Study 1", "f_value": "-1.2"}) == [
        ("impossible", "outside its definition", "f_value")
    ]


@pytest.mark.parametrize("column", ["n_1", "n_total", "k_groups", "count_a"])
def test_counts_are_whole(column):
    assert found(ONE_WAY | {column: "20.5"}) == [("impossible", "not a whole number", column)]
    # 20.0 may be the whole number 20
    assert found(ONE_WAY | {column: "20.0"}) == []


@pytest.mark.parametrize("column", ["df_error", "df"])
def test_fractional_degrees_of_freedom_belong_to_another_test(column):
    for design in ("one-way", "two-group"):
        (finding,) = audited({"design": design, column: "17.8"})
        assert (finding.severity, finding.rule) == (Severity.IMPOSSIBLE, "not a whole number")
        assert "Welch" in finding.explanation
    # a sphericity correction makes fractions in a within design; an unknown design proves nothing
    assert found({"design": "within", column: "17.8"}) == []
    assert found({"study": "1", column: "17.8"}) == []


def test_a_spread_needs_two_scores():
    assert found(ONE_WAY | {"n_1": "1", "sd_1": "2.1"}) == [("impossible", "spread of one score", "n_1")]
    assert found(ONE_WAY | {"n_2": "1", "se_2": "2.1"}) == [("impossible", "spread of one score", "n_2")]
    assert found(ONE_WAY | {"n_1": "1", "mean_1": "2.1", "n_2": "2", "sd_2": "1.1"}) == []


def test_minimum_of_omega_and_epsilon_squared():
    """At F = 0, df 2 and 57: ω² = -2/58 = -.0345 and ε² = -2/57 = -.0351 (arithmetic)."""
    dfs = ONE_WAY | {"df_effect": "2", "df_error": "57"}
    assert found(dfs | {"omega_squared": "-0.034", "epsilon_squared": "-0.035"}) == []
    assert found(dfs | {"epsilon_squared": "-0.036"}) == [
        ("impossible", "below its minimum", "epsilon_squared")
    ]
    (finding,) = audited(dfs | {"omega_squared": "-0.035"})
    assert finding.expected_low == pytest.approx(-2 / 58)
    assert "-0.03448" in finding.message
    # the same from N and k, and nothing without the dfs or in another design
    assert found(ONE_WAY | {"n_total": "60", "k_groups": "3", "omega_squared": "-0.036"}) == [
        ("impossible", "below its minimum", "omega_squared")
    ]
    assert found(ONE_WAY | {"omega_squared": "-0.9"}) == []
    assert found(dfs | {"design": "factorial", "partial_omega_squared": "-0.9"}) == []


LIMITS = [
    {"ci_low_1": "4.1", "ci_high_1": "3.2"},
    {"ci_low_difference": "-0.1", "ci_high_difference": "-0.4"},
    {"effect_ci_low": "0.31", "effect_ci_high": "0.12"},
]


@pytest.mark.parametrize("limits", LIMITS)
def test_limits_in_the_wrong_order(limits):
    low, high = limits
    estimate = {"mean_1": "3.9"} if low == "ci_low_1" else {}
    assert found(ONE_WAY | limits | estimate) == [("inconsistent", "limits in the wrong order", low)]
    assert found(ONE_WAY | {low: limits[high], high: limits[low]} | estimate) == []


@pytest.mark.parametrize(
    ("estimate", "low", "high"),
    [
        ("mean_1", "ci_low_1", "ci_high_1"),
        ("mean_difference", "ci_low_difference", "ci_high_difference"),
        ("cohens_d", "effect_ci_low", "effect_ci_high"),
        ("r", "effect_ci_low", "effect_ci_high"),
    ],
)
def test_limits_hold_their_estimate(estimate, low, high):
    row = ONE_WAY | {low: "0.2", high: "0.4"}
    # 0.15 may be 0.154 and the limit 0.2 may be 0.15
    assert found(row | {estimate: "0.15"}) == []
    assert found(row | {estimate: "0.14"}) == [("inconsistent", "estimate outside its limits", estimate)]
    assert found(row | {estimate: "0.46"}) == [("inconsistent", "estimate outside its limits", estimate)]


def test_limits_of_two_printed_effects_belong_to_neither():
    row = ONE_WAY | {"effect_ci_low": "0.2", "effect_ci_high": "0.9", "cohens_d": "0.5", "r": "0.1"}
    assert found(row) == []


def test_honest_limits_of_eta_squared_can_miss_it():
    """F(20, 20) = 1 gives η² = .5; its 95 % limits from the noncentral F, λ/(λ + N), end below that."""
    shares = np.linspace(0.001, 0.9, 900)
    limits = shares[stats.ncf.cdf(1.0, 20, 20, 41 * shares / (1 - shares)) >= 0.025]
    upper = limits.max()
    assert upper < 0.495
    row = ONE_WAY | {"eta_squared": "0.500", "effect_ci_low": "0.000", "effect_ci_high": f"{upper:.3f}"}
    (finding,) = audited(row)
    assert finding.severity is Severity.DOUBTFUL
    # limits cut at zero beside a negative index are no question at all
    assert found(ONE_WAY | {"omega_squared": "-.03", "effect_ci_low": "0", "effect_ci_high": ".10"}) == []


def test_order_statistics_ascend():
    row = ONE_WAY | {
        "minimum_1": "1",
        "q1_1": "3",
        "median_1": "4",
        "q3_1": "5",
        "maximum_1": "7",
        "mean_1": "4.1",
    }
    assert found(row) == []
    assert found(row | {"median_1": "6.1"}) == [("inconsistent", "values out of order", "median_1")]
    assert found(row | {"mean_1": "7.6"}) == [("inconsistent", "values out of order", "mean_1")]


def test_cells_that_were_not_understood():
    (finding,) = audited(ONE_WAY | {"f_value": "4.31 (2, 57)", "p_value": ".018"})
    assert (finding.severity, finding.rule) == (Severity.NOTE, "not understood")
    assert finding.cells == ("f_value [C2]",)
    assert "4.31 (2, 57)" in finding.message


def test_two_readings_of_one_number():
    (finding,) = audited(ONE_WAY | {"f_value": "4.13", "reported": "F(2, 57) = 4.31"})
    assert (finding.severity, finding.rule) == (Severity.INCONSISTENT, "two readings")
    assert finding.cells == ("f_value [C2]", "reported [D2]")
    assert found(ONE_WAY | {"f_value": "4.3", "reported": "F(2, 57) = 4.31"}) == []


def test_a_fault_of_the_whole_row_is_said_once(tmp_path):
    path = tmp_path / "rows.csv"
    path.write_text("study,design,f_value,df_effect,df_error\nStudy 1,one-way,4,31,2,57\n", encoding="utf-8")
    findings = list(unsupported(gather(read_table(path, default_codebook()))))
    assert [f.rule for f in findings] == ["not understood"]


@pytest.mark.parametrize("decimals", [0, 1, 2, 3])
@pytest.mark.parametrize("n", [2, 3, 8, 40])
def test_honest_studies_have_no_findings(n, decimals):
    """Scores are drawn, everything is computed from the scores, and only then rounded."""
    rng = np.random.default_rng(1000 * n + decimals)
    scores = rng.normal(3, rng.choice([0.01, 1, 30], size=(2_000, 1, 1)), size=(2_000, 2, n))
    mean, sd = scores.mean(axis=2), scores.std(axis=2, ddof=1)
    half = stats.t.ppf(0.975, n - 1) * sd / np.sqrt(n)
    pooled = np.sqrt((sd**2).mean(axis=1))
    difference = mean[:, 0] - mean[:, 1]
    error = pooled * np.sqrt(2 / n)
    f = (difference / error) ** 2
    reach = stats.t.ppf(0.975, 2 * n - 2) * error
    limits = np.quantile(scores, [0, 0.25, 0.5, 0.75, 1], axis=2)
    names = ["minimum", "q1", "median", "q3", "maximum"]
    columns = {}
    for j in (0, 1):
        columns["n", j + 1] = rounded(np.full(2_000, float(n)), 0)
        parts = dict(zip(names, limits[:, :, j], strict=True))
        parts |= {
            "mean": mean[:, j],
            "sd": sd[:, j],
            "ci_low": (mean - half)[:, j],
            "ci_high": (mean + half)[:, j],
        }
        columns |= {(name, j + 1): rounded(values, decimals) for name, values in parts.items()}
    scalars = {
        "mean_difference": difference,
        "ci_low_difference": difference - reach,
        "ci_high_difference": difference + reach,
        "f_value": f,
        "p_value": stats.f.sf(f, 1, 2 * n - 2),
        "omega_squared": (f - 1) / (f - 1 + 2 * n),
        "epsilon_squared": (f - 1) / (f + 2 * n - 2),
        "eta_squared": f / (f + 2 * n - 2),
    }
    columns |= {(name, None): rounded(values, decimals) for name, values in scalars.items()}
    columns["df_effect", None] = rounded(np.ones(2_000), 0)
    columns["df_error", None] = rounded(np.full(2_000, 2.0 * n - 2), 0)
    assert list(unsupported(gather(table(Sheet(columns, {"design": "two-group"}))))) == []


def test_every_planted_sign_and_slip_is_caught():
    rng = np.random.default_rng(5)
    f = np.round(rng.uniform(0.5, 9, 500), 2)
    columns = {("f_value", None): rounded(-f, 2), ("eta_squared", None): rounded(np.full(500, 2.1), 1)}
    findings = list(unsupported(gather(table(Sheet(columns, {"design": "one-way"})))))
    assert len(findings) == 1_000
    assert {f.severity for f in findings} == {Severity.IMPOSSIBLE}
