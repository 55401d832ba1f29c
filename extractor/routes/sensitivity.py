"""How far effects depend on what nobody reported.

Every assumption is moved over its declared range while the route of each row stays the one that was chosen. The
rounding of the printed numbers is left out here: it has its own interval in the effect table.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from itertools import product

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from extractor.catalogue.relation import Grade, catalogue
from extractor.errors import UsageError
from extractor.evidence import Block
from extractor.printed.reading import quoted
from extractor.quantities import DEFAULTS, VOCABULARY, Shape, close_matches, is_signed
from extractor.routes.choice import NOTHING, Chosen, support
from extractor.routes.conversion import Conversion
from extractor.routes.engine import Engine, Estimate
from extractor.routes.planner import Route
from extractor.table import Assumption, BoolArray, FloatArray, ReportedTable

TOGETHER = "all together"
LABELS = ("study", "outcome", "effect")
_POINTS = 9
"""Values across a range at which variances are computed, its ends among them."""
_MOST_COMBINATIONS = 729


@dataclass(frozen=True)
class Sensitivity:
    """What moves with the assumptions and the choice of route.

    effects : per row and assumption (and ``all together`` where there are several) the interval of estimates and of
    variances. assumptions : per assumption how many rows it touches and how far it moves them, the one that matters
    most first.
    """

    effects: pd.DataFrame
    assumptions: pd.DataFrame


def ranges(words: Iterable[str]) -> dict[str, Assumption]:
    """Assumptions as typed: ``correlation=.3:.8``, or ``correlation=.3:.5:.8`` with the value in the middle.

    Raises
    ------
    UsageError : a word is not of this form, or its quantity or numbers are not possible.
    """
    found: dict[str, Assumption] = {}
    for word in words:
        name, sign, span = (part.strip() for part in word.partition("="))
        try:
            numbers = [float(part) for part in span.split(":")]
        except ValueError:
            numbers = []
        if not (name and sign) or len(numbers) not in (2, 3) or numbers != sorted(numbers):
            raise UsageError(f"--vary {quoted(word)} is not of the form correlation=0.3:0.8, low before high")
        quantity = VOCABULARY.get(name)
        if quantity is None or quantity.shape is Shape.GROUP:
            known = [n for n, q in VOCABULARY.items() if q.shape is Shape.SCALAR]
            near = close_matches(name, known)
            hint = f": did you mean {' or '.join(near)}?" if near else ""
            raise UsageError(f"--vary: {quoted(name)} is no quantity of a whole row{hint}")
        if not (quantity.low <= numbers[0] and numbers[-1] <= quantity.high):
            raise UsageError(f"--vary: {name} lies between {quantity.low:g} and {quantity.high:g}")
        if name in found:
            raise UsageError(f"--vary names {name} twice")
        middle = numbers[1] if len(numbers) == 3 else math.nan
        found[name] = Assumption(middle, "--vary", numbers[0], numbers[-1])
    return found


def with_ranges(table: ReportedTable, varied: Mapping[str, Assumption]) -> ReportedTable:
    """The table with these ranges; the value stays the codebook's or the default's where none was typed.

    A quantity that nobody assumed before takes the middle of its range.

    Raises
    ------
    UsageError : the codebook's value lies outside the range.
    """
    taken = dict(table.assumptions)
    for name, typed in varied.items():
        known = taken.get(name)
        if known is None and name in DEFAULTS:
            known = Assumption(DEFAULTS[name].value, DEFAULTS[name].by)
        if not math.isnan(typed.value):
            taken[name] = typed
            continue
        if known is None:
            taken[name] = replace(
                typed, value=(typed.low + typed.high) / 2, by="middle of the range of --vary"
            )
            continue
        if not typed.low <= known.value <= typed.high:
            raise UsageError(
                f"--vary {name}={typed.low:g}:{typed.high:g} leaves out the value in use, {known.value:g}; "
                f"widen it, or write {name}=LOW:VALUE:HIGH"
            )
        taken[name] = Assumption(known.value, known.by, typed.low, typed.high)
    return replace(table, assumptions=taken)


def has_ranges(assumptions: Mapping[str, Assumption]) -> bool:
    """Whether any assumption has a range to be moved over."""
    return any(taken.low < taken.high for taken in assumptions.values())


def sensitivity(conversion: Conversion, *, method: str | None = None, level: float = 0.95) -> Sensitivity:
    """Move every assumption of a conversion over its range.

    Parameters
    ----------
    method, level : as the conversion was made with.
    """
    parts = [p for chosen in conversion.chosen for p in _varied(conversion, chosen, method, level)]
    effects = in_sheet_order(parts, VARIED_COLUMNS)
    fixed = [p for chosen in conversion.chosen for p in _not_values(conversion, chosen)]
    return Sensitivity(effects, _summary(conversion.evidence.table, effects, fixed))


VARIED_COLUMNS = [
    *("row", *LABELS, "metric", "assumption", "by", "value", "range_low", "range_high"),
    *("estimate", "estimate_low", "estimate_high", "variance", "variance_low", "variance_high"),
    *("swing", "swing_in_se"),
]
SUMMARY_COLUMNS = [
    *("assumption", "by", "value", "range_low", "range_high", "rows"),
    *("median_swing", "largest_swing", "largest_in_se", "largest_row"),
]


def in_sheet_order(parts: list[pd.DataFrame], columns: list[str]) -> pd.DataFrame:
    """The parts as one table in the order of the sheet."""
    if not parts:
        return pd.DataFrame(columns=columns)
    return pd.concat(parts, ignore_index=True)[columns].sort_values("row", kind="stable", ignore_index=True)


def ranged(block: Block, routes: Iterable[Route]) -> list[str]:
    """Assumed values with a range that the routes rest on."""
    names = sorted({name for route in routes for name in route.assumed})
    return [n for n in names if block.assumed[n].low < block.assumed[n].high]


def _values(name: str, taken: Assumption, points: int) -> FloatArray:
    """Values across a range: its ends, the value in use, and some between."""
    if VOCABULARY[name].integer:
        return np.arange(math.ceil(taken.low), math.floor(taken.high) + 1, dtype=float)
    return np.union1d(np.linspace(taken.low, taken.high, points), [taken.value])


def _varied(
    conversion: Conversion, chosen: Chosen, method: str | None, level: float
) -> Iterator[pd.DataFrame]:
    for index in np.unique(chosen.which[chosen.pointed]):
        route, supported = chosen.routes[index], chosen.precisions.get(int(index))
        names = ranged(chosen.block, (route, *(supported.further if supported else ())))
        for some in [[n] for n in names] + ([names] if len(names) > 1 else []):
            yield _moved(conversion, chosen, int(index), some, method, level)


def _moved(
    conversion: Conversion, chosen: Chosen, index: int, names: list[str], method: str | None, level: float
) -> pd.DataFrame:
    """The rows of one route with some of its assumptions moved over their ranges."""
    block, rows = chosen.block, (chosen.which == index) & chosen.pointed
    points = max(2, min(_POINTS, math.floor(_MOST_COMBINATIONS ** (1 / len(names)))))
    grids = [_values(name, block.assumed[name], points) for name in names]
    estimates, variances = [], []
    for values in product(*grids):
        estimate, variance = _at(chosen, index, dict(zip(names, values, strict=True)), method, level)
        estimates.append(estimate)
        variances.append(variance)
    estimate, variance = chosen.estimates[index].value[rows], variance_of_rows(chosen, index)
    low, high = (
        np.where(np.isfinite(end), end, reach)
        for end, reach in zip(_outer(chosen, index, names, rows), _reach(estimates), strict=True)
    )
    flipped = flipped_rows(conversion, chosen)[rows]
    low, high = np.where(flipped, -high, low), np.where(flipped, -low, high)
    variance_low, variance_high = _reach(variances)
    # several assumptions moved at once have no value, range or author in common
    taken = block.assumed[names[0]] if len(names) == 1 else Assumption(math.nan, "")
    return labelled(
        conversion,
        block.positions[rows],
        assumption=names[0] if len(names) == 1 else TOGETHER,
        by=taken.by,
        value=taken.value,
        range_low=taken.low,
        range_high=taken.high,
        estimate=np.where(flipped, -estimate, estimate),
        estimate_low=low,
        estimate_high=high,
        variance=variance,
        variance_low=variance_low,
        variance_high=variance_high,
        swing=high - low,
        swing_in_se=in_standard_errors(high - low, variance),
    )


def _reach(values: list[FloatArray]) -> tuple[FloatArray, FloatArray]:
    """Least and greatest over the combinations, shape (rows,); those without a value do not count."""
    stacked = np.stack(values)
    return np.fmin.reduce(stacked), np.fmax.reduce(stacked)


def in_standard_errors(distance: FloatArray, variance: FloatArray) -> FloatArray:
    """Distances in standard errors; NaN where an effect at the end of its range has no variance."""
    return np.asarray(distance / np.sqrt(np.where(variance > 0, variance, np.nan)))


def variance_of_rows(chosen: Chosen, index: int) -> FloatArray:
    """Sampling variances of the rows of one chosen route; NaN where there is none."""
    supported = chosen.precisions.get(index)
    rows = int(((chosen.which == index) & chosen.pointed).sum())
    return supported.variance if supported else np.full(rows, np.nan)


def _at(
    chosen: Chosen, index: int, values: Mapping[str, float], method: str | None, level: float
) -> tuple[FloatArray, FloatArray]:
    """Estimates and variances of one route's rows with assumed values replaced."""
    block = chosen.block
    size = len(block.positions)
    moved = {name: _certain(np.full(size, value)) for name, value in values.items()}
    engine = Engine({**block.leaves, **moved})
    rows = (chosen.which == index) & chosen.pointed
    estimate = engine.run(chosen.routes[index])
    answered = rows & np.isfinite(estimate.value)
    again = Chosen(
        replace(block, leaves={**block.leaves, **moved}),
        chosen.metric,
        chosen.routes,
        [estimate if at == index else e for at, e in enumerate(chosen.estimates)],
        np.where(answered, index, NOTHING),
        answered,
        engine,
    )
    support([again], method, level)
    variance = np.full(size, np.nan)
    if index in again.precisions:
        variance[answered] = again.precisions[index].variance
    return estimate.value[rows], variance[rows]


