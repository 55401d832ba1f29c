"""Printed text or a spreadsheet cell -> value, rounding interval, comparator. Nothing else parses numbers.

A number printed with q decimals stands for every number that rounds to it. Endpoints are computed in decimal
and then moved one floating point step outward, so that the interval contains all of them. Nothing is guessed
silently: what was not plain is said in ``understood``, and what cannot be decided is refused in ``problem``.
"""

from __future__ import annotations

import datetime
import math
import re
from dataclasses import dataclass, replace
from decimal import Decimal

import numpy as np

from extractor.printed.digits import NOT_DIGITS, read_digits, why_no_number
from extractor.printed.number_format import Display, Shown, shown_by
from extractor.printed.reading import (
    BLANK,
    EXACT,
    ROUNDINGS,
    Reading,
    is_missing,
    outward,
    quoted,
    refuse,
    rounding_interval,
    shortest,
    spelled_missing,
    tidy,
)
from extractor.printed.symbols import names
from extractor.quantities import Quantity

__all__ = ["BLANK", "ROUNDINGS", "CellError", "Reading", "UncachedFormula", "read_number"]

PROBABILITIES = frozenset({"p_value", "homogeneity_p"})
CUT_AT_ZERO = frozenset({"omega_squared", "partial_omega_squared", "epsilon_squared", "rank_epsilon_squared"})
"""Estimates that can be negative and are often printed as zero then."""
_MAY_BE_TINY = PROBABILITIES | {"adjusted_p"}
STATED = frozenset({"confidence_level", "scale_min", "scale_max"})
"""Set by a design rather than measured, hence exact as printed."""
_MAY_BE_FRACTIONAL = frozenset({"df", "df_effect", "df_error"})
"""Counts that corrections turn into fractions."""

LONGEST = 200
"""Longer cells hold prose, not a number."""
MOST_COUNTED = 2**53
"""Above it, floating point numbers leave whole numbers out."""
LARGEST, SMALLEST = Decimal("1e50"), Decimal("1e-50")
"""No statistic but a p is printed beyond these; within them products of several stay within what doubles hold."""
TYPED_DIGITS = 12
"""A stored number with more significant digits was computed, not typed."""

DATE_ADVICE = "spreadsheets turn entries such as 3-5 into a date; type the number again in a text cell"
_PERCENT = "a percentage may mean a proportion or points of this column's scale; write it without the sign"


@dataclass(frozen=True, slots=True)
class UncachedFormula:
    """A workbook cell with a formula whose result was never stored."""

    formula: str


@dataclass(frozen=True, slots=True)
class CellError:
    """A workbook cell that shows an error such as ``#DIV/0!``."""

    code: str


@dataclass(frozen=True, slots=True)
class Setting:
    """What a column's cells are read with; see ``read_number``."""

    quantity: Quantity
    mark: str
    rounding: str
    missing: frozenset[str]
    alpha: float
    decimals: int | None

    @property
    def name(self) -> str:
        return self.quantity.name

    @property
    def whole(self) -> bool:
        """Whether a fraction has no meaning."""
        return self.quantity.exact and self.name not in _MAY_BE_FRACTIONAL

    @property
    def proportion(self) -> bool:
        """Whether a percentage can only mean hundredths."""
        return self.quantity.high <= 1.0


def _plain(number: Decimal) -> str:
    """A probability as the trade prints it: ``.05``."""
    return f"{number:f}".removeprefix("0") or "0"


def _beyond(value: Decimal, decimals: int, to: Setting) -> str:
    """Why a number cannot be one that an article prints; "" where it can."""
    size = abs(value)
    if to.quantity.integer and size > MOST_COUNTED:
        return f"{value:.6g} is more than any study counts"
    if size > LARGEST:
        return f"{value:.6g} is larger than any printed statistic"
    tiny = 0 < size < SMALLEST or Decimal(1).scaleb(-decimals) < SMALLEST
    if tiny and to.name not in _MAY_BE_TINY:
        return f"{value:.6g} is smaller, or more exact, than any printed statistic"
    return ""


