"""What stood in the cells of a row when it was used, as text: enough to tell two runs apart."""

from __future__ import annotations

import json
from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from extractor.table import Numbers, ReportedTable, Variable
from extractor.words import printed_text

_LABELS = frozenset({"study", "outcome", "effect", "page", "quote", "coder"})
"""Words that no effect depends on."""
_MOST_DECIMALS = 12
"""With more, a number is recorded by its own digits."""


def recorded_cells(table: ReportedTable) -> list[dict[str, str]]:
    """For every row its cells that were understood, heading with address -> text; blanks are left out.

    Corrected cells hold their corrected number; the note of the decision says what was printed.
    """
    return [json.loads(f"{{{text}}}") for text in recorded_texts(table, np.arange(table.rows))]


def recorded_texts(table: ReportedTable, rows: NDArray[np.intp]) -> list[str]:
    """The members of ``recorded_cells`` as JSON, without braces, for some rows in ascending order."""
    numbers = [f"{number}]" for number in table.row_numbers[rows].tolist()]
    found: list[dict[str, str]] = [{} for _ in numbers]
    for before, cells in sorted(_columns(table, rows), key=lambda column: column[0]):
        key = _json(before)[:-1]
        for at, text in cells:
            found[at][f'{key}{numbers[at]}"'] = text
    return [", ".join(f"{key}: {text}" for key, text in cells.items()) for cells in found]


def _columns(table: ReportedTable, rows: NDArray[np.intp]) -> Iterator[tuple[str, Iterator[tuple[int, str]]]]:
    """What stands before the row number in each column's addresses, and its cells: place among the rows, text."""
    for variable, numbers in table.numbers.items():
        yield numbers.place.before_row(), _numbers(table, variable, numbers, rows)
    for name, words in table.facts.items():
        if name not in _LABELS:
            yield f"{name} [row ", _words(words[rows])


def _numbers(
    table: ReportedTable, variable: Variable, numbers: Numbers, rows: NDArray[np.intp]
) -> Iterator[tuple[int, str]]:
    at = np.flatnonzero(numbers.given[rows])
    here = rows[at]
    decimals, values = numbers.decimals[here], numbers.value[here]
    plain = (decimals >= 0) & (decimals <= _MOST_DECIMALS) & ~np.isnan(values)
    cells = zip(at.tolist(), here.tolist(), plain.tolist(), values.tolist(), decimals.tolist(), strict=True)
    for place, row, simple, value, places in cells:
        if simple:
            yield place, f'"{value:.{places}f}"'
        elif places > _MOST_DECIMALS:
            yield place, f'"{value!r}"'
        else:
            yield place, _json(printed_text(table, variable, row))


def _words(words: NDArray[np.object_]) -> Iterator[tuple[int, str]]:
    known: dict[str, str] = {}
    for at in np.flatnonzero(words != "").tolist():
        word = str(words[at])
        if word not in known:
            known[word] = _json(word)
        yield at, known[word]


def _json(text: str) -> str:
    return json.dumps(text, ensure_ascii=False)
