"""Large sheets: blocks, processes and file formats give the same bytes; rows of one study or model stay together."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from click.testing import CliRunner

from extractor.blockwise import looked_through, run, sheet_of
from extractor.commands.main import cli
from extractor.output.appended import Auditing, Converting, write_blocks
from extractor.output.request import Request
from tests.evidence import mixed
from tests.evidence.partitions import METRIC, cells

ROWS = 700
FILES = ("effects.csv", "findings.csv", "derivations.json")


@pytest.fixture(scope="module")
def sheet(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Mixed honest rows, every fifth with a slip in its F, and models whose terms stand apart."""
    frame = cells(ROWS, kinds=10)
    wrong = (np.arange(ROWS) % 5 == 0) & (frame["f_value"] != "")
    frame.loc[wrong, "f_value"] = [f"{float(f) * 3:.2f}" for f in frame.loc[wrong, "f_value"]]
    path = tmp_path_factory.mktemp("sheets") / "coded.csv"
    frame.to_csv(path, index=False)
    return path


def written(
    sheet: Path, folder: Path, size: int, workers: int = 1, metric: str | None = METRIC
) -> list[bytes]:
    """What a run in blocks of a size writes."""
    given = sheet_of(sheet, None, None, None)
    request = Request(sheet=str(sheet), metric=metric)
    work = Converting(request) if metric else Auditing(request)
    blocks = looked_through(given, size)
    write_blocks(folder, run(given, blocks, work, workers), request, force=True, tick=lambda _: None)
    return [(folder / name).read_bytes() for name in (FILES if metric else FILES[1:2])]


@pytest.fixture(scope="module")
def whole(sheet: Path, tmp_path_factory: pytest.TempPathFactory) -> list[bytes]:
    """The sheet as one block."""
    return written(sheet, tmp_path_factory.mktemp("whole") / "out", ROWS)


@pytest.mark.parametrize("size", [1, 90, 333])
def test_where_a_sheet_is_cut_changes_no_byte(
    sheet: Path, whole: list[bytes], tmp_path: Path, size: int
) -> None:
    assert len(looked_through(sheet_of(sheet, None, None, None), size).cuts.ends) > 1
    assert written(sheet, tmp_path / "out", size) == whole


def test_two_processes_change_no_byte(sheet: Path, whole: list[bytes], tmp_path: Path) -> None:
    assert written(sheet, tmp_path / "out", 200, workers=2) == whole


def test_parquet_gives_what_csv_gives(sheet: Path, whole: list[bytes], tmp_path: Path) -> None:
    path = tmp_path / "coded.parquet"
    pd.read_csv(sheet, dtype=str, keep_default_na=False).to_parquet(path)
    assert written(path, tmp_path / "out", 200) == whole


def test_an_audit_in_blocks_finds_the_same(sheet: Path, tmp_path: Path) -> None:
    apart = [written(sheet, tmp_path / str(size), size, metric=None) for size in (ROWS, 60)]
    assert apart[0] == apart[1]
    assert b"contradiction" in apart[0][0]


def test_rows_of_one_model_and_of_one_study_are_not_parted(sheet: Path) -> None:
    blocks = looked_through(sheet_of(sheet, None, None, None), 50)
    frame = pd.read_csv(sheet, dtype=str, keep_default_na=False)
    block = np.searchsorted(blocks.cuts.ends, np.arange(len(frame)), side="right")
    for key in ("study", "analysis"):
        named = frame[key] != ""
        assert (pd.Series(block[named]).groupby(frame.loc[named, key].to_numpy()).nunique() == 1).all()
    assert "lie far apart" in blocks.notes[0]


@pytest.fixture
def invoke() -> Callable[..., str]:
    """Run a command; what it said."""

    def called(*arguments: str, status: int = 0) -> str:
        done = CliRunner().invoke(cli, [str(argument) for argument in arguments])
        assert done.exit_code == status, done.output
        return done.output

    return called


def test_the_command_with_workers_writes_the_same_folder(
    invoke: Callable[..., str], sheet: Path, whole: list[bytes], tmp_path: Path
) -> None:
    out = tmp_path / "out"
    said = invoke(
        "convert", sheet, "--to", METRIC, "--out", out, "--workers", 1, "--fail-on", "doubtful", status=3
    )
    assert [(out / name).read_bytes() for name in FILES] == whole
    assert "rows of different studies were not compared" in said
    package = json.loads((out / "datapackage.json").read_text(encoding="utf-8"))
    assert [entry["name"] for entry in package["resources"]] == ["effects", "findings", "derivations"]
    assert any("not compared" in note for note in package["extractor:notes"])


def test_without_the_comparisons_across_studies_both_ways_agree(
    invoke: Callable[..., str], tmp_path: Path
) -> None:
    """Studies with labels and outcomes of their own have nothing to be compared with: every byte is the same."""
    sheets = mixed.kinds(60, 6)
    frame = pd.DataFrame(list(mixed.records(sheets, 60)), columns=mixed.headings(sheets))
    frame = frame.drop_duplicates("study").drop_duplicates(["f_value", "mean_1"])
    frame["outcome"] = frame["study"]
    path = tmp_path / "coded.csv"
    frame.to_csv(path, index=False)
    for name, more in (("whole", ()), ("blocks", ("--workers", "1"))):
        invoke("convert", path, "--to", METRIC, "--out", tmp_path / name, *more)
    for name in FILES:
        assert (tmp_path / "whole" / name).read_bytes() == (tmp_path / "blocks" / name).read_bytes()


@pytest.mark.parametrize(
    ("more", "said"),
    [
        ((), "name a folder with --out"),
        (("--out", "out", "--format", "xlsx"), "--format xlsx needs all rows at once"),
        (("--out", "out", "--covariance"), "--covariance needs all rows at once"),
    ],
)
def test_what_needs_the_whole_sheet_is_refused(
    invoke: Callable[..., str], sheet: Path, more: tuple[str, ...], said: str
) -> None:
    assert said in invoke("convert", sheet, "--to", METRIC, "--workers", 2, *more, status=2)
