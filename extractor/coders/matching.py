"""Which row of one coder is which row of another: by their labels, in any order, with rows missing on either side.

Rows are matched in three passes, each on what the one before left: all labels alike; labels that one coder left blank,
and analyses that were only named otherwise; one label that differs, where the printed numbers say that it is the same
row. Rows with the same labels are told apart by their numbers.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from zlib import crc32

import numpy as np
from numpy.typing import NDArray

from extractor.coders.stack import Stack
from extractor.distinct import distinct
from extractor.labels import compared as compared
from extractor.labels import plain_label as plain_label
from extractor.printed.reading import tidy
from extractor.quantities import VOCABULARY
from extractor.study.terms import factors_of
from extractor.table import BoolArray, FloatArray, ObjectArray, Variable

KEYS = ("study", "outcome", "effect", "analysis", "term", "contrast")
"""Labels that say which effect a row is about."""

ABSENT = -1
FROM_CODEBOOK = "from the codebook"
_SHARED = frozenset({"ms_error", "ss_error", "ss_total", "ss_subjects"})
"""Numbers that all rows of a model have in common, so that they tell no row from another."""
_MOST_PAIRS = 4_000_000
"""Pairs of rows of one study above which only rows with the same labels are matched."""
_TOUCH = 1e-6
"""Share of the narrower rounding interval by which two must overlap; neighbours such as 3.4 and 3.5 only touch."""
_BLANK, _POINT, _BELOW, _ABOVE = 0, 1, 2, 3


@dataclass(frozen=True, slots=True)
class Printed:
    """Printed numbers of any shape.

    kind : blank, a point, an upper or a lower bound; a code of its own for each text that was not understood.
    """

    kind: NDArray[np.int64]
    value: FloatArray
    low: FloatArray
    high: FloatArray

    def at(self, rows: NDArray[np.intp]) -> Printed:
        """The numbers of these rows, in their shape."""
        return Printed(self.kind[rows], self.value[rows], self.low[rows], self.high[rows])


@dataclass(frozen=True, slots=True)
class Matching:
    """Rows that are about one effect.

    rows : row of the stack by effect and coder, shape (effects, coders); ABSENT where a coder has none.
    how : how the rows of an effect were found to belong together, where that was not by equal labels.
    notes : what could not be told apart.
    """

    rows: NDArray[np.intp]
    how: ObjectArray
    notes: list[str]


def printed(given: Stack, variable: Variable) -> Printed:
    """One number of every row of the stack; what the codebook filled in counts as blank."""
    numbers = given.table.numbers[variable]
    kind = np.select(
        [numbers.comparator == "=", numbers.comparator == "<", numbers.comparator == ">"],
        [_POINT, _BELOW, _ABOVE],
        _BLANK,
    ).astype(np.int64)
    odd = ~numbers.given & (numbers.problem != "")
    kind[odd] = [10 + crc32(str(text).encode()) for text in numbers.problem[odd]]
    kind[numbers.understood == FROM_CODEBOOK] = _BLANK
    return Printed(kind, numbers.value, numbers.low, numbers.high)


def alike(one: Printed, other: Printed, tolerance: float = 0.0) -> BoolArray:
    """Whether two cells say the same: both blank, the same bound, or numbers whose rounding intervals overlap.

    Parameters
    ----------
    tolerance : numbers also agree when they differ by at most this share of the larger.
    """
    both_low, both_high = np.maximum(one.low, other.low), np.minimum(one.high, other.high)
    narrower = np.minimum(one.high - one.low, other.high - other.low)
    with np.errstate(invalid="ignore"):
        # an exact number has no width: it lies in the other's interval or not
        meet = np.where(narrower > 0, both_high - both_low > _TOUCH * narrower, both_low <= both_high)
        larger = np.maximum(np.abs(one.value), np.abs(other.value))
        meet |= np.abs(one.value - other.value) <= tolerance * larger
        same = [meet, np.isclose(one.high, other.high, 1e-9, 0), np.isclose(one.low, other.low, 1e-9, 0)]
    said = np.select([one.kind == _POINT, one.kind == _BELOW, one.kind == _ABOVE], same, True)
    return np.asarray((one.kind == other.kind) & said)


def _term(text: str) -> str:
    return " x ".join(sorted(plain_label(factor) for factor in factors_of(text)))


def _contrast(text: str) -> str:
    """Without spaces; blank for the default, 1 - 2."""
    packed = (
        tidy(text).casefold().replace("versus", "-").replace("vs.", "-").replace("vs", "-").replace(" ", "")
    )
    return "" if packed == "1-2" else packed


PLAIN: dict[str, Callable[[str], str]] = {
    **dict.fromkeys(KEYS, plain_label),
    "term": _term,
    "contrast": _contrast,
}
"""How the words of each label are compared."""


def match(given: Stack) -> Matching:
    """Match the rows of all coders."""
    pool = _Pool(given)
    ids = [np.flatnonzero(given.coder == coder) for coder in range(len(given.tables))]
    first = ids[0]
    rows = np.full((len(first), len(ids)), ABSENT, dtype=np.intp)
    rows[:, 0] = first
    how = np.full(len(first), "", dtype=object)
    for coder in range(1, len(ids)):
        # of each effect, the row of the first coder who has it
        known = rows[np.arange(len(rows)), (rows != ABSENT).argmax(axis=1)]
        left = np.ones(len(ids[coder]), dtype=bool)
        for effect, row, said in pool.pairs(known, ids[coder]):
            rows[effect, coder] = ids[coder][row]
            left[row] = False
            if said and said not in str(how[effect]):
                how[effect] = "; ".join(filter(None, (str(how[effect]), said)))
        more = np.full((int(left.sum()), len(ids)), ABSENT, dtype=np.intp)
        more[:, coder] = ids[coder][left]
        rows = np.vstack([rows, more])
        how = np.concatenate([how, np.full(len(more), "", dtype=object)])
    return Matching(rows, how, list(dict.fromkeys(pool.notes)))


class _Grouping:
    """Rows by code: their number, the first one, and all of them."""

    def __init__(self, codes: NDArray[np.intp], size: int) -> None:
        self.order = np.argsort(codes, kind="stable")
        self.sizes = np.bincount(codes, minlength=size)
        self.starts = np.cumsum(self.sizes) - self.sizes
        self.first = self.order[np.minimum(self.starts, len(codes) - 1)]

    def members(self, code: int) -> NDArray[np.intp]:
        """Rows of one code, in order."""
        return self.order[self.starts[code] : self.starts[code] + self.sizes[code]]


Pair = tuple[int, int, str]
"""Position among the known rows, position among the new ones, and how they were matched."""


class _Pool:
    """The labels and numbers of all rows, and the passes of the matching."""

    def __init__(self, given: Stack) -> None:
        self.keys = {name: compared(given.word(name), PLAIN[name]) for name in KEYS}
        self.numbers = {variable: printed(given, variable) for variable in given.table.numbers}
        self.notes: list[str] = []

    def pairs(self, known: NDArray[np.intp], new: NDArray[np.intp]) -> Iterator[Pair]:
        """Rows that belong together; each is used once."""
        free_known, free_new = np.ones(len(known), dtype=bool), np.ones(len(new), dtype=bool)
        for each in (self._same_labels, self._blank_labels, self._one_label_apart):
            a, b = np.flatnonzero(free_known), np.flatnonzero(free_new)
            for i, j, said in list(each(known[a], new[b])):
                free_known[a[i]] = free_new[b[j]] = False
                yield int(a[i]), int(b[j]), said

    def _same_labels(self, known: NDArray[np.intp], new: NDArray[np.intp]) -> Iterator[Pair]:
        yield from self._grouped(known, new, KEYS, self._not_all_unlike, "")

    def _not_all_unlike(self, a: NDArray[np.intp], b: NDArray[np.intp]) -> BoolArray:
        same, both = self._agreeing(a, b, list(self.numbers))
        return np.asarray((same > 0) | (both == 0))

    def _blank_labels(self, known: NDArray[np.intp], new: NDArray[np.intp]) -> Iterator[Pair]:
        said = "a label is blank or the analysis is named otherwise"

        def allowed(a: NDArray[np.intp], b: NDArray[np.intp]) -> BoolArray:
            return np.asarray((self._apart(a, b) == 0) & self._not_all_unlike(a, b))

        yield from self._grouped(known, new, ("study",), allowed, said)

    def _one_label_apart(self, known: NDArray[np.intp], new: NDArray[np.intp]) -> Iterator[Pair]:
        telling = [v for v in self.numbers if not VOCABULARY[v[0]].exact and v[0] not in _SHARED]

        def allowed(a: NDArray[np.intp], b: NDArray[np.intp]) -> BoolArray:
            same, both = self._agreeing(a, b, telling)
            return np.asarray((self._apart(a, b) == 1) & (same > 0) & (2 * same >= both))

        yield from self._grouped(known, new, ("study",), allowed, "one label differs, the numbers agree")

    def _grouped(
        self,
        known: NDArray[np.intp],
        new: NDArray[np.intp],
        keys: tuple[str, ...],
        allowed: Callable[[NDArray[np.intp], NDArray[np.intp]], BoolArray],
        said: str,
    ) -> Iterator[Pair]:
        """Pairs within groups of equal ``keys``; where several fit, those whose numbers agree most."""
        if not len(known) or not len(new):
            return
        every = np.concatenate([known, new])
        codes = distinct(list(zip(*(self.keys[key][every].tolist() for key in keys), strict=True)))[1]
        size = int(codes.max(initial=-1)) + 1
        one, other = _Grouping(codes[: len(known)], size), _Grouping(codes[len(known) :], size)
        single = (one.sizes == 1) & (other.sizes == 1) & (keys == KEYS)
        for i, j in zip(one.first[single].tolist(), other.first[single].tolist(), strict=True):
            yield i, j, said
        for code in np.flatnonzero((one.sizes > 0) & (other.sizes > 0) & ~single).tolist():
            a, b = one.members(code), other.members(code)
            if len(a) * len(b) > _MOST_PAIRS:
                many = (
                    f"{len(a)} and {len(b)} rows have labels too much alike to be told apart by their numbers"
                )
                self.notes.append(
                    f"{many}: they are matched only where all labels are alike and no two rows share them"
                )
                continue
            told = said or "several rows have these labels; told apart by their numbers"
            for i, j in self._assigned(known[a], new[b], allowed(known[a], new[b])):
                yield int(a[i]), int(b[j]), told

    def _assigned(
        self, known: NDArray[np.intp], new: NDArray[np.intp], allowed: BoolArray
    ) -> Iterator[tuple[int, int]]:
        """As many allowed pairs as possible, then the most agreeing numbers, then the order of the sheets."""
        if not allowed.any():
            return
        from scipy.optimize import linear_sum_assignment

        same, both = self._agreeing(known, new, list(self.numbers))
        order = np.abs(np.arange(len(known))[:, None] - np.arange(len(new))[None, :])
        score = np.where(allowed, 2.0 * len(self.numbers) + 1 + (2 * same - both) - 1e-6 * order, 0.0)
        for i, j in zip(*linear_sum_assignment(score, maximize=True), strict=True):
            if allowed[i, j]:
                yield int(i), int(j)

    def _apart(self, known: NDArray[np.intp], new: NDArray[np.intp]) -> NDArray[np.int64]:
        """How many labels differ, blanks fitting anything but a contrast, the analysis left aside: a matrix."""
        found = np.zeros((len(known), len(new)), dtype=np.int64)
        for name in KEYS:
            if name in ("study", "analysis"):
                continue
            one, other = self.keys[name][known][:, None], self.keys[name][new][None, :]
            apart = one != other
            found += apart if name == "contrast" else apart & (one != "") & (other != "")
        return found

    def _agreeing(
        self, known: NDArray[np.intp], new: NDArray[np.intp], variables: Sequence[Variable]
    ) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Numbers that agree, and numbers that both rows have: two matrices."""
        same = np.zeros((len(known), len(new)), dtype=np.int64)
        both = np.zeros_like(same)
        for variable in variables:
            one, other = (self.numbers[variable].at(rows) for rows in (known[:, None], new[None, :]))
            given = (one.kind != _BLANK) & (other.kind != _BLANK)
            both += given
            same += given & alike(one, other)
        return same, both
