"""Exit statuses, messages, help: what every command keeps to."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from extractor import __version__
from extractor.commands import running
from extractor.commands.main import COMMANDS

from .conftest import Run, environment

TO = ("--to", "omega_squared")
REFUSED = [
    (("convert", "none.csv", *TO), 4, "no such file"),
    (("convert", "blank.csv", *TO), 4, "blank.csv"),
    (("convert", "headings.csv", *TO), 4, "headings.csv"),
    (("convert", "broken.xlsx", *TO), 4, "broken.xlsx"),
    (("audit", "unknown.csv"), 4, "heading"),
    (("convert", "coded.csv", "--to", "omega_squard"), 2, "did you mean omega_squared"),
    (("convert", "coded.csv", *TO, "--codebook", "one-wy"), 5, "one-way"),
    (("convert", "coded.csv", *TO, "--codebook", "none.toml"), 5, "none.toml"),
    (("convert", "coded.csv", *TO, "--out", "."), 2, "--force"),
    (("audit", "coded.csv", "--out", "."), 2, "--force"),
    (("convert", "coded.csv", *TO, "--out", "coded.csv", "--force"), 2, "no folder"),
    (("convert", "coded.csv", *TO, "--level", "95"), 2, "did you mean 0.95"),
    (("convert", "coded.csv", *TO, "--level", "high"), 2, "--level"),
    (("convert", "coded.csv", *TO, "--variance", "guess"), 2, "large-sample"),
    (("convert", "coded.csv", *TO, "--standardizer", "none"), 2, "pooled"),
    (("convert", "coded.csv", *TO, "--format", "pdf", "--out", "o"), 2, "parquet"),
    (("convert", "coded.csv", *TO, "--format", "xlsx"), 2, "--out"),
    (("convert", "coded.csv", *TO, "--format", "csv", "--format", "json"), 2, "--out"),
    (("convert", "coded.csv", *TO, "--rename", "estimate=x"), 2, "--out"),
    (("convert", "coded.csv", *TO, "--out", "o", "--rename", "estimat=x"), 2, "did you mean estimate"),
    (("convert", "coded.csv", *TO, "--out", "o", "--rename", "estimate=variance"), 2, "both be called"),
    (("convert", "coded.csv", *TO, "--out", "o", "--rename", "estimate=remark"), 2, "both be called"),
    (("convert", "coded.csv", *TO, "--out", "o", "--rename", "estimate"), 2, "estimate=NAME"),
    (("convert", "coded.csv", *TO, "--out", "o", "--rename", "row=a", "--rename", "row=b"), 2, "twice"),
    (("convert", "coded.csv"), 2, "--to"),
    (("convert",), 2, "SHEET"),
    (("convrt", "coded.csv"), 2, "did you mean convert"),
    (("convert", "coded.csv", *TO, "--colour"), 2, "--colour"),
    (("trace", "coded.csv", "99", *TO), 2, "rows run from 2 to 6"),
    (("trace", "coded.csv", "first", *TO), 2, "first"),
    (("relations", "--to", "omega_squard"), 2, "did you mean omega_squared"),
    (("relations", "--design", "two-groups"), 2, "did you mean two-group"),
    (("quick", "nothing here", *TO), 2, "no statistic"),
    (("quick", "F(2, 57) = 4, F(2, 57) = 5", *TO), 2, "two F"),
    (("quick", "F(2, 57) = 4", *TO, "--also", "n1=20"), 2, "did you mean n_1"),
    (("quick", "F(2, 57) = 4", *TO, "--also", "n_1=many"), 2, "many"),
    (("quick", "F(2, 57) = 4", *TO, "--design", "oneway"), 2, "did you mean one-way"),
]


@pytest.mark.parametrize(
    ("words", "status", "said"), REFUSED, ids=[" ".join(words) for words, _, _ in REFUSED]
)
def test_refusals_are_one_line_and_write_nothing(
    run: Run, folder: Path, words: tuple[str, ...], status: int, said: str
) -> None:
    (folder / "blank.csv").write_text("")
    (folder / "headings.csv").write_text("study,design,f_value\n")
    (folder / "unknown.csv").write_text("colour,size\nred,3\n")
    (folder / "broken.xlsx").write_bytes(b"PK\x03\x04 this is no archive")
    before = {path: path.read_bytes() for path in folder.iterdir()}
    result = run(*words)
    assert result.exit_code == status
    assert result.stdout == ""
    lines = result.stderr.splitlines()
    assert [line.startswith("extractor: ") for line in lines] == [True]
    assert said in lines[0]
    assert {path: path.read_bytes() for path in folder.iterdir()} == before


def test_bare_command_shows_help_and_is_wrong_usage(run: Run) -> None:
    result = run()
    assert result.exit_code == 2
    assert result.stdout == ""
    for command in COMMANDS:
        assert command in result.stderr


@pytest.mark.parametrize("flag", ["-h", "--help"])
@pytest.mark.parametrize("command", ["", *COMMANDS])
def test_help_has_examples(run: Run, command: str, flag: str) -> None:
    result = run(*filter(None, [command, flag]))
    assert result.exit_code == 0
    assert result.stderr == ""
    assert "Examples:" in result.stdout
    assert f"extractor {command}".strip() in result.stdout


def test_version(run: Run) -> None:
    result = run("--version")
    assert (result.exit_code, result.stdout) == (0, f"extractor {__version__}\n")


def test_interrupt_is_one_line(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupted(*_: object, **__: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(running, "read_sheet", interrupted)
    result = run("convert", "coded.csv", *TO)
    assert result.exit_code == 1
    assert result.stderr.strip() == "extractor: interrupted"


def process(*words: str, code: str = "", **variables: str) -> subprocess.CompletedProcess[str]:
    """Run Python, the command by default, as a process of its own."""
    start = ["-c", code] if code else ["-m", "extractor"]
    return subprocess.run(
        [sys.executable, "-W", "error", *start, *words],
        capture_output=True,
        encoding="utf-8",
        env=environment(**variables),
        check=False,
    )


def test_runs_as_a_module_and_without_warnings(folder: Path) -> None:
    result = process("convert", "coded.csv", *TO)
    assert result.returncode == 0
    assert "North Quay" in result.stdout
    assert "Traceback" not in result.stderr


def test_help_loads_no_table_library() -> None:
    code = (
        "import sys\n"
        "from extractor.commands.main import cli\n"
        "cli.main(['convert', '--help'], standalone_mode=False)\n"
        "cli.main(['--help'], standalone_mode=False)\n"
        "assert not {'pandas', 'scipy', 'openpyxl', 'rich'} & set(sys.modules)\n"
    )
    result = process(code=code)
    assert result.returncode == 0, result.stderr


def test_reader_that_goes_away_ends_the_run_quietly(folder: Path) -> None:
    command = [sys.executable, "-m", "extractor", "relations"]
    with subprocess.Popen(
        command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, encoding="utf-8", env=environment()
    ) as running_one:
        assert running_one.stdout is not None
        assert running_one.stderr is not None
        running_one.stdout.close()
        said = running_one.stderr.read()
    assert running_one.returncode == 1
    assert said == ""


def test_output_that_knows_no_greek_does_not_crash(folder: Path) -> None:
    result = process("relations", "--to", "omega_squared", PYTHONIOENCODING="ascii")
    assert result.returncode == 0
    assert "\\u03c9" in result.stdout
