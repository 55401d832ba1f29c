"""The register of fault kinds, and what every fault needs: a sheet of honest rows, and a command to run on it."""

from __future__ import annotations

import random
import warnings
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import pandas as pd

from extractor.commands.options import FORMATS
from extractor.quantities import METRICS
from tests.fuzz.judging import Case
from tests.fuzz.seeds import ROWS

READ = frozenset({0})
"""Whatever stands in the cells, the sheet is read."""
READ_OR_NOT = frozenset({0, 4})


@dataclass
class Hostile:
    """An input with a fault in it.

    sheet : the path, or "-" with ``stdin``. allowed : exit statuses it may have. rows : rows of the effect table;
    None where the fault leaves them open. more : further words of ``convert``; without a sheet, the whole command.
    frame : the sheet where it is no file, for the public functions.
    """

    sheet: str
    allowed: frozenset[int]
    stdin: bytes | None = None
    rows: int | None = None
    codebook: str | None = None
    groups: str | None = None
    decisions: str | None = None
    more: tuple[str, ...] = ()
    frame: pd.DataFrame | None = None


Maker = Callable[[random.Random, Path], Hostile]
FAULTS: dict[str, Maker] = {}
"""Makers by the name of the fault kind."""
EVERY: dict[str, int] = {}
"""Rounds from one case of a kind to its next; the costly ones come up less often."""
OF_READING: set[str] = set()
"""Kinds whose faults are over, well or badly, once the sheet is read: most of their cases go no further."""


def fault(name: str, *, every: int = 1, reading: bool = False) -> Callable[[Maker], Maker]:
    """Register a maker under the name of its kind."""

    def register(maker: Maker) -> Maker:
        assert name not in FAULTS
        FAULTS[name], EVERY[name] = maker, every
        if reading:
            OF_READING.add(name)
        return maker

    return register


def case(name: str, seed: int, folder: Path) -> Case:
    """The case of a kind and seed: the same seed always gives the same files and the same words.

    ``folder`` is an empty folder for the input; the output is written beside it.
    """
    source = random.Random(f"{name} {seed}")
    with warnings.catch_warnings():
        # the makers of archives warn of what is wrong with them
        warnings.simplefilter("ignore")
        made = FAULTS[name](source, folder)
    if made.frame is not None:
        return _called(made, source)
    if not made.sheet:
        return Case(list(made.more), made.allowed)
    if made.more:
        return _converting(made, source, folder)
    if name in OF_READING and made.stdin is None and source.random() < 0.7:
        return Case(["read"], made.allowed, rows=made.rows, named={"source": made.sheet, **_files_of(made)})
    ways, shares = (_PATHS, _SHARES) if made.stdin is None else (_PATHS[1:], _SHARES[1:])
    return source.choices(ways, shares)[0](made, source, folder)


Way = Callable[[Hostile, random.Random, Path], Case]


def _files_of(made: Hostile) -> dict[str, str]:
    """The files beside the sheet, by the name of their option."""
    options = {name: getattr(made, name) for name in ("codebook", "groups", "decisions")}
    return {name: path for name, path in options.items() if path is not None}


def _words_of(made: Hostile) -> list[str]:
    return [made.sheet, *(word for name, path in _files_of(made).items() for word in (f"--{name}", path))]


def _called(made: Hostile, source: random.Random, folder: Path | None = None) -> Case:
    """The public functions, which take the same files and give tables instead of writing them."""
    named: dict[str, Any] = {"source": made.sheet if made.frame is None else made.frame, **_files_of(made)}
    allowed = made.allowed | {3} if 0 in made.allowed else made.allowed
    if source.random() < 0.25:
        return Case(["audit_sheet"], allowed, rows=made.rows, named=named)
    named["to"] = metric(source)
    if source.random() < 0.1:
        named["level"] = source.choice((0.5, 0.9, 0.99, 1e-9))
    return Case(["convert"], allowed, rows=made.rows, named=named, whole=source.random() < 0.25)


def _auditing(made: Hostile, source: random.Random, folder: Path) -> Case:
    return _failing_on(Case(["audit", *_words_of(made)], made.allowed, None, made.stdin, made.rows), source)


