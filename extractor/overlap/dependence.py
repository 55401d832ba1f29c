"""Effects that share participants: their covariances, and the matrix a synthesis needs.

Two rows of one study either have a covariance, by a formula of ``covariances``, or a reason why none can be computed.
They are never taken for independent in silence. Another time of measurement counts as another outcome.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from extractor.api import Result
from extractor.errors import UsageError
from extractor.overlap.covariances import (
    contrast_covariance,
    correlation_covariance,
    difference_covariance,
    logit_covariance,
)
from extractor.overlap.shared_groups import Pairs, coded_groups
from extractor.printed.reading import quoted
from extractor.quantities import VOCABULARY
from extractor.sampling.moments import small_sample_factor
from extractor.table import Assumption, BoolArray, FloatArray, ObjectArray, ReportedTable
from extractor.words import listed

COLUMNS = ["row", "other_row", "covariance", "why"]

_LOGISTIC = float(np.pi / np.sqrt(3))
_SMALLEST = 1e-10
"""Smallest eigenvalue of a matrix of correlations that still counts as positive."""
_MOST = 1_500
"""Rows of one study beyond which not every one is paired with every other."""

_UNSHARED = (
    "cannot be computed, because no shared group is recognised in these rows of one study; give rows of one model the "
    "same analysis, and times of the same participants different outcomes"
)
_NO_SIZES = "cannot be computed, because not both rows give the sizes of independent groups"
_NO_CORRELATION = "cannot be computed, because two outcomes of the same groups need their correlation"
_NO_CONTRAST = "cannot be computed, because not both rows say which groups they compare"
_STANDARDIZER = (
    "cannot be computed, because it would take the correlations of all measurements: the standardizer is not the "
    "pooled SD in both rows"
)
_ONE_GROUP = "cannot be computed, because no formula is known for two correlations that share one group"
_UNLIKE_SOURCES = "cannot be computed, because one log odds ratio comes from counts and the other does not"

Answer = tuple[FloatArray, ObjectArray]
"""Covariance of each pair, NaN where it has none, and why, or why not."""


@dataclass(frozen=True, slots=True)
class Dependence:
    """Pairs of effects that share participants, or may.

    table : ``row``, ``other_row``, ``covariance`` and ``why``; each pair once, in the order of the sheet. The
        covariance is blank where none can be computed, for the reason given. Independent rows have no entry.
    """

    table: pd.DataFrame

    @property
    def pairs(self) -> pd.DataFrame:
        """Those with a covariance."""
        return self.table[self.table["covariance"].notna()].reset_index(drop=True)

    @property
    def unresolved(self) -> pd.DataFrame:
        """Those without."""
        return self.table[self.table["covariance"].isna()].reset_index(drop=True)


def dependence(result: Result, outcomes: Assumption | None = None) -> Dependence:
    """Covariances of the effects of a result that share participants.

    Parameters
    ----------
    outcomes : correlation of two outcomes of the same participants within their groups, and who supplied it; without
        it such pairs stay unresolved.

    Raises
    ------
    UsageError
        where the covariances of a study's effects do not go with their variances: the matrix would not be positive
        definite. It names the rows. Also where a study has too many rows.
    """
    answer = Dependence(_Pairs(result, outcomes).table())
    check_positive(result.effects, answer.pairs)
    return answer


def covariance_matrix(effects: pd.DataFrame, pairs: pd.DataFrame) -> tuple[NDArray[np.int64], FloatArray]:
    """The row numbers of all effects with a variance, and their covariance matrix, of shape (effects, effects).

    It is NaN for pairs whose covariance is, and 0 for those that are not listed.
    """
    usable = effects[_usable(effects)]
    rows = usable["row"].to_numpy(dtype=np.int64)
    matrix = np.diag(usable["variance"].to_numpy(dtype=float))
    one, two = _places(rows, pairs)
    matrix[one, two] = matrix[two, one] = pairs["covariance"].to_numpy(dtype=float)
    return rows, matrix


def check_positive(effects: pd.DataFrame, pairs: pd.DataFrame) -> None:
    """Raise ``UsageError`` unless every block of dependent effects has a positive definite covariance matrix."""
    usable = effects[_usable(effects)]
    rows = usable["row"].to_numpy(dtype=np.int64)
    one, two = _places(rows, pairs)
    links = coo_array((np.ones(len(one)), (one, two)), shape=(len(rows), len(rows)))
    _, block = connected_components(links, directed=False)
    block_of_pair = block[one]
    for label in np.unique(block_of_pair):
        found, matrix = covariance_matrix(usable[block == label], pairs[block_of_pair == label])
        scale = np.sqrt(np.diag(matrix))
        if float(np.linalg.eigvalsh(matrix / np.outer(scale, scale)).min()) < _SMALLEST:
            raise UsageError(
                f"the covariance matrix of rows {listed([str(row) for row in found])} is not positive definite: is one "
                "effect coded twice, is a contrast the sum of others, or is the assumed correlation too high?"
            )


def _usable(effects: pd.DataFrame) -> BoolArray:
    """Effects that can be pooled."""
    return np.asarray((effects["status"] == "converted") & (effects["variance"] > 0))


def _places(rows: NDArray[np.int64], pairs: pd.DataFrame) -> tuple[Pairs, Pairs]:
    """Where the rows of each pair stand among ``rows``, which rise."""
    one, two = (np.searchsorted(rows, pairs[name].to_numpy(dtype=np.int64)) for name in ("row", "other_row"))
    return one, two


class _Pairs:
    """The rows that can be paired, as arrays over the rows of the effect table, and the pairs among them."""

    def __init__(self, result: Result, outcomes: Assumption | None) -> None:
        self.outcomes = outcomes
        effects, table = result.effects, result.conversion.evidence.table
        self.metric = result.conversion.metric
        self.row = effects["row"].to_numpy(dtype=np.int64)
        self.estimate = effects["estimate"].to_numpy(dtype=float)
        self.variance = effects["variance"].to_numpy(dtype=float)
        self.n_total = effects["n_total"].to_numpy(dtype=float)
        self.usable = _usable(effects)
        self.pooled = (effects["standardizer"] == "pooled").to_numpy()
        self.from_counts = effects["route"].str.startswith("count_a, count_b, count_c, count_d").to_numpy()
        self.study = effects["study"].astype(str).to_numpy(dtype=object)
        self.groups = coded_groups(result)
        self.cells = np.stack([_column(table, f"count_{cell}") for cell in "abcd"], axis=1).reshape(-1, 2, 2)

    def table(self) -> pd.DataFrame:
        """Every pair of rows of one study."""
        one, two = self._candidates()
        covariance, why = self._resolve(one, two)
        columns = (self.row[one], self.row[two], covariance, why)
        return pd.DataFrame(dict(zip(COLUMNS, columns, strict=True)), columns=COLUMNS)

    def _candidates(self) -> tuple[Pairs, Pairs]:
        """Pairs of usable rows of one study, the earlier row first."""
        rows = np.flatnonzero(self.usable & (self.study != ""))
        label = pd.Series(self.study[rows])
        ones, twos = [np.empty(0, dtype=np.intp)], [np.empty(0, dtype=np.intp)]
        for study, members in sorted(label.groupby(label).groups.items()):
            own = rows[np.asarray(members, dtype=np.intp)]
            if len(own) > _MOST:
                raise UsageError(
                    f"covariances are computed for studies of at most {_MOST} effects, {quoted(str(study))} has "
                    f"{len(own)}: is the column study what it should be?"
                )
            first, second = np.triu_indices(len(own), k=1)
            ones.append(own[first])
            twos.append(own[second])
        one, two = np.concatenate(ones), np.concatenate(twos)
        order = np.lexsort((self.row[two], self.row[one]))
        return one[order], two[order]

    def _resolve(self, one: Pairs, two: Pairs) -> Answer:
        """Covariance and reason of each pair."""
        if self.metric in ("cohens_d", "hedges_g", "mean_difference", "r", "fisher_z"):
            return self._contrasts(one, two)
        if self.metric == "log_odds_ratio":
            counted = self.from_counts[one].astype(int) + self.from_counts[two]
            unlike = (np.full(len(one), np.nan), np.full(len(one), _UNLIKE_SOURCES, dtype=object))
            choices = (self._contrasts(one, two), unlike, self._odds(one, two))
            covariance, why = (np.choose(counted, [choice[part] for choice in choices]) for part in (0, 1))
            return covariance, why
        symbol = VOCABULARY[self.metric].symbol
        why = np.full(len(one), f"cannot be computed, because no formula is known for {symbol}", dtype=object)
        return np.full(len(one), np.nan), why

    def _contrasts(self, one: Pairs, two: Pairs) -> Answer:
        """Contrasts of groups of which some are shared."""
        match = self.groups.matches(one, two)
        same = self.groups.outcome[one] == self.groups.outcome[two]
        rho = np.where(same, 1.0, self.outcomes.value if self.outcomes else np.nan)
        weighted, shared = self.groups.weighted(one, two, match)
        with np.errstate(all="ignore"):
            if self.metric == "mean_difference":
                sd = np.sqrt(self.variance / self.groups.squared())
                covariance = difference_covariance(weighted, sd[one], sd[two], rho)
            elif self._correlates:
                covariance = self._correlations(one, two, np.sign(weighted), rho)
            else:
                scale = self._scale()
                d, sizes = self.estimate / scale, self.groups.sizes
                covariance = contrast_covariance(
                    weighted, d[one], d[two], shared, sizes[one], sizes[two], rho
                )
                covariance *= scale[one] * scale[two]
        return self._judged(one, two, match, same, covariance)

    def _scale(self) -> FloatArray:
        """What d is multiplied by to give the estimate."""
        if self.metric == "log_odds_ratio":
            return np.full(len(self.row), _LOGISTIC)
        if self.metric == "hedges_g":
            return np.asarray(small_sample_factor(self.groups.sizes - self.groups.counted))
        return np.ones(len(self.row))

    def _correlations(self, one: Pairs, two: Pairs, side: FloatArray, rho: FloatArray) -> FloatArray:
        """Correlations of two outcomes with the same two groups; side is -1 where one of the contrasts is turned."""
        r = self.estimate if self.metric == "r" else np.tanh(self.estimate)
        first, second = r[one], side * r[two]
        covariance = side * correlation_covariance(first, second, rho)
        if self.metric == "r":
            return np.asarray(covariance / (self.n_total[one] - 1))
        return np.asarray(covariance / ((1 - first**2) * (1 - second**2) * (self.n_total[one] - 3)))

    def _judged(
        self, one: Pairs, two: Pairs, match: BoolArray, same: BoolArray, covariance: FloatArray
    ) -> Answer:
        """The covariances that stand, and the reasons."""
        groups = match.sum(axis=(1, 2))
        fits = np.ones(len(one), dtype=bool)
        if self._correlates:
            fits = groups != 1
        elif self.metric in ("cohens_d", "hedges_g"):
            fits = self.pooled[one] & self.pooled[two]
        known = (groups > 0) & fits & np.isfinite(covariance)
        said = [
            (known & (groups == 1), "one group has the same n, mean and SD in both rows"),
            (known & same, "contrasts of the same groups"),
            (known, self._two_outcomes()),
            ((groups > 0) & ~fits, _ONE_GROUP if self._correlates else _STANDARDIZER),
            ((groups > 0) & ~same, self._two_outcomes()),
            (groups > 0, _NO_CONTRAST),
            (self.groups.sized[one] & self.groups.sized[two], _UNSHARED),
        ]
        why = np.select(
            [those for those, _ in said], [np.array(word, dtype=object) for _, word in said], _NO_SIZES
        )
        return np.where(known, covariance, np.nan), np.asarray(why, dtype=object)

    @property
    def _correlates(self) -> bool:
        return self.metric in ("r", "fisher_z")

    def _two_outcomes(self) -> str:
        """Why two outcomes of the same groups have a covariance, or have none."""
        if self.outcomes is None:
            return _NO_CORRELATION
        return f"two outcomes of the same groups, correlation {self.outcomes.value:g} ({self.outcomes.by})"

    def _odds(self, one: Pairs, two: Pairs) -> Answer:
        """Log odds ratios from counts: of one outcome with a group in common, or of two outcomes of the same groups."""
        here, there = self.cells[one], self.cells[two]
        same = self.groups.outcome[one] == self.groups.outcome[two]
        second = (here[:, 1] == there[:, 1]).all(axis=1)
        first = (here[:, 0] == there[:, 0]).all(axis=1) & ~second
        sized = (here.sum(axis=2) == there.sum(axis=2)).all(axis=1)
        phi = self.outcomes.value if self.outcomes else np.nan
        with np.errstate(all="ignore"):
            shared = logit_covariance(here, here)
            both = logit_covariance(here, there, phi).sum(axis=1)
        choices = [same & second, same & first, ~same & sized]
        side = self.groups.side[one] * self.groups.side[two]
        covariance = np.select(choices, [shared[:, 1], shared[:, 0], both], np.nan) * side
        words = [f"the {which} group has the same cells in both rows" for which in ("second", "first")]
        said = [np.array(word, dtype=object) for word in (*words, self._two_outcomes())]
        why = np.select(choices, said, _UNSHARED)
        return np.where(np.isfinite(covariance), covariance, np.nan), np.asarray(why, dtype=object)


def _column(table: ReportedTable, name: str) -> FloatArray:
    numbers = table.numbers.get((name, None))
    return np.full(table.rows, np.nan) if numbers is None else numbers.value