def _printed(value: Decimal, decimals: int, notes: tuple[str, ...], to: Setting) -> Reading:
    """The reading of a number printed with ``decimals`` decimals (negative: to tens, hundreds)."""
    if beyond := _beyond(value, decimals, to):
        return refuse(beyond)
    number, shown = float(value) + 0.0, max(decimals, 0)
    if to.name in STATED or (to.quantity.exact and decimals == 0):
        return Reading(number, number, number, 0.0, shown, "=", "; ".join(notes))
    unit = Decimal(1).scaleb(-decimals)
    if to.name in PROBABILITIES and value == 0:
        bound = EXACT.divide(unit, Decimal(2)) if to.rounding == "nearest" else unit
        said = "; ".join((*notes, f"a p of zero read as p < {_plain(bound)}"))
        return Reading(math.nan, 0.0, outward(value, bound)[1], float(unit), shown, "<", said)
    low, high = rounding_interval(value, unit, to.rounding)
    if to.name in CUT_AT_ZERO and value == 0:
        said = "; ".join((*notes, "a zero may be a negative estimate cut at zero; read as an upper bound"))
        return Reading(math.nan, -math.inf, high, float(unit), shown, "<", said)
    return Reading(number, low, high, float(unit), shown, "=", "; ".join(notes))


def _bound(value: Decimal, decimals: int, relation: str, notes: tuple[str, ...], to: Setting) -> Reading:
    """The reading of ``< value`` or ``> value``: everything between it and the end of the support."""
    comparator = "<" if any(sign in relation for sign in "<≤≦⩽") else ">"
    unit = Decimal(1).scaleb(-decimals)
    if comparator == "<" and to.name in PROBABILITIES and value == 0:
        notes = (*notes, f"no p is below zero; read as p < {_plain(unit)}")
        value = unit
    if beyond := _beyond(value, decimals, to):
        return refuse(beyond)
    below, above = outward(value, value)
    low, high = (to.quantity.low, above) if comparator == "<" else (below, to.quantity.high)
    if low > high:
        return refuse(f"no {to.quantity.symbol} is {relation} {value:f}")
    return Reading(math.nan, low, high, float(unit), max(decimals, 0), comparator, "; ".join(notes))


def _tiny(number: str, notes: tuple[str, ...], to: Setting) -> Reading:
    """A p too close to zero to be computed with: all that is kept of it is that it is closer than some."""
    return _bound(
        _LEAST, 300, "<", (*notes, f"{number} read as p < {_LEAST:e}, the least that is computed with"), to
    )


_LEAST = Decimal("1E-300")
_RELATION = re.compile(r"<=|>=|=<|=>|[<>=≤≥≦≧⩽⩾]")
_NOT_SIGNIFICANT = re.compile(r"n\. ?s\.?|ns|not significant|non-? ?significant|insignificant", re.IGNORECASE)
_MARKS = re.compile(
    r"(?P<number>.*[0-9%⁰¹²³⁴⁵⁶⁷⁸⁹])"
    r"(?P<marks>(?: ?(?:[*†‡§¶#‖]|\^[a-z0-9]{1,2}|[ᵃᵇᶜᵈᵉᶠᵍʰ]))+"
    r"|(?<=[0-9])[⁰¹²³⁴⁵⁶⁷⁸⁹]+| ?[a-d](?:, ?[a-d])*|[.,;])"
)
_TAILS = re.compile(r"(one|two|1|2)[- ]?(?:tailed|sided|tails?)?", re.IGNORECASE)


def _without_marks(text: str) -> tuple[str, tuple[str, ...]]:
    """The number without trailing footnote marks or punctuation, and a note of what was left out."""
    found = _MARKS.fullmatch(text)
    if found is None:
        return text, ()
    return found["number"].strip(), (f"{found['marks'].strip()} after the number left out",)


