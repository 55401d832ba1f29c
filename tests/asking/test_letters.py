"""Letters to authors: what they ask, how they sound, and how the replies come back."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pandas as pd
import pytest
from click.testing import CliRunner, Result
from openpyxl import Workbook

from extractor.api import Reading, read
from extractor.asking.letters import LOG_COLUMNS, PHRASES, Letter, letters
from extractor.asking.questions import Aim, questions
from extractor.asking.replies import read_replies
from extractor.codebook import default_codebook
from extractor.commands.main import cli
from extractor.commands.unlock import command
from extractor.decisions import COLUMNS, apply_decisions, read_decisions
from extractor.errors import UnreadableInput, UsageError
from extractor.output.letter_texts import LOG, log_frame, markdown, plain_text, write_letters
from extractor.output.tables import write_csv
from extractor.routes.conversion import convert_evidence
from extractor.routes.unlock import ASKABLE

ROWS = [
    {
        "study": "Nørre Bay / 2",
        "outcome": "recall",
        "page": "412",
        "design": "two-group",
        "n_1": "20",
        "n_2": "22",
        "mean_1": "10.2",
        "mean_2": "8.6",
        "sd_1": "",
        "sd_2": "",
        "t_value": "",
        "direction": "",
    },
    {"study": "Mill Lane", "outcome": "sleep", "design": "two-group", "f_value": "4.31", "df_error": "38"},
    {
        "study": "East *Gate*",
        "design": "one-way",
        "page": "7",
        "f_value": "43.1",
        "df_effect": "2",
        "df_error": "57",
        "eta_squared": ".131",
        "outcome": "pain | ache",
    },
    {"study": "Well Reported", "design": "one-way", "f_value": "4.31", "df_effect": "1", "df_error": "57"},
]


def reading(rows: list[dict[str, str]] | None = None) -> Reading:
    return read(pd.DataFrame(rows or ROWS).fillna(""))


def drafted(metric: str = "cohens_d", rows: list[dict[str, str]] | None = None) -> list[Letter]:
    found = reading(rows)
    conversion = convert_evidence(found.evidence, metric)
    return letters(conversion, questions(conversion), found.audit(conversion).findings)


# ---- what is asked ---------------------------------------------------------------------------------------


def test_one_letter_for_each_study_with_something_to_ask() -> None:
    found = drafted("omega_squared")
    # Mill Lane and Well Reported give all that is needed
    assert [letter.study for letter in found] == ["Nørre Bay / 2", "East *Gate*"]
    assert [letter.name for letter in found] == ["norre-bay-2", "east-gate"]


def test_a_letter_asks_for_the_fewest_numbers_and_says_where_they_go() -> None:
    first = drafted()[0]
    assert [line.asked for line in first.lines] == [
        "standard deviation of the scores (not the standard error), group 1",
        "standard deviation of the scores (not the standard error), group 2",
    ]
    assert [line.cell for line in first.lines] == ["sd_1 [I2]", "sd_2 [J2]"]
    assert first.parts[0].title == "recall, page 412"
    assert first.parts[0].instead == "F value of this effect"


def test_every_askable_number_has_words_of_its_own() -> None:
    assert PHRASES.keys() | {"sd_difference"} == ASKABLE
    assert len(set(PHRASES.values())) == len(PHRASES)


def test_letters_are_courteous_and_accuse_nobody() -> None:
    for letter in drafted("omega_squared") + drafted():
        for text in (markdown(letter), plain_text(letter)):
            assert "Dear [name" in text
            assert "Thank you" in text
            assert not re.search(
                r"\b(error in|wrong|mistake|impossible|inconsistent|incorrect|false)\b", text, re.I
            )
            assert not re.search(r"\b(nan|None|inf)\b", text)


def test_a_finding_becomes_a_question() -> None:
    """F(2, 57) = 43.1 with η² = .131: η² is F·2/(F·2 + 57), so F lies from 4.28 to 4.32 (arithmetic)."""
    letter = next(letter for letter in drafted("omega_squared") if letter.study == "East *Gate*")
    question = letter.findings[0]
    assert question.endswith("?")
    assert "page 7" in question
    assert "43.1" in question
    bounds = [float(n) for n in re.findall(r"between (\d+\.\d+) and (\d+\.\d+)", question)[0]]
    assert bounds == pytest.approx([57 / 2 * 0.1305 / 0.8695, 57 / 2 * 0.1315 / 0.8685], abs=2e-3)


def test_groups_are_named_by_what_the_article_says_of_them() -> None:
    text = drafted()[0].groups
    assert "n = 20 and M = 10.2" in text
    assert "n = 22 and M = 8.6" in text
    # a single number of the whole row needs no groups
    row = {"study": "A", "design": "one-way", "df_effect": "2", "df_error": "57"}
    (single,) = drafted("eta_squared", [row])
    assert [line.asked for line in single.lines] == [PHRASES["f_value"]]
    assert single.groups == ""


def test_numbers_of_a_whole_model_are_asked_for_once_and_go_into_every_row() -> None:
    model = {"study": "A", "outcome": "sleep", "design": "factorial", "analysis": "m"}
    terms = [("diet", "12.40", "1"), ("season", "3.10", "2"), ("diet x season", "1.80", "2")]
    rows = [
        model | {"term": term, "f_value": f, "df_effect": df, "df_error": "84", "ss_total": ""}
        for term, f, df in terms
    ]
    (letter,) = drafted("omega_squared", rows)
    asked = [(title, line.asked) for title, line in letter.numbers]
    assert asked == [
        ("sleep, diet", PHRASES["ss_effect"]),
        ("sleep, diet", PHRASES["ss_total"]),
        ("sleep, season", PHRASES["ss_effect"]),
        ("sleep, diet x season", PHRASES["ss_effect"]),
    ]
    totals = log_frame([letter])["cell"]
    assert totals[totals.str.startswith("ss_total")].tolist() == [f"ss_total [I{row}]" for row in (2, 3, 4)]
    # what holds of all results is said once
    for text in (markdown(letter), plain_text(letter)):
        assert text.count("we have had to assume so far") == 1
        assert " ".join(text.split()).count("cells of equal size") == 1
    assert "| 3 | sleep, season | sum of squares of this effect | |" in markdown(letter)


def test_words_of_the_sheet_are_not_taken_for_markup() -> None:
    text = markdown(next(letter for letter in drafted("omega_squared") if letter.study == "East *Gate*"))
    assert "“East *Gate*”" in text
    assert all("*" not in line.replace("\\*", "") for line in text.splitlines() if line.startswith("#"))
    table = [line for line in markdown(drafted()[0]).splitlines() if line.startswith("|")]
    assert all(line.count("|") == 4 for line in table)


def test_plain_text_fits_an_e_mail() -> None:
    for letter in drafted("omega_squared") + drafted():
        assert max(map(len, plain_text(letter).splitlines())) <= 78


def test_names_of_files_never_clash() -> None:
    row = {"design": "two-group", "f_value": "4.31", "df_error": "38"}
    studies = ["A b", "a-b", "A/B", "CON", "…", ""]
    names = [letter.name for letter in drafted("cohens_d", [{**row, "study": s} for s in studies])]
    assert len({name.casefold() for name in names}) == len(studies)
    assert all(re.fullmatch(r"[a-z0-9-]+", name) for name in names)
    assert "con" not in names


def test_only_the_gaps_that_were_asked_for() -> None:
    conversion = convert_evidence(reading().evidence, "cohens_d")
    assert letters(conversion, questions(conversion), [], aims=[Aim.TIGHTENS]) == []


# ---- files -----------------------------------------------------------------------------------------------


def test_files_of_a_folder(tmp_path: Path) -> None:
    found = drafted()
    write_letters(tmp_path / "letters", found, force=False)
    names = sorted(path.name for path in (tmp_path / "letters").iterdir())
    assert names == sorted([*(f"{letter.name}{e}" for letter in found for e in (".md", ".txt")), LOG])
    log = pd.read_csv(tmp_path / "letters" / LOG, dtype=str, keep_default_na=False)
    assert tuple(log.columns) == LOG_COLUMNS
    assert len(log) == sum(len(letter.lines) for letter in found)
    with pytest.raises(UsageError, match="exists"):
        write_letters(tmp_path / "letters", found, force=False)


# ---- replies ---------------------------------------------------------------------------------------------


def log_with(tmp_path: Path, values: dict[str, str], **columns: str) -> Path:
    frame = log_frame(drafted())
    frame["value"] = [values.get(cell, "") for cell in frame["cell"]]
    for name, text in columns.items():
        frame.loc[frame["value"] != "", name] = text
    path = tmp_path / "replies.csv"
    write_csv(frame, path)
    return path


def test_replies_become_decisions_that_open_the_row(tmp_path: Path) -> None:
    path = log_with(tmp_path, {"sd_1 [I2]": "3.10", "sd_2 [J2]": "2.9"}, by="coder 2", on="2026-03-04")
    coded = reading()
    found = read_replies(path, coded.table, default_codebook())
    assert tuple(found.decisions.columns) == COLUMNS
    assert found.decisions["value"].tolist() == ["3.10", "2.9"]
    assert set(found.decisions["source"]) == {"reply of the authors"}
    assert found.waiting == len(log_frame(drafted())) - 2
    decided = tmp_path / "decisions.csv"
    write_csv(found.decisions, decided)
    table, notes = apply_decisions(coded.table, read_decisions(decided), default_codebook())
    assert len(notes) == 2
    assert "corrected from blank to 3.10 by coder 2 on 2026-03-04" in notes[0]
    from extractor.evidence import gather

    effects = convert_evidence(gather(table), "cohens_d").effects
    assert effects["status"].iloc[0] == "converted"
    # pooled SD of 3.10 (n = 20) and 2.9 (n = 22)
    pooled = ((19 * 3.10**2 + 21 * 2.9**2) / 40) ** 0.5
    assert effects["estimate"].iloc[0] == pytest.approx(1.6 / pooled, rel=1e-9)


def test_replies_in_a_workbook(tmp_path: Path) -> None:
    book = Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.title = "replies"
    sheet.append(["row", "cell", "value", "source"])
    sheet.append([2, "sd_1 [I2]", 3.1, "e-mail of 4 March"])
    sheet.append([2, "sd_2 [J2]", "no longer available", ""])
    sheet.append([2, "direction", "+", ""])
    book.save(tmp_path / "replies.xlsx")
    found = read_replies(tmp_path / "replies.xlsx", reading().table, default_codebook())
    sheet.append([3, "orientation", "lower is better", ""])
    book.save(tmp_path / "replies.xlsx")
    found = read_replies(tmp_path / "replies.xlsx", reading().table, default_codebook())
    assert found.decisions["source"].tolist() == ["e-mail of 4 March", "reply of the authors"]
    assert found.decisions["cell"].tolist() == ["sd_1 [I2]", "direction"]
    assert found.declined == [(2, "sd_2 [J2]")]
    assert found.words == [(3, "orientation", "lower is better")]


@pytest.mark.parametrize(
    ("contrast", "reply", "sign"),
    [
        ("", "group 1", "+"),
        ("", "Group 2", "-"),
        ("2 - 1", "the group 1 had the higher mean", "-"),
        ("1 - 3", "condition 3", "-"),
        ("", "−", "-"),
        ("1 - 3", "group 2", ""),
        ("", "the treated ones", ""),
    ],
)
def test_which_group_was_higher_gives_the_direction_of_the_contrast(
    tmp_path: Path, contrast: str, reply: str, sign: str
) -> None:
    """A contrast a - b is positive where group a has the higher mean (its definition)."""
    (tmp_path / "r.csv").write_text(f"row,cell,value\n2,direction,{reply}\n", encoding="utf-8")
    found = read_replies(
        tmp_path / "r.csv", reading([ROWS[1] | {"contrast": contrast}]).table, default_codebook()
    )
    assert found.decisions["value"].tolist() == ([sign] if sign else [])
    assert found.words == ([] if sign else [(2, "direction", reply)])


def test_a_reply_for_a_column_that_the_sheet_lacks_says_so(tmp_path: Path) -> None:
    (tmp_path / "r.csv").write_text("row,cell,value\n2,correlation,.5\n", encoding="utf-8")
    found = read_replies(tmp_path / "r.csv", reading().table, default_codebook())
    assert found.new_columns == ["correlation"]
    assert found.decisions["cell"].tolist() == ["correlation"]


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("row,cell,value\n99,sd_1,3\n", "cell A2: the coded sheet has no row 99"),
        ("row,cell,value\nx,sd_1,3\n", "is no row number"),
        ("row,cell,value\n2,sd_1,about three\n", "cell C2"),
        ("row,cell,value\n2,beauty,3\n", "is no heading of the sheet or name of a quantity"),
        ("row,cell\n2,sd_1\n", "there is no column value"),
        ("row,cell,value\n2,sd_1,3,5\n", "more cells than headings"),
    ],
)
def test_logs_that_are_refused(tmp_path: Path, text: str, says: str) -> None:
    (tmp_path / "r.csv").write_text(text, encoding="utf-8")
    with pytest.raises(UnreadableInput, match=re.escape(says)):
        read_replies(tmp_path / "r.csv", reading().table, default_codebook())


# ---- the command -----------------------------------------------------------------------------------------


@pytest.fixture
def coded(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> str:
    monkeypatch.chdir(tmp_path)
    pd.DataFrame(ROWS).fillna("").to_csv("coded.csv", index=False)
    return "coded.csv"


def test_the_command_shows_questions_and_drafts_letters(coded: str) -> None:
    shown = CliRunner().invoke(
        command, [coded, "--to", "cohens_d", "--letters", "letters"], catch_exceptions=False
    )
    assert "SD of groups 1 and 2" in shown.stdout
    assert "The questions that would do most" in shown.stdout
    assert "letters drafted in letters" in shown.stderr
    assert Path("letters/norre-bay-2.md").exists()
    again = CliRunner().invoke(command, [coded, "--to", "cohens_d", "--letters", "letters"])
    assert isinstance(again.exception, UsageError)


def test_the_command_turns_a_log_into_decisions_on_standard_output(coded: str, tmp_path: Path) -> None:
    Path("r.csv").write_text(
        "row,cell,value,by\n2,sd_1 [I2],3.1,coder 1\n2,direction,?!,\n", encoding="utf-8"
    )
    shown = CliRunner().invoke(command, [coded, "--to", "cohens_d", "--log", "r.csv"], catch_exceptions=False)
    assert shown.stdout.splitlines()[0] == ",".join(COLUMNS)
    assert shown.stdout.splitlines()[1].startswith("2,sd_1 [I2],correct,3.1,reply of the authors,coder 1")
    assert "row 2: direction is no number; type '?!' into the sheet" in shown.stderr
    both = CliRunner().invoke(command, [coded, "--to", "cohens_d", "--log", "r.csv", "--letters", "x"])
    assert isinstance(both.exception, UsageError)


def test_the_whole_way_from_letters_to_converted_rows(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Gaps, letters, replies typed into the log, decisions: every row converts and says where its numbers are from."""
    monkeypatch.chdir(tmp_path)
    rows = [
        {
            "study": "North",
            "design": "one-way",
            "page": "7",
            "f_value": "",
            "df_effect": "2",
            "df_error": "57",
        },
        {"study": "South", "design": "two-group", "f_value": "4.31", "df_error": "38"},
        {"study": "West", "design": "one-way", "f_value": "", "n_1": "20", "mean_1": "5.1", "sd_1": "1.2"},
    ]
    pd.DataFrame(rows).fillna("").to_csv("coded.csv", index=False)
    coded = Path("coded.csv").read_bytes()

    def run(*words: str) -> Result:
        found = CliRunner().invoke(cli, list(words), catch_exceptions=False)
        assert found.exit_code == 0, found.stderr
        return found

    def converted(*more: str) -> pd.DataFrame:
        found = run("convert", "coded.csv", "--to", "hedges_g", "--out", "out", "--force", *more)
        assert found
        return pd.read_csv("out/effects.csv", keep_default_na=False)

    assert set(converted()["status"]) == {"blocked"}
    run("unlock", "coded.csv", "--to", "hedges_g", "--letters", "letters")
    log = pd.read_csv(f"letters/{LOG}", dtype=str, keep_default_na=False)
    # the sheet has none of these columns
    assert {"t_value", "direction"} <= set(log["cell"])
    answers = {"t_value": "2.31", "direction": "group 2", "n": "20", "mean": "5.6", "sd": "1.10"}
    log["value"] = [answers[re.sub(r"_\d+$", "", cell.partition(" [")[0])] for cell in log["cell"]]
    log["source"] = "e-mail of 4 March"
    log.to_csv(f"letters/{LOG}", index=False)
    replies = run("unlock", "coded.csv", "--to", "hedges_g", "--log", f"letters/{LOG}")
    Path("decisions.csv").write_text(replies.stdout, encoding="utf-8")
    effects = converted("--decisions", "decisions.csv")
    assert effects["status"].tolist() == ["converted"] * 3
    # two groups of 20 by an F of 4.31 against the second (J = 1 - 3/(4 df - 1), g = J * 2t/sqrt(N))
    south = -(4.31**0.5) * 2 / 40**0.5 * (1 - 3 / (4 * 38 - 1))
    assert effects["estimate"][1] == pytest.approx(south, abs=2e-3)
    trail = json.loads(Path("out/derivations.json").read_text(encoding="utf-8"))
    said = json.dumps(trail["rows"][0])
    assert "corrected from blank to 2.31 by authors of North (e-mail of 4 March" in said
    findings = pd.read_csv("out/findings.csv", keep_default_na=False)
    assert (findings["rule"] == "corrected").sum() == len(log)
    assert Path("coded.csv").read_bytes() == coded
