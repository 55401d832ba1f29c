"""What a row lacks: the smallest sets of quantities that would open a route to a metric.

A set opens a metric when the metric follows from what is known together with the set. Whether something follows only
grows with what is known, so every quantity has an antichain of smallest sets from which it follows. They are
combined along the relations until nothing changes, as the labels of an assumption-based truth maintenance system are
(de Kleer 1986). Long antichains are cut to their easiest sets; every set that is returned is tried out, so that it
does open the metric and no part of it does.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from enum import IntEnum
from functools import lru_cache

from extractor.catalogue.relation import Grade, Relation
from extractor.catalogue.standardizers import DEFAULT
from extractor.quantities import VOCABULARY, Shape
from extractor.routes.planner import Start, relations_of

_LARGEST = 4
"""Quantities in a set: with more, nobody answers."""
_KEPT = 24
"""Sets kept per quantity while they are combined."""


class Ease(IntEnum):
    """How readily a number is to be had; common practice, no source for the order."""

    ARTICLE = 0
    SUMMARY = 1
    TEST = 2
    TABLE = 3
    SCORES = 4

    @property
    def words(self) -> str:
        """Who has such a number."""
        return _EASE[self]


_EASE = {
    Ease.ARTICLE: "the article should say",
    Ease.SUMMARY: "summary statistics, which authors have at hand",
    Ease.TEST: "a test statistic of the authors' output",
    Ease.TABLE: "a line of the authors' source table",
    Ease.SCORES: "to be computed from the raw scores",
}

EASE: dict[str, Ease] = {
    **dict.fromkeys(("direction", "tails", "confidence_level", "significance_level"), Ease.ARTICLE),
    **dict.fromkeys(("n", "mean", "sd", "n_total", "k_groups"), Ease.SUMMARY),
    **dict.fromkeys(("mean_pre", "sd_pre", "mean_post", "sd_post"), Ease.SUMMARY),
    **dict.fromkeys(("mean_change", "sd_change", "sd_difference", "adjusted_mean"), Ease.SUMMARY),
    **dict.fromkeys(("count_a", "count_b", "count_c", "count_d", "cluster_size"), Ease.SUMMARY),
    **dict.fromkeys(("f_value", "t_value", "p_value", "df_effect", "df_error"), Ease.TEST),
    **dict.fromkeys(("mean_difference", "se_difference", "n_covariates"), Ease.TEST),
    **dict.fromkeys(("ms_error", "ss_effect", "ss_error", "ss_total", "ss_subjects"), Ease.TABLE),
    **dict.fromkeys(("correlation", "covariate_r", "icc"), Ease.SCORES),
}
"""Quantities that an article or its authors can be asked for, and how readily they are to be had."""

_OF_EASE = {Ease.ARTICLE: 1, Ease.SUMMARY: 1, Ease.TEST: 3, Ease.TABLE: 4, Ease.SCORES: 6}
BURDEN: dict[str, int] = {name: _OF_EASE[ease] for name, ease in EASE.items()} | {
    "df_effect": 1,
    "df_error": 1,
}
"""What one number costs its authors: one F is asked for rather than nine summary statistics, but two SDs rather than
an F, and dfs stand beside their F; common practice, no source for the weights."""

ASKABLE = frozenset(EASE)

_COUNTS = frozenset({"count_a", "count_b", "count_c", "count_d"})
_OF_PROPORTIONS = _COUNTS | {"odds_ratio", "log_odds_ratio", "chi_squared", "chi_squared_corrected", "phi"}


def askable_in(design: str, known: frozenset[str]) -> frozenset[str]:
    """What can be asked about a row of a design; a number that stands for several is asked once.

    Counts are asked for where something else of the row speaks of a 2 x 2 table already.
    """
    none = frozenset() if design == "two-group" and known & _OF_PROPORTIONS else _COUNTS
    if design in ("paired", "within"):
        # every condition has all participants
        none |= {"n"}
    if design != "paired":
        none |= {"sd_difference"}
    return ASKABLE - none


Allowed = Callable[[Relation], bool]


def any_point(relation: Relation) -> bool:
    """Relations that give a point, whatever they take for granted."""
    return relation.grade is not Grade.BOUND


def no_assumption(relation: Relation) -> bool:
    """Relations that suppose nothing that nobody reported."""
    return relation.grade < Grade.ASSUMPTION


@lru_cache(maxsize=512)
def graph(
    design: str, allowed: Allowed, without: frozenset[str], standardizer: str | None
) -> tuple[Relation, ...]:
    """The relations of a design that a search may use.

    Parameters
    ----------
    without : names of relations that do not hold for the rows in question.
    standardizer : keep to routes over this one, "" being the design's usual one; None takes every one.
    """
    usual = DEFAULT.get(design, "") if standardizer == "" else standardizer
    return tuple(
        r
        for r in relations_of(design)
        if allowed(r)
        and r.name not in without
        and (usual is None or not r.standardizer or r.standardizer == usual)
    )


def follows(known: Iterable[str], relations: tuple[Relation, ...]) -> set[str]:
    """Everything that can be derived from what is known."""
    have = set(known)
    left = [r for r in relations if r.gives not in have]
    more = True
    while more:
        more = False
        waiting = []
        for relation in left:
            if relation.gives in have:
                continue
            if have.issuperset(relation.needs):
                have.add(relation.gives)
                more = True
            else:
                waiting.append(relation)
        left = waiting
    return have


def smallest_sets(
    known: frozenset[str],
    askable: frozenset[str],
    relations: tuple[Relation, ...],
    goals: frozenset[str],
    most: int = 3,
) -> list[frozenset[str]]:
    """Smallest sets of askable quantities from which, with what is known, all goals follow; the easiest first.

    Empty where the goals follow already, and where no set of up to four quantities suffices.
    """
    if goals <= follows(known, relations):
        return []
    labels = _Labels(known, askable - known, relations, goals)
    found: list[frozenset[str]] = []
    # few quantities are easy to have, so that the sets made of them alone are found at once
    for ease in Ease:
        labels.allow(ease)
        for asked in labels.sets(goals):
            if len(found) == most:
                return found
            opens = asked not in found and goals <= follows(known | asked, relations)
            if opens and not any(goals <= follows(known | asked - {q}, relations) for q in asked):
                found.append(asked)
    return found


class _Labels:
    """Antichains of sets by quantity; a set is an integer, one bit for each askable quantity in order of ease."""

    def __init__(
        self,
        known: frozenset[str],
        askable: frozenset[str],
        relations: tuple[Relation, ...],
        goals: frozenset[str],
    ) -> None:
        useful = _leading_to(goals, relations)
        self.names = sorted(askable & useful, key=lambda q: (EASE[q], q))
        self.ease = [EASE[q] for q in self.names]
        derived = follows(known, relations)
        self.label: dict[str, list[int]] = {q: [0] for q in derived}
        self.costs: dict[int, tuple[int, int, int]] = {}
        self.users: dict[str, list[Relation]] = {}
        for relation in relations:
            if relation.gives in useful and relation.gives not in derived:
                for need in relation.needs:
                    self.users.setdefault(need, []).append(relation)

    def allow(self, ease: Ease) -> None:
        """Let quantities of this ease be asked for, and combine."""
        changed = {q for q, own in zip(self.names, self.ease, strict=True) if own is ease and self._add(q)}
        while changed:
            due = {r.name: r for q in changed for r in self.users.get(q, ())}
            changed = {r.gives for _, r in sorted(due.items()) if self._update(r)}

    def _add(self, quantity: str) -> bool:
        old = self.label.get(quantity, [])
        self.label[quantity] = self._antichain({*old, 1 << self.names.index(quantity)})
        return self.label[quantity] != old

    def _cost(self, mask: int) -> tuple[int, int, int]:
        if mask not in self.costs:
            worst = self.ease[mask.bit_length() - 1] if mask else Ease.ARTICLE
            self.costs[mask] = int(worst), mask.bit_count(), mask
        return self.costs[mask]

    def _update(self, relation: Relation) -> bool:
        """Whether the relation gave what it gives a new set."""
        old = self.label.get(relation.gives, [])
        fresh = self._all_of(relation.needs)
        if old == [0] or not fresh or set(old).issuperset(fresh):
            return False
        self.label[relation.gives] = self._antichain({*old, *fresh})
        return self.label[relation.gives] != old

    def _all_of(self, quantities: Iterable[str]) -> list[int]:
        """Sets from which all the quantities follow."""
        labels = [self.label.get(quantity, []) for quantity in quantities]
        if not all(labels):
            return []
        together = [0]
        for label in labels:
            if label != [0]:
                together = self._antichain({a | b for a in together for b in label})
        return together

    def _antichain(self, masks: set[int]) -> list[int]:
        """The smallest of the sets, the easiest first."""
        kept: list[int] = []
        for mask in sorted(masks, key=self._cost):
            if mask.bit_count() > _LARGEST:
                continue
            for other in kept:
                if mask & other == other:
                    break
            else:
                kept = [other for other in kept if mask & other != mask]
                kept.append(mask)
                if len(kept) == _KEPT:
                    break
        return kept

    def sets(self, goals: frozenset[str]) -> list[frozenset[str]]:
        """The sets from which all goals follow."""
        return [
            frozenset(q for at, q in enumerate(self.names) if mask >> at & 1)
            for mask in self._all_of(sorted(goals))
        ]


def _leading_to(goals: frozenset[str], relations: tuple[Relation, ...]) -> set[str]:
    """Quantities from which some goal can follow."""
    useful = set(goals)
    while more := {n for r in relations if r.gives in useful for n in r.needs} - useful:
        useful |= more
    return useful


@lru_cache(maxsize=4096)
def _unlocking(
    start: Start, design: str, metric: str, most: int, standardizer: str
) -> tuple[frozenset[str], ...]:
    # the contrast needs no asking: it is there as soon as groups are coded
    known = start.known | start.assumed | {"contrast_weight"}
    relations = graph(design, any_point, frozenset(), standardizer or None)
    askable = askable_in(design, start.known)
    return tuple(smallest_sets(known, askable, relations, frozenset([metric]), most))


def unlocking_sets(
    start: Start, design: str, metric: str, most: int = 3, *, standardizer: str = ""
) -> list[frozenset[str]]:
    """Sets of missing quantities, each of which opens a route to ``metric``; the easiest to be had first.

    ``standardizer`` : accept only routes over this one; "" takes every one.

    No part of a set opens one. The list is empty where a route is open, and where nothing would open one.
    """
    return list(_unlocking(start, design, metric, most, standardizer))


def in_words(sets: Iterable[frozenset[str]]) -> str:
    """The sets as a clause: "mean and n of each group; or t_value"."""
    return "; or ".join(quantities_in_words(s) for s in sets)


def quantities_in_words(names: Iterable[str]) -> str:
    """Quantities as a list, those of the groups together: "t_value, mean of each group and sd of each group"."""
    ordered = sorted(names, key=lambda q: (VOCABULARY[q].shape is Shape.GROUP, EASE.get(q, Ease.TEST), q))
    words = [f"{n} of each group" if VOCABULARY[n].shape is Shape.GROUP else n for n in ordered]
    return " and ".join(words) if len(words) < 3 else ", ".join(words[:-1]) + " and " + words[-1]
