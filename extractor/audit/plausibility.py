"""Plausibility: possible numbers that are rare enough to read the page again. Never stronger than doubtful.

Most of these checks look across the sheet: at the other studies of an outcome, and for one study coded twice.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import islice
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from extractor.audit.support import (
    beyond,
    ends,
    finding_at,
    findings_at,
    groups_in,
    positions,
    shown,
    value_of,
)
from extractor.distinct import distinct, repeated, together
from extractor.evidence import Evidence
from extractor.findings import Finding, Severity
from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray, ReportedTable, Variable
from extractor.words import listed, plain, printed_text

if TYPE_CHECKING:
    import pandas as pd

Effects = Mapping[str, NDArray[Any]]

_LARGE = 3.0
_NEAR = 0.2
"""How far, relatively, a ratio of SDs may be from sqrt(n) to be taken for it."""
_SMALLEST_N = 5.0
"""Below this, sqrt(n) is a ratio that SDs of two studies may well have."""
_OTHER_STUDIES = 3
_OTHER_EFFECTS = 4
_TELLING_DIGITS = 3.0
"""Digits of all means of a row together, from which on equal means of two studies are worth a look."""
_FAR = 3.5
_BETWEEN_GROUPS = ("one-way", "two-group")


def implausible(evidence: Evidence, across: bool = True) -> Iterator[Finding]:
    """Findings of every plausibility check that needs no effects; ``across`` studies, too, where asked for."""
    summaries = _Summaries(evidence.table)
    yield from _large_effects(summaries)
    for name in ("sd", "se"):
        yield from _identical_spreads(summaries, name)
    if across:
        yield from _unlike_spreads(summaries)
        yield from _coded_twice(summaries)


def outlying(evidence: Evidence, effects: Effects) -> Iterator[Finding]:
    """Effects far from the other studies of their outcome.

    Parameters
    ----------
    effects : the columns of the effect table, one row per row of the sheet and in its order.

    Each effect is compared with the inverse-variance mean of the other studies' effects on the same outcome.
    The spread to be expected includes their between-study variance (DerSimonian & Laird 1986) and the mean's
    own error.
    """
    z, mean, others = _left_out(evidence.table, effects)
    for i in positions(np.abs(z) > _FAR):
        metric, outcome, value = (effects[name][i] for name in ("metric", "outcome", "estimate"))
        distance = abs(float(z[i]))
        said = (
            f"{VOCABULARY[metric].symbol} = {plain(value)} lies {plain(distance)} standard deviations from "
            f"{plain(float(mean[i]))}, the mean of the {others[i]:.0f} other studies of '{outcome}' "
            "(leave-one-out): look at labels, units and signs"
        )
        why = "a large effect is no error by itself, and leaving it out is a decision to declare"
        yield finding_at(
            evidence.table, i, Severity.DOUBTFUL, "far from the others", [], said, explanation=why
        )


def _left_out(table: ReportedTable, effects: Effects) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Standardised distance from the other studies, their mean and number, each (rows,); NaN if too few."""
    estimate, variance = (np.asarray(effects[name], dtype=float) for name in ("estimate", "variance"))
    outcome = table.fact("outcome").astype(str)
    with np.errstate(invalid="ignore"):
        usable = np.isfinite(estimate) & (variance > 0) & np.isfinite(variance) & (outcome != "")
    z, means, others = (np.full(table.rows, np.nan) for _ in range(3))
    if not usable.any():
        return z, means, others
    y, v = estimate[usable], variance[usable]
    groups = distinct(outcome[usable])[1]
    cells, first = _pairs(groups, distinct(_studies(table)[usable])[1])
    studies = np.bincount(groups[first])[groups] - 1.0
    w = 1 / v
    # about the mean of the outcome, so that the differences of sums below lose no digits
    centre = (np.bincount(groups, w * y) / np.bincount(groups, w))[groups]
    y = y - centre

    def rest(values: FloatArray) -> FloatArray:
        return np.asarray(np.bincount(groups, values)[groups] - np.bincount(cells, values)[cells])

    enough = studies >= _OTHER_EFFECTS
    total = np.where(enough, rest(w), 1.0)
    mean, squares = rest(w * y) / total, rest(w**2)
    excess = rest(w * y**2) - total * mean**2 - (rest(np.ones_like(w)) - 1)
    tau_squared = np.maximum(excess, 0) / np.where(enough, total - squares / total, 1.0)
    spread = v + tau_squared + (total + tau_squared * squares) / total**2
    z[usable] = np.where(enough, (y - mean) / np.sqrt(np.where(enough, spread, 1.0)), np.nan)
    means[usable], others[usable] = mean + centre, studies
    return z, means, others


