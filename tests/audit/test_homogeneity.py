"""Bartlett's test and Welch's F from summaries, and when a row is mentioned."""

import numpy as np
import pandas as pd
import pytest
from scipy import optimize, stats

from extractor.audit.homogeneity import bartlett_from_sds, most_alike, unequal_variances
from extractor.catalogue.homogeneity import welch_df_from_summaries, welch_f_from_summaries
from extractor.codebook import default_codebook
from extractor.evidence import gather
from extractor.findings import Severity
from extractor.sheet import read_table


def audited(*rows):
    frame = pd.DataFrame([{"design": "one-way"} | row for row in rows], dtype=object)
    return list(unequal_variances(gather(read_table(frame, default_codebook()))))


def groups(n, mean, sd):
    row = {f"n_{j}": str(v) for j, v in enumerate(n, 1)} | {f"sd_{j}": str(v) for j, v in enumerate(sd, 1)}
    return row | {f"mean_{j}": str(v) for j, v in enumerate(mean, 1)}


# Navarro 2018, Learning Statistics with R, ch. 14: eighteen mood gains in three drug groups; source seen.
NAVARRO = [
    [0.5, 0.3, 0.1, 0.6, 0.9, 0.3],
    [0.6, 0.4, 0.2, 1.1, 0.8, 1.2],
    [1.4, 1.7, 1.3, 1.8, 1.3, 1.4],
]
# Illowsky & Dean 2013, Introductory Statistics, 13.3, bean plants; source seen.
BEANS = [[24.0, 21, 23, 30, 23], [25.0, 31, 23, 20, 28], [23.0, 27, 22, 30, 20]]


def summaries(scores):
    n = np.array([[float(len(group)) for group in scores]])
    return n, np.array([[np.mean(g) for g in scores]]), np.array([[np.std(g, ddof=1) for g in scores]])


@pytest.mark.parametrize("scores", [NAVARRO, BEANS])
def test_bartlett_agrees_with_scipy_on_raw_data(scores):
    n, _, sd = summaries(scores)
    statistic, df, p = bartlett_from_sds(n, sd)
    reference = stats.bartlett(*scores)
    assert statistic[0] == pytest.approx(reference.statistic, rel=1e-11)
    assert p[0] == pytest.approx(reference.pvalue, rel=1e-11)
    assert df == 2


def test_bartlett_agrees_with_scipy_on_drawn_data():
    rng = np.random.default_rng(2)
    for _ in range(50):
        sizes = rng.integers(2, 30, size=rng.integers(2, 9))
        scores = [rng.normal(0, np.exp(rng.normal()), size=size) for size in sizes]
        n, _, sd = summaries(scores)
        statistic, _, p = bartlett_from_sds(n, sd)
        reference = stats.bartlett(*scores)
        assert statistic[0] == pytest.approx(reference.statistic, rel=1e-9, abs=1e-12)
        assert p[0] == pytest.approx(reference.pvalue, rel=1e-9)


def test_bartlett_of_equal_sds_is_zero():
    statistic, _, p = bartlett_from_sds(np.array([[10.0, 20.0, 7.0]]), np.full((1, 3), 1.3))
    assert statistic[0] == pytest.approx(0, abs=1e-12)
    assert p[0] == pytest.approx(1)


def test_published_welch_from_raw_data_and_from_printed_summaries():
    """Navarro 2018, ch. 14.8: F = 26.322, df2 = 9.493; source seen."""
    printed = np.array([[0.45, 0.7166667, 1.4833333]]), np.array([[0.2810694, 0.3920034, 0.2136976]])
    for n, mean, sd in (summaries(NAVARRO), (np.full((1, 3), 6.0), *printed)):
        assert f"{welch_f_from_summaries(n, mean, sd)[0]:.3f}" == "26.322"
        assert f"{welch_df_from_summaries(n, sd)[0]:.3f}" == "9.493"


def test_sds_most_alike_against_a_search():
    """The fixpoint against a general minimiser over the same boxes."""
    rng = np.random.default_rng(4)
    for _ in range(20):
        n = rng.integers(2, 20, size=(1, 4)).astype(float)
        middle = rng.uniform(1, 2, size=(1, 4))
        low, high = middle - rng.uniform(0.05, 0.4, size=(1, 4)), middle + rng.uniform(0.05, 0.4, size=(1, 4))
        alike = most_alike(n, low, high)
        assert ((low <= alike) & (alike <= high)).all()

        def statistic(sd, n=n):
            return bartlett_from_sds(n, sd[None, :])[0][0]

        found = optimize.minimize(
            statistic, middle[0], bounds=list(zip(low[0], high[0], strict=True)), tol=1e-12
        )
        assert statistic(alike[0]) <= found.fun + 1e-7


def test_a_row_with_unlike_variances_is_mentioned():
    (finding,) = audited(groups([20, 20, 20], ["5.1", "6.2", "7.0"], ["1.10", "2.00", "3.40"]))
    assert (finding.severity, finding.rule) == (Severity.NOTE, "unequal variances")
    n, mean, sd = np.full((1, 3), 20.0), np.array([[5.1, 6.2, 7.0]]), np.array([[1.1, 2.0, 3.4]])
    statistic, _, _ = bartlett_from_sds(n, sd)
    welch = welch_f_from_summaries(n, mean, sd)[0], welch_df_from_summaries(n, sd)[0]
    # (3.4/1.1)² = 9.554
    assert "the largest group variance is 9.554 times the smallest" in finding.message
    assert f"χ²(2) = {statistic[0]:.4g}, p < .001" in finding.message
    assert f"F(2, {welch[1]:.4g}) = {welch[0]:.4g}, p = .0" in finding.message
    assert "equal size" in finding.explanation
    assert finding.cells[:2] == ("sd_3 [G2]", "sd_1 [E2]")


def test_what_is_not_mentioned():
    assert audited(groups([20, 20, 20], ["5", "6", "7"], ["1.10", "1.30", "1.20"])) == []
    # 0.1 and 0.3 may be .149 and .251, a ratio of 2.8 among three scores
    assert audited(groups([3, 3], ["5", "6"], ["0.1", "0.3"])) == []
    # an SD of 0 and a single score have no test
    assert audited(groups([20, 20], ["5", "6"], ["0.0", "3.0"])) == []
    assert audited(groups([20, 1], ["5", "6"], ["1.0", "9.0"])) == []
    # groups of the model that are not coded leave the comparison open
    assert audited(groups([20, 20], ["5", "6"], ["1.0", "9.0"]) | {"df_effect": "3", "df_error": "76"}) == []


def test_rows_without_means_get_no_welch():
    (finding,) = audited(groups([9, 30], [], ["1.0", "4.0"]))
    assert "Welch" not in finding.message
    assert finding.explanation == ""


@pytest.mark.parametrize(
    ("p", "doubted"),
    [(".004", True), ("< .01", True), ("< .001", True), (".01", False), (".02", False), ("< .05", False)],
)
def test_coded_tests_are_judged_at_one_percent(p, doubted):
    findings = audited({"homogeneity_p": p, "n_1": "20", "n_2": "24"})
    assert [f.rule for f in findings] == ["equal variances rejected"] * doubted
    assert all(f.severity is Severity.DOUBTFUL for f in findings)


def test_unequal_sizes_make_it_worse():
    (mild,) = audited({"homogeneity_p": ".004", "n_1": "20", "n_2": "30"})
    (strong,) = audited({"homogeneity_p": ".004", "n_1": "20", "n_2": "31"})
    assert "the pooled standardiser is questionable" in mild.message
    assert "from 20 to 31 neither F nor the pooled standardiser" in strong.message
