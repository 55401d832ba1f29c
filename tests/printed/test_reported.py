"""Cells as articles print them and spreadsheets hold them, and what each must be read as.

The rounding intervals follow from the definition of rounding to q decimals; expected endpoints are decimal
fractions, so each is compared within a few units in the last place of a double.
"""

from __future__ import annotations

import datetime
import math
from decimal import ROUND_DOWN, ROUND_HALF_EVEN, ROUND_HALF_UP, Decimal
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from extractor.printed.reading import ROUNDINGS, rounding_interval
from extractor.printed.reported import BLANK, CellError, Reading, UncachedFormula, read_number
from extractor.quantities import VOCABULARY

INF = math.inf


def read(name: str, raw: object, **options: Any) -> Reading:
    return read_number(raw, VOCABULARY[name], **options)


def close(a: float, b: float) -> bool:
    return a == b or math.isclose(a, b, rel_tol=1e-15, abs_tol=1e-300) or abs(a - b) <= 4 * math.ulp(b)


@pytest.mark.parametrize(
    ("name", "raw", "value", "low", "high", "decimals"),
    [
        ("p_value", ".018", 0.018, 0.0175, 0.0185, 3),
        ("p_value", "0.018", 0.018, 0.0175, 0.0185, 3),
        ("p_value", "0,018", 0.018, 0.0175, 0.0185, 3),
        ("p_value", ",018", 0.018, 0.0175, 0.0185, 3),
        ("p_value", "p = .018", 0.018, 0.0175, 0.0185, 3),
        ("p_value", "P=.018", 0.018, 0.0175, 0.0185, 3),
        ("p_value", "1.000", 1.0, 0.9995, 1.0005, 3),
        ("p_value", "3.1e-5", 3.1e-5, 3.05e-5, 3.15e-5, 6),
        ("p_value", "3.1 × 10⁻⁵", 3.1e-5, 3.05e-5, 3.15e-5, 6),
        ("p_value", "3.1x10^-5", 3.1e-5, 3.05e-5, 3.15e-5, 6),
        ("p_value", "3.1 × 10−5", 3.1e-5, 3.05e-5, 3.15e-5, 6),
        ("mean", "5", 5.0, 4.5, 5.5, 0),
        ("mean", "5.10", 5.1, 5.095, 5.105, 2),
        ("mean", "−2.31", -2.31, -2.315, -2.305, 2),
        ("mean", "–2.31", -2.31, -2.315, -2.305, 2),
        ("mean", "- 2.31", -2.31, -2.315, -2.305, 2),
        ("mean", "+2.31", 2.31, 2.305, 2.315, 2),
        ("mean", "\u00a02.31\u2009", 2.31, 2.305, 2.315, 2),
        ("mean", "2.\u200b31", 2.31, 2.305, 2.315, 2),
        ("mean", "'-2.31", -2.31, -2.315, -2.305, 2),
        ("mean", "1 234.5", 1234.5, 1234.45, 1234.55, 1),
        ("mean", "1\u202f234.5", 1234.5, 1234.45, 1234.55, 1),
        ("mean", "1\u2009234\u2009567", 1234567.0, 1234566.5, 1234567.5, 0),
        ("mean", "1'234.5", 1234.5, 1234.45, 1234.55, 1),
        ("mean", "1,234.5", 1234.5, 1234.45, 1234.55, 1),
        ("mean", "1.234,5", 1234.5, 1234.45, 1234.55, 1),
        ("mean", "1,234,567", 1234567.0, 1234566.5, 1234567.5, 0),
        ("mean", "3,45", 3.45, 3.445, 3.455, 2),
        ("mean", "1234,567", 1234.567, 1234.5665, 1234.5675, 3),
        ("mean", "4·31", 4.31, 4.305, 4.315, 2),
        ("mean", "1e3", 1000.0, 500.0, 1500.0, 0),
        ("f_value", "4.31*", 4.31, 4.305, 4.315, 2),
        ("f_value", "4.31 ***", 4.31, 4.305, 4.315, 2),
        ("f_value", "4.31†", 4.31, 4.305, 4.315, 2),
        ("f_value", "4.31²", 4.31, 4.305, 4.315, 2),
        ("f_value", "4.31a", 4.31, 4.305, 4.315, 2),
        ("f_value", "4.31 a,b", 4.31, 4.305, 4.315, 2),
        ("f_value", "4.31ᵃ", 4.31, 4.305, 4.315, 2),
        ("f_value", "4.31^a", 4.31, 4.305, 4.315, 2),
        ("f_value", "4.31.", 4.31, 4.305, 4.315, 2),
        ("f_value", "F = 4.31", 4.31, 4.305, 4.315, 2),
        ("f_value", "f_value = 4.31", 4.31, 4.305, 4.315, 2),
        ("eta_squared", "η² = .13", 0.13, 0.125, 0.135, 2),
        ("eta_squared", "eta squared = .13", 0.13, 0.125, 0.135, 2),
        ("partial_eta_squared", "ηp² = .13", 0.13, 0.125, 0.135, 2),
        ("eta_squared", "5%", 0.05, 0.045, 0.055, 2),
        ("eta_squared", "5.0 %", 0.05, 0.0495, 0.0505, 3),
        ("omega_squared", "-0.01", -0.01, -0.015, -0.005, 2),
        ("df_error", "31.4", 31.4, 31.35, 31.45, 1),
        ("df_error", "57.0", 57.0, 56.95, 57.05, 1),
        ("n", "1e2", 100.0, 50.0, 150.0, 0),
    ],
)
def test_numbers(name: str, raw: str, value: float, low: float, high: float, decimals: int) -> None:
    reading = read(name, raw)
    assert reading.problem == ""
    assert reading.comparator == "="
    assert reading.value == value
    assert close(reading.low, low)
    assert close(reading.high, high)
    assert reading.decimals == decimals


