"""``extractor sheet``."""

from __future__ import annotations

from pathlib import Path

import click

from extractor.commands import options


@click.command(context_settings=options.SETTINGS, short_help="Write a blank coding sheet for a codebook.")
@click.argument("codebook", shell_complete=options.completing_codebooks)
@click.argument("file", type=click.Path(path_type=Path), metavar="FILE.xlsx")
@click.option(
    "--groups",
    type=int,
    default=3,
    show_default=True,
    help="Numbered groups side by side, where the codebook has one column a group.",
)
@click.option("--force", is_flag=True, help="Replace an existing file.")
def command(codebook: str, file: Path, groups: int, force: bool) -> None:
    """Write a blank coding sheet with the headings of CODEBOOK, a ready codebook or a .toml file.

    Number columns are in text format, so that printed zeros stay; words are chosen from lists; the meaning of each
    column is a note on its heading; a page explains how to code.

    \b
    Examples:
      extractor sheet one-way coding.xlsx
      extractor sheet two-group coding.xlsx
      extractor sheet our-codebook.toml coding.xlsx --groups 5
    """
    from extractor.codebook import load_codebook
    from extractor.output.coding_sheet import write_coding_sheet
    from extractor.output.one_file import output_file

    book = load_codebook(codebook)
    with output_file(file, (".xlsx",), force=force) as made:
        write_coding_sheet(book, made, groups=groups)
    click.echo(f"written to {file}", err=True)
