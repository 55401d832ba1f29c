"""Runs routes over a block of rows: point values and rounding intervals together, each shared step once."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from extractor.catalogue.relation import FloatArray, Interval, catalogue
from extractor.quantities import VOCABULARY
from extractor.routes.intervals import image
from extractor.routes.planner import Route

_NEAR = 1e-9


@dataclass(frozen=True, slots=True)
class Estimate:
    """Values of one quantity: the point, NaN where only bounds are known, and its rounding interval."""

    value: FloatArray
    low: FloatArray
    high: FloatArray

    @property
    def interval(self) -> Interval:
        """(low, high)."""
        return self.low, self.high


class Engine:
    """Evaluates routes for one block; steps that routes share are evaluated once.

    Parameters
    ----------
    leaves : what the rows report; shapes (rows,) or (rows, groups).
    """

    def __init__(self, leaves: Mapping[str, Estimate]) -> None:
        self._leaves = leaves
        self._known: dict[tuple[object, ...], Estimate] = {}

    def run(self, route: Route) -> Estimate:
        """Evaluate one route for all rows of the block."""
        return self.all_steps(route)[route.gives]

    def all_steps(self, route: Route) -> dict[str, Estimate]:
        """Evaluate one route and return every quantity on it, leaves included."""
        relations = catalogue()
        found: dict[str, Estimate] = {leaf: self._leaves[leaf] for leaf in route.leaves}
        keys: dict[str, tuple[object, ...]] = {leaf: (leaf,) for leaf in route.leaves}
        for name in route.ordered():
            relation = relations[name]
            key = (name, *(keys[need] for need in relation.needs))
            if key not in self._known:
                inputs = {need: found[need] for need in relation.needs}
                with np.errstate(all="ignore"):
                    value = relation.formula(*(inputs[need].value for need in relation.needs))
                low, high = image(relation, {need: e.interval for need, e in inputs.items()})
                self._known[key] = _settled(relation.gives, value, low, high)
            found[relation.gives] = self._known[key]
            keys[relation.gives] = key
        return found


def _settled(quantity: str, value: FloatArray, low: FloatArray, high: FloatArray) -> Estimate:
    """A derived value as its quantity allows it: a count must be the one whole number in its interval."""
    support = VOCABULARY[quantity]
    if support.integer:
        low, high = np.ceil(low - _NEAR), np.floor(high + _NEAR)
        value = np.where(low == high, low, np.nan)
    slack = _NEAR * (1 + np.abs(value))
    value = np.where((value < support.low - slack) | (value > support.high + slack), np.nan, value)
    # beyond it by no more than an error of floating point is at its end
    return Estimate(np.clip(value, support.low, support.high), low, high)
