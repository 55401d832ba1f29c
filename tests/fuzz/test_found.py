"""Inputs that once ended in a traceback or without end, each as small as it can be."""

from __future__ import annotations

import datetime
import warnings
import zipfile
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import pytest
from click.testing import CliRunner

from extractor.api import audit_sheet, convert
from extractor.commands.main import cli
from extractor.routes.sensitivity import in_standard_errors
from tests.fuzz.faults import as_csv
from tests.fuzz.judging import time_limit

MANY = [
    ["study", "design", "term", "f_value", "df_effect", "df_error"],
    ["A", "factorial", "t", "2", "1000000", "20"],
]
PLAIN = [["study", "design", "f_value", "df_effect", "df_error"], ["A", "one-way", "4.31", "2", "57"]]


def run(*words: object) -> tuple[int, str]:
    found = CliRunner().invoke(cli, [str(word) for word in words])
    assert found.exception is None or isinstance(found.exception, SystemExit)
    return found.exit_code, found.output


def test_a_million_groups_to_ask_for(tmp_path: Path) -> None:
    with time_limit(5):
        assert (
            run("unlock", as_csv(tmp_path, MANY), "--to", "hedges_g", "--letters", tmp_path / "letters")[0]
            == 0
        )


def test_weights_beyond_doubles() -> None:
    cells = {"design": "one-way", "contrast": "1e400, -1e400, 0"}
    for group in (1, 2, 3):
        cells |= {f"n_{group}": "20", f"mean_{group}": f"{group}.1", f"sd_{group}": "1.5"}
    found = convert(pd.DataFrame([cells], dtype=object), to="hedges_g")
    assert found.effects["status"].tolist() == ["blocked"]
    assert "a weight that is no number" in found.effects["reason"][0]


def test_half_a_surrogate_pair() -> None:
    cells = {
        "study": "Site \ud800",
        "design": "one-way",
        "f_value": "4.31",
        "df_effect": "2",
        "df_error": "57",
    }
    frame = pd.DataFrame({name: pd.Series([cell], dtype=object) for name, cell in cells.items()})
    assert convert(frame, to="omega_squared").effects["study"].tolist() == ["Site ?"]


def test_a_bound_on_the_mean_of_a_part() -> None:
    rows = pd.DataFrame([{"analysis": "A1", "design": "one-way"}], dtype=object)
    groups = pd.DataFrame(
        {
            "analysis": ["A1"] * 3,
            "group": ["a", "a", "b"],
            "n": ["20", "22", "21"],
            "mean": ["> 5", "4.1", "5"],
        }
        | {"sd": ["1.1", "1.2", "1.3"]}
    )
    assert convert(rows, to="omega_squared", groups=groups).effects["status"].tolist() != ["converted"]


def test_a_name_longer_than_any_file(tmp_path: Path) -> None:
    status, said = run("convert", tmp_path / ("x" * 400 + ".csv"), "--to", "r", "--out", tmp_path / "out")
    assert status == 4
    assert "cannot be opened" in said


def test_a_date_no_calendar_has(tmp_path: Path) -> None:
    book = openpyxl.Workbook()
    for row in PLAIN:
        book.worksheets[0].append(row)
    book.worksheets[0].append(["B", "one-way", 1e308, 2, 57])
    book.worksheets[0]["C3"].number_format = "yyyy-mm-dd"
    book.worksheets[0]["F1"] = datetime.date(2024, 5, 3)
    book.save(tmp_path / "sheet.xlsx")
    words = ("--to", "omega_squared", "--out", tmp_path / "out", "--format", "xlsx")
    assert run("convert", tmp_path / "sheet.xlsx", *words)[0] == 0


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("derivations.json", "[" * 100_000),
        ("derivations.json", '{"rows": [1], "relations": {}}'),
        ("effects.csv", None),
    ],
)
def test_damaged_folders_of_runs(tmp_path: Path, name: str, content: str | None) -> None:
    out = tmp_path / "out"
    assert run("convert", as_csv(tmp_path, PLAIN), "--to", "omega_squared", "--out", out)[0] == 0
    path = out / name
    path.write_text(
        path.read_text("utf-8").replace("0.", "x.") if content is None else content, encoding="utf-8"
    )
    status, said = run("changes", out, out)
    assert status == 4
    assert name in said and "damaged" in said


def test_a_bound_without_an_upper_end_among_the_terms_of_a_model() -> None:
    rows = [
        {
            "analysis": "1",
            "design": "factorial",
            "term": term,
            "f_value": f,
            "df_effect": "1",
            "df_error": "36",
        }
        for term, f in (("a", "> 4"), ("b", "2.5"), ("a:b", "1.2"))
    ]
    assert convert(pd.DataFrame(rows), to="eta_squared").effects["status"].isin(["bounded", "blocked"]).all()


