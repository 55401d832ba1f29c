"""The workbook in which coders settle their disputes, and what it says when it comes back."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

import pandas as pd
from openpyxl import Workbook
from openpyxl.styles import PatternFill
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.datavalidation import DataValidation
from openpyxl.worksheet.worksheet import Worksheet

from extractor.coders.agreement_table import FRACTIONS
from extractor.coders.disputes import reading_text
from extractor.coders.reconcile import Reconciliation
from extractor.errors import UnreadableInput
from extractor.output.sheets import PLAIN, write_table
from extractor.output.workbook import save
from extractor.printed.reading import is_missing, quoted, tidy
from extractor.printed.reported import read_number
from extractor.quantities import DESIGNS, VOCABULARY, close_matches
from extractor.source.grid import Grid, heading_text, is_blank
from extractor.source.reader import read_grid
from extractor.source.workbook import has_sheet

CELLS, ROWS, _ABOUT = "consensus", "rows", "how to"
AGREED, KEEP, DROP = "agreed", "keep", "drop"
BLANK = "blank"
"""What is written where the coders agree that the cell holds nothing."""
_SIGNED = ("direction", "orientation")
"""Words of which a dash is one."""
_MOVED = "rows were moved or corrected since, so compare again"
_OPEN_FILL = PatternFill("solid", fgColor="FFFBEBB5")
_CODES = {**dict.fromkeys(("estimate", "changed", "shift", "shift_in_se"), "0.0000")}
_AGREEMENT_CODES = {"rows": "0", "all_agree": "0", "one_blank": "0"}
_HOW = (
    "Sheet 'consensus' has one line per cell in dispute, the one that moves the effect most first. Look the number up "
    "in the article and write into the column 'agreed' what the cell is to say, as it is printed.",
    f"Write {BLANK} where the article does not report it. A line left open stays open.",
    f"Sheet 'rows' lists rows that not every coder has. Write {KEEP} or {DROP}.",
    "Then run the comparison again with --consensus and this file: it writes the merged sheet.",
    "estimate and changed: the effect of the first coder's row as it stands, and with the other value in this one "
    "cell. shift_in_se: their distance in standard errors.",
    "fits: with whose value the row's printed numbers can all be true under the coded design. It is no proof that the "
    "value is right, and the other numbers of the row may be wrong.",
    "Agreement between coders is not correctness: two coders can share a misreading. The figures in sheet 'agreement' "
    "were computed before anything was settled.",
)


@dataclass(frozen=True)
class Settled:
    """What coders settled.

    cells : agreed text by (effect, column), "" where the cell is to be blank. rows : whether to keep an effect.
    """

    cells: Mapping[tuple[int, int], str] = field(default_factory=dict)
    rows: Mapping[int, bool] = field(default_factory=dict)


def write_consensus(found: Reconciliation, path: Path) -> list[str]:
    """Write the workbook; notes say what it could not hold."""
    book = Workbook()
    book.remove(book.worksheets[0])
    changed = 0
    for title, frame, codes in (
        (CELLS, _cells(found), _CODES),
        (ROWS, _rows(found), {}),
        ("agreement", found.agreement, _AGREEMENT_CODES | dict.fromkeys(FRACTIONS, PLAIN)),
        (_ABOUT, pd.DataFrame({"how to settle disputes": [*_whose(found), *_HOW, _tolerance(found)]}), {}),
    ):
        if not len(frame):
            continue
        sheet = book.create_sheet(title)
        changed += write_table(sheet, frame, codes, ("hint", "marginals", "how to settle disputes"))
        if AGREED in frame:
            _open_column(sheet, list(frame.columns).index(AGREED) + 1, len(frame), title == ROWS)
    save(book, path)
    return [f"{path.name}: {changed} texts were cut or lost control characters"] if changed else []


def _whose(found: Reconciliation) -> list[str]:
    """Which sheet is whose; files without the folders they were in."""
    sources = [Path(sheet.table.source.strip("'")).name for sheet in found.sheets]
    return [f"{coder} is {source}." for coder, source in zip(found.coders, sources, strict=True)]


def _tolerance(found: Reconciliation) -> str:
    more = f", or they differ by at most {found.tolerance:g} of the larger" if found.tolerance else ""
    return f"Numbers were taken to agree where their rounding intervals overlap{more}."


def _cells(found: Reconciliation) -> pd.DataFrame:
    frame = found.disputes.drop(columns=["of_effect", "of_column"])
    rows = found.effects.loc[found.disputes["of_effect"], [f"row {coder}" for coder in found.coders]]
    for at, name in enumerate(rows.columns):
        frame.insert(3 + at, name, rows[name].array)
    if found.metric is None:
        frame = frame.drop(columns=["moves", "estimate", "changed", "shift", "shift_in_se"])
    return frame.assign(agreed="", by="", why="")


def _rows(found: Reconciliation) -> pd.DataFrame:
    return found.single.drop(columns="of_effect").assign(agreed="", by="", why="")


def _open_column(sheet: Worksheet, column: int, rows: int, choice: bool) -> None:
    """Mark the column that is to be filled in."""
    letter = get_column_letter(column)
    for row in range(2, rows + 2):
        sheet.cell(row, column).fill = _OPEN_FILL
    if choice and rows:
        rule = DataValidation(type="list", formula1=f'"{KEEP},{DROP}"', allow_blank=True)
        sheet.add_data_validation(rule)
        rule.add(f"{letter}2:{letter}{rows + 1}")


def read_consensus(found: Reconciliation, path: str | Path) -> Settled:
    """What a filled workbook says about the disputes of these sheets.

    Raises
    ------
    UnreadableInput : it is no such workbook, a line does not belong to these sheets as they now are, or an agreed
        value cannot be read; the message names the cell.
    """
    if not any(has_sheet(Path(path), title) for title in (CELLS, ROWS, _ABOUT)):
        raise UnreadableInput(
            f"{quoted(path, 200)} has no sheet {quoted(CELLS)}; it is no consensus workbook"
        )
    return Settled(_settled_cells(found, Path(path)), _settled_rows(found, Path(path)))


def has_agreed(path: Path) -> bool:
    """Whether a workbook holds anything in its columns of agreed values."""
    sheets = [_Lines(path, title) for title in (CELLS, ROWS)]
    return any(not is_blank(lines.raw(AGREED, line)) for lines in sheets for line in range(lines.count))


class _Lines:
    """A sheet of the workbook by column; no lines where there is no such sheet."""

    def __init__(self, path: Path, title: str) -> None:
        here = has_sheet(path, title)
        self.grid: Grid | None = (
            read_grid(path, lambda heading: heading == AGREED, (title,)) if here else None
        )
        self.at = {heading: index for index, heading in enumerate(self.grid.headings)} if self.grid else {}
        if self.grid is not None and AGREED not in self.at:
            raise UnreadableInput(
                f"{self.grid.where}: there is no column '{AGREED}'; it is no consensus workbook"
            )

    @property
    def count(self) -> int:
        return 0 if self.grid is None else len(self.grid.row_numbers)

    def raw(self, name: str, line: int) -> object:
        return None if self.grid is None or name not in self.at else self.grid.columns[self.at[name]][line]

    def text(self, name: str, line: int) -> str:
        raw = self.raw(name, line)
        return "" if raw is None or is_blank(raw) else heading_text(raw).strip()

    def code(self, name: str, line: int) -> str | None:
        formats = None if self.grid is None else self.grid.formats[self.at[name]]
        return None if formats is None else formats[line]

    def fault(self, name: str, line: int, problem: str) -> UnreadableInput:
        where = self.grid.where if self.grid is not None else ""
        number = int(self.grid.row_numbers[line]) if self.grid is not None else 0
        return UnreadableInput(
            f"{where}, cell {get_column_letter(self.at.get(name, 0) + 1)}{number}: {problem}"
        )


def _settled_cells(found: Reconciliation, path: Path) -> dict[tuple[int, int], str]:
    known: dict[tuple[str, ...], tuple[int, int, list[str]]] = {}
    numbers = _row_texts(found)
    for record in found.disputes.to_dict("records"):
        effect, column = int(record["of_effect"]), int(record["of_column"])
        said = [str(record[coder]) for coder in found.coders]
        known[(str(record["variable"]), *numbers[effect])] = (effect, column, said)
    lines = _Lines(path, CELLS)
    settled: dict[tuple[int, int], str] = {}
    for line in range(lines.count):
        if is_blank(lines.raw(AGREED, line)):
            continue
        key = tuple(
            lines.text(name, line) for name in ("variable", *(f"row {coder}" for coder in found.coders))
        )
        if key not in known:
            raise lines.fault("variable", line, f"there is no such dispute between these sheets; {_MOVED}")
        effect, column, said = known[key]
        for coder, text in zip(found.coders, said, strict=True):
            if tidy(lines.text(coder, line)) != tidy(text):
                problem = f"sheet {coder} now says {quoted(text) if text else 'nothing'} there; compare again"
                raise lines.fault(coder, line, problem)
        settled[effect, column] = _agreed_text(found, lines, line, column)
    return settled


def _agreed_text(found: Reconciliation, lines: _Lines, line: int, at: int) -> str:
    """An agreed value as the merged sheet is to say it."""
    column, raw = found.columns[at], lines.raw(AGREED, line)
    text = heading_text(raw).strip()
    if text.casefold() == BLANK:
        return ""
    if isinstance(column.variable, tuple):
        settings = found.sheets[0].table.settings
        mark = str(settings.get("decimal_mark", "."))
        reading = read_number(
            raw,
            VOCABULARY[column.variable[0]],
            decimal_mark=mark,
            rounding=str(settings.get("rounding", "nearest")),
            number_format=lines.code(AGREED, line),
            alpha=float(settings.get("alpha", 0.05)),
        )
        if not reading.given:
            raise lines.fault(
                AGREED, line, reading.problem or f"write {BLANK} where the cell is to hold nothing"
            )
        return reading_text(reading, mark)
    if column.variable not in _SIGNED and is_missing(tidy(text), frozenset()):
        raise lines.fault(AGREED, line, f"write {BLANK} where the cell is to hold nothing")
    if column.variable == "design" and text not in DESIGNS:
        near = close_matches(text, DESIGNS)
        hint = f"; did you mean {near[0]}?" if near else ""
        raise lines.fault(AGREED, line, f"{quoted(text)} is no design{hint}")
    return text


def _settled_rows(found: Reconciliation, path: Path) -> dict[int, bool]:
    numbers = _row_texts(found)
    known = {numbers[int(effect)]: int(effect) for effect in found.single["of_effect"]}
    lines = _Lines(path, ROWS)
    settled: dict[int, bool] = {}
    for line in range(lines.count):
        word = lines.text(AGREED, line).casefold()
        if not word:
            continue
        if word not in (KEEP, DROP):
            raise lines.fault(AGREED, line, f"{quoted(word)} is neither {KEEP} nor {DROP}")
        key = tuple(lines.text(f"row {coder}", line) for coder in found.coders)
        if key not in known:
            raise lines.fault(AGREED, line, f"there is no such single row in these sheets; {_MOVED}")
        settled[known[key]] = word == KEEP
    return settled


def _row_texts(found: Reconciliation) -> list[tuple[str, ...]]:
    """Row numbers of every effect as texts, "" where a coder has no such row."""
    columns = [found.effects[f"row {coder}"] for coder in found.coders]
    return [
        tuple("" if pd.isna(number) else str(int(number)) for number in line)
        for line in zip(*columns, strict=True)
    ]
