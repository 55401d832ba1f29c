"""The analysis of variance of a between-subjects factorial design from its cell summaries alone.

With n, mean and standard deviation of every cell the raw data add nothing: the sums of squares of the effects
are those of weighted least squares on the cell means with weights n, and the error sum of squares is
Σ (n - 1)·SD² (textbook identity). Each effect's sum of squares is a sum of squared linear forms of the means;
``term_forms`` gives them, so that rounding intervals of the means can be carried through.

Types of sums of squares (Speed, Hocking & Hackney 1978, Journal of the American Statistical Association 73,
105-112; locator from memory). All are written with factors coded to sum to zero:

* I: each term after those before it, main effects first in a stated order of the factors, then interactions
  of two factors as formulas are expanded (A x B, A x C, B x C, A x D, ...), and so on. Programs that enter
  A x B before C get other numbers when cell sizes differ;
* II: each term after all terms that do not contain it;
* III: each term after all other terms.

With equal cell sizes the three agree. With unequal ones the sums of squares of types II and III need not add
up to that between cells.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from functools import reduce
from itertools import combinations, pairwise
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

FloatArray = NDArray[np.float64]
Kind = Literal["I", "II", "III"]
Levels = Mapping[str, Sequence[object] | NDArray[np.generic]]
"""Factor -> the level of each cell, shape (cells,)."""

KINDS: tuple[Kind, ...] = ("I", "II", "III")
JOINT = " x "
"""What joins the factor names of an interaction."""


@dataclass(frozen=True, slots=True)
class TermRow:
    """One term of the table, with the error term and the total it is judged by.

    factors : the factors of the term, in the order of the design.
    f, p : F on (df, df_error) and its upper tail.
    eta_squared : SS / SS_total, classical. partial_eta_squared : SS / (SS + SS_error).
    omega_squared : (SS - df·MS_error) / (SS_total + MS_error); partial_omega_squared : the same with
        SS + (N - df)·MS_error below (Maxwell & Delaney 2004). Both are negative when F < 1.
    generalized_eta_squared : Olejnik & Algina (2003); NaN when it was not said which factors were measured.
    """

    factors: tuple[str, ...]
    ss: float
    df: int
    ms: float
    f: float
    p: float
    eta_squared: float
    partial_eta_squared: float
    omega_squared: float
    partial_omega_squared: float
    generalized_eta_squared: float
    ss_error: float
    df_error: int
    ms_error: float
    ss_total: float
    n_total: int

    @property
    def term(self) -> str:
        """Factor names joined by ' x '."""
        return JOINT.join(self.factors)


def factorial_table(
    n: ArrayLike,
    mean: ArrayLike,
    sd: ArrayLike,
    levels: Levels,
    kind: Kind,
    order: Sequence[str] | None = None,
    measured: Collection[str] | None = None,
) -> list[TermRow]:
    """All main effects and interactions of a between-subjects factorial design.

    Parameters
    ----------
    n, mean, sd : summaries of the cells, shape (cells,); the SD of a cell of one participant is not read.
    levels : the level of each cell for each factor.
    kind : type of the sums of squares.
    order : order of the factors for type I; the order of ``levels`` when None. No effect on types II and III.
    measured : the factors that were measured; the others were manipulated. None: not known.

    Returns
    -------
    list of TermRow
        main effects first, then interactions of two factors, and so on.

    Raises
    ------
    ValueError
        when a cell is missing, repeated or has no number, a factor has one level only, nothing is left for
        error, or ``order`` or ``measured`` name something else than the factors.
    """
    sizes, means, sds = checked_summaries(n, mean, sd)
    forms = _forms(sizes, levels, kind, order)
    unknown = sorted(set(measured or ()) - set(levels))
    if unknown:
        raise ValueError(f"measured factors that the design does not have: {', '.join(unknown)}")
    ss_error, df_error = error_term(sizes, sds)
    centred = means - (sizes * means).sum() / sizes.sum()
    ss_total = ss_error + float((sizes * centred**2).sum())
    sums = {term: float(((rows @ centred) ** 2).sum()) for term, rows in forms.items()}
    table = []
    for term, ss in sums.items():
        base = _generalized_base(term, sums, ss_error, measured)
        table.append(_row(term, ss, len(forms[term]), ss_error, df_error, ss_total, int(sizes.sum()), base))
    return table


def _row(
    term: tuple[str, ...],
    ss: float,
    df: int,
    ss_error: float,
    df_error: int,
    ss_total: float,
    n_total: int,
    base: float,
) -> TermRow:
    """One row of the table; ``base`` is what the generalized eta squared is a part of."""
    ms_error = ss_error / df_error
    excess = ss - df * ms_error
    f = _ratio(ss / df, ms_error)
    return TermRow(
        factors=term,
        ss=ss,
        df=df,
        ms=ss / df,
        f=f,
        p=float(special.betainc(df_error / 2, df / 2, df_error / (df_error + df * f))),
        eta_squared=_ratio(ss, ss_total),
        partial_eta_squared=_ratio(ss, ss + ss_error),
        omega_squared=_ratio(excess, ss_total + ms_error),
        partial_omega_squared=_ratio(excess, ss + (n_total - df) * ms_error),
        generalized_eta_squared=_ratio(ss, base),
        ss_error=ss_error,
        df_error=df_error,
        ms_error=ms_error,
        ss_total=ss_total,
        n_total=n_total,
    )


def _ratio(part: float, whole: float) -> float:
    """part / whole; infinite over 0, NaN where both are 0."""
    if whole == 0:
        return float("inf") if part > 0 else float("nan")
    return part / whole


def term_forms(
    n: ArrayLike, levels: Levels, kind: Kind, order: Sequence[str] | None = None
) -> dict[str, FloatArray]:
    """The linear forms of the cell means whose squares add up to each term's sum of squares.

    Parameters
    ----------
    n, levels, kind, order : as in ``factorial_table``; n of shape (cells,).

    Returns
    -------
    dict
        term -> array of shape (df, cells); SS = Σ (forms @ mean)². The weights of each form sum to 0.

    Raises
    ------
    ValueError
        as in ``factorial_table``.
    """
    forms = _forms(checked_sizes(n), levels, kind, order)
    return {JOINT.join(term): rows for term, rows in forms.items()}


def _forms(
    sizes: FloatArray, levels: Levels, kind: Kind, order: Sequence[str] | None
) -> dict[tuple[str, ...], FloatArray]:
    if kind not in KINDS:
        raise ValueError(f"sums of squares are of type I, II or III, not {kind!r}")
    root = np.sqrt(sizes)[:, None]
    blocks = {term: root * block for term, block in _columns(levels, len(sizes), order).items()}
    if kind == "I":
        entered = np.linalg.qr(np.hstack([root, *blocks.values()]))[0]
        ends = np.cumsum([1, *(block.shape[1] for block in blocks.values())])
        parts = [entered[:, start:end] for start, end in pairwise(ends)]
    else:
        parts = []
        for term, block in blocks.items():
            # the last columns of an orthogonal basis are what the term adds to the columns before it
            before = [
                other
                for name, other in blocks.items()
                if name != term and (kind == "III" or not set(term) <= set(name))
            ]
            parts.append(np.linalg.qr(np.hstack([root, *before, block]))[0][:, -block.shape[1] :])
    return {term: (root * part).T for term, part in zip(blocks, parts, strict=True)}


def restored_mean_square(rows: Sequence[TermRow], term: str) -> float:
    """Error variance with every other term put back: the one-way error mean square of ``term``.

    (SS_error + Σ SS of the other terms) / (df_error + Σ their dfs); exactly the error mean square of the
    one-way analysis when cell sizes are equal (Nouri & Greenberg 1995; Morris & DeShon 1997).

    Raises
    ------
    ValueError
        when the table has no such term.
    """
    if term not in {row.term for row in rows}:
        raise ValueError(f"the table has no term '{term}': it has {', '.join(row.term for row in rows)}")
    others = [row for row in rows if row.term != term]
    ss = rows[0].ss_error + sum(row.ss for row in others)
    return ss / (rows[0].df_error + sum(row.df for row in others))


def checked_sizes(n: ArrayLike) -> FloatArray:
    """Cell sizes as an array of shape (cells,); ``ValueError`` unless all are whole numbers of at least 1."""
    sizes = np.asarray(n, dtype=np.float64)
    if sizes.ndim != 1 or not np.isfinite(sizes).all() or (sizes < 1).any() or (sizes % 1 != 0).any():
        raise ValueError("every cell needs its n, a whole number of at least 1")
    return sizes


def checked_summaries(
    n: ArrayLike, mean: ArrayLike, sd: ArrayLike
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Summaries as arrays of shape (cells,), SDs of single participants set to 0; ``ValueError`` for gaps."""
    sizes = checked_sizes(n)
    means, sds = np.asarray(mean, dtype=np.float64), np.asarray(sd, dtype=np.float64)
    if means.shape != sizes.shape or sds.shape != sizes.shape:
        raise ValueError(f"n, mean and sd differ in shape: {sizes.shape}, {means.shape}, {sds.shape}")
    sds = np.where(sizes == 1, 0.0, sds)
    if not np.isfinite(means).all():
        raise ValueError("every cell needs its mean")
    if not np.isfinite(sds).all() or (sds < 0).any():
        raise ValueError("every cell of two or more participants needs its SD, at least 0")
    return sizes, means, sds


