"""Confidence limits of the non-centrality of F and t, by inverting their distribution functions.

The limits of a non-centrality are the values at which the observed statistic sits exactly at the upper or
the lower tail probability of the noncentral distribution [1]_ [2]_ [3]_.

The distribution function comes from one of two representations:

* below ``_SERIES_END`` the Poisson mixture of incomplete beta functions, summed with recurrences;
* above it a contour integral. With X noncentral chi square on df1 degrees of freedom and Y chi square on df2,
  P(F' > f) = P(X - rho Y > 0), rho = df1 f / df2, is the Laplace inversion integral of the moment generating
  function of X - rho Y. The substitution v = 2s / (1 - 2s) moves its essential singularity to infinity, so
  that a parabola through the saddle point, opening to the left, needs few nodes of the trapezoidal rule
  whatever the size of the non-centrality.

References
----------
.. [1] Steiger & Fouladi (1997), Noncentrality interval estimation and the evaluation of statistical models.
.. [2] Smithson (2001), Educational and Psychological Measurement 61, 605-632.
.. [3] Cumming & Finch (2001), Educational and Psychological Measurement 61, 532-574.
"""

from collections.abc import Callable, Iterator
from typing import TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

Floats: TypeAlias = NDArray[np.float64]
Indices: TypeAlias = NDArray[np.intp]
# from the unknown and its row numbers to the probability and its derivative in the unknown
Distribution: TypeAlias = Callable[[Floats, Indices], tuple[Floats, Floats]]

_CHUNK = 2048  # rows worked on at once: the arrays of a chunk stay in the processor's cache
_SERIES_END = 600.0  # non-centrality above which the contour costs less than the series
# The contour's pole counts _POLE_ORDER times in placing it, _BEND_ORDER times in bending it: tuned until the
# distribution function was within 1e-12 for all df and probabilities. The step is in units of its own spread.
_POLE_ORDER = 6.0
_BEND_ORDER = 2.5
_NODE_STEP = 0.5
_NODES = 34
_SADDLE_STEPS = 30
_SIGNED_LIMIT = 9.0  # from here on P(T < 0) < 2e-19, so T and its square have the same distribution function
_MAX_STEPS = 200


def f_noncentrality_limits(
    f: ArrayLike, df1: ArrayLike, df2: ArrayLike, level: float = 0.95
) -> tuple[Floats, Floats]:
    """Limits of the non-centrality lambda, given an observed F.

    Parameters
    ----------
    f, df1, df2 : array_like of float, broadcast against each other
        The statistic and its degrees of freedom (positive, not necessarily whole).
    level : float
        Two-sided confidence level, strictly between 0 and 1.

    Returns
    -------
    low, high : arrays of the broadcast shape
        low solves P(F' >= f) = (1 - level)/2, high solves P(F' <= f) = (1 - level)/2, with F' noncentral F.
        A limit is 0 where no lambda >= 0 solves its equation, which includes f <= 0. NaN where an input is
        NaN or infinite or a df is not positive. Error below 1e-9 max(1, lambda), df1 to 50, df2 and F to 1e6.

    Raises
    ------
    ValueError
        If `level` lies outside (0, 1).
    """
    tail = _tail(level)
    (f_rows, v1, v2), shape, valid = broadcast_rows(f, df1, df2, positive=(1, 2))
    low, high = np.full(valid.shape, np.nan), np.full(valid.shape, np.nan)
    with np.errstate(all="ignore"):
        low[valid] = _invert_f(f_rows, v1, v2, 1.0 - tail)
        high[valid] = _invert_f(f_rows, v1, v2, tail)
    return low.reshape(shape), high.reshape(shape)


