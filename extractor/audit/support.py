"""Support: printed values that no data can give, judged alone or beside the numbers that bound them.

Every printed number is judged by its rounding interval, never as a point: a finding needs the whole interval
to lie on the wrong side. Checks that depend on the design are applied only to rows of a design they hold for;
all others reach every row, also those that cannot be converted.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from itertools import repeat

import numpy as np

from extractor.evidence import Evidence, usable
from extractor.findings import Finding, Severity
from extractor.quantities import METRICS, VOCABULARY, Quantity
from extractor.table import BoolArray, FloatArray, ReportedTable, Variable
from extractor.words import plain, printed_text, printed_texts

_TOLERANCE = 1e-9
_UNKNOWN = (np.nan, np.nan)
_ONE_FACTOR = ("one-way", "two-group")
_DFS = ("df_effect", "df_error", "df")
_SPREADS = ("sd", "se", "sd_pre", "sd_post", "sd_change")
_NEVER_BELOW = {
    "q1": ("minimum",),
    "median": ("q1", "minimum"),
    "q3": ("median", "q1", "minimum"),
    "mean": ("minimum",),
    "maximum": ("q3", "median", "q1", "mean", "minimum"),
}
_EFFECT_SIZES = (*(name for name in METRICS if name != "mean_difference"), "odds_ratio")


def unsupported(evidence: Evidence) -> Iterator[Finding]:
    """Findings of every support check, over all rows of the sheet."""
    table = evidence.table
    yield from _not_understood(table)
    yield from _two_readings(table)
    yield from _outside_definition(table)
    yield from _fractional(table)
    yield from _too_few_scores(table)
    yield from _below_minimum(table)
    yield from _out_of_order(table)
    yield from _outside_limits(table)


# ---- the sheet as the other checks see it, too --------------------------------------------------------


def beyond(value: FloatArray | float, limit: FloatArray | float) -> BoolArray:
    """Whether ``value`` exceeds ``limit`` by more than floating-point error; False where one is unknown."""
    value, limit = np.asarray(value, dtype=float), np.asarray(limit, dtype=float)
    with np.errstate(invalid="ignore"):
        return np.asarray(value - limit > _TOLERANCE * np.maximum(np.abs(value), np.abs(limit)))


def ends(table: ReportedTable, variable: Variable) -> tuple[FloatArray, FloatArray]:
    """Ends of a variable's rounding intervals, shape (rows,); NaN where blank or without a column."""
    numbers = table.numbers.get(variable)
    if numbers is None:
        return np.full(table.rows, np.nan), np.full(table.rows, np.nan)
    return numbers.low, numbers.high


def value_of(table: ReportedTable, variable: Variable) -> FloatArray:
    """A variable's printed numbers, shape (rows,); NaN where there is none, a bound, or an impossible one."""
    numbers = table.numbers.get(variable)
    if numbers is None:
        return np.full(table.rows, np.nan)
    return np.where(usable(VOCABULARY[variable[0]], numbers), numbers.value, np.nan)


def groups_in(table: ReportedTable) -> list[int]:
    """Groups that have a column, ascending."""
    return sorted({group for _, group in table.numbers if group is not None})


def shown(table: ReportedTable, variable: Variable, position: int) -> str:
    """A printed cell in a sentence: ``SD of group 2 = 1.30``, or ``p < 0.05``."""
    name, group = variable
    of = f" of group {group}" if group is not None else ""
    text = printed_text(table, variable, position)
    return f"{VOCABULARY[name].symbol}{of} {text if text[:1] in ('<', '>') else f'= {text}'}"


def finding_at(
    table: ReportedTable,
    position: int,
    severity: Severity,
    rule: str,
    variables: Sequence[Variable],
    message: str,
    *,
    explanation: str = "",
    expected: tuple[float, float] = _UNKNOWN,
) -> Finding:
    """A finding about cells of one row, the most suspect first; open ends of ``expected`` are left blank."""
    low, high = (float(end) if np.isfinite(end) else np.nan for end in expected)
    studies = table.facts.get("study")
    return Finding(
        row=int(table.row_numbers[position]),
        study="" if studies is None else str(studies[position]),
        severity=severity,
        rule=rule,
        cells=tuple(dict.fromkeys(table.where(variable, position) for variable in variables)),
        printed=printed_text(table, variables[0], position) if variables else "",
        message=message,
        explanation=explanation,
        expected_low=low,
        expected_high=high,
    )


def findings_at(
    table: ReportedTable,
    rows: Sequence[int],
    severity: Severity,
    rule: str,
    variables: Sequence[Variable],
    messages: Iterable[str],
    explanation: str = "",
) -> Iterator[Finding]:
    """A finding for each of some rows, all about the same columns, the most suspect first."""
    at = np.asarray(rows, dtype=np.intp)
    cells: Iterable[tuple[str, ...]] = repeat(())
    printed: Iterable[str] = repeat("")
    if variables:
        cells = zip(*(table.wheres(variable, at).tolist() for variable in variables), strict=True)
        printed = printed_texts(table, variables[0], at)
    studies = map(str, table.fact("study")[at].tolist())
    numbers = table.row_numbers[at].tolist()
    for number, study, where, text, message in zip(numbers, studies, cells, printed, messages, strict=False):
        unique = tuple(dict.fromkeys(where))
        yield Finding(number, study, severity, rule, unique, text, message, explanation)


