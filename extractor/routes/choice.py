"""The choice among routes, row by row, and what precision the chosen route allows."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from extractor.catalogue.relation import FloatArray, Grade, catalogue
from extractor.evidence import Block
from extractor.quantities import VOCABULARY
from extractor.routes.engine import Engine, Estimate
from extractor.routes.planner import Route, search
from extractor.sampling.precision import Precision, limits_of, standardizer_of, variances_of

NOTHING = -1
STANDARDIZED = ("cohens_d", "hedges_g")
CLUSTER = ("icc", "cluster_size")
"""Where both are known, groups of participants were randomised and the variance grows by the design effect."""


@dataclass(slots=True)
class Chosen:
    """What one block gives in one metric. Arrays have shape (rows,).

    routes : all routes, best first. estimates : what each gives.
    which : index of the chosen route, -1 where none gives anything.
    pointed : the chosen route gives a point, not only a bound.
    """

    block: Block
    metric: str
    routes: tuple[Route, ...]
    estimates: list[Estimate]
    which: NDArray[np.int64]
    pointed: NDArray[np.bool_]
    engine: Engine
    precisions: dict[int, Supported] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Supported:
    """Sampling variance and limits along one route, and the further routes their inputs took.

    method, limits : how they were computed; "" where no formula serves the case.
    missing : quantities that they need and the row does not give.
    """

    variance: FloatArray
    low: FloatArray
    high: FloatArray
    method: str
    limits: str
    further: tuple[Route, ...]
    missing: tuple[str, ...]


def choose(block: Block, metric: str, standardizer: str = "") -> Chosen:
    """Evaluate every route to ``metric`` and choose one per row.

    The design's usual standardizer (or the one asked for), fewest assumptions, then best grade; among equals the
    narrowest rounding envelope of that row, then the planner's order. A route that gives no value in a row is passed
    over there.
    """
    routes = search(block.start, block.design, standardizer).get(metric, ())
    if standardizer and metric in STANDARDIZED:
        routes = tuple(r for r in routes if standardizer_of(r.standardizer, block.design) == standardizer)
    # an estimate from a part of a five-number summary must not slip through where that of all of it is refused
    most = max((r.summary_numbers for r in routes), default=0)
    routes = tuple(r for r in routes if r.summary_numbers in (0, most))
    engine = Engine(block.leaves)
    estimates = [engine.run(route) for route in routes]
    size = len(block.positions)
    which = np.full(size, NOTHING)
    best_width = np.full(size, np.inf)
    tier = np.full(size, len(routes) + 1)
    tiers: dict[tuple[bool, int, Grade], int] = {}
    for index, (route, estimate) in enumerate(zip(routes, estimates, strict=True)):
        rank = tiers.setdefault((route.behind, route.assumptions, route.grade), len(tiers))
        says = _says(route, estimate)
        width = np.where(says, estimate.high - estimate.low, np.inf)
        better = says & ((which == NOTHING) | ((tier == rank) & (width < best_width)))
        which[better], best_width[better], tier[better] = index, width[better], rank
    pointed = np.zeros(size, dtype=bool)
    for index, estimate in enumerate(estimates):
        pointed |= (which == index) & np.isfinite(estimate.value)
    return Chosen(block, metric, routes, estimates, which, pointed, engine)


def _says(route: Route, estimate: Estimate) -> NDArray[np.bool_]:
    """Where a route gives a value, or for a bound at least one finite end."""
    if route.grade is Grade.BOUND:
        informative = np.isfinite(estimate.low) | np.isfinite(estimate.high)
        return np.asarray(informative & (estimate.low <= estimate.high))
    return np.isfinite(estimate.value)


@dataclass(frozen=True, slots=True)
class _Asked:
    """What is wanted for the rows of one chosen route: its formulas and their inputs.

    further : routes that inputs took besides the chosen one. absent : what the design effect lacks.
    """

    chosen: Chosen
    index: int
    variance: Precision | None
    limits: Precision | None
    inputs: Mapping[str, FloatArray]
    further: Mapping[str, Route]
    absent: tuple[str, ...]
    size: int


def support(some: Sequence[Chosen], method: str | None, level: float) -> None:
    """Fill the ``precisions`` of blocks: variance and limits for the rows of each chosen route.

    Every formula runs once over the rows of all blocks that it serves.
    """
    asked = [one for chosen in some for one in _asked(chosen, method)]
    with np.errstate(all="ignore"):
        spreads = _evaluated([one.variance for one in asked], asked)
        ends = _evaluated([one.limits for one in asked], asked, level)
    for one, spread, limits in zip(asked, spreads, ends, strict=True):
        one.chosen.precisions[one.index] = _supported(one, spread, limits)


def _asked(chosen: Chosen, method: str | None) -> Iterator[_Asked]:
    """What is wanted for one block; inputs that the route itself passes through are taken from it."""
    design = chosen.block.design
    reachable = search(chosen.block.start, design)
    for index in np.unique(chosen.which[chosen.pointed]):
        route, rows = chosen.routes[index], (chosen.which == index) & chosen.pointed
        standardizer = (
            standardizer_of(route.standardizer, design) if chosen.metric in STANDARDIZED else "pooled"
        )
        steps = chosen.engine.all_steps(route)
        known = {
            *steps,
            *(q for q, found in reachable.items() if any(r.grade is not Grade.BOUND for r in found)),
        }
        variance = _first_served(variances_of(chosen.metric, method, design, standardizer, known), known)
        limits = _first_served(limits_of(chosen.metric, design, standardizer, known), known)
        further: dict[str, Route] = {}
        inputs: dict[str, FloatArray] = {}
        wanted = (*(variance.needs if variance else ()), *(limits.needs if limits else ()), *CLUSTER)
        for need in dict.fromkeys(wanted):
            if need in steps:
                inputs[need] = steps[need].value[rows]
                continue
            options = [r for r in reachable.get(need, ()) if r.grade is not Grade.BOUND]
            if options:
                further[need] = options[0]
                inputs[need] = chosen.engine.run(options[0]).value[rows]
        coded = chosen.block.leaves.keys() - chosen.block.assumed.keys()
        # half of what the design effect needs says that the plain variance is too small
        absent = tuple(name for name in CLUSTER if name not in inputs) if coded & set(CLUSTER) else ()
        yield _Asked(chosen, int(index), variance, limits, inputs, further, absent, int(rows.sum()))


def _first_served(options: list[Precision], known: set[str]) -> Precision | None:
    """The first whose needs are all known, else the first."""
    return next((p for p in options if known.issuperset(p.needs)), next(iter(options), None))


def _evaluated(
    formulas: Sequence[Precision | None], asked: Sequence[_Asked], *more: float
) -> list[tuple[FloatArray, ...]]:
    """What each formula gives for what was asked, as one array or several; none where an input is missing."""
    found: list[tuple[FloatArray, ...]] = [()] * len(asked)
    alike: dict[tuple[Precision, tuple[tuple[int, ...], ...]], list[int]] = {}
    for at, (formula, one) in enumerate(zip(formulas, asked, strict=True)):
        if formula and all(need in one.inputs for need in formula.needs):
            widths = tuple(one.inputs[need].shape[1:] for need in formula.needs)
            alike.setdefault((formula, widths), []).append(at)
    for (formula, _), members in alike.items():
        inputs = [np.concatenate([asked[at].inputs[need] for at in members]) for need in formula.needs]
        given = formula.function(*inputs, *more)
        ends = np.cumsum([asked[at].size for at in members])[:-1]
        arrays = given if isinstance(given, tuple) else (given,)
        parts = zip(*(np.split(np.asarray(array), ends) for array in arrays), strict=True)
        for at, part in zip(members, parts, strict=True):
            found[at] = part
    return found


def _supported(one: _Asked, spreads: tuple[FloatArray, ...], ends: tuple[FloatArray, ...]) -> Supported:
    variance, limits, inputs, absent = one.variance, one.limits, one.inputs, one.absent
    nothing = np.full(one.size, np.nan)
    (spread,) = spreads or (nothing,)
    low, high = ends or (nothing, nothing)
    missing = [n for p in (variance, limits) if p for n in p.needs if n not in inputs]
    method = variance.name if variance else ""
    if absent:
        missing += absent
        spread, low, high = nothing, nothing, nothing
    elif all(name in inputs for name in CLUSTER):
        effect = 1 + (inputs["cluster_size"] - 1) * inputs["icc"]
        centre = inputs[variance.metric] if variance else (low + high) / 2
        spread = spread * effect
        low, high = (centre + (end - centre) * np.sqrt(effect) for end in (low, high))
        if variance is not None:
            support = VOCABULARY[variance.metric]
            low, high = np.maximum(low, support.low), np.minimum(high, support.high)
        method += ", times the design effect 1 + (m - 1)·ICC"
    used = {n: r for n, r in one.further.items() if n not in CLUSTER or all(c in inputs for c in CLUSTER)}
    return Supported(
        spread,
        low,
        high,
        method,
        limits.name if limits else "",
        tuple(used.values()),
        tuple(dict.fromkeys(missing)),
    )


def assumptions_of(block: Block, routes: tuple[Route, ...]) -> list[str]:
    """What the routes take for granted, each with who supplied it."""
    relations = catalogue()
    said: list[str] = []
    for route in routes:
        for leaf in sorted(route.assumed):
            taken = block.assumed[leaf]
            said.append(f"{leaf} = {taken.value:g} ({taken.by})")
        for name in route.ordered():
            if relations[name].assumes:
                said.append(relations[name].assumes)
    return list(dict.fromkeys(said))


def grade_of(routes: tuple[Route, ...]) -> Grade:
    """The worst grade among routes."""
    return max(route.grade for route in routes)
