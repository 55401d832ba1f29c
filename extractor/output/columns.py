"""What each column of the written tables holds, as fields of a Table Schema."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from pandas.api.extensions import ExtensionArray

from extractor.catalogue.relation import Grade
from extractor.findings import Severity
from extractor.quantities import METRICS

Values = NDArray[Any] | ExtensionArray
Table = pd.DataFrame | Mapping[str, Values]
"""Columns of one length by name; in order, an effect table's need no frame to be written."""


@dataclass(frozen=True, slots=True)
class Column:
    """One column: its type in the words of Table Schema, its meaning, and what its values keep to."""

    kind: str
    meaning: str
    constraints: dict[str, object] = field(default_factory=dict)


def _words(meaning: str, *allowed: str) -> Column:
    return Column("string", meaning, {"enum": list(allowed)} if allowed else {})


EFFECTS: dict[str, Column] = {
    "row": Column(
        "integer",
        "row of the sheet, as the spreadsheet numbers it",
        {"required": True, "unique": True, "minimum": 1},
    ),
    "study": _words("label of the study"),
    "outcome": _words("label of the outcome"),
    "effect": _words("label of the effect"),
    "metric": _words("what the estimate is an estimate in", *METRICS),
    "estimate": Column("number", "the effect; blank where none or only a bound could be had"),
    "variance": Column("number", "sampling variance of the estimate", {"minimum": 0}),
    "standard_error": Column("number", "square root of the variance", {"minimum": 0}),
    "ci_low": Column("number", "lower confidence limit; the level stands in the settings of this package"),
    "ci_high": Column("number", "upper confidence limit"),
    "n_total": Column("integer", "participants analysed, all groups together", {"minimum": 2}),
    "grade": _words("what the route loses at worst", *(grade.word for grade in Grade)),
    "route": _words("reported quantities the estimate starts from"),
    "assumptions": _words("what the route takes for granted and who supplied it, and how the row was read"),
    "standardizer": _words("standard deviation by which a mean difference was divided"),
    "estimate_low": Column("number", "smallest estimate that the rounding of the printed numbers allows"),
    "estimate_high": Column("number", "largest estimate that the rounding of the printed numbers allows"),
    "variance_method": _words("how the variance was computed"),
    "status": _words("what became of the row", "converted", "bounded", "blocked"),
    "reason": _words("why the row is not converted, or what its estimate lacks"),
    "findings": _words("severities and rules of the findings about the row"),
}

FINDINGS: dict[str, Column] = {
    "row": Column(
        "integer", "row of the sheet, as the spreadsheet numbers it", {"required": True, "minimum": 1}
    ),
    "study": _words("label of the study"),
    "severity": _words("strength of the finding, never a verdict", *(s.word for s in reversed(Severity))),
    "rule": _words("check that raised the finding"),
    "cells": _words("headings with addresses, the most suspect first"),
    "printed": _words("what the most suspect cell says"),
    "expected_low": Column("number", "smallest value the other printed numbers allow; blank where unknown"),
    "expected_high": Column("number", "largest value the other printed numbers allow; blank where unknown"),
    "slack": Column(
        "number",
        "units in the last place by which every printed value must be widened before they agree",
        {"minimum": 0},
    ),
    "message": _words("the finding in one sentence"),
    "explanation": _words(
        "slips that would make the numbers agree, those least likely to fit by chance first"
    ),
}

COVARIANCES: dict[str, Column] = {
    "row": Column("integer", "row of the sheet", {"required": True, "minimum": 1}),
    "other_row": Column("integer", "a later row of the same study", {"required": True, "minimum": 1}),
    "covariance": Column("number", "covariance of the two estimates; blank where it cannot be computed"),
    "why": _words("what the rows share, or why the covariance cannot be computed"),
}