def _outer(chosen: Chosen, index: int, names: list[str], rows: BoolArray) -> tuple[FloatArray, FloatArray]:
    """The interval of estimates for assumed values anywhere in their ranges, the printed numbers as they stand.

    Counts take whole numbers only, one after the other. Infinite where a step takes what moves for certain only, so
    that its image says nothing.
    """
    block, size = chosen.block, len(chosen.block.positions)
    if _uncertain(chosen.routes[index], names):
        open_ended = np.full(int(rows.sum()), np.inf)
        return -open_ended, open_ended
    leaves = {n: e if n in block.bounds else _certain(e.value) for n, e in block.leaves.items()}
    spans: list[list[tuple[float, float]]] = []
    for name in names:
        taken = block.assumed[name]
        whole = [(v, v) for v in _values(name, taken, 0).tolist()] if VOCABULARY[name].integer else []
        spans.append(whole or [(taken.low, taken.high)])
    lows, highs = [], []
    for ends in product(*spans):
        for name, (low, high) in zip(names, ends, strict=True):
            middle = block.assumed[name].value if low < high else low
            leaves[name] = Estimate(np.full(size, middle), np.full(size, low), np.full(size, high))
        found = Engine(leaves).run(chosen.routes[index])
        lows.append(found.low[rows])
        highs.append(found.high[rows])
    return np.min(lows, axis=0), np.max(highs, axis=0)


