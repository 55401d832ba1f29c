"""Faults of delimited text: encodings, delimiters, line ends, headings, sizes and damaged bytes."""

from __future__ import annotations

import codecs
import datetime
import decimal
import math
import random
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq

from extractor.codebook import MOST_GROUPS
from tests.fuzz.faults import READ_OR_NOT, Hostile, cells_of, delimited, fault, headings_of, honest
from tests.fuzz.seeds import FORMULAS, WORDS

_ENCODINGS = (
    "utf-8",
    "utf-8-sig",
    "utf-16",
    "utf-16-le",
    "utf-16-be",
    "utf-32",
    "utf-32-le",
    "latin-1",
    "cp1252",
    "cp037",
    "utf-7",
    "shift_jis",
)


def _write(folder: Path, content: bytes, source: random.Random) -> Hostile:
    """The bytes as a file of some name, or on standard input."""
    name = source.choice(("sheet.csv", "sheet.csv", "sheet.tsv", "sheet.txt", "sheet", "-"))
    if name == "-":
        return Hostile("-", READ_OR_NOT, stdin=content)
    (folder / name).write_bytes(content)
    return Hostile(str(folder / name), READ_OR_NOT)


@fault("encodings", reading=True)
def encodings(source: random.Random, folder: Path) -> Hostile:
    """One encoding or two in one file, whole or cut in the middle of a letter."""
    rows = honest(source, 1)
    rows[0]["study"] = source.choice(("Zürich", "Łódź", "東京", "Site 😀", "Mill"))
    text = delimited(cells_of(rows))
    content = text.encode(source.choice(_ENCODINGS), "replace")
    if source.random() < 0.3:
        content += text.encode(source.choice(_ENCODINGS), "replace")
    if source.random() < 0.3:
        marks = (codecs.BOM_UTF8, codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE, codecs.BOM_UTF32_BE)
        content = source.choice(marks) + content
    if source.random() < 0.3:
        content = content[: source.randint(0, len(content))]
    return _write(folder, content, source)


@fault("delimiters and line ends", reading=True)
def delimiters(source: random.Random, folder: Path) -> Hostile:
    """Decimal commas, semicolons, tabs, declared delimiters, every line end and mixtures of them."""
    rows = honest(source, 2)
    if source.random() < 0.4:
        rows = [{k: v.replace(".", ",") for k, v in row.items()} for row in rows]
    newline = source.choice(
        ("\n", "\r\n", "\r", *("\n", "\r\n", "\r") * 3, "\n\r", "\x0b", "\x0c", "\u2028", "\x85")
    )
    text = delimited(cells_of(rows), source.choice(",,,;;;\t\t|: "), newline)
    if source.random() < 0.3:
        text = (
            f"sep={source.choice((',', ';', '|', 'a', ' ', chr(34), chr(13), chr(0), '.', '5', 'é'))}\n"
            + text
        )
    for _ in range(source.choice((0, 0, 1, 3))):
        at = source.randint(0, len(text))
        text = (
            text[:at] + source.choice(('"', '""', ",", ";", "\r", "\n", "\r\n", "\t", "'", "\\")) + text[at:]
        )
    return _write(folder, text.encode("utf-8"), source)


@fault("damaged bytes of text", reading=True)
def damaged(source: random.Random, folder: Path) -> Hostile:
    """Bytes changed, put in or taken out, NUL bytes among them."""
    content = bytearray(delimited(cells_of(honest(source, 2))).encode("utf-8"))
    for _ in range(source.randint(1, 6)):
        at = source.randrange(len(content))
        content[at : at + source.randint(0, 1)] = bytes(
            [source.choice((0, 0, 10, 13, 26, 27, 34, 44, 127, 128, 255, source.randrange(256)))]
        )
    return _write(folder, bytes(content), source)


@fault("headings", reading=True)
def headings(source: random.Random, folder: Path) -> Hostile:
    """Headings that stand twice, are blank, misspelt, hostile, too many groups, or in another case."""
    rows = honest(source, 1)
    cells = cells_of(rows)
    for _ in range(source.randint(1, 4)):
        at = source.randrange(len(cells[0]))
        known = cells[0][at]
        cells[0][at] = source.choice(
            (
                source.choice(cells[0]),
                "",
                known.upper(),
                known.replace("_", " "),
                known.replace("_", "-"),
                f" {known}\u00a0",
                known[:-1],
                known + "x",
                f"n_{MOST_GROUPS + source.randint(0, 2)}",
                "n_0",
                "n_01",
                "n_9999",
                "n_99999",
                "estimate",
                "estimate (sheet)",
                "row",
                "variance",
                "findings",
                "a" * source.choice((10, 300, 5000)),
                "{group}",
                "x",
                "x [C]",
                source.choice(WORDS),
                source.choice(FORMULAS),
            )
        )
    if source.random() < 0.3:
        cells[0] = [*cells[0], "", "", "x"]
    (folder / "sheet.csv").write_text(delimited(cells), encoding="utf-8", newline="")
    return Hostile(str(folder / "sheet.csv"), READ_OR_NOT)


