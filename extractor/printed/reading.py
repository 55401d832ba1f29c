"""What a cell was read as, the interval of numbers that print alike, and the readers' text helpers."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from decimal import Context, Decimal
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import numpy as np

ROUNDINGS = ("nearest", "truncated", "either")
EXACT = Context(prec=400)
"""Wide enough for any sum of a printed number and its rounding unit."""

_NAN = math.nan


@dataclass(frozen=True, slots=True)
class Reading:
    """One cell, read.

    value : the printed number; NaN where blank, refused or only a bound.
    low, high : closed interval of numbers that print so; NaN where blank or refused.
    unit : one unit in the last printed place; 0 for exact numbers; NaN where blank or refused.
    decimals : printed decimals; -1 where unknown.
    comparator : "=", "<", ">", or "" where nothing was read.
    understood : how the cell was read, where that was not plain.
    problem : why the cell was refused.
    """

    value: float = _NAN
    low: float = _NAN
    high: float = _NAN
    unit: float = _NAN
    decimals: int = -1
    comparator: str = ""
    understood: str = ""
    problem: str = ""

    @property
    def given(self) -> bool:
        """Whether a number or a bound was read."""
        return self.comparator != ""

    def __str__(self) -> str:
        """The reading as printed: ``4.31``, ``< 0.05``, ``blank`` or the problem."""
        if not self.given:
            return self.problem or "blank"
        if self.comparator == "=":
            return f"{self.value:.12g}"
        return f"{self.comparator} {self.high if self.comparator == '<' else self.low:.12g}"


BLANK = Reading()


def refuse(problem: str) -> Reading:
    """A cell that could not be understood."""
    return Reading(problem=problem)


def outward(low: Decimal, high: Decimal) -> tuple[float, float]:
    """Floats just outside a decimal interval; zero, which floats hold exactly, stays."""
    return (
        math.nextafter(float(low), -math.inf) if low else 0.0,
        math.nextafter(float(high), math.inf) if high else 0.0,
    )


def rounding_interval(value: Decimal, unit: Decimal, rounding: str) -> tuple[float, float]:
    """All numbers that print as ``value`` when the last printed place is ``unit``.

    ``nearest`` allows half a unit either way, ties included. ``truncated`` means that digits were cut off, so
    the number lies further from zero by up to a unit. ``either`` is the union of both.
    """
    half = EXACT.divide(unit, Decimal(2))
    near = (EXACT.subtract(value, half), EXACT.add(value, half))
    if rounding == "nearest":
        return outward(*near)
    cut = (
        EXACT.subtract(value, unit) if value <= 0 else value,
        EXACT.add(value, unit) if value >= 0 else value,
    )
    if rounding == "truncated":
        return outward(*cut)
    return outward(min(near[0], cut[0]), max(near[1], cut[1]))


_SPACES = re.compile(r"[\s\u00a0\u1680\u2000-\u200a\u202f\u205f\u3000]+")
_UNSEEN = re.compile("[\u00ad\u200b-\u200f\u2060\ufeff]")
_DASHES = str.maketrans(dict.fromkeys("−‐‑‒–—―﹣－", "-"))


def tidy(text: str) -> str:
    """Text with every kind of space as one space, every minus or dash as ``-``, and no invisible marks."""
    return _SPACES.sub(" ", _UNSEEN.sub("", text)).translate(_DASHES).strip()


def quoted(text: object, most: int = 40) -> str:
    """A cell's text on one line in quotation marks, shortened, for messages."""
    shown = str(text)[: most + 1]
    if not shown.isprintable():
        shown = "".join(c if c.isprintable() else " " for c in shown)
    return f"'{shown}'" if len(shown) <= most else f"'{shown[: most - 1]}…'"


def shortest(number: int | float | np.floating) -> str:
    """The shortest decimal text that stands for a stored number: ``5`` for 5.0, ``5.1`` for 5.1."""
    if isinstance(number, int):
        return str(number)
    import numpy as np  # the command line starts without it

    text = np.format_float_positional(number, unique=True, trim="-")
    return "0" if text == "-0" else text


def spelled_missing(code: object) -> str:
    """A missing code as cells are compared with it: lower case, one kind of dash, -99.0 as ``-99``."""
    if isinstance(code, (int, float)) and not isinstance(code, bool):
        return shortest(code) if math.isfinite(code) else str(code)
    return tidy(str(code)).casefold()


def is_missing(text: str, missing: frozenset[str]) -> bool:
    """Whether a tidy text means blank: empty, dashes, NA in its common spellings, or one of ``missing``."""
    folded = text.casefold()
    return not folded.strip("-") or folded in _MISSING or folded in missing


_MISSING = frozenset({"na", "n/a", "n.a.", "nan"})