@pytest.mark.parametrize(
    ("name", "raw", "value"),
    [
        ("n_total", "60", 60.0),
        ("n_total", "N = 60", 60.0),
        ("n_total", "n = 60", 60.0),
        ("n", "1,234", 1234.0),
        ("n", "1 234", 1234.0),
        ("n", "30a", 30.0),
        ("df_error", "57", 57.0),
        ("tails", "two-tailed", 2.0),
        ("tails", "1-sided", 1.0),
        ("tails", "one", 1.0),
        ("confidence_level", "95%", 0.95),
        ("confidence_level", "95", 0.95),
        ("confidence_level", ".95", 0.95),
        ("confidence_level", 95, 0.95),
        ("scale_min", "1", 1.0),
        ("scale_max", 7.5, 7.5),
        ("n", 30, 30.0),
        ("n", 30.0, 30.0),
        ("n", np.int32(30), 30.0),
    ],
)
def test_exact(name: str, raw: object, value: float) -> None:
    reading = read(name, raw)
    assert (reading.value, reading.low, reading.high, reading.unit) == (value, value, value, 0.0)
    assert reading.comparator == "="


@pytest.mark.parametrize(
    ("name", "raw", "comparator", "low", "high"),
    [
        ("p_value", "< .001", "<", 0.0, 0.001),
        ("p_value", "<.001", "<", 0.0, 0.001),
        ("p_value", "p < .05", "<", 0.0, 0.05),
        ("p_value", "p≤.05", "<", 0.0, 0.05),
        ("p_value", "p <= .05*", "<", 0.0, 0.05),
        ("p_value", "> .05", ">", 0.05, 1.0),
        ("p_value", "p ≥ .10", ">", 0.10, 1.0),
        ("p_value", ".000", "<", 0.0, 0.0005),
        ("p_value", "p = .000", "<", 0.0, 0.0005),
        ("p_value", "0.00", "<", 0.0, 0.005),
        ("p_value", "< .000", "<", 0.0, 0.001),
        ("p_value", "ns", ">", 0.05, 1.0),
        ("p_value", "n.s.", ">", 0.05, 1.0),
        ("p_value", "N.S.", ">", 0.05, 1.0),
        ("p_value", "p = ns", ">", 0.05, 1.0),
        ("p_value", "not significant", ">", 0.05, 1.0),
        ("f_value", "F < 1", "<", 0.0, 1.0),
        ("f_value", "> 4.31", ">", 4.31, INF),
        ("t_value", "t < 1", "<", -INF, 1.0),
        ("r", "> .3", ">", 0.3, 1.0),
        ("n", "> 30", ">", 30.0, INF),
        ("p_value", 0, "<", 0.0, 0.5),
    ],
)
def test_bounds(name: str, raw: object, comparator: str, low: float, high: float) -> None:
    reading = read(name, raw)
    assert math.isnan(reading.value)
    assert reading.comparator == comparator
    assert reading.given
    assert reading.low == low or close(reading.low, low)
    assert reading.high == high or close(reading.high, high)


