"""What a group of rows knows, and what it would know once certain quantities were filled in.

Filling a cell can change more than that cell: a first group mean brings the contrast and the number of groups, a t
beside a p value makes the p value the contrast's, an F makes its p value two-tailed, and a one-way row may turn out to
have two groups. What is not known beforehand gives several worlds; a promise must hold in all of them.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import lru_cache

from extractor.catalogue.relation import Grade, catalogue
from extractor.quantities import STANDARDIZERS, VOCABULARY, Shape
from extractor.routes.choice import STANDARDIZED
from extractor.routes.planner import Start, search
from extractor.routes.unlock import any_point, follows, graph, no_assumption
from extractor.sampling.precision import limits_of, standardizer_of, variances_of
from extractor.study.terms import SUMS

GROUPED = frozenset(name for name, quantity in VOCABULARY.items() if quantity.shape is Shape.GROUP)
_OF_TERMS = frozenset(SUMS)
"""Sums over the other rows of a model, which may exist as soon as the row itself is filled."""
_OWN_TERM = frozenset({"f_value", "df_effect", "ss_effect", "ss_error", "ss_subjects"})
_SIGN_OF_F = "t_of_one_df"
_ONE_DF = frozenset({"factorial", "mixed", "ancova", "pre-post-control"})
"""Designs in which a direction makes F a t only where F has one numerator df."""


@dataclass(frozen=True, slots=True)
class Situation:
    """Rows that know the same and can be asked the same.

    groups : groups coded. start : what their routes may start from. askable : what can be asked.
    without : names of relations that give these rows no value.
    counted : whether the number of groups follows from what is coded. compared : whether groups bring a contrast.
    one_df : whether F has one numerator df; None where that is not known.
    modelled : whether the row is a term of a model with several rows.
    """

    design: str
    groups: int
    start: Start
    askable: frozenset[str]
    without: frozenset[str] = frozenset()
    counted: bool = True
    compared: bool = True
    one_df: bool | None = None
    modelled: bool = False


@dataclass(frozen=True, slots=True)
class World:
    """One way the rows may turn out to be once the asked quantities are there."""

    design: str
    start: Start
    without: frozenset[str]

    @property
    def points(self) -> frozenset[str]:
        """Everything with a value, assumed ones included."""
        return self.start.known | self.start.assumed


def worlds(situation: Situation, asked: frozenset[str]) -> Iterator[World]:
    """The worlds in which the asked quantities have been filled in with values nobody knows yet."""
    start = situation.start
    known, bounds = start.known | asked, start.bounds - asked
    coded = situation.groups >= 2 or bool(asked & GROUPED)
    if coded and situation.compared:
        known |= {"contrast_weight"}
    signless = {_SIGN_OF_F} if situation.design in _ONE_DF and not situation.one_df else set()
    sure = {_SIGN_OF_F} if situation.one_df is False and situation.design in _ONE_DF else set()
    for design in _designs(situation, asked):
        mine = _read(design, known, bounds)
        if design in ("two-group", "paired", "pre-post-control") or (
            coded and design in ("one-way", "within", "ancova")
        ):
            mine |= {"k_groups"}
        for without in (uncertain_counts() | signless, frozenset(sure)):
            world = World(
                design, replace(start, known=mine, bounds=bounds - mine), situation.without | without
            )
            yield world
            if situation.modelled and asked & _OWN_TERM:
                yield replace(world, start=replace(world.start, known=mine | _OF_TERMS))


@lru_cache(maxsize=1)
def uncertain_counts() -> frozenset[str]:
    """Relations that give a count from rounded numbers, which often leave more than one whole number possible."""
    return frozenset(
        name
        for name, relation in catalogue().items()
        if VOCABULARY[relation.gives].integer and not all(VOCABULARY[n].integer for n in relation.needs)
    )


def _designs(situation: Situation, asked: frozenset[str]) -> tuple[str, ...]:
    grouped = bool(asked & GROUPED)
    if (
        situation.design == "one-way"
        and not situation.counted
        and (grouped or asked & {"k_groups", "df_effect"})
    ):
        return ("one-way", "two-group")
    if situation.design == "one-way-partial" and situation.groups < 2 and grouped:
        # without a number of groups, those that are coded are all there are
        return (*(("one-way-partial",) if situation.counted else ()), "one-way", "two-group")
    return (situation.design,)


def _read(design: str, known: frozenset[str], bounds: frozenset[str]) -> frozenset[str]:
    """How a p value is read beside the other statistics of a row."""
    if design.startswith("one-way") and "t_value" in known and known & {"p_value", "p_contrast"}:
        known -= {"p_value", "p_contrast"}
        if "f_value" not in known:
            known |= {"p_contrast"}
    if "p_value" in known | bounds and (
        design not in ("two-group", "paired") or known & {"f_value", "df_effect"}
    ):
        known |= {"tails"}
    return known


@lru_cache(maxsize=1 << 15)
def _derived(world: World, assuming: bool, standardizer: str | None) -> frozenset[str]:
    """What follows as a point; without ``assuming`` from nothing that nobody reported."""
    start = world.start
    relations = graph(world.design, any_point if assuming else no_assumption, world.without, standardizer)
    return frozenset(follows(world.points if assuming else start.known, relations))


@lru_cache(maxsize=1 << 15)
def _bounded(world: World, assuming: bool, standardizer: str | None) -> frozenset[str]:
    """What follows when bounds are taken as well."""
    relations = graph(world.design, any_point if assuming else no_assumption, world.without, standardizer)
    known = world.points if assuming else world.start.known
    return frozenset(follows(known | world.start.bounds, relations))


def planned(world: World, metric: str, standardizer: str, *, free: bool) -> bool:
    """Whether the planner keeps a route that surely gives a value; of routes from one evidence it keeps a single one.

    ``free`` : the route must suppose nothing that nobody reported.
    """
    doubtful = uncertain_counts() | world.without
    if _all_sure(world, doubtful):
        return True
    routes = search(world.start, world.design, standardizer).get(metric, ())
    return any(
        route.grade < (Grade.ASSUMPTION if free else Grade.BOUND) and not doubtful & set(route.steps.values())
        for route in routes
    )


@lru_cache(maxsize=1 << 12)
def _all_sure(world: World, doubtful: frozenset[str]) -> bool:
    """Whether no relation that may give no value has all it needs."""
    every = graph(world.design, any_point, frozenset(), None)
    have = follows(world.points | world.start.bounds, every)
    return not any(r.name in doubtful and have.issuperset(r.needs) for r in every)


@dataclass(frozen=True, slots=True)
class Precise:
    """What sampling variance and limits need beside the estimate: one set for each way to compute them."""

    variances: tuple[frozenset[str], ...]
    limits: tuple[frozenset[str], ...]

    def used(self, known: frozenset[str]) -> frozenset[str]:
        """What the ways that will be taken need: the first that are served, else the first."""
        both = (self.variances, self.limits)
        taken = [next((way for way in ways if way <= known), ways[0]) for ways in both if ways]
        return frozenset().union(*taken)

    def served(self, known: frozenset[str]) -> bool:
        """Whether both can be had, where limits exist."""
        return bool(self.variances) and self.used(known) <= known


@lru_cache(maxsize=1024)
def precise(metric: str, design: str, standardizer: str, method: str | None) -> Precise:
    """The ways to the precision of a case; none where no variance is known."""
    both = variances_of(metric, method, design, standardizer), limits_of(metric, design, standardizer)
    found = (tuple(frozenset(way.needs) - {metric} for way in ways) for ways in both)
    return Precise(*found)


@dataclass(frozen=True, slots=True)
class Wanted:
    """What the rows are to give: a metric, over a named standardizer or ("") the design's usual one first.

    method : of the sampling variance; None for the metric's preferred one.
    """

    metric: str
    standardizer: str = ""
    method: str | None = None

    def preferred(self, world: World) -> str | None:
        """The standardizer of the route that will be chosen; None for whichever can be had."""
        if self.standardizer:
            return self.standardizer
        return "" if self.metric in _bounded(world, True, "") else None

    def precisions(self, world: World) -> list[Precise]:
        """The ways to the precision, one for each standardizer that the chosen route may have."""
        preferred = self.preferred(world)
        if self.metric not in STANDARDIZED:
            named = ["pooled"]
        elif preferred is not None:
            named = [standardizer_of(preferred, world.design)]
        else:
            named = [s for s in STANDARDIZERS if self.metric in _derived(world, True, s)]
        return [precise(self.metric, world.design, s, self.method) for s in named]

    def pointed(self, world: World, *, surely: bool) -> bool:
        """Whether the metric gets a point: a route without assumptions wins, a bound without them comes next."""
        preferred = self.preferred(world)
        if self.metric in _derived(world, False, preferred):
            return True
        if self.metric not in _derived(world, True, preferred):
            return False
        return not world.start.bounds if surely else self.metric not in _bounded(world, False, preferred)

    def free(self, world: World, *, surely: bool) -> bool:
        """Whether the metric, and of what its variance needs all that can be had, rest on nothing unreported."""
        preferred = self.preferred(world)
        sound = _derived(world, False, preferred)
        if self.metric not in sound:
            return False
        had = _derived(world, True, None)
        doubtful = had - _derived(world, False, None) - sound
        each = (not way.used(had) & doubtful for way in self.precisions(world))
        return all(each) if surely else any(each) or not doubtful

    def complete(self, world: World, *, surely: bool) -> bool:
        """Whether metric and variance can be had."""
        derived = _derived(world, True, self.preferred(world))
        if self.metric not in derived:
            return False
        had = _derived(world, True, None) | derived
        each = (way.served(had) for way in self.precisions(world))
        return all(each) if surely else any(each)
