"""Odds ratios and the logistic approximation that links them with d."""

from __future__ import annotations

import numpy as np

from extractor.catalogue.relation import TWO_GROUP, FloatArray, Grade, relation

_LOGISTIC = "Hasselblad & Hedges (1995); Chinn (2000): ln OR = d·π/sqrt(3) under logistic outcomes"
_LOG = "definition of the log odds ratio"
_SCALE = float(np.pi / np.sqrt(3))
_ASSUMED = "logistic distributions of equal variance behind the odds ratio"


@relation(gives="log_odds_ratio", rising=["odds_ratio"], designs=TWO_GROUP, source=_LOG)
def log_odds_ratio_from_odds_ratio(odds_ratio: FloatArray) -> FloatArray:
    """ln OR = ln(OR)."""
    return np.log(odds_ratio)


@relation(gives="odds_ratio", rising=["log_odds_ratio"], designs=TWO_GROUP, source=_LOG)
def odds_ratio_from_log(log_odds_ratio: FloatArray) -> FloatArray:
    """OR = exp(ln OR)."""
    return np.exp(log_odds_ratio)


@relation(
    gives="log_odds_ratio",
    rising=["cohens_d"],
    designs=TWO_GROUP,
    grade=Grade.APPROXIMATION,
    assumes=_ASSUMED,
    source=_LOGISTIC,
)
def log_odds_ratio_from_d(cohens_d: FloatArray) -> FloatArray:
    """ln OR = d · π / sqrt(3)."""
    return cohens_d * _SCALE


@relation(
    gives="cohens_d",
    rising=["log_odds_ratio"],
    designs=TWO_GROUP,
    grade=Grade.APPROXIMATION,
    assumes=_ASSUMED,
    source=_LOGISTIC,
)
def d_from_log_odds_ratio(log_odds_ratio: FloatArray) -> FloatArray:
    """d = ln OR · sqrt(3) / π."""
    return log_odds_ratio / _SCALE
