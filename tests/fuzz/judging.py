"""One run of the command in this process, with a time limit, and whether it kept the contract.

The contract: exit 0 or 3 with a whole folder, or 2, 4 or 5 with one clear line and nothing written. Never a
traceback, a warning, a hang, another status, a formula in a table or a trace of an unfinished folder.
"""

from __future__ import annotations

import csv
import hashlib
import io
import json
import math
import os
import re
import shutil
import signal
import traceback
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from types import FrameType

import openpyxl
import pandas as pd
from click.testing import CliRunner

from extractor.commands.main import cli
from extractor.routes.conversion import COLUMNS

SECONDS = 10.0
CONVERTED = ("effects.csv", "findings.csv", "derivations.json", "datapackage.json")
DONE = frozenset({0, 3})
OUTCOMES = ("table", "table, findings", "one line, exit 2", "one line, exit 4", "one line, exit 5")
BREACHES = ("traceback", "hang", "wrong status", "wrong output")

_FORMULA = re.compile(r"[\s\x00-\x20\u00a0\u200b\ufeff]*[=+\-@＝＋－＠]")
_NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")


class OutOfTime(BaseException):
    """The run took too long; no ``except Exception`` may swallow it."""


@dataclass(frozen=True)
class Case:
    """One run.

    words : the command line. allowed : exit statuses that this input may have. out : the folder it is told to
    write, with at least ``files`` in it. stdin : bytes on standard input. rows : rows the effect table must have;
    None where unknown.
    """

    words: list[str]
    allowed: frozenset[int]
    out: Path | None = None
    stdin: bytes | None = None
    rows: int | None = None
    files: tuple[str, ...] = CONVERTED


@dataclass(frozen=True)
class Verdict:
    """What became of a run: an outcome of the contract, or a breach with its details."""

    outcome: str
    breach: str = ""


@contextmanager
def time_limit(seconds: float) -> Iterator[None]:
    """Raise ``OutOfTime`` in the main thread after so many seconds of work, or six times as many of waiting.

    Work is what counts, so that a machine with other things to do gives the same verdicts.
    """

    def stop(number: int, frame: FrameType | None) -> None:
        raise OutOfTime

    clocks = (
        (signal.SIGPROF, signal.ITIMER_PROF, seconds),
        (signal.SIGALRM, signal.ITIMER_REAL, 6 * seconds),
    )
    before = [signal.signal(number, stop) for number, _, _ in clocks]
    try:
        for _, clock, limit in clocks:
            signal.setitimer(clock, limit)
        yield
    finally:
        for (number, clock, _), handler in zip(clocks, before, strict=True):
            signal.setitimer(clock, 0)
            signal.signal(number, handler)


def judge(case: Case, seconds: float = SECONDS) -> Verdict:
    """Run a case and say whether it kept the contract; its folder is removed again."""
    siblings = set(os.listdir(case.out.parent)) if case.out is not None else set()
    try:
        return _judge(case, seconds, siblings)
    finally:
        if case.out is not None:
            shutil.rmtree(case.out, ignore_errors=True)


def _judge(case: Case, seconds: float, siblings: set[str]) -> Verdict:
    try:
        with time_limit(seconds), warnings.catch_warnings():
            warnings.simplefilter("error")
            found = CliRunner().invoke(cli, case.words, input=case.stdin)
    except OutOfTime:
        return Verdict("hang", "".join(traceback.format_exc().splitlines(keepends=True)[-14:]))
    if found.exception is not None and not isinstance(found.exception, SystemExit):
        lines = traceback.format_exception(found.exception)
        return Verdict("traceback", "".join(lines)[-1800:])
    status = found.exit_code
    if status not in case.allowed:
        return Verdict("wrong status", f"exit {status}: {found.stderr[-400:]}")
    breach = _breach_of_streams(case.words, status, found.stdout, found.stderr)
    if case.out is not None and not breach:
        left = set(os.listdir(case.out.parent)) - siblings - {case.out.name}
        if left:
            breach = f"left beside the folder: {sorted(left)}"
        elif status in DONE:
            breach = _breach_of_folder(case.out, case)
        elif case.out.exists():
            breach = "a folder was written although the run was refused"
    if breach:
        return Verdict("wrong output", breach)
    return Verdict({0: "table", 3: "table, findings"}.get(status, f"one line, exit {status}"))


_SAID = ("note: ", "written to ", "extractor: ")
_LETTERS = re.compile("[0-9]+ letters drafted")


