"""Non-centrality limits against mpmath at 30 digits, against published figures, and at the edges."""

from collections.abc import Callable

import mpmath as mp
import numpy as np
import pytest
from scipy import optimize, special, stats

from extractor.sampling.noncentral import f_noncentrality_limits, log_gamma_ratio, t_noncentrality_limits

DIGITS = 30
ACCURACY = mp.mpf("1e-8")  # of the non-centrality: absolute below 1, relative above


# ---- references, written from the definitions --------------------------------------------------


def reference_beta(a: mp.mpf, b: mp.mpf, y: mp.mpf, complement: mp.mpf) -> mp.mpf:
    """Regularised incomplete beta by its series of positive terms at the smaller of y and 1 - y."""
    if y > complement:
        return 1 - reference_beta(b, a, complement, y)
    term = mp.exp(a * mp.log(y) + b * mp.log(complement) - mp.log(a) - log_beta(a, b))
    total, n = mp.mpf(0), 0
    while True:
        total += term
        ratio = (a + b + n) / (a + 1 + n) * y
        term *= ratio
        n += 1
        if ratio < 1 and term < total * mp.mpf(10) ** (-DIGITS) * (1 - ratio):
            return total


def log_beta(a: mp.mpf, b: mp.mpf) -> mp.mpf:
    return mp.loggamma(a) + mp.loggamma(b) - mp.loggamma(a + b)


def reference_f(f: float, df1: float, df2: float, lam: mp.mpf) -> mp.mpf:
    """P(F' <= f): the Poisson mixture of central beta probabilities, term by term."""
    f, a, b, mean = mp.mpf(f), mp.mpf(df1) / 2, mp.mpf(df2) / 2, mp.mpf(lam) / 2
    y, complement = a * f / (a * f + b), b / (a * f + b)
    first = int(max(0, mean - 11 * mp.sqrt(mean)))
    last = int(mean + 11 * mp.sqrt(mean) + 60)
    weight = mp.exp(first * mp.log(mean) - mean - mp.loggamma(first + 1)) if mean > 0 else mp.mpf(1)
    beta = reference_beta(a + first, b, y, complement)
    step = mp.exp((a + first) * mp.log(y) + b * mp.log(complement) - log_beta(a + first, b)) / (a + first)
    total = mp.mpf(0)
    for j in range(first, last):
        total += weight * beta
        beta -= step
        step *= y * (a + b + j) / (a + j + 1)
        weight *= mean / (j + 1)
    return total


def reference_t(t: float, df: float, delta: mp.mpf) -> mp.mpf:
    """P(T' <= t): the normal distribution function integrated over the chi distribution."""
    t, v, delta = mp.mpf(t), mp.mpf(df), mp.mpf(delta)
    log_scale = mp.log(2) + v / 2 * mp.log(v / 2) - mp.loggamma(v / 2)

    def integrand(u: mp.mpf) -> mp.mpf:
        return mp.exp(log_scale + (v - 1) * mp.log(u) - v * u * u / 2) * mp.ncdf(t * u - delta)

    sd, top = 1 / mp.sqrt(2 * v), mp.mpf(10)
    points = {1 + k * sd for k in range(-11, 12)} | {(delta + k) / t for k in range(-10, 11, 2)}
    ends = sorted({mp.mpf(0), min(top, 1 + 11 * sd)} | {x for x in points if 0 < x < min(top, 1 + 11 * sd)})
    return mp.quad(integrand, ends, maxdegree=5)


def assert_solves(distribution: Callable[[mp.mpf], mp.mpf], limit: float, p: mp.mpf) -> None:
    """The distribution function, decreasing in the non-centrality, crosses p within the allowed error."""
    reach = ACCURACY * max(1, abs(limit))
    assert distribution(mp.mpf(limit) - reach) > p > distribution(mp.mpf(limit) + reach)


# ---- accuracy ----------------------------------------------------------------------------------


@pytest.mark.parametrize("level", [0.90, 0.95, 0.99])
@pytest.mark.parametrize(
    ("f", "df1", "df2"),
    [
        (4.5, 2, 57),
        (2.70, 3, 236),
        (1.0, 50, 1_000_000),
        (12.0, 7, 40_000),
        (0.4, 1, 12),
        (9.3, 4.6, 31.7),  # degrees of freedom after a sphericity correction
        (31.0, 50, 9),  # limits on both sides of the change from series to contour
        (1e6, 1, 1),
        (700.0, 50, 3),
        (1e4, 2, 250_000),
    ],
)
def test_f_limits_solve_their_equations(f: float, df1: float, df2: float, level: float) -> None:
    low, high = f_noncentrality_limits(f, df1, df2, level)
    with mp.workdps(DIGITS):
        tail = (1 - mp.mpf(level)) / 2
        for limit, p in ((float(low), 1 - tail), (float(high), tail)):
            if limit > 3e4:
                continue  # the reference would need many terms: see the tests at large non-centrality
            if limit == 0.0:
                assert reference_f(f, df1, df2, mp.mpf(0)) <= p
            else:
                assert_solves(lambda x: reference_f(f, df1, df2, x), limit, p)