@fault("rows of uneven length", reading=True)
def ragged(source: random.Random, folder: Path) -> Hostile:
    """Rows with more cells than headings or fewer, blank lines, headings far down, no rows, no headings."""
    cells = cells_of(honest(source, 2))
    for _ in range(source.randint(1, 3)):
        at = source.randrange(len(cells))
        cells[at] = source.choice(
            (
                cells[at] + ["1"] * source.choice((1, 2, 300)),
                cells[at][: source.randint(0, len(cells[at]))],
                [""] * len(cells[at]),
                [],
                [" "],
                ["\u200b"],
            )
        )
    cells = [[]] * source.choice((0, 0, 0, 0, 1, 2, 2000)) + cells[: source.choice((0, 1, 2, 3, 3, 3, 3, 3))]
    (folder / "sheet.csv").write_text(delimited(cells), encoding="utf-8", newline="")
    return Hostile(str(folder / "sheet.csv"), READ_OR_NOT)


@fault("wide, long and large text", every=20, reading=True)
def large(source: random.Random, folder: Path) -> Hostile:
    """Hundreds of columns nobody knows, cells of 100,000 letters, thousands of blank rows."""
    rows = honest(source, 1)
    cells = cells_of(rows)
    kind = source.randrange(4)
    if kind == 0:
        extra = [source.choice(("f_valu", "remark", "mean", "x")) + str(at) for at in range(300)]
        cells = [cells[0] + extra, cells[1] + ["1"] * len(extra)]
    elif kind == 1:
        cells[1][source.randrange(len(cells[1]))] = source.choice("1 =F(x,") * source.choice(
            (40_000, 100_000)
        )
    elif kind == 2:
        cells[0] = [*cells[0], source.choice("1 =_x(") * source.choice((1000, 100_000))]
    else:
        cells += [[""] * 3] * 5000 + [cells[1]]
    content = delimited(cells).encode("utf-8")
    if source.random() < 0.2:
        content += b"\n" * 50_000
    (folder / "sheet.csv").write_bytes(content)
    return Hostile(str(folder / "sheet.csv"), READ_OR_NOT)


@fault("no text at all", every=8)
def nonsense(source: random.Random, folder: Path) -> Hostile:
    """Random bytes, nothing, or only marks."""
    content = source.choice(
        (
            b"",
            b"\n\n\n",
            b"\xef\xbb\xbf",
            b"\xff\xfe",
            b",,,\n,,,\n",
            b'"',
            b"sep=;",
            b"sep=;\n",
            b"\x00" * 100,
            source.randbytes(source.randint(1, 3000)),
            b"%PDF-1.7\n" + source.randbytes(200),
            b"<html><table><tr><td>study</td></tr></table></html>",
            b'{"study": "Site 1"}',
            ",".join(headings_of(honest(source, 2))).encode(),
        )
    )
    return _write(folder, content, source)


@fault("parquet files", reading=True)
def parquet(source: random.Random, folder: Path) -> Hostile:
    """Columns of every type, nested and repeated ones too, headings that are odd, bytes changed or cut off."""
    cells = cells_of(honest(source, 2))
    columns: list[pa.Array] = [pa.array(list(column)) for column in zip(*cells[1:], strict=True)]
    names = list(cells[0])
    for _ in range(source.randint(0, 3)):
        at = source.randrange(len(columns))
        columns[at] = source.choice(
            (
                *(pa.array([4.31, None]), pa.array([1, 2]), pa.array([True, None]), pa.array([None, None])),
                *(pa.array([b"4.31", b"\xff"]), pa.array([[1], []]), pa.array([{"a": 1}, None])),
                *(pa.array([datetime.date(2024, 5, 3), None]), pa.array([datetime.datetime(2024, 5, 3)] * 2)),
                *(
                    pa.array([decimal.Decimal("4.310"), None]),
                    pa.array([math.inf, math.nan]),
                    pa.array([2**63 - 1] * 2),
                ),
                *(pa.array(["4.31", "4.31"]).dictionary_encode(), pa.array([source.choice(WORDS), ""])),
            )
        )
        if source.random() < 0.3:
            names[at] = source.choice((names[0], "", "row", source.choice(WORDS), source.choice(FORMULAS)))
    path = folder / source.choice(("sheet.parquet", "sheet.parquet", "sheet.PARQUET", "sheet", "sheet.csv"))
    pq.write_table(pa.Table.from_arrays(columns, names=names), path)
    if source.random() < 0.5:
        content = bytearray(path.read_bytes())
        for _ in range(source.randint(1, 6)):
            content[source.randrange(len(content))] = source.randrange(256)
        path.write_bytes(content[: source.choice((len(content), source.randint(0, len(content))))])
    return Hostile(str(path), READ_OR_NOT)
