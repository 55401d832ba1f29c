"""A coded contrast -> one weight per group."""

from __future__ import annotations

import re

import numpy as np

from extractor.table import FloatArray

_PAIR = re.compile(r"^\s*(\d+)\s*(?:[-−–]|vs\.?|versus)\s*(\d+)\s*$", re.IGNORECASE)
_SEPARATORS = re.compile(r"[;,\s]+")


def contrast_weights(text: str, groups: int) -> tuple[FloatArray, str]:
    """Weights of a contrast of ``groups`` groups, shape (groups,), and how the text was read.

    Two group numbers such as ``1 - 3`` compare the first with the second; a list of weights must have one for each
    group and sum to zero. Weights are scaled so that the positive ones sum to 1, which makes any contrast a
    difference of two (weighted) means. A blank is ``1 - 2``.

    Raises
    ------
    ValueError
        with one sentence, when the text is neither.
    """
    pair = _PAIR.match(text or "1 - 2")
    weights = np.zeros(groups)
    if pair:
        first, second = int(pair[1]), int(pair[2])
        if first == second or not (1 <= first <= groups and 1 <= second <= groups):
            raise ValueError(f"contrast '{text}' does not name two of the {groups} coded groups")
        weights[first - 1], weights[second - 1] = 1.0, -1.0
        return weights, f"contrast {first} - {second}" + ("" if text else " (the default)")
    words = [w for w in _SEPARATORS.split(text.replace("−", "-").strip("[]() ")) if w]
    try:
        given = np.array([float(w) for w in words])
    except ValueError:
        raise ValueError(
            f"contrast '{text}' is not understood: write two group numbers such as 1 - 2, or one weight per group"
        ) from None
    if len(given) != groups:
        raise ValueError(f"contrast '{text}' has {len(given)} weights for {groups} coded groups")
    if not np.isfinite(given).all():
        raise ValueError(f"contrast '{text}' has a weight that is no number")
    if abs(given.sum()) > 1e-6 * np.abs(given).sum() or not (given > 0).any():
        raise ValueError(f"contrast '{text}' has weights that do not sum to zero")
    shown = ", ".join(f"{w:.3g}" for w in given)
    return given / given[given > 0].sum(), f"contrast with weights {shown}"