def t_noncentrality_limits(t: ArrayLike, df: ArrayLike, level: float = 0.95) -> tuple[Floats, Floats]:
    """Limits of the non-centrality of t, given an observed t.

    Parameters
    ----------
    t, df : array_like of float, broadcast against each other
        The statistic (signed) and its degrees of freedom (positive, not necessarily whole).
    level : float
        Two-sided confidence level, strictly between 0 and 1.

    Returns
    -------
    low, high : arrays of the broadcast shape
        low solves P(T' >= t) = (1 - level)/2, high solves P(T' <= t) = (1 - level)/2, with T' noncentral t.
        Divided by the root of the effective sample size they are the limits of the standardised mean
        difference. NaN where an input is NaN or infinite or df is not positive. As accurate as those of F.

    Raises
    ------
    ValueError
        If `level` lies outside (0, 1).
    """
    tail = _tail(level)
    (t_rows, v), shape, valid = broadcast_rows(t, df, positive=(1,))
    low, high = np.full(valid.shape, np.nan), np.full(valid.shape, np.nan)
    with np.errstate(all="ignore"):
        size = np.abs(t_rows)
        near = _invert_t(size, v, 1.0 - tail)
        far = _invert_t(size, v, tail)
        negative = t_rows < 0
        low[valid] = np.where(negative, -far, near)
        high[valid] = np.where(negative, -near, far)
    return low.reshape(shape), high.reshape(shape)


def broadcast_rows(
    *inputs: ArrayLike, positive: tuple[int, ...]
) -> tuple[list[Floats], tuple[int, ...], NDArray[np.bool_]]:
    """Broadcast `inputs` and keep the rows that are finite, and above 0 at the `positive` positions.

    Returns the kept values of each input (1-D), the broadcast shape, and the flat mask of the kept rows.
    """
    arrays = np.broadcast_arrays(*(np.asarray(one, dtype=np.float64) for one in inputs))
    flat = [one.ravel() for one in arrays]
    valid = np.ones(flat[0].shape, dtype=np.bool_)
    for position, one in enumerate(flat):
        valid &= np.isfinite(one)
        if position in positive:
            valid &= one > 0
    return [one[valid] for one in flat], arrays[0].shape, valid


def log_gamma_ratio(x: Floats, shift: Floats | float) -> Floats:
    """ln Gamma(x + shift) - ln Gamma(x) for x > 0 and shift >= 0, without the cancellation at large x.

    From x = 15 on it is the difference of two Stirling series with the large terms combined by hand.
    """
    with np.errstate(all="ignore"):
        big = np.maximum(x, 15.0)
        series = (
            (big - 0.5) * np.log1p(shift / big)
            - shift
            + shift * np.log(big + shift)
            + (stirling_rest(big + shift) - stirling_rest(big))
        )
        plain = special.gammaln(x + shift) - special.gammaln(x)
    return np.where(x < 15.0, plain, series)


def stirling_rest(x: Floats) -> Floats:
    """ln Gamma(x) minus (x - 1/2) ln x - x + ln(2 pi)/2; the first term left out is below 1e-15 at x = 15."""
    y = 1.0 / (x * x)
    return (1 / 12 - y * (1 / 360 - y * (1 / 1260 - y * (1 / 1680 - y * (1 / 1188 - y * 691 / 360360))))) / x


def _tail(level: float) -> float:
    if not 0.0 < level < 1.0:
        raise ValueError(f"a confidence level lies strictly between 0 and 1, not {level!r}")
    return (1.0 - level) / 2.0


# ---- noncentral F ------------------------------------------------------------------------------


def _invert_f(f: Floats, v1: Floats, v2: Floats, p: float) -> Floats:
    """The lambda with P(F' <= f) = p, or 0."""
    a, b, rho = v1 / 2.0, v2 / 2.0, v1 * np.maximum(f, 0.0) / v2
    central, first_term = _beta_start(a, b, rho)
    solvable = np.flatnonzero((rho > 0) & (central > p))
    answer = np.zeros(f.shape)
    if solvable.size == 0:
        return answer
    a, b, rho, central, first_term = (one[solvable] for one in (a, b, rho, central, first_term))

    # sqrt(lambda + df1/2) makes the probability nearly normal with constant spread, so Newton steps are short
    def distribution(root: Floats, rows: Indices) -> tuple[Floats, Floats]:
        lam = np.maximum(root * root - a[rows], 0.0)
        p_now, slope = _f_distribution(lam, a[rows], b[rows], rho[rows], central[rows], first_term[rows])
        return p_now, slope * 2.0 * root

    start = _start_f(a, b, rho, p)
    root = _solve(distribution, p, np.sqrt(start + a), np.sqrt(a), np.full(a.shape, np.inf))
    answer[solvable] = np.maximum(root * root - a, 0.0)
    return answer


