"""A folder of results, read back."""

from __future__ import annotations

import json
import re
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from extractor.errors import UnreadableInput
from extractor.printed.reading import quoted

NUMBERS = (
    "estimate",
    "variance",
    "ci_low",
    "ci_high",
    "estimate_low",
    "estimate_high",
)
WORDS = ("status", "grade", "route", "standardizer", "variance_method", "assumptions", "reason")
_LABELS = ("study", "outcome", "effect")
_NEEDED = ("row", *_LABELS, "metric", *NUMBERS, *WORDS)
_NEUTRAL = re.compile(r"\A'(?=[=+\-@\t\r\n])")


@dataclass(frozen=True)
class Run:
    """One run.

    effects : the effect table under its canonical headings, numbers as floats and words as text.
    rows : what ``derivations.json`` says of each row, by row number. relations : the formulas used, by name.
    settings, version, sources, notes : what ``datapackage.json`` says of the run.
    """

    name: str
    effects: pd.DataFrame
    rows: dict[int, dict[str, object]]
    relations: dict[str, dict[str, object]]
    settings: dict[str, object]
    version: str
    sources: list[dict[str, object]]
    notes: list[str]

    def steps(self, row: int) -> list[dict[str, object]]:
        """The steps of a row's route; none where it had no effect."""
        found = self.rows.get(row, {}).get("steps", [])
        return found if isinstance(found, list) else []

    def cells(self, row: int) -> dict[str, str] | None:
        """What stood in the cells of a row; None where the run did not record it."""
        found = self.rows.get(row, {}).get("cells")
        return found if isinstance(found, dict) else None


def read_run(folder: Path) -> Run:
    """Read the folder that ``convert --out`` wrote.

    Raises
    ------
    UnreadableInput : a file is missing or is not what this program writes; the message names it.
    """
    if not folder.is_dir():
        raise UnreadableInput(f"{quoted(folder, 200)}: no such folder; name one that convert --out wrote")
    package = _json(folder / "datapackage.json")
    derivations = _json(folder / "derivations.json")
    software, settings = package.get("extractor:software"), package.get("extractor:settings")
    if not isinstance(software, dict) or not isinstance(settings, dict):
        raise UnreadableInput(
            f"{quoted(folder / 'datapackage.json', 200)} was not written by extractor convert"
        )
    rows, relations = derivations.get("rows"), derivations.get("relations")
    if not isinstance(rows, list) or not isinstance(relations, dict):
        raise UnreadableInput(
            f"{quoted(folder / 'derivations.json', 200)} was not written by extractor convert"
        )
    sources, notes = package.get("sources"), package.get("extractor:notes")
    return Run(
        str(folder),
        _effects(folder / "effects.csv", package),
        _by_number(rows, folder / "derivations.json"),
        relations,
        settings,
        str(software.get("version", "")),
        [each for each in sources if isinstance(each, dict)] if isinstance(sources, list) else [],
        [str(note) for note in notes] if isinstance(notes, list) else [],
    )


def _json(path: Path) -> dict[str, object]:
    try:
        found = json.loads(path.read_text(encoding="utf-8"))
    except OSError as fault:
        raise UnreadableInput(f"{quoted(path, 200)} cannot be opened: {fault.strerror}") from fault
    except (ValueError, RecursionError) as fault:
        raise UnreadableInput(f"{quoted(path, 200)} is damaged: it is not JSON") from fault
    if not isinstance(found, dict):
        raise UnreadableInput(f"{quoted(path, 200)} was not written by extractor convert")
    return found


def _effects(path: Path, package: dict[str, object]) -> pd.DataFrame:
    try:
        frame = pd.read_csv(path, dtype=str, keep_default_na=False, encoding="utf-8")
    except OSError as fault:
        raise UnreadableInput(f"{quoted(path, 200)} cannot be opened: {fault.strerror}") from fault
    except ValueError as fault:
        raise UnreadableInput(f"{quoted(path, 200)} is damaged: it is no csv file") from fault
    frame = frame.rename(columns=_canonical(package))
    lacking = [name for name in _NEEDED if name not in frame]
    if lacking:
        raise UnreadableInput(
            f"{quoted(path, 200)} has no column {', '.join(lacking)}; write it anew with convert --out"
        )
    frame = frame[list(_NEEDED)].copy()
    try:
        frame["row"] = pd.to_numeric(frame["row"]).astype(int)
        for name in NUMBERS:
            frame[name] = pd.to_numeric(frame[name].replace("", None)).astype(float)
    except (TypeError, ValueError) as fault:
        raise UnreadableInput(
            f"{quoted(path, 200)} is damaged: words where numbers belong; write it anew with convert --out"
        ) from fault
    for name in _LABELS:
        frame[name] = frame[name].str.replace(_NEUTRAL, "", regex=True)
    return frame


def _by_number(rows: list[object], path: Path) -> dict[int, dict[str, object]]:
    """What is said of each row, by its number."""
    found: dict[int, dict[str, object]] = {}
    for row in rows:
        number = row.get("row") if isinstance(row, dict) else None
        if not isinstance(row, dict) or not isinstance(number, int) or not _well_formed(row):
            raise UnreadableInput(f"{quoted(path, 200)} is damaged; write it anew with convert --out")
        found[number] = row
    return found


def _well_formed(row: dict[str, object]) -> bool:
    """Whether steps and cells are of the kind that the comparison looks into."""
    steps, cells = row.get("steps", []), row.get("cells", {})
    return (
        isinstance(steps, list)
        and all(isinstance(step, dict) and isinstance(step.get("quantity"), str) for step in steps)
        and isinstance(cells, dict)
        and all(isinstance(text, str) for text in cells.values())
    )


def _canonical(package: dict[str, object]) -> dict[str, str]:
    """The program's own names of headings that the run renamed."""
    found: dict[str, str] = {}
    resources = package.get("resources")
    for resource in resources if isinstance(resources, list) else []:
        schema = resource.get("schema") if isinstance(resource, dict) else None
        fields = (
            schema.get("fields") if isinstance(schema, dict) and resource.get("name") == "effects" else None
        )
        for field in fields if isinstance(fields, list) else []:
            name = field.get("name") if isinstance(field, dict) else None
            own = field.get("extractor:column") if isinstance(field, dict) else None
            if isinstance(name, str) and isinstance(own, str):
                found[name] = own
    return found
