"""Repairs: what a contradictory row would say if one usual slip were undone.

Each kind of slip is a function that yields repaired domains. A repair is tested by propagating it (see ``fits``): it
explains the row when nothing contradicts any more. A kind that can repair a number in many ways fits by chance more
often, and so does one whose cell the other numbers hardly pin down; a repair says what is needed to tell how often.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from itertools import combinations

import numpy as np

from extractor.audit.constraints import Cell, Constraints
from extractor.audit.other_designs import another_design
from extractor.audit.propagation import judges_of
from extractor.audit.repair import (
    Changes,
    Kind,
    Repair,
    cells_of,
    free,
    is_bound,
    is_count,
    middle,
    relation_of,
    repair_of,
)
from extractor.audit.welch import welch_marks
from extractor.catalogue.branches import square_image
from extractor.catalogue.relation import ONE_FACTOR
from extractor.catalogue.solving_for_groups import MOST_GROUPS
from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray
from extractor.words import listed

KINDS: list[Kind] = [another_design]

_WORDS = {
    "eta_squared": "eta squared",
    "partial_eta_squared": "partial eta squared",
    "generalized_eta_squared": "generalized eta squared",
    "omega_squared": "omega squared",
    "partial_omega_squared": "partial omega squared",
    "epsilon_squared": "epsilon squared",
    "cohens_f": "Cohen's f",
}
_ONE_NAME = ("eta_squared", "omega_squared", "epsilon_squared", "cohens_f")
"""Indices that differ where one factor is the whole model."""

_ROOTED = frozenset(
    {"eta_squared", "omega_squared", "epsilon_squared", "partial_eta_squared", "partial_omega_squared"}
)
_TOTAL_DF = ONE_FACTOR | {"factorial", "ancova"}
"""Designs in which N - 1 are the total df."""

_SWAPS = 9
_ODD_DECIMALS = 0.1
"""How often a wrong number has, by chance, other decimals than its neighbours in exactly the way a slip would make."""


def _kind(function: Kind) -> Kind:
    KINDS.append(function)
    return function


def repairs(constraints: Constraints) -> Iterator[Repair]:
    """Every repair of every kind."""
    for kind in KINDS:
        # a repair of an unbounded or blank cell is no repair; its arithmetic may be undefined
        with np.errstate(all="ignore"):
            found = list(kind(constraints))
        yield from found


@_kind
def decimal_slip(constraints: Constraints) -> Iterator[Repair]:
    """The decimal point moved by one or two places."""
    for cell in constraints.cells:
        low, high = constraints.interval(cell)
        usual = _usual_unit(constraints, cell)
        for places in (-1, 1) if is_count(cell) else (-1, 1, -2, 2):
            factor = 10.0**places
            new = low * factor, high * factor
            applies = new[0] == np.round(new[0]) if is_count(cell) else ~is_bound(constraints, cell)
            moved = "one place" if abs(places) == 1 else "two places"
            # the digits stay when a point moves, so the number of decimals tells on it
            unit = constraints.units[cell]
            odd = ~np.isclose(unit, usual) & np.isclose(unit * factor, usual)
            readings = np.where(odd, 4 * _ODD_DECIMALS, 4.0)
            words = f"a decimal point moved {moved}"
            yield repair_of(
                constraints, "decimal point", words, {cell: new}, readings=readings, applies=applies
            )


def _usual_unit(constraints: Constraints, cell: Cell) -> FloatArray:
    """One unit in the last place of most other groups' cells of the quantity; NaN where there are none."""
    others = [constraints.units[c] for c in cells_of(constraints, cell.quantity) if c != cell]
    if not others:
        return np.full_like(constraints.units[cell], np.nan)
    return np.asarray(np.median(np.column_stack(others), axis=1))


@_kind
def swapped_digits(constraints: Constraints) -> Iterator[Repair]:
    """Two adjacent digits changed places."""
    for cell in constraints.cells:
        low, high = constraints.interval(cell)
        unit = np.where(constraints.units[cell] > 0, constraints.units[cell], 1.0)
        digits = np.round(np.abs(middle(low, high)) / unit)
        plain = np.isfinite(digits) & (digits < 10.0**_SWAPS) & ~is_bound(constraints, cell)
        digits = np.where(plain, digits, 0.0)
        sign = np.where(middle(low, high) < 0, -1.0, 1.0)
        half = (high - low) / 2
        swaps = []
        for place in range(_SWAPS):
            scale = 10.0**place
            right = np.floor(digits / scale) % 10
            left = np.floor(digits / (10 * scale)) % 10
            swapped = digits + (right - left) * 10 * scale + (left - right) * scale
            # a leading zero in front of the point may take part ("0.43" for "4.03"), not beyond it
            swaps.append((sign * swapped * unit, (left != right) & (digits >= scale)))
        readings = np.sum([applies for _, applies in swaps], axis=0)
        for value, applies in swaps:
            if applies.any():
                yield repair_of(
                    constraints,
                    "swapped digits",
                    "two adjacent digits swapped",
                    {cell: (value - half, value + half)},
                    readings=readings,
                    applies=applies,
                )


