"""The certified analyses of variance of the NIST Statistical Reference Datasets, from group summaries.

The catalogue starts from sizes, means and standard deviations as doubles, so what it can reach is limited by how far
a double holds a mean: about 16 digits of 1.4, but of 1,000,000,000,000.4 only three after the point, while the groups
differ in the first. Agreement is stated as the log relative error, LRE = -log10(|x - c| / |c|), the usual measure for
these sets: at least 13 digits for the sets of low difficulty, 9 for those with six constant leading digits, 3 for
those with twelve; no program that reads doubles does better than 4.7 for SmLs07.
"""

from __future__ import annotations

import json
from decimal import Decimal, localcontext
from fractions import Fraction
from typing import Any

import numpy as np
import pytest

from extractor.catalogue import contrasts, counts, groups, p_values, source_table
from extractor.catalogue import variance_explained as explained
from extractor.catalogue.relation import FloatArray
from tests.published.support import DATA, converted, group, one

SETS: dict[str, Any] = json.loads((DATA / "nist.json").read_text(encoding="utf-8"))["sets"]

DIGITS = {
    "SiRstv": 13,
    "SmLs01": 13,
    "SmLs02": 13,
    "SmLs03": 13,
    "AtmWtAg": 8,
    "SmLs04": 9,
    "SmLs05": 9,
    "SmLs06": 9,
    "SmLs07": 3,
    "SmLs08": 3,
    "SmLs09": 3,
}
"""Least log relative error of any certified value, by set."""

ERROR_DIGITS = 13
"""The same for the error term alone: standard deviations lose nothing by a large mean. AtmWtAg too has it."""


def summaries(name: str) -> tuple[FloatArray, FloatArray, FloatArray]:
    """n, mean and SD of each group: exact arithmetic on the decimals, rounded once to doubles."""
    given = SETS[name]
    if "scores" not in given:
        k = len(given["means"])
        return group(*[given["n"]] * k), group(*map(float, given["means"])), group(*[float(given["sd"])] * k)
    n, mean, sd = [], [], []
    for texts in given["scores"]:
        scores = [Fraction(text) for text in texts]
        centre = sum(scores) / len(scores)
        variance = sum((s - centre) ** 2 for s in scores) / (len(scores) - 1)
        with localcontext() as context:
            context.prec = 40
            spread = (Decimal(variance.numerator) / Decimal(variance.denominator)).sqrt()
        n.append(len(scores))
        mean.append(float(centre))
        sd.append(float(spread))
    return group(*n), group(*mean), group(*sd)


def analysis(name: str) -> dict[str, FloatArray]:
    """Every certified quantity through the catalogue."""
    n, mean, sd = summaries(name)
    k = one(n.shape[1])[0]
    v1 = counts.effect_df_from_groups(k)
    v2 = counts.error_df_from_total(counts.total_from_groups(n), k)
    between, within = groups.effect_sum_from_means(n, mean), groups.error_sum_from_sds(n, sd)
    effect, error = source_table.effect_mean_square(between, v1), source_table.error_mean_square(within, v2)
    return {
        "df_effect": v1,
        "df_error": v2,
        "ss_effect": between,
        "ss_error": within,
        "ms_effect": effect,
        "ms_error": error,
        "f_value": source_table.f_from_mean_squares(effect, error),
        "eta_squared": source_table.eta_squared_from_sums(between, within),
        "pooled_sd": contrasts.pooled_sd_from_mean_square(error),
    }


def log_relative_error(found: float, certified: str) -> float:
    """Digits of agreement, 15 at most: more are not printed."""
    exact = Fraction(certified)
    off = abs(Fraction(found) - exact) / exact
    return 15.0 if off == 0 else min(15.0, -float(np.log10(float(off))))


@pytest.mark.parametrize("name", SETS)
def test_certified_values_from_group_summaries(name: str) -> None:
    found, certified = analysis(name), SETS[name]["certified"]
    digits = {
        quantity: log_relative_error(found[quantity].item(), text) for quantity, text in certified.items()
    }
    assert digits.pop("df_effect") == digits.pop("df_error") == 15.0
    for quantity, reached in digits.items():
        least = ERROR_DIGITS if quantity in ("ss_error", "ms_error", "pooled_sd") else DIGITS[name]
        assert reached >= least, (quantity, reached)


@pytest.mark.parametrize("name", SETS)
def test_arithmetic_loses_little_beyond_the_rounding_of_the_means(name: str) -> None:
    """Against exact arithmetic on the same doubles: what is lost here is the catalogue's own doing.

    SS_effect = Σ n(M - GM)² with GM in double precision: an error ε·GM of the grand mean adds N(ε·GM)².
    """
    n, mean, _ = summaries(name)
    sizes, means = [Fraction(x) for x in n[0]], [Fraction(x) for x in mean[0]]
    grand = sum(a * b for a, b in zip(sizes, means, strict=True)) / sum(sizes)
    exact = sum(a * (b - grand) ** 2 for a, b in zip(sizes, means, strict=True))
    found = Fraction(groups.effect_sum_from_means(n, mean).item())
    room = sum(sizes) * (Fraction(8 * np.finfo(float).eps) * abs(grand)) ** 2
    assert abs(found - exact) <= Fraction(1, 10**13) * exact + room


@pytest.mark.parametrize("name", SETS)
def test_p_from_the_certified_f(name: str) -> None:
    """p to eleven digits; three sets have p near 2e-2477, below the smallest double, and give 0."""
    certified = SETS[name]["certified"]
    p = p_values.p_from_f(*one(*(float(certified[q]) for q in ("f_value", "df_effect", "df_error")))).item()
    exact = Decimal(SETS[name]["p_exact"])
    if exact < Decimal("1e-320"):
        assert p == 0.0
    else:
        assert p == pytest.approx(float(exact), rel=1e-11)


@pytest.mark.parametrize("name", SETS)
def test_certified_f_leads_back_to_the_certified_r_squared(name: str) -> None:
    certified = {quantity: float(text) for quantity, text in SETS[name]["certified"].items()}
    f, v1, v2 = one(*(certified[q] for q in ("f_value", "df_effect", "df_error")))
    eta = explained.eta_squared_from_f(f, v1, v2).item()
    assert log_relative_error(eta, SETS[name]["certified"]["eta_squared"]) >= 14
    cells = {quantity: certified[quantity] for quantity in ("f_value", "df_effect", "df_error")}
    row = converted("one-way", "eta_squared", cells)
    assert row.estimate == pytest.approx(certified["eta_squared"], rel=1e-14)


@pytest.mark.parametrize("name", [name for name, digits in DIGITS.items() if digits == 13])
def test_whole_conversion_of_summaries(name: str) -> None:
    n, mean, sd = summaries(name)
    cells = {"n": [*n[0]], "mean": [*mean[0]], "sd": [*sd[0]]}
    row = converted("one-way", "eta_squared", cells)
    assert log_relative_error(row.estimate, SETS[name]["certified"]["eta_squared"]) >= 13
    assert row.estimate_low <= row.estimate <= row.estimate_high