def error_term(sizes: FloatArray, sds: FloatArray) -> tuple[float, int]:
    """Error sum of squares and its dfs; ``ValueError`` when there are none."""
    df = int((sizes - 1).sum())
    if df == 0:
        raise ValueError("with one participant in every cell nothing is left for the error term")
    return float(((sizes - 1) * sds**2).sum()), df


def _columns(levels: Levels, cells: int, order: Sequence[str] | None) -> dict[tuple[str, ...], FloatArray]:
    """Sum-to-zero columns of every term in order of entry, each of shape (cells, df)."""
    if not levels:
        raise ValueError("a factorial design needs at least one factor")
    if any(JOINT in factor for factor in levels):
        raise ValueError(f"'{JOINT}' joins factors and cannot be part of a factor's name")
    entry = list(levels) if order is None else list(order)
    if sorted(entry) != sorted(levels):
        raise ValueError(f"order must name each factor once: {', '.join(levels)}")
    main = {factor: _sum_to_zero(code) for factor, code in checked_crossing(levels, cells).items()}
    columns: dict[tuple[str, ...], FloatArray] = {}
    for degree in range(1, len(entry) + 1):
        for places in sorted(combinations(range(len(entry)), degree), key=lambda places: places[::-1]):
            members = {entry[place] for place in places}
            name = tuple(factor for factor in levels if factor in members)
            columns[name] = reduce(_crossed, [main[factor] for factor in name])
    return columns


