"""Where a reported number stands, and how it was read."""

from __future__ import annotations

from extractor.table import ReportedTable


def understood(table: ReportedTable, quantity: str, group: int, position: int) -> str:
    """How a cell was read, where that was not plain; ``group`` counts from 1, 0 is the whole row."""
    numbers = table.numbers.get((quantity, group or None))
    return "" if numbers is None else str(numbers.understood[position])


def reading_notes(table: ReportedTable) -> list[str]:
    """What was noticed while reading, in words: about headings first, then about cells of words."""
    remarks = table.settings.get("understood", ())
    return [*table.notes, *(f"{cells}: {message}" for _, cells, message in remarks)]
