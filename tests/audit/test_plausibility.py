"""Plausibility checks: each on rows that look wrong and on the nearest that do not."""

import numpy as np
import pandas as pd
import pytest
from statsmodels.stats.meta_analysis import combine_effects

from extractor.audit.plausibility import implausible, outlying
from extractor.codebook import default_codebook
from extractor.evidence import gather
from extractor.findings import Severity
from extractor.sheet import read_table
from extractor.words import plain
from tests.evidence.honest import honest_sheet
from tests.evidence.printing import table


def evidence_of(rows):
    frame = pd.DataFrame([{"design": "one-way"} | row for row in rows], dtype=object)
    return gather(read_table(frame, default_codebook()))


def audited(*rows):
    return list(implausible(evidence_of(rows)))


def found(*rows):
    return [(f.row, f.severity.word, f.rule, f.cells[0].partition(" [")[0]) for f in audited(*rows)]


def groups(n, mean=(), sd=(), **more):
    columns = {"n": n, "mean": mean, "sd": sd}
    row = {f"{name}_{j}": str(v) for name, values in columns.items() for j, v in enumerate(values, 1)}
    return row | more


# --- large effects -----------------------------------------------------------------------------------


@pytest.mark.parametrize("column", ["cohens_d", "hedges_g"])
def test_printed_effects_beyond_three(column):
    for text in ("3.02", "-3.02"):
        assert found({column: text}) == [(2, "doubtful", "large effect", column)]
    # 3.0 may be 2.95; an odds ratio of 3 is nothing remarkable
    assert found({column: "3.0", "odds_ratio": "9"}) == []


def test_means_more_than_three_sds_apart():
    (finding,) = audited(groups([20, 20, 20], ["5.0", "5.4", "9.1"], ["1.10", "1.20", "1.15"]))
    assert (finding.severity, finding.rule) == (Severity.DOUBTFUL, "large effect")
    assert (
        "M of group 3 = 9.1 and M of group 1 = 5.0 lie more than 3 pooled SDs of 1.151 apart"
        in finding.message
    )
    assert "a large effect is no error by itself" in finding.explanation
    # rounding may have widened the gap: (8.45 - 5.05)/1.25 = 2.72
    assert found(groups([20, 20], ["5.0", "8.5"], ["1.2", "1.1"])) == []
    # standard errors count as SDs divided by sqrt(n): 1.2/sqrt(20) = .268
    by_se = groups([20, 20], ["5.00", "9.10"]) | {"se_1": "0.268", "se_2": "0.271"}
    assert found(by_se) == [(2, "doubtful", "large effect", "se_2")]
    # paired conditions have another standardiser, and one printed effect is enough
    assert found(by_se | {"design": "paired"}) == []
    assert len(found(by_se | {"design": "two-group", "cohens_d": "3.40"})) == 1


# --- SDs of an outcome -------------------------------------------------------------------------------


def outcome_rows(last, outcome="pain"):
    spreads = [("4.10", "3.90"), ("4.60", "4.40"), ("3.80", "4.00"), ("5.00", "4.70")]
    rows = [
        groups([25, 25], [f"10.{i}", "12.5"], spread, study=f"Study {i}", outcome=outcome)
        for i, spread in enumerate(spreads, 1)
    ]
    return [*rows, {"study": "Study 9", "outcome": outcome} | last]


def test_standard_errors_in_the_place_of_sds():
    """The others' median is 4.25; 4.25/sqrt(25) = .85."""
    (finding,) = audited(*outcome_rows(groups([25, 25], ["10.9", "12.1"], ["0.85", "0.80"])))
    assert (finding.row, finding.severity, finding.rule) == (6, Severity.DOUBTFUL, "SD unlike the others")
    assert finding.explanation == "an SE labelled SD"
    assert "the 4 other studies of 'pain', close to 1/sqrt(n) = 0.2" in finding.message
    assert [cell.partition(" [")[0] for cell in finding.cells] == ["sd_1", "sd_2"]


def test_sds_in_the_place_of_standard_errors():
    last = groups([25, 25], ["10.9", "12.1"]) | {"se_1": "4.20", "se_2": "4.50"}
    (finding,) = audited(*outcome_rows(last))
    assert finding.explanation == "an SD labelled SE"
    last = groups([25, 25], ["10.9", "12.1"], ["21.0", "22.5"])
    (finding,) = audited(*outcome_rows(last))
    assert "multiplied by sqrt(n)" in finding.explanation


