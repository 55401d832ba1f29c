"""``extractor audit``."""

from __future__ import annotations

from pathlib import Path

import click

from extractor.commands import options


@click.command(
    context_settings=options.SETTINGS, short_help="Ask whether the printed numbers of a sheet can be true."
)
@options.coded
@options.output
@options.workers
@options.fail_on
def command(
    coded: options.Coded,
    out: Path | None,
    force: bool,
    csv_raw: bool,
    workers: int | None,
    fail_on: str | None,
) -> int:
    """Ask of every row of SHEET whether its printed numbers can all be true.

    Rounding is taken into account: a correctly rounded and correctly coded row is never called impossible
    or inconsistent. A finding is a question for the article and its authors, not a verdict on them. With
    --out the folder gets findings.csv and datapackage.json as well.

    \b
    Examples:
      extractor audit coded.xlsx
      extractor audit coded.csv --codebook one-way --out audit
      extractor audit coded.xlsx --fail-on inconsistent
    """
    from extractor import cautions
    from extractor.commands import running, streaming
    from extractor.output import files, package, terminal
    from extractor.output.request import Request

    if out is not None:
        files.refuse_existing(out, force=force)
    request = Request(sheet=coded.sheet, codebook=coded.codebook, raw=csv_raw)
    if streaming.in_blocks(coded, out, workers, ()) and out is not None:
        return streaming.write(coded, out, request, workers, fail_on, force=force)
    reading = running.read(coded)
    rows = reading.table.rows
    with running.stage(f"auditing {rows} rows", rows):
        found = reading.audit()
    if out is not None:
        package.write_audit(out, found, reading.table, request, force=force)
        click.echo(f"written to {out}", err=True)
    page = terminal.console()
    terminal.show_findings(page, found)
    terminal.show_cautions(page, cautions.FINDINGS)
    return running.status(found, fail_on)