@pytest.mark.parametrize(("f", "df1", "df2"), [(99_655.9, 14, 202_627), (3763.6, 50, 94_654)])
def test_f_limits_at_large_non_centrality(f: float, df1: float, df2: float) -> None:
    _, high = f_noncentrality_limits(f, df1, df2, 0.99)
    assert high > 1e5
    with mp.workdps(DIGITS):
        assert_solves(lambda x: reference_f(f, df1, df2, x), float(high), (1 - mp.mpf(0.99)) / 2)


def test_f_limit_at_large_non_centrality_and_one_df2() -> None:
    # with df1 = 1 and so large a non-centrality F' is the square of a positive noncentral t
    _, high = f_noncentrality_limits(1e6, 1, 1, 0.99)
    assert high > 5e6
    with mp.workdps(20):
        assert_solves(lambda x: reference_t(1e3, 1, mp.sqrt(x)), float(high), (1 - mp.mpf(0.99)) / 2)


@pytest.mark.parametrize(
    ("t", "df", "level"),
    [
        (2.115, 31, 0.95),
        (-0.7, 9, 0.90),
        (0.03, 1, 0.99),
        (11.2, 1, 0.95),
        (-9.0, 40, 0.99),  # limits on both sides of the change from signed t to its square
        (38.0, 1e6, 0.95),
        (1e3, 3, 0.95),
    ],
)
def test_t_limits_solve_their_equations(t: float, df: float, level: float) -> None:
    low, high = t_noncentrality_limits(t, df, level)
    with mp.workdps(20):
        tail = (1 - mp.mpf(level)) / 2
        assert_solves(lambda x: reference_t(t, df, x), float(low), 1 - tail)
        assert_solves(lambda x: reference_t(t, df, x), float(high), tail)


def test_f_limits_agree_with_t_limits_far_from_zero() -> None:
    # P(T' < 0) is negligible there, so that the square of t carries all there is to know
    t = np.array([12.0, 15.0, 60.0])
    df = np.array([20.0, 300.0, 5.0])
    t_low, t_high = t_noncentrality_limits(t, df, 0.90)
    f_low, f_high = f_noncentrality_limits(t**2, 1, df, 0.90)
    np.testing.assert_allclose(t_low**2, f_low, rtol=1e-9)
    np.testing.assert_allclose(t_high**2, f_high, rtol=1e-9)


def test_random_rows_solve_their_equations_in_scipy() -> None:
    # scipy's distribution function is a looser reference (its error reaches 1e-4 in older releases)
    random = np.random.default_rng(20240229)
    df1 = random.integers(1, 51, 4000).astype(float)
    df2 = np.round(10 ** random.uniform(0, 6, 4000))
    f = 10 ** random.uniform(-2, 3, 4000)
    for level in (0.5, 0.9, 0.95):
        low, high = f_noncentrality_limits(f, df1, df2, level)
        assert np.isfinite(low).all()
        assert (low >= 0).all()
        assert (low <= high).all()
        checked = (high > 0) & (high < 500)
        p = stats.ncf.cdf(f[checked], df1[checked], df2[checked], high[checked])
        np.testing.assert_allclose(p, (1 - level) / 2, atol=2e-4)
        np.testing.assert_array_equal(high == 0, stats.f.cdf(f, df1, df2) <= (1 - level) / 2)
        np.testing.assert_array_equal(low == 0, stats.f.cdf(f, df1, df2) <= (1 + level) / 2)


def test_limits_widen_with_the_level() -> None:
    random = np.random.default_rng(7)
    t, df = random.normal(0, 5, 500), random.integers(1, 200, 500)
    previous_low, previous_high = t_noncentrality_limits(t, df, 0.2)
    for level in (0.5, 0.9, 0.95, 0.99, 0.9999):
        low, high = t_noncentrality_limits(t, df, level)
        assert (low < previous_low).all()
        assert (high > previous_high).all()
        previous_low, previous_high = low, high


# ---- published figures -------------------------------------------------------------------------


def test_root_mean_square_effect_of_four_groups() -> None:
    # Steiger & Fouladi (1997) and Fleishman (1980), four groups of 60, F = 2.70, 90 % interval of
    # sqrt(lambda/((k - 1) n)): .0190 to .3139 (figures seen in a text quoting them)
    low, high = f_noncentrality_limits(2.70, 3, 236, 0.90)
    assert round(float(np.sqrt(low / 180)), 4) == 0.0190
    assert round(float(np.sqrt(high / 180)), 4) == 0.3139


def test_eta_squared_interval_of_two_groups() -> None:
    # Lakens (2013), Frontiers in Psychology 4:863: F(1, 18) = 6.34, 90 % interval of eta squared .02 to .48
    # (values from memory)
    low, high = f_noncentrality_limits(6.34, 1, 18, 0.90)
    assert round(float(low / (low + 20)), 2) == 0.02
    assert round(float(high / (high + 20)), 2) == 0.48


