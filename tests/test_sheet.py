"""Sheets of every kind, whole and damaged, and the table that comes of them. All studies are invented."""

from __future__ import annotations

import datetime
import io
import random
import sys
import zipfile
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from extractor.codebook import Codebook, default_codebook, load_codebook, parse_codebook
from extractor.errors import UnreadableInput
from extractor.sheet import read_table
from extractor.source import workbook
from extractor.table import Place, ReportedTable

PLAIN = default_codebook()
HEADER = "study,design,f_value,df_effect,df_error,p_value,moderator\n"
ROW = "North Quay,one-way,4.31,2,57,.018,school\n"


def write(folder: Path, content: str | bytes, name: str = "sheet.csv") -> Path:
    path = folder / name
    path.write_bytes(content.encode() if isinstance(content, str) else content)
    return path


def read_text(
    folder: Path, content: str | bytes, codebook: Codebook = PLAIN, name: str = "sheet.csv"
) -> ReportedTable:
    return read_table(write(folder, content, name), codebook)


def refusal(source: str | Path | pd.DataFrame, codebook: Codebook = PLAIN) -> str:
    """The message of a source that cannot be read: one line, always."""
    with pytest.raises(UnreadableInput) as caught:
        read_table(source, codebook)
    message = str(caught.value)
    assert "\n" not in message
    assert caught.value.exit_code == 4
    return message


# ---- delimited text


def test_a_plain_sheet(tmp_path: Path) -> None:
    table = read_text(tmp_path, HEADER + ROW + "\n" + ROW.replace("4.31", "< 1"))
    assert table.row_numbers.tolist() == [2, 4]
    assert table.rows == 2
    f = table.numbers["f_value", None]
    assert f.value[0] == 4.31
    assert np.isnan(f.value[1])
    assert f.comparator.tolist() == ["=", "<"]
    assert f.low[0] == pytest.approx(4.305, rel=1e-14)
    assert f.decimals.tolist() == [2, 0]
    assert f.given.all()
    assert f.place == Place("f_value", "C")
    assert f.place.at(4) == "f_value [C4]"
    assert table.numbers["df_error", None].unit.tolist() == [0.0, 0.0]
    assert table.facts["study"].tolist() == ["North Quay", "North Quay"]
    assert table.facts["design"].tolist() == ["one-way", "one-way"]
    assert table.extras.to_dict("list") == {"moderator": ["school", "school"]}
    assert table.notes == []
    assert (table.source, table.sheet) == (f"'{tmp_path / 'sheet.csv'}'", "")


def test_leading_blank_rows_and_spaced_headings(tmp_path: Path) -> None:
    table = read_text(tmp_path, "\n,,\n Study , F-Value ,DF error\n\nx,4.31,57\n")
    assert table.row_numbers.tolist() == [5]
    assert table.numbers["f_value", None].place == Place("F-Value", "B")
    assert table.numbers["df_error", None].value.tolist() == [57.0]


@pytest.mark.parametrize("delimiter", [",", ";", "\t"])
@pytest.mark.parametrize("newline", ["\n", "\r\n", "\r"])
def test_delimiters_and_newlines(tmp_path: Path, delimiter: str, newline: str) -> None:
    text = (HEADER + ROW).replace(",", delimiter).replace("\n", newline)
    table = read_text(tmp_path, text, name="sheet.txt")
    assert table.numbers["f_value", None].value.tolist() == [4.31]
    assert table.extras.columns.tolist() == ["moderator"]


def test_declared_delimiters(tmp_path: Path) -> None:
    assert read_text(tmp_path, HEADER.replace(",", "\t") + ROW.replace(",", "\t"), name="a.tsv").rows == 1
    declared = read_text(tmp_path, "sep=|\r\n" + HEADER.replace(",", "|") + ROW.replace(",", "|"))
    assert declared.row_numbers.tolist() == [2]