def test_what_was_not_plain_is_said() -> None:
    assert read("p_value", ".018").understood == ""
    assert read("p_value", "0,018").understood == "a comma taken as the decimal mark; read as 0.018"
    assert read("p_value", "p = .000").understood == "p = left out; a p of zero read as p < .0005"
    assert read("p_value", "ns", alpha=0.01).understood == "ns read as p > .01"
    assert read("p_value", "< .000").understood == "no p is below zero; read as p < .001"
    assert read("mean", "4.31*").understood == "* after the number left out"
    assert read("n", "1,234").understood == "a comma taken as the thousands mark; read as 1234"
    assert read("eta_squared", "5%").understood == "a percentage, read as 0.05"
    assert read("mean", "1 234.5").understood == "a space taken as the thousands mark; read as 1234.5"


@pytest.mark.parametrize(
    ("name", "raw", "words"),
    [
        ("mean", "1,234", "thousands (1234) or decimals (1.234)"),
        ("mean", "12,345", "thousands (12345) or decimals (12.345)"),
        ("df_error", "1,234", "thousands (1234) or decimals (1.234)"),
        ("mean", "12.4 (3.1)", "two numbers in one cell"),
        ("mean", "12.4 ± 3.1", "two numbers in one cell"),
        ("mean", "12.4 [3.1]", "two numbers in one cell"),
        ("mean", "(3.1)", "in brackets"),
        ("mean", "3-5", "a range"),
        ("mean", "3 – 5", "a range"),
        ("mean", "3 to 5", "a range"),
        ("mean", "3/5", "a fraction or a date"),
        ("mean", "3-May", "a date"),
        ("mean", "Mar-05", "a date"),
        ("mean", "2024-05-03 00:00:00", "a date"),
        ("mean", "03.05.2024", "a date"),
        ("mean", "10:30", "a date or time"),
        ("mean", "~3.1", "approximate"),
        ("mean", "ca. 3", "approximate"),
        ("p_value", "**", "stars"),
        ("mean", "n.s.", "column of the p value"),
        ("mean", "5%", "percentage"),
        ("n", "5%", "percentage"),
        ("mean", "12.4 ms", "something follows the number"),
        ("mean", "1 23 456", "no way of writing thousands"),
        ("mean", "1,23,456", "something follows the number"),
        ("f_value", "F(2, 57) = 4.31", "column reported"),
        ("f_value", "f = 4.31", "names 'f', but the column holds f_value (F)"),
        ("cohens_f", "F = 0.31", "names 'F'"),
        ("t_value", "F = 4.31", "names 'F'"),
        ("p_value", ".01 < p < .05", "two relation signs"),
        ("mean", "=A1/B1", "formula"),
        ("mean", "#DIV/0!", "spreadsheet error"),
        ("mean", "#N/A", "spreadsheet error"),
        ("mean", "see text", "not a number"),
        ("mean", "1e999", "range of floating point"),
        ("mean", "0e999", "range of floating point"),
        ("mean", "9" * 41, "more digits"),
        ("mean", "9" * 5000, "not a number"),
        ("p_value", "> 1.2", "no p is > 1.2"),
        ("f_value", "< -1", "no F is < -1"),
        ("mean", "٣", "not a number"),
        ("mean", "½", "not a number"),
        ("mean", True, "TRUE or FALSE"),
        ("mean", np.True_, "TRUE or FALSE"),
        ("mean", datetime.datetime(2024, 5, 3), "turn entries such as 3-5 into a date"),
        ("mean", datetime.date(2024, 5, 3), "date"),
        ("mean", datetime.time(3, 5), "date"),
        ("mean", datetime.timedelta(days=1), "date"),
        ("mean", np.datetime64("2024-05-03"), "date"),
        ("mean", UncachedFormula("=A1/2"), "'=A1/2' has no stored result"),
        ("mean", CellError("#DIV/0!"), "#DIV/0!"),
        ("mean", math.inf, "range of floating point"),
        ("mean", 10**400, "range of floating point"),
        ("mean", 1j, "not a number"),
        ("mean", [1], "not a number"),
    ],
)
def test_refusals(name: str, raw: object, words: str) -> None:
    reading = read(name, raw)
    assert words in reading.problem
    assert "\n" not in reading.problem
    assert not reading.given
    assert math.isnan(reading.value)
    assert math.isnan(reading.low)


@pytest.mark.parametrize(
    "raw",
    [None, "", "  ", "NA", "na", "N/A", "n/a", "n.a.", "NaN", "-", "—", "–", "−", "--", "\u00a0", math.nan],
)
def test_blank(raw: object) -> None:
    assert read("mean", raw) == BLANK


