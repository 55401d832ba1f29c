"""Files and folders that appear whole or not at all."""

from __future__ import annotations

import errno
import importlib.util
import os
import secrets
import shutil
from collections.abc import Collection, Iterable, Iterator
from contextlib import ExitStack, contextmanager, suppress
from datetime import UTC, datetime
from itertools import islice
from pathlib import Path

from extractor.errors import UsageError
from extractor.printed.reading import quoted

_STAMP = datetime(2020, 1, 1, tzinfo=UTC)
_FIRST, _LAST = datetime(1980, 1, 1, tzinfo=UTC), datetime(2107, 12, 31, tzinfo=UTC)


def fixed_time() -> datetime:
    """The time written into files that must carry one: SOURCE_DATE_EPOCH, else a fixed date; never the clock.

    Zip archives know no time before 1980 and none after 2107.
    """
    said = os.environ.get("SOURCE_DATE_EPOCH", "")
    if not (said.isascii() and said.isdigit() and len(said) < 12):
        return _STAMP
    return min(max(datetime.fromtimestamp(int(said), UTC), _FIRST), _LAST)


def write_parts(path: Path, parts: Iterable[str]) -> None:
    """Write text that comes in parts; they are best some hundred kilobytes long, so that memory is used again."""
    with path.open("wb") as stream:
        stream.writelines(map(encoded, parts))


def encoded(text: str) -> bytes:
    """Text as UTF-8, line feeds as they are; signs that cannot be written so become escapes."""
    return text.encode("utf-8", "backslashreplace")


def batches(texts: Iterable[str], size: int, between: str) -> Iterator[str]:
    """So many texts at a time as one, with what stands between them."""
    left = iter(texts)
    while batch := list(islice(left, size)):
        yield between.join(batch)


def refuse_existing(path: Path, *, force: bool) -> None:
    """Raise ``UsageError`` where ``path`` is there already and must not be touched."""
    try:
        there, folder = _is_there(path), path.is_dir()
    except OSError as fault:
        raise _refused(path, fault) from fault
    if there and not force:
        raise UsageError(f"{quoted(path, 200)} exists; choose another name, or --force to replace it")
    if there and not folder:
        raise UsageError(f"{quoted(path, 200)} is no folder; choose another name for --out")


@contextmanager
def output_folder(path: Path, own: Collection[str], *, force: bool) -> Iterator[Path]:
    """An empty folder to write into, which becomes ``path`` when everything has been written.

    It is made beside ``path``, so that the last step is a renaming. With ``force`` an existing folder keeps
    the files that are not ours: ours are replaced, and those of an earlier run that this one did not write are
    removed. All of them or, where that fails or is interrupted, none; runs into one folder take turns.

    Parameters
    ----------
    own : names of the files this program may write there.

    Raises
    ------
    UsageError : the folder exists and ``force`` is not given, or the disk refuses; nothing is left behind.
    """
    refuse_existing(path, force=force)
    target = Path(os.path.realpath(path))
    # named before it is made, so that no interrupt can fall between its making and its removal
    workshop = target.parent / f".{target.name[:40]}-{secrets.token_hex(8)}"
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        workshop.mkdir(mode=0o700)
        made = workshop / "made"
        made.mkdir()
        yield made
        if not _renamed(made, target):
            refuse_existing(path, force=force)
            with _turn(target):
                _replace(made, target, workshop / "before", own)
    except OSError as fault:
        raise _refused(path, fault) from fault
    finally:
        _clear(workshop)


def _clear(workshop: Path) -> None:
    """Remove what was made beside a folder, all of it also when the removal itself is interrupted."""
    try:
        shutil.rmtree(workshop, ignore_errors=True)
    except KeyboardInterrupt:
        shutil.rmtree(workshop, ignore_errors=True)
        raise


def _renamed(made: Path, target: Path) -> bool:
    """Give the folder its name in one step; False where another of that name is there, perhaps only just."""
    if target.exists():
        return False
    try:
        made.rename(target)
    except OSError:
        if not target.exists():
            raise
        return False
    return True


def _replace(made: Path, target: Path, before: Path, own: Collection[str]) -> None:
    """Put what was made into ``target`` in place of our earlier files; on any failure put those back."""
    written = sorted(entry.name for entry in made.iterdir())
    obsolete = sorted(set(own) - set(written))
    before.mkdir()
    for name in (*written, *obsolete):
        if _is_there(target / name):
            _keep(target / name, before / name)
    try:
        for name in written:
            os.replace(made / name, target / name)
        for name in obsolete:
            (target / name).unlink(missing_ok=True)
    except BaseException:
        for name in (*written, *obsolete):
            if _is_there(before / name):
                os.replace(before / name, target / name)
            elif not _is_there(made / name):
                (target / name).unlink(missing_ok=True)
        raise


def _is_there(path: Path) -> bool:
    return path.is_symlink() or path.exists()


def _keep(path: Path, copy: Path) -> None:
    """A second name for a file, or a copy where the disk knows no such thing; refuses a folder."""
    if path.is_dir() and not path.is_symlink():
        raise IsADirectoryError(errno.EISDIR, f"{path.name} in it is a folder")
    try:
        os.link(path, copy, follow_symlinks=False)
    except OSError:
        shutil.copy2(path, copy, follow_symlinks=False)


@contextmanager
def _turn(folder: Path) -> Iterator[None]:
    """Wait until no other run is replacing files in the folder; where the system cannot lock it, do not wait."""
    with ExitStack() as held:
        if importlib.util.find_spec("fcntl") is not None:
            import fcntl

            with suppress(OSError):
                lock = os.open(folder, os.O_RDONLY)
                held.callback(os.close, lock)
                fcntl.flock(lock, fcntl.LOCK_EX)
        yield


def _refused(path: Path, fault: OSError) -> UsageError:
    reason = fault.strerror or type(fault).__name__
    return UsageError(f"{quoted(path, 200)} cannot be written: {reason}; choose another folder for --out")
