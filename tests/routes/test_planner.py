"""The search for routes: the same plan every time, no circles, no route that statistics forbids, honest grades."""

from __future__ import annotations

import os
import subprocess
import sys
from itertools import combinations

import numpy as np
import pytest

from extractor.catalogue.relation import Grade, catalogue
from extractor.quantities import METRICS
from extractor.routes.planner import Route, Start, relations_of, search
from extractor.routes.unlock import ASKABLE, unlocking_sets

DEFAULTS = frozenset({"tails", "confidence_level"})
REPORTABLE = sorted(
    {
        "n",
        "mean",
        "sd",
        "se",
        "n_total",
        "k_groups",
        "f_value",
        "df_effect",
        "df_error",
        "t_value",
        "df",
        "p_value",
        "ss_effect",
        "ss_error",
        "ss_total",
        "ms_effect",
        "ms_error",
        "eta_squared",
        "omega_squared",
        "epsilon_squared",
        "cohens_f",
        "cohens_d",
        "hedges_g",
        "r",
        "mean_difference",
        "se_difference",
        "direction",
    }
)


def start(*known: str, bounds: frozenset[str] = frozenset(), assumed: frozenset[str] = DEFAULTS) -> Start:
    return Start(frozenset(known), bounds, assumed)


def routes(metric: str, design: str, *known: str, bounds: tuple[str, ...] = ()) -> tuple[Route, ...]:
    return search(start(*known, bounds=frozenset(bounds)), design).get(metric, ())


def random_known(rng: np.random.Generator, design: str) -> frozenset[str]:
    known = {name for name in REPORTABLE if rng.random() < rng.choice([0.1, 0.3, 0.6])}
    known |= {"contrast_weight"} if "mean" in known or "n" in known else set()
    known |= {"k_groups"} if design == "two-group" else set()
    return frozenset(known)


# ---- one plan, whatever the order of sets --------------------------------------------------------

_PLAN = """
import numpy as np
from extractor.routes.planner import Start, search
from extractor.quantities import METRICS
from tests.routes.test_planner import DEFAULTS, random_known
rng = np.random.default_rng(1)
for design in ("one-way", "two-group"):
    for _ in range(6):
        known = random_known(rng, design)
        found = search(Start(known, frozenset(), DEFAULTS), design)
        for metric in METRICS:
            for route in found.get(metric, ()):
                print(design, metric, sorted(route.leaves), route.ordered(), sorted(route.steps.items()), route.grade)
"""


def test_plan_does_not_depend_on_the_order_of_sets() -> None:
    """PYTHONHASHSEED shuffles the iteration order of sets of words; the plan must not notice."""
    printed = set()
    for seed in ("0", "1", "4711"):
        done = subprocess.run(
            [sys.executable, "-c", _PLAN],
            env={**os.environ, "PYTHONHASHSEED": seed},
            capture_output=True,
            text=True,
            check=True,
            timeout=60,
        )
        printed.add(done.stdout)
    assert len(printed) == 1
    assert len(printed.pop().splitlines()) > 100


# ---- shape of a route ----------------------------------------------------------------------------


@pytest.mark.parametrize("design", ["one-way", "two-group", "one-way-partial"])
def test_routes_are_derivations(design: str) -> None:
    """No circle, every step's inputs at hand when it runs, every step and leaf needed, each quantity derived once."""
    rng = np.random.default_rng(2)
    relations = catalogue()
    allowed = {r.name for r in relations_of(design)}
    seen = 0
    for _ in range(12):
        known = random_known(rng, design)
        for quantity, found in search(start(*known), design).items():
            for route in found:
                seen += 1
                order = route.ordered()
                assert set(order) == set(route.steps.values()) <= allowed
                assert quantity not in route.leaves or not order
                have = set(route.leaves)
                assert have <= known | DEFAULTS
                used: set[str] = set()
                for name in order:
                    relation = relations[name]
                    assert set(relation.needs) <= have, (quantity, name)
                    assert relation.gives not in have, (quantity, name)
                    have.add(relation.gives)
                    used |= set(relation.needs)
                assert have == used | {quantity}
    assert seen > 500


