"""Every relation of the catalogue: declared well, true, monotone as it says, its interval image sound and tight.

The reference for "true" is ``worlds``: studies in which all quantities are computed from sizes, means and standard
deviations by their definitions. Nothing here lists relations by hand, so a new one is tested as soon as it exists.
"""

from __future__ import annotations

from itertools import combinations, product
from pathlib import Path

import numpy as np
import pytest

from extractor.catalogue.relation import FloatArray, Grade, Interval, Relation, catalogue
from extractor.quantities import DESIGNS, VOCABULARY, Shape
from extractor.routes.intervals import image
from tests.catalogue.worlds import CHOICES, anywhere, boxes, inside, one_factor, some_study, world, worlds_of

DECLARED = sorted(catalogue().values(), key=lambda r: r.name)
KNOWN = world(np.random.default_rng(0), 1, 2).keys()
ONE_FACTOR = [r for r in DECLARED if one_factor(r) and {r.gives, *r.needs} <= KNOWN]
ELSEWHERE = [r for r in DECLARED if one_factor(r) and not {r.gives, *r.needs} <= KNOWN]
# other designs need worlds of their own, except for plain formulas of inputs that may take any value
OTHERS = [r for r in DECLARED if not one_factor(r) and r.image is None and r.routes and anywhere(r)]
RELATIONS = ONE_FACTOR + OTHERS
ROUTING = [r for r in RELATIONS if r.routes]
NARROWING = [r for r in RELATIONS if not r.routes]
GENERIC = [r for r in ROUTING if r.image is None]
DESIGN_WORDS = DESIGNS.keys() | {"one-way-partial"}
BOXES = 200
POINTS = 200


def named(relations: list[Relation]) -> pytest.MarkDecorator:
    return pytest.mark.parametrize("relation", relations, ids=lambda r: r.name)


def evaluate(relation: Relation, inputs: dict[str, FloatArray]) -> FloatArray:
    with np.errstate(all="ignore"):
        return np.asarray(relation.formula(*(inputs[name] for name in relation.needs)))


def contains(interval: Interval, value: FloatArray, slack: float = 0.0) -> FloatArray:
    """Where a value lies in an interval; values that are undefined are nowhere else."""
    value = np.where(np.isfinite(value), value, np.nan)
    room = slack * np.abs(value)
    return np.isnan(value) | ((interval[0] <= value + room) & (interval[1] >= value - room))


# ---- declarations ------------------------------------------------------------------------------


@named(DECLARED)
def test_declaration_names_source_equation_and_known_designs(relation: Relation) -> None:
    assert len(relation.source) >= 10
    assert len(relation.equation) >= 5
    assert relation.designs
    assert relation.designs <= DESIGN_WORDS
    assert {relation.gives, *relation.needs} <= VOCABULARY.keys()
    assert (relation.grade is Grade.IDENTITY) == (relation.assumes == "")


@named(GENERIC)
def test_each_input_is_declared_once(relation: Relation) -> None:
    declared = [*relation.rising, *relation.falling, *relation.either, *relation.exact]
    assert sorted(declared) == sorted(relation.needs)


def test_names_are_the_functions_own() -> None:
    assert all(r.formula.__name__ == r.name and r.formula.__module__.endswith(r.family) for r in DECLARED)


def test_every_one_factor_relation_is_tested_here_or_by_its_family() -> None:
    own = {path.stem.removeprefix("test_") for path in Path(__file__).parent.glob("test_*.py")}
    assert len(ONE_FACTOR) > 80
    assert {r.family for r in ELSEWHERE} <= own


# ---- truth -------------------------------------------------------------------------------------


@named([r for r in ROUTING if one_factor(r)])
def test_formula_gives_what_the_definitions_give(relation: Relation) -> None:
    for true in worlds_of(relation, 300, seed=1):
        found = evaluate(relation, true)
        expected = true[relation.gives]
        assert found.shape == expected.shape
        np.testing.assert_allclose(found, expected, rtol=1e-9, atol=0)


@named(NARROWING)
def test_a_relation_that_only_narrows_returns_its_own_input(relation: Relation) -> None:
    for true in worlds_of(relation, 5, seed=2):
        np.testing.assert_array_equal(evaluate(relation, true), true[relation.gives])


