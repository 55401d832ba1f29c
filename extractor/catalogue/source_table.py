"""The source table: sums of squares, degrees of freedom, mean squares and F."""

from __future__ import annotations

from extractor.catalogue.relation import ONE_FACTOR, WITH_F, FloatArray, relation

_MS = "definition of a mean square"
_F = "definition of F in the analysis of variance"
_SUM = "partition of the total sum of squares in the one-way analysis of variance"
_ETA = "definition of eta squared as a proportion of the total sum of squares"


@relation(gives="ms_effect", rising=["ss_effect"], falling=["df_effect"], designs=WITH_F, source=_MS)
def effect_mean_square(ss_effect: FloatArray, df_effect: FloatArray) -> FloatArray:
    """MS_effect = SS_effect / df1."""
    return ss_effect / df_effect


@relation(gives="ss_effect", rising=["ms_effect", "df_effect"], designs=WITH_F, source=_MS)
def effect_sum_from_mean_square(ms_effect: FloatArray, df_effect: FloatArray) -> FloatArray:
    """SS_effect = MS_effect · df1."""
    return ms_effect * df_effect


@relation(gives="df_effect", rising=["ss_effect"], falling=["ms_effect"], designs=WITH_F, source=_MS)
def effect_df_from_mean_square(ss_effect: FloatArray, ms_effect: FloatArray) -> FloatArray:
    """df1 = SS_effect / MS_effect."""
    return ss_effect / ms_effect


@relation(gives="ms_error", rising=["ss_error"], falling=["df_error"], designs=WITH_F, source=_MS)
def error_mean_square(ss_error: FloatArray, df_error: FloatArray) -> FloatArray:
    """MS_error = SS_error / df2."""
    return ss_error / df_error


@relation(gives="ss_error", rising=["ms_error", "df_error"], designs=WITH_F, source=_MS)
def error_sum_from_mean_square(ms_error: FloatArray, df_error: FloatArray) -> FloatArray:
    """SS_error = MS_error · df2."""
    return ms_error * df_error


@relation(gives="df_error", rising=["ss_error"], falling=["ms_error"], designs=WITH_F, source=_MS)
def error_df_from_mean_square(ss_error: FloatArray, ms_error: FloatArray) -> FloatArray:
    """df2 = SS_error / MS_error."""
    return ss_error / ms_error


@relation(gives="f_value", rising=["ms_effect"], falling=["ms_error"], designs=WITH_F, source=_F)
def f_from_mean_squares(ms_effect: FloatArray, ms_error: FloatArray) -> FloatArray:
    """F = MS_effect / MS_error."""
    return ms_effect / ms_error


@relation(gives="ms_effect", rising=["f_value", "ms_error"], designs=WITH_F, source=_F)
def effect_mean_square_from_f(f_value: FloatArray, ms_error: FloatArray) -> FloatArray:
    """MS_effect = F · MS_error."""
    return f_value * ms_error


@relation(gives="ms_error", rising=["ms_effect"], falling=["f_value"], designs=WITH_F, source=_F)
def error_mean_square_from_f(ms_effect: FloatArray, f_value: FloatArray) -> FloatArray:
    """MS_error = MS_effect / F."""
    return ms_effect / f_value


@relation(gives="ss_total", rising=["ss_effect", "ss_error"], designs=ONE_FACTOR, source=_SUM)
def total_sum(ss_effect: FloatArray, ss_error: FloatArray) -> FloatArray:
    """SS_total = SS_effect + SS_error."""
    return ss_effect + ss_error


@relation(
    gives="ss_effect",
    rising=["ss_total"],
    falling=["ss_error"],
    designs=ONE_FACTOR,
    accuracy=1e-11,
    source=_SUM,
)
def effect_sum_from_total(ss_total: FloatArray, ss_error: FloatArray) -> FloatArray:
    """SS_effect = SS_total - SS_error."""
    return ss_total - ss_error


@relation(
    gives="ss_error",
    rising=["ss_total"],
    falling=["ss_effect"],
    designs=ONE_FACTOR,
    accuracy=1e-11,
    source=_SUM,
)
def error_sum_from_total(ss_total: FloatArray, ss_effect: FloatArray) -> FloatArray:
    """SS_error = SS_total - SS_effect."""
    return ss_total - ss_effect


@relation(gives="eta_squared", rising=["ss_effect"], falling=["ss_error"], designs=ONE_FACTOR, source=_ETA)
def eta_squared_from_sums(ss_effect: FloatArray, ss_error: FloatArray) -> FloatArray:
    """η² = SS_effect / (SS_effect + SS_error)."""
    # written with SS_effect once, so that its interval image is exact
    return 1 / (1 + ss_error / ss_effect)


@relation(gives="ss_effect", rising=["eta_squared", "ss_total"], designs=ONE_FACTOR, source=_ETA)
def effect_sum_from_eta_squared(eta_squared: FloatArray, ss_total: FloatArray) -> FloatArray:
    """SS_effect = η² · SS_total."""
    return eta_squared * ss_total


@relation(gives="ss_error", rising=["ss_total"], falling=["eta_squared"], designs=ONE_FACTOR, source=_ETA)
def error_sum_from_eta_squared(eta_squared: FloatArray, ss_total: FloatArray) -> FloatArray:
    """SS_error = (1 - η²) · SS_total."""
    return (1 - eta_squared) * ss_total
