"""Decisions: read, applied, shown, and refused where they cannot be meant."""

import datetime

import numpy as np
import openpyxl
import pandas as pd
import pytest

from extractor.audit.run import audit_evidence
from extractor.audit.support import unsupported
from extractor.codebook import default_codebook, parse_codebook
from extractor.decisions import apply_decisions, mark, read_decisions
from extractor.errors import UnreadableInput
from extractor.evidence import gather
from extractor.findings import Finding, Severity
from extractor.sheet import read_table

BOOK = default_codebook()
HEADINGS = "row,cell,decision,value,source,by,on,why"


def sheet(**columns):
    """Two coded rows: an F of 43.1 where the means, SDs and ns allow about 4.3, and an honest one."""
    row = {"study": "Study 1", "design": "one-way", "f_value": "43.1", "df_effect": "2", "df_error": "57"}
    for j, (mean, sd) in enumerate([("5.10", "1.20"), ("5.60", "1.10"), ("6.20", "1.25")], start=1):
        row |= {f"n_{j}": "20", f"mean_{j}": mean, f"sd_{j}": sd}
    return read_table(
        pd.DataFrame([row | columns, row | {"study": "Study 2", "f_value": "4.31"}], dtype=object), BOOK
    )


def decided(tmp_path, *lines, headings=HEADINGS):
    path = tmp_path / "decisions.csv"
    path.write_text("\n".join([headings, *lines]) + "\n", encoding="utf-8")
    return read_decisions(path)


def audited(table):
    found = audit_evidence(gather(table), None).findings
    return [f for f in found if f.severity >= Severity.INCONSISTENT]


def finding(row=2, cells=("f_value [C2]",), severity=Severity.INCONSISTENT):
    return Finding(row, "Study 1", severity, "contradiction", cells, "43.1", "said", "explained")


def test_a_csv_of_decisions(tmp_path):
    (one,) = decided(tmp_path, '2,f_value,Correct,9.31,"Table 2, p. 5",AB,2024-05-01,typing slip')
    assert (one.row, one.cell, one.decision, one.value) == (2, "f_value", "correct", "9.31")
    assert one.signed == "by AB on 2024-05-01 (Table 2, p. 5; typing slip)"


def workbook(tmp_path, rows, title="decisions"):
    book = openpyxl.Workbook()
    book.active.append(["study", "design", "f_value"])
    book.active.append(["Study 1", "one-way", 43.1])
    lines = book.create_sheet(title)
    for row in rows:
        lines.append(row)
    path = tmp_path / "coded.xlsx"
    book.save(path)
    return path


def test_the_sheet_of_a_workbook(tmp_path):
    when = datetime.datetime(2024, 5, 1)
    line = [2, "C2", "correct", 9.3, "Table 2", "AB", when, None]
    path = workbook(tmp_path, [HEADINGS.split(","), line], "Decisions")
    (one,) = read_decisions(path)
    assert (one.row, one.value, one.on) == (2, 9.3, "2024-05-01")
    corrected, _ = apply_decisions(read_table(path, BOOK), [one], BOOK)
    assert corrected.numbers["f_value", None].value[0] == 9.3


def test_the_decimals_of_a_workbook_cell_are_kept(tmp_path):
    path = workbook(tmp_path, [HEADINGS.split(","), [2, "C2", "correct", 9.3, "Table 2", "AB", None, None]])
    book = openpyxl.load_workbook(path)
    book["decisions"]["D2"].number_format = "0.00"
    book.save(path)
    corrected, _ = apply_decisions(read_table(path, BOOK), read_decisions(path), BOOK)
    assert corrected.numbers["f_value", None].decimals[0] == 2
    assert corrected.numbers["f_value", None].low[0] == pytest.approx(9.295)


def test_workbooks_that_decide_nothing(tmp_path):
    assert read_decisions(workbook(tmp_path, [], "notes")) == []
    assert read_decisions(workbook(tmp_path, [])) == []
    assert read_decisions(workbook(tmp_path, [HEADINGS.split(",")])) == []


@pytest.mark.parametrize(
    ("line", "cell", "said"),
    [
        ("two,f_value,keep,,,AB,,", "A2", "no row number"),
        ("2,f_value,drop,,,AB,,", "C2", "none of keep, correct, waive"),
        ("2,f_value,correct,,p. 5,AB,,", "D2", "needs its value"),
        ("2,f_value,correct,4.31,,AB,,", "E2", "needs its source"),
        ("2,,correct,4.31,p. 5,AB,,", "B2", "needs its cell"),
        ("2,f_value,keep,,,,,", "F2", "needs its by"),
        ("2,f_value,waive,,,AB,,", "H2", "needs its why"),
    ],
)
def test_lines_that_are_not_valid(tmp_path, line, cell, said):
    with pytest.raises(UnreadableInput, match=said) as fault:
        decided(tmp_path, line)
    assert "decisions.csv" in str(fault.value)
    assert f"cell {cell}: " in str(fault.value)
    assert "\n" not in str(fault.value)


