"""Factorial terms from the cells of the model. Unequal cell sizes make the type of sums of squares a choice."""

from __future__ import annotations

import numpy as np

from extractor.catalogue.relation import FACTORIAL, FloatArray, Grade, relation

_CELLS = "weighted least squares on cell means (textbook identity)"
_RESIDUAL = "contrast of cells over the SD within cells (textbook identity)"


@relation(gives="ss_effect", rising=["cells_ss_effect"], designs=FACTORIAL, source=_CELLS)
def effect_sum_from_equal_cells(cells_ss_effect: FloatArray) -> FloatArray:
    """SS_effect = Σ of squared forms of the cell means, cells of equal size."""
    return cells_ss_effect


@relation(
    gives="ss_effect",
    rising=["cells_ss_effect_unbalanced"],
    designs=FACTORIAL,
    grade=Grade.ASSUMPTION,
    assumes="sums of squares of type III, cells being of unequal size",
    source=_CELLS,
)
def effect_sum_of_type_iii(cells_ss_effect_unbalanced: FloatArray) -> FloatArray:
    """SS_effect of type III from the cell means."""
    return cells_ss_effect_unbalanced


@relation(gives="ss_error", rising=["cells_ss_error"], designs=FACTORIAL, source=_CELLS)
def error_sum_from_cells(cells_ss_error: FloatArray) -> FloatArray:
    """SS_error = Σ (n - 1)·SD² over the cells."""
    return cells_ss_error


@relation(gives="ss_total", rising=["cells_ss_total"], designs=FACTORIAL, source=_CELLS)
def total_sum_from_cells(cells_ss_total: FloatArray) -> FloatArray:
    """SS_total = SS between cells + SS_error."""
    return cells_ss_total


@relation(gives="df_effect", rising=["cells_df_effect"], designs=FACTORIAL, source=_CELLS)
def effect_df_from_cells(cells_df_effect: FloatArray) -> FloatArray:
    """df1 = product of (levels - 1) over the term's factors."""
    return cells_df_effect


@relation(gives="df_error", rising=["cells_df_error"], designs=FACTORIAL, source=_CELLS)
def error_df_from_cells(cells_df_error: FloatArray) -> FloatArray:
    """df2 = Σ (n - 1) over the cells."""
    return cells_df_error


@relation(gives="n_total", rising=["cells_n_total"], designs=FACTORIAL, source=_CELLS)
def total_from_cells(cells_n_total: FloatArray) -> FloatArray:
    """N = Σ n over the cells."""
    return cells_n_total


@relation(
    gives="d_residual", rising=["mean_difference"], either=["ms_error"], designs=FACTORIAL, source=_RESIDUAL
)
def residual_d_from_means(mean_difference: FloatArray, ms_error: FloatArray) -> FloatArray:
    """d_residual = Σ w·M / sqrt(MS_error)."""
    return mean_difference / np.sqrt(ms_error)


@relation(
    gives="pooled_sd",
    rising=["cells_ss_total"],
    falling=["cells_ss_alone"],
    exact=["cells_n_total", "cells_df_effect"],
    designs=FACTORIAL,
    source="Nouri & Greenberg (1995); Morris & DeShon (1997): the other terms put back",
)
def restored_sd_from_cells(
    cells_ss_total: FloatArray,
    cells_ss_alone: FloatArray,
    cells_n_total: FloatArray,
    cells_df_effect: FloatArray,
) -> FloatArray:
    """s = sqrt((SS_total - SS_alone) / (N - 1 - df1)), the one-way SD within the levels of the factor."""
    return np.sqrt((cells_ss_total - cells_ss_alone) / (cells_n_total - 1 - cells_df_effect))


@relation(
    gives="df_standardizer",
    rising=["cells_n_total"],
    falling=["cells_df_effect"],
    designs=FACTORIAL,
    source="degrees of freedom within the levels of one factor (textbook identity)",
)
def standardizer_df_from_cells(cells_n_total: FloatArray, cells_df_effect: FloatArray) -> FloatArray:
    """df_s = N - 1 - df1."""
    return cells_n_total - 1 - cells_df_effect