def test_sds_that_are_merely_different():
    for sds in (["4.2", "4.3"], ["2.1", "2.2"], ["9.0", "9.1"], ["0.40", "0.41"]):
        assert found(*outcome_rows(groups([25, 25], ["10.9", "12.1"], sds))) == []
    # in small groups SDs of two studies may well differ by sqrt(n)
    assert found(*outcome_rows(groups([4, 4], ["10.9", "12.1"], ["2.1", "2.2"]))) == []


def test_only_other_studies_of_the_same_outcome_count():
    slip = groups([25, 25], ["10.9", "12.1"], ["0.85", "0.80"])
    assert found(*outcome_rows(slip)[-3:]) == []
    assert found(*outcome_rows(slip | {"outcome": "sleep"})) == []
    assert found(*outcome_rows(slip, outcome="")) == []
    # several rows of one study are one study
    repeated = outcome_rows(slip)
    same = [row | {"study": "Study 1", "mean_1": f"9.{i}"} for i, row in enumerate(repeated[:4])]
    assert found(*same, repeated[-1]) == []


# --- identical spreads -------------------------------------------------------------------------------


def test_identical_spreads():
    assert found(groups([20, 20, 20], [], ["1.20", "1.20", "1.20"])) == [
        (2, "note", "identical spreads", "sd_1")
    ]
    errors = groups([20, 20, 20]) | {f"se_{j}": "0.31" for j in (1, 2, 3)}
    assert found(errors) == [(2, "note", "identical spreads", "se_1")]
    assert found(groups([20, 20], [], ["1.23", "1.23"])) == [(2, "note", "identical spreads", "sd_1")]


@pytest.mark.parametrize(
    "row",
    [
        groups([20, 20], [], ["1.2", "1.2"]),  # two digits agree by chance
        groups([20, 20, 20], [], ["2", "2", "2"]),
        groups([20, 20, 20], [], ["1.20", "1.20", "1.30"]),
        groups([20, 20, 25], [], ["1.20", "1.20", "1.20"]),
        groups([20, 20, 20], [], ["0.00", "0.00", "0.00"]),
        groups([20, 20, 20], [], ["1.23", "1.23"]),  # the third group's SD is not known
    ],
)
def test_spreads_that_agree_for_other_reasons(row):
    assert found(row) == []


# --- one sample coded twice --------------------------------------------------------------------------


def test_two_studies_with_the_same_sizes_and_means():
    first = groups([20, 22], ["5.13", "6.20"], study="Study 1")
    again = groups([22, 20], ["6.20", "5.13"], study="Study 2")
    findings = audited(first, again, groups([20, 22], ["5.13", "6.21"], study="Study 3"))
    assert [(f.row, f.severity, f.rule) for f in findings] == [
        (2, Severity.DOUBTFUL, "same sizes and means"),
        (3, Severity.DOUBTFUL, "same sizes and means"),
    ]
    assert "row 3 (Study 2)" in findings[0].message
    assert "row 2 (Study 1)" in findings[1].message


def test_doubles_are_seen_in_whatever_unit_the_means_are():
    """Seconds or milliseconds, the digits that agree are the same."""
    for means in (["0.513", "0.620"], ["513", "620"], ["5.1", "6.2"], ["51", "62"]):
        rows = [groups([20, 22], means, study=study) for study in ("A", "B")]
        assert [rule for _, _, rule, _ in found(*rows)] == ["same sizes and means"] * 2


@pytest.mark.parametrize(
    ("one", "other"),
    [
        (groups([20, 22], ["5.13", "6.20"], study="A"), groups([20, 22], ["5.13", "6.20"], study="A")),
        (groups([20, 22], ["5.13", "6.20"], study="A"), groups([20, 22], ["5.13", "6.20"])),
        (groups([20, 22], ["5", "6"], study="A"), groups([20, 22], ["5", "6"], study="B")),
        (groups([20, 22], ["5.13", "6.20"], study="A"), groups([20, 23], ["5.13", "6.20"], study="B")),
        (groups([20], ["5.13"], study="A"), groups([20], ["5.13"], study="B")),
        (groups([20, 22], ["5.13", "6.20"], study="A"), groups([20, 22, 9], ["5.13", "6.20"], study="B")),
    ],
)
def test_rows_that_are_no_doubles(one, other):
    assert found(one, other) == []


