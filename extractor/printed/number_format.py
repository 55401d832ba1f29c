"""What a spreadsheet's number format shows of a number: how many decimals, a percentage, a date.

A workbook stores 5.1 whether the cell shows 5.1 or 5.10; the printed decimals survive only in the format
code. The grammar of the codes is that of SpreadsheetML (ECMA-376 Part 1, section 18.8.31). A code that cannot
be decided is answered with UNDECIDED, never with a guess.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from enum import Enum
from functools import lru_cache


class Display(Enum):
    """What kind of thing the cell shows."""

    GENERAL = "general"
    NUMBER = "number"
    PERCENT = "percent"
    SCIENTIFIC = "scientific"
    DATE = "date"
    UNDECIDED = "undecided"


@dataclass(frozen=True, slots=True)
class Shown:
    """How a format shows a number.

    least, most : decimals shown always and at most (of the percentage, or of the mantissa, where it is one).
    They differ where a code has optional digits, such as ``0.0##``.
    """

    display: Display
    least: int = 0
    most: int = 0


GENERAL = Shown(Display.GENERAL)
UNDECIDED = Shown(Display.UNDECIDED)
DATE = Shown(Display.DATE)

_LONGEST = 255
"""Longer codes are not what a spreadsheet program lets anyone type (common practice, no source)."""

# One alternative per kind of token; the order matters, literals first.
_TOKEN = re.compile(
    r'(?P<literal>"[^"]*"?|\\.|[_*].)'
    r"|(?P<elapsed>\[(?:h+|m+|s+)\])"
    r"|(?P<condition>\[[<>=][^\]]*\])"
    r"|(?P<bracket>\[[^\]]*\])"
    r"|(?P<general>General)"
    r"|(?P<date>AM/PM|A/P|[ymdhsbg])"
    r"|(?P<exponent>E[+-])"
    r"|(?P<digit>[0#?])"
    r"|(?P<sign>[.,%/@])"
    r"|(?P<other>.)",
    re.IGNORECASE | re.DOTALL,
)


def _sections(code: str) -> Iterator[str]:
    """The parts of a code between semicolons that are neither quoted nor escaped."""
    start = 0
    for token in re.finditer(r'"[^"]*"?|\\.|[_*].|\[[^\]]*\]|;', code, re.DOTALL):
        if token.group() == ";":
            yield code[start : token.start()]
            start = token.end()
    yield code[start:]


def _section(code: str) -> Shown:
    """How one section shows a number."""
    shape = ""  # one letter a token: 0 # ? . , % E / and g(eneral)
    for token in _TOKEN.finditer(code):
        kind = token.lastgroup
        if kind in ("date", "elapsed"):
            return DATE
        if kind == "general" or token.group() == "@":
            shape += "g"
        elif kind == "exponent":
            shape += "E"
        elif kind in ("digit", "sign"):
            shape += token.group()
    if shape == "g":
        return GENERAL
    found = re.fullmatch(r"[0#?]*(?:,[0#?]+)*(?:\.(?P<decimals>[0#?]*))?(?P<tail>%|E[0#?]+)?", shape)
    if found is None or not re.search("[0#?]", shape):
        return UNDECIDED
    decimals = found["decimals"] or ""
    tail = found["tail"] or ""
    display = Display.PERCENT if tail == "%" else Display.SCIENTIFIC if tail else Display.NUMBER
    return Shown(display, decimals.count("0"), len(decimals))


@lru_cache(maxsize=4096)
def _parse(code: str) -> tuple[tuple[Shown, ...], bool]:
    """The sections of a code, and whether conditions choose among them."""
    sections = list(_sections(code))
    conditional = any(token.lastgroup == "condition" for text in sections for token in _TOKEN.finditer(text))
    return tuple(_section(text) for text in sections), conditional


def shown_by(code: str | None, value: float) -> Shown:
    """How the format ``code`` shows ``value``.

    Parameters
    ----------
    code : a SpreadsheetML format code such as ``0.00``, ``0.0%`` or ``d-mmm``; None and "" mean ``General``.
    value : the stored number; codes have sections for positive, negative and zero values.
    """
    if not code:
        return GENERAL
    if len(code) > _LONGEST:
        return UNDECIDED
    sections, conditional = _parse(code)
    numeric = sections[:3]
    if conditional:
        return numeric[0] if len(set(numeric)) == 1 else UNDECIDED
    if value < 0 and len(numeric) > 1:
        return numeric[1]
    if value == 0 and len(numeric) > 2:
        return numeric[2]
    return numeric[0]
