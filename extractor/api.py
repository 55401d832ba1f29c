"""The Python interface: ``extractor.convert`` and ``extractor.audit_sheet``, of the same shape as the commands."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from pathlib import Path

import pandas as pd

from extractor.audit.run import Audit, audit_evidence
from extractor.codebook import Codebook, default_codebook, load_codebook
from extractor.conversion import Conversion, check_method, check_metric, check_standardizer, convert_evidence
from extractor.derivations import alternatives_frame, steps_frame
from extractor.evidence import Evidence, gather
from extractor.groups_sheet import with_groups
from extractor.sheet import read_table


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
        return steps_frame(self.conversion)

    @cached_property
    def alternatives(self) -> pd.DataFrame:
        """The routes that were admissible, chosen or not, and what each gives."""
        return alternatives_frame(self.conversion)


def convert(
    source: str | Path | pd.DataFrame,
    to: str,
    codebook: str | Path | Codebook | None = None,
    *,
    variance: str | None = None,
    level: float = 0.95,
    standardizer: str = "",
    groups: str | Path | pd.DataFrame | None = None,
) -> Result:
    """Turn a coded sheet into effects of one metric.

    Parameters
    ----------
    source : a workbook, a csv or tsv file, "-" for csv on standard input, or a frame of cells.
    to : one of ``extractor.quantities.METRICS``.
    codebook : the name of a ready codebook, a TOML file, or nothing where headings are quantity names.
    variance : "exact" or "large-sample"; by default each metric's preferred one.
    level : confidence level of the limits, as a proportion.
    groups : the lines of the sheet ``groups``, where they stand in a file or frame of their own.
    standardizer : for d and g, the only one to accept; by default each design's usual one.

    Raises
    ------
    UsageError, UnreadableInput, InvalidCodebook
        each with one sentence naming what is wrong, where, and the remedy.
    """
    check_metric(to)
    check_method(to, variance)
    check_standardizer(standardizer)
    evidence = read_evidence(source, codebook, groups)
    conversion = convert_evidence(evidence, to, method=variance, level=level, standardizer=standardizer)
    return Result(conversion, audit_evidence(evidence, conversion))


def audit_sheet(
    source: str | Path | pd.DataFrame,
    codebook: str | Path | Codebook | None = None,
    *,
    groups: str | Path | pd.DataFrame | None = None,
) -> Audit:
    """Ask of every row whether its printed numbers can all be true; raises as ``convert`` does."""
    return audit_evidence(read_evidence(source, codebook, groups), None)


def read_evidence(
    source: str | Path | pd.DataFrame,
    codebook: str | Path | Codebook | None = None,
    groups: str | Path | pd.DataFrame | None = None,
) -> Evidence:
    """Read a sheet, with the lines of its groups sheet, and arrange it for computing."""
    if codebook is None:
        book = default_codebook()
    elif isinstance(codebook, Codebook):
        book = codebook
    else:
        book = load_codebook(codebook)
    return gather(with_groups(read_table(source, book), source, book, groups))
