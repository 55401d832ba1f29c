"""The vocabulary: every quantity a study can report or a relation can give, each said once.

Codebooks, commands, the catalogue, the audit and the documentation read names, meanings, symbols and supports
from here. A support is the closed hull of the values the definition allows; ``open_low`` and ``open_high`` mark
ends that are not themselves possible, so that a printed value on such an end is still accepted when rounding
could have produced it.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass
from enum import Enum

INF = float("inf")


class Shape(Enum):
    """Whether a row holds one value of a quantity or one value for each group."""

    SCALAR = "scalar"
    GROUP = "per group"


class Role(Enum):
    """What a quantity is for: coded from an article, or only a step of a derivation."""

    REPORTED = "reported"
    INNER = "inner"


@dataclass(frozen=True, slots=True)
class Quantity:
    """One quantity of the vocabulary.

    Parameters
    ----------
    name : the canonical heading of its column, without a group number.
    symbol : how the trade writes it.
    meaning : one sentence; the authority on what the column holds.
    low, high : closed hull of the support.
    integer : whether only whole numbers are possible (a fractional df is judged by the design).
    exact : whether a printed whole number is exact rather than rounded (counts).
    positive : whether zero itself is outside the support although ``low`` is 0.
    """

    name: str
    symbol: str
    meaning: str
    low: float = -INF
    high: float = INF
    integer: bool = False
    exact: bool = False
    positive: bool = False
    shape: Shape = Shape.SCALAR
    role: Role = Role.REPORTED
    signed: bool = False


def _scalar(name: str, symbol: str, meaning: str, low: float = -INF, high: float = INF) -> Quantity:
    return Quantity(name, symbol, meaning, low, high)


def _count(name: str, symbol: str, meaning: str, low: float = 0.0) -> Quantity:
    return Quantity(name, symbol, meaning, low, INF, integer=True, exact=True)


def _signed(name: str, symbol: str, meaning: str, bound: float = INF) -> Quantity:
    return Quantity(name, symbol, meaning, -bound, bound, signed=True)


def _group(name: str, symbol: str, meaning: str, low: float = -INF, *, count: bool = False) -> Quantity:
    return Quantity(name, symbol, meaning, low, INF, integer=count, exact=count, shape=Shape.GROUP)


def _inner(
    name: str,
    symbol: str,
    meaning: str,
    low: float = -INF,
    high: float = INF,
    *,
    shape: Shape = Shape.SCALAR,
    exact: bool = False,
    integer: bool = False,
) -> Quantity:
    return Quantity(
        name,
        symbol,
        meaning,
        low,
        high,
        integer=integer,
        exact=exact or integer,
        shape=shape,
        role=Role.INNER,
    )


_TEST = [
    _scalar("f_value", "F", "F ratio of the effect", 0.0),
    _count("df_effect", "df1", "numerator degrees of freedom of F", 1.0),
    _count("df_error", "df2", "denominator degrees of freedom of F", 1.0),
    _signed("t_value", "t", "t statistic of the contrast"),
    _count("df", "df", "degrees of freedom of t", 1.0),
    _scalar("p_value", "p", "printed p value of the test", 0.0, 1.0),
    Quantity(
        "tails", "tails", "number of tails of the printed p value: 1 or 2", 1.0, 2.0, integer=True, exact=True
    ),
    _count("n_total", "N", "participants analysed, all groups together", 2.0),
    _count("k_groups", "k", "number of groups or conditions", 2.0),
]

_SOURCE_TABLE = [
    _scalar("ss_effect", "SS_effect", "sum of squares of the effect", 0.0),
    _scalar("ss_error", "SS_error", "sum of squares of the error term", 0.0),
    _scalar("ss_total", "SS_total", "total sum of squares about the grand mean", 0.0),
    _scalar("ss_subjects", "SS_subjects", "sum of squares between participants in a within design", 0.0),
    _scalar("ms_effect", "MS_effect", "mean square of the effect", 0.0),
    _scalar("ms_error", "MS_error", "mean square of the error term", 0.0),
]

_GROUPS = [
    _group("n", "n", "participants analysed in the group", 1.0, count=True),
    _group("mean", "M", "mean of the group"),
    _group("sd", "SD", "standard deviation of the group's scores, divisor n - 1", 0.0),
    _group("se", "SE", "standard error of the group's mean, SD / sqrt(n)", 0.0),
    _group("median", "Mdn", "median of the group"),
    _group("q1", "Q1", "first quartile of the group"),
    _group("q3", "Q3", "third quartile of the group"),
    _group("minimum", "min", "smallest score of the group"),
    _group("maximum", "max", "largest score of the group"),
    _group("ci_low", "CI low", "lower confidence limit of the group's mean"),
    _group("ci_high", "CI high", "upper confidence limit of the group's mean"),
    _group("mean_pre", "M_pre", "mean before treatment"),
    _group("sd_pre", "SD_pre", "standard deviation before treatment", 0.0),
    _group("mean_post", "M_post", "mean after treatment"),
    _group("sd_post", "SD_post", "standard deviation after treatment", 0.0),
    _group("mean_change", "M_change", "mean of the change scores"),
    _group("sd_change", "SD_change", "standard deviation of the change scores", 0.0),
    _group("adjusted_mean", "M_adj", "mean of the group adjusted for covariates"),
]

_DIFFERENCE = [
    _signed("mean_difference", "M1 - M2", "difference of means in the direction of the contrast"),
    _scalar("se_difference", "SE_diff", "standard error of the mean difference", 0.0),
    _scalar("ci_low_difference", "CI low", "lower confidence limit of the mean difference"),
    _scalar("ci_high_difference", "CI high", "upper confidence limit of the mean difference"),
    Quantity("confidence_level", "CL", "confidence level of the printed limits, as a proportion", 0.5, 1.0),
]

_EFFECTS = [
    _scalar("eta_squared", "η²", "proportion of the total sum of squares: SS_effect / SS_total", 0.0, 1.0),
    _scalar("partial_eta_squared", "η²p", "SS_effect / (SS_effect + SS_error)", 0.0, 1.0),
    _scalar("generalized_eta_squared", "η²G", "generalized eta squared (Olejnik & Algina 2003)", 0.0, 1.0),
    _scalar("omega_squared", "ω²", "omega squared; negative when F < 1", -INF, 1.0),
    _scalar("partial_omega_squared", "ω²p", "partial omega squared; negative when F < 1", -INF, 1.0),
    _scalar("epsilon_squared", "ε²", "epsilon squared (Kelley 1935); negative when F < 1", -INF, 1.0),
    _scalar("cohens_f", "f", "Cohen's f, sqrt(eta² / (1 - eta²))", 0.0),
    _scalar("f_squared", "f²", "Cohen's f squared, eta² / (1 - eta²)", 0.0),
    _signed("cohens_d", "d", "standardised mean difference without small-sample correction"),
    _signed("hedges_g", "g", "standardised mean difference with small-sample correction J(df)"),
    _signed("r", "r", "point-biserial correlation of group and outcome", 1.0),
    _signed("fisher_z", "z_r", "Fisher's z of r"),
    _scalar("odds_ratio", "OR", "odds ratio", 0.0),
    _signed("log_odds_ratio", "ln OR", "natural logarithm of the odds ratio"),
    _scalar("effect_ci_low", "CI low", "lower confidence limit of the printed effect size"),
    _scalar("effect_ci_high", "CI high", "upper confidence limit of the printed effect size"),
]

_MODEL = [
    Quantity("correlation", "r_within", "correlation of the repeated measurements", -1.0, 1.0),
    Quantity("covariate_r", "R", "correlation of covariates and outcome within groups", -1.0, 1.0),
    _count("n_covariates", "q", "number of covariates", 0.0),
    Quantity("icc", "ICC", "intracluster correlation", -1.0, 1.0),
    _count(
        "control_comparisons",
        "m_C",
        "comparisons among which the participants of the control group are divided",
        1.0,
    ),
    _scalar("cluster_size", "m", "average number of participants in a cluster", 1.0),
    _scalar("epsilon", "ε", "sphericity correction of the degrees of freedom", 0.0, 1.0),
]

_OTHER = [
    _scalar("welch_f", "F_W", "Welch's F for unequal variances", 0.0),
    _scalar("welch_df_error", "df2_W", "denominator degrees of freedom of Welch's F", 0.0),
    _scalar("h_value", "H", "Kruskal-Wallis H", 0.0),
    _scalar("u_value", "U", "Mann-Whitney U", 0.0),
    _scalar("z_value", "z", "normal deviate of a test"),
    _scalar(
        "chi_squared",
        "χ²",
        "chi-square statistic of a 2 x 2 table, one df, without continuity correction",
        0.0,
    ),
    _scalar("homogeneity_p", "p_hom", "p value of a test of equal variances", 0.0, 1.0),
    *(
        _count(f"count_{cell}", cell, f"participants of group {group} {event} the event")
        for cell, group, event in (
            ("a", 1, "with"),
            ("b", 1, "without"),
            ("c", 2, "with"),
            ("d", 2, "without"),
        )
    ),
    _scalar("rank_sum", "W", "sum of the ranks of group 1 (Wilcoxon)", 0.0),
    _scalar("signed_rank_sum", "T", "smaller sum of the signed ranks of pairs (Wilcoxon)", 0.0),
    _scalar("rank_eta_squared", "η²_ranks", "eta squared of the ranks, H / (N - 1)", 0.0, 1.0),
    _scalar("rank_epsilon_squared", "ε²_ranks", "Kelley's epsilon squared of the ranks", -INF, 1.0),
    _signed("rank_biserial", "r_rb", "rank-biserial correlation in the direction of the contrast", 1.0),
    _signed("rank_r", "r_z", "z of a rank test over the root of the number of participants", 1.0),
    _signed("phi", "φ", "phi coefficient of a 2 x 2 table in the direction of the contrast", 1.0),
    _scalar("chi_squared_corrected", "χ²_c", "chi-square of a 2 x 2 table with Yates's correction", 0.0),
    _scalar("se_log_odds_ratio", "SE(ln OR)", "standard error of the log odds ratio", 0.0),
    _scalar("lsd_value", "LSD", "least significant difference of two means of equal group size", 0.0),
    _scalar("hsd_value", "HSD", "honestly significant difference of two means of equal group size", 0.0),
    Quantity("significance_level", "α", "significance level of a printed LSD or HSD", 0.0, 0.5),
    _scalar("adjusted_p", "p_adj", "p value times the number of comparisons (Bonferroni)", 0.0, 1.0),
    _count("comparisons", "m", "number of comparisons of a Bonferroni adjustment", 1.0),
]

_SCALE = [
    Quantity("scale_min", "min", "smallest possible score", exact=True),
    Quantity("scale_max", "max", "largest possible score", exact=True),
    _count("scale_items", "items", "whole-number items averaged into one score", 1.0),
]

STANDARDIZERS: dict[str, str] = {
    "pooled": "the SD pooled over independent groups",
    "average": "the root of the mean of the two variances",
    "difference": "the SD of the difference or change scores",
    "within": "the SD implied by the difference scores and the correlation",
    "pre": "the SD before treatment, pooled over the groups",
    "control": "the control group's SD",
    "residual": "the SD left by the other terms of the model",
    "unstated": "a SD that was not stated",
}
"""What a d or g can be divided by; unlike ones are not to be pooled."""

_INNER = [
    _inner("direction", "sign", "sign of the contrast: +1 or -1", -1.0, 1.0, exact=True),
    _inner("contrast_weight", "w", "weights of the contrast", shape=Shape.GROUP, exact=True),
    _inner("p_two_sided", "p", "p value of the two-sided test, equal to the upper tail of F", 0.0, 1.0),
    _inner("p_contrast", "p", "two-sided p value of the contrast's t", 0.0, 1.0),
    _inner("pooled_sd", "s_pooled", "square root of the error mean square", 0.0),
    _inner(
        "n_observations",
        "N_obs",
        "observations behind a term: participants times the levels they were measured at",
        2.0,
        integer=True,
    ),
    _inner("df_others", "Σdf_others", "degrees of freedom of the model's other terms", 0.0, integer=True),
    _inner("explained_by_others", "Σdf·F_others", "sum over the model's other terms of df times F", 0.0),
    _inner("ss_others", "ΣSS_others", "sum of squares of the model's other terms", 0.0),
    _inner(
        "ss_measured",
        "ΣSS_measured",
        "sum of squares of the other sources that involve a measured factor",
        0.0,
    ),
    _inner(
        "explained_by_measured",
        "Σdf·F_measured",
        "sum of df times F over the other sources with a measured factor",
        0.0,
    ),
    _inner("ss_strata", "ΣSS_strata", "sums of squares of all error strata, participants included", 0.0),
    _inner("corrected_df_effect", "ε·df1", "numerator df multiplied by a sphericity correction", 0.0),
    _inner("corrected_df_error", "ε·df2", "denominator df multiplied by a sphericity correction", 0.0),
    _inner("p_corrected", "p", "p value at the corrected degrees of freedom", 0.0, 1.0),
    _inner("cells_ss_effect", "SS_effect", "sum of squares of the term from cells of equal size", 0.0),
    _inner(
        "cells_ss_effect_unbalanced", "SS_III", "type III sum of squares of the term from unequal cells", 0.0
    ),
    _inner(
        "cells_ss_alone",
        "SS_alone",
        "sum of squares of a main effect from cells, the other factors ignored",
        0.0,
    ),
    _inner("error_share", "MS_error/s²", "error mean square over the variance a d is standardised by", 0.0),
    _inner(
        "df_standardizer",
        "df_s",
        "degrees of freedom of the standard deviation a d is divided by",
        1.0,
        integer=True,
    ),
    _inner("cells_ss_error", "SS_error", "sum of squares within cells", 0.0),
    _inner("cells_ss_total", "SS_total", "total sum of squares from cells", 0.0),
    _inner("cells_df_effect", "df1", "degrees of freedom of the term from its levels", 0.0, integer=True),
    _inner("cells_df_error", "df2", "degrees of freedom within cells", 0.0, integer=True),
    _inner("cells_n_total", "N", "participants in all cells", 0.0, integer=True),
    _inner(
        "one_factor", "1", "1 where the term is one factor, whose levels are df1 + 1", 0.0, 1.0, exact=True
    ),
    _inner("only_factor", "1", "1 where no other factor within participants is coded", 0.0, 1.0, exact=True),
    _inner("levels", "Πk", "combinations of levels of the factors of a term", 1.0, integer=True),
    _inner("sd_difference", "SD_diff", "standard deviation of the difference scores", 0.0),
    _inner("average_sd", "s_av", "root of the mean of the two variances", 0.0),
    _inner("pre_sd", "s_pre", "standard deviation before treatment, pooled over the groups", 0.0),
    _inner("change_sd", "s_change", "standard deviation of the change scores, pooled over the groups", 0.0),
    *(
        Quantity(
            f"d_{word}",
            f"d_{word}",
            f"standardised mean difference over {meaning}",
            signed=True,
            role=Role.INNER,
        )
        for word, meaning in STANDARDIZERS.items()
        if word != "pooled"
    ),
    Quantity(
        "d_restored",
        "d",
        "standardised mean difference over the SD within the levels of a factor, the other factors put back",
        signed=True,
        role=Role.INNER,
    ),
    _inner("inverse_divided_n", "Σw²/n", "1/ñ with the control group divided among its comparisons", 0.0),
    _inner("n_divided", "N", "participants with the control group divided among its comparisons", 1.0),
    _inner("inverse_effective_n", "Σw²/n", "sum of squared contrast weights over group sizes, 1/ñ", 0.0),
]

VOCABULARY: dict[str, Quantity] = {
    q.name: q
    for q in (
        *_TEST,
        *_SOURCE_TABLE,
        *_GROUPS,
        *_DIFFERENCE,
        *_EFFECTS,
        *_MODEL,
        *_OTHER,
        *_SCALE,
        *_INNER,
    )
}

FACTS: dict[str, str] = {
    "study": "label of the study",
    "outcome": "label of the outcome; effects of one outcome are compared with each other",
    "effect": "label of the effect",
    "analysis": "label shared by the rows of one model",
    "design": "design of the analysis",
    "contrast": "two groups such as 1 - 2, or one weight per group such as 1, -0.5, -0.5",
    "direction": "+ or - : sign of the contrast, for statistics that have none",
    "orientation": "- where a lower score is the better outcome; flips signed metrics",
    "page": "page of the article",
    "quote": "the words of the article",
    "coder": "who coded the row",
    "reported": "statistics in APA notation, several in one cell",
    "standardizer": "which standard deviation a printed d or g was divided by",
    "term": "factors of the effect, joined by ' x '",
    "measured_factors": "factors that were measured rather than manipulated, comma-separated",
    "responses": "integer, binary or continuous",
}
"""Coded facts: columns whose cells are words, not numbers."""

DESIGNS: dict[str, str] = {
    "one-way": "one between-subjects factor",
    "two-group": "two independent groups",
    "factorial": "two or more between-subjects factors",
    "within": "one or two within-subjects factors",
    "paired": "two measurements of the same participants",
    "mixed": "between- and within-subjects factors",
    "pre-post-control": "two groups measured before and after; group 1 is treatment, group 2 control",
    "ancova": "groups compared after adjustment for covariates",
}

METRICS: tuple[str, ...] = (
    "omega_squared",
    "partial_omega_squared",
    "eta_squared",
    "partial_eta_squared",
    "generalized_eta_squared",
    "epsilon_squared",
    "cohens_f",
    "cohens_d",
    "hedges_g",
    "r",
    "fisher_z",
    "log_odds_ratio",
    "mean_difference",
)
"""What ``--to`` accepts."""


@dataclass(frozen=True, slots=True)
class Default:
    """A value taken when the sheet and the codebook say nothing; it travels with every effect that uses it."""

    value: float
    by: str


DEFAULTS: dict[str, Default] = {
    "tails": Default(2.0, "Extractor's default: p values are two-tailed"),
    "significance_level": Default(0.05, "Extractor's default: comparisons at the 5 % level"),
    "confidence_level": Default(0.95, "Extractor's default: confidence limits are at 95 %"),
}


def is_signed(metric: str) -> bool:
    """Whether the metric has a direction, so that ``orientation`` flips it."""
    return VOCABULARY[metric].signed


def group_heading(name: str, group: int) -> str:
    """Canonical heading of a group quantity in a wide sheet, groups counted from 1."""
    return f"{name}_{group}"


def close_matches(word: str, known: Iterable[str]) -> list[str]:
    """Known words that look like ``word``, best first; for messages about misspellings."""
    return difflib.get_close_matches(word, list(known), n=3, cutoff=0.6)
