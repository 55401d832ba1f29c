"""A large sheet of mixed honest rows: a fixed number of ways of reporting, in all designs, studies interleaved.

    python -m tests.evidence.mixed FILE.csv --rows N [--kinds K] [--seed S]

Every kind of study comes from the generators of ``honest`` and ``honest_designs``: raw scores first, statistics from
them, then what is printed. Larger sheets hold more rows of the same kinds, so that sheets of different sizes are alike
in everything but size. Beyond some rows of a kind the same numbers come again under another study.
"""

from __future__ import annotations

import argparse
import csv
from collections.abc import Iterator
from pathlib import Path

import numpy as np

from extractor.quantities import group_heading
from tests.evidence.honest import honest_sheet
from tests.evidence.honest_designs import DESIGN_SHEETS
from tests.evidence.printing import Printed, Sheet

KINDS = 120
"""Ways of reporting; half of them one-way and two-group, the rest of the other designs in equal shares."""
_MOST_DRAWN = 2_000
"""Rows drawn of a kind; more are these again under other study labels."""
_SINGLE = 0.7
"""Share of studies with one row; the others have two or three."""
_LABELS = ["study", "outcome", "design", "standardizer", "responses", "term"]


def kinds(rows: int, count: int = KINDS, seed: int = 7) -> list[Sheet]:
    """One sheet of each kind, enough for a sheet of so many rows."""
    made = []
    drawn = min(max(2 * rows // count, 20), _MOST_DRAWN)
    for at in range(count):
        rng = np.random.default_rng([seed, at])
        make = honest_sheet if at % 2 else DESIGN_SHEETS[at // 2 % len(DESIGN_SHEETS)]
        made.append(make(rng, drawn))
    return [sheet for sheet in made if sheet.rows]


def headings(sheets: list[Sheet]) -> list[str]:
    """The headings of a sheet that holds all kinds: labels, scalars, groups in order."""
    variables = {variable for sheet in sheets for variable in sheet.columns}
    ordered = sorted(variables, key=lambda v: (v[1] is not None, v[0], v[1] or 0))
    return [*_LABELS, *(_heading(*variable) for variable in ordered)]


def records(sheets: list[Sheet], rows: int, seed: int = 7) -> Iterator[list[str]]:
    """``rows`` records under ``headings``: studies of one to three rows, their kinds in random order."""
    names = headings(sheets)
    texts = [_texts(sheet, names) for sheet in sheets]
    rng = np.random.default_rng(seed)
    made = study = 0
    turns = [0] * len(sheets)
    while made < rows:
        study += 1
        at = int(rng.integers(len(sheets)))
        size = 1 if rng.random() < _SINGLE else int(rng.integers(2, 4))
        for outcome in range(min(size, rows - made)):
            record = texts[at][turns[at] % len(texts[at])]
            turns[at] += 1
            made += 1
            yield [f"study {study}", f"outcome {outcome + 1}", *record]


def write(path: Path, rows: int, count: int = KINDS) -> None:
    """The sheet as a csv file."""
    sheets = kinds(rows, count)
    with path.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(headings(sheets))
        writer.writerows(records(sheets, rows))


def _heading(name: str, group: int | None) -> str:
    return name if group is None else group_heading(name, group)


def _texts(sheet: Sheet, names: list[str]) -> list[list[str]]:
    """The rows of a kind as texts under ``names``, without study and outcome."""
    columns = {_heading(*variable): _printed(values) for variable, values in sheet.columns.items()}
    columns |= {name: [word] * sheet.rows for name, word in sheet.facts.items()}
    blank = [""] * sheet.rows
    return [list(row) for row in zip(*(columns.get(name, blank) for name in names[2:]), strict=True)]


def _printed(values: Printed) -> list[str]:
    numbers = [f"{value:.{values.decimals}f}" for value in values.value]
    for mask, sign in ((values.below, "< "), (values.above, "> ")):
        if mask is not None:
            numbers = [sign + text if there else text for text, there in zip(numbers, mask, strict=True)]
    given = values.given if values.given is not None else [True] * len(numbers)
    return [text if there else "" for text, there in zip(numbers, given, strict=True)]


def main(argv: list[str] | None = None) -> None:
    """Write a sheet."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("file", type=Path)
    parser.add_argument("--rows", type=int, default=100_000)
    parser.add_argument("--kinds", type=int, default=KINDS)
    options = parser.parse_args(argv)
    write(options.file, options.rows, options.kinds)


if __name__ == "__main__":
    main()
