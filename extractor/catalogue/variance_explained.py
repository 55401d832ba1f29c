"""Proportions of variance explained, and Cohen's f, from F and back, where one factor is the whole model.

In a one-way design between groups classical, partial and generalized eta squared are the same number, and so are
classical and partial omega squared.
"""

from __future__ import annotations

import numpy as np

from extractor.catalogue.relation import ONE_FACTOR, PARTIAL, FloatArray, relation

_ETA = "SS_effect / SS_total with F = MS_effect / MS_error (textbook identity)"
_OMEGA = "Hays (1963), omega squared of the one-way fixed-effects design"
_EPSILON = "Kelley (1935), epsilon squared"
_F = "Cohen (1988), f = sqrt(eta² / (1 - eta²))"
_SAME = "one-way design between groups: the effect and the error term make up the total (identity)"


@relation(
    gives="eta_squared",
    rising=["f_value", "df_effect"],
    falling=["df_error"],
    designs=ONE_FACTOR,
    source=_ETA,
)
def eta_squared_from_f(f_value: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    """η² = df1·F / (df1·F + df2)."""
    explained = df_effect * f_value
    return explained / (explained + df_error)


@relation(
    gives="f_value",
    rising=["eta_squared", "df_error"],
    falling=["df_effect"],
    designs=ONE_FACTOR,
    source=_ETA,
)
def f_from_eta_squared(eta_squared: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    """F = η² / (1 - η²) · df2 / df1."""
    return eta_squared / (1 - eta_squared) * df_error / df_effect


@relation(
    gives="omega_squared",
    rising=["f_value"],
    exact=["df_effect", "n_total"],
    designs=ONE_FACTOR,
    source=_OMEGA,
)
def omega_squared_from_f(f_value: FloatArray, df_effect: FloatArray, n_total: FloatArray) -> FloatArray:
    """ω² = df1·(F - 1) / (df1·(F - 1) + N)."""
    excess = df_effect * (f_value - 1)
    return excess / (excess + n_total)


@relation(
    gives="f_value",
    rising=["omega_squared"],
    either=["df_effect"],
    exact=["n_total"],
    accuracy=1e-11,
    designs=ONE_FACTOR,
    source=_OMEGA,
)
def f_from_omega_squared(omega_squared: FloatArray, df_effect: FloatArray, n_total: FloatArray) -> FloatArray:
    """F = 1 + ω² / (1 - ω²) · N / df1."""
    return 1 + omega_squared / (1 - omega_squared) * n_total / df_effect


@relation(
    gives="epsilon_squared",
    rising=["f_value"],
    either=["df_error"],
    exact=["df_effect"],
    designs=ONE_FACTOR,
    source=_EPSILON,
)
def epsilon_squared_from_f(f_value: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    """ε² = df1·(F - 1) / (df1·F + df2)."""
    # 1 - (df1 + df2) / (df1·F + df2), written so that nothing cancels near F = 1
    return df_effect * (f_value - 1) / (df_effect * f_value + df_error)


@relation(
    gives="f_value",
    rising=["epsilon_squared"],
    either=["df_error"],
    exact=["df_effect"],
    accuracy=1e-11,
    designs=ONE_FACTOR,
    source=_EPSILON,
)
def f_from_epsilon_squared(
    epsilon_squared: FloatArray, df_effect: FloatArray, df_error: FloatArray
) -> FloatArray:
    """F = (df1 + ε²·df2) / (df1·(1 - ε²))."""
    return (df_effect + epsilon_squared * df_error) / (df_effect * (1 - epsilon_squared))


@relation(gives="cohens_f", rising=["eta_squared"], designs=ONE_FACTOR, source=_F)
def cohens_f_from_eta_squared(eta_squared: FloatArray) -> FloatArray:
    """f = sqrt(η² / (1 - η²))."""
    return np.sqrt(eta_squared / (1 - eta_squared))


@relation(gives="eta_squared", rising=["cohens_f"], designs=ONE_FACTOR, source=_F)
def eta_squared_from_cohens_f(cohens_f: FloatArray) -> FloatArray:
    """η² = f² / (1 + f²)."""
    return cohens_f**2 / (1 + cohens_f**2)


@relation(gives="cohens_f", rising=["f_squared"], designs=ONE_FACTOR | PARTIAL, source=_F)
def cohens_f_from_its_square(f_squared: FloatArray) -> FloatArray:
    """f = sqrt(f²)."""
    return np.sqrt(f_squared)


@relation(gives="f_squared", rising=["cohens_f"], designs=ONE_FACTOR | PARTIAL, source=_F)
def square_of_cohens_f(cohens_f: FloatArray) -> FloatArray:
    """f² = f · f."""
    return cohens_f**2


@relation(gives="partial_eta_squared", rising=["eta_squared"], designs=ONE_FACTOR, source=_SAME)
def partial_from_classical_eta(eta_squared: FloatArray) -> FloatArray:
    """η²p = η²."""
    return eta_squared


@relation(gives="eta_squared", rising=["partial_eta_squared"], designs=ONE_FACTOR, source=_SAME)
def classical_from_partial_eta(partial_eta_squared: FloatArray) -> FloatArray:
    """η² = η²p."""
    return partial_eta_squared


@relation(gives="generalized_eta_squared", rising=["eta_squared"], designs=ONE_FACTOR, source=_SAME)
def generalized_from_classical_eta(eta_squared: FloatArray) -> FloatArray:
    """η²G = η²."""
    return eta_squared


@relation(gives="eta_squared", rising=["generalized_eta_squared"], designs=ONE_FACTOR, source=_SAME)
def classical_from_generalized_eta(generalized_eta_squared: FloatArray) -> FloatArray:
    """η² = η²G."""
    return generalized_eta_squared


@relation(gives="partial_omega_squared", rising=["omega_squared"], designs=ONE_FACTOR, source=_SAME)
def partial_from_classical_omega(omega_squared: FloatArray) -> FloatArray:
    """ω²p = ω²."""
    return omega_squared


@relation(gives="omega_squared", rising=["partial_omega_squared"], designs=ONE_FACTOR, source=_SAME)
def classical_from_partial_omega(partial_omega_squared: FloatArray) -> FloatArray:
    """ω² = ω²p."""
    return partial_omega_squared
