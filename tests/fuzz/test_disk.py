"""Full disks, interrupts, kills and two runs at once: no half-written and no lost file."""

from __future__ import annotations

import builtins
import errno
import io
import os
import signal
import subprocess
import sys
import threading
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result

from extractor.commands import running
from extractor.commands.main import cli
from extractor.errors import UsageError
from extractor.output.files import output_folder
from tests.commands.conftest import environment

SHEET = "study,design,f_value,df_effect,df_error\nSite 1,one-way,4.31,2,57\nSite 2,one-way,2.01,2,60\n"
OWN = ("a.txt", "b.txt", "c.txt")


@pytest.fixture
def convert(tmp_path: Path) -> Callable[..., Result]:
    """Run ``extractor convert`` on a small sheet into the folder ``out``."""
    (tmp_path / "sheet.csv").write_text(SHEET, encoding="utf-8")

    def run(*more: str) -> Result:
        words = [str(tmp_path / "sheet.csv"), "--to", "omega_squared", "--out", str(tmp_path / "out"), *more]
        return CliRunner().invoke(cli, ["convert", *words])

    return run


def contents(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def written(folder: Path, run: str, *, force: bool, names: tuple[str, ...] = OWN) -> None:
    with output_folder(folder, OWN, force=force) as made:
        for name in names:
            (made / name).write_text(run)


# ---- full disks


class FullDisk:
    """Files that take so many bytes together and then no more."""

    def __init__(self, room: int) -> None:
        self.left = room
        self.open = builtins.open

    def __call__(self, file: Any, mode: str = "r", *given: Any, **named: Any) -> Any:
        opened = self.open(file, mode, *given, **named)
        return opened if mode.startswith("r") else _Limited(opened, self)


class _Limited:
    """A file opened for writing on a full disk."""

    def __init__(self, opened: Any, disk: FullDisk) -> None:
        self.opened, self.disk = opened, disk

    def write(self, content: Any) -> Any:
        self.disk.left -= len(content)
        if self.disk.left < 0:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        return self.opened.write(content)

    def writelines(self, lines: Any) -> None:
        for line in lines:
            self.write(line)

    def __enter__(self) -> _Limited:
        return self

    def __exit__(self, *_: object) -> None:
        self.opened.close()

    def __getattr__(self, name: str) -> Any:
        return getattr(self.opened, name)


@pytest.mark.parametrize("room", [0, 700, 10_000])
@pytest.mark.parametrize("existing", [False, True])
def test_a_full_disk(
    tmp_path: Path,
    convert: Callable[..., Result],
    monkeypatch: pytest.MonkeyPatch,
    room: int,
    existing: bool,
) -> None:
    formats = ("--format", "json", "--format", "dta")
    before: dict[str, bytes] = {}
    if existing:
        assert convert().exit_code == 0
        before = contents(tmp_path / "out")
    full = FullDisk(room)
    with monkeypatch.context() as patch:
        patch.setattr(builtins, "open", full)
        patch.setattr(io, "open", full)
        found = convert(*formats, "--force")
    assert full.left < 0
    assert found.exit_code == 2
    assert found.stderr.splitlines()[-1].endswith("No space left on device; choose another folder for --out")
    assert found.stderr.count("extractor: ") == 1
    assert found.stdout == ""
    assert sorted(os.listdir(tmp_path)) == (["out", "sheet.csv"] if existing else ["sheet.csv"])
    assert not existing or contents(tmp_path / "out") == before
    assert convert(*formats, "--force").exit_code == 0


@pytest.mark.parametrize("code", [errno.EACCES, errno.EROFS, errno.EPERM, errno.ENOSPC])
def test_an_unwritable_folder(
    tmp_path: Path, convert: Callable[..., Result], monkeypatch: pytest.MonkeyPatch, code: int
) -> None:
    """A superuser may write anywhere, so the refusal is the operating system's in name only."""

    make = Path.mkdir

    def refuse(folder: Path, mode: int = 0o777, parents: bool = False, exist_ok: bool = False) -> None:
        if folder.name.startswith(".out-"):
            raise OSError(code, os.strerror(code))
        make(folder, mode, parents, exist_ok)

    monkeypatch.setattr(Path, "mkdir", refuse)
    found = convert()
    assert found.exit_code == 2
    assert os.strerror(code) in found.stderr
    assert os.listdir(tmp_path) == ["sheet.csv"]


@pytest.mark.parametrize("name", ["a" * 300, "a" * 250, "sheet.csv/x"])
def test_names_that_no_folder_can_have(tmp_path: Path, convert: Callable[..., Result], name: str) -> None:
    found = convert("--out", str(tmp_path / name))
    if found.exit_code == 0:
        assert len(name) < 256
        assert (tmp_path / name / "effects.csv").is_file()
        return
    assert found.exit_code == 2
    assert "cannot be written" in found.stderr
    assert os.listdir(tmp_path) == ["sheet.csv"]


# ---- interrupts


def test_an_interrupt_while_computing(
    tmp_path: Path, convert: Callable[..., Result], monkeypatch: pytest.MonkeyPatch
) -> None:
    def interrupted(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(running, "convert", interrupted)
    found = convert()
    assert (found.exit_code, found.stdout) == (1, "")
    # the line that shows ^C is ended first
    assert found.stderr == "\nextractor: interrupted\n"
    assert os.listdir(tmp_path) == ["sheet.csv"]


@pytest.mark.parametrize("existing", [False, True])
@pytest.mark.parametrize("after", [1, 3, 8])
def test_an_interrupt_while_files_change_places(
    tmp_path: Path,
    convert: Callable[..., Result],
    monkeypatch: pytest.MonkeyPatch,
    after: int,
    existing: bool,
) -> None:
    """Whatever step is the last one before the interrupt, the folder is the old one or the new one."""
    if existing:
        assert convert("--format", "json").exit_code == 0
        (tmp_path / "out" / "notes.txt").write_text("mine")
    else:
        (tmp_path / "out").mkdir()
    before = contents(tmp_path / "out")
    replace, steps = os.replace, 0

    def interrupted(*given: Any) -> None:
        nonlocal steps
        steps += 1
        if steps == after:
            raise KeyboardInterrupt
        replace(*given)

    with monkeypatch.context() as patch:
        patch.setattr(os, "replace", interrupted)
        found = convert("--level", "0.9", "--force")
    assert sorted(os.listdir(tmp_path)) == ["out", "sheet.csv"]
    if steps < after:
        assert found.exit_code == 0
        return
    assert found.exit_code == 1
    assert contents(tmp_path / "out") == before


@pytest.mark.parametrize("fault", [OSError, KeyboardInterrupt])
def test_files_of_an_earlier_run_come_back(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, fault: type[BaseException]
) -> None:
    """Also those that were to be removed, and the new ones go."""
    written(tmp_path / "out", "old", force=False, names=("a.txt", "c.txt"))
    unlink = Path.unlink

    def fails(path: Path, missing_ok: bool = False) -> None:
        if path.name == "c.txt":
            monkeypatch.setattr(Path, "unlink", unlink)
            raise fault(errno.EIO, "no")
        unlink(path, missing_ok)

    monkeypatch.setattr(Path, "unlink", fails)
    with pytest.raises(UsageError if fault is OSError else KeyboardInterrupt):
        written(tmp_path / "out", "new", force=True, names=("a.txt", "b.txt"))
    assert contents(tmp_path / "out") == {"a.txt": b"old", "c.txt": b"old"}
    assert os.listdir(tmp_path) == ["out"]


def test_a_folder_where_a_file_belongs_stops_everything(tmp_path: Path) -> None:
    written(tmp_path / "out", "old", force=False, names=("a.txt",))
    (tmp_path / "out" / "b.txt").mkdir()
    with pytest.raises(UsageError, match=r"b\.txt in it is a folder"):
        written(tmp_path / "out", "new", force=True)
    assert (tmp_path / "out" / "a.txt").read_text() == "old"
    assert os.listdir(tmp_path) == ["out"]


def test_a_link_is_replaced_and_what_it_led_to_stays(tmp_path: Path) -> None:
    written(tmp_path / "out", "old", force=False, names=("a.txt",))
    (tmp_path / "elsewhere.txt").write_text("mine")
    (tmp_path / "out" / "b.txt").symlink_to(tmp_path / "elsewhere.txt")
    (tmp_path / "out" / "c.txt").symlink_to(tmp_path / "nowhere")
    written(tmp_path / "out", "new", force=True, names=("a.txt", "b.txt"))
    assert (tmp_path / "elsewhere.txt").read_text() == "mine"
    assert contents(tmp_path / "out") == {"a.txt": b"new", "b.txt": b"new"}


def test_without_hard_links_files_are_copied(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def none_here(*_: object, **__: object) -> None:
        raise OSError(errno.EPERM, "no links on this disk")

    monkeypatch.setattr(os, "link", none_here)
    written(tmp_path / "out", "old", force=False)
    written(tmp_path / "out", "new", force=True, names=("b.txt",))
    assert contents(tmp_path / "out") == {"b.txt": b"new"}


# ---- kills

WRITER = """
import os, sys, time
from pathlib import Path
from extractor.output.files import output_folder

stop, out = sys.argv[1], Path(sys.argv[2])
replace, done = os.replace, 0

def wait():
    print("ready", flush=True)
    time.sleep(60)

def slowly(*given):
    global done
    if stop == "replacing" and done == 2:
        wait()
    replace(*given)
    done += 1

os.replace = slowly
with output_folder(out, ("a.txt", "b.txt", "c.txt"), force=True) as made:
    for name in ("a.txt", "b.txt", "c.txt"):
        stream = (made / name).open("w")
        stream.write("new")
        stream.flush()
        if stop == "writing" and name == "b.txt":
            wait()
        stream.close()
"""


@pytest.mark.skipif(sys.platform == "win32", reason="there is no such signal")
@pytest.mark.parametrize(("stop", "new"), [("writing", 0), ("replacing", 2)])
@pytest.mark.parametrize("existing", [False, True])
def test_a_kill_loses_nothing(tmp_path: Path, stop: str, new: int, existing: bool) -> None:
    """Nothing can be tidied up then: a hidden folder stays beside. Every file is whole, and none is lost."""
    out = tmp_path / "out"
    out.mkdir()
    if existing:
        written(out, "old", force=True)
    else:
        out.rmdir()
        if stop == "replacing":
            # a folder that is not there yet gets its name in one step, so there is nothing to interrupt
            out.mkdir()
    words = [sys.executable, "-c", WRITER, stop, str(out)]
    with subprocess.Popen(words, stdout=subprocess.PIPE, env=environment(), text=True) as running_:
        assert running_.stdout is not None
        assert running_.stdout.readline() == "ready\n"
        running_.send_signal(signal.SIGKILL)
    found = contents(out) if out.exists() else {}
    assert list(found.values()).count(b"new") == new
    assert list(found.values()).count(b"old") == (3 - new if existing else 0)
    assert all(name == "out" or name.startswith(".out-") for name in os.listdir(tmp_path))
    written(out, "again", force=True)
    assert set(contents(out).values()) == {b"again"}


# ---- two runs at once


def test_of_two_runs_into_a_new_folder_one_is_refused(tmp_path: Path) -> None:
    """The second one finishes while the first one is still writing."""
    with (
        pytest.raises(UsageError, match="exists; choose another name"),
        output_folder(tmp_path / "out", OWN, force=False) as made,
    ):
        (made / "a.txt").write_text("first")
        written(tmp_path / "out", "second", force=False)
    assert set(contents(tmp_path / "out").values()) == {b"second"}
    assert os.listdir(tmp_path) == ["out"]


def test_a_folder_that_appears_in_the_last_moment_is_not_lost(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    out, exists = tmp_path / "out", Path.exists

    def just_not_yet(path: Path, **named: Any) -> bool:
        there = exists(path, **named)
        if path == out and not there:
            monkeypatch.setattr(Path, "exists", exists)
            written(out, "second", force=False)
        return there

    with output_folder(out, OWN, force=True) as made:
        (made / "a.txt").write_text("first")
        monkeypatch.setattr(Path, "exists", just_not_yet)
    # those of the second run that the first one does not write are an earlier run's
    assert contents(out) == {"a.txt": b"first"}
    assert os.listdir(tmp_path) == ["out"]


def test_runs_into_one_folder_take_turns(tmp_path: Path) -> None:
    """The files always belong together: never one run's table beside another's findings."""
    out = tmp_path / "out"
    faults: list[BaseException] = []

    def many(run: str) -> None:
        try:
            for at in range(20):
                written(out, f"{run} {at}", force=True)
        except BaseException as fault:
            faults.append(fault)

    threads = [threading.Thread(target=many, args=(name,)) for name in "pqrs"]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert faults == []
    assert len(set(contents(out).values())) == 1
    assert sorted(contents(out)) == list(OWN)
    assert os.listdir(tmp_path) == ["out"]
