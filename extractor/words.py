"""Numbers and lists in sentences."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

from extractor.table import ReportedTable, Variable

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray


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
    n = table.numbers[variable]
    if not n.given[position]:
        return ""
    ends = float(n.low[position]), float(n.high[position])
    return _printed(n.comparator[position], float(n.value[position]), int(n.decimals[position]), *ends)


def printed_texts(table: ReportedTable, variable: Variable, positions: NDArray[np.intp]) -> list[str]:
    """Cells of a column as they were printed, as far as they were understood."""
    numbers = table.numbers[variable]
    columns = (numbers.comparator, numbers.value, numbers.decimals, numbers.low, numbers.high)
    cells = zip(*(column[positions].tolist() for column in columns), strict=True)
    given = numbers.given[positions].tolist()
    return [_printed(*cell) if there else "" for there, cell in zip(given, cells, strict=True)]


def _printed(comparator: str, value: float, decimals: int, low: float, high: float) -> str:
    if comparator in ("<", ">"):
        return f"{comparator} {plain(high if comparator == '<' else low)}"
    return f"{value:.{decimals}f}" if 0 <= decimals <= 12 else f"{value:g}"
