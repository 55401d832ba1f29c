"""A sheet worked through in blocks of rows, in one process or several: the same results with bounded memory.

Rows of one study, and of one analysis, stay in one block. What compares a row with those of other studies is not done:
it needs the whole sheet.
"""

from __future__ import annotations

import signal
from collections import Counter, deque
from collections.abc import Iterator, Sequence
from concurrent.futures import Future, ProcessPoolExecutor
from dataclasses import dataclass, field
from multiprocessing import get_context
from pathlib import Path
from typing import Any, Generic, Protocol, TypeVar

from extractor import collector
from extractor.api import Reading, arranged, codebook_of
from extractor.codebook import Codebook
from extractor.decisions import Decision, read_decisions
from extractor.findings import Severity
from extractor.source.blocks import Blocks, blocks_of
from extractor.source.grid import Grid
from extractor.source.reader import read_grid
from extractor.words import listed

ROWS = 40_000
"""Rows of a block: enough that what is done once for each block does not count."""
KEYS = ("study", "analysis")
NOT_COMPARED = (
    "rows of different studies were not compared with each other (one sample coded twice, effects or SDs far "
    "from the others of an outcome): the sheet was worked through in blocks"
)

Made = TypeVar("Made")
Made_co = TypeVar("Made_co", covariant=True)


class Work(Protocol[Made_co]):
    """What is done with a block of rows that has been read; it travels to other processes."""

    def __call__(self, reading: Reading) -> Made_co: ...


@dataclass(frozen=True, slots=True)
class Sheet:
    """What is read block by block: the file, what its headings mean, and what stands in files of its own."""

    path: Path
    codebook: Codebook
    groups: Grid | None = None
    decisions: tuple[Decision, ...] = ()


def sheet_of(
    path: str | Path, codebook: str | Path | Codebook | None, groups: str | None, decisions: str | None
) -> Sheet:
    """The parts of a sheet; raises as ``extractor.convert`` does."""
    lines = read_grid(groups, lambda _: True) if groups is not None else None
    return Sheet(
        Path(path),
        codebook_of(codebook),
        lines,
        tuple(read_decisions(decisions)) if decisions is not None else (),
    )


def looked_through(sheet: Sheet, size: int = ROWS) -> Blocks:
    """Where the file can be cut, and its blocks."""

    def keys(headings: Sequence[str]) -> list[int]:
        return [at for at, heading in enumerate(headings) if sheet.codebook.meaning(heading) in KEYS]

    return blocks_of(sheet.path, lambda heading: sheet.codebook.meaning(heading) is not None, keys, size)


def run(sheet: Sheet, blocks: Blocks, work: Work[Made], workers: int = 1) -> Iterator[Made]:
    """What ``work`` makes of every block, in sheet order.

    Parameters
    ----------
    workers : processes. Each is given a block at a time, and no more blocks wait than there are workers.
    """
    parts = _parts(sheet, blocks)
    if workers == 1:
        for grid, decided in parts:
            yield _worked(sheet, work, grid, decided)
        return
    with ProcessPoolExecutor(workers, get_context("spawn"), _begin, (sheet, work)) as pool:
        waiting: deque[Future[Made]] = deque()
        try:
            for grid, decided in parts:
                waiting.append(pool.submit(_one, grid, decided))
                if len(waiting) > workers:
                    yield waiting.popleft().result()
            while waiting:
                yield waiting.popleft().result()
        except BaseException:
            pool.shutdown(wait=False, cancel_futures=True)
            raise


def _parts(sheet: Sheet, blocks: Blocks) -> Iterator[tuple[Grid, list[Decision]]]:
    """Each block with the decisions about its rows; those about rows that are not there go to the last one."""
    left = sorted(sheet.decisions, key=lambda decision: decision.row)
    before: Grid | None = None
    for grid in blocks.grids:
        if before is not None:
            last = int(before.row_numbers[-1])
            mine = [decision for decision in left if decision.row <= last]
            left = left[len(mine) :]
            yield before, mine
        before = grid
    if before is not None:
        yield before, left


def _worked(sheet: Sheet, work: Work[Made], grid: Grid, decided: list[Decision]) -> Made:
    return work(arranged(grid, sheet.codebook, sheet.groups, decided))


@dataclass(slots=True)
class _Job(Generic[Made]):
    """What a process was started for."""

    sheet: Sheet
    work: Work[Made]


_job: list[_Job[object]] = []


def _begin(sheet: Sheet, work: Work[object]) -> None:
    # an interrupt ends the worker without a word: the process that was started by hand says it
    signal.signal(signal.SIGINT, signal.SIG_DFL)
    collector.ease()
    _job[:] = [_Job(sheet, work)]


def _one(grid: Grid, decided: list[Decision]) -> Any:
    return _worked(_job[0].sheet, _job[0].work, grid, decided)


@dataclass(slots=True)
class Tally:
    """What became of the rows, counted.

    statuses : rows by status. findings : findings by severity. found : rows with findings. checks, unchecked : as
    in ``Audit``.
    """

    rows: int = 0
    statuses: Counter[str] = field(default_factory=Counter)
    findings: Counter[str] = field(default_factory=Counter)
    found: int = 0
    checks: int = 0
    unchecked: int = 0

    def lines(self) -> list[str]:
        """The counts in sentences."""
        said = [f"{self.statuses[word]} {word}" for word in ("converted", "bounded", "blocked")]
        strengths = [f"{self.findings[s.word]} {s.word}" for s in reversed(Severity) if self.findings[s.word]]
        found = f"{listed(strengths)}, in {self.found} rows" if strengths else "none"
        checked = f"{self.checks} checks over {self.rows - self.unchecked} of {self.rows} rows"
        return [
            *([f"{self.rows} rows: {listed(said)}."] if self.statuses else []),
            f"{checked}. Findings: {found}.",
        ]

    def add(self, other: Tally) -> None:
        """Count another block's rows in."""
        self.rows += other.rows
        self.statuses.update(other.statuses)
        self.findings.update(other.findings)
        self.found += other.found
        self.checks += other.checks
        self.unchecked += other.unchecked
