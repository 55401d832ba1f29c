"""A contrast of means: t, the mean difference and its standard error, d and g.

In two-group rows the contrast is the whole effect, so that F = t². With more groups the contrast uses the error term
of the whole model (Borenstein et al. 2009; textbook identity), and nothing of the omnibus F says its sign or size.
"""

from __future__ import annotations

import numpy as np
from scipy import special

from extractor.catalogue.branches import signed_image, square_image
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
from extractor.sampling.moments import small_sample_factor

_SQUARE = "F with one numerator df is the square of the pooled t (textbook identity)"
_D = "standardised mean difference with the pooled standard deviation (Hedges 1981; Borenstein et al. 2009, ch. 4)"
_G = "Hedges (1981), exact small-sample factor"
_CONTRAST = "definition of a contrast of means"
_DIVIDED = "Cochrane Handbook, ch. 23: a shared control group divided among the comparisons"
_SE = "standard error of a contrast under a common variance (textbook identity)"
_CI = "confidence limits from Student's t with the error df (Cochrane Handbook, ch. 6)"


@relation(gives="f_value", image=square_image, designs=TWO_GROUP | PAIRED, source=_SQUARE)
def f_from_t(t_value: FloatArray) -> FloatArray:
    """F = t²."""
    return t_value**2


def _root(f_value: Interval, direction: Interval, current: Interval | None) -> Interval:
    return signed_image((np.sqrt(f_value[0]), np.sqrt(f_value[1])), direction, current)


@relation(gives="t_value", image=_root, narrows=True, designs=TWO_GROUP | PAIRED, source=_SQUARE)
def t_from_f(f_value: FloatArray, direction: FloatArray) -> FloatArray:
    """t = sign · sqrt(F)."""
    return direction * np.sqrt(f_value)


@relation(gives="cohens_d", rising=["t_value"], either=["inverse_effective_n"], designs=ONE_FACTOR, source=_D)
def d_from_t(t_value: FloatArray, inverse_effective_n: FloatArray) -> FloatArray:
    """d = t · sqrt(Σ w²/n); for two groups t · sqrt(1/n1 + 1/n2)."""
    return t_value * np.sqrt(inverse_effective_n)


@relation(gives="t_value", rising=["cohens_d"], either=["inverse_effective_n"], designs=ONE_FACTOR, source=_D)
def t_from_d(cohens_d: FloatArray, inverse_effective_n: FloatArray) -> FloatArray:
    """t = d / sqrt(Σ w²/n)."""
    return cohens_d / np.sqrt(inverse_effective_n)


@relation(
    gives="hedges_g",
    rising=["cohens_d"],
    exact=["df_error"],
    designs=ONE_FACTOR | PAIRED | ANCOVA | MIXED,
    source=_G,
)
def g_from_d(cohens_d: FloatArray, df_error: FloatArray) -> FloatArray:
    """g = J(df2) · d, J(v) = Γ(v/2) / (sqrt(v/2) · Γ((v - 1)/2))."""
    return cohens_d * small_sample_factor(df_error)


@relation(
    gives="hedges_g",
    rising=["d_control"],
    exact=["n", "contrast_weight"],
    designs=TWO_GROUP,
    standardizer="control",
    source="Hedges (1981), small-sample factor of Glass's estimator at the df of the control group's SD",
)
def g_from_control_d(d_control: FloatArray, n: FloatArray, contrast_weight: FloatArray) -> FloatArray:
    """g = J(n_C - 1) · Δ, C the second group of the contrast."""
    control = np.where(contrast_weight < 0, n, 0.0).sum(axis=-1)
    return d_control * small_sample_factor(control - 1)


@relation(gives="cohens_d", rising=["hedges_g"], exact=["df_error"], designs=ONE_FACTOR | ANCOVA, source=_G)
def d_from_g(hedges_g: FloatArray, df_error: FloatArray) -> FloatArray:
    """d = g / J(df2)."""
    return hedges_g / small_sample_factor(df_error)


