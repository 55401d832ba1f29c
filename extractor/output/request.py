"""What a run was asked for, and the effect table under the headings asked for."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import pandas as pd

from extractor.api import Result
from extractor.errors import UsageError
from extractor.output.columns import Values, whole_counts
from extractor.output.tables import neutralised
from extractor.printed.reading import quoted
from extractor.quantities import close_matches
from extractor.routes.conversion import Conversion
from extractor.table import Assumption


@dataclass(frozen=True, slots=True, kw_only=True)
class Request:
    """What was asked for; it is written beside the results.

    sheet, codebook : as named by the user. formats : further files of the effect table.
    rename : new heading by column of the effect table, over those of the codebook.
    raw : leave texts in csv files as they are. covariance : write the covariances of effects that share participants.
    sensitivity : write what effects become over the ranges of assumptions and along other routes.
    outcomes : correlation of two outcomes of the same participants, and who supplied it.
    """

    sheet: str
    codebook: str | None = None
    metric: str | None = None
    variance: str | None = None
    level: float = 0.95
    standardizer: str = ""
    formats: tuple[str, ...] = ()
    rename: Mapping[str, str] = field(default_factory=dict)
    raw: bool = False
    covariance: bool = False
    sensitivity: bool = False
    outcomes: Assumption | None = None


def headings(columns: list[str], rename: Mapping[str, str]) -> dict[str, str]:
    """The heading of each column of the effect table.

    Raises
    ------
    UsageError : a column to be renamed is not there, or two would have one heading.
    """
    for name in rename:
        if name not in columns:
            near = close_matches(name, columns)
            hint = f"did you mean {near[0]}? " if near else ""
            known = ", ".join(columns)
            raise UsageError(f"the effect table has no column {quoted(name)} to rename: {hint}it has {known}")
    found = {name: rename.get(name, name) for name in columns}
    for name, heading in found.items():
        other = next((n for n in found if found[n] == heading and n != name), None)
        if other is not None:
            raise UsageError(f"columns {name} and {other} would both be called {quoted(heading)}; rename one")
    return found


def headings_of(conversion: Conversion, rename: Mapping[str, str]) -> dict[str, str]:
    """The heading of each column, over those of the codebook; raises as ``headings`` does."""
    return headings(list(conversion.columns), {**conversion.evidence.table.rename, **rename})


def columns_as_written(conversion: Conversion, rename: Mapping[str, str]) -> dict[str, Values]:
    """The columns of the effect table under the headings asked for; raises as ``headings`` does."""
    named = headings_of(conversion, rename)
    return {named[name]: values for name, values in whole_counts(conversion.columns).items()}


def csv_headings(conversion: Conversion, request: Request) -> dict[str, str]:
    """The heading of each column of the effect table in csv files; raises as ``headings`` does."""
    named = headings_of(conversion, request.rename)
    return named if request.raw else {name: neutralised(heading) for name, heading in named.items()}


def effects_as_written(result: Result, rename: Mapping[str, str]) -> pd.DataFrame:
    """The same as a frame."""
    return pd.DataFrame(columns_as_written(result.conversion, rename))
