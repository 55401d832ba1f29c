"""``extractor trace``."""

from __future__ import annotations

import click

from extractor.commands import options
from extractor.errors import UsageError


@click.command(context_settings=options.SETTINGS, short_help="Show how the effect of one row came about.")
@options.coded
@click.argument("row", type=int)
@options.wanted
def command(coded: options.Coded, row: int, wanted: options.Wanted) -> None:
    """Show how the effect of one ROW of SHEET came about, from the estimate down to the cells.

    ROW is the number the spreadsheet gives the row. Every step is shown with its value, the interval that
    rounding leaves it, its formula and source; then the routes not taken and how far they disagree.

    \b
    Examples:
      extractor trace coded.xlsx 7 --to omega_squared
      extractor trace coded.csv 12 --to hedges_g --codebook two-group
    """
    from extractor import cautions
    from extractor.commands import running
    from extractor.output import terminal, tracing

    result = running.convert(coded, wanted)
    rows = result.effects["row"]
    found = (rows == row).to_numpy().nonzero()[0]
    if not len(found):
        raise UsageError(
            f"the sheet has no data in row {row}: its rows run from {rows.min()} to {rows.max()}"
        )
    page = terminal.console()
    tracing.show_trace(page, result, int(found[0]), wanted.level)
    if any(finding.row == row for finding in result.audit.findings):
        terminal.show_cautions(page, cautions.FINDINGS)
