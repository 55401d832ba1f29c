"""What a relation is, how one is declared, and where all of them are kept.

A relation is a plain numpy function whose parameter names are the quantities it needs. Scalars arrive with shape
(rows,), group quantities with shape (rows, groups). The first line of its docstring is its formula, in the symbols
of the trade; the rest may explain. The decorator records what the function gives and how it behaves, so that
conversion, audit, diagnosis and documentation need nothing else.
"""

from __future__ import annotations

import inspect
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from extractor.quantities import VOCABULARY

FloatArray = NDArray[np.float64]
Interval = tuple[FloatArray, FloatArray]
Formula = Callable[..., FloatArray]
Image = Callable[..., Interval]


class Grade(IntEnum):
    """What a step loses; the worst along a route is the grade of the effect."""

    IDENTITY = 0
    APPROXIMATION = 1
    ASSUMPTION = 2
    BOUND = 3

    @property
    def word(self) -> str:
        """The grade as the effect table prints it."""
        return self.name.lower()


TWO_GROUP = frozenset({"two-group"})
BETWEEN = frozenset({"one-way", "two-group"})
"""One factor, independent groups, every group coded."""

ONE_FACTOR = BETWEEN | {"one-way-partial"}
"""The same, and one-way rows in which some groups of the model are not coded."""

SEVERAL_GROUPS = frozenset({"one-way", "one-way-partial"})
FACTORIAL = frozenset({"factorial"})
WITHIN = frozenset({"within"})
PAIRED = frozenset({"paired"})
MIXED = frozenset({"mixed"})
PRE_POST = frozenset({"pre-post-control"})
ANCOVA = frozenset({"ancova"})
TERMS = FACTORIAL | WITHIN | MIXED
"""Designs whose rows are terms of a model with several sources."""

PARTIAL = TERMS | PAIRED | ANCOVA
"""Designs in which F speaks of the effect and its own error term only."""

WITH_F = ONE_FACTOR | PARTIAL | PRE_POST
"""Designs whose test is an F (or a t) with an error term."""


@dataclass(frozen=True, slots=True)
class Relation:
    """One direction of one formula.

    gives, needs : quantities. A relation that needs what it gives only narrows intervals; no route uses it.
    rising, falling : the formula is monotone in these, whatever the others are.
    either : monotone in these when the others are fixed, in a direction that depends on the others.
    exact : must be known exactly for the interval image; otherwise nothing is concluded.
    image : interval function, where monotonicity does not give one. It takes one (low, high) pair per need and,
        when ``narrows`` is set, the current (low, high) of the quantity given.
    accuracy : relative error of the formula in floating point; images are widened by it.
    standardizer : which standard deviation a d or g gets by this step, where that is not the design's usual one.
    costly : the formula is a special function; an audit lets all others settle before it.
    beside : quantities for whose sake an audit uses it: without one of them in a row it could contradict nothing.
    """

    name: str
    gives: str
    needs: tuple[str, ...]
    formula: Formula
    grade: Grade
    designs: frozenset[str]
    source: str
    equation: str
    rising: frozenset[str]
    falling: frozenset[str]
    either: frozenset[str]
    exact: frozenset[str]
    image: Image | None
    narrows: bool
    accuracy: float
    assumes: str
    standardizer: str
    costly: bool
    beside: frozenset[str]
    family: str

    @property
    def routes(self) -> bool:
        """Whether the relation can be a step of a conversion."""
        return self.gives not in self.needs

    @property
    def judges(self) -> bool:
        """Whether an audit may rely on it: only algebra may contradict a printed number.

        A step that merely lets one kind of d stand for the metric is no algebra between two kinds.
        """
        return self.grade is Grade.IDENTITY and not self.standardizer


CATALOGUE: dict[str, Relation] = {}


def relation(
    *,
    gives: str,
    source: str,
    designs: Iterable[str],
    grade: Grade = Grade.IDENTITY,
    rising: Iterable[str] = (),
    falling: Iterable[str] = (),
    either: Iterable[str] = (),
    exact: Iterable[str] = (),
    image: Image | None = None,
    narrows: bool = False,
    accuracy: float = 1e-13,
    assumes: str = "",
    standardizer: str = "",
    costly: bool = False,
    beside: Iterable[str] = (),
) -> Callable[[Formula], Formula]:
    """Enter a formula into the catalogue. Every parameter must be declared, or ``image`` be given.

    Raises
    ------
    ValueError
        when a name is not in the vocabulary, a parameter's behaviour is not declared, a source is missing, or a
        grade other than identity does not say what it assumes.
    """

    def enter(formula: Formula) -> Formula:
        needs = tuple(inspect.signature(formula).parameters)
        declared = [*rising, *falling, *either, *exact]
        unknown = {gives, *needs, *declared, *beside} - VOCABULARY.keys()
        if unknown:
            raise ValueError(f"{formula.__name__}: not in the vocabulary: {sorted(unknown)}")
        if image is None and sorted(declared) != sorted(needs):
            raise ValueError(
                f"{formula.__name__}: declare each of {needs} once as rising, falling, either or exact"
            )
        if not source or not formula.__doc__:
            raise ValueError(
                f"{formula.__name__}: a relation needs a source and a docstring with its formula"
            )
        if (grade is not Grade.IDENTITY) != bool(assumes):
            raise ValueError(f"{formula.__name__}: say what is assumed, unless the relation is an identity")
        if formula.__name__ in CATALOGUE:
            raise ValueError(f"{formula.__name__}: two relations of one name")
        CATALOGUE[formula.__name__] = Relation(
            name=formula.__name__,
            gives=gives,
            needs=needs,
            formula=formula,
            grade=grade,
            designs=frozenset(designs),
            source=source,
            equation=formula.__doc__.strip().splitlines()[0].rstrip("."),
            rising=frozenset(rising),
            falling=frozenset(falling),
            either=frozenset(either),
            exact=frozenset(exact),
            image=image,
            narrows=narrows,
            accuracy=accuracy,
            assumes=assumes,
            standardizer=standardizer,
            costly=costly,
            beside=frozenset(beside),
            family=formula.__module__.rsplit(".", 1)[-1],
        )
        return formula

    return enter


def catalogue() -> dict[str, Relation]:
    """All relations by name, the families loaded."""
    from extractor.catalogue import families

    families.load()
    return CATALOGUE
