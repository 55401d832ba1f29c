"""Faults in cells: the sheet is sound, what stands in it is not. Every such sheet gives a table."""

from __future__ import annotations

import random
from pathlib import Path

from extractor.quantities import DESIGNS, FACTS, STANDARDIZERS, VOCABULARY, Role, Shape, group_heading
from tests.fuzz.faults import READ, READ_OR_NOT, Hostile, as_csv, cells_of, fault, honest, metric
from tests.fuzz.seeds import EXTREMES, FORMULAS, NUMBERS, TEXTS, WORDS

_SIGNS = tuple(
    "0123456789.,;-−–+<>=≤≥%()[]{}*†^·'’eE×²³ \t\n\r\"/|\\_#@ηωχFtpdrnNsAa\u00a0\u200b\ufeff\x00\x1b\u202eé😀"
)
_WORDED = tuple(name for name in FACTS if name not in ("design", "analysis"))
_SCALARS = tuple(
    name for name, q in VOCABULARY.items() if q.role is Role.REPORTED and q.shape is Shape.SCALAR
)
_GROUPED = tuple(name for name, q in VOCABULARY.items() if q.role is Role.REPORTED and q.shape is Shape.GROUP)


def _numeric(row: dict[str, str]) -> list[str]:
    return [name for name in row if name not in FACTS]


@fault("words in number cells")
def number_cells(source: random.Random, folder: Path) -> Hostile:
    """One to four cells that hold no plain number."""
    rows = honest(source, source.randint(1, 2))
    for row in rows:
        for _ in range(source.randint(1, 2)):
            row[source.choice([*_numeric(row), source.choice(_SCALARS)])] = source.choice(NUMBERS)
    return Hostile(as_csv(folder, cells_of(rows)), READ, rows=len(rows))


@fault("extreme numbers")
def extreme_cells(source: random.Random, folder: Path) -> Hostile:
    """Numbers at the ends of what doubles hold, in one row's own columns."""
    row = honest(source, 1)[0]
    names = _numeric(row) or ["f_value"]
    for name in source.sample(names, source.randint(1, len(names))):
        row[name] = source.choice(EXTREMES)
    if source.random() < 0.2:
        row[source.choice(_SCALARS)] = source.choice(EXTREMES)
    return Hostile(as_csv(folder, cells_of([row])), READ, rows=1)


@fault("every quantity at once")
def full_row(source: random.Random, folder: Path) -> Hostile:
    """A row of any design that fills many columns with numbers nobody meant to stand together."""
    row = {"study": "Site 1", "design": source.choice(tuple(DESIGNS))}
    for name in source.sample(_SCALARS, source.randint(1, 8)):
        row[name] = source.choice((*EXTREMES, "0.3", "4.31", "20", "57", "2", ".018"))
    for name in source.sample(_GROUPED, source.randint(0, 3)):
        for group in range(1, source.randint(1, 4)):
            row[group_heading(name, group)] = source.choice((*EXTREMES, "20", "5.2", "1.1", "12"))
    return Hostile(as_csv(folder, cells_of([row])), READ, rows=1)


@fault("one sign changed")
def noisy_cells(source: random.Random, folder: Path) -> Hostile:
    """Cells with a few characters put in, taken out or exchanged."""
    rows = honest(source, 1)
    for row in rows:
        for name in source.sample(list(row), source.randint(1, 3)):
            text = list(row[name])
            for _ in range(source.randint(1, 3)):
                at = source.randint(0, len(text))
                text[at : at + source.randint(0, 1)] = source.choice(_SIGNS) * source.choice((0, 1, 1, 1, 30))
            row[name] = "".join(text)
    return Hostile(as_csv(folder, cells_of(rows)), READ, rows=len(rows))


@fault("words in fact columns")
def fact_cells(source: random.Random, folder: Path) -> Hostile:
    """Labels, contrasts, designs, standardizers and terms nobody foresaw."""
    rows = honest(source, source.randint(1, 2))
    for row in rows:
        for _ in range(source.randint(1, 3)):
            word = source.choice((*WORDS, *FORMULAS, *STANDARDIZERS, *DESIGNS))
            row[source.choice((*_WORDED, "design", "analysis", "contrast", "direction"))] = word
    return Hostile(as_csv(folder, cells_of(rows)), READ, rows=len(rows))


