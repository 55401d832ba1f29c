"""Contradictions: rows whose printed numbers cannot hold together, each with its diagnosis, as findings."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from extractor.audit.conflict import conflicts
from extractor.audit.constraints import Cell, Constraints
from extractor.audit.diagnosis import Suspect, pairs, slack, suspects
from extractor.audit.fits import LIKELY, Fit, fits_of
from extractor.audit.propagation import judges_of
from extractor.audit.support import shown
from extractor.audit.together import contradictory
from extractor.evidence import Evidence
from extractor.findings import Finding, Severity
from extractor.quantities import VOCABULARY
from extractor.routes.planner import Start, search
from extractor.table import BoolArray, ReportedTable
from extractor.words import listed, plain, printed_text


@dataclass(frozen=True, slots=True)
class _Diagnosis:
    """What is known of one contradictory row.

    single, couples : the cells that alone, or two together, could be at fault. fits : repairs that put it right.
    clash : printed quantities that cannot hold together, where no printed value by itself is out of place.
    """

    single: list[Suspect]
    couples: list[tuple[Cell, Cell]]
    fits: list[Fit]
    clash: list[str]


def contradictions(evidence: Evidence, constraints: Sequence[Constraints]) -> Iterator[Finding]:
    """Findings about rows whose numbers exclude each other; ``constraints`` are those of the evidence's blocks."""
    wrong = contradictory(constraints)
    for block, own, rows in zip(evidence.blocks, constraints, wrong, strict=True):
        bad = np.flatnonzero(rows)
        for start in range(0, len(bad), 2_000):
            some = bad[start : start + 2_000]
            yield from _diagnosed(own.take(some), block.positions[some], evidence.table)


def checks_of(constraints: Constraints) -> int:
    """How many printed quantities of each row of a block the others imply: 0 where nothing can be checked."""
    printed = {cell.quantity for cell in constraints.cells}
    others = constraints.domain.low.keys() - printed
    return sum(_implied(constraints.design, frozenset((printed - {q}) | others), q) for q in sorted(printed))


@lru_cache(maxsize=65_536)
def _implied(design: str, known: frozenset[str], wanted: str) -> bool:
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
    single, without = suspects(constraints)
    fits = fits_of(constraints, single, without)
    freed = np.zeros(constraints.rows, dtype=bool)
    for suspect in single:
        freed |= suspect.frees
    stuck = np.flatnonzero(~freed & np.array([not f for f in fits], dtype=bool))
    couples = pairs(constraints, stuck) if len(stuck) else []
    clashes = _clashes(constraints, single)
    for row in range(constraints.rows):
        known = _Diagnosis(
            [s for s in single if s.frees[row]],
            [(a, b) for a, b, rows in couples if row in rows],
            _distinct(fits[row]),
            clashes.get(row, []),
        )
        yield _finding(constraints, row, int(positions[row]), table, stretch[row], known)


def _clashes(constraints: Constraints, single: list[Suspect]) -> dict[int, list[str]]:
    """By row, what cannot hold together, where a suspect's printed value lies within what the others allow."""
    within = np.zeros(constraints.rows, dtype=bool)
    for suspect in single:
        within |= suspect.frees & ~_displaced(constraints, suspect)
    rows = np.flatnonzero(within)
    takes_part = conflicts(constraints, rows) if len(rows) else {}
    return {int(row): [name for name, part in takes_part.items() if part[at]] for at, row in enumerate(rows)}


def _displaced(constraints: Constraints, suspect: Suspect) -> BoolArray:
    low, high = constraints.interval(suspect.cell)
    return np.asarray((suspect.low > high) | (suspect.high < low))


def _distinct(fits: list[Fit]) -> list[Fit]:
    """Without those that only free more cells for the same reason."""
    return [
        fit
        for at, fit in enumerate(fits)
        if not any(f.repair.words == fit.repair.words and set(f.cells) < set(fit.cells) for f in fits[:at])
    ]


def _finding(
    constraints: Constraints, row: int, position: int, table: ReportedTable, stretch: float, known: _Diagnosis
) -> Finding:
    single = known.single
    weak = [fit for fit in known.fits if fit.chance > LIKELY]
    # where no cell alone accounts for the row, a weak explanation is better than none
    fits = [fit for fit in known.fits if fit.chance <= LIKELY or not single]
    order = {cell: rank for rank, cell in reversed(list(enumerate(c for fit in fits for c in fit.cells)))}
    single = sorted(single, key=lambda s: (order.get(s.cell, math.inf), _displacement(constraints, s, row)))
    # a cell that only a repair of several cells could put right is under suspicion too, after the others
    also = (cell for fit in [*fits, *weak] for cell in fit.cells)
    named = list(dict.fromkeys([*(fits[0].cells if fits else ()), *(s.cell for s in single), *also]))
    if not named:
        named = list(dict.fromkeys(c for couple in known.couples for c in couple)) or list(constraints.cells)
    number = int(table.row_numbers[position])
    first = next((s for s in single if s.cell == named[0]), None)
    inside = first is not None and not _displaced(constraints, first)[row]
    if fits and len(fits[0].cells) > 1:
        message = _together(fits[0].cells, bool(single))
    elif first is not None and inside:
        message = _clash(constraints, table, position, known.clash)
    elif first is not None:
        message = _apart(constraints, table, position, first, row, {c.quantity for c in named})
    else:
        message = _stuck(named, bool(known.couples))
    repair = _repair_words(fits[0]) if fits else "no single-cell explanation among the usual slips"
    # a row that holds together as another design is a question about the design, not about its numbers
    elsewhere = any(fit.repair.design for fit in fits if fit.chance <= LIKELY)
    severity = Severity.DOUBTFUL if stretch <= 1 or elsewhere else Severity.INCONSISTENT
    if stretch <= 1:
        message += f"; widening every printed value by {stretch:.2g} units in its last place reconciles them"
    expected = (math.nan, math.nan) if first is None or inside else (first.low[row], first.high[row])
    low, high = (float(end) if np.isfinite(end) else math.nan for end in expected)
    return Finding(
        row=number,
        study=str(table.fact("study")[position]),
        severity=severity,
        rule="contradiction",
        cells=tuple(dict.fromkeys(table.where(c.variable, position) for c in named)),
        printed=printed_text(table, named[0].variable, position),
        message=f"{message}; {repair}" if single or fits else message,
        explanation=_explanation(fits),
        expected_low=low,
        expected_high=high,
        slack=float(stretch),
    )


