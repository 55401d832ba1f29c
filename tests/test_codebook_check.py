"""Codebooks checked as a whole, pilots, and rows that may be one sample."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest
from click.testing import CliRunner

from extractor.api import read
from extractor.codebook import Codebook, codebook_text, parse_codebook, ready_codebooks
from extractor.codebook_check import faults, misreadable, pilot
from extractor.commands.codebook import command
from extractor.errors import InvalidCodebook
from extractor.overlap.duplicates import duplicate_reports

FAULTY = """title = "pilot"
desing = "one-way"
rounding = "nearst"

[columns]
f_valu = "F"
eta_squared = [
    "eta2",
    "η²",
]
omega_squared = "eta2"
n = "n group"

[assume.correlation]
value = 0.5
range = [0.6, 0.8]
by = "protocol"

[scale]
minimum = 7
maximum = 1

[rename]
estimat = "yi"
"""


# ---- faults ----------------------------------------------------------------------------------------------


def test_every_fault_is_found_with_its_line_and_the_nearest_word() -> None:
    found = faults(FAULTY, "pilot.toml")
    expected = [
        (2, "'desing' is not known; did you mean design"),
        (3, "did you mean nearest?"),
        (6, "did you mean f_value"),
        (12, "write {group} in the heading"),
        (16, "must hold the value"),
        (21, "must be above minimum"),
        (24, "did you mean estimate"),
    ]
    assert len(found) == len(expected) + 1, found
    for fault, (line, says) in zip(found, expected, strict=False):
        assert f"line {line}" in fault, fault
        assert says in fault
    # two entries that are fine alone and claim one heading together
    assert "claims the heading 'eta2'" in found[-1]


def test_sound_codebooks_have_no_faults() -> None:
    for text in ("", "# nothing\n", 'title = "x"\n\n[columns]\nf_value = ["F", "F ratio"]\n'):
        assert faults(text, "x.toml") == []
        parse_codebook(text, "x.toml")
    folder = Path(__file__).parent.parent / "codebooks"
    for name in ready_codebooks():
        assert faults((folder / f"{name}.toml").read_text(encoding="utf-8"), name) == []


@pytest.mark.parametrize("text", ["title = \n", "[columns\n", "a = 1\na = 2\n", "[x]\n[x]\n"])
def test_text_that_is_no_toml_is_one_fault(text: str) -> None:
    found = faults(text, "x.toml")
    assert len(found) == 1
    assert "is not valid TOML" in found[0]


def test_one_fault_is_what_loading_says() -> None:
    """Whatever loading refuses is refused here, with the same words."""
    for text in (
        'desing = "one-way"\n',
        "[columns]\nf_valu = 1\n",
        "[decimals]\nf_value = 99\n",
        "[extra]\n",
    ):
        with pytest.raises(InvalidCodebook) as raised:
            parse_codebook(text, "x.toml")
        assert faults(text, "x.toml") == [str(raised.value)]


def test_a_codebook_that_cannot_be_read(tmp_path: Path) -> None:
    with pytest.raises(InvalidCodebook, match="no such file"):
        codebook_text(tmp_path / "x.toml")
    (tmp_path / "x.toml").write_bytes(b"title = '\xff'\n")
    with pytest.raises(InvalidCodebook, match="not UTF-8"):
        codebook_text(tmp_path / "x.toml")


# ---- the pilot -------------------------------------------------------------------------------------------


def book() -> Codebook:
    text = """design = "one-way"