# --- effects far from the rest -----------------------------------------------------------------------


def effects_of(evidence, estimate, variance, metric="hedges_g"):
    words = {name: evidence.table.fact(name) for name in ("study", "outcome")}
    return pd.DataFrame(words | {"metric": metric, "estimate": estimate, "variance": variance})


def outliers(estimate, variance, **columns):
    rows = [{"study": f"Study {i}", "outcome": "pain", "f_value": "1"} for i in range(len(estimate))]
    for name, values in columns.items():
        rows = [row | {name: value} for row, value in zip(rows, values, strict=True)]
    evidence = evidence_of(rows)
    return list(outlying(evidence, effects_of(evidence, estimate, variance)))


def distance(estimate, variance, at):
    """The same by a reference library: statsmodels' fixed-effect mean and DerSimonian-Laird variance."""
    others = np.arange(len(estimate)) != at
    with np.errstate(invalid="ignore"):  # it takes roots of negative variance estimates
        result = combine_effects(estimate[others], variance[others], method_re="dl")
    weight = 1 / variance[others]
    share = weight / weight.sum()
    error = (share**2 * (variance[others] + max(result.tau2, 0))).sum()
    spread = variance[at] + max(result.tau2, 0) + error
    return (estimate[at] - result.mean_effect_fe) / np.sqrt(spread), result.mean_effect_fe


def test_distances_against_statsmodels():
    rng = np.random.default_rng(8)
    seen = 0
    for _ in range(40):
        k = int(rng.integers(5, 15))
        variance = rng.uniform(0.02, 0.3, k)
        estimate = rng.normal(0.3, np.sqrt(variance + rng.choice([0, 0.1])))
        estimate[0] += rng.choice([0, 2, 4])
        findings = {f.row - 2: f for f in outliers(estimate, variance)}
        expected = [distance(estimate, variance, at) for at in range(k)]
        assert set(findings) == {at for at, (z, _) in enumerate(expected) if abs(z) > 3.5}
        for at, finding in findings.items():
            z, mean = expected[at]
            said = (
                f"lies {plain(abs(z))} standard deviations from {plain(mean)}, the mean of the {k - 1} other"
            )
            assert said in finding.message
            seen += 1
    assert seen > 10


def test_the_finding_says_what_it_is():
    (finding,) = outliers([0.3, 0.4, 0.2, 0.35, 0.25, 4.0], [0.05] * 6)
    assert (finding.row, finding.severity, finding.rule) == (7, Severity.DOUBTFUL, "far from the others")
    assert "g = 4 lies" in finding.message
    assert "the mean of the 5 other studies of 'pain' (leave-one-out)" in finding.message
    assert "a large effect is no error by itself" in finding.explanation
    assert finding.cells == ()


def test_too_few_others_and_effects_without_a_variance():
    assert outliers([0.3, 0.4, 0.2, 4.0], [0.05] * 4) == []
    assert outliers([0.3, 0.4, 0.2, 0.3, 4.0], [0.05, 0.05, 0.05, np.nan, 0.05]) == []
    assert outliers([0.3, 0.4, 0.2, 0.3, 4.0], [0.05] * 5, study=["A", "A", "B", "C", "D"]) == []
    assert outliers([0.3, 0.4, 0.2, 0.3, 0.3, 4.0], [0.05] * 6, outcome=[""] * 6) == []
    assert outliers([np.nan] * 5, [np.nan] * 5) == []


def test_rows_of_the_same_study_are_left_out_together():
    estimate, study = [0.3, 0.4, 0.2, 0.3, 4.0, 4.1], ["A", "B", "C", "D", "E", "E"]
    assert [f.row for f in outliers(estimate, [0.05] * 6, study=study)] == [6, 7]


# --- never stronger than doubtful --------------------------------------------------------------------


def test_honest_studies_are_never_more_than_doubted():
    rng = np.random.default_rng(3)
    for _ in range(60):
        findings = list(implausible(gather(table(honest_sheet(rng, 20)))))
        assert all(f.severity <= Severity.DOUBTFUL for f in findings)
