"""What would take all memory or all day is refused or read at once; what hides is said; nothing leaves the folder."""

from __future__ import annotations

import io
import os
import random
import socket
import sys
import threading
import zipfile
from collections.abc import Callable
from pathlib import Path

import openpyxl
import pandas as pd
import pytest
from click.testing import CliRunner

from extractor.codebook import default_codebook, parse_codebook
from extractor.commands.main import cli
from extractor.decisions import read_decisions
from extractor.errors import InvalidCodebook, UnreadableInput
from extractor.groups_sheet import with_groups
from extractor.output.tables import neutralised
from extractor.printed.apa import columns_from_text
from extractor.printed.number_format import UNDECIDED, shown_by
from extractor.printed.reported import read_number
from extractor.quantities import VOCABULARY
from extractor.sheet import read_table
from extractor.source import reader, workbook
from extractor.source.grid import MOST_COLUMNS
from extractor.table import ReportedTable
from tests.fuzz import bomb_faults
from tests.fuzz.faults import delimited
from tests.fuzz.judging import time_limit
from tests.fuzz.workbook_faults import book_of, saved, write

SECONDS = 3.0
"""Limit of work for what takes a few milliseconds on a machine of today."""

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="the time limit needs a signal")
HEADINGS = "study,f_value"
ROW = "Site 1,4.31"


def read(folder: Path, text: str | bytes) -> ReportedTable:
    path = folder / "sheet.csv"
    path.write_bytes(text if isinstance(text, bytes) else text.encode("utf-8"))
    return read_table(path, default_codebook())


def members_of(rows: list[list[object]]) -> dict[str, bytes]:
    book = openpyxl.Workbook()
    for row in rows:
        book.worksheets[0].append(row)
    return saved(book)


PLAIN: list[list[object]] = [["study", "f_value"], ["Site 1", 4.31]]


# ---- texts on which a careless expression takes for ever

CELLS = (
    "1" + "*" * 150 + "x",
    "1" + " *" * 90 + "x",
    "1" + "ᵃ" * 150 + "x",
    "1" + "^a" * 90 + "x",
    "1a" + ", a" * 60 + "x",
    "1," * 99,
    "1 " * 99,
    "1 000 " * 30 + "x",
    "1x10^" * 39,
    "<" * 199,
    "(" * 199,
    "jan " * 49,
)


@pytest.mark.parametrize("cell", CELLS, ids=lambda cell: cell[:8])
@pytest.mark.parametrize("name", ["f_value", "p_value", "n"])
def test_cells(cell: str, name: str) -> None:
    with time_limit(SECONDS):
        reading = read_number(cell, VOCABULARY[name])
    assert reading.problem or "left out" in reading.understood


def test_footnote_marks_are_still_left_out() -> None:
    for text in ("4.31*", "4.31 **", "4.31***†", "4.31 * †", "4.31ᵃᵇ", "4.31^a^b", "4.31 ^ab *"):
        assert read_number(text, VOCABULARY["f_value"]).value == 4.31, text


PIECES = (
    "F(2, 57) = 4.31, ",
    "df = 1, ",
    "N = 1 ",
    "d = .1 ",
    "adj. d = 1 ",
    "d = 1, 95% CI [1, 2] ",
    "CI for a ",
    "F(1 ",
    "F_{2,",
    "1 000 ",
    "a_b",
    "n. s. ",
    "χ²(1, N = 2) = 3, ",
)


