"""Which columns a blank coding sheet has, in which order, and what each is for."""

from __future__ import annotations

from dataclasses import dataclass

from extractor.codebook import RESPONSES, Codebook, Meaning
from extractor.quantities import (
    DESIGNS,
    FACTS,
    STANDARDIZERS,
    VOCABULARY,
    Role,
    Shape,
    group_heading,
)

_FIRST = ("study", "outcome", "effect", "analysis", "design", "term", "measured_factors", "contrast")
_THEN = ("direction", "orientation", "reported")
_LAST = ("page", "quote", "coder")
_ALWAYS = ("study", "outcome", "effect", "analysis", "page", "quote", "coder")
"""Facts every sheet has room for, whatever the codebook names."""

WORDS: dict[str, tuple[str, ...]] = {
    "design": tuple(DESIGNS),
    "direction": ("+", "-"),
    "orientation": ("+", "-"),
    "standardizer": tuple(word for word in STANDARDIZERS if word != "unstated"),
    "responses": RESPONSES,
    "tails": ("1", "2"),
}
"""What can be chosen in columns that hold one of a few words."""

PARTS = {
    "effect": "which effect",
    "test": "the test and the source table",
    "group": "the groups",
    "printed": "printed effect sizes and differences",
    "model": "the model and the scale",
    "place": "where it stands",
}
"""Parts of a sheet, in order, and what they are called."""


@dataclass(frozen=True, slots=True)
class Column:
    """One column of a coding sheet.

    heading : as the codebook calls it. name : the vocabulary's, with the number of the group.
    meaning : what is to be typed. number : holds a printed number. words : what can be chosen.
    part, group : where it stands; group 0 has no number.
    """

    heading: str
    name: str
    symbol: str
    meaning: str
    number: bool
    words: tuple[str, ...]
    part: str
    group: int


def columns_of(codebook: Codebook, groups: int) -> list[Column]:
    """The columns of a blank sheet for a codebook.

    Parameters
    ----------
    groups : how many numbered groups columns such as ``n {group}`` are written for.
    """
    headings: dict[Meaning, str] = {}
    for heading, meaning in codebook.columns.items():
        headings.setdefault(meaning, heading)
    for pattern, quantity in codebook.patterns:
        for group in range(1, groups + 1):
            if (quantity, group) not in headings:
                headings[quantity, group] = _spelled(pattern.pattern, group)
    wanted = (*_ALWAYS, *(() if codebook.design else ("design",)))
    for name in wanted:
        headings.setdefault(name, name)
    found = [_column(heading, meaning) for meaning, heading in headings.items()]
    return sorted(found, key=_place)


def _spelled(pattern: str, group: int) -> str:
    """The heading a pattern stands for: its text with the number in the place of the group."""
    text = pattern.replace("(?P<group>[1-9][0-9]{0,3})", str(group))
    return "".join(letter for at, letter in enumerate(text) if letter != "\\" or text[at - 1 : at] == "\\")


def _column(heading: str, meaning: Meaning) -> Column:
    if isinstance(meaning, str):
        part = "place" if meaning in _LAST else "effect" if meaning in (*_FIRST, *_THEN) else "model"
        part = "printed" if meaning == "standardizer" else part
        words = WORDS.get(meaning, ())
        return Column(heading, meaning, "", FACTS[meaning], False, words, part, 0)
    name, group = meaning
    quantity = VOCABULARY[name]
    told = quantity.meaning if group is None else quantity.meaning.replace("the group", f"group {group}")
    number = name not in WORDS
    spelled = name if group is None else group_heading(name, group)
    return Column(
        heading, spelled, quantity.symbol, told, number, WORDS.get(name, ()), _part(name), group or 0
    )


def _part(name: str) -> str:
    """Where a quantity stands, told by the section of the vocabulary it is in."""
    order = [n for n, q in VOCABULARY.items() if q.role is Role.REPORTED]
    if VOCABULARY[name].shape is Shape.GROUP:
        return "group"
    if order.index(name) <= order.index("ms_error"):
        return "test"
    return "printed" if order.index(name) <= order.index("effect_ci_high") else "model"


def _place(column: Column) -> tuple[int, int, int]:
    """Sort key: part, group, then the order of the vocabulary."""
    order = list(dict.fromkeys([*_FIRST, *_THEN, *VOCABULARY, *(f for f in FACTS if f not in _LAST), *_LAST]))
    bare = column.name.rsplit("_", 1)[0] if column.group else column.name
    return list(PARTS).index(column.part), column.group, order.index(bare)