def _uncertain(route: Route, names: list[str]) -> bool:
    """Whether a moved value, or one that moves with it, goes into a step that needs it exactly."""
    moving = {name for name in names if not VOCABULARY[name].integer}
    for step in route.ordered():
        relation = catalogue()[step]
        if moving & relation.exact:
            return True
        if moving & set(relation.needs):
            moving.add(relation.gives)
    return False


def _certain(values: FloatArray) -> Estimate:
    return Estimate(values, values, values)


def flipped_rows(conversion: Conversion, chosen: Chosen) -> BoolArray:
    """Rows of the block whose sign the effect table turns, since a lower score is the better outcome."""
    lower_is_better = conversion.evidence.table.fact("orientation")[chosen.block.positions] == "-"
    return np.asarray(lower_is_better & is_signed(conversion.metric))


def labelled(conversion: Conversion, positions: NDArray[np.intp], **columns: object) -> pd.DataFrame:
    """Columns under the labels of their rows."""
    table = conversion.evidence.table
    labels = {name: table.fact(name)[positions] for name in LABELS}
    return pd.DataFrame(
        {"row": table.row_numbers[positions], **labels, "metric": conversion.metric, **columns}
    )


def _not_values(conversion: Conversion, chosen: Chosen) -> Iterator[tuple[str, FloatArray]]:
    """What routes suppose without a value that could be moved, with the rows that do."""
    relations = catalogue()
    for index in np.unique(chosen.which[chosen.pointed]):
        supported = chosen.precisions.get(int(index))
        routes = (chosen.routes[index], *(supported.further if supported else ()))
        steps = [relations[step] for route in routes for step in route.ordered()]
        said = [r.assumes for r in steps if r.grade is Grade.ASSUMPTION]
        fixed = {n: a for route in routes for n, a in chosen.block.assumed.items() if n in route.assumed}
        said += [f"{n} = {a.value:g} ({a.by})" for n, a in sorted(fixed.items()) if not a.low < a.high]
        rows = chosen.block.positions[(chosen.which == index) & chosen.pointed]
        for text in dict.fromkeys(said):
            yield text, conversion.evidence.table.row_numbers[rows]


