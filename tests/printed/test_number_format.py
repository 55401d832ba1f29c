"""Format codes of ECMA-376 Part 1, 18.8.30 (built-in codes) and 18.8.31 (grammar), and what they show."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from extractor.printed.number_format import DATE, GENERAL, UNDECIDED, Display, Shown, shown_by

NUMBER, PERCENT, SCIENTIFIC = Display.NUMBER, Display.PERCENT, Display.SCIENTIFIC


@pytest.mark.parametrize(
    ("code", "value", "expected"),
    [
        (None, 5.1, GENERAL),
        ("", 5.1, GENERAL),
        ("General", 5.1, GENERAL),
        ("GENERAL", 5.1, GENERAL),
        ("@", 5.1, GENERAL),
        # built-in codes 1 to 4, 9 to 12, 37 to 40, 48
        ("0", 5.1, Shown(NUMBER, 0, 0)),
        ("0.00", 5.1, Shown(NUMBER, 2, 2)),
        ("#,##0", 5.1, Shown(NUMBER, 0, 0)),
        ("#,##0.00", 5.1, Shown(NUMBER, 2, 2)),
        ("0%", 0.05, Shown(PERCENT, 0, 0)),
        ("0.00%", 0.05, Shown(PERCENT, 2, 2)),
        ("0.00E+00", 5.1, Shown(SCIENTIFIC, 2, 2)),
        ("##0.0E+0", 5.1, Shown(SCIENTIFIC, 1, 1)),
        ("# ?/?", 5.1, UNDECIDED),
        ("#,##0.00;(#,##0.00)", -5.1, Shown(NUMBER, 2, 2)),
        ("#,##0.00;[Red](#,##0.00)", -5.1, Shown(NUMBER, 2, 2)),
        # dates and times: built-in codes 14 to 22, 45 to 47
        ("mm-dd-yy", 5.1, DATE),
        ("d-mmm", 5.1, DATE),
        ("h:mm AM/PM", 5.1, DATE),
        ("[h]:mm:ss", 5.1, DATE),
        ("[$-409]d mmm yyyy;@", 5.1, DATE),
        # optional digits, literals, colours, currencies, fills
        ("0.0##", 5.1, Shown(NUMBER, 1, 3)),
        (".000", 0.018, Shown(NUMBER, 3, 3)),
        ('0.00" ms"', 5.1, Shown(NUMBER, 2, 2)),
        ('"d;y"0.0', 5.1, Shown(NUMBER, 1, 1)),
        (r"0.0\d", 5.1, Shown(NUMBER, 1, 1)),
        ("[Red]0.0", 5.1, Shown(NUMBER, 1, 1)),
        ("[$€-407] #,##0.00", 5.1, Shown(NUMBER, 2, 2)),
        ("_-* #,##0.00_-", 5.1, Shown(NUMBER, 2, 2)),
        # a section by sign
        ("0.00;-0.0;0", 1.0, Shown(NUMBER, 2, 2)),
        ("0.00;-0.0;0", -1.0, Shown(NUMBER, 1, 1)),
        ("0.00;-0.0;0", 0.0, Shown(NUMBER, 0, 0)),
        ("0.00;;", -1.0, UNDECIDED),
        # conditions decide only where all sections agree
        ("[<1]0.00;[>=1]0.0", 5.1, UNDECIDED),
        ("[<1]0.00;[Red][>=1]0.00", 5.1, Shown(NUMBER, 2, 2)),
        # scaled by thousands, doubled percent: what is shown is not the stored number
        ("0.00,", 5123.0, UNDECIDED),
        ("0,,", 5e6, UNDECIDED),
        ("0%%", 0.05, UNDECIDED),
        ('"hidden"', 5.1, UNDECIDED),
    ],
)
def test_codes(code: str | None, value: float, expected: Shown) -> None:
    assert shown_by(code, value) == expected


@given(st.text(alphabet='0#?.,%E+-/@;"[]\\_*ymdhsGeneral <>=1$', max_size=30), st.floats(allow_nan=False))
def test_any_code_is_answered(code: str, value: float) -> None:
    shown = shown_by(code, value)
    assert 0 <= shown.least <= shown.most


@given(st.text(max_size=30))
def test_unicode_codes_are_answered(code: str) -> None:
    assert isinstance(shown_by(code, 1.0), Shown)
