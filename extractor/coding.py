"""The coded words of a row as arrays: design, contrast, direction, standardizer. Rows they rule out are blocked."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from extractor.catalogue.standardizers import DEFAULT
from extractor.contrast import contrast_weights
from extractor.quantities import DESIGNS, STANDARDIZERS, close_matches
from extractor.table import BoolArray, FloatArray, ObjectArray, ReportedTable

NO_CONTRAST = "none"
"""The contrast of a term that compares more than two levels."""

_DIRECTIONS = {"+": 1.0, "-": -1.0}
_CODED_AS = {
    "one-sample": "paired",
    "one sample": "paired",
    "crossover": "paired",
    "cross-over": "paired",
    "matched": "paired",
    "paired": "paired",
    "split": "mixed",
    "independent": "two-group",
    "parallel": "two-group",
    "cluster": "two-group",
    "repeated": "within",
    "covarian": "ancova",
    "pretest": "pre-post-control",
    "pre-post": "pre-post-control",
    "two-way": "factorial",
    "three-way": "factorial",
}
"""Parts of other words for a design, and the word by which it is coded."""

_POOLED_UNLESS_SAID = frozenset({"two-group"})
"""Designs in which a d of unsaid standardizer is taken as the pooled one; elsewhere several are in use."""


class Coding:
    """What is said of each row in words, and what follows for its use.

    blocked : why a row cannot be used ("" where it can). remarks : how a row was read where that changes results.
    contrasts : how a contrast was read, where there are several groups. All have shape (rows,).
    """

    def __init__(self, table: ReportedTable) -> None:
        self.table = table
        self.blocked: ObjectArray = np.full(table.rows, "", dtype=object)
        self.remarks: ObjectArray = np.full(table.rows, "", dtype=object)
        self.contrasts: ObjectArray = np.full(table.rows, "", dtype=object)

    def block(self, where: BoolArray, why: str) -> None:
        """Rule rows out; the first reason stays."""
        self.blocked[where & (self.blocked == "")] = why

    def remark(self, where: BoolArray | NDArray[np.intp], what: str) -> None:
        """Say of rows how they were read."""
        said = self.remarks[where]
        self.remarks[where] = np.where(said == "", what, said + f"; {what}")

    def designs(self) -> ObjectArray:
        """The design words; blocks rows whose word is unknown or missing."""
        coded = self.table.fact("design")
        for word in {str(w) for w in coded} - DESIGNS.keys():
            near = [_CODED_AS[w] for w in _CODED_AS if w in word.lower()] or close_matches(word, DESIGNS)
            hint = f" (did you mean {near[0]}?)" if near else ""
            known = ", ".join(DESIGNS)
            why = (
                f"design '{word}' is not one of {known}{hint}"
                if word
                else f"no design is coded; one of {known}"
            )
            self.block(coded == word, why)
        return coded

    def effective_designs(
        self, groups: FloatArray, room: BoolArray, df_effect: FloatArray, k_groups: FloatArray
    ) -> ObjectArray:
        """The designs whose relations hold.

        A one-way row with one effect df is a two-group row; one whose df or k speak of more groups than are coded,
        with room for them (``room``), is a one-way row of which only a part is coded.
        """
        coded = self.designs()
        one_way = coded == "one-way"
        more = (df_effect + 1 > groups) | (k_groups > groups)
        partial = one_way & (groups > 0) & ((groups == 1) | (more & room))
        single = (k_groups == 2) | (df_effect == 1)
        two = one_way & ~partial & ((groups == 2) | ((groups == 0) & single))
        for design in ("two-group", "paired", "pre-post-control"):
            self.block(
                (coded == design) & (groups > 2),
                f"design is {design} but more than two groups are coded: another design, and name the contrast",
            )
        self.remark(partial, "some groups of the model are not coded")
        return np.asarray(
            np.where(partial, "one-way-partial", np.where(two, "two-group", coded)), dtype=object
        )

    def weights(self, design: ObjectArray, groups: FloatArray) -> dict[tuple[str, int], FloatArray]:
        """Weights by (contrast text, number of groups); blocks rows whose contrast is not understood."""
        texts = self.table.fact("contrast")
        weights: dict[tuple[str, int], FloatArray] = {}
        for text in sorted({str(t) for t in texts}):
            for count in sorted({int(g) for g in groups[texts == text]}):
                where = (texts == text) & (groups == count)
                if text == NO_CONTRAST:
                    weights[text, count] = np.zeros(max(count, 2))
                    continue
                try:
                    weights[text, count], read = contrast_weights(text, max(count, 2))
                except ValueError as problem:
                    self.block(where, str(problem))
                    weights[text, count] = np.zeros(max(count, 2))
                    continue
                self.contrasts[where & (groups > 2)] = read
        return weights

    def directions(self) -> FloatArray:
        """+1, -1, or NaN where none is coded."""
        coded = self.table.fact("direction")
        direction = np.full(self.table.rows, np.nan)
        for word in sorted({str(w) for w in coded} - {""}):
            if word in _DIRECTIONS:
                direction[coded == word] = _DIRECTIONS[word]
            else:
                self.block(coded == word, f"direction '{word}' is neither + nor -")
        return direction

    def standardizers(self, design: ObjectArray) -> ObjectArray:
        """The standardizer of a printed d or g; "unstated" where several are in use and none is named."""
        coded = self.table.fact("standardizer")
        for word in sorted({str(w) for w in coded} - STANDARDIZERS.keys() - {""}):
            known = ", ".join(STANDARDIZERS)
            self.block(coded == word, f"standardizer '{word}' is not one of {known}")
        unsaid = np.where(np.isin(design, list(_POOLED_UNLESS_SAID)), "pooled", "unstated")
        return np.asarray(np.where(coded == "", unsaid, coded), dtype=object)


def leaf_of_d(standardizer: str, design: str) -> str:
    """The quantity a printed d stands for."""
    usual = DEFAULT.get(design, "pooled")
    if design == "factorial" and standardizer == usual:
        return "d_restored"
    return "cohens_d" if standardizer == usual == "pooled" else f"d_{standardizer}"
