"""Rows that find each other and numbers that say the same, however they were printed. All data are invented."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from extractor.coders.disputes import reading_text
from extractor.coders.matching import Printed, alike, plain_label
from extractor.coders.reconcile import reconcile
from extractor.labels import label_codes
from extractor.printed.reading import Reading
from extractor.printed.reported import read_number
from extractor.quantities import VOCABULARY
from tests.double_coding import (
    FACTORIAL,
    SHEET,
    TO,
    changed,
    pairs_of,
    random_sheet,
)


def printed(*cells: object, quantity: str = "mean") -> Printed:
    """Cells of one column, read."""
    kinds = {"": 0, "=": 1, "<": 2, ">": 3}
    readings = [read_number(cell, VOCABULARY[quantity]) for cell in cells]
    ends = (np.array([getattr(reading, end) for reading in readings]) for end in ("value", "low", "high"))
    return Printed(np.array([kinds[reading.comparator] for reading in readings]), *ends)


@pytest.mark.parametrize(
    ("one", "other", "quantity", "agree"),
    [
        ("3.4", "3.40", "mean", True),
        ("3.4", "3.41", "mean", True),
        ("3.4", "3.45", "mean", True),
        ("3.4", "3.46", "mean", False),
        ("3.4", "3.5", "mean", False),
        ("3.40", "3.41", "mean", False),
        ("-3.4", "3.4", "mean", False),
        ("20", "20", "n", True),
        ("20", "21", "n", False),
        ("< .05", "< 0.050", "p_value", True),
        ("< .05", "< .01", "p_value", False),
        ("< .05", ".03", "p_value", False),
        ("< .05", "> .05", "p_value", False),
        ("ns", "> .05", "p_value", True),
        ("", "", "mean", True),
        ("", "0", "mean", False),
    ],
)
def test_numbers_agree_where_rounding_intervals_overlap(
    one: str, other: str, quantity: str, agree: bool
) -> None:
    assert bool(alike(printed(one, quantity=quantity), printed(other, quantity=quantity))[0]) is agree


@given(
    value=st.decimals(-1000, 1000, allow_nan=False, places=9),
    places=st.tuples(st.integers(0, 6), st.integers(0, 6)),
)
@settings(max_examples=300, deadline=None)
def test_one_number_printed_with_different_decimals_always_agrees(
    value: object, places: tuple[int, int]
) -> None:
    one, other = (f"{value:.{digits}f}" for digits in places)
    assert alike(printed(one), printed(other))[0]


def test_a_tolerance_widens_what_agrees() -> None:
    one, other = printed("100.0"), printed("101.0")
    assert not alike(one, other)[0]
    assert not alike(one, other, 0.009)[0]
    assert alike(one, other, 0.01)[0]


@given(
    text=st.one_of(
        st.decimals(-10_000, 10_000, allow_nan=False, places=3).map(str),
        st.integers(-500, 500).map(str),
        st.sampled_from([".018", "1.20e3", "0.0", "-.50", "1,234.5", "12e1"]),
        st.floats(-1e6, 1e6, allow_nan=False).map(lambda x: round(x, 2)),
    ),
    mark=st.sampled_from([".", ","]),
)
@settings(max_examples=300, deadline=None)
def test_a_reading_as_text_reads_back_to_itself(text: object, mark: str) -> None:
    quantity = VOCABULARY["mean"]
    reading = read_number(text, quantity)
    again = read_number(reading_text(reading, mark), quantity, decimal_mark=mark)
    assert again.comparator == reading.comparator
    for name in ("value", "low", "high", "unit"):
        assert getattr(again, name) == pytest.approx(getattr(reading, name), rel=1e-15, abs=0, nan_ok=True), (
            name
        )


@pytest.mark.parametrize("text", ["< .05", "< .001", "> .10", "ns", ".000", "0.05"])
def test_a_bound_as_text_reads_back_to_itself(text: str) -> None:
    quantity = VOCABULARY["p_value"]
    reading = read_number(text, quantity)
    again = read_number(reading_text(reading), quantity)
    assert (again.comparator, again.low, again.high) == (reading.comparator, reading.low, reading.high)


def test_blank_and_refused_readings_as_text() -> None:
    assert reading_text(Reading()) == ""
    assert reading_text(read_number("abc", VOCABULARY["mean"])).startswith("not understood: 'abc'")


def test_labels_are_compared_without_case_space_and_signs_but_numbers_stay_apart() -> None:
    assert plain_label("North  Quay (2)") == plain_label("north quay 2")
    assert plain_label("Site_7") == plain_label("site 7")
    assert plain_label("1.2") != plain_label("12")
    assert plain_label("Étude") == plain_label("étude")
    assert plain_label("+") != plain_label("-")


@given(seed=st.integers(0, 10**6))
@settings(max_examples=25, deadline=None)
def test_rows_find_each_other_in_any_order_with_rows_missing(seed: int) -> None:
    """Labels alone, in a shuffled sheet from which rows are missing on both sides."""
    rng = np.random.default_rng(seed)
    sheet = random_sheet(rng, 30)
    first = sheet.drop(index=rng.choice(30, 4, replace=False))
    second = sheet.drop(index=rng.choice(30, 4, replace=False)).sample(frac=1, random_state=seed)
    found = reconcile([first.reset_index(drop=True), second.reset_index(drop=True)])
    place = {label: row + 2 for row, label in enumerate(second.index)}
    both = {(row + 2, place[label]) for row, label in enumerate(first.index) if label in place}
    assert {pair for pair in pairs_of(found) if None not in pair} == both
    assert len(found.single) == len(first) + len(second) - 2 * len(both)
    assert not len(found.disputes)


def test_rows_with_the_same_labels_are_told_apart_by_their_numbers() -> None:
    sheet = random_sheet(np.random.default_rng(4), 12).assign(study="North Quay", outcome="recall")
    order = np.random.default_rng(5).permutation(12)
    second = changed(sheet, (3, "page", "999")).iloc[order].reset_index(drop=True)
    found = reconcile([sheet, second])
    expected = {(row + 2, int(np.flatnonzero(order == row)[0]) + 2) for row in range(12)}
    assert set(pairs_of(found)) == expected
    assert set(found.effects["matched"]) == {"several rows have these labels; told apart by their numbers"}
    assert list(found.disputes["variable"]) == ["page"]


@pytest.mark.parametrize(
    ("cells", "variables"),
    [
        ([(0, "outcome", "Recall ")], []),
        ([(0, "outcome", "")], ["outcome"]),
        ([(0, "outcome", "memory")], ["outcome"]),
        ([(0, "outcome", "memory"), (0, "sd_1", "9.99")], ["sd_1", "outcome"]),
    ],
    ids=["spelling", "blank", "another word", "another word and a slip"],
)
def test_a_label_that_differs_is_a_dispute_and_no_lost_row(
    cells: list[tuple[int, str, str]], variables: list[str]
) -> None:
    found = reconcile([SHEET, changed(SHEET, *cells)], TO)
    assert pairs_of(found) == [(row, row) for row in range(2, 6)]
    assert list(found.disputes["variable"]) == variables


def test_rows_whose_numbers_all_differ_are_not_forced_together() -> None:
    other = changed(SHEET, *((0, name, "7.77") for name in SHEET.columns[2:8]), (0, "outcome", "attention"))
    found = reconcile([SHEET, other])
    assert (2, None) in pairs_of(found)
    assert (None, 2) in pairs_of(found)


def test_a_study_spelled_otherwise_is_pointed_out() -> None:
    found = reconcile([SHEET, changed(SHEET, (2, "study", "Sight 7"))])
    assert list(found.single["present"]) == ["A", "B"]
    assert "is 'Sight 7' meant?" in found.single["hint"].iloc[0]
    assert "is 'Site 7' meant?" in found.single["hint"].iloc[1]


def test_analyses_that_are_only_named_otherwise_are_no_dispute_and_regrouped_ones_are() -> None:
    one = FACTORIAL
    renamed = reconcile([one, one.assign(analysis="the model")])
    assert not len(renamed.disputes)
    assert "1 analysis has another name with coder B" in renamed.notes[0]
    regrouped = reconcile([one, changed(one, (2, "analysis", "m2"))])
    assert list(regrouped.disputes["variable"]) == ["analysis"]


def test_a_term_in_another_order_is_the_same_term() -> None:
    found = reconcile([FACTORIAL, changed(FACTORIAL, (2, "term", "sex × age"))])
    assert pairs_of(found) == [(2, 2), (3, 3), (4, 4)]
    assert not len(found.disputes)


@given(st.lists(st.text(alphabet="ab1 2.-_\x1f\n\tÉA", max_size=6), min_size=1, max_size=5))
@settings(max_examples=300, deadline=None)
def test_many_labels_at_once_are_compared_as_each_alone(texts: list[str]) -> None:
    codes = label_codes(np.array(texts, dtype=object)).tolist()
    alone = [plain_label(text) for text in texts]
    assert [a == b for a in codes for b in codes] == [a == b for a in alone for b in alone]
    assert [code == 0 for code in codes] == [label == "" for label in alone]