def _displacement(constraints: Constraints, suspect: Suspect, row: int) -> float:
    """How far the printed value lies from what the others imply, relative to its size."""
    low, high = (float(end[row]) for end in constraints.interval(suspect.cell))
    gap = max(float(suspect.low[row]) - high, low - float(suspect.high[row]), 0.0)
    return gap / max(abs(low), abs(high), 1e-300)


def _together(cells: tuple[Cell, ...], alone: bool) -> str:
    """What a repair of several cells puts right, in words."""
    words = listed(list(dict.fromkeys(_SAID.get(c.quantity) or _symbol(c) for c in cells)))
    why = "" if alone else "; no single cell accounts for it"
    return f"the printed {words} and the other numbers cannot hold together{why}"


def _stuck(named: list[Cell], coupled: bool) -> str:
    """A row that no single cell and no repair puts right, in words."""
    cells = listed(sorted({_symbol(c) for c in named}))
    why = (
        "no single cell accounts for it, two together could"
        if coupled
        else "no one or two cells account for it"
    )
    return f"the printed {cells} cannot hold together; {why}"


def _apart(
    constraints: Constraints, table: ReportedTable, position: int, first: Suspect, row: int, named: set[str]
) -> str:
    """What the first suspect says, and what the others allow it to say, in words."""
    evidence = _evidence(constraints.design, frozenset(constraints.domain.low), first.cell, named)
    symbol, column = _symbol(first.cell), first.cell.column
    symbol += f" of group {column + 1}" if column is not None else ""
    verb = "allow" if evidence.endswith("s") or " and " in evidence else "allows"
    allowed = _range(float(first.low[row]), float(first.high[row]))
    printed = printed_text(table, first.cell.variable, position)
    return f"{evidence} {verb} {symbol} {allowed}; printed is {printed}"


def _clash(constraints: Constraints, table: ReportedTable, position: int, names: list[str]) -> str:
    """Which printed values exclude each other, in words."""
    cells = {name: [c for c in constraints.cells if c.quantity == name] for name in names}
    said = [
        shown(table, each[0].variable, position)
        if each[0].column is None
        else f"the {_SAID.get(name) or _symbol_of(name)}"
        for name, each in cells.items()
    ]
    # two or more measurements of one person meet through their correlation alone
    repeated = constraints.design in ("paired", "within") and "sd" in names
    changed = {"sd_change", "sd_pre", "sd_post"} <= set(names)
    implied = (repeated or changed) and not {"correlation", "d_average"} & set(names)
    why = ": no correlation of the measurements gives them" if implied else ""
    return f"{listed(said)} cannot hold together{why}"


_SAID = {"n": "ns", "mean": "means", "sd": "SDs", "se": "SEs", "df_effect": "dfs", "df_error": "dfs"}
_UNSAID = frozenset({"contrast_weight", "k_groups", "tails", "direction", "one_factor", "only_factor"})


def _evidence(design: str, known: frozenset[str], cell: Cell, named: set[str]) -> str:
    """What speaks against the cell, in words: the inputs of the route that involves most of the suspects."""
    routes = search(Start(known - {cell.quantity}), design).get(cell.quantity, ())
    route = max(routes, key=lambda r: len(r.leaves & named), default=None)
    if route is None:
        leaves = sorted(named - {cell.quantity}) if len(named) > 1 else []
        words = leaves or ["other groups" if cell.column is not None else "other numbers"]
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


def _repair_words(best: Fit) -> str:
    value = f", {plain(best.value)}," if len(best.cells) == 1 and np.isfinite(best.value) else ""
    by_chance = "" if best.chance <= LIKELY else ", as by chance it often would"
    return f"{best.repair.words}{value} would fit{by_chance}"


def _explanation(fits: list[Fit]) -> str:
    said = []
    for fit in fits[:3]:
        where = ", ".join(dict.fromkeys(_symbol(c) for c in fit.cells))
        said.append(f"{fit.repair.words} ({where}; fits a random wrong value {fit.chance:.1%} of the time)")
    return "; ".join(said) if said else "no single-cell explanation"
