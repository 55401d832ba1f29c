"""Every kind of fault, in the order of the table that evidence prints."""

from __future__ import annotations

import random
from pathlib import Path

from tests.fuzz import (
    bomb_faults,
    cell_faults,
    companion_faults,
    interruptions,
    team_faults,
    text_faults,
    workbook_faults,
)
from tests.fuzz.faults import EVERY, FAULTS, case
from tests.fuzz.judging import OutOfTime, Verdict, judge

MODULES = (cell_faults, text_faults, workbook_faults, bomb_faults, companion_faults, team_faults)
"""The modules that register kinds when they are imported."""
KINDS: dict[str, int] = EVERY | dict.fromkeys(interruptions.TRIALS, interruptions.EVERY)
"""Kinds of faults, and how many rounds lie between two cases of a kind."""

__all__ = ["FAULTS", "KINDS", "MODULES", "case", "verdict"]


def verdict(kind: str, seed: int, folder: Path) -> Verdict:
    """What becomes of the case of a kind and seed; ``folder`` is empty, and so is its parent otherwise."""
    if kind in interruptions.TRIALS:
        try:
            return interruptions.TRIALS[kind](random.Random(f"{kind} {seed}"), folder)
        except OutOfTime:
            return Verdict("hang", "the process did not end")
    return judge(case(kind, seed, folder))


def schedule(cases: int, first: int, kinds: dict[str, int]) -> list[tuple[str, int]]:
    """So many cases from a first seed on, round by round, each kind in its turn."""
    jobs: list[tuple[str, int]] = []
    seed = first
    while len(jobs) < cases:
        jobs += [(kind, seed) for kind, every in kinds.items() if seed % every == 0]
        seed += 1
    return jobs[:cases]
