"""What stood in the cells of a row when it was used, as text: enough to tell two runs apart."""

from __future__ import annotations

import json
from dataclasses import dataclass

import numpy as np

from extractor.distinct import distinct, spread
from extractor.table import BoolArray, Numbers, ObjectArray, ReportedTable, Variable
from extractor.words import printed_text

_LABELS = frozenset({"study", "outcome", "effect", "page", "quote", "coder"})
"""Words that no effect depends on."""
_MOST_DECIMALS = 12
"""With more, a number is recorded by its own digits."""


@dataclass(slots=True)
class Recorded:
    """One column for some rows.

    before : what stands before the row number in the addresses of its cells. given : the cell was understood.
    texts : what it said, as JSON; "" where there is nothing.
    """

    before: str
    given: BoolArray
    texts: ObjectArray


def recorded_columns(table: ReportedTable, rows: slice) -> list[Recorded]:
    """The columns of some rows in the order of their headings, without those that are blank in all of them."""
    columns = [
        Recorded(numbers.place.before_row(), given, _numbers(table, variable, numbers, rows, given))
        for variable, numbers in table.numbers.items()
        if (given := numbers.given[rows]).any()
    ]
    columns += [
        Recorded(f"{name} [row ", given, _words(words[rows]))
        for name, words in table.facts.items()
        if name not in _LABELS and (given := words[rows] != "").any()
    ]
    found: dict[str, Recorded] = {}
    for column in sorted(columns, key=lambda each: each.before):
        other = found.setdefault(column.before, column)
        if other is not column:
            other.texts = np.where(column.given, column.texts, other.texts)
            other.given = other.given | column.given
    return list(found.values())


def _numbers(
    table: ReportedTable, variable: Variable, numbers: Numbers, rows: slice, given: BoolArray
) -> ObjectArray:
    decimals, values = numbers.decimals[rows], numbers.value[rows]
    texts = np.full(len(given), "", dtype=object)
    plain = given & (decimals >= 0) & (decimals <= _MOST_DECIMALS) & ~np.isnan(values)
    for places in np.unique(decimals[plain]).tolist():
        those = np.flatnonzero(plain & (decimals == places))
        # by their bits: 0 and -0 are printed otherwise
        bits, codes = np.unique(values[those].view(np.int64), return_inverse=True)
        texts[those] = spread((f'"{value:.{places}f}"' for value in bits.view(np.float64).tolist()), codes)
    others = np.flatnonzero(given & ~plain)
    if len(others):
        said = [
            repr(value) if places > _MOST_DECIMALS else printed_text(table, variable, rows.start + at)
            for at, value, places in zip(
                others.tolist(), values[others].tolist(), decimals[others].tolist(), strict=True
            )
        ]
        texts[others] = _words(np.array(said, dtype=object))
    return texts


def _words(words: ObjectArray) -> ObjectArray:
    said, codes = distinct(words)
    return spread((_json(str(word)) if word else "" for word in said), codes)


def _json(text: str) -> str:
    return json.dumps(text, ensure_ascii=False)