# ---- soundness and tightness of images ----------------------------------------------------------


@named(RELATIONS)
def test_image_holds_the_truth_whatever_the_box_around_it(relation: Relation) -> None:
    rng = np.random.default_rng(3)
    for true in worlds_of(relation, 2000, seed=4):
        found = image(relation, boxes(rng, relation, true))
        assert contains(found, true[relation.gives]).all()


@named([r for r in RELATIONS if r.narrows or not r.routes])
def test_narrowed_image_holds_the_truth(relation: Relation) -> None:
    """The branch that is dropped because of what is known already is never the true one."""
    rng = np.random.default_rng(5)
    for true in worlds_of(relation, 2000, seed=6):
        value = true[relation.gives]
        width = 10.0 ** rng.integers(-6, 2, size=value.shape) * (np.abs(value) + 1e-3)
        current = value - width * rng.random(value.shape), value + width * rng.random(value.shape)
        found = image(relation, boxes(rng, relation, true), current)
        assert contains(found, value).all()


@named(ROUTING)
def test_image_holds_the_formula_at_random_points_of_random_boxes(relation: Relation) -> None:
    rng = np.random.default_rng(7)
    for true in worlds_of(relation, BOXES, seed=8):
        around = boxes(rng, relation, true)
        low, high = image(relation, around)
        support = VOCABULARY[relation.gives]
        for _ in range(POINTS):
            point = {name: inside(rng, name, around[name], true[name]) for name in relation.needs}
            value = evaluate(relation, point)
            study = some_study(relation, point)
            possible = (
                (study if value.ndim == 1 else study[:, None])
                & (value >= support.low)
                & (value <= support.high)
            )
            assert contains((low, high), np.where(possible, value, np.nan), relation.accuracy).all()


@named(GENERIC)
def test_generic_image_is_attained_at_a_corner_of_the_box(relation: Relation) -> None:
    """The image is no wider than the least and greatest value over the corners, but for the floating-point padding."""
    rng = np.random.default_rng(9)
    support = VOCABULARY[relation.gives]
    for true in worlds_of(relation, BOXES, seed=10):
        around = boxes(rng, relation, true)
        low, high = image(relation, around)
        corners = [
            evaluate(relation, dict(zip(relation.needs, corner, strict=True)))
            for corner in product(*(around[name] for name in relation.needs))
        ]
        least, most = np.min(corners, axis=0), np.max(corners, axis=0)
        defined = np.isfinite(least) & np.isfinite(most)
        assert defined.any()
        least, most = np.maximum(least, support.low), np.minimum(most, support.high)
        padding = 2 * relation.accuracy
        assert (low >= least - padding * np.abs(least) - 1e-290)[defined].all()
        assert (high <= most + padding * np.abs(most) + 1e-290)[defined].all()


@named(RELATIONS)
def test_image_of_nothing_known_concludes_nothing_false(relation: Relation) -> None:
    """Supports as inputs: whatever comes out, it holds every true value."""
    for true in worlds_of(relation, 200, seed=11):
        around = {}
        for name in relation.needs:
            quantity, value = VOCABULARY[name], true[name]
            around[name] = (np.full_like(value, quantity.low), np.full_like(value, quantity.high))
            if name == "contrast_weight":
                around[name] = value, value
        assert contains(image(relation, around), true[relation.gives]).all()


def test_image_of_omega_squared_when_the_box_of_its_df_reaches_past_n() -> None:
    """ω² has a pole where df1·(1 - F) = N; the possible df1 below it must stay inside the image.

    Ten participants, F in [0, 5], df1 in [1, 20]: df1 = 8 at F = 0 gives ω² = -8/2.
    """
    relation = catalogue()["omega_squared_from_f"]
    ends = {"f_value": (0.0, 5.0), "df_effect": (1.0, 20.0), "n_total": (10.0, 10.0)}
    low, high = image(relation, {name: (np.array([a]), np.array([b])) for name, (a, b) in ends.items()})
    assert low[0] <= -4.0
    assert high[0] >= 8 * 4 / (8 * 4 + 10)


# ---- monotonicity ------------------------------------------------------------------------------


