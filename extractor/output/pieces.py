"""Many texts of one shape put together at once: what they share stands once, what differs is a column of them."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from itertools import repeat

import numpy as np

from extractor.table import FloatArray

Piece = str | Sequence[str] | FloatArray
"""A part of every text: the same in all of them, or a text for each, or a number for each."""

NO_LIMIT = ("null", "null", "null")
"""What stands in JSON for a number that is missing or without a limit."""

_MOST_KEPT = 200_000
"""Texts remembered, so that memory stays bounded."""


def assembled(pieces: Iterable[Piece], count: int) -> list[str]:
    """So many texts, each made of its pieces in their order; numbers as JSON."""
    columns: list[Iterable[str]] = []
    constant: list[str] = []
    numbers: dict[bytes, FloatArray] = {}
    places: dict[int, bytes] = {}
    for piece in pieces:
        if isinstance(piece, str):
            constant.append(piece)
            continue
        columns.append(repeat("".join(constant), count))
        constant.clear()
        if isinstance(piece, np.ndarray):
            # columns with the same numbers are worked out once
            places[len(columns)] = key = piece.tobytes()
            numbers[key] = piece
            piece = ()
        columns.append(piece)
    columns.append(repeat("".join(constant), count))
    if numbers:
        texts = number_texts(np.concatenate(list(numbers.values())), NO_LIMIT)
        starts = {key: at * count for at, key in enumerate(numbers)}
        for place, key in places.items():
            columns[place] = texts[starts[key] : starts[key] + count]
    return list(map("".join, zip(*columns, strict=True)))


def number_texts(values: FloatArray, odd: tuple[str, str, str]) -> list[str]:
    """Shortest texts that read back exactly; ``odd`` stand for NaN, infinity and minus infinity."""
    finite = np.isfinite(values)
    if finite.all():
        return list(map(repr, values.tolist()))
    found = np.where(np.isnan(values), odd[0], np.where(values > 0, odd[1], odd[2])).astype(object)
    found[finite] = list(map(repr, values[finite].tolist()))
    return list(found.tolist())


class Recurring(dict[float, str]):
    """Texts of numbers of which many are alike, such as printed ones: each is worked out when it first comes."""

    def of(self, values: FloatArray) -> list[str]:
        """The numbers as JSON."""
        return list(map(self.__getitem__, values.tolist()))

    def __missing__(self, value: float) -> str:
        if not math.isfinite(value):
            return NO_LIMIT[0]
        text = repr(value)
        # as keys 0.0 and -0.0 are one, but they are written otherwise
        if value and len(self) < _MOST_KEPT:
            self[value] = text
        return text