def _closure(known: frozenset[str], design: str) -> set[str]:
    """Everything that follows from what is known, by plain forward chaining."""
    have = set(known)
    while more := {r.gives for r in relations_of(design) if set(r.needs) <= have} - have:
        have |= more
    return have


@pytest.mark.parametrize("design", ["one-way", "two-group", "one-way-partial"])
def test_search_reaches_all_that_follows_and_nothing_else(design: str) -> None:
    """Keeping only the best few derivations of each quantity loses none that can be derived at all."""
    rng = np.random.default_rng(9)
    for _ in range(15):
        known = random_known(rng, design)
        assert set(search(start(*known), design)) == _closure(known | DEFAULTS, design), sorted(known)


def test_grade_is_the_worst_of_steps_and_leaves() -> None:
    rng = np.random.default_rng(3)
    relations = catalogue()
    grades = set()
    for _ in range(12):
        known = random_known(rng, "two-group")
        bounds = frozenset({"p_value"}) if rng.random() < 0.5 else frozenset()
        for found in search(start(*(known - bounds), bounds=bounds), "two-group").values():
            for route in found:
                worst = max((relations[name].grade for name in route.ordered()), default=Grade.IDENTITY)
                worst = max(worst, Grade.ASSUMPTION if route.assumed else Grade.IDENTITY)
                worst = max(worst, Grade.BOUND if route.leaves & bounds else Grade.IDENTITY)
                assert route.grade is worst
                assert route.assumed == route.leaves & DEFAULTS - known
                grades.add(worst)
    assert grades == set(Grade)


def test_best_route_comes_first() -> None:
    rng = np.random.default_rng(4)
    for _ in range(12):
        known = random_known(rng, "two-group")
        for found in search(start(*known), "two-group").values():
            keys = [(route.assumptions, route.grade) for route in found]
            assert keys == sorted(keys)


def test_a_reported_metric_is_its_own_best_route() -> None:
    found = routes("omega_squared", "one-way", "omega_squared", "f_value", "df_effect", "df_error")
    assert found[0].leaves == {"omega_squared"}
    assert found[0].ordered() == []
    assert any(route.leaves == {"f_value", "df_effect", "df_error"} for route in found)


# ---- what must not be converted ------------------------------------------------------------------


@pytest.mark.parametrize(
    "metric", ["cohens_d", "hedges_g", "r", "fisher_z", "log_odds_ratio", "mean_difference"]
)
@pytest.mark.parametrize(
    "known",
    [
        ("f_value", "df_effect", "df_error"),
        ("f_value", "df_effect", "df_error", "n_total", "direction"),
        ("f_value", "df_effect", "df_error", "n", "direction"),
        ("p_value", "df_effect", "df_error", "n_total", "k_groups"),
        ("ss_effect", "ss_error", "ss_total", "df_effect", "df_error"),
        ("eta_squared", "omega_squared", "epsilon_squared", "cohens_f", "n_total", "k_groups", "direction"),
    ],
)
def test_omnibus_statistics_of_several_groups_lead_to_no_contrast(
    metric: str, known: tuple[str, ...]
) -> None:
    assert routes(metric, "one-way", *known) == ()


@pytest.mark.parametrize("metric", ["cohens_d", "hedges_g"])
def test_means_open_the_contrast_of_several_groups(metric: str) -> None:
    known = ("f_value", "df_effect", "df_error", "n", "mean", "contrast_weight")
    assert routes(metric, "one-way", *known)[0].grade is Grade.IDENTITY


@pytest.mark.parametrize("metric", ["cohens_d", "hedges_g", "r", "fisher_z", "log_odds_ratio"])
@pytest.mark.parametrize(
    "unsigned",
    [
        ("f_value", "df_effect", "df_error"),
        ("p_value", "df_error", "tails"),
        ("eta_squared", "n_total"),
        ("cohens_f", "n_total"),
        ("ss_effect", "ss_error", "n_total"),
    ],
)
def test_an_unsigned_statistic_needs_a_direction(metric: str, unsigned: tuple[str, ...]) -> None:
    known = (*unsigned, "n", "contrast_weight", "k_groups")
    assert routes(metric, "two-group", *known) == ()
    assert routes(metric, "two-group", *known, "direction")


