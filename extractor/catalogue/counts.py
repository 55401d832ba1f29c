"""Groups, participants and degrees of freedom."""

from __future__ import annotations

import numpy as np

from extractor.catalogue.relation import (
    ANCOVA,
    BETWEEN,
    FACTORIAL,
    MIXED,
    ONE_FACTOR,
    PAIRED,
    PRE_POST,
    TWO_GROUP,
    WITHIN,
    FloatArray,
    Grade,
    Interval,
    relation,
)

_DF = "degrees of freedom of the one-way analysis of variance (textbook identity)"


@relation(gives="df_effect", rising=["k_groups"], designs=ONE_FACTOR | PAIRED | WITHIN | ANCOVA, source=_DF)
def effect_df_from_groups(k_groups: FloatArray) -> FloatArray:
    """df1 = k - 1."""
    return k_groups - 1


@relation(gives="k_groups", rising=["df_effect"], designs=ONE_FACTOR | PAIRED | WITHIN | ANCOVA, source=_DF)
def groups_from_effect_df(df_effect: FloatArray) -> FloatArray:
    """k = df1 + 1."""
    return df_effect + 1


@relation(gives="df_error", rising=["n_total"], falling=["k_groups"], designs=ONE_FACTOR, source=_DF)
def error_df_from_total(n_total: FloatArray, k_groups: FloatArray) -> FloatArray:
    """df2 = N - k."""
    return n_total - k_groups


@relation(gives="n_total", rising=["df_error", "k_groups"], designs=ONE_FACTOR, source=_DF)
def total_from_dfs(df_error: FloatArray, k_groups: FloatArray) -> FloatArray:
    """N = df2 + k."""
    return df_error + k_groups


@relation(gives="k_groups", rising=["n_total"], falling=["df_error"], designs=ONE_FACTOR, source=_DF)
def groups_from_total(n_total: FloatArray, df_error: FloatArray) -> FloatArray:
    """k = N - df2."""
    return n_total - df_error


@relation(
    gives="df_error",
    rising=["df"],
    designs=ONE_FACTOR | PAIRED | ANCOVA,
    source="pooled t test: its df are those of the error term",
)
def error_df_from_t(df: FloatArray) -> FloatArray:
    """df2 = df of the pooled t."""
    return df


@relation(
    gives="df",
    rising=["df_error"],
    designs=ONE_FACTOR | PAIRED | ANCOVA,
    source="pooled t test: its df are those of the error term",
)
def t_df_from_error(df_error: FloatArray) -> FloatArray:
    """df of the pooled t = df2."""
    return df_error


@relation(
    gives="n_total",
    rising=["n"],
    designs=BETWEEN | ANCOVA | PRE_POST | MIXED,
    source="definition of the total",
)
def total_from_groups(n: FloatArray) -> FloatArray:
    """N = Σ n_j."""
    return np.asarray(n.sum(axis=-1))


@relation(
    gives="inverse_effective_n",
    falling=["n_total"],
    designs=TWO_GROUP,
    grade=Grade.ASSUMPTION,
    assumes="groups of equal size",
    source="1/n1 + 1/n2 with n1 = n2 = N/2; for a given t and N the equal split gives the smallest |d|",
)
def equal_split(n_total: FloatArray) -> FloatArray:
    """1/n1 + 1/n2 = 4/N when the groups are of equal size."""
    return 4 / n_total


_WITHIN_DF = "degrees of freedom of a term within participants: df2 = df1·(n - 1) (textbook identity)"
_PAIRS = "one measurement of every participant in every condition"
_ANCOVA_DF = "degrees of freedom of the analysis of covariance: df2 = N - k - q (textbook identity)"


@relation(gives="df_error", rising=["df_effect", "n_total"], designs=WITHIN | PAIRED, source=_WITHIN_DF)
def within_error_df(df_effect: FloatArray, n_total: FloatArray) -> FloatArray:
    """df2 = df1·(N - 1)."""
    return df_effect * (n_total - 1)


@relation(
    gives="n_total", rising=["df_error"], falling=["df_effect"], designs=WITHIN | PAIRED, source=_WITHIN_DF
)
def participants_from_within_dfs(df_error: FloatArray, df_effect: FloatArray) -> FloatArray:
    """N = df2 / df1 + 1."""
    return df_error / df_effect + 1


@relation(
    gives="df_effect", rising=["df_error"], falling=["n_total"], designs=WITHIN | PAIRED, source=_WITHIN_DF
)
def effect_df_from_within_dfs(df_error: FloatArray, n_total: FloatArray) -> FloatArray:
    """df1 = df2 / (N - 1)."""
    return df_error / (n_total - 1)


def _shared(n: Interval) -> Interval:
    return n[0].max(axis=-1), n[1].min(axis=-1)


@relation(gives="n_total", image=_shared, designs=WITHIN | PAIRED, source=_PAIRS)
def participants_of_conditions(n: FloatArray) -> FloatArray:
    """N = n_1 = n_2 = ... in every condition."""
    return np.asarray(n[:, 0])


@relation(
    gives="df_error",
    rising=["n_total"],
    falling=["k_groups", "n_covariates"],
    designs=ANCOVA,
    source=_ANCOVA_DF,
)
def covariance_error_df(n_total: FloatArray, k_groups: FloatArray, n_covariates: FloatArray) -> FloatArray:
    """df2 = N - k - q."""
    return n_total - k_groups - n_covariates


@relation(gives="n_total", rising=["df_error", "k_groups", "n_covariates"], designs=ANCOVA, source=_ANCOVA_DF)
def participants_from_covariance_dfs(
    df_error: FloatArray, k_groups: FloatArray, n_covariates: FloatArray
) -> FloatArray:
    """N = df2 + k + q."""
    return df_error + k_groups + n_covariates


@relation(
    gives="n_total",
    rising=["df_error", "df_effect", "df_others"],
    designs=FACTORIAL,
    source="the degrees of freedom of all terms and of the error make up N - 1 (textbook identity)",
)
def participants_from_all_dfs(
    df_error: FloatArray, df_effect: FloatArray, df_others: FloatArray
) -> FloatArray:
    """N = df2 + df1 + Σ_others df + 1."""
    return df_error + df_effect + df_others + 1


@relation(
    gives="n_observations",
    rising=["n_total"],
    designs=ONE_FACTOR | FACTORIAL | ANCOVA,
    source="one observation of each participant",
)
def one_observation_each(n_total: FloatArray) -> FloatArray:
    """N_obs = N."""
    return n_total


@relation(
    gives="n_observations",
    rising=["n_total", "df_effect"],
    exact=["one_factor"],
    designs=PAIRED | WITHIN,
    source="one observation of each participant at each level of the factor",
)
def one_observation_per_level(
    n_total: FloatArray, df_effect: FloatArray, one_factor: FloatArray
) -> FloatArray:
    """N_obs = N·(df1 + 1), of a term that is one factor."""
    return n_total * (df_effect + 1) * one_factor


@relation(
    gives="n_observations",
    rising=["n_total", "levels"],
    designs=WITHIN,
    source="one observation of each participant in each cell of the term's factors",
)
def one_observation_per_cell(n_total: FloatArray, levels: FloatArray) -> FloatArray:
    """N_obs = N·Π k over the factors of the term."""
    return n_total * levels
