"""Faults of what stands beside the sheet: codebooks, the sheets of groups and decisions, and words of the command."""

from __future__ import annotations

import random
from pathlib import Path

from openpyxl import Workbook

from extractor.codebook import EFFECT_COLUMNS, ready_codebooks
from extractor.quantities import DESIGNS, FACTS, METRICS, VOCABULARY, Role
from tests.fuzz.faults import (
    READ_OR_NOT,
    Hostile,
    as_csv,
    cells_of,
    delimited,
    fault,
    honest,
    metric,
)
from tests.fuzz.seeds import EXTREMES, FORMULAS, NUMBERS, WORDS

BOOKS = Path(__file__).parent.parent.parent / "codebooks"
_ANY = READ_OR_NOT | {5}


def _sheet(folder: Path, cells: list[list[str]], source: random.Random) -> str:
    """Cells as a csv file or a workbook."""
    if source.random() < 0.7:
        return as_csv(folder, cells)
    book = Workbook()
    for row in cells:
        book.worksheets[0].append(["".join(c for c in cell if c.isprintable()) for cell in row])
    path = folder / "sheet.xlsx"
    book.save(path)
    return str(path)


@fault("damaged codebook")
def damaged_codebook(source: random.Random, folder: Path) -> Hostile:
    """A ready codebook with letters changed, lines doubled, exchanged or left out, or bytes that are no text."""
    lines = (BOOKS / f"{source.choice(ready_codebooks())}.toml").read_text(encoding="utf-8").splitlines(True)
    for _ in range(source.randint(1, 2)):
        at = source.randrange(len(lines))
        line = lines[at]
        spot = source.randint(0, len(line))
        lines[at] = source.choice(
            (
                "",
                line * 2,
                lines[source.randrange(len(lines))],
                line[:spot]
                + source.choice(('"', "[", "]", "=", "{", "}", "#", "\\", "\x00", "é", "9", "."))
                + line[spot:],
                line[:spot],
                line.replace('"', "'"),
                line.replace("=", ":"),
            )
        )
    content = "".join(lines).encode("utf-8")
    if source.random() < 0.2:
        content = source.choice((b"\xef\xbb\xbf", b"\xff\xfe", b"\xff", b"\x00")) + content
    (folder / "book.toml").write_bytes(content)
    made = Hostile(_sheet(folder, cells_of(honest(source, 1)), source), _ANY)
    made.codebook = str(folder / "book.toml")
    return _checked(made, source, folder)


def _checked(made: Hostile, source: random.Random, folder: Path) -> Hostile:
    """Now and then the commands about the codebook itself in place of those that use it."""
    kind = source.random()
    if made.codebook is None or kind > 0.3:
        return made
    words = ("codebook", made.codebook, *((made.sheet,) if kind < 0.1 else ()))
    if kind > 0.2:
        words = ("sheet", made.codebook, str(folder / "coding.xlsx"))
    return Hostile("", made.allowed | {2}, more=words)


def _toml(value: str) -> str:
    """A text as a TOML string."""
    escaped = "".join(c if c.isprintable() and c not in '"\\' else f"\\u{ord(c):04x}" for c in value)
    return f'"{escaped}"'


@fault("codebook of foreign values")
def strange_codebook(source: random.Random, folder: Path) -> Hostile:
    """Valid TOML whose keys and values nobody foresaw."""

    def value() -> str:
        return source.choice(
            (
                _toml(source.choice((*WORDS, *FORMULAS))),
                _toml(source.choice(("n", "F", "x {group}", "{group}", "study", "f_value", "row"))),
                source.choice(
                    ("1", "-1", "0", "1e308", "inf", "nan", "9" * 400, "0.5", "true", "2024-05-03", "[]")
                ),
                '["a", 1]',
                "[" * 500 + "]" * 500,
                "[-99, 1e308, nan, inf, " + "9" * 350 + "]",
                "{ value = 0.5, by = 'us' }",
                "{ value = 1e400, range = [0.1, 0.9], by = '=1+1' }",
                "{ value = 0.5, range = [-1, 1], by = ' ' }",
            )
        )

    def of(*likely: str) -> str:
        return source.choice(likely) if source.random() < 0.85 else value()

    lines = []
    for key, text in (
        ("title", of('"ours"', '"=1+1"', '"../x"')),
        ("design", of('"one-way"', '"paired"')),
        ("decimal_mark", of('","', '"."')),
        ("rounding", of('"either"', '"truncated"')),
        ("missing", of("[-99, 'NR']", "[0]", "['4.31', 2, '']")),
        ("alpha", of("0.1", "1e-6")),
        ("colums", of("1")),
    ):
        if source.random() < (0.2 if key != "colums" else 0.02):
            lines.append(f"{key} = {text}")
    quantities = tuple(name for name, q in VOCABULARY.items() if q.role is Role.REPORTED)
    heading = _toml(source.choice((*WORDS[:40], *FORMULAS, "n", "x {group}", "study", "f_value", "row")))
    for table, keys, likely in (
        ("columns", (*FACTS, *quantities, "n_1"), (heading, f"[{heading}]", '["F", "f"]', '"f_value"')),
        ("decimals", (*quantities, "mean_1"), ("0", "2", "12")),
        ("assume", ("correlation", "icc", "tails", "n_total", "epsilon"), ("{ value = 1, by = '=1+1' }",)),
        ("scale", ("minimum", "maximum", "items"), ("1", "7", "-1e299", "10000", "1e-300")),
        ("rename", EFFECT_COLUMNS, (heading, '"x"', '"study"', '"=1+1"', '"row "')),
    ):
        if source.random() < 0.35:
            chosen = source.sample(keys, source.choice((1, 1, 2)))
            lines += [f"[{table}]", *(f"{key} = {of(*likely)}" for key in chosen)]
    (folder / "book.toml").write_text("\n".join(lines), encoding="utf-8")
    # two columns may be asked to have one name, which shows only once the sheet is read
    made = Hostile(_sheet(folder, cells_of(honest(source, 1)), source), _ANY | {2})
    made.codebook = source.choice(
        (str(folder / "book.toml"),) * 8 + ("one-wya", str(folder), "no/such.toml", "a" * 500)
    )
    return _checked(made, source, folder)


