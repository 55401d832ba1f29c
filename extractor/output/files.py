"""Files and folders that appear whole or not at all."""

from __future__ import annotations

import os
import shutil
import tempfile
from collections.abc import Collection, Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path

from extractor.errors import UsageError
from extractor.reading import quoted

_STAMP = datetime(2020, 1, 1, tzinfo=UTC)


def fixed_time() -> datetime:
    """The time written into files that must carry one: SOURCE_DATE_EPOCH, else a fixed date; never the clock.

    Zip archives know no time before 1980.
    """
    said = os.environ.get("SOURCE_DATE_EPOCH", "")
    if not (said.isascii() and said.isdigit() and len(said) < 12):
        return _STAMP
    return max(datetime.fromtimestamp(int(said), UTC), datetime(1980, 1, 1, tzinfo=UTC))


def refuse_existing(path: Path, *, force: bool) -> None:
    """Raise ``UsageError`` where ``path`` is there already and must not be touched."""
    if path.is_symlink() or path.exists():
        if not force:
            raise UsageError(f"{quoted(path, 200)} exists; choose another name, or --force to replace it")
        if not path.is_dir():
            raise UsageError(f"{quoted(path, 200)} is no folder; choose another name for --out")


@contextmanager
def output_folder(path: Path, own: Collection[str], *, force: bool) -> Iterator[Path]:
    """An empty folder to write into, which becomes ``path`` when everything has been written.

    It is made beside ``path``, so that the last step is a renaming. With ``force`` an existing folder keeps
    the files that are not ours: ours are replaced one by one, and those of an earlier run that this one did
    not write are removed.

    Parameters
    ----------
    own : names of the files this program may write there.

    Raises
    ------
    UsageError : the folder exists and ``force`` is not given, or the disk refuses; nothing is left behind.
    """
    refuse_existing(path, force=force)
    target = Path(os.path.realpath(path))
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        workshop = Path(tempfile.mkdtemp(prefix=f".{target.name}-", dir=target.parent))
    except OSError as fault:
        raise _refused(path, fault) from fault
    try:
        made = workshop / "made"
        made.mkdir()
        yield made
        if target.exists():
            refuse_existing(path, force=force)
            _replace(made, target, own)
        else:
            made.rename(target)
    except OSError as fault:
        raise _refused(path, fault) from fault
    finally:
        shutil.rmtree(workshop, ignore_errors=True)


def _replace(made: Path, target: Path, own: Collection[str]) -> None:
    written = sorted(entry.name for entry in made.iterdir())
    for name in written:
        os.replace(made / name, target / name)
    for name in sorted(set(own) - set(written)):
        (target / name).unlink(missing_ok=True)


def _refused(path: Path, fault: OSError) -> UsageError:
    reason = fault.strerror or type(fault).__name__
    return UsageError(f"{quoted(path, 200)} cannot be written: {reason}; choose another folder for --out")
