"""How text and cells write each quantity: the spellings of the trade, of keyboards and of copied PDFs."""

from __future__ import annotations

import re
from functools import lru_cache

from extractor.quantities import VOCABULARY, Quantity, Role, Shape

_SQUARED = r"(?:\^?2|²|[- ]?squared?)"
_PARTIAL = r"(?:_?\{?p\}?|ₚ|_?\(?partial\)?)"
_GENERAL = r"(?:_?\{?[gG]\}?)"
_ETA, _OMEGA, _EPSILON = "(?:η|eta)", "(?:ω|omega)", "(?:ε|epsilon)"
_ERROR, _EFFECT = (
    r"[ _]?\{?(?:error|within|residual|res|[EeWw])\}?",
    r"[ _]?\{?(?:effect|between|treatment|[Bb])\}?",
)

# Ordered: a longer name stands before one it begins with.
SPELLINGS: tuple[tuple[str, str], ...] = (
    ("welch_f", r"Welch(?:'s)? (?:ANOVA )?F|F_?\{?(?:Welch|W)\}?"),
    ("f_value", r"F"),
    ("t_value", r"t"),
    (
        "partial_eta_squared",
        rf"partial {_ETA}{_SQUARED}|{_ETA}{_PARTIAL}{_SQUARED}|{_ETA}{_SQUARED}{_PARTIAL}",
    ),
    (
        "generalized_eta_squared",
        rf"generali[sz]ed {_ETA}{_SQUARED}|{_ETA}{_GENERAL}{_SQUARED}|{_ETA}{_SQUARED}{_GENERAL}",
    ),
    ("eta_squared", rf"{_ETA}{_SQUARED}"),
    (
        "partial_omega_squared",
        rf"partial {_OMEGA}{_SQUARED}|{_OMEGA}{_PARTIAL}{_SQUARED}|{_OMEGA}{_SQUARED}{_PARTIAL}",
    ),
    ("omega_squared", rf"{_OMEGA}{_SQUARED}"),
    ("epsilon_squared", rf"{_EPSILON}{_SQUARED}"),
    ("f_squared", rf"(?:Cohen'?s )?f{_SQUARED}"),
    ("cohens_f", r"(?:Cohen'?s )?f"),
    ("cohens_d", r"(?:Cohen'?s )?d"),
    ("hedges_g", r"(?:Hedge'?s?'? )?g"),
    ("r", r"r(?:_?\{?pb\}?)?"),
    ("log_odds_ratio", r"(?:ln|log) ?\(?OR\)?|log odds ratio"),
    ("odds_ratio", r"OR|odds ratio"),
    ("chi_squared", rf"(?:χ|chi|X){_SQUARED}"),
    ("z_value", r"[zZ]"),
    ("h_value", r"H"),
    ("u_value", r"U"),
    ("n_total", r"N"),
    ("ms_error", rf"MS{_ERROR}"),
    ("ms_effect", rf"MS{_EFFECT}"),
    ("ss_error", rf"SS{_ERROR}"),
    ("ss_effect", rf"SS{_EFFECT}"),
    ("ss_total", r"SS[ _]?\{?(?:total|[Tt])\}?"),
    ("mean_difference", r"M_?\{?diff\}?|MD|mean difference"),
    ("df_effect", r"df_?1"),
    ("df_error", r"df_?2"),
    ("df", r"df|d\.f\."),
    ("p_value", r"[pP]"),
)
"""Regular expressions by quantity. Case tells F from f and N from n."""

EFFECT_SIZES = frozenset(
    {
        "eta_squared",
        "partial_eta_squared",
        "generalized_eta_squared",
        "omega_squared",
        "partial_omega_squared",
        "epsilon_squared",
        "cohens_f",
        "cohens_d",
        "hedges_g",
        "r",
        "odds_ratio",
        "log_odds_ratio",
    }
)
"""Quantities that printed limits ``effect_ci_low`` and ``effect_ci_high`` may belong to."""

_COMPILED = tuple((name, re.compile(pattern)) for name, pattern in SPELLINGS)
_REPORTED = {name: q for name, q in VOCABULARY.items() if q.role is Role.REPORTED}
_SIZES = frozenset({"n", "n_total"})


@lru_cache(maxsize=1024)
def quantity_of(label: str) -> str | None:
    """The quantity of the whole row that a label such as ``ηp²`` or ``f_value`` stands for."""
    known = _REPORTED.get(label)
    if known is not None and known.shape is Shape.SCALAR:
        return label
    return next((name for name, pattern in _COMPILED if pattern.fullmatch(label)), None)


def names(label: str, quantity: Quantity) -> bool:
    """Whether a label before a relation sign, such as ``p``, names this quantity.

    Case counts only where it tells two symbols apart; n and N both name a size.
    """
    if label in (quantity.name, quantity.symbol) or quantity_of(label) == quantity.name:
        return True
    others = {name for name, q in _REPORTED.items() if q.symbol == label}
    if others or quantity_of(label) is not None:
        return quantity.name in _SIZES and bool(others & _SIZES)
    return label.casefold() in (quantity.name.replace("_", " "), quantity.symbol.casefold())