def _pairs(first: NDArray[np.intp], second: NDArray[np.intp]) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Codes of the distinct pairs, shape (rows,), and where each occurs first."""
    _, where, codes = np.unique(
        np.column_stack([first, second]), axis=0, return_index=True, return_inverse=True
    )
    return codes.ravel(), where


def _studies(table: ReportedTable) -> NDArray[np.str_]:
    """Study labels; a row without one is a study of its own."""
    label = table.fact("study").astype(str)
    own = np.char.add("row ", table.row_numbers.astype(str))
    return np.asarray(np.where(label == "", own, label), dtype=np.str_)


class _Summaries:
    """What is printed of each group, as arrays of shape (rows, groups); NaN where nothing is.

    Each array is put together once, the numbers of a group side by side in memory.
    """

    def __init__(self, table: ReportedTable) -> None:
        self.table, self.groups = table, groups_in(table)
        self._known: dict[tuple[str, str], FloatArray] = {}

    def of(self, name: str, part: str = "value") -> FloatArray:
        """The value, low, high or unit of a quantity."""
        found = self._known.get((name, part))
        if found is None:
            found = np.full((self.table.rows, len(self.groups)), np.nan, order="F")
            for at, group in enumerate(self.groups):
                if (name, group) in self.table.numbers:
                    value = value_of(self.table, (name, group))
                    printed = value if part == "value" else getattr(self.table.numbers[name, group], part)
                    found[:, at] = np.where(np.isnan(value), np.nan, printed)
            self._known[name, part] = found
        return found

    def spread(self, part: str = "value") -> FloatArray:
        """SDs, or SE·sqrt(n) where no SD is printed."""
        sd, rebuilt = self.of("sd", part), self.of("se", part) * np.sqrt(self.of("n"))
        return np.where(np.isnan(sd), rebuilt, sd)

    def pooled(self, spread: FloatArray, used: BoolArray) -> FloatArray:
        """Pooled SD of the groups used, shape (rows,); unweighted where a size is unknown, NaN without groups."""
        n = self.of("n")
        sized = (~used | (n >= 2)).all(axis=1, keepdims=True)
        weight = np.where(used, np.where(sized, n - 1, 1.0), 0.0)
        total = weight.sum(axis=1)
        squares = (weight * np.where(used, spread, 0.0) ** 2).sum(axis=1)
        return np.where(total > 0, np.sqrt(squares / np.where(total > 0, total, 1.0)), np.nan)

    def cells(self, name: str, row: int) -> list[Variable]:
        """The cells of a quantity in which something is printed."""
        return [(name, g) for g in self.groups if _given(self.table, (name, g), row)]


def _large_effects(summaries: _Summaries) -> Iterator[Finding]:
    table, groups = summaries.table, summaries.groups
    why = "a large effect is no error by itself"
    printed = np.zeros(table.rows, dtype=bool)
    for variable in (("cohens_d", None), ("hedges_g", None)):
        low, high = ends(table, variable)
        large = beyond(low, _LARGE) | beyond(-_LARGE, high)
        printed |= large
        for i in positions(large):
            said = (
                f"{shown(table, variable, i)} is beyond 3 SDs: look for an SE used as SD, or a decimal point"
            )
            yield finding_at(table, i, Severity.DOUBTFUL, "large effect", [variable], said, explanation=why)
    if len(groups) < 2:
        return
    mean, spread = summaries.of("mean"), summaries.spread()
    used = ~np.isnan(mean) & ~np.isnan(spread)
    pooled, widest = (summaries.pooled(s, used) for s in (spread, summaries.spread("high")))
    # the gap that remains when every mean is rounded towards the others
    lowest = np.where(used, summaries.of("mean", "high"), np.inf)
    highest = np.where(used, summaries.of("mean", "low"), -np.inf)
    gap = highest.max(axis=1) - lowest.min(axis=1)
    between = np.isin(table.fact("design").astype(str), _BETWEEN_GROUPS) & (used.sum(axis=1) >= 2) & ~printed
    for i in positions(between & beyond(gap, _LARGE * widest)):
        ends_of = int(highest[i].argmax()), int(lowest[i].argmin())
        pair: list[Variable] = [("mean", groups[at]) for at in ends_of]
        spreads: list[Variable] = [(name, groups[at]) for name in ("sd", "se") for at in ends_of]
        said = (
            f"{shown(table, pair[0], i)} and {shown(table, pair[1], i)} lie more than 3 pooled SDs of "
            f"{plain(float(pooled[i]))} apart: look for an SE in the place of an SD, or a decimal point"
        )
        cells = [v for v in (*spreads, *pair) if v in table.numbers and table.numbers[v].given[i]]
        yield finding_at(table, i, Severity.DOUBTFUL, "large effect", cells, said, explanation=why)


def _unlike_spreads(summaries: _Summaries) -> Iterator[Finding]:
    """Pooled SDs that differ from the median of the outcome's other studies by about sqrt(n)."""
    table, spread, n = summaries.table, summaries.spread(), summaries.of("n")
    used = ~np.isnan(spread) & (np.where(np.isnan(spread), 1.0, spread) > 0)
    pooled = summaries.pooled(spread, used)
    sized = used & ~np.isnan(n)
    mean_n = np.where(sized, n, 0.0).sum(axis=1) / np.maximum(sized.sum(axis=1), 1)
    median, others = _median_of_others(table, pooled)
    outcome = table.fact("outcome")
    with np.errstate(invalid="ignore"):
        known = (others >= _OTHER_STUDIES) & (mean_n >= _SMALLEST_N)
        root = np.sqrt(np.where(known, mean_n, 1.0))
        ratio = np.where(known, pooled / median, np.nan)
        small, large = np.abs(ratio * root - 1) <= _NEAR, np.abs(ratio / root - 1) <= _NEAR
    for i in positions(small | large):
        cells = summaries.cells("sd", i) or summaries.cells("se", i)
        name = cells[0][0]
        why = _SLIPS[name, bool(small[i])]
        factor, text = (1 / root[i], "1/sqrt(n)") if small[i] else (root[i], "sqrt(n)")
        said = (
            f"the pooled SD {plain(float(pooled[i]))} is {plain(float(ratio[i]))} times the median "
            f"{plain(float(median[i]))} of the {others[i]:.0f} other studies of '{outcome[i]}', close to "
            f"{text} = {plain(float(factor))}: look whether this is {why}"
        )
        yield finding_at(table, i, Severity.DOUBTFUL, "SD unlike the others", cells, said, explanation=why)


