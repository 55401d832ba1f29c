"""Sheets too large to be held whole: worked through in blocks, by several processes where asked for."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import click

from extractor.commands import running
from extractor.commands.options import Coded
from extractor.errors import UsageError
from extractor.findings import Severity
from extractor.printed.reading import quoted

if TYPE_CHECKING:
    from extractor.output.request import Request

LARGE = 1 << 25
"""Bytes of a csv or parquet file from which it is worked through in blocks unasked."""
NOT_VARIED = (
    "assumptions were not moved over the ranges of the codebook: the sheet was worked through in blocks; "
    "name a range with --vary to have all rows worked on at once"
)


def in_blocks(coded: Coded, out: Path | None, workers: int | None, whole: Sequence[str]) -> bool:
    """Whether a sheet is worked through in blocks.

    Parameters
    ----------
    workers : processes, where asked for. whole : options given that need all rows at once.

    Raises
    ------
    UsageError : processes were asked for and something stands in the way.
    """
    from extractor.source.blocks import can_be_cut

    path = Path(coded.sheet)
    possible = coded.sheet != "-" and can_be_cut(path)
    if workers is None:
        return out is not None and not whole and possible and path.stat().st_size >= LARGE
    if out is None:
        raise UsageError("--workers writes its results block by block: name a folder with --out DIR")
    if whole:
        raise UsageError(f"--workers works through the sheet in blocks; {whole[0]} needs all rows at once")
    if not possible:
        raise UsageError(
            f"--workers needs a csv, tsv or parquet file, and {quoted(coded.sheet, 200)} is none: save it as csv"
        )
    return True


def write(
    coded: Coded, out: Path, request: Request, workers: int | None, fail_on: str | None, *, force: bool
) -> int:
    """Convert and audit, or only audit, a sheet in blocks into a folder; the exit status."""
    from extractor import cautions
    from extractor.blockwise import NOT_COMPARED, looked_through, run, sheet_of
    from extractor.output import terminal
    from extractor.output.appended import Auditing, Converting, write_blocks
    from extractor.routes.sensitivity import has_ranges

    converting = request.metric is not None
    sheet = sheet_of(coded.sheet, coded.codebook, coded.groups, coded.decisions)
    blocks = looked_through(sheet)
    rows = blocks.cuts.rows
    running.mention(blocks.notes)
    work = Converting(request) if converting else Auditing(request)
    doing = f"{'converting' if converting else 'auditing'} {rows} rows"
    with running.stage(doing, rows, counts=True) as tick:
        texts = run(sheet, blocks, work, workers or 1)
        tally, notes = write_blocks(out, texts, request, force=force, tick=tick)
    unvaried = [NOT_VARIED] if converting and has_ranges(sheet.codebook.assumptions) else []
    running.mention([*notes, NOT_COMPARED, *unvaried])
    click.echo(f"written to {out}", err=True)
    page = terminal.console()
    for line in tally.lines():
        terminal.say(page, line)
    terminal.show_cautions(page, (*(cautions.EFFECTS if converting else ()), *cautions.FINDINGS))
    if fail_on is None:
        return 0
    strong = [s for s in Severity if s >= Severity[fail_on.upper()] and tally.findings[s.word]]
    return 3 if strong else 0
