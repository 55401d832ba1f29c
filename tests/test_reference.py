"""Random rows against general-purpose libraries: scipy.stats, statsmodels and mpmath.

Estimates agree to 1e-12 relative, p values and their inverses to 1e-12 relative, confidence limits to 1e-8. Where a
reference is itself less accurate, the tolerance is the reference's, and the comment says so.
"""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest
from scipy import optimize, stats
from statsmodels.stats import oneway

from extractor.catalogue import contrasts, correlations, counts, groups, homogeneity, p_values, source_table
from extractor.catalogue import variance_explained as explained
from extractor.catalogue.relation import FloatArray, Interval, catalogue
from extractor.sampling.noncentral import f_noncentrality_limits, t_noncentrality_limits
from extractor.sampling.precision import limits_of, variance_of

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


def close(found: FloatArray, expected: FloatArray, rtol: float = 1e-12) -> None:
    assert np.isfinite(expected).all()
    np.testing.assert_allclose(found, expected, rtol=rtol, atol=0)


def limits(metric: str, design: str, level: float = 0.95, **quantities: FloatArray) -> Interval:
    """Confidence limits of a metric from quantities by name."""
    entry = limits_of(metric, design, "pooled")
    assert entry is not None
    low, high = entry.function(*(quantities[need] for need in entry.needs), level)
    return low, high


def variance(metric: str, design: str, **quantities: FloatArray) -> FloatArray:
    """Large-sample variance of a metric from quantities by name."""
    entry = variance_of(metric, "large-sample", design, "pooled")
    assert entry is not None and entry.method == "large-sample"
    return entry.function(*(quantities[need] for need in entry.needs))


# ---- estimates ---------------------------------------------------------------------------------


def test_indices_from_f(f_rows: Rows) -> None:
    """statsmodels' conversion of an F statistic: f², eta², omega², epsilon²."""
    f, df1, df2 = f_rows
    expected = oneway._fstat2effectsize(f, (df1, df2))
    eta = explained.eta_squared_from_f(f, df1, df2)
    close(eta, expected.eta2)
    close(explained.cohens_f_from_eta_squared(eta) ** 2, expected.f2)
    # both of its forms of omega² and epsilon² lose digits near F = 1, where 1e-12 is relative to 1/N
    scale = 1 / (df1 + df2 + 1)
    for found, other in (
        (explained.omega_squared_from_f(f, df1, df1 + df2 + 1), expected.omega2_alt),
        (explained.epsilon_squared_from_f(f, df1, df2), expected.eps2_alt),
    ):
        assert (np.abs(found - other) <= 1e-12 * np.maximum(np.abs(other), scale)).all()


def test_f_back_from_every_index(f_rows: Rows) -> None:
    f, df1, df2 = f_rows
    n = df1 + df2 + 1
    eta = explained.eta_squared_from_f(f, df1, df2)
    # 1 - η² loses up to F·df1/df2 units in the last place
    close(explained.f_from_eta_squared(eta, df1, df2), f, rtol=1e-11)
    omega = explained.omega_squared_from_f(f, df1, n)
    epsilon = explained.epsilon_squared_from_f(f, df1, df2)
    # near F = 0 the root of 1 + ω²/(1 - ω²)·N/df1 cancels: relative to 1 + N/df1 instead
    for back in (
        explained.f_from_omega_squared(omega, df1, n),
        explained.f_from_epsilon_squared(epsilon, df1, df2),
    ):
        assert (np.abs(back - f) <= 1e-12 * (f + n / df1)).all()


