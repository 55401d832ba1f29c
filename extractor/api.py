"""The Python interface: ``extractor.convert`` and ``extractor.audit_sheet``, of the same shape as the commands."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, TypeAlias

from extractor.audit.run import Audit, audit_evidence
from extractor.codebook import Codebook, default_codebook, load_codebook
from extractor.decisions import Decision, apply_decisions, mark, read_decisions
from extractor.evidence import Evidence, gather
from extractor.findings import Finding
from extractor.groups_sheet import with_groups
from extractor.routes.conversion import (
    Conversion,
    check_method,
    check_metric,
    check_standardizer,
    convert_evidence,
)
from extractor.sheet import read_table
from extractor.source.grid import Grid
from extractor.table import ReportedTable

if TYPE_CHECKING:
    import pandas as pd

Source: TypeAlias = "str | Path | pd.DataFrame | Grid"


@dataclass(frozen=True)
class Result:
    """What a conversion gives.

    effects : one row per row of the sheet, in sheet order (see the README for the columns).
    findings : one row per finding. derivations : one row per step of each route. alternatives : every admissible
    route of every row.
    """

    conversion: Conversion
    audit: Audit

    @property
    def effects(self) -> pd.DataFrame:
        """The effect table."""
        return self.conversion.effects

    @property
    def findings(self) -> pd.DataFrame:
        """The findings of the audit."""
        return self.audit.frame

    @cached_property
    def derivations(self) -> pd.DataFrame:
        """How every effect came about, step by step."""
        from extractor.routes.derivations import steps_frame

        return steps_frame(self.conversion)

    @cached_property
    def alternatives(self) -> pd.DataFrame:
        """The routes that were admissible, chosen or not, and what each gives."""
        from extractor.routes.derivations import alternatives_frame

        return alternatives_frame(self.conversion)


@dataclass(frozen=True)
class Reading:
    """A sheet, read and ready for work.

    table : as coded. evidence : with the coder's corrections applied. notes : what the decisions changed.
    """

    table: ReportedTable
    evidence: Evidence
    decisions: list[Decision]
    codebook: Codebook
    notes: list[str]

    def review(self, findings: list[Finding]) -> list[Finding]:
        """Findings with the coder's decisions on them."""
        return mark(findings, self.decisions, self.table, self.codebook)

    def audit(self, conversion: Conversion | None = None, *, across: bool = True) -> Audit:
        """Every check over every row, the decisions honoured; ``across`` as in ``audit_evidence``."""
        return audit_evidence(self.evidence, conversion, self.review, across=across)


def convert(
    source: Source,
    to: str,
    codebook: str | Path | Codebook | None = None,
    *,
    variance: str | None = None,
    level: float = 0.95,
    standardizer: str = "",
    groups: Source | None = None,
    decisions: str | Path | None = None,
) -> Result:
    """Turn a coded sheet into effects of one metric.

    Parameters
    ----------
    source : a workbook, a csv or tsv file, "-" for csv on standard input, or a frame of cells.
    to : one of ``extractor.quantities.METRICS``.
    codebook : the name of a ready codebook, a TOML file, or nothing where headings are quantity names.
    variance : "exact" or "large-sample"; by default each metric's preferred one.
    level : confidence level of the limits, as a proportion.
    standardizer : for d and g, the only one to accept; by default each design's usual one.
    groups, decisions : where the sheets of those names stand in files of their own.

    Raises
    ------
    UsageError, UnreadableInput, InvalidCodebook
        each with one sentence naming what is wrong, where, and the remedy.
    """
    check_metric(to)
    check_method(to, variance)
    check_standardizer(standardizer)
    reading = read(source, codebook, groups=groups, decisions=decisions)
    conversion = convert_evidence(
        reading.evidence, to, method=variance, level=level, standardizer=standardizer
    )
    return Result(conversion, reading.audit(conversion))


def audit_sheet(
    source: Source,
    codebook: str | Path | Codebook | None = None,
    *,
    groups: Source | None = None,
    decisions: str | Path | None = None,
) -> Audit:
    """Ask of every row whether its printed numbers can all be true; parameters and errors as for ``convert``."""
    return read(source, codebook, groups=groups, decisions=decisions).audit()


def read(
    source: Source,
    codebook: str | Path | Codebook | None = None,
    *,
    groups: Source | None = None,
    decisions: str | Path | None = None,
) -> Reading:
    """Read a sheet with its groups and decisions and arrange it for computing; parameters as for ``convert``."""
    book = codebook_of(codebook)
    decided: list[Decision] = []
    if decisions is not None:
        decided = read_decisions(decisions)
    elif isinstance(source, (str, Path)) and str(source) != "-" and str(source).endswith((".xlsx", ".xlsm")):
        decided = read_decisions(source)
    return arranged(source, book, groups, decided)


def codebook_of(codebook: str | Path | Codebook | None) -> Codebook:
    """The codebook of a name or file; without one, headings are names."""
    if codebook is None:
        return default_codebook()
    return codebook if isinstance(codebook, Codebook) else load_codebook(codebook)


def arranged(source: Source, book: Codebook, groups: Source | None, decided: list[Decision]) -> Reading:
    """Cells as evidence, with their groups joined and the coder's corrections made."""
    table = with_groups(read_table(source, book), source, book, groups)
    corrected, notes = apply_decisions(table, decided, book)
    return Reading(table, gather(corrected), decided, book, notes)