@pytest.mark.parametrize("piece", PIECES)
@pytest.mark.parametrize("mark", [".", ","])
def test_running_text(piece: str, mark: str) -> None:
    with time_limit(SECONDS):
        readings, understood, problem = columns_from_text(piece * (5000 // len(piece)), mark)
    assert readings or understood or problem


@pytest.mark.parametrize("code", ["[" * 100_000, "[<" * 50_000, '"' * 100_000, "0,0" * 40_000, ";" * 100_000])
def test_number_formats(code: str) -> None:
    with time_limit(SECONDS):
        assert shown_by(code, 1.0) == UNDECIDED


@pytest.mark.parametrize(
    "text", ["1" * 200_000 + "x", "\n" * 200_000, "; " * 100_000 + "x", " " * 200_000 + "x"]
)
def test_texts_that_are_no_formula(text: str) -> None:
    with time_limit(SECONDS):
        assert neutralised(text).endswith(text[-10:])


@pytest.mark.parametrize(
    "text", [" =1", "\u00a0=1", "\ufeff=1", "\x00=1", "＝1", "＋1+1", "－1+1", "＠x", "\n\n=1"]
)
def test_texts_that_are_formulas_all_the_same(text: str) -> None:
    assert neutralised(text).startswith("'")


def test_decisions_of_many_letters(tmp_path: Path) -> None:
    lines = [["row", "cell", "decision", "by"], ["2", "a" + " " * 100_000 + "b", "keep", "us"]]
    (tmp_path / "decisions.csv").write_text(delimited(lines), encoding="utf-8")
    with time_limit(SECONDS):
        assert len(read_decisions(tmp_path / "decisions.csv")) == 1


@pytest.mark.parametrize("row", ["9" * 5000, "9" * 11, "0", "1.5"])
def test_rows_no_sheet_has(tmp_path: Path, row: str) -> None:
    (tmp_path / "decisions.csv").write_text(
        delimited([["row", "cell", "decision", "by"], [row, "F", "keep", "us"]])
    )
    with pytest.raises(UnreadableInput, match="is no row number"):
        read_decisions(tmp_path / "decisions.csv")


# ---- wide, long and large


def test_ten_thousand_columns(tmp_path: Path) -> None:
    extra = [f"remark {at}" for at in range(10_000)]
    text = ",".join([HEADINGS, *extra]) + "\n" + ",".join([ROW, *extra]) + "\n"
    with time_limit(4 * SECONDS):
        table = read(tmp_path, text)
    assert len(table.extras.columns) == 10_000
    assert table.extras["remark 9999"].tolist() == ["remark 9999"]


def test_more_columns_than_a_spreadsheet_has(tmp_path: Path) -> None:
    wide = f"{HEADINGS},{','.join('x' * MOST_COLUMNS)}\n{ROW}\n"
    with pytest.raises(UnreadableInput, match="more than 16384 headings"):
        read(tmp_path, wide)
    frame = pd.DataFrame([[1] * 20_000], columns=[f"x{at}" for at in range(20_000)])
    with pytest.raises(UnreadableInput, match="more than 16384 columns"):
        read_table(frame, default_codebook())


def test_columns_of_one_name_are_all_kept(tmp_path: Path) -> None:
    table = read(tmp_path, f"x,x [C],x,x,{HEADINGS}\n1,2,3,4,{ROW}\n")
    assert sorted(value for column in table.extras for value in table.extras[column]) == ["1", "2", "3", "4"]
    assert len(set(table.extras.columns)) == 4


def test_the_last_row_of_a_spreadsheet(tmp_path: Path) -> None:
    members = members_of(PLAIN)
    last = b'<row r="1048576"><c r="A1048576" t="str"><v>Site 2</v></c></row></sheetData>'
    members["xl/worksheets/sheet1.xml"] = members["xl/worksheets/sheet1.xml"].replace(b"</sheetData>", last)
    with time_limit(4 * SECONDS):
        table = read_table(write(tmp_path, members).sheet, default_codebook())
    assert table.row_numbers.tolist() == [2, 1_048_576]


@pytest.mark.parametrize("bomb", dict.fromkeys(bomb_faults.BOMBS), ids=lambda bomb: bomb.__name__)
def test_bombs(tmp_path: Path, bomb: Callable[[dict[str, bytes]], None]) -> None:
    members = saved(book_of(random.Random(1))[0])
    bomb(members)
    with time_limit(4 * SECONDS):
        try:
            assert read_table(write(tmp_path, members).sheet, default_codebook()).rows in (1, 87)
        except UnreadableInput as fault:
            assert "\n" not in str(fault)


def test_what_unzips_to_hundreds_of_times_its_size(tmp_path: Path) -> None:
    members = members_of(PLAIN)
    members["xl/media/zeros.bin"] = bytes(70_000_000)
    with pytest.raises(UnreadableInput, match="no workbook does that"):
        read_table(write(tmp_path, members).sheet, default_codebook())
    del members["xl/media/zeros.bin"]
    members |= {f"xl/media/{at}": b"" for at in range(10_001)}
    with pytest.raises(UnreadableInput, match="no workbook does that"):
        read_table(write(tmp_path, members).sheet, default_codebook())


def test_settings_without_end(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(workbook, "_MOST_ELEMENTS", 1000)
    members = members_of(PLAIN)
    members["xl/styles.xml"] += b"<xf/>" * 1001
    with pytest.raises(UnreadableInput, match="more settings"):
        read_table(write(tmp_path, members).sheet, default_codebook())


def test_headings_without_end() -> None:
    many = ", ".join(f'"F{at}"' for at in range(201))
    with pytest.raises(InvalidCodebook, match="lists 201 headings"):
        parse_codebook(f"[columns]\nf_value = [{many}]\n", "x")


def test_a_model_of_hundreds_of_groups(tmp_path: Path) -> None:
    table = read(tmp_path, "study,design,analysis,f_value\nSite 1,one-way,A1,4.31\n")
    lines = [["analysis", "n"], *([["", "20"]] * 300), *([["A2", "20"]] * 300), *([["A1", "20"]] * 200)]

    def joined() -> ReportedTable:
        (tmp_path / "groups.csv").write_text(delimited(lines), encoding="utf-8")
        return with_groups(table, "-", default_codebook(), tmp_path / "groups.csv")

    assert ("n", 200) in joined().numbers
    lines.append(["A1", "20"])
    with pytest.raises(UnreadableInput, match="row 802: more than 200 lines of the analysis 'A1'"):
        joined()


# ---- sources without end, or none


def test_text_without_end(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(reader, "MOST_TEXT", 10)
    with pytest.raises(UnreadableInput, match="divide it"):
        read(tmp_path, f"{HEADINGS}\n{ROW}\n")


@pytest.mark.parametrize("device", ["/dev/zero", "/dev/null"])
def test_devices(device: str) -> None:
    if not os.path.exists(device):
        pytest.skip("there is no such device here")
    with time_limit(SECONDS), pytest.raises(UnreadableInput, match="is a device"):
        read_table(device, default_codebook())


@pytest.mark.parametrize("packed", [False, True])
def test_named_pipes(tmp_path: Path, packed: bool) -> None:
    """Text is read from them; a workbook is refused, since it must be read twice."""
    content = f"{HEADINGS}\n{ROW}\n".encode()
    if packed:
        stream = io.BytesIO()
        with zipfile.ZipFile(stream, "w") as archive:
            archive.writestr("x", b"y")
        content = stream.getvalue()
    os.mkfifo(tmp_path / "pipe")
    writer = threading.Thread(target=lambda: (tmp_path / "pipe").write_bytes(content))
    writer.start()
    with time_limit(SECONDS):
        if packed:
            with pytest.raises(UnreadableInput, match="name the file instead"):
                read_table(tmp_path / "pipe", default_codebook())
        else:
            assert read_table(tmp_path / "pipe", default_codebook()).rows == 1
    writer.join()


def test_standard_input_that_is_closed_or_broken(monkeypatch: pytest.MonkeyPatch) -> None:
    class Broken(io.RawIOBase):
        def readable(self) -> bool:
            return True

        def readinto(self, buffer: object) -> int:
            raise OSError(5, "Input/output error")

    monkeypatch.setattr(sys, "stdin", None)
    with pytest.raises(UnreadableInput, match="is closed"):
        read_table("-", default_codebook())
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BufferedReader(Broken())))
    with pytest.raises(UnreadableInput, match="cannot be read: Input/output error"):
        read_table("-", default_codebook())


@pytest.mark.parametrize("name", ["x" * 400, "a\x00b", "sheet.csv/x"])
def test_names_that_no_file_can_have(tmp_path: Path, name: str) -> None:
    (tmp_path / "sheet.csv").write_text(ROW)
    with pytest.raises(UnreadableInput, match="cannot be opened"):
        read_table(tmp_path / name, default_codebook())


@pytest.mark.parametrize("content", [b"PK\x03\x04", b"PK\x05\x06" + bytes(18)])
def test_decisions_in_a_damaged_workbook_are_not_passed_over(tmp_path: Path, content: bytes) -> None:
    (tmp_path / "decisions.xlsx").write_bytes(content)
    with pytest.raises(UnreadableInput):
        read_decisions(tmp_path / "decisions.xlsx")


# ---- what a workbook hides, links and carries


def test_what_is_hidden_is_said(tmp_path: Path) -> None:
    book = openpyxl.Workbook()
    sheet, other = book.worksheets[0], book.create_sheet("old groups")
    for row in (*PLAIN, ["Site 2", 2.5]):
        sheet.append(row)
    sheet.row_dimensions[3].hidden = True
    other.sheet_state = "hidden"
    other.merge_cells("A1:B2")
    other.row_dimensions[7].hidden = True
    table = read_table(write(tmp_path, saved(book)).sheet, default_codebook())
    assert table.rows == 2
    assert table.notes == [
        "sheets that are hidden are not read: 'old groups'",
        "hidden rows, such as row 3, are read like the others",
    ]


def test_a_workbook_of_any_name_has_its_groups(tmp_path: Path) -> None:
    book = openpyxl.Workbook()
    for row in (["study", "design", "analysis", "f_value"], ["Site 1", "one-way", "A1", 4.31]):
        book.worksheets[0].append(row)
    for row in (["analysis", "n"], ["A1", 20], ["A1", 22]):
        book.create_sheet("Groups").append(row) if "Groups" not in book.sheetnames else book["Groups"].append(
            row
        )
    for name in ("sheet.xlsx", "sheet.XLSX", "sheet", "sheet.dat"):
        path = write(tmp_path, saved(book), name).sheet
        table = with_groups(read_table(path, default_codebook()), path, default_codebook(), None)
        assert ("n", 2) in table.numbers, name


@pytest.mark.parametrize(
    "doctype",
    [
        b'<!DOCTYPE z [<!ENTITY e SYSTEM "file:///etc/hostname">]>',
        b'<!DOCTYPE z SYSTEM "http://127.0.0.1:9/z.dtd">',
        b'<!DOCTYPE z [<!ENTITY % p SYSTEM "http://127.0.0.1:9/p"> %p;]>',
    ],
)
def test_nothing_is_fetched(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, doctype: bytes) -> None:
    def refuse(*_: object, **__: object) -> None:
        raise AssertionError("the program went to the network")

    monkeypatch.setattr(socket, "socket", refuse)
    monkeypatch.setattr(socket, "create_connection", refuse)
    members = members_of(PLAIN)
    sheet = members["xl/worksheets/sheet1.xml"].replace(b"Site 1", b"&e;" if b" e " in doctype else b"Site 1")
    members["xl/worksheets/sheet1.xml"] = doctype + sheet
    try:
        table = read_table(write(tmp_path, members).sheet, default_codebook())
    except UnreadableInput:
        return
    assert table.facts["study"].tolist() in (["Site 1"], [""])


def test_macros_and_links_are_left_alone(tmp_path: Path) -> None:
    members = members_of(PLAIN)
    members["xl/vbaProject.bin"] = b"\xd0\xcf\x11\xe0 not to be run"
    kinds = members["[Content_Types].xml"]
    members["[Content_Types].xml"] = kinds.replace(
        b"application/vnd.openxmlformats-officedocument.spreadsheetml.sheet.main+xml",
        b"application/vnd.ms-excel.sheet.macroEnabled.main+xml",
    )
    assert kinds != members["[Content_Types].xml"]
    table = read_table(write(tmp_path, members, "sheet.xlsm").sheet, default_codebook())
    assert table.facts["study"].tolist() == ["Site 1"]


# ---- names that would lead out of the folder

TRAVERSALS = (
    "../../up",
    "/abs/olute",
    "..\\up",
    "C:\\x",
    ".hidden",
    "con",
    "a/b",
    "~root",
    "..",
    "x\x00y",
    "é" * 300,
)


def test_studies_name_no_path(tmp_path: Path) -> None:
    """Names of letters come from names of studies."""
    rows = [[name, "one-way", "p < .05, N = 40"] for name in TRAVERSALS]
    sheet = tmp_path / "in" / "sheet.csv"
    sheet.parent.mkdir()
    sheet.write_text(delimited([["study", "design", "reported"], *rows]), encoding="utf-8")
    words = ["unlock", str(sheet), "--to", "omega_squared", "--letters", str(tmp_path / "in" / "letters")]
    found = CliRunner().invoke(cli, words)
    assert found.exit_code == 0, found.output
    assert sorted(os.listdir(tmp_path)) == ["in"]
    assert sorted(os.listdir(tmp_path / "in")) == ["letters", "sheet.csv"]
    names = os.listdir(tmp_path / "in" / "letters")
    assert len(names) == 2 * len(TRAVERSALS) + 1
    for name in names:
        assert (tmp_path / "in" / "letters" / name).is_file()
        assert (
            name.isascii()
            and not name.startswith(".")
            and set(name) <= set("abcdefghijklmnopqrstuvwxyz0123456789-.")
        )


@pytest.mark.parametrize("title", ["..", "a'b", "=1+1", "x" * 31, "groups ", "éü"])
def test_sheets_name_no_path(tmp_path: Path, title: str) -> None:
    book = openpyxl.Workbook()
    for row in (["study", "design", "f_value", "df_effect", "df_error"], ["../up", "one-way", 4.31, 2, 57]):
        book.worksheets[0].append(row)
    book.worksheets[0].title = title
    folder = tmp_path / "in"
    folder.mkdir()
    path = write(folder, saved(book)).sheet
    words = ["convert", path, "--to", "omega_squared", "--out", str(folder / "out"), "--format", "xlsx"]
    found = CliRunner().invoke(cli, words)
    # a sheet of that name, blanks aside, holds groups
    assert found.exit_code == (4 if title.strip() == "groups" else 0), found.output
    assert os.listdir(tmp_path) == ["in"]
    assert set(os.listdir(folder)) <= {"sheet.xlsx", "out"}
