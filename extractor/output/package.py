"""The output folder: tables, derivations, and a Data Package (version 2) that describes them."""

from __future__ import annotations

import hashlib
import json
import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

import pandas as pd

from extractor import __version__, cautions
from extractor.api import Result
from extractor.audit.run import Audit
from extractor.errors import UsageError
from extractor.output.cells import reading_notes
from extractor.output.columns import EFFECTS, FINDINGS, fields, whole_counts
from extractor.output.files import output_folder
from extractor.output.prov import write_prov
from extractor.output.tables import WRITERS, neutralised, write_csv
from extractor.output.trail import Tick, write_derivations
from extractor.overlap.dependence import covariance_matrix, dependence
from extractor.printed.reading import quoted
from extractor.quantities import close_matches
from extractor.routes.by_route import by_route
from extractor.routes.sensitivity import sensitivity
from extractor.table import Assumption, ReportedTable

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

_PROFILES = "https://datapackage.org/profiles/2.0"
_MEDIA = {
    "csv": "text/csv",
    "json": "application/json",
    "xlsx": "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet",
    "parquet": "application/vnd.apache.parquet",
    "dta": "application/x-stata-dta",
    "html": "text/html",
}
_NEUTRALISED = (
    "an apostrophe stands before text that a spreadsheet could take for a formula (= + - @, tab or line "
    "break at its start, or = + - @ after a semicolon, tab or line break); numbers are untouched"
)
_SETTINGS = ("codebook", "title", "design", "decimal_mark", "rounding", "alpha")


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


def effects_as_written(result: Result, rename: Mapping[str, str]) -> pd.DataFrame:
    """The effect table under the headings asked for; raises as ``headings`` does."""
    effects = whole_counts(result.effects)
    merged = {**result.conversion.evidence.table.rename, **rename}
    return effects.rename(columns=headings(list(effects.columns), merged))


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
    effects = effects_as_written(result, request.rename)
    written = effects.columns if request.raw else map(neutralised, effects.columns)
    named = dict(zip(result.effects.columns, written, strict=True))
    schema = _schema(fields(whole_counts(result.effects), EFFECTS, named), named["row"])
    notes: list[str] = []
    with output_folder(folder, CONVERT_FILES, force=force) as made:
        write_csv(effects, made / "effects.csv", raw=request.raw)
        write_csv(result.findings, made / "findings.csv", raw=request.raw)
        write_derivations(result, made / "derivations.json", tick)
        resources = [
            _csv_resource(
                made / "effects.csv", "the effect table, one row per row of the sheet", schema, request
            ),
            _findings_resource(made, result.findings, request, named["row"]),
            _resource(made / "derivations.json", "how every effect came about, with the routes not taken"),
        ]
        for ending in sorted(set(request.formats) & set(WRITERS) - {"csv"}):
            notes += WRITERS[ending](effects, made / f"effects.{ending}")
            resources.append(_resource(made / f"effects.{ending}", "the effect table again"))
        resources += _views(made, result, request, notes)
        said = (*cautions.EFFECTS, *cautions.FINDINGS)
        _describe(made, table, request, resources, said, notes)
    return notes


def _views(made: Path, result: Result, request: Request, notes: list[str]) -> list[dict[str, object]]:
    """What is written for people, and the covariances; their modules are heavy and come only when asked for."""
    resources = []
    if request.covariance:
        shared = dependence(result, request.outcomes)
        write_csv(shared.pairs, made / COVARIANCE, raw=request.raw)
        notes += [
            f"rows {pair['row']} and {pair['other_row']}: no covariance, {pair['why']}"
            for pair in shared.unresolved.to_dict("records")
        ]
        resources.append(
            _resource(made / COVARIANCE, "covariances of effects that share participants; others are 0")
        )
        rows, matrix = covariance_matrix(result.effects, shared.pairs)
        if len(rows) <= _MOST_IN_MATRIX:
            square = pd.DataFrame(matrix, columns=[str(row) for row in rows])
            square.insert(0, "row", rows)
            write_csv(square, made / MATRIX, raw=request.raw)
            resources.append(_resource(made / MATRIX, "the same as a matrix, variances on its diagonal"))
    if request.sensitivity:
        found = sensitivity(result.conversion, method=request.variance, level=request.level)
        for name, frame, what in (
            ("sensitivity.csv", found.effects, "each effect over the ranges of the assumptions it rests on"),
            ("assumptions.csv", found.assumptions, "which assumption moves how many effects"),
            ("routes.csv", by_route(result.conversion), "each effect along every admissible route"),
        ):
            write_csv(frame, made / name, raw=request.raw)
            resources.append(_resource(made / name, what))
    if "xlsx" in request.formats:
        from extractor.output.annotated import write_annotated

        notes += write_annotated(result, request, made / ANNOTATED)
        resources.append(
            _resource(made / ANNOTATED, "the coder's sheets with marks on the cells findings name")
        )
    if "prov" in request.formats:
        write_prov(result, request.sheet, made / PROVENANCE)
        resources.append(_resource(made / PROVENANCE, "where every value came from, in PROV-JSON"))
    if "html" in request.formats:
        from extractor.output.report import write_report

        write_report(result, request, made / REPORT)
        resources.append(_resource(made / REPORT, "the report"))
    return resources