@relation(
    gives="cohens_d",
    rising=["mean_difference"],
    either=["pooled_sd"],
    designs=ONE_FACTOR | ANCOVA,
    source=_D,
)
def d_from_means(mean_difference: FloatArray, pooled_sd: FloatArray) -> FloatArray:
    """d = (Σ w·M) / s_pooled."""
    return mean_difference / pooled_sd


@relation(
    gives="mean_difference", rising=["cohens_d"], either=["pooled_sd"], designs=ONE_FACTOR | ANCOVA, source=_D
)
def difference_from_d(cohens_d: FloatArray, pooled_sd: FloatArray) -> FloatArray:
    """Σ w·M = d · s_pooled."""
    return cohens_d * pooled_sd


def _ratio_of_magnitudes(numerator: Interval, denominator: Interval) -> Interval:
    top, bottom = square_image(numerator), square_image(denominator)
    return np.sqrt(top[0] / bottom[1]), np.sqrt(top[1] / bottom[0])


@relation(gives="pooled_sd", image=_ratio_of_magnitudes, designs=ONE_FACTOR | ANCOVA, source=_D)
def pooled_sd_from_d(mean_difference: FloatArray, cohens_d: FloatArray) -> FloatArray:
    """s_pooled = (Σ w·M) / d."""
    return mean_difference / cohens_d


@relation(
    gives="pooled_sd",
    rising=["ms_error"],
    designs=ONE_FACTOR,
    source="the error mean square is the pooled variance",
)
def pooled_sd_from_mean_square(ms_error: FloatArray) -> FloatArray:
    """s_pooled = sqrt(MS_error)."""
    return np.sqrt(ms_error)


@relation(
    gives="ms_error",
    rising=["pooled_sd"],
    designs=ONE_FACTOR,
    source="the error mean square is the pooled variance",
)
def mean_square_from_pooled_sd(pooled_sd: FloatArray) -> FloatArray:
    """MS_error = s_pooled²."""
    return pooled_sd**2


def _weighted_sum(mean: Interval, contrast_weight: Interval) -> Interval:
    weight = contrast_weight[0]
    ends = np.where(weight == 0, 0.0, weight * mean[0]), np.where(weight == 0, 0.0, weight * mean[1])
    return np.minimum(*ends).sum(axis=-1), np.maximum(*ends).sum(axis=-1)


@relation(
    gives="mean_difference",
    image=_weighted_sum,
    designs=ONE_FACTOR | PAIRED | WITHIN | FACTORIAL,
    source=_CONTRAST,
)
def difference_of_means(mean: FloatArray, contrast_weight: FloatArray) -> FloatArray:
    """Σ w·M = Σ w_j · M_j."""
    # a group with weight 0 does not matter, even when its mean is not known
    return np.asarray(np.where(contrast_weight == 0, 0.0, mean * contrast_weight).sum(axis=-1))


@relation(
    gives="inverse_effective_n",
    falling=["n"],
    exact=["contrast_weight"],
    designs=ONE_FACTOR | ANCOVA | PRE_POST | FACTORIAL | MIXED,
    source=_SE,
)
def inverse_effective_size(n: FloatArray, contrast_weight: FloatArray) -> FloatArray:
    """Σ w²/n = Σ w_j² / n_j; for two groups 1/n1 + 1/n2."""
    return np.asarray(np.where(contrast_weight == 0, 0.0, contrast_weight**2 / n).sum(axis=-1))


@relation(
    gives="inverse_divided_n",
    falling=["n"],
    exact=["contrast_weight", "control_comparisons"],
    designs=TWO_GROUP,
    source=_DIVIDED,
)
def inverse_effective_size_divided(
    n: FloatArray, contrast_weight: FloatArray, control_comparisons: FloatArray
) -> FloatArray:
    """Σ w²/n = 1/n1 + m/n_C, the control group, last in the contrast, divided among m comparisons."""
    control = contrast_weight < 0
    n = np.where(control, n / control_comparisons[:, None], n)
    return np.asarray((contrast_weight**2 / n).sum(axis=-1))


