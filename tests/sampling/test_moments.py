"""Exact moments against mpmath sums of the Poisson mixture, against published figures, and at the edges."""

from collections.abc import Callable

import mpmath as mp
import numpy as np
import pytest
from numpy.typing import NDArray

from extractor.sampling.moments import (
    cohens_d_moments,
    cohens_f_moments,
    epsilon_squared_moments,
    eta_squared_moments,
    hedges_g_variance,
    large_sample_eta_variance,
    omega_squared_moments,
    plug_in_noncentrality,
    small_sample_factor,
)

DIGITS = 40
ACCURACY = 1e-11

# non-centrality, df1, df2, N: one-way, factorial (N > df1 + df2 + 1), few and many df, all sizes of lambda
DESIGNS = [
    (0.0, 2, 57, 60),
    (0.0, 1, 1_000_000, 1_000_002),
    (1e-9, 3, 250_000, 250_004),
    (0.7, 1, 3, 5),
    (9.0, 2, 57, 60),
    (20.0, 3, 40, 80),
    (28.0, 1, 1, 3),
    (60.0, 4.6, 31.7, 40),
    (199.9, 2, 40, 43),
    (200.1, 2, 40, 43),
    (350.0, 50, 9, 60),
    (5000.0, 5, 1_000_000, 1_000_006),
    (40_000.0, 1, 4, 6),
]


def poisson_mean(mean: mp.mpf, values: Callable[[mp.mpf], list[mp.mpf]]) -> list[mp.mpf]:
    """Expectation over J ~ Poisson(mean) of each of the values, by plain summation."""
    if mean == 0:
        return values(mp.mpf(0))
    first = int(max(0, mean - 11 * mp.sqrt(mean)))
    weight = mp.exp(first * mp.log(mean) - mean - mp.loggamma(first + 1))
    totals: list[mp.mpf] = []
    for j in range(first, int(mean + 11 * mp.sqrt(mean) + 50)):
        terms = [weight * value for value in values(mp.mpf(j))]
        totals = terms if not totals else [total + term for total, term in zip(totals, terms, strict=True)]
        weight *= mean / (j + 1)
    return totals


def reference_eta(lam: float, df1: float, df2: float) -> tuple[mp.mpf, mp.mpf]:
    """Mixture of beta moments."""
    a, s = mp.mpf(df1) / 2, (mp.mpf(df1) + mp.mpf(df2)) / 2

    def beta_moments(j: mp.mpf) -> list[mp.mpf]:
        return [(a + j) / (s + j), (a + j) * (a + j + 1) / ((s + j) * (s + j + 1))]

    first, second = poisson_mean(mp.mpf(lam) / 2, beta_moments)
    return first, second - first**2


def reference_f(lam: float, df1: float, df2: float) -> tuple[mp.mpf, mp.mpf]:
    """Mixture of the moments of the root of a beta prime variable."""
    a, b, half = mp.mpf(df1) / 2, mp.mpf(df2) / 2, mp.mpf(1) / 2
    scale = mp.exp(mp.loggamma(b - half) - mp.loggamma(b))

    def root_mean(j: mp.mpf) -> list[mp.mpf]:
        return [mp.exp(mp.loggamma(a + j + half) - mp.loggamma(a + j)) * scale]

    (mean,) = poisson_mean(mp.mpf(lam) / 2, root_mean)
    return mean, (a + mp.mpf(lam) / 2) / (b - 1) - mean**2


def reference_omega(lam: float, df1: float, df2: float, n: float) -> tuple[mp.mpf, mp.mpf]:
    """Mixture of 2F1: omega² is -s/c + (df2 + s df2/c)/(df2 + c C) with C beta, s = df1 + df2, c = N - s."""
    a, b, v2, s = mp.mpf(df1) / 2, mp.mpf(df2) / 2, mp.mpf(df2), mp.mpf(df1) + mp.mpf(df2)
    c = mp.mpf(n) - s

    def inverse_moments(j: mp.mpf) -> list[mp.mpf]:
        return [mp.hyp2f1(m, b, a + b + j, -c / v2) / v2**m for m in (1, 2)]

    first, second = poisson_mean(mp.mpf(lam) / 2, inverse_moments)
    scale = v2 + s * v2 / c
    return -s / c + scale * first, scale**2 * (second - first**2)


def assert_close(
    actual: tuple[NDArray[np.float64], NDArray[np.float64]], expected: tuple[mp.mpf, mp.mpf]
) -> None:
    for one, other in zip(actual, expected, strict=True):
        np.testing.assert_allclose(one, float(other), rtol=ACCURACY)


# ---- accuracy ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("lam", "df1", "df2", "n"), DESIGNS)
def test_eta_and_epsilon_squared(lam: float, df1: float, df2: float, n: float) -> None:
    with mp.workdps(DIGITS):
        mean, variance = reference_eta(lam, df1, df2)
        assert_close(eta_squared_moments(lam, df1, df2), (mean, variance))
        scale = (mp.mpf(df1) + mp.mpf(df2)) / mp.mpf(df2)
        # at lambda = 0 the mean is 0, which the reference reaches only to its own rounding
        epsilon_mean = 1 - (1 - mean) * scale if lam > 0 else mp.mpf(0)
        assert_close(epsilon_squared_moments(lam, df1, df2), (epsilon_mean, variance * scale**2))


