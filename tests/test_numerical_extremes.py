"""Estimates, envelopes, variances and limits at numerical extremes, against mpmath at 50 digits.

Cells go in as printed; references are worked out here from the same printed digits: closed forms for estimates, the
finite sum of the F distribution for an even df1, the Poisson mixture of beta distributions (Johnson, Kotz &
Balakrishnan 1995, ch. 30) for noncentral F, Wishart's (1931) moments by Kummer's function, Hedges's (1981) moments of
the noncentral t. Tolerances are relative: 1e-10 for estimates and envelopes; the same for variances plus what a double
that close to 1 leaves of 1 - estimate; 1e-8 for the non-centrality of limits, as the module states.
"""

from __future__ import annotations

from collections.abc import Iterable
from functools import cache

import mpmath as mp
import numpy as np
import pandas as pd
import pytest

import extractor
from extractor.sampling.noncentral import f_noncentrality_limits

DIGITS = 50
CLOSE = 1e-10
EPS = float(np.finfo(float).eps)
Cells = dict[str, str]


def effects(rows: Iterable[Cells], metric: str, variance: str | None = "exact") -> list[dict[str, float]]:
    frame = pd.DataFrame(list(rows), dtype=object).fillna("")
    found = extractor.convert(frame, to=metric, variance=variance).effects
    assert found["status"].tolist() == ["converted"] * len(found), found["reason"].tolist()
    columns = ["estimate", "estimate_low", "estimate_high", "variance", "ci_low", "ci_high"]
    return [
        dict(zip(columns, map(float, line), strict=True)) for line in found[columns].to_numpy(dtype=float)
    ]


def near(found: float, expected: mp.mpf, tolerance: float = CLOSE, absolute: float = 0.0) -> None:
    assert abs(mp.mpf(found) - expected) <= tolerance * abs(expected) + absolute, (
        found,
        mp.nstr(expected, 20),
    )


def holds(found: dict[str, float], low: mp.mpf, high: mp.mpf, absolute: float = 0.0) -> None:
    """The envelope contains every number that prints alike, and hardly more."""
    assert found["estimate_low"] <= low and high <= found["estimate_high"]
    near(found["estimate_low"], low, CLOSE, absolute)
    near(found["estimate_high"], high, CLOSE, absolute)


# ---- F: the three indices, their exact variance, their limits

TESTS = [
    # F, one unit of its last digit, df1, df2
    *(("1000000", "1", df1, df2) for df1, df2 in ((2, 57), (99, 100), (1, 2), (4, 1_000_000), (1, 10))),
    *(("1.0000001", "0.0000001", df1, df2) for df1, df2 in ((2, 57), (99, 100), (4, 1_000_000), (1, 2))),
    *(("0.00", "0.01", df1, df2) for df1, df2 in ((2, 57), (99, 100), (4, 1_000_000), (1, 2))),
    *(
        ("4.31", "0.01", df1, df2)
        for df1, df2 in ((2, 57), (99, 9_900), (1_000_000, 1_000_000), (1, 1_000_000))
    ),
    ("0.0000001", "0.0000001", 2, 1_000_000),
    ("250000.5", "0.1", 3, 12),
]
"""Effects near 0 and near 1, dfs of a million, 100 groups, groups of two."""


def row(f: str, df1: int, df2: int) -> Cells:
    return {"design": "one-way", "f_value": f, "df_effect": str(df1), "df_error": str(df2)}


def indices(f: mp.mpf, df1: int, df2: int) -> dict[str, mp.mpf]:
    explained = df1 * f
    return {
        "eta_squared": explained / (explained + df2),
        "omega_squared": (explained - df1) / (explained + df2 + 1),
        "epsilon_squared": (explained - df1) / (explained + df2),
    }


@pytest.mark.parametrize("metric", ["eta_squared", "omega_squared", "epsilon_squared"])
def test_indices_of_f(metric: str) -> None:
    found = effects([row(f, df1, df2) for f, _, df1, df2 in TESTS], metric)
    with mp.workdps(DIGITS):
        for (f, unit, df1, df2), effect in zip(TESTS, found, strict=True):
            value, half = mp.mpf(f), mp.mpf(unit) / 2
            # F - 1 is a difference of doubles
            lost = 4 * EPS if metric != "eta_squared" else 0.0
            expected = indices(value, df1, df2)[metric]
            scale = float(df1 / (df1 * value + df2))
            near(effect["estimate"], expected, CLOSE, lost * scale)
            low, high = (
                indices(max(end, mp.mpf(0)), df1, df2)[metric] for end in (value - half, value + half)
            )
            holds(effect, low, high, 100 * EPS * scale)