_SLIPS = {
    ("sd", True): "an SE labelled SD",
    ("sd", False): "an SD multiplied by sqrt(n) as if it were an SE",
    ("se", True): "an SE divided by sqrt(n) once more",
    ("se", False): "an SD labelled SE",
}


def _given(table: ReportedTable, variable: Variable, position: int) -> bool:
    return variable in table.numbers and bool(table.numbers[variable].given[position])


def _median_of_others(table: ReportedTable, values: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Median over an outcome's other studies, each study's own median counting once, and their number."""
    outcome = table.fact("outcome").astype(str)
    medians, others = np.full(table.rows, np.nan), np.zeros(table.rows)
    if table.rows <= _OTHER_STUDIES:
        return medians, others
    import pandas as pd

    frame = pd.DataFrame({"outcome": outcome, "study": _studies(table), "value": values})
    frame = frame[np.isfinite(values) & (outcome != "")]
    each = frame.groupby(["outcome", "study"], sort=False)["value"].median().reset_index()
    each["others"] = each.groupby("outcome")["study"].transform("size") - 1.0
    each = each[each["others"] >= _OTHER_STUDIES]
    each["median"] = each.groupby("outcome", sort=False)["value"].transform(_leave_one_out_median)
    joined = frame.reset_index().merge(
        each[["outcome", "study", "median", "others"]], on=["outcome", "study"]
    )
    medians[joined["index"]], others[joined["index"]] = joined["median"], joined["others"]
    return medians, others


def _leave_one_out_median(values: pd.Series[float]) -> FloatArray:
    """For each value the median of the others."""
    order = np.argsort(values.to_numpy(), kind="stable")
    ascending = values.to_numpy()[order]
    left = np.arange(len(order))
    middle = ((len(order) - 2) // 2, (len(order) - 1) // 2)
    found = np.empty(len(order))
    found[order] = sum(ascending[at + (at >= left)] for at in middle) / 2
    return found


def _identical_spreads(summaries: _Summaries, name: str) -> Iterator[Finding]:
    table, values, n = summaries.table, summaries.of(name), summaries.of("n")
    if values.shape[1] < 2:
        return
    units = summaries.of(name, "unit")
    count = (~np.isnan(values)).sum(axis=1)
    value, unit = np.fmax.reduce(values, axis=1), np.fmin.reduce(units, axis=1)
    alike = (
        (value > 0)
        & (value == np.fmin.reduce(values, axis=1))
        & (np.isnan(values) == np.isnan(n)).all(axis=1)
    )
    alike &= (np.fmax.reduce(n, axis=1) == np.fmin.reduce(n, axis=1)) & (unit > 0)
    digits = np.floor(np.log10(np.where(alike, value / np.where(alike, unit, 1.0), 1.0)) + 1e-9) + 1
    # coarse printing makes two or three SDs alike by chance
    for i in positions(alike & (((count == 2) & (digits >= 3)) | ((count > 2) & (digits >= 2)))):
        cells = summaries.cells(name, i)
        spread = f"{VOCABULARY[name].symbol} = {printed_text(table, cells[0], i)}"
        said = f"all {count[i]} groups, of equal size, have {spread}: look whether it is one pooled value"
        why = "a pooled or adjusted SE, as software prints beside adjusted means"
        yield finding_at(table, i, Severity.NOTE, "identical spreads", cells, said, explanation=why)


def _coded_twice(summaries: _Summaries) -> Iterator[Finding]:
    """Rows of different studies with the same sizes and means in all groups, whatever their order."""
    table, n, mean = summaries.table, summaries.of("n"), summaries.of("mean")
    both = ~np.isnan(n) & ~np.isnan(mean)
    study = table.fact("study")
    # how many values the printed means could have had, in whatever unit they are: by chance few ones agree
    steps = np.abs(mean) / summaries.of("mean", "unit")
    readable = both & (steps > 1)
    digits = np.where(readable, np.log10(np.where(readable, steps, 1.0)), 0.0).sum(axis=1)
    telling = (both.sum(axis=1) >= 2) & (digits >= _TELLING_DIGITS)
    whole = (np.isnan(n) == np.isnan(mean)).all(axis=1) & telling & (study != "")
    rows = np.flatnonzero(whole)
    if len(rows) < 2:
        return
    n, mean = (np.where(both, part, np.inf)[rows] for part in (n, mean))
    order = np.lexsort((n, mean), axis=-1)
    ordered = (np.take_along_axis(part, order, axis=1) for part in (n, mean))
    codes, again = repeated([column for part in ordered for column in part.T])
    said: dict[int, str] = {}
    for members in together(rows[again], codes[again]):
        first: dict[str, int] = {}
        for i in members.tolist():
            first.setdefault(study[i], i)
        named = {label: f"row {table.row_numbers[row]} ({label})" for label, row in islice(first.items(), 4)}
        for i in members.tolist() if len(first) > 1 else ():
            others = [text for label, text in named.items() if label != study[i]][:3]
            where = f"the same group sizes and means stand in {listed(others)}"
            said[i] = f"{where}: look whether one sample was coded twice"
    alike = np.array(list(said), dtype=np.intp)
    for members in together(alike, repeated(list(both[alike].T))[0]) if said else ():
        cells: list[Variable] = [("mean", summaries.groups[at]) for at in np.flatnonzero(both[members[0]])]
        messages = [said[i] for i in members.tolist()]
        rule, why = "same sizes and means", "possible double counting of one sample"
        yield from findings_at(table, members.tolist(), Severity.DOUBTFUL, rule, cells, messages, why)
