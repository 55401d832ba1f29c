"""A small coded sheet for the views; every study in it is invented."""

from __future__ import annotations

import os
import shutil
from collections.abc import Callable
from pathlib import Path

import pytest
from openpyxl import Workbook

from extractor.api import Result, convert
from extractor.output.request import Request

HEADINGS = [
    "study", "outcome", "effect", "design", "contrast", "f_value", "df_effect", "df_error", "p_value", "t_value",
    "df", "n_total", "n_1", "mean_1", "sd_1", "n_2", "mean_2", "sd_2", "n_3", "mean_3", "sd_3", "eta_squared",
    "direction", "page", "notes",
]  # fmt: skip

_CELLS: list[dict[str, str]] = [
    # an F with its degrees of freedom, and the groups
    {
        "study": "North Quay", "outcome": "recall", "effect": "schedule", "design": "one-way", "contrast": "1 - 2",
        "f_value": "4.31", "df_effect": "2", "df_error": "57", "p_value": ".018", "n_1": "20", "mean_1": "11.2",
        "sd_1": "3.1", "n_2": "20", "mean_2": "12.9", "sd_2": "2.8", "n_3": "20", "mean_3": "13.8", "sd_3": "2.7",
        "page": "14", "notes": "clear table",
    },
    {
        "study": "Harbour 3", "outcome": "recall", "effect": "schedule", "design": "one-way", "f_value": "3.98",
        "df_effect": "2", "df_error": "87", "p_value": ".022", "page": "5", "notes": "=1+1",
    },
    {
        "study": "Site 7", "outcome": "fatigue", "effect": "walking", "design": "two-group", "t_value": "-2.11",
        "df": "45", "n_1": "24", "mean_1": "3.42", "sd_1": "1.10", "n_2": "23", "mean_2": "4.15", "sd_2": "1.27",
        "page": "6", "notes": "#N/A",
    },
    # a printed eta squared that its own F contradicts
    {
        "study": "Ridge 2", "outcome": "recall", "effect": "feedback", "design": "two-group", "f_value": "5.12",
        "df_effect": "1", "df_error": "38", "p_value": ".029", "n_total": "40", "eta_squared": "0.20",
        "direction": "+", "page": "3", "notes": "<script>alert(1)</script>",
    },
    # only a bound
    {
        "study": "East Wharf", "outcome": "fatigue", "effect": "walking", "design": "two-group", "p_value": "<.05",
        "n_1": "30", "n_2": "31", "direction": "+", "page": "2",
    },
    {
        "study": "Station 12", "outcome": "fatigue", "effect": "walking", "design": "two-group", "n_1": "15",
        "mean_1": "3.9", "sd_1": "0.9", "n_2": "15", "mean_2": "4.4", "sd_2": "1.1", "page": "8",
    },
    # nothing to start from
    {
        "study": "Quarry <5>", "outcome": "recall", "effect": "schedule", "design": "one-way", "mean_1": "7.1",
        "mean_2": "8.4", "page": "4",
    },
    # a negative omega squared
    {
        "study": "Orchard 4", "outcome": "recall", "effect": "schedule", "design": "one-way", "f_value": "0.62",
        "df_effect": "3", "df_error": "76", "p_value": ".60", "page": "11",
    },
]  # fmt: skip

ROWS = [[cells.get(name) for name in HEADINGS] for cells in _CELLS]


@pytest.fixture
def coded(tmp_path: Path) -> Path:
    """The coded sheet as a workbook: text cells and one number."""
    book = Workbook()
    sheet = book.worksheets[0]
    sheet.title = "coded"
    sheet.append(HEADINGS)
    for row, values in enumerate(ROWS, 2):
        for at, value in enumerate(values, 1):
            if value is not None:
                cell = sheet.cell(row, at)
                cell.value = value
                cell.data_type = "s"
                cell.number_format = "@"
    # a number cell whose format shows its printed decimals
    sheet["F3"].value, sheet["F3"].number_format = 3.98, "0.00"
    book.create_sheet("decisions").append(["row", "cell", "decision", "value", "source", "by", "on", "why"])
    path = tmp_path / "coded.xlsx"
    book.save(path)
    return path


@pytest.fixture
def converted(coded: Path) -> Callable[[str], tuple[Result, Request]]:
    """Converts the coded sheet to a metric."""

    def run(metric: str) -> tuple[Result, Request]:
        return convert(coded, to=metric), Request(sheet=str(coded), metric=metric)

    return run


@pytest.fixture(scope="session")
def office() -> Callable[[Path, Path], Path]:
    """Opens a workbook in LibreOffice and saves it as xlsx; skips where there is none."""
    program = shutil.which("soffice")

    def run(path: Path, folder: Path) -> Path:
        if program is None:
            pytest.skip("LibreOffice is not installed")
        import subprocess

        home = folder / "profile"
        command = [program, f"-env:UserInstallation=file://{home}", "--headless", "--convert-to", "xlsx"]
        subprocess.run(
            [*command, "--outdir", str(folder), str(path)],
            check=True,
            capture_output=True,
            timeout=180,
            env={**os.environ, "HOME": str(folder)},
        )
        return folder / path.name

    return run
