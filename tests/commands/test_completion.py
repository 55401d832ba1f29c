"""What the shell offers when Tab is pressed, asked as the shells ask it."""

from __future__ import annotations

import os
import subprocess
import sys

import pytest

from extractor.codebook import ready_codebooks
from extractor.commands.main import COMMANDS
from extractor.quantities import DESIGNS, METRICS, STANDARDIZERS, VOCABULARY

RUN = "from extractor.commands.main import main; main()"


def asked(words: list[str], shell: str = "bash", request: str = "complete") -> str:
    """What the command prints for a shell; ``words`` are typed so far, the last one perhaps half."""
    typed = {
        "COMP_WORDS": " ".join(["extractor", *words]),
        # fish hands over the word itself, the others its number
        "COMP_CWORD": words[-1] if shell == "fish" and words else str(len(words)),
        "_EXTRACTOR_COMPLETE": f"{shell}_{request}",
    }
    done = subprocess.run(
        [sys.executable, "-c", RUN], env={**os.environ, **typed}, capture_output=True, text=True, check=False
    )
    assert done.stderr == ""
    return done.stdout


def offered(*words: str) -> set[str]:
    """The words that bash is offered."""
    return {line.partition(",")[2] for line in asked(list(words)).splitlines() if line.startswith("plain,")}


@pytest.mark.parametrize(
    ("words", "expected"),
    [
        ([""], set(COMMANDS)),
        (["un"], {"unlock"}),
        (["convert", "coded.csv", "--to", ""], set(METRICS)),
        (["reconcile", "a.csv", "b.csv", "--to", "hed"], {"hedges_g"}),
        (["unlock", "coded.csv", "--standardizer", ""], set(STANDARDIZERS)),
        (["audit", "coded.csv", "--codebook", ""], set(ready_codebooks())),
        (["sheet", "pa"], {"paired"}),
        (["quick", "F(1, 20) = 4.1", "--design", ""], set(DESIGNS)),
        (["relations", "--from", "df_"], {name for name in VOCABULARY if name.startswith("df_")}),
        (["convert", "coded.csv", "--vary", "correl"], {"correlation"}),
        (["convert", "coded.csv", "--st"], {"--standardizer"}),
    ],
    ids=lambda value: " ".join(value) if isinstance(value, list) else "",
)
def test_words_are_offered(words: list[str], expected: set[str]) -> None:
    if " " in "".join(words):
        words = [f"'{word}'" if " " in word else word for word in words]
    assert offered(*words) == expected


@pytest.mark.parametrize(
    "words",
    [
        ["convert", "cod"],
        ["convert", "c.csv", "--codebook", "my"],
        ["convert", "c.csv", "--groups", ""],
        ["reconcile", "a.csv", "b"],
        ["changes", "o"],
        ["codebook", "b.toml", "s"],
    ],
    ids=" ".join,
)
def test_files_are_left_to_the_shell(words: list[str]) -> None:
    kinds = {line.partition(",")[0] for line in asked(words).splitlines()}
    assert kinds <= {"file", "dir"}
    assert kinds


def test_a_misspelt_command_is_no_error_at_the_prompt() -> None:
    assert offered("convrt", "") == set(COMMANDS)


@pytest.mark.parametrize(("shell", "found"), [("zsh", "unlock"), ("fish", "unlock")])
def test_the_other_shells(shell: str, found: str) -> None:
    answer = asked(["un"], shell)
    assert found in answer
    assert "reconcile" not in answer


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_the_script_that_switches_it_on(shell: str) -> None:
    script = asked([], shell, "source")
    assert "_EXTRACTOR_COMPLETE=" in script
    assert f"{shell}_complete" in script
