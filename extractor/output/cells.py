"""Where a reported number stands, and how it was read."""

from __future__ import annotations

from extractor.table import ReportedTable


def address(table: ReportedTable, quantity: str, group: int, position: int) -> str:
    """The heading and address of a printed number, such as ``F [H12]``; "" where it has no column of its own.

    Parameters
    ----------
    group : counted from 1; 0 for a quantity of the whole row.
    position : index of the row in the table.
    """
    numbers = table.numbers.get((quantity, group or None))
    return "" if numbers is None else numbers.place.at(int(table.row_numbers[position]))


def understood(table: ReportedTable, quantity: str, group: int, position: int) -> str:
    """How a cell was read, where that was not plain; parameters as for ``address``."""
    numbers = table.numbers.get((quantity, group or None))
    return "" if numbers is None else str(numbers.understood[position])


def reading_notes(table: ReportedTable) -> list[str]:
    """What was noticed while reading, in words: about headings first, then about cells of words."""
    remarks = table.settings.get("understood", ())
    return [*table.notes, *(f"{cells}: {message}" for _, cells, message in remarks)]
