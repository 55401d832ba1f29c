r"""Exact sampling means and variances of effect sizes.

With X noncentral chi square on df1 degrees of freedom with non-centrality lambda, Y chi square on df2 and
F = (X/df1)/(Y/df2), all variance-explained estimates are ratios of linear forms in X and Y, and Cohen's f is
sqrt(X/Y). Two facts make their moments exact and cheap:

* the expectation of a ratio Q^m/L^n, L > 0 linear in X and Y, is an integral over u of
  E[Q^m exp(-u L)] u^(n-1)/(n-1)!, which is elementary because X and Y are independent with known Laplace
  transforms. This sums the Poisson mixture of beta moments [1]_ in closed form. The variance is taken about
  a point near the mean inside the integral, so that its digits survive lambda = 0 and a large df2;
* the moments of the root of a chi square are ratios of gamma functions [2]_.

References
----------
.. [1] Wishart (1931), Biometrika 22, 353-361 (moments of the noncentral beta distribution).
.. [2] Hedges (1981), Journal of Educational Statistics 6, 107-128.
.. [3] Olkin & Finn (1995), Psychological Bulletin 118, 155-164.
"""

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from extractor.sampling.noncentral import (
    Floats,
    broadcast_rows,
    log_gamma_ratio,
    poisson_terms,
    stirling_rest,
)

_CHUNK = 2048  # rows worked on at once: the arrays of a chunk stay in the processor's cache
# Double exponential rule on (0, inf): t = exp(y - exp(-y)), trapezoidal in y. Relative error near 1e-15;
# up to 1e-7 only where N is a small fraction of df1 + df2, which no between-subjects design allows.
_STEP = 0.125
_FIRST_NODE = -3.55  # t = 5e-17 there
_FOLDS = 36.0  # the integrand is dropped once below exp(-36) = 2e-16 of its start
_SUM_END = 100.0  # Poisson mean above which the sum over counts becomes a trapezoidal rule with wide steps
_POISSON_NODES = np.arange(-17, 22) * 0.5  # in standard deviations; further to the right, the longer tail


def plug_in_noncentrality(f: ArrayLike, df1: ArrayLike, df2: ArrayLike) -> Floats:
    """The moment estimate max(0, df1 F (df2 - 2)/df2 - df1) of the non-centrality lambda.

    Arrays broadcast. It is unbiased before it is cut at 0. For df2 <= 2, where F has no mean, it is 0.
    NaN where an input is NaN or infinite, a df is not positive, or F is negative.
    """
    (f_rows, v1, v2), shape, valid = broadcast_rows(f, df1, df2, positive=(1, 2))
    answer = np.full(valid.shape, np.nan)
    with np.errstate(all="ignore"):
        estimate = np.maximum(0.0, v1 * (f_rows * ((v2 - 2.0) / v2) - 1.0))
    answer[valid] = np.where(f_rows >= 0, estimate, np.nan)
    return answer.reshape(shape)


def eta_squared_moments(lam: ArrayLike, df1: ArrayLike, df2: ArrayLike) -> tuple[Floats, Floats]:
    """Mean and variance of (partial) eta squared = X/(X + Y), arrays of the broadcast shape.

    `lam` is the non-centrality (>= 0). NaN where an input is NaN, infinite or out of its range.
    """
    mean, variance = epsilon_squared_moments(lam, df1, df2)
    v1, v2 = np.asarray(df1, dtype=np.float64), np.asarray(df2, dtype=np.float64)
    with np.errstate(all="ignore"):
        # eta squared = (df1 + df2 epsilon squared)/(df1 + df2)
        share = v2 / (v1 + v2)
        return np.asarray(v1 / (v1 + v2) + share * mean), np.asarray(share**2 * variance)


def epsilon_squared_moments(lam: ArrayLike, df1: ArrayLike, df2: ArrayLike) -> tuple[Floats, Floats]:
    """Mean and variance of epsilon squared = df1 (F - 1)/(df1 F + df2), negative values kept.

    `lam` is the non-centrality (>= 0). NaN where an input is NaN, infinite or out of its range.
    """
    total = np.asarray(df1, dtype=np.float64) + np.asarray(df2, dtype=np.float64)
    return omega_squared_moments(lam, df1, df2, total)