def _summary(
    table: ReportedTable, effects: pd.DataFrame, fixed: list[tuple[str, FloatArray]]
) -> pd.DataFrame:
    lines: list[dict[str, object]] = []
    for name, part in effects[effects["assumption"] != TOGETHER].groupby("assumption", sort=True):
        by = part["swing_in_se"].fillna(-1.0).to_numpy()
        worst = part.iloc[int(by.argmax() if (by >= 0).any() else part["swing"].fillna(-1.0).argmax())]
        lines.append(
            {
                "assumption": name,
                **{column: worst[column] for column in ("by", "value", "range_low", "range_high")},
                "rows": len(part),
                "median_swing": part["swing"].median(),
                "largest_swing": worst["swing"],
                "largest_in_se": worst["swing_in_se"],
                "largest_row": worst["row"],
            }
        )
    lines.sort(key=lambda line: (-np.nan_to_num(float(str(line["largest_in_se"]))), str(line["assumption"])))
    rows: dict[str, set[int]] = {}
    for text, numbers in fixed:
        rows.setdefault(text, set()).update(numbers.tolist())
    for text, touched in sorted(rows.items(), key=lambda item: (-len(item[1]), item[0])):
        lines.append({"assumption": text, "by": "no range is declared", "rows": len(touched)})
    idle = {
        n: a for n, a in table.assumptions.items() if a.low < a.high and n not in set(effects["assumption"])
    }
    for name, taken in sorted(idle.items()):
        span = {"value": taken.value, "range_low": taken.low, "range_high": taken.high}
        lines.append({"assumption": name, "by": taken.by, **span, "rows": 0})
    return pd.DataFrame(lines, columns=SUMMARY_COLUMNS)
