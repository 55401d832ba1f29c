"""The reported table: what the reader hands to everything after it. Columnar; no statistics, no files."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    import pandas as pd

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]
ObjectArray = NDArray[np.object_]

Variable = tuple[str, int | None]
"""A quantity of a row: its name, and the group it belongs to (counted from 1) or None for a scalar."""


@dataclass(frozen=True, slots=True)
class Place:
    """Where a variable stands in the sheet: the coder's own heading and the column's letter."""

    heading: str
    column: str

    def at(self, row: int) -> str:
        """The heading with its address, such as ``F [H12]``; rows are the spreadsheet's own numbers."""
        return f"{self.before_row()}{row}]"

    def before_row(self) -> str:
        """The address as far as the row number."""
        return f"{self.heading} [{self.column}" if self.column else f"{self.heading} [row "


@dataclass(slots=True)
class Numbers:
    """One column of printed numbers. All arrays have shape (rows,).

    value : the printed number; NaN where blank, refused, or only a bound.
    low, high : closed interval of numbers that print so; NaN where blank or refused.
    unit : one unit in the last printed place; 0 for exact counts; NaN where blank.
    decimals : printed decimals; -1 where unknown.
    given : a number or a bound was read.
    comparator : "=", "<", ">" or "" (blank).
    understood : how the cell was read, where that was not plain; "" otherwise.
    problem : why the cell was refused; "" otherwise.
    """

    value: FloatArray
    low: FloatArray
    high: FloatArray
    unit: FloatArray
    decimals: NDArray[np.int64]
    given: BoolArray
    comparator: ObjectArray
    understood: ObjectArray
    problem: ObjectArray
    place: Place


@dataclass(frozen=True, slots=True)
class Assumption:
    """A value nobody reported, with its range and who supplied it."""

    value: float
    by: str
    low: float = float("nan")
    high: float = float("nan")


@dataclass(frozen=True, slots=True)
class Cells:
    """The cells of one factorial model, from the sheet ``groups``; arrays of shape (cells,).

    levels : the level of each cell by factor, factor names in lower case. rows : row numbers of that sheet.
    """

    n: FloatArray
    mean: tuple[FloatArray, FloatArray, FloatArray]
    sd: tuple[FloatArray, FloatArray, FloatArray]
    levels: Mapping[str, list[str]]
    rows: NDArray[np.int64]


@dataclass(slots=True)
class ReportedTable:
    """A coded sheet, read. ``row_numbers`` are the spreadsheet's own.

    numbers : printed numbers by variable.
    facts : coded words by name (see ``quantities.FACTS``), each an object array of str, "" where blank.
    carried : the columns nobody knows, carried through to the effect table as they stood, by heading.
    assumptions : values supplied by the codebook.
    cells : cells of factorial models, by the label of the analysis.
    notes : what was noticed on reading, for the user.
    settings : the codebook's values and the reader's remarks
        (``problems``, ``conflicts``, ``understood``: lists of (row number, cells with addresses, message)).
    """

    source: str
    sheet: str
    row_numbers: NDArray[np.int64]
    numbers: dict[Variable, Numbers]
    facts: dict[str, ObjectArray]
    carried: Mapping[str, ObjectArray] = field(default_factory=dict)
    rounding: str = "nearest"
    cells: Mapping[str, Cells] = field(default_factory=dict)
    assumptions: Mapping[str, Assumption] = field(default_factory=dict)
    rename: Mapping[str, str] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)
    settings: Mapping[str, Any] = field(default_factory=dict)

    @property
    def rows(self) -> int:
        """Number of data rows."""
        return len(self.row_numbers)

    @property
    def extras(self) -> pd.DataFrame:
        """The carried columns as a frame."""
        import pandas as pd

        return pd.DataFrame(dict(self.carried), index=pd.RangeIndex(self.rows), dtype=object)

    def fact(self, name: str) -> ObjectArray:
        """A column of words; all blank where the sheet has no such column."""
        found = self.facts.get(name)
        return found if found is not None else np.full(self.rows, "", dtype=object)

    def where(self, variable: Variable, position: int) -> str:
        """A variable's cell with its address, by position of the row."""
        numbers = self.numbers.get(variable)
        if numbers is None:
            return ""
        row = int(self.row_numbers[position])
        from_text = self.settings.get("from_reported", {}).get(variable)
        place = self.settings.get("reported_place")
        if from_text is not None and place is not None and from_text[position]:
            return f"{variable[0]} in {place.at(row)}"
        return numbers.place.at(row)

    def wheres(self, variable: Variable, positions: NDArray[np.intp]) -> ObjectArray:
        """A variable's cells with their addresses, by positions of rows; a number found in text names itself."""
        numbers = self.numbers.get(variable)
        if numbers is None:
            return np.full(len(positions), "", dtype=object)
        rows = self.row_numbers[positions].astype(str).astype(object)
        cells = numbers.place.before_row() + rows + "]"
        from_text = self.settings.get("from_reported", {}).get(variable)
        place = self.settings.get("reported_place")
        if from_text is None or place is None:
            return np.asarray(cells, dtype=object)
        in_text = f"{variable[0]} in {place.before_row()}" + rows + "]"
        return np.where(from_text[positions], in_text, cells)
