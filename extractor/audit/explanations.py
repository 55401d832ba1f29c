"""Repairs: what a contradictory row would say if one usual slip were undone.

Each kind of slip is a function that yields repaired domains. A repair is tested by propagating it: it explains the
row when nothing contradicts any more. A kind that can repair a number in many ways fits by chance more often, and so
does one whose cell the other numbers hardly pin down; both enter the chance figure (see ``chance``).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from extractor.audit.constraints import Cell, Constraints
from extractor.audit.propagation import Domain
from extractor.catalogue.branches import square_image
from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray


@dataclass(frozen=True, slots=True)
class Repair:
    """One way of undoing one slip, for all rows of a block.

    cells : the cells it changes. domain : the repaired intervals. value : what the first cell would say, shape
    (rows,), NaN where there is no single number. applies : rows in which the repair is another reading at all.
    variants : how many readings of this kind are tried on these cells.
    """

    kind: str
    words: str
    cells: tuple[Cell, ...]
    domain: Domain
    value: FloatArray
    applies: BoolArray
    variants: int


Kind = Callable[[Constraints], Iterator[Repair]]
KINDS: list[Kind] = []

_EXPLAINED = ("eta_squared", "omega_squared", "epsilon_squared", "cohens_f", "generalized_eta_squared")
_EXPLAINED_WORDS = {
    "eta_squared": "eta squared",
    "partial_eta_squared": "partial eta squared",
    "generalized_eta_squared": "generalized eta squared",
    "omega_squared": "omega squared",
    "partial_omega_squared": "partial omega squared",
    "epsilon_squared": "epsilon squared",
    "cohens_f": "Cohen's f",
}
_ROOTED = frozenset(
    {"eta_squared", "omega_squared", "epsilon_squared", "partial_eta_squared", "partial_omega_squared"}
)


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


def _middle(low: FloatArray, high: FloatArray) -> FloatArray:
    return (low + high) / 2


def _repair(
    constraints: Constraints,
    kind: str,
    words: str,
    changes: dict[Cell, tuple[FloatArray, FloatArray]],
    *,
    variants: int = 1,
    applies: BoolArray | None = None,
) -> Repair:
    domain = constraints.domain.copy()
    for cell, (low, high) in changes.items():
        constraints.put(domain, cell, low, high)
    first = next(iter(changes))
    low, high = changes[first]
    value = _middle(low, high)
    if applies is None:
        applies = np.ones(len(value), dtype=bool)
    return Repair(kind, words, tuple(changes), domain, value, applies, variants)


def _cells(constraints: Constraints, quantity: str) -> list[Cell]:
    return [cell for cell in constraints.cells if cell.quantity == quantity]


def _is_count(cell: Cell) -> bool:
    return VOCABULARY[cell.quantity].exact


@_kind
def decimal_slip(constraints: Constraints) -> Iterator[Repair]:
    """The decimal point moved by one or two places."""
    for cell in constraints.cells:
        low, high = constraints.interval(cell)
        for places in (-1, 1, -2, 2):
            factor = 10.0**places
            new = low * factor, high * factor
            whole = np.ones(len(low), dtype=bool)
            if _is_count(cell):
                if places in (-2, 2):
                    continue
                whole = new[0] == np.round(new[0])
            moved = "one place" if abs(places) == 1 else "two places"
            yield _repair(
                constraints,
                "decimal point",
                f"a decimal point moved {moved}",
                {cell: new},
                variants=4,
                applies=whole,
            )


@_kind
def swapped_digits(constraints: Constraints) -> Iterator[Repair]:
    """Two adjacent digits changed places."""
    for cell in constraints.cells:
        low, high = constraints.interval(cell)
        unit = np.where(constraints.units[cell] > 0, constraints.units[cell], 1.0)
        digits = np.round(np.abs(_middle(low, high)) / unit)
        digits = np.where(np.isfinite(digits) & (digits < 1e15), digits, 0.0)
        sign = np.where(_middle(low, high) < 0, -1.0, 1.0)
        half = (high - low) / 2
        for place in range(5):
            scale = 10.0**place
            right = np.floor(digits / scale) % 10
            left = np.floor(digits / (10 * scale)) % 10
            swapped = digits + (right - left) * 10 * scale + (left - right) * scale
            # a leading zero in front of the point may take part ("0.43" for "4.03"), not beyond it
            applies = (left != right) & (digits >= scale)
            value = sign * swapped * unit
            yield _repair(
                constraints,
                "swapped digits",
                "two adjacent digits swapped",
                {cell: (value - half, value + half)},
                variants=3,
                applies=applies,
            )


@_kind
def lost_sign(constraints: Constraints) -> Iterator[Repair]:
    """A minus sign lost or gained."""
    for cell in constraints.cells:
        if VOCABULARY[cell.quantity].low < 0 and not _is_count(cell):
            low, high = constraints.interval(cell)
            yield _repair(constraints, "sign", "a lost or added minus sign", {cell: (-high, -low)})


@_kind
def one_tailed(constraints: Constraints) -> Iterator[Repair]:
    """A one-tailed p printed as if two-tailed."""
    for name in ("p_value", "p_contrast"):
        for cell in _cells(constraints, name):
            low, high = constraints.interval(cell)
            yield _repair(constraints, "one-tailed p", "a one-tailed p", {cell: (2 * low, 2 * high)})


@_kind
def mislabelled_index(constraints: Constraints) -> Iterator[Repair]:
    """One index of explained variance printed under the name of another."""
    for name in _EXPLAINED_WORDS:
        for cell in _cells(constraints, name):
            low, high = constraints.interval(cell)
            others = [other for other in _EXPLAINED if other != name and not _cells(constraints, other)]
            for other in others:
                if other == "generalized_eta_squared" or {name, other} == {
                    "eta_squared",
                    "partial_eta_squared",
                }:
                    continue
                repair = _repair(
                    constraints,
                    "index label",
                    f"{_EXPLAINED_WORDS[other]} labelled {_EXPLAINED_WORDS[name]}",
                    {cell: (np.full_like(low, -np.inf), np.full_like(high, np.inf))},
                    variants=len(others) + 1,
                )
                support = VOCABULARY[other]
                repair.domain.low[other] = np.maximum(low, support.low)
                repair.domain.high[other] = np.minimum(high, support.high)
                yield repair
            if name in _ROOTED:
                positive = np.maximum(low, 0)
                yield _repair(
                    constraints,
                    "index label",
                    f"an unsquared index labelled {_EXPLAINED_WORDS[name]}",
                    {cell: (positive**2, high**2)},
                    variants=len(others) + 1,
                )


@_kind
def t_and_f(constraints: Constraints) -> Iterator[Repair]:
    """t printed as F, or F printed as t."""
    for cell in _cells(constraints, "f_value"):
        low, high = constraints.interval(cell)
        yield _repair(constraints, "t as F", "t printed as F", {cell: (np.maximum(low, 0) ** 2, high**2)})
    for cell in _cells(constraints, "t_value"):
        low, high = constraints.interval(cell)
        root = np.sqrt(np.maximum(low, 0)), np.sqrt(np.maximum(high, 0))
        positive = low >= 0
        yield _repair(constraints, "F as t", "F printed as t", {cell: root}, applies=positive)
        yield _repair(constraints, "F as t", "F printed as t", {cell: (-root[1], -root[0])}, applies=positive)


def _all_groups(
    constraints: Constraints, name: str, change: Callable[[FloatArray, FloatArray], FloatArray]
) -> dict[Cell, tuple[FloatArray, FloatArray]]:
    """The same change to a quantity in every group; it may use the group sizes."""
    changes = {}
    for cell in _cells(constraints, name):
        low, high = constraints.interval(cell)
        if "n" in constraints.domain.low and cell.column is not None:
            n = constraints.domain.low["n"][:, cell.column]
        else:
            n = np.full(len(low), np.nan)
        changes[cell] = change(low, n), change(high, n)
    return changes


def _known(changes: dict[Cell, tuple[FloatArray, FloatArray]]) -> BoolArray:
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
    if _cells(constraints, "sd"):
        for kind, words, change in labels:
            changes = _all_groups(constraints, "sd", change)
            yield _repair(constraints, kind, words, changes, applies=_known(changes))
    if _cells(constraints, "se"):
        changes = _all_groups(constraints, "se", lambda s, n: s / np.sqrt(n))
        yield _repair(constraints, "SD for SE", "SDs labelled SE", changes, applies=_known(changes))


@_kind
def error_df(constraints: Constraints) -> Iterator[Repair]:
    """The total df, or N itself, printed as error df."""
    for name in ("df_error", "df"):
        for cell in _cells(constraints, name):
            low, high = constraints.interval(cell)
            for words, added in (("N - 1 printed as error df", 1.0), ("N printed as error df", 0.0)):
                repair = _repair(
                    constraints,
                    "total df",
                    words,
                    {cell: (np.zeros_like(low), np.full_like(high, np.inf))},
                    variants=2,
                )
                total = low + added
                ends = repair.domain.low.get("n_total", total), repair.domain.high.get("n_total", total)
                repair.domain.low["n_total"] = np.maximum(ends[0], total)
                repair.domain.high["n_total"] = np.minimum(ends[1], total)
                yield repair


@_kind
def swapped_dfs(constraints: Constraints) -> Iterator[Repair]:
    """Numerator and denominator df changed places."""
    for first in _cells(constraints, "df_effect"):
        for second in _cells(constraints, "df_error"):
            changes = {first: constraints.interval(second), second: constraints.interval(first)}
            different = constraints.interval(first)[0] != constraints.interval(second)[0]
            yield _repair(constraints, "swapped dfs", "the two df swapped", changes, applies=different)


@_kind
def before_exclusions(constraints: Constraints) -> Iterator[Repair]:
    """N of those recruited in the place of N analysed: up to half of them lost."""
    for cell in _cells(constraints, "n_total"):
        low, _ = constraints.interval(cell)
        yield _repair(
            constraints,
            "N before exclusions",
            "N counted before exclusions",
            {cell: (np.ceil(low / 2), low - 1)},
            variants=1,
        )


@_kind
def swapped_sizes(constraints: Constraints) -> Iterator[Repair]:
    """Two groups' ns changed places."""
    cells = _cells(constraints, "n")
    couples = [(a, b) for i, a in enumerate(cells) for b in cells[i + 1 :]]
    for first, second in couples:
        one, two = constraints.interval(first), constraints.interval(second)
        yield _repair(
            constraints,
            "swapped ns",
            "the ns of two groups swapped",
            {first: two, second: one},
            variants=len(couples),
            applies=one[0] != two[0],
        )


