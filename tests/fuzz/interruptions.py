"""Faults that reach a run from outside: no room left, no permission, an interrupt, a kill, a second run.

The command runs in a forked process, so that what happens to it is real: a limit of the operating system on the size of
files, SIGINT, SIGKILL. Whatever happens, the folder afterwards is as before, or each file in it is the old or the new
one to the last byte. Delays are drawn from the seed; which line they hit depends on the machine.
"""

from __future__ import annotations

import contextlib
import os
import random
import resource
import signal
import sys
import tempfile
import time
import traceback
import warnings
from collections.abc import Callable
from functools import cache
from pathlib import Path

from extractor.commands.main import cli
from tests.fuzz.faults import cells_of, delimited, honest
from tests.fuzz.judging import SECONDS, STOPPED, OutOfTime, Verdict, time_limit
from tests.fuzz.written import breach_of_folder

Trial = Callable[[random.Random, Path], Verdict]
TRIALS: dict[str, Trial] = {}
"""Trials by the name of the fault kind."""
EVERY = 4
SHEETS = 6
"""So many sheets there are, lest every case computes its own old and new files."""
_WHOLE, _BEFORE = STOPPED
_FALLEN = 70
"""Exit status of a process whose command ended in an exception."""


def trial(name: str) -> Callable[[Trial], Trial]:
    """Register a trial under the name of its kind."""

    def register(made: Trial) -> Trial:
        assert name not in TRIALS
        TRIALS[name] = made
        return made

    return register


def _words(sheet: Path, out: Path, level: str) -> list[str]:
    return ["convert", str(sheet), "--to", "hedges_g", "--out", str(out), "--force", "--level", level]


def _contents(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in folder.iterdir()} if folder.exists() else {}


@cache
def _versions(sheet: bytes) -> tuple[dict[str, bytes], dict[str, bytes]]:
    """The files of a run at one level and at another, undisturbed."""
    with tempfile.TemporaryDirectory() as place:
        path = Path(place) / "sheet.csv"
        path.write_bytes(sheet)
        made = []
        for level in ("0.95", "0.9"):
            out = Path(place) / level
            status, said = _ended(_started(_words(path, out, level)))
            assert status == 0, said
            made.append(_contents(out))
    return made[0], made[1]


def _prepared(source: random.Random, folder: Path) -> tuple[Path, Path, dict[str, bytes], dict[str, bytes]]:
    """A sheet, a folder that holds the old files or does not exist, the old and the new files."""
    content = delimited(cells_of(honest(random.Random(source.randrange(SHEETS)), 2))).encode()
    sheet, out = folder / "sheet.csv", folder.parent / "out"
    sheet.write_bytes(content)
    old, new = _versions(content)
    if source.random() < 0.7:
        out.mkdir()
        for name, file in old.items():
            (out / name).write_bytes(file)
    return sheet, out, old if out.exists() else {}, new


def _started(words: list[str], prepare: Callable[[], object] = lambda: None) -> tuple[int, int]:
    """The process that runs the command, and the end of the pipe into which it speaks."""
    read, write = os.pipe()
    with warnings.catch_warnings():
        # this process has threads of the linear algebra only, which wait
        warnings.simplefilter("ignore")
        child = os.fork()
    if child:
        os.close(write)
        return child, read
    status = _FALLEN
    try:
        os.dup2(write, 1)
        os.dup2(write, 2)
        os.close(write)
        # open until the process ends, which a with block would cut short
        sys.stdout, sys.stderr = (open(at, "w", encoding="utf-8", closefd=False) for at in (1, 2))  # noqa: SIM115
        prepare()
        cli.main(words)
    except SystemExit as ended:
        status = ended.code if isinstance(ended.code, int) else 0
    except BaseException:
        with contextlib.suppress(BaseException):
            os.write(2, traceback.format_exc().encode())
    finally:
        with contextlib.suppress(BaseException):
            sys.stdout.flush()
            sys.stderr.flush()
        os._exit(status)


def _ended(started: tuple[int, int]) -> tuple[int, str]:
    """How a process ended (minus the signal, where it was one), and what it said."""
    child, read = started
    try:
        with time_limit(SECONDS), open(read, "rb") as stream:
            said = stream.read().decode("utf-8", "replace")
    except OutOfTime:
        os.kill(child, signal.SIGKILL)
        raise
    finally:
        _, how = os.waitpid(child, 0)
    return os.waitstatus_to_exitcode(how), said


def _mixed(out: Path, old: dict[str, bytes], new: dict[str, bytes]) -> str:
    """What is wrong with a folder in which each file may be the old or the new one; "" where nothing is."""
    found = _contents(out)
    torn = [name for name, file in found.items() if file not in (old.get(name), new.get(name))]
    lost = sorted(old.keys() - found.keys())
    return f"neither old nor new: {torn}" if torn else f"lost: {lost}" if lost else ""


def _one_version(out: Path, old: dict[str, bytes], new: dict[str, bytes]) -> str:
    found = _contents(out)
    return "" if found in (old, new) else f"a mixture: {sorted(found)}"


def _beside(folder: Path) -> list[str]:
    return sorted(name for name in os.listdir(folder.parent) if name not in ("in", "out"))


def _refused(status: int, said: str, statuses: tuple[int, ...]) -> str:
    """What is wrong with how a stopped run ended; "" where it said one clear line."""
    if status not in statuses:
        return f"exit {status}: {said[-900:]}"
    lines = [line for line in said.splitlines() if line.startswith("extractor: ")]
    return "" if status == 0 or len(lines) == 1 else f"not one clear line: {said[-900:]}"


