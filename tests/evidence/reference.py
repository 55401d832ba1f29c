"""The reference pages, made from the commands and tables they describe.

python -m tests.evidence.reference          compares and says which page is stale
python -m tests.evidence.reference --write  writes them anew

``extractor/commands/README.md`` holds every command with its arguments and options, ``extractor/output/README.md`` the
columns of the written tables, and the last section of ``codebooks/README.md`` the columns a sheet may have.
"""

from __future__ import annotations

import inspect
import sys
from collections.abc import Iterable, Iterator
from pathlib import Path

import click

from extractor.commands.main import COMMANDS, cli
from extractor.output import columns
from extractor.quantities import FACTS, INF, VOCABULARY, Quantity, Role, Shape

ROOT = Path(__file__).resolve().parents[2]
COMMAND_PAGE = ROOT / "extractor" / "commands" / "README.md"
TABLE_PAGE = ROOT / "extractor" / "output" / "README.md"
CODEBOOK_PAGE = ROOT / "codebooks" / "README.md"
SECTION = "## All columns of a sheet\n"
_MADE = "Made by `python -m tests.evidence.reference --write`; a test fails when it is stale."
_TABLES = (
    ("effects.csv", "One row per row of the sheet, in sheet order.", columns.EFFECTS),
    ("findings.csv", "One row per finding of the audit.", columns.FINDINGS),
    ("covariance.csv", "With `--covariance`: effects that are not independent.", columns.COVARIANCES),
    ("sensitivity.csv", "With `--vary`: how far each effect moves.", columns.SENSITIVITY),
    ("assumptions.csv", "With `--vary`: what was assumed, over which range.", columns.ASSUMPTIONS),
    ("routes.csv", "With `--vary`: the effect by each admissible route.", columns.ROUTES),
)


def pages() -> dict[Path, str]:
    """Every page as it should stand."""
    guide = CODEBOOK_PAGE.read_text(encoding="utf-8").partition(SECTION)[0].rstrip("\n")
    return {
        COMMAND_PAGE: "\n".join(_commands()) + "\n",
        TABLE_PAGE: "\n".join(_written_tables()) + "\n",
        CODEBOOK_PAGE: guide + "\n\n" + SECTION + "\n" + "\n".join(_sheet_columns()) + "\n",
    }


def _table(head: tuple[str, ...], rows: Iterable[tuple[str, ...]]) -> Iterator[str]:
    yield "| " + " | ".join(head) + " |"
    yield "|" + "---|" * len(head)
    for row in rows:
        yield "| " + " | ".join(cell.replace("|", "\\|").replace("\n", " ") for cell in row) + " |"


def _commands() -> Iterator[str]:
    yield from (
        "# Commands",
        "",
        _MADE,
        "",
        "Exit status: 0 done, 1 crash or interrupt, 2 wrong usage, 3 a finding",
    )
    yield from ("at or above `--fail-on`, 4 an input that cannot be read, 5 a codebook that is not valid.",)
    context = click.Context(cli, info_name="extractor")
    for name in COMMANDS:
        command = cli.get_command(context, name)
        assert command is not None
        yield from ("", f"## `extractor {name}`", "")
        text, _, examples = inspect.cleandoc(command.help or "").partition("\b\n")
        yield "\n\n".join(" ".join(part.split()) for part in text.strip().split("\n\n"))
        usage = " ".join(
            command.collect_usage_pieces(
                click.Context(command, context, info_name=name, **command.context_settings)
            )
        )
        yield from ("", "```sh", f"extractor {name} {usage}", *_lines(examples), "```")
        options = [one for one in command.params if isinstance(one, click.Option)]
        if options:
            yield ""
            yield from _table(("option", "meaning"), map(_option, options))


def _lines(examples: str) -> list[str]:
    return [line.strip() for line in examples.splitlines() if line.strip().startswith("extractor ")]


def _option(option: click.Option) -> tuple[str, str]:
    names = ", ".join(option.opts)
    if not option.is_flag:
        choices = getattr(option.type, "choices", None)
        names += " " + (option.metavar or ("|".join(choices) if choices else option.type.name.upper()))
    meaning = option.help or ""
    if option.required:
        meaning += " Required."
    elif option.show_default:
        meaning += f" By default {option.default}."
    return f"`{names}`", meaning


def _written_tables() -> Iterator[str]:
    yield from ("# Columns of the written tables", "", _MADE)
    for name, about, described in _TABLES:
        yield from ("", f"## `{name}`", "", about, "")
        rows = ((f"`{heading}`", column.kind, _meaning(column)) for heading, column in described.items())
        yield from _table(("column", "type", "meaning"), rows)


def _meaning(column: columns.Column) -> str:
    allowed = column.constraints.get("enum")
    words = ", ".join(f"`{word}`" for word in allowed) if isinstance(allowed, list) else ""
    return f"{column.meaning}: {words}" if words else column.meaning


def _sheet_columns() -> Iterator[str]:
    yield f"Every name is a heading of its own. {_MADE}"
    yield from ("", "### Labels and facts", "")
    yield from _table(("heading", "meaning"), ((f"`{name}`", meaning) for name, meaning in FACTS.items()))
    for title, shape in (("Numbers", Shape.SCALAR), ("Numbers of each group", Shape.GROUP)):
        coded = [q for q in VOCABULARY.values() if q.role is Role.REPORTED and q.shape is shape]
        yield from ("", f"### {title}", "")
        yield from _table(("heading", "symbol", "meaning", "values"), map(_quantity, coded))


def _quantity(quantity: Quantity) -> tuple[str, ...]:
    heading = quantity.name + ("_1, ..." if quantity.shape is Shape.GROUP else "")
    low, high = quantity.low, quantity.high
    ends = {
        (True, True): "any",
        (True, False): f"at most {high:g}",
        (False, True): "above 0" if quantity.positive else f"at least {low:g}",
        (False, False): f"{low:g} to {high:g}",
    }[low == -INF, high == INF]
    return f"`{heading}`", quantity.symbol, quantity.meaning, ends + (", whole" if quantity.integer else "")


def main(argv: list[str]) -> int:
    """Compare, or write."""
    stale = [path for path, text in pages().items() if not path.exists() or path.read_text("utf-8") != text]
    if "--write" in argv:
        for path in stale:
            path.write_text(pages()[path], encoding="utf-8")
        return 0
    for path in stale:
        print(f"{path.relative_to(ROOT)} is stale: run with --write")
    if not stale:
        print("the reference pages are as they should be")
    return int(bool(stale))


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