def test_missing_codes() -> None:
    codes = frozenset({"-99", "nr", "#n/a"})
    for raw in ("-99", "−99", -99, -99.0, "NR", CellError("#N/A")):
        assert read("mean", raw, missing=codes) == BLANK
    assert read("mean", "-99").value == -99.0
    assert read("mean", "-99.5", missing=codes).value == -99.5


@pytest.mark.parametrize(
    ("raw", "value", "words"),
    [
        ("0,018", 0.018, ""),
        ("4,31", 4.31, ""),
        ("1,234", 1.234, ""),
        ("1.234,5", 1234.5, "thousands"),
        ("1.234.567", 1234567.0, "thousands"),
        ("1,234.5", 1234.5, "decimal"),
        ("4.31", 4.31, "a point taken as the decimal mark"),
        ("0.018", 0.018, "a point taken as the decimal mark"),
        ("1 234,5", 1234.5, "thousands"),
    ],
)
def test_decimal_comma(raw: str, value: float, words: str) -> None:
    reading = read("mean", raw, decimal_mark=",")
    assert reading.value == value
    assert words in reading.understood
    assert bool(words) is bool(reading.understood)


def test_decimal_comma_ambiguous() -> None:
    assert "thousands (1234) or decimals (1,234)" in read("mean", "1.234", decimal_mark=",").problem


@pytest.mark.parametrize(
    ("raw", "code", "low", "high", "decimals"),
    [
        (5.1, "0.00", 5.095, 5.105, 2),
        (5.1, "General", 5.05, 5.15, 1),
        (5.1, None, 5.05, 5.15, 1),
        (5, "0.00", 4.995, 5.005, 2),
        (5.0, "General", 4.5, 5.5, 0),
        (5.1, "0.0##", 5.05, 5.15, 1),
        (5.137, "0.00", 5.1365, 5.1375, 3),
        (5.1, "0", 5.05, 5.15, 1),
        (1234.5, "#,##0.00", 1234.495, 1234.505, 2),
        (3.1e-5, "0.00E+00", 3.095e-5, 3.105e-5, 7),
        (5.1, "@", 5.05, 5.15, 1),
        (np.float32(5.1), None, 5.05, 5.15, 1),
        (Decimal("5.10"), None, 5.095, 5.105, 2),
    ],
)
def test_stored_numbers(raw: object, code: str | None, low: float, high: float, decimals: int) -> None:
    reading = read("mean", raw, number_format=code)
    assert close(reading.low, low)
    assert close(reading.high, high)
    assert reading.decimals == decimals


def test_stored_percentages() -> None:
    reading = read("eta_squared", 0.05, number_format="0.0%")
    assert (reading.value, reading.decimals) == (0.05, 3)
    assert close(reading.low, 0.0495)
    assert "percentage" in read("mean", 0.05, number_format="0%").problem
    assert "date" in read("mean", 45413.0, number_format="d-mmm").problem


def test_stored_zero_p() -> None:
    reading = read("p_value", 0.0, number_format="0.000")
    assert (reading.comparator, reading.low) == ("<", 0.0)
    assert close(reading.high, 0.0005)


def test_computed_numbers_are_not_typed_ones() -> None:
    plain = read("mean", 0.1 + 0.2)
    assert plain.low < 0.3 < plain.high
    assert plain.high - plain.low < 1e-15
    assert plain.decimals == -1
    shown = read("mean", 9.6 / math.sqrt(7.0), number_format="0.00")
    assert close(shown.high - shown.low, 0.01) or abs(shown.high - shown.low - 0.01) < 1e-14
    assert "computed" in shown.understood


def test_codebook_decimals() -> None:
    assert read("mean", 5.1, decimals=2).decimals == 2
    assert read("mean", "5.1", decimals=2).decimals == 2
    assert read("mean", "5.123", decimals=2).decimals == 3
    assert read("n", 30, decimals=2).unit == 0.0
    assert close(read("p_value", "< .05", decimals=3).high, 0.05)


@pytest.mark.parametrize(
    ("rounding", "value", "low", "high"),
    [
        ("nearest", "2.3", "2.25", "2.35"),
        ("truncated", "2.3", "2.3", "2.4"),
        ("either", "2.3", "2.25", "2.4"),
        ("truncated", "-2.3", "-2.4", "-2.3"),
        ("either", "-2.3", "-2.4", "-2.25"),
        ("truncated", "0.0", "-0.1", "0.1"),
        ("nearest", "0.0", "-0.05", "0.05"),
        ("either", "0.0", "-0.1", "0.1"),
    ],
)
def test_rounding_rules(rounding: str, value: str, low: str, high: str) -> None:
    found = rounding_interval(Decimal(value), Decimal("0.1"), rounding)
    assert Decimal(found[0]) <= Decimal(low)
    assert Decimal(high) <= Decimal(found[1])
    assert close(found[0], float(low))
    assert close(found[1], float(high))


