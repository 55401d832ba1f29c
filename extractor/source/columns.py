"""Columns of cells and columns of numbers: reading each distinct cell once, spreading it over the rows."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import NDArray

from extractor.distinct import distinct
from extractor.printed.reading import Reading
from extractor.source.grid import ObjectArray
from extractor.table import Numbers, Place

_TEXTS = frozenset({str, type(None)})

Codes = NDArray[np.int64]
Mask = NDArray[np.bool_]


def factorized(
    column: ObjectArray, formats: ObjectArray | None = None
) -> tuple[list[tuple[object, str | None]], Codes]:
    """Distinct (cell, number format) pairs and, for each row, which one it is: shape (rows,).

    Cells are told apart by type as well, since 1, 1.0 and True are equal but not alike.
    """
    listed = column.tolist()
    if formats is None and set(map(type, listed)) <= _TEXTS:
        texts, codes = distinct(listed)
        return [(text, None) for text in texts], codes
    seen: dict[object, int] = {}
    pairs: list[tuple[object, str | None]] = []
    codes = np.empty(len(column), dtype=np.int64)
    for row, raw in enumerate(listed):
        code = formats[row] if formats is not None else None
        key = raw if type(raw) is str else (type(raw), repr(raw), code)
        at = seen.setdefault(key, len(pairs))
        if at == len(pairs):
            pairs.append((raw, code))
        codes[row] = at
    return pairs, codes


def numbers_from(readings: Sequence[Reading], codes: Codes, place: Place) -> Numbers:
    """A column of numbers from its distinct readings; ``codes`` (rows,) says which reading each row has."""

    def floats(values: Iterable[float]) -> NDArray[np.float64]:
        return np.fromiter(values, dtype=np.float64, count=len(readings))[codes]

    def objects(values: Iterable[str]) -> ObjectArray:
        return np.fromiter(values, dtype=object, count=len(readings))[codes]

    return Numbers(
        value=floats(reading.value for reading in readings),
        low=floats(reading.low for reading in readings),
        high=floats(reading.high for reading in readings),
        unit=floats(reading.unit for reading in readings),
        decimals=floats(reading.decimals for reading in readings).astype(np.int64),
        given=floats(reading.given for reading in readings).astype(np.bool_),
        comparator=objects(reading.comparator for reading in readings),
        understood=objects(reading.understood for reading in readings),
        problem=objects(reading.problem for reading in readings),
        place=place,
    )


_ARRAYS = ("value", "low", "high", "unit", "decimals", "given", "comparator", "understood", "problem")


def filled(numbers: Numbers) -> Mask:
    """Rows whose cell holds anything, understood or not: shape (rows,)."""
    return numbers.given | np.asarray(numbers.problem != "", dtype=np.bool_)


def take_rows(numbers: Numbers, other: Numbers, rows: Mask) -> None:
    """Put some rows of another column into this one."""
    for name in _ARRAYS:
        getattr(numbers, name)[rows] = getattr(other, name)[rows]


def printed(numbers: Numbers, row: int) -> str:
    """What a cell says, for messages: ``4.31`` or ``< 0.05``."""
    if numbers.comparator[row] == "=":
        return f"{numbers.value[row]:.12g}"
    bound = numbers.high[row] if numbers.comparator[row] == "<" else numbers.low[row]
    return f"{numbers.comparator[row]} {bound:.12g}"
