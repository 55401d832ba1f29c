"""A single file that appears whole or not at all."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from extractor.errors import UsageError
from extractor.printed.reading import quoted


@contextmanager
def output_file(path: Path, endings: tuple[str, ...], *, force: bool) -> Iterator[Path]:
    """A place to write to, which becomes ``path`` when everything has been written.

    Parameters
    ----------
    endings : of which the name must have one.
    force : replace a file that is there already.

    Raises
    ------
    UsageError : the name has another ending, the file exists and ``force`` is not given, it is a folder, or the
        disk refuses; nothing is left behind.
    """
    name = quoted(path, 200)
    if path.suffix.lower() not in endings:
        raise UsageError(f"{name} must end in {' or '.join(endings)}")
    if path.is_dir():
        raise UsageError(f"{name} is a folder; name a file in it")
    if (path.exists() or path.is_symlink()) and not force:
        raise UsageError(f"{name} exists; choose another name, or --force to replace it")
    target = Path(os.path.realpath(path))
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryDirectory(prefix=f".{target.name}-", dir=target.parent) as workshop:
            made = Path(workshop) / target.name
            yield made
            os.replace(made, target)
    except OSError as fault:
        reason = fault.strerror or type(fault).__name__
        raise UsageError(f"{name} cannot be written: {reason}; choose another name") from fault
