"""Delimited text split all at once, against the csv reader of Python's standard library (RFC 4180)."""

from __future__ import annotations

import csv
import io

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from extractor.errors import UnreadableInput
from extractor.source import blocks, pieces
from extractor.source.delimited import from_text
from extractor.source.grid import Grid, is_blank, one_below_the_other
from extractor.source.splitting import split

RAW = st.text('ab1 ,;"\r\né\u00a0\u2028', max_size=40)
"""Mostly text that nobody would write."""
CELLS = st.one_of(
    st.text('a1.,-"\n é\u2003', max_size=12), st.sampled_from(["", "", "0.05", '"', "two\r\nlines", " "])
)
RECORDS = st.lists(st.lists(CELLS, min_size=1, max_size=5), min_size=1, max_size=8)


def written(records: list[list[str]], delimiter: str, newline: str, quoted: bool = False) -> str:
    stream = io.StringIO(newline="")
    writer = csv.writer(
        stream,
        delimiter=delimiter,
        lineterminator=newline,
        quoting=csv.QUOTE_ALL if quoted else csv.QUOTE_MINIMAL,
    )
    writer.writerows(records)
    return stream.getvalue()


def compare(text: str, delimiter: str, *, must: bool) -> None:
    """Both readers agree on every cell; ``must``: the text is one that can be split."""
    found = split(text, delimiter)
    try:
        records = list(csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True))
    except csv.Error:
        assert found is None
        return
    if found is None:
        assert not must
        return
    assert found.records == len(records)
    for number, record in enumerate(records):
        assert found.cells_of(number) == record + [""] * (found.width - len(record))
    everything = np.arange(found.records)
    for index in range(found.width):
        column = [record[index] if index < len(record) else "" for record in records]
        assert found.column(index, everything, found.records).tolist() == column
    assert found.filled.tolist() == [not all(map(is_blank, record)) for record in records]


@settings(max_examples=400)
@given(RAW, st.sampled_from(",;"))
def test_any_text(text: str, delimiter: str) -> None:
    compare(text, delimiter, must=False)


@settings(max_examples=400)
@given(
    RECORDS,
    st.sampled_from(",;\t"),
    st.sampled_from(["\n", "\r\n"]),
    st.booleans(),
    st.booleans(),
)
def test_written_text(
    records: list[list[str]], delimiter: str, newline: str, quoted: bool, ended: bool
) -> None:
    text = written(records, delimiter, newline, quoted)
    compare(text if ended else text.removesuffix(newline), delimiter, must=bool(text.removesuffix(newline)))


def test_cells_longer_than_any() -> None:
    assert split("a,b\n" + "x" * 131_073, ",") is None
    assert split("a,b\n1,\x00", ",") is None
    assert split("a" + "," * 16_384, ",") is None


def same(one: Grid, other: Grid) -> bool:
    cells = zip(one.columns, other.columns, strict=True)
    return (
        one.headings == other.headings
        and one.row_numbers.tolist() == other.row_numbers.tolist()
        and one.ragged == other.ragged
        and all([c or "" for c in a.tolist()] == [c or "" for c in b.tolist()] for a, b in cells)
    )


@settings(max_examples=200)
@given(
    records=RECORDS,
    newline=st.sampled_from(["\n", "\r\n", "\r"]),
    piece=st.integers(1, 40),
    size=st.integers(1, 4),
)
def test_pieces_of_any_size_give_the_same_rows(
    tmp_path_factory: pytest.TempPathFactory, records: list[list[str]], newline: str, piece: int, size: int
) -> None:
    path = tmp_path_factory.getbasetemp() / "pieces.csv"
    path.write_bytes(written([["key", "x"], *records], ",", newline).encode())
    with pytest.MonkeyPatch.context() as patched:
        patched.setattr(blocks, "_PIECE", piece)
        patched.setattr(pieces, "_MOST_HELD", 3 * piece)
        patched.setattr(pieces, "_MOST_RECORDS", 2)
        try:
            whole = from_text(path.read_bytes(), "pieces.csv", ".csv", "key".__eq__)
        except UnreadableInput:
            with pytest.raises(UnreadableInput):
                blocks.blocks_of(path, "key".__eq__, lambda _: [0], size)
            return
        parts = blocks.blocks_of(path, "key".__eq__, lambda _: [0], size)
        grids = list(parts.grids)
    assert parts.cuts.rows == len(whole.row_numbers)
    assert np.cumsum([len(grid.row_numbers) for grid in grids]).tolist() == parts.cuts.ends
    assert same(one_below_the_other(grids), whole)
