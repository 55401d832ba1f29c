"""Interval evaluation: what a relation can give when its inputs are anywhere in their rounding intervals.

Every image contains the true one. Where an evaluation is undefined (0/0, infinity minus infinity) nothing is
concluded: that side of the image is unbounded. Images are widened by the formula's floating-point error and then
cut to the support of the quantity given.
"""

from __future__ import annotations

from itertools import product

import numpy as np

from extractor.catalogue.relation import FloatArray, Interval, Relation
from extractor.quantities import VOCABULARY

_TINY = 1e-300
_PAIRWISE = 8
"""From so many numbers on, numpy sums those that lie side by side in another order than those of several rows."""


def image(relation: Relation, inputs: dict[str, Interval], current: Interval | None = None) -> Interval:
    """The interval of what ``relation`` gives.

    Parameters
    ----------
    inputs : (low, high) of each need; shapes (rows,) or (rows, groups).
    current : (low, high) already known of the quantity given; lets an image with a hole drop one side of it.
    """
    pairs = [inputs[name] for name in relation.needs]
    if any(low.ndim > 1 and low.shape[0] == 1 and low.shape[1] >= _PAIRWISE for low, _ in pairs):
        # what a row gives must not depend, not even in its last bit, on whether it stands alone
        low, high = image(
            relation, {n: _twice(ends) for n, ends in inputs.items()}, current and _twice(current)
        )
        return low[:1], high[:1]
    with np.errstate(all="ignore"):
        if relation.image is not None:
            low, high = relation.image(*pairs, current) if relation.narrows else relation.image(*pairs)
        else:
            low, high = _vertices(relation, inputs)
        for name in relation.exact:
            known = inputs[name][0] == inputs[name][1]
            if known.ndim > low.ndim:
                known = known.all(axis=-1)
            elif known.ndim < low.ndim:
                known = known[:, None]
            low = np.where(known, low, -np.inf)
            high = np.where(known, high, np.inf)
        return _padded(relation, low, high)


def _twice(ends: Interval) -> Interval:
    low, high = (np.asfortranarray(np.concatenate([end, end])) for end in ends)
    return low, high


def _vertices(relation: Relation, inputs: dict[str, Interval]) -> Interval:
    """Extremes of a formula monotone in each input: they lie on vertices of the box."""
    lowest: FloatArray | None = None
    highest: FloatArray | None = None
    open_ended = [name for name in relation.needs if name in relation.either]
    for ends in product((0, 1), repeat=len(open_ended)):
        chosen = dict(zip(open_ended, ends, strict=True))
        below = [inputs[n][chosen.get(n, 1 if n in relation.falling else 0)] for n in relation.needs]
        above = [inputs[n][chosen.get(n, 0 if n in relation.falling else 1)] for n in relation.needs]
        # np.minimum and np.maximum keep NaN, so one undefined vertex leaves that side open
        at_below, at_above = relation.formula(*below), relation.formula(*above)
        lowest = at_below if lowest is None else np.minimum(lowest, at_below)
        highest = at_above if highest is None else np.maximum(highest, at_above)
    assert lowest is not None and highest is not None
    return lowest, highest


def _padded(relation: Relation, low: FloatArray, high: FloatArray) -> Interval:
    support = VOCABULARY[relation.gives]
    # fmax and fmin pass over NaN, as which an infinite end of the wrong sign, an overflow and no bound, comes out, too
    low = np.fmax(low - (relation.accuracy * np.abs(low) + _TINY), support.low)
    high = np.fmin(high + (relation.accuracy * np.abs(high) + _TINY), support.high)
    return low, high
