"""``extractor reconcile``: what is printed, written and refused. All data are invented."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest
from click.testing import CliRunner, Result

import extractor
from extractor.commands.reconcile import command
from extractor.errors import ExtractorError
from extractor.output.comparing import CONSENSUS, MERGED
from tests.double_coding import (
    CELLS,
    SHEET,
    TERMS,
    TO,
    changed,
    fill,
)


def run(*words: object) -> Result:
    return CliRunner().invoke(command, [str(word) for word in words])


@pytest.fixture
def two_files(tmp_path: Path) -> tuple[Path, Path]:
    """SHEET as two coders coded it: a mean that was misread, a country, a row only A has."""
    other = changed(SHEET, (0, "mean_1", "12.20"), (1, "country", "y")).iloc[:3]
    paths = tmp_path / "first.csv", tmp_path / "second.csv"
    for path, sheet in zip(paths, (SHEET, other), strict=True):
        sheet.to_csv(path, index=False)
    return paths


def test_the_command_says_who_agrees_on_what_and_what_matters(
    two_files: tuple[Path, Path], tmp_path: Path
) -> None:
    result = run(*two_files, "--to", TO, "--out", tmp_path / "out")
    assert result.exit_code == 0
    flat = " ".join(result.stdout.split())
    assert "A = first.csv, 4 rows B = second.csv, 3 rows 3 rows matched." in flat
    assert "2 cells in dispute, 1 of them touches hedges_g, the gravest first:" in flat
    assert "1. North Quay, recall: mean_1 is A 10.20 [D2]; B 12.20 [D2]. It moves the effect by" in flat
    assert "Mill Lane, recall: A row 5, not with B" in flat
    assert "Agreement between coders is not correctness" in flat
    written = sorted(path.name for path in (tmp_path / "out").iterdir())
    assert written == ["agreement.csv", "consensus.xlsx", "disputes.csv", "rows.csv"]
    lines = pd.read_csv(tmp_path / "out" / "disputes.csv")
    assert list(lines["variable"]) == ["mean_1", "country"]
    assert lines["shift"].iloc[0] > 0.5


def test_the_command_gives_the_merged_sheet_back(two_files: tuple[Path, Path], tmp_path: Path) -> None:
    assert run(*two_files, "--out", tmp_path / "out").exit_code == 0
    filled = tmp_path / "out" / CONSENSUS
    fill(filled, {"mean_1": "10.20", "country": "x"})
    fill(filled, {"": "keep"}, "rows")
    result = run(*two_files, "--consensus", filled, "--out", tmp_path / "final")
    assert result.exit_code == 0
    effects = extractor.convert(tmp_path / "final" / MERGED, TO).effects
    assert effects["estimate"].to_numpy() == pytest.approx(extractor.convert(SHEET, TO).effects["estimate"])
    again = run(*two_files, "--out", tmp_path / "out", "--force")
    assert "holds agreed values" in str(again.exception)


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (["first.csv"], "two sheets or more"),
        (["first.csv", "second.csv", "--level", "95"], "not between 0 and 1"),
        (["first.csv", "second.csv", "--consensus", "x.xlsx"], "with --out"),
        (["first.csv", "second.csv", "--to", "hedges"], "did you mean hedges_g"),
        (["first.csv", "third.csv"], "no such file"),
    ],
)
def test_the_command_refuses_with_one_sentence(
    two_files: tuple[Path, Path], monkeypatch: pytest.MonkeyPatch, words: list[str], message: str
) -> None:
    monkeypatch.chdir(two_files[0].parent)
    result = run(*words)
    assert isinstance(result.exception, ExtractorError)
    assert message in str(result.exception)


def test_sheets_of_groups_in_files_of_their_own_are_compared_and_settled(tmp_path: Path) -> None:
    cells = pd.DataFrame(CELLS, columns=["analysis", "age", "sex", "n", "mean", "sd"])
    for name, frame in (
        ("a", TERMS),
        ("b", TERMS[::-1]),
        ("groups_a", cells),
        ("groups_b", cells.replace({"mean": {"4.42": "4.24"}})),
    ):
        frame.to_csv(tmp_path / f"{name}.csv", index=False)
    a, b, groups_a, groups_b = (tmp_path / f"{name}.csv" for name in ("a", "b", "groups_a", "groups_b"))
    words = (a, b, "--groups", groups_a, "--groups", groups_b, "--out", tmp_path / "out")
    found = run(*words, "--to", "omega_squared")
    assert found.exit_code == 0
    lines = pd.read_csv(tmp_path / "out" / "disputes.csv")
    assert lines["variable"].tolist() == ["mean_2"]
    assert lines["shift"].iloc[0] > 0
    # settled as the second coder read it, the merged sheet gives the second coder's effects
    fill(tmp_path / "out" / CONSENSUS, {"mean_2": "4.24"})
    settled = (*words[:-1], tmp_path / "final", "--consensus", tmp_path / "out" / CONSENSUS)
    assert run(*settled).exit_code == 0
    merged = extractor.convert(tmp_path / "final" / MERGED, to="omega_squared").effects
    second = extractor.convert(b, to="omega_squared", groups=groups_b).effects
    assert merged["estimate"].tolist() == second["estimate"].tolist()[::-1]
    one = run(a, b, "--groups", groups_a)
    assert "2 sheets need 2 sheets of groups" in str(one.exception)
