"""One arm or one sample behind several rows, recognised from labels and numbers. Said as a note, never more.

Rows of one sample are not independent evidence: they want one effect, a combined one, or a model of their dependence.
Rows of different studies with the same group sizes and means are judged elsewhere (``audit.plausibility``); here
belong rows of one study, and tests of different studies that were coded without means.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from extractor.audit.support import finding_at, findings_at, groups_in, shown, value_of
from extractor.contrast import contrast_weights
from extractor.distinct import repeated, together
from extractor.evidence import Evidence
from extractor.findings import Finding, Severity
from extractor.labels import label_codes
from extractor.table import BoolArray, FloatArray, ReportedTable, Variable
from extractor.words import listed

ARM, CONTRASTS, SAMPLE, TEST = (
    "same arm in several rows",
    "contrasts share a group",
    "same participants in several rows",
    "same test in several rows",
)
"""The rules, in the order in which a row is said to break them."""
_WHY = "possible double counting; effects of one sample are not independent evidence"
_DEPENDENT = "these effects are not independent"
_ONE_FACTOR = ("one-way", "two-group")
_MOST_NAMED = 3
_LARGEST = 50
"""Rows of a cluster that are looked at one by one; larger ones come from sheets that repeat themselves throughout."""
_DIGITS = 3
"""A test statistic with fewer significant digits is the same in two studies by chance."""


def double_counted(evidence: Evidence, across: bool = True) -> Iterator[Finding]:
    """Notes on rows that may rest on the same arm or the same participants; ``across`` studies where asked for."""
    table = evidence.table
    if table.rows < 2:
        return
    labels = _Labels(table)
    arms = _shared_arms(table, labels)
    yield from arms.values()
    yield from _shared_groups(table, labels)
    said = np.zeros(table.rows, dtype=bool)
    said[list(arms)] = True
    yield from _same_sizes(table, labels, said)
    yield from _same_tests(table, labels, said, across)


class _Labels:
    """The labels of all rows as numbers, 0 for a blank, and whether two rows belong to one analysis.

    again : rows whose study has other rows, too.
    """

    def __init__(self, table: ReportedTable) -> None:
        self.study, self.outcome, self.analysis = (
            label_codes(table.fact(name)) for name in ("study", "outcome", "analysis")
        )
        self.again = (self.study > 0) & (np.bincount(self.study)[self.study] > 1)

    def others(self, rows: Sequence[int], row: int) -> list[int]:
        """Rows of a cluster that are not of the same named analysis as ``row``."""
        own = self.analysis[row]
        return [r for r in rows if r != row and (own == 0 or self.analysis[r] != own)]


def _clusters(keys: Sequence[NDArray[Any]], rows: NDArray[np.intp]) -> Iterator[list[int]]:
    """Rows with equal keys, two or more at a time, in the order of the sheet; the first of very many."""
    codes, again = repeated(keys)
    for members in together(rows[again], codes[again]):
        yield members[:_LARGEST].tolist()


def _named(numbers: NDArray[np.int64], rows: Sequence[int]) -> str:
    """ "row 4", "rows 4, 7 and 9", "rows 4, 7, 9 and 5 more"."""
    said = [str(numbers[row]) for row in rows[:_MOST_NAMED]]
    more = len(rows) - _MOST_NAMED
    words = listed([*said, f"{more} more"] if more > 0 else said)
    return f"row{'s' if len(rows) > 1 else ''} {words}"


def _note(table: ReportedTable, row: int, rule: str, cells: Sequence[Variable], message: str) -> Finding:
    return finding_at(table, row, Severity.NOTE, rule, cells, message, explanation=_WHY)


class _Arms(NamedTuple):
    """Groups whose size, mean and SD or SE are printed, not all of them whole numbers; arrays of shape (groups,).

    numbers : n, mean, SD and SE, -1 where one of the latter is not printed.
    """

    row: NDArray[np.intp]
    group: NDArray[np.int64]
    numbers: tuple[FloatArray, ...]


def _arms(table: ReportedTable, labels: _Labels) -> _Arms:
    """The arms of studies that have several rows for one outcome."""
    same_outcome = repeated([labels.study, labels.outcome])[1] & labels.again
    rows, groups, numbers = [], [], []
    for group in groups_in(table) if same_outcome.any() else ():
        n, mean, sd, se = (value_of(table, (name, group)) for name in ("n", "mean", "sd", "se"))
        spread = np.where(np.isnan(sd), se, sd)
        whole = (mean == np.rint(mean)) & (spread == np.rint(spread))
        known = np.flatnonzero(
            np.isfinite(n) & np.isfinite(mean) & np.isfinite(spread) & ~whole & same_outcome
        )
        rows.append(known)
        groups.append(np.full(len(known), group))
        numbers.append([np.nan_to_num(values[known], nan=-1.0) for values in (n, mean, sd, se)])
    if not rows:
        return _Arms(np.array([], dtype=np.intp), np.array([], dtype=np.int64), ())
    parts = tuple(np.concatenate(each) for each in zip(*numbers, strict=True))
    return _Arms(np.concatenate(rows), np.concatenate(groups), parts)


def _shared_arms(table: ReportedTable, labels: _Labels) -> dict[int, Finding]:
    """Groups of one study and outcome that stand in several rows, by row."""
    arms = _arms(table, labels)
    if not len(arms.row):
        return {}
    found: dict[int, list[tuple[int, list[tuple[int, int]]]]] = {}
    keys = [labels.study[arms.row], labels.outcome[arms.row], *arms.numbers]
    for same in _clusters(keys, np.arange(len(arms.row))):
        pairs = list(zip(arms.row[same].tolist(), arms.group[same].tolist(), strict=True))
        for row, group in pairs:
            others = [(r, g) for r, g in pairs if r in labels.others([r], row)]
            if others:
                found.setdefault(row, []).append((group, others))
    coded = np.bincount(arms.row, minlength=table.rows)
    return {row: _arm_note(table, row, found[row], int(coded[row])) for row in sorted(found)}


def _arm_note(
    table: ReportedTable, row: int, arms: list[tuple[int, list[tuple[int, int]]]], coded: int
) -> Finding:
    cells: list[Variable] = [("mean", group) for group, _ in arms]
    partners = sorted({r for _, others in arms for r, _ in others})
    everywhere = [r for r in partners if all(any(r == other for other, _ in others) for _, others in arms)]
    if coded > 1 and len(arms) == coded and everywhere:
        every = "both groups" if coded == 2 else f"all {coded} groups"
        where = f"{_named(table.row_numbers, everywhere)} of this study and outcome"
        said = f"{every} also stand in {where}: look whether one comparison was coded twice"
        return _note(table, row, ARM, cells, said)
    parts = []
    for group, others in arms:
        size, mean = (shown(table, (name, group), row) for name in ("n", "mean"))
        there = [f"group {g} of row {table.row_numbers[r]}" for r, g in others[:_MOST_NAMED]]
        parts.append(
            f"group {group} ({size}, {mean}) also is {listed(there)}".replace(f" of group {group}", "")
        )
    said = f"{'; '.join(parts)}: look whether one arm is compared several times"
    return _note(table, row, ARM, cells, said)


def _shared_groups(table: ReportedTable, labels: _Labels) -> Iterator[Finding]:
    """Contrasts of one analysis that have a group in common."""
    contrast = table.fact("contrast").astype(str)
    groups = np.zeros(table.rows, dtype=int)
    for group in groups_in(table):
        for name in ("n", "mean"):
            groups[np.isfinite(value_of(table, (name, group)))] = group
    rows = np.flatnonzero((labels.analysis > 0) & (groups > 2))
    keys = (labels.study[rows], labels.analysis[rows])
    for cluster in _clusters(keys, rows):
        used = {row: _weighed(contrast[row], int(groups[row])) for row in cluster}
        for row in cluster:
            shared = {
                other: used[row] & used[other]
                for other in cluster
                if contrast[other] != contrast[row] and used[row] & used[other]
            }
            if shared:
                common = sorted(set().union(*shared.values()))
                which = f"group{'s' if len(common) > 1 else ''} {listed([str(g) for g in common])}"
                said = f"this contrast has {which} in common with that of {_named(table.row_numbers, sorted(shared))}"
                cells: list[Variable] = [
                    ("mean", g) for g in common if np.isfinite(value_of(table, ("mean", g))[row])
                ]
                yield _note(
                    table, row, CONTRASTS, cells, f"{said}: signed effects of both are not independent"
                )


def _weighed(contrast: str, groups: int) -> set[int]:
    """Groups a contrast has weights for; none where it is not understood, which is said elsewhere."""
    try:
        weights, _ = contrast_weights(contrast, groups)
    except ValueError:
        return set()
    return {int(at) + 1 for at in np.flatnonzero(weights)}


def _same_sizes(table: ReportedTable, labels: _Labels, said: BoolArray) -> Iterator[Finding]:
    """Rows of one study with the same group sizes, or the same total where no sizes are printed."""
    groups = groups_in(table)
    n = np.column_stack([value_of(table, ("n", g)) for g in groups]) if groups else np.zeros((table.rows, 0))
    sized = np.isfinite(n).sum(axis=1) >= 2
    total = np.where(sized, np.nan, _total(table))
    rows = np.flatnonzero(labels.again & (sized | np.isfinite(total)))
    sizes = np.sort(np.where(sized[rows, None], n[rows], np.nan), axis=1)
    keys = (labels.study[rows], *np.nan_to_num(np.column_stack([sizes, total[rows]]), nan=-1.0).T)
    shared: list[tuple[int, str]] = []
    for cluster in _clusters(keys, rows):
        for row in cluster:
            others = [r for r in labels.others(cluster, row) if not (said[r] and said[row])]
            if others:
                where = f"{_named(table.row_numbers, others)} of this study, too"
                shared.append((row, f"stand in {where}: if they are the same people, {_DEPENDENT}"))
    yield from _sized_notes(table, groups, n, [(row, end) for row, end in shared if sized[row]])
    yield from _total_notes(table, total, [(row, end) for row, end in shared if not sized[row]])


def _sized_notes(
    table: ReportedTable, groups: Sequence[int], n: FloatArray, shared: Sequence[tuple[int, str]]
) -> Iterator[Finding]:
    """Notes on rows whose group sizes stand in other rows, from how each note ends."""
    if not shared:
        return
    rows = np.array([row for row, _ in shared])
    for members in together(np.arange(len(rows)), repeated(list(np.isfinite(n[rows]).T))[0]):
        at = np.flatnonzero(np.isfinite(n[rows[members[0]]]))
        texts = ([f"{size:g}" for size in sizes] for sizes in n[np.ix_(rows[members], at)].tolist())
        messages = [
            f"group sizes {listed(sizes)} {shared[i][1]}"
            for i, sizes in zip(members.tolist(), texts, strict=True)
        ]
        cells: list[Variable] = [("n", groups[i]) for i in at.tolist()]
        yield from findings_at(table, rows[members].tolist(), Severity.NOTE, SAMPLE, cells, messages, _WHY)


def _total_notes(
    table: ReportedTable, total: FloatArray, shared: Sequence[tuple[int, str]]
) -> Iterator[Finding]:
    """Notes on rows whose participants stand in other rows, from how each note ends."""
    left = dict(shared)
    for name in ("n_total", "df_error", "df"):
        printed = np.isfinite(value_of(table, (name, None)))
        rows = [row for row in left if printed[row]]
        messages = [f"{total[row]:g} participants {left.pop(row)}" for row in rows]
        if rows:
            yield from findings_at(table, rows, Severity.NOTE, SAMPLE, [(name, None)], messages, _WHY)


def _total(table: ReportedTable) -> FloatArray:
    """Participants of each row: as printed, or from the dfs where a design with one factor fixes them."""
    printed = value_of(table, ("n_total", None))
    one_factor = np.isin(table.fact("design").astype(str), _ONE_FACTOR)
    of_f = value_of(table, ("df_effect", None)) + value_of(table, ("df_error", None)) + 1
    of_t = value_of(table, ("df", None)) + 2
    implied = np.where(np.isnan(of_f), of_t, of_f)
    implied = np.where(one_factor & (implied == np.rint(implied)), implied, np.nan)
    return np.where(np.isnan(printed), implied, printed)


def _same_tests(table: ReportedTable, labels: _Labels, said: BoolArray, across: bool) -> Iterator[Finding]:
    """The same F or t on the same dfs: in rows of one study, or of different ones that were coded without means."""
    means = sum((np.isfinite(value_of(table, ("mean", g))).astype(int) for g in groups_in(table)), 0)
    without = np.broadcast_to(np.asarray(means) < 2, table.rows)
    for statistic, dfs in (("f_value", ("df_effect", "df_error")), ("t_value", ("df",))):
        value, unit = value_of(table, (statistic, None)), _unit(table, statistic)
        degrees = np.column_stack([value_of(table, (name, None)) for name in dfs])
        with np.errstate(invalid="ignore", divide="ignore"):
            exact = np.abs(value) >= 10.0 ** (_DIGITS - 1) * unit
        rows = np.flatnonzero(exact & np.isfinite(degrees).all(axis=1) & (labels.study > 0) & ~said)
        keys = [*np.column_stack([value, degrees])[rows].T, *(() if across else (labels.study[rows],))]
        cells: list[Variable] = [(statistic, None), *((name, None) for name in dfs)]
        notes: dict[int, str] = {}
        for cluster in _clusters(keys, rows):
            for row in cluster:
                study = labels.study[row]
                others = [
                    r
                    for r in cluster
                    if r != row and (labels.study[r] == study or (without[r] and without[row]))
                ]
                if others:
                    own = all(labels.study[r] == study for r in others)
                    where = "of this study" if own else f"({_studies(table, others)})"
                    tested = listed([shown(table, cell, row) for cell in cells])
                    message = f"{tested} also stand in {_named(table.row_numbers, others)} {where}"
                    notes[row] = f"{message}: look whether one test was coded twice"
        if notes:
            yield from findings_at(table, list(notes), Severity.NOTE, TEST, cells, notes.values(), _WHY)


def _unit(table: ReportedTable, name: str) -> FloatArray:
    numbers = table.numbers.get((name, None))
    return np.full(table.rows, np.nan) if numbers is None else numbers.unit


def _studies(table: ReportedTable, rows: Sequence[int]) -> str:
    return listed(list(dict.fromkeys(str(table.fact("study")[row]) for row in rows[:_MOST_NAMED])))
