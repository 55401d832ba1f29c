"""What was run, with what, on which file: the same words in the workbook and the report."""

from __future__ import annotations

import hashlib
import math
from importlib.metadata import version
from pathlib import Path

import pandas as pd

from extractor import __version__
from extractor.api import Result
from extractor.output.package import Request
from extractor.table import Assumption

_PACKAGES = ("numpy", "scipy", "pandas", "openpyxl")
_SETTINGS = {
    "title": "title of the codebook",
    "design": "design of rows that do not say",
    "decimal_mark": "decimal mark",
    "rounding": "rounding of printed numbers",
    "alpha": "level meant by ns",
}


def settings_frame(result: Result, request: Request) -> pd.DataFrame:
    """Settings and their values, in words; the same run always gives the same table."""
    return pd.DataFrame(settings(result, request), columns=["setting", "value"])


def settings(result: Result, request: Request) -> list[tuple[str, str]]:
    """Settings and their values: software, files with hashes, metric, codebook, assumptions, notes."""
    table = result.conversion.evidence.table
    said = [
        ("software", f"Extractor {__version__}"),
        ("computed with", ", ".join(f"{name} {version(name)}" for name in _PACKAGES)),
        ("coded sheet", file_words(request.sheet)),
    ]
    if table.sheet:
        said.append(("sheet of the workbook", table.sheet))
    said.append(
        ("codebook", file_words(request.codebook) if request.codebook else "none: headings are names")
    )
    said += [
        (words, f"{table.settings[name]}") for name, words in _SETTINGS.items() if table.settings.get(name)
    ]
    said += [
        ("metric", result.conversion.metric),
        ("standardizer asked for", request.standardizer or "each design's usual one"),
        ("sampling variance", request.variance or "each design's preferred one, see variance_method"),
        ("confidence level", f"{request.level:g}"),
        ("checks made by the audit", str(result.audit.checks)),
    ]
    said += [(f"assumed: {name}", assumption_words(taken)) for name, taken in table.assumptions.items()]
    said += [("note", note) for note in table.notes]
    return said


def assumption_words(taken: Assumption) -> str:
    """A value nobody reported, its range and who supplied it."""
    span = f", range {taken.low:g} to {taken.high:g}" if math.isfinite(taken.low) else ""
    return f"{taken.value:g}{span}, by {taken.by}"


def file_words(word: str) -> str:
    """A file by its name and hash, without the folder it was in."""
    path = Path(word)
    if word == "-":
        return "standard input"
    if not path.is_file():
        return word
    with path.open("rb") as stream:
        return f"{path.name}, sha256 {hashlib.file_digest(stream, 'sha256').hexdigest()}"
