"""Checks that every family of relations must pass, for families whose worlds their own tests draw."""

from __future__ import annotations

from itertools import pairwise
from types import ModuleType

import numpy as np

from extractor.catalogue.relation import CATALOGUE, FloatArray, Interval, Relation
from extractor.quantities import VOCABULARY
from extractor.routes.intervals import image
from tests.catalogue.worlds import World, boxes, inside


def relations_in(module: ModuleType) -> list[Relation]:
    """The relations a module entered, by name."""
    family = module.__name__.rsplit(".", 1)[-1]
    return sorted((r for r in CATALOGUE.values() if r.family == family), key=lambda r: r.name)


def evaluate(relation: Relation, inputs: World) -> FloatArray:
    """The formula, values outside the support of the quantity given replaced by NaN."""
    with np.errstate(all="ignore"):
        value = np.asarray(relation.formula(*(inputs[name] for name in relation.needs)), dtype=float)
    support = VOCABULARY[relation.gives]
    return np.where((value >= support.low) & (value <= support.high) & np.isfinite(value), value, np.nan)


def _outside(interval: Interval, value: FloatArray, slack: float) -> FloatArray:
    room = slack * np.abs(value)
    return np.isfinite(value) & ((interval[0] > value + room) | (interval[1] < value - room))


def check_image(relation: Relation, true: World, *, points: int = 60, seed: int = 1) -> None:
    """The image of boxes around the inputs holds the formula's value at the inputs and all over the boxes."""
    rng = np.random.default_rng(seed)
    value = evaluate(relation, true)
    assert np.isfinite(value).any(), "the check would say nothing"
    around = boxes(rng, relation, true)
    found = image(relation, around)
    assert not _outside(found, value, 0.0).any()
    for _ in range(points):
        point = {name: inside(rng, name, around[name], true[name]) for name in relation.needs}
        assert not _outside(found, evaluate(relation, point), relation.accuracy).any()
    if relation.narrows:
        width = 10.0 ** rng.integers(-6, 1, size=value.shape)
        current = value - width * rng.random(value.shape), value + width * rng.random(value.shape)
        known = np.isfinite(value)
        current = np.where(known, current[0], -np.inf), np.where(known, current[1], np.inf)
        assert not _outside(image(relation, around, current), value, 0.0).any()


def check_image_of_nothing_known(relation: Relation, true: World) -> None:
    """Supports as inputs conclude nothing false."""
    around: dict[str, Interval] = {}
    for name in relation.needs:
        quantity, value = VOCABULARY[name], true[name]
        known = name == "contrast_weight"
        around[name] = (value, value) if known else (value * 0 + quantity.low, value * 0 + quantity.high)
    assert not _outside(image(relation, around), evaluate(relation, true), 0.0).any()


def check_monotone(relation: Relation, true: World, *, seed: int = 2) -> None:
    """Declared directions: one input moves up in steps, the others stay."""
    rng = np.random.default_rng(seed)
    for name in sorted(relation.rising | relation.falling):
        quantity = VOCABULARY[name]
        steps = [true[name]]
        for _ in range(4):
            step = rng.integers(1, 4, true[name].shape) if quantity.integer else rng.random(true[name].shape)
            steps.append(np.minimum(steps[-1] + step * (1 if quantity.integer else 0.2), quantity.high))
        values = [evaluate(relation, {**true, name: at}) for at in steps]
        assert np.isfinite(values).mean() > 0.5
        for before, after in pairwise(values):
            change = (after - before) if name in relation.rising else (before - after)
            slack = 1e-12 * np.fmax(np.abs(before), np.abs(after))
            assert not (change < -slack).any(), name


def check_family(module: ModuleType, worlds: dict[str, World]) -> None:
    """All checks for every relation of a module; ``worlds`` maps designs to studies of that design."""
    for relation in relations_in(module):
        true = next(worlds[design] for design in worlds if design in relation.designs)
        check_image(relation, true)
        check_image_of_nothing_known(relation, true)
        check_monotone(relation, true)
