"""Rows with one error each: an honest, redundant study is printed, then one usual slip is made in every row.

A redundant study prints more than it must (group sizes, means, spreads, the test, its dfs, p, an index or a source
table), so that a slip can be noticed at all. A planted row always prints differently from the honest one, and always
stays inside the support of its quantities: what falls outside is caught by looking at one cell.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from scipy import stats

from extractor.quantities import VOCABULARY
from extractor.table import BoolArray, FloatArray, Variable
from tests.evidence.honest import statistics
from tests.evidence.printing import Printed, Sheet, rounded

INDICES = ("eta_squared", "omega_squared", "epsilon_squared", "cohens_f")
ROWS_OF_A_SIZE = 250
SIGNED = ("t_value", "cohens_d", "hedges_g", "r", "mean_difference", "mean")


@dataclass
class Study:
    """A printed study with the unrounded statistics behind it; ``found`` holds (rows,) and (rows, groups)."""

    sheet: Sheet
    found: dict[str, FloatArray]

    @property
    def groups(self) -> int:
        return int(self.found["n"].shape[1])

    def has(self, name: str) -> bool:
        return (name, None) in self.sheet.columns


@dataclass
class Planted:
    """Rows with one slip each.

    cells : where each variable was changed, shape (rows,). truth : the unrounded statistics of the same rows.
    origin : the printed sheet before the slip.
    """

    kind: str
    sheet: Sheet
    origin: Sheet
    truth: dict[str, FloatArray]
    cells: dict[Variable, BoolArray] = field(default_factory=dict)


@dataclass(frozen=True)
class Wants:
    """What a kind of slip needs the study to print."""

    two_groups: bool | None = None
    spreads: tuple[str, ...] = ("sd", "sd", "sd", "sd", "both", "se", "none")
    always: frozenset[str] = frozenset()
    around_zero: float = 0.25
    unequal: bool = False
    exact_p: bool = False


def redundant_sheet(rng: np.random.Generator, rows: int, wants: Wants) -> Study:
    """``rows`` studies with one number of groups and one choice of what is printed; sizes and spreads vary."""
    two = bool(rng.random() < 0.35) if wants.two_groups is None else wants.two_groups
    k = 2 if two else int(rng.integers(2, 9))
    centre = 0.0 if rng.random() < wants.around_zero else 5.0
    unit = 10.0 ** rng.integers(0, 3)
    drawn = []
    for start in range(0, rows, ROWS_OF_A_SIZE):
        sizes = _sizes(rng, k, wants.unequal)
        some = statistics(_scores(rng, min(ROWS_OF_A_SIZE, rows - start), sizes, centre, unit))
        some["n"] = np.broadcast_to(sizes, some["mean"].shape)
        drawn.append(some)
    found = {name: np.concatenate([some[name] for some in drawn]) for name in drawn[0]}
    found["variance"] = found["sd"] ** 2
    found["population_sd"] = found["sd"] * np.sqrt(1 - 1 / found["n"])
    found["n_total"] = found["n"].sum(axis=1)
    found["df_error"] = found["df"] = found["n_total"] - k
    found["df_effect"], found["k_groups"] = np.full(rows, k - 1.0), np.full(rows, float(k))
    study = Study(Sheet({}, {"design": "two-group" if two else "one-way", "standardizer": "pooled"}), found)
    _print_groups(rng, study, wants)
    _print_test(rng, study, wants, two)
    _print_the_rest(rng, study, wants, two)
    return study


def _sizes(rng: np.random.Generator, k: int, unequal: bool) -> FloatArray:
    low, high = (4, 12) if rng.random() < 0.3 else (8, 40)
    if not unequal and rng.random() < 0.5:
        return np.full(k, float(rng.integers(low, high)))
    while True:
        sizes = rng.integers(low, high, size=k).astype(float)
        if not unequal or (sizes != sizes[0]).any():
            return sizes


def _scores(
    rng: np.random.Generator, rows: int, sizes: FloatArray, centre: float, unit: float
) -> list[FloatArray]:
    shift = rng.normal(0, rng.choice([0.3, 0.8, 1.5]), size=(rows, len(sizes)))
    spread = np.exp(rng.normal(0, rng.choice([0.1, 0.4]), size=len(sizes)))
    return [
        unit * (centre + shift[:, [j]] + rng.normal(0, spread[j], size=(rows, int(n))))
        for j, n in enumerate(sizes)
    ]


def _print_groups(rng: np.random.Generator, study: Study, wants: Wants) -> None:
    columns = study.sheet.columns
    mean_places = int(rng.integers(1, 4))
    spread_places = mean_places if rng.random() < 0.7 else int(rng.integers(1, 4))
    spreads = str(rng.choice(list(wants.spreads)))
    for j in range(1, study.groups + 1):
        columns["n", j] = Printed(study.found["n"][:, j - 1].copy(), 0)
        columns["mean", j] = rounded(study.found["mean"][:, j - 1], mean_places)
        for name in ("sd", "se"):
            if spreads in (name, "both"):
                columns[name, j] = rounded(study.found[name][:, j - 1], spread_places)


def _print_test(rng: np.random.Generator, study: Study, wants: Wants, two: bool) -> None:
    def count(name: str) -> None:
        study.sheet.columns[name, None] = Printed(study.found[name].copy(), 0)

    by_t = two and "f_value" not in wants.always and rng.random() < 0.5
    if not by_t:
        study.sheet.columns["f_value", None] = rounded(study.found["f_value"], int(rng.integers(1, 4)))
        if wants.always & {"df_effect", "df_error"} or rng.random() < 0.9:
            count("df_effect")
            count("df_error")
    if two and (by_t or "t_value" in wants.always or rng.random() < 0.3):
        study.sheet.columns["t_value", None] = rounded(study.found["t_value"], int(rng.integers(1, 4)))
        if by_t or rng.random() < 0.5:
            count("df")
    if "n_total" in wants.always or rng.random() < 0.5:
        count("n_total")
    if rng.random() < 0.2:
        count("k_groups")
    if wants.exact_p or rng.random() < 0.8:
        _print_p(rng, study, wants.exact_p or bool(rng.random() < 0.7))


def _print_p(rng: np.random.Generator, study: Study, exact: bool) -> None:
    p = study.found["p_value"]
    if exact:
        places = int(rng.integers(2, 5))
        nought = np.round(p, places) == 0
        value = np.where(nought, 10.0**-places, np.round(p, places))
        study.sheet.columns["p_value", None] = Printed(value, places, below=nought)
        return
    value = np.where(p < 0.001, 0.001, np.where(p < 0.01, 0.01, 0.05))
    study.sheet.columns["p_value", None] = Printed(value, 3, below=p < 0.05, above=p > 0.05)


def _print_the_rest(rng: np.random.Generator, study: Study, wants: Wants, two: bool) -> None:
    def say(name: str, chance: float, least: int) -> None:
        if name in wants.always or rng.random() < chance:
            study.sheet.columns[name, None] = rounded(study.found[name], int(rng.integers(least, 4)))

    if "index" in wants.always:
        say(str(rng.choice(INDICES)), 1.0, 2)
    else:
        for name in INDICES:
            say(name, 0.25, 2)
    if rng.random() < 0.25:
        for name in ("ss_effect", "ss_error", "ss_total", "ms_effect", "ms_error"):
            say(name, 0.7, 1)
    if two:
        for name in ("cohens_d", "hedges_g", "r", "mean_difference", "se_difference"):
            say(name, 0.3, 1 if name.endswith("difference") else 2)


Slip = Callable[[np.random.Generator, Study, Planted], None]
KINDS: dict[str, tuple[Wants, Slip]] = {}


def _slip(name: str, wants: Wants = Wants()) -> Callable[[Slip], Slip]:  # frozen, so shared safely
    def enter(function: Slip) -> Slip:
        KINDS[name] = wants, function
        return function

    return enter


def plant(kind: str, rng: np.random.Generator, rows: int) -> Planted:
    """A sheet of at most ``rows`` rows with one error of a kind in each; rows that print as before are dropped."""
    wants, slip = KINDS[kind]
    study = redundant_sheet(rng, rows, wants)
    printed = {
        v: Printed(p.value.copy(), p.decimals, p.below, p.above) for v, p in study.sheet.columns.items()
    }
    planted = Planted(kind, Sheet(printed, study.sheet.facts), study.sheet, study.found)
    slip(rng, study, planted)
    return _kept(planted)


def _kept(planted: Planted) -> Planted:
    """The rows whose printed text changed and whose new numbers are inside their support."""
    changed = np.zeros(planted.sheet.rows, dtype=bool)
    inside = np.ones(planted.sheet.rows, dtype=bool)
    for variable, where in planted.cells.items():
        support, new = VOCABULARY[variable[0]], planted.sheet.columns[variable]
        differs = (new.value != planted.origin.columns[variable].value) & where
        inside &= ~where | ((new.value >= support.low) & (new.value <= support.high))
        planted.cells[variable] = differs
        changed |= differs
    keep = changed & inside
    return Planted(
        planted.kind,
        _rows(planted.sheet, keep),
        _rows(planted.origin, keep),
        {name: values[keep] for name, values in planted.truth.items()},
        {variable: where[keep] for variable, where in planted.cells.items()},
    )


def _rows(sheet: Sheet, keep: BoolArray) -> Sheet:
    def some(values: BoolArray | None) -> BoolArray | None:
        return None if values is None else values[keep]

    columns = {
        v: Printed(
            p.value[keep],
            np.broadcast_to(p.decimals, keep.shape)[keep],
            some(p.below),
            some(p.above),
            some(p.given),
        )
        for v, p in sheet.columns.items()
    }
    return Sheet(columns, sheet.facts)


def _put(planted: Planted, variable: Variable, values: FloatArray, where: BoolArray | None = None) -> None:
    """Print ``values`` in a cell, to as many decimals as its column has."""
    printed = planted.sheet.columns[variable]
    where = np.ones(len(values), dtype=bool) if where is None else where
    for bound in (printed.below, printed.above):
        where = where if bound is None else where & ~bound
    printed.value = np.where(where, np.round(values, printed.decimals), printed.value)
    planted.cells[variable] = planted.cells.get(variable, np.zeros(len(values), dtype=bool)) | where


def _everywhere(planted: Planted, name: str, values: FloatArray) -> None:
    for variable in [v for v in planted.sheet.columns if v[0] == name]:
        assert variable[1] is not None
        _put(planted, variable, values[:, variable[1] - 1])


def _one_of(rng: np.random.Generator, cells: list[Variable], rows: int) -> list[tuple[Variable, BoolArray]]:
    """Each row's cell, drawn at random."""
    drawn = rng.integers(0, len(cells), size=rows)
    return [(cell, drawn == i) for i, cell in enumerate(cells)]


