"""The annotated workbook: values untouched, marks where findings are, the same bytes every time."""

from __future__ import annotations

import zipfile
from collections.abc import Callable
from pathlib import Path

import openpyxl
import pandas as pd
import pytest
from openpyxl import Workbook, load_workbook
from openpyxl.comments import Comment

from extractor.api import Result, convert
from extractor.errors import UsageError
from extractor.findings import Finding, Severity
from extractor.output import annotated
from extractor.output.annotated import write_annotated
from extractor.output.marks import _signed
from extractor.output.request import Request
from extractor.output.sheets import put_number, put_text

Converted = Callable[[str], tuple[Result, Request]]
OURS = ["effects", "chart", "findings", "routes", "routes not taken", "settings"]


def annotate(converted: Converted, folder: Path, metric: str = "omega_squared") -> tuple[Result, Path]:
    result, request = converted(metric)
    path = folder / "annotated.xlsx"
    write_annotated(result, request, path)
    return result, path


def shown_values(path: Path, title: str) -> list[list[object]]:
    return [[(c.value, c.data_type) for c in row] for row in load_workbook(path)[title].iter_rows()]


def test_source_is_untouched_and_values_are_copied(converted: Converted, coded: Path, tmp_path: Path) -> None:
    before = coded.read_bytes()
    _, path = annotate(converted, tmp_path)
    assert coded.read_bytes() == before
    assert shown_values(path, "coded") == shown_values(coded, "coded")
    assert load_workbook(path).sheetnames == ["coded", "decisions", *OURS]


def test_suspect_cell_is_marked_by_sign_fill_and_note(converted: Converted, tmp_path: Path) -> None:
    result, path = annotate(converted, tmp_path)
    finding = next(f for f in result.audit.findings if f.severity == Severity.INCONSISTENT)
    assert finding.cells[0].endswith("[V5]")
    cell = load_workbook(path)["coded"]["V5"]
    assert cell.value == "0.20"
    assert cell.number_format == '"!! "@'
    assert cell.fill.fill_type == "solid"
    assert finding.message in cell.comment.text
    assert "not a verdict" in cell.comment.text


def test_cells_without_finding_are_not_marked(converted: Converted, tmp_path: Path) -> None:
    _, path = annotate(converted, tmp_path)
    sheet = load_workbook(path)["coded"]
    assert all(cell.comment is None and cell.fill.fill_type is None for cell in sheet[2])


def test_read_back_gives_the_same_effects(converted: Converted, tmp_path: Path) -> None:
    result, path = annotate(converted, tmp_path)
    again = convert(path, to="omega_squared")
    pd.testing.assert_frame_equal(again.effects, result.effects)
    pd.testing.assert_frame_equal(again.findings, result.findings)


def test_annotating_again_replaces_what_the_first_run_added(converted: Converted, tmp_path: Path) -> None:
    _, path = annotate(converted, tmp_path)
    second = tmp_path / "second.xlsx"
    write_annotated(
        convert(path, to="omega_squared"), Request(sheet=str(path), metric="omega_squared"), second
    )
    one, two = load_workbook(path), load_workbook(second)
    assert two.sheetnames == one.sheetnames
    for cell in (cell for row in one["coded"].iter_rows() for cell in row):
        other = two["coded"][cell.coordinate]
        assert other.number_format == cell.number_format
        assert (other.comment and other.comment.text) == (cell.comment and cell.comment.text)


def test_no_text_is_a_formula_or_an_error(converted: Converted, tmp_path: Path) -> None:
    _, path = annotate(converted, tmp_path)
    found = {
        (cell.value, cell.data_type)
        for sheet in load_workbook(path).worksheets
        for row in sheet.iter_rows()
        for cell in row
        if cell.value in ("=1+1", "#N/A")
    }
    assert found == {("=1+1", "s"), ("#N/A", "s")}
    with zipfile.ZipFile(path) as archive:
        sheets = [name for name in archive.namelist() if name.startswith("xl/worksheets/sheet")]
        assert not any(b"<f>" in archive.read(name) for name in sheets)


def test_effects_keep_every_digit(converted: Converted, tmp_path: Path) -> None:
    result, path = annotate(converted, tmp_path)
    read = pd.read_excel(path, sheet_name="effects", keep_default_na=False, na_values={"estimate": [""]})
    assert read["estimate"].tolist()[:4] == result.effects["estimate"].tolist()[:4]
    assert read["notes"].tolist()[1:4] == ["=1+1", "#N/A", "<script>alert(1)</script>"]


