"""An invented sheet that holds one row of each kind, and a way to run the command in an empty folder."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

import extractor
from extractor.commands.main import cli

SHEET = """study,outcome,design,reported,n_1,mean_1,sd_1,n_2,mean_2,sd_2,remark
North Quay,recall,one-way,"F(2, 57) = 4.31, p = .018",,,,,,,=1+1
Site 7,recall,two-group,,20,10.2,3.1,22,12.6,3.4,[red]shout[/red]
Mill Lane,recall,one-way,"F(2, 54) = 4.31, p = .18",,,,,,,
Harbour 3,sleep,one-way,"p < .05, N = 40",,,,,,,
East Gate,sleep,nonsense,"F(2, 50) = 3.11",,,,,,,-5
"""
"""Rows 2 to 6: two convertible ones, a contradictory p, an unknown number of groups, an unknown design."""

Run = Callable[..., Result]


def environment(**more: str) -> dict[str, str]:
    """The environment of a process that finds the package, installed or not."""
    return {**os.environ, "PYTHONPATH": str(Path(extractor.__file__).parent.parent), **more}


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """The current folder, holding coded.csv and nothing else."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("COLUMNS", raising=False)
    (tmp_path / "coded.csv").write_text(SHEET, encoding="utf-8")
    return tmp_path


@pytest.fixture
def run(folder: Path) -> Run:
    """Run ``extractor`` with the given words."""

    def invoke(*words: str, text: str | None = None) -> Result:
        return CliRunner().invoke(cli, list(words), input=text)

    return invoke
