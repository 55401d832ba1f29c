"""Plain numbers read all at once, against the reader of single cells."""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from extractor.printed.plain import read_plain
from extractor.printed.reading import ROUNDINGS
from extractor.printed.reported import CUT_AT_ZERO, PROBABILITIES, STATED, Setting, read_cell
from extractor.quantities import VOCABULARY

PLAIN = st.from_regex(re.compile(r"-?[0-9]{0,14}[.,]?[0-9]{1,14}", re.ASCII), fullmatch=True)
SHORT = st.from_regex(re.compile(r"-?[0-9]{0,3}[.,]?[0-9]{1,3}", re.ASCII), fullmatch=True)
SPELLED = "- . 5. +5 1e5 1,234 1.234 −1.5 00 -0 -.0 .00 1.2.3 --1 1·5 ٣ ² 50% 95 999 -99 NA one n.s. 1_0"
ODD = st.sampled_from(
    ["", " 1.5", "- 2", "1\n", "< .05", "1\x00", "\x001", "\ud800", "9" * 16, *SPELLED.split(" ")]
)
CELLS = st.lists(
    st.one_of(PLAIN, SHORT, ODD, st.text("0123456789.,-", max_size=8), st.none(), st.floats()), max_size=8
)
SPECIAL = sorted(PROBABILITIES | CUT_AT_ZERO | STATED | {"n", "df"})


def setting(name: str, mark: str, rounding: str, missing: frozenset[str], decimals: int | None) -> Setting:
    return Setting(VOCABULARY[name], mark, rounding, missing, 0.05, decimals)


SETTINGS = st.builds(
    setting,
    st.sampled_from(sorted(VOCABULARY)) | st.sampled_from(SPECIAL),
    st.sampled_from(".,"),
    st.sampled_from(ROUNDINGS),
    st.frozensets(st.sampled_from(["999", "-99", "0", ".5", "95"])),
    st.none() | st.integers(0, 4),
)


@settings(max_examples=1500)
@given(CELLS, SETTINGS)
def test_as_read_one_by_one(cells: list[object], to: Setting) -> None:
    plain = read_plain(cells, to)
    assert np.all(np.diff(plain.at) > 0)
    for row, at in enumerate(plain.at.tolist()):
        reading = read_cell(cells[at], to)
        assert (reading.comparator, reading.understood, reading.problem) == ("=", "", "")
        assert reading.decimals == plain.decimals[row]
        for name in ("value", "low", "high", "unit"):
            # to the last bit, the sign of a zero included
            assert float(getattr(plain, name)[row]).hex() == float(getattr(reading, name)).hex(), name


@given(st.lists(SHORT, max_size=8), SETTINGS)
def test_ordinary_numbers_are_read_so(cells: list[str], to: Setting) -> None:
    ordinary = replace(to, quantity=VOCABULARY["mean"], missing=frozenset(), decimals=None)
    other = "," if to.mark == "." else "."
    plain = [at for at, cell in enumerate(cells) if other not in cell]
    assert read_plain(cells, ordinary).at.tolist() == plain
