"""``extractor reconcile``."""

from __future__ import annotations

from pathlib import Path

import click

from extractor.commands import options
from extractor.errors import UsageError
from extractor.quantities import METRICS, STANDARDIZERS


@click.command(
    context_settings=options.SETTINGS,
    short_help="Compare coders' sheets: agreement, and disputes by how far they move the effect.",
)
@click.argument(
    "sheets", nargs=-1, metavar="SHEET_A SHEET_B [MORE]...", shell_complete=options.completing_files
)
@click.option(
    "--to",
    "metric",
    shell_complete=options.completing(METRICS),
    metavar="METRIC",
    help="Metric in which disputes are weighed; without it they stand in the order of the sheet. One of "
    f"{', '.join(METRICS)}.",
)
@click.option(
    "--standardizer",
    default="",
    metavar="NAME",
    shell_complete=options.completing(STANDARDIZERS),
    help=f"For d and g, accept only this one of {', '.join(STANDARDIZERS)}.",
)
@click.option(
    "--level",
    type=float,
    default=0.95,
    show_default=True,
    help="Confidence level of the limits, as a proportion.",
)
@click.option(
    "--tolerance",
    type=float,
    default=0.0,
    show_default=True,
    help="Numbers also agree when they differ by at most this share of the larger. At 0 they agree where their "
    "rounding intervals overlap.",
)
@click.option(
    "--consensus",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="The filled consensus.xlsx of an earlier comparison; writes the merged sheet into --out.",
)
@click.option(
    "--codebook",
    metavar="NAME|FILE",
    shell_complete=options.completing_codebooks,
    help="What the headings of all sheets mean: a ready codebook or a .toml file.",
)
@click.option(
    "--groups",
    multiple=True,
    metavar="FILE",
    shell_complete=options.completing_files,
    help="One line per group or cell, joined by analysis; given once for each sheet, in their order. Without it the "
    "sheets of that name inside the workbooks.",
)
@options.output
def command(
    sheets: tuple[str, ...],
    groups: tuple[str, ...],
    metric: str | None,
    standardizer: str,
    level: float,
    tolerance: float,
    consensus: Path | None,
    codebook: str | None,
    out: Path | None,
    force: bool,
    csv_raw: bool,
) -> None:
    """Compare the sheets of two or more coders who coded the same studies.

    Rows are matched by study, outcome, effect, analysis, term and contrast, in any order. Agreement is given
    for every variable. Every cell in dispute is weighed by converting the first coder's row again with the
    other coder's value. With --out the folder gets agreement.csv, disputes.csv, rows.csv and consensus.xlsx,
    a workbook to settle disputes in; given back with --consensus it becomes merged.xlsx.

    \b
    Examples:
      extractor reconcile first.xlsx second.xlsx
      extractor reconcile first.xlsx second.xlsx --to hedges_g --out comparison
      extractor reconcile first.xlsx second.xlsx --consensus comparison/consensus.xlsx --out final
    """
    if len(sheets) < 2:
        raise UsageError("a comparison takes two sheets or more: extractor reconcile SHEET_A SHEET_B")
    if not 0 < level < 1:
        raise UsageError(f"--level {level:g} is not between 0 and 1")
    if consensus is not None and out is None:
        raise UsageError("--consensus writes the merged sheet: name a folder for it with --out")
    from extractor.coders.reconcile import reconcile
    from extractor.commands import running
    from extractor.output import comparing, files, terminal
    from extractor.output.consensus import read_consensus

    if out is not None:
        files.refuse_existing(out, force=force)
    found = reconcile(
        sheets,
        metric,
        codebook,
        level=level,
        standardizer=standardizer,
        tolerance=tolerance,
        groups=groups,
    )
    running.mention(list(found.notes))
    page = terminal.console()
    if consensus is not None and out is not None:
        settled = read_consensus(found, consensus)
        running.mention(comparing.write_settled(out, found, settled, force=force))
        click.echo(f"written to {out}", err=True)
        return
    if out is not None:
        running.mention(comparing.write_comparison(out, found, raw=csv_raw, force=force))
        click.echo(f"written to {out}", err=True)
    comparing.show_comparison(page, found, [Path(name).name for name in sheets])
    terminal.show_cautions(page, [comparing.CAUTION])
