"""The output folder: tables, derivations, views for people, and the description of them all."""

from __future__ import annotations

from pathlib import Path

import pandas as pd

from extractor import cautions
from extractor.api import Result
from extractor.audit.run import Audit
from extractor.output.columns import (
    ASSUMPTIONS,
    COVARIANCES,
    EFFECTS,
    FINDINGS,
    ROUTES,
    SENSITIVITY,
    Column,
    whole_counts,
)
from extractor.output.description import Resource, csv_resource, describe, resource
from extractor.output.files import output_folder
from extractor.output.request import Request, columns_as_written, csv_headings
from extractor.output.tables import WRITERS, write_csv
from extractor.output.terminal import counted
from extractor.output.trail import Tick, write_derivations
from extractor.table import ReportedTable

AUDIT_FILES = ("findings.csv", "datapackage.json")
ANNOTATED, REPORT = "annotated.xlsx", "report.html"
COVARIANCE, MATRIX, PROVENANCE = "covariance.csv", "covariance-matrix.csv", "provenance.json"
_MOST_IN_MATRIX = 1000
"""Effects beyond which the matrix is left to whoever pools: the long table holds the same."""
CONVERT_FILES = (
    *AUDIT_FILES,
    "derivations.json",
    *(f"effects.{ending}" for ending in WRITERS),
    ANNOTATED,
    REPORT,
    COVARIANCE,
    MATRIX,
    PROVENANCE,
    "sensitivity.csv",
    "assumptions.csv",
    "routes.csv",
)


def write_conversion(folder: Path, result: Result, request: Request, *, force: bool, tick: Tick) -> list[str]:
    """Write effects, findings, derivations and their description into ``folder``.

    Parameters
    ----------
    tick : told of every row whose derivation was written.

    Returns
    -------
    What the formats asked for could not hold as it was, in words.

    Raises
    ------
    UsageError : the folder exists without ``force``, it cannot be written, or a renaming is impossible.
    """
    table = result.conversion.evidence.table
    conversion, findings = result.conversion, result.findings
    named = csv_headings(conversion, request)
    notes: list[str] = []
    with output_folder(folder, CONVERT_FILES, force=force) as made:
        effects = columns_as_written(conversion, request.rename)
        write_csv(effects, made / "effects.csv", raw=request.raw)
        write_csv(findings, made / "findings.csv", raw=request.raw)
        write_derivations(result, made / "derivations.json", tick)
        resources = [
            csv_resource(
                made / "effects.csv",
                "the effect table, one row per row of the sheet",
                whole_counts(conversion.columns),
                EFFECTS,
                raw=request.raw,
                key=["row"],
                headings=named,
            ),
            _findings_resource(made, findings, request, {"row": named["row"]}),
            resource(made / "derivations.json", "how every effect came about, with the routes not taken"),
        ]
        for ending in sorted(set(request.formats) & set(WRITERS) - {"csv"}):
            notes += WRITERS[ending](pd.DataFrame(effects), made / f"effects.{ending}")
            resources.append(resource(made / f"effects.{ending}", "the effect table again"))
        if request.covariance:
            resources += _covariances(made, result, request, named["row"], notes)
        if request.sensitivity:
            resources += _sensitivity(made, result, request, named["row"])
        resources += _views(made, result, request, notes)
        said = (*cautions.EFFECTS, *cautions.FINDINGS)
        describe(made, table, request, resources, said, notes)
    return notes


