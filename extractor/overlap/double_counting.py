"""One arm or one sample behind several rows, recognised from labels and numbers. Said as a note, never more.

Rows of one sample are not independent evidence: they want one effect, a combined one, or a model of their dependence.
Rows of different studies with the same group sizes and means are judged elsewhere (``audit.plausibility``); here
belong rows of one study, and tests of different studies that were coded without means.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from extractor.audit.support import finding_at, groups_in, shown, value_of
from extractor.contrast import contrast_weights
from extractor.distinct import distinct, together
from extractor.evidence import Evidence
from extractor.findings import Finding, Severity
from extractor.labels import compared, plain_label
from extractor.table import BoolArray, FloatArray, ReportedTable, Variable
from extractor.words import listed

if TYPE_CHECKING:
    import pandas as pd

ARM, CONTRASTS, SAMPLE, TEST = (
    "same arm in several rows",
    "contrasts share a group",
    "same participants in several rows",
    "same test in several rows",
)
"""The rules, in the order in which a row is said to break them."""
_WHY = "possible double counting; effects of one sample are not independent evidence"
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
    """The labels of all rows as they are compared, and whether two rows belong to one analysis."""

    def __init__(self, table: ReportedTable) -> None:
        self.study = compared(table.fact("study"), plain_label)
        self.outcome = compared(table.fact("outcome"), plain_label)
        self.analysis = compared(table.fact("analysis"), plain_label)

    def others(self, rows: Sequence[int], row: int) -> list[int]:
        """Rows of a cluster that are not of the same named analysis as ``row``."""
        own = self.analysis[row]
        return [r for r in rows if r != row and (own == "" or self.analysis[r] != own)]


def _clusters(keys: Sequence[NDArray[np.generic]], rows: NDArray[np.intp]) -> Iterator[list[int]]:
    """Rows with equal keys, two or more distinct ones at a time, in the order of the sheet; the first of very many."""
    _, codes = distinct(list(zip(*(key.tolist() for key in keys), strict=True)))
    again = np.bincount(codes, minlength=1)[codes] > 1
    for members in together(rows[again], codes[again]):
        several = sorted(set(members.tolist()))
        if len(several) > 1:
            yield several[:_LARGEST]


def _named(table: ReportedTable, rows: Sequence[int]) -> str:
    """ "row 4", "rows 4, 7 and 9", "rows 4, 7, 9 and 5 more"."""
    numbers = [str(table.row_numbers[row]) for row in rows[:_MOST_NAMED]]
    more = len(rows) - _MOST_NAMED
    words = listed([*numbers, f"{more} more"] if more > 0 else numbers)
    return f"row{'s' if len(rows) > 1 else ''} {words}"


def _note(table: ReportedTable, row: int, rule: str, cells: Sequence[Variable], message: str) -> Finding:
    return finding_at(table, row, Severity.NOTE, rule, cells, message, explanation=_WHY)


def _arms(table: ReportedTable, labels: _Labels) -> pd.DataFrame:
    """One line per group whose size, mean and SD or SE are printed, not all of them whole numbers."""
    import pandas as pd

    parts = []
    for group in groups_in(table):
        n, mean, sd, se = (value_of(table, (name, group)) for name in ("n", "mean", "sd", "se"))
        spread = np.where(np.isnan(sd), se, sd)
        whole = (mean == np.rint(mean)) & (spread == np.rint(spread))
        known = np.isfinite(n) & np.isfinite(mean) & np.isfinite(spread) & ~whole & (labels.study != "")
        columns = {"n": n, "mean": mean, "sd": sd, "se": se, "study": labels.study, "outcome": labels.outcome}
        lines = pd.DataFrame(columns)[known].fillna({"sd": -1.0, "se": -1.0})
        parts.append(lines.assign(group=group, row=np.flatnonzero(known)))
    return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame({"row": [], "group": []})


def _shared_arms(table: ReportedTable, labels: _Labels) -> dict[int, Finding]:
    """Groups of one study and outcome that stand in several rows, by row."""
    lines = _arms(table, labels)
    found: dict[int, list[tuple[int, list[tuple[int, int]]]]] = {}
    keys = [name for name in lines.columns if name not in ("row", "group")]
    again = lines[lines.duplicated(keys, keep=False)] if keys else lines.iloc[:0]
    for _, same in again.groupby(keys, sort=False) if len(again) else ():
        pairs = list(zip(same["row"].tolist(), same["group"].tolist(), strict=True))[:_LARGEST]
        for row, group in pairs:
            others = [(r, g) for r, g in pairs if r in labels.others([r], row)]
            if others:
                found.setdefault(row, []).append((group, others))
    coded = lines["row"].value_counts()
    return {row: _arm_note(table, row, arms, int(coded[row])) for row, arms in sorted(found.items())}


def _arm_note(
    table: ReportedTable, row: int, arms: list[tuple[int, list[tuple[int, int]]]], coded: int
) -> Finding:
    cells: list[Variable] = [("mean", group) for group, _ in arms]
    partners = sorted({r for _, others in arms for r, _ in others})
    everywhere = [r for r in partners if all(any(r == other for other, _ in others) for _, others in arms)]
    if coded > 1 and len(arms) == coded and everywhere:
        every = "both groups" if coded == 2 else f"all {coded} groups"
        where = f"{_named(table, everywhere)} of this study and outcome"
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
    rows = np.flatnonzero((labels.analysis != "") & (groups > 2))
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
                said = f"this contrast has {which} in common with that of {_named(table, sorted(shared))}"
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
    rows = np.flatnonzero((labels.study != "") & (sized | np.isfinite(total)))
    sizes = np.sort(np.where(sized[:, None], n, np.nan), axis=1)
    printed = {name: np.isfinite(value_of(table, (name, None))) for name in ("n_total", "df_error", "df")}
    keys = (labels.study[rows], *np.nan_to_num(np.column_stack([sizes, total])[rows], nan=-1.0).T)
    for cluster in _clusters(keys, rows):
        for row in cluster:
            others = [r for r in labels.others(cluster, row) if not (said[r] and said[row])]
            if not others:
                continue
            sizes_of = [(g, f"{size:g}") for g, size in zip(groups, n[row], strict=True) if np.isfinite(size)]
            cells: list[Variable] = [("n", g) for g, _ in sizes_of]
            what = f"group sizes {listed([size for _, size in sizes_of])} stand"
            if not sized[row]:
                cells = [(next(name for name, given in printed.items() if given[row]), None)]
                what = f"{total[row]:g} participants stand"
            asked = "if they are the same people, these effects are not independent"
            message = f"{what} in {_named(table, others)} of this study, too: {asked}"
            yield _note(table, row, SAMPLE, cells, message)


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
        rows = np.flatnonzero(exact & np.isfinite(degrees).all(axis=1) & (labels.study != "") & ~said)
        keys = [*np.column_stack([value, degrees])[rows].T, *(() if across else (labels.study[rows],))]
        for cluster in _clusters(keys, rows):
            for row in cluster:
                others = [
                    r
                    for r in cluster
                    if r != row and (labels.study[r] == labels.study[row] or (without[r] and without[row]))
                ]
                if others:
                    own = all(labels.study[r] == labels.study[row] for r in others)
                    where = "of this study" if own else f"({_studies(table, others)})"
                    cells: list[Variable] = [(statistic, None), *((name, None) for name in dfs)]
                    tested = listed([shown(table, cell, row) for cell in cells])
                    message = f"{tested} also stand in {_named(table, others)} {where}"
                    yield _note(table, row, TEST, cells, f"{message}: look whether one test was coded twice")


def _unit(table: ReportedTable, name: str) -> FloatArray:
    numbers = table.numbers.get((name, None))
    return np.full(table.rows, np.nan) if numbers is None else numbers.unit


def _studies(table: ReportedTable, rows: Sequence[int]) -> str:
    return listed(list(dict.fromkeys(str(table.fact("study")[row]) for row in rows[:_MOST_NAMED])))
