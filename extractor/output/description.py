"""The description of an output folder: a Data Package, version 2 (datapackage.org)."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from pathlib import Path

from extractor import __version__
from extractor.output.cells import reading_notes
from extractor.output.columns import Column, Table, fields
from extractor.output.record import settings, sha256_of, sources
from extractor.output.request import Request
from extractor.table import ReportedTable

Resource = dict[str, object]

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


def resource(path: Path, title: str) -> Resource:
    """A file by name, size and hash."""
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
        "hash": f"sha256:{sha256_of(path)}",
    }


def csv_resource(
    path: Path,
    title: str,
    table: Table,
    columns: Mapping[str, Column],
    *,
    raw: bool,
    key: Sequence[str] = (),
    points: Mapping[str, str] | None = None,
    headings: Mapping[str, str] | None = None,
) -> Resource:
    """A csv file with its Table Schema.

    Parameters
    ----------
    table : what was written. columns : meaning of its columns. raw : its texts are as they stood.
    key : columns that tell its rows apart. points : field of the effect table by column that names one of its rows.
    headings : heading as written by column, where they differ.
    """
    named = dict(headings or {name: name for name in map(str, table)})
    schema: dict[str, object] = {
        "$schema": f"{_PROFILES}/tableschema.json",
        "fields": fields(table, columns, named),
        "missingValues": [""],
    }
    if key:
        schema["primaryKey"] = [named[name] for name in key]
    if points:
        schema["foreignKeys"] = [
            {"fields": [named[name]], "reference": {"resource": "effects", "fields": [field]}}
            for name, field in points.items()
        ]
    return {
        **resource(path, title),
        "type": "table",
        "encoding": "utf-8",
        "dialect": {"$schema": f"{_PROFILES}/tabledialect.json", "delimiter": ",", "lineTerminator": "\n"},
        "schema": schema,
        "extractor:csvText": "as it stood" if raw else _NEUTRALISED,
    }


def describe(
    folder: Path,
    table: ReportedTable,
    request: Request,
    resources: Sequence[Resource],
    said: Sequence[str],
    notes: Sequence[str],
) -> None:
    """Write ``datapackage.json``.

    Parameters
    ----------
    said : cautions. notes : what the formats could not hold, beside what was noticed while reading.
    """
    content = {
        "$schema": f"{_PROFILES}/datapackage.json",
        "name": "extractor-effects" if request.metric else "extractor-findings",
        "title": f"Effects in {request.metric}" if request.metric else "Findings about printed numbers",
        "description": "Computed by Extractor from a coded sheet of reported analyses of variance.",
        "sources": _sources(request, table),
        "resources": list(resources),
        "extractor:software": {"name": "anova-extractor", "version": __version__},
        "extractor:settings": settings(request, table),
        "extractor:cautions": list(said),
        "extractor:notes": [*reading_notes(table), *notes],
    }
    text = json.dumps(content, ensure_ascii=False, allow_nan=False, sort_keys=True, indent=2)
    path = folder / "datapackage.json"
    path.write_text(text + "\n", encoding="utf-8", errors="backslashreplace", newline="")


def _sources(request: Request, table: ReportedTable) -> list[dict[str, object]]:
    found: list[dict[str, object]] = []
    for source in sources(request):
        if source.sha256:
            hashed = f"sha256:{source.sha256}"
            found.append({"title": source.role, "path": source.name, "extractor:hash": hashed})
        else:
            found.append({"title": f"{source.role}: {source.name}"})
    if table.sheet:
        found[0]["extractor:sheet"] = table.sheet
    return found
