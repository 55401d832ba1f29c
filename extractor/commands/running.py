"""What commands do around the work: reading, progress, notes, and the exit status of findings."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace

import click

from extractor.api import Reading, Result
from extractor.api import read as read_sheet
from extractor.audit.run import Audit
from extractor.commands.options import Coded, Wanted
from extractor.evidence import Evidence, gather
from extractor.findings import Severity
from extractor.output.cells import reading_notes
from extractor.routes.conversion import (
    Conversion,
    check_method,
    check_metric,
    check_standardizer,
    convert_evidence,
)

LONG = 20_000
"""Rows above which progress is shown."""
_MOST_NOTES = 20


def read(coded: Coded) -> Reading:
    """Read a sheet and say on standard error how it was read, where that was not plain."""
    reading = read_sheet(coded.sheet, coded.codebook, groups=coded.groups, decisions=coded.decisions)
    mention([*reading_notes(reading.table), *reading.notes])
    return reading


def mention(notes: list[str]) -> None:
    """Notes on standard error, the first few of many."""
    from extractor.output.terminal import printable

    for note in notes[:_MOST_NOTES]:
        click.echo(printable(f"note: {note}"), err=True)
    if len(notes) > _MOST_NOTES:
        click.echo(f"note: and {len(notes) - _MOST_NOTES} more like these", err=True)


def convert(coded: Coded, wanted: Wanted, vary: tuple[str, ...] = ()) -> Result:
    """Convert and audit a sheet; raises as ``extractor.convert`` does.

    Parameters
    ----------
    vary : assumptions with their ranges, as typed; see ``sensitivity.ranges``.
    """
    from extractor.routes.sensitivity import ranges, with_ranges

    check(wanted)
    varied = ranges(vary)
    reading = read(coded)
    if varied:
        evidence = gather(with_ranges(reading.evidence.table, varied))
        reading = replace(reading, evidence=evidence)
    rows = reading.table.rows
    with stage(f"converting {rows} rows", rows):
        conversion = converted(reading.evidence, wanted.metric, wanted)
    with stage(f"auditing {rows} rows", rows):
        return Result(conversion, reading.audit(conversion))


def check(wanted: Wanted) -> None:
    """Raise ``UsageError`` for words nobody knows, before anything is read."""
    check_metric(wanted.metric)
    check_method(wanted.metric, wanted.variance)
    check_standardizer(wanted.standardizer)


def converted(evidence: Evidence, metric: str, wanted: Wanted) -> Conversion:
    """The effects of read rows in ``metric``, which need not be the one that was asked for."""
    method = wanted.variance if metric == wanted.metric else None
    return convert_evidence(
        evidence, metric, method=method, level=wanted.level, standardizer=wanted.standardizer
    )


@contextmanager
def stage(text: str, rows: int, *, counts: bool = False) -> Iterator[Callable[[int], None]]:
    """Show progress on standard error while a stage runs: on a terminal only, and only when it takes long.

    Parameters
    ----------
    counts : the stage reports its rows to what the context gives; otherwise the bar only moves.
    """
    if rows <= LONG or not sys.stderr.isatty():
        yield lambda _: None
        return
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    from extractor.output.terminal import console

    columns = (TextColumn("{task.description}", markup=False), BarColumn(), TimeElapsedColumn())
    with Progress(*columns, console=console(stderr=True), transient=True) as progress:
        task = progress.add_task(text, total=rows if counts else None)
        yield lambda done: progress.advance(task, done)


def status(audit: Audit, fail_on: str | None) -> int:
    """The exit status that the findings ask for."""
    worst = audit.worst()
    if fail_on is None or worst is None:
        return 0
    return 3 if worst >= Severity[fail_on.upper()] else 0
