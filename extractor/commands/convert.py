"""``extractor convert``."""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import click

from extractor.commands import options
from extractor.errors import UsageError
from extractor.quantities import VOCABULARY

if TYPE_CHECKING:
    import pandas as pd
    from rich.console import Console

    from extractor.api import Result
    from extractor.table import Assumption

_TO_STDOUT = ("csv", "json")


@click.command(
    context_settings=options.SETTINGS,
    short_help="Turn a sheet into effects of one metric, with variances and routes.",
)
@options.coded
@options.wanted
@options.output
@click.option(
    "--format",
    "formats",
    multiple=True,
    type=click.Choice(options.FORMATS),
    help="Write the effect table in this format too; may be given several times. Without --out, csv or json "
    "goes to standard output.",
)
@click.option(
    "--rename",
    multiple=True,
    metavar="COLUMN=NAME",
    help="Heading of a column in the written effect tables; may be given several times.",
)
@click.option(
    "--vary",
    multiple=True,
    metavar="NAME=LOW:HIGH",
    shell_complete=options.completing(VOCABULARY),
    help="Show what every effect becomes over the range of an assumption, such as correlation=.3:.8, and under each "
    "admissible route; may be given several times. Ranges of the codebook count too.",
)
@click.option(
    "--covariance",
    is_flag=True,
    help="Write covariance.csv: covariances of effects that share groups or participants.",
)
@click.option(
    "--outcome-correlation",
    type=click.FloatRange(-1, 1),
    help="Correlation of two outcomes of the same participants, for --covariance.",
)
@click.option(
    "--figure",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="Draw the effects with their limits into this .svg, .pdf or .png file.",
)
@click.option(
    "--figure-by",
    default="outcome",
    show_default=True,
    metavar="COLUMN",
    help="Column that groups the figure.",
)
@options.workers
@options.fail_on
def command(
    coded: options.Coded,
    wanted: options.Wanted,
    out: Path | None,
    force: bool,
    csv_raw: bool,
    formats: tuple[str, ...],
    rename: tuple[str, ...],
    vary: tuple[str, ...],
    covariance: bool,
    outcome_correlation: float | None,
    figure: Path | None,
    figure_by: str,
    workers: int | None,
    fail_on: str | None,
) -> int:
    """Turn the rows of SHEET into effects of one metric, each with its sampling variance and route.

    SHEET is a workbook, a csv or tsv file, or - for delimited text on standard input. With --out the folder
    gets effects.csv, findings.csv, derivations.json and datapackage.json; without it the effect table is
    printed. Where assumptions have ranges, from --vary or the codebook, it also gets sensitivity.csv,
    assumptions.csv and routes.csv.

    \b
    Examples:
      extractor convert coded.xlsx --to omega_squared
      extractor convert coded.xlsx --to hedges_g --codebook two-group --out results --format xlsx --format html
      extractor convert coded.xlsx --to hedges_g --figure effects.svg
      extractor convert coded.csv --to hedges_g --out results --rename estimate=effect_size
      extractor convert coded.csv --to eta_squared --format csv > effects.csv
    """
    renamed = options.pairs(rename, "--rename", "estimate=NAME")
    if out is None:
        _check_without_folder(formats, bool(renamed), covariance)
    from extractor import cautions
    from extractor.commands import running, streaming
    from extractor.output import files, package, tables, terminal
    from extractor.output.request import Request, effects_as_written
    from extractor.routes.sensitivity import has_ranges

    for kind in formats:
        if kind not in options.VIEWS:
            tables.require(kind)
    if out is not None:
        files.refuse_existing(out, force=force)
    request = Request(
        sheet=coded.sheet,
        codebook=coded.codebook,
        metric=wanted.metric,
        variance=wanted.variance,
        level=wanted.level,
        standardizer=wanted.standardizer,
        formats=formats,
        rename=renamed,
        raw=csv_raw,
        covariance=covariance,
        outcomes=_outcomes(outcome_correlation),
    )
    whole = [f"--format {kind}" for kind in formats if kind != "csv"]
    whole += [
        name for name, used in (("--vary", vary), ("--covariance", covariance), ("--figure", figure)) if used
    ]
    if streaming.in_blocks(coded, out, workers, whole) and out is not None:
        running.check(wanted)
        return streaming.write(coded, out, request, workers, fail_on, force=force)
    result = running.convert(coded, wanted, vary)
    ranged = has_ranges(result.conversion.evidence.table.assumptions)
    if figure is not None:
        _draw(result.effects, figure, wanted.level, figure_by, force)
    said = (*cautions.EFFECTS, *(cautions.FINDINGS if result.audit.findings else ()))
    if out is not None:
        request = replace(request, sensitivity=ranged)
        rows = result.conversion.evidence.table.rows
        with running.stage(f"writing {rows} rows", rows, counts=True) as tick:
            running.mention(package.write_conversion(out, result, request, force=force, tick=tick))
        click.echo(f"written to {out}", err=True)
        page = terminal.console()
        terminal.show_summary(page, result)
        if ranged:
            _show_sensitivity(page, result, wanted)
        terminal.show_cautions(page, said)
    elif formats:
        effects = effects_as_written(result, renamed)
        is_csv = formats[0] == "csv"
        lines = tables.csv_lines(effects, raw=csv_raw) if is_csv else tables.json_lines(effects)
        sys.stdout.writelines(lines)
        terminal.show_cautions(terminal.console(stderr=True), said)
    else:
        page = terminal.console()
        terminal.show_effects(page, result, wanted.level)
        if ranged:
            _show_sensitivity(page, result, wanted)
        terminal.show_cautions(page, said)
    return running.status(result.audit, fail_on)


def _show_sensitivity(page: Console, result: Result, wanted: options.Wanted) -> None:
    from extractor.output.teamwork import show_sensitivity
    from extractor.routes.by_route import by_route
    from extractor.routes.sensitivity import sensitivity

    found = sensitivity(result.conversion, method=wanted.variance, level=wanted.level)
    show_sensitivity(page, found, by_route(result.conversion))


def _draw(effects: pd.DataFrame, path: Path, level: float, by: str, force: bool) -> None:
    from extractor.output.figure import ENDINGS, write_figure
    from extractor.output.one_file import output_file

    with output_file(path, ENDINGS, force=force) as made:
        write_figure(effects, made, level=level, by=by)
    click.echo(f"written to {path}", err=True)


def _outcomes(correlation: float | None) -> Assumption | None:
    from extractor.table import Assumption

    return None if correlation is None else Assumption(correlation, "--outcome-correlation")


def _check_without_folder(formats: tuple[str, ...], renamed: bool, covariance: bool) -> None:
    if covariance:
        raise UsageError("--covariance writes a file: name a folder with --out DIR")
    if len(formats) > 1:
        raise UsageError("several formats need a folder: name it with --out DIR")
    if formats and formats[0] not in _TO_STDOUT:
        raise UsageError(f"--format {formats[0]} needs a folder: name it with --out DIR")
    if renamed and not formats:
        raise UsageError("--rename concerns written tables: add --out DIR, or --format csv")
