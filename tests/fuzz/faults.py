"""The register of fault kinds, and what every fault needs: a sheet of honest rows, and a command to run on it."""

from __future__ import annotations

import random
import warnings
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from extractor.commands.options import FORMATS
from extractor.quantities import METRICS
from tests.fuzz.judging import CONVERTED, Case
from tests.fuzz.seeds import ROWS

READ = frozenset({0})
"""Whatever stands in the cells, the sheet is read."""
READ_OR_NOT = frozenset({0, 4})


@dataclass
class Hostile:
    """An input with a fault in it.

    sheet : the path, or "-" with ``stdin``. allowed : exit statuses it may have. rows : rows of the effect table;
    None where the fault leaves them open. more : further words of ``convert``; without a sheet, the whole command.
    """

    sheet: str
    allowed: frozenset[int]
    stdin: bytes | None = None
    rows: int | None = None
    codebook: str | None = None
    groups: str | None = None
    decisions: str | None = None
    more: tuple[str, ...] = ()


Maker = Callable[[random.Random, Path], Hostile]
FAULTS: dict[str, Maker] = {}
"""Makers by the name of the fault kind."""


def fault(name: str) -> Callable[[Maker], Maker]:
    """Register a maker under the name of its kind."""

    def register(maker: Maker) -> Maker:
        assert name not in FAULTS
        FAULTS[name] = maker
        return maker

    return register


def case(name: str, seed: int, folder: Path) -> Case:
    """The case of a kind and seed: the same seed always gives the same files and the same command line.

    ``folder`` is an empty folder for the input; the output is written beside it.
    """
    source = random.Random(f"{name} {seed}")
    with warnings.catch_warnings():
        # the makers of archives warn of what is wrong with them
        warnings.simplefilter("ignore")
        made = FAULTS[name](source, folder)
    if not made.sheet:
        return Case(list(made.more), made.allowed)
    words = [made.sheet]
    for option in ("codebook", "groups", "decisions"):
        value = getattr(made, option)
        if value is not None:
            words += [f"--{option}", value]
    allowed, out, files = made.allowed, None, CONVERTED
    kind = source.random()
    if kind < 0.15 and not made.more:
        words = ["audit", *words]
    elif kind < 0.2 and not made.more:
        # a row that was not read is a mistake of whoever asks for it
        words, allowed = ["trace", *words, str(source.randint(1, 4)), "--to", metric(source)], allowed | {2}
    elif kind < 0.23 and not made.more:
        words = ["unlock", *words, "--to", metric(source)]
        if source.random() < 0.5:
            out, files = folder.parent / "out", ("replies.csv",)
            words += ["--letters", str(out)]
    elif kind < 0.26 and not made.more and made.stdin is None and made.groups is made.decisions is None:
        words, allowed = ["reconcile", *words, _other_coder(source, folder)], allowed | {2, 4}
        if source.random() < 0.5:
            out, files = folder.parent / "out", ("agreement.csv", "disputes.csv", "consensus.xlsx")
            words += ["--out", str(out), "--to", metric(source)]
    elif kind < 0.35:
        words = ["convert", *words, "--to", metric(source), "--format", source.choice(("csv", "json"))]
        words += made.more
    else:
        out = folder.parent / "out"
        words = ["convert", *words, "--to", metric(source), "--out", str(out), *made.more]
        for format_ in source.sample(("xlsx", "xlsx", *FORMATS), source.choice((0, 0, 1))):
            words += ["--format", format_]
        if source.random() < 0.05:
            words += ["--covariance", "--outcome-correlation", source.choice(("0.5", "1", "-1"))]
        if source.random() < 0.02:
            # a sheet without a single effect cannot be drawn
            words, allowed = (
                [*words, "--figure", str(folder / f"figure.{source.choice(('svg', 'png'))}")],
                allowed | {2},
            )
    if words[0] in ("convert", "audit") and source.random() < 0.1:
        words += ["--fail-on", source.choice(("impossible", "inconsistent", "doubtful"))]
        allowed = allowed | {3} if 0 in allowed else allowed
    return Case(words, allowed, out, made.stdin, made.rows, files)


def _other_coder(source: random.Random, folder: Path) -> str:
    """A second sheet, by a coder who saw other numbers."""
    rows = honest(source, 2)
    for row in rows:
        row[source.choice(list(row))] = source.choice(("5.1", "20", "Site 1"))
    path = folder / "second.csv"
    path.write_text(delimited(cells_of(rows)), encoding="utf-8", newline="")
    return str(path)


def metric(source: random.Random) -> str:
    """A metric, the common ones more often."""
    return source.choice((*METRICS, "omega_squared", "hedges_g", "hedges_g"))


def honest(source: random.Random, rows: int) -> list[dict[str, str]]:
    """So many honest rows, with labels."""
    return [{"study": f"Site {at + 1}", "outcome": "recall", **source.choice(ROWS)} for at in range(rows)]


def headings_of(rows: list[dict[str, str]]) -> list[str]:
    """Every heading of the rows, in the order they come up."""
    return list(dict.fromkeys(name for row in rows for name in row))


def cells_of(rows: list[dict[str, str]]) -> list[list[str]]:
    """The heading row and the rows below it."""
    headings = headings_of(rows)
    return [headings, *([row.get(name, "") for name in headings] for row in rows)]


def delimited(cells: list[list[str]], delimiter: str = ",", newline: str = "\n") -> str:
    """Cells as delimited text (RFC 4180)."""

    def quoted(cell: str) -> str:
        # the standard library's writer leaves a carriage return without quotation marks
        plain = not any(sign in cell for sign in ('"', delimiter, "\n", "\r"))
        return cell if plain else '"' + cell.replace('"', '""') + '"'

    return "".join(delimiter.join(map(quoted, row)) + newline for row in cells)


def as_csv(folder: Path, cells: list[list[str]]) -> str:
    """The path of a new csv file of these cells."""
    path = folder / "sheet.csv"
    path.write_text(delimited(cells), encoding="utf-8", newline="")
    return str(path)
