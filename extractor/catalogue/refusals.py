"""Why some conversions do not exist, in the words a reviewer can put into a table of exclusions.

The reasons are tried in order, from what the metric is to what the row reports; the first that fits is given. They
are read only where no relation leads from the row to the metric, so a reason never bars a way that exists.
"""

from __future__ import annotations

from dataclasses import dataclass

from extractor.catalogue.relation import ANCOVA, PARTIAL, PRE_POST, SEVERAL_GROUPS, TERMS
from extractor.quantities import STANDARDIZERS, VOCABULARY, is_signed

_OMNIBUS = (
    "an F with more than one numerator df compares all groups at once; "
    "it says neither the size nor the sign of the difference of two of them"
)
_TWO_ONLY = "it is defined for two independent groups"
_UNSIGNED = "F, p, η² and their kin have no sign"
_SIZES_ALONE = "sizes and degrees of freedom alone say nothing of an effect"
_PARTIAL_ONLY = (
    "F and its df speak of the effect and its own error term only; "
    "what the other sources took from the total is not said"
)
_STRATA = (
    "it needs the sums of squares of participants and of every measured factor; "
    "code all terms of the model as rows of one analysis"
)
_NO_SPREAD = (
    "means, or letters of significance, without a standard deviation, standard error, confidence limits or test "
    "statistic say nothing of the spread"
)
_CHANGE = "change scores do not say the SD of scores; raw and change metrics are never mixed"
_RAW_SD = "the error term of repeated measurements is not the SD of scores"
_COVARIATES = (
    "the error term lacks what the covariates took out; "
    "without their correlation R the SD of scores is unknown"
)
_FACTORS = (
    "the error term lacks what the other factors took out, and their F or sums of squares are not all there; "
    "code all terms of the model as rows of one analysis"
)
_OBSERVATIONS = {
    "within": "the observations behind a joint term are participants times the levels of its factors; "
    "code the main effects of all its factors as rows of the same analysis",
    "mixed": "the number of observations behind a term of a mixed design is a convention that differs between sources",
}
_BY_DESIGN = {
    "within": _RAW_SD,
    "paired": _RAW_SD,
    "mixed": _RAW_SD,
    "ancova": _COVARIATES,
    "factorial": _FACTORS,
}
_TWO_GROUP_METRICS = ("r", "fisher_z", "log_odds_ratio")
_WHOLE = ("eta_squared", "omega_squared", "epsilon_squared")
_STANDARDIZED = ("cohens_d", "hedges_g")
_SIZES = frozenset(
    {
        *("n", "n_total", "k_groups", "df", "df_effect", "df_error"),
        *("n_covariates", "icc", "cluster_size", "control_comparisons"),
    }
)
_LEADS_NOWHERE = (
    (frozenset({"welch_f", "welch_df_error"}), "Welch's F weighs the groups by their own variances; no index follows"),
    (frozenset({"h_value", "rank_eta_squared", "rank_epsilon_squared"}),
     "Kruskal-Wallis H is about ranks: H/(N - 1) is the η² of the ranks, not of the scores"),
    (frozenset({"u_value", "rank_sum", "signed_rank_sum", "rank_biserial", "rank_r"}),
     "a rank test is not about means and standard deviations"),
    (frozenset({"z_value"}), "a z is no t: behind it stand ranks, proportions or a mixed model, not the SD of scores"),
    (frozenset({"chi_squared_corrected"}), "a chi-square with Yates's correction does not say the uncorrected one"),
    (frozenset({"adjusted_p"}),
     "an adjusted p leads back to its test only where Bonferroni's number of comparisons is known"),
)  # fmt: skip
"""Statistics of other tests, and why nothing follows from them where no relation takes them."""


@dataclass(frozen=True, slots=True)
class _Case:
    """What a refusal is about; ``known`` are the reported quantities, ``opened_by`` what would open a route."""

    metric: str
    design: str
    known: frozenset[str]
    opened_by: list[frozenset[str]]


