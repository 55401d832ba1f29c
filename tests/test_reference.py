"""Random rows against general-purpose libraries: scipy.stats, statsmodels and mpmath.

Estimates agree to 1e-12 relative, p values and their inverses to 1e-11. Where a reference is itself less accurate,
or digits cancel, the comment says so. Confidence limits are compared in ``test_reference_limits``.
"""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest
from scipy import stats
from statsmodels.stats import oneway

from extractor.catalogue import contrasts, correlations, counts, groups, homogeneity, p_values, source_table
from extractor.catalogue import variance_explained as explained
from extractor.catalogue.relation import FloatArray, catalogue
from extractor.sampling.precision import variances_of

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


def variance(metric: str, design: str, **quantities: FloatArray) -> FloatArray:
    """Large-sample variance of a metric from quantities by name."""
    entry = next(iter(variances_of(metric, "large-sample", design, "pooled")), None)
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
    """The image of p is widened by the declared accuracy; the formula must not be farther off for any small F."""
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
