"""Faults of workbooks: cells of every stored type, the archive, its XML, bombs, and what else a workbook may carry."""

from __future__ import annotations

import datetime
import io
import random
import struct
import zipfile
from collections.abc import Iterable
from functools import lru_cache
from pathlib import Path

from openpyxl import Workbook
from openpyxl.cell.rich_text import CellRichText, TextBlock
from openpyxl.cell.text import InlineFont
from openpyxl.comments import Comment
from openpyxl.utils.exceptions import IllegalCharacterError
from openpyxl.worksheet.formula import ArrayFormula
from openpyxl.worksheet.worksheet import Worksheet

from tests.fuzz.faults import READ_OR_NOT, Hostile, as_csv, cells_of, fault, honest
from tests.fuzz.seeds import EXTREMES, FORMULAS, NUMBERS, WORDS

_FORMATS = (
    "General",
    "0",
    "0.00",
    "0.0##",
    "0%",
    "0.0%",
    "0.00E+00",
    "d-mmm",
    "yyyy-mm-dd",
    "[h]:mm",
    "# ?/?",
    "@",
    '"x"0.0',
    "0.00;[Red]-0.00",
    "[<1]0.000;0.0",
    "#,##0.0,",
    "0" * 200,
    "0." + "0" * 300,
    "[" * 3000,
    '"' * 200,
    ";" * 100,
    "\\",
)
_RAW = (
    "1e308",
    "-1E+308",
    "1e309",
    "INF",
    "NaN",
    "-0",
    "0.1e-320",
    "9" * 300,
    "1" * 5000,
    "4.31 ",
    " 4.31",
    "4,31",
    "0x1p3",
    "",
    "abc",
    "1_000",
    "１２",
    "99999999999",
)
SHEET = "xl/worksheets/sheet1.xml"


def _stored(text: str) -> object:
    try:
        return float(text)
    except ValueError:
        return text


def _set(sheet: Worksheet, row: int, column: int, value: object) -> None:
    try:
        # the point is to try what the library does not take
        sheet.cell(row, column).value = value  # type: ignore[assignment]
    except (ValueError, IllegalCharacterError):
        # what a workbook cannot hold is no fault of the reader
        sheet.cell(row, column).value = "x"


def book_of(source: random.Random, rows: int = 1) -> tuple[Workbook, Worksheet]:
    """A workbook of honest rows, its numbers stored as numbers."""
    return _book(cells_of(honest(source, rows)))


def _book(lines: Iterable[Iterable[str]]) -> tuple[Workbook, Worksheet]:
    book = Workbook()
    sheet = book.worksheets[0]
    sheet.title = "coded"
    for at, cells in enumerate(lines, 1):
        for column, text in enumerate(cells, 1):
            if text:
                _set(sheet, at, column, _stored(text) if at > 1 else text)
    return book, sheet


def members_of(source: random.Random, rows: int = 1) -> dict[str, bytes]:
    """The members of the archive of such a workbook."""
    return dict(_saved_once(tuple(map(tuple, cells_of(honest(source, rows))))))


@lru_cache(maxsize=600)
def _saved_once(lines: tuple[tuple[str, ...], ...]) -> dict[str, bytes]:
    return saved(_book(lines)[0])


def packed(members: dict[str, bytes], path: Path) -> Path:
    """An archive of these members."""
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED, compresslevel=1) as archive:
        for member, content in members.items():
            archive.writestr(member, content)
    return path


def saved(book: Workbook) -> dict[str, bytes]:
    """The members of the archive that a workbook becomes."""
    stream = io.BytesIO()
    book.save(stream)
    with zipfile.ZipFile(stream) as archive:
        return {name: archive.read(name) for name in archive.namelist()}


def write(folder: Path, members: dict[str, bytes], name: str = "sheet.xlsx") -> Hostile:
    return Hostile(str(packed(members, folder / name)), READ_OR_NOT)


