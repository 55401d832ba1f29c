"""Numbers and lists in sentences."""

from __future__ import annotations

import math
from collections.abc import Sequence

from extractor.table import ReportedTable, Variable


def plain(value: float) -> str:
    """A number with four significant digits, never in powers of ten where a reader expects none."""
    if not math.isfinite(value):
        return "any value"
    if value != 0 and (abs(value) < 1e-4 or abs(value) >= 1e7):
        return f"{value:.3g}"
    digits = max(0, 3 - math.floor(math.log10(abs(value)))) if value else 0
    text = f"{value:.{min(digits, 8)}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def listed(words: Sequence[str]) -> str:
    """ "a", "a and b", "a, b and c"."""
    return " and ".join(filter(None, [", ".join(words[:-1]), *words[-1:]]))


def printed_text(table: ReportedTable, variable: Variable, position: int) -> str:
    """A cell as it was printed, as far as it was understood."""
    numbers = table.numbers[variable]
    if not numbers.given[position]:
        return ""
    decimals = int(numbers.decimals[position])
    comparator = str(numbers.comparator[position])
    if comparator in ("<", ">"):
        bound = numbers.high[position] if comparator == "<" else numbers.low[position]
        return f"{comparator} {plain(float(bound))}"
    value = float(numbers.value[position])
    return f"{value:.{decimals}f}" if 0 <= decimals <= 12 else f"{value:g}"