[columns]
study = "Study"
f_value = ["F", "F ratio"]
df_effect = "df1"
df_error = "df2"
p_value = "p"
ss_total = "SS total"
n = "n {group}"
median = "Mdn {group}"
"""
    return parse_codebook(text, "pilot.toml")


def piloted() -> pd.DataFrame:
    return pd.DataFrame(
        {
            "Study": ["A", "B", "C", "D"],
            "Design": ["", "two-group", "tow-group", ""],
            "F": ["4.31", "about 4", "4.2 or so", "about 4"],
            "DF1": ["2", "1", "", "2"],
            "df2": ["57", "38", "", "12"],
            "p": ["", "", "", ""],
            "n 1": ["20", "", "", ""],
            "Remark": ["x", "", "", ""],
        }
    )


def test_a_pilot_says_what_was_not_used() -> None:
    table = read(piloted(), book()).table
    found = pilot(table, book())
    assert found.rows == 4
    assert found.unfilled == ["p [F]: p_value"]
    assert "ss_total ('SS total')" in found.absent
    assert "median of any group" in found.absent
    assert "n of any group" not in found.absent
    assert found.unknown == ["Remark"]
    assert (found.designs["one-way"], found.designs["two-group"], found.designs["mixed"]) == (2, 1, 0)
    assert found.misspelt == {"tow-group": 1}
    assert misreadable(table, book()) == ["'DF1' was taken for 'df1'"]


def test_a_pilot_gathers_the_values_that_were_never_understood() -> None:
    found = pilot(read(piloted(), book()).table, book()).not_understood
    assert found["cells"].sum() == 3
    assert set(found["heading"]) == {"F"}
    assert found["first"].iloc[0] == "F [C3]"


# ---- one sample, two reports -----------------------------------------------------------------------------


def rows(*lines: dict[str, str]) -> pd.DataFrame:
    return duplicate_reports(read(pd.DataFrame(list(lines)).fillna("")).table)


TWO = {"design": "two-group", "n_1": "23", "n_2": "19", "mean_1": "4.31", "mean_2": "3.87"}


def test_the_same_sizes_and_means_in_two_studies_are_pointed_out() -> None:
    found = rows(
        {"study": "A", **TWO}, {"study": "B", **TWO}, {"study": "C", **TWO, "mean_1": "4.41", "n_1": "24"}
    )
    assert len(found) == 1
    line = found.iloc[0]
    assert (line["row_a"], line["row_b"], line["alike"], line["numbers"]) == (
        2,
        3,
        "group sizes and means",
        4,
    )
    assert line["shown"] == "group sizes 23, 19; means 4.31, 3.87"


def test_the_order_of_groups_does_not_hide_a_copy() -> None:
    turned = {"design": "two-group", "n_1": "19", "n_2": "23", "mean_1": "3.87", "mean_2": "4.31"}
    assert len(rows({"study": "A", **TWO}, {"study": "B", **turned})) == 1


def test_one_study_may_repeat_itself() -> None:
    assert rows({"study": "A", **TWO}, {"study": "A", **TWO}, {"study": "", **TWO}).empty


def test_equal_group_sizes_are_no_sign() -> None:
    row = {"design": "two-group", "n_1": "20", "n_2": "20"}
    assert rows({"study": "A", **row, "mean_1": "5"}, {"study": "B", **row, "mean_1": "6"}).empty


def test_the_same_f_with_its_df() -> None:
    row = {"design": "one-way", "f_value": "4.31", "df_effect": "2", "df_error": "57"}
    found = rows({"study": "A", **row}, {"study": "B", **row}, {"study": "C", **row, "df_error": "58"})
    assert found[["row_a", "row_b", "alike", "numbers"]].values.tolist() == [[2, 3, "F", 3]]
    lone = {"design": "one-way", "f_value": "4"}
    assert rows({"study": "A", **lone}, {"study": "B", **lone}).empty


def test_two_sizes_alone_are_no_sign_but_three_are() -> None:
    pair = {"design": "two-group", "n_1": "23", "n_2": "19"}
    assert rows({"study": "A", **pair}, {"study": "B", **pair}).empty
    three = {"design": "one-way", "n_1": "23", "n_2": "19", "n_3": "31"}
    assert rows({"study": "A", **three}, {"study": "B", **three})["alike"].tolist() == ["group sizes"]


def test_a_habit_of_the_field_is_not_listed() -> None:
    sizes = {"n_1": "20", "n_2": "20", "n_3": "21"}
    many = [{"study": f"S{at}", "design": "one-way", **sizes} for at in range(30)]
    assert rows(*many).empty


def test_an_empty_sheet_of_numbers_has_no_copies() -> None:
    assert rows({"study": "A", "design": "one-way"}, {"study": "B", "design": "one-way"}).empty


# ---- the command -----------------------------------------------------------------------------------------


def test_the_command(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    Path("faulty.toml").write_text(FAULTY, encoding="utf-8")
    refused = CliRunner().invoke(command, ["faulty.toml"])
    assert isinstance(refused.exception, InvalidCodebook)
    assert refused.stderr.count("line ") == 7
    Path("good.toml").write_text(
        'design = "one-way"\n[columns]\nf_value = "F"\nstudy = "Study"\n', encoding="utf-8"
    )
    alone = CliRunner().invoke(command, ["good.toml"], catch_exceptions=False)
    assert alone.stdout == "good.toml: valid.\n"
    piloted().to_csv("pilot.csv", index=False)
    shown = CliRunner().invoke(command, ["good.toml", "pilot.csv"], catch_exceptions=False)
    assert "Piloted on 4 rows." in shown.stdout
    assert "Designs never used: factorial" in shown.stdout
    assert "'tow-group': 1 row" in shown.stdout