@trial("no room for a file")
def no_room(source: random.Random, folder: Path) -> Verdict:
    """The operating system takes only so many bytes of any file."""
    sheet, out, old, new = _prepared(source, folder)
    room = source.choice((0, 1, 512, source.randrange(8_000), source.randrange(40_000)))

    def limited() -> None:
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (room, room))

    formats = source.sample(("xlsx", "json", "html", "parquet", "dta"), source.choice((0, 0, 1)))
    words = [*_words(sheet, out, "0.9"), *(word for each in formats for word in ("--format", each))]
    status, said = _ended(_started(words, limited))
    breach = _refused(status, said, (0, 2))
    if not breach and status == 0:
        breach = breach_of_folder(out, new)
    elif not breach:
        breach = "the old files changed" if _contents(out) != old else ""
    breach = breach or (f"left beside the folder: {_beside(folder)}" if _beside(folder) else "")
    return (
        Verdict("wrong output", breach) if breach else Verdict(_BEFORE if status == 0 else "one line, exit 2")
    )


@trial("interrupt")
def interrupt(source: random.Random, folder: Path) -> Verdict:
    """SIGINT at any moment: the folder is the old one or the new one, and nothing is left beside it."""
    sheet, out, old, new = _prepared(source, folder)

    def armed() -> None:
        signal.signal(signal.SIGINT, signal.default_int_handler)
        signal.signal(signal.SIGALRM, lambda *_: os.kill(os.getpid(), signal.SIGINT))
        signal.setitimer(signal.ITIMER_REAL, source.uniform(0.002, 0.12))

    status, said = _ended(_started(_words(sheet, out, "0.9"), armed))
    if status == _FALLEN and said.rstrip().endswith("KeyboardInterrupt") and "click/core.py" not in said:
        # before the command began, or after it had said its last word
        status = 1
    elif status == _FALLEN or status not in (0, 1):
        return Verdict("traceback" if status == _FALLEN else "wrong status", f"exit {status}: {said[-900:]}")
    elif status == 1 and "extractor: interrupted" not in said:
        return Verdict("wrong output", f"not one clear line: {said[-300:]}")
    breach = _one_version(out, old, new)
    breach = breach or (f"left beside the folder: {_beside(folder)}" if _beside(folder) else "")
    return Verdict("wrong output", breach) if breach else Verdict(_BEFORE if status == 0 else _WHOLE)


@trial("kill")
def kill(source: random.Random, folder: Path) -> Verdict:
    """SIGKILL at any moment: each file is the old or the new one, and the next run goes through."""
    sheet, out, old, new = _prepared(source, folder)
    started = _started(_words(sheet, out, "0.9"))
    time.sleep(source.uniform(0.002, 0.12))
    os.kill(started[0], signal.SIGKILL)
    status, said = _ended(started)
    if status not in (-signal.SIGKILL, 0):
        return Verdict("wrong status", f"exit {status}: {said[-900:]}")
    breach = _mixed(out, old, new) if status else _one_version(out, new, new)
    odd = [name for name in _beside(folder) if not name.startswith(".out-")]
    breach = breach or (f"left beside the folder: {odd}" if odd else "")
    if not breach and source.random() < 0.2:
        again, said = _ended(_started(_words(sheet, out, "0.9")))
        breach = "" if again == 0 and _contents(out) == new else f"the next run: exit {again}: {said[-300:]}"
    return Verdict("wrong output", breach) if breach else Verdict(_WHOLE if status else _BEFORE)


@trial("two runs into one folder")
def two_runs(source: random.Random, folder: Path) -> Verdict:
    """Both end well, and the files that stay are all of one of them."""
    sheet, out, _, new = _prepared(source, folder)
    first = _versions(sheet.read_bytes())[0]
    children = []
    for level in source.sample(("0.95", "0.9"), 2):
        children.append(_started(_words(sheet, out, level)))
        time.sleep(source.choice((0, 0.005, 0.03)))
    breaches = [_refused(*_ended(child), (0,)) for child in children]
    if any(breaches):
        return Verdict("wrong status", "".join(breaches))
    breach = "" if _contents(out) in (first, new) else f"a mixture: {sorted(_contents(out))}"
    breach = breach or (f"left beside the folder: {_beside(folder)}" if _beside(folder) else "")
    return Verdict("wrong output", breach) if breach else Verdict("table")


@trial("places that cannot be written")
def unwritable(source: random.Random, folder: Path) -> Verdict:
    """A file, a device, a system folder, a broken link, a name too long, where the folder should come to stand."""
    sheet, out, old, _ = _prepared(source, folder)
    (folder / "file").write_text("mine")
    (folder / "loop").symlink_to(folder / "loop")
    place = source.choice(
        (
            *(folder / "file", folder / "file" / "x", folder / "loop", folder / "loop" / "x"),
            *(
                Path("/proc/nowhere"),
                Path("/dev/null"),
                Path("/sys/x"),
                folder / ("n" * 300),
                Path("/dev/full/x"),
            ),
        )
    )
    more = source.choice(([], ["--format", "xlsx"], ["--covariance", "--outcome-correlation", "0.5"]))
    words = [*_words(sheet, place, "0.9"), *more]
    status, said = _ended(_started(words))
    breach = _refused(status, said, (2,))
    if not breach and ((folder / "file").read_text() != "mine" or _contents(out) != old):
        breach = "a file of somebody else changed"
    odd = sorted(set(os.listdir(folder)) - {"file", "loop", "sheet.csv"})
    breach = breach or (f"left behind: {odd}" if odd or _beside(folder) else "")
    return Verdict("wrong output", breach) if breach else Verdict("one line, exit 2")