def test_decimal_commas(tmp_path: Path) -> None:
    book = parse_codebook('decimal_mark = ","', "comma")
    table = read_text(tmp_path, "study;f_value;p_value;df_error\nx;4,31;,018;1.234\n", book)
    assert table.numbers["f_value", None].value.tolist() == [4.31]
    assert table.numbers["p_value", None].value.tolist() == [0.018]
    # unquoted decimal commas in a comma-separated sheet shift the row; it must not be read askew
    shifted = read_text(tmp_path, HEADER + "x,one-way,4,31,2,57,.018,school\n" + ROW)
    assert shifted.numbers["f_value", None].given.tolist() == [False, True]
    assert "1 more cell than there are headings" in shifted.numbers["df_effect", None].problem[0]
    assert shifted.settings["problems"][0][:2] == (2, "row 2")


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-32"])
def test_encodings(tmp_path: Path, encoding: str) -> None:
    text = "study,mean_1,η\nKüste,−2.31,x\n"
    table = read_text(tmp_path, text.encode(encoding))
    assert table.facts["study"].tolist() == ["Küste"]
    assert table.numbers["mean", 1].value.tolist() == [-2.31]
    assert table.extras.columns.tolist() == ["η"]
    assert table.notes == []


def test_bytes_of_unknown_encoding_are_said(tmp_path: Path) -> None:
    table = read_text(tmp_path, "study,mean_1\nKüste,–2.31\n".encode("cp1252"))
    assert table.facts["study"].tolist() == ["Küste"]
    assert table.numbers["mean", 1].value.tolist() == [-2.31]
    assert "read as Windows-1252" in table.notes[0]
    assert "read as Latin-1" in read_text(tmp_path, b"study,mean_1\nK\x81\xfc,1\n").notes[0]


def test_words_stay_as_they_were_read(tmp_path: Path) -> None:
    table = read_text(tmp_path, 'study,f_value,note\n"a\x00b",4.31,"=cmd|\'x\'\x07, ""y""\nz"\n')
    assert table.facts["study"].tolist() == ["ab"]
    assert table.extras["note"].tolist() == ["=cmd|'x'\x07, \"y\"\nz"]
    assert table.row_numbers.tolist() == [2]


def test_standard_input(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO((HEADER + ROW).encode())))
    table = read_table("-", PLAIN)
    assert table.source == "standard input"
    assert table.rows == 1
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(b"PK\x03\x04...")))
    assert "only delimited text can be piped" in refusal("-")


@pytest.mark.parametrize(
    ("content", "words"),
    [
        ("", "is empty"),
        ("\n\n , \n", "is empty"),
        (HEADER, "headings in row 1 and no rows below"),
        ("\n" + HEADER + ",,\n\n", "headings in row 2 and no rows below"),
        ("colour,shape\nred,round\n", "no heading in row 1 is known (it begins 'colour', 'shape')"),
        ("study,f_value,F-Value\nx,1,2\n", "'f_value' [B1] and 'F-Value' [C1] both hold f_value"),
        ("study,mean_2,mean 2\nx,1,2\n", "both hold mean_2"),
        ("study,design,Design\nx,1,2\n", "both hold design"),
        ("study,mean_999\nx,1\n", "at most 200 groups"),
        ('study,f_value\n"x,1\n', "quotation mark left open"),
        ("study,f_value\n" + "x" * 200_000 + ",1\n", "after row 1"),
        (b"\xff\xfea", "damaged UTF-16 text"),
        ("study;f_value\nx;1\n".encode("utf-16-le"), "no heading in row 1 is known"),
        (bytes(range(256)), "no heading"),
    ],
)
def test_text_that_cannot_be_read(tmp_path: Path, content: str | bytes, words: str) -> None:
    message = refusal(write(tmp_path, content))
    assert words in message
    assert "sheet.csv" in message


def test_sources_that_are_not_there(tmp_path: Path) -> None:
    assert "no such file" in refusal(tmp_path / "nothing.csv")
    assert "is a folder" in refusal(tmp_path)
    assert "cannot be opened" in refusal("a\x00b.csv")
    assert "--codebook" in refusal(write(tmp_path, "a,b\n1,2\n"))


def test_one_malformed_row_in_ten_thousand(tmp_path: Path) -> None:
    rows = [ROW] * 10_000
    rows[6_000] = "North Quay,onw-way,12.4 (3.1),2,57,1,234\n"
    table = read_text(tmp_path, HEADER + "".join(rows))
    f = table.numbers["f_value", None]
    assert f.given.sum() == 9_999
    assert np.flatnonzero(~f.given).tolist() == [6_000]
    assert "two numbers in one cell" in f.problem[6_000]
    assert table.facts["design"][6_000] == "onw-way"


# ---- facts