@fault("stored cells of every type", every=2)
def typed_cells(source: random.Random, folder: Path) -> Hostile:
    """Dates, times, truth values, errors, formulas, rich text, extreme numbers, each with any number format."""
    book, sheet = book_of(source, 2)
    for _ in range(source.randint(1, 8)):
        row, column = (
            source.randint(1 if source.random() < 0.1 else 2, 3),
            source.randint(1, sheet.max_column),
        )
        value: object = source.choice(
            (
                _stored(source.choice(EXTREMES)),
                _stored(source.choice(NUMBERS)),
                source.choice((0, 1, -1, 10**15, 10**299, True, False)),
                source.choice((1e308, -1e308, 5e-324, 1e-300, -0.0, 0.1 + 0.2, 123456789.123456)),
                datetime.datetime(2024, 5, 3, 12, 30),
                datetime.time(23, 59),
                datetime.timedelta(days=400, seconds=5),
                source.choice(("#DIV/0!", "#N/A", "#REF!", "#NAME?")),
                source.choice(FORMULAS),
                source.choice(WORDS),
                "=SUM(A1:A3)",
                ArrayFormula("A2:A3", "=A1*2"),
                CellRichText("a", TextBlock(InlineFont(b=True), source.choice(("b", "4.31")))),
            )
        )
        _set(sheet, row, column, value)
        sheet.cell(row, column).number_format = source.choice(_FORMATS)
    return write(folder, saved(book))


@fault("raw cells of every type", reading=True)
def raw_cells(source: random.Random, folder: Path) -> Hostile:
    """Cells as other programs may write them: a type that does not fit, no type, unknown references and styles."""
    members = members_of(source, 2)
    parts = members[SHEET].split(b"<c ")
    for at in source.sample(range(1, len(parts)), min(source.randint(1, 2), len(parts) - 1)):
        kind = source.choice((*["n"] * 6, *["str"] * 3, "b", "e", "d", "s", "inlineStr", "z", ""))
        address = source.choice(("A2", "B2", "B2", "C2", "D3", "XFD2", "ZZZZ2", "A1048577", "a2", "2A", ""))
        style = source.choice(("0", "0", "0", "0", "9999", "-1", "x"))
        keep = parts[at].split(b"</c>")[-1] if b"</c>" in parts[at] else b""
        formula = source.choice(("", "", "<f>1+1</f>", '<f t="shared" si="9"/>', '<f t="dataTable"/>'))
        value = source.choice((*_RAW, *NUMBERS[:20])).replace("<", "&lt;")
        cell = f'r="{address}" t="{kind}" s="{style}">{formula}<v>{value}</v></c>'
        parts[at] = cell.encode() + keep
    members[SHEET] = b"<c ".join(parts)
    return write(folder, members)


@fault("damaged bytes of a workbook", every=2, reading=True)
def damaged_archive(source: random.Random, folder: Path) -> Hostile:
    """Bytes of the archive changed, a piece cut out, doubled or put before it."""
    path = packed(members_of(source), folder / "sheet.xlsx")
    content = bytearray(path.read_bytes())
    for _ in range(source.randint(1, 8)):
        at = source.randrange(4, len(content))
        content[at] = source.randrange(256)
    kind = source.random()
    if kind < 0.2:
        del content[source.randrange(len(content)) :]
    elif kind < 0.3:
        content += content[source.randrange(len(content)) :]
    elif kind < 0.4:
        content = bytearray(b"study,f_value\na,4.31\n") + content
    elif kind < 0.5:
        content[4:4] = source.randbytes(30)
    path.write_bytes(content)
    return Hostile(str(path), READ_OR_NOT)


