"""Faults of what the program wrote itself and reads again: run folders, logs, consensus workbooks; and of frames."""

from __future__ import annotations

import atexit
import datetime
import decimal
import random
import shutil
import tempfile
from functools import cache
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
from click.testing import CliRunner

from extractor.commands.main import cli
from tests.fuzz.faults import READ_OR_NOT, Hostile, cells_of, delimited, fault, honest
from tests.fuzz.seeds import EXTREMES, FORMULAS, NUMBERS, WORDS

_CODED = (
    {"study": "Site 1", "outcome": "recall", "design": "one-way", "f_value": "4.31", "df_error": "57"},
    {"study": "Site 2", "outcome": "recall", "design": "two-group", "t_value": "1.91", "n_total": "32"},
    {"study": "Site 3", "outcome": "recall", "design": "two-group", "p_value": "< .05", "n_total": "76"},
)


@cache
def _own() -> Path:
    """A folder of this process with two sheets and all that the program writes about them."""
    folder = Path(tempfile.mkdtemp(prefix="written-"))
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    for name, change in (("first", {}), ("second", {"f_value": "4.13", "df_error": "60"})):
        rows = [{**row, **{key: value for key, value in change.items() if key in row}} for row in _CODED]
        (folder / f"{name}.csv").write_text(delimited(cells_of(rows)), encoding="utf-8", newline="")
    first, second = str(folder / "first.csv"), str(folder / "second.csv")
    metric = ("--to", "hedges_g")
    for words in (
        ("convert", first, *metric, "--out", str(folder / "old")),
        ("convert", second, *metric, "--out", str(folder / "new")),
        ("unlock", first, *metric, "--letters", str(folder / "letters")),
        ("reconcile", first, second, "--out", str(folder / "compared")),
    ):
        done = CliRunner().invoke(cli, list(words))
        assert done.exit_code == 0, done.output
    return folder


def _odd(source: random.Random) -> str:
    return source.choice((*WORDS, *FORMULAS, *NUMBERS, *EXTREMES, ""))


def _spoilt(content: bytes, source: random.Random) -> bytes:
    """A text with bytes changed, a piece left out or doubled, or a word exchanged for another."""
    kind = source.randrange(5)
    at, to = sorted((source.randrange(len(content)), source.randrange(len(content))))
    if kind == 0:
        return (
            content[:at]
            + source.choice((b"\x00", b"\xff", b'"', b"{", b"]", b",", b"\n"))
            + content[at + 1 :]
        )
    if kind == 1:
        return content[:at] + content[min(to, at + 300) :]
    if kind == 2:
        return content[:at] + content[at : min(to, at + 300)] * 2 + content[at:]
    if kind == 3:
        words = content.split(b'"')
        words[source.randrange(len(words))] = _odd(source).encode()
        return b'"'.join(words)
    cells = content.split(b",")
    cells[source.randrange(len(cells))] = _odd(source).encode()
    return b",".join(cells)


@fault("folder of an earlier run", every=2)
def run_folder(source: random.Random, folder: Path) -> Hostile:
    """The command ``changes`` on folders with a file spoilt, missing, exchanged, or a folder in its place."""
    own = _own()
    for name in ("old", "new"):
        shutil.copytree(own / name, folder / name)
    spoilt = folder / source.choice(("old", "new"))
    path = spoilt / source.choice(sorted(path.name for path in spoilt.iterdir()))
    kind = source.random()
    if kind < 0.1:
        path.unlink()
    elif kind < 0.15:
        path.unlink()
        path.mkdir()
    elif kind < 0.2:
        path.write_bytes(
            source.choice((b"", b"{}", b"[]", b"null", b"\n", b'{"resources": [1]}', b"[" * 5000))
        )
    elif kind < 0.25:
        shutil.copy(own / "letters" / "replies.csv", path)
    else:
        for _ in range(source.randint(1, 2)):
            path.write_bytes(_spoilt(path.read_bytes(), source))
    words = [
        "changes",
        str(folder / "old"),
        str(folder / source.choice(("new", "new", "new", "nowhere", "old"))),
    ]
    return Hostile("", READ_OR_NOT | {2}, more=tuple(words))


