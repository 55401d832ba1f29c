"""``extractor audit``."""

from __future__ import annotations

import csv
import json
import os
from pathlib import Path

import pytest

from extractor import cautions

from .conftest import Run


def test_findings_by_study_then_what_was_checked(run: Run) -> None:
    result = run("audit", "coded.csv")
    assert result.exit_code == 0
    lines = result.stdout.splitlines()
    assert lines[0] == "Mill Lane"
    assert lines[1].startswith("  row 4 inconsistent: ")
    flat = " ".join(result.stdout.split())
    assert "p_value in reported [D4]" in flat
    assert "explanation: a decimal point moved one place" in flat
    assert "could not be checked:" in flat
    assert "row 6: design 'nonsense' is not one of" in flat
    for caution in cautions.FINDINGS:
        assert caution in flat


def test_a_sheet_without_findings_says_so_and_keeps_the_cautions(run: Run, folder: Path) -> None:
    (folder / "fine.csv").write_text('study,design,reported\nA,one-way,"F(2, 57) = 4.31, p = .018"\n')
    result = run("audit", "fine.csv", "--fail-on", "doubtful")
    assert result.exit_code == 0
    assert "over 1 of 1 row. Findings: none." in result.stdout
    assert cautions.FINDINGS[3] in " ".join(result.stdout.split())


@pytest.mark.parametrize(("fail_on", "status"), [("impossible", 0), ("inconsistent", 3), ("doubtful", 3)])
def test_findings_set_the_exit_status(run: Run, fail_on: str, status: int) -> None:
    assert run("audit", "coded.csv", "--fail-on", fail_on).exit_code == status


def test_writes_findings_and_their_description(run: Run, folder: Path) -> None:
    result = run("audit", "coded.csv", "--out", "out")
    assert result.exit_code == 0
    assert sorted(os.listdir("out")) == ["datapackage.json", "findings.csv"]
    with Path("out/findings.csv").open(newline="", encoding="utf-8") as stream:
        rows = list(csv.DictReader(stream))
    assert [(row["row"], row["severity"]) for row in rows if row["severity"] == "inconsistent"] == [
        ("4", "inconsistent")
    ]
    described = json.loads(Path("out/datapackage.json").read_text(encoding="utf-8"))
    assert [resource["path"] for resource in described["resources"]] == ["findings.csv"]
    assert described["extractor:cautions"] == list(cautions.FINDINGS)
    assert "foreignKeys" not in described["resources"][0]["schema"]


def test_many_rows_of_one_reason_are_named_in_ranges(run: Run, folder: Path) -> None:
    rows = "".join(f"S{i},one-way,4.31\n" for i in range(30))
    (folder / "bare.csv").write_text("study,design,f_value\n" + rows)
    result = run("audit", "bare.csv")
    assert "30 rows could not be checked:" in result.stdout
    assert "rows 2-31: " in result.stdout
