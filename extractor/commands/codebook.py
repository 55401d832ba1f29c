"""``extractor codebook``."""

from __future__ import annotations

import click

from extractor.commands import options
from extractor.errors import InvalidCodebook


@click.command(
    context_settings=options.SETTINGS, short_help="Check a codebook, and a sheet that it was piloted on."
)
@click.argument("file", shell_complete=options.completing_codebooks)
@click.argument("sheet", required=False, shell_complete=options.completing_files)
def command(file: str, sheet: str | None) -> None:
    """Check a codebook FILE, or a ready one by its name: every fault with its line and the nearest known word.

    With the SHEET of a pilot it also lists columns that were never filled, values that were never understood,
    designs that were never used, and rows of different studies with the same group sizes, means or F.

    \b
    Examples:
      extractor codebook review.toml
      extractor codebook review.toml pilot.xlsx
    """
    from extractor.codebook import codebook_text, parse_codebook
    from extractor.codebook_check import faults
    from extractor.output import teamwork, terminal

    text = codebook_text(file)
    found = faults(text, file)
    if found:
        for fault in found[:-1]:
            click.echo(f"extractor: {fault}", err=True)
        raise InvalidCodebook(found[-1])
    page = terminal.console()
    terminal.say(page, f"{file}: valid.")
    if sheet is None:
        return
    from extractor.api import read
    from extractor.codebook_check import misreadable, pilot
    from extractor.commands import running
    from extractor.output.cells import reading_notes
    from extractor.overlap.duplicates import duplicate_reports

    book = parse_codebook(text, file)
    reading = read(sheet, book)
    running.mention([*reading_notes(reading.table), *reading.notes])
    teamwork.show_pilot(
        page, pilot(reading.table, book), duplicate_reports(reading.table), misreadable(reading.table, book)
    )
