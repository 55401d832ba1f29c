"""Every kind of fault ends as the contract says: a whole table, or one clear line and nothing written.

A few cases of each kind; ``python -m tests.evidence.hostile`` runs as many as one likes.
"""

from __future__ import annotations

import json
import sys
import warnings
from pathlib import Path

import pytest
from click.testing import CliRunner

from tests.fuzz import catalogue
from tests.fuzz.judging import BREACHES, CONVERTED, Case, judge

SEEDS = range(3)


@pytest.mark.skipif(sys.platform == "win32", reason="the time limit needs a signal")
@pytest.mark.parametrize("kind", catalogue.KINDS)
def test_fault(kind: str, tmp_path: Path) -> None:
    for seed in SEEDS:
        folder = tmp_path / str(seed) / "in"
        folder.mkdir(parents=True)
        verdict = catalogue.verdict(kind, seed, folder)
        assert verdict.outcome not in BREACHES, f"{kind}, seed {seed}: {verdict.outcome}\n{verdict.breach}"


def test_cases_are_the_same_for_the_same_seed(tmp_path: Path) -> None:
    made = []
    for name in ("one", "two"):
        folder = tmp_path / name / "in"
        folder.mkdir(parents=True)
        case = catalogue.case("words in number cells", 3, folder)
        words = [word.replace(str(tmp_path / name), "") for word in case.words]
        made.append((words, sorted(path.read_bytes() for path in folder.iterdir())))
    assert made[0] == made[1]


SHEET = "study,design,f_value,df_effect,df_error\nSite 1,one-way,4.31,2,57\n"


@pytest.fixture
def honest(tmp_path: Path) -> Case:
    """A case without a fault."""
    folder = tmp_path / "in"
    folder.mkdir()
    (folder / "sheet.csv").write_text(SHEET, encoding="utf-8")
    out = tmp_path / "out"
    words = ["convert", str(folder / "sheet.csv"), "--to", "omega_squared", "--out", str(out)]
    return Case(words, frozenset({0}), out, rows=1)


def _spoilt(monkeypatch: pytest.MonkeyPatch, name: str, text: str) -> None:
    """Let the command write one of its files wrongly."""
    invoke = CliRunner.invoke

    def spoiling(*given: object, **named: object) -> object:
        # handed on as they came; their types are those of the wrapped function
        found = invoke(*given, **named)  # type: ignore[arg-type]
        words = given[2]
        assert isinstance(words, list)
        (Path(words[-1]) / name).write_text(text, encoding="utf-8")
        return found

    monkeypatch.setattr(CliRunner, "invoke", spoiling)


def test_the_judge_passes_an_honest_run(honest: Case) -> None:
    assert judge(honest).outcome == "table"


@pytest.mark.parametrize(
    ("name", "text", "words"),
    [
        ("findings.csv", "a,b\n1\n", "not the file that was described"),
        ("more.csv", "a,b\n1\n", "lines of unequal length"),
        ("more.csv", "a\n=1+1\n", "for a formula"),
        ("more.csv", 'a\n" @x"\n', "for a formula"),
    ],
)
def test_the_judge_sees_wrong_files(
    honest: Case, monkeypatch: pytest.MonkeyPatch, name: str, text: str, words: str
) -> None:
    _spoilt(monkeypatch, name, text)
    try:
        verdict = judge(honest)
    except ValueError as fault:
        assert words in str(fault)
        return
    assert verdict.outcome == "wrong output"
    assert words in verdict.breach


def test_the_judge_sees_what_is_missing_or_left_over(honest: Case, monkeypatch: pytest.MonkeyPatch) -> None:
    assert honest.out is not None
    case = Case(honest.words, honest.allowed, honest.out, rows=1, files=(*CONVERTED, "effects.json"))
    assert "not written" in judge(case).breach
    assert "2 rows" in judge(Case(honest.words, honest.allowed, honest.out, rows=2)).breach
    _spoilt(monkeypatch, "../half.csv", "")
    assert "left beside the folder" in judge(honest).breach


def test_the_judge_sees_statuses_warnings_tracebacks_and_hangs(
    honest: Case, monkeypatch: pytest.MonkeyPatch
) -> None:
    from extractor.commands import running

    assert judge(Case(honest.words, frozenset({4}), honest.out)).outcome == "wrong status"
    assert judge(Case(["convert", "no.csv", "--to", "r"], frozenset({4}))).outcome == "one line, exit 4"

    def warn(*_: object) -> None:
        warnings.warn("odd", RuntimeWarning, stacklevel=1)

    def spin(*_: object) -> None:
        while True:
            pass

    monkeypatch.setattr(running, "convert", warn)
    assert "RuntimeWarning: odd" in judge(honest).breach
    monkeypatch.setattr(running, "convert", spin)
    assert judge(honest, seconds=0.2).outcome == "hang"


def test_a_run_in_json_is_read_strictly(honest: Case) -> None:
    words = [*honest.words, "--format", "json"]
    assert judge(Case(words, honest.allowed, honest.out, rows=1)).outcome == "table"
    with pytest.raises(ValueError, match="Infinity"):
        json.loads("Infinity", parse_constant=lambda word: (_ for _ in ()).throw(ValueError(word)))