def test_t_d_g_r_from_t_and_sizes(t_rows: Rows) -> None:
    """d from scipy.stats' pooled t test run backwards: unit SDs, means apart by d."""
    t, n1, n2 = t_rows
    df = n1 + n2 - 2
    weight = np.tile([1.0, -1.0], (ROWS, 1))
    inverse_n = contrasts.inverse_effective_size(np.column_stack([n1, n2]), weight)
    d = contrasts.d_from_t(t, inverse_n)
    again = stats.ttest_ind_from_stats(d, 1.0, n1, 0.0, 1.0, n2, equal_var=True)
    close(again.statistic, t)
    close(correlations.r_from_t(t, df), t / np.hypot(t, np.sqrt(df)))
    close(correlations.fisher_z_from_r(correlations.r_from_t(t, df)), np.arcsinh(t / np.sqrt(df)), rtol=1e-11)
    with mp.workdps(30):
        factor = {v: float(mp.gamma(v / 2) / mp.sqrt(v / 2) / mp.gamma((v - 1) / 2)) for v in np.unique(df)}
    close(contrasts.g_from_d(d, df), d * np.vectorize(factor.__getitem__)(df))


def test_pooled_test_from_summaries() -> None:
    """Means, SDs and sizes of two groups: t and p of scipy.stats.ttest_ind_from_stats."""
    rng = np.random.default_rng(SEED + 2)
    n = rng.integers(2, 300, size=(ROWS, 2)).astype(float)
    mean, sd = rng.normal(5, 2, size=(ROWS, 2)), np.exp(rng.normal(0, 0.5, size=(ROWS, 2)))
    expected = stats.ttest_ind_from_stats(mean[:, 0], sd[:, 0], n[:, 0], mean[:, 1], sd[:, 1], n[:, 1])
    weight = np.tile([1.0, -1.0], (ROWS, 1))
    df = n.sum(axis=1) - 2
    pooled = contrasts.pooled_sd_from_mean_square(
        source_table.error_mean_square(groups.error_sum_from_sds(n, sd), df)
    )
    error = contrasts.standard_error_of_difference(pooled, contrasts.inverse_effective_size(n, weight))
    t = contrasts.t_from_difference(contrasts.difference_of_means(mean, weight), error)
    close(t, expected.statistic)
    close(p_values.p_from_f(contrasts.f_from_t(t), np.ones(ROWS), df), expected.pvalue, rtol=1e-10)
    ss = groups.effect_sum_from_means(n, mean)
    close(ss / error_mean_square(n, sd), expected.statistic**2, rtol=1e-10)


def error_mean_square(n: FloatArray, sd: FloatArray) -> FloatArray:
    df = counts.error_df_from_total(counts.total_from_groups(n), np.full(len(n), float(n.shape[1])))
    return source_table.error_mean_square(groups.error_sum_from_sds(n, sd), df)


@pytest.mark.parametrize("k", [2, 3, 5, 9])
def test_classical_and_welch_f_from_summaries(k: int) -> None:
    """statsmodels.stats.oneway.anova_generic, one row at a time."""
    rng = np.random.default_rng(SEED + k)
    n = rng.integers(2, 200, size=(300, k)).astype(float)
    mean, sd = rng.normal(5, 1, size=(300, k)), np.exp(rng.normal(0, 0.5, size=(300, k)))
    between = source_table.effect_mean_square(groups.effect_sum_from_means(n, mean), np.full(300, k - 1.0))
    f = source_table.f_from_mean_squares(between, error_mean_square(n, sd))
    welch, welch_df = (
        homogeneity.welch_f_from_summaries(n, mean, sd),
        homogeneity.welch_df_from_summaries(n, sd),
    )
    for i in range(300):
        equal = oneway.anova_generic(mean[i], sd[i] ** 2, n[i], use_var="equal")
        unequal = oneway.anova_generic(mean[i], sd[i] ** 2, n[i], use_var="unequal")
        assert f[i] == pytest.approx(equal.statistic, rel=1e-11)
        assert welch[i] == pytest.approx(unequal.statistic, rel=1e-11)
        assert welch_df[i] == pytest.approx(unequal.df[1], rel=1e-12)


# ---- p values ----------------------------------------------------------------------------------


def test_p_of_f(f_rows: Rows) -> None:
    f, df1, df2 = f_rows
    p, expected = p_values.p_from_f(f, df1, df2), stats.f.sf(f, df1, df2)
    assert (expected > 1e-300).mean() > 0.99
    large = expected > 1e-300
    close(p[large], expected[large], rtol=1e-11)
    assert (p[~large] <= 1e-299).all()


