"""Estimates from medians: published formulas and tables, and the gate that refuses visibly skewed groups."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from scipy import integrate, stats

from extractor.catalogue import medians
from extractor.catalogue.medians import unskewed_by_five, unskewed_by_quartiles, unskewed_by_range
from extractor.catalogue.relation import CATALOGUE, FloatArray, Grade
from extractor.routes.intervals import image
from extractor.routes.planner import Start, search
from tests.catalogue.families import check_family, relations_in
from tests.catalogue.worlds import World

# Diez, Cetinkaya-Rundel & Barr, OpenIntro Statistics, exercise on course credits: n = 100, 8, 13, 14, 15, 18;
# the book prints mean 13.65 and SD 1.91
CREDITS = {"n": 100.0, "minimum": 8.0, "q1": 13.0, "median": 14.0, "q3": 15.0, "maximum": 18.0}
# the same quartiles with symmetric extremes and fewer scores
EVEN = CREDITS | {"minimum": 9.0, "maximum": 19.0, "n": 25.0}


def estimate(name: str, numbers: dict[str, float]) -> float:
    """One estimate for one group."""
    relation = CATALOGUE[name]
    return float(relation.formula(*(np.array([[numbers[need]]]) for need in relation.needs))[0, 0])


def ungated(name: str, numbers: dict[str, float]) -> float:
    """The estimate before the gate: the middle of its image for a point."""
    relation = CATALOGUE[name]
    inputs = {need: (np.array([[numbers[need]]]), np.array([[numbers[need]]])) for need in relation.needs}
    low, high = image(relation, inputs)
    return float((low[0, 0] + high[0, 0]) / 2)


def five_numbers(scores: FloatArray) -> World:
    """Summaries of samples, shape (rows, groups, n) to (rows, groups)."""
    q1, median, q3 = np.quantile(scores, [0.25, 0.5, 0.75], axis=-1)
    return {
        "n": np.full(median.shape, float(scores.shape[-1])),
        "minimum": scores.min(axis=-1),
        "q1": q1,
        "median": median,
        "q3": q3,
        "maximum": scores.max(axis=-1),
    }


# ---- published formulas ----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("sd_from_range", 2.001128187),
        ("sd_from_quartiles", 1.5044),
        ("sd_from_five_numbers", 1.739885534),
        ("mean_from_range", 13.88771229),
        ("mean_from_quartiles", 14.0),
        ("mean_from_five_numbers", 13.9350),
    ],
)
def test_formulas_on_the_credits(name: str, expected: float) -> None:
    """Wan et al. (2014), eqs 9 and 16; Luo et al. (2018), scenarios 1 to 3; Shi et al. (2020); from memory.

    Values computed from the formulas by a second arrangement; no source prints them.
    """
    digits = len(str(expected).split(".")[1])
    assert round(ungated(name, CREDITS), digits) == pytest.approx(expected, abs=10.0**-digits / 100)


def test_shi_is_a_weighted_mean_of_the_two_estimates_of_wan() -> None:
    """Shi et al. (2020): weight 1/(1 + .07·n^.6) on the range; second arrangement of the same formula."""
    weight = 1 / (1 + 0.07 * EVEN["n"] ** 0.6)
    mixed = weight * estimate("sd_from_range", EVEN) + (1 - weight) * estimate("sd_from_quartiles", EVEN)
    assert estimate("sd_from_five_numbers", EVEN) == pytest.approx(mixed, rel=1e-12)


def test_divisors_are_near_the_exact_expectations() -> None:
    """Wan et al. (2014), tables 1 and 2, from memory: xi(25) = 3.931, xi(50) = 4.498 and eta(41) = 1.303.

    The closed forms used here are their approximations; they stay within 1 % of the tables at these sizes.
    """

    def expected_order_statistic(rank: int, n: int) -> float:
        def density(z: float) -> float:
            return z * float(stats.norm.pdf(z) * n * stats.binom.pmf(rank - 1, n - 1, stats.norm.cdf(z)))

        return float(integrate.quad(density, -9, 9)[0])

    assert round(2 * expected_order_statistic(25, 25), 3) == 3.931
    assert round(expected_order_statistic(31, 41) - expected_order_statistic(11, 41), 3) == 1.303
    for n, xi in ((25, 3.931), (50, 4.498)):
        numbers = {"n": float(n), "minimum": 0.0, "median": 0.5, "maximum": 1.0}
        assert 1 / estimate("sd_from_range", numbers) == pytest.approx(xi, rel=0.01)
    quartiles = {"n": 41.0, "q1": 0.0, "median": 0.5, "q3": 1.0}
    assert 1 / estimate("sd_from_quartiles", quartiles) == pytest.approx(1.303, rel=0.01)


@pytest.mark.parametrize("name", [r.name for r in relations_in(medians)])
def test_estimates_are_nearly_unbiased_for_normal_scores(name: str) -> None:
    scores = np.random.default_rng(1).normal(50, 10, size=(8000, 1, 30))
    world = five_numbers(scores)
    relation = CATALOGUE[name]
    with np.errstate(all="ignore"):
        values = relation.formula(*(world[need] for need in relation.needs))
    target = 50.0 if relation.gives == "mean" else 10.0
    assert np.nanmean(values) == pytest.approx(target, rel=0.02)


# ---- the gate --------------------------------------------------------------------------------------

Gate = Callable[[World], FloatArray]
GATES: dict[str, Gate] = {
    "range": lambda w: unskewed_by_range(w["n"], w["minimum"], w["median"], w["maximum"]),
    "quartiles": lambda w: unskewed_by_quartiles(w["n"], w["q1"], w["median"], w["q3"]),
    "five": lambda w: unskewed_by_five(w["n"], w["minimum"], w["q1"], w["median"], w["q3"], w["maximum"]),
}


@pytest.mark.parametrize("n", [5, 9, 21, 61, 201])
@pytest.mark.parametrize("gate", GATES)
def test_gate_refuses_one_normal_group_in_twenty(gate: str, n: int) -> None:
    """Shi et al. (2023): critical values of level .05; simulated here with a standard error of .0015."""
    world = five_numbers(np.random.default_rng(n).normal(size=(20_000, 1, n)))
    refused = 1 - GATES[gate](world).mean()
    assert 0.03 < refused < 0.06


@pytest.mark.parametrize("gate", GATES)
def test_gate_refuses_skewed_groups(gate: str) -> None:
    world = five_numbers(np.random.default_rng(3).lognormal(0, 1, size=(4000, 1, 301)))
    assert GATES[gate](world).mean() < 0.1


def test_groups_are_judged_one_by_one() -> None:
    relation = CATALOGUE["mean_from_five_numbers"]
    both = {name: np.array([[EVEN[name], EVEN[name]]]) for name in relation.needs}
    both["maximum"] = np.array([[EVEN["maximum"], 60.0]])
    found = relation.formula(*both.values())
    assert np.isfinite(found[0, 0])
    assert np.isnan(found[0, 1])


@pytest.mark.parametrize("name", [r.name for r in relations_in(medians)])
@pytest.mark.parametrize(
    "change",
    [
        {"n": 4.0},
        {"n": np.nan},
        {"median": np.nan},
        {"median": 8.0, "q1": 8.0, "minimum": 8.0},
        {"minimum": 20.0, "q1": 16.0},
        {"minimum": 14.0, "q1": 14.0, "q3": 14.0, "maximum": 14.0},
    ],
    ids=["few", "no n", "no median", "median on an end", "out of order", "no spread"],
)
def test_no_estimate_where_the_gate_cannot_pass(name: str, change: dict[str, float]) -> None:
    assert np.isfinite(estimate(name, EVEN))
    assert np.isnan(estimate(name, EVEN | change))


# ---- images and grade ------------------------------------------------------------------------------


@pytest.mark.parametrize("n", [5, 30])
def test_images_hold_the_values(n: int) -> None:
    world = five_numbers(np.random.default_rng(n).normal(3, 2, size=(300, 3, n)))
    check_family(medians, {"one-way": world})


def test_image_of_rounded_numbers_is_finite_even_where_a_corner_is_refused() -> None:
    relation = CATALOGUE["sd_from_quartiles"]
    inputs = {
        "n": (np.full((1, 1), 100.0),) * 2,
        "q1": (np.full((1, 1), 12.5), np.full((1, 1), 13.5)),
        "median": (np.full((1, 1), 13.5), np.full((1, 1), 14.5)),
        "q3": (np.full((1, 1), 14.5), np.full((1, 1), 15.5)),
    }
    low, high = image(relation, inputs)
    assert (low[0, 0], high[0, 0]) == (
        pytest.approx(1.5044 / 2, abs=1e-4),
        pytest.approx(1.5044 * 1.5, abs=1e-4),
    )


def test_all_estimates_are_approximations_with_a_named_assumption() -> None:
    assert {r.grade for r in relations_in(medians)} == {Grade.APPROXIMATION}
    assert all("normal scores" in r.assumes for r in relations_in(medians))
    known = {"n", "k_groups", "median", "q1", "q3", "contrast_weight"}
    routes = search(Start(frozenset(known)), "two-group")["cohens_d"]
    assert {route.grade for route in routes} == {Grade.APPROXIMATION}
