"""A coded sheet and its codebook -> the reported table: every cell read once, with its address.

A cell that cannot be understood says so in its own ``problem``; the row goes on. Only a source in which
nothing can be found stops the run. The sheets ``groups`` and ``decisions`` of a workbook are read elsewhere.
"""

from __future__ import annotations

import datetime
import difflib
import re
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from extractor.codebook import MOST_GROUPS, RESPONSES, Codebook, Meaning, canonical_names, normalised
from extractor.distinct import spread
from extractor.errors import UnreadableInput
from extractor.printed.apa import columns_from_text
from extractor.printed.plain import read_plain
from extractor.printed.reading import BLANK, Reading, is_missing, quoted, refuse, tidy
from extractor.printed.reported import (
    DATE_ADVICE,
    CellError,
    Setting,
    UncachedFormula,
    read_cell,
    read_number,
)
from extractor.quantities import DESIGNS, VOCABULARY, Shape, group_heading
from extractor.source.columns import (
    Mask,
    factorized,
    filled,
    numbers_from,
    numbers_with_plain,
    printed,
    take_rows,
)
from extractor.source.grid import Grid, column_letters, heading_text, is_blank
from extractor.source.reader import read_grid
from extractor.table import Numbers, ObjectArray, Place, ReportedTable, Variable

if TYPE_CHECKING:
    import pandas as pd

Remark = tuple[int, str, str]
"""Row number, cells with addresses, message."""

_LABELS = frozenset({"study", "quote", "page"})
"""Facts whose words are kept as they stand, even where they look like a missing code."""
_SIGNED = frozenset({"direction", "orientation"})
_SIGNS = {"+": "+", "-": "-", "1": "+", "+1": "+", "-1": "-"}
_WORDS: dict[str, tuple[str, ...]] = {"design": tuple(DESIGNS), "responses": RESPONSES}
_NEARLY = 0.85
"""How alike a heading must be to a known one to be pointed out as a misspelling."""
_LONGEST_NAME = 60
"""Longer headings are sentences."""
_MOST_COMPARED = 500
"""So many columns nobody knows were not headed by hand."""


def read_table(source: str | Path | pd.DataFrame | Grid, codebook: Codebook) -> ReportedTable:
    """Read a coded sheet.

    Parameters
    ----------
    source : a path (.xlsx, .xlsm, .csv, .tsv), "-" for delimited text on standard input, or a data frame,
        whose first row counts as row 2, or cells read already.
    codebook : what the headings mean; see ``codebook.default_codebook``.

    Returns
    -------
    The table. Its ``settings`` hold the codebook's values and

    - ``problems``: cells outside the number columns that were not understood,
    - ``conflicts``: cells of a column that the ``reported`` text of the row contradicts,
    - ``understood``: what was left out or changed in cells of words,

      each a list of (row number, cells with addresses, message), and
    - ``reported_place`` and ``from_reported``: where the text stands, and by variable which rows (rows,) were
      read from it rather than from the variable's own column.

    Raises
    ------
    UnreadableInput : the source cannot be opened, is empty, or has no heading anyone knows.
    """
    stem = Path(codebook.path).stem if codebook.path else ""
    grid = read_grid(source, lambda heading: codebook.meaning(heading) is not None, (stem, codebook.title))
    return _Assembly(grid, codebook).table()


