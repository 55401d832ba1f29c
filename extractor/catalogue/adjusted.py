"""Comparisons with a restored standardizer: covariates or other factors took variance out of the error term."""

from __future__ import annotations

import numpy as np

from extractor.catalogue.branches import signed_image
from extractor.catalogue.relation import (
    ANCOVA,
    FACTORIAL,
    MIXED,
    PRE_POST,
    FloatArray,
    Grade,
    Interval,
    relation,
)
from extractor.sampling.moments import small_sample_factor

_ANCOVA = "Borenstein et al. (2009), ch. 12: s = s_adj / sqrt(1 - R²)"
_ANCOVA_T = "Borenstein (2009); Lipsey & Wilson (2001): d = t·sqrt(1/n1 + 1/n2)·sqrt(1 - R²)"
_ADJUSTED = "difference of adjusted means"
_SQUARE = "an F with one numerator df is the square of t"
_RESTORED = "Nouri & Greenberg (1995); Morris & DeShon (1997): the other terms' sums of squares put back into the error"
_POOLED = "pooled standard deviation of the groups (textbook identity)"
_G = "Hedges (1981), small-sample factor at the df of the SD that d is divided by"


def _root_image(
    f_value: Interval, direction: Interval, df_effect: Interval, current: Interval | None
) -> Interval:
    low, high = signed_image((np.sqrt(f_value[0]), np.sqrt(f_value[1])), direction, current)
    one = (df_effect[0] == 1) & (df_effect[1] == 1)
    return np.where(one, low, -np.inf), np.where(one, high, np.inf)


@relation(
    gives="t_value",
    image=_root_image,
    narrows=True,
    designs=ANCOVA | FACTORIAL | MIXED | PRE_POST,
    source=_SQUARE,
)
def t_of_one_df(f_value: FloatArray, direction: FloatArray, df_effect: FloatArray) -> FloatArray:
    """t = sign · sqrt(F), where df1 = 1."""
    return np.where(df_effect == 1, direction * np.sqrt(f_value), np.nan)


def _weighted(adjusted_mean: Interval, contrast_weight: Interval) -> Interval:
    weight = contrast_weight[0]
    ends = tuple(np.where(weight == 0, 0.0, weight * end) for end in adjusted_mean)
    return np.minimum(*ends).sum(axis=-1), np.maximum(*ends).sum(axis=-1)


@relation(gives="mean_difference", image=_weighted, designs=ANCOVA, source=_ADJUSTED)
def difference_of_adjusted_means(adjusted_mean: FloatArray, contrast_weight: FloatArray) -> FloatArray:
    """Σ w·M_adj = Σ w_j · M_adj,j."""
    return np.asarray(np.where(contrast_weight == 0, 0.0, adjusted_mean * contrast_weight).sum(axis=-1))


def _unadjusted_image(ms_error: Interval, covariate_r: Interval) -> Interval:
    least = np.where((covariate_r[0] <= 0) & (covariate_r[1] >= 0), 0.0, np.minimum(*np.abs(covariate_r)))
    most = np.maximum(*np.abs(covariate_r))
    return np.sqrt(ms_error[0] / (1 - least**2)), np.sqrt(ms_error[1] / (1 - most**2))


@relation(gives="pooled_sd", image=_unadjusted_image, designs=ANCOVA, source=_ANCOVA, accuracy=1e-12)
def unadjusted_sd(ms_error: FloatArray, covariate_r: FloatArray) -> FloatArray:
    """s_pooled = sqrt(MS_error / (1 - R²))."""
    return np.sqrt(ms_error / (1 - covariate_r**2))


@relation(gives="pooled_sd", rising=["sd"], exact=["n"], designs=ANCOVA, source=_POOLED)
def pooled_sd_of_groups(sd: FloatArray, n: FloatArray) -> FloatArray:
    """s_pooled = sqrt(Σ (n - 1)·SD² / (N - k)), of the unadjusted scores."""
    return np.asarray(np.sqrt(((n - 1) * sd**2).sum(axis=-1) / (n.sum(axis=-1) - n.shape[1])))


def _adjusted_d_image(t_value: Interval, inverse_effective_n: Interval, covariate_r: Interval) -> Interval:
    least = np.where((covariate_r[0] <= 0) & (covariate_r[1] >= 0), 0.0, np.minimum(*np.abs(covariate_r)))
    most = np.maximum(*np.abs(covariate_r))
    small = np.sqrt(inverse_effective_n[0]) * np.sqrt(1 - most**2)
    large = np.sqrt(inverse_effective_n[1]) * np.sqrt(1 - least**2)
    low = np.where(t_value[0] >= 0, t_value[0] * small, t_value[0] * large)
    high = np.where(t_value[1] >= 0, t_value[1] * large, t_value[1] * small)
    return low, high


