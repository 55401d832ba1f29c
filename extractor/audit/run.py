"""The audit: every check over every row, its findings, and what could not be checked."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from extractor.audit.constraints import constraints_of
from extractor.audit.contradictions import checks_of, contradictions
from extractor.audit.granular import unreachable
from extractor.audit.homogeneity import unequal_variances
from extractor.audit.models import shares_of_the_total, sums_of_squares_types, two_error_terms
from extractor.audit.plausibility import implausible, outlying
from extractor.audit.support import unsupported
from extractor.evidence import Evidence
from extractor.findings import Finding, Severity, frame
from extractor.overlap.double_counting import double_counted
from extractor.routes.conversion import Conversion

if TYPE_CHECKING:
    import pandas as pd

Check = Callable[[Evidence], Iterator[Finding]]
CHECKS: tuple[Check, ...] = (
    unsupported,
    unreachable,
    unequal_variances,
    sums_of_squares_types,
    shares_of_the_total,
    two_error_terms,
)
COMPARISONS: tuple[Callable[[Evidence, bool], Iterator[Finding]], ...] = (implausible, double_counted)
"""Checks that also look across the sheet, where all of it is there."""


@dataclass(frozen=True)
class Audit:
    """What an audit gives.

    findings : in sheet order. checks : how many printed quantities were compared with what others imply, over all
    rows. unchecked : row number and reason for each row in which nothing could be compared.
    """

    findings: list[Finding]
    checks: int
    unchecked: list[tuple[int, str]]
    rows: int

    @property
    def frame(self) -> pd.DataFrame:
        """The findings as a table."""
        return frame(self.findings)

    def worst(self) -> Severity | None:
        """The strongest severity found, None where nothing was."""
        return max((f.severity for f in self.findings), default=None)


def audit_evidence(
    evidence: Evidence,
    conversion: Conversion | None,
    review: Callable[[list[Finding]], list[Finding]] | None = None,
    *,
    across: bool = True,
) -> Audit:
    """Run every check; where a conversion is given, its effect table gets a summary of each row's findings.

    ``review`` puts the coder's decisions on the findings. ``across`` tells whether rows of different studies are
    compared with each other; where the rows are only a part of a sheet they are not.
    """
    table = evidence.table
    findings: list[Finding] = []
    for check in CHECKS:
        findings.extend(check(evidence))
    for comparison in COMPARISONS:
        findings.extend(comparison(evidence, across))
    if conversion is not None and across:
        findings.extend(outlying(evidence, conversion.columns))
    counts = np.zeros(table.rows, dtype=int)
    constraints = [constraints_of(block, table) for block in evidence.blocks]
    for block, own in zip(evidence.blocks, constraints, strict=True):
        counts[block.positions] = checks_of(own)
    # limits of a quantity can contradict it where nothing implies its value
    findings.extend(contradictions(evidence, constraints))
    why = np.where(evidence.blocked != "", evidence.blocked, "no printed number is implied by others")
    unchecked = [(int(table.row_numbers[i]), str(why[i])) for i in np.flatnonzero(counts == 0)]
    if review is not None:
        findings = review(findings)
    findings.sort(key=lambda f: (f.row, -f.severity, f.rule, f.cells))
    found = Audit(findings, int(counts.sum()), unchecked, table.rows)
    if conversion is not None:
        _summarise(conversion, findings)
    return found


def _summarise(conversion: Conversion, findings: list[Finding]) -> None:
    said: dict[int, dict[str, None]] = {}
    for finding in findings:
        said.setdefault(finding.row, {})[f"{finding.severity.word}: {finding.rule}"] = None
    rows = conversion.evidence.table.row_numbers
    words = np.full(len(rows), "", dtype=object)
    words[np.searchsorted(rows, list(said))] = list(map("; ".join, said.values()))
    conversion.note_findings(words)