def test_means_bring_their_own_direction() -> None:
    known = ("f_value", "df_error", "n", "mean", "contrast_weight", "k_groups")
    found = routes("r", "two-group", *known)
    assert found
    assert found[0].grade is Grade.IDENTITY


def test_welch_f_leads_to_no_index() -> None:
    """Welch's F answers another question; only the audit may use it."""
    for metric in METRICS:
        assert routes(metric, "one-way", "welch_f", "welch_df_error", "k_groups") == ()


# ---- grades --------------------------------------------------------------------------------------


@pytest.mark.parametrize("metric", ["omega_squared", "eta_squared", "cohens_f"])
def test_a_bound_on_p_gives_a_bound(metric: str) -> None:
    found = routes(metric, "one-way", "df_effect", "df_error", "tails", bounds=("p_value",))
    assert [route.grade for route in found] == [Grade.BOUND]


def test_a_bound_on_p_does_not_touch_routes_without_it() -> None:
    found = routes(
        "omega_squared", "one-way", "f_value", "df_effect", "df_error", "tails", bounds=("p_value",)
    )
    assert found[0].grade is Grade.IDENTITY
    assert "p_value" not in found[0].leaves


def test_equal_split_is_an_assumption() -> None:
    found = routes("cohens_d", "two-group", "t_value", "n_total", "k_groups")
    assert found[0].grade is Grade.ASSUMPTION
    assert "equal_split" in found[0].ordered()
    assert found[0].assumptions == 1


def test_group_sizes_make_the_equal_split_unneeded() -> None:
    found = routes("cohens_d", "two-group", "t_value", "n_total", "n", "contrast_weight", "k_groups")
    assert found[0].grade is Grade.IDENTITY
    assert "equal_split" not in found[0].ordered()


def test_assumed_tails_are_an_assumption_and_coded_tails_are_not() -> None:
    known = ("p_value", "df_effect", "df_error")
    assumed = routes("omega_squared", "one-way", *known)
    coded = routes("omega_squared", "one-way", *known, "tails")
    assert (assumed[0].grade, assumed[0].assumed) == (Grade.ASSUMPTION, frozenset({"tails"}))
    assert (coded[0].grade, coded[0].assumed) == (Grade.IDENTITY, frozenset())


# ---- what would unlock ---------------------------------------------------------------------------


@pytest.mark.parametrize("design", ["one-way", "two-group"])
def test_unlocking_sets_open_a_route_and_no_smaller_set_does(design: str) -> None:
    rng = np.random.default_rng(5)
    blocked = 0
    for _ in range(20):
        known = frozenset(name for name in random_known(rng, design) if rng.random() < 0.5)
        before = start(*known)
        for metric in METRICS:
            if search(before, design).get(metric):
                continue
            sets = unlocking_sets(before, design, metric)
            blocked += bool(sets)
            for asked in sets:
                assert asked <= ASKABLE - known
                assert _opens(known | asked, design, metric), (sorted(known), metric, sorted(asked))
                for smaller in combinations(sorted(asked), len(asked) - 1):
                    # routes only grow with what is known, so leaving out one quantity tests every proper subset
                    assert not _opens(known | set(smaller), design, metric), (
                        sorted(known),
                        metric,
                        sorted(asked),
                    )
    assert blocked > 20


def _opens(known: frozenset[str], design: str, metric: str) -> bool:
    # a contrast is at hand as soon as groups are coded
    return bool(search(start(*known, "contrast_weight"), design).get(metric))


def test_unlocking_the_classic_case() -> None:
    """An F of several groups and a wish for d: every remedy brings the contrast itself; a sign alone is none."""
    known = frozenset({"f_value", "df_effect", "df_error"})
    sets = unlocking_sets(start(*known), "one-way", "cohens_d", most=20)
    assert sets
    assert all(asked & {"mean", "mean_difference", "t_value"} for asked in sets)
    assert _opens(known | {"mean", "n"}, "one-way", "cohens_d")
    assert not _opens(known | {"n", "direction"}, "one-way", "cohens_d")


def test_direction_alone_unlocks_a_two_group_f() -> None:
    sets = unlocking_sets(
        start("f_value", "df_error", "n", "contrast_weight", "k_groups"), "two-group", "hedges_g"
    )
    assert frozenset({"direction"}) in sets
