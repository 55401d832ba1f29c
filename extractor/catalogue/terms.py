"""One term of a model with several sources: F and its error term say something partial; the total needs the rest.

The other terms arrive as sums over the rows of the same analysis (``ss_others``, ``explained_by_others``, ...). No
relation here turns a partial index into a classical one without them.
"""

from __future__ import annotations

import numpy as np

from extractor.catalogue.relation import (
    FACTORIAL,
    MIXED,
    PARTIAL,
    TERMS,
    WITHIN,
    FloatArray,
    Grade,
    Interval,
    relation,
)

_PARTIAL = "partial eta squared: SS_effect / (SS_effect + SS_error) (textbook identity)"
_OMEGA = (
    "Keren & Lewis (1979); Maxwell & Delaney (2004): partial omega squared with the observations of the term"
)
_CLASSICAL = "definition of eta squared as a proportion of the total sum of squares"
_HAYS = "Hays (1963): (SS_effect - df1·MS_error) / (SS_total + MS_error)"
_GENERALIZED = "Olejnik & Algina (2003)"
_BALANCED = "cells of equal size, so that the sums of squares of the terms add up"
_ONLY = "the factor is the only one within participants; its model has no other terms"
_WHOLE = "partition of the total sum of squares into all terms and all error strata"
_COHEN = "Cohen (1988), f of one term: sqrt(partial eta² / (1 - partial eta²))"


@relation(
    gives="partial_eta_squared",
    rising=["f_value", "df_effect"],
    falling=["df_error"],
    designs=PARTIAL,
    source=_PARTIAL,
)
def partial_eta_from_f(f_value: FloatArray, df_effect: FloatArray, df_error: FloatArray) -> FloatArray:
    """η²p = df1·F / (df1·F + df2)."""
    explained = df_effect * f_value
    return explained / (explained + df_error)


@relation(
    gives="f_value",
    rising=["partial_eta_squared", "df_error"],
    falling=["df_effect"],
    designs=PARTIAL,
    source=_PARTIAL,
)
def f_from_partial_eta(
    partial_eta_squared: FloatArray, df_effect: FloatArray, df_error: FloatArray
) -> FloatArray:
    """F = η²p / (1 - η²p) · df2 / df1."""
    return partial_eta_squared / (1 - partial_eta_squared) * df_error / df_effect


@relation(
    gives="partial_eta_squared", rising=["ss_effect"], falling=["ss_error"], designs=PARTIAL, source=_PARTIAL
)
def partial_eta_from_sums(ss_effect: FloatArray, ss_error: FloatArray) -> FloatArray:
    """η²p = SS_effect / (SS_effect + SS_error)."""
    return 1 / (1 + ss_error / ss_effect)


@relation(
    gives="partial_omega_squared",
    rising=["f_value"],
    exact=["df_effect", "n_observations"],
    designs=PARTIAL,
    source=_OMEGA,
)
def partial_omega_from_f(
    f_value: FloatArray, df_effect: FloatArray, n_observations: FloatArray
) -> FloatArray:
    """ω²p = df1·(F - 1) / (df1·(F - 1) + N_obs)."""
    excess = df_effect * (f_value - 1)
    return excess / (excess + n_observations)


@relation(
    gives="f_value",
    rising=["partial_omega_squared"],
    either=["df_effect"],
    exact=["n_observations"],
    accuracy=1e-11,
    designs=PARTIAL,
    source=_OMEGA,
)
def f_from_partial_omega(
    partial_omega_squared: FloatArray, df_effect: FloatArray, n_observations: FloatArray
) -> FloatArray:
    """F = 1 + ω²p / (1 - ω²p) · N_obs / df1."""
    return 1 + partial_omega_squared / (1 - partial_omega_squared) * n_observations / df_effect


@relation(gives="cohens_f", rising=["partial_eta_squared"], designs=PARTIAL, source=_COHEN)
def cohens_f_of_term(partial_eta_squared: FloatArray) -> FloatArray:
    """f = sqrt(η²p / (1 - η²p)), of this term alone."""
    return np.sqrt(partial_eta_squared / (1 - partial_eta_squared))


@relation(gives="partial_eta_squared", rising=["cohens_f"], designs=PARTIAL, source=_COHEN)
def partial_eta_from_cohens_f(cohens_f: FloatArray) -> FloatArray:
    """η²p = f² / (1 + f²)."""
    return cohens_f**2 / (1 + cohens_f**2)


@relation(gives="eta_squared", rising=["ss_effect"], falling=["ss_total"], designs=PARTIAL, source=_CLASSICAL)
def classical_eta_from_total(ss_effect: FloatArray, ss_total: FloatArray) -> FloatArray:
    """η² = SS_effect / SS_total."""
    return ss_effect / ss_total


@relation(gives="ss_effect", rising=["eta_squared", "ss_total"], designs=PARTIAL, source=_CLASSICAL)
def effect_sum_from_classical_eta(eta_squared: FloatArray, ss_total: FloatArray) -> FloatArray:
    """SS_effect = η² · SS_total."""
    return eta_squared * ss_total


