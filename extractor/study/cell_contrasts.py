"""Contrasts of the cells of a factorial design, with the error term of all cells."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from extractor.study.cell_means import (
    FloatArray,
    Levels,
    checked_crossing,
    checked_sizes,
    checked_summaries,
    error_term,
)


@dataclass(frozen=True, slots=True)
class CellContrast:
    """A contrast of cell means, tested and standardised with the error term of the whole model.

    difference : Σ w·M. inverse_effective_n : Σ w²/n, which is 1/n1 + 1/n2 for two cells.
    d : difference / sqrt(MS_error). t : d / sqrt(Σ w²/n) on df_error. p : two-sided.
    """

    difference: float
    inverse_effective_n: float
    ms_error: float
    df_error: int
    t: float
    p: float
    d: float


def cell_contrast(n: ArrayLike, mean: ArrayLike, sd: ArrayLike, weights: ArrayLike) -> CellContrast:
    """A contrast of cells given by its weights, with the error term of all cells.

    Parameters
    ----------
    n, mean, sd : summaries of all cells of the model, which share the error term, shape (cells,).
    weights : weights of the cells, shape (cells,); they sum to 0.

    Raises
    ------
    ValueError
        when shapes differ, a summary has no number, the weights do not sum to 0 or are all 0, or nothing is
        left for error.
    """
    sizes, means, sds = checked_summaries(n, mean, sd)
    w = np.asarray(weights, dtype=np.float64)
    if w.shape != sizes.shape:
        raise ValueError(f"{len(sizes)} cells need as many weights, not an array of shape {w.shape}")
    if not np.isfinite(w).all() or not w.any() or abs(w.sum()) > 1e-9 * np.abs(w).sum():
        raise ValueError("the weights of a contrast are numbers, not all 0, that sum to 0")
    ss_error, df_error = error_term(sizes, sds)
    ms_error = ss_error / df_error
    # the weights sum to 0, so any centre may be taken off, and no digits of large means are lost
    difference = float((w * (means - means.mean())).sum())
    inverse = float((w**2 / sizes).sum())
    with np.errstate(divide="ignore", invalid="ignore"):
        d = float(np.divide(difference, np.sqrt(ms_error)))
        t = float(np.divide(d, np.sqrt(inverse)))
    p = float(special.betainc(df_error / 2, 0.5, df_error / (df_error + t**2)))
    return CellContrast(difference, inverse, ms_error, df_error, t, p, d)


def marginal_contrast(
    n: ArrayLike,
    mean: ArrayLike,
    sd: ArrayLike,
    levels: Levels,
    factor: str,
    weights: Mapping[object, float],
    weighted: bool = False,
) -> CellContrast:
    """A contrast of the levels of one factor over all cells of the others.

    Parameters
    ----------
    n, mean, sd, levels : as in ``factorial_table``.
    factor : the factor whose levels are compared.
    weights : weight of each level of it; levels left out weigh 0.
    weighted : False compares unweighted marginal means (each cell counts the same, as in type III); True
        compares the means of all participants of a level (each participant counts the same).

    Raises
    ------
    ValueError
        as in ``cell_contrast``, when a cell is missing, or a factor or level is not in the design.
    """
    sizes = checked_sizes(n)
    checked_crossing(levels, len(sizes))
    own = _level_weights(levels, factor, weights)
    share = sizes if weighted else np.ones_like(sizes)
    labels = list(levels[factor])
    within = np.array([share[[other == label for other in labels]].sum() for label in labels])
    return cell_contrast(n, mean, sd, own * share / within)


def simple_effect(
    n: ArrayLike,
    mean: ArrayLike,
    sd: ArrayLike,
    levels: Levels,
    factor: str,
    weights: Mapping[object, float],
    at: Mapping[str, object],
) -> CellContrast:
    """A contrast of the levels of one factor at one level of each other factor named in ``at``.

    Factors that are not named in ``at`` are averaged over, each cell counting the same. Parameters and errors
    are those of ``marginal_contrast``; ``at`` maps other factors to one of their levels.
    """
    sizes = checked_sizes(n)
    checked_crossing(levels, len(sizes))
    own = _level_weights(levels, factor, weights)
    if factor in at:
        raise ValueError(f"'{factor}' is compared and cannot be held at one level too")
    chosen = np.ones(len(sizes), dtype=bool)
    for other, label in at.items():
        chosen &= _level_weights(levels, other, {label: 1.0}) == 1.0
    labels = list(levels[factor])
    cells = np.array([chosen[[other == label for other in labels]].sum() for label in labels])
    return cell_contrast(n, mean, sd, np.where(chosen, own / cells, 0.0))


def _level_weights(levels: Levels, factor: str, weights: Mapping[object, float]) -> FloatArray:
    """The weight of each cell's level, shape (cells,)."""
    if factor not in levels:
        raise ValueError(f"the design has no factor '{factor}': it has {', '.join(levels)}")
    labels = list(levels[factor])
    unknown = [str(label) for label in weights if label not in labels]
    if unknown:
        raise ValueError(f"factor '{factor}' has no level {', '.join(unknown)}")
    return np.array([float(weights.get(label, 0.0)) for label in labels])