def test_directions(tmp_path: Path) -> None:
    cells = ["+", "-", "−", "–", "1", "+1", "-1", "positive", "", "NA"]
    text = "study,direction,orientation\n" + "".join(f"x,{cell},{cell}\n" for cell in cells)
    table = read_text(tmp_path, text, parse_codebook('missing = ["-"]', "x"))
    expected = ["+", "-", "-", "-", "+", "+", "-", "positive", "", ""]
    assert table.facts["direction"].tolist() == expected
    assert table.facts["orientation"].tolist() == expected


def test_words_of_a_list_are_recognised_in_any_case(tmp_path: Path) -> None:
    table = read_text(
        tmp_path, "study,design,responses\nx,One Way,Integer\ny,ONE-WAY,n/a\nNA,Latin square,x\n"
    )
    assert table.facts["design"].tolist() == ["one-way", "one-way", "Latin square"]
    assert table.facts["responses"].tolist() == ["integer", "", "x"]
    assert table.facts["study"].tolist() == ["x", "y", "NA"]


# ---- headings nobody knows


def test_unknown_columns_are_kept_and_pointed_out(tmp_path: Path) -> None:
    table = read_text(
        tmp_path, "study,f_vlaue,mean,sd2,year,year,,,country\na,1,2,3,2001,2002,x,,4\nb,,,,,,,,\n"
    )
    assert table.extras.columns.tolist() == [
        "f_vlaue",
        "mean",
        "sd2",
        "year",
        "year [F]",
        "column G",
        "country",
    ]
    assert table.extras["year [F]"].tolist() == ["2002", ""]
    assert table.notes == [
        "'f_vlaue' is carried along unread; did you mean f_value?",
        "'mean' is carried along unread; did you mean mean_1?",
        "'sd2' is carried along unread; did you mean sd_2?",
        "column G has no heading; its cells are carried along unread",
    ]


# ---- running text


def test_reported_text_fills_columns(tmp_path: Path) -> None:
    text = 'study,reported\na,"F(2, 57) = 4.31, p = .018"\nb,see Table 2\nc,"F(1, 9) = 1; F(2, 9) = 2"\nd,\n'
    table = read_text(tmp_path, text)
    f = table.numbers["f_value", None]
    assert f.given.tolist() == [True, False, False, False]
    assert f.place.at(2) == "reported [B2]"
    assert f.understood[0] == "from 'F(2, 57) = 4.31'"
    assert table.settings["understood"] == [(3, "reported [B3]", "not read: 'see Table 2'")]
    ((row, cell, message),) = table.settings["problems"]
    assert (row, cell) == (4, "reported [B4]")
    assert "two df1" in message or "two F" in message
    assert table.settings["from_reported"]["f_value", None].tolist() == [True, False, False, False]
    assert table.settings["reported_place"] == Place("reported", "B")


def test_a_filled_column_wins_over_the_text(tmp_path: Path) -> None:
    text = (
        "study,f_value,p_value,reported\n"
        'a,4.31,,"F(2, 57) = 4.31, p = .018"\n'
        'b,43.1,,"F(2, 57) = 4.31, p = .018"\n'
        'c,3-5,.03,"F(2, 57) = 4.31, p = .018"\n'
        'd,4.3,< .05,"F(2, 57) = 4.31, p = .018"\n'
    )
    table = read_text(tmp_path, text)
    f, p = table.numbers["f_value", None], table.numbers["p_value", None]
    assert f.value[[0, 1, 3]].tolist() == [4.31, 43.1, 4.3]
    assert not f.given[2]
    assert "a range" in f.problem[2]
    assert p.value[:3].tolist() == [0.018, 0.018, 0.03]
    assert p.comparator[3] == "<"
    assert table.settings["from_reported"]["p_value", None].tolist() == [True, True, False, False]
    assert table.settings["conflicts"] == [
        (3, "f_value [B3]; reported [D3]", "the column says 43.1, the text 4.31; the column is used"),
        (4, "p_value [C4]; reported [D4]", "the column says 0.03, the text 0.018; the column is used"),
    ]


# ---- what the codebook fills