@_kind
def welch_test(constraints: Constraints) -> Iterator[Repair]:
    """F, df and p of a Welch test in the place of the classical ones."""
    if not {"n", "mean", "sd"} <= constraints.domain.low.keys():
        return
    for name in ("f_value", "t_value"):
        for cell in _cells(constraints, name):
            low, high = constraints.interval(cell)
            low, high = (low, high) if name == "f_value" else square_image((low, high))
            companions = [c for c in constraints.cells if c.quantity in ("p_value", "df_error", "df")]
            free = np.full_like(low, -np.inf), np.full_like(high, np.inf)
            repair = _repair(
                constraints,
                "Welch test",
                "F, df or p of a Welch test",
                {c: free for c in (cell, *companions)},
            )
            repair.domain.low["welch_f"], repair.domain.high["welch_f"] = low, high
            yield repair


def chance(repair: Repair, low: FloatArray, high: FloatArray, printed: FloatArray) -> FloatArray:
    """How often a random wrong value would also have been explained by this kind of slip, shape (rows,).

    Parameters
    ----------
    low, high : what the numbers the repair does not touch imply for its gauge (see ``gauge``).
    printed : what the gauge says as printed.

    A random wrong value of a positive quantity is taken as uniform on a log scale within a factor of ten of the
    printed one; of a proportion, as uniform on its range; of any other, as uniform within twice its size. The share
    of such values that one reading would put into [low, high] is multiplied by the number of readings tried.
    """
    quantity = VOCABULARY[gauge(repair)]
    with np.errstate(all="ignore"):
        if quantity.exact:
            share = (np.floor(high) - np.ceil(low) + 1) / np.maximum(1.5 * np.abs(printed), 1)
        elif np.isfinite(quantity.low) and np.isfinite(quantity.high):
            share = (high - low) / (quantity.high - quantity.low)
        elif quantity.low == 0:
            share = np.log(high / low) / np.log(100)
        else:
            share = (high - low) / np.maximum(4 * np.abs(printed), high - low)
    share = np.where(np.isfinite(share), share, 1.0)
    return np.clip(repair.variants * share, 0.0, 1.0)


def gauge(repair: Repair) -> str:
    """The quantity in whose interval the repair is measured: what its cells feed where there are several."""
    first = repair.cells[0].quantity
    return "ms_error" if len(repair.cells) > 1 and first in ("sd", "se") else first
