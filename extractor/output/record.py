"""What was run, with what, on which file: as data for the package, and as words for the workbook and the report."""

from __future__ import annotations

import hashlib
import math
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path

import pandas as pd

from extractor import __version__
from extractor.api import Result
from extractor.output.request import Request
from extractor.table import Assumption, ReportedTable

_PACKAGES = ("numpy", "scipy", "pandas", "openpyxl")
_CODEBOOK = {
    "title": "title of the codebook",
    "design": "design of rows that do not say",
    "decimal_mark": "decimal mark",
    "rounding": "rounding of printed numbers",
    "alpha": "level meant by ns",
}
"""Settings of a codebook that are kept, and what they are called."""


@dataclass(frozen=True, slots=True)
class Source:
    """A file that went in, by its name and SHA-256 without the folder it was in; no hash where it is no file."""

    role: str
    name: str
    sha256: str

    def __str__(self) -> str:
        return f"{self.name}, sha256 {self.sha256}" if self.sha256 else self.name


def sha256_of(path: Path) -> str:
    """The SHA-256 of a file, in hexadecimal."""
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def sources(request: Request) -> list[Source]:
    """The sheet, and the codebook where there is one."""
    found = []
    for role, word in (("coded sheet", request.sheet), ("codebook", request.codebook)):
        if word is None:
            continue
        path = Path(word)
        if word == "-":
            found.append(Source(role, "standard input", ""))
        elif path.is_file():
            found.append(Source(role, path.name, sha256_of(path)))
        else:
            found.append(Source(role, word, ""))
    return found


def settings(request: Request, table: ReportedTable) -> dict[str, object]:
    """Settings and their values, as data."""
    found: dict[str, object] = {name: table.settings[name] for name in _CODEBOOK if name in table.settings}
    found["codebook"] = Path(str(table.settings.get("codebook", ""))).name
    found["assumptions"] = {
        name: {
            "value": taken.value,
            "by": taken.by,
            **({"range": [taken.low, taken.high]} if math.isfinite(taken.low) else {}),
        }
        for name, taken in table.assumptions.items()
    }
    if request.metric is not None:
        found |= {
            "metric": request.metric,
            "variance": request.variance or "preferred",
            "level": request.level,
            "standardizer": request.standardizer or "usual for the design",
            "rename": {**table.rename, **request.rename},
        }
    return found


def settings_in_words(result: Result, request: Request) -> list[tuple[str, str]]:
    """Software, files, settings, assumptions and notes; the same run always gives the same words."""
    table = result.conversion.evidence.table
    found = settings(request, table)
    files = {source.role: str(source) for source in sources(request)}
    said = [
        ("software", f"Extractor {__version__}"),
        ("computed with", ", ".join(f"{name} {version(name)}" for name in _PACKAGES)),
        ("coded sheet", files["coded sheet"]),
        ("sheet of the workbook", table.sheet),
        ("codebook", files.get("codebook", "none: headings are names")),
        *((words, str(found.get(name) or "")) for name, words in _CODEBOOK.items()),
        ("metric", result.conversion.metric),
        ("standardizer asked for", request.standardizer or "each design's usual one"),
        ("sampling variance", request.variance or "each design's preferred one, see variance_method"),
        ("confidence level", f"{request.level:g}"),
        ("checks made by the audit", str(result.audit.checks)),
        *((f"assumed: {name}", assumption_words(taken)) for name, taken in table.assumptions.items()),
        *(("note", note) for note in table.notes),
    ]
    return [(name, words) for name, words in said if words]


def settings_frame(result: Result, request: Request) -> pd.DataFrame:
    """The same as a table."""
    return pd.DataFrame(settings_in_words(result, request), columns=["setting", "value"])


def assumption_words(taken: Assumption) -> str:
    """A value nobody reported, its range and who supplied it."""
    span = f", range {taken.low:g} to {taken.high:g}" if math.isfinite(taken.low) else ""
    return f"{taken.value:g}{span}, by {taken.by}"
