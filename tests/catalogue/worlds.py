"""Worlds for testing relations: random studies in which every quantity of the catalogue holds at once.

Sizes, means and standard deviations are drawn; everything else follows from them by the textbook definitions,
written here a second time with scipy.stats where the catalogue uses special functions.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray
from scipy import stats

from extractor.catalogue.relation import FloatArray, Interval, Relation
from extractor.quantities import VOCABULARY, Quantity, Shape

World = dict[str, FloatArray]

COUNTS = ("n", "n_total", "k_groups", "df_effect", "df_error", "df", "tails")
CHOICES = ("tails", "direction", "contrast_weight")
"""Quantities that take a few separate values; between these there is nothing to sample."""


def hedges_factor(df: FloatArray) -> FloatArray:
    """J of Hedges (1981) from scipy.stats: the mean of a chi variate over the root of df."""
    # the mean of chi on df - 1 degrees of freedom is sqrt(2)·Γ(df/2)/Γ((df - 1)/2)
    return np.asarray(stats.chi(df - 1).mean() / np.sqrt(df))


def world(rng: np.random.Generator, rows: int, groups: int, *, equal: bool = False) -> World:
    """Random one-way studies; with two groups also the quantities that only two-group rows have.

    Parameters
    ----------
    equal : give all groups of a row the same size, as relations that assume it need.
    """
    n = rng.integers(2, 60, size=(rows, groups)).astype(float)
    if equal:
        n = np.repeat(n[:, :1], groups, axis=1)
    unit = 10.0 ** rng.integers(-2, 3, size=(rows, 1))
    spread = unit * np.exp(rng.normal(0, 0.4, size=(rows, groups)))
    mean = unit * (
        rng.normal(0, 3, size=(rows, 1))
        + rng.normal(0, 1, size=(rows, groups)) * rng.choice([0.1, 1], size=(rows, 1))
    )
    found: World = {"n": n, "mean": mean, "sd": spread, "se": spread / np.sqrt(n)}
    total = n.sum(axis=1)
    v1, v2 = np.full(rows, groups - 1.0), total - groups
    grand = (n * mean).sum(axis=1) / total
    between = (n * (mean - grand[:, None]) ** 2).sum(axis=1)
    within = ((n - 1) * spread**2).sum(axis=1)
    f = between / v1 / (within / v2)
    eta = between / (between + within)
    omega = (between - v1 * within / v2) / (between + within + within / v2)
    weight = _weights(rng, rows, groups)
    inverse_n = (weight**2 / n).sum(axis=1)
    pooled = np.sqrt(within / v2)
    difference = (weight * mean).sum(axis=1)
    t = difference / (pooled * np.sqrt(inverse_n))
    level = rng.choice([0.9, 0.95, 0.99], size=rows)
    p = stats.f.sf(f, v1, v2)
    tails = rng.choice([1.0, 2.0], size=rows)
    half = stats.t.ppf((1 + level) / 2, v2) * pooled * np.sqrt(inverse_n)
    own = stats.t.ppf((1 + level[:, None]) / 2, n - 1) * spread / np.sqrt(n)
    found |= {
        "n_total": total,
        "n_observations": total,
        "k_groups": v1 + 1,
        "df_effect": v1,
        "df_error": v2,
        "df": v2,
        "ss_effect": between,
        "ss_error": within,
        "ss_total": between + within,
        "ms_effect": between / v1,
        "ms_error": within / v2,
        "f_value": f,
        "eta_squared": eta,
        "partial_eta_squared": eta,
        "generalized_eta_squared": eta,
        "omega_squared": omega,
        "partial_omega_squared": omega,
        "epsilon_squared": 1 - (1 - eta) * (total - 1) / v2,
        "cohens_f": np.sqrt(between / within),
        "f_squared": between / within,
        "p_two_sided": p,
        "p_value": np.where(tails == 1, p / 2, p),
        "tails": tails,
        "confidence_level": level,
        "contrast_weight": weight,
        "inverse_effective_n": inverse_n,
        "pooled_sd": pooled,
        "mean_difference": difference,
        "se_difference": pooled * np.sqrt(inverse_n),
        "t_value": t,
        "direction": np.sign(difference),
        "cohens_d": difference / pooled,
        "d_control": difference / pooled,
        "d_unstated": difference / pooled,
        "hedges_g": difference / pooled * hedges_factor(v2),
        "p_contrast": 2 * stats.t.sf(np.abs(t), v2),
        "ci_low_difference": difference - half,
        "ci_high_difference": difference + half,
        "ci_low": mean - own,
        "ci_high": mean + own,
        **_welch(n, mean, spread),
    }
    if groups == 2:
        r = t / np.sqrt(t**2 + v2)
        odds = difference / pooled * np.pi / np.sqrt(3)
        found |= {"r": r, "fisher_z": np.arctanh(r), "log_odds_ratio": odds, "odds_ratio": np.exp(odds)}
        arms = rng.integers(1, 5, size=rows).astype(float)
        found |= {
            "control_comparisons": arms,
            "inverse_divided_n": 1 / n[:, 0] + arms / n[:, 1],
            "n_divided": n[:, 0] + n[:, 1] / arms,
        }
    return found


def _weights(rng: np.random.Generator, rows: int, groups: int) -> FloatArray:
    weight = np.zeros((rows, groups))
    weight[:, 0], weight[:, 1] = 1.0, -1.0
    if groups > 2:
        several = rng.random(rows) < 0.5
        weight[several, 1:] = -1.0 / (groups - 1)
    return weight


def _welch(n: FloatArray, mean: FloatArray, sd: FloatArray) -> World:
    """Welch (1951) from his definition, row by row in the plainest words."""
    k = n.shape[1]
    w = n / sd**2
    share = w / w.sum(axis=1)[:, None]
    centre = (share * mean).sum(axis=1)
    sum_a = ((1 - share) ** 2 / (n - 1)).sum(axis=1)
    top = (w * (mean - centre[:, None]) ** 2).sum(axis=1) / (k - 1)
    return {
        "welch_f": top / (1 + 2 * (k - 2) * sum_a / (k**2 - 1)),
        "welch_df_error": (k**2 - 1) / (3 * sum_a),
    }


def worlds_of(relation: Relation, rows: int, seed: int) -> list[World]:
    """Worlds in which ``relation`` holds: two groups, several, or both, by the designs it declares.

    A relation of other designs alone gets inputs drawn from their supports, and its own formula's value.
    """
    rng = np.random.default_rng(seed)
    if not one_factor(relation):
        return [_loose(rng, relation, rows)]
    equal = relation.assumes == "groups of equal size"
    sizes = [2] if "two-group" in relation.designs else []
    sizes += [3, 5] if "one-way" in relation.designs else []
    found = [world(rng, rows, k, equal=equal) for k in sizes]
    if relation.standardizer == "control":
        for true in found:
            true["hedges_g"] = true["d_control"] * hedges_factor(true["n"][:, 1] - 1)
    return found


def anywhere(relation: Relation) -> bool:
    """Whether the formula makes sense for inputs that do not know of each other."""
    true = _loose(np.random.default_rng(0), relation, 400)
    return bool(np.isfinite(true[relation.gives]).mean() > 0.9)


def one_factor(relation: Relation) -> bool:
    """Whether the relation holds in a design of which these are worlds."""
    return bool(relation.designs & {"one-way", "two-group"})


def some_study(relation: Relation, point: Mapping[str, FloatArray]) -> NDArray[np.bool_]:
    """Rows some study could have: the effect has fewer degrees of freedom than there are participants or scores."""
    possible = np.ones(len(point[relation.needs[0]]), dtype=bool)
    for total in {"n_total", "n_observations"} & set(relation.needs):
        if "df_effect" in relation.needs:
            possible &= point["df_effect"] < point[total]
    return possible


def _loose(rng: np.random.Generator, relation: Relation, rows: int) -> World:
    inputs = {name: _draw(rng, VOCABULARY[name], rows) for name in relation.needs}
    with np.errstate(all="ignore"):
        value = np.asarray(relation.formula(*inputs.values()))
        support = VOCABULARY[relation.gives]
        value = np.where((value >= support.low) & (value <= support.high), value, np.nan)
    possible = some_study(relation, inputs)
    value = np.where(possible if value.ndim == 1 else possible[:, None], value, np.nan)
    return {**inputs, relation.gives: inputs.get(relation.gives, value)}


def _draw(rng: np.random.Generator, quantity: Quantity, rows: int) -> FloatArray:
    groups = 3
    shape = (rows, groups) if quantity.shape is Shape.GROUP else (rows,)
    if quantity.name == "contrast_weight":
        return _weights(rng, rows, groups)
    if quantity.name in ("direction", "tails"):
        return rng.choice([quantity.low, quantity.high], size=rows)
    if quantity.name.endswith(("df_effect", "df_others", "k_groups", "n_covariates")):
        return quantity.low + rng.integers(0, 4, size=shape)
    if quantity.integer or quantity.name == "n_observations":
        return rng.integers(30, 90, size=shape).astype(float)
    if np.isfinite(quantity.low) and np.isfinite(quantity.high):
        return rng.uniform(0.95 * quantity.low + 0.05 * quantity.high, 0.95 * quantity.high, size=shape)
    if np.isfinite(quantity.low):
        return quantity.low + np.exp(rng.normal(size=shape))
    values = rng.normal(size=shape)
    return values if quantity.high == np.inf else 0.9 * quantity.high - np.abs(values)


def box(rng: np.random.Generator, name: str, value: FloatArray, *, exact: bool) -> Interval:
    """A random interval around true values, inside the support: narrow, wide, or open to the support's end.

    Counts get whole ends, and some are points; a printed number that is no count never is one. ``exact`` gives a
    point.
    """
    quantity = VOCABULARY[name]
    if exact or name in CHOICES:
        return value, value
    kind = rng.choice(4, size=len(value), p=[0.1, 0.5, 0.3, 0.1])
    if quantity.shape is Shape.GROUP:
        kind = kind[:, None]
    size = np.abs(value) + (0.01 if not quantity.integer else 0)
    width = np.select([kind == 0, kind == 1], [0.0 if quantity.exact else 1e-6, 0.01], 0.5) * size
    low, high = value - width * rng.random(value.shape), value + width * rng.random(value.shape)
    if quantity.integer:
        low, high = np.ceil(low), np.floor(high)
    opened = kind == 3
    below, above = rng.random(value.shape) < 0.5, rng.random(value.shape) < 0.5
    low = np.where(opened & below, quantity.low, low)
    high = np.where(opened & above, quantity.high, high)
    return np.maximum(low, quantity.low), np.minimum(high, quantity.high)


def boxes(
    rng: np.random.Generator, relation: Relation, true: Mapping[str, FloatArray]
) -> dict[str, Interval]:
    """Boxes around the true inputs of a relation."""
    return {name: box(rng, name, true[name], exact=name in relation.exact) for name in relation.needs}


def inside(rng: np.random.Generator, name: str, interval: Interval, true: FloatArray) -> FloatArray:
    """A random point of an interval, whole for counts; an open end is replaced by a far point."""
    low, high = interval
    far = 100 * (1 + np.abs(true))
    low, high = np.maximum(low, true - far), np.minimum(high, true + far)
    at = rng.choice([0.0, 1.0, 0.5], size=true.shape, p=[0.1, 0.1, 0.8])
    at = np.where(at == 0.5, rng.random(true.shape), at)
    point = low + at * (high - low)
    if VOCABULARY[name].integer:
        point = np.clip(np.round(point), low, high)
    return np.clip(point, low, high)
