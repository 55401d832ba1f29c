"""Rules a codebook's tables are held to. Each breach names file, line, key and the nearest known word."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Mapping

from extractor.errors import InvalidCodebook
from extractor.printed.reading import quoted
from extractor.quantities import close_matches

MOST_WORDS = 200
"""Headings of one key; each is compared with every column of a sheet."""
Key = tuple[str, ...]
"""Where a value stands: its tables and its own key, such as ("assume", "correlation", "by")."""


def nearest(word: str, known: Iterable[str]) -> str:
    """``; did you mean ...?`` or nothing."""
    near = close_matches(word, known)
    return f"; did you mean {' or '.join(near)}?" if near else ""


class Checker:
    """Takes values out of one codebook and refuses what is not as it should be.

    Every method raises InvalidCodebook, which names the line where it can be found by searching the text.
    """

    def __init__(self, text: str, name: str) -> None:
        self.lines = text.splitlines()
        self.name = name

    def line_of(self, key: Key) -> int:
        """The line of a key, or of its table where the key is missing; 0 where neither is found."""
        own = re.compile(rf'\s*["\']?{re.escape(key[-1])}["\']?\s*[=.]')
        table = re.compile(rf"\s*\[\s*{re.escape('.'.join(key[:-1]))}\s*\]")
        whole = re.compile(rf"\s*\[\s*{re.escape('.'.join(key))}\s*[.\]]")
        inside, header = len(key) == 1, 0
        for number, line in enumerate(self.lines, 1):
            if whole.match(line) or (inside and own.match(line)):
                return number
            if line.lstrip().startswith("["):
                inside = len(key) > 1 and table.match(line) is not None
                header = number if inside else header
        return header

    def fail(self, key: Key, message: str) -> InvalidCodebook:
        """The error to raise for ``key``."""
        line = self.line_of(key)
        where = f"codebook {quoted(self.name, 200)}" + (f", line {line}" if line else "")
        return InvalidCodebook(f"{where}: {quoted('.'.join(key), 80)} {message}")

    def known(self, table: Mapping[str, object], allowed: Iterable[str], at: Key = ()) -> None:
        """Refuse keys that are not allowed."""
        allowed = list(allowed)
        for key in table:
            if key not in allowed:
                listed = f"; known are {', '.join(allowed)}" if len(allowed) <= 16 else ""
                raise self.fail((*at, key), f"is not known{nearest(key, allowed) or listed}")

    def table(self, parent: Mapping[str, object], *key: str) -> dict[str, object]:
        """A sub-table; empty where there is none."""
        value = parent.get(key[-1], {})
        if not isinstance(value, dict):
            raise self.fail(key, f"must be a table, written [{'.'.join(key)}]")
        return value

    def words(self, key: Key, value: object) -> list[str]:
        """A text or a list of texts."""
        listed = value if isinstance(value, list) else [value]
        if len(listed) > MOST_WORDS:
            raise self.fail(key, f"lists {len(listed)} headings; the most is {MOST_WORDS}")
        return [
            self.word(key, word, "must be a text or a list of texts, none of them empty") for word in listed
        ]

    def word(self, key: Key, value: object, rule: str = "must be a text that is not empty") -> str:
        """One text that is not empty."""
        if not isinstance(value, str) or not value.strip():
            raise self.fail(key, rule)
        return value

    def choice(self, key: Key, value: object, allowed: Iterable[str]) -> str:
        """One of several words."""
        allowed = list(allowed)
        if not isinstance(value, str) or value not in allowed:
            listed = " or ".join(f'"{word}"' for word in allowed)
            raise self.fail(
                key, f"must be {listed}{nearest(value, allowed) if isinstance(value, str) else ''}"
            )
        return value

    def number(self, key: Key, value: object, low: float = -math.inf, high: float = math.inf) -> float:
        """One finite number within bounds."""
        if isinstance(value, bool) or not isinstance(value, (int, float)) or not -1e300 < value < 1e300:
            raise self.fail(key, "must be a number")
        if not low <= value <= high:
            raise self.fail(key, f"must be from {low:g} to {high:g}")
        return float(value)

    def whole(self, key: Key, value: object, low: int, high: int) -> int:
        """One whole number within bounds."""
        if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
            raise self.fail(key, f"must be a whole number from {low} to {high}")
        return value