@pytest.mark.parametrize(("lam", "df1", "df2", "n"), [design for design in DESIGNS if design[0] < 400])
def test_omega_squared(lam: float, df1: float, df2: float, n: float) -> None:
    with mp.workdps(DIGITS):
        assert_close(omega_squared_moments(lam, df1, df2, n), reference_omega(lam, df1, df2, n))


@pytest.mark.parametrize(("lam", "df1", "df2", "n"), [design for design in DESIGNS if design[2] > 2])
def test_cohens_f(lam: float, df1: float, df2: float, n: float) -> None:
    with mp.workdps(DIGITS):
        assert_close(cohens_f_moments(lam, df1, df2), reference_f(lam, df1, df2))


def test_omega_squared_is_epsilon_squared_at_n_equal_to_the_total_df() -> None:
    # an identity of the two formulas, with continuity in N around it
    lam, df1, df2 = 1e6, 3.0, 40.0
    at = omega_squared_moments(lam, df1, df2, df1 + df2)
    near = omega_squared_moments(lam, df1, df2, df1 + df2 + 1e-9)
    np.testing.assert_array_equal(at, epsilon_squared_moments(lam, df1, df2))
    np.testing.assert_allclose(near, at, rtol=1e-9)


def test_omega_squared_with_n_below_the_total_df() -> None:
    # one within-subject factor coded with N = subjects: 3 levels, 12 subjects
    with mp.workdps(DIGITS):
        assert_close(omega_squared_moments(10.0, 2, 22, 12), reference_omega(10.0, 2, 22, 12))


@pytest.mark.parametrize("df", [1.5, 3, 24.9, 25.1, 57, 1e4, 1e8])
def test_standardised_difference(df: float) -> None:
    with mp.workdps(DIGITS):
        v = mp.mpf(df)
        factor = mp.exp(mp.loggamma(v / 2) - mp.loggamma((v - 1) / 2)) / mp.sqrt(v / 2)
        np.testing.assert_allclose(small_sample_factor(df), float(factor), rtol=1e-14)
        for delta, inverse_n in ((0.0, 0.1), (0.5, 0.1), (-3.0, 1e-3), (30.0, 1e-7)):
            mean, variance = cohens_d_moments(delta, inverse_n, df)
            np.testing.assert_allclose(mean, float(mp.mpf(delta) / factor), rtol=1e-14)
            if df <= 2:
                assert variance == np.inf
                continue
            expected = v / (v - 2) * (mp.mpf(inverse_n) + mp.mpf(delta) ** 2) - (mp.mpf(delta) / factor) ** 2
            np.testing.assert_allclose(variance, float(expected), rtol=ACCURACY)
            np.testing.assert_allclose(
                hedges_g_variance(delta, inverse_n, df), float(expected * factor**2), rtol=ACCURACY
            )


# ---- published figures and identities ----------------------------------------------------------------------


def test_mean_and_variance_of_eta_squared_of_three_groups() -> None:
    # Wishart (1931), Biometrika 22:353-361, moments of the noncentral beta: k = 3, N = 20, f² = .25
    # (formula from memory; the figures were computed from it by two routes)
    mean, variance = eta_squared_moments(20 * 0.25, 2, 17)
    assert round(float(mean), 9) == 0.279785707
    assert round(float(variance), 11) == 0.02306313367


def test_null_variance_of_r_squared() -> None:
    # Fisher (1924), Wishart (1931): mean p/(n - 1), variance 2p(n - p - 1)/((n - 1)²(n + 1)); p = 3, n = 40
    # (formula from memory)
    mean, variance = eta_squared_moments(0.0, 3, 36)
    np.testing.assert_allclose(mean, 3 / 39, rtol=1e-13)
    np.testing.assert_allclose(variance, 2 * 3 * 36 / (39**2 * 41), rtol=1e-13)
    assert round(float(variance), 12) == 0.003463703276


def test_small_sample_factor_with_98_degrees_of_freedom() -> None:
    # Borenstein et al. (2009), ch. 4: J = .9923 by the approximation 1 - 3/(4 df - 1), from memory; the exact
    # factor agrees in the printed digits
    assert round(float(small_sample_factor(98)), 4) == 0.9923


def test_small_sample_factor_of_two_degrees_of_freedom() -> None:
    # Gamma(1)/Gamma(1/2) = 1/sqrt(pi)
    np.testing.assert_allclose(small_sample_factor(2), 1 / np.sqrt(np.pi), rtol=1e-14)


def test_exact_variance_of_d_nears_the_large_sample_formula() -> None:
    n = 200_000.0
    _, variance = cohens_d_moments(0.5, 2 / n, 2 * n - 2)
    np.testing.assert_allclose(variance, 2 / n + 0.5**2 / (4 * n), rtol=1e-4)


