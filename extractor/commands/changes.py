"""``extractor changes``."""

from __future__ import annotations

from pathlib import Path

import click

from extractor.commands import options
from extractor.errors import UsageError

_FOLDER = click.Path(path_type=Path)


@click.command(
    context_settings=options.SETTINGS, short_help="Say which effects moved between two runs, and why."
)
@click.argument("old_dir", type=_FOLDER)
@click.argument("new_dir", type=_FOLDER)
@click.option("--out", type=_FOLDER, metavar="FILE", help="Write the comparison as a csv file as well.")
@click.option("--force", is_flag=True, help="Replace a file that is there already.")
def command(old_dir: Path, new_dir: Path, out: Path | None, force: bool) -> None:
    """Say which effects moved between two folders that convert --out wrote, and why.

    A cause is a changed cell, a decision, the codebook, an option, another row of the same study, or another
    version of the program. Rows are matched by their numbers and labels, then by their labels.

    \b
    Examples:
      extractor changes results-march results-april
      extractor changes old new --out changes.csv
    """
    if out is not None and out.exists() and not force:
        raise UsageError(f"'{out}' exists; choose another name, or --force to replace it")
    from extractor.output import tables, teamwork, terminal
    from extractor.runs.changes import compare
    from extractor.runs.folder import read_run

    found = compare(read_run(old_dir), read_run(new_dir))
    if out is not None:
        tables.write_csv(found.effects, out)
        click.echo(f"written to {out}", err=True)
    teamwork.show_comparison(terminal.console(), found)
