"""Agreement statistics against worked examples, a reference library, and formulas written out a second way."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import stats
from sklearn.metrics import cohen_kappa_score
from statsmodels.formula.api import ols
from statsmodels.stats.anova import anova_lm
from statsmodels.stats.inter_rater import cohens_kappa as reference_cohen
from statsmodels.stats.inter_rater import fleiss_kappa as reference_fleiss

from extractor.coders.agreement import (
    MISSING,
    cohens_kappa,
    counts_of,
    fleiss_kappa,
    gwets_ac1,
    icc_agreement,
    krippendorffs_alpha,
    raw_agreement,
)

FLEISS = np.array(
    [
        [0, 0, 0, 6, 0],
        [0, 3, 0, 0, 3],
        [0, 1, 4, 0, 1],
        [0, 0, 0, 0, 6],
        [0, 3, 0, 3, 0],
        [2, 0, 4, 0, 0],
        [0, 0, 4, 0, 2],
        [2, 0, 3, 1, 0],
        [2, 0, 0, 4, 0],
        [0, 0, 0, 0, 6],
        [1, 0, 0, 5, 0],
        [1, 1, 0, 4, 0],
        [0, 3, 3, 0, 0],
        [1, 0, 0, 5, 0],
        [0, 2, 0, 3, 1],
        [0, 0, 5, 0, 1],
        [3, 0, 0, 1, 2],
        [5, 1, 0, 0, 0],
        [0, 2, 0, 4, 0],
        [1, 0, 2, 0, 3],
        [0, 0, 0, 0, 6],
        [0, 1, 0, 5, 0],
        [0, 2, 0, 1, 3],
        [2, 0, 0, 4, 0],
        [1, 0, 0, 4, 1],
        [0, 5, 0, 1, 0],
        [4, 0, 0, 0, 2],
        [0, 2, 0, 4, 0],
        [1, 0, 5, 0, 0],
        [0, 0, 0, 0, 6],
    ],
    dtype=float,
)
"""Fleiss 1971, Table 1: 30 patients, 6 raters, 5 diagnoses (counts as statsmodels reprints them in its own tests)."""

SHROUT_FLEISS = np.array(
    [[9, 2, 5, 8], [6, 1, 3, 2], [8, 4, 6, 8], [7, 1, 2, 6], [10, 5, 6, 9], [6, 2, 4, 7]], dtype=float
)
"""Shrout & Fleiss 1979, Table 2: 6 targets, 4 judges (values from memory)."""

NAN = math.nan
KRIPPENDORFF = np.array(
    [
        [1, 2, 3, 3, 2, 1, 4, 1, 2, NAN, NAN, NAN],
        [1, 2, 3, 3, 2, 2, 4, 1, 2, 5, NAN, 3],
        [NAN, 3, 3, 3, 2, 3, 4, 2, 2, 5, 1, NAN],
        [1, 2, 3, 3, 2, 4, 4, 1, 2, 5, 1, NAN],
    ]
).T
"""Krippendorff 2011, section on any number of observers with missing data: 12 units, 4 observers (from memory)."""


def codes_of(cross: list[list[int]]) -> np.ndarray:
    """Ratings of two coders with this cross table."""
    return np.array(
        [(i, j) for i, row in enumerate(cross) for j, count in enumerate(row) for _ in range(count)]
    )


def test_fleiss_1971_as_printed() -> None:
    """Fleiss 1971: kappa .430 (from memory)."""
    assert f"{fleiss_kappa(FLEISS).value:.3f}" == "0.430"
    assert fleiss_kappa(FLEISS).value == pytest.approx(reference_fleiss(FLEISS), abs=1e-12)


def test_shrout_fleiss_1979_as_printed() -> None:
    """Shrout & Fleiss 1979, Table 4: ICC(2,1) = .29; limits .02 and .76 (all from memory)."""
    found = icc_agreement(SHROUT_FLEISS)
    assert [f"{x:.2f}" for x in (found.value, found.low, found.high)] == ["0.29", "0.02", "0.76"]


def test_krippendorff_2011_as_printed() -> None:
    """Krippendorff 2011: alpha .743 nominal and .849 interval (from memory)."""
    assert f"{krippendorffs_alpha(KRIPPENDORFF, 'nominal'):.3f}" == "0.743"
    assert f"{krippendorffs_alpha(KRIPPENDORFF, 'interval'):.3f}" == "0.849"


def test_fleiss_levin_paik_kappa_as_printed() -> None:
    """Fleiss, Levin & Paik 2003, section 18.1: 100 diagnoses, kappa .68 (from memory)."""
    found = cohens_kappa(codes_of([[75, 1, 4], [5, 4, 1], [0, 0, 10]]))
    assert f"{found.value:.2f}" == "0.68"


def test_one_dominant_category_breaks_kappa_and_not_ac1() -> None:
    """Gwet 2002, example of 125 subjects: kappa -.0234, AC1 .9408 (from memory); both follow by hand."""
    codes = codes_of([[118, 5], [2, 0]])
    assert f"{cohens_kappa(codes).value:.4f}" == "-0.0234"
    ac1 = gwets_ac1(counts_of(codes, 2))
    share = (120 + 123) / 250
    chance = 2 * share * (1 - share)
    assert ac1.value == pytest.approx((118 / 125 - chance) / (1 - chance), abs=1e-14)
    assert f"{ac1.value:.4f}" == "0.9408"
    assert raw_agreement(counts_of(codes, 2)) == pytest.approx(0.944, abs=1e-14)


two_coders = st.integers(2, 6).flatmap(
    lambda q: arrays(np.int64, st.tuples(st.integers(3, 40), st.just(2)), elements=st.integers(0, q - 1))
)


@given(codes=two_coders, level=st.sampled_from([0.8, 0.95, 0.99]))
@settings(max_examples=200, deadline=None)
def test_cohens_kappa_is_the_reference_library_s(codes: np.ndarray, level: float) -> None:
    categories = int(codes.max()) + 1
    cross = np.zeros((categories, categories))
    np.add.at(cross, (codes[:, 0], codes[:, 1]), 1)
    found = cohens_kappa(codes, level)
    if len(np.unique(codes)) == 1:
        assert math.isnan(found.value)
        return
    with np.errstate(all="ignore"):
        reference = reference_cohen(cross)
    assert found.value == pytest.approx(reference.kappa, abs=1e-10)
    assert found.value == pytest.approx(cohen_kappa_score(*codes.T), abs=1e-10)
    half = stats.norm.ppf((1 + level) / 2) * reference.std_kappa
    # below that the reference's own variance is what cancellation left
    if reference.std_kappa > 1e-4:
        assert found.low == pytest.approx(max(reference.kappa - half, -1.0), abs=1e-10)
        assert found.high == pytest.approx(min(reference.kappa + half, 1.0), abs=1e-10)


@given(
    counts=st.tuples(st.integers(2, 25), st.integers(2, 5), st.integers(2, 6), st.integers(0, 10**6)).map(
        lambda s: (
            np.random.default_rng(s[3]).multinomial(s[2], np.full(s[1], 1 / s[1]), size=s[0]).astype(float)
        )
    )
)
@settings(max_examples=150, deadline=None)
def test_fleiss_kappa_is_the_reference_library_s(counts: np.ndarray) -> None:
    found = fleiss_kappa(counts)
    if (counts.sum(axis=0) > 0).sum() == 1:
        assert math.isnan(found.value)
    else:
        assert found.value == pytest.approx(reference_fleiss(counts), abs=1e-10)


def random_codes(rng: np.random.Generator, missing: float = 0.2) -> np.ndarray:
    codes = rng.integers(0, 4, size=(30, 4))
    codes[:, 1:] = np.where(rng.random((30, 3)) < 0.6, codes[:, :1], codes[:, 1:])
    return np.where(rng.random(codes.shape) < missing, MISSING, codes)


def pairs_of(values: np.ndarray) -> list[list[tuple[float, float]]]:
    """The ordered pairs of known values of each subject."""
    known = [[v for v in row if not math.isnan(v)] for row in values]
    return [list(itertools.permutations(row, 2)) for row in known]


@pytest.mark.parametrize("seed", range(8))
@pytest.mark.parametrize("metric", ["nominal", "interval"])
def test_alpha_is_its_definition_pair_by_pair(seed: int, metric: str) -> None:
    """1 - observed / expected disagreement, every pair written out."""
    codes = random_codes(np.random.default_rng(seed))
    values = np.where(codes == MISSING, np.nan, codes.astype(float))

    def apart(x: float, y: float) -> float:
        return float(x != y) if metric == "nominal" else (x - y) ** 2

    kept = [row for row in values if np.isfinite(row).sum() >= 2]
    pooled = [v for row in kept for v in row if not math.isnan(v)]
    observed = sum(
        sum(apart(*pair) for pair in pairs) / (np.isfinite(row).sum() - 1)
        for row, pairs in zip(kept, pairs_of(np.array(kept)), strict=True)
    ) / len(pooled)
    expected = sum(apart(*pair) for pair in itertools.permutations(pooled, 2)) / (
        len(pooled) * (len(pooled) - 1)
    )
    assert krippendorffs_alpha(values, metric) == pytest.approx(1 - observed / expected, abs=1e-10)


@pytest.mark.parametrize("seed", range(8))
def test_raw_agreement_and_ac1_are_their_definitions(seed: int) -> None:
    codes = random_codes(np.random.default_rng(100 + seed))
    rated = [row[row != MISSING] for row in codes if (row != MISSING).sum() >= 2]
    agreement = np.mean([np.mean([x == y for x, y in itertools.combinations(row, 2)]) for row in rated])
    shares = np.mean([[np.mean(row == c) for c in range(4)] for row in rated], axis=0)
    chance = np.sum(shares * (1 - shares)) / 3
    counts = counts_of(codes, 4)
    assert raw_agreement(counts) == pytest.approx(agreement, abs=1e-12)
    assert gwets_ac1(counts).value == pytest.approx((agreement - chance) / (1 - chance), abs=1e-10)


@pytest.mark.parametrize("statistic", [fleiss_kappa, gwets_ac1])
def test_limits_have_the_width_of_the_jackknife(statistic: object) -> None:
    """The linearised standard error and the delete-one jackknife agree to first order."""
    assert callable(statistic)
    rng = np.random.default_rng(5)
    codes = rng.integers(0, 3, size=(400, 3))
    codes[:, 1:] = np.where(rng.random((400, 2)) < 0.7, codes[:, :1], codes[:, 1:])
    counts = counts_of(codes, 3)
    found = statistic(counts)
    left_out = np.array([statistic(np.delete(counts, i, axis=0)).value for i in range(400)])
    jackknife = math.sqrt(399 / 400 * ((left_out - left_out.mean()) ** 2).sum())
    linear = (found.value - found.low) / stats.t.ppf(0.975, 399)
    assert linear == pytest.approx(jackknife, rel=0.01)


@given(
    values=arrays(
        float, st.tuples(st.integers(3, 12), st.integers(2, 4)), elements=st.integers(-50, 50).map(float)
    ),
    level=st.sampled_from([0.9, 0.95]),
)
@settings(max_examples=150, deadline=None)
def test_icc_from_the_two_way_table(values: np.ndarray, level: float) -> None:
    """Mean squares by another route, and McGraw & Wong's (1996) limits with k and n written out."""
    n, k = values.shape
    grand = values.mean()
    ss_rows = sum(k * (row.mean() - grand) ** 2 for row in values)
    ss_columns = sum(n * (column.mean() - grand) ** 2 for column in values.T)
    ss_total = ((values - grand) ** 2).sum()
    ss_error = ss_total - ss_rows - ss_columns
    msr, msc, mse = ss_rows / (n - 1), ss_columns / (k - 1), ss_error / ((n - 1) * (k - 1))
    found = icc_agreement(values, level)
    denominator = msr + (k - 1) * mse + k / n * (msc - mse)
    if ss_total < 1e-9 or msc + mse < 1e-9 or abs(denominator) < 1e-6:
        return
    icc = (msr - mse) / denominator
    assert found.value == pytest.approx(icc, abs=1e-9)
    a, b = k * icc / (n * (1 - icc)), 1 + k * icc * (n - 1) / (n * (1 - icc))
    v = (a * msc + b * mse) ** 2 / ((a * msc) ** 2 / (k - 1) + (b * mse) ** 2 / ((n - 1) * (k - 1)))
    if not math.isfinite(v) or v < 0.05:
        return
    f = stats.f.ppf((1 + level) / 2, n - 1, v)
    low = n * (msr - f * mse) / (f * (k * msc + (k * n - k - n) * mse) + n * msr)
    assert found.low == pytest.approx(low, rel=1e-6, abs=1e-9)


