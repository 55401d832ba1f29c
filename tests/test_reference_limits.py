"""Confidence limits of random rows against mpmath, scipy.stats and statsmodels, to 1e-8.

The limits of a non-centrality are where the distribution function takes a given value. So a reference need not be
inverted: it is enough that its distribution function crosses that value within 1e-8 of the limit found.
"""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest
from scipy import optimize, stats
from statsmodels.stats import oneway

from extractor.catalogue.relation import FloatArray, Interval
from extractor.sampling.noncentral import f_noncentrality_limits, t_noncentrality_limits
from extractor.sampling.precision import limits_of

ROWS = 10_000
SEED = 20240

Rows = tuple[FloatArray, FloatArray, FloatArray]


@pytest.fixture(scope="module")
def f_rows() -> Rows:
    """F, df1, df2 of 10,000 rows: F between 0.001 and 300, up to 12 groups, up to 2,000 participants."""
    rng = np.random.default_rng(SEED)
    df1 = rng.integers(1, 12, size=ROWS).astype(float)
    df2 = np.round(10 ** rng.uniform(0.4, 3.3, size=ROWS))
    f = np.exp(rng.normal(0.8, 1.4, size=ROWS))
    return f, df1, df2


@pytest.fixture(scope="module")
def t_rows() -> Rows:
    """t and two group sizes of 10,000 rows."""
    rng = np.random.default_rng(SEED + 1)
    return rng.standard_t(4, size=ROWS) * 2, *(rng.integers(2, 400, size=(2, ROWS)).astype(float))


def limits(metric: str, design: str, level: float = 0.95, **quantities: FloatArray) -> Interval:
    """Confidence limits of a metric from quantities by name."""
    entry = limits_of(metric, design, "pooled")[0]
    low, high = entry.function(*(quantities[need] for need in entry.needs), level)
    return low, high


def _noncentral_f_cdf(f: float, df1: float, df2: float, lam: mp.mpf) -> mp.mpf:
    """P(F' <= f) at 40 digits: Poisson mixture of incomplete beta functions, one step of j at a time."""
    a, b = mp.mpf(df1) / 2, mp.mpf(df2) / 2
    y = mp.mpf(df1) * f / (mp.mpf(df1) * f + df2)
    beta = mp.betainc(a, b, 0, y, regularized=True)
    term = y**a * (1 - y) ** b / (a * mp.beta(a, b))
    weight, total, used = mp.exp(-lam / 2), mp.mpf(0), mp.mpf(0)
    j = 0
    while used < 1 - mp.mpf(10) ** -25 and j < 20_000:
        total += weight * beta
        used += weight
        beta -= term
        term *= y * (a + b + j) / (a + j + 1)
        j += 1
        weight *= lam / (2 * j)
    return total


def _limits_hold_in_mpmath(f: float, df1: float, df2: float, low: float, high: float, level: float) -> None:
    """The true limit lies within 1e-8 (relative above 1) of the one found: the distribution function crosses there."""
    tail = (1 - mp.mpf(level)) / 2
    for limit, p in ((low, 1 - tail), (high, tail)):
        room = mp.mpf(1e-8) * max(1, limit)
        if limit == 0:
            assert _noncentral_f_cdf(f, df1, df2, mp.mpf(0)) <= p + mp.mpf(10) ** -12
            continue
        # the distribution function falls as the non-centrality grows
        assert _noncentral_f_cdf(f, df1, df2, max(mp.mpf(0), limit - room)) > p
        assert _noncentral_f_cdf(f, df1, df2, limit + room) < p


