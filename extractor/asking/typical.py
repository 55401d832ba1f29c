"""A typical study of each design, to compare how much rounding different routes to one metric would leave.

The studies are invented. Only the order of the widths is used: a p value, or means and SDs, as they are usually
printed leave more room than an F does.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from extractor.catalogue.relation import FloatArray, Grade
from extractor.quantities import VOCABULARY, Shape
from extractor.routes.engine import Engine, Estimate
from extractor.routes.planner import Start, search

Study = dict[str, float | tuple[float, ...]]

_TWO: Study = {"n": (21.0, 19.0), "mean": (6.12, 4.41), "sd": (1.87, 2.04), "contrast_weight": (1.0, -1.0)}
_SEVERAL: Study = {
    "n": (21.0, 19.0, 20.0),
    "mean": (6.32, 4.41, 5.19),
    "sd": (1.87, 2.04, 1.95),
    "contrast_weight": (1.0, -1.0, 0.0),
}
_TERM: Study = {"f_value": 5.36, "df_effect": 1.0, "df_error": 76.0, "ms_error": 3.8, "ss_total": 342.6}
_MODEL: Study = {"direction": 1.0, "tails": 2.0, "confidence_level": 0.95}
_PAIRS: Study = {"n_total": 24.0, "correlation": 0.55, "mean": (6.12, 4.41), "sd": (1.87, 2.04)}
_GROWTH: Study = {
    "n": (21.0, 19.0),
    "mean_pre": (4.12, 4.25),
    "sd_pre": (1.87, 2.04),
    "mean_post": (6.12, 4.61),
    "sd_post": (1.92, 2.11),
    "mean_change": (2.0, 0.36),
    "correlation": 0.55,
    "f_value": 9.42,
    "df_effect": 1.0,
    "contrast_weight": (1.0, -1.0),
}

_STUDIES: dict[str, Study] = {
    "one-way": {**_SEVERAL, "k_groups": 3.0},
    "two-group": {**_TWO, "k_groups": 2.0},
    "one-way-partial": {**_TWO, "f_value": 3.17, "df_effect": 3.0, "df_error": 76.0, "ms_error": 3.8},
    "factorial": {**_TWO, **_TERM, "n_total": 80.0},
    "within": {
        **_PAIRS,
        "mean": (6.32, 4.41, 5.19),
        "sd": (1.87, 2.04, 1.95),
        "n": (24.0, 24.0, 24.0),
        "k_groups": 3.0,
        "contrast_weight": (1.0, -1.0, 0.0),
    },
    "paired": {**_PAIRS, "k_groups": 2.0, "contrast_weight": (1.0, -1.0)},
    "mixed": {**_TERM, "n": (40.0, 38.0), "n_total": 78.0, "contrast_weight": (1.0, -1.0)},
    "pre-post-control": {**_GROWTH, "k_groups": 2.0},
    "ancova": {
        **_TWO,
        "adjusted_mean": (6.05, 4.48),
        "covariate_r": 0.48,
        "n_covariates": 1.0,
        "f_value": 3.12,
        "df_effect": 1.0,
        "k_groups": 2.0,
        "ms_error": 3.05,
    },
}

_DECIMALS = {"p_value": 3, "p_two_sided": 3, "p_contrast": 3}
_USUAL_DECIMALS = 2


@lru_cache(maxsize=16)
def _study(design: str) -> dict[str, Estimate]:
    """Every quantity of the typical study, with the interval that its usual printing leaves."""
    given = {**_MODEL, **_STUDIES[design]}
    leaves = {name: _printed(name, np.atleast_1d(np.asarray(value))) for name, value in given.items()}
    engine = Engine(leaves)
    found = dict(leaves)
    for name, routes in sorted(search(Start(frozenset(leaves)), design).items()):
        if name not in found:
            value = engine.run(routes[0]).value
            if np.isfinite(value).all():
                found[name] = _printed(name, value[0] if value.ndim > 1 else value)
    return found


def _printed(name: str, value: FloatArray) -> Estimate:
    """A value as it is usually printed; the arrays have one row."""
    quantity = VOCABULARY[name]
    shaped = value[None, :] if quantity.shape is Shape.GROUP else value
    half = 0.0 if quantity.exact else 0.5 * 10.0 ** -_DECIMALS.get(name, _USUAL_DECIMALS)
    return Estimate(shaped, np.maximum(shaped - half, quantity.low), np.minimum(shaped + half, quantity.high))


@lru_cache(maxsize=4096)
def width_left(design: str, known: frozenset[str], metric: str) -> float:
    """Width of the metric's interval in the typical study, as a share of its value; inf where it cannot be said.

    Parameters
    ----------
    known : the quantities the route may start from.
    """
    study = _study(design)
    routes = search(Start(frozenset(known & study.keys())), design).get(metric, ())
    engine = Engine(study)
    widths = [
        float((found.high - found.low)[0] / abs(found.value[0]))
        for found in (engine.run(route) for route in routes if route.grade < Grade.BOUND)
        if found.value[0] and np.isfinite(found.value[0])
    ]
    return min((w for w in widths if np.isfinite(w)), default=np.inf)
