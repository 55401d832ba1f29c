"""What every coder says of every variable, and how well they agree on it before anything is settled.

Numbers agree where their rounding intervals overlap, so 3.4 and 3.40 do and 3.4 and 3.5 do not. A blank is a
statement, too: it disagrees with a number or a word, and rows that all coders left blank are left out.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass, replace
from string import ascii_uppercase

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from extractor.coders.agreement import MISSING, Codes
from extractor.coders.matching import (
    ABSENT,
    KEYS,
    PLAIN,
    Matching,
    Printed,
    alike,
    compared,
    plain_label,
    printed,
)
from extractor.coders.stack import Stack
from extractor.groups_sheet import SHEET
from extractor.printed.reading import tidy
from extractor.printed.reported import read_number
from extractor.quantities import VOCABULARY, Quantity, group_heading
from extractor.table import BoolArray, ObjectArray, ReportedTable, Variable

NUMBER, WORDS, LABEL, EFFECT = "number", "words", "label", "effect"
_NOT_COMPARED = ("study", "quote", "coder", "reported")
_FREE_TEXT = 0.5
_FEW = 10
_ANY_NUMBER = Quantity("number", "number", "a number of the coders' own")


@dataclass(frozen=True, slots=True)
class Column:
    """What all coders say of one variable; arrays of shape (effects, coders).

    name : canonical heading, or the coders' own. kind : NUMBER, WORDS, or LABEL where rows were matched by it.
    variable : the number, or the name of the coded word; None for a column that the program does not know.
    numbers : the numbers, their kind ABSENT where a coder has no such row; None for words.
    codes : words as codes, MISSING where a coder has no such row; None for numbers.
    apart : whether a coder says something else than the first coder who has the row.
    """

    name: str
    kind: str
    variable: Variable | str | None
    numbers: Printed | None
    codes: Codes | None
    apart: BoolArray
    blank: BoolArray
    words: tuple[str, ...] = ()


def columns_of(
    given: Stack, matching: Matching, headed: Collection[str], tolerance: float
) -> tuple[list[Column], list[str]]:
    """All variables in the order of the vocabulary, labels and unknown columns last; and notes.

    Parameters
    ----------
    headed : coded words that have a column in at least one sheet; others were filled in from the codebook.
    """
    found: list[Column] = []
    order = {name: at for at, name in enumerate(VOCABULARY)}
    for variable in sorted(given.table.numbers, key=lambda v: (order[v[0]], v[1] or 0)):
        quantity, group = variable
        name = quantity if group is None else group_heading(quantity, group)
        found.append(_numbers(name, variable, printed(given, variable), matching.rows, tolerance))
    labels: list[Column] = []
    notes: list[str] = []
    for name in given.table.facts:
        if name in _NOT_COMPARED or name not in headed:
            continue
        words = compared(given.word(name), _PLAIN.get(name, _word))
        if name == "analysis":
            words, renamed = _one_name(words, given, matching)
            notes += renamed
        kind = LABEL if name in KEYS or name == "page" else WORDS
        (labels if kind == LABEL else found).append(_words(name, kind, name, words, matching.rows))
    extras, more = _extras(given, matching, tolerance)
    every = [*found, *extras, *labels]
    return [column for column in every if not column.blank.all()], [*notes, *more]


def _numbers(
    name: str, variable: Variable | None, stacked: Printed, rows: NDArray[np.intp], tolerance: float
) -> Column:
    said = stacked.at(np.maximum(rows, 0))
    said.kind[rows == ABSENT] = ABSENT
    here = np.arange(len(rows))[:, None], _first(rows)
    reference = Printed(said.kind[here], said.value[here], said.low[here], said.high[here])
    apart = (rows != ABSENT) & ~alike(said, reference, tolerance)
    return Column(name, NUMBER, variable, said, None, apart, said.kind <= 0)


def effect_column(metric: str, effects: pd.DataFrame, rows: NDArray[np.intp]) -> Column:
    """The effects of all coders as a variable: they agree where their rounding envelopes overlap."""
    value, low, high = (
        effects[name].to_numpy(dtype=float) for name in ("estimate", "estimate_low", "estimate_high")
    )
    ends = (np.where(np.isnan(end), value, end) for end in (low, high))
    column = _numbers(metric, None, Printed(np.isfinite(value).astype(np.int64), value, *ends), rows, 0.0)
    return replace(column, kind=EFFECT)


def _words(
    name: str, kind: str, variable: str | None, words: NDArray[np.str_], rows: NDArray[np.intp]
) -> Column:
    # codes in the order of the words, so that nothing depends on which sheet came first
    distinct, codes = np.unique(words, return_inverse=True)
    said = np.where(rows == ABSENT, MISSING, codes.ravel()[np.maximum(rows, 0)])
    blank = (said == MISSING) | (np.append(distinct == "", False)[said])
    apart = (said != MISSING) & (said != np.take_along_axis(said, _first(rows), axis=1))
    return Column(name, kind, variable, None, said, apart, blank, tuple(str(w) for w in distinct))


def _first(rows: NDArray[np.intp]) -> NDArray[np.intp]:
    """The first coder who has the row, shape (effects, 1)."""
    return np.asarray((rows != ABSENT).argmax(axis=1)[:, None])


def _word(text: str) -> str:
    return tidy(text).casefold()


def _listed(text: str) -> str:
    return ", ".join(sorted(plain_label(part) for part in tidy(text).split(",") if part.strip()))


def _page(text: str) -> str:
    return plain_label(text).removeprefix("pp").removeprefix("page").removeprefix("p")


def _sign(text: str) -> str:
    return "" if text == "+" else text


_PLAIN: dict[str, Callable[[str], str]] = {
    **PLAIN,
    "measured_factors": _listed,
    "page": _page,
    # a blank orientation is a plus
    "orientation": _sign,
}


def _one_name(
    words: NDArray[np.str_], given: Stack, matching: Matching
) -> tuple[NDArray[np.str_], list[str]]:
    """Labels of analyses under the first coder's names, where two coders group the same rows under two names."""
    study = compared(given.word("study"), plain_label)
    named = words.astype(object)
    notes = []
    rows = matching.rows
    for coder in range(1, rows.shape[1]):
        both = (rows[:, 0] != ABSENT) & (rows[:, coder] != ABSENT)
        pairs = pd.DataFrame({"study": study[rows[both, 0]], "one": words[rows[both, 0]]})
        pairs["other"] = words[rows[both, coder]]
        pairs = pairs[(pairs["one"] != "") & (pairs["other"] != "")].drop_duplicates()
        single = ~pairs.duplicated(["study", "one"], keep=False) & ~pairs.duplicated(
            ["study", "other"], keep=False
        )
        renamed = pairs[single & (pairs["one"] != pairs["other"])]
        if not len(renamed):
            continue
        names = dict(zip(zip(renamed["study"], renamed["other"], strict=True), renamed["one"], strict=True))
        mine = np.flatnonzero(given.coder == coder)
        named[mine] = [
            names.get((s, w), w) for s, w in zip(study[mine].tolist(), words[mine].tolist(), strict=True)
        ]
        many = (
            "1 analysis has another name"
            if len(renamed) == 1
            else f"{len(renamed)} analyses have other names"
        )
        notes.append(f"{many} with coder {ascii_uppercase[coder]} and the same rows: no dispute")
    return named.astype(np.str_), notes