NUMBERS = st.floats(min_value=-1e9, max_value=1e9, allow_nan=False)
DIRECTIONS = {
    "nearest": (ROUND_HALF_EVEN, ROUND_HALF_UP),
    "truncated": (ROUND_DOWN,),
    "either": (ROUND_HALF_EVEN, ROUND_HALF_UP, ROUND_DOWN),
}


@given(NUMBERS, st.integers(0, 8), st.sampled_from(ROUNDINGS), st.sampled_from(".,"), st.data())
def test_a_printed_number_lies_in_its_interval(
    number: float, decimals: int, rounding: str, mark: str, data: st.DataObject
) -> None:
    direction = data.draw(st.sampled_from(DIRECTIONS[rounding]))
    unit = Decimal(1).scaleb(-decimals)
    text = f"{Decimal(number).quantize(unit, rounding=direction):f}"
    reading = read("mean", text.replace(".", mark), rounding=rounding, decimal_mark=mark)
    assert reading.problem == ""
    assert reading.decimals == decimals
    assert reading.low <= number <= reading.high
    # no wider than the rule allows
    widest = {"nearest": 1.0, "truncated": 2.0 if float(text) == 0 else 1.0, "either": 2.0}[rounding]
    slack = 4 * math.ulp(max(abs(reading.low), abs(reading.high)))
    assert reading.high - reading.low <= widest * float(unit) + slack


@given(NUMBERS, st.integers(0, 8))
def test_a_cell_that_lost_its_zeros_takes_the_wider_reading(number: float, decimals: int) -> None:
    text = f"{number:.{decimals}f}"
    reading = read("mean", float(text))
    if len(text.replace("-", "").replace(".", "").strip("0")) <= 12:
        assert reading.low <= number <= reading.high
        assert reading.decimals <= decimals


@given(st.floats(0, 1), st.integers(1, 6), st.sampled_from(ROUNDINGS))
def test_a_printed_p_lies_in_its_interval(p: float, decimals: int, rounding: str) -> None:
    direction = ROUND_DOWN if rounding == "truncated" else ROUND_HALF_UP
    text = f"{Decimal(p).quantize(Decimal(1).scaleb(-decimals), rounding=direction):f}"
    reading = read("p_value", text.removeprefix("0") if text != "0" else text, rounding=rounding)
    assert reading.low <= p <= reading.high


NAMES = st.sampled_from(["p_value", "mean", "n", "df_error", "tails", "eta_squared", "confidence_level", "r"])
SIGNS = st.sampled_from("pF=<>≤.,-−()[%*e^ 01a²'/:±\x00\u2009")
WORDS = st.sampled_from(["×10", "⁻⁵", "05", "234", "ns", "n.s.", "May", "#N/A"])
SNIPPETS = st.lists(st.one_of(SIGNS, WORDS), max_size=12).map("".join)


@given(NAMES, st.one_of(st.text(max_size=30), SNIPPETS), st.sampled_from(".,"), st.sampled_from(ROUNDINGS))
def test_any_text_is_answered(name: str, raw: str, mark: str, rounding: str) -> None:
    reading = read(name, raw, decimal_mark=mark, rounding=rounding)
    check(reading)


@given(
    NAMES,
    st.one_of(
        st.floats(),
        st.integers(),
        st.decimals(),
        st.booleans(),
        st.none(),
        st.datetimes(),
        st.complex_numbers(),
    ),
    st.one_of(
        st.none(),
        st.sampled_from(["General", "0.00", "0%", "0.0##", "0.00E+00", "d-mmm", "@", "0.00,", ";;;"]),
    ),
)
def test_any_cell_is_answered(name: str, raw: object, code: str | None) -> None:
    check(read(name, raw, number_format=code))


def check(reading: Reading) -> None:
    """Given, refused or blank, and never two of these; an interval holds its value."""
    if reading.given:
        assert reading.problem == ""
        assert reading.low <= reading.high
        assert reading.unit >= 0.0
        assert math.isnan(reading.value) or reading.low <= reading.value <= reading.high
        assert (reading.comparator == "=") is not math.isnan(reading.value)
    else:
        assert math.isnan(reading.value)
        assert math.isnan(reading.low)
        assert math.isnan(reading.high)
        assert reading.problem or reading == BLANK