def write_audit(folder: Path, audit: Audit, table: ReportedTable, request: Request, *, force: bool) -> None:
    """Write findings and their description into ``folder``; raises as ``write_conversion`` does."""
    with output_folder(folder, AUDIT_FILES, force=force) as made:
        write_csv(audit.frame, made / "findings.csv", raw=request.raw)
        resources = [_findings_resource(made, audit.frame, request, None)]
        _describe(made, table, request, resources, cautions.FINDINGS, [])


def _findings_resource(
    made: Path, findings: pd.DataFrame, request: Request, key: str | None
) -> dict[str, object]:
    schema = _schema(fields(findings, FINDINGS, {name: name for name in findings.columns}), None)
    if key is not None:
        reference = {"resource": "effects", "fields": [key]}
        schema["foreignKeys"] = [{"fields": ["row"], "reference": reference}]
    return _csv_resource(made / "findings.csv", "one row per finding", schema, request)


def _schema(described: list[dict[str, object]], key: str | None) -> dict[str, object]:
    schema: dict[str, object] = {
        "$schema": f"{_PROFILES}/tableschema.json",
        "fields": described,
        "missingValues": [""],
    }
    return schema if key is None else {**schema, "primaryKey": [key]}


def _csv_resource(path: Path, title: str, schema: dict[str, object], request: Request) -> dict[str, object]:
    return {
        **_resource(path, title),
        "type": "table",
        "encoding": "utf-8",
        "dialect": {"$schema": f"{_PROFILES}/tabledialect.json", "delimiter": ",", "lineTerminator": "\n"},
        "schema": schema,
        "extractor:csvText": "as it stood" if request.raw else _NEUTRALISED,
    }


def _resource(path: Path, title: str) -> dict[str, object]:
    ending = path.suffix.removeprefix(".")
    again = path.stem == "effects" and ending != "csv"
    return {
        "$schema": f"{_PROFILES}/dataresource.json",
        "name": f"{path.stem}-{ending}" if again else path.stem,
        "title": title,
        "path": path.name,
        "format": ending,
        "mediatype": _MEDIA[ending],
        "bytes": path.stat().st_size,
        "hash": _hash(path),
    }


def _hash(path: Path) -> str:
    with path.open("rb") as stream:
        return f"sha256:{hashlib.file_digest(stream, 'sha256').hexdigest()}"


def _describe(
    made: Path,
    table: ReportedTable,
    request: Request,
    resources: list[dict[str, object]],
    said: tuple[str, ...],
    notes: list[str],
) -> None:
    content = {
        "$schema": f"{_PROFILES}/datapackage.json",
        "name": "extractor-effects" if request.metric else "extractor-findings",
        "title": f"Effects in {request.metric}" if request.metric else "Findings about printed numbers",
        "description": "Computed by Extractor from a coded sheet of reported analyses of variance.",
        "sources": _sources(request, table),
        "resources": resources,
        "extractor:software": {"name": "anova-extractor", "version": __version__},
        "extractor:settings": _settings(request, table),
        "extractor:cautions": list(said),
        "extractor:notes": [*reading_notes(table), *notes],
    }
    text = json.dumps(content, ensure_ascii=False, allow_nan=False, sort_keys=True, indent=2)
    path = made / "datapackage.json"
    path.write_text(text + "\n", encoding="utf-8", errors="backslashreplace", newline="")


def _sources(request: Request, table: ReportedTable) -> list[dict[str, object]]:
    """The sheet, and the codebook where it is a file: by name and hash, without the folder they were in."""
    found: list[dict[str, object]] = []
    for title, word in (("coded sheet", request.sheet), ("codebook", request.codebook)):
        if word is None:
            continue
        path = Path(word)
        if word == "-" or not path.is_file():
            name = "standard input" if word == "-" else word
            found.append({"title": f"{title}: {name}"})
            continue
        found.append({"title": title, "path": path.name, "extractor:hash": _hash(path)})
    if table.sheet:
        found[0]["extractor:sheet"] = table.sheet
    return found


def _settings(request: Request, table: ReportedTable) -> dict[str, object]:
    settings: dict[str, object] = {name: table.settings[name] for name in _SETTINGS if name in table.settings}
    settings["codebook"] = Path(str(settings.get("codebook", ""))).name
    settings["assumptions"] = {
        name: {
            "value": taken.value,
            "by": taken.by,
            **({"range": [taken.low, taken.high]} if math.isfinite(taken.low) else {}),
        }
        for name, taken in table.assumptions.items()
    }
    if request.metric is not None:
        settings |= {
            "metric": request.metric,
            "variance": request.variance or "preferred",
            "level": request.level,
            "standardizer": request.standardizer or "usual for the design",
            "rename": {**table.rename, **request.rename},
        }
    return settings