def kummer(m: int, c: mp.mpf, z: mp.mpf) -> mp.mpf:
    """1F1(m; c; -z); by its integral (Abramowitz & Stegun 13.2.1) where the series converges too slowly."""
    if min(c, z) < 10_000:
        return mp.hyp1f1(m, c, -z)
    width = 1 / (c + z)
    ends = [width * end for end in (0, 1, 3, 8, 20, 50, 120, 300)]
    integral = mp.quad(lambda t: mp.exp(-z * t + (c - m - 1) * mp.log1p(-t)) * t ** (m - 1), ends)
    return integral * mp.rf(c - m, m) / mp.factorial(m - 1)


def inverse_moments(lam: mp.mpf, df1: int, df2: int, extra: mp.mpf) -> tuple[mp.mpf, mp.mpf]:
    """First two moments of Y/(X + (1 + extra) Y), expanded in ``extra`` from those of Y/(X + Y)."""
    a, b = mp.mpf(df1) / 2, mp.mpf(df2) / 2

    @cache
    def beta_moment(m: int) -> mp.mpf:
        return mp.rf(b, m) / mp.rf(a + b, m) * kummer(m, a + b + m, lam / 2)

    first, second, power = mp.mpf(0), mp.mpf(0), mp.mpf(1)
    for i in range(400):
        terms = power * beta_moment(i + 1), power * (i + 1) * beta_moment(i + 2)
        first, second, power = first + terms[0], second + terms[1], -power * extra
        if (
            abs(terms[0]) < abs(first) * mp.mpf(10) ** -mp.mp.dps
            and abs(terms[1]) < abs(second) * mp.mpf(10) ** -mp.mp.dps
        ):
            return first, second
    raise AssertionError("the expansion does not converge")


def plug_in(f: mp.mpf, df1: int, df2: int) -> mp.mpf:
    return max(mp.mpf(0), df1 * (f * mp.mpf(df2 - 2) / df2 - 1)) if df2 > 2 else mp.mpf(0)


@pytest.mark.parametrize("metric", ["eta_squared", "omega_squared", "epsilon_squared"])
def test_exact_variances_of_indices(metric: str) -> None:
    rows = [test for test in TESTS if test[3] >= 10]
    found = effects([row(f, df1, df2) for f, _, df1, df2 in rows], metric)
    for (f, _, df1, df2), effect in zip(rows, found, strict=True):
        # a variance of 1e-12 about a mean near 1 cancels as many digits
        with mp.workdps(DIGITS + 12):
            lam = plug_in(mp.mpf(f), df1, df2)
            extra = mp.mpf(1) / df2 if metric == "omega_squared" else mp.mpf(0)
            first, second = inverse_moments(lam, df1, df2, extra)
            total = {"eta_squared": df2, "omega_squared": df1 + df2 + 1, "epsilon_squared": df1 + df2}[metric]
            expected = (mp.mpf(total) / df2) ** 2 * (second - first**2)
            near(effect["variance"], expected, CLOSE + 8 * EPS / (1 - effect["estimate"]))


def _steps(x: mp.mpf, p: mp.mpf, q: mp.mpf) -> mp.mpf:
    """The incomplete beta function ratio I_x(p, q), by the series in x (Abramowitz & Stegun 26.5.4)."""
    log_beta = mp.loggamma(p) + mp.loggamma(q) - mp.loggamma(p + q)
    term, total = mp.exp(p * mp.log(x) + q * mp.log(1 - x) - log_beta) / p, mp.mpf(0)
    while term > mp.mpf(10) ** (-mp.mp.dps - 5):
        total += term
        term *= x * (p + q) / (p + 1)
        p += 1
    return total


def noncentral_f(f: mp.mpf, df1: int, df2: int, lam: mp.mpf) -> mp.mpf:
    """P(F' <= f): a Poisson mixture of beta distributions, term by term from the largest count down."""
    a, b, mean = mp.mpf(df1) / 2, mp.mpf(df2) / 2, lam / 2
    x = df1 * f / (df1 * f + df2)
    if not lam:
        return _steps(x, a, b) if x < 0.5 else 1 - _steps(1 - x, b, a)
    reach = 12 * mp.sqrt(mean) + 60
    first, last = int(max(mp.mpf(0), mean - reach)), int(mean + reach)
    log_beta = mp.loggamma(a + last) + mp.loggamma(b) - mp.loggamma(a + last + b)
    step = mp.exp((a + last) * mp.log(x) + b * mp.log(1 - x) - log_beta) / (a + last)
    # I_x(p, b) is the sum of these steps from p on, or 1 minus their like from the other side
    cdf = _steps(x, a + last, b) if x < 0.5 else 1 - _steps(1 - x, b, a + last)
    weight = mp.exp(last * mp.log(mean) - mean - mp.loggamma(last + 1))
    total = mp.mpf(0)
    for j in range(last, first - 1, -1):
        total += weight * cdf
        if j > first:
            weight *= j / mean
            # I_x(p, b) = I_x(p + 1, b) + x^p (1 - x)^b / (p B(p, b))
            step *= (a + j) / (x * (a + j - 1 + b))
            cdf += step
    return total


