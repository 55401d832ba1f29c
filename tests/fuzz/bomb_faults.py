"""Workbooks that would take all memory or all day: entities, far cells, deep nesting, contents without end."""

from __future__ import annotations

import random
from collections.abc import Callable
from pathlib import Path

from tests.fuzz.faults import Hostile, fault
from tests.fuzz.workbook_faults import SHEET, members_of, write


def _laughs(levels: int) -> bytes:
    """Nested entities, ten of each in the next ("a billion laughs")."""
    nested = (b'<!ENTITY e%d "%s">' % (at + 1, b"&e%d;" % at * 10) for at in range(levels))
    return b'<!DOCTYPE z [<!ENTITY e0 "ha">' + b"".join(nested) + b"]>"


@fault("entities in XML", every=4, reading=True)
def entities(source: random.Random, folder: Path) -> Hostile:
    """Document types with nested, external and recursive entities, used or not, in any part."""
    members = members_of(source)
    name = source.choice((SHEET, *sorted(members)))
    doctype = source.choice(
        (
            _laughs(9),
            b'<!DOCTYPE z [<!ENTITY e9 SYSTEM "file:///etc/hostname">]>',
            b'<!DOCTYPE z SYSTEM "http://example.invalid/z.dtd">',
            b'<!DOCTYPE z [<!ENTITY % p SYSTEM "http://example.invalid/p"> %p;]>',
            b'<!DOCTYPE z [<!ENTITY e9 "&e9;">]>',
            b'<!DOCTYPE z [<!ENTITY e9 "' + b"x" * 200_000 + b'">]>',
            b"<!DOCTYPE z []>",
        )
    )
    content = members[name]
    start = content.find(b"<", content.find(b"?>") + 2 if content.startswith(b"<?xml") else 0)
    content = content[:start] + doctype + content[start:]
    if source.random() < 0.5:
        content = content.replace(b"study", b"&e9;" * source.choice((1, 500)), 1)
    members[name] = content
    return write(folder, members)


def _replaced(members: dict[str, bytes], before: bytes, after: bytes) -> None:
    members[SHEET] = members[SHEET].replace(before, after, 1)


def _big_member(members: dict[str, bytes]) -> None:
    members["xl/media/zeros.bin"] = bytes(80_000_000)


def _big_text(members: dict[str, bytes]) -> None:
    words = (
        b'<row r="4"><c r="A4" t="inlineStr"><is><t>' + b"A" * 70_000_000 + b"</t></is></c></row></sheetData>"
    )
    _replaced(members, b"</sheetData>", words)


def _far_row(members: dict[str, bytes]) -> None:
    _replaced(
        members, b"</sheetData>", b'<row r="1999999999"><c r="A1999999999"><v>1</v></c></row></sheetData>'
    )


def _far_cells(members: dict[str, bytes]) -> None:
    row = b"".join(b'<row r="%d"><c r="XFD%d"><v>1</v></c></row>' % (at, at) for at in range(4, 90))
    _replaced(members, b"</sheetData>", row + b"</sheetData>")


def _deep(members: dict[str, bytes]) -> None:
    _replaced(members, b"</sheetData>", b"<x>" * 100_000 + b"</x>" * 100_000 + b"</sheetData>")


def _attributes(members: dict[str, bytes]) -> None:
    _replaced(
        members, b"<sheetData>", b"<sheetData " + b" ".join(b'a%d="1"' % at for at in range(50_000)) + b">"
    )


def _merges(members: dict[str, bytes]) -> None:
    _replaced(members, b"</sheetData>", b"</sheetData><mergeCells>" + b"<mergeCell " * 80_000)


def _styles(members: dict[str, bytes]) -> None:
    members["xl/styles.xml"] = members["xl/styles.xml"].replace(
        b"</cellXfs>", b'<xf numFmtId="0" fontId="0"/>' * 60_000 + b"</cellXfs>", 1
    )


def _sheets(members: dict[str, bytes]) -> None:
    one = b'<sheet name="s%d" sheetId="%d" r:id="rId1"/>'
    many = b"".join(one % (at, at + 9) for at in range(2_000))
    members["xl/workbook.xml"] = members["xl/workbook.xml"].replace(b"</sheets>", many + b"</sheets>", 1)


BOMBS: tuple[Callable[[dict[str, bytes]], None], ...] = (
    _far_row,
    _far_cells,
    _deep,
    _attributes,
    _merges,
    _styles,
    _sheets,
    _far_row,
    _far_cells,
    _merges,
)
"""Those that are made in no time."""
HEAVY_BOMBS = (_big_member, _big_text)


@fault("bombs in a workbook", every=40)
def bombs(source: random.Random, folder: Path) -> Hostile:
    """A small file that would take all memory or all day."""
    members = members_of(source)
    bomb = source.choice(HEAVY_BOMBS) if source.random() < 0.02 else source.choice(BOMBS)
    bomb(members)
    return write(folder, members)