def test_codebook_fills_blanks(tmp_path: Path) -> None:
    book = parse_codebook(
        'design = "one-way"\nmissing = ["NR"]\n[columns]\nf_value = "F"\n[decimals]\nf_value = 2\n'
        '[assume.correlation]\nvalue = 0.5\nby = "protocol"\n[rename]\nestimate = "es"\n'
        '[scale]\nminimum = 1\nmaximum = 7\nresponses = "integer"\n',
        "ours.toml",
    )
    table = read_text(tmp_path, "study,design,F,scale_max\na,,4.3,\nb,two-group,NR,5\nc,x,5.12,-\n", book)
    assert table.facts["design"].tolist() == ["one-way", "two-group", "x"]
    assert table.facts["responses"].tolist() == ["integer"] * 3
    f = table.numbers["f_value", None]
    assert f.decimals.tolist() == [2, -1, 2]
    assert f.given.tolist() == [True, False, True]
    assert table.numbers["scale_min", None].value.tolist() == [1.0, 1.0, 1.0]
    assert table.numbers["scale_max", None].value.tolist() == [7.0, 5.0, 7.0]
    assert table.numbers["scale_max", None].high.tolist() == [7.0, 5.0, 7.0]
    assert table.assumptions["correlation"].by == "protocol"
    assert table.rename == {"estimate": "es"}
    assert table.settings["codebook"] == "ours.toml"


def test_a_ready_codebook(tmp_path: Path) -> None:
    text = "Study,F,df1,df2,p,n 1,M 1,n 2,M 2,f\nNorth Quay,4.31,2,57,.018,20,11.2,20,12.9,.39\n"
    table = read_text(tmp_path, text, load_codebook("one-way"))
    assert table.facts["design"].tolist() == ["one-way"]
    assert table.numbers["cohens_f", None].value.tolist() == [0.39]
    assert table.numbers["mean", 2].value.tolist() == [12.9]


# ---- data frames


def test_data_frames() -> None:
    frame = pd.DataFrame(
        {
            "study": ["a", None, "c", "d"],
            "f_value": np.array([4.31, np.nan, 5.1, 2.0], dtype=np.float32),
            "df_error": pd.array([57, None, 30, 12], dtype="Int64"),
            "p_value": [".018", None, pd.NA, pd.Timestamp("2024-05-03")],
            "mean_1": pd.Categorical(["5.10", None, "5", "6"]),
            3: [True, None, 2.0, "x"],
        },
        index=[7, 7, 8, 9],
    )
    before = frame.copy(deep=True)
    table = read_table(frame, PLAIN)
    pd.testing.assert_frame_equal(frame, before)
    assert table.row_numbers.tolist() == [2, 4, 5]
    assert table.numbers["f_value", None].value.tolist() == [4.31, 5.1, 2.0]
    assert table.numbers["f_value", None].decimals.tolist() == [2, 1, 0]
    assert table.numbers["df_error", None].value.tolist() == [57.0, 30.0, 12.0]
    assert "date" in table.numbers["p_value", None].problem[2]
    assert table.numbers["mean", 1].decimals.tolist() == [2, 0, 0]
    assert table.extras["3"].tolist() == ["True", "2", "x"]
    assert table.numbers["f_value", None].place.at(4) == "f_value [B4]"


def test_data_frames_that_hold_nothing() -> None:
    assert "no rows" in refusal(pd.DataFrame())
    assert "no rows" in refusal(pd.DataFrame({"study": []}))
    assert "no rows" in refusal(pd.DataFrame({"study": [None, " "]}))
    assert "no heading" in refusal(pd.DataFrame({"colour": ["red"]}))


def test_a_frame_reads_as_its_csv(tmp_path: Path) -> None:
    text = HEADER + ROW + ROW.replace("4.31", "1,234").replace("1,234", '"1,234"')
    frame = pd.read_csv(io.StringIO(text), dtype=str, keep_default_na=False)
    first, second = read_text(tmp_path, text), read_table(frame, PLAIN)
    assert first.numbers.keys() == second.numbers.keys()
    for variable, numbers in first.numbers.items():
        for name in ("value", "low", "high", "unit", "decimals", "problem"):
            np.testing.assert_array_equal(getattr(numbers, name), getattr(second.numbers[variable], name))


# ---- workbooks


def book_of(folder: Path, rows: list[list[object]], title: str = "coded") -> tuple[openpyxl.Workbook, Path]:
    book = openpyxl.Workbook()
    sheet = book.worksheets[0]
    sheet.title = title
    for row in rows:
        sheet.append(row)
    return book, folder / "sheet.xlsx"