def _beta_start(a: Floats, b: Floats, rho: Floats) -> tuple[Floats, Floats]:
    """I_y(a, b) at y = rho/(1 + rho), and I_y(a, b) - I_y(a + 1, b) = y^a (1 - y)^b / (a B(a, b))."""
    log_beta = special.gammaln(a) - log_gamma_ratio(b, a)
    first_term = np.exp(-a * np.log1p(1.0 / rho) - b * np.log1p(rho) - log_beta) / a
    # from the smaller of y and 1 - y, whose rounding matters less
    flip = rho > 1.0
    first, second, x = np.where(flip, b, a), np.where(flip, a, b), np.where(flip, 1.0, rho) / (1.0 + rho)
    value = special.betainc(first, second, x)
    return np.where(flip, 1.0 - value, value), first_term


def _start_f(a: Floats, b: Floats, rho: Floats, p: float) -> Floats:
    """A rough lambda: the square-root normal approximation of noncentral F, solved for lambda."""
    z = special.ndtri(p)
    observed = np.sqrt(rho * (4.0 * b - 1.0).clip(0.5))
    ratio = np.full(a.shape, 1.5)  # (df1 + 2 lambda) / (df1 + lambda), between 1 and 2
    lam = np.zeros(a.shape)
    for _ in range(2):
        centre = (observed - z * np.sqrt(rho + ratio)).clip(0.0)
        lam = ((centre * centre + ratio) / 2.0 - 2.0 * a).clip(0.0)
        ratio = 2.0 * (a + lam) / (2.0 * a + lam)
    # with few df2 the denominator decides: df1 + lambda is about rho times a quantile of chi square
    few = b < 2.5
    quantile = 2.0 * special.gammaincinv(b[few], 1.0 - p)
    lam[few] = (rho[few] * quantile - 2.0 * a[few]).clip(0.0)
    return lam


def _f_distribution(
    lam: Floats, a: Floats, b: Floats, rho: Floats, central: Floats, first_term: Floats
) -> tuple[Floats, Floats]:
    """P(F' <= f) and its derivative in lambda."""
    p, slope = np.empty(lam.shape), np.empty(lam.shape)
    order = np.argsort(lam, kind="stable")
    split = int(np.searchsorted(lam[order], _SERIES_END))
    for begin in range(0, split, _CHUNK):
        rows = order[begin : min(begin + _CHUNK, split)]
        p[rows], slope[rows] = _f_series(
            lam[rows] / 2.0, a[rows], b[rows], rho[rows], central[rows], first_term[rows]
        )
    for begin in range(split, lam.size, _CHUNK):
        rows = order[begin : begin + _CHUNK]
        p[rows], slope[rows] = _f_contour(lam[rows] / 2.0, a[rows], b[rows], rho[rows])
    return p, slope


def _f_series(
    mean: Floats, a: Floats, b: Floats, rho: Floats, central: Floats, first_term: Floats
) -> tuple[Floats, Floats]:
    """Poisson mixture of I_y(a + j, b), means ascending. No part exceeds 1: the error is near machine precision."""
    y = rho / (1.0 + rho)
    weight, beta, term = np.exp(-mean), central.copy(), first_term.copy()
    p, slope = np.zeros(mean.shape), np.zeros(mean.shape)
    for j, left in poisson_terms(mean):
        w, be, t = weight[left], beta[left], term[left]
        p[left] += w * be
        slope[left] += w * t
        be -= t
        t *= y[left] * (a[left] + b[left] + j) / (a[left] + (j + 1.0))
        w *= mean[left] / (j + 1.0)
    return p, slope * -0.5


def poisson_terms(mean: Floats) -> Iterator[tuple[int, slice]]:
    """Counts from 0 with the rows that still need them: those whose Poisson tail is not yet below 1e-16.

    ``mean`` is ascending. Each row's own mean decides, so that its sum does not depend on the rows beside it.
    """
    ends = (mean + 8.3 * np.sqrt(mean) + 18.0).astype(np.int64)
    done = np.searchsorted(ends, np.arange(int(ends[-1])), side="right").tolist()
    for j, first in enumerate(done):
        yield j, slice(first, None)


