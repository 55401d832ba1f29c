"""Authors' replies, read back as decisions: a corrected value for a cell, with its source."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import pandas as pd
from openpyxl.utils import get_column_letter

from extractor import decisions
from extractor.asking.letters import LOG_COLUMNS
from extractor.codebook import Codebook, normalised
from extractor.contrast import contrast_weights
from extractor.errors import UnreadableInput
from extractor.printed.reading import is_missing, quoted, tidy
from extractor.printed.reported import read_number
from extractor.quantities import VOCABULARY
from extractor.source.grid import Grid, heading_text, is_blank
from extractor.source.reader import read_grid
from extractor.table import ReportedTable
from extractor.words import listed

_NEEDED = ("row", "cell", "value")
_DECLINED = re.compile(r"(?i)(no longer |not )?(available|known|reported)|lost|unavailable|declined|\?")
_HIGHER = re.compile(r"(?i)(?:the )?(?:group|condition) (\d{1,2})(?: had the higher mean)?")


@dataclass(frozen=True)
class Replies:
    """A log of replies.

    decisions : corrections with their source, in the columns of the sheet ``decisions``.
    words : (row, cell, reply) for coded words, which are typed into the sheet itself, and directions not understood.
    declined : (row, cell) of numbers that the authors could not give. waiting : lines without a reply.
    new_columns : headings that the sheet lacks; the decisions add them to the reading, not to the file.
    """

    decisions: pd.DataFrame
    words: list[tuple[int, str, str]]
    declined: list[tuple[int, str]]
    waiting: int
    new_columns: list[str]


def read_replies(path: str | Path, table: ReportedTable, codebook: Codebook) -> Replies:
    """Read a log, checking every reply against the quantity it is for.

    Parameters
    ----------
    table : the sheet the letters were about.

    Raises
    ------
    UnreadableInput : the file cannot be read, lacks a column, names a row or cell that is not there, or a value is no
        number; the message names the cell.
    """
    grid = read_grid(path, lambda heading: normalised(heading) in LOG_COLUMNS, ("replies",))
    at = _columns(grid)
    known = set(table.row_numbers.tolist())
    lines: list[dict[str, object]] = []
    words: list[tuple[int, str, str]] = []
    declined: list[tuple[int, str]] = []
    missing: dict[str, None] = {}
    waiting = 0
    for line in range(len(grid.row_numbers)):
        reply = _Reply(grid, at, line)
        if is_blank(reply.raw("value")):
            waiting += 1
            continue
        row, cell = reply.row(known), reply.text("cell")
        value = reply.text("value")
        heading = cell.partition(" [")[0]
        meaning = codebook.meaning(heading)
        # a minus sign is an answer here, and a code for a missing number elsewhere
        if meaning == decisions.DIRECTION and (sign := _sign(value, table, row)):
            lines.append(_decision(reply, row, cell, sign))
            continue
        if is_missing(tidy(value), codebook.missing) or _DECLINED.fullmatch(value):
            declined.append((row, cell))
            continue
        if isinstance(meaning, str):
            words.append((row, heading, value))
            continue
        if meaning is None:
            raise reply.fault("cell", f"{quoted(cell)} is no heading of the sheet or name of a quantity")
        reading = read_number(
            reply.raw("value"),
            VOCABULARY[meaning[0]],
            decimal_mark=codebook.decimal_mark,
            missing=codebook.missing,
        )
        if not reading.given:
            raise reply.fault("value", reading.problem or f"{quoted(value)} is no number")
        if meaning not in table.numbers:
            missing[heading] = None
        lines.append(_decision(reply, row, cell, value))
    frame = pd.DataFrame(lines, columns=list(decisions.COLUMNS))
    return Replies(frame, words, declined, waiting, list(missing))


def _sign(value: str, table: ReportedTable, row: int) -> str:
    """The direction that an answer such as "group 2" or "+" gives the coded contrast; "" where it gives none."""
    text = tidy(value)
    if text in ("+", "-"):
        return text
    named = _HIGHER.fullmatch(text)
    contrast = str(table.fact("contrast")[table.row_numbers.tolist().index(row)])
    try:
        weights, _ = contrast_weights(contrast, max(map(int, re.findall(r"\d+", contrast)), default=2))
    except ValueError:
        return ""
    if named is None or int(named[1]) > len(weights):
        return ""
    weight = weights[int(named[1]) - 1]
    return "+" if weight > 0 else "-" if weight < 0 else ""


def _decision(reply: _Reply, row: int, cell: str, value: str) -> dict[str, object]:
    study, asked = reply.text("study"), reply.text("asked")
    why = "; ".join(filter(None, (f"asked for: {asked}" if asked else "", reply.text("remark"))))
    return {
        "row": row,
        "cell": cell,
        "decision": decisions.CORRECT,
        "value": value,
        "source": reply.text("source") or "reply of the authors",
        "by": reply.text("by") or (f"authors of {study}" if study else "the authors"),
        "on": reply.text("on"),
        "why": why or "author query",
    }


def _columns(grid: Grid) -> Mapping[str, int]:
    at = {normalised(heading): index for index, heading in enumerate(grid.headings)}
    lacking = [name for name in _NEEDED if name not in at]
    if lacking:
        raise UnreadableInput(f"{grid.where}, row {grid.header_row}: there is no column {listed(lacking)}")
    if grid.ragged:
        raise UnreadableInput(
            f"{grid.where}, row {min(grid.ragged)}: more cells than headings; quote the commas"
        )
    return at


class _Reply:
    """One line of the log."""

    def __init__(self, grid: Grid, at: Mapping[str, int], line: int) -> None:
        self.grid, self.at, self.line = grid, at, line

    def raw(self, name: str) -> object:
        """A cell as it stands; None where there is no such column."""
        return self.grid.columns[self.at[name]][self.line] if name in self.at else None

    def text(self, name: str) -> str:
        """A cell as text."""
        raw = self.raw(name)
        return "" if raw is None or is_blank(raw) else heading_text(raw).strip()

    def row(self, known: set[int]) -> int:
        """The row of the coded sheet."""
        text = self.text("row")
        if not re.fullmatch(r"[1-9][0-9]*", text):
            raise self.fault("row", f"{quoted(text)} is no row number of the coded sheet")
        if int(text) not in known:
            raise self.fault("row", f"the coded sheet has no row {text}")
        return int(text)

    def fault(self, column: str, problem: str) -> UnreadableInput:
        """The error about one cell of the line."""
        spot = f"{get_column_letter(self.at[column] + 1)}{self.grid.row_numbers[self.line]}"
        return UnreadableInput(f"{self.grid.where}, cell {spot}: {problem}")