def test_a_workbook(tmp_path: Path) -> None:
    rows: list[list[object]] = [
        [],
        ["study", "f_value", "df_effect", "df_error", "p_value", "eta_squared", "contrast", "page", "note"],
        ["a", 4.3, 2, 57, 0.018, 0.05, "1 - 2", 5.0, datetime.datetime(2024, 5, 3)],
        [],
        [12, datetime.datetime(2024, 5, 3), 2, "=1+2", True, "5.10", datetime.datetime(2024, 2, 1), None, 3],
    ]
    book, path = book_of(tmp_path, rows)
    sheet = book.worksheets[0]
    sheet["B3"].number_format = "0.00"
    sheet["F3"].number_format = "0.0%"
    book.save(path)
    table = read_table(path, PLAIN)
    assert table.sheet == "coded"
    assert table.row_numbers.tolist() == [3, 5]
    f = table.numbers["f_value", None]
    assert (f.value[0], f.decimals[0]) == (4.3, 2)
    assert "into a date" in f.problem[1]
    assert "'=1+2' has no stored result" in table.numbers["df_error", None].problem[1]
    assert "TRUE or FALSE" in table.numbers["p_value", None].problem[1]
    assert table.numbers["eta_squared", None].decimals.tolist() == [3, 2]
    assert f.place.at(5) == "f_value [B5]"
    assert table.facts["study"].tolist() == ["a", "12"]
    assert table.facts["page"].tolist() == ["5", ""]
    assert table.extras["note"].tolist() == ["2024-05-03 00:00:00", "3"]
    assert [problem[:2] for problem in table.settings["problems"]] == [(5, "contrast [G5]")]


def test_decimals_of_the_codebook_leave_workbook_text_alone(tmp_path: Path) -> None:
    book, path = book_of(tmp_path, [["study", "mean_1"], ["a", 5.1], ["b", "5.1"]])
    book.save(path)
    table = read_table(path, parse_codebook("[decimals]\nmean = 2", "x"))
    assert table.numbers["mean", 1].decimals.tolist() == [2, 1]


def test_which_sheet_is_read(tmp_path: Path) -> None:
    book, path = book_of(tmp_path, [["what to do"]], "Read me")
    hidden = book.create_sheet("old")
    hidden.append(["study", "f_value"])
    hidden.append(["hidden", 1])
    hidden.sheet_state = "hidden"
    for title in ("groups", "First", "Ours"):
        sheet = book.create_sheet(title)
        sheet.append(["study", "f_value"])
        sheet.append([title, 1])
    book.save(path)
    assert read_table(path, PLAIN).facts["study"].tolist() == ["First"]
    assert read_table(path, parse_codebook("", "folder/ours.toml")).facts["study"].tolist() == ["Ours"]
    assert read_table(path, parse_codebook('title = "ours"', "x.toml")).facts["study"].tolist() == ["Ours"]
    only, other = book_of(tmp_path, [["analysis", "n"]], "groups")
    only.save(other)
    assert "hold no coded rows" in refusal(other)


def test_formulas_with_a_stored_result(tmp_path: Path) -> None:
    book, path = book_of(tmp_path, [["study", "f_value", "p_value"], ["a", "=2+2", '=""'], ["b", 1, 2]])
    book.save(path)
    stored = tmp_path / "stored.xlsx"
    edit(
        path,
        stored,
        "xl/worksheets/sheet1.xml",
        [(b"<f>2+2</f><v />", b"<f>2+2</f><v>4</v>"), (b'<c r="C2">', b'<c r="C2" t="str">')],
    )
    table = read_table(stored, PLAIN)
    assert table.numbers["f_value", None].value.tolist() == [4.0, 1.0]
    assert table.numbers["p_value", None].problem.tolist() == ["", ""]


def test_error_cells_and_merged_cells(tmp_path: Path) -> None:
    book, path = book_of(tmp_path, [["study", "f_value"], ["a", "#DIV/0!"], [None, 2], ["c", 3, "stray"]])
    book.worksheets[0].merge_cells("A2:A3")
    book.save(path)
    table = read_table(path, PLAIN)
    assert "#DIV/0!" in table.numbers["f_value", None].problem[0]
    assert table.facts["study"].tolist() == ["a", "", "c"]
    assert any("merged cells, such as A2:A3" in note for note in table.notes)
    assert any("right of the last heading" in note and "row 4" in note for note in table.notes)