def test_large_sample_formula_vanishes_with_eta_squared_and_the_exact_variance_does_not() -> None:
    n, df1, df2 = 60.0, 2.0, 57.0
    assert large_sample_eta_variance(0.0, df1, n) == 0.0
    expected = 4 * 0.3 * 0.7**2 * (n - 3) ** 2 / ((n**2 - 1) * (n + 3))
    np.testing.assert_allclose(large_sample_eta_variance(0.3, df1, n), expected, rtol=1e-14)
    lam = plug_in_noncentrality(0.0, df1, df2)
    assert lam == 0.0
    assert eta_squared_moments(lam, df1, df2)[1] > 1e-3
    # far from zero and with many cases the two agree
    _, exact = eta_squared_moments(0.3 / 0.7 * 1e6, 1, 1e6 - 2)
    np.testing.assert_allclose(large_sample_eta_variance(0.3, 1, 1e6), exact, rtol=0.2)


def test_plug_in_is_unbiased_before_the_cut() -> None:
    # E[F'] = df2 (df1 + lambda)/(df1 (df2 - 2)) (Johnson, Kotz & Balakrishnan, Continuous Univariate
    # Distributions 2, ch. 30, from memory): at F equal to its mean the estimate is lambda
    lam, df1, df2 = np.array([0.0, 3.0, 70.0]), 2.0, np.array([10.0, 57.0, 4.5])
    f = df2 * (df1 + lam) / (df1 * (df2 - 2))
    np.testing.assert_allclose(plug_in_noncentrality(f, df1, df2), lam, atol=1e-13)
    assert plug_in_noncentrality(0.2, df1, 57) == 0.0
    assert plug_in_noncentrality(50.0, df1, 2) == 0.0


def test_one_degree_of_freedom_links_f_and_d() -> None:
    # f² = d² ñ/df2, so that at a true zero E[f²] = Var(d) ñ/df2
    f_mean, f_variance = cohens_f_moments(0.0, 1, 18)
    _, d_variance = cohens_d_moments(0.0, 0.2, 18)
    np.testing.assert_allclose(f_variance + f_mean**2, d_variance / 0.2 / 18, rtol=1e-13)


# ---- edges -------------------------------------------------------------------------------------------------


def test_infinite_moments_of_f() -> None:
    mean, variance = cohens_f_moments(4.0, 2, [1.0, 2.0, 2.5])
    np.testing.assert_array_equal(np.isinf(mean), [True, False, False])
    np.testing.assert_array_equal(np.isinf(variance), [True, True, False])


def test_variance_is_continuous_where_the_method_changes() -> None:
    lam = 200.0 * (1 + np.array([-1e-12, 1e-12]))
    for df1, df2 in ((1, 12), (4, 300), (50, 1e6)):
        for moment in cohens_f_moments(lam, df1, df2):
            np.testing.assert_allclose(moment[0], moment[1], rtol=1e-10)


def test_missing_in_missing_out() -> None:
    broken = [np.nan, np.inf, 5.0]
    for moments in (
        eta_squared_moments(broken, 2, 20),
        epsilon_squared_moments(5.0, 2, broken),
        omega_squared_moments(5.0, 2, 20, [np.nan, np.inf, 23]),
        omega_squared_moments(5.0, [np.nan, -1, 2], 20, 23),
        cohens_f_moments(broken, 2, 20),
        cohens_d_moments(broken, 0.2, 20),
        cohens_d_moments(0.5, [np.nan, 0.0, 0.2], 20),
        (hedges_g_variance(0.5, 0.2, [np.nan, -1.0, 20]),),
        (small_sample_factor([np.nan, 1.0, 20]),),
        (plug_in_noncentrality([np.nan, -0.1, 2.0], 2, 20),),
        (large_sample_eta_variance([np.nan, 0.1, 0.1], 2, [20, 1, 20]),),
    ):
        for moment in moments:
            np.testing.assert_array_equal(np.isnan(moment), [True, True, False])


def test_negative_non_centrality_and_n_not_above_df1_are_out_of_range() -> None:
    assert np.isnan(eta_squared_moments(-1.0, 2, 20)).all()
    assert np.isnan(cohens_f_moments(-1.0, 2, 20)).all()
    assert np.isnan(omega_squared_moments(1.0, 2, 20, 2)).all()


def test_shapes_broadcast() -> None:
    lam, df2 = np.array([[0.0], [5.0], [900.0]]), np.array([20.0, 200.0])
    for moments in (
        eta_squared_moments(lam, 2, df2),
        cohens_f_moments(lam, 2, df2),
        cohens_d_moments(lam, 0.1, df2),
    ):
        for moment in moments:
            assert moment.shape == (3, 2)
    assert eta_squared_moments(5.0, 2, 20)[0].shape == ()
    assert hedges_g_variance(0.5, 0.1, 20).shape == ()
    assert omega_squared_moments([], 2, 20, 23)[0].shape == (0,)
    # a row's value does not depend on its neighbours
    many = eta_squared_moments(np.linspace(0, 5000, 6001), 2, 57)
    for row in (0, 2049, 6000):
        alone = eta_squared_moments(np.linspace(0, 5000, 6001)[row], 2, 57)
        np.testing.assert_allclose([many[0][row], many[1][row]], alone, rtol=1e-13)
