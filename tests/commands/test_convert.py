"""``extractor convert``: what is printed and what is written."""

from __future__ import annotations

import csv
import hashlib
import io
import json
import math
import os
import pty
import subprocess
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import extractor
from extractor import cautions
from extractor.api import convert
from extractor.codebook import EFFECT_COLUMNS
from extractor.output import package
from extractor.output.columns import EFFECTS, FINDINGS

from .conftest import Run, environment

TO = ("--to", "omega_squared")
ALWAYS = ["datapackage.json", "derivations.json", "effects.csv", "findings.csv"]


def effects_of(folder: Path) -> pd.DataFrame:
    return convert(folder / "coded.csv", to="omega_squared").effects


NUMERIC = [name for name, column in EFFECTS.items() if column.kind != "string"]


def read_csv(source: str | io.StringIO) -> pd.DataFrame:
    """An effect table, its numbers to the last bit as Python reads them; pandas once rounded them otherwise."""
    frame = pd.read_csv(source, keep_default_na=False, dtype=str)
    return frame.assign(**{name: [float(text or "nan") for text in frame[name]] for name in NUMERIC})


def assert_same(found: pd.DataFrame, expected: pd.DataFrame) -> None:
    """Equal headings, texts and, to the last bit, numbers."""
    assert list(found.columns) == list(expected.columns)
    for name in expected.columns:
        if pd.api.types.is_numeric_dtype(expected[name]):
            numbers = found[name].astype(float).to_numpy()
            assert np.array_equal(numbers, expected[name].astype(float).to_numpy(), equal_nan=True), name
        else:
            texts = found[name].where(found[name].notna(), "").astype(str)
            assert list(texts) == list(expected[name].astype(str)), name


def read_workbook(path: Path, numbers: list[str]) -> pd.DataFrame:
    found = pd.read_excel(path, keep_default_na=False)
    return found.assign(**{name: pd.to_numeric(found[name]) for name in numbers})


def test_prints_every_row_with_counts_and_cautions(run: Run) -> None:
    result = run("convert", "coded.csv", *TO)
    assert result.exit_code == 0
    lines = result.stdout.splitlines()
    assert lines[0] == "omega_squared (ω²)"
    assert lines[1].split()[:3] == ["row", "study", "estimate"]
    assert [line.split()[0] for line in lines[3:8]] == ["2", "3", "4", "5", "6"]
    assert "North Quay" in lines[3]
    assert "0.09937" in lines[3]
    assert "blocked" in lines[7]
    assert "5 rows: 3 converted, 0 bounded and 2 blocked." in lines
    flat = " ".join(result.stdout.split())
    assert "blocked, row 6: design 'nonsense' is not one of" in flat
    for caution in (*cautions.EFFECTS, *cautions.FINDINGS):
        assert caution in flat