def edit(source: Path, target: Path, member: str, changes: list[tuple[bytes, bytes]]) -> None:
    """A copy of a workbook with one of its files changed."""
    with zipfile.ZipFile(source) as old, zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as new:
        assert member in old.namelist()
        for name in old.namelist():
            content = old.read(name)
            if name == member:
                for before, after in changes:
                    assert before in content
                    content = content.replace(before, after, 1)
            new.writestr(name, content)


@pytest.fixture
def small(tmp_path: Path) -> Path:
    book, path = book_of(tmp_path, [["study", "f_value"], ["a", 4.31]])
    book.save(path)
    return path


@pytest.fixture
def shared(small: Path, tmp_path: Path) -> Path:
    """The small workbook with its words in a table of shared strings, as spreadsheet programs write them."""
    kind = "application/vnd.openxmlformats-officedocument.spreadsheetml.sharedStrings+xml"
    main = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
    one, two, path = tmp_path / "one.xlsx", tmp_path / "two.xlsx", tmp_path / "shared.xlsx"
    override = f'<Override PartName="/xl/sharedStrings.xml" ContentType="{kind}"/></Types>'
    edit(small, one, "[Content_Types].xml", [(b"</Types>", override.encode())])
    words = [b"study", b"f_value", b"a"]
    cells = [
        (b't="inlineStr"><is><t>%s</t></is>' % word, b't="s"><v>%d</v>' % at) for at, word in enumerate(words)
    ]
    edit(one, two, "xl/worksheets/sheet1.xml", cells)
    path.write_bytes(two.read_bytes())
    with zipfile.ZipFile(path, "a") as archive:
        items = "".join(f"<si><t>{word.decode()}</t></si>" for word in words)
        archive.writestr("xl/sharedStrings.xml", f'<sst xmlns="{main}">{items}</sst>')
    return path


def test_shared_strings(shared: Path) -> None:
    """The workbook of the next test can be read while no entity stands in it."""
    assert read_table(shared, PLAIN).facts["study"].tolist() == ["a"]


@pytest.mark.parametrize(
    ("member", "before"),
    [
        ("xl/worksheets/sheet1.xml", b"<worksheet"),
        ("xl/sharedStrings.xml", b"<sst"),
        ("xl/workbook.xml", b"<workbook"),
        ("xl/styles.xml", b"<styleSheet"),
        ("[Content_Types].xml", b"<Types"),
    ],
)
def test_entity_bombs(shared: Path, tmp_path: Path, member: str, before: bytes) -> None:
    """Nested XML entities (the "billion laughs") must be refused, not expanded."""
    entities = b'<!DOCTYPE z [<!ENTITY a "ha">' + b"".join(
        b'<!ENTITY %c "%s">' % (98 + i, b"&%c;" % (97 + i) * 10) for i in range(9)
    )
    bomb = tmp_path / "bomb.xlsx"
    edit(shared, bomb, member, [(before, entities + b"]>" + before)])
    message = refusal(bomb)
    assert "not a readable workbook" in message
    assert "Entit" in message