def _read_text(raw: str, to: Setting) -> Reading:
    """A cell of text: a label and a relation sign where there is one, then the number."""
    text = tidy(raw)
    if is_missing(text, to.missing):
        return BLANK
    if len(text) > LONGEST:
        return refuse(f"{quoted(text)} is not a number")
    notes: tuple[str, ...] = ()
    if text.startswith("'"):
        text, notes = text[1:].strip(), ("a leading apostrophe left out",)
    found = _RELATION.search(text)
    if found is None:
        return _read_printed(text, text, "=", notes, to)
    label, relation, number = text[: found.start()].strip(), found.group(), text[found.end() :].strip()
    if "(" in label:
        return refuse(f"{quoted(text)} is a whole statistic; put it in the column reported")
    if _RELATION.search(number):
        return refuse(f"{quoted(text)} has two relation signs; keep one bound")
    if label and not names(label, to.quantity):
        column = f"{to.name} ({to.quantity.symbol})"
        return refuse(f"{quoted(text)} names {quoted(label)}, but the column holds {column}")
    if not label and relation == "=" and re.match(r"[-+]?[0-9.,·]", number) is None:
        return refuse(f"{quoted(text)} looks like a formula saved as text; type its result")
    if label:
        notes = (*notes, f"{label} = left out" if relation == "=" else f"{label} left out")
    return _read_printed(text, number, relation, notes, to)


def _read_printed(text: str, number: str, relation: str, notes: tuple[str, ...], to: Setting) -> Reading:
    """The number after its relation sign; ``text`` is the whole cell, for messages."""
    if _NOT_SIGNIFICANT.fullmatch(number):
        if to.name not in PROBABILITIES or relation != "=":
            return refuse(f"{quoted(text)} gives no number; write it in the column of the p value")
        level = Decimal(repr(to.alpha))
        said = "; ".join((*notes, f"{number} read as p > {_plain(level)}"))
        return Reading(math.nan, outward(level, level)[0], 1.0, 0.0, -1, ">", said)
    if to.name == "tails" and (word := _TAILS.fullmatch(number)) is not None:
        number = {"one": "1", "two": "2"}.get(word[1].casefold(), word[1])
    percent = False
    digits = read_digits(number, to.mark, whole=to.whole)
    if digits is NOT_DIGITS:
        bare, marks = _without_marks(number)
        percent = bare.endswith("%")
        digits = read_digits(bare.removesuffix("%").strip(), to.mark, whole=to.whole)
        notes = (*notes, *marks)
    if digits.tiny and to.name in PROBABILITIES and not any(sign in relation for sign in ">≥≧⩾"):
        return _tiny(number, (*notes, *digits.notes), to)
    if digits.value is None:
        return refuse(f"{quoted(text)}: {digits.problem or why_no_number(number)}")
    value, decimals = digits.value, digits.decimals
    notes = (*notes, *digits.notes)
    if percent and not to.proportion:
        return refuse(f"{quoted(text)}: {_PERCENT}")
    if percent or _is_percent_level(value, to):
        value, decimals = EXACT.scaleb(value, Decimal(-2)), decimals + 2
        notes = (*notes, f"a percentage, read as {value:f}")
    elif digits.notes:
        notes = (*notes, f"read as {value:f}")
    if relation != "=":
        return _bound(value, decimals, relation, notes, to)
    if to.decimals is not None and 0 <= decimals < to.decimals and not to.whole:
        decimals, notes = to.decimals, (*notes, f"{to.decimals} decimals by the codebook")
    return _printed(value, decimals, notes, to)


def _is_percent_level(value: Decimal, to: Setting) -> bool:
    """Whether a confidence level was written as 95 rather than 0.95."""
    return to.name == "confidence_level" and 50 <= value < 100


def _computed(number: float, shown: Shown, to: Setting) -> Reading:
    """A stored number with more digits than anyone types: computed, known as well as it is shown."""
    if shown.display in (Display.NUMBER, Display.PERCENT) and shown.least == shown.most:
        unit = Decimal(1).scaleb(-shown.most - (2 if shown.display is Display.PERCENT else 0))
        low, high = rounding_interval(Decimal(repr(number)), unit, to.rounding)
        said = f"a computed number shown with {shown.most} decimals; taken as known to these"
        return Reading(number, low, high, float(unit), -1, "=", said)
    step = math.ulp(number)
    low, high = number - 4 * step, number + 4 * step
    return Reading(number, low, high, step, -1, "=", "a computed number; taken as unrounded")


