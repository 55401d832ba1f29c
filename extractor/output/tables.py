"""One table into one file: csv, json, parquet, dta. The same table always gives the same bytes.

Every writer returns what it had to change, in words, so that the caller can say so.
"""

from __future__ import annotations

import importlib.util
import json
import math
import re
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path

import numpy as np
import pandas as pd

from extractor.errors import UsageError
from extractor.output.columns import Table, Values, is_text, texts
from extractor.output.files import batches, fixed_time, write_parts
from extractor.output.pieces import number_texts

Writer = Callable[[pd.DataFrame, Path], list[str]]

_CHUNK, _BATCH = 20_000, 1_000
"""Rows formatted at a time, so that memory stays flat, and lines put together at a time."""
_NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_SIGN = "[=+\\-@＝＋－＠]"
"""What a formula begins with, in the width of East Asian keyboards too."""
_FORMULA = re.compile(rf"[\t\r\n]|[\s\x00-\x1f\u200b\ufeff]*{_SIGN}")
_LATER = re.compile(rf"[;\t\r\n](?={_SIGN})")
_QUOTED = re.compile(r'[",;|\t\r\n]')
_STATA_NAME = 32
_STATA_TEXT = 2045
"""Longest text of a fixed-width column, in bytes (Stata's dta format, version 118)."""
_STATA_LARGEST = 8.98e307


def neutralised(text: str) -> str:
    """Text that no spreadsheet takes for a formula; a text that is only a number stays as it is.

    An apostrophe goes before = + - @, tab, CR or LF at the start, and before = + - @ after a semicolon, tab
    or line break, where some spreadsheets begin a new cell (OWASP, CSV injection). Spaces at the start, and signs
    there that no screen shows, hide nothing.
    """
    if _NUMBER.fullmatch(text):
        return text
    # to look for single signs first is much faster than the search for what they come before
    if ";" in text or "\n" in text or "\t" in text or "\r" in text:
        text = _LATER.sub(r"\g<0>'", text)
    return "'" + text if _FORMULA.match(text) else text


def write_csv(table: Table, path: Path, *, raw: bool = False) -> list[str]:
    """UTF-8, line feeds, shortest numbers that read back exactly; ``raw`` leaves texts as they are."""
    write_parts(path, csv_lines(table, raw=raw))
    return []


def csv_lines(table: Table, *, raw: bool = False) -> Iterator[str]:
    """The lines of a csv file, many at a time, each with its line feed."""

    def cell(text: str) -> str:
        return _quoted(text if raw else neutralised(text))

    yield ",".join(cell(str(name)) for name in table) + "\n"
    columns = [column.values if isinstance(column, pd.Series) else column for _, column in table.items()]
    rows = len(columns[0]) if columns else 0
    for start in range(0, rows, _CHUNK):
        parts = [_csv_cells(column[start : start + _CHUNK], cell) for column in columns]
        for lines in batches(map(",".join, zip(*parts, strict=True)), _BATCH, "\n"):
            yield lines + "\n"


def _quoted(text: str) -> str:
    if _QUOTED.search(text) or text[:1].isspace() or text[-1:].isspace():
        return '"' + text.replace('"', '""') + '"'
    return text


def _csv_cells(column: Values, cell: Callable[[str], str]) -> list[str]:
    if is_text(column):
        shown = texts(column)
        known = {text: cell(text) for text in dict.fromkeys(shown)}
        return list(map(known.__getitem__, shown))
    if column.dtype == np.float64:
        return number_texts(np.asarray(column), ("", "INF", "-INF"))
    if column.dtype.kind in "iu":
        counts = column.astype(object).tolist()
        said = {count: _number(count) for count in dict.fromkeys(counts)}
        return list(map(said.__getitem__, counts))
    return [_number(value) for value in column.astype(object)]


def _number(value: object) -> str:
    if value is pd.NA:
        return ""
    if not isinstance(value, float):
        return str(value)
    if math.isfinite(value):
        return repr(float(value))
    return "" if math.isnan(value) else "INF" if value > 0 else "-INF"


def write_json(frame: pd.DataFrame, path: Path) -> list[str]:
    """A list with one object a row; blank numbers are null, and so are ends without a limit."""
    write_parts(path, json_lines(frame))
    return []


def json_lines(frame: pd.DataFrame) -> Iterator[str]:
    """The lines of a json file, each with its line feed."""
    yield "[\n"
    for at, record in enumerate(records(frame)):
        yield (",\n" if at else "") + as_json(record)
    yield "\n]\n" if len(frame) else "]\n"