def _tracing(made: Hostile, source: random.Random, folder: Path) -> Case:
    # a row that was not read is a mistake of whoever asks for it
    words = ["trace", *_words_of(made), str(source.randint(1, 4)), "--to", metric(source)]
    return Case(words, made.allowed | {2}, None, made.stdin)


def _unlocking(made: Hostile, source: random.Random, folder: Path) -> Case:
    words = ["unlock", *_words_of(made), "--to", metric(source)]
    if source.random() < 0.5:
        return Case(words, made.allowed, None, made.stdin)
    out = folder.parent / "out"
    return Case([*words, "--letters", str(out)], made.allowed, out, made.stdin, None, ("replies.csv",))


def _reconciling(made: Hostile, source: random.Random, folder: Path) -> Case:
    if made.stdin is not None or made.groups is not None or made.decisions is not None:
        return _auditing(made, source, folder)
    words, allowed = ["reconcile", *_words_of(made), _other_coder(source, folder)], made.allowed | {2, 4}
    if source.random() < 0.7:
        return Case(words, allowed)
    out, files = folder.parent / "out", ("agreement.csv", "disputes.csv", "consensus.xlsx")
    return Case([*words, "--out", str(out), "--to", metric(source)], allowed, out, None, None, files)


def _piping(made: Hostile, source: random.Random, folder: Path) -> Case:
    words = ["convert", *_words_of(made), "--to", metric(source), "--format", source.choice(("csv", "json"))]
    return _failing_on(Case(words, made.allowed, None, made.stdin, made.rows), source)


def _converting(made: Hostile, source: random.Random, folder: Path) -> Case:
    """The whole way, with a folder of written files, now and then with every other output."""
    out, allowed = folder.parent / "out", made.allowed
    words = ["convert", *_words_of(made), "--to", metric(source), "--out", str(out), *made.more]
    for format_ in source.sample(("xlsx", "xlsx", *FORMATS), source.choice((0, 0, 0, 0, 1))):
        words += ["--format", format_]
    if source.random() < 0.05:
        words += ["--covariance", "--outcome-correlation", source.choice(("0.5", "1", "-1"))]
    if source.random() < 0.05:
        words += ["--vary", source.choice(("correlation=.3:.8", "icc=0:1", "epsilon=.5:1"))]
        allowed = allowed | {2}
    if source.random() < 0.1 and made.stdin is None and "--format" not in words:
        # in blocks, which only text and parquet files can be worked through, and not what needs all rows
        words, allowed = [*words, "--workers", "1"], allowed | {2}
    if source.random() < 0.02:
        # a sheet without a single effect cannot be drawn
        words += ["--figure", str(folder / f"figure.{source.choice(('svg', 'png'))}")]
        allowed = allowed | {2}
    return _failing_on(Case(words, allowed, out, made.stdin, made.rows), source)


def _failing_on(made: Case, source: random.Random) -> Case:
    if source.random() > 0.1:
        return made
    words = [*made.words, "--fail-on", source.choice(("impossible", "inconsistent", "doubtful"))]
    return replace(made, words=words, allowed=made.allowed | {3} if 0 in made.allowed else made.allowed)


_PATHS: tuple[Way, ...] = (_called, _auditing, _tracing, _unlocking, _reconciling, _piping, _converting)
_SHARES = (0.66, 0.06, 0.04, 0.02, 0.01, 0.07, 0.14)
"""How often a sheet goes each way."""


def _other_coder(source: random.Random, folder: Path) -> str:
    """A second sheet, by a coder who saw other numbers."""
    rows = honest(source, 2)
    for row in rows:
        row[source.choice(list(row))] = source.choice(("5.1", "20", "Site 1"))
    path = folder / "second.csv"
    path.write_text(delimited(cells_of(rows)), encoding="utf-8", newline="")
    return str(path)


def metric(source: random.Random) -> str:
    """A metric, the common ones more often, as their routes need not be planned anew."""
    return source.choice(METRICS if source.random() < 0.3 else ("omega_squared", "hedges_g"))


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