def extra_headings(given: Stack) -> list[tuple[str, list[str | None]]]:
    """Columns that the program does not know: their name, and the heading each coder gave them, None without one."""
    spelled: dict[str, list[str | None]] = {}
    for coder, table in enumerate(given.tables):
        for heading in table.extras.columns:
            found = spelled.setdefault(plain_label(heading), [None] * len(given.tables))
            found[coder] = found[coder] or heading
    return [(next(h for h in headings if h is not None), headings) for headings in spelled.values()]


def _extras(given: Stack, matching: Matching, tolerance: float) -> tuple[list[Column], list[str]]:
    """Unknown columns that at least two coders have."""
    columns, notes = [], []
    for name, headings in extra_headings(given):
        having = [coder for coder, heading in enumerate(headings) if heading is not None]
        if len(having) < 2:
            continue
        texts = extra_texts(given, headings)
        if _is_free_text(texts[given.coder == having[0]]):
            notes.append(f"column '{name}' holds running text and is not compared")
            continue
        numbers = _as_numbers(texts, given.tables[0])
        if numbers is not None:
            columns.append(_numbers(name, None, numbers, matching.rows, tolerance))
        else:
            columns.append(_words(name, WORDS, None, compared(texts, _word), matching.rows))
    return columns, notes


def extra_texts(given: Stack, headings: Sequence[str | None]) -> ObjectArray:
    """An unknown column of all coders, who may spell its heading differently; blank where one has none."""
    return np.concatenate(
        [
            np.full(table.rows, "", dtype=object) if heading is None else table.extras[heading].to_numpy()
            for table, heading in zip(given.tables, headings, strict=True)
        ]
    )


def _is_free_text(texts: ObjectArray) -> bool:
    filled = texts[texts != ""]
    return len(filled) >= _FEW and len(set(filled)) > _FREE_TEXT * len(filled) and _as_numbers(filled) is None


def _as_numbers(texts: ObjectArray, table: ReportedTable | None = None) -> Printed | None:
    """The column as numbers, where every filled cell is one."""
    mark = "." if table is None else str(table.settings.get("decimal_mark", "."))
    codes, distinct = pd.factorize(texts)
    readings = [read_number(str(text), _ANY_NUMBER, decimal_mark=mark) for text in distinct]
    if any(reading.problem for reading in readings) or not any(reading.given for reading in readings):
        return None
    kinds = {"": 0, "=": 1, "<": 2, ">": 3}
    ends = (np.array([getattr(r, end) for r in readings])[codes] for end in ("value", "low", "high"))
    return Printed(np.array([kinds[r.comparator] for r in readings], dtype=np.int64)[codes], *ends)


def from_groups_sheet(given: Stack, variable: Variable) -> bool:
    """Whether a number stands in the sheet of groups with every coder who has it, once for a whole model."""
    places = [given.place(variable, coder) for coder in range(len(given.tables))]
    known = [place for place in places if place is not None]
    return bool(known) and all(not p.column and p.heading.endswith(f"sheet {SHEET}") for p in known)
