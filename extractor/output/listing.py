"""The catalogue of relations as a page to read."""

from __future__ import annotations

from collections.abc import Iterable

from rich.console import Console
from rich.text import Text

from extractor.catalogue.relation import Relation
from extractor.output.terminal import counted, say
from extractor.quantities import VOCABULARY

_SPOKEN = {"one-way-partial": "one-way with some groups not coded"}
"""Designs that only the program distinguishes."""


def show_relations(to: Console, relations: Iterable[Relation]) -> None:
    """Relations by the quantity they give, each with its formula, grade, designs and source."""
    shown = sorted(relations, key=lambda r: (list(VOCABULARY).index(r.gives), r.grade, r.name))
    heading = ""
    for relation in shown:
        if relation.gives != heading:
            if heading:
                to.print()
            heading = relation.gives
            quantity = VOCABULARY[heading]
            say(to, Text.assemble((heading, "bold"), f"  {quantity.symbol}: {quantity.meaning}"))
        _show(to, relation)
    if shown:
        to.print()
    say(to, counted(len(shown), "relation"))


def _show(to: Console, relation: Relation) -> None:
    say(to, Text.assemble(relation.name, "  ", (relation.equation, "cyan")), 2, 4)
    designs = ", ".join(_SPOKEN.get(design, design) for design in sorted(relation.designs))
    lines = [
        f"gives {relation.gives}; needs {', '.join(relation.needs)}; grade {relation.grade.word}",
        f"designs: {designs}",
        f"source: {relation.source}",
    ]
    if relation.assumes:
        lines.append(f"takes for granted: {relation.assumes}")
    if not relation.routes:
        lines.append("narrows intervals in the audit; no conversion uses it")
    for line in lines:
        say(to, Text(line, "dim"), 6, 2)