def _f_contour(mean: Floats, a: Floats, b: Floats, rho: Floats) -> tuple[Floats, Floats]:
    """The same from the inversion integral, on a parabola to the right of its pole at 0."""
    tau = _saddle_point(mean, a, b, rho)
    # derivatives of the exponent at the saddle point; the parabola follows its path of steepest descent
    u, q = 1.0 / (1.0 - tau), rho / (1.0 + rho * tau)
    second = 2.0 * mean * u**3 + a * u**2 + b * q**2 + _POLE_ORDER / tau**2
    third = 6.0 * mean * u**4 + 2.0 * a * u**3 - 2.0 * b * q**3 - 2.0 * _BEND_ORDER / tau**3
    centre = tau * u
    spread = u * u / np.sqrt(second)
    bend = np.minimum(third / (6.0 * second * u * u) - 1.0 / u, 0.0) * spread**2
    above, slope = np.zeros(mean.shape), np.zeros(mean.shape)
    for node in range(_NODES + 1):
        theta = node * _NODE_STEP
        re, im = centre + bend * theta**2, spread * theta
        size = re * (2.0 + re) + im * im  # |1 + v|^2 - 1
        modulus = 1.0 + size
        z_re, z_im = rho * (size - re) / modulus, rho * im / modulus  # rho v / (1 + v)
        growth = mean * re + (a - 1.0) * 0.5 * np.log1p(size)
        growth -= b * 0.5 * np.log1p(z_re * (2.0 + z_re) + z_im * z_im)
        angle = mean * im + (a - 1.0) * np.arctan2(im, 1.0 + re) - b * np.arctan2(z_im, 1.0 + z_re)
        height = np.exp(growth) * (0.5 if node == 0 else 1.0)
        turn = 2.0 * bend * theta  # dv/dtheta is i (spread - i turn)
        real = height * (np.cos(angle) * spread + np.sin(angle) * turn)
        imaginary = height * (np.sin(angle) * spread - np.cos(angle) * turn)
        slope += real
        above += (real * re + imaginary * im) / (re * re + im * im)
    return 1.0 - above * (_NODE_STEP / np.pi), slope * (-0.5 * _NODE_STEP / np.pi)


def _saddle_point(mean: Floats, a: Floats, b: Floats, rho: Floats) -> Floats:
    """Where on (0, 1), in tau = v/(1 + v), the contour crosses the real axis.

    It is the minimum of the integrand with its pole raised to _POLE_ORDER, which keeps the contour clear of
    the pole at every probability. Any nearby point serves, for the integral does not depend on it.
    """
    drift, width = mean + a - b * rho, 2.0 * mean + a + b * rho**2
    inner = np.zeros(mean.shape)
    outer = np.minimum(1.0, (b + _POLE_ORDER) / mean)  # the derivative is positive there
    tau = (np.sqrt(drift * drift + 4.0 * _POLE_ORDER * width) - drift) / (2.0 * width)
    tau = np.where(tau < outer, tau, 0.5 * outer)
    for _ in range(_SADDLE_STEPS):
        u, q = 1.0 / (1.0 - tau), rho / (1.0 + rho * tau)
        first = mean * u * u + a * u - b * q - _POLE_ORDER / tau
        second = 2.0 * mean * u**3 + a * u**2 + b * q**2 + _POLE_ORDER / tau**2
        outer = np.where(first > 0, tau, outer)
        inner = np.where(first > 0, inner, tau)
        far = np.abs(first) > 0.05 * np.sqrt(second)
        if not far.any():
            break
        moved = tau - first / second
        inside = (moved > inner) & (moved < outer)
        tau = np.where(far, np.where(inside, moved, 0.5 * (inner + outer)), tau)
    return tau


# ---- noncentral t ------------------------------------------------------------------------------


def _invert_t(t: Floats, v: Floats, p: float) -> Floats:
    """The delta with P(T' <= t) = p, for t >= 0."""
    half, ratio = np.full(t.shape, 0.5), t * t / v
    central, first_term = _beta_start(half, v / 2.0, ratio)
    border = np.full(t.shape, _SIGNED_LIMIT**2)
    beyond = _f_distribution(border, half, v / 2.0, ratio, central, first_term)[0] > p
    answer = np.empty(t.shape)
    large = np.flatnonzero(beyond)
    answer[large] = np.sqrt(_invert_f(t[large] ** 2, np.ones(large.shape), v[large], p))
    small = np.flatnonzero(~beyond)
    if small.size:
        t, v, ratio, central, first_term = (one[small] for one in (t, v, ratio, central, first_term))
        z = float(special.ndtri(p))

        def distribution(delta: Floats, rows: Indices) -> tuple[Floats, Floats]:
            return _t_distribution(delta, v[rows] / 2.0, ratio[rows], central[rows], first_term[rows])

        low = np.full(t.shape, -abs(z) - 1.0)  # P(T' <= t) >= P(T' <= 0) = Phi(-delta) > p there
        high = np.full(t.shape, max(_SIGNED_LIMIT, abs(z)) + 0.5)
        start = t * (1.0 - 0.25 / v) - z * np.sqrt(1.0 + 0.5 * ratio)
        answer[small] = _solve(distribution, p, np.clip(start, low + 0.5, high - 0.25), low, high)
    return answer


