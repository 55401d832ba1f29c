"""What a scale and whole-number responses allow: GRIM, GRIMMER, DEBIT, and the limits of the scale.

The tests themselves are in ``granularity``; here they meet the printed cells. Granularity is judged only
where the printed decimals are known, under the rounding rule of the sheet.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import NamedTuple, cast

import numpy as np
from numpy.typing import NDArray

from extractor.audit import granularity
from extractor.audit.granularity import Printed, Rounding
from extractor.audit.support import beyond, ends, finding_at, groups_in, positions, shown, value_of
from extractor.evidence import Evidence
from extractor.findings import Finding, Severity
from extractor.table import BoolArray, FloatArray, ReportedTable, Variable
from extractor.words import listed, plain, printed_text

_ON_THE_SCALE = ("mean", "mean_pre", "mean_post", "median", "q1", "q3", "minimum", "maximum")
_CHANGE = "mean_change"
_PAIRS = (("mean", "sd"), ("mean_pre", "sd_pre"), ("mean_post", "sd_post"), (_CHANGE, "sd_change"))
_NEIGHBOURS = 60
"""How many printed SDs on either side are tried to find the nearest reachable ones."""
_HOLDS = "this holds for unweighted whole-number items, complete data and the stated n and number of items"


def unreachable(evidence: Evidence) -> Iterator[Finding]:
    """Findings about scores off the scale, and about means and SDs that no whole-number responses have."""
    table = evidence.table
    yield from _off_the_scale(table)
    responses = _responses(table)
    for mean, sd in _PAIRS:
        for group in groups_in(table):
            yield from _too_spread(table, (mean, group), (sd, group))
            yield from _granular(table, (mean, group), (sd, group), responses)


def _off_the_scale(table: ReportedTable) -> Iterator[Finding]:
    scale: tuple[Variable, Variable] = ("scale_min", None), ("scale_max", None)
    low, high = ends(table, scale[0])[0], ends(table, scale[1])[1]
    crossed = beyond(low, high)
    for i in positions(crossed):
        said = f"scale {shown(table, scale[0], i)} is above {shown(table, scale[1], i)}: look for a swap"
        yield finding_at(table, i, Severity.INCONSISTENT, "limits in the wrong order", scale, said)
    for variable, numbers in table.numbers.items():
        if variable[0] not in _ON_THE_SCALE:
            continue
        for i in positions(~crossed & (beyond(low, numbers.high) | beyond(numbers.low, high))):
            said = (
                f"{shown(table, variable, i)} lies outside the scale, {_span(low[i], high[i])}: "
                "look for a sum score, a percentage or a slipped decimal point, and at the coded scale"
            )
            rule, limits = "outside the scale", (float(low[i]), float(high[i]))
            yield finding_at(table, i, Severity.IMPOSSIBLE, rule, [variable], said, expected=limits)


def _span(low: float, high: float) -> str:
    if np.isnan(low):
        return f"which ends at {plain(high)}"
    return f"which starts at {plain(low)}" if np.isnan(high) else f"{plain(low)} to {plain(high)}"


def _too_spread(table: ReportedTable, mean: Variable, sd: Variable) -> Iterator[Finding]:
    """SDs above sqrt((M - a)(b - M)n/(n - 1)); an unknown mean or n gets the value that allows most."""
    if sd not in table.numbers or mean[0] == _CHANGE:
        return
    size: Variable = ("n", mean[1])
    centre, least_n = ends(table, mean), np.fmax(ends(table, size)[0], 2.0)
    for bottom, top in (("scale_min", "scale_max"), ("minimum", "maximum")):
        group = None if bottom == "scale_min" else mean[1]
        limits: list[Variable] = [(bottom, group), (top, group)]
        low, high = ends(table, limits[0])[0], ends(table, limits[1])[1]
        rows = np.flatnonzero(table.numbers[sd].given & ~np.isnan(low) & ~np.isnan(high))
        if not len(rows):
            continue
        scale = low[rows], high[rows]
        nearest, furthest = (
            np.where(np.isnan(m[rows]), end, m[rows]) for m, end in zip(centre, scale, strict=True)
        )
        limit = np.full(table.rows, np.nan)
        limit[rows] = granularity.sd_upper_limit(least_n[rows], nearest, furthest, *scale)
        for i in positions(beyond(table.numbers[sd].low, limit)):
            known = [v for v in (mean, size) if v in table.numbers and table.numbers[v].given[i]]
            beside = "".join(f", {shown(table, variable, i)}" for variable in known)
            said = (
                f"{shown(table, sd, i)}, but scores from {printed_text(table, limits[0], i)} to "
                f"{printed_text(table, limits[1], i)}{beside} have an SD up to {plain(float(limit[i]))}: "
                "look for a variance, a sum score or a slipped decimal point"
            )
            cells, expected = [sd, *known, *limits], (0.0, float(limit[i]))
            rule = "SD beyond the scale"
            yield finding_at(table, i, Severity.IMPOSSIBLE, rule, cells, said, expected=expected)


class _Scores(NamedTuple):
    """Whole-number responses of one group, as far as they are known; arrays of shape (rows,).

    whole : rows to judge. zero_one : those whose responses are 0 or 1. n : NaN where unknown, which allows
    everything. low, high : limits of one response, NaN where unknown.
    """

    whole: BoolArray
    zero_one: BoolArray
    n: FloatArray
    items: FloatArray
    low: FloatArray
    high: FloatArray

    def take(self, rows: NDArray[np.intp]) -> _Scores:
        """The rows named."""
        whole, zero_one, *numbers = self
        return _Scores(whole[rows], zero_one[rows], *(values[rows] for values in numbers))


def _responses(table: ReportedTable) -> _Scores:
    """What is known of the responses whatever the group; ``n`` is blank."""
    responses = table.fact("responses")
    binary = np.asarray(responses == "binary", dtype=bool)
    items = value_of(table, ("scale_items", None))
    items = np.where(np.isnan(items) | binary, 1.0, items)
    low, high = (value_of(table, (name, None)) for name in ("scale_min", "scale_max"))
    low = np.where(binary & np.isnan(low), np.where(np.isnan(high), 0.0, high - 1), low)
    high = np.where(binary & np.isnan(high), low + 1, high)
    # percentages, and other ways to score two answers, lie on another grid
    whole = np.asarray(responses == "integer", dtype=bool) | (binary & (high - low == 1))
    return _Scores(whole, binary & (low == 0), np.full(table.rows, np.nan), items, low, high)


def _scores(table: ReportedTable, mean: Variable, responses: _Scores) -> _Scores:
    """The responses of one group."""
    whole, zero_one, _, items, low, high = responses
    if mean[0] == _CHANGE:
        low, high, zero_one = np.full_like(low, np.nan), np.full_like(high, np.nan), np.zeros_like(zero_one)
    least, most = ends(table, mean)
    # a mean off the scale is said once, by the check of the scale
    whole = whole & ~beyond(low, most) & ~beyond(least, high)
    return _Scores(whole, zero_one, value_of(table, ("n", mean[1])), items, low, high)


def _printed(table: ReportedTable, variable: Variable, rows: NDArray[np.intp]) -> Printed:
    """The printed intervals in whole numbers; unreadable where the decimals are unknown or it is a bound."""
    numbers = table.numbers[variable]
    known, unit, comparator = numbers.decimals[rows], numbers.unit[rows], numbers.comparator[rows]
    decimals = np.maximum(known, 0)
    # numbers printed to tens or hundreds say 0 decimals and a larger unit
    to_the_place = np.abs(unit * 10.0**decimals - 1) < 1e-9
    readable = (comparator == "=") & (known >= 0) & to_the_place
    value = np.where(readable, numbers.value[rows], np.nan)
    return granularity.printed_interval(value, decimals, cast(Rounding, table.rounding))


def _granular(table: ReportedTable, mean: Variable, sd: Variable, responses: _Scores) -> Iterator[Finding]:
    if mean not in table.numbers or ("n", mean[1]) not in table.numbers:
        return
    scores = _scores(table, mean, responses)
    rows = np.flatnonzero(scores.whole & table.numbers[mean].given)
    if not len(rows):
        return
    some, centre = scores.take(rows), _printed(table, mean, rows)
    missed = ~granularity.mean_is_reachable(some.n, some.items, *centre)
    for i in rows[missed].tolist():
        yield _mean_finding(table, i, mean, scores)
    if sd not in table.numbers:
        return
    # so is an SD beyond the scale, where one is stated
    stated = [value_of(table, (name, None))[rows] for name in ("scale_min", "scale_max")]
    limit = granularity.sd_upper_limit(some.n, *(end[rows] for end in ends(table, mean)), *stated)
    judged = ~missed & ~(beyond(ends(table, sd)[0][rows], limit) & (mean[0] != _CHANGE))
    spread = _printed(table, sd, rows)
    reached = granularity.sd_is_reachable(some.n, some.items, centre, spread, some.low, some.high)
    for at in positions(judged & ~some.zero_one & ~reached):
        yield _sd_finding(table, int(rows[at]), mean, sd, scores, Printed(*(end[at] for end in centre)))
    reached = granularity.binary_sd_is_reachable(some.n, centre, spread)
    for i in rows[judged & some.zero_one & ~reached].tolist():
        yield _binary_finding(table, i, mean, sd, scores)


def _mean_finding(table: ReportedTable, i: int, mean: Variable, scores: _Scores) -> Finding:
    numbers = table.numbers[mean]
    decimals, n, items = int(numbers.decimals[i]), float(scores.n[i]), float(scores.items[i])
    near = granularity.nearest_reachable_means(n, items, numbers.value[i], decimals)
    totals = (float(near.total_below), float(near.total_above))
    word, texts = (
        "prints",
        [f"{float(mean):.{decimals}f}" for mean in (near.printed_below, near.printed_above)],
    )
    if table.rounding != "nearest":
        word, texts = "is", [f"{total / (n * items):.{decimals + 2}f}" for total in totals]
    answers = f"{n:g} scores" if items == 1 else f"{n:g} x {items:g} answers"
    beside = ", ".join(
        f"{t:.0f}/{n * items:.0f} {word} {text}" for t, text in zip(totals, texts, strict=True)
    )
    said = (
        f"no whole-number total of {answers} prints as {printed_text(table, mean, i)}: {beside}; "
        f"look at the mean and at n, and for excluded cases; {_HOLDS}"
    )
    cells: list[Variable] = [mean, ("n", mean[1])]
    return finding_at(table, i, Severity.IMPOSSIBLE, "granularity of the mean", cells, said)


def _sd_finding(
    table: ReportedTable, i: int, mean: Variable, sd: Variable, scores: _Scores, centre: Printed
) -> Finding:
    numbers = table.numbers[sd]
    value, decimals = float(numbers.value[i]), int(numbers.decimals[i])
    steps = np.arange(-_NEIGHBOURS, _NEIGHBOURS + 1)
    tried = np.round(value + steps * 10.0**-decimals, decimals)
    tried = tried[tried >= 0]
    spread = granularity.printed_interval(tried, decimals, cast(Rounding, table.rounding))
    limits = scores.low[i], scores.high[i]
    reached = tried[granularity.sd_is_reachable(scores.n[i], scores.items[i], centre, spread, *limits)]
    nearest = [
        f"{near:.{decimals}f}" for near in (*reached[reached < value][-1:], *reached[reached > value][:1])
    ]
    kind = "scores" if scores.items[i] == 1 else "item averages"
    said = (
        f"no {scores.n[i]:g} whole-number {kind} whose mean prints as {printed_text(table, mean, i)} "
        f"have an SD that prints as {printed_text(table, sd, i)}"
        f"{f' (the nearest: {listed(nearest)})' if nearest else ''}; look at the SD, the mean and n; {_HOLDS}"
    )
    cells: list[Variable] = [sd, mean, ("n", mean[1])]
    return finding_at(table, i, Severity.IMPOSSIBLE, "granularity of the SD", cells, said)


def _binary_finding(table: ReportedTable, i: int, mean: Variable, sd: Variable, scores: _Scores) -> Finding:
    n = float(scores.n[i])
    low, high = (min(max(float(end[i]), 0.0), 1.0) for end in ends(table, mean))
    shares = np.array([low, high, min(max(low, 0.5), high)])
    spreads = np.sqrt(n / (n - 1) * shares * (1 - shares))
    least, most = float(spreads.min()), float(spreads.max())
    said = (
        f"{n:g} zeros and ones whose mean p prints as {printed_text(table, mean, i)} have an SD of "
        f"sqrt(n/(n - 1)·p(1 - p)), here from {plain(least)} to {plain(most)}, and none prints as "
        f"{printed_text(table, sd, i)}; look at the SD, the mean and n; {_HOLDS}"
    )
    cells: list[Variable] = [sd, mean, ("n", mean[1])]
    return finding_at(table, i, Severity.IMPOSSIBLE, "binary SD", cells, said, expected=(least, most))
