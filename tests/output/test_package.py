"""The output folder: valid by the standard it names, read back equal, and the same bytes wherever it is written."""

from __future__ import annotations

import json
import math
import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import frictionless
import jsonschema
import numpy as np
import pandas as pd
import pytest

from extractor.api import convert
from extractor.output.figure import ENDINGS
from extractor.output.package import write_conversion
from extractor.output.request import Request, effects_as_written
from tests.output.everything import write_everything

ROOT = Path(__file__).parents[2]


@pytest.fixture
def folder(coded: Path, tmp_path: Path) -> Path:
    write_everything(coded, tmp_path / "out")
    return tmp_path / "out"


def test_package_keeps_to_the_standard(folder: Path) -> None:
    """Data Package, version 2: descriptor by its rules, tables by their schemas, with a general validator."""
    described = json.loads((folder / "datapackage.json").read_text(encoding="utf-8"))
    rules = json.loads((Path(__file__).parent / "data_package_v2.json").read_text(encoding="utf-8"))
    jsonschema.Draft202012Validator.check_schema(rules)
    assert [fault.message for fault in jsonschema.Draft202012Validator(rules).iter_errors(described)] == []

    # the validator would guess a schema for workbooks, which have none
    tables = [each for each in described["resources"] if each.get("type") == "table"]
    package = frictionless.Package.from_descriptor({**described, "resources": tables}, basepath=str(folder))
    report = package.validate()
    assert report.flatten(["name", "type", "message"]) == []
    assert [task.name for task in report.tasks] == [table["name"] for table in tables]
    assert {path.name for path in folder.glob("*.csv")} == {table["path"] for table in tables}
    named = {each["path"] for each in described["resources"]}
    assert named == {path.name for path in folder.iterdir()} - {
        "datapackage.json",
        *(f"figure{ending}" for ending in ENDINGS),
    }


@pytest.mark.parametrize(
    ("change", "fault"),
    [
        (lambda lines: [*lines, lines[1]], "primary-key"),
        (lambda lines: [lines[0], lines[1].replace("hedges_g", "guess"), *lines[2:]], "constraint-error"),
        (lambda lines: [lines[0], lines[1].replace("2,", "x,", 1), *lines[2:]], "type-error"),
        (lambda lines: [line for line in lines if not line.startswith("5,")], "foreign-key"),
    ],
)
def test_validator_sees_what_is_wrong(
    folder: Path, change: Callable[[list[str]], list[str]], fault: str
) -> None:
    """The check above can fail: a row twice, a metric nobody knows, a word for a number, a finding without its row."""
    path = folder / "effects.csv"
    lines = path.read_text(encoding="utf-8").splitlines()
    path.write_text("\n".join(change(lines)) + "\n", encoding="utf-8")
    described = json.loads((folder / "datapackage.json").read_text(encoding="utf-8"))
    tables = [{**each} for each in described["resources"] if each["path"] in ("effects.csv", "findings.csv")]
    for table in tables:
        del table["bytes"], table["hash"]
    package = frictionless.Package.from_descriptor({"name": "x", "resources": tables}, basepath=str(folder))
    assert fault in {kind for (kind,) in package.validate().flatten(["type"])}


def test_every_format_gives_back_the_effects(folder: Path, coded: Path) -> None:
    pytest.importorskip("pyarrow")
    expected = effects_as_written(convert(coded, to="hedges_g"), {})
    words = [name for name in expected if pd.api.types.is_string_dtype(expected[name])]
    read = {
        "csv": pd.read_csv(folder / "effects.csv", keep_default_na=False, dtype=str),
        "xlsx": pd.read_excel(
            folder / "effects.xlsx", keep_default_na=False, dtype=dict.fromkeys(words, str)
        ),
        "dta": pd.read_stata(folder / "effects.dta"),
        "parquet": pd.read_parquet(folder / "effects.parquet"),
        "json": pd.read_json(folder / "effects.json", dtype=False, precise_float=True),
    }
    assert len(words) > 10
    for kind, found in read.items():
        assert sorted(found.columns) == sorted(expected.columns), kind
        for name in expected:
            if name in words:
                there = [unneutralised(text) if kind == "csv" else text for text in found[name]]
                assert there == list(expected[name]), (kind, name)
            else:
                there = [math.nan if pd.isna(value) or value == "" else float(value) for value in found[name]]
                here = expected[name].astype(float).to_numpy(na_value=np.nan)
                assert np.array_equal(np.array(there, dtype=float), here, equal_nan=True), (kind, name)