@fault("formulas in words and headings")
def formula_cells(source: random.Random, folder: Path) -> Hostile:
    """Texts a spreadsheet takes for formulas, in labels, unknown columns and their headings."""
    rows = honest(source, 1)
    for at in range(source.randint(1, 3)):
        rows[0][f"{source.choice(FORMULAS)} {at}" if source.random() < 0.5 else f"remark {at}"] = (
            source.choice(FORMULAS)
        )
    rows[0][source.choice(("study", "outcome", "effect", "page", "quote"))] = source.choice(FORMULAS)
    return Hostile(as_csv(folder, cells_of(rows)), READ, rows=1)


@fault("hostile running text")
def running_text(source: random.Random, folder: Path) -> Hostile:
    """Statistics in running text, cut, joined and changed."""
    text = source.choice(TEXTS)
    for _ in range(source.randint(0, 4)):
        at = source.randint(0, len(text))
        piece = source.choice((*_SIGNS, source.choice(TEXTS)[:60], source.choice(NUMBERS)[:20]))
        text = text[:at] + piece + text[at + source.randint(0, 6) :]
    row = {"study": "Site 1", "design": source.choice(tuple(DESIGNS)), "reported": text}
    for name in source.sample(_SCALARS, source.randint(0, 2)):
        row[name] = source.choice(("20", ".5", "2"))
    return Hostile(as_csv(folder, cells_of([row])), READ, rows=1)


@fault("very many groups", every=8)
def many_groups(source: random.Random, folder: Path) -> Hostile:
    """Up to 200 groups in a wide sheet, some of them of one participant, or none."""
    row = {"study": "Site 1", "design": source.choice(("one-way", "within", "ancova", "two-group", "paired"))}
    count = source.choice((3, 10, 11, 30, 200))
    names = source.sample(("n", "mean", "sd", "se", "median", "adjusted_mean"), source.randint(1, 3))
    sizes = source.choice((("20",), ("1",), ("0", "1"), ("2", "20"), ("1000000",), ("1e6", "1e15", "")))
    for group in range(1, count + 1):
        for name in names:
            cell = source.choice(sizes) if name == "n" else source.choice(("5.2", "4.9", "0", "1e6", "6.1"))
            row[group_heading(name, group)] = cell
    if source.random() < 0.5:
        row["f_value"] = source.choice(EXTREMES)
    return Hostile(as_csv(folder, cells_of([row])), READ, rows=1)


@fault("codebook scale and rules against the cells")
def scales(source: random.Random, folder: Path) -> Hostile:
    """Integer scales of every size, so that granularity is tested at its ends."""
    row = {"study": "Site 1", "design": "two-group"}
    for group in (1, 2):
        row[f"n_{group}"] = source.choice(("1", "2", "3", "20", "100000", "1000000000"))
        row[f"mean_{group}"] = source.choice(("3.47", "3", "-3", "1.005", "7.00", "1e9"))
        row[f"sd_{group}"] = source.choice(("1.21", "0", "0.00", "3.0", "1e9", "6"))
    row |= {
        "scale_min": source.choice(("1", "0", "-5", "1.5", "1e12", "")),
        "scale_max": source.choice(("7", "1", "5", "100000", "1e12", "")),
        "scale_items": source.choice(("1", "10", "1000000", "0", "")),
        "responses": source.choice(("integer", "binary", "continuous", "ordinal", "")),
    }
    return Hostile(as_csv(folder, cells_of([row])), READ, rows=1)


@fault("typed statistics")
def quick(source: random.Random, folder: Path) -> Hostile:
    """The command ``quick``: words instead of a sheet, so that nothing is read from disk."""
    hostile = running_text(source, folder)
    text = Path(hostile.sheet).read_text(encoding="utf-8")
    # what a user types is shown again as it is
    body = "".join(c if c.isprintable() else " " for c in text.partition("\n")[2])
    more = ["--also", f"{source.choice(_SCALARS)}={source.choice(EXTREMES)}"] * source.randint(0, 1)
    words = ("quick", body.replace("-", "−", 1), "--to", metric(source), *more)
    return Hostile("", READ_OR_NOT | {2}, more=words)
