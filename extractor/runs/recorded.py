"""What stood in the cells of a row when it was used, as text: enough to tell two runs apart."""

from __future__ import annotations

import numpy as np

from extractor.table import ReportedTable
from extractor.words import printed_text

_LABELS = frozenset({"study", "outcome", "effect", "page", "quote", "coder"})
"""Words that no effect depends on."""
_MOST_DECIMALS = 12
"""With more, a number is recorded by its own digits."""


def recorded_cells(table: ReportedTable) -> list[dict[str, str]]:
    """For every row its cells that were understood, heading with address -> text; blanks are left out.

    Corrected cells hold their corrected number; the note of the decision says what was printed.
    """
    found: list[dict[str, str]] = [{} for _ in range(table.rows)]
    rows = table.row_numbers.tolist()
    for variable, numbers in table.numbers.items():
        for position in np.flatnonzero(numbers.given).tolist():
            text = printed_text(table, variable, position)
            if numbers.decimals[position] > _MOST_DECIMALS:
                text = repr(float(numbers.value[position]))
            found[position][numbers.place.at(rows[position])] = text
    for name, words in table.facts.items():
        if name not in _LABELS:
            for position in np.flatnonzero(words != "").tolist():
                found[position][f"{name} [row {rows[position]}]"] = str(words[position])
    return found