def unneutralised(text: str) -> str:
    """A csv text without the apostrophe that keeps a spreadsheet from computing it."""
    return text[1:] if text.startswith("'") else text


def test_same_bytes_under_another_hash_seed_locale_zone_and_clock(
    folder: Path, coded: Path, tmp_path: Path
) -> None:
    listing = subprocess.run("locale -a", shell=True, capture_output=True, text=True, check=False)
    environment = {
        **os.environ,
        "PYTHONPATH": str(ROOT),
        "PYTHONHASHSEED": "11",
        "TZ": "Pacific/Auckland",
        "LC_ALL": next((name for name in listing.stdout.split() if name.lower().startswith("de_de")), "C"),
    }
    environment.pop("SOURCE_DATE_EPOCH", None)
    command = [sys.executable, "-m", "tests.output.everything", str(coded), str(tmp_path / "there")]
    subprocess.run(command, check=True, env=environment, cwd=ROOT)
    names = sorted(path.name for path in folder.iterdir())
    assert names == sorted(path.name for path in (tmp_path / "there").iterdir())
    assert len(names) == 19
    differing = [
        name for name in names if (folder / name).read_bytes() != (tmp_path / "there" / name).read_bytes()
    ]
    assert differing == []


def test_matrix_lines_up_with_the_list_of_covariances_and_the_effects(tmp_path: Path) -> None:
    group = "{study},{outcome},two-group,{n},{mean},{sd},22,5.0,1.2"
    cells = [("A", "recall", 20, 5.4, 1.1), ("B", "recall", 30, 5.9, 1.3), ("A", "recall", 24, 5.9, 1.0)]
    cells.append(("A", "speed", 20, 5.2, 0.9))
    names = ("study", "outcome", "n", "mean", "sd")
    lines = [group.format(**dict(zip(names, values, strict=True))) for values in cells]
    sheet = tmp_path / "arms.csv"
    sheet.write_text("\n".join(["study,outcome,design,n_1,mean_1,sd_1,n_2,mean_2,sd_2", *lines]))
    request = Request(sheet=str(sheet), metric="hedges_g", covariance=True)
    result = convert(sheet, to="hedges_g")
    notes = write_conversion(tmp_path / "out", result, request, force=False, tick=lambda *_: None)
    effects = pd.read_csv(tmp_path / "out" / "effects.csv").set_index("row")
    listed = pd.read_csv(tmp_path / "out" / "covariance.csv")
    matrix = pd.read_csv(tmp_path / "out" / "covariance-matrix.csv").set_index("row")
    assert matrix.index.tolist() == [int(name) for name in matrix.columns] == effects.index.tolist()
    assert np.diag(matrix).tolist() == effects["variance"].tolist()
    assert listed[["row", "other_row"]].to_numpy().tolist() == [[2, 4], [2, 5], [4, 5]]
    assert listed["covariance"].notna().tolist() == [True, False, False]
    assert matrix.loc[2, "4"] == matrix.loc[4, "2"] == listed["covariance"][0] > 0
    assert matrix.isna().sum().sum() == 4
    assert matrix.loc[3].tolist() == [0, effects["variance"][3], 0, 0]
    assert [note.split(": cannot")[0] for note in notes] == [
        "covariance.csv: blank for rows 2 and 5",
        "covariance.csv: blank for rows 4 and 5",
    ]
