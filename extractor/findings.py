"""A finding: a question about printed numbers, as a row of a table."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from enum import IntEnum
from typing import TYPE_CHECKING

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


class Severity(IntEnum):
    """How strong a finding is; none of them is a verdict on anybody."""

    NOTE = 0
    DOUBTFUL = 1
    INCONSISTENT = 2
    IMPOSSIBLE = 3

    @property
    def word(self) -> str:
        """The severity as it is printed."""
        return self.name.lower()


@dataclass(frozen=True, slots=True)
class Finding:
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

    def record(self) -> dict[str, object]:
        """The finding as a row of ``findings.csv``."""
        return {
            "row": self.row,
            "study": self.study,
            "severity": self.severity.word,
            "rule": self.rule,
            "cells": "; ".join(self.cells),
            "printed": self.printed,
            "expected_low": self.expected_low,
            "expected_high": self.expected_high,
            "slack": self.slack,
            "message": self.message,
            "explanation": self.explanation,
        }


def frame(findings: Iterable[Finding]) -> pd.DataFrame:
    """Findings as a table in sheet order, the strongest of a row first."""
    import pandas as pd

    ordered = sorted(findings, key=lambda f: (f.row, -f.severity, f.rule, f.cells))
    return pd.DataFrame([f.record() for f in ordered], columns=COLUMNS)