def test_without_defusedxml_no_workbook_is_read(small: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(openpyxl, "DEFUSEDXML", False)
    assert "defusedxml" in refusal(small)


def test_size_caps(small: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    far = tmp_path / "far.xlsx"
    edit(
        small,
        far,
        "xl/worksheets/sheet1.xml",
        [(b'<row r="2"', b'<row r="1999999999"'), (b'"A2"', b'"A1999999999"')],
    )
    assert "too large" in refusal(far)
    monkeypatch.setattr(workbook, "MOST_CELLS", 3)
    assert "too large" in refusal(small)
    monkeypatch.setattr(workbook, "MOST_BYTES", 1000)
    assert "would unzip to more than" in refusal(small)


def test_a_false_size_is_not_believed(small: Path, tmp_path: Path) -> None:
    target = tmp_path / "false.xlsx"
    edit(
        small,
        target,
        "xl/worksheets/sheet1.xml",
        [(b'<dimension ref="A1:B2"', b'<dimension ref="A1:XFD1048576"')],
    )
    assert read_table(target, PLAIN).numbers["f_value", None].value.tolist() == [4.31]


def test_files_that_are_no_workbook(small: Path, tmp_path: Path) -> None:
    assert "not a readable workbook" in refusal(write(tmp_path, b"PK\x03\x04 and no more", "a.xlsx"))
    assert "is no workbook" in refusal(write(tmp_path, "study,f_value\n", "b.xlsx"))
    assert "old .xls or a password" in refusal(
        write(tmp_path, b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1 more", "c.xlsx")
    )
    assert "is empty" in refusal(write(tmp_path, b"", "d.xlsx"))
    cut = write(tmp_path, small.read_bytes()[:-200], "e.xlsx")
    assert "not a readable workbook" in refusal(cut)
    with zipfile.ZipFile(tmp_path / "f.xlsx", "w") as archive:
        archive.writestr("hello.txt", "no workbook")
    assert "not a readable workbook" in refusal(tmp_path / "f.xlsx")


def test_workbooks_without_rows(tmp_path: Path) -> None:
    book, path = book_of(tmp_path, [])
    book.save(path)
    assert "sheet 'coded' is empty" in refusal(path)
    book, path = book_of(tmp_path, [["study", "f_value"]])
    book.save(path)
    assert "no rows below" in refusal(path)


def test_damaged_workbooks_are_refused_or_read(small: Path, tmp_path: Path) -> None:
    """300 copies with changed bytes, outside and inside the archive's files: a table or one clear line."""
    source = random.Random(20240503)
    whole = small.read_bytes()
    with zipfile.ZipFile(small) as archive:
        members = {name: archive.read(name) for name in archive.namelist()}
    refused = 0
    for _ in range(300):
        target = tmp_path / "damaged.xlsx"
        if source.random() < 0.5:
            content = bytearray(whole)
            for _ in range(source.randint(1, 8)):
                content[source.randrange(4, len(content))] = source.randrange(256)
            target.write_bytes(content)
        else:
            name = source.choice(sorted(members))
            inner = bytearray(members[name])
            for _ in range(source.randint(1, 4)):
                inner[source.randrange(len(inner))] = source.choice(b'<>"=&0 9Arvt')
            with zipfile.ZipFile(target, "w") as archive:
                for member, content in members.items():
                    archive.writestr(member, bytes(inner) if member == name else content)
        try:
            assert isinstance(read_table(target, PLAIN), ReportedTable)
        except UnreadableInput as fault:
            refused += 1
            assert "\n" not in str(fault)
    assert refused > 100


# ---- anything at all

CELLS = st.one_of(
    st.sampled_from(
        ["4.31", "< .001", "ns", "1,234", "12.4 (3.1)", "NA", "", "F(2, 57) = 4.31", "-", '"', "\x00", "3-5"]
    ),
    st.text(max_size=12),
)
HEADINGS = st.lists(
    st.sampled_from(
        ["study", "design", "f_value", "p_value", "n_1", "mean_1", "reported", "direction", "x", ""]
    ),
    min_size=1,
    max_size=6,
)


@settings(max_examples=150)
@given(HEADINGS, st.lists(st.lists(CELLS, max_size=8), max_size=6), st.sampled_from(",;\t"))
def test_any_sheet_is_answered(headings: list[str], rows: list[list[str]], delimiter: str) -> None:
    text = "\n".join(delimiter.join(cells) for cells in [headings, *rows])
    saved = sys.stdin
    sys.stdin = io.TextIOWrapper(io.BytesIO(text.encode("utf-8", "surrogatepass")))
    try:
        table = read_table("-", PLAIN)
    except UnreadableInput as fault:
        assert "\n" not in str(fault)
        return
    finally:
        sys.stdin = saved
    for numbers in table.numbers.values():
        assert len(numbers.value) == table.rows
        assert not np.any(numbers.given & (numbers.problem != ""))
        assert np.all(numbers.low[numbers.given] <= numbers.high[numbers.given])


@given(st.binary(max_size=200))
def test_any_bytes_are_answered(content: bytes) -> None:
    saved = sys.stdin
    sys.stdin = io.TextIOWrapper(io.BytesIO(content))
    try:
        read_table("-", PLAIN)
    except UnreadableInput as fault:
        assert "\n" not in str(fault)
    finally:
        sys.stdin = saved