def test_headings_that_are_not_valid(tmp_path):
    with pytest.raises(UnreadableInput, match="cell D1: 'valeu' is none of the columns"):
        decided(tmp_path, "2,f_value,keep,,AB", headings="row,cell,decision,valeu,by")
    with pytest.raises(UnreadableInput, match="cell D1: 'cell' stands twice"):
        decided(tmp_path, "2,f_value,keep,,AB", headings="row,cell,decision,cell,by")
    with pytest.raises(UnreadableInput, match="row 1: there is no column decision and by"):
        decided(tmp_path, "2,f_value", headings="row,cell")
    with pytest.raises(UnreadableInput, match="no column value: the decision to correct needs its value"):
        decided(tmp_path, "2,f_value,correct,AB", headings="row,cell,decision,by")
    with pytest.raises(UnreadableInput, match="row 2: more cells than headings"):
        decided(tmp_path, "2,f_value,keep,AB,extra", headings="row,cell,decision,by")


# --- corrections -------------------------------------------------------------------------------------


@pytest.mark.parametrize("cell", ["f_value", "F_Value", "C2", "$C$2", "f_value [C2]"])
def test_a_correction_replaces_one_cell(tmp_path, cell):
    table = sheet()
    decisions = decided(tmp_path, f"2,{cell},correct,4.31,Table 2,AB,2024-05-01,")
    corrected, notes = apply_decisions(table, decisions, BOOK)
    numbers = corrected.numbers["f_value", None]
    assert numbers.value.tolist() == [4.31, 4.31]
    assert (numbers.low[0], numbers.high[0]) == (pytest.approx(4.305), pytest.approx(4.315))
    assert numbers.understood[0] == "corrected from 43.1 to 4.31 by AB on 2024-05-01 (Table 2)"
    assert notes == ["f_value [C2] corrected from 43.1 to 4.31 by AB on 2024-05-01 (Table 2)"]
    assert corrected.notes == [*table.notes, *notes]
    # nothing else moved, and the table that was read still says what was printed
    assert table.numbers["f_value", None].value.tolist() == [43.1, 4.31]
    assert corrected.numbers["mean", 1] is table.numbers["mean", 1]


def test_a_corrected_number_is_read_by_the_codebook(tmp_path):
    book = parse_codebook('decimal_mark = ","\n[columns]\nf_value = ["F ratio"]', "comma")
    table = read_table(pd.DataFrame([{"F ratio": "43,1", "design": "one-way"}], dtype=object), book)
    for cell in ("F ratio", "f_value", "A2"):
        decisions = decided(tmp_path, f'2,{cell},correct,"4,31",p. 5,AB,,')
        corrected, _ = apply_decisions(table, decisions, book)
        assert corrected.numbers["f_value", None].value[0] == 4.31


def test_blank_and_refused_cells_can_be_filled(tmp_path):
    table = sheet(f_value="4.31 (ns)", df_error="")
    lines = ["2,f_value,correct,4.31,p. 5,AB,,", "2,df_error,correct,57,p. 5,AB,,"]
    corrected, notes = apply_decisions(table, decided(tmp_path, *lines), BOOK)
    assert corrected.numbers["df_error", None].value[0] == 57
    assert (corrected.numbers["f_value", None].problem == "").all()
    assert corrected.numbers["f_value", None].given.all()
    assert "corrected from blank to 57" in notes[1]


def test_a_correction_settles_two_readings(tmp_path):
    table = sheet(f_value="4.13", reported="F(2, 57) = 4.31")
    assert [f.rule for f in unsupported(gather(table))] == ["two readings"]
    corrected, _ = apply_decisions(table, decided(tmp_path, "2,f_value,correct,4.31,p. 5,AB,,"), BOOK)
    assert list(unsupported(gather(corrected))) == []


def test_numbers_of_running_text_are_named_one_by_one(tmp_path):
    row = {"study": "Study 1", "design": "one-way", "reported": "F(2, 57) = 43.1, p = .018"}
    table = read_table(pd.DataFrame([row], dtype=object), BOOK)
    with pytest.raises(
        UnreadableInput, match="cell B2: 'C2' holds df_effect, df_error, f_value and p_value; name"
    ):
        apply_decisions(table, decided(tmp_path, "2,C2,correct,4.31,p. 5,AB,,"), BOOK)
    corrected, _ = apply_decisions(table, decided(tmp_path, "2,f_value,correct,4.31,p. 5,AB,,"), BOOK)
    assert corrected.numbers["f_value", None].value[0] == 4.31


