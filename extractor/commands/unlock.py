"""``extractor unlock``."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING

import click

from extractor.commands import options
from extractor.errors import UsageError

if TYPE_CHECKING:
    from extractor.api import Reading
    from extractor.routes.conversion import Conversion


@click.command(
    context_settings=options.SETTINGS,
    short_help="Say which numbers would make blocked rows usable, and draft letters to authors.",
)
@options.coded
@options.wanted
@click.option(
    "--most", type=click.IntRange(1, 6), default=3, show_default=True, help="Ways shown for each row."
)
@click.option(
    "--letters",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Draft a letter to the authors of each study, as Markdown and plain text, with a table for their replies "
    "and a log, replies.csv.",
)
@click.option(
    "--log",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="Read replies that were entered into the log, csv or xlsx, and write them to standard output as decisions.",
)
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="Write every row and way as a csv file as well.",
)
@click.option("--force", is_flag=True, help="Replace files that are there already.")
def command(
    coded: options.Coded,
    wanted: options.Wanted,
    most: int,
    letters: Path | None,
    log: Path | None,
    out: Path | None,
    force: bool,
) -> None:
    """Say for each row of SHEET that is blocked, bounded, rests on an assumption or lacks its variance which few
    numbers would change that, those that authors most often can supply first.

    A set of numbers is named only when no part of it would do. At the end stand the questions that would open
    most rows.

    \b
    Examples:
      extractor unlock coded.xlsx --to hedges_g
      extractor unlock coded.xlsx --to hedges_g --letters letters
      extractor unlock coded.xlsx --to hedges_g --log letters/replies.csv > decisions.csv
    """
    if log is not None and (letters is not None or out is not None):
        raise UsageError("--log reads replies; it cannot be combined with --letters or --out")
    from extractor.commands import running
    from extractor.output import files

    running.check(wanted)
    if letters is not None:
        files.refuse_existing(letters, force=force)
    if out is not None and out.exists() and not force:
        raise UsageError(f"'{out}' exists; choose another name, or --force to replace it")
    reading = running.read(coded)
    if log is not None:
        _replies(log, reading)
        return
    from extractor.asking.batch import unlocking
    from extractor.output import tables, teamwork, terminal

    rows = reading.table.rows
    with running.stage(f"converting {rows} rows", rows):
        conversion = running.converted(reading.evidence, wanted.metric, wanted)
    with running.stage(f"looking for questions about {rows} rows", rows):
        found = unlocking(
            conversion,
            method=wanted.variance,
            level=wanted.level,
            standardizer=wanted.standardizer,
            most=most,
        )
    if letters is not None:
        _draft(letters, reading, conversion, wanted, force)
    if out is not None:
        tables.write_csv(found.rows, out)
        click.echo(f"written to {out}", err=True)
    teamwork.show_unlocking(terminal.console(), found, rows)


def _draft(
    folder: Path, reading: Reading, conversion: Conversion, wanted: options.Wanted, force: bool
) -> None:
    from extractor.asking.letters import letters
    from extractor.asking.questions import questions
    from extractor.output.letter_texts import LOG, write_letters

    asked = questions(conversion, method=wanted.variance, standardizer=wanted.standardizer)
    drafts = letters(conversion, asked, reading.audit(conversion).findings)
    write_letters(folder, drafts, force=force)
    click.echo(
        f"{len(drafts)} letters drafted in {folder}; read each one and fill in what stands in square brackets "
        f"before it is sent, and enter the replies in {LOG}",
        err=True,
    )


def _replies(path: Path, reading: Reading) -> None:
    from extractor.asking.replies import read_replies
    from extractor.commands import running
    from extractor.output import tables

    found = read_replies(path, reading.table, reading.codebook)
    sys.stdout.writelines(tables.csv_lines(found.decisions))
    notes = [
        f"row {row}: {cell} is no number; type '{reply}' into the sheet" for row, cell, reply in found.words
    ]
    if found.new_columns:
        notes.append(
            f"the sheet has no column {', '.join(found.new_columns)}; the decisions bring them along"
        )
    if found.declined:
        notes.append(f"not available: {len(found.declined)}")
    notes.append(f"{len(found.decisions)} numbers with their source; {found.waiting} still to be answered")
    running.mention(notes)
