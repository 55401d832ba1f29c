"""A data frame -> raw cells."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from extractor.errors import UnreadableInput
from extractor.source.grid import MOST_COLUMNS, Grid, is_blank, object_array
from extractor.table import ObjectArray

if TYPE_CHECKING:
    import pandas as pd


def _encodable(text: str) -> str:
    """A text that can be written: half of a surrogate pair, which no file can hold, becomes a question mark."""
    return text.encode("utf-8", "replace").decode("utf-8")


def from_frame(frame: pd.DataFrame, source: str, first: int = 2) -> Grid | None:
    """The cells of a frame, whose first row counts as row ``first``; None where every row is blank."""
    if frame.shape[1] > MOST_COLUMNS:
        raise UnreadableInput(
            f"the data frame has more than {MOST_COLUMNS} columns; no spreadsheet has so many"
        )
    columns: list[ObjectArray] = []
    filled = np.zeros(len(frame), dtype=bool)
    for position in range(frame.shape[1]):
        series = frame.iloc[:, position]
        narrow = series.dtype in (np.float16, np.float32)
        column = object_array(list(series.to_numpy()) if narrow else list(series.astype(object)), len(frame))
        column[series.isna().to_numpy(dtype=bool)] = None
        for at in np.flatnonzero([isinstance(value, str) and not value.isascii() for value in column]):
            column[at] = _encodable(column[at])
        columns.append(column)
        filled |= np.fromiter((not is_blank(value) for value in column), dtype=bool, count=len(frame))
    if not filled.any():
        return None
    kept = np.flatnonzero(filled)
    return Grid(
        source=source,
        sheet="",
        headings=[_encodable(str(label)).strip() for label in frame.columns],
        header_row=1,
        row_numbers=kept.astype(np.int64) + first,
        columns=[column[kept] for column in columns],
        formats=[None] * len(columns),
        stored=False,
    )