def test_result_sheets_have_frozen_headings_filters_and_formats(converted: Converted, tmp_path: Path) -> None:
    result, path = annotate(converted, tmp_path)
    book = load_workbook(path)
    for title in OURS:
        assert book[title].freeze_panes is not None
        assert book[title].auto_filter.ref is not None
    effects = book["effects"]
    headings = [cell.value for cell in effects[1]]
    estimate = effects.cell(2, headings.index("estimate") + 1)
    assert estimate.number_format == "0.0000"
    assert effects.max_row == len(result.effects) + 1


def test_chart_is_drawn_from_the_cells_beside_it(converted: Converted, tmp_path: Path) -> None:
    result, path = annotate(converted, tmp_path)
    pointed = int((result.effects["status"] == "converted").sum())
    with zipfile.ZipFile(path) as archive:
        chart = archive.read("xl/charts/chart1.xml").decode()
    assert f"'chart'!$F$2:$F${pointed + 1}" in chart
    assert chart.count("<barChart>") == chart.count("<errBars>") == 1


def test_finding_leads_to_its_cell(converted: Converted, tmp_path: Path) -> None:
    _, path = annotate(converted, tmp_path)
    links = [cell.hyperlink.location for cell in load_workbook(path)["findings"]["C"] if cell.hyperlink]
    assert "'coded'!V5" in links


def test_stored_results_of_formulas_survive(tmp_path: Path) -> None:
    """A result stored beside a formula is read, and is still there in the copy."""
    path = tmp_path / "coded.xlsx"
    book = Workbook()
    sheet = book.worksheets[0]
    for row in (["study", "design", "f_value", "df_effect", "df_error", "remark"], ["Site 1", "one-way"]):
        sheet.append(row)
    for at, formula in (("C2", "=2.15*2"), ("D2", "=1+1"), ("E2", "=60-3"), ("F2", '="a"&"<b"')):
        sheet[at] = formula
    book.save(path)
    _store(path, {"C2": (4.3, ""), "D2": (2, ""), "E2": (57, ""), "F2": ("a&lt;b", ' t="str"')})
    result = convert(path, to="omega_squared")
    assert result.effects["status"].tolist() == ["converted"]
    copy = tmp_path / "annotated.xlsx"
    write_annotated(result, Request(sheet=str(path), metric="omega_squared"), copy)
    assert load_workbook(copy)[sheet.title]["E2"].value == "=60-3"
    values = load_workbook(copy, data_only=True)[sheet.title]
    assert [values[at].value for at in ("C2", "D2", "E2", "F2")] == [4.3, 2, 57, "a<b"]
    pd.testing.assert_frame_equal(convert(copy, to="omega_squared").effects, result.effects)


def _store(path: Path, results: dict[str, tuple[object, str]]) -> None:
    """Store results of formulas, as spreadsheet programs do."""
    with zipfile.ZipFile(path) as archive:
        members = {name: archive.read(name) for name in archive.namelist()}
    text = members["xl/worksheets/sheet1.xml"].decode()
    for at, (value, kind) in results.items():
        start = text.index(f'<c r="{at}"')
        end = text.index("</c>", start)
        cell = text[start:end].replace("<v />", f"<v>{value}</v>").replace(f'r="{at}"', f'r="{at}"{kind}')
        text = text[:start] + cell + text[end:]
    members["xl/worksheets/sheet1.xml"] = text.encode()
    with zipfile.ZipFile(path, "w") as archive:
        for name, body in members.items():
            archive.writestr(name, body)


def test_numbers_of_seventeen_digits_survive(tmp_path: Path) -> None:
    path = tmp_path / "coded.xlsx"
    book = Workbook()
    sheet = book.worksheets[0]
    sheet.append(["study", "design", "reported", "my number"])
    sheet.append(["Site 1", "one-way", "F(2, 57) = 4.31"])
    put_number(sheet["D2"], 0.1 + 0.2, "General")
    book.save(path)
    copy = tmp_path / "annotated.xlsx"
    write_annotated(convert(path, to="omega_squared"), Request(sheet=str(path)), copy)
    assert load_workbook(copy)[sheet.title]["D2"].value == 0.1 + 0.2