def test_limits_of_eta_omega_and_epsilon_squared_and_f_in_mpmath() -> None:
    """60 rows; all four metrics' limits come back to one non-centrality, which mpmath confirms."""
    rng = np.random.default_rng(SEED + 4)
    rows, level = 60, 0.95
    df1 = rng.integers(1, 8, size=rows).astype(float)
    df2 = np.round(10 ** rng.uniform(0.7, 2.6, size=rows))
    f, n = np.exp(rng.normal(0.7, 1.0, size=rows)), df1 + df2 + 1
    eta = df1 * f / (df1 * f + df2)
    estimates = {
        "eta_squared": eta,
        "omega_squared": df1 * (f - 1) / (df1 * (f - 1) + n),
        "epsilon_squared": df1 * (f - 1) / (df1 * f + df2),
        "cohens_f": np.sqrt(eta / (1 - eta)),
    }
    found = {
        metric: limits(
            metric,
            "one-way",
            level,
            **{metric: value},
            df_effect=df1,
            df_error=df2,
            n_total=n,
            n_observations=n,
        )
        for metric, value in estimates.items()
    }
    reference = found["eta_squared"]
    with mp.workdps(40):
        for i in range(rows):
            low, high = (float(limit[i] / (1 - limit[i]) * n[i]) for limit in reference)
            _limits_hold_in_mpmath(f[i], df1[i], df2[i], low, high, level)
    found["cohens_f"] = tuple(limit**2 / (1 + limit**2) for limit in found["cohens_f"])
    for metric, ends in found.items():
        for end, expected in zip(ends, reference, strict=True):
            np.testing.assert_allclose(end, expected, rtol=0, atol=1e-9, err_msg=metric)


def test_limits_of_eta_squared_against_scipy_distributions() -> None:
    """200 rows: scipy.stats.ncf inverted by bracketing."""
    rng = np.random.default_rng(SEED + 5)
    rows = 200
    df1 = rng.integers(1, 8, size=rows).astype(float)
    df2 = rng.integers(5, 200, size=rows).astype(float)
    f, n = np.exp(rng.normal(1.0, 0.8, size=rows)), df1 + df2 + 1
    eta = df1 * f / (df1 * f + df2)
    low, high = limits(
        "eta_squared", "one-way", eta_squared=eta, df_effect=df1, df_error=df2, n_total=n, n_observations=n
    )
    for i in range(rows):
        for found, p in ((low[i], 0.975), (high[i], 0.025)):
            expected = _solve_f(f[i], df1[i], df2[i], p)
            assert found == pytest.approx(expected / (expected + n[i]), abs=1e-8)


def _solve_f(f: float, df1: float, df2: float, p: float) -> float:
    if stats.f.cdf(f, df1, df2) <= p:
        return 0.0
    end = 4.0
    while stats.ncf.cdf(f, df1, df2, end) > p:
        end *= 1.5
    return float(optimize.brentq(lambda lam: stats.ncf.cdf(f, df1, df2, lam) - p, 1e-12, end, xtol=1e-11))


def _limits_of_d(t: FloatArray, inverse_n: FloatArray, df: FloatArray) -> Interval:
    return limits(
        "cohens_d", "two-group", cohens_d=t * np.sqrt(inverse_n), inverse_effective_n=inverse_n, df_error=df
    )


def test_limits_of_d_against_scipy_distributions() -> None:
    """200 rows: scipy.stats.nct inverted by bracketing."""
    rng = np.random.default_rng(SEED + 6)
    rows = 200
    n1, n2 = rng.integers(4, 100, size=(2, rows)).astype(float)
    df, inverse_n = n1 + n2 - 2, 1 / n1 + 1 / n2
    t = rng.normal(0, 2.5, size=rows)
    low, high = _limits_of_d(t, inverse_n, df)
    for i in range(rows):
        for found, p in ((low[i], 0.975), (high[i], 0.025)):
            sign = -1.0 if t[i] < 0 else 1.0
            # solved for a positive t, where scipy's noncentral t is accurate
            target = p if sign > 0 else 1 - p
            expected = sign * optimize.brentq(
                lambda delta, i=i, sign=sign, target=target: (
                    stats.nct.cdf(sign * t[i], df[i], delta) - target
                ),
                -30.0,
                30.0,
                xtol=1e-12,
            )
            assert found == pytest.approx(expected * np.sqrt(inverse_n[i]), abs=1e-8)