@relation(gives="ss_total", rising=["ss_effect"], falling=["eta_squared"], designs=PARTIAL, source=_CLASSICAL)
def total_from_classical_eta(ss_effect: FloatArray, eta_squared: FloatArray) -> FloatArray:
    """SS_total = SS_effect / η²."""
    return ss_effect / eta_squared


def _omega_image(
    ss_effect: Interval, df_effect: Interval, ms_error: Interval, ss_total: Interval
) -> Interval:
    """Rising in SS_effect, falling in df1 and MS_error; SS_total pulls towards zero."""
    top_low = ss_effect[0] - df_effect[1] * ms_error[1]
    top_high = ss_effect[1] - df_effect[0] * ms_error[0]
    small, large = ss_total[0] + ms_error[0], ss_total[1] + ms_error[1]
    low = np.where(top_low >= 0, top_low / large, top_low / small)
    high = np.where(top_high >= 0, top_high / small, top_high / large)
    return low, high


@relation(gives="omega_squared", image=_omega_image, designs=FACTORIAL, source=_HAYS, accuracy=1e-12)
def classical_omega_from_sums(
    ss_effect: FloatArray, df_effect: FloatArray, ms_error: FloatArray, ss_total: FloatArray
) -> FloatArray:
    """ω² = (SS_effect - df1·MS_error) / (SS_total + MS_error)."""
    return (ss_effect - df_effect * ms_error) / (ss_total + ms_error)


@relation(
    gives="eta_squared",
    rising=["f_value", "df_effect"],
    falling=["df_error", "explained_by_others"],
    designs=FACTORIAL,
    grade=Grade.ASSUMPTION,
    assumes=_BALANCED,
    source="sums of squares over MS_error: df1·F / (Σ df·F + df2), exact in balanced designs",
)
def classical_eta_from_all_fs(
    f_value: FloatArray, df_effect: FloatArray, df_error: FloatArray, explained_by_others: FloatArray
) -> FloatArray:
    """η² = df1·F / (df1·F + Σ_others df·F + df2)."""
    explained = df_effect * f_value
    return explained / (explained + explained_by_others + df_error)


@relation(
    gives="omega_squared",
    rising=["f_value"],
    either=["df_effect", "explained_by_others"],
    exact=["df_error"],
    designs=FACTORIAL,
    grade=Grade.ASSUMPTION,
    assumes=_BALANCED,
    source="Hays (1963) with all sums of squares over MS_error, exact in balanced designs",
)
def classical_omega_from_all_fs(
    f_value: FloatArray, df_effect: FloatArray, df_error: FloatArray, explained_by_others: FloatArray
) -> FloatArray:
    """ω² = df1·(F - 1) / (df1·F + Σ_others df·F + df2 + 1)."""
    explained = df_effect * f_value
    return (explained - df_effect) / (explained + explained_by_others + df_error + 1)


@relation(
    gives="ss_total",
    rising=["ss_effect", "ss_others", "ss_error"],
    designs=FACTORIAL,
    grade=Grade.ASSUMPTION,
    assumes=_BALANCED,
    source="partition of the total sum of squares, exact in balanced designs",
)
def total_from_all_terms(ss_effect: FloatArray, ss_others: FloatArray, ss_error: FloatArray) -> FloatArray:
    """SS_total = SS_effect + Σ_others SS + SS_error."""
    return ss_effect + ss_others + ss_error


@relation(
    gives="generalized_eta_squared",
    rising=["f_value", "df_effect"],
    falling=["explained_by_measured", "df_error"],
    designs=FACTORIAL,
    source=f"{_GENERALIZED}, with all sums of squares over MS_error",
)
def generalized_eta_from_all_fs(
    f_value: FloatArray, df_effect: FloatArray, df_error: FloatArray, explained_by_measured: FloatArray
) -> FloatArray:
    """η²G = df1·F / (df1·F + Σ_other measured df·F + df2)."""
    return 1 / (1 + (df_error + explained_by_measured) / (df_effect * f_value))


@relation(
    gives="generalized_eta_squared",
    rising=["ss_effect"],
    falling=["ss_measured", "ss_strata"],
    designs=TERMS,
    source=_GENERALIZED,
)
def generalized_eta_from_sums(
    ss_effect: FloatArray, ss_measured: FloatArray, ss_strata: FloatArray
) -> FloatArray:
    """η²G = SS_effect / (SS_effect + Σ_other measured SS + Σ error strata SS)."""
    return 1 / (1 + (ss_measured + ss_strata) / ss_effect)


@relation(
    gives="generalized_eta_squared",
    rising=["ss_effect"],
    falling=["ss_strata"],
    exact=["only_factor"],
    designs=WITHIN,
    grade=Grade.ASSUMPTION,
    assumes=_ONLY,
    source=_GENERALIZED,
)
def generalized_eta_of_only_factor(
    ss_effect: FloatArray, ss_strata: FloatArray, only_factor: FloatArray
) -> FloatArray:
    """η²G = SS_effect / (SS_effect + Σ error strata SS), of a single factor within participants."""
    return only_factor / (1 + ss_strata / ss_effect)