def omega_squared_moments(
    lam: ArrayLike, df1: ArrayLike, df2: ArrayLike, n_total: ArrayLike
) -> tuple[Floats, Floats]:
    """Mean and variance of (partial) omega squared = df1 (F - 1)/(df1 (F - 1) + N), negative values kept.

    Parameters
    ----------
    lam, df1, df2, n_total : array_like of float, broadcast against each other
        Non-centrality (>= 0), degrees of freedom (> 0), total sample size N (> df1; it is df1 + df2 + 1 in a
        one-way design and more in a factorial).

    Returns
    -------
    mean, variance : arrays of the broadcast shape
        NaN where an input is NaN, infinite or out of its range.
    """
    (m, v1, v2, n), shape, valid = broadcast_rows(lam, df1, df2, n_total, positive=(1, 2))
    mean = np.full(valid.shape, np.nan)
    variance = np.full(valid.shape, np.nan)
    inside = (m >= 0) & (n > v1)
    rows = np.flatnonzero(valid)[inside]
    m, v1, v2, n = m[inside], v1[inside], v2[inside], n[inside]
    with np.errstate(all="ignore"):
        last_node = _last_node(m, v1, v2, n)
        order = np.argsort(last_node, kind="stable")
        for begin in range(0, rows.size, _CHUNK):
            part = order[begin : begin + _CHUNK]
            mean[rows[part]], variance[rows[part]] = _omega_chunk(
                m[part], v1[part], v2[part], n[part], last_node[part]
            )
    return mean.reshape(shape), variance.reshape(shape)


def _last_node(lam: Floats, v1: Floats, v2: Floats, n: Floats) -> Floats:
    """How far the rule of ``_omega_chunk`` runs, in y, for each row by itself."""
    extra, half_lam = (n - v1 - v2) / v2, 0.5 * lam
    rate = 0.5 * (v1 + v2) + half_lam + 0.5 * v2 * extra
    # the exponent exceeds s t + lambda/2 t/(1 + t), which reaches _FOLDS at the positive root of a quadratic
    s = 0.5 * (v1 + v2) + 0.5 * v2 * np.minimum(extra, 0.0)
    slack = s + half_lam - _FOLDS
    root = np.sqrt(slack * slack + 4.0 * _FOLDS * s)
    end = np.where(slack > 0, 2.0 * _FOLDS / (slack + root), (root - slack) / (2.0 * s))
    return np.log(end * rate)


def _omega_chunk(lam: Floats, v1: Floats, v2: Floats, n: Floats, last_node: Floats) -> tuple[Floats, Floats]:
    r"""Omega squared is W = (X - (v1/v2) Y)/(X + k Y) = 1 - (n/v2) R, R = Y/(X + k Y), k = (n - v1)/v2.

    Weighted with exp(-u (X + k Y)), X and Y stay independent with known means and variances, so that with
    r = v2/(v1 + lambda + k v2), which is near E[R],
        E[W]         = \int E[(X - (v1/v2) Y) e^{-u(X + kY)}] du
        E[R - r]     = \int E[((1 - k r) Y - r X) e^{-u(X + kY)}] du
        E[(R - r)^2] = \int u E[((1 - k r) Y - r X)^2 e^{-u(X + kY)}] du.
    The variable of integration is t = ln(1 + 2u); g = e^{-t}, h = 1 - g. Each bracket is written out with its
    differences taken by hand. ``last_node`` is ascending: a row is left out of the nodes beyond its own.
    """
    extra = (n - v1 - v2) / v2  # k - 1
    half_total, b, half_lam = 0.5 * (v1 + v2), 0.5 * v2, 0.5 * lam
    rate = half_total + half_lam + b * extra  # of decay at t = 0
    size = v1 + lam + v2 + v2 * extra
    spread_y, drift_x = (v1 + lam) ** 2 * v2, -v1 * extra
    mean = np.zeros(lam.shape)
    shift = np.zeros(lam.shape)
    square = np.zeros(lam.shape)
    nodes = np.arange(_FIRST_NODE, float(last_node[-1]) + _STEP, _STEP)
    done = np.searchsorted(last_node + _STEP, nodes, side="right").tolist()
    for y, first in zip(nodes, done, strict=True):
        left = slice(first, None)
        ex, la = extra[left], lam[left]
        scaled = np.exp(y - np.exp(-y))
        t = scaled / rate[left]
        h = -np.expm1(-t)
        g = 1.0 - h
        q = 1.0 + ex * h
        weight = np.exp(-half_total[left] * t - half_lam[left] * h - b[left] * np.log1p(ex * h))
        weight *= scaled * (1.0 + np.exp(-y))
        lean = h / q
        tilt = drift_x[left] + la * (1.0 - ex * g)
        mean[left] += weight * (v1[left] * ex * lean + la * g)
        shift[left] += weight * lean * tilt
        spread = spread_y[left] / (q * q) + v2[left] * v2[left] * (v1[left] + 2.0 * la * g)
        square[left] += weight * h * (2.0 * spread + (v2[left] * lean * tilt) ** 2)
    scale = _STEP / rate
    mean *= 0.5 * scale
    shift *= 0.5 * scale * v2 / size
    square *= 0.25 * scale / (size * size)
    return mean, (n / v2) ** 2 * (square - shift * shift)