def _rounded_cells(planted: Planted) -> list[Variable]:
    return [v for v in planted.sheet.columns if not VOCABULARY[v[0]].exact]


@_slip("SE labelled SD", Wants(spreads=("sd",)))
def _se_as_sd(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    _everywhere(planted, "sd", study.found["se"])


@_slip("SD labelled SE", Wants(spreads=("se", "se", "both")))
def _sd_as_se(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    _everywhere(planted, "se", study.found["sd"])


@_slip("variance labelled SD", Wants(spreads=("sd", "sd", "sd", "both")))
def _variance_as_sd(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    _everywhere(planted, "sd", study.found["variance"])


@_slip("population SD", Wants(spreads=("sd", "sd", "sd", "both")))
def _population_sd(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    _everywhere(planted, "sd", study.found["population_sd"])


@_slip("index mislabelled", Wants(always=frozenset({"index"})))
def _mislabelled(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    heading = next(name for name in INDICES if study.has(name))
    other = str(rng.choice([name for name in INDICES if name != heading]))
    _put(planted, (heading, None), study.found[other])


@_slip("one-tailed p", Wants(exact_p=True))
def _one_tailed(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    _put(planted, ("p_value", None), study.found["p_value"] / 2)


@_slip("digits swapped")
def _digits(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    for variable, where in _one_of(rng, _rounded_cells(planted), planted.sheet.rows):
        printed = planted.sheet.columns[variable]
        digits = np.round(np.abs(printed.value) * 10.0**printed.decimals)
        most = max(printed.decimals + 1, int(np.log10(max(digits.max(), 1))) + 1)
        place = rng.integers(0, most - 1, size=len(digits))
        right, left = np.floor(digits / 10.0**place) % 10, np.floor(digits / 10.0 ** (place + 1)) % 10
        # a zero in front of the point can take part, none before it
        inside = 10.0 ** (place + 1) <= np.maximum(digits, 10.0**printed.decimals)
        swapped = digits + (right - left) * 9 * 10.0**place
        sign = np.where(printed.value < 0, -1.0, 1.0)
        _put(planted, variable, sign * swapped / 10.0**printed.decimals, where & inside)


@_slip("decimal point")
def _point(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    for variable, where in _one_of(rng, _rounded_cells(planted), planted.sheet.rows):
        printed = planted.sheet.columns[variable]
        places = rng.choice([-2, -1, 1, 2], size=len(where))
        # the digits stay: a point cannot move beyond the last one
        where = where & (printed.decimals - places >= 0)
        for bound in (printed.below, printed.above):
            where = where if bound is None else where & ~bound
        printed.decimals = np.where(where, printed.decimals - places, printed.decimals)
        printed.value = np.where(where, np.round(printed.value * 10.0**places, 6), printed.value)
        planted.cells[variable] = where


@_slip("sign lost", Wants(around_zero=0.8))
def _sign(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    cells = [v for v in planted.sheet.columns if v[0] in SIGNED]
    negative = np.column_stack([planted.sheet.columns[v].value < 0 for v in cells])
    # among the cells that have a minus sign to lose
    drawn = np.argmax(np.where(negative, rng.random(negative.shape), -1.0), axis=1)
    for i, variable in enumerate(cells):
        _put(planted, variable, np.abs(planted.sheet.columns[variable].value), (drawn == i) & negative[:, i])


@_slip("df of N - 1 or N", Wants(always=frozenset({"df_error"})))
def _total_df(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    name = str(rng.choice([n for n in ("df_error", "df") if study.has(n)]))
    one_less = rng.integers(0, 2, size=planted.sheet.rows)
    _put(planted, (name, None), study.found["n_total"] - one_less)


@_slip("dfs swapped", Wants(always=frozenset({"f_value", "df_error"})))
def _swapped_dfs(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    first, second = (study.sheet.columns[name, None].value for name in ("df_effect", "df_error"))
    _put(planted, ("df_effect", None), second)
    _put(planted, ("df_error", None), first)


@_slip("N before exclusions", Wants(always=frozenset({"n_total"})))
def _recruited(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    grown = study.found["n_total"] * rng.uniform(1.05, 1.5, size=planted.sheet.rows)
    _put(planted, ("n_total", None), np.round(grown))


@_slip("ns swapped", Wants(unequal=True))
def _swapped_sizes(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    n = study.found["n"]
    couples = [(i, j) for i in range(study.groups) for j in range(i)]
    different = np.column_stack([n[:, i] != n[:, j] for i, j in couples])
    drawn = np.argmax(np.where(different, rng.random(different.shape), -1.0), axis=1)
    for which, (i, j) in enumerate(couples):
        _put(planted, ("n", i + 1), n[:, j], drawn == which)
        _put(planted, ("n", j + 1), n[:, i], drawn == which)


@_slip("Welch F", Wants(always=frozenset({"f_value", "df_error"})))
def _welch(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    n, k = study.found["n"], study.groups
    weight = n / study.found["variance"]
    share = weight / weight.sum(axis=1, keepdims=True)
    centre = (share * study.found["mean"]).sum(axis=1, keepdims=True)
    imbalance = ((1 - share) ** 2 / (n - 1)).sum(axis=1)
    between = (weight * (study.found["mean"] - centre) ** 2).sum(axis=1) / (k - 1)
    f = between / (1 + 2 * (k - 2) / (k**2 - 1) * imbalance)
    _put(planted, ("f_value", None), f)
    if study.has("t_value"):
        _put(planted, ("t_value", None), np.sign(study.found["t_value"]) * np.sqrt(f))
    if study.has("p_value"):
        _put(planted, ("p_value", None), stats.f.sf(f, k - 1, (k**2 - 1) / (3 * imbalance)))


@_slip("t as F", Wants(two_groups=True, always=frozenset({"f_value", "df_error"})))
def _t_as_f(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    _put(planted, ("f_value", None), np.abs(study.found["t_value"]))


@_slip("F as t", Wants(two_groups=True, always=frozenset({"t_value"})))
def _f_as_t(rng: np.random.Generator, study: Study, planted: Planted) -> None:
    _put(planted, ("t_value", None), study.found["f_value"])
