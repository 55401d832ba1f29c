"""The glance at the pooled result, against a published synthesis, statsmodels and an independent maximisation."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import optimize
from statsmodels.stats.meta_analysis import combine_effects

from extractor import pooling
from extractor.pooling import combine, glance, leave_one_out, pool, tau_squared

# Raudenbush (1984), Journal of Educational Psychology 76, 85-97: effects of teacher expectancy on pupil IQ in 19
# experiments, as printed with their standard errors by Raudenbush & Bryk (1985), Journal of Educational Statistics
# 10, 75-98 (values from memory)
EXPECTANCY = np.array(
    [0.03, 0.12, -0.14, 1.18, 0.26, -0.06, -0.02, -0.32, 0.27, 0.80,
     0.54, 0.18, -0.02, 0.23, -0.18, -0.06, 0.30, 0.07, -0.07]
)  # fmt: skip
EXPECTANCY_ERRORS = np.array(
    [0.125, 0.147, 0.167, 0.373, 0.369, 0.103, 0.103, 0.220, 0.164, 0.251,
     0.302, 0.223, 0.289, 0.290, 0.159, 0.167, 0.139, 0.094, 0.174]
)  # fmt: skip


def test_published_synthesis() -> None:
    """Raudenbush (2009), Handbook of Research Synthesis and Meta-Analysis, 2nd ed., ch. 16: mean .084 with standard
    error .052, tau² .019 by restricted maximum likelihood (values from memory). The standard error printed there is
    that of known weights, not Hartung & Knapp's."""
    found = pool(EXPECTANCY, EXPECTANCY_ERRORS**2)
    assert found.count == 19
    assert abs(found.tau_squared - 0.019) <= 0.0005
    assert abs(found.mean - 0.084) <= 0.0005
    known_weights = (1 / (EXPECTANCY_ERRORS**2 + found.tau_squared)).sum() ** -0.5
    assert abs(known_weights - 0.052) <= 0.0005


def restricted(tau: float, y: np.ndarray, v: np.ndarray) -> float:
    """Minus twice the restricted log-likelihood from its matrix form (Harville 1977): the independent reference."""
    design = np.ones((len(y), 1))
    covariance = np.diag(v + tau)
    precision = np.linalg.inv(covariance)
    information = design.T @ precision @ design
    mean = np.linalg.solve(information, design.T @ precision @ y)
    left = y - design @ mean
    return float(
        np.linalg.slogdet(covariance)[1] + np.linalg.slogdet(information)[1] + left @ precision @ left
    )


@given(
    st.lists(st.tuples(st.floats(-3, 3), st.floats(0.005, 2)), min_size=2, max_size=12),
)
@settings(max_examples=60, deadline=None)
def test_no_other_value_has_a_higher_restricted_likelihood(pairs: list[tuple[float, float]]) -> None:
    y, v = (np.array(column) for column in zip(*pairs, strict=True))
    found = float(tau_squared(y, v)[0])
    reached = restricted(found, y, v)
    others = [0.0, *np.geomspace(1e-6, 50, 60)]
    best = min(others, key=lambda at: restricted(at, y, v))
    refined = optimize.minimize_scalar(
        restricted, bounds=(best * 0.5, best * 2 + 1e-6), args=(y, v), method="bounded"
    )
    assert reached <= min(refined.fun, restricted(best, y, v)) + 1e-7


def test_mean_and_interval_equal_those_of_statsmodels() -> None:
    """statsmodels has no REML; at its own tau² the mean and the Hartung-Knapp error must be the same."""
    rng = np.random.default_rng(4)
    for count in (3, 8, 40):
        v = rng.uniform(0.02, 0.4, count)
        y = rng.normal(0.3, np.sqrt(v + 0.1))
        reference = combine_effects(y, v, method_re="iterated", use_t=True)
        found = combine(y, v, reference.tau2)
        low, high = reference.conf_int(use_t=True, alpha=0.05)[3]
        assert found.mean == pytest.approx(reference.mean_effect_re, rel=1e-12)
        assert found.standard_error == pytest.approx(reference.sd_eff_w_re_hksj, rel=1e-12)
        assert (found.low, found.high) == pytest.approx((low, high), rel=1e-12)


def test_equal_variances_have_the_textbook_solution() -> None:
    """With equal v REML is the sample variance minus v, or 0; the interval is that of a plain t test."""
    y = np.array([0.1, 0.4, 0.2, 0.9, 0.3])
    found = pool(y, np.full(5, 0.03))
    assert found.tau_squared == pytest.approx(y.var(ddof=1) - 0.03, rel=1e-9)
    assert found.mean == pytest.approx(y.mean(), rel=1e-12)
    assert found.standard_error == pytest.approx(y.std(ddof=1) / np.sqrt(5), rel=1e-12)
    assert pool(y, np.full(5, 0.5)).tau_squared == 0.0


def test_two_maxima_are_told_apart() -> None:
    """A likelihood with a ridge at 0 and another far out: the higher one is taken."""
    y = np.array([0.0, 0.001, 8.0])
    v = np.array([1e-6, 1e-6, 30.0])
    found = float(tau_squared(y, v)[0])
    grid = np.concatenate([[0.0], np.geomspace(1e-9, 200, 400)])
    assert restricted(found, y, v) <= min(restricted(at, y, v) for at in grid) + 1e-9