@fault("zip structure", reading=True)
def zip_structure(source: random.Random, folder: Path) -> Hostile:
    """Members left out, doubled, renamed, exchanged, encrypted, falsely sized, packed otherwise, outside the folder."""
    members = members_of(source)
    path = folder / "sheet.xlsx"
    packing = source.choice((zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED, zipfile.ZIP_BZIP2, zipfile.ZIP_LZMA))
    names = list(members)
    left_out = source.choice((*names, "", ""))
    with zipfile.ZipFile(path, "w", packing) as archive:
        for name in source.sample(names, len(names)):
            if name != left_out:
                archive.writestr(
                    source.choice((name,) * 30 + (name.upper(), f"/{name}", f"../{name}")), members[name]
                )
        if source.random() < 0.3:
            extra = source.choice(
                ("../../evil.txt", "/etc/evil", "C:\\evil", "xl/worksheets/sheet9.xml", "a" * 3000)
            )
            archive.writestr(extra, source.choice((b"", b"x", members[SHEET])))
        archive.comment = source.choice((b"", b"PK\x05\x06", b"x" * 1000))
    content = bytearray(path.read_bytes())
    if source.random() < 0.5:
        # a field of the central directory: flags, method, sizes, offsets
        at = content.find(b"PK\x01\x02", source.randrange(len(content)))
        if at > 0:
            offset, width = source.choice(
                ((8, "<H"), (10, "<H"), (16, "<I"), (20, "<I"), (24, "<I"), (42, "<I"))
            )
            most = 0xFFFF if width == "<H" else 0xFFFFFFFF
            struct.pack_into(width, content, at + offset, source.choice((0, 1, 8, 99, most // 2, most)))
    path.write_bytes(content)
    return Hostile(str(path), READ_OR_NOT)


@fault("damaged XML of a workbook", reading=True)
def damaged_xml(source: random.Random, folder: Path) -> Hostile:
    """Bytes changed inside the archive's own files, which are whole otherwise."""
    members = members_of(source)
    for _ in range(source.randint(1, 2)):
        name = source.choice((SHEET, SHEET, *sorted(members)))
        content = bytearray(members[name])
        for _ in range(source.randint(1, 3)):
            at = source.randrange(len(content))
            content[at : at + source.randint(0, 2)] = source.choice(
                (*(bytes([sign]) for sign in b'<>"&=0 9Arvt\x00\xff'), b"&#0;", b"]]>")
            )
        members[name] = bytes(content)
    return write(folder, members)


@fault("merged, hidden, linked, macros", reading=True)
def furniture(source: random.Random, folder: Path) -> Hostile:
    """What else a workbook carries: hidden sheets and rows, merged cells, comments, links, macros, any titles."""
    book, sheet = book_of(source, 2)
    for at, title in enumerate(
        source.sample(("old", "groups", "decisions", "Read me", "a'b", "x" * 31, "ünï", "effects", "=1+1"), 3)
    ):
        other = book.create_sheet(title, source.choice((0, None)))
        other.sheet_state = source.choice(("visible", "hidden", "veryHidden"))
        filled = [["study", "f_value"], [f"Site {at}", 3.2]]
        for row in source.choice(([], [["what to do"]], filled, [["analysis", "n"]])):
            other.append(row)
    sheet.sheet_state = source.choice(("visible", "visible", "hidden", "veryHidden"))
    if all(other.sheet_state != "visible" for other in book.worksheets):
        # no program writes a workbook that shows nothing
        book.create_sheet("how to code")
    sheet.row_dimensions[source.randint(1, 3)].hidden = source.random() < 0.5
    sheet.column_dimensions["B"].hidden = source.random() < 0.5
    if source.random() < 0.5:
        sheet.merge_cells(source.choice(("A1:B1", "A2:A3", "A2:D3", "A1:A3")))
    if source.random() < 0.3:
        sheet["E2"].comment = Comment("=cmd()", "x")
    if source.random() < 0.3:
        sheet["F2"].hyperlink = "file:///etc/passwd"
    members = saved(book)
    if source.random() < 0.4:
        _link(members)
    if source.random() < 0.4:
        members["xl/vbaProject.bin"] = b"\xd0\xcf\x11\xe0 not to be run"
    return write(folder, members, source.choice(("sheet.xlsx", "sheet.xlsm", "sheet.XLSX", "sheet")))


def _link(members: dict[str, bytes]) -> None:
    """A link to another workbook, as Office Open XML wants it: a part, its relationship, its type, its mention."""
    main = b"http://schemas.openxmlformats.org/spreadsheetml/2006/main"
    kinds = b"http://schemas.openxmlformats.org/officeDocument/2006/relationships"
    members["xl/externalLinks/externalLink1.xml"] = (
        b'<externalLink xmlns="%b" xmlns:r="%b"><externalBook r:id="rId1"><sheetNames><sheetName val="x"/>'
        b"</sheetNames></externalBook></externalLink>" % (main, kinds)
    )
    members["xl/externalLinks/_rels/externalLink1.xml.rels"] = (
        b'<Relationships xmlns="http://schemas.openxmlformats.org/package/2006/relationships"><Relationship Id="rId1" '
        b'Type="%b/externalLinkPath" Target="http://example.invalid/x.xlsx" TargetMode="External"/></Relationships>'
        % kinds
    )
    for name, before, added in (
        (
            "[Content_Types].xml",
            b"</Types>",
            b'<Override PartName="/xl/externalLinks/externalLink1.xml" ContentType="application/vnd.'
            b'openxmlformats-officedocument.spreadsheetml.externalLink+xml"/>',
        ),
        (
            "xl/_rels/workbook.xml.rels",
            b"</Relationships>",
            b'<Relationship Id="rId99" Type="%b/externalLink" Target="externalLinks/externalLink1.xml"/>'
            % kinds,
        ),
        (
            "xl/workbook.xml",
            b"<definedNames",
            b'<externalReferences><externalReference xmlns:r="%b" r:id="rId99"/></externalReferences>'
            % kinds,
        ),
    ):
        at = before if before in members[name] else b"<calcPr"
        assert at in members[name]
        members[name] = members[name].replace(at, added + at, 1)


@fault("not the file it says", every=4)
def wrong_file(source: random.Random, folder: Path) -> Hostile:
    """A workbook called csv, text called xlsx, an old workbook, a folder, no file, a link to itself."""
    kind = source.randrange(9)
    plain = as_csv(folder, cells_of(honest(source, 1)))
    if kind == 0:
        target = folder / "sheet.xlsx"
        Path(plain).rename(target)
        return Hostile(str(target), READ_OR_NOT)
    if kind == 1:
        packed(members_of(source), folder / "book.xlsx")
        target = folder / source.choice(("book.csv", "book", "book.txt", "book.zip"))
        (folder / "book.xlsx").rename(target)
        return Hostile(str(target), READ_OR_NOT)
    if kind == 2:
        (folder / "old.xls").write_bytes(b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + source.randbytes(500))
        return Hostile(str(folder / "old.xls"), READ_OR_NOT)
    if kind == 3:
        return Hostile(str(folder), READ_OR_NOT)
    if kind == 4:
        (folder / "loop.csv").symlink_to(folder / "loop.csv")
        return Hostile(str(folder / "loop.csv"), READ_OR_NOT)
    if kind == 5:
        names = ("no such.csv", "a\udcff.csv", "../../no.xlsx", "x" * 400, "\x1b[31m.csv", "~", "sheet.csv/x")
        name = source.choice(names)
        return Hostile(str(folder / name), READ_OR_NOT)
    if kind == 6:
        packed(members_of(source), folder / "book.xlsx")
        return Hostile("-", READ_OR_NOT, stdin=(folder / "book.xlsx").read_bytes())
    if kind == 7:
        return Hostile(source.choice(("/dev/null", "/dev/zero", "/dev/full")), READ_OR_NOT)
    (folder / "zip.xlsx").write_bytes(b"PK\x03\x04" + source.randbytes(source.choice((0, 10, 1000))))
    return Hostile(str(folder / "zip.xlsx"), READ_OR_NOT)
