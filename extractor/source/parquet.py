"""Apache Parquet -> raw cells, whole or in batches; pyarrow comes with the extra of that name."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

from extractor.errors import UnreadableInput
from extractor.printed.reading import quoted
from extractor.source.frame import from_frame
from extractor.source.grid import Grid, NoRows

if TYPE_CHECKING:
    import pyarrow

ENDING = ".parquet"


def opened(path: Path) -> Any:
    """The file as pyarrow reads it.

    Raises
    ------
    UnreadableInput : pyarrow is not installed, the file is no parquet file, or it has no rows.
    """
    name = quoted(path, 200)
    try:
        import pyarrow
        from pyarrow import parquet
    except ImportError as fault:
        raise UnreadableInput(
            f"{name}: reading parquet needs pyarrow: pip install 'anova-extractor[parquet]'"
        ) from fault
    with whole(path):
        file = parquet.ParquetFile(path)
    nested = [field.name for field in file.schema_arrow if pyarrow.types.is_nested(field.type)]
    if nested:
        raise UnreadableInput(f"{name}: {quoted(nested[0])} holds lists or records; a cell holds one value")
    if not file.metadata.num_rows:
        raise NoRows(f"{name} has headings and no rows below them")
    return file


@contextmanager
def whole(path: Path) -> Iterator[None]:
    """Say of a file that breaks off or is damaged that it does so, whenever it shows."""
    import pyarrow

    name = quoted(path, 200)
    try:
        yield
    except FileNotFoundError as fault:
        raise UnreadableInput(f"{name}: no such file") from fault
    except (OSError, OverflowError, MemoryError, UnicodeDecodeError, pyarrow.ArrowException) as fault:
        raise UnreadableInput(f"{name} is no parquet file that can be read; write it again") from fault


def cells(table: pyarrow.Table, path: Path, first: int = 2) -> Grid | None:
    """The cells of some rows, the first of which counts as row ``first``; None where all are blank."""
    with whole(path):
        frame = table.to_pandas()
    return from_frame(frame, quoted(path, 200), first)


def read_parquet(path: Path) -> Grid:
    """The cells of a whole file; raises as ``opened`` does."""
    file = opened(path)
    with whole(path):
        table = file.read()
    grid = cells(table, path)
    if grid is None:
        raise NoRows(f"{quoted(path, 200)} has no rows with a value")
    return grid
