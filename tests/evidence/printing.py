"""Numbers as an honest paper prints them, as a reported table; for simulations only."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from extractor.quantities import VOCABULARY
from extractor.table import FloatArray, Numbers, Place, ReportedTable, Variable


@dataclass
class Printed:
    """One column of printed numbers: the values after rounding, and how many decimals were printed.

    ``below`` marks values printed as an upper bound (p < .05), ``above`` as a lower bound.
    """

    value: FloatArray
    decimals: int
    below: FloatArray | None = None
    above: FloatArray | None = None
    given: FloatArray | None = None


@dataclass
class Sheet:
    """Printed columns by variable and coded words by name."""

    columns: dict[Variable, Printed]
    facts: dict[str, str]
    extra: dict[str, object] = field(default_factory=dict)

    @property
    def rows(self) -> int:
        return len(next(iter(self.columns.values())).value)


def rounded(values: FloatArray, decimals: int) -> Printed:
    """Round to nearest, as printed."""
    return Printed(np.round(values, decimals), decimals)


def numbers(variable: Variable, printed: Printed) -> Numbers:
    """The reader's view of a printed column."""
    quantity = VOCABULARY[variable[0]]
    rows = len(printed.value)
    value = printed.value.astype(float)
    if quantity.exact and np.all(np.asarray(printed.decimals) == 0):
        unit = np.zeros(rows)
        low = high = value
    else:
        unit = np.full(rows, 10.0**-printed.decimals)
        low = np.nextafter(value - unit / 2, -np.inf)
        high = np.nextafter(value + unit / 2, np.inf)
    point = value.copy()
    comparator = np.full(rows, "=", dtype=object)
    if printed.below is not None:
        low = np.where(printed.below, quantity.low, low)
        high = np.where(printed.below, value, high)
        point = np.where(printed.below, np.nan, point)
        comparator[printed.below] = "<"
    if printed.above is not None:
        low = np.where(printed.above, value, low)
        high = np.where(printed.above, quantity.high, high)
        point = np.where(printed.above, np.nan, point)
        comparator[printed.above] = ">"
    given = np.ones(rows, dtype=bool) if printed.given is None else printed.given
    blank = np.full(rows, "", dtype=object)
    name, group = variable
    heading = name if group is None else f"{name}_{group}"
    return Numbers(
        value=np.where(given, point, np.nan),
        low=np.where(given, low, np.nan),
        high=np.where(given, high, np.nan),
        unit=np.where(given, unit, np.nan),
        decimals=np.full(rows, printed.decimals),
        given=given,
        comparator=np.where(given, comparator, ""),
        understood=blank,
        problem=blank,
        place=Place(heading, ""),
    )


def table(sheet: Sheet) -> ReportedTable:
    """The sheet as the reader would hand it over."""
    rows = sheet.rows
    return ReportedTable(
        source="simulated",
        sheet="",
        row_numbers=np.arange(rows) + 2,
        numbers={variable: numbers(variable, p) for variable, p in sheet.columns.items()},
        facts={name: np.full(rows, word, dtype=object) for name, word in sheet.facts.items()},
    )
