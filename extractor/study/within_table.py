"""The analysis of variance of one within-subjects factor from condition summaries.

All participants are measured in every condition. Let V be the mean of the k variances and C the mean of the
k(k - 1)/2 covariances. Then (textbook identities)

    SS_effect   = n·Σ (M_j - GM)²
    MS_error    = V - C                     on (n - 1)(k - 1) dfs
    MS_subjects = V + (k - 1)·C             on n - 1 dfs
    SS_subjects + SS_error = (n - 1)·k·V

so that the means and standard deviations alone give the total, and with it the classical eta squared, which
for a single within factor is also the generalized one (Olejnik & Algina 2003). C needs one thing more: the
correlations, or the printed F, which says MS_error.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class WithinTable:
    """The source table of one within factor; NaN marks what needs an F or correlations that were not given.

    ss_within : SS_subjects + SS_error, the variation within conditions.
    mean_variance, mean_covariance : V and C.
    covariance_low, covariance_high : what C can be at all, given the SDs.
    intraclass : C / V; in [-1/(k - 1), 1] for all data.
    common_correlation : the correlation that, the same in all pairs, gives C with these SDs.
    omega_squared : (SS_effect - df·MS_error) / (SS_total + MS_subjects) (Dodd & Schultz 1973; locator from
        memory); negative when F < 1.
    """

    n: int
    k: int
    ss_effect: float
    ss_within: float
    ss_total: float
    df_effect: int
    df_error: int
    df_subjects: int
    ms_effect: float
    mean_variance: float
    eta_squared: float
    generalized_eta_squared: float
    covariance_low: float
    covariance_high: float
    mean_covariance: float
    intraclass: float
    common_correlation: float
    ss_subjects: float
    ss_error: float
    ms_subjects: float
    ms_error: float
    f: float
    p: float
    partial_eta_squared: float
    omega_squared: float

    @property
    def possible(self) -> bool:
        """Whether some correlations give this F with these SDs; True where F is not known.

        Only the given numbers are judged, as if they were exact: for rounded ones compare intervals of
        ``ms_error`` with [V - covariance_high, V - covariance_low].
        """
        slack = 1e-9 * self.mean_variance
        below, above = self.covariance_low - slack, self.covariance_high + slack
        return bool(np.isnan(self.mean_covariance) or below <= self.mean_covariance <= above)


def within_table(
    n: int,
    mean: ArrayLike,
    sd: ArrayLike,
    *,
    f: float | None = None,
    correlation: ArrayLike | None = None,
) -> WithinTable:
    """The source table of one within factor.

    Parameters
    ----------
    n : participants, each measured in every condition.
    mean, sd : of the conditions, shape (k,).
    f : the F of the effect on the error term condition x participant, without or with sphericity correction.
    correlation : correlation matrix of the conditions, shape (k, k); or one number taken for all pairs. One
        number is exact for two conditions; for more it is an assumption, unless it is weighted by the SDs.

    At most one of ``f`` and ``correlation`` is given.

    Raises
    ------
    ValueError
        for fewer than two participants or conditions, summaries without a number, a negative SD or F, a
        matrix that is not symmetric with ones on its diagonal, a correlation beyond 1, or when both ``f`` and
        ``correlation`` are given.
    """
    means, sds = np.asarray(mean, dtype=np.float64), np.asarray(sd, dtype=np.float64)
    _check(n, means, sds, f, correlation)
    k = len(means)
    df_effect, df_subjects = k - 1, n - 1
    df_error = df_effect * df_subjects
    ss_effect = float(n * ((means - means.mean()) ** 2).sum())
    ms_effect = ss_effect / df_effect
    variance = float((sds**2).mean())
    ss_within = df_subjects * k * variance
    ss_total = ss_effect + ss_within
    pairs = float(sds.sum() ** 2 - (sds**2).sum()) / (k * (k - 1))
    covariance = float("nan")
    if f is not None:
        covariance = variance - _ratio(ms_effect, f)
    elif correlation is not None:
        covariance = _mean_covariance(sds, np.asarray(correlation, dtype=np.float64), pairs)
    ms_error, ms_subjects = variance - covariance, variance + df_effect * covariance
    f_ratio = float(f) if f is not None else _ratio(ms_effect, ms_error)
    ss_error = df_error * ms_error
    low, high = covariance_range(sds)
    eta_squared = _ratio(ss_effect, ss_total)
    return WithinTable(
        n=n,
        k=k,
        ss_effect=ss_effect,
        ss_within=ss_within,
        ss_total=ss_total,
        df_effect=df_effect,
        df_error=df_error,
        df_subjects=df_subjects,
        ms_effect=ms_effect,
        mean_variance=variance,
        eta_squared=eta_squared,
        generalized_eta_squared=eta_squared,
        covariance_low=low,
        covariance_high=high,
        mean_covariance=covariance,
        intraclass=_ratio(covariance, variance),
        common_correlation=_ratio(covariance, pairs),
        ss_subjects=df_subjects * ms_subjects,
        ss_error=ss_error,
        ms_subjects=ms_subjects,
        ms_error=ms_error,
        f=f_ratio,
        p=float(special.betainc(df_error / 2, df_effect / 2, df_error / (df_error + df_effect * f_ratio))),
        partial_eta_squared=_ratio(ss_effect, ss_effect + ss_error),
        omega_squared=_ratio(ss_effect - df_effect * ms_error, ss_total + ms_subjects),
    )


def covariance_range(sd: ArrayLike) -> tuple[float, float]:
    """Least and greatest mean covariance of conditions with these standard deviations, shape (k,).

    Centred scores are vectors of length SD, and 2·Σ covariances = |their sum|² - Σ SD². The sum is longest
    when all point one way, and shortest when they close to a polygon; where one SD exceeds the sum of the
    others they cannot close, and the excess is left (elementary geometry; both ends occur). So C / V is never
    below -1/(k - 1), but with unequal SDs the correlation common to all pairs may honestly be.
    """
    sds = np.asarray(sd, dtype=np.float64)
    k, total, squares = len(sds), sds.sum(), (sds**2).sum()
    shortest = max(0.0, 2 * sds.max() - total)
    pairs = k * (k - 1)
    return float((shortest**2 - squares) / pairs), float((total**2 - squares) / pairs)


def _mean_covariance(sds: FloatArray, correlation: FloatArray, pairs: float) -> float:
    """Mean covariance from one correlation or a matrix; ``pairs`` is the mean of SD_i·SD_j over pairs."""
    if correlation.ndim == 0:
        return float(correlation) * pairs
    covariances = correlation * np.outer(sds, sds)
    k = len(sds)
    return float((covariances.sum() - np.trace(covariances)) / (k * (k - 1)))


def _check(
    n: int, means: FloatArray, sds: FloatArray, f: float | None, correlation: ArrayLike | None
) -> None:
    if n < 2 or n != int(n):
        raise ValueError("n is the number of participants, at least 2")
    if means.ndim != 1 or len(means) < 2 or means.shape != sds.shape:
        raise ValueError("two or more conditions are needed, each with its mean and SD")
    if not np.isfinite(means).all() or not np.isfinite(sds).all() or (sds < 0).any():
        raise ValueError("every condition needs its mean and its SD, at least 0")
    if f is not None and correlation is not None:
        raise ValueError("F and the correlations say the same: give one of them")
    if f is not None and not f >= 0:
        raise ValueError("F is at least 0")
    if correlation is not None:
        _check_correlation(np.asarray(correlation, dtype=np.float64), len(means))


def _check_correlation(correlation: FloatArray, k: int) -> None:
    if correlation.ndim not in (0, 2) or (correlation.ndim == 2 and correlation.shape != (k, k)):
        raise ValueError(f"one correlation or a matrix of shape ({k}, {k}) is needed")
    if not (np.abs(correlation) <= 1).all():
        raise ValueError("correlations lie in [-1, 1]")
    symmetric = correlation.ndim == 0 or np.array_equal(correlation, correlation.T)
    if not symmetric or not (correlation.ndim == 0 or (np.diag(correlation) == 1).all()):
        raise ValueError("a correlation matrix is symmetric and has ones on its diagonal")


def _ratio(part: float, whole: float) -> float:
    """part / whole; infinite over 0, NaN where both are 0."""
    if whole == 0:
        return float(np.sign(part)) * float("inf") if part != 0 else float("nan")
    return part / whole
