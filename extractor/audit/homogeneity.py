"""Equal variances: Bartlett's test and the variance ratio from group SDs, Welch's F, and coded tests of it.

To leave the reader only what may matter, a row is mentioned when Bartlett's p is below .01 or the largest
variance is more than 4 times the smallest (common practice, no source), for all SDs that print alike.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray
from scipy import special

from extractor.audit.support import beyond, finding_at, positions, shown, value_of
from extractor.catalogue.homogeneity import welch_df_from_summaries, welch_f_from_summaries
from extractor.catalogue.relation import BETWEEN
from extractor.evidence import Block, Evidence
from extractor.findings import Finding, Severity
from extractor.table import FloatArray, ReportedTable, Variable
from extractor.words import plain

_LEVEL = 0.01
_RATIO = 4.0
_UNEQUAL = 1.5
_ROUNDS = 60


def unequal_variances(evidence: Evidence) -> Iterator[Finding]:
    """Notes on rows whose group SDs differ, and doubts about pooled SDs where a coded test rejected them."""
    for block in evidence.blocks:
        yield from _from_summaries(block, evidence.table)
    yield from _from_coded_test(evidence.table)


def bartlett_from_sds(n: FloatArray, sd: FloatArray) -> tuple[FloatArray, float, FloatArray]:
    """Bartlett's test of equal variances.

    Parameters
    ----------
    n, sd : shape (rows, groups); n at least 2, SDs positive with divisor n - 1.

    Returns
    -------
    Chi-square (rows,), its degrees of freedom, and p (rows,).

    Source: Bartlett (1937), with his correction factor.
    """
    df = n - 1
    error_df = df.sum(axis=-1)
    k = n.shape[-1]
    pooled = (df * sd**2).sum(axis=-1) / error_df
    between = error_df * np.log(pooled) - (df * np.log(sd**2)).sum(axis=-1)
    correction = 1 + ((1 / df).sum(axis=-1) - 1 / error_df) / (3 * (k - 1))
    # rounding can push the statistic of equal SDs a hair below its least value
    statistic = np.maximum(between / correction, 0.0)
    return statistic, float(k - 1), np.asarray(special.chdtrc(k - 1, statistic))


def most_alike(n: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """The SDs within [low, high] with the smallest Bartlett statistic, to rounding; shapes (rows, groups).

    The statistic is convex in the logarithms of the variances, so its minimum over a box has every SD at the
    pooled SD or at the end of its interval nearest to it; iterated to that fixpoint.
    """
    df = n - 1
    pooled = ((low + high) / 2).mean(axis=-1, keepdims=True)
    error_df = df.sum(axis=-1, keepdims=True)
    for _ in range(_ROUNDS):
        before, nearest = pooled, np.clip(pooled, low, high)
        pooled = np.sqrt((df * nearest**2).sum(axis=-1, keepdims=True) / error_df)
        if np.array_equal(before, pooled):
            break
    return np.asarray(np.clip(pooled, low, high))


def _from_summaries(block: Block, table: ReportedTable) -> Iterator[Finding]:
    if block.design not in BETWEEN or not {"n", "sd"} <= block.leaves.keys() - block.bounds:
        return
    size, spread = block.leaves["n"], block.leaves["sd"]
    # the numbers of a group side by side in memory, which makes sums over groups faster
    n, sd, low, high = (np.asfortranarray(v) for v in (size.value, spread.value, spread.low, spread.high))
    where = np.flatnonzero((n >= 2).all(axis=1) & (sd > 0).all(axis=1))
    if not len(where):
        return
    n, sd, low, high = (v.T[:, where].T for v in (n, sd, low, high))
    alike = most_alike(n, np.maximum(low, np.finfo(float).tiny), high)
    least_ratio = (alike.max(axis=1) / alike.min(axis=1)) ** 2
    _, df, least_p = bartlett_from_sds(n, alike)
    chosen = (least_p < _LEVEL) | beyond(least_ratio, _RATIO)
    chi_squared, _, p = bartlett_from_sds(n, sd)
    ratio = (sd.max(axis=1) / sd.min(axis=1)) ** 2
    welch = _welch(block, where)
    for j in positions(chosen):
        position = int(block.positions[where[j]])
        equal = n[j].min() == n[j].max()
        said = (
            f"the largest group variance is {plain(float(ratio[j]))} times the smallest "
            f"(Bartlett's χ²({df:g}) = {plain(float(chi_squared[j]))}, {_p_text(p[j])})"
        )
        if welch is not None:
            f, error_df, welch_p = (float(values[j]) for values in welch)
            test = f"F({df:g}, {plain(error_df)}) = {plain(f)}, {_p_text(welch_p)}"
            said += f"; Welch's test, which does not ask for equal variances, gives {test}"
        why = "with groups of equal size F is fairly robust (common practice, no source)" if equal else ""
        cells, rule = _widest(block, sd[j]), "unequal variances"
        yield finding_at(table, position, Severity.NOTE, rule, cells, said, explanation=why)


def _welch(block: Block, where: NDArray[np.intp]) -> tuple[FloatArray, FloatArray, FloatArray] | None:
    if "mean" not in block.leaves or "mean" in block.bounds:
        return None
    n, mean, sd = (block.leaves[name].value[where] for name in ("n", "mean", "sd"))
    f, error_df = welch_f_from_summaries(n, mean, sd), welch_df_from_summaries(n, sd)
    return f, error_df, np.asarray(special.fdtrc(n.shape[1] - 1, error_df, f))


def _widest(block: Block, sd: FloatArray) -> list[Variable]:
    """The SDs' cells, the largest and the smallest first."""
    cells = block.origins["sd"]
    first = [int(sd.argmax()), int(sd.argmin())]
    return [cells[i] for i in dict.fromkeys([*first, *range(len(cells))])]


def _p_text(p: float) -> str:
    return "p < .001" if p < 0.001 else f"p = {p:.3f}".replace("0.", ".", 1)


def _from_coded_test(table: ReportedTable) -> Iterator[Finding]:
    variable: Variable = ("homogeneity_p", None)
    if variable not in table.numbers:
        return
    numbers = table.numbers[variable]
    sizes = [value_of(table, known) for known in table.numbers if known[0] == "n"]
    largest = np.fmax.reduce(sizes) if sizes else np.full(table.rows, np.nan)
    smallest = np.fmin.reduce(sizes) if sizes else np.full(table.rows, np.nan)
    for i in positions(numbers.given & ~beyond(numbers.high, _LEVEL) & (numbers.high >= 0)):
        said = f"a test rejected equal variances ({shown(table, variable, i)}), so "
        if largest[i] > _UNEQUAL * smallest[i]:
            said += (
                f"with group sizes from {smallest[i]:g} to {largest[i]:g} neither F nor the pooled "
                "standardiser can be relied on: look for Welch's test and for the SD of one group"
            )
        else:
            said += "the pooled standardiser is questionable: look at the SDs of the groups"
        why, rule = "judged at p < .01 (common practice, no source)", "equal variances rejected"
        yield finding_at(table, i, Severity.DOUBTFUL, rule, [variable], said, explanation=why)
