"""The conversion over the partitions of a Dask data frame, on as many machines as Dask has (extra ``dask``).

Partitions must hold whole studies and analyses, for rows of one model are read together; ``together`` sees to that.
What compares rows of different studies is not done, as in ``blockwise``.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import pandas as pd

from extractor.api import arranged, codebook_of
from extractor.blockwise import KEYS
from extractor.codebook import Codebook
from extractor.labels import plain_label
from extractor.output.columns import whole_counts
from extractor.routes.conversion import check_method, check_metric, check_standardizer, convert_evidence
from extractor.source.frame import from_frame
from extractor.source.grid import typed_row

if TYPE_CHECKING:
    from dask.dataframe import DataFrame

ROW = "row"
"""The column of row numbers, where the first row of data counts as row 2, as in a sheet."""


def convert_partitions(
    frame: DataFrame,
    to: str,
    codebook: str | Path | Codebook | None = None,
    *,
    variance: str | None = None,
    level: float = 0.95,
    standardizer: str = "",
) -> DataFrame:
    """The effect table of a Dask data frame of cells; parameters and errors as for ``extractor.convert``.

    Parameters
    ----------
    frame : cells as coded, each partition with whole studies and analyses (see ``together``). A column ``row`` holds
        the row numbers; without one they are counted, which looks at the length of every partition.
    """
    check_metric(to)
    check_method(to, variance)
    check_standardizer(standardizer)
    wanted: dict[str, Any] = {"metric": to, "method": variance, "level": level, "standardizer": standardizer}
    book = codebook_of(codebook)
    numbered = frame if ROW in frame.columns else numbered_rows(frame)
    # a blank row says which columns come out, without computing anything
    blank = arranged(typed_row({str(name): "" for name in frame.columns if name != ROW}), book, None, [])
    shape = pd.DataFrame(whole_counts(convert_evidence(blank.evidence, **wanted).columns)).iloc[:0]
    return numbered.map_partitions(_effects, book, wanted, shape, meta=shape, enforce_metadata=False)


def numbered_rows(frame: DataFrame) -> DataFrame:
    """The frame with the column ``row``, counted over all partitions in their order."""
    import dask.dataframe as dd
    from dask import delayed

    parts = frame.to_delayed()
    lengths = frame.map_partitions(len).compute().tolist()
    first, starts = 2, []
    for length in lengths:
        starts.append(first)
        first += length
    made = [delayed(_numbered)(part, start) for part, start in zip(parts, starts, strict=True)]
    return dd.from_delayed(made, meta=frame._meta.assign(**{ROW: pd.Series(dtype="int64")}))


def together(frame: DataFrame, codebook: str | Path | Codebook | None = None) -> DataFrame:
    """The frame repartitioned so that no study and no analysis is divided between two partitions.

    Rows are moved by the label of their study, or of their analysis where they name none; a row with neither stays
    alone. Analyses of one name in different studies are different ones. The rows keep their numbers (``row``).
    """
    book = codebook_of(codebook)
    numbered = frame if ROW in frame.columns else numbered_rows(frame)
    key = "extractor:key"
    keyed = numbered.map_partitions(
        _keyed,
        book,
        key,
        meta=numbered._meta.assign(**{key: pd.Series(dtype="object")}),
        enforce_metadata=False,
    )
    return keyed.shuffle(on=key).drop(columns=key)


def _numbered(part: pd.DataFrame, first: int) -> pd.DataFrame:
    return part.assign(**{ROW: range(first, first + len(part))})


def _keyed(part: pd.DataFrame, book: Codebook, key: str) -> pd.DataFrame:
    columns = {book.meaning(str(heading)): heading for heading in part.columns}
    labels = pd.Series([f"row {number}" for number in part[ROW]], index=part.index, dtype=object)
    for name in reversed(KEYS):
        if name in columns:
            said = part[columns[name]].fillna("").astype(str).map(plain_label)
            labels = labels.where(said == "", name + " " + said)
    return part.assign(**{key: labels})


def _effects(part: pd.DataFrame, book: Codebook, wanted: dict[str, Any], empty: pd.DataFrame) -> pd.DataFrame:
    """The effects of one partition, in the order of its row numbers; ``empty`` where it has no cells."""
    cells = part.drop(columns=ROW)
    grid = from_frame(cells, "data frame")
    if grid is None:
        return empty
    numbers = part[ROW].to_numpy()[grid.row_numbers - 2]
    order = numbers.argsort(kind="stable")
    grid.row_numbers = numbers[order]
    grid.columns = [column[order] for column in grid.columns]
    reading = arranged(grid, book, None, [])
    conversion = convert_evidence(reading.evidence, **wanted)
    reading.audit(conversion, across=False)
    return pd.DataFrame(whole_counts(conversion.columns))
