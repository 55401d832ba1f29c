"""What a run records of its cells, row by row, put together apart from the writing of it."""

from __future__ import annotations

import json

import numpy as np

from extractor.runs.recorded import recorded_columns
from extractor.table import ReportedTable


def recorded_cells(table: ReportedTable) -> list[dict[str, str]]:
    """For every row its cells that were understood, heading with address -> text; blanks are left out.

    Corrected cells hold their corrected number; the note of the decision says what was printed.
    """
    found: list[dict[str, str]] = [{} for _ in range(table.rows)]
    for column in recorded_columns(table, slice(0, table.rows)):
        for at in np.flatnonzero(column.given).tolist():
            found[at][f"{column.before}{table.row_numbers[at]}]"] = json.loads(column.texts[at])
    return found