@relation(
    gives="cohens_d",
    image=_adjusted_d_image,
    designs=ANCOVA,
    grade=Grade.APPROXIMATION,
    assumes="groups alike on the covariates, so that the adjustment only shrinks the error term",
    source=_ANCOVA_T,
    accuracy=1e-12,
)
def adjusted_d_from_t(
    t_value: FloatArray, inverse_effective_n: FloatArray, covariate_r: FloatArray
) -> FloatArray:
    """d = t · sqrt(1/n1 + 1/n2) · sqrt(1 - R²)."""
    return t_value * np.sqrt(inverse_effective_n) * np.sqrt(1 - covariate_r**2)


@relation(
    gives="d_residual",
    rising=["t_value"],
    either=["inverse_effective_n"],
    designs=FACTORIAL,
    source=_RESTORED,
)
def residual_d_from_t(t_value: FloatArray, inverse_effective_n: FloatArray) -> FloatArray:
    """d_residual = t · sqrt(1/n1 + 1/n2), over the SD that the other factors left."""
    return t_value * np.sqrt(inverse_effective_n)


@relation(
    gives="error_share",
    falling=["explained_by_others"],
    exact=["df_error", "df_others"],
    designs=FACTORIAL,
    grade=Grade.ASSUMPTION,
    assumes="cells of equal size, so that the other terms' sums of squares add up",
    source=_RESTORED,
)
def error_share_from_all_fs(
    df_error: FloatArray, df_others: FloatArray, explained_by_others: FloatArray
) -> FloatArray:
    """MS_error/s² = (df2 + Σ df_others) / (df2 + Σ df·F_others)."""
    return (df_error + df_others) / (df_error + explained_by_others)


@relation(
    gives="error_share", rising=["ms_error"], falling=["pooled_sd"], designs=FACTORIAL, source=_RESTORED
)
def error_share_from_sd(ms_error: FloatArray, pooled_sd: FloatArray) -> FloatArray:
    """MS_error/s² from both."""
    return ms_error / pooled_sd**2


@relation(
    gives="hedges_g",
    rising=["d_residual"],
    exact=["df_error"],
    designs=FACTORIAL,
    standardizer="residual",
    source=_G,
)
def residual_g(d_residual: FloatArray, df_error: FloatArray) -> FloatArray:
    """g = J(df2) · d_residual."""
    return d_residual * small_sample_factor(df_error)


@relation(
    gives="d_restored", rising=["d_residual"], either=["error_share"], designs=FACTORIAL, source=_RESTORED
)
def restored_d(d_residual: FloatArray, error_share: FloatArray) -> FloatArray:
    """d = d_residual · sqrt(MS_error/s²), over the SD with the other terms put back."""
    return d_residual * np.sqrt(error_share)


@relation(gives="df_standardizer", rising=["df_error", "df_others"], designs=FACTORIAL, source=_RESTORED)
def restored_df(df_error: FloatArray, df_others: FloatArray) -> FloatArray:
    """df_s = df2 + Σ df_others."""
    return df_error + df_others


@relation(
    gives="hedges_g",
    rising=["d_restored"],
    exact=["df_standardizer"],
    designs=FACTORIAL,
    source=_G,
)
def restored_g(d_restored: FloatArray, df_standardizer: FloatArray) -> FloatArray:
    """g = J(df_s) · d, J(v) = Γ(v/2) / (sqrt(v/2) · Γ((v - 1)/2))."""
    return d_restored * small_sample_factor(df_standardizer)


@relation(
    gives="d_restored", rising=["mean_difference"], either=["pooled_sd"], designs=FACTORIAL, source=_RESTORED
)
def restored_d_from_means(mean_difference: FloatArray, pooled_sd: FloatArray) -> FloatArray:
    """d = (Σ w·M) / s, s with the other terms put back."""
    return mean_difference / pooled_sd


@relation(
    gives="pooled_sd",
    rising=["ss_error", "ss_others"],
    exact=["df_error", "df_others"],
    designs=FACTORIAL,
    grade=Grade.ASSUMPTION,
    assumes="cells of equal size, so that the other terms' sums of squares add up",
    source=_RESTORED,
)
def restored_sd(
    ss_error: FloatArray, ss_others: FloatArray, df_error: FloatArray, df_others: FloatArray
) -> FloatArray:
    """s = sqrt((SS_error + Σ SS_others) / (df2 + Σ df_others))."""
    return np.sqrt((ss_error + ss_others) / (df_error + df_others))