_LABELS = {name: EFFECTS[name] for name in ("study", "outcome", "effect", "metric")}
_MOVED = {
    "assumption": _words("what is taken for granted"),
    "by": _words("who supplied it"),
    "value": Column("number", "value in use; blank where the assumption is no number"),
    "range_low": Column("number", "smallest value tried; blank where no range is declared"),
    "range_high": Column("number", "largest value tried"),
}
SENSITIVITY: dict[str, Column] = {
    "row": COVARIANCES["row"],
    **_LABELS,
    **_MOVED,
    "estimate": Column("number", "the effect with the value in use"),
    "estimate_low": Column("number", "smallest effect over the range"),
    "estimate_high": Column("number", "largest effect over the range"),
    "variance": Column("number", "sampling variance with the value in use", {"minimum": 0}),
    "variance_low": Column("number", "smallest variance over the range", {"minimum": 0}),
    "variance_high": Column("number", "largest variance over the range", {"minimum": 0}),
    "swing": Column("number", "largest effect less smallest", {"minimum": 0}),
    "swing_in_se": Column("number", "the same in standard errors", {"minimum": 0}),
}
ASSUMPTIONS: dict[str, Column] = {
    **_MOVED,
    "rows": Column("integer", "effects that rest on the assumption", {"minimum": 0}),
    "median_swing": Column("number", "median of their swings", {"minimum": 0}),
    "largest_swing": Column("number", "largest of them", {"minimum": 0}),
    "largest_in_se": Column("number", "the same in standard errors", {"minimum": 0}),
    "largest_row": Column("integer", "row of the sheet that moves most", {"minimum": 1}),
}
ROUTES: dict[str, Column] = {
    "row": COVARIANCES["row"],
    **_LABELS,
    "routes": Column("integer", "comparable admissible routes", {"minimum": 0}),
    "estimate": Column("number", "the effect along the chosen route"),
    "lowest": Column("number", "smallest effect along any of them"),
    "highest": Column("number", "largest effect along any of them"),
    "spread": Column("number", "largest less smallest", {"minimum": 0}),
    "spread_in_se": Column("number", "the same in standard errors", {"minimum": 0}),
    "beyond_rounding": Column("boolean", "whether rounding fails to explain that routes differ"),
    "lowest_route": _words("route of the smallest effect"),
    "highest_route": _words("route of the largest effect"),
}


def is_text(column: Values | pd.Series) -> bool:
    """Whether a column holds words."""
    return bool(pd.api.types.is_object_dtype(column) or pd.api.types.is_string_dtype(column))


def texts(column: Values | pd.Series) -> list[str]:
    """A column's words; "" where blank."""
    listed: list[str] = column.tolist()
    if set(map(type, listed)) <= {str}:
        return listed
    blank = pd.isna(column).tolist()
    return ["" if empty else str(value) for value, empty in zip(listed, blank, strict=True)]


def whole_counts(columns: Mapping[str, NDArray[Any]]) -> dict[str, Values]:
    """The effect table with columns of counts as integers, where every value is one; blanks stay blanks."""
    return {
        name: _whole(values)
        if name in EFFECTS and EFFECTS[name].kind == "integer" and values.dtype.kind == "f"
        else values
        for name, values in columns.items()
    }


def _whole(values: NDArray[np.float64]) -> Values:
    blank = np.isnan(values)
    counts = np.where(blank, 0, values)
    if (counts % 1 != 0).any():
        return values
    return pd.arrays.IntegerArray(counts.astype(np.int64), blank)


def fields(table: Table, known: Mapping[str, Column], headings: Mapping[str, str]) -> list[dict[str, object]]:
    """Table Schema fields of a table's columns, in order.

    Parameters
    ----------
    known : meaning by column; other columns came from the sheet.
    headings : heading as written, by column.
    """
    found: list[dict[str, object]] = []
    for name in map(str, table):
        column = known.get(name) or Column("string", "carried through from the sheet as it stood")
        kind = column.kind
        if kind == "integer" and not pd.api.types.is_integer_dtype(table[name]):
            kind = "number"
        described: dict[str, object] = {
            "name": headings[name],
            "type": kind,
            "description": column.meaning,
        }
        if column.constraints:
            described["constraints"] = column.constraints
        if name in known and headings[name] != name:
            described["extractor:column"] = name
        found.append(described)
    return found
