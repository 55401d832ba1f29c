"""Digits with their marks -> a decimal number: decimal marks, thousands separators, powers of ten.

What cannot be decided from the digits alone, such as ``1,234``, is refused with both readings named.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from decimal import Decimal

MOST_DIGITS = 40
"""Longer strings of digits are no printed statistic."""

_SUPERSCRIPT = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻⁺", "0123456789-+")
_NUMBER = re.compile(
    r"(?P<sign>[-+]?) ?(?P<body>[0-9](?:[0-9 .,'’·]*[0-9])?|[.,·][0-9]+)"
    r"(?:[eE](?P<exponent>[-+]?[0-9]{1,4}))?"
)
_PLAIN = {mark: re.compile(rf"-?[0-9]{{0,20}}(?:[{mark}][0-9]{{1,20}}|(?<=[0-9]))") for mark in ".,"}
"""Most numbers: digits with the declared decimal mark at most."""
_POWER_OF_TEN = re.compile(
    r"(?P<mantissa>[-+]?[0-9.,·]+) ?(?:[×x·] ?10 ?(?:\^ ?(?P<caret>[-+]?[0-9]{1,4})"
    r"|(?P<raised>[⁻⁺]?[⁰¹²³⁴⁵⁶⁷⁸⁹]{1,4})|(?P<flat>-[0-9]{1,4}))|\* ?10 ?\^ ?(?P<star>[-+]?[0-9]{1,4}))"
)
_SPACED = re.compile(r"[0-9]{1,3}(?P<mark>[ '’])[0-9]{3}(?:(?P=mark)[0-9]{3})*(?:[.,][0-9]+)?")


@dataclass(frozen=True, slots=True)
class Digits:
    """A number as printed, or why it is none.

    value : the number; None where it was refused.
    decimals : printed decimals less the exponent: the last printed place is 10**-decimals.
    notes : how the marks were understood, where that was not plain.
    problem : why the text was refused; "" where it was read or where it is no number at all.
    tiny : it is positive and too close to zero to be computed with.
    """

    value: Decimal | None
    decimals: int = 0
    notes: tuple[str, ...] = ()
    problem: str = ""
    tiny: bool = False


NOT_DIGITS = Digits(None)


def _ambiguous(text: str, mark: str) -> Digits:
    """The refusal of one separator before three digits."""
    joined, decimal = re.sub("[.,]", "", text), re.sub("[.,]", mark, text)
    used = "comma" if mark == "." else "point"
    both = f"the {used} may separate thousands ({joined}) or decimals ({decimal})"
    return Digits(None, problem=f"{both}; write {joined} or {decimal}")


def _one_separator(body: str, used: str, mark: str, whole: bool) -> Digits | str:
    """Body with a single point or comma: the digits with "." as decimal mark, or a refusal."""
    if used == mark:
        return body.replace(mark, ".")
    if re.fullmatch(f"[1-9][0-9]{{0,2}}[{used}][0-9]{{3}}", body):
        return body.replace(used, "") if whole else _ambiguous(body, mark)
    return body.replace(used, ".")


def _unmark(body: str, mark: str, whole: bool) -> Digits | tuple[str, tuple[str, ...]]:
    """Digits with "." as the only mark left, with notes; or a refusal."""
    notes: list[str] = []
    if re.fullmatch("[0-9]*·[0-9]+", body):
        return body.replace("·", "."), ("a raised point taken as the decimal mark",)
    if "·" in body:
        return NOT_DIGITS
    spaced = re.search("[ '’]", body)
    if spaced is not None:
        if _SPACED.fullmatch(body) is None:
            return NOT_DIGITS
        kind = "a space" if spaced.group() == " " else "an apostrophe"
        notes.append(f"{kind} taken as the thousands mark")
        body = re.sub("[ '’]", "", body)
        # a space already separates thousands, so a point or comma can only be the decimal mark
        return body.replace(",", "."), tuple(notes)
    points, commas = body.count("."), body.count(",")
    names = {".": "a point", ",": "a comma"}
    if points and commas:
        last = "." if body.rindex(".") > body.rindex(",") else ","
        first = "," if last == "." else "."
        if re.fullmatch(f"[1-9][0-9]{{0,2}}(?:[{first}][0-9]{{3}})+[{last}][0-9]+", body) is None:
            return NOT_DIGITS
        notes.append(f"{names[first]} taken as the thousands mark")
        if last != mark:
            notes.append(f"{names[last]} taken as the decimal mark")
        return body.replace(first, "").replace(last, "."), tuple(notes)
    if points + commas == 0:
        return body, ()
    used = "." if points else ","
    if points + commas > 1:
        if re.fullmatch(f"[1-9][0-9]{{0,2}}(?:[{used}][0-9]{{3}})+", body) is None:
            return NOT_DIGITS
        return body.replace(used, ""), (f"{names[used]} taken as the thousands mark",)
    plain = _one_separator(body, used, mark, whole)
    if isinstance(plain, Digits):
        return plain
    if used == mark:
        return plain, ()
    role = "decimal mark" if "." in plain else "thousands mark"
    return plain, (f"{names[used]} taken as the {role}",)


def read_digits(text: str, mark: str, *, whole: bool = False) -> Digits:
    """A printed number from its digits.

    Parameters
    ----------
    text : the number alone; minus signs and spaces already made plain ASCII.
    mark : the decimal mark the codebook declares, "." or ",". The other mark is still taken as decimal where
        no other reading exists, as in ``0,018``, and noted.
    whole : whether fractions have no meaning (a count), so that ``1,234`` can only be 1234.
    """
    if _PLAIN[mark].fullmatch(text) is not None:
        return Digits(Decimal(text.replace(",", ".")), len(text.partition(mark)[2]))
    notes: tuple[str, ...] = ()
    power = _POWER_OF_TEN.fullmatch(text)
    if power is not None:
        raised = power["caret"] or power["star"] or power["flat"] or power["raised"].translate(_SUPERSCRIPT)
        text = f"{power['mantissa']}e{raised}"
        notes = ("a power of ten",)
    found = _NUMBER.fullmatch(text)
    if found is None:
        return NOT_DIGITS
    body = found["body"]
    if len(body) > MOST_DIGITS:
        return Digits(None, problem="more digits than a printed number has")
    plain = _unmark(body, mark, whole)
    if isinstance(plain, Digits):
        return plain
    digits, marks = plain
    decimals = len(digits.partition(".")[2])
    exponent = int(found["exponent"] or 0)
    value = Decimal(f"{found['sign']}{digits}e{exponent}")
    if abs(exponent) > 300 or (value and abs(value.adjusted()) > 300):
        problem = "beyond the range of floating point numbers; write a bound instead"
        return Digits(None, notes=notes + marks, problem=problem, tiny=value > 0 and value.adjusted() < 0)
    return Digits(value, decimals - exponent, notes + marks)


_SHAPE = r"[-+]?(?:[0-9]+(?:[.,·][0-9]+)*|[.,·][0-9]+)"
_MONTH = r"(?:jan|feb|mar|apr|may|jun|jul|aug|sep|oct|nov|dec)[a-z]*\.?"
_DATE = "a date or time; spreadsheets turn entries such as 3-5 into one; type the number again in a text cell"
_REASONS: tuple[tuple[re.Pattern[str], str], ...] = tuple(
    (re.compile(pattern, re.IGNORECASE), reason)
    for pattern, reason in (
        (r"#(?:N/A|[A-Z]+/?[A-Z0-9]*[!?])", "a spreadsheet error; mend the formula or clear the cell"),
        (r"[0-9]{1,4}([-/.])[0-9]{1,2}\1[0-9]{1,4}.*", _DATE),
        (rf"[0-9]{{1,2}}[-. /]*{_MONTH}.*|{_MONTH}[-. /]*[0-9].*|[0-9]{{1,2}}:[0-9]{{2}}.*", _DATE),
        (rf"{_SHAPE} ?(?:\(.*\)|\[.*\]|±.*|\+/?-.*)", "two numbers in one cell; give each its own column"),
        (
            rf"\( ?{_SHAPE} ?\)|\[ ?{_SHAPE} ?\]",
            "a number in brackets may be a negative one or a standard deviation; write it without them",
        ),
        (rf"{_SHAPE} ?(?:-|to|\.\.+|…) ?{_SHAPE}", "a range; its ends need columns of their own"),
        (rf"{_SHAPE} ?/ ?{_SHAPE}", "a fraction or a date; write a decimal number"),
        (r"(?:[~≈≃≅]|ca?\.? ?[0-9]|about |approx).*", "an approximate number has no rounding interval"),
        (r"\*+", "stars name no number; write the bound they stand for, such as < .05"),
        (rf"{_SHAPE}[ ;]+{_SHAPE}.*", "more than one number, or marks that fit no way of writing thousands"),
        (rf"{_SHAPE}.*", "something follows the number; write the number alone"),
    )
)


def why_no_number(text: str) -> str:
    """Why a tidy text that ``read_digits`` did not take is no number, and what to write instead."""
    return next((reason for pattern, reason in _REASONS if pattern.fullmatch(text)), "not a number")