def why_no_route(metric: str, design: str, reported: frozenset[str], opened_by: list[frozenset[str]]) -> str:
    """One sentence saying why ``metric`` cannot be reached from what is reported.

    Parameters
    ----------
    opened_by : sets of quantities each of which would open a route, the cheapest first.
    """
    symbol = VOCABULARY[metric].symbol
    known = frozenset(
        name for name in reported if name in VOCABULARY and VOCABULARY[name].role.value == "reported"
    )
    if not known:
        return f"nothing usable is reported for {symbol}"
    over = [STANDARDIZERS[word] for word in STANDARDIZERS if f"d_{word}" in reported]
    if over and metric not in _STANDARDIZED and known <= _SIZES:
        return f"{symbol} is refused: a d over {over[0]} stands for no other metric"
    case = _Case(metric, design, known, opened_by)
    why = _of_the_metric(case) or _of_the_evidence(case) or _of_the_design(case)
    if why:
        return f"{symbol} is refused: {why}"
    return f"no relation leads from {', '.join(sorted(known))} to {symbol}"


_NO_VALUE = "the printed numbers give no possible value: they contradict each other or the design"
_SKEWED = (
    "medians and quartiles or extremes are visibly skewed, so that no mean and SD are estimated from them"
)
_ONE_SIZE = "an LSD or HSD is one number for all pairs only when groups are of equal size"
_CUT = "an adjusted p of 1 may have been cut there"


def why_no_value(metric: str, design: str, reported: frozenset[str]) -> str:
    """One sentence saying why the relations that lead to ``metric`` give no value in a row."""
    symbol = VOCABULARY[metric].symbol
    if "median" in reported and not reported & {"mean", "t_value", "f_value"}:
        return f"{symbol} is refused: {_SKEWED}"
    if reported & {"lsd_value", "hsd_value"}:
        return f"{symbol} is refused: {_ONE_SIZE}"
    if "adjusted_p" in reported:
        return f"{symbol} is refused: {_CUT}"
    if is_signed(metric) and design in TERMS | ANCOVA and "f_value" in reported:
        return f"{symbol} is refused: {_OMNIBUS}"
    return _NO_VALUE


def _of_the_metric(case: _Case) -> str:
    """The metric is not defined there, or wants a sign that nothing gives."""
    if case.metric in _TWO_GROUP_METRICS and case.design != "two-group":
        return _TWO_ONLY
    if frozenset(["direction"]) in case.opened_by or _bound_without_sign(case):
        return f"{_UNSIGNED}; fill the column direction"
    return ""


def _bound_without_sign(case: _Case) -> bool:
    """Whether a direction would give a bound, which the search for what opens a point does not see."""
    if not is_signed(case.metric) or case.design != "two-group" or "p_value" not in case.known:
        return False
    asked = frozenset[str]().union(*case.opened_by)
    return bool(case.known & {"n_total", "df", "df_error"}) or ("n" in case.known and "n" not in asked)


def _of_the_evidence(case: _Case) -> str:
    """What is reported belongs to another test, or is not enough for any."""
    if case.known <= _SIZES:
        return _SIZES_ALONE
    for statistics, why in _LEADS_NOWHERE:
        if case.known & statistics and case.known <= statistics | _SIZES:
            return why
    standardized = case.metric in _STANDARDIZED
    if standardized and case.design in PRE_POST and "sd_change" in case.known:
        return _CHANGE
    if standardized and "mean" in case.known and case.known <= {"mean"} | _SIZES:
        return _NO_SPREAD
    if is_signed(case.metric) and case.design in SEVERAL_GROUPS and "mean" not in case.known:
        return _OMNIBUS
    return ""


def _of_the_design(case: _Case) -> str:
    """The design's error term does not say what the metric needs."""
    if case.metric in _WHOLE and case.design in PARTIAL:
        return _PARTIAL_ONLY
    if case.metric == "generalized_eta_squared" and case.design in TERMS:
        return _STRATA
    if case.metric == "partial_omega_squared":
        # where the test itself is not known, what would open it is said instead
        return _OBSERVATIONS.get(case.design, "") if case.known & {"f_value", "partial_eta_squared"} else ""
    if case.metric in _STANDARDIZED:
        return _BY_DESIGN.get(case.design, "")
    return ""