def _covariances(made: Path, result: Result, request: Request, row: str, notes: list[str]) -> list[Resource]:
    """Covariances of effects that share participants: as a list, and as a matrix unless that is too large."""
    from extractor.overlap.dependence import covariance_matrix, dependence

    shared = dependence(result, request.outcomes)
    notes += _unresolved(shared.unresolved)
    write_csv(shared.table, made / COVARIANCE, raw=request.raw)
    found = [
        csv_resource(
            made / COVARIANCE,
            "covariances of effects that share participants, blank where unknown; others are 0",
            shared.table,
            COVARIANCES,
            raw=request.raw,
            key=["row", "other_row"],
            points={"row": row, "other_row": row},
        )
    ]
    rows, matrix = covariance_matrix(result.effects, shared.table)
    if len(rows) <= _MOST_IN_MATRIX:
        square = pd.DataFrame(matrix, columns=[str(at) for at in rows])
        square.insert(0, "row", rows)
        write_csv(square, made / MATRIX, raw=request.raw)
        columns = {str(at): Column("number", f"covariance with the effect of row {at}") for at in rows}
        found.append(
            csv_resource(
                made / MATRIX,
                "the same as a matrix, variances on its diagonal",
                square,
                {"row": COVARIANCES["row"], **columns},
                raw=request.raw,
                key=["row"],
                points={"row": row},
            )
        )
    return found


def _unresolved(pairs: pd.DataFrame) -> list[str]:
    """How many pairs of rows have no covariance, by reason; which they are stands in the file."""
    said = []
    for why, those in pairs.groupby("why", sort=False):
        first = f"{those['row'].iloc[0]} and {those['other_row'].iloc[0]}"
        which = (
            f"rows {first}" if len(those) == 1 else f"{counted(len(those), 'pair')} of rows, such as {first}"
        )
        said.append(f"{COVARIANCE}: blank for {which}: {why}")
    return said


def _sensitivity(made: Path, result: Result, request: Request, row: str) -> list[Resource]:
    """What effects become over the ranges of assumptions and along other routes."""
    from extractor.routes.by_route import by_route
    from extractor.routes.sensitivity import sensitivity

    found = sensitivity(result.conversion, method=request.variance, level=request.level)
    tables = (
        (
            "sensitivity.csv",
            found.effects,
            SENSITIVITY,
            "each effect over the ranges of the assumptions it rests on",
        ),
        ("assumptions.csv", found.assumptions, ASSUMPTIONS, "which assumption moves how many effects"),
        ("routes.csv", by_route(result.conversion), ROUTES, "each effect along every admissible route"),
    )
    resources = []
    for name, frame, columns, what in tables:
        write_csv(frame, made / name, raw=request.raw)
        points = {"row": row} if "row" in frame else None
        resources.append(csv_resource(made / name, what, frame, columns, raw=request.raw, points=points))
    return resources


def _views(made: Path, result: Result, request: Request, notes: list[str]) -> list[Resource]:
    """What is written for people and machines to look at; its modules are heavy and come only when asked for."""
    resources = []
    if "xlsx" in request.formats:
        from extractor.output.annotated import write_annotated

        notes += write_annotated(result, request, made / ANNOTATED)
        resources.append(
            resource(made / ANNOTATED, "the coder's sheets with marks on the cells findings name")
        )
    if "prov" in request.formats:
        from extractor.output.prov import write_prov

        write_prov(result, request.sheet, made / PROVENANCE)
        resources.append(resource(made / PROVENANCE, "where every value came from, in PROV-JSON"))
    if "html" in request.formats:
        from extractor.output.report import write_report

        write_report(result, request, made / REPORT)
        resources.append(resource(made / REPORT, "the report"))
    return resources


def write_audit(folder: Path, audit: Audit, table: ReportedTable, request: Request, *, force: bool) -> None:
    """Write findings and their description into ``folder``; raises as ``write_conversion`` does."""
    with output_folder(folder, AUDIT_FILES, force=force) as made:
        write_csv(audit.frame, made / "findings.csv", raw=request.raw)
        resources = [_findings_resource(made, audit.frame, request, None)]
        describe(made, table, request, resources, cautions.FINDINGS, [])


def _findings_resource(
    made: Path, findings: pd.DataFrame, request: Request, points: dict[str, str] | None
) -> Resource:
    path = made / "findings.csv"
    return csv_resource(path, "one row per finding", findings, FINDINGS, raw=request.raw, points=points)