@pytest.mark.parametrize("size", ["-5", ""])
def test_subgroups_of_which_one_has_no_size_are_not_merged(size: str) -> None:
    lines = [("a", size, "3.1", "1.2"), ("a", "6", "3.3", "1.1"), ("b", "11", "2.9", "1.3")]
    groups = pd.DataFrame([{"analysis": "1", "group": g, "n": n, "mean": m, "sd": s} for g, n, m, s in lines])
    row = {"analysis": "1", "design": "one-way", "f_value": "3.2", "df_effect": "1", "df_error": "20"}
    found = audit_sheet(pd.DataFrame([row]), groups=groups).findings
    assert [finding.message for finding in found] == [
        "lines 2, 3 are not merged: each needs an n of 0 or more"
    ]


def test_distances_in_standard_errors_of_effects_without_variance() -> None:
    found = in_standard_errors(np.array([0.0, 1.0, 1.0]), np.array([0.0, np.nan, 4.0]))
    np.testing.assert_array_equal(found, [np.nan, np.nan, 0.5])


@pytest.mark.parametrize(
    ("at", "value", "shown"), [("XFD1048576", "far", "General"), ("B2", 1e299, "yyyy-mm-dd")]
)
def test_odd_cells_on_a_sheet_beside_the_coded_one(
    tmp_path: Path, at: str, value: object, shown: str
) -> None:
    book = openpyxl.Workbook()
    for row in PLAIN:
        book.worksheets[0].append(row)
    beside = book.create_sheet("beside")
    beside[at].value, beside[at].number_format = value, shown
    beside["A1"] = "=1+1"
    book.save(tmp_path / "sheet.xlsx")
    words = ("--to", "omega_squared", "--out", tmp_path / "out", "--format", "xlsx")
    with time_limit(10), warnings.catch_warnings():
        warnings.simplefilter("error")
        assert run("convert", tmp_path / "sheet.xlsx", *words)[0] == 0
    assert openpyxl.load_workbook(tmp_path / "out" / "annotated.xlsx")["beside"][at].value is not None


def test_damaged_text_in_two_bytes_a_letter_worked_through_in_blocks(tmp_path: Path) -> None:
    (tmp_path / "sheet.csv").write_bytes(b"\xff\xfe" + "study,f_value\nA,4.31\n".encode("utf-16-le")[:-1])
    words = ("--to", "omega_squared", "--out", tmp_path / "out", "--workers", "1")
    status, said = run("convert", tmp_path / "sheet.csv", *words)
    assert (status, "damaged UTF-16 text" in said) == (4, True)


def test_a_workbook_without_an_ending(tmp_path: Path) -> None:
    book = openpyxl.Workbook()
    for row in PLAIN:
        book.worksheets[0].append(row)
    book.worksheets[0]["H1"] = "=1+1"
    book.save(tmp_path / "sheet.xlsx")
    (tmp_path / "sheet.xlsx").rename(tmp_path / "sheet")
    words = ("--to", "omega_squared", "--out", tmp_path / "out", "--format", "xlsx")
    assert run("convert", tmp_path / "sheet", *words)[0] == 0


def test_an_interrupt_while_a_class_is_made(monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupted(name: str) -> None:
        raise RuntimeError("Error calling __set_name__") from KeyboardInterrupt()

    monkeypatch.setattr("extractor.commands.main.import_module", interrupted)
    assert run("convert", "sheet.csv") == (1, "extractor: interrupted\n")


def test_an_estimate_beyond_its_support_by_an_error_of_floating_point() -> None:
    row = {"design": "one-way", "ss_effect": 308.2, "ss_error": 3527.1, "df_error": 63, "n_total": 65}
    effects = convert(pd.DataFrame([row | {"df_effect": 10**15}]), to="omega_squared").effects
    assert effects["estimate"][0] <= 1


def test_a_workbook_whose_looks_are_damaged_is_copied_as_text(tmp_path: Path) -> None:
    book = openpyxl.Workbook()
    for row in PLAIN:
        book.worksheets[0].append(row)
    book.save(tmp_path / "whole.xlsx")
    with (
        zipfile.ZipFile(tmp_path / "whole.xlsx") as whole,
        zipfile.ZipFile(tmp_path / "sheet.xlsx", "w") as damaged,
    ):
        for name in whole.namelist():
            body = whole.read(name)
            damaged.writestr(name, body.replace(b'<c r="C2"', b'<c r="C2" s="99"'))
    words = ("--to", "omega_squared", "--out", tmp_path / "out", "--format", "xlsx")
    status, said = run("convert", tmp_path / "sheet.xlsx", *words)
    assert (status, "cannot be copied (IndexError)" in said) == (0, True)
    copy = openpyxl.load_workbook(tmp_path / "out" / "annotated.xlsx")
    assert copy["Sheet"]["C2"].value == "4.31"