def test_piped_output_is_plain_and_of_known_width(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("FORCE_COLOR", "1")
    for said, width in (("", 120), ("80", 80), ("wide", 120)):
        monkeypatch.setenv("COLUMNS", said)
        lines = run("convert", "coded.csv", *TO).stdout.splitlines()
        assert "\x1b" not in "".join(lines)
        assert all(line == line.rstrip() for line in lines)
        assert width - 8 < max(map(len, lines)) <= width


def test_words_of_the_sheet_are_no_markup(run: Run, folder: Path) -> None:
    (folder / "odd.csv").write_text("study,design,reported\n[bold]A[/bold] [/x],one-way,F(2; 57) = 4\n")
    result = run("convert", "odd.csv", *TO)
    assert result.exit_code == 0
    assert "[bold]A[/bold] [/x]" in result.stdout


def test_words_of_the_sheet_cannot_steer_the_terminal(run: Run, folder: Path) -> None:
    sheet = 'study,outcome,design,\x1b]0;\x07F\x1b[31m,reported\n"A\x1b[2J",\x1b[1m,one-way,x,"F(2, 57) = 4, p = .9"\n'
    (folder / "odd.csv").write_text(sheet)
    for words in (("convert", "odd.csv", *TO), ("audit", "odd.csv"), ("trace", "odd.csv", "2", *TO)):
        result = run(*words)
        assert result.exit_code == 0
        assert "\x1b" not in result.output
        assert "\x07" not in result.output


def test_a_bound_is_shown_as_one(run: Run, folder: Path) -> None:
    (folder / "bound.csv").write_text("study,design,df_effect,df_error,p_value\nA,one-way,2,57,< .05\n")
    result = run("convert", "bound.csv", *TO)
    assert "1 rows" not in result.stdout
    assert "1 row: 0 converted, 1 bounded and 0 blocked." in result.stdout
    assert " to 1" in result.stdout.splitlines()[3]


def test_long_tables_are_cut_and_say_so(run: Run, folder: Path) -> None:
    rows = "".join(f"S{i},one-way,4.31,2,57\n" for i in range(1_003))
    (folder / "long.csv").write_text("study,design,f_value,df_effect,df_error\n" + rows)
    result = run("convert", "long.csv", *TO)
    assert "... and 3 rows more; --out DIR writes all of them" in result.stdout
    assert "1003 rows: 1003 converted" in result.stdout


def test_writes_the_four_files_and_nothing_beside(run: Run, folder: Path) -> None:
    result = run("convert", "coded.csv", *TO, "--out", "out")
    assert result.exit_code == 0
    assert "written to out" in result.stderr
    assert "5 rows" in result.stdout
    assert sorted(os.listdir("out")) == ALWAYS
    assert sorted(os.listdir(folder)) == ["coded.csv", "out"]


def test_every_format_reads_back_to_the_last_bit(run: Run, folder: Path) -> None:
    pytest.importorskip("pyarrow")
    formats = [word for kind in ("csv", "xlsx", "json", "parquet", "dta") for word in ("--format", kind)]
    assert run("convert", "coded.csv", *TO, "--out", "out", "--csv-raw", *formats).exit_code == 0
    expected = effects_of(folder)
    assert_same(read_csv("out/effects.csv"), expected)
    assert_same(read_workbook(Path("out/effects.xlsx"), NUMERIC), expected)
    assert_same(pd.DataFrame(json.loads(Path("out/effects.json").read_text()))[list(expected)], expected)
    assert_same(pd.read_parquet("out/effects.parquet"), expected)
    assert_same(pd.read_stata("out/effects.dta"), expected)


def test_formulas_are_neutralised_in_csv_unless_asked(run: Run) -> None:
    run("convert", "coded.csv", *TO, "--out", "safe")
    run("convert", "coded.csv", *TO, "--out", "raw", "--csv-raw")
    for folder, first in (("safe", "'=1+1"), ("raw", "=1+1")):
        with Path(folder, "effects.csv").open(newline="", encoding="utf-8") as stream:
            remarks = [row["remark"] for row in csv.DictReader(stream)]
        assert remarks == [first, "[red]shout[/red]", "", "", "-5"]
        described = json.loads(Path(folder, "datapackage.json").read_text())["resources"][0]
        assert ("apostrophe" in described["extractor:csvText"]) == (folder == "safe")


def test_columns_are_described_one_by_one() -> None:
    from extractor.findings import COLUMNS as FINDING_COLUMNS

    assert tuple(EFFECTS) == EFFECT_COLUMNS
    assert list(FINDINGS) == FINDING_COLUMNS


def test_package_describes_its_files(run: Run, folder: Path) -> None:
    """Data Package, version 2 (datapackage.org): required properties, hashes and fields hold."""
    run(
        "convert",
        "coded.csv",
        *TO,
        "--out",
        "out",
        "--format",
        "xlsx",
        "--codebook",
        "one-way",
        "--level",
        ".9",
    )
    content = Path("out/datapackage.json").read_text(encoding="utf-8")
    described = json.loads(content)
    assert content.endswith("}\n")
    assert described["$schema"] == "https://datapackage.org/profiles/2.0/datapackage.json"
    assert [r["path"] for r in described["resources"]] == [
        "effects.csv",
        "findings.csv",
        "derivations.json",
        "effects.xlsx",
        "annotated.xlsx",
    ]
    assert len({r["name"] for r in described["resources"]}) == 5
    for resource in described["resources"]:
        written = Path("out", resource["path"]).read_bytes()
        assert resource["bytes"] == len(written)
        assert resource["hash"] == "sha256:" + hashlib.sha256(written).hexdigest()
    sheet = hashlib.sha256((folder / "coded.csv").read_bytes()).hexdigest()
    assert described["sources"][0] == {
        "title": "coded sheet",
        "path": "coded.csv",
        "extractor:hash": f"sha256:{sheet}",
    }
    assert described["extractor:settings"]["metric"] == "omega_squared"
    assert described["extractor:settings"]["codebook"] == "one-way"
    assert described["extractor:settings"]["level"] == 0.9
    assert described["extractor:software"]["version"] == extractor.__version__
    assert set(cautions.EFFECTS) | set(cautions.FINDINGS) == set(described["extractor:cautions"])
    for resource in described["resources"][:2]:
        check_rows_against_schema(Path("out", resource["path"]), resource["schema"])


def check_rows_against_schema(path: Path, schema: dict[str, list[dict[str, object]]]) -> None:
    """Every cell has the type its field declares and keeps to its constraints."""
    with path.open(newline="", encoding="utf-8") as stream:
        rows = list(csv.DictReader(stream))
    assert rows
    assert [field["name"] for field in schema["fields"]] == list(rows[0])
    for field in schema["fields"]:
        cells = [row[str(field["name"])] for row in rows]
        constraints = field.get("constraints", {})
        assert isinstance(constraints, dict)
        assert not (constraints.get("required") and "" in cells)
        assert not (constraints.get("unique") and len(set(cells)) < len(cells))
        for cell in filter(None, cells):
            assert cell in constraints.get("enum", [cell])
            if field["type"] == "integer":
                assert int(cell) >= constraints.get("minimum", -math.inf)
            elif field["type"] == "number":
                assert float(cell) >= constraints.get("minimum", -math.inf)


def test_derivations_lead_from_cells_to_estimates(run: Run, folder: Path) -> None:
    run("convert", "coded.csv", *TO, "--out", "out")
    found = json.loads(Path("out/derivations.json").read_text(encoding="utf-8"))
    effects = effects_of(folder)
    assert [row["row"] for row in found["rows"]] == list(effects["row"])
    for row, effect in zip(found["rows"], effects.to_dict("records"), strict=True):
        assert row["status"] == effect["status"]
        if effect["status"] != "converted":
            assert row["steps"] == []
            continue
        known: set[str] = set()
        for step in row["steps"]:
            if "relation" in step:
                relation = found["relations"][step["relation"]]
                assert relation["gives"] == step["quantity"]
                assert set(relation["needs"]) <= known
                assert relation["source"]
            known.add(step["quantity"])
        last = [step for step in row["steps"] if step["quantity"] == row["metric"]]
        assert [step["value"] for step in last] == [row["estimate"]] == [effect["estimate"]]
        chosen = [other for other in row["alternatives"] if other["chosen"]]
        assert [other["estimate"] for other in chosen] == [row["estimate"]]


def test_derivations_of_many_rows_stay_with_their_rows(run: Run, folder: Path) -> None:
    rows = "".join(f"S{i},one-way,{2 + i / 1000:.3f},2,57\n" for i in range(4_100))
    (folder / "long.csv").write_text("study,design,f_value,df_effect,df_error\n" + rows)
    assert run("convert", "long.csv", *TO, "--out", "out").exit_code == 0
    found = json.loads(Path("out/derivations.json").read_text(encoding="utf-8"))["rows"]
    printed = [step["value"] for row in found for step in row["steps"] if step["quantity"] == "f_value"]
    assert printed == [round(2 + i / 1000, 3) for i in range(4_100)]


def test_columns_are_renamed_in_every_effect_file(run: Run) -> None:
    words = ("--rename", "estimate=effect_size", "--rename", "row=line", "--format", "json")
    assert run("convert", "coded.csv", *TO, "--out", "out", *words).exit_code == 0
    heading = Path("out/effects.csv").read_text(encoding="utf-8").splitlines()[0].split(",")
    assert heading[0] == "line"
    assert heading[5] == "effect_size"
    assert "effect_size" in json.loads(Path("out/effects.json").read_text())[0]
    described = json.loads(Path("out/datapackage.json").read_text())["resources"]
    assert described[0]["schema"]["primaryKey"] == ["line"]
    assert described[0]["schema"]["fields"][5]["extractor:column"] == "estimate"
    assert described[1]["schema"]["foreignKeys"][0]["reference"]["fields"] == ["line"]


def test_the_codebook_renames_and_the_command_line_wins(run: Run, folder: Path) -> None:
    (folder / "ours.toml").write_text('[rename]\nestimate = "theirs"\nvariance = "spread"\n')
    words = ("--codebook", "ours.toml", "--format", "csv", "--rename", "estimate=mine")
    heading = run("convert", "coded.csv", *TO, *words).stdout.splitlines()[0].split(",")
    assert heading[5:7] == ["mine", "spread"]


def test_csv_and_json_go_to_standard_output(run: Run, folder: Path) -> None:
    result = run("convert", "coded.csv", *TO, "--format", "csv", "--csv-raw")
    expected = effects_of(folder)
    assert_same(read_csv(io.StringIO(result.stdout)), expected)
    assert cautions.EFFECTS[0] in result.stderr
    result = run("convert", "coded.csv", *TO, "--format", "json")
    assert_same(pd.DataFrame(json.loads(result.stdout))[list(expected)], expected)


def test_reads_standard_input(run: Run, folder: Path) -> None:
    text = (folder / "coded.csv").read_text(encoding="utf-8")
    result = run("convert", "-", *TO, "--out", "out", text=text)
    assert result.exit_code == 0
    expected = run("convert", "coded.csv", *TO, "--format", "csv").stdout
    assert Path("out/effects.csv").read_text(encoding="utf-8") == expected
    described = json.loads(Path("out/datapackage.json").read_text())
    assert described["sources"][0]["title"] == "coded sheet: standard input"


def test_force_replaces_what_an_earlier_run_wrote(run: Run) -> None:
    run("convert", "coded.csv", *TO, "--out", "out", "--format", "json")
    Path("out/notes.txt").write_text("mine")
    result = run("convert", "coded.csv", "--to", "eta_squared", "--out", "out", "--force")
    assert result.exit_code == 0
    assert sorted(os.listdir("out")) == sorted([*ALWAYS, "notes.txt"])
    assert "eta_squared" in Path("out/effects.csv").read_text(encoding="utf-8")


def test_a_failure_while_writing_leaves_nothing(
    run: Run, folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(package, "write_derivations", full)
    result = run("convert", "coded.csv", *TO, "--out", "out")
    assert result.exit_code == 2
    assert "No space left on device" in result.stderr
    assert os.listdir(folder) == ["coded.csv"]


@pytest.mark.parametrize(("fail_on", "status"), [("impossible", 0), ("inconsistent", 3), ("doubtful", 3)])
def test_findings_set_the_exit_status(run: Run, fail_on: str, status: int) -> None:
    result = run("convert", "coded.csv", *TO, "--out", "out", "--fail-on", fail_on)
    assert result.exit_code == status
    assert sorted(os.listdir("out")) == ALWAYS


def test_same_input_same_bytes(folder: Path) -> None:
    """Neither hash seed nor locale nor time zone nor the clock shows in any file."""
    formats = ["--format", "xlsx", "--format", "json", "--format", "dta"]
    for name, variables in {
        "one": {"PYTHONHASHSEED": "1", "LC_ALL": "C", "TZ": "UTC"},
        "two": {"PYTHONHASHSEED": "2", "LC_ALL": "C.UTF-8", "TZ": "Asia/Tokyo"},
    }.items():
        subprocess.run(
            [sys.executable, "-m", "extractor", "convert", "coded.csv", *TO, "--out", name, *formats],
            env=environment(**variables),
            check=True,
            capture_output=True,
        )
    names = sorted(os.listdir("one"))
    assert names == sorted(os.listdir("two"))
    assert len(names) == 8
    for name in names:
        assert Path("one", name).read_bytes() == Path("two", name).read_bytes(), name


@pytest.mark.parametrize("colour", [True, False])
def test_colour_on_a_terminal_unless_no_color(folder: Path, colour: bool) -> None:
    """NO_COLOR, present and not empty, switches colour off (no-color.org)."""
    variables = environment(TERM="xterm-256color", COLUMNS="100")
    for name in ("NO_COLOR", "FORCE_COLOR"):
        variables.pop(name, None)
    if not colour:
        variables["NO_COLOR"] = "1"
    ours, theirs = pty.openpty()
    with subprocess.Popen(
        [sys.executable, "-m", "extractor", "convert", "coded.csv", *TO],
        stdout=theirs,
        stderr=subprocess.PIPE,
        env=variables,
    ) as process:
        os.close(theirs)
        shown = b""
        while True:
            try:
                part = os.read(ours, 65_536)
            except OSError:
                break
            if not part:
                break
            shown += part
    os.close(ours)
    assert process.returncode == 0
    assert b"North Quay" in shown
    assert (b"\x1b[31m" in shown or b"\x1b[32m" in shown) == colour
