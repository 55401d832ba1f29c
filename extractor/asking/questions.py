"""What to ask about each row: the cheapest sets of numbers that open it, tighten it or free it from an assumption.

A set is offered only when it does what is promised whatever the answer is, and when no part of it would do. Sets are
ranked by what their numbers cost to be had, then by how readily the hardest of them is, then by what they still leave
to an assumption, then by how much rounding would leave.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from enum import Enum
from functools import lru_cache
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from extractor.asking.situation import GROUPED, Situation, Wanted, World, planned, uncertain_counts, worlds
from extractor.asking.typical import width_left
from extractor.catalogue.relation import Grade, Relation
from extractor.coding import NO_CONTRAST
from extractor.evidence import Block, fractional_df
from extractor.quantities import is_signed
from extractor.routes.choice import NOTHING, Chosen, grade_of
from extractor.routes.conversion import Conversion
from extractor.routes.engine import Engine, Estimate
from extractor.routes.planner import Route
from extractor.routes.unlock import (
    BURDEN,
    EASE,
    Ease,
    any_point,
    askable_in,
    follows,
    graph,
    no_assumption,
    smallest_sets,
)
from extractor.study.terms import factors_of, terms_per_row
from extractor.table import BoolArray, ReportedTable

_CANDIDATES = 10
_CLASSICAL = frozenset({"f_value", "t_value", "p_value", "df_effect", "df_error"})


def burden(asked: frozenset[str], groups: int) -> int:
    """What a set costs the authors of a study with so many groups."""
    return sum(BURDEN[name] * (groups if name in GROUPED else 1) for name in asked)


class Aim(Enum):
    """What an answer would do for a row."""

    OPENS = "opens"
    TIGHTENS = "tightens"
    FREES = "frees from an assumption"
    COMPLETES = "adds the variance"


@dataclass(frozen=True, slots=True)
class Offer:
    """One set of quantities to ask for.

    assuming : whether the effect would still rest on something nobody reported.
    rounding : width that rounding would leave in a typical study, as a share of the effect.
    also : what the sampling variance would need beyond the set. whole : the fewest of both from which estimate and
    variance follow, since what the variance needs may make a number of the set superfluous.
    """

    aim: Aim
    asked: frozenset[str]
    assuming: bool
    rounding: float
    also: frozenset[str]
    whole: frozenset[str]

    @property
    def ease(self) -> Ease:
        """How readily the hardest of the numbers is to be had."""
        return max(EASE[name] for name in self.asked)


@dataclass(frozen=True, slots=True)
class Asked:
    """Rows of one block to which the same offers apply; ``positions`` into the table, shape (rows,)."""

    positions: NDArray[np.intp]
    block: Block
    aim: Aim
    offers: tuple[Offer, ...]


def questions(
    conversion: Conversion, *, method: str | None = None, standardizer: str = "", most: int = 6
) -> list[Asked]:
    """Offers for every row that is blocked, bounded, rests on an assumption or lacks its variance.

    Parameters
    ----------
    method, standardizer : as the conversion was made with.
    most : offers per row.

    Returns
    -------
    Groups of rows with equal offers; rows for which nothing can be asked are in a group without offers.
    """
    table = conversion.evidence.table
    said = _Said(table)
    found: list[Asked] = []
    for chosen in conversion.chosen:
        for rows, index in _same_route(chosen):
            for aim in _aims(chosen, index):
                wanted = Wanted(conversion.metric, standardizer, method)
                for part in said.alike(chosen.block, rows):
                    situation = said.situation(chosen, part, index)
                    offers = _offers(situation, wanted, aim, most)
                    found.append(Asked(chosen.block.positions[part], chosen.block, aim, offers))
    return found


def _same_route(chosen: Chosen) -> Iterator[tuple[NDArray[np.intp], int]]:
    """Rows of a block by the route that was chosen for them, those with a point and those with a bound apart."""
    for index in np.unique(chosen.which):
        for pointed in (True, False):
            rows = np.flatnonzero((chosen.which == index) & (chosen.pointed == pointed))
            if len(rows):
                yield rows, int(index)


def _aims(chosen: Chosen, index: int) -> Iterator[Aim]:
    """What the rows of one route lack."""
    if index == NOTHING:
        yield Aim.OPENS
    elif index not in chosen.precisions:
        yield Aim.TIGHTENS
    else:
        supported = chosen.precisions[index]
        if grade_of((chosen.routes[index], *supported.further)) is Grade.ASSUMPTION:
            yield Aim.FREES
        if supported.missing:
            yield Aim.COMPLETES


class _Said:
    """Facts of the rows, beyond their blocks, on which it depends what can be asked; arrays of shape (rows,)."""

    def __init__(self, table: ReportedTable) -> None:
        design = table.fact("design")
        several = terms_per_row(table, design) > 1
        terms = table.fact("term").astype(str)
        joint = np.isin(terms, [t for t in set(terms) if len(factors_of(t)) > 1])
        self.modelled: BoolArray = several
        self.ungrouped: BoolArray = (design == "within") & (several | joint)
        self.fractional = fractional_df(table)
        self.compared: BoolArray = np.asarray(table.fact("contrast") != NO_CONTRAST)

    def alike(self, block: Block, rows: NDArray[np.intp]) -> Iterator[NDArray[np.intp]]:
        """The rows of a block, split by these facts."""
        at = block.positions[rows]
        keys = np.column_stack(
            [
                self.modelled[at],
                self.ungrouped[at],
                self.fractional[at],
                self.compared[at],
                _one_df(block)[rows],
            ]
        )
        _, inverse = np.unique(keys, axis=0, return_inverse=True)
        for code in range(int(inverse.max()) + 1):
            yield rows[inverse.ravel() == code]

    def situation(self, chosen: Chosen, rows: NDArray[np.intp], index: int) -> Situation:
        """What rows that are alike know."""
        block, first = chosen.block, rows[0]
        at = block.positions[first]
        askable = askable_in(block.design, block.start.known)
        if self.ungrouped[at]:
            askable -= GROUPED
        if self.fractional[at]:
            corrected = block.design in ("within", "mixed")
            askable -= {"df_effect", "df_error"} if corrected else _CLASSICAL
        if is_signed(chosen.metric) and not self.compared[at]:
            # the row compares more than two levels, and no answer makes it a difference of two
            askable = frozenset()
        one = int(_one_df(block)[first])
        start = block.start
        if block.design == "one-way-partial" and block.groups < 2:
            # a single group of unknown company says nothing until another one is coded
            start = replace(start, known=start.known - GROUPED)
        return Situation(
            design=block.design,
            groups=block.groups,
            start=start,
            askable=askable,
            without=_sterile(chosen, rows) if index == NOTHING else frozenset(),
            counted=block.groups > 1 or bool({"df_effect", "k_groups"} & block.leaves.keys()),
            compared=bool(self.compared[at]),
            one_df=None if one < 0 else bool(one),
            modelled=bool(self.modelled[at]),
        )


def _one_df(block: Block) -> NDArray[np.int64]:
    """Whether the effect has one df: 1, 0, or -1 where it is not coded."""
    df = block.leaves.get("df_effect")
    if df is None:
        return np.full(len(block.positions), -1)
    return np.asarray(np.where(np.isnan(df.value), -1, df.value == 1), dtype=np.int64)


def _sterile(chosen: Chosen, rows: NDArray[np.intp]) -> frozenset[str]:
    """Relations that give these rows no value although all their inputs have one."""
    block = chosen.block
    known: dict[str, Estimate] = {}
    for name, leaf in block.leaves.items():
        if np.isfinite(leaf.value[rows]).all():
            known[name] = Estimate(leaf.value[rows], leaf.low[rows], leaf.high[rows])
    left = list(graph(block.design, any_point, frozenset(), None))
    found: set[str] = set()
    while due := [r for r in left if known.keys() >= set(r.needs)]:
        left = [r for r in left if r not in due]
        for relation in due:
            step = Route(relation.gives, frozenset(relation.needs), {relation.gives: relation.name})
            given = Engine(known).run(step)
            if not np.isfinite(given.value).all():
                found.add(relation.name)
            else:
                known.setdefault(relation.gives, given)
    return frozenset(found)


@lru_cache(maxsize=4096)
def _offers(situation: Situation, wanted: Wanted, aim: Aim, most: int) -> tuple[Offer, ...]:
    groups = situation.groups or (2 if situation.design != "one-way" else 3)

    def cost(asked: frozenset[str]) -> tuple[int, Ease, bool, list[str]]:
        hardest = max(EASE[name] for name in asked)
        return burden(asked, groups), hardest, _assuming(situation, wanted, asked), sorted(asked)

    sets = sorted(_sets(situation, wanted, aim), key=cost)
    offers = [
        Offer(aim, asked, cost(asked)[2], *_left(situation, wanted, asked)) for asked in sets[: 2 * most]
    ]
    # rounding decides between sets that cost the same
    offers.sort(key=lambda o: (*cost(o.asked)[:3], o.rounding, sorted(o.asked)))
    kept = offers[:most]
    if kept and all(o.asked & kept[0].asked for o in kept[1:]):
        # whoever lacks a number of the first set is to be shown one without it
        other = next((asked for asked in sets if not asked & kept[0].asked), None)
        if other is not None:
            kept[most - 1 :] = [Offer(aim, other, cost(other)[2], *_left(situation, wanted, other))]
    return tuple(kept)


def _sets(situation: Situation, wanted: Wanted, aim: Aim) -> list[frozenset[str]]:
    """Sets that surely do what is wanted, no part of which possibly does."""

    def does(asked: frozenset[str], surely: bool) -> bool:
        each = (_does(world, wanted, aim, surely) for world in worlds(situation, asked))
        return all(each) if surely else any(each)

    def routed(asked: frozenset[str]) -> bool:
        free = aim is Aim.FREES
        each = worlds(situation, asked)
        return all(planned(world, wanted.metric, wanted.standardizer, free=free) for world in each)

    if does(frozenset(), False):
        return []
    kept = []
    for asked in _candidates(situation, wanted, aim):
        parts = (
            frozenset(p) for size in range(len(asked) - 1, 0, -1) for p in combinations(sorted(asked), size)
        )
        if does(asked, True) and not any(does(part, False) for part in parts) and routed(asked):
            kept.append(asked)
    return kept


def _does(world: World, wanted: Wanted, aim: Aim, surely: bool) -> bool:
    if aim in (Aim.OPENS, Aim.TIGHTENS):
        return wanted.pointed(world, surely=surely)
    return (wanted.free if aim is Aim.FREES else wanted.complete)(world, surely=surely)


def _candidates(situation: Situation, wanted: Wanted, aim: Aim) -> list[frozenset[str]]:
    """Smallest sets in each way the rows may turn out, the easiest first."""
    start, askable = situation.start, situation.askable
    without = situation.without | uncertain_counts()
    ways: dict[tuple[tuple[Relation, ...], frozenset[str]], None] = {}
    for design in {world.design: None for world in worlds(situation, askable & GROUPED | {"df_effect"})}:
        for assuming in _ASSUMING[aim] if not start.bounds or aim is Aim.FREES else (True, False):
            allowed = any_point if assuming else no_assumption
            known = start.known | (start.assumed if assuming else frozenset())
            known |= {"contrast_weight"} if situation.compared else set()
            # k comes with the groups, so that sets are sought with and without it
            for given in (known, known | {"k_groups"}) if not situation.counted else (known,):
                for standardizer in (wanted.standardizer,) if wanted.standardizer else ("", None):
                    ways[graph(design, allowed, without, standardizer), given] = None
    sets = {
        found: None
        for way, given in ways
        for goals in _goals(situation, wanted, aim)
        for found in smallest_sets(given, askable, way, goals, _CANDIDATES)
    }
    return sorted(sets, key=lambda s: (max(EASE[q] for q in s), len(s), sorted(s)))


def _goals(situation: Situation, wanted: Wanted, aim: Aim) -> list[frozenset[str]]:
    """What must follow: the metric, and where the variance matters what some way to it needs."""
    metric = frozenset([wanted.metric])
    if aim in (Aim.OPENS, Aim.TIGHTENS):
        return [metric]
    here = next(worlds(situation, frozenset()))
    found = {metric: None} if aim is Aim.FREES else {}
    for way in wanted.precisions(here):
        for variance in way.variances:
            for limits in way.limits or (frozenset(),):
                found |= {metric | variance | limits: None}
        found |= {metric | variance: None for variance in way.variances} if aim is Aim.FREES else {}
    return list(found)


_ASSUMING = {
    Aim.OPENS: (True,),
    Aim.TIGHTENS: (True,),
    Aim.FREES: (False,),
    Aim.COMPLETES: (True,),
}
"""Whether sets are sought along routes that suppose what nobody reported."""


def _assuming(situation: Situation, wanted: Wanted, asked: frozenset[str]) -> bool:
    """Whether the effect may still rest on an assumption."""
    return not all(wanted.free(world, surely=True) for world in worlds(situation, asked))


def _left(
    situation: Situation, wanted: Wanted, asked: frozenset[str]
) -> tuple[float, frozenset[str], frozenset[str]]:
    """The rounding that would be left, the cheapest set that the variance would need in addition, and the whole."""
    after = next(worlds(situation, asked))
    relations = graph(after.design, any_point, after.without, None)
    used = after.points
    for name in sorted(used - asked):
        if wanted.metric in follows(used - {name}, relations):
            used -= {name}
    needs = [way.used(frozenset()) for way in wanted.precisions(after)]
    goals = frozenset([wanted.metric]).union(*needs[:1])
    more = smallest_sets(after.points, situation.askable, relations, goals, 1)
    also = more[0] if more else frozenset()
    return width_left(situation.design, used, wanted.metric), also, _fewest(situation, wanted, asked, also)


def _fewest(
    situation: Situation, wanted: Wanted, asked: frozenset[str], also: frozenset[str]
) -> frozenset[str]:
    """A set and what its variance needs, without the numbers of the set that are then superfluous."""
    whole = asked | also
    for name in sorted(asked, key=lambda q: (-EASE[q], q)) if also else ():
        each = list(worlds(situation, whole - {name}))
        if all(wanted.complete(world, surely=True) for world in each) and all(
            planned(world, wanted.metric, wanted.standardizer, free=False) for world in each
        ):
            whole -= {name}
    return whole
