"""Contradictions: rows whose printed numbers cannot hold together, each with its diagnosis, as findings."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from extractor.audit.constraints import Cell, Constraints, constraints_of
from extractor.audit.diagnosis import Suspect, attempt, pairs, slack, suspects
from extractor.audit.explanations import Repair, chance, gauge, repairs
from extractor.audit.propagation import judges_of, propagate
from extractor.evidence import Block
from extractor.findings import Finding, Severity
from extractor.planner import Start, search
from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray, ReportedTable
from extractor.words import listed, plain, printed_text

_LIKELY = 0.5
"""Repairs that a random wrong value would fit more often than this explain nothing."""


@dataclass(frozen=True, slots=True)
class Fit:
    """A repair after which a row is consistent, and how often it would have fitted by chance."""

    repair: Repair
    value: float
    chance: float


def contradictions(block: Block, table: ReportedTable) -> Iterator[Finding]:
    """Findings of one block."""
    constraints = constraints_of(block, table)
    if not constraints.cells:
        return
    bad = np.flatnonzero(propagate(constraints.design, constraints.domain.copy()))
    for start in range(0, len(bad), 2_000):
        some = bad[start : start + 2_000]
        yield from _diagnosed(constraints.take(some), block.positions[some], table)


def checks_of(block: Block, table: ReportedTable) -> int:
    """How many printed quantities of each row the others imply: 0 where nothing can be checked."""
    constraints = constraints_of(block, table)
    printed = {cell.quantity for cell in constraints.cells}
    others = constraints.domain.low.keys() - printed
    return sum(_implied(constraints.design, (printed - {q}) | others, q) for q in sorted(printed))


def _implied(design: str, known: set[str], wanted: str) -> bool:
    reached = set(known)
    while wanted not in reached:
        new = {r.gives for r in judges_of(design) if r.routes and reached.issuperset(r.needs)} - reached
        if not new:
            return False
        reached |= new
    return True


def _diagnosed(
    constraints: Constraints, positions: NDArray[np.intp], table: ReportedTable
) -> Iterator[Finding]:
    stretch = slack(constraints)
    single = suspects(constraints)
    fits = _fits(constraints, single)
    freed = np.zeros(constraints.rows, dtype=bool)
    for suspect in single:
        freed |= suspect.frees
    stuck = np.flatnonzero(~freed & np.array([not f for f in fits], dtype=bool))
    couples = pairs(constraints, stuck) if len(stuck) else []
    for row in range(constraints.rows):
        chosen = [s for s in single if s.frees[row]]
        together = [(a, b) for a, b, rows in couples if row in rows]
        yield _finding(
            constraints, row, int(positions[row]), table, stretch[row], chosen, fits[row], together
        )


def _fits(constraints: Constraints, single: list[Suspect]) -> list[list[Fit]]:
    """Repairs that make each row consistent, the least likely to fit by chance first."""
    frees = {suspect.cell: suspect for suspect in single}
    tried: list[tuple[NDArray[np.intp], Repair]] = []
    for repair in repairs(constraints):
        where = repair.applies
        if len(repair.cells) == 1:
            suspect = frees.get(repair.cells[0])
            where = where & suspect.frees if suspect else np.zeros_like(where)
        rows = np.flatnonzero(where)
        if len(rows):
            tried.append((rows, repair))
    found: list[list[Fit]] = [[] for _ in range(constraints.rows)]
    fitting: list[tuple[NDArray[np.intp], Repair]] = []
    for (_, repair), trial in zip(
        tried, attempt(constraints.design, ((r, p.domain) for r, p in tried)), strict=True
    ):
        if trial.consistent.any():
            fitting.append((trial.rows[trial.consistent], repair))
    gauges = attempt(
        constraints.design, ((rows, constraints.freed(repair.cells)) for rows, repair in fitting)
    )
    for (rows, repair), trial in zip(fitting, gauges, strict=True):
        low, high = _gauged(trial.narrowed.low, repair), _gauged(trial.narrowed.high, repair)
        share = chance(repair, low, high, _printed_gauge(constraints, repair, rows, low, high))
        for row, value, by_chance in zip(rows, repair.value[rows], share, strict=True):
            found[row].append(Fit(repair, float(value), float(by_chance)))
    return [_ranked(f) for f in found]


def _gauged(ends: dict[str, FloatArray], repair: Repair) -> FloatArray:
    name = gauge(repair)
    if name not in ends:
        return np.full(len(next(iter(ends.values()))), np.nan)
    column = repair.cells[0].column
    return ends[name] if column is None or ends[name].ndim == 1 else ends[name][:, column]


def _printed_gauge(
    constraints: Constraints, repair: Repair, rows: NDArray[np.intp], low: FloatArray, high: FloatArray
) -> FloatArray:
    if gauge(repair) != repair.cells[0].quantity:
        return (low + high) / 2
    ends = constraints.interval(repair.cells[0])
    return ((ends[0] + ends[1]) / 2)[rows]


def _ranked(fits: list[Fit]) -> list[Fit]:
    """One fit per wording and cells, those a random value would hardly meet first."""
    best: dict[tuple[str, tuple[Cell, ...]], Fit] = {}
    for fit in sorted(fits, key=lambda f: f.chance):
        best.setdefault((fit.repair.words, fit.repair.cells), fit)
    return [fit for fit in best.values() if fit.chance <= _LIKELY]


def _finding(
    constraints: Constraints,
    row: int,
    position: int,
    table: ReportedTable,
    stretch: float,
    single: list[Suspect],
    fits: list[Fit],
    couples: list[tuple[Cell, Cell]],
) -> Finding:
    order = {cell: rank for rank, cell in enumerate(c for fit in fits for c in fit.repair.cells)}
    single = sorted(single, key=lambda s: (order.get(s.cell, math.inf), _displacement(constraints, s, row)))
    named = list(dict.fromkeys([*(fits[0].repair.cells if fits else ()), *(s.cell for s in single)]))
    if not named:
        named = list(dict.fromkeys(c for couple in couples for c in couple)) or list(constraints.cells)
    number = int(table.row_numbers[position])
    first = next((s for s in single if s.cell == named[0]), None)
    message = _message(
        constraints.design,
        frozenset(constraints.domain.low),
        table,
        position,
        named,
        first,
        row,
        bool(couples),
    )
    repair = _repair_words(fits, row) if fits else "no single-cell explanation among the usual slips"
    severity = Severity.DOUBTFUL if stretch <= 1 else Severity.INCONSISTENT
    if stretch <= 1:
        message += f"; widening every printed value by {stretch:.2g} units in its last place reconciles them"
    return Finding(
        row=number,
        study=str(table.fact("study")[position]),
        severity=severity,
        rule="contradiction",
        cells=tuple(dict.fromkeys(table.where(c.variable, position) for c in named)),
        printed=printed_text(table, named[0].variable, position),
        message=f"{message}; {repair}" if single or fits else message,
        explanation=_explanation(fits),
        expected_low=float(first.low[row]) if first and np.isfinite(first.low[row]) else math.nan,
        expected_high=float(first.high[row]) if first and np.isfinite(first.high[row]) else math.nan,
        slack=float(stretch),
    )


def _displacement(constraints: Constraints, suspect: Suspect, row: int) -> float:
    """How far the printed value lies from what the others imply, relative to its size."""
    low, high = (end[row] for end in constraints.interval(suspect.cell))
    gap = max(suspect.low[row] - high, low - suspect.high[row], 0.0)
    return float(gap / max(abs(low), abs(high), 1e-300))


def _message(
    design: str,
    known: frozenset[str],
    table: ReportedTable,
    position: int,
    named: list[Cell],
    first: Suspect | None,
    row: int,
    coupled: bool,
) -> str:
    if first is None:
        cells = listed(sorted({_symbol(c) for c in named}))
        why = (
            "no single cell accounts for it, two together could"
            if coupled
            else "no one or two cells account for it"
        )
        return f"the printed {cells} cannot hold together; {why}"
    evidence = _evidence(design, known, first.cell, {c.quantity for c in named})
    low, high = float(first.low[row]), float(first.high[row])
    symbol = _symbol(first.cell) + (
        f" of group {first.cell.column + 1}" if first.cell.column is not None else ""
    )
    verb = "allow" if evidence.endswith("s") or " and " in evidence else "allows"
    return f"{evidence} {verb} {symbol} {_range(low, high)}; printed is {printed_text(table, first.cell.variable, position)}"


_SAID = {"n": "ns", "mean": "means", "sd": "SDs", "se": "SEs", "df_effect": "dfs", "df_error": "dfs"}
_UNSAID = frozenset({"contrast_weight", "k_groups", "tails", "direction"})


def _evidence(design: str, known: frozenset[str], cell: Cell, named: set[str]) -> str:
    """What speaks against the cell, in words: the inputs of the route that involves most of the suspects."""
    routes = search(Start(known - {cell.quantity}), design).get(cell.quantity, ())
    route = max(routes, key=lambda r: len(r.leaves & named), default=None)
    if route is None:
        leaves = sorted(named - {cell.quantity}) if len(named) > 1 else []
        words = ["other groups" if cell.column is not None else "other numbers"] if not leaves else leaves
    else:
        words = sorted(route.leaves - _UNSAID)
    return f"the {listed(list(dict.fromkeys(_SAID.get(w) or _symbol_of(w) for w in words)))}"


def _symbol_of(name: str) -> str:
    return VOCABULARY[name].symbol if name in VOCABULARY else name


def _range(low: float, high: float) -> str:
    if np.isfinite(low) and np.isfinite(high):
        return f"of {plain(low)}" if plain(low) == plain(high) else f"from {plain(low)} to {plain(high)}"
    if np.isfinite(low):
        return f"of {plain(low)} or more"
    return f"up to {plain(high)}" if np.isfinite(high) else "any value"


def _symbol(cell: Cell) -> str:
    return VOCABULARY[cell.quantity].symbol


def _repair_words(fits: list[Fit], row: int) -> str:
    best = fits[0]
    value = f", {plain(best.value)}," if len(best.repair.cells) == 1 and np.isfinite(best.value) else ""
    return f"{best.repair.words}{value} would fit"


def _explanation(fits: list[Fit]) -> str:
    said = []
    for fit in fits[:3]:
        where = ", ".join(dict.fromkeys(_symbol(c) for c in fit.repair.cells))
        said.append(f"{fit.repair.words} ({where}; fits a random wrong value {fit.chance:.1%} of the time)")
    return "; ".join(said) if said else "no single-cell explanation"