@relation(
    gives="n_divided",
    rising=["n"],
    exact=["contrast_weight", "control_comparisons"],
    designs=TWO_GROUP,
    source=_DIVIDED,
)
def total_divided(n: FloatArray, contrast_weight: FloatArray, control_comparisons: FloatArray) -> FloatArray:
    """N = n1 + n_C/m, the control group divided among m comparisons."""
    control = contrast_weight < 0
    return np.asarray(np.where(control, n / control_comparisons[:, None], n).sum(axis=-1))


@relation(gives="se_difference", rising=["pooled_sd", "inverse_effective_n"], designs=ONE_FACTOR, source=_SE)
def standard_error_of_difference(pooled_sd: FloatArray, inverse_effective_n: FloatArray) -> FloatArray:
    """SE_diff = s_pooled · sqrt(Σ w²/n)."""
    return pooled_sd * np.sqrt(inverse_effective_n)


@relation(
    gives="pooled_sd",
    rising=["se_difference"],
    falling=["inverse_effective_n"],
    designs=ONE_FACTOR,
    source="Cochrane Handbook, ch. 6: SD = SE / sqrt(1/n1 + 1/n2)",
)
def pooled_sd_from_standard_error(se_difference: FloatArray, inverse_effective_n: FloatArray) -> FloatArray:
    """s_pooled = SE_diff / sqrt(Σ w²/n)."""
    return se_difference / np.sqrt(inverse_effective_n)


@relation(
    gives="t_value",
    rising=["mean_difference"],
    either=["se_difference"],
    designs=ONE_FACTOR | PAIRED | ANCOVA,
    source=_SE,
)
def t_from_difference(mean_difference: FloatArray, se_difference: FloatArray) -> FloatArray:
    """t = (Σ w·M) / SE_diff."""
    return mean_difference / se_difference


@relation(
    gives="mean_difference",
    rising=["t_value"],
    either=["se_difference"],
    designs=ONE_FACTOR | PAIRED | ANCOVA,
    source=_SE,
)
def difference_from_t(t_value: FloatArray, se_difference: FloatArray) -> FloatArray:
    """Σ w·M = t · SE_diff."""
    return t_value * se_difference


@relation(gives="se_difference", image=_ratio_of_magnitudes, designs=ONE_FACTOR | PAIRED | ANCOVA, source=_SE)
def standard_error_from_t(mean_difference: FloatArray, t_value: FloatArray) -> FloatArray:
    """SE_diff = (Σ w·M) / t."""
    return mean_difference / t_value


@relation(
    gives="mean_difference",
    rising=["ci_low_difference", "ci_high_difference"],
    designs=ONE_FACTOR | PAIRED | ANCOVA,
    grade=Grade.APPROXIMATION,
    assumes="confidence limits symmetric about the difference",
    source=_CI,
)
def difference_from_limits(ci_low_difference: FloatArray, ci_high_difference: FloatArray) -> FloatArray:
    """Σ w·M = (L + U) / 2."""
    return (ci_low_difference + ci_high_difference) / 2


@relation(
    gives="se_difference",
    rising=["ci_high_difference"],
    falling=["ci_low_difference"],
    exact=["df_error", "confidence_level"],
    designs=ONE_FACTOR | PAIRED | ANCOVA,
    grade=Grade.APPROXIMATION,
    assumes="confidence limits of the difference from Student's t with the pooled standard error",
    source=_CI,
)
def standard_error_from_limits(
    ci_low_difference: FloatArray,
    ci_high_difference: FloatArray,
    df_error: FloatArray,
    confidence_level: FloatArray,
) -> FloatArray:
    """SE_diff = (U - L) / (2·t_crit(df2))."""
    critical = special.stdtrit(df_error, (1 + confidence_level) / 2)
    return (ci_high_difference - ci_low_difference) / (2 * critical)


def _sign(mean_difference: Interval) -> Interval:
    low, high = mean_difference
    return np.where(low > 0, 1.0, -1.0), np.where(high < 0, -1.0, 1.0)


@relation(
    gives="direction",
    image=_sign,
    designs=BETWEEN | PAIRED | ANCOVA | PRE_POST | FACTORIAL,
    source="sign of the contrast of the means",
)
def direction_of_means(mean_difference: FloatArray) -> FloatArray:
    """sign = sign of Σ w·M."""
    return np.sign(mean_difference)
