"""Every writer gives back the table it was given, and the same bytes each time."""

from __future__ import annotations

import csv
import io
import json
import math
import warnings
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from extractor.errors import UsageError
from extractor.output import tables
from extractor.output.tables import (
    WRITERS,
    neutralised,
    write_csv,
    write_dta,
    write_json,
    write_parquet,
)
from extractor.output.workbook import write_xlsx

FLOATS = [0.1 + 0.2, math.nan, -1e-17, 123456789.12345678, 5e-324, -0.5, 2 / 3]


@pytest.fixture
def frame() -> pd.DataFrame:
    return pd.DataFrame(
        {
            "row": np.arange(2, 9),
            "study": ["North Quay", "", "Zoë, «9»", 'says "no"', "two\nlines", "=1+1", "ω² < 0"],
            "estimate": FLOATS,
            "n_total": pd.array([60, None, 40, 2, 3, 4, 5], dtype="Int64"),
            "class": ["a", "", "", "", "", "", "z"],
            "my notes": ["-5", "+x", "@a", "plain", "#N/A", "", "'t"],
        }
    )


def same_floats(found: object, expected: list[float]) -> bool:
    return np.array_equal(np.asarray(found, dtype=float), np.asarray(expected), equal_nan=True)


def test_csv_reads_back(frame: pd.DataFrame, tmp_path: Path) -> None:
    write_csv(frame, tmp_path / "t.csv", raw=True)
    found = pd.read_csv(tmp_path / "t.csv", keep_default_na=False, dtype=str)
    for name in ("estimate", "n_total", "row"):
        # as Python reads them; pandas once rounded them otherwise
        found[name] = [float(text or "nan") for text in found[name]]
    assert list(found.columns) == list(frame.columns)
    assert same_floats(found["estimate"], FLOATS)
    assert same_floats(found["n_total"], [60, math.nan, 40, 2, 3, 4, 5])
    assert list(found["row"]) == list(frame["row"])
    for name in ("study", "class", "my notes"):
        assert list(found[name]) == list(frame[name])


def test_csv_is_utf8_with_line_feeds_and_no_mark(frame: pd.DataFrame, tmp_path: Path) -> None:
    write_csv(frame, tmp_path / "t.csv")
    content = (tmp_path / "t.csv").read_bytes()
    assert content.startswith(b"row,study,estimate")
    assert b"\r" not in content
    assert content.endswith(b"\n")
    assert "Zoë" in content.decode("utf-8")


def test_csv_numbers_are_never_neutralised(tmp_path: Path) -> None:
    write_csv(pd.DataFrame({"x": [-0.5, math.inf, -math.inf, 1e300], "k": [-1, 2, 3, 4]}), tmp_path / "t.csv")
    assert (tmp_path / "t.csv").read_text() == "x,k\n-0.5,-1\nINF,2\n-INF,3\n1e+300,4\n"


@pytest.mark.parametrize("text", ["=1+1", "+x", "-x", "@a", "\tx", "\rx", "\nx", "=", "-", "--5", "+1+1"])
def test_formula_beginnings_are_neutralised(text: str) -> None:
    """The dangerous first characters are those of the OWASP page on CSV injection."""
    assert neutralised(text) == "'" + text


@pytest.mark.parametrize("text", ["a;=1", "a\t=1", "a\n=1", "a\r=1"])
def test_formula_after_a_cell_break_is_neutralised(text: str) -> None:
    assert neutralised(text) == text.replace("=", "'=")


@pytest.mark.parametrize("text", ["", "plain", "a=b", "-5", "+.5", "-1.5e-3", "1-2", "x; -y", "'=1"])
def test_harmless_texts_stay(text: str) -> None:
    assert neutralised(text) == text


@settings(max_examples=200, deadline=None)
@given(st.lists(st.text(st.characters(codec="utf-8")), min_size=1))
def test_no_csv_cell_begins_like_a_formula(texts: list[str]) -> None:
    content = "".join(tables.csv_lines(pd.DataFrame({"x": texts, "k": 1})))
    rows = list(csv.reader(io.StringIO(content, newline="")))
    assert rows[0] == ["x", "k"]
    for (cell, _), text in zip(rows[1:], texts, strict=True):
        assert cell.replace("'", "") == text.replace("'", "")
        assert cell[:1] not in ("=", "@", "\t", "\r", "\n")
        if cell[:1] in ("+", "-"):
            float(cell)


def test_json_reads_back(frame: pd.DataFrame, tmp_path: Path) -> None:
    write_json(frame, tmp_path / "t.json")
    content = (tmp_path / "t.json").read_text(encoding="utf-8")
    assert content.endswith("]\n")
    found = json.loads(content)
    assert [list(record) for record in found] == [sorted(frame.columns)] * len(frame)
    back = pd.DataFrame(found)
    assert same_floats(back["estimate"].astype(float), FLOATS)
    for name in ("study", "class", "my notes"):
        assert list(back[name]) == list(frame[name])


