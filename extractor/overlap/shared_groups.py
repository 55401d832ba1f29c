"""Which groups of one row are groups of another: told by sizes, labels and printed statistics."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from extractor.api import Result
from extractor.table import BoolArray, FloatArray, ObjectArray

_SHARED_MODEL = ("two-group", "one-way", "factorial")
"""Designs whose contrasts stand on the groups that are coded and on the error term they share."""

Pairs = NDArray[np.intp]
"""Positions of rows in the effect table, one side of each pair."""


@dataclass(frozen=True, slots=True)
class Groups:
    """The coded groups of every row of an effect table.

    known : ``n``, ``mean``, ``sd`` and ``contrast_weight`` (turned where the row is), shape (rows, groups), NaN where
    there is none. turned : rows whose sign the sheet turns. design, analysis, outcome : of each row.
    """

    known: dict[str, FloatArray]
    turned: BoolArray
    design: ObjectArray
    analysis: ObjectArray
    outcome: ObjectArray

    @property
    def sizes(self) -> FloatArray:
        """Participants of all groups, by row."""
        return np.asarray(np.nansum(self.known["n"], axis=1))

    @property
    def side(self) -> FloatArray:
        """Sign of the first group in each row's contrast."""
        side = np.sign(self.known["contrast_weight"][:, 0])
        return np.where(np.isfinite(side), side, np.where(self.turned, -1.0, 1.0))

    @property
    def counted(self) -> FloatArray:
        """Groups whose size is known, by row."""
        return np.asarray(np.isfinite(self.known["n"]).sum(axis=1), dtype=float)

    @property
    def sized(self) -> BoolArray:
        """Rows that give the sizes of their groups, in a design in which contrasts stand on them."""
        return np.asarray((self.counted >= 2) & np.isin(self.design, _SHARED_MODEL))

    def matches(self, one: Pairs, two: Pairs) -> BoolArray:
        """Which group of the one row is which of the other: shape (pairs, groups, groups).

        In rows of one analysis, and in rows of unlike outcomes, groups of the same sizes correspond by number, unless
        (in one analysis) their means or SDs say otherwise. In other rows with two groups each, a group is the same
        where its n, mean and SD are printed and equal.
        """
        n, other = self.known["n"][one], self.known["n"][two]
        alike = ((n == other) | (np.isnan(n) & np.isnan(other))).all(axis=1)
        designs = self.sized[one] & self.sized[two] & (self.design[one] == self.design[two])
        labelled = (self.analysis[one] != "") & (self.analysis[one] == self.analysis[two])
        unlike = self.outcome[one] != self.outcome[two]
        numbered = alike & designs & ((labelled & ~self._contradict(one, two)) | unlike)
        identity = np.eye(n.shape[1], dtype=bool)[None] & np.isfinite(n)[:, :, None]
        equal = np.ones((len(one), n.shape[1], n.shape[1]), dtype=bool)
        for name in ("n", "mean", "sd"):
            equal &= self.known[name][one][:, :, None] == self.known[name][two][:, None, :]
        two_groups = designs & (self.design[one] == "two-group")
        printed = equal & (two_groups & ~numbered & ~unlike)[:, None, None]
        return np.asarray((identity & numbered[:, None, None]) | printed)

    def weighted(self, one: Pairs, two: Pairs, match: BoolArray) -> tuple[FloatArray, FloatArray]:
        """Sum over the shared groups of w u / n, and the participants in them, by pair."""
        w, u = self.known["contrast_weight"][one], self.known["contrast_weight"][two]
        n = self.known["n"][one]
        with np.errstate(invalid="ignore", divide="ignore"):
            products = np.where(match, w[:, :, None] * u[:, None, :] / n[:, :, None], 0.0)
            shared = np.where(match.any(axis=2), n, 0.0).sum(axis=1)
        return products.sum(axis=(1, 2)), shared

    def squared(self) -> FloatArray:
        """Sum over a row's groups of w² / n."""
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.asarray(np.nansum(self.known["contrast_weight"] ** 2 / self.known["n"], axis=1))

    def _contradict(self, one: Pairs, two: Pairs) -> BoolArray:
        """Whether a group of one number has one mean or SD in the one row and another in the other."""
        found = np.zeros(len(one), dtype=bool)
        for name in ("mean", "sd"):
            here, there = self.known[name][one], self.known[name][two]
            found |= (np.isfinite(here) & np.isfinite(there) & (here != there)).any(axis=1)
        return found


def coded_groups(result: Result) -> Groups:
    """The groups of every row of a result."""
    table = result.conversion.evidence.table
    blocks = [chosen.block for chosen in result.conversion.chosen]
    rows = len(result.effects)
    shape = (rows, max([block.groups for block in blocks] + [2]))
    known = {name: np.full(shape, np.nan) for name in ("n", "mean", "sd", "contrast_weight")}
    design: ObjectArray = np.full(rows, "", dtype=object)
    for block in blocks:
        design[block.positions] = block.design
        for name, into in known.items():
            leaf = block.leaves.get(name)
            if leaf is not None:
                width = min(leaf.value.shape[1], shape[1])
                into[block.positions, :width] = leaf.value[:, :width]
    turned = np.asarray(table.fact("orientation") == "-", dtype=bool)
    known["contrast_weight"][turned] *= -1
    return Groups(
        known=known,
        turned=turned,
        design=design,
        analysis=table.fact("analysis").astype(str),
        outcome=result.effects["outcome"].astype(str).to_numpy(dtype=object),
    )