LIMITS = [
    ("40000", 2, 57),
    ("1000000", 1, 2),
    ("4.31", 99, 9_900),
    ("40000", 1, 1_000_000),
    ("1.0000001", 4, 1_000_000),
    ("3.1", 999, 1_000),
    ("250000.5", 3, 12),
]


@pytest.mark.parametrize(("f", "df1", "df2"), LIMITS)
def test_limits_of_omega_squared(f: str, df1: int, df2: int) -> None:
    """Each limit is λ/(λ + N) of a non-centrality at which F is at the tail probability, within 1e-8 of it."""
    (effect,) = effects([row(f, df1, df2)], "omega_squared")
    with mp.workdps(30):
        n = df1 + df2 + 1
        for end, tail in (("ci_low", mp.mpf("0.975")), ("ci_high", mp.mpf("0.025"))):
            share = mp.mpf(effect[end])
            if share == 0:
                assert noncentral_f(mp.mpf(f), df1, df2, mp.mpf(0)) <= tail
                continue
            lam = share / (1 - share) * n
            reach = mp.mpf("1e-8") + 8 * EPS / (1 - share)
            below, above = (noncentral_f(mp.mpf(f), df1, df2, lam * (1 + s * reach)) for s in (-1, 1))
            assert above < tail < below


def noncentral_f_of_one_df(f: mp.mpf, df2: int, lam: mp.mpf) -> mp.mpf:
    """P(F' <= f) with df1 = 1: the chance that |Z + sqrt(λ)| <= s·sqrt(f), over s = sqrt(chi-square(df2)/df2)."""
    half, delta, root = mp.mpf(df2) / 2, mp.sqrt(lam), mp.sqrt(f)
    log_scale = mp.log(2) + half * mp.log(half) - mp.loggamma(half)

    def weighed(s: mp.mpf) -> mp.mpf:
        density = mp.exp(log_scale + (df2 - 1) * mp.log(s) - half * s**2)
        return density * (mp.ncdf(root * s - delta) - mp.ncdf(-root * s - delta))

    # pieces along the density of s, and short ones where the chance climbs from 0 to 1
    ends = {max(1 + step / mp.sqrt(2 * mp.mpf(df2)), mp.mpf(0)) for step in range(-14, 41)}
    ends |= {max(delta + step, 0) / root for step in range(-12, 13, 3)}
    return mp.quad(weighed, sorted(ends))


@pytest.mark.parametrize(("f", "df2"), [("1e12", 1_000_000), ("1e6", 1_000_000), ("1e12", 60), ("40000", 60)])
def test_limits_of_huge_noncentralities(f: str, df2: int) -> None:
    """Non-centralities to 1e12, where sums over Poisson counts are out of reach, within 1e-9 of the exact ones."""
    low, high = f_noncentrality_limits(float(f), 1.0, float(df2))
    with mp.workdps(30):
        for end, tail in ((low, mp.mpf("0.975")), (high, mp.mpf("0.025"))):
            lam = mp.mpf(float(end))
            below, above = (
                noncentral_f_of_one_df(mp.mpf(f), df2, lam * (1 + s * mp.mpf("1e-9"))) for s in (-1, 1)
            )
            assert above < tail < below


# ---- p