def _t_distribution(
    delta: Floats, b: Floats, ratio: Floats, central: Floats, first_term: Floats
) -> tuple[Floats, Floats]:
    """P(T' <= t) for t >= 0 and its derivative in delta, from two interleaved Poisson-like mixtures."""
    p, slope = np.empty(delta.shape), np.empty(delta.shape)
    order = np.argsort(np.abs(delta), kind="stable")
    for begin in range(0, delta.size, _CHUNK):
        rows = order[begin : begin + _CHUNK]
        p[rows], slope[rows] = _t_series(delta[rows], b[rows], ratio[rows], central[rows], first_term[rows])
    return p, slope


def _t_series(
    delta: Floats, b: Floats, ratio: Floats, central: Floats, first_term: Floats
) -> tuple[Floats, Floats]:
    mean, x = 0.5 * delta * delta, ratio / (1.0 + ratio)
    left = np.exp(-b * np.log1p(ratio))  # (1 - x)^b
    even_weight, even_beta, even_term = np.exp(-mean), central.copy(), first_term.copy()
    odd_weight = even_weight * delta * np.sqrt(2.0 / np.pi)
    odd_beta, odd_term = -np.expm1(-b * np.log1p(ratio)), b * x * left
    p, slope = np.zeros(delta.shape), np.zeros(delta.shape)
    for j, rest in poisson_terms(mean):
        even, odd = even_weight[rest], odd_weight[rest]
        p[rest] += even * even_beta[rest] + odd * odd_beta[rest]
        slope[rest] += even * even_term[rest] + odd * odd_term[rest]
        even_beta[rest] -= even_term[rest]
        odd_beta[rest] -= odd_term[rest]
        even_term[rest] *= x[rest] * (b[rest] + (j + 0.5)) / (j + 1.5)
        odd_term[rest] *= x[rest] * (b[rest] + (j + 1.0)) / (j + 2.0)
        even *= mean[rest] / (j + 1.0)
        odd *= mean[rest] / (j + 1.5)
    density = np.exp(-mean) / np.sqrt(2.0 * np.pi)
    return special.ndtr(-delta) + 0.5 * p, -density * left - 0.5 * delta * slope


# ---- root finding ------------------------------------------------------------------------------


def _solve(distribution: Distribution, p: float, start: Floats, low: Floats, high: Floats) -> Floats:
    """Root of P(x) = p for decreasing P: Newton on the normal-quantile scale inside a shrinking bracket."""
    z = float(special.ndtri(p))
    x, low, high = start.copy(), low.copy(), high.copy()
    active = np.arange(x.size)
    for _ in range(_MAX_STEPS):
        now = x[active]
        p_now, slope = distribution(now, active)
        low[active] = np.where(p_now > p, now, low[active])
        high[active] = np.where(p_now > p, high[active], now)
        bottom, top = low[active], high[active]
        z_now = special.ndtri(p_now)
        step = (z_now - z) * np.exp(-0.5 * z_now * z_now) / (np.sqrt(2.0 * np.pi) * slope)
        moved = now - step
        newton = (moved >= bottom) & (moved <= top)
        halved = np.where(np.isinf(top), 2.0 * now + 1.0, 0.5 * (bottom + top))
        x[active] = np.where(newton, moved, halved)
        scale = 1e-7 * np.maximum(np.abs(now), 1.0)
        closed = top - bottom < 1e-6 * scale
        active = active[~((newton & (np.abs(step) < scale)) | closed)]
        if active.size == 0:
            return x
    x[active] = np.nan
    return x
