"""Several coders' sheets one below the other, so that what is compared is read, matched and converted together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from extractor.table import Cells, FloatArray, Numbers, ObjectArray, Place, ReportedTable, Variable

PARTS = tuple(field.name for field in fields(Numbers) if field.name != "place")
_BLANK: dict[str, tuple[object, type]] = {
    "value": (np.nan, np.float64),
    "low": (np.nan, np.float64),
    "high": (np.nan, np.float64),
    "unit": (np.nan, np.float64),
    "decimals": (-1, np.int64),
    "given": (False, np.bool_),
    "comparator": ("", object),
    "understood": ("", object),
    "problem": ("", object),
}
_OF_NO_SHEET = Place("", "")
_SEPARATOR = "\x1f"


@dataclass(frozen=True, slots=True)
class Stack:
    """All rows of all sheets.

    tables : the sheets, one for each coder.
    table : their rows in order of the coders; ``analysis`` labels carry the coder's number, so that rows of two
        coders never form one model.
    coder : whose row it is, shape (rows,). starts : where each coder's rows begin, shape (coders,).
    model : rows of one coder, study and analysis share a number; others have one of their own. Shape (rows,).
    """

    tables: tuple[ReportedTable, ...]
    table: ReportedTable
    coder: NDArray[np.intp]
    starts: NDArray[np.intp]
    model: NDArray[np.intp]

    def word(self, name: str) -> ObjectArray:
        """A column of coded words as the coders wrote it; all blank where no sheet has it."""
        return np.concatenate([table.fact(name) for table in self.tables])

    def place(self, variable: Variable, coder: int) -> Place | None:
        """Where a number stands in a coder's sheet; None where it has no such column."""
        numbers = self.tables[coder].numbers.get(variable)
        return None if numbers is None else numbers.place


def stack(tables: Sequence[ReportedTable]) -> Stack:
    """Put sheets one below the other."""
    rows = [table.rows for table in tables]
    coder = np.repeat(np.arange(len(tables)), rows)
    variables = dict.fromkeys(v for table in tables for v in table.numbers)
    names = dict.fromkeys(name for table in tables for name in table.facts)
    facts = {name: np.concatenate([table.fact(name) for table in tables]) for name in names}
    analysis = np.concatenate([table.fact("analysis") for table in tables]).astype(str)
    study = np.concatenate([table.fact("study") for table in tables]).astype(str)
    named = np.char.add(np.char.add(coder.astype(str), _SEPARATOR), analysis).astype(object)
    facts["analysis"] = np.where(analysis == "", "", named)
    own = np.char.add("row ", np.arange(len(coder)).astype(str)).astype(object)
    labels = np.where(analysis == "", own, named + _SEPARATOR + study.astype(object))
    table = replace(
        tables[0],
        row_numbers=np.arange(len(coder), dtype=np.int64),
        numbers={v: _joined(v, tables) for v in variables},
        facts=facts,
        carried={},
        cells={
            f"{c}{_SEPARATOR}{label}": cells for c, t in enumerate(tables) for label, cells in t.cells.items()
        },
    )
    starts = np.concatenate([[0], np.cumsum(rows)[:-1]]).astype(np.intp)
    return Stack(tuple(tables), table, coder, starts, pd.factorize(labels)[0].astype(np.intp))


def _joined(variable: Variable, tables: Sequence[ReportedTable]) -> Numbers:
    columns = [table.numbers.get(variable) for table in tables]
    parts = {
        name: np.concatenate(
            [
                np.full(table.rows, _BLANK[name][0], dtype=_BLANK[name][1])
                if column is None
                else getattr(column, name)
                for table, column in zip(tables, columns, strict=True)
            ]
        )
        for name in PARTS
    }
    return Numbers(**parts, place=_OF_NO_SHEET)


@dataclass(frozen=True, slots=True)
class Swap:
    """One cell of one row that is to say what the same cell of another row says.

    row, source : rows of the stack. variable : the number, or the name of the coded word.
    throughout : the cell stands in a sheet that all rows of the model share, so all of them change.
    """

    row: int
    source: int
    variable: Variable | str
    throughout: bool = False


