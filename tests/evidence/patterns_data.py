"""What a check of one reporting pattern consists of, and the formulas its expected values are computed with.

The formulas are written here a second time, from the textbooks, and share nothing with the package.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy import stats

Row = dict[str, str]
Bounds = tuple[float, float]
OPEN = math.inf

NEVER = "no value: the refusal and what would open the row are checked"
"""Source of the refusals."""


@dataclass(frozen=True, slots=True)
class Case:
    """One coded report and what the command must make of it.

    number : of the pattern. printed : what stands in the article. rows : what a coder types, text by heading.
    to : the metric. source : where the expected value comes from.
    value : a number must be met to 1e-9 of itself; a text to half a unit of its last printed place; a pair are
        bounds, infinite where open. shown : what becomes of the estimate before it is compared.
    variance : likewise. grade, standardizer : "" where they do not matter.
    reason, said : words that the columns ``reason`` and ``assumptions`` must hold.
    finding : severity, then words of the message or explanation; without it nothing stronger than doubtful may be
        found. at : the row that is judged. groups : lines of the sheet of groups. codebook : TOML text.
    short : why the command does not reach this yet; "" where it does.
    """

    number: int
    printed: str
    rows: tuple[Row, ...]
    to: str
    status: str
    source: str
    value: float | str | Bounds | None = None
    variance: float | str | None = None
    grade: str = ""
    standardizer: str = ""
    reason: tuple[str, ...] = ()
    said: tuple[str, ...] = ()
    finding: tuple[str, ...] = ()
    shown: Callable[[float], float] = float
    at: int = 0
    groups: tuple[Row, ...] = ()
    codebook: str = ""
    options: tuple[str, ...] = ()
    workbook: bool = False
    short: str = ""


def case(
    number: int,
    printed: str,
    rows: Row | list[Row],
    to: str,
    source: str,
    value: float | str | None,
    *,
    grade: str = "identity",
    **more: Any,
) -> Case:
    """A report that is converted."""
    given = tuple(rows) if isinstance(rows, list) else (rows,)
    return Case(number, printed, given, to, "converted", source, value, grade=grade, **more)


def bound(
    number: int, printed: str, row: Row, to: str, source: str, low: float, high: float, **more: Any
) -> Case:
    """A report that gives a bound only."""
    return Case(number, printed, (row,), to, "bounded", source, (low, high), grade="bound", **more)


def refused(number: int, printed: str, rows: Row | list[Row], to: str, *reason: str, **more: Any) -> Case:
    """A report that gives nothing; ``reason`` holds words of the reason and of what would open the row."""
    given = tuple(rows) if isinstance(rows, list) else (rows,)
    return Case(number, printed, given, to, "blocked", NEVER, reason=reason, **more)


def of_groups(**columns: str) -> Row:
    """Group columns from words such as ``mean="8.7 7.7"``."""
    return {f"{name}_{j}": word for name, words in columns.items() for j, word in enumerate(words.split(), 1)}


def row(design: str, **cells: str) -> Row:
    """A row of a design."""
    return {"design": design, **cells}


# ---- formulas ---------------------------------------------------------------------------------------


def correction(df: float) -> float:
    """J(df) of Hedges (1981)."""
    return math.exp(math.lgamma(df / 2) - math.lgamma((df - 1) / 2)) / math.sqrt(df / 2)


def pooled(n: list[float], sd: list[float]) -> float:
    """Pooled standard deviation."""
    size, spread = np.array(n), np.array(sd)
    return float(np.sqrt(((size - 1) * spread**2).sum() / (size.sum() - len(n))))


def between(n: list[float], mean: list[float]) -> float:
    """Sum of squares between groups."""
    size, middle = np.array(n), np.array(mean)
    return float((size * (middle - (size * middle).sum() / size.sum()) ** 2).sum())


def inverse(*n: float) -> float:
    """1/n1 + 1/n2 + ..."""
    return sum(1 / each for each in n)


def eta(f: float, df1: float, df2: float) -> float:
    """df1·F / (df1·F + df2)."""
    return df1 * f / (df1 * f + df2)


def omega(f: float, df1: float, n: float) -> float:
    """df1·(F - 1) / (df1·(F - 1) + N) (Hays 1963)."""
    return df1 * (f - 1) / (df1 * (f - 1) + n)


def t_of_p(p: float, df: float) -> float:
    """|t| with two-sided tail p."""
    return float(stats.t.isf(p / 2, df))


def normal_d(superiority: float) -> float:
    """d of normal groups with P(X > Y) = superiority (McGraw & Wong 1992)."""
    return float(math.sqrt(2) * stats.norm.ppf(superiority))


def d_variance(n1: float, n2: float, d: float) -> float:
    """Large-sample variance of d, 1/n1 + 1/n2 + d²/(2N) (Borenstein et al. 2009)."""
    return inverse(n1, n2) + d**2 / (2 * (n1 + n2))


def five_mean(low: float, q1: float, median: float, q3: float, high: float, n: float) -> float:
    """Mean from five numbers (Luo et al. 2018)."""
    ends, middle = 2.2 / (2.2 + n**0.75), 0.7 - 0.72 / n**0.55
    return ends * (low + high) / 2 + middle * (q1 + q3) / 2 + (1 - ends - middle) * median


def five_sd(low: float, q1: float, q3: float, high: float, n: float) -> float:
    """SD from five numbers (Shi et al. 2020)."""
    theta1 = (2 + 0.14 * n**0.6) * stats.norm.ppf((n - 0.375) / (n + 0.25))
    theta2 = (2 + 2 / (0.07 * n**0.6)) * stats.norm.ppf((0.75 * n - 0.125) / (n + 0.25))
    return float((high - low) / theta1 + (q3 - q1) / theta2)


def quartile_mean(q1: float, median: float, q3: float, n: float) -> float:
    """Mean from median and quartiles (Luo et al. 2018)."""
    weight = 0.7 + 0.39 / n
    return weight * (q1 + q3) / 2 + (1 - weight) * median


def quartile_sd(q1: float, q3: float, n: float) -> float:
    """SD from quartiles (Wan et al. 2014)."""
    return float((q3 - q1) / (2 * stats.norm.ppf((0.75 * n - 0.125) / (n + 0.25))))


def morris_variance(n1: float, n2: float, r: float, d: float) -> float:
    """Variance of Morris's (2008) d_ppc2 at d, the small-sample factor inside."""
    m, share = n1 + n2 - 2, n1 * n2 / (n1 + n2)
    c = 1 - 3 / (4 * m - 1)
    return 2 * c**2 * (1 - r) / share * m / (m - 2) * (1 + d**2 * share / (2 * (1 - r))) - d**2