def cohens_f_moments(lam: ArrayLike, df1: ArrayLike, df2: ArrayLike) -> tuple[Floats, Floats]:
    """Mean and variance of f = sqrt(df1 F/df2) = sqrt(eta^2/(1 - eta^2)), arrays of the broadcast shape.

    `lam` is the non-centrality (>= 0). The variance is infinite for df2 <= 2, the mean for df2 <= 1.
    NaN where an input is NaN, infinite or out of its range.
    """
    (m, v1, v2), shape, valid = broadcast_rows(lam, df1, df2, positive=(1, 2))
    mean = np.full(valid.shape, np.nan)
    variance = np.full(valid.shape, np.nan)
    inside = m >= 0
    rows = np.flatnonzero(valid)[inside]
    m, v1, v2 = m[inside], v1[inside], v2[inside]
    with np.errstate(all="ignore"):
        root_mean, root_variance = _root_moments(m, v1)
        b = 0.5 * v2
        inverse_root = np.exp(-log_gamma_ratio(b - 0.5, 0.5)) / np.sqrt(2.0)  # E[Y^-1/2]
        inverse = 1.0 / (v2 - 2.0)  # E[1/Y]
        mean[rows] = np.where(v2 > 1.0, root_mean * inverse_root, np.inf)
        value = inverse * (root_variance + root_mean**2 * _inverse_root_share(b))
        variance[rows] = np.where(v2 > 2.0, value, np.inf)
    return mean.reshape(shape), variance.reshape(shape)


def _root_moments(lam: Floats, v1: Floats) -> tuple[Floats, Floats]:
    """Mean and variance of sqrt(X), X noncentral chi square: a Poisson mixture of central ones."""
    mean = np.empty(lam.shape)
    variance = np.empty(lam.shape)
    order = np.argsort(lam, kind="stable")
    split = int(np.searchsorted(lam[order], 2.0 * _SUM_END))
    for begin in range(0, split, _CHUNK):
        rows = order[begin : min(begin + _CHUNK, split)]
        mean[rows], variance[rows] = _root_by_sum(0.5 * lam[rows], 0.5 * v1[rows])
    for begin in range(split, lam.size, _CHUNK):
        rows = order[begin : begin + _CHUNK]
        mean[rows], variance[rows] = _root_by_rule(0.5 * lam[rows], 0.5 * v1[rows])
    return mean, variance


def _root_by_sum(m: Floats, a: Floats) -> tuple[Floats, Floats]:
    weight = np.exp(-m)
    root = np.sqrt(2.0) * np.exp(log_gamma_ratio(a, 0.5))
    total = np.zeros(m.shape)
    mean = np.zeros(m.shape)
    for j, left in poisson_terms(m):
        w, r = weight[left], root[left]
        total[left] += w
        mean[left] += w * r
        r *= (a[left] + (j + 0.5)) / (a[left] + j)
        w *= m[left] / (j + 1.0)
    mean /= total
    return mean, 2.0 * (a + m) - mean * mean


def _root_by_rule(m: Floats, a: Floats) -> tuple[Floats, Floats]:
    """The count treated as continuous: the trapezoidal rule is exact to e^-70 for so smooth an integrand.

    Root means and variances are taken about the root mean at the average count, so that no digits cancel.
    """
    inner_0 = _root_variance(a + m)
    root_0 = np.sqrt(2.0 * (a + m) - inner_0)
    total = np.zeros(m.shape)
    first = np.zeros(m.shape)
    second = np.zeros(m.shape)
    inner_mean = np.zeros(m.shape)
    for node in _POISSON_NODES:
        u = node / np.sqrt(m)
        count = m * (1.0 + u)
        deviance = m * ((1.0 + u) * np.log1p(u) - u)
        weight = np.exp(-deviance - stirling_rest(count)) / np.sqrt(1.0 + u)
        inner = _root_variance(a + count)
        root = np.sqrt(2.0 * (a + count) - inner)
        step = (2.0 * m * u - (inner - inner_0)) / (root + root_0)
        total += weight
        first += weight * step
        second += weight * step * step
        inner_mean += weight * inner
    first /= total
    return root_0 + first, (inner_mean + second) / total - first * first


