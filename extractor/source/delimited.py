"""Delimited text (RFC 4180 and its relatives) -> raw cells: encodings, delimiters, record numbers."""

from __future__ import annotations

import codecs
import csv
import io
import re
from collections.abc import Callable

from extractor.errors import UnreadableInput
from extractor.source.grid import Grid, is_blank, one_below_the_other
from extractor.source.pieces import grids_of, records

Known = Callable[[str], bool]
"""Whether a heading is understood."""

DECLARED = re.compile(r"sep=([!#-/:-@\[-`{-~\t])\r?\n")
"""A first line by which spreadsheet programs tell each other the delimiter."""
HEAD = 1 << 20
"""Letters looked at to find the delimiter."""

_PIECE = 1 << 24
"""Letters that are read at once: of all but the largest sheets everything."""
NOT_UTF8 = "the text is not UTF-8; it was read as {}, check letters beyond a to z"

BOMS = (
    (codecs.BOM_UTF8, "utf-8-sig"),
    (codecs.BOM_UTF32_LE, "utf-32"),
    (codecs.BOM_UTF32_BE, "utf-32"),
    (codecs.BOM_UTF16_LE, "utf-16"),
    (codecs.BOM_UTF16_BE, "utf-16"),
)


def _decode(content: bytes, name: str) -> tuple[str, list[str]]:
    """Text and notes: UTF-8, UTF-16 and UTF-32 by their marks, else UTF-8, else one byte a letter."""
    for mark, encoding in BOMS:
        if content.startswith(mark):
            try:
                return content.decode(encoding), []
            except UnicodeDecodeError as fault:
                raise UnreadableInput(
                    f"{name} is damaged {encoding.upper()} text; save it as UTF-8"
                ) from fault
    try:
        return content.decode("utf-8"), []
    except UnicodeDecodeError:
        pass
    try:
        return content.decode("cp1252"), [NOT_UTF8.format("Windows-1252")]
    except UnicodeDecodeError:
        return content.decode("latin-1"), [NOT_UTF8.format("Latin-1")]


def delimiter_of(text: str, known: Known, suffix: str) -> str:
    """The delimiter of the file ending, else that under which the heading row has the most known headings."""
    if suffix in (".tsv", ".tab"):
        return "\t"

    def fit(delimiter: str) -> tuple[int, int]:
        try:
            first = next(
                (
                    row
                    for row in records(io.StringIO(text[:HEAD], newline=""), delimiter)
                    if not all(map(is_blank, row))
                ),
                [],
            )
        except csv.Error:
            return (0, 0)
        return sum(known(heading) for heading in first if heading.strip()), len(first)

    return max(",;\t", key=fit)


def from_text(content: bytes, name: str, suffix: str, known: Known) -> Grid:
    """The cells of delimited text. Row numbers count records, as a spreadsheet shows them."""
    if content.startswith(b"PK\x03\x04"):
        raise UnreadableInput(
            f"{name} is a workbook; only delimited text can be piped, so name the file instead"
        )
    text, notes = _decode(content, name)
    if not text.strip(" ,;\t\r\n"):
        raise UnreadableInput(f"{name} is empty; the first row must hold the headings")
    declared = DECLARED.match(text)
    if declared is not None:
        # a line by which spreadsheet programs tell each other the delimiter; they do not show it as a row
        text, delimiter = text[declared.end() :], declared[1]
    else:
        delimiter = delimiter_of(text, known, suffix)
    parts = list(grids_of(io.StringIO(text, newline=""), delimiter, name, _PIECE))
    grid = parts[0] if len(parts) == 1 else one_below_the_other(parts)
    grid.notes += notes
    return grid