class _Assembly:
    """Builds one reported table."""

    def __init__(self, grid: Grid, codebook: Codebook) -> None:
        self.grid, self.codebook = grid, codebook
        self.rows = len(grid.row_numbers)
        self.letters = [column_letters(i) for i in range(len(grid.headings))]
        self.numbers: dict[Variable, Numbers] = {}
        self.facts: dict[str, ObjectArray] = {}
        self.extras: dict[str, ObjectArray] = {}
        self.notes = list(grid.notes)
        self.known = [*canonical_names(), *codebook.folded]
        self.problems: list[Remark] = []
        self.conflicts: list[Remark] = []
        self.understood: list[Remark] = []
        self.from_reported: dict[Variable, Mask] = {}
        self.reported_place: Place | None = None

    def table(self) -> ReportedTable:
        """Everything, in order."""
        meanings = self.meanings()
        for index, meaning in enumerate(meanings):
            if isinstance(meaning, tuple):
                self.numbers[meaning] = self.number_column(index, meaning)
            elif isinstance(meaning, str):
                self.facts[meaning] = self.fact_column(index, meaning)
            else:
                self.extra_column(index)
        if "reported" in self.facts:
            self.read_reported(meanings.index("reported"))
        self.block_ragged()
        self.fill_from_codebook()
        codebook = self.codebook
        return ReportedTable(
            source=self.grid.source,
            sheet=self.grid.sheet,
            row_numbers=self.grid.row_numbers,
            numbers=self.numbers,
            facts=self.facts,
            carried=self.extras,
            rounding=codebook.rounding,
            assumptions=dict(codebook.assumptions),
            rename=dict(codebook.rename),
            notes=self.notes,
            settings={
                "codebook": codebook.path,
                "title": codebook.title,
                "design": codebook.design,
                "decimal_mark": codebook.decimal_mark,
                "rounding": codebook.rounding,
                "alpha": codebook.alpha,
                "problems": sorted(self.problems),
                "conflicts": sorted(self.conflicts),
                "understood": sorted(self.understood),
                "reported_place": self.reported_place,
                "from_reported": self.from_reported,
            },
        )

    def meanings(self) -> list[Meaning | None]:
        """What each heading stands for; refuses two columns for one thing and a sheet nobody knows."""
        found: dict[Meaning, int] = {}
        meanings: list[Meaning | None] = []
        for index, heading in enumerate(self.grid.headings):
            meaning = self.codebook.meaning(heading) if heading.strip() else None
            meanings.append(meaning)
            if meaning is None:
                continue
            if isinstance(meaning, tuple) and (meaning[1] or 0) > MOST_GROUPS:
                advice = f"a wide sheet holds at most {MOST_GROUPS} groups"
                raise UnreadableInput(f"{self.grid.where}: {self.heading(index)}: {advice}")
            if meaning in found:
                both = f"{self.heading(found[meaning])} and {self.heading(index)}"
                raise UnreadableInput(f"{self.grid.where}: {both} both hold {_called(meaning)}; keep one")
            found[meaning] = index
        if not found:
            seen = ", ".join(quoted(heading, 20) for heading in self.grid.headings[:4])
            unknown = f"no heading in row {self.grid.header_row} is known (it begins {seen})"
            known = "known are study, design, f_value, df_effect, mean_1 and so on"
            raise UnreadableInput(f"{self.grid.where}: {unknown}; {known}; name a codebook with --codebook")
        return meanings

    def heading(self, index: int) -> str:
        """A heading with the address of its own cell."""
        return f"{quoted(self.grid.headings[index])} [{self.letters[index]}{self.grid.header_row}]"

    def place(self, index: int) -> Place:
        """Where a column stands."""
        return Place(self.grid.headings[index].strip(), self.letters[index])

    def remark(self, index: int, row: int, message: str) -> Remark:
        """A message about one cell."""
        number = int(self.grid.row_numbers[row])
        return number, self.place(index).at(number), message

    def number_column(self, index: int, variable: Variable) -> Numbers:
        """One column of printed numbers."""
        cells, formats, codes = factorized(self.grid.columns[index], self.grid.formats[index])
        book, quantity = self.codebook, VOCABULARY[variable[0]]
        reads = Setting(
            quantity, book.decimal_mark, book.rounding, book.missing, book.alpha, book.decimals_of(variable)
        )
        # text in a workbook kept every digit that was typed
        typed = replace(reads, decimals=None) if self.grid.stored else reads
        plain = read_plain(cells, typed)
        others = np.setdiff1d(np.arange(len(cells)), plain.at, assume_unique=True).tolist()
        read = {
            at: read_cell(cells[at], typed if isinstance(cells[at], str) else reads, formats[at])
            for at in others
        }
        return numbers_with_plain(plain, read, len(cells), codes, self.place(index))

    def fact_column(self, index: int, name: str) -> ObjectArray:
        """One column of coded words, "" where blank."""
        cells, _, codes = factorized(self.grid.columns[index])
        read = [self.fact(name, raw) for raw in cells]
        if any(problem for _, problem in read):
            remarks = self.understood if name in _LABELS else self.problems
            remarks += [
                self.remark(index, row, read[at][1]) for row, at in enumerate(codes.tolist()) if read[at][1]
            ]
        return spread((word for word, _ in read), codes)

    def fact(self, name: str, raw: object) -> tuple[str, str]:
        """A coded word, and what is wrong with it."""
        if raw is None:
            return "", ""
        if isinstance(raw, (CellError, UncachedFormula)):
            return "", read_number(raw, VOCABULARY["f_value"]).problem
        if isinstance(raw, (datetime.date, datetime.time)):
            return str(raw), f"the cell holds a date or time: {DATE_ADVICE}"
        # fixed-width arrays of words lose a NUL at the end, so that two words would become one
        text = (raw if isinstance(raw, str) else heading_text(raw)).replace("\x00", "").strip()
        if name in _LABELS:
            return text, ""
        plain = tidy(text)
        if name in _SIGNED and plain in _SIGNS:
            return _SIGNS[plain], ""
        if is_missing(plain, self.codebook.missing):
            return "", ""
        if name in _WORDS:
            word = normalised(plain).replace("_", "-")
            return (word if word in _WORDS[name] else text), ""
        return text, ""

    def extra_column(self, index: int) -> None:
        """A column nobody knows, kept as text; a heading that nearly is known is pointed out."""
        cells, _, codes = factorized(self.grid.columns[index])
        heading = self.grid.headings[index].strip()
        if heading:
            self.point_out(heading)
        elif all(map(is_blank, cells)):
            return
        else:
            heading = f"column {self.letters[index]}"
            self.notes.append(f"{heading} has no heading; its cells are carried along unread")
        while heading in self.extras:
            heading = f"{heading} [{self.letters[index]}]"
        texts = (raw if isinstance(raw, str) else "" if raw is None else heading_text(raw) for raw in cells)
        self.extras[heading] = spread(texts, codes)

    def point_out(self, heading: str) -> None:
        """Note a heading that looks like one that would have been read."""
        name = normalised(heading)
        if len(name) > _LONGEST_NAME or len(self.extras) > _MOST_COMPARED:
            return
        near = difflib.get_close_matches(name, self.known, n=1, cutoff=_NEARLY)
        found = re.fullmatch(r"(?P<name>[a-z_0-9]*[a-z])_?(?P<group>[0-9]*)", name)
        quantity = VOCABULARY.get(found["name"]) if found is not None else None
        if found is not None and quantity is not None and quantity.shape is Shape.GROUP:
            near = [f"{quantity.name}_{found['group'] or 1}"]
        if near:
            self.notes.append(f"{quoted(heading)} is carried along unread; did you mean {near[0]}?")

    def read_reported(self, index: int) -> None:
        """Numbers in running text, as if they stood in columns of their own; a filled column wins."""
        book, place = self.codebook, self.place(index)
        self.reported_place = place
        texts, _, codes = factorized(self.facts["reported"])
        parsed = [columns_from_text(str(t), book.decimal_mark, book.rounding, book.alpha) for t in texts]
        for row, at in enumerate(codes.tolist()):
            _, understood, problem = parsed[at]
            if problem:
                self.problems.append(self.remark(index, row, problem))
            elif understood:
                self.understood.append(self.remark(index, row, understood))
        for name in sorted({name for readings, _, _ in parsed for name in readings}):
            text = numbers_from([readings.get(name, BLANK) for readings, _, _ in parsed], codes, place)
            self.merge((name, None), text)

    def merge(self, variable: Variable, text: Numbers) -> None:
        """Numbers from text into their column, which wins where it is filled."""
        column = self.numbers.get(variable)
        if column is None:
            self.numbers[variable] = text
            self.from_reported[variable] = filled(text)
            return
        apart = np.fmax(column.low, text.low) > np.fmin(column.high, text.high)
        for row in np.flatnonzero(column.given & text.given & apart).tolist():
            number = int(self.grid.row_numbers[row])
            cells = f"{column.place.at(number)}; {text.place.at(number)}"
            both = f"the column says {printed(column, row)}, the text {printed(text, row)}"
            self.conflicts.append((number, cells, f"{both}; the column is used"))
        free = filled(text) & ~filled(column)
        self.from_reported[variable] = free
        take_rows(column, text, free)

    def block_ragged(self) -> None:
        """Refuse every number of rows that have more cells than there are headings."""
        if not self.grid.ragged:
            return
        readings: list[Reading] = [BLANK]
        codes = np.zeros(self.rows, dtype=np.int64)
        for row, number in enumerate(self.grid.row_numbers.tolist()):
            extra = self.grid.ragged.get(number, 0)
            if extra:
                more = f"{extra} more cell{'s' if extra > 1 else ''} than there are headings"
                message = f"the row has {more}; a decimal comma or a text may lack quotation marks"
                self.problems.append((number, f"row {number}", message))
                codes[row] = len(readings)
                readings.append(refuse(message))
        for numbers in self.numbers.values():
            take_rows(numbers, numbers_from(readings, codes, numbers.place), codes > 0)

    def fill_from_codebook(self) -> None:
        """Design and scale of rows that do not say."""
        book = self.codebook
        for name, word in (("design", book.design), ("responses", book.responses)):
            if word:
                words = self.facts.setdefault(name, np.full(self.rows, "", dtype=object))
                words[words == ""] = word
        for name, value in book.scale.items():
            stated = Reading(value, value, value, 0.0, 0, "=", "from the codebook")
            place = Place(f"{name} (codebook)", "")
            whole = numbers_from([stated], np.zeros(self.rows, dtype=np.int64), place)
            column = self.numbers.setdefault((name, None), whole)
            if column is not whole:
                take_rows(column, whole, ~filled(column))


def _called(meaning: Meaning) -> str:
    """The canonical name of what a heading stands for."""
    if isinstance(meaning, str):
        return meaning
    name, group = meaning
    return name if group is None else group_heading(name, group)