def test_icc_from_a_reference_library_s_analysis_of_variance() -> None:
    """ICC(2,1) = (MSR - MSE) / (MSR + (k - 1) MSE + k (MSC - MSE) / n) (Shrout & Fleiss 1979), the mean squares being
    statsmodels' two-way analysis of variance without interaction."""
    rng = np.random.default_rng(5)
    for n, k in ((5, 2), (12, 3), (40, 4)):
        values = rng.normal(10, 3, n)[:, None] + rng.normal(0, 1, k) + rng.normal(0, 1.5, (n, k))
        long = pd.DataFrame(values).melt(ignore_index=False, var_name="coder", value_name="score")
        long["row"] = long.index
        table = anova_lm(ols("score ~ C(row) + C(coder)", long).fit())
        msr, msc, mse = (table["sum_sq"] / table["df"]).to_numpy()
        expected = (msr - mse) / (msr + (k - 1) * mse + k * (msc - mse) / n)
        assert icc_agreement(values).value == pytest.approx(expected, abs=1e-10)


def test_icc_limits_cover() -> None:
    """Subjects and coders drawn at random: 95 % limits hold the true ICC in about 95 % of samples."""
    rng = np.random.default_rng(11)
    trials, n, k, truth = 600, 20, 4, 0.6
    spread = np.sqrt([truth, 0.1, 1 - truth - 0.1])
    inside = 0
    for _ in range(trials):
        values = (
            spread[0] * rng.standard_normal((n, 1))
            + spread[1] * rng.standard_normal((1, k))
            + spread[2] * rng.standard_normal((n, k))
        )
        found = icc_agreement(values)
        inside += found.low <= truth <= found.high
    # three binomial standard errors, and the approximation's own error
    assert 0.92 <= inside / trials <= 0.98


