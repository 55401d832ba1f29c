"""What is wrong with the files of a run: formulas, broken tables, hashes that do not fit, effects that cannot be."""

from __future__ import annotations

import csv
import hashlib
import io
import json
import math
import re
from collections.abc import Iterable, Mapping
from pathlib import Path

import openpyxl
import pandas as pd

from extractor.codebook import EFFECT_COLUMNS

_FORMULA = re.compile(r"[\s\x00-\x20\u00a0\u200b\ufeff]*[=+\-@＝＋－＠]")
_NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")


def breach_of_folder(out: Path, files: Iterable[str], rows: int | None = None) -> str:
    """What is wrong with a written folder that must have these ``files``, and so many ``rows``; "" where nothing is."""
    missing = [name for name in files if not (out / name).is_file()]
    if missing:
        return f"not written: {missing}"
    for path in sorted(out.iterdir()):
        breach = _breach_of_file(path, rows if path.name == "effects.csv" else None)
        if breach:
            return f"{path.name}: {breach}"
    return ""


def _breach_of_file(path: Path, rows: int | None) -> str:
    if path.suffix == ".json":
        content = json.loads(path.read_text(encoding="utf-8"), parse_constant=_refuse)
        if path.name == "datapackage.json":
            for resource in content["resources"]:
                of_file = hashlib.sha256((path.parent / resource["path"]).read_bytes()).hexdigest()
                if f"sha256:{of_file}" != resource["hash"]:
                    return f"{resource['path']} is not the file that was described"
    elif path.suffix == ".html":
        if "<script>alert(1)" in path.read_text(encoding="utf-8"):
            return "a script of the sheet stands in the page"
    elif path.suffix == ".dta":
        pd.read_stata(path)
    elif path.suffix == ".csv":
        return _breach_of_csv(path.read_text(encoding="utf-8"), rows)
    elif path.suffix == ".xlsx" and path.name != "annotated.xlsx":
        return _breach_of_workbook(path)
    return ""


def _refuse(word: str) -> float:
    raise ValueError(f"{word} in JSON")


def _breach_of_csv(text: str, rows: int | None) -> str:
    lines = list(csv.reader(io.StringIO(text, newline=""), strict=True))
    if len({len(line) for line in lines}) > 1:
        return "lines of unequal length"
    for line in lines:
        for cell in line:
            if _FORMULA.match(cell) and not _NUMBER.fullmatch(cell) and cell not in ("-INF", "+INF"):
                return f"a spreadsheet takes {cell[:40]!r} for a formula"
    if rows is None:
        return ""
    if len(lines) != rows + 1:
        return f"{len(lines) - 1} rows for {rows} rows of the sheet"
    head = lines[0]
    if len(set(head)) != len(head):
        return "two columns of one name"
    if not set(EFFECT_COLUMNS) <= set(head):
        return ""
    for line in lines[1:]:
        breach = breach_of_effect(dict(zip(head, line, strict=True)))
        if breach:
            return breach
    return ""


def breach_of_effect(effect: Mapping[str, object]) -> str:
    """Whether one effect is in itself possible; numbers may still be texts."""

    def number(name: str) -> float:
        return float(str(effect[name]) or "nan")

    status = effect["status"]
    if status not in ("converted", "bounded", "blocked"):
        return f"status {status!r}"
    if (status == "converted") != math.isfinite(number("estimate")):
        return f"a {status} row has the estimate {effect['estimate']!r}"
    if status == "blocked" and not effect["reason"]:
        return "a blocked row without a reason"
    if number("variance") < 0:
        return f"variance {effect['variance']}"
    pairs = (("ci_low", "ci_high"), ("estimate_low", "estimate"), ("estimate", "estimate_high"))
    for low, high in pairs:
        if number(low) > number(high):
            return f"{low} {effect[low]} above {high} {effect[high]}"
    return ""


def _breach_of_workbook(path: Path) -> str:
    book = openpyxl.load_workbook(path, read_only=True)
    try:
        for sheet in book.worksheets:
            for row in sheet.iter_rows():
                for cell in row:
                    if cell.data_type in ("f", "e"):
                        return f"cell {cell.coordinate} is a formula or an error"
    finally:
        book.close()
    return ""