def test_leaving_out_one_is_pooling_the_others() -> None:
    y, v = EXPECTANCY, EXPECTANCY_ERRORS**2
    means = leave_one_out(y, v)
    for at in range(len(y)):
        assert means[at] == pytest.approx(pool(np.delete(y, at), np.delete(v, at)).mean, abs=1e-7)


def test_one_effect_has_no_interval() -> None:
    found = pool(np.array([0.4]), np.array([0.04]))
    assert (found.mean, found.standard_error, found.tau_squared) == pytest.approx((0.4, 0.2, 0.0))
    assert np.isnan([found.low, found.high]).all()


def test_other_levels_give_other_intervals() -> None:
    wide, narrow = (pool(EXPECTANCY, EXPECTANCY_ERRORS**2, level) for level in (0.99, 0.9))
    assert wide.low < narrow.low < narrow.high < wide.high


@pytest.mark.parametrize("variances", [[0.1, 0.0], [0.1, np.nan], [0.1, -1.0]])
def test_what_cannot_be_pooled_is_refused(variances: list[float]) -> None:
    with pytest.raises(ValueError, match=r"finite|above 0"):
        pool(np.array([0.1, 0.2]), np.array(variances))
    with pytest.raises(ValueError, match="at least one"):
        pool(np.array([]), np.array([]))


@pytest.fixture
def effects() -> pd.DataFrame:
    return pd.DataFrame(
        {
            "row": [2, 3, 4, 5, 6, 7, 8],
            "study": ["A", "A", "B", "C", "D", "E", "F"],
            "outcome": ["recall"] * 6 + ["fatigue"],
            "metric": "hedges_g",
            "estimate": [0.2, 0.3, 0.1, 2.5, 0.4, np.nan, 0.3],
            "variance": [0.04, 0.05, 0.03, 0.06, np.nan, np.nan, 0.04],
            "grade": ["identity", "approximation", "assumption", "identity", "identity", "bound", "identity"],
            "standardizer": ["pooled", "pooled", "pooled", "pooled", "control", "pooled", "pooled"],
            "status": ["converted"] * 5 + ["bounded", "converted"],
        }
    )


def designs(*words: str) -> np.ndarray:
    return np.array(words, dtype=object)


def test_glance_pools_each_outcome_with_and_without_doubtful_rows(effects: pd.DataFrame) -> None:
    recall, fatigue = glance(effects, {5}, designs(*["two-group"] * 7))
    assert [line.what for line in recall.lines] == [
        "all rows with an estimate and a variance",
        "without rows that carry findings",
        "without rows that rest on assumptions",
        "without rows that rest on assumptions or approximations",
        "without any of these",
    ]
    assert [line.pooled.count if line.pooled else 0 for line in recall.lines] == [4, 3, 3, 2, 1]
    assert [line.left_out for line in recall.lines] == [0, 1, 1, 2, 3]
    doubted = pool(np.array([0.2, 0.3, 0.1]), np.array([0.04, 0.05, 0.03]))
    assert recall.lines[1].pooled == doubted
    assert recall.mover is not None
    assert recall.mover[0] == 5
    assert recall.mover[1] == pytest.approx(doubted.mean, abs=1e-7)
    assert (recall.bounded, recall.without_variance) == (1, 1)
    assert (fatigue.outcome, len(fatigue.lines), fatigue.mover) == ("fatigue", 1, None)


def test_lines_that_leave_out_the_same_rows_are_not_repeated(effects: pd.DataFrame) -> None:
    recall = glance(effects.assign(grade="identity"), {5}, designs(*["two-group"] * 7))[0]
    assert [line.left_out for line in recall.lines] == [0, 1]


def test_nothing_is_left_where_every_row_is_doubted(effects: pd.DataFrame) -> None:
    recall = glance(effects, {2, 3, 4, 5}, designs(*["two-group"] * 7))[0]
    assert recall.lines[1].pooled is None


def test_warnings_fit_the_metric_and_the_rows(effects: pd.DataFrame) -> None:
    signed = glance(effects.assign(standardizer="pooled"), set(), designs(*["two-group"] * 7))
    assert signed[0].warnings == (
        "some studies give several rows; rows of one sample are not independent evidence",
    )
    assert signed[1].warnings == ()
    unlike = effects.assign(variance=0.04)
    assert any(
        "control, pooled" in said for said in glance(unlike, set(), designs(*["two-group"] * 7))[0].warnings
    )
    squared = effects.assign(metric="omega_squared", standardizer="")
    mixed = glance(squared, set(), designs("one-way", "within", *["one-way"] * 5))
    assert any("no direction" in said for said in mixed[0].warnings)
    assert any("do not mix" in said for said in mixed[0].warnings)
    assert not any("do not mix" in said for said in mixed[1].warnings)


def test_effects_more_alike_than_chance_allows_are_said(effects: pd.DataFrame) -> None:
    """Two equal effects have an interval of no width, which is no precision."""
    alike = effects[effects["status"] == "converted"].assign(estimate=0.3, outcome="recall", variance=0.04)
    found = glance(alike, set(), designs(*["two-group"] * 6))[0]
    assert found.lines[0].pooled is not None
    assert found.lines[0].pooled.high == pytest.approx(found.lines[0].pooled.low)
    assert any("more alike than their sampling variances" in said for said in found.warnings)


def test_many_rows_are_pooled_without_leaving_each_out(
    effects: pd.DataFrame, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(pooling, "MOST", 3)
    assert glance(effects, set(), designs(*["two-group"] * 7))[0].mover is None