def test_p_of_t(t_rows: Rows) -> None:
    t, n1, n2 = t_rows
    df = n1 + n2 - 2
    p, expected = p_values.contrast_p(t, df), 2 * stats.t.sf(np.abs(t), df)
    close(p, expected, rtol=1e-9)
    close(p[expected < 0.99], expected[expected < 0.99], rtol=1e-11)


def test_p_near_one_keeps_the_accuracy_its_interval_relies_on() -> None:
    """The image of p is widened by the declared accuracy, so the formula must not be farther off, however small F is."""
    f = 10.0 ** np.linspace(-24, -4, 200)
    for df1, df2 in ((1.0, 10.0), (1.0, 1000.0), (2.0, 57.0), (5.0, 200.0)):
        found = p_values.p_from_f(f, np.full_like(f, df1), np.full_like(f, df2))
        expected = stats.f.sf(f, df1, df2)
        assert np.max(np.abs(found / expected - 1)) <= catalogue()["p_from_f"].accuracy


def test_f_of_p(f_rows: Rows) -> None:
    """p over the whole range a paper prints, from 1e-10 to 0.9999: scipy's upper tail at the F found is p again.

    scipy.stats.f.isf itself is off by up to 2e-7 for small p, as mpmath shows, so it is compared to 1e-6 only.
    """
    _, df1, df2 = f_rows
    rng = np.random.default_rng(SEED + 3)
    p = np.where(rng.random(ROWS) < 0.5, rng.uniform(1e-4, 0.9999, ROWS), 10 ** rng.uniform(-10, -1, ROWS))
    f = p_values.f_from_p(p, df1, df2)
    close(stats.f.sf(f, df1, df2), p, rtol=1e-10)
    close(f, stats.f.isf(p, df1, df2), rtol=1e-6)


def test_f_of_p_in_mpmath(f_rows: Rows) -> None:
    """200 rows: the exact upper tail at the F found is p to 1e-11."""
    _, df1, df2 = f_rows
    rng = np.random.default_rng(SEED + 8)
    p = 10 ** rng.uniform(-12, -0.001, 200)
    f = p_values.f_from_p(p, df1[:200], df2[:200])
    with mp.workdps(30):
        for i in range(200):
            x = df2[i] / (df2[i] + mp.mpf(df1[i]) * f[i])
            exact = mp.betainc(df2[i] / 2, df1[i] / 2, 0, x, regularized=True)
            assert abs(exact / p[i] - 1) < 1e-11


def test_t_of_p(t_rows: Rows) -> None:
    t, n1, n2 = t_rows
    df, sign = n1 + n2 - 2, np.sign(t)
    p = 2 * stats.t.sf(np.abs(t), df)
    inner = (p < 0.999) & (p > 0)
    found = p_values.contrast_t_from_p(p, df, sign)
    close(found[inner], (sign * stats.t.isf(p / 2, df))[inner], rtol=1e-10)


# ---- variances ---------------------------------------------------------------------------------


def test_large_sample_variances_are_their_formulas(t_rows: Rows) -> None:
    """Borenstein et al. (2009, ch. 4 and 6), value from memory, checked against printed examples elsewhere."""
    t, n1, n2 = t_rows
    total, df = n1 + n2, n1 + n2 - 2
    d = t * np.sqrt(1 / n1 + 1 / n2)
    r = t / np.sqrt(t**2 + df)
    found = variance(
        "cohens_d", "two-group", cohens_d=d, inverse_effective_n=1 / n1 + 1 / n2, n_total=total, df_error=df
    )
    close(found, (n1 + n2) / (n1 * n2) + d**2 / (2 * (n1 + n2)))
    close(variance("r", "two-group", r=r, n_total=total), (1 - r**2) ** 2 / (total - 1))
    usable = total > 3
    found = variance("fisher_z", "two-group", fisher_z=np.arctanh(r[usable]), n_total=total[usable])
    close(found, 1 / (total[usable] - 3))


# ---- confidence limits -------------------------------------------------------------------------


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