@pytest.mark.parametrize(
    ("line", "cell", "said"),
    [
        ("9,f_value,keep,,,AB,,", "A2", "no row 9"),
        (
            "2,f_valeu,keep,,,AB,,",
            "B2",
            "'f_valeu' is no heading or address of a number; did you mean f_value",
        ),
        (
            "2,beauty,correct,5,p. 5,AB,,",
            "B2",
            "'beauty' is no heading or address of a number; name a heading",
        ),
        ("2,t_value,keep,,,AB,,", "B2", "'t_value' is no heading or address of a number"),
        ("2,n_2000,correct,5,p. 5,AB,,", "B2", "a row holds at most"),
        ("2,sd,correct,5,p. 5,AB,,", "B2", "'sd' is no heading or address of a number"),
        ("2,direction,correct,up,p. 5,AB,,", "D2", "direction 'up' is neither"),
        ("9,direction,correct,+,p. 5,AB,,", "A2", "no row 9"),
        ("2,design,keep,,,AB,,", "B2", "'design' is no heading or address of a number"),
        ("2,ZZ2,keep,,,AB,,", "B2", "'ZZ2' is no heading or address"),
        ("2,C3,keep,,,AB,,", "B2", "'C3' is in row 3, the decision in row 2"),
        ("2,f_value [C3],keep,,,AB,,", "B2", "is in row 3, the decision in row 2"),
        ("2,f_value,correct,about 4,p. 5,AB,,", "D2", "approximate"),
        ("2,f_value,correct,NA,p. 5,AB,,", "D2", "code for a missing one"),
    ],
)
def test_decisions_that_cannot_be_applied(tmp_path, line, cell, said):
    with pytest.raises(UnreadableInput, match=said) as fault:
        apply_decisions(sheet(), decided(tmp_path, line), BOOK)
    assert f"cell {cell}: " in str(fault.value)


@pytest.mark.parametrize("cell", ["n_4", "N_4", "n_4 [new column]", "n_4 [row 2]"])
def test_a_correction_brings_along_a_column_that_the_sheet_lacks(tmp_path, cell):
    table = sheet()
    lines = [
        f"2,{cell},correct,21,e-mail,AB,,",
        "2,mean_4,correct,5.9,e-mail,AB,,",
        "2,sd_4,correct,1.1,e-mail,AB,,",
    ]
    decisions = decided(tmp_path, *lines)
    corrected, notes = apply_decisions(table, decisions, BOOK)
    assert corrected.numbers["n", 4].value.tolist() == [21, pytest.approx(np.nan, nan_ok=True)]
    assert corrected.numbers["n", 4].given.tolist() == [True, False]
    assert notes[0].endswith("[row 2] corrected from blank to 21 by AB (e-mail)")
    assert ("n", 4) not in table.numbers
    # the row now has four groups, which its df of three groups contradict; the other row is as it was
    assert {f.row for f in audited(corrected)} == {2}
    added = [f.cells for f in mark([], decisions, table, BOOK) if f.rule == "corrected"]
    assert added == [("mean_4 [row 2]",), ("n_4 [row 2]",), ("sd_4 [row 2]",)]


def test_a_name_that_is_also_an_address_is_not_guessed_at(tmp_path):
    book = parse_codebook('[columns]\nf_value = "A"\nmean_2 = "A2"', "letters")
    table = read_table(pd.DataFrame([{"A": "4.31", "design": "one-way"}], dtype=object), book)
    with pytest.raises(UnreadableInput, match="cell B2: 'A2' is an address and the name of a quantity"):
        apply_decisions(table, decided(tmp_path, "2,A2,correct,5.1,p. 5,AB,,"), book)
    corrected, _ = apply_decisions(table, decided(tmp_path, "2,A2 [row 2],correct,5.1,p. 5,AB,,"), book)
    assert corrected.numbers["mean", 2].value[0] == 5.1


@pytest.mark.parametrize("written", ["-", "\u2212", "'-"])
def test_a_direction_is_corrected_like_a_number(tmp_path, written):
    row = {
        "study": "Study 1",
        "design": "two-group",
        "t_value": "2.31",
        "n_1": "20",
        "n_2": "20",
        "direction": "+",
    }
    table = read_table(pd.DataFrame([row, row], dtype=object), BOOK)
    decisions = decided(tmp_path, f"2,direction,correct,{written},e-mail,AB,,")
    corrected, notes = apply_decisions(table, decisions, BOOK)
    assert corrected.fact("direction").tolist() == ["-", "+"]
    assert table.fact("direction").tolist() == ["+", "+"]
    assert notes == ["direction [row 2] corrected from + to - by AB (e-mail)"]
    (note,) = mark([], decisions, table, BOOK)
    assert (note.row, note.rule, note.printed) == (2, "corrected", "+")


