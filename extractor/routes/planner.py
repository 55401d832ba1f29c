"""Routes from what a row reports to what is wanted.

The relations of a design form a directed AND/OR hypergraph: a relation needs all its inputs, and several relations
may give one quantity. The search keeps, for each quantity, the best derivations with different evidence, combining
the best of the inputs first (after Knuth 1977 for the best, Huang & Chiang 2005 for the next best). It runs once per
signature, that is, per set of quantities that rows have in common.

Order of preference: fewest missing quantities asked for, then the design's usual standardizer, then fewest
assumptions, then best grade, then fewest steps, then names, so that the same input always gives the same plan.
Between routes of equal grade the engine prefers, row by row, the one with the narrowest rounding envelope.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property, lru_cache
from itertools import product
from math import prod

from extractor.catalogue.relation import Grade, Relation, catalogue
from extractor.catalogue.standardizers import DEFAULT

_BEST = 8
"""Derivations kept per quantity: enough for every kind of evidence seen in one row."""


_COUNTS = frozenset({"df_effect", "df_error", "df", "n_total", "k_groups", "n", "tails"})


_SUMMARY = frozenset({"minimum", "q1", "median", "q3", "maximum"})
"""Numbers of which an estimate of mean and SD had better use all that are printed."""


@dataclass(frozen=True)
class Route:
    """One derivation of a quantity.

    leaves : reported, coded, assumed or missing quantities it starts from.
    steps : relation used for each derived quantity.
    grade : worst grade along the route.
    assumed, missing : the leaves that nobody reported: supplied by codebook or default, and not supplied at all.
    standardizer : the standard deviation a d is divided by, where a step says so. behind : whether it is not the
        usual one of the design.
    """

    gives: str
    leaves: frozenset[str]
    steps: Mapping[str, str] = field(default_factory=dict)
    grade: Grade = Grade.IDENTITY
    assumed: frozenset[str] = frozenset()
    missing: frozenset[str] = frozenset()
    standardizer: str = ""
    behind: bool = False

    @cached_property
    def assumptions(self) -> int:
        """How many values and relations rest on something nobody reported."""
        return len(self.assumed) + len(_assuming().intersection(self.steps.values()))

    @cached_property
    def summary_numbers(self) -> int:
        """How many of a five-number summary it uses."""
        return len(self.leaves & _SUMMARY)

    @cached_property
    def evidence(self) -> frozenset[str]:
        """What it starts from besides counts."""
        return self.leaves - _COUNTS

    @cached_property
    def preference(self) -> tuple[int, bool, int, int, int, list[str], list[str]]:
        """Sort key: smaller is better; a total order over routes to one quantity."""
        return (
            len(self.missing),
            self.behind,
            self.assumptions,
            int(self.grade),
            len(self.steps),
            sorted(self.leaves),
            sorted(self.steps.values()),
        )

    def ordered(self) -> list[str]:
        """Names of the relations in an order in which they can be run."""
        order: list[str] = []
        relations = catalogue()

        def visit(quantity: str) -> None:
            name = self.steps.get(quantity)
            if name is None or name in order:
                return
            for need in relations[name].needs:
                visit(need)
            order.append(name)

        visit(self.gives)
        return order


@lru_cache(maxsize=1)
def _assuming() -> frozenset[str]:
    """Names of the relations that rest on an assumption."""
    return frozenset(name for name, r in catalogue().items() if r.grade is Grade.ASSUMPTION)


@dataclass(frozen=True, slots=True)
class Start:
    """What a search may start from.

    known : quantities with a point value. bounds : quantities of which only an inequality is known.
    assumed : quantities supplied by codebook or default. askable : quantities that could be asked for.
    """

    known: frozenset[str]
    bounds: frozenset[str] = frozenset()
    assumed: frozenset[str] = frozenset()
    askable: frozenset[str] = frozenset()

    def leaves(self) -> list[Route]:
        """The trivial routes."""
        assumed = self.assumed - self.known - self.bounds
        missing = self.askable - self.known - self.bounds - assumed
        return [
            *(Route(q, frozenset([q])) for q in self.known),
            *(Route(q, frozenset([q]), grade=Grade.BOUND) for q in self.bounds - self.known),
            *(Route(q, frozenset([q]), grade=Grade.ASSUMPTION, assumed=frozenset([q])) for q in assumed),
            *(Route(q, frozenset([q]), missing=frozenset([q])) for q in missing),
        ]


@lru_cache(maxsize=64)
def relations_of(design: str) -> tuple[Relation, ...]:
    """Relations that hold in a design and can be steps of a route, by name."""
    return tuple(r for _, r in sorted(catalogue().items()) if design in r.designs and r.routes)


def search(start: Start, design: str, standardizer: str = "") -> Mapping[str, tuple[Route, ...]]:
    """The best routes to every quantity within reach, best first.

    ``standardizer`` makes that one the usual one of the search, in the place of the design's own.
    """
    return _searched(start, design, standardizer or DEFAULT.get(design, ""))


@lru_cache(maxsize=4096)
def _searched(start: Start, design: str, usual: str) -> Mapping[str, tuple[Route, ...]]:
    best: dict[str, tuple[Route, ...]] = {}
    for route in start.leaves():
        best[route.gives] = _kept((*best.get(route.gives, ()), route))
    users: dict[str, list[Relation]] = {}
    for relation in relations_of(design):
        for need in relation.needs:
            users.setdefault(need, []).append(relation)
    changed = set(best)
    tried: dict[str, set[tuple[int, ...]]] = {}
    made: list[Route] = []
    while changed:
        due = {r.name: r for q in changed for r in users.get(q, ()) if all(n in best for n in r.needs)}
        changed = set()
        for _, relation in sorted(due.items()):
            before = tried.setdefault(relation.name, set())
            found = tuple(_combined(relation, [best[n] for n in relation.needs], usual, before))
            if not found:
                continue
            # what was made stays, so that no other route gets its identity
            made.extend(found)
            kept = _kept((*best.get(relation.gives, ()), *found))
            if kept != best.get(relation.gives, ()):
                best[relation.gives] = kept
                changed.add(relation.gives)
    return best


def _combined(
    relation: Relation, choices: list[tuple[Route, ...]], usual: str, tried: set[tuple[int, ...]]
) -> Iterator[Route]:
    """Routes through ``relation``: the best combinations of its inputs' routes that do not contradict each other.

    ``tried`` holds those that were already looked at, by the identity of their parts; the others are added to it.
    """
    for ranks in _rankings(tuple(map(len, choices))):
        parts = [some[rank] for some, rank in zip(choices, ranks, strict=True)]
        identity = tuple(map(id, parts))
        if identity in tried:
            continue
        tried.add(identity)
        leaves = frozenset().union(*[part.leaves for part in parts])
        if relation.gives in leaves or any(_astray(part, relation) for part in parts):
            continue
        steps = _agreed(parts)
        # a quantity is either taken as reported or derived, in one way, and never from itself
        if steps is None or relation.gives in steps or not leaves.isdisjoint(steps):
            continue
        steps[relation.gives] = relation.name
        named = [s for s in (relation.standardizer, *(part.standardizer for part in parts)) if s]
        yield Route(
            relation.gives,
            leaves,
            steps,
            grade=max(relation.grade, *(part.grade for part in parts)),
            assumed=frozenset().union(*[part.assumed for part in parts]),
            missing=frozenset().union(*[part.missing for part in parts]),
            standardizer=named[0] if named else "",
            behind=any(s != usual for s in named),
        )


@lru_cache(maxsize=1024)
def _rankings(lengths: tuple[int, ...]) -> list[tuple[int, ...]]:
    """The ranks that a combination of so many choices may take from each, the best first."""
    ranks = product(*map(range, lengths))
    return [some for some in ranks if prod(rank + 1 for rank in some) <= _BEST]


def _agreed(parts: list[Route]) -> dict[str, str] | None:
    """The steps of several routes together; None where they derive a quantity in different ways."""
    steps: dict[str, str] = {}
    for part in parts:
        for quantity, name in part.steps.items():
            if steps.setdefault(quantity, name) != name:
                return None
    return steps


def _astray(part: Route, relation: Relation) -> bool:
    """Whether a d would be taken for one it is not.

    Over another SD than the pooled one it says nothing of other metrics, and over one group's SD it has a correction
    of its own. A d of unsaid standardizer is taken as it stands, and its grade says so.
    """
    if part.gives != "cohens_d" or part.standardizer in ("", "unstated"):
        return False
    return part.standardizer == "control" or relation.gives != "hedges_g"


def _kept(routes: tuple[Route, ...]) -> tuple[Route, ...]:
    """The best routes with different evidence; one that asks for more and offers nothing better is dropped.

    Counts agree or the row contradicts itself, so two routes that differ in the counts they use are one evidence.
    """
    kept: list[Route] = []
    for route in sorted(routes, key=lambda r: r.preference):
        beaten = any(
            other.evidence <= route.evidence
            and other.missing <= route.missing
            and other.assumptions <= route.assumptions
            and other.grade <= route.grade
            and (other.standardizer == route.standardizer or route.behind)
            and other.summary_numbers >= route.summary_numbers
            for other in kept
        )
        if not beaten:
            kept.append(route)
    return tuple(kept[:_BEST])