@_kind
def lost_sign(constraints: Constraints) -> Iterator[Repair]:
    """A minus sign lost or gained."""
    for cell in constraints.cells:
        if VOCABULARY[cell.quantity].low < 0 and not is_count(cell):
            low, high = constraints.interval(cell)
            yield repair_of(constraints, "sign", "a lost or added minus sign", {cell: (-high, -low)})


@_kind
def one_tailed(constraints: Constraints) -> Iterator[Repair]:
    """A one-tailed p printed as if two-tailed."""
    for name in ("p_value", "p_contrast"):
        for cell in cells_of(constraints, name):
            low, high = constraints.interval(cell)
            yield repair_of(constraints, "one-tailed p", "a one-tailed p", {cell: (2 * low, 2 * high)})


@_kind
def another_test(constraints: Constraints) -> Iterator[Repair]:
    """A statistic and its p from another test than the coded one: a suspicion, since any two numbers would fit."""
    for name in ("f_value", "t_value"):
        for cell in cells_of(constraints, name):
            for companion in (*cells_of(constraints, "p_value"), *cells_of(constraints, "p_contrast")):
                free = np.full(constraints.rows, -np.inf), np.full(constraints.rows, np.inf)
                yield repair_of(
                    constraints,
                    "another test",
                    "statistic and p of another test",
                    {cell: free, companion: free},
                    share=np.ones(constraints.rows),
                )


@_kind
def mislabelled_index(constraints: Constraints) -> Iterator[Repair]:
    """One index of explained variance printed under the name of another."""
    one_factor = constraints.design in ONE_FACTOR
    implied = {relation.gives for relation in judges_of(constraints.design)}
    known = {cell.quantity for cell in constraints.cells}
    for name in _WORDS:
        for cell in cells_of(constraints, name):
            low, high = constraints.interval(cell)
            unrelated = known | {_classical(name)} if one_factor else known
            others = [other for other in (_ONE_NAME if one_factor else _WORDS) if other not in unrelated]
            for other in others:
                if other not in implied:
                    continue
                repair = repair_of(
                    constraints,
                    "index label",
                    f"{_WORDS[other]} labelled {_WORDS[name]}",
                    {cell: free(low)},
                    readings=len(others) + 1,
                    gauge=other,
                )
                support = VOCABULARY[other]
                repair.domain.low[other] = np.maximum(low, support.low)
                repair.domain.high[other] = np.minimum(high, support.high)
                yield repair
            if name in _ROOTED:
                squared = np.maximum(low, 0) ** 2, high**2
                words = f"an unsquared index labelled {_WORDS[name]}"
                yield repair_of(constraints, "index label", words, {cell: squared}, readings=len(others) + 1)
            if name == "cohens_f":
                root = np.sqrt(np.maximum(low, 0)), np.sqrt(high)
                words = "Cohen's f squared labelled Cohen's f"
                yield repair_of(constraints, "index label", words, {cell: root}, readings=len(others) + 1)


def _classical(name: str) -> str:
    """The index that a name stands for where one factor is the whole model."""
    return name.removeprefix("partial_").removeprefix("generalized_")


@_kind
def t_and_f(constraints: Constraints) -> Iterator[Repair]:
    """t printed as F, or F printed as t, where the effect has one df."""
    if relation_of(constraints.design, "f_value", "t_value") is None:
        return
    for cell in cells_of(constraints, "f_value"):
        yield repair_of(
            constraints, "t as F", "t printed as F", {cell: square_image(constraints.interval(cell))}
        )
    for cell in cells_of(constraints, "t_value"):
        low, high = constraints.interval(cell)
        root = np.sqrt(np.maximum(low, 0)), np.sqrt(np.maximum(high, 0))
        for change in (root, (-root[1], -root[0])):
            yield repair_of(
                constraints, "F as t", "F printed as t", {cell: change}, readings=2, applies=high >= 0
            )


def _all_groups(
    constraints: Constraints, name: str, change: Callable[[FloatArray, FloatArray], FloatArray]
) -> Changes:
    """The same change to a quantity in every group; it may use the group sizes."""
    changes = {}
    for cell in cells_of(constraints, name):
        low, high = constraints.interval(cell)
        if "n" in constraints.domain.low and cell.column is not None:
            n = constraints.domain.low["n"][:, cell.column]
        else:
            n = np.full(len(low), np.nan)
        changes[cell] = change(low, n), change(high, n)
    return changes


def _known(changes: Changes) -> BoolArray:
    return np.asarray(
        np.logical_and.reduce([np.isfinite(low) & np.isfinite(high) for low, high in changes.values()])
    )