@relation(
    gives="eta_squared",
    rising=["ss_effect"],
    falling=["ss_strata"],
    exact=["only_factor"],
    designs=WITHIN,
    grade=Grade.ASSUMPTION,
    assumes=_ONLY,
    source=_CLASSICAL,
)
def classical_eta_of_only_factor(
    ss_effect: FloatArray, ss_strata: FloatArray, only_factor: FloatArray
) -> FloatArray:
    """η² = SS_effect / (SS_effect + Σ error strata SS), of a single factor within participants."""
    return only_factor / (1 + ss_strata / ss_effect)


@relation(
    gives="eta_squared",
    rising=["ss_effect"],
    falling=["ss_others", "ss_strata"],
    designs=WITHIN,
    source=_WHOLE,
)
def classical_eta_within(ss_effect: FloatArray, ss_others: FloatArray, ss_strata: FloatArray) -> FloatArray:
    """η² = SS_effect / (SS_effect + Σ_others SS + Σ error strata SS)."""
    return 1 / (1 + (ss_others + ss_strata) / ss_effect)


@relation(
    gives="eta_squared",
    rising=["ss_effect"],
    falling=["ss_others", "ss_strata"],
    designs=MIXED,
    grade=Grade.ASSUMPTION,
    assumes="groups of equal size, and no sources besides the coded terms and their error terms",
    source=_WHOLE,
)
def classical_eta_mixed(ss_effect: FloatArray, ss_others: FloatArray, ss_strata: FloatArray) -> FloatArray:
    """η² = SS_effect / (SS_effect + Σ_others SS + Σ error strata SS), groups of equal size."""
    return 1 / (1 + (ss_others + ss_strata) / ss_effect)


@relation(
    gives="ss_strata", rising=["ss_error"], designs=FACTORIAL, source="one error stratum between participants"
)
def strata_between(ss_error: FloatArray) -> FloatArray:
    """Σ strata SS = SS_error."""
    return ss_error


@relation(
    gives="ss_strata",
    rising=["ss_subjects", "ss_error"],
    exact=["only_factor"],
    designs=WITHIN,
    source="error strata of one within factor: participants and their interaction with the factor",
)
def strata_of_one_factor(
    ss_subjects: FloatArray, ss_error: FloatArray, only_factor: FloatArray
) -> FloatArray:
    """Σ strata SS = SS_subjects + SS_error, of a single factor within participants."""
    return (ss_subjects + ss_error) * only_factor


@relation(
    gives="ss_strata",
    rising=["n", "sd"],
    exact=["only_factor"],
    designs=WITHIN,
    source="within the conditions of one factor: Σ (n - 1)·SD² = SS_subjects + SS_error (textbook identity)",
)
def strata_from_sds(n: FloatArray, sd: FloatArray, only_factor: FloatArray) -> FloatArray:
    """Σ strata SS = Σ (n - 1)·SD_j², of a single factor within participants."""
    return np.asarray(((n - 1) * sd**2).sum(axis=-1) * only_factor)


@relation(
    gives="ss_subjects",
    rising=["ss_strata"],
    falling=["ss_error"],
    exact=["only_factor"],
    designs=WITHIN,
    source="error strata of one within factor, solved for the participants",
)
def participants_sum_from_strata(
    ss_strata: FloatArray, ss_error: FloatArray, only_factor: FloatArray
) -> FloatArray:
    """SS_subjects = Σ strata SS - SS_error, of a single factor within participants."""
    return (ss_strata - ss_error) * only_factor


_PARTS = (
    "an effect and its error term are parts of the total: SS_total ≥ SS_effect + SS_error, hence η² ≤ η²p"
)


def _at_most_partial(eta_squared: Interval, partial_eta_squared: Interval) -> Interval:
    return np.zeros_like(eta_squared[0]), partial_eta_squared[1]


@relation(gives="eta_squared", image=_at_most_partial, designs=PARTIAL, source=_PARTS)
def classical_at_most_partial(eta_squared: FloatArray, partial_eta_squared: FloatArray) -> FloatArray:
    """η² ≤ η²p."""
    return np.minimum(eta_squared, partial_eta_squared)


def _at_least_classical(partial_eta_squared: Interval, eta_squared: Interval) -> Interval:
    return eta_squared[0], np.ones_like(eta_squared[0])


@relation(gives="partial_eta_squared", image=_at_least_classical, designs=PARTIAL, source=_PARTS)
def partial_at_least_classical(partial_eta_squared: FloatArray, eta_squared: FloatArray) -> FloatArray:
    """η²p ≥ η²."""
    return np.maximum(partial_eta_squared, eta_squared)


def _at_least_parts(ss_total: Interval, ss_effect: Interval, ss_error: Interval) -> Interval:
    return ss_effect[0] + ss_error[0], np.full_like(ss_total[1], np.inf)


@relation(gives="ss_total", image=_at_least_parts, designs=PARTIAL, source=_PARTS)
def total_at_least_parts(ss_total: FloatArray, ss_effect: FloatArray, ss_error: FloatArray) -> FloatArray:
    """SS_total ≥ SS_effect + SS_error."""
    return np.maximum(ss_total, ss_effect + ss_error)
