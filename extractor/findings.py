"""A finding: a question about printed numbers, as a row of a table."""

from __future__ import annotations

import math
from collections.abc import Iterable
from enum import IntEnum
from typing import TYPE_CHECKING, Any, NamedTuple

if TYPE_CHECKING:
    import pandas as pd

COLUMNS = [
    "row",
    "study",
    "severity",
    "rule",
    "cells",
    "printed",
    "expected_low",
    "expected_high",
    "slack",
    "message",
    "explanation",
]
_TYPES: dict[str, Any] = {"row": "int64", "expected_low": float, "expected_high": float, "slack": float}


class Severity(IntEnum):
    """How strong a finding is; none of them is a verdict on anybody."""

    NOTE = 0
    DOUBTFUL = 1
    INCONSISTENT = 2
    IMPOSSIBLE = 3

    @property
    def word(self) -> str:
        """The severity as it is printed."""
        return _WORDS[self]


_WORDS = {severity: severity.name.lower() for severity in Severity}


class Finding(NamedTuple):
    """One finding. ``cells`` are headings with addresses, the most suspect first."""

    row: int
    study: str
    severity: Severity
    rule: str
    cells: tuple[str, ...]
    printed: str
    message: str
    explanation: str = ""
    expected_low: float = math.nan
    expected_high: float = math.nan
    slack: float = math.nan


def frame(findings: Iterable[Finding]) -> pd.DataFrame:
    """Findings as a table in sheet order, the strongest of a row first."""
    import pandas as pd

    ordered = sorted(findings, key=lambda f: (f.row, -f.severity, f.rule, f.cells))
    columns: dict[str, list[Any]] = {name: [getattr(f, name) for f in ordered] for name in COLUMNS}
    columns["severity"] = [severity.word for severity in columns["severity"]]
    columns["cells"] = list(map("; ".join, columns["cells"]))
    return pd.DataFrame(
        {name: pd.Series(values, dtype=_TYPES.get(name, object)) for name, values in columns.items()}
    )