@_kind
def spread_labels(constraints: Constraints) -> Iterator[Repair]:
    """Standard errors, variances or SDs with divisor n in the place of standard deviations."""
    labels: list[tuple[str, str, Callable[[FloatArray, FloatArray], FloatArray]]] = [
        ("SE for SD", "standard errors labelled SD", lambda s, n: s * np.sqrt(n)),
        ("variance for SD", "variances labelled SD", lambda s, n: np.sqrt(s)),
        ("population SD", "SDs with divisor n", lambda s, n: s * np.sqrt(n / (n - 1))),
    ]
    if cells_of(constraints, "sd"):
        for kind, words, change in labels:
            changes = _all_groups(constraints, "sd", change)
            yield repair_of(constraints, kind, words, changes, applies=_known(changes), gauge="ms_error")
    if cells_of(constraints, "se"):
        changes = _all_groups(constraints, "se", lambda s, n: s / np.sqrt(n))
        yield repair_of(
            constraints, "SD for SE", "SDs labelled SE", changes, applies=_known(changes), gauge="ms_error"
        )


@_kind
def error_df(constraints: Constraints) -> Iterator[Repair]:
    """The total df, or N itself, printed as error df."""
    if constraints.design not in _TOTAL_DF:
        return
    for name in ("df_error", "df"):
        for cell in cells_of(constraints, name):
            low, _ = constraints.interval(cell)
            for words, added in (("N - 1 printed as error df", 1.0), ("N printed as error df", 0.0)):
                repair = repair_of(constraints, "total df", words, {cell: free(low)}, readings=2)
                total = low + added
                ends = repair.domain.low.get("n_total", total), repair.domain.high.get("n_total", total)
                repair.domain.low["n_total"] = np.maximum(ends[0], total)
                repair.domain.high["n_total"] = np.minimum(ends[1], total)
                yield repair


@_kind
def swapped_dfs(constraints: Constraints) -> Iterator[Repair]:
    """Numerator and denominator df changed places."""
    for first in cells_of(constraints, "df_effect"):
        for second in cells_of(constraints, "df_error"):
            changes = {first: constraints.interval(second), second: constraints.interval(first)}
            different = constraints.interval(first)[0] != constraints.interval(second)[0]
            yield repair_of(constraints, "swapped dfs", "the two df swapped", changes, applies=different)


@_kind
def before_exclusions(constraints: Constraints) -> Iterator[Repair]:
    """N of those recruited in the place of N analysed: up to half of them lost."""
    for cell in cells_of(constraints, "n_total"):
        low, _ = constraints.interval(cell)
        analysed = np.ceil(low / 2), low - 1
        # every N in that range would be explained
        readings = np.maximum(analysed[1] - analysed[0] + 1, 1)
        words = "N counted before exclusions"
        yield repair_of(constraints, "N before exclusions", words, {cell: analysed}, readings=readings)


@_kind
def swapped_sizes(constraints: Constraints) -> Iterator[Repair]:
    """Two groups' ns changed places."""
    cells = cells_of(constraints, "n")
    couples = list(combinations(cells, 2)) if len(cells) <= MOST_GROUPS else []
    for first, second in couples:
        one, two = constraints.interval(first), constraints.interval(second)
        yield repair_of(
            constraints,
            "swapped ns",
            "the ns of two groups swapped",
            {first: two, second: one},
            readings=len(couples),
            applies=one[0] != two[0],
        )


@_kind
def welch_test(constraints: Constraints) -> Iterator[Repair]:
    """F, p or error df of a Welch test, or several of them, in the place of the classical ones."""
    welch_f = relation_of(constraints.design, "welch_f", "n", "mean", "sd")
    welch_df = relation_of(constraints.design, "welch_df_error", "n", "sd")
    if welch_f is None or welch_df is None:
        return
    marks = welch_marks(constraints, welch_f, welch_df)
    tests = [c for c in constraints.cells if c.quantity in ("f_value", "t_value")]
    p = [c for c in constraints.cells if c.quantity == "p_value"]
    dfs = [c for c in constraints.cells if c.quantity in ("df_error", "df")]
    for cells in (tests, tests + p, p, dfs, tests + dfs, tests + dfs + p, dfs + p):
        if not cells or not marks:
            continue
        fits = np.logical_and.reduce([marks[c.quantity].fits for c in cells])
        # F and t are one statistic, and so are two columns of df
        measured = {
            ("df" if c in dfs else "F" if c in tests else "p"): marks[c.quantity].share for c in cells
        }
        said = list(dict.fromkeys("df" if c in dfs else VOCABULARY[c.quantity].symbol for c in cells))
        yield repair_of(
            constraints,
            "Welch test",
            f"{listed(said)} of a Welch test",
            dict.fromkeys(cells, free(constraints.interval(cells[0])[0])),
            applies=fits,
            share=np.prod(list(measured.values()), axis=0),
        )