def _root_variance(z: Floats) -> Floats:
    """Variance of the root of a central chi square on 2z degrees of freedom; near 1/2."""
    return -2.0 * z * np.expm1(_half_step_defect(z))


def _half_step_defect(z: Floats) -> Floats:
    """2 ln Gamma(z + 1/2) - 2 ln Gamma(z) - ln z, about -1/(4z), accurate relative to itself."""
    big = np.maximum(z, 12.0)
    y = 1.0 / (big * big)
    tail = 1 / 96 - y * (1 / 320 - y * (17 / 7168 - y * (31 / 9216 - y * (691 / 90112 - y * 5461 / 212992))))
    series = (y * tail - 0.25) / big
    plain = 2.0 * (special.gammaln(z + 0.5) - special.gammaln(z)) - np.log(z)
    return np.where(z < 12.0, plain, series)


def _inverse_root_share(b: Floats) -> Floats:
    """Var(Y^-1/2)/E[1/Y] = 1 - (b - 1)(Gamma(b - 1/2)/Gamma(b))^2 for chi square Y on 2b > 2 df."""
    z = b - 0.5
    return -np.expm1(np.log1p(-0.5 / z) - _half_step_defect(z))


def small_sample_factor(df: ArrayLike) -> Floats:
    """J = Gamma(df/2)/(sqrt(df/2) Gamma((df - 1)/2)), which makes d unbiased (Hedges 1981) [2]_.

    Exact, about 1 - 3/(4 df - 1); relative error below 1e-14 for any df. NaN where df <= 1: d has no mean.
    """
    v = np.asarray(df, dtype=np.float64)
    with np.errstate(all="ignore"):
        factor = np.exp(0.5 * _half_step_defect(0.5 * v - 0.5) + 0.5 * np.log1p(-1.0 / v))
    return np.where((v > 1.0) & np.isfinite(v), factor, np.nan)


def cohens_d_moments(
    delta: ArrayLike, inverse_effective_n: ArrayLike, df: ArrayLike
) -> tuple[Floats, Floats]:
    r"""Mean and variance of d = sqrt(1/ñ) t for a population difference delta (Hedges 1981).

    Mean delta/J and variance df/(df - 2) (1/ñ + delta^2) - delta^2/J^2.

    Parameters
    ----------
    delta, inverse_effective_n, df : array_like of float, broadcast against each other
        Population standardised difference, 1/ñ (1/n1 + 1/n2 for two groups; > 0), degrees of freedom of the
        standardiser (> 0).

    Returns
    -------
    mean, variance : arrays of the broadcast shape
        The mean is NaN for df <= 1; the variance is infinite for df <= 2. NaN where an input is NaN or
        infinite, or 1/ñ or df is not positive.
    """
    (d, inverse_n, v), shape, valid = broadcast_rows(delta, inverse_effective_n, df, positive=(1, 2))
    mean = np.full(valid.shape, np.nan)
    variance = np.full(valid.shape, np.nan)
    with np.errstate(all="ignore"):
        mean[valid] = d / small_sample_factor(v)
        value = v / (v - 2.0) * (inverse_n + d * d * _inverse_root_share(0.5 * v))
        variance[valid] = np.where(v > 2.0, value, np.inf)
    return mean.reshape(shape), variance.reshape(shape)


def hedges_g_variance(delta: ArrayLike, inverse_effective_n: ArrayLike, df: ArrayLike) -> Floats:
    """Variance of g = J d, J^2 times that of d; arguments as in `cohens_d_moments`, NaN for df <= 1."""
    variance = cohens_d_moments(delta, inverse_effective_n, df)[1]
    return np.asarray(small_sample_factor(df) ** 2 * variance)


def large_sample_eta_variance(eta_squared: ArrayLike, df1: ArrayLike, n_total: ArrayLike) -> Floats:
    """4 R² (1 - R²)² (N - df1 - 1)²/((N² - 1)(N + 3)) with R² = eta squared (Olkin & Finn 1995) [3]_.

    Arrays broadcast. It tends to 0 with R², where the exact variance does not. NaN where an input is NaN or
    N <= 1.
    """
    r2, v1, n = (np.asarray(one, dtype=np.float64) for one in (eta_squared, df1, n_total))
    with np.errstate(all="ignore"):
        value = 4.0 * r2 * (1.0 - r2) ** 2 * (n - v1 - 1.0) ** 2 / ((n * n - 1.0) * (n + 3.0))
        return np.where(n > 1.0, value, np.nan)
