"""Start-up: a command imports what it needs and nothing else, and is ready about as soon as its libraries are."""

from __future__ import annotations

import subprocess
import sys

import pytest

resource = pytest.importorskip("resource", reason="this system does not count the time of child processes")

QUICK = ["-m", "extractor", "quick", "F(2, 57) = 4.5", "--to", "omega_squared"]
VERSION = ["-m", "extractor", "--version"]
HEAVY = {"pandas", "openpyxl", "rich", "scipy.stats", "scipy.optimize", "matplotlib", "jinja2", "pyarrow"}


def spent() -> float:
    """Processor seconds of all child processes that have ended."""
    used = resource.getrusage(resource.RUSAGE_CHILDREN)
    return used.ru_utime + used.ru_stime


def imported(arguments: list[str]) -> set[str]:
    """The modules that a run of Python imported."""
    done = subprocess.run(
        [sys.executable, "-X", "importtime", *arguments], capture_output=True, text=True, check=True
    )
    return {
        line.rpartition("|")[2].strip()
        for line in done.stderr.splitlines()
        if line.startswith("import time:")
    }


def test_the_version_is_said_without_numpy() -> None:
    assert not imported(VERSION) & (HEAVY | {"numpy", "scipy"})


def test_quick_needs_numpy_and_special_functions_only() -> None:
    found = imported(QUICK)
    assert "numpy" in found
    assert not found & HEAVY


@pytest.mark.parametrize(
    ("ours", "theirs", "most"), [(VERSION, "import click", 1.6), (QUICK, "import numpy, scipy.special", 2.5)]
)
def test_start_takes_little_longer_than_the_libraries_it_needs(
    ours: list[str], theirs: str, most: float
) -> None:
    """Processor time of the fastest of several starts of each, taken in turn: a busy machine does not slow that."""
    best = {"ours": float("inf"), "theirs": float("inf")}
    for turn in range(15):
        for name, arguments in (("ours", ours), ("theirs", ["-c", theirs])):
            before = spent()
            subprocess.run([sys.executable, *arguments], capture_output=True, check=True)
            best[name] = min(best[name], spent() - before)
        if turn >= 4 and best["ours"] <= most * best["theirs"]:
            break
    assert best["ours"] <= most * best["theirs"]