@fault("log of replies", every=2)
def replies(source: random.Random, folder: Path) -> Hostile:
    """What authors answered: values of every kind, rows and cells that were never asked, columns exchanged."""
    own = _own()
    lines = (own / "letters" / "replies.csv").read_text(encoding="utf-8").splitlines()
    head, *asked = lines
    cells = [
        head.split(","),
        *([*line.split(",")[:3], "x", "", "p. 4", "AB", "2024-05-03", ""] for line in asked),
    ]
    for line in cells[1:]:
        line[4] = source.choice(("20", "4.3", "1.2", "", "-2"))
    source.choice(cells[1:])[4] = source.choice((*NUMBERS, *EXTREMES))
    for _ in range(source.choice((0, 0, 0, 1, 2))):
        line = source.choice(cells)
        line[source.randrange(len(line))] = _odd(source)
    content = delimited(cells).encode("utf-8")
    if source.random() < 0.2:
        content = _spoilt(content, source)
    (folder / "replies.csv").write_bytes(content)
    words = ("unlock", str(own / "first.csv"), "--to", "hedges_g", "--log", str(folder / "replies.csv"))
    return Hostile("", READ_OR_NOT | {2}, more=words)


@fault("consensus workbook", every=8)
def consensus(source: random.Random, folder: Path) -> Hostile:
    """The workbook in which disputes are settled: cells changed, rows lost, sheets renamed, bytes spoilt."""
    own = _own()
    path = folder / "consensus.xlsx"
    shutil.copy(own / "compared" / "consensus.xlsx", path)
    if source.random() < 0.2:
        path.write_bytes(_spoilt(path.read_bytes(), source))
    else:
        book = openpyxl.load_workbook(path)
        for _ in range(source.randint(1, 6)):
            sheet = source.choice(book.worksheets)
            row, column = source.randint(1, sheet.max_row), source.randint(1, sheet.max_column)
            word = "".join(c for c in _odd(source) if c.isprintable())
            kind = source.random()
            if kind < 0.1:
                sheet.delete_rows(row)
            elif kind < 0.2:
                sheet.title = source.choice(("disputes", "x", "coded"))
            elif not isinstance(sheet.cell(row, column), openpyxl.cell.cell.MergedCell):
                sheet.cell(row, column).value = word
        book.save(path)
    words = ["reconcile", str(own / "first.csv"), str(own / "second.csv"), "--consensus", str(path)]
    return Hostile("", READ_OR_NOT | {2}, more=(*words, "--out", str(folder / "final")))


@fault("frames of any cells")
def frames(source: random.Random, folder: Path) -> Hostile:
    """A data frame for the public functions, with cells, headings and an index of every type."""
    head, *lines = cells_of(honest(source, source.randint(1, 2)))
    columns: dict[str, list[object]] = {name: [line[at] for line in lines] for at, name in enumerate(head)}
    for _ in range(source.randint(1, 5)):
        columns[source.choice(head)][source.randrange(len(lines))] = source.choice(
            (
                *(None, float("nan"), pd.NA, pd.NaT, True, b"4.31", (1, 2), [], {}, 1 + 2j, object, 10**400),
                *(np.float32(4.31), np.int64(2), np.nan, np.str_("4.31"), np.array([1.0, 2.0])),
                *(
                    decimal.Decimal("4.310"),
                    datetime.date(2024, 5, 3),
                    datetime.timedelta(1),
                    pd.Timestamp(0),
                ),
                *(float("inf"), -0.0, 5e-324, 1e308, _odd(source), "\ud800"),
            )
        )
    frame = pd.DataFrame({name: pd.Series(cells, dtype=object) for name, cells in columns.items()})
    kind = source.random()
    if kind < 0.1:
        names: list[object] = list(frame.columns)
        names[source.randrange(len(names))] = source.choice(
            (None, 1, 2.5, ("a", "b"), "study", "\ud800", "=1+1")
        )
        frame.columns = pd.Index(names, dtype=object)
    elif kind < 0.2:
        frame.index = pd.Index(source.choices((0, "x", None), k=len(frame)), dtype=object)
    elif kind < 0.25:
        frame = source.choice(
            (frame.iloc[:0], frame.iloc[:, :0], pd.DataFrame(), frame.T, frame.iloc[:, ::-1])
        )
    return Hostile("", READ_OR_NOT, frame=frame)
