"""One run of a command or of a public function in this process, with a time limit, and whether it kept the contract.

The contract of the command: exit 0 or 3 with a whole folder, or 2, 4 or 5 with one clear line and nothing written.
Of the functions: a result, or one of the errors that carry these statuses, with one clear line. Never a traceback, a
warning, a hang, another status, a formula in a table or a trace of an unfinished folder.
"""

from __future__ import annotations

import os
import re
import shutil
import signal
import traceback
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from types import FrameType
from typing import Any

import pandas as pd
from click.testing import CliRunner

from extractor import api
from extractor.commands.main import cli
from extractor.errors import ExtractorError
from extractor.findings import Severity
from tests.fuzz.written import breach_of_effect, breach_of_folder

SECONDS = 10.0
CONVERTED = ("effects.csv", "findings.csv", "derivations.json", "datapackage.json")
DONE = frozenset({0, 3})
OUTCOMES = ("table", "table, findings", "one line, exit 2", "one line, exit 4", "one line, exit 5")
STOPPED = ("old or new files", "done before it")
"""What becomes of runs that are stopped from outside."""
BREACHES = ("traceback", "hang", "wrong status", "wrong output")
_LONGEST = 1200
"""Letters of a refusal that still is one clear line."""


class OutOfTime(BaseException):
    """The run took too long; no ``except Exception`` may swallow it."""


@dataclass(frozen=True)
class Case:
    """One run.

    words : the command line, or the name of a public function. named : what the function is given; the command where
    None. allowed : exit statuses that this input may have. out : the folder it is told to write, with at least
    ``files`` in it. stdin : bytes on standard input. rows : rows the effect table must have; None where unknown.
    """

    words: list[str]
    allowed: frozenset[int]
    out: Path | None = None
    stdin: bytes | None = None
    rows: int | None = None
    files: tuple[str, ...] = CONVERTED
    named: dict[str, Any] | None = None
    whole: bool = True


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
    run = _command if case.named is None else _function
    try:
        with time_limit(seconds), warnings.catch_warnings():
            warnings.simplefilter("error")
            verdict = run(case)
        return verdict(siblings)
    except OutOfTime:
        return Verdict("hang", "".join(traceback.format_exc().splitlines(keepends=True)[-14:]))
    finally:
        if case.out is not None:
            shutil.rmtree(case.out, ignore_errors=True)


Judgement = Callable[[set[str]], Verdict]
"""What is said once the time limit is over, given what stood beside the folder before."""


def _fallen(error: BaseException) -> Verdict:
    return Verdict("traceback", "".join(traceback.format_exception(error))[-1800:])


def _command(case: Case) -> Judgement:
    found = CliRunner().invoke(cli, case.words, input=case.stdin)

    def judged(siblings: set[str]) -> Verdict:
        if found.exception is not None and not isinstance(found.exception, SystemExit):
            return _fallen(found.exception)
        status = found.exit_code
        if status not in case.allowed:
            return Verdict("wrong status", f"exit {status}: {found.stderr[-400:]}")
        breach = _breach_of_streams(case.words, status, found.stdout, found.stderr)
        if case.out is not None and not breach:
            left = set(os.listdir(case.out.parent)) - siblings - {case.out.name}
            if left:
                breach = f"left beside the folder: {sorted(left)}"
            elif status in DONE:
                breach = breach_of_folder(case.out, case.files, case.rows)
            elif case.out.exists():
                breach = "a folder was written although the run was refused"
        return Verdict("wrong output", breach) if breach else Verdict(_outcome(status))

    return judged


def _function(case: Case) -> Judgement:
    named = dict(case.named or {})
    try:
        found = getattr(api, case.words[0])(named.pop("source"), **named)
        if isinstance(found, api.Reading):
            rows = found.table.rows
            lost = f"{rows} rows for {case.rows} rows of the sheet" if case.rows not in (None, rows) else ""
            return lambda _: Verdict("wrong output", lost) if lost else Verdict(_outcome(0))
        if isinstance(found, api.Result):
            more = (found.derivations, found.alternatives) if case.whole else ()
            tables = found.effects, found.findings, more
            return lambda _: _judged_result(case, *tables)
        status = 3 if found.worst() is not None and found.worst() >= Severity.INCONSISTENT else 0
        return lambda _: Verdict(_outcome(status))
    except ExtractorError as error:
        status, message = error.exit_code, str(error)
    except Exception as error:  # whatever it is, it is what the judge looks for
        fallen = _fallen(error)
        return lambda _: fallen

    def refused(_: set[str]) -> Verdict:
        if status not in case.allowed:
            return Verdict("wrong status", f"exit {status}: {message[:400]}")
        line = " ".join(message.split())
        breach = _breach_of_line(f"extractor: {line}", line)
        return Verdict("wrong output", breach) if breach else Verdict(_outcome(status))

    return refused


def _judged_result(
    case: Case, effects: pd.DataFrame, findings: pd.DataFrame, more: tuple[pd.DataFrame, ...]
) -> Verdict:
    rows = set(effects["row"])
    if case.rows is not None and len(effects) != case.rows:
        return Verdict("wrong output", f"{len(effects)} rows for {case.rows} rows of the sheet")
    lines = zip(*(effects[name].tolist() for name in effects), strict=True)
    records = (dict(zip(map(str, effects), line, strict=True)) for line in lines)
    breaches = [breach for breach in map(breach_of_effect, records) if breach]
    if not breaches and not all(set(frame["row"]) <= rows for frame in (findings, *more)):
        breaches = ["a finding or a step of a row that is not in the sheet"]
    if not breaches and (findings["message"] == "").any():
        breaches = ["a finding that says nothing"]
    if breaches:
        return Verdict("wrong output", breaches[0])
    return Verdict(_outcome(3 if findings["severity"].isin(("impossible", "inconsistent")).any() else 0))


def _outcome(status: int) -> str:
    return {0: "table", 3: "table, findings"}.get(status, f"one line, exit {status}")


_SAID = ("note: ", "written to ", "extractor: ")
_LETTERS = re.compile("[0-9]+ letters drafted")


def _breach_of_streams(words: list[str], status: int, stdout: str, stderr: str) -> str:
    # data that goes to standard output for a program or a file keeps whatever stood in the sheet
    command, show = words[0], "--out" in words or not {"--format", "--log"} & set(words)
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
    return next((breach for line in refusals if (breach := _breach_of_line(line, line))), "")


def _breach_of_line(line: str, shown: str) -> str:
    """What is wrong with a refusal; "" where it is one clear line."""
    control = [c for c in shown if not c.isprintable()]
    if control:
        return f"control character {control[0]!r} in a refusal"
    return "" if 20 < len(line) <= _LONGEST else f"a line of {len(line)} characters"
