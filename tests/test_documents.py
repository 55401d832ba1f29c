"""The reference pages say what commands and tables are now."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from extractor.commands.main import COMMANDS
from extractor.output.columns import EFFECTS, FINDINGS
from extractor.quantities import FACTS, VOCABULARY, Role
from tests.evidence import reference

PAGES = reference.pages()


@pytest.mark.parametrize("path", PAGES, ids=lambda path: path.parent.name)
def test_pages_are_not_stale(path: Path) -> None:
    found = path.read_text(encoding="utf-8")
    assert found == PAGES[path], "run python -m tests.evidence.reference --write"


def test_nothing_is_left_out() -> None:
    commands, tables = PAGES[reference.COMMAND_PAGE], PAGES[reference.TABLE_PAGE]
    sheet = PAGES[reference.CODEBOOK_PAGE]
    assert re.findall(r"^## `extractor (\w+)`$", commands, re.MULTILINE) == list(COMMANDS)
    assert "`--fail-on" in commands
    assert all(f"| `{name}` |" in tables for name in (*EFFECTS, *FINDINGS))
    coded = [name for name, quantity in VOCABULARY.items() if quantity.role is Role.REPORTED]
    assert all(f"| `{name}` |" in sheet or f"| `{name}_1, ...` |" in sheet for name in (*FACTS, *coded))