def test_own_notes_of_the_coder_are_kept(coded: Path, tmp_path: Path) -> None:
    book = load_workbook(coded)
    book["coded"]["V5"].comment = Comment("from table 2", "coder")
    book.save(coded)
    path = tmp_path / "annotated.xlsx"
    write_annotated(convert(coded, to="omega_squared"), Request(sheet=str(coded)), path)
    text = load_workbook(path)["coded"]["V5"].comment.text
    assert text.startswith("from table 2")
    assert "Inconsistent" in text


def test_csv_becomes_a_sheet_with_the_same_addresses(coded: Path, tmp_path: Path) -> None:
    rows = list(openpyxl.load_workbook(coded)["coded"].iter_rows(values_only=True))
    text = "\n".join(";".join("" if v is None else str(v) for v in row) for row in rows)
    (tmp_path / "coded.csv").write_text(text, encoding="utf-8")
    source = str(tmp_path / "coded.csv")
    path = tmp_path / "annotated.xlsx"
    write_annotated(convert(source, to="omega_squared"), Request(sheet=source), path)
    sheet = load_workbook(path)["coded"]
    assert (sheet["V5"].value, sheet["V5"].number_format) == ("0.20", '"!! "@')
    assert (sheet["F3"].value, sheet["F3"].number_format) == ("3.98", "@")


def test_input_that_is_no_file_gives_results_only(coded: Path, tmp_path: Path) -> None:
    frame = pd.read_excel(coded, sheet_name="coded", dtype=str, keep_default_na=False)
    path = tmp_path / "annotated.xlsx"
    notes = write_annotated(convert(frame, to="omega_squared"), Request(sheet="-"), path)
    assert load_workbook(path).sheetnames == OURS
    assert any("no copy" in note for note in notes)


def test_sheet_of_the_coder_with_our_name_is_kept(coded: Path, tmp_path: Path) -> None:
    book = load_workbook(coded)
    book.create_sheet("effects")["A1"] = "mine"
    book.save(coded)
    path = tmp_path / "annotated.xlsx"
    write_annotated(convert(coded, to="omega_squared"), Request(sheet=str(coded)), path)
    made = load_workbook(path)
    assert made["effects"]["A1"].value == "mine"
    assert made["effects 2"]["A1"].value == "row"


def test_control_characters_and_long_texts_are_said(coded: Path, tmp_path: Path) -> None:
    result = convert(coded, to="omega_squared")
    result.conversion.columns["reason"][0] = "a\x07b" + "x" * 40_000
    path = tmp_path / "annotated.xlsx"
    notes = write_annotated(result, Request(sheet=str(coded)), path)
    assert any("1 texts" in note for note in notes)
    headings = [cell.value for cell in load_workbook(path)["effects"][1]]
    value = load_workbook(path)["effects"].cell(2, headings.index("reason") + 1).value
    assert value.startswith("abxxx")
    assert len(value) == 32_767


def test_too_many_rows_are_refused(
    converted: Converted, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(annotated, "MOST", 3)
    with pytest.raises(UsageError, match="at most 3 rows"):
        annotate(converted, tmp_path)


@pytest.mark.parametrize(
    ("code", "text", "expected"),
    [
        ("General", True, '"!! "@'),
        ("@", False, '"!! "General'),
        ("0.00", False, '"!! "0.00'),
        ('0.0;[Red]-0.0;"a;b"', False, '"!! "0.0;[Red]"!! "-0.0;"!! ""a;b"'),
        (r"0\;0", False, r'"!! "0\;0'),
    ],
)
def test_sign_goes_before_every_section_of_a_format(code: str, text: bool, expected: str) -> None:
    assert _signed(code, "!!", text=text) == expected


def test_finding_about_another_sheet_is_marked_there(coded: Path, tmp_path: Path) -> None:
    book = load_workbook(coded)
    put_text(book.create_sheet("tables")["B2"], "3.1")
    book.save(coded)
    result = convert(coded, to="omega_squared")
    result.audit.findings.append(
        Finding(
            2, "North Quay", Severity.IMPOSSIBLE, "support", ("sd [tables!B2]",), "3.1", "an invented finding"
        )
    )
    path = tmp_path / "annotated.xlsx"
    write_annotated(result, Request(sheet=str(coded)), path)
    assert load_workbook(path)["tables"]["B2"].number_format == '"!!! "@'


def test_survives_a_save_by_another_program(
    converted: Converted, tmp_path: Path, office: Callable[[Path, Path], Path]
) -> None:
    result, path = annotate(converted, tmp_path)
    saved = office(path, tmp_path / "saved")
    again = convert(saved, to="omega_squared")
    pd.testing.assert_frame_equal(again.effects, result.effects)