def _breach_of_streams(words: list[str], status: int, stdout: str, stderr: str) -> str:
    command, show = words[0], "--out" in words or "--format" not in words
    for text in (stdout if show else "", stderr):
        control = [c for c in text if not c.isprintable() and c != "\n"]
        if control:
            return f"control character {control[0]!r} on a stream"
    lines = stderr.splitlines()
    refusals = [line for line in lines if line.startswith("extractor: ")]
    others = [line for line in lines if line and not line.startswith(_SAID) and not _LETTERS.match(line)]
    if status in DONE:
        # cautions stand on standard error where the table goes to standard output
        odd_lines = refusals + [line for line in others if not line.startswith(("- ", "  "))]
        return f"unexpected line on standard error: {odd_lines[0]}" if odd_lines else ""
    if stdout:
        return f"a refused run wrote to standard output: {stdout[:80]}"
    # the command that checks a codebook names every fault
    if (len(refusals) != 1 and command != "codebook") or not refusals or others:
        return f"not one clear line: {stderr[:300]}"
    longest = max(map(len, refusals))
    return "" if longest <= 1200 else f"a line of {longest} characters"


def _breach_of_folder(out: Path, case: Case) -> str:
    """What is wrong with a written folder; "" where nothing is."""
    missing = [name for name in case.files if not (out / name).is_file()]
    if missing:
        return f"not written: {missing}"
    for path in sorted(out.iterdir()):
        breach = _breach_of_file(path, case.rows if path.name == "effects.csv" else None)
        if breach:
            return f"{path.name}: {breach}"
    return ""


def _breach_of_file(path: Path, rows: int | None) -> str:
    if path.suffix == ".json":
        content = json.loads(path.read_text(encoding="utf-8"), parse_constant=_refuse)
        if path.name == "datapackage.json":
            for resource in content["resources"]:
                of_file = hashlib.sha256((path.parent / resource["path"]).read_bytes()).hexdigest()
                if f"sha256:{of_file}" != resource["hash"]:
                    return f"{resource['path']} is not the file that was described"
    elif path.suffix == ".html":
        if "<script>alert(1)" in path.read_text(encoding="utf-8"):
            return "a script of the sheet stands in the page"
    elif path.suffix == ".dta":
        pd.read_stata(path)
    elif path.suffix == ".csv":
        return _breach_of_csv(path.read_text(encoding="utf-8"), rows)
    elif path.suffix == ".xlsx" and path.name != "annotated.xlsx":
        return _breach_of_workbook(path)
    return ""


def _refuse(word: str) -> float:
    raise ValueError(f"{word} in JSON")


def _breach_of_csv(text: str, rows: int | None) -> str:
    lines = list(csv.reader(io.StringIO(text, newline=""), strict=True))
    if len({len(line) for line in lines}) > 1:
        return "lines of unequal length"
    for line in lines:
        for cell in line:
            if _FORMULA.match(cell) and not _NUMBER.fullmatch(cell) and cell not in ("-INF", "+INF"):
                return f"a spreadsheet takes {cell[:40]!r} for a formula"
    if rows is None:
        return ""
    if len(lines) != rows + 1:
        return f"{len(lines) - 1} rows for {rows} rows of the sheet"
    head = lines[0]
    if len(set(head)) != len(head):
        return "two columns of one name"
    if not set(COLUMNS) <= set(head):
        return ""
    for line in lines[1:]:
        breach = _breach_of_effect(dict(zip(head, line, strict=True)))
        if breach:
            return breach
    return ""


def _breach_of_effect(effect: dict[str, str]) -> str:
    """Whether one effect is in itself possible."""

    def number(name: str) -> float:
        return float(effect[name] or "nan")

    status = effect["status"]
    if status not in ("converted", "bounded", "blocked"):
        return f"status {status!r}"
    if (status == "converted") != math.isfinite(number("estimate")):
        return f"a {status} row has the estimate {effect['estimate']!r}"
    if status == "blocked" and not effect["reason"]:
        return "a blocked row without a reason"
    if number("variance") < 0:
        return f"variance {effect['variance']}"
    pairs = (("ci_low", "ci_high"), ("estimate_low", "estimate"), ("estimate", "estimate_high"))
    for low, high in pairs:
        if number(low) > number(high):
            return f"{low} {effect[low]} above {high} {effect[high]}"
    return ""


def _breach_of_workbook(path: Path) -> str:
    book = openpyxl.load_workbook(path, read_only=True)
    try:
        for sheet in book.worksheets:
            for row in sheet.iter_rows():
                for cell in row:
                    if cell.data_type in ("f", "e"):
                        return f"cell {cell.coordinate} is a formula or an error"
    finally:
        book.close()
    return ""
