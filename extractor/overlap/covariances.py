"""Covariances of two effects that share participants: the published formulas, as functions of arrays.

For standardised mean differences d1 = sum w_j M_j / s1 and d2 = sum u_k M_k / s2 over groups that both rows have,

    Cov(d1, d2) = rho sum w_j u_j / n_j + rho² d1 d2 n_shared / (2 N1 N2)

where n_shared counts the participants behind both standard deviations, N1 and N2 those behind each, and rho is the
correlation of the two outcomes within the groups, 1 for one outcome. It contains the large-sample formulas of Gleser &
Olkin (2009): contrasts of one analysis of variance share its whole error term, so that the last factor is 1 / (2N),
and with one control group the sum is 1 / n_C; for two outcomes of the same groups it is
rho (1/n1 + 1/n2) + rho² d1 d2 / (2N). For two comparisons that share only the control group, each with its own pooled
standard deviation, the last factor follows by the delta method from Cov(s1², s2²).
"""

from __future__ import annotations

import numpy as np

from extractor.table import FloatArray


def contrast_covariance(
    weighted: FloatArray,
    d_one: FloatArray,
    d_two: FloatArray,
    n_shared: FloatArray,
    n_one: FloatArray,
    n_two: FloatArray,
    rho: FloatArray | float = 1.0,
) -> FloatArray:
    """Large-sample covariance of two standardised contrasts; all arguments of one shape.

    Parameters
    ----------
    weighted : sum over the shared groups of w_j u_j / n_j.
    n_shared, n_one, n_two : participants behind both standard deviations, and behind each.
    rho : correlation of the two outcomes; 1 for one outcome.

    Source: Gleser & Olkin (2009), and the delta method where only some groups are shared.
    """
    return np.asarray(rho * weighted + rho**2 * d_one * d_two * n_shared / (2 * n_one * n_two))


def difference_covariance(
    weighted: FloatArray, sd_one: FloatArray, sd_two: FloatArray, rho: FloatArray | float = 1.0
) -> FloatArray:
    """Covariance of two contrasts of raw means with the SDs s1 and s2: rho s1 s2 sum w_j u_j / n_j.

    Exact for the true SDs: the covariance of two linear combinations of independent means.
    """
    return np.asarray(rho * sd_one * sd_two * weighted)


def correlation_covariance(r_one: FloatArray, r_two: FloatArray, rho: FloatArray | float) -> FloatArray:
    """N times the large-sample covariance of the correlations of two outcomes with one variable, here the groups.

    Parameters
    ----------
    rho : correlation of the two outcomes within the groups; that over all participants is
        rho sqrt((1 - r1²)(1 - r2²)) + r1 r2, since rho is their partial correlation given the groups.

    Source: Pearson & Filon (1898); Olkin & Siotani (1976); Steiger (1980), equation for one variable in common.
    """
    overall = rho * np.sqrt((1 - r_one**2) * (1 - r_two**2)) + r_one * r_two
    squares = r_one**2 + r_two**2
    return np.asarray(overall * (1 - squares) - r_one * r_two * (1 - squares - overall**2) / 2)


def logit_covariance(one: FloatArray, two: FloatArray, phi: FloatArray | float = 1.0) -> FloatArray:
    """Covariance of the log odds of two outcomes in one group: phi n / sqrt(a1 b1 a2 b2).

    Parameters
    ----------
    one, two : participants with and without each outcome, shape (..., 2), both of the same n participants.
    phi : correlation of the two outcomes in the group; 1 for one outcome, which gives 1/a + 1/b.

    Source: Gleser & Olkin (2009); Wei & Higgins (2013) for two outcomes.
    """
    return np.asarray(phi * one.sum(axis=-1) / np.sqrt(one.prod(axis=-1) * two.prod(axis=-1)))
