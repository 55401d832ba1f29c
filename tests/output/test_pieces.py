"""Texts put together by columns are those put together row by row."""

from __future__ import annotations

import json
import math

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from extractor.output.pieces import Recurring, assembled

NUMBERS = st.floats() | st.sampled_from([0.0, -0.0, 1.0, 0.1 + 0.2, math.nan, math.inf, -math.inf])


def as_text(value: float) -> str:
    return json.dumps(value if math.isfinite(value) else None)


@given(st.lists(st.tuples(NUMBERS, st.text(max_size=3), NUMBERS), min_size=1, max_size=8))
def test_pieces_stand_in_their_order(rows: list[tuple[float, str, float]]) -> None:
    first, words, last = (list(column) for column in zip(*rows, strict=True))
    a, b = np.array(first), np.array(last)
    found = assembled(["<", a, "", words, "|", b, a, ">", "."], len(rows))
    expected = [f"<{as_text(x)}{word}|{as_text(y)}{as_text(x)}>." for x, word, y in rows]
    assert found == expected


@given(st.lists(st.lists(NUMBERS, max_size=8), max_size=4))
def test_numbers_that_recur_are_written_as_the_first_time(columns: list[list[float]]) -> None:
    texts = Recurring()
    for column in columns:
        assert texts.of(np.array(column, dtype=float)) == list(map(as_text, column))
