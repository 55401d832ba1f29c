"""Invented sheets that two people coded, the slips they make, and their consensus workbook filled in."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pandas as pd
from openpyxl import Workbook, load_workbook

from extractor.coders.reconcile import Reconciliation

TO = "hedges_g"
SHEET = pd.DataFrame(
    [
        ("North Quay", "recall", "20", "10.20", "3.12", "22", "12.61", "3.41", "x", "12"),
        ("North Quay", "sleep", "20", "1.21", "0.31", "22", "2.61", "0.42", "x", "13"),
        ("Site 7", "recall", "31", "5.13", "1.22", "30", "4.42", "1.33", "y", "4"),
        ("Mill Lane", "recall", "15", "5.30", "1.27", "16", "4.45", "1.36", "z", "3"),
    ],
    columns=["study", "outcome", "n_1", "mean_1", "sd_1", "n_2", "mean_2", "sd_2", "country", "page"],
).assign(design="two-group", direction="+")


def changed(sheet: pd.DataFrame, *cells: tuple[int, str, str]) -> pd.DataFrame:
    """The sheet with some cells saying something else."""
    copy = sheet.copy()
    for row, name, text in cells:
        copy.loc[row, name] = text
    return copy


def pairs_of(found: Reconciliation) -> list[tuple[int | None, ...]]:
    """Spreadsheet rows that were matched, by coder."""
    columns = [found.effects[f"row {coder}"] for coder in found.coders]
    return [tuple(None if pd.isna(n) else int(n) for n in line) for line in zip(*columns, strict=True)]


FACTORIAL = pd.DataFrame(
    [
        ("age", "1", "6.31", "12.62"),
        ("sex", "1", "2.10", "4.20"),
        ("age x sex", "2", "3.45", "13.80"),
    ],
    columns=["term", "df_effect", "f_value", "ss_effect"],
).assign(
    study="North Quay", outcome="recall", analysis="m1", design="factorial", df_error="54", ss_error="108.0"
)


def random_sheet(rng: np.random.Generator, size: int) -> pd.DataFrame:
    """Two-group rows that report means, a t, or an F, with numbers of their own."""
    rows = []
    for i in range(size):
        n_1, n_2 = (int(n) for n in rng.integers(12, 60, 2))
        g, sd, mean = rng.normal(0.4, 0.4), rng.gamma(9, 0.4), rng.normal(10, 3)
        t = g / math.sqrt(1 / n_1 + 1 / n_2)
        row = {
            "study": f"Site {i // 2 + 1}",
            "outcome": ("recall", "sleep")[i % 2],
            "design": "two-group",
            "n_1": str(n_1),
            "n_2": str(n_2),
            "direction": "+" if g > 0 else "-",
            "country": str(rng.choice(["x", "y", "z"])),
            "page": str(rng.integers(1, 20)),
        }
        kind = rng.random()
        if kind < 0.6:
            row |= {"mean_1": f"{mean + g * sd:.2f}", "sd_1": f"{sd * rng.uniform(0.85, 1.15):.2f}"}
            row |= {"mean_2": f"{mean:.2f}", "sd_2": f"{sd * rng.uniform(0.85, 1.15):.2f}"}
        elif kind < 0.8:
            row |= {"t_value": f"{t:.2f}", "df": str(n_1 + n_2 - 2)}
        else:
            row |= {"f_value": f"{t * t:.2f}", "df_effect": "1", "df_error": str(n_1 + n_2 - 2)}
        rows.append(row)
    return pd.DataFrame(rows).fillna("")


def slip(rng: np.random.Generator, row: pd.Series, name: str) -> str:
    """What a hurried coder types: the other sign, a neighbour's digits, a lost point, a standard error for an SD."""
    text = str(row[name])
    if name == "direction":
        return "-" if text == "+" else "+"
    if name == "country":
        return {"x": "y", "y": "z", "z": "x"}[text]
    if "." not in text:
        return str(int(text) + int(rng.choice([-3, 1, 10]))) if int(text) > 5 else str(int(text) + 1)
    value, places = float(text), len(text.partition(".")[2])
    kind = rng.integers(4)
    if kind == 0:
        new = value / math.sqrt(float(row[f"n{name[2:]}"])) if name.startswith("sd") else -value
    elif kind == 1:
        new = value * 10
    elif kind == 2:
        new = value + float(rng.choice([-0.1, 0.1, 1.0]))
    else:
        digits = list(text)
        digits[-1], digits[-2] = digits[-2], digits[-1]
        new = float("".join(digits))
    found = f"{new:.{places}f}"
    return found if found not in (text, "0.00") else f"{value + 0.5:.{places}f}"


def workbook(path: Path, rows: pd.DataFrame, lines: list[tuple[object, ...]]) -> Path:
    """A coded sheet with a sheet of groups."""
    book = Workbook()
    coded = book.worksheets[0]
    coded.title = "coded"
    for line in [list(rows.columns), *rows.to_numpy().tolist()]:
        coded.append([None if cell == "" else cell for cell in line])
    long = book.create_sheet("groups")
    for cells in [("analysis", "age", "sex", "n", "mean", "sd"), *lines]:
        long.append(cells)
    book.save(path)
    return path


CELLS: list[tuple[object, ...]] = [
    ("m1", "old", "f", 14, "5.11", "1.32"),
    ("m1", "old", "m", 15, "4.42", "1.18"),
    ("m1", "young", "f", 13, "6.73", "1.41"),
    ("m1", "young", "m", 16, "5.06", "1.27"),
]
TERMS = pd.DataFrame({"term": ["age", "sex", "age x sex"]}).assign(
    study="North Quay", outcome="recall", analysis="m1", design="factorial"
)


def fill(path: Path, answers: dict[str, object], title: str = "consensus") -> None:
    """Write into the column ``agreed``: by variable, or in every line under ""."""
    book = load_workbook(path)
    sheet = book[title]
    headings = [cell.value for cell in sheet[1]]
    for line in sheet.iter_rows(min_row=2):
        key = "" if title == "rows" else str(line[headings.index("variable")].value)
        if key in answers:
            line[headings.index("agreed")].value = answers[key]
    book.save(path)