def positions(where: BoolArray) -> list[int]:
    """Rows of a mask, for loops over the few rows that offend."""
    return [int(i) for i in np.flatnonzero(where)]


# ---- the checks ---------------------------------------------------------------------------------------


def _not_understood(table: ReportedTable) -> Iterator[Finding]:
    remarks = table.settings.get("problems", ())
    yield from _remarked(table, remarks, Severity.NOTE, "not understood", "")
    said = {(row, message) for row, _, message in remarks}
    for variable, numbers in table.numbers.items():
        for i in positions((numbers.problem != "") & ~numbers.given):
            problem = str(numbers.problem[i])
            # a fault of the whole row stands in each of its cells and is said once
            if (int(table.row_numbers[i]), problem) not in said:
                yield finding_at(table, i, Severity.NOTE, "not understood", [variable], problem)


def _two_readings(table: ReportedTable) -> Iterator[Finding]:
    why = "one of them is a slip of the coder, or they belong to different tests"
    remarks = table.settings.get("conflicts", ())
    yield from _remarked(table, remarks, Severity.INCONSISTENT, "two readings", why)


def _remarked(
    table: ReportedTable, remarks: Iterable[tuple[int, str, str]], severity: Severity, rule: str, why: str
) -> Iterator[Finding]:
    """The reader's own remarks: (row number, cells, message)."""
    studies = dict(zip(table.row_numbers.tolist(), table.fact("study"), strict=True))
    for row, cells, message in remarks:
        yield Finding(row, str(studies[row]), severity, rule, tuple(cells.split("; ")), "", message, why)


def _outside_definition(table: ReportedTable) -> Iterator[Finding]:
    for variable, numbers in table.numbers.items():
        quantity = VOCABULARY[variable[0]]
        under, over = beyond(quantity.low, numbers.high), beyond(numbers.low, quantity.high)
        for i in positions(numbers.given & (under | over)):
            said = (
                f"{shown(table, variable, i)}, but {_definition(quantity)}: {_look(quantity, bool(under[i]))}"
            )
            rule, limits = "outside its definition", (quantity.low, quantity.high)
            yield finding_at(table, i, Severity.IMPOSSIBLE, rule, [variable], said, expected=limits)


def _definition(quantity: Quantity) -> str:
    parts = (("below", quantity.low), ("above", quantity.high))
    never = " or ".join(f"{side} {plain(end)}" for side, end in parts if np.isfinite(end))
    return f"{quantity.symbol} ({quantity.meaning}) is never {never}"


def _look(quantity: Quantity, under: bool) -> str:
    if quantity.exact:
        return "look whether another number stands in this column"
    if under:
        return "look for a dash read as a minus sign, or a number of another column"
    return "look for a lost decimal point, a percentage, or a number of another column"


def _fractional(table: ReportedTable) -> Iterator[Finding]:
    design = table.fact("design")
    classical = np.isin(design.astype(str), _ONE_FACTOR)
    for variable, numbers in table.numbers.items():
        if not VOCABULARY[variable[0]].integer:
            continue
        of_test = variable[0] in _DFS
        broken = numbers.given & (np.ceil(numbers.low) > np.floor(numbers.high))
        for i in positions(broken & classical if of_test else broken):
            said = "it counts: look for a mean, a percentage or a slipped decimal point"
            if of_test:
                said = f"a {design[i]} analysis has whole degrees of freedom: look which test was computed"
            said = f"{shown(table, variable, i)} is no whole number, but {said}"
            why = "a Welch or otherwise corrected test" if of_test else ""
            rule = "not a whole number"
            yield finding_at(table, i, Severity.IMPOSSIBLE, rule, [variable], said, explanation=why)


def _too_few_scores(table: ReportedTable) -> Iterator[Finding]:
    for variable in list(table.numbers):
        size: Variable = ("n", variable[1])
        if variable[0] not in _SPREADS or size not in table.numbers:
            continue
        for i in positions(table.numbers[variable].given & beyond(2.0, table.numbers[size].high)):
            said = f"{shown(table, variable, i)} needs 2 scores, but {shown(table, size, i)}: look at n"
            rule, limits = "spread of one score", (2.0, np.inf)
            yield finding_at(table, i, Severity.IMPOSSIBLE, rule, [size, variable], said, expected=limits)