def records(frame: pd.DataFrame) -> Iterator[dict[str, object]]:
    """The rows as plain Python values; what is not a finite number is None."""
    names = [str(name) for name in frame.columns]
    for start in range(0, len(frame), _CHUNK):
        part = frame.iloc[start : start + _CHUNK]
        columns: list[Iterable[object]] = []
        for at in range(part.shape[1]):
            column = part.iloc[:, at]
            columns.append(texts(column) if is_text(column) else map(_plain, column.astype(object)))
        for values in zip(*columns, strict=True):
            yield dict(zip(names, values, strict=True))


def _plain(value: object) -> object:
    if value is pd.NA or (isinstance(value, float) and not math.isfinite(value)):
        return None
    return value.item() if isinstance(value, np.generic) else value


def as_json(value: object) -> str:
    """One line of JSON with sorted keys."""
    return json.dumps(value, ensure_ascii=False, allow_nan=False, sort_keys=True)


def write_xlsx(frame: pd.DataFrame, path: Path) -> list[str]:
    """An Excel workbook; what writes it is heavy and comes only when asked for."""
    from extractor.output import workbook

    return workbook.write_xlsx(frame, path)


def write_parquet(frame: pd.DataFrame, path: Path) -> list[str]:
    """Apache Parquet, through pyarrow."""
    require("parquet")
    frame.to_parquet(path, index=False, engine="pyarrow")
    return []


def write_dta(frame: pd.DataFrame, path: Path) -> list[str]:
    """Stata's dta format, version 118; headings become names Stata allows."""
    names = _stata_names([str(name) for name in frame.columns])
    notes = [
        f"dta: column '{old}' is called {new}"
        for old, new in zip(frame.columns, names, strict=True)
        if str(old) != new
    ]
    columns: dict[str, pd.Series] = {}
    long: list[str] = []
    for at, name in enumerate(names):
        column = frame.iloc[:, at]
        if is_text(column):
            shown = [text.replace("\x00", "") for text in texts(column)]
            columns[name] = pd.Series(shown, dtype=object)
            if any(len(text.encode("utf-8", "backslashreplace")) > _STATA_TEXT for text in shown):
                long.append(name)
            continue
        values = column.astype(float).to_numpy()
        with np.errstate(invalid="ignore"):
            columns[name] = pd.Series(np.where(np.abs(values) < _STATA_LARGEST, values, np.nan))
        if (
            pd.api.types.is_integer_dtype(column)
            and not column.isna().any()
            and column.abs().max() < 2**31 - 100
        ):
            columns[name] = columns[name].astype(np.int32)
    stamp = fixed_time().replace(tzinfo=None)
    table = pd.DataFrame(columns)
    table.to_stata(path, write_index=False, version=118, time_stamp=stamp, convert_strl=long)
    return notes


def _stata_names(names: list[str]) -> list[str]:
    """Letters, digits and underscores, no digit first, 32 at most, no two alike."""
    found: list[str] = []
    for name in names:
        plain = re.sub(r"[^A-Za-z0-9_]", "_", name)
        plain = (f"_{plain}" if not plain or plain[0].isdigit() else plain)[:_STATA_NAME]
        unique, count = plain, 2
        while unique in found or _STATA_WORD.fullmatch(unique):
            tail = f"_{count}"
            unique, count = plain[: _STATA_NAME - len(tail)] + tail, count + 1
        found.append(unique)
    return found


_STATA_WORD = re.compile(
    r"""aggregate|array|boolean|break|byte|case|catch|class|colvector|complex|const|continue|default|delegate|delete
    |do|double|else|eltypedef|end|enum|explicit|export|external|float|for|friend|function|global|goto|if|in|inline
    |int|local|long|mata|matrix|namespace|new|numeric|operator|orgtypedef|pointer|polymorphic|pragma|private
    |protected|public|quad|real|return|rowvector|scalar|short|signed|static|str[0-9]+|strL|string|struct|super
    |switch|template|this|throw|transmorphic|try|typedef|typename|union|unsigned|using|vector|version|virtual|void
    |volatile|while|with|_all|_b|_coef|_cons|_n|_N|_pi|_pred|_rc|_se|_skip""",
    re.VERBOSE,
)
"""Words Stata keeps for itself (Stata User's Guide, naming conventions)."""

WRITERS: dict[str, Writer] = {
    "csv": write_csv,
    "xlsx": write_xlsx,
    "json": write_json,
    "parquet": write_parquet,
    "dta": write_dta,
}
"""Writers by file ending."""


def require(kind: str) -> None:
    """Raise ``UsageError`` where a format needs a package that is not installed."""
    if kind == "parquet" and importlib.util.find_spec("pyarrow") is None:
        raise UsageError("--format parquet needs pyarrow: pip install 'anova-extractor[parquet]'")
