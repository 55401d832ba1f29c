"""Why some conversions do not exist, in the words a reviewer can put into a table of exclusions."""

from __future__ import annotations

from extractor.catalogue.relation import PARTIAL, TERMS
from extractor.quantities import VOCABULARY, is_signed

_OMNIBUS = (
    "an F with more than one numerator df compares all groups at once; "
    "it says neither the size nor the sign of the difference of two of them"
)
_TWO_ONLY = "it is defined for two independent groups"
_UNSIGNED = "F, p, η² and their kin have no sign"
_PARTIAL_ONLY = (
    "F and its df speak of the effect and its own error term only; "
    "what the other sources took from the total is not said"
)
_STRATA = "it needs the sums of squares of participants and of every measured factor"
_RAW_SD = "the error term of repeated measurements is not the SD of scores"
_COVARIATES = "the error term lacks what the covariates took out; without their correlation R the SD of scores is unknown"
_FACTORS = (
    "the error term lacks what the other factors took out, "
    "and their F or sums of squares are not all there"
)
_TWO_GROUP_METRICS = ("r", "fisher_z", "log_odds_ratio")
_WHOLE = ("eta_squared", "omega_squared", "epsilon_squared")
_STANDARDIZED = ("cohens_d", "hedges_g")


def why_no_route(metric: str, design: str, reported: frozenset[str], opened_by: list[frozenset[str]]) -> str:
    """One sentence saying why ``metric`` cannot be reached from what is reported.

    Parameters
    ----------
    opened_by : sets of quantities each of which would open a route, the cheapest first.
    """
    symbol = VOCABULARY[metric].symbol
    known = [
        name for name in sorted(reported) if name in VOCABULARY and VOCABULARY[name].role.value == "reported"
    ]
    if not known:
        return f"nothing usable is reported for {symbol}"
    why = _reason(metric, design, reported, opened_by)
    if why:
        return f"{symbol} is refused: {why}"
    return f"no relation leads from {', '.join(known)} to {symbol}"


def _reason(metric: str, design: str, reported: frozenset[str], opened_by: list[frozenset[str]]) -> str:
    if metric in _TWO_GROUP_METRICS and design != "two-group":
        return _TWO_ONLY
    if frozenset(["direction"]) in opened_by:
        return f"{_UNSIGNED}; fill the column direction"
    if is_signed(metric) and design == "one-way" and "mean" not in reported:
        return _OMNIBUS
    if metric in _WHOLE and design in PARTIAL:
        return _PARTIAL_ONLY
    if metric == "generalized_eta_squared" and design in TERMS:
        return _STRATA
    if metric in _STANDARDIZED:
        return {
            "within": _RAW_SD,
            "paired": _RAW_SD,
            "mixed": _RAW_SD,
            "ancova": _COVARIATES,
            "factorial": _FACTORS,
        }.get(design, "")
    return ""
