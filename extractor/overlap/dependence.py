"""Effects that share participants: their covariances, and the matrix a synthesis needs.

For standardised mean differences d1 = sum w_j M_j / s1 and d2 = sum u_k M_k / s2 over groups that both rows have,

    Cov(d1, d2) = rho sum w_j u_j / n_j + rho² d1 d2 n_shared / (2 N1 N2)

where n_shared counts the participants behind both standard deviations, N1 and N2 those behind each, and rho is the
correlation of the two outcomes, 1 for one outcome. It contains the large-sample formulas of Gleser & Olkin (2009):
contrasts of one analysis of variance share its whole error term, so that the last factor is 1 / (2N), and with one
control group the sum is 1 / n_C; for two outcomes of the same groups it is rho (1/n1 + 1/n2) + rho² d1 d2 / (2N).
For two comparisons that share only the control group, each with its own pooled standard deviation, the last factor
follows by the delta method from Cov(s1², s2²). g takes the small-sample factors of both rows. For log odds ratios
that share the group with cells c and d the covariance is 1/c + 1/d.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from extractor.api import Result
from extractor.errors import UsageError
from extractor.sampling.moments import small_sample_factor
from extractor.table import Assumption, BoolArray, FloatArray, ObjectArray, ReportedTable
from extractor.words import listed

COLUMNS = ["row", "other_row", "covariance", "why"]
UNRESOLVED = ["row", "other_row", "why"]

_STANDARDIZED = ("cohens_d", "hedges_g")
_SHARED_MODEL = ("two-group", "one-way", "factorial")
"""Designs whose contrasts stand on the groups that are coded and on the error term they share."""
_SMALLEST = 1e-10
"""Smallest eigenvalue of a matrix of correlations that still counts as positive."""


@dataclass(frozen=True, slots=True)
class Dependence:
    """Pairs of effects that share participants.

    pairs : ``row``, ``other_row``, ``covariance`` and ``why``; each pair once, independent rows have no entry.
    unresolved : pairs that share participants, or may, and for which no covariance could be had, with the reason.
    """

    pairs: pd.DataFrame
    unresolved: pd.DataFrame


def contrast_covariance(
    weighted: FloatArray,
    d_one: FloatArray,
    d_two: FloatArray,
    n_shared: FloatArray,
    n_one: FloatArray,
    n_two: FloatArray,
    rho: FloatArray | float = 1.0,
) -> FloatArray:
    """Large-sample covariance of two standardised contrasts; all arguments of one shape.

    Parameters
    ----------
    weighted : sum over the shared groups of w_j u_j / n_j.
    n_shared, n_one, n_two : participants behind both standard deviations, and behind each.
    rho : correlation of the two outcomes; 1 for one outcome.

    Source: Gleser & Olkin (2009), and the delta method where only some groups are shared.
    """
    return np.asarray(rho * weighted + rho**2 * d_one * d_two * n_shared / (2 * n_one * n_two))


def dependence(result: Result, outcomes: Assumption | None = None) -> Dependence:
    """Covariances of the effects of a result that share participants.

    Parameters
    ----------
    outcomes : correlation of two outcomes measured on the same participants, and who supplied it; without it such
        pairs stay unresolved.

    Raises
    ------
    UsageError
        where the covariances of a study's effects do not go with their variances: the matrix would not be positive
        definite. It names the rows.
    """
    found = _Pairs(result, outcomes)
    answer = Dependence(*found.tables())
    check_positive(result.effects, answer.pairs)
    return answer


def covariance_matrix(effects: pd.DataFrame, pairs: pd.DataFrame) -> tuple[NDArray[np.int64], FloatArray]:
    """The row numbers of all effects with a variance, and their covariance matrix, of shape (effects, effects)."""
    usable = effects[(effects["status"] == "converted") & (effects["variance"] > 0)]
    rows = usable["row"].to_numpy(dtype=np.int64)
    matrix = np.diag(usable["variance"].to_numpy(dtype=float))
    one, two = (np.searchsorted(rows, pairs[name].to_numpy(dtype=np.int64)) for name in ("row", "other_row"))
    matrix[one, two] = matrix[two, one] = pairs["covariance"].to_numpy(dtype=float)
    return rows, matrix


def check_positive(effects: pd.DataFrame, pairs: pd.DataFrame) -> None:
    """Raise ``UsageError`` unless every block of dependent effects has a positive definite covariance matrix."""
    left = {int(row) for name in ("row", "other_row") for row in pairs[name]}
    while left:
        members = {min(left)}
        while True:
            touched = pairs["row"].isin(members) | pairs["other_row"].isin(members)
            grown = members | set(pairs.loc[touched, "row"]) | set(pairs.loc[touched, "other_row"])
            if grown == members:
                break
            members = grown
        rows, matrix = covariance_matrix(effects[effects["row"].isin(members)], pairs[touched])
        scale = np.sqrt(np.diag(matrix))
        if float(np.linalg.eigvalsh(matrix / np.outer(scale, scale)).min()) < _SMALLEST:
            named = listed([str(row) for row in rows])
            raise UsageError(
                f"the covariance matrix of rows {named} is not positive definite: is one effect coded twice, is a "
                "contrast the sum of others, or is the assumed correlation too high?"
            )
        left -= members


class _Pairs:
    """The rows that can be paired, as arrays over the rows of the effect table, and the pairs among them."""

    def __init__(self, result: Result, outcomes: Assumption | None) -> None:
        self.outcomes = outcomes
        effects, table = result.effects, result.conversion.evidence.table
        self.metric = result.conversion.metric
        self.row = effects["row"].to_numpy(dtype=np.int64)
        self.estimate = effects["estimate"].to_numpy(dtype=float)
        self.usable = ((effects["status"] == "converted") & (effects["variance"] > 0)).to_numpy()
        self.pooled = (effects["standardizer"] == "pooled").to_numpy()
        self.from_counts = effects["route"].str.startswith("count_a, count_b, count_c, count_d").to_numpy()
        self.study = effects["study"].astype(str).to_numpy(dtype=object)
        self.outcome = effects["outcome"].astype(str).to_numpy(dtype=object)
        self.analysis = table.fact("analysis").astype(str)
        self.design: ObjectArray = np.full(len(self.row), "", dtype=object)
        self._groups(result)
        self.counts = np.stack([_column(table, f"count_{cell}") for cell in "abcd"], axis=1)

    def _groups(self, result: Result) -> None:
        """Sizes, means, SDs and contrast weights of the coded groups: shape (rows, groups), NaN where none."""
        blocks = [chosen.block for chosen in result.conversion.chosen]
        widest = max((block.groups for block in blocks), default=0)
        shape = (len(self.row), max(widest, 1))
        self.known = {name: np.full(shape, np.nan) for name in ("n", "mean", "sd", "contrast_weight")}
        for block in blocks:
            self.design[block.positions] = block.design
            for name, into in self.known.items():
                leaf = block.leaves.get(name)
                if leaf is not None:
                    width = min(leaf.value.shape[1], shape[1])
                    into[block.positions, :width] = leaf.value[:, :width]
        flipped = result.conversion.evidence.table.fact("orientation") == "-"
        self.known["contrast_weight"][flipped] *= -1
        self.side = np.where(flipped, 1.0, -1.0)
        self.complete = np.isfinite(self.known["n"]).sum(axis=1) >= 2

    def tables(self) -> tuple[pd.DataFrame, pd.DataFrame]:
        """The pairs with a covariance, and those without."""
        one, two = self._candidates()
        resolved, covariance, why = self._resolve(one, two)
        pairs = pd.DataFrame(
            {
                "row": self.row[one[resolved]],
                "other_row": self.row[two[resolved]],
                "covariance": covariance[resolved],
                "why": why[resolved],
            },
            columns=COLUMNS,
        )
        rest = ~resolved & (why != "")
        unresolved = pd.DataFrame(
            {"row": self.row[one[rest]], "other_row": self.row[two[rest]], "why": why[rest]},
            columns=UNRESOLVED,
        )
        return pairs, unresolved

    def _candidates(self) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
        """Pairs of usable rows of one study, the earlier row first."""
        rows = np.flatnonzero(self.usable & (self.study != ""))
        label = pd.Series(self.study[rows])
        ones, twos = [np.empty(0, dtype=np.intp)], [np.empty(0, dtype=np.intp)]
        for _, members in sorted(label.groupby(label).groups.items()):
            own = rows[np.asarray(members, dtype=np.intp)]
            first, second = np.triu_indices(len(own), k=1)
            ones.append(own[first])
            twos.append(own[second])
        one, two = np.concatenate(ones), np.concatenate(twos)
        order = np.lexsort((self.row[two], self.row[one]))
        return one[order], two[order]

    def _resolve(
        self, one: NDArray[np.intp], two: NDArray[np.intp]
    ) -> tuple[BoolArray, FloatArray, ObjectArray]:
        """For each pair whether it has a covariance, the covariance, and why, or why not."""
        nothing = np.full(len(one), np.nan)
        if self.metric == "log_odds_ratio":
            return self._odds(one, two)
        if self.metric not in _STANDARDIZED:
            why = np.full(len(one), "rows of one study; no covariance is known for this metric", dtype=object)
            return np.zeros(len(one), dtype=bool), nothing, why
        match = self._matches(one, two)
        shares = match.any(axis=(1, 2))
        w, u = self.known["contrast_weight"][one], self.known["contrast_weight"][two]
        n = self.known["n"][one]
        with np.errstate(invalid="ignore"):
            products = np.where(match, w[:, :, None] * u[:, None, :] / n[:, :, None], 0.0)
            shared = np.where(match.any(axis=2), n, 0.0).sum(axis=1)
        sizes = np.nansum(self.known["n"], axis=1)
        factor = np.ones(len(self.row))
        if self.metric == "hedges_g":
            factor = small_sample_factor(sizes - np.isfinite(self.known["n"]).sum(axis=1))
        same = self.outcome[one] == self.outcome[two]
        rho = np.where(same, 1.0, self.outcomes.value if self.outcomes else np.nan)
        with np.errstate(all="ignore"):
            d = self.estimate / factor
            plain = contrast_covariance(
                products.sum(axis=(1, 2)), d[one], d[two], shared, sizes[one], sizes[two], rho
            )
            covariance = plain * factor[one] * factor[two]
        fits = self.pooled[one] & self.pooled[two]
        resolved = shares & fits & np.isfinite(covariance)
        return resolved, covariance, self._words(match, same, fits, resolved)

    def _matches(self, one: NDArray[np.intp], two: NDArray[np.intp]) -> BoolArray:
        """Which group of the one row is which of the other: shape (pairs, groups, groups).

        In rows of one analysis, and in rows of unlike outcomes, groups of the same sizes correspond by number, unless
        their means or SDs say otherwise. In other rows with two groups each, a group is the same where its n, mean
        and SD are printed and equal.
        """
        n, other = self.known["n"][one], self.known["n"][two]
        alike = ((n == other) | (np.isnan(n) & np.isnan(other))).all(axis=1) & self.complete[one]
        designs = np.isin(self.design[one], _SHARED_MODEL) & (self.design[one] == self.design[two])
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

    def _contradict(self, one: NDArray[np.intp], two: NDArray[np.intp]) -> BoolArray:
        """Whether a group of one number has one mean or SD in the one row and another in the other."""
        found = np.zeros(len(one), dtype=bool)
        for name in ("mean", "sd"):
            here, there = self.known[name][one], self.known[name][two]
            found |= (np.isfinite(here) & np.isfinite(there) & (here != there)).any(axis=1)
        return found

    def _words(self, match: BoolArray, same: BoolArray, fits: BoolArray, resolved: BoolArray) -> ObjectArray:
        """Why a pair has its covariance, or has none."""
        groups = match.sum(axis=(1, 2))
        every = groups == np.maximum(groups, 2)
        said = np.full(len(same), "rows of one study in which no shared group is recognised", dtype=object)
        said[same & every] = "contrasts of the same groups"
        said[same & (groups == 1)] = "one group has the same n, mean and SD in both rows"
        if self.outcomes is not None:
            rho = f"correlation {self.outcomes.value:g} ({self.outcomes.by})"
            said[~same & every] = f"two outcomes of the same groups, {rho}"
        else:
            said[~same & every] = "two outcomes of the same groups; their correlation is needed"
        unlike = ~resolved & (groups > 0) & ~fits
        said[unlike] = "the standardizers are not both the pooled SD, for which alone the covariance is known"
        return said

    def _odds(
        self, one: NDArray[np.intp], two: NDArray[np.intp]
    ) -> tuple[BoolArray, FloatArray, ObjectArray]:
        """Log odds ratios from counts that share the second group."""
        counts = self.from_counts[one] & self.from_counts[two] & (self.outcome[one] == self.outcome[two])
        same = (self.counts[one, 2:] == self.counts[two, 2:]).all(axis=1)
        # the sign of the second group in each contrast
        side = np.sign(self.known["contrast_weight"][:, 1]) if self.known["n"].shape[1] > 1 else self.side
        side = np.where(np.isfinite(side), side, self.side)
        with np.errstate(all="ignore"):
            covariance = side[one] * side[two] * (1 / self.counts[one, 2:]).sum(axis=1)
        resolved = counts & same & np.isfinite(covariance)
        why = np.where(
            resolved,
            "the second group has the same cells in both rows",
            "rows of one study in which no shared group is recognised",
        )
        return resolved, covariance, np.asarray(why, dtype=object)


def _column(table: ReportedTable, name: str) -> FloatArray:
    numbers = table.numbers.get((name, None))
    return np.full(table.rows, np.nan) if numbers is None else numbers.value
