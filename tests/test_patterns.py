"""The 54 reporting patterns through the command line; ``tests.evidence.patterns`` prints them as a table."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from tests.evidence.patterns import CASES, NUMBERS, outcome_of
from tests.evidence.patterns_data import Case

CONVERTED = next(c for c in CASES if c.status == "converted" and isinstance(c.value, float))
BOUNDED = next(c for c in CASES if c.status == "bounded")
REFUSED = next(c for c in CASES if c.status == "blocked")
FOUND = next(c for c in CASES if c.finding)


@pytest.mark.parametrize("case", CASES, ids=[f"{c.number} {c.printed} {c.to}" for c in CASES])
def test_pattern(case: Case, tmp_path: Path) -> None:
    fault = outcome_of(case, tmp_path).fault
    if case.short:
        assert fault, "the case falls short no more: clear its mark"
    else:
        assert not fault


def test_every_pattern_is_there() -> None:
    assert {c.number for c in CASES} == set(NUMBERS)
    assert [c.number for c in CASES] == sorted(c.number for c in CASES)


def test_every_case_expects_something() -> None:
    for case in CASES:
        assert case.source, case.printed
        if case.status == "blocked":
            assert case.reason, case.printed
        else:
            assert case.value is not None or case.finding, case.printed


@pytest.mark.parametrize(
    "wrong",
    [
        replace(CONVERTED, value=CONVERTED.value * (1 + 1e-6)),
        replace(CONVERTED, value=f"{CONVERTED.value + 0.01:.4f}"),
        replace(CONVERTED, status="blocked"),
        replace(CONVERTED, variance=1.0),
        replace(CONVERTED, grade="bound"),
        replace(CONVERTED, standardizer="difference"),
        replace(CONVERTED, said=("something else",)),
        replace(CONVERTED, finding=("doubtful", "F")),
        replace(BOUNDED, value=(BOUNDED.value[0] * 0.99, BOUNDED.value[1])),
        replace(BOUNDED, value=(BOUNDED.value[0] * 1.01, BOUNDED.value[1])),
        replace(BOUNDED, value=(BOUNDED.value[0], 2.0)),
        replace(REFUSED, reason=("something else",)),
        replace(REFUSED, status="converted"),
        replace(FOUND, finding=()),
        replace(FOUND, finding=("doubtful", *FOUND.finding[1:])),
        replace(FOUND, finding=(FOUND.finding[0], "something else")),
    ],
)
def test_a_wrong_expectation_is_seen(wrong: Case, tmp_path: Path) -> None:
    assert outcome_of(wrong, tmp_path).fault


def test_what_the_command_refuses_is_an_error(tmp_path: Path) -> None:
    with pytest.raises(RuntimeError, match="pattern"):
        outcome_of(replace(CONVERTED, to="no such metric"), tmp_path)