def _read_stored(raw: int | float, number_format: str | None, to: Setting) -> Reading:
    """A number cell: its format tells the printed decimals, or else its own digits do."""
    if abs(raw) > 1e300:
        return refuse("beyond the range of floating point numbers")
    if math.isnan(raw):
        return BLANK
    text = shortest(raw)
    if text in to.missing:
        return BLANK
    if to.name in PROBABILITIES and 0 < raw < _LEAST:
        return _tiny(repr(raw), (), to)
    shown = shown_by(number_format, float(raw))
    if shown.display is Display.DATE:
        return refuse(f"{text} is shown as a date: {DATE_ADVICE}")
    value = Decimal(text)
    if shown.display is Display.PERCENT and not to.proportion:
        return refuse(f"{EXACT.scaleb(value, Decimal(2)):f}%: {_PERCENT}")
    digits = EXACT.normalize(value).as_tuple()
    held = max(0, -int(digits.exponent)) if value else 0
    if to.whole and held == 0:
        return _printed(value, 0, (), to)
    if isinstance(raw, float) and len(digits.digits) > TYPED_DIGITS:
        beyond = _beyond(value, 0, to)
        return refuse(beyond) if beyond else _computed(raw, shown, to)
    places = held
    notes: tuple[str, ...] = ()
    if shown.display is Display.NUMBER:
        places = max(held, shown.least)
        if held > shown.most:
            notes = (f"the cell holds {text} and shows {shown.most} decimals; read as held",)
    elif shown.display is Display.PERCENT:
        places = max(held, shown.least + 2)
    elif shown.display is Display.SCIENTIFIC and value:
        places = max(held, shown.least - value.adjusted())
    if to.decimals is not None and places < to.decimals:
        places, notes = to.decimals, (*notes, f"{to.decimals} decimals by the codebook")
    if _is_percent_level(value, to):
        value, places = EXACT.scaleb(value, Decimal(-2)), places + 2
        notes = (*notes, f"a percentage, read as {value:f}")
    return _printed(value, places, notes, to)


def read_number(
    raw: object,
    quantity: Quantity,
    *,
    decimal_mark: str = ".",
    rounding: str = "nearest",
    missing: frozenset[str] = frozenset(),
    decimals: int | None = None,
    number_format: str | None = None,
    alpha: float = 0.05,
) -> Reading:
    """Read one cell as the printed value of ``quantity``.

    Parameters
    ----------
    raw : text, a stored number, a date, None, UncachedFormula or CellError; anything else is refused.
    decimal_mark : "." or ",".
    rounding : one of ROUNDINGS: how the article cut its decimals.
    missing : codes that mean blank besides the common ones, each made by ``reading.spelled_missing``.
    decimals : printed decimals by the codebook, for cells that lost trailing zeros.
    number_format : the spreadsheet's format code, for stored numbers.
    alpha : the level meant by "ns".

    Returns
    -------
    A Reading; its ``problem`` says why a cell was refused. No cell raises.
    """
    return read_cell(raw, Setting(quantity, decimal_mark, rounding, missing, alpha, decimals), number_format)


def read_cell(raw: object, to: Setting, number_format: str | None = None) -> Reading:
    """``read_number`` with its settings in one."""
    if raw is None:
        return BLANK
    if isinstance(raw, str):
        return _read_text(raw, to)
    if isinstance(raw, UncachedFormula):
        advice = "open, recalculate and save the workbook"
        return refuse(f"the formula {quoted(raw.formula)} has no stored result; {advice}")
    if isinstance(raw, CellError):
        if spelled_missing(raw.code) in to.missing:
            return BLANK
        return refuse(f"the cell shows {quoted(raw.code)}; mend the formula or clear the cell")
    if isinstance(raw, (bool, np.bool_)):
        return refuse("the cell holds TRUE or FALSE, not a number")
    if isinstance(raw, (datetime.date, datetime.time, datetime.timedelta, np.datetime64, np.timedelta64)):
        return refuse(f"the cell holds a date or time: {DATE_ADVICE}")
    if isinstance(raw, Decimal):
        return _read_text(f"{raw:f}", replace(to, mark="."))
    if isinstance(raw, np.integer):
        return _read_stored(int(raw), number_format, to)
    if isinstance(raw, np.floating) and not isinstance(raw, float):
        raw = float(shortest(raw))
    if isinstance(raw, (int, float)):
        return _read_stored(raw, number_format, to)
    return refuse(f"{quoted(raw)} is not a number")