def _below_minimum(table: ReportedTable) -> Iterator[Finding]:
    """F >= 0 gives ω² >= -df1/(N - df1) and ε² >= -df1/df2; with one factor N - df1 = df2 + 1."""
    design = table.fact("design").astype(str)
    df1 = value_of(table, ("df_effect", None))
    df1 = np.where(np.isnan(df1), value_of(table, ("k_groups", None)) - 1, df1)
    df1 = np.where(np.isnan(df1) & (design == "two-group"), 1.0, df1)
    df2 = np.fmin(value_of(table, ("df_error", None)), value_of(table, ("df", None)))
    df2 = np.fmin(df2, value_of(table, ("n_total", None)) - df1 - 1)
    known = np.isin(design, _ONE_FACTOR) & (df1 >= 1) & (df2 >= 1)
    omega, epsilon = (1, "(N - df1)"), (0, "df2")
    divisors = {"omega_squared": omega, "partial_omega_squared": omega, "epsilon_squared": epsilon}
    for name, (more, divisor) in divisors.items():
        variable: Variable = (name, None)
        least = np.where(known, -df1, np.nan) / np.where(known, df2 + more, 1.0)
        for i in positions(beyond(least, ends(table, variable)[1])):
            minimum = float(least[i])
            said = (
                f"{shown(table, variable, i)} would need a negative F: with dfs {df1[i]:g} and {df2[i]:g} "
                f"it is never below -df1/{divisor} = {plain(minimum)}: look at its sign and at the dfs"
            )
            rule, limits = "below its minimum", (minimum, 1.0)
            yield finding_at(table, i, Severity.IMPOSSIBLE, rule, [variable], said, expected=limits)


def _out_of_order(table: ReportedTable) -> Iterator[Finding]:
    """Minimum, quartiles, median, mean and maximum of a group that do not ascend."""
    for group in groups_in(table):
        for upper, lowers in _NEVER_BELOW.items():
            above: Variable = (upper, group)
            for below in ((lower, group) for lower in lowers if (lower, group) in table.numbers):
                for i in positions(beyond(ends(table, below)[0], ends(table, above)[1])):
                    said = f"{shown(table, below, i)} is above {shown(table, above, i)}: look for a swap"
                    rule = "values out of order"
                    yield finding_at(table, i, Severity.INCONSISTENT, rule, [below, above], said)


def _outside_limits(table: ReportedTable) -> Iterator[Finding]:
    """Confidence limits in the wrong order, and estimates outside their own."""
    whole = np.ones(table.rows, dtype=bool)
    triples: list[tuple[Variable, Variable, dict[Variable, BoolArray]]] = [
        (("ci_low", group), ("ci_high", group), {("mean", group): whole}) for group in groups_in(table)
    ]
    difference: dict[Variable, BoolArray] = {("mean_difference", None): whole}
    triples.append((("ci_low_difference", None), ("ci_high_difference", None), difference))
    printed = {
        name: table.numbers[name, None].given for name in _EFFECT_SIZES if (name, None) in table.numbers
    }
    alone = sum((given.astype(int) for given in printed.values()), np.zeros(table.rows, dtype=int)) == 1
    effects: dict[Variable, BoolArray] = {(name, None): given & alone for name, given in printed.items()}
    triples.append((("effect_ci_low", None), ("effect_ci_high", None), effects))
    for low, high, estimates in triples:
        (lower, _), (_, upper) = ends(table, low), ends(table, high)
        crossed = beyond(lower, upper)
        for i in positions(crossed):
            said = f"{shown(table, low, i)} is above {shown(table, high, i)}: look for a swap or a lost minus"
            yield finding_at(table, i, Severity.INCONSISTENT, "limits in the wrong order", [low, high], said)
        for estimate, own in estimates.items():
            yield from _missed(table, estimate, (low, lower), (high, upper), own & ~crossed)


def _missed(
    table: ReportedTable,
    estimate: Variable,
    low: tuple[Variable, FloatArray],
    high: tuple[Variable, FloatArray],
    where: BoolArray,
) -> Iterator[Finding]:
    name = estimate[0]
    # Limits of η² and its kin are cut at 0 and, from a noncentral F or a bootstrap, are limits for a
    # parameter that the printed index overestimates: they can miss an honest one.
    strict = name not in _EFFECT_SIZES or VOCABULARY[name].signed or name == "odds_ratio"
    severity = Severity.INCONSISTENT if strict else Severity.DOUBTFUL
    why = "" if strict else "limits of a biased index, cut at zero, can miss it honestly"
    value = ends(table, estimate)
    cut = (low[1] <= 0) & (VOCABULARY[name].low < 0) & (not strict)
    below, above = beyond(low[1], value[1]) & ~cut, beyond(value[0], high[1])
    for side, limit, outside in (("below", low[0], below), ("above", high[0], above)):
        for i in positions(where & outside):
            said = f"{shown(table, estimate, i)} lies {side} its {shown(table, limit, i)}: look at the signs"
            cells = [estimate, limit]
            yield finding_at(table, i, severity, "estimate outside its limits", cells, said, explanation=why)
