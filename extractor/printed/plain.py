"""Plain decimal numbers, all at once: digits with at most a minus sign and the declared decimal mark.

Nearly every distinct cell of a large sheet is one. They give what ``reported.read_number`` gives, to the last bit:
their digits are few enough for whole numbers and powers of ten that floating point numbers hold exactly, and a quotient
of two such is rounded once, as is the conversion of a decimal number. What needs a note or a thought is left out.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from extractor.printed.reported import CUT_AT_ZERO, PROBABILITIES, STATED, Setting

_LONGEST = 14
"""Letters of a plain number; ten times its digits stays below 2**53."""
_POWERS = np.array([float(f"1e{places}") for places in range(_LONGEST + 2)])
"""Powers of ten, all exact."""
_MINUS, _ZERO, _NINE = ord("-"), ord("0"), ord("9")


@dataclass(frozen=True, slots=True)
class PlainNumbers:
    """Readings without a word: those of the cells ``at``. See ``reading.Reading``; arrays of one length.

    All comparators are "=".
    """

    at: NDArray[np.intp]
    value: NDArray[np.float64]
    low: NDArray[np.float64]
    high: NDArray[np.float64]
    unit: NDArray[np.float64]
    decimals: NDArray[np.int64]


def read_plain(cells: Sequence[object], to: Setting) -> PlainNumbers:
    """The plain decimal numbers among the cells of a column."""
    at, digits, decimals = _digits(cells, to.mark)
    # a level may be a percentage
    left = np.full(len(at), to.name != "confidence_level")
    if to.missing:
        left &= np.array([cells[index] not in to.missing for index in at], dtype=np.bool_)
    if to.decimals is not None and not to.whole:
        left &= decimals >= to.decimals
    if to.name in PROBABILITIES | CUT_AT_ZERO:
        left &= digits != 0
    at, digits, decimals = at[left], digits[left], decimals[left]
    value = digits / _POWERS[decimals]
    unit = 1.0 / _POWERS[decimals]
    low, high = _interval(digits, decimals, to.rounding)
    exact = np.full(len(at), to.name in STATED)
    if to.quantity.exact:
        exact |= decimals == 0
    for ends in (low, high):
        ends[exact] = value[exact]
    unit[exact] = 0.0
    return PlainNumbers(at, value, low, high, unit, decimals)


def _digits(
    cells: Sequence[object], mark: str
) -> tuple[NDArray[np.intp], NDArray[np.int64], NDArray[np.int64]]:
    """Which cells are plain numbers, the whole numbers their digits are with their signs, and their decimals."""
    texts = [cell if type(cell) is str and len(cell) <= _LONGEST else "" for cell in cells]
    sizes = np.fromiter(map(len, texts), dtype=np.int64, count=len(texts))
    width = int(sizes.max(initial=1)) or 1
    # one row for each place in the text; NULs behind its end
    letters = np.array(texts, dtype=f"U{width}").view(np.uint32).reshape(len(texts), width).T.copy()
    digit = (letters >= _ZERO) & (letters <= _NINE)
    point = letters == ord(mark)
    negative = letters[0] == _MINUS
    points = point.sum(axis=0)
    plain = (
        (digit.sum(axis=0) + points + negative == sizes)
        & (points <= 1)
        & digit[np.maximum(sizes - 1, 0), np.arange(len(texts))]
    )
    whole = np.zeros(len(texts), dtype=np.int64)
    for place in range(width):
        whole = np.where(digit[place], 10 * whole + letters[place] - _ZERO, whole)
    decimals = np.where(points > 0, sizes - 1 - np.argmax(point, axis=0), 0)
    at = np.flatnonzero(plain)
    return at, np.where(negative, -whole, whole)[at], decimals[at]


def _interval(
    digits: NDArray[np.int64], decimals: NDArray[np.int64], rounding: str
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """``reading.rounding_interval``, in tenths of the last printed place."""
    tenths = 10 * digits
    near = tenths - 5, tenths + 5
    cut = np.where(digits <= 0, tenths - 10, tenths), np.where(digits >= 0, tenths + 10, tenths)
    low, high = {
        "nearest": near,
        "truncated": cut,
        "either": (np.minimum(near[0], cut[0]), np.maximum(near[1], cut[1])),
    }[rounding]
    place = _POWERS[decimals + 1]
    return np.nextafter(low / place, -np.inf), np.nextafter(high / place, np.inf)