def swapped(given: Stack, swaps: Sequence[Swap]) -> tuple[ReportedTable, NDArray[np.intp], NDArray[np.intp]]:
    """The stack followed by one variant per swap: the row with its whole model, and the one cell changed.

    Returns
    -------
    The table; for each of its rows beyond the stack the row of the stack it is a copy of; and the number of its swap.
    """
    members, which = _models(given, swaps)
    rows = len(given.coder)
    index = np.concatenate([np.arange(rows), members])
    table = given.table
    numbers = {
        v: Numbers(**{name: getattr(n, name)[index] for name in PARTS}, place=n.place)
        for v, n in table.numbers.items()
    }
    facts = {name: words[index] for name, words in table.facts.items()}
    facts["analysis"][rows:] = _labels(table.fact("analysis")[members], which)
    target = np.array([swap.row for swap in swaps], dtype=np.intp)[which]
    throughout = np.array([swap.throughout for swap in swaps], dtype=bool)[which]
    changed = (members == target) | throughout
    source = np.array([swap.source for swap in swaps], dtype=np.intp)[which]
    codes, kinds = pd.factorize(pd.Series([swap.variable for swap in swaps], dtype=object))
    for code, variable in enumerate(kinds):
        at = np.flatnonzero(changed & (codes[which] == code))
        if isinstance(variable, str):
            words = facts.setdefault(variable, np.full(len(index), "", dtype=object))
            words[rows + at] = words[source[at]]
        else:
            for name in PARTS:
                array = getattr(numbers[variable], name)
                array[rows + at] = array[source[at]]
    batch = replace(
        table,
        row_numbers=np.arange(len(index), dtype=np.int64),
        numbers=numbers,
        facts=facts,
        carried={},
        cells={**table.cells, **_patched(given, swaps)},
    )
    return batch, members, which


def _models(given: Stack, swaps: Sequence[Swap]) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """The rows of every swap's model, one after the other, and the number of the swap."""
    order = np.argsort(given.model, kind="stable")
    sizes = np.bincount(given.model)
    starts = np.concatenate([[0], np.cumsum(sizes)])[:-1]
    models = given.model[[swap.row for swap in swaps]] if swaps else np.zeros(0, dtype=np.intp)
    size = sizes[models]
    which = np.repeat(np.arange(len(swaps)), size)
    within = np.arange(len(which)) - np.repeat(np.cumsum(size) - size, size)
    return order[np.repeat(starts[models], size) + within], which


def _labels(analysis: ObjectArray, which: NDArray[np.intp]) -> ObjectArray:
    tail = np.char.add(_SEPARATOR, which.astype(str)).astype(object)
    return np.where(analysis == "", "", analysis + tail)


def _patched(given: Stack, swaps: Sequence[Swap]) -> dict[str, Cells]:
    """The cells of each variant's model, changed where the swap concerns one of them.

    Cells that lost a number are left out, as the reader leaves out incomplete ones.
    """
    found: dict[str, Cells] = {}
    analysis = given.table.fact("analysis")
    for number, swap in enumerate(swaps):
        cells = given.table.cells.get(str(analysis[swap.row]))
        changed = None if cells is None else _with_cell(cells, given, swap)
        if changed is not None:
            found[f"{analysis[swap.row]}{_SEPARATOR}{number}"] = changed
    return found


def _with_cell(cells: Cells, given: Stack, swap: Swap) -> Cells | None:
    if isinstance(swap.variable, str) or not swap.throughout:
        return cells
    name, group = swap.variable
    if group is None or group > len(cells.n) or name not in ("n", "mean", "sd"):
        return cells
    numbers, at = given.table.numbers[swap.variable], group - 1
    value, low, high = (float(end[swap.source]) for end in (numbers.value, numbers.low, numbers.high))
    if not np.isfinite([value, low, high]).all():
        return None
    if name == "n":
        return replace(cells, n=_put(cells.n, at, value))
    old = cells.mean if name == "mean" else cells.sd
    new = (_put(old[0], at, value), _put(old[1], at, low), _put(old[2], at, high))
    return replace(cells, mean=new) if name == "mean" else replace(cells, sd=new)


def _put(values: FloatArray, at: int, value: float) -> FloatArray:
    changed = values.copy()
    changed[at] = value
    return changed