def test_both_limits_of_one_t_with_31_degrees_of_freedom() -> None:
    # Method of Steiger & Fouladi (1997) and Cumming & Finch (2001), groups of 15 and 18 (data: Navarro,
    # Learning Statistics, ch. 13; from memory). The limits .07033902557 and 4.128108, not printed there, were
    # integrated over the chi distribution; t is recovered from the first and must then give the second.
    t = optimize.brentq(
        lambda x: float(t_noncentrality_limits(x, 31)[0]) - 0.07033902557, 2.0, 2.2, xtol=1e-14
    )
    assert round(t, 3) == 2.115
    low, high = t_noncentrality_limits(t, 31)
    assert round(float(high), 6) == 4.128108
    scale = np.sqrt(1 / 15 + 1 / 18)
    assert round(float(low * scale), 4) == 0.0246
    assert round(float(high * scale), 4) == 1.4432


def test_significance_at_five_percent_is_exclusion_of_zero_at_ninety_percent() -> None:
    # Steiger (2004): the 90 % interval of lambda, not the 95 % one, matches the .05 test
    critical = stats.f.isf(0.05, 3, 36)
    f = np.array([critical * (1 - 1e-9), critical * (1 + 1e-6)])
    low, _ = f_noncentrality_limits(f, 3, 36, 0.90)
    assert low[0] == 0.0
    assert low[1] > 0.0


# ---- edges -------------------------------------------------------------------------------------


def test_f_without_solution_gives_zero() -> None:
    low, high = f_noncentrality_limits([0.0, -0.3, 1e-9, 0.9], 3, 40)
    np.testing.assert_array_equal(low, 0.0)
    np.testing.assert_array_equal(high[:3], 0.0)
    assert high[3] > 0.0


def test_t_of_zero_has_normal_limits() -> None:
    # P(T' <= 0) = Phi(-delta) whatever df
    low, high = t_noncentrality_limits(0.0, [1.0, 7.0, 1e5])
    np.testing.assert_allclose(high, special.ndtri(0.975), rtol=1e-12)
    np.testing.assert_allclose(low, -high, rtol=1e-12)


def test_t_limits_mirror() -> None:
    t, df = np.linspace(-30, 30, 41), 17.0
    low, high = t_noncentrality_limits(t, df)
    mirrored_low, mirrored_high = t_noncentrality_limits(-t, df)
    np.testing.assert_allclose(low, -mirrored_high, rtol=1e-15)
    np.testing.assert_allclose(high, -mirrored_low, rtol=1e-15)


@pytest.mark.parametrize("broken", [np.nan, np.inf, -np.inf])
def test_missing_in_missing_out(broken: float) -> None:
    for limits in (
        f_noncentrality_limits([broken, 3.0, 3.0, 3.0], [2, broken, 2, 2], [20, 20, broken, 20]),
        t_noncentrality_limits([broken, 3.0, broken, 3.0], [20, broken, broken, 20]),
    ):
        for limit in limits:
            np.testing.assert_array_equal(np.isnan(limit), [True, True, True, False])


def test_degrees_of_freedom_must_be_positive() -> None:
    assert np.isnan(f_noncentrality_limits(3.0, [0, -1, 2, 2], [20, 20, 0, -5])).all()
    assert np.isnan(t_noncentrality_limits(3.0, [0, -5])).all()


def test_shapes_broadcast() -> None:
    low, high = f_noncentrality_limits(np.ones((3, 1)), 2, np.array([10.0, 20.0]))
    assert low.shape == high.shape == (3, 2)
    assert t_noncentrality_limits(1.0, 5)[0].shape == ()
    assert f_noncentrality_limits([], 2, 3)[0].shape == (0,)


@pytest.mark.parametrize("level", [0.0, 1.0, 95.0, np.nan])
def test_level_outside_its_range_is_refused(level: float) -> None:
    with pytest.raises(ValueError, match="confidence level"):
        f_noncentrality_limits(3.0, 2, 20, level)
    with pytest.raises(ValueError, match="confidence level"):
        t_noncentrality_limits(3.0, 20, level)


def test_order_of_rows_does_not_matter() -> None:
    random = np.random.default_rng(11)
    f, df1, df2 = (
        random.uniform(0, 400, 5000),
        random.integers(1, 9, 5000),
        random.integers(2, 300, 5000),
    )
    low, high = f_noncentrality_limits(f, df1, df2)
    shuffle = random.permutation(5000)
    again_low, again_high = f_noncentrality_limits(f[shuffle], df1[shuffle], df2[shuffle])
    np.testing.assert_allclose(again_low, low[shuffle], rtol=1e-10, atol=1e-10)
    np.testing.assert_allclose(again_high, high[shuffle], rtol=1e-10, atol=1e-10)


@pytest.mark.parametrize("shift", [0.5, 1.0, 25.0])
def test_log_gamma_ratio(shift: float) -> None:
    x = np.array([0.3, 4.0, 14.9, 15.0, 80.0, 5e5, 1e9])
    with mp.workdps(DIGITS):
        expected = [float(mp.loggamma(mp.mpf(one) + shift) - mp.loggamma(mp.mpf(one))) for one in x]
    np.testing.assert_allclose(log_gamma_ratio(x, shift), expected, rtol=2e-14, atol=2e-14)