def tail_of_f(f: mp.mpf, df1: int, df2: int) -> mp.mpf:
    """P(F >= f) for an even df1: a finite sum (integration of the density by parts)."""
    assert df1 % 2 == 0
    x, b = df2 / (df2 + df1 * f), mp.mpf(df2) / 2
    term, total = x**b, mp.mpf(0)
    for j in range(df1 // 2):
        total += term
        term *= (b + j) / (j + 1) * (1 - x)
    return total


def f_of_tail(p: mp.mpf, df1: int, df2: int) -> mp.mpf:
    """The F whose tail is p: ln F by bisection, then by secants."""
    low, high = mp.mpf(-60), mp.mpf(800)
    for _ in range(20):
        middle = (low + high) / 2
        low, high = (middle, high) if tail_of_f(mp.exp(middle), df1, df2) > p else (low, middle)
    return mp.exp(mp.findroot(lambda y: mp.log(tail_of_f(mp.exp(y), df1, df2) / p), (low, high), tol=1e-60))


@pytest.mark.parametrize("p", ["1e-300", "3e-200", "1e-17", ".05", ".5", ".999"])
def test_f_of_a_p(p: str) -> None:
    dfs = ((2, 57), (4, 1_000_000), (98, 100), (2, 2), (100, 9_900))
    cells = [{"design": "one-way", "p_value": p, "df_effect": str(a), "df_error": str(b)} for a, b in dfs]
    for metric in ("omega_squared", "eta_squared"):
        found = effects(cells, metric)
        with mp.workdps(DIGITS):
            for (df1, df2), effect in zip(dfs, found, strict=True):
                f = f_of_tail(mp.mpf(p), df1, df2)
                near(effect["estimate"], indices(f, df1, df2)[metric], CLOSE, 1e-13)


def test_a_p_too_small_to_be_computed_with_is_a_bound() -> None:
    cells = [
        {"design": "one-way", "p_value": p, "df_effect": "2", "df_error": "57"}
        for p in ("1e-310", "< 3e-305", "1 x 10^-400", "< 1e-300")
    ]
    found = extractor.convert(pd.DataFrame(cells, dtype=object), to="omega_squared")
    assert found.effects["status"].tolist() == ["bounded"] * 4
    lows = found.effects["estimate_low"]
    assert len(set(lows)) == 1
    with mp.workdps(DIGITS):
        f = f_of_tail(mp.mpf("1e-300"), 2, 57)
        least = 2 * (f - 1) / (2 * f + 58)
        assert least * (1 - mp.mpf(CLOSE)) <= lows[0] <= least


# ---- d and g

SIZES = ((2, 2), (2, 1_000_000), (500_000, 500_000), (3, 2))


@pytest.mark.parametrize("t", ["1000.0", "0.0001", "-2.10", "0.00"])
def test_g_of_a_t(t: str) -> None:
    """J by gamma functions, the exact variance by Hedges's moments, both about the printed t."""
    cells = [{"design": "two-group", "t_value": t, "n_1": str(a), "n_2": str(b)} for a, b in SIZES]
    found = effects(cells, "hedges_g")
    with mp.workdps(DIGITS):
        for (a, b), effect in zip(SIZES, found, strict=True):
            v, inverse = mp.mpf(a + b - 2), mp.mpf(1) / a + mp.mpf(1) / b
            factor = (
                mp.gamma(v / 2) / (mp.sqrt(v / 2) * mp.gamma((v - 1) / 2))
                if v < 1e4
                else mp.exp(mp.loggamma(v / 2) - mp.loggamma((v - 1) / 2)) / mp.sqrt(v / 2)
            )
            g = factor * mp.mpf(t) * mp.sqrt(inverse)
            near(effect["estimate"], g)
            half = mp.mpf("0.00005" if "0001" in t else "0.005" if "." in t[-3:-2] else "0.05")
            holds(effect, *(factor * (mp.mpf(t) + s * half) * mp.sqrt(inverse) for s in (-1, 1)))
            if v > 2:
                delta = g
                exact = v / (v - 2) * (inverse + delta**2) - delta**2 / factor**2
                near(effect["variance"], factor**2 * exact)


# ---- a hundred groups

GROUPS = [
    (2 + at % 7, f"{50 + (at * 37) % 11}.{at % 10}", f"{3 + at % 5}.{(at * 7) % 10}") for at in range(100)
]
"""Size, mean and SD as printed; the first groups have two members."""


@pytest.mark.parametrize("metric", ["omega_squared", "eta_squared"])
def test_a_hundred_groups(metric: str) -> None:
    cells = {"design": "one-way"}
    for at, (n, mean, sd) in enumerate(GROUPS, 1):
        cells |= {f"n_{at}": str(n), f"mean_{at}": mean, f"sd_{at}": sd}
    (effect,) = effects([cells], metric)
    with mp.workdps(DIGITS):
        total = sum(n for n, _, _ in GROUPS)
        grand = mp.fsum(n * mp.mpf(mean) for n, mean, _ in GROUPS) / total
        between = mp.fsum(n * (mp.mpf(mean) - grand) ** 2 for n, mean, _ in GROUPS)
        within = mp.fsum((n - 1) * mp.mpf(sd) ** 2 for n, _, sd in GROUPS)
        f = between / 99 / (within / (total - 100))
        near(effect["estimate"], indices(f, 99, total - 100)[metric])
        assert effect["estimate_low"] < effect["estimate"] < effect["estimate_high"]
        first, second = inverse_moments(
            plug_in(f, 99, total - 100),
            99,
            total - 100,
            mp.mpf(1) / (total - 100) if metric == "omega_squared" else mp.mpf(0),
        )
        size = total if metric == "omega_squared" else total - 100
        near(effect["variance"], (mp.mpf(size) / (total - 100)) ** 2 * (second - first**2))
