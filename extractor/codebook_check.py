"""A codebook checked as a whole, and against a sheet it was piloted on.

Loading a codebook stops at its first fault. Here every entry is looked at on its own, so that a pilot shows all of
them at once, each with its line and the nearest known word.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd

from extractor.codebook import Codebook, canonical, normalised, parse_codebook
from extractor.errors import InvalidCodebook
from extractor.printed.reading import quoted
from extractor.quantities import DESIGNS, group_heading
from extractor.table import Numbers, ReportedTable

_WHOLE = ("assume.", "scale", "assume")
"""Tables whose entries belong together."""
_HEADER = re.compile(r"\s*\[(?P<name>[^\[\]]*)\]\s*(#.*)?")


@dataclass(frozen=True)
class Pilot:
    """What a sheet says about its codebook.

    unfilled : headings of the sheet that are understood but blank in every row, with what they stand for.
    absent : entries of the codebook without a column in the sheet.
    unknown : columns of the sheet that nobody knows.
    not_understood : per heading and text the cells that could not be read: heading, text, count, first, problem.
    designs : rows by design, those of no row with 0. misspelt : words in the column of designs that are none.
    """

    rows: int
    unfilled: list[str]
    absent: list[str]
    unknown: list[str]
    not_understood: pd.DataFrame
    designs: dict[str, int]
    misspelt: dict[str, int]


NOT_UNDERSTOOD_COLUMNS = ["heading", "cells", "first", "problem"]


def faults(text: str, name: str) -> list[str]:
    """Every fault of a codebook, one line each, in the order of the file; none where it is valid.

    Parameters
    ----------
    text : the codebook. name : what messages call it.
    """
    found: list[tuple[int, str]] = []
    lines = text.splitlines()
    try:
        tomllib.loads(text)
    except (ValueError, RecursionError):
        return [_refusal(text, name)]
    sound = [True] * len(lines)
    for header, start, stop in _entries(lines):
        shown = {*range(start, stop), *([header] if header is not None else [])}
        fault = _refusal(_only(lines, shown), name)
        if fault:
            found.append((start, fault))
            sound[start:stop] = [False] * (stop - start)
    # what only shows between entries, such as one heading claimed by two of them
    rest = _refusal(_only(lines, {at for at, good in enumerate(sound) if good}), name)
    if rest:
        found.append((len(lines), rest))
    return list(dict.fromkeys(fault for _, fault in sorted(found)))


def _refusal(text: str, name: str) -> str:
    try:
        parse_codebook(text, name)
    except InvalidCodebook as fault:
        return str(fault)
    return ""


def _only(lines: list[str], shown: set[int]) -> str:
    """The text with every other line blank, so that lines keep their numbers."""
    return "\n".join(line if at in shown else "" for at, line in enumerate(lines))


def _entries(lines: list[str]) -> Iterator[tuple[int | None, int, int]]:
    """(line of the table's header, first line, line after the last) of every entry, from a valid TOML text."""
    header: int | None = None
    whole = False
    at = 0
    while at < len(lines):
        match = _HEADER.fullmatch(lines[at])
        if match:
            name = match["name"].strip()
            whole = name == "scale" or name.startswith(_WHOLE)
            header, start = at, at
            at += 1
            if whole:
                while at < len(lines) and not _HEADER.fullmatch(lines[at]):
                    at += 1
                yield None, start, at
            elif at == len(lines) or _HEADER.fullmatch(lines[at]):
                yield None, start, at
            continue
        if not lines[at].strip() or lines[at].lstrip().startswith("#"):
            at += 1
            continue
        start = at
        at += 1
        # an entry ends where what has been gathered is valid
        while at < len(lines) and not _valid("\n".join(lines[start:at])):
            at += 1
        yield header, start, at


def _valid(text: str) -> bool:
    try:
        tomllib.loads(text)
    except (ValueError, RecursionError):
        return False
    return True


def pilot(table: ReportedTable, codebook: Codebook) -> Pilot:
    """What a sheet that was read with a codebook says about it."""
    filled = {v: bool((n.given | (n.problem != "")).any()) for v, n in table.numbers.items()}
    unfilled = [
        f"{numbers.place.heading} [{numbers.place.column}]: {_called(variable)}"
        for variable, numbers in table.numbers.items()
        if not filled[variable] and numbers.place.column
    ]
    unfilled += [f"{name}: coded words" for name, words in table.facts.items() if not (words != "").any()]
    coded = table.fact("design")
    known = {word: int((coded == word).sum()) for word in DESIGNS}
    words, counts = np.unique(coded.astype(str), return_counts=True)
    misspelt = {str(w): int(c) for w, c in zip(words, counts, strict=True) if w and w not in DESIGNS}
    return Pilot(
        table.rows,
        unfilled,
        _absent(table, codebook),
        [str(name) for name in table.extras.columns],
        _not_understood(table),
        known,
        misspelt,
    )


def _called(variable: tuple[str, int | None]) -> str:
    name, group = variable
    return name if group is None else group_heading(name, group)


def _absent(table: ReportedTable, codebook: Codebook) -> list[str]:
    """Meanings that the codebook names a heading for and the sheet has no column of."""
    have = {*table.numbers, *table.facts}
    said: dict[object, list[str]] = {}
    for heading, meaning in codebook.columns.items():
        if meaning not in have:
            said.setdefault(meaning, []).append(heading)
    stems = {name for name, group in table.numbers if group is not None}
    lines = [
        f"{_called(m) if isinstance(m, tuple) else m} ({' or '.join(quoted(h) for h in headings)})"
        for m, headings in said.items()
    ]
    patterns = dict.fromkeys(quantity for _, quantity in codebook.patterns if quantity not in stems)
    return lines + [f"{quantity} of any group" for quantity in patterns]


def _not_understood(table: ReportedTable) -> pd.DataFrame:
    lines = [line for numbers in table.numbers.values() for line in _problems(table, numbers)]
    remarks: dict[tuple[str, str], list[str]] = {}
    for _, cells, message in table.settings.get("problems", ()):
        heading = str(cells).partition(" [")[0]
        remarks.setdefault((heading, str(message)), []).append(str(cells))
    lines += [
        {"heading": heading, "cells": len(cells), "first": cells[0], "problem": message}
        for (heading, message), cells in remarks.items()
    ]
    frame = pd.DataFrame(lines, columns=NOT_UNDERSTOOD_COLUMNS)
    return frame.sort_values(["cells", "heading"], ascending=[False, True], kind="stable", ignore_index=True)


def _problems(table: ReportedTable, numbers: Numbers) -> Iterator[dict[str, object]]:
    """The refused cells of a column, by what is wrong with them."""
    refused = np.flatnonzero((numbers.problem != "") & ~numbers.given)
    if not len(refused):
        return
    problems, first, counts = np.unique(
        numbers.problem[refused].astype(str), return_index=True, return_counts=True
    )
    for problem, at, count in zip(problems, first, counts, strict=True):
        row = int(table.row_numbers[refused[at]])
        yield {
            "heading": numbers.place.heading,
            "cells": int(count),
            "first": numbers.place.at(row),
            "problem": str(problem),
        }


def misreadable(table: ReportedTable, codebook: Codebook) -> list[str]:
    """Headings that the codebook understands only without regard to case; a second one would make them ambiguous."""
    exact = {" ".join(heading.split()) for heading in codebook.columns}
    found = []
    for numbers in table.numbers.values():
        heading = " ".join(numbers.place.heading.split())
        alike = [known for known in exact if normalised(known) == normalised(heading)]
        if numbers.place.column and heading not in exact and alike and canonical(heading) is None:
            found.append(f"{quoted(heading)} was taken for {quoted(alike[0])}")
    return found