def test_one_cell_is_decided_once(tmp_path):
    lines = ["2,direction,correct,+,p. 5,AB,,", "2,direction,correct,-,p. 6,AB,,"]
    with pytest.raises(UnreadableInput, match="the direction of row 2 is decided twice"):
        apply_decisions(sheet(), decided(tmp_path, *lines), BOOK)
    lines = ["2,f_value,keep,,,AB,,", "2,C2,waive,,,AB,,corrected test"]
    with pytest.raises(UnreadableInput, match="cell B3: 'C2' of row 2 is decided twice"):
        apply_decisions(sheet(), decided(tmp_path, *lines), BOOK)


# --- findings ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("line", "said"),
    [
        ("2,f_value,keep,,,AB,2024-05-01,", "kept by AB on 2024-05-01; explained"),
        ("2,C2,waive,,,AB,,a Welch test", "waived by AB (a Welch test); explained"),
    ],
)
def test_kept_and_waived_findings_become_notes(tmp_path, line, said):
    others = [finding(row=3, cells=("f_value [C3]",)), finding(cells=("mean_1 [G2]", "f_value [C2]"))]
    marked = mark([finding(), *others], decided(tmp_path, line), sheet(), BOOK)
    assert [f.severity for f in marked] == [Severity.INCONSISTENT, Severity.NOTE, Severity.INCONSISTENT]
    assert marked[1].explanation == said
    assert marked[0] == others[1]
    assert marked[2] == others[0]


def test_findings_without_a_cell_are_decided_by_a_blank_cell(tmp_path):
    findings = [finding(cells=(), severity=Severity.DOUBTFUL), finding()]
    marked = mark(findings, decided(tmp_path, "2,,keep,,,AB,,"), sheet(), BOOK)
    assert [(f.cells, f.severity) for f in marked] == [
        (("f_value [C2]",), Severity.INCONSISTENT),
        ((), Severity.NOTE),
    ]


def test_a_decision_whose_finding_vanished_is_reported(tmp_path):
    decisions = decided(tmp_path, "2,f_value,waive,,,AB,,a Welch test", "3,f_value,keep,,,AB,,")
    marked = mark([finding(cells=("mean_1 [G2]",))], decisions, sheet(), BOOK)
    lost = [f for f in marked if f.rule == "decision without a finding"]
    assert [(f.row, f.study, f.severity, f.cells) for f in lost] == [
        (2, "Study 1", Severity.NOTE, ("f_value [C2]",)),
        (3, "Study 2", Severity.NOTE, ("f_value [C3]",)),
    ]
    assert "the findings of this row name mean_1 [G2] first" in lost[0].message
    assert "the findings of this row name no cell first" in lost[1].message


def test_the_whole_way_of_a_correction(tmp_path):
    table = sheet()
    first = audited(table)
    assert [(f.row, f.severity, f.cells[0]) for f in first] == [(2, Severity.INCONSISTENT, "f_value [C2]")]
    decisions = decided(tmp_path, "2,f_value,correct,4.31,Table 2,AB,,")
    corrected, _ = apply_decisions(table, decisions, BOOK)
    (note,) = mark(audited(corrected), decisions, table, BOOK)
    assert (note.severity, note.rule, note.printed) == (Severity.NOTE, "corrected", "43.1")
    assert note.message == "corrected from 43.1 to 4.31 by AB (Table 2)"


def test_a_correction_that_does_not_help_stays_a_finding(tmp_path):
    table = sheet()
    decisions = decided(tmp_path, "2,f_value,correct,43.2,Table 2,AB,,")
    corrected, _ = apply_decisions(table, decisions, BOOK)
    still, note = mark(audited(corrected), decisions, table, BOOK)
    assert (still.severity, still.rule) == (Severity.INCONSISTENT, "contradiction")
    assert still.explanation.startswith("corrected by AB (Table 2)")
    assert note.rule == "corrected"


def test_a_correction_the_sheet_has_caught_up_with(tmp_path):
    decisions = decided(tmp_path, "3,f_value,correct,4.31,Table 2,AB,,")
    (note,) = mark([], decisions, sheet(), BOOK)
    assert note.rule == "decision without a finding"
    assert "the sheet itself now says 4.31" in note.message


def test_corrections_keep_the_table_whole(tmp_path):
    table = sheet()
    corrected, _ = apply_decisions(table, decided(tmp_path, "2,sd_2,correct,< 1.3,p. 5,AB,,"), BOOK)
    numbers = corrected.numbers["sd", 2]
    assert (numbers.comparator[0], numbers.comparator[1]) == ("<", "=")
    assert np.isnan(numbers.value[0])
    assert numbers.high[0] == pytest.approx(1.3)
    assert corrected.rows == table.rows