def test_limits_of_d_in_mpmath() -> None:
    """60 rows: P(T' <= t) at 30 digits on both sides of each limit."""
    rng = np.random.default_rng(SEED + 7)
    rows = 60
    n1, n2 = rng.integers(3, 40, size=(2, rows)).astype(float)
    df, inverse_n = n1 + n2 - 2, 1 / n1 + 1 / n2
    t = rng.normal(0.5, 2.0, size=rows)
    ends = _limits_of_d(t, inverse_n, df)
    with mp.workdps(30):
        for i in range(rows):
            for limit, p in zip(ends, (mp.mpf("0.975"), mp.mpf("0.025")), strict=True):
                delta, room = limit[i] / np.sqrt(inverse_n[i]), 1e-8
                assert _noncentral_t_cdf(t[i], df[i], delta - room) > p
                assert _noncentral_t_cdf(t[i], df[i], delta + room) < p


def _noncentral_t_cdf(t: float, df: float, delta: float) -> mp.mpf:
    """P(T' <= t) by the two Poisson-like mixtures of incomplete beta functions (Lenth 1989)."""
    if t < 0:
        return 1 - _noncentral_t_cdf(-t, df, -delta)
    t, delta, b = mp.mpf(t), mp.mpf(delta), mp.mpf(df) / 2
    x, mean = t * t / (t * t + df), delta * delta / 2
    total = mp.ncdf(-delta)
    for a, weight in (
        (mp.mpf(1) / 2, mp.exp(-mean) / 2),
        (mp.mpf(1), delta * mp.exp(-mean) / (mp.sqrt(2) * mp.gamma(1.5)) / 2),
    ):
        beta = mp.betainc(a, b, 0, x, regularized=True)
        term = x**a * (1 - x) ** b / (a * mp.beta(a, b))
        for _ in range(int(mean + 20 * mp.sqrt(mean)) + 60):
            total += weight * beta
            beta -= term
            term *= x * (a + b) / (a + 1)
            a += 1
            # the weights carry 1/Γ(j + 1) in the first mixture, a = j + 1/2, and 1/Γ(j + 3/2) in the second, a = j + 1
            weight *= mean / (a - mp.mpf(1) / 2)
    return total


def test_noncentrality_against_statsmodels(f_rows: Rows) -> None:
    """statsmodels' interval of the non-centrality rests on a scipy inverse good to about 1e-3 in probability."""
    f, df1, df2 = (rows[:200] for rows in f_rows)
    low, high = f_noncentrality_limits(f, df1, df2, 0.95)
    for i in range(200):
        expected = oneway.confint_noncentrality(f[i], (df1[i], df2[i]), alpha=0.05)
        for found, other, p in zip((low[i], high[i]), expected, (0.975, 0.025), strict=True):
            if found == 0:
                assert stats.f.cdf(f[i], df1[i], df2[i]) <= p
                continue
            mine, theirs = (
                abs(stats.ncf.cdf(f[i], df1[i], df2[i], max(x, 1e-12)) - p) for x in (found, other)
            )
            assert theirs <= 2e-3
            assert mine <= 1e-9


def test_significance_and_limits_agree_on_every_row(f_rows: Rows, t_rows: Rows) -> None:
    """p below .025 exactly where the lower 95 % limit of the non-centrality leaves 0."""
    f, df1, df2 = f_rows
    low, high = f_noncentrality_limits(f, df1, df2, 0.95)
    p = stats.f.sf(f, df1, df2)
    assert ((p < 0.025) == (low > 0)).all()
    assert (high >= low).all()
    t, n1, n2 = t_rows
    below, above = t_noncentrality_limits(t, n1 + n2 - 2, 0.95)
    assert (below < above).all()
    assert ((below > 0) | (above < 0)).tolist() == (2 * stats.t.sf(np.abs(t), n1 + n2 - 2) < 0.05).tolist()
