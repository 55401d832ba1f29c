"""The page ``how to code`` of a blank coding sheet, in words."""

from __future__ import annotations

from collections.abc import Sequence

from extractor.codebook import Codebook
from extractor.output.coding_columns import PARTS, Column
from extractor.quantities import DESIGNS

Line = tuple[str, ...]
"""Cells of one line; one that begins with ``# `` is a heading."""


def guide_lines(codebook: Codebook, columns: Sequence[Column]) -> list[Line]:
    """The page line by line: how to type, what the designs are, what each column is for."""
    comma = codebook.decimal_mark == ","
    zero, bound, stars = ("5,10", "< ,001", "4,31*") if comma else ("5.10", "< .001", "4.31*")
    lines: list[Line] = [
        (f"# How to code: {codebook.title}",),
        (
            "One row for each effect. Copy what the article prints, digit by digit; compute nothing, convert nothing, "
            "guess nothing. What is not printed stays blank.",
        ),
        (),
        ("# Numbers",),
        (
            f"Keep every zero: {zero} says more than {zero[:-1]}. The cells are in text format for that reason; leave "
            "them so, and paste as text.",
        ),
        (
            f"Type bounds as they are printed: {bound}, n.s. Stars alone are no number. A mark of a table, such as in "
            f"{stars}, may stay.",
        ),
        (
            "The decimal mark is the comma; no mark for thousands."
            if comma
            else "The decimal mark is the point; no mark for thousands.",
        ),
        ("NA, n/a, a dash and blank all mean: not reported.",),
        (
            "Group 1 minus group 2 is the direction of every difference; number the groups accordingly. Where a "
            "statistic has no sign (F, p, eta squared), give the direction: + where group 1 is higher.",
        ),
        ("Where a lower score is the better outcome, put - into the column orientation.",),
        (),
        ("# Designs",),
    ]
    if codebook.design:
        lines.append((f"Rows that do not say are taken as {codebook.design}: {DESIGNS[codebook.design]}.",))
    lines += [(word, "", meaning) for word, meaning in DESIGNS.items()]
    lines += [
        (),
        ("# Other sheets",),
        (
            "groups: one line for each group or cell, for analyses with more groups than there are columns and for "
            "factorial ones. The column analysis joins the lines to the rows of the coded sheet. A heading that is no "
            "quantity is a factor; its cells hold the levels.",
        ),
        (
            "decisions: what was decided about a finding. keep: the article does say so. correct: use another value, "
            "and say where it comes from. waive: the finding does not apply, and why. Nothing is ever deleted.",
        ),
        (),
        ("A finding is a question for the article, not a verdict on anybody: read the page again first.",),
        (),
        ("# Column", "# Symbol", "# What it holds", "# Name in the vocabulary"),
    ]
    for part, title in PARTS.items():
        own = [column for column in columns if column.part == part]
        if own:
            lines.append((f"# {title}",))
        lines += [(column.heading, column.symbol, _meaning(column), column.name) for column in own]
    return lines


def _meaning(column: Column) -> str:
    said = all(word in column.meaning for word in column.words)
    return column.meaning if said else f"{column.meaning} ({', '.join(column.words)})"
