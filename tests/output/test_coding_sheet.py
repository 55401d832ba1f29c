"""The blank coding sheet: opens clean, keeps digits, is filled in elsewhere and read back."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import CliRunner
from openpyxl import load_workbook

import extractor
from extractor.api import convert
from extractor.codebook import default_codebook, load_codebook, parse_codebook, ready_codebooks
from extractor.commands.sheet import command
from extractor.errors import UsageError
from extractor.output.annotated import write_annotated
from extractor.output.coding_columns import columns_of
from extractor.output.coding_sheet import write_coding_sheet
from extractor.output.request import Request
from extractor.output.tables import write_csv
from extractor.quantities import DESIGNS

TYPED = {
    "Study": "North Quay", "Outcome": "recall", "Effect": "schedule", "F": "4.30", "df1": "2", "df2": "57",
    "p": ".018", "n 1": "20", "M 1": "5.10", "SD 1": "1.20", "n 2": "20", "M 2": "5.90", "SD 2": "1.10",
    "n 3": "20", "M 3": "6.20", "SD 3": "1.30", "Direction": "+", "Page": "3-5",
}  # fmt: skip


@pytest.fixture
def blank(tmp_path: Path) -> Path:
    path = tmp_path / "coding.xlsx"
    write_coding_sheet(load_codebook("one-way"), path)
    return path


def fill(path: Path, values: dict[str, str]) -> None:
    """Type values into the first free row, as a coder would: into cells of the format the column has."""
    book = load_workbook(path)
    sheet = book["coded"]
    headings = [cell.value for cell in sheet[1]]
    for heading, value in values.items():
        cell = sheet.cell(2, headings.index(heading) + 1)
        cell.value = value
        cell.data_type = "s"
    book.save(path)


@pytest.mark.parametrize("name", ready_codebooks())
def test_every_heading_is_read_as_it_is_meant(name: str) -> None:
    codebook = load_codebook(name)
    columns = columns_of(codebook, groups=3)
    meanings = [codebook.meaning(column.heading) for column in columns]
    assert None not in meanings
    assert len(set(meanings)) == len(columns)
    for column, meaning in zip(columns, meanings, strict=True):
        spelled = meaning if isinstance(meaning, str) else "_".join(str(part) for part in meaning if part)
        assert spelled == column.name


def test_columns_the_codebook_does_not_name_are_added_where_every_sheet_needs_them() -> None:
    codebook = parse_codebook(
        'title = "Ours"\n[columns]\nf_value = "F (1st)"\nmean = "M{group}"\n', "ours.toml"
    )
    headings = [column.heading for column in columns_of(codebook, groups=2)]
    expected = [
        "study",
        "outcome",
        "effect",
        "analysis",
        "design",
        "F (1st)",
        "M1",
        "M2",
        "page",
        "quote",
        "coder",
    ]
    assert headings == expected


def test_cells_are_text_and_free_headings_are_locked(blank: Path) -> None:
    sheet = load_workbook(blank)["coded"]
    assert sheet.protection.sheet
    assert sheet.protection.password is None
    for cell in sheet[1]:
        column = sheet.column_dimensions[cell.column_letter]
        assert column.number_format == "@"
        assert not column.protection.locked
        assert cell.protection.locked == (cell.value is not None)


def test_every_heading_says_what_it_means(blank: Path) -> None:
    book = load_workbook(blank)
    for title in ("coded", "groups", "decisions"):
        for cell in book[title][1]:
            assert cell.value is None or len(cell.comment.text) > 4
    notes = {cell.value: cell.comment.text for cell in book["coded"][1] if cell.value}
    assert "F ratio of the effect" in notes["F"]
    assert "mean of group 2" in notes["M 2"]


def test_lists_are_ranges_of_a_hidden_sheet(blank: Path) -> None:
    book = load_workbook(blank)
    assert book["lists"].sheet_state == "hidden"
    rules = [rule for title in ("coded", "decisions") for rule in book[title].data_validations.dataValidation]
    found = set()
    for rule in rules:
        title, cells = rule.formula1.split("!")
        found.add(tuple(cell.value for (cell,) in book[title][cells.replace("$", "")]))
    assert ("+", "-") in found
    assert ("keep", "correct", "waive") in found
    assert ("integer", "binary", "continuous") in found


def test_designs_can_be_chosen_where_rows_must_say(tmp_path: Path) -> None:
    codebook = parse_codebook('[columns]\nf_value = "F"\n', "ours.toml")
    write_coding_sheet(codebook, tmp_path / "c.xlsx")
    book = load_workbook(tmp_path / "c.xlsx")
    cells = [
        rule.formula1.split("!")[1].replace("$", "") for rule in book["coded"].data_validations.dataValidation
    ]
    assert [tuple(cell.value for (cell,) in book["lists"][part]) for part in cells] == [tuple(DESIGNS)]


def test_sheet_that_is_coded_comes_first_to_reader_and_eye(blank: Path) -> None:
    book = load_workbook(blank)
    assert book.sheetnames == ["how to code", "coded", "groups", "decisions", "lists"]
    assert book.active.title == "coded"
    assert book["how to code"]["A1"].value == "How to code: One-way analysis of variance"


def test_filled_sheet_is_read_back(blank: Path) -> None:
    fill(blank, TYPED)
    result = convert(blank, to="omega_squared", codebook="one-way")
    numbers = result.conversion.evidence.table.numbers
    assert numbers["mean", 1].decimals.tolist() == [2]
    assert numbers["f_value", None].decimals.tolist() == [2]
    assert result.effects["status"].tolist() == ["converted"]
    assert result.conversion.evidence.table.fact("page").tolist() == ["3-5"]


def test_round_trip_through_another_program(
    blank: Path, tmp_path: Path, office: Callable[[Path, Path], Path]
) -> None:
    """Blank sheet, filled in, saved by LibreOffice, converted, annotated, converted again: same bytes."""
    fill(blank, TYPED)
    saved = office(blank, tmp_path / "saved")
    here = convert(blank, to="omega_squared", codebook="one-way")
    there = convert(saved, to="omega_squared", codebook="one-way")
    annotated = tmp_path / "annotated.xlsx"
    write_annotated(there, Request(sheet=str(saved), codebook="one-way", metric="omega_squared"), annotated)
    again = convert(annotated, to="omega_squared", codebook="one-way")
    for name, result in {"here": here, "there": there, "again": again}.items():
        write_csv(result.effects, tmp_path / f"{name}.csv")
    assert here.effects["estimate"].notna().all()
    assert (tmp_path / "there.csv").read_bytes() == (tmp_path / "here.csv").read_bytes()
    assert (tmp_path / "again.csv").read_bytes() == (tmp_path / "here.csv").read_bytes()
    book = load_workbook(saved)
    assert book["coded"].protection.sheet
    assert book["lists"].sheet_state == "hidden"
    assert book["coded"].data_validations.count >= 3


def test_same_bytes_under_another_hash_seed_and_clock(blank: Path, tmp_path: Path) -> None:
    other = tmp_path / "other.xlsx"
    script = (
        "import sys; from pathlib import Path; from extractor.codebook import load_codebook;"
        "from extractor.output.coding_sheet import write_coding_sheet;"
        "write_coding_sheet(load_codebook('one-way'), Path(sys.argv[1]))"
    )
    root = str(Path(extractor.__file__).parent.parent)
    environment = {**os.environ, "PYTHONPATH": root, "PYTHONHASHSEED": "9", "TZ": "Asia/Tokyo", "LC_ALL": "C"}
    subprocess.run([sys.executable, "-c", script, other], check=True, env=environment)
    assert other.read_bytes() == blank.read_bytes()


def test_sheet_without_headings_or_with_odd_groups_is_refused(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="names no columns"):
        write_coding_sheet(default_codebook(), tmp_path / "c.xlsx")
    for groups in (0, 21):
        with pytest.raises(UsageError, match="1 to 20 groups"):
            write_coding_sheet(load_codebook("one-way"), tmp_path / "c.xlsx", groups=groups)


def test_command_writes_once_and_replaces_only_when_told(tmp_path: Path) -> None:
    path = tmp_path / "made" / "coding.xlsx"
    run = CliRunner().invoke
    done = run(command, ["two-group", str(path)])
    assert (done.exit_code, done.stdout) == (0, "")
    first = path.read_bytes()
    again = run(command, ["two-group", str(path)])
    assert isinstance(again.exception, UsageError)
    assert "--force" in str(again.exception)
    assert run(command, ["two-group", str(path), "--force"]).exit_code == 0
    assert path.read_bytes() == first
    assert os.listdir(path.parent) == ["coding.xlsx"]


@pytest.mark.parametrize(
    ("words", "message"),
    [(["one-way", "coding.csv"], "must end in .xlsx"), (["one-wya", "c.xlsx"], "one-way")],
)
def test_command_refuses_in_one_line_and_writes_nothing(
    words: list[str], message: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    done = CliRunner().invoke(command, words)
    assert message in str(done.exception)
    assert "\n" not in str(done.exception)
    assert os.listdir(tmp_path) == []


def test_more_groups_give_more_columns(tmp_path: Path) -> None:
    write_coding_sheet(load_codebook("one-way"), tmp_path / "c.xlsx", groups=5)
    headings = [cell.value for cell in load_workbook(tmp_path / "c.xlsx")["coded"][1]]
    assert headings.index("n 5") - headings.index("n 4") == headings.index("n 2") - headings.index("n 1")
    assert "n 6" not in headings