def checked_crossing(levels: Levels, cells: int) -> dict[str, NDArray[np.intp]]:
    """The level of each cell as a number, factor by factor.

    Raises
    ------
    ValueError
        unless each factor has ``cells`` labels and two or more levels, and every combination occurs once.
    """
    coded = {factor: _codes(factor, list(levels[factor]), cells) for factor in levels}
    shape = tuple(int(code.max()) + 1 for code in coded.values())
    places = np.ravel_multi_index(tuple(coded.values()), shape)
    counts = np.bincount(places, minlength=int(np.prod(shape)))
    if (counts > 1).any():
        raise ValueError("a combination of factor levels is given more than once")
    missing = int((counts == 0).sum())
    if missing:
        raise ValueError(
            f"{missing} of {len(counts)} cells are missing; with empty cells the types of sums of squares "
            "test other hypotheses, so nothing is computed"
        )
    return coded


def _codes(factor: str, labels: list[object], cells: int) -> NDArray[np.intp]:
    """Levels as numbers, in order of first appearance."""
    if len(labels) != cells:
        raise ValueError(f"factor '{factor}' has {len(labels)} labels for {cells} cells")
    numbers = {label: number for number, label in enumerate(dict.fromkeys(labels))}
    if len(numbers) < 2:
        raise ValueError(f"factor '{factor}' needs at least two levels")
    return np.array([numbers[label] for label in labels], dtype=np.intp)


def _sum_to_zero(code: NDArray[np.intp]) -> FloatArray:
    """Columns of one factor: 1 for the column's own level, -1 for the last level, else 0."""
    last = int(code.max())
    return np.asarray(np.vstack([np.eye(last), np.full((1, last), -1.0)])[code], dtype=np.float64)


def _crossed(left: FloatArray, right: FloatArray) -> FloatArray:
    """All products of a column of one with a column of the other."""
    return np.asarray((left[:, :, None] * right[:, None, :]).reshape(len(left), -1))


def _generalized_base(
    term: tuple[str, ...],
    sums: Mapping[tuple[str, ...], float],
    ss_error: float,
    measured: Collection[str] | None,
) -> float:
    """SS of the term if manipulated, and of all sources with a measured factor, and SS_error."""
    if measured is None:
        return float("nan")
    individual = sum(ss for name, ss in sums.items() if not set(measured).isdisjoint(name))
    own = sums[term] if set(measured).isdisjoint(term) else 0.0
    return own + individual + ss_error