@fault("groups sheet", every=2, reading=True)
def groups(source: random.Random, folder: Path) -> Hostile:
    """The long sheet: cells changed, lines of no row, levels missing, hundreds of lines for one model."""
    rows = honest(source, 2)
    for row in rows:
        row["analysis"] = "A1"
        row["design"] = source.choice(tuple(DESIGNS))
        row["term"] = source.choice(("task", "age", "task x age", ""))
        row["contrast"] = source.choice(("", "easy - hard", "1 - 2", "young - old", " - ", "x - x"))
    cells = [["analysis", "group", "task", "age", "n", "mean", "sd"]]
    for task in ("easy", "hard"):
        for age in ("young", "old"):
            cells.append(["A1", f"{task} {age}", task, age, "20", source.choice(("5.1", "4.2")), "1.3"])
    cells += [list(cells[-1]) for _ in range(source.choice((0, 0, 0, 1, 250)))]
    for _ in range(source.randint(1, 4)):
        at = source.randrange(len(cells))
        place = source.randrange(len(cells[at]))
        cells[at][place] = source.choice(
            (*NUMBERS, *WORDS, *EXTREMES, "", "A2", "analysis", "n_1", "sd", "se")
        )
    made = Hostile(as_csv(folder, cells_of(rows)), READ_OR_NOT)
    text = delimited(cells)
    if source.random() < 0.5:
        (folder / "groups.csv").write_text(text, encoding="utf-8", newline="")
        made.groups = str(folder / "groups.csv")
        return made
    book = Workbook()
    for title, lines in (("coded", cells_of(rows)), (source.choice(("groups", "Groups ")), cells)):
        sheet = book.create_sheet(title)
        for line in lines:
            sheet.append(["".join(c for c in cell if c.isprintable()) for cell in line])
    book.remove(book.worksheets[0])
    book.save(folder / "both.xlsx")
    made.sheet = str(folder / "both.xlsx")
    return made


@fault("decisions sheet", reading=True)
def decisions(source: random.Random, folder: Path) -> Hostile:
    """What coders decided: rows and cells that are not there, values that are no numbers, lines decided twice."""
    rows = honest(source, 2)
    cells = [["row", "cell", "decision", "value", "source", "by", "on", "why"]]
    for row in range(2, 2 + source.randint(1, 2)):
        numbers = [name for name in rows[row - 2] if name not in FACTS and name != "reported"]
        heading = source.choice((*numbers * 4, *rows[row - 2], "f_value [D2]", f"row {row}", ""))
        decision = source.choice(("keep", "correct", "waive", "Correct"))
        value = source.choice((*EXTREMES, *("4.3", "20", "2", ".5", "12.45") * 6))
        cells.append([str(row), heading, decision, value, "p. 4", "AB", "2024-05-03", "typo"])
    for _ in range(source.choice((0, 0, 0, 1, 2))):
        at = source.randrange(len(cells))
        place = source.randrange(8)
        cells[at][place] = source.choice(
            (*NUMBERS, *WORDS, "", "row", "9" * 5000, "A" + "9" * 5000, "x [x]", "[A2]")
        )
    made = Hostile(as_csv(folder, cells_of(rows)), READ_OR_NOT, rows=2)
    text = delimited(cells).encode("utf-8")
    name = "decisions.csv"
    if source.random() < 0.1:
        name = "decisions.xlsx"
        text = source.choice((b"PK\x03\x04", b"", text))
    (folder / name).write_bytes(text)
    made.decisions = str(folder / name)
    return made


@fault("words of the command line")
def words(source: random.Random, folder: Path) -> Hostile:
    """Metrics, levels, standardizers, headings and options that are wrong, at their limits, or hostile."""
    sheet = as_csv(folder, cells_of(honest(source, 1)))
    numbers = ("0", "1", "-1", "95", "nan", "inf", "1e-300", "1e-16", "0.9999999999999999", "0.5", "x", "")
    odd = (*WORDS[:20], *FORMULAS[:6], "estimate", "row", "", "x")
    more: list[str] = []
    for _ in range(source.randint(1, 2)):
        more += source.choice(
            (
                ["--level", source.choice(numbers)],
                ["--variance", source.choice(("exact", "large-sample", "x"))],
                ["--standardizer", source.choice(("pooled", "control", "residual", "x", ""))],
                ["--rename", f"{source.choice((*EFFECT_COLUMNS, 'x'))}={source.choice(odd)}"],
                ["--rename", source.choice(odd)],
                ["--format", source.choice(("csv", "xls", ""))],
                ["--fail-on", "x"],
                ["--csv-raw"],
                ["--no-such-option"],
                [source.choice(odd)],
                ["--to", source.choice(("omega", "omega-squared", "", *METRICS))],
            )
        )
    # CliRunner has no use for a NUL, and neither has any operating system
    words_ = ["convert", sheet, "--to", metric(source), *more]
    return Hostile("", READ_OR_NOT | {2}, more=tuple(word.replace("\x00", " ") for word in words_))
