"""Columns of cells and columns of numbers: reading each distinct cell once, spreading it over the rows."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from extractor.distinct import distinct
from extractor.printed.plain import PlainNumbers
from extractor.printed.reading import BLANK, Reading
from extractor.source.coded import Coded, Column
from extractor.table import Numbers, ObjectArray, Place

_ARRAYS = ("value", "low", "high", "unit", "decimals", "given", "comparator", "understood", "problem")
_WORDS = ("understood", "problem")
_TEXTS = frozenset({str, type(None)})

Codes = NDArray[np.int64] | NDArray[np.int32]
Mask = NDArray[np.bool_]


def factorized(
    column: Column, formats: ObjectArray | None = None
) -> tuple[list[object], list[str | None], Codes]:
    """Distinct cells, their number formats and, for each row, which one it is: shape (rows,).

    Cells are told apart by type as well, since 1, 1.0 and True are equal but not alike.
    """
    if isinstance(column, Coded):
        return [*column.cells], [None] * len(column.cells), column.codes
    listed = column.tolist()
    if formats is None and set(map(type, listed)) <= _TEXTS:
        texts, codes = distinct(listed)
        return texts, [None] * len(texts), codes
    seen: dict[object, int] = {}
    cells: list[object] = []
    shown: list[str | None] = []
    codes = np.empty(len(column), dtype=np.int64)
    for row, raw in enumerate(listed):
        code = formats[row] if formats is not None else None
        key = raw if type(raw) is str else (type(raw), repr(raw), code)
        at = seen.setdefault(key, len(cells))
        if at == len(cells):
            cells.append(raw)
            shown.append(code)
        codes[row] = at
    return cells, shown, codes


def numbers_from(readings: Sequence[Reading], codes: Codes, place: Place) -> Numbers:
    """A column of numbers from its distinct readings; ``codes`` (rows,) says which reading each row has."""
    return _on_rows(_listed(readings, place), codes)


def numbers_with_plain(
    plain: PlainNumbers, others: Mapping[int, Reading], cells: int, codes: Codes, place: Place
) -> Numbers:
    """A column of numbers from so many distinct cells: plain ones, and the others by their position."""
    which = np.zeros(cells, dtype=np.int64)
    which[list(others)] = np.arange(1, len(others) + 1)
    read = _listed([BLANK, *others.values()], place)
    listed = Numbers(**{name: getattr(read, name)[which] for name in _ARRAYS}, place=place)
    listed.given[plain.at], listed.comparator[plain.at] = True, "="
    for name in ("value", "low", "high", "unit", "decimals"):
        getattr(listed, name)[plain.at] = getattr(plain, name)
    return _on_rows(listed, codes)


def _listed(readings: Sequence[Reading], place: Place) -> Numbers:
    """One row for each reading."""

    def floats(values: Iterable[float]) -> NDArray[np.float64]:
        return np.fromiter(values, dtype=np.float64, count=len(readings))

    def objects(values: Iterable[str]) -> ObjectArray:
        return np.fromiter(values, dtype=object, count=len(readings))

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


def _on_rows(listed: Numbers, codes: Codes) -> Numbers:
    """What was worked out for distinct cells, on every row."""
    at = codes.astype(np.intp)
    spread: dict[str, Any] = {name: getattr(listed, name) for name in _ARRAYS}
    for name, array in spread.items():
        wordless = name in _WORDS and not any(array.tolist())
        spread[name] = _no_words(len(at)) if wordless else array.take(at)
    return Numbers(**spread, place=listed.place)


@lru_cache(maxsize=1)
def _no_words(rows: int) -> ObjectArray:
    """What most columns say of their cells: nothing. They share it; ``take_rows`` replaces it."""
    words = np.full(rows, "", dtype=object)
    words.flags.writeable = False
    return words


def filled(numbers: Numbers) -> Mask:
    """Rows whose cell holds anything, understood or not: shape (rows,)."""
    return numbers.given | np.asarray(numbers.problem != "", dtype=np.bool_)


def take_rows(numbers: Numbers, other: Numbers, rows: Mask) -> None:
    """Put some rows of another column into this one."""
    for name in _ARRAYS:
        if not getattr(numbers, name).flags.writeable:
            setattr(numbers, name, getattr(numbers, name).copy())
        getattr(numbers, name)[rows] = getattr(other, name)[rows]


def printed(numbers: Numbers, row: int) -> str:
    """What a cell says, for messages: ``4.31`` or ``< 0.05``."""
    if numbers.comparator[row] == "=":
        return f"{numbers.value[row]:.12g}"
    bound = numbers.high[row] if numbers.comparator[row] == "<" else numbers.low[row]
    return f"{numbers.comparator[row]} {bound:.12g}"
