"""Arguments and options that several commands share. Nothing heavy is imported here."""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterable
from dataclasses import dataclass
from functools import wraps
from pathlib import Path
from typing import Any, TypeVar

import click
from click.shell_completion import CompletionItem

from extractor.commands import SETTINGS as SETTINGS
from extractor.errors import UsageError
from extractor.printed.reading import quoted
from extractor.quantities import METRICS, STANDARDIZERS, close_matches

FORMATS = ("csv", "xlsx", "html", "json", "parquet", "dta", "prov")
VIEWS = ("html", "prov")
"""Formats that are no effect tables."""

Command = TypeVar("Command", bound=Callable[..., Any])
Completer = Callable[[click.Context, click.Parameter, str], list[CompletionItem]]


def completing(words: Iterable[str]) -> Completer:
    """What a shell offers for an option: the known words that begin as typed. The user may type others."""
    known = tuple(words)

    def complete(ctx: click.Context, param: click.Parameter, incomplete: str) -> list[CompletionItem]:
        return [CompletionItem(word) for word in known if word.startswith(incomplete)]

    return complete


def completing_files(ctx: click.Context, param: click.Parameter, incomplete: str) -> list[CompletionItem]:
    """Let the shell offer its files."""
    return [CompletionItem(incomplete, type="file")]


def completing_codebooks(ctx: click.Context, param: click.Parameter, incomplete: str) -> list[CompletionItem]:
    """The ready codebooks that begin as typed; where none does, files."""
    from extractor.codebook import ready_codebooks

    ready = completing(ready_codebooks())(ctx, param, incomplete)
    return ready or completing_files(ctx, param, incomplete)


def _proportion(ctx: click.Context, param: click.Parameter, value: float) -> float:
    if not 0 < value < 1:
        hint = f"; did you mean {value / 100:g}?" if 1 < value < 100 else ""
        raise click.BadParameter(f"{value:g} is not between 0 and 1{hint}")
    return value


@dataclass(frozen=True, slots=True, kw_only=True)
class Coded:
    """What a coder hands over: the sheet, what its headings mean, and sheets that may stand in files of their own."""

    sheet: str
    codebook: str | None
    groups: str | None
    decisions: str | None


def coded(command: Callable[..., Any]) -> Callable[..., Any]:
    """The argument SHEET, --codebook, --groups and --decisions, handed to the command as ``coded``."""

    @wraps(command)
    def gathered(
        sheet: str, codebook: str | None, groups: str | None, decisions: str | None, **others: object
    ) -> object:
        return command(
            coded=Coded(sheet=sheet, codebook=codebook, groups=groups, decisions=decisions), **others
        )

    for option in (
        click.option(
            "--decisions",
            metavar="FILE",
            shell_complete=completing_files,
            help="What coders decided about findings; without it the sheet of that name.",
        ),
        click.option(
            "--groups",
            metavar="FILE",
            shell_complete=completing_files,
            help="One line per group or cell, joined by analysis; without it the sheet of that name.",
        ),
        click.option(
            "--codebook",
            metavar="NAME|FILE",
            shell_complete=completing_codebooks,
            help="What the headings mean: a ready codebook (see codebooks/README.md) or a .toml file. "
            "Without it headings are quantity names.",
        ),
        click.argument("sheet", shell_complete=completing_files),
    ):
        gathered = option(gathered)
    return gathered


@dataclass(frozen=True, slots=True, kw_only=True)
class Wanted:
    """The effect a user asks for; see ``extractor.convert`` for the words."""

    metric: str
    variance: str | None
    level: float
    standardizer: str


def wanted(command: Callable[..., Any]) -> Callable[..., Any]:
    """--to, --variance, --level and --standardizer, handed to the command as ``wanted``."""

    @wraps(command)
    def gathered(
        metric: str, variance: str | None, level: float, standardizer: str, **others: object
    ) -> object:
        asked = Wanted(metric=metric, variance=variance, level=level, standardizer=standardizer)
        return command(wanted=asked, **others)

    for option in (
        click.option(
            "--standardizer",
            default="",
            metavar="NAME",
            shell_complete=completing(STANDARDIZERS),
            help=f"For d and g, accept only this one of {', '.join(STANDARDIZERS)}; by default the design's "
            "usual one.",
        ),
        click.option(
            "--level",
            type=float,
            default=0.95,
            show_default=True,
            callback=_proportion,
            help="Confidence level of the limits, as a proportion.",
        ),
        click.option(
            "--variance",
            type=click.Choice(["exact", "large-sample"]),
            help="How sampling variances are computed; by default the metric's preferred way, which the "
            "column variance_method names.",
        ),
        click.option(
            "--to",
            "metric",
            required=True,
            shell_complete=completing(METRICS),
            metavar="METRIC",
            help=f"One of {', '.join(METRICS)}.",
        ),
    ):
        gathered = option(gathered)
    return gathered


def fail_on(command: Command) -> Command:
    """--fail-on."""
    return click.option(
        "--fail-on",
        type=click.Choice(["impossible", "inconsistent", "doubtful"]),
        help="Exit with status 3 where a finding is at least this strong.",
    )(command)


def workers(command: Command) -> Command:
    """--workers."""
    return click.option(
        "--workers",
        type=click.IntRange(1, 256),
        metavar="N",
        help="Work through a csv or parquet file in blocks, with this many processes; large files are worked "
        "through in blocks in any case. Rows of different studies are then not compared with each other.",
    )(command)


def output(command: Command) -> Command:
    """--out, --force and --csv-raw."""
    for option in (
        click.option(
            "--csv-raw", is_flag=True, help="Leave texts in csv files as they are, even those like formulas."
        ),
        click.option("--force", is_flag=True, help="Replace the files of an existing output folder."),
        click.option("--out", type=click.Path(path_type=Path), metavar="DIR", help="Folder to write into."),
    ):
        command = option(command)
    return command


def pairs(words: Iterable[str], option: str, example: str) -> dict[str, str]:
    """NAME=VALUE words as a mapping.

    Raises
    ------
    UsageError : a word has no name, no value, or a name another word has.
    """
    found: dict[str, str] = {}
    for word in words:
        name, sign, value = (part.strip() for part in word.partition("="))
        if not (name and sign and value):
            raise UsageError(f"{option} {quoted(word)} is not of the form {example}")
        if name in found:
            raise UsageError(f"{option} names {name} twice")
        found[name] = value
    return found


def check_known(word: str | None, known: Collection[str], kind: str) -> None:
    """Raise ``UsageError`` with the nearest known words, unless the word is known or not given."""
    if word is not None and word not in known:
        near = close_matches(word, known)
        hint = f"did you mean {' or '.join(near)}?" if near else f"known are {', '.join(known)}"
        raise UsageError(f"no {kind} is called {quoted(word)}: {hint}")