def test_a_constant_shift_lowers_the_icc_but_not_a_correlation() -> None:
    one = np.arange(10.0)
    assert icc_agreement(np.column_stack([one, one])).value == pytest.approx(1.0, abs=1e-12)
    assert icc_agreement(np.column_stack([one, one + 10])).value < 0.2
    assert np.corrcoef(one, one + 10)[0, 1] == pytest.approx(1.0)


def test_what_the_data_leave_undefined_is_nan() -> None:
    same = np.zeros((5, 2), dtype=np.int64)
    assert math.isnan(cohens_kappa(same).value)
    assert math.isnan(fleiss_kappa(counts_of(same, 1)).value)
    assert math.isnan(gwets_ac1(counts_of(same, 1)).value)
    assert gwets_ac1(counts_of(same, 1), categories=8).value == 1.0
    assert math.isnan(icc_agreement(np.full((5, 2), 0.1)).value)
    assert math.isnan(krippendorffs_alpha(np.full((5, 2), 0.1), "interval"))
    assert math.isnan(krippendorffs_alpha(np.full((5, 2), 0.1), "nominal"))
    nobody = np.full((4, 2), MISSING)
    for found in (cohens_kappa(nobody), fleiss_kappa(counts_of(nobody, 2)), gwets_ac1(counts_of(nobody, 2))):
        assert math.isnan(found.value)
        assert math.isnan(found.low)
    assert math.isnan(raw_agreement(counts_of(nobody, 2)))
    perfect = icc_agreement(np.column_stack([np.arange(4.0)] * 2))
    assert perfect.value == pytest.approx(1.0, abs=1e-12)
    assert math.isnan(perfect.low)


@pytest.mark.parametrize("unit", [1.0, 1e-200, 1e200])
def test_icc_does_not_depend_on_the_unit(unit: float) -> None:
    assert icc_agreement(SHROUT_FLEISS * unit).value == pytest.approx(
        icc_agreement(SHROUT_FLEISS).value, abs=1e-12
    )


def test_icc_of_subjects_that_do_not_differ() -> None:
    found = icc_agreement(np.array([[1.0, 2.0], [1.0, 2.0], [1.0, 2.0]]))
    assert found.value == 0
    assert np.isnan(found.low) and np.isnan(found.high)