def test_json_of_no_rows(tmp_path: Path) -> None:
    write_json(pd.DataFrame({"x": []}), tmp_path / "t.json")
    assert json.loads((tmp_path / "t.json").read_text()) == []


def test_xlsx_reads_back_every_digit(frame: pd.DataFrame, tmp_path: Path) -> None:
    assert write_xlsx(frame, tmp_path / "t.xlsx") == []
    found = pd.read_excel(tmp_path / "t.xlsx", keep_default_na=False, na_values={"estimate": [""]})
    assert list(found.columns) == list(frame.columns)
    assert same_floats(found["estimate"], FLOATS)
    for name in ("study", "class", "my notes"):
        assert list(found[name]) == list(frame[name])


def test_xlsx_has_no_live_formula_and_a_frozen_heading(frame: pd.DataFrame, tmp_path: Path) -> None:
    write_xlsx(frame, tmp_path / "t.xlsx")
    sheet = openpyxl.load_workbook(tmp_path / "t.xlsx")["t"]
    assert sheet.freeze_panes == "A2"
    assert sheet["B7"].value == "=1+1"
    assert {cell.data_type for row in sheet.iter_rows() for cell in row} <= {"s", "n", "inlineStr"}


def test_xlsx_says_what_it_removed(tmp_path: Path) -> None:
    odd = pd.DataFrame({"x": ["a\x00b", "c\x1b[31m", "d" * 40_000, "fine"]})
    notes = write_xlsx(odd, tmp_path / "t.xlsx")
    assert notes == [
        "xlsx: control characters removed from 2 cells",
        "xlsx: 1 texts cut after 32767 characters, the most a cell holds",
    ]
    found = pd.read_excel(tmp_path / "t.xlsx")
    assert list(found["x"]) == ["ab", "c[31m", "d" * 32_767, "fine"]


def test_parquet_reads_back(frame: pd.DataFrame, tmp_path: Path) -> None:
    pytest.importorskip("pyarrow")
    write_parquet(frame, tmp_path / "t.parquet")
    found = pd.read_parquet(tmp_path / "t.parquet")
    assert same_floats(found["estimate"], FLOATS)
    assert found["n_total"].isna().tolist() == frame["n_total"].isna().tolist()
    assert list(found["study"]) == list(frame["study"])


def test_parquet_without_its_package_names_the_extra(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setattr("importlib.util.find_spec", lambda name: None)
    with pytest.raises(UsageError, match=r"anova-extractor\[parquet\]"):
        write_parquet(pd.DataFrame({"x": [1]}), tmp_path / "t.parquet")
    assert not (tmp_path / "t.parquet").exists()


def test_dta_reads_back_under_names_it_allows(frame: pd.DataFrame, tmp_path: Path) -> None:
    frame["long"] = ["é" * 1500, *[""] * 6]
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        notes = write_dta(frame, tmp_path / "t.dta")
    assert notes == [
        "dta: column 'class' is called class_2",
        "dta: column 'my notes' is called my_notes",
        "dta: column 'long' is called long_2",
    ]
    found = pd.read_stata(tmp_path / "t.dta")
    assert list(found["row"]) == list(frame["row"])
    assert same_floats(found["estimate"], FLOATS)
    assert list(found["study"]) == list(frame["study"])
    assert found["long_2"][0] == "é" * 1500


def test_dta_leaves_out_what_it_cannot_hold(tmp_path: Path) -> None:
    write_dta(pd.DataFrame({"x": [math.inf, -math.inf, 1.0]}), tmp_path / "t.dta")
    assert same_floats(pd.read_stata(tmp_path / "t.dta")["x"], [math.nan, math.nan, 1.0])


def test_dta_names_are_allowed_and_distinct() -> None:
    names = ["a b", "a-b", "a_b", "", "9", "x" * 40, "x" * 41, "str5", "_n", "µ"]
    found = tables._stata_names(names)
    assert len(set(found)) == len(names)
    for name in found:
        assert name.isascii()
        assert name.isidentifier()
        assert len(name) <= 32


@pytest.mark.parametrize("ending", sorted(WRITERS))
def test_same_table_same_bytes(frame: pd.DataFrame, tmp_path: Path, ending: str) -> None:
    if ending == "parquet":
        pytest.importorskip("pyarrow")
    for folder in ("one", "two"):
        (tmp_path / folder).mkdir()
        WRITERS[ending](frame, tmp_path / folder / f"t.{ending}")
    assert (tmp_path / "one" / f"t.{ending}").read_bytes() == (tmp_path / "two" / f"t.{ending}").read_bytes()


@pytest.mark.parametrize("ending", sorted(WRITERS))
def test_a_table_without_rows_is_written(tmp_path: Path, ending: str) -> None:
    if ending == "parquet":
        pytest.importorskip("pyarrow")
    empty = pd.DataFrame({"row": pd.Series([], dtype=int), "x": pd.Series([], dtype=object)})
    WRITERS[ending](empty, tmp_path / f"t.{ending}")
    assert (tmp_path / f"t.{ending}").stat().st_size > 0