def _moved(true: FloatArray, name: str, steps: int, rng: np.random.Generator) -> list[FloatArray]:
    """Values of one input in rising order; of a group quantity only one group moves."""
    quantity = VOCABULARY[name]
    at = np.sort(10.0 ** rng.uniform(-1.5, 1.5, size=(steps, len(true))), axis=0)
    if quantity.integer:
        at = quantity.low + rng.integers(1, 5, size=at.shape).cumsum(axis=0)
    column = true[:, 0] if true.ndim == 2 else true
    if quantity.low == -np.inf:
        at = (at - 3) * (np.abs(column) + 0.1) if quantity.high == np.inf else 1 - at / 5
    elif np.isfinite(quantity.low) and np.isfinite(quantity.high):
        at = quantity.low + (quantity.high - quantity.low) * np.sort(
            rng.uniform(0.001, 0.999, at.shape), axis=0
        )
    elif not quantity.integer:
        at = at * np.abs(column)
    at = np.sort(at, axis=0)
    if true.ndim == 1:
        return list(at)
    moved = []
    for row in at:
        changed = true.copy()
        changed[:, 0] = row
        moved.append(changed)
    return moved


@named(GENERIC)
def test_declared_monotonicity(relation: Relation) -> None:
    """One input moves through its support in five rising steps, the others stay; the result never turns back."""
    rng = np.random.default_rng(12)
    for true in worlds_of(relation, 400, seed=13):
        for name in sorted(set(relation.needs) - relation.exact - set(CHOICES)):
            values = []
            for moved in _moved(true[name], name, 5, rng):
                point = {**true, name: moved}
                value, possible = evaluate(relation, point), some_study(relation, point)
                values.append(np.where(possible if value.ndim == 1 else possible[:, None], value, np.nan))
            steps = np.diff(np.array(values), axis=0)
            slack = 1e-12 * np.nanmax(np.abs(np.array(values)), axis=0, initial=0)
            up, down = (steps >= -slack) | np.isnan(steps), (steps <= slack) | np.isnan(steps)
            assert np.isfinite(steps).mean() > 0.5, name
            if name in relation.rising:
                assert up.all(), name
            elif name in relation.falling:
                assert down.all(), name
            else:
                assert (up.all(axis=0) | down.all(axis=0)).all(), name


# ---- inverse pairs -----------------------------------------------------------------------------


def _inverse(there: Relation, back: Relation) -> bool:
    return (
        there.gives in back.needs
        and back.gives in there.needs
        and set(there.needs) - {back.gives} == set(back.needs) - {there.gives}
    )


PAIRS = [(a, b) for a, b in combinations(ROUTING, 2) if _inverse(a, b) and bool(a.designs & b.designs)]


def test_the_catalogue_has_inverse_pairs() -> None:
    names = {frozenset([a.name, b.name]) for a, b in PAIRS}
    assert frozenset(["eta_squared_from_f", "f_from_eta_squared"]) in names
    assert frozenset(["p_from_f", "f_from_p"]) in names
    assert frozenset(["d_from_t", "t_from_d"]) in names


@pytest.mark.parametrize(("there", "back"), PAIRS, ids=[f"{a.name}, {b.name}" for a, b in PAIRS])
def test_inverse_pairs_round_trip(there: Relation, back: Relation) -> None:
    """There and back for inputs that need not come from one study: each lies anywhere in a box of its own."""
    rng = np.random.default_rng(14)
    for true in worlds_of(there if len(there.designs) < len(back.designs) else back, 500, seed=15):
        around = boxes(rng, there, true)
        apart = {name: inside(rng, name, around[name], true[name]) for name in there.needs}
        start = apart[back.gives]
        end = evaluate(back, {**apart, there.gives: evaluate(there, apart)})
        usable = np.isfinite(end)
        assert usable.mean() > 0.5
        np.testing.assert_allclose(end[usable], start[usable], rtol=1e-8, atol=1e-10)


def test_every_group_quantity_and_scalar_has_its_shape() -> None:
    for relation in RELATIONS:
        for true in worlds_of(relation, 3, seed=16):
            grouped = VOCABULARY[relation.gives].shape is Shape.GROUP
            assert evaluate(relation, true).ndim == (2 if grouped else 1), relation.name
