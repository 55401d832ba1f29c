"""The point-biserial correlation of two-group rows."""

from __future__ import annotations

import numpy as np

from extractor.catalogue.relation import TWO_GROUP, FloatArray, relation

_R = "sample point-biserial correlation, r = d / sqrt(d² + N(N - 2)/(n1·n2)) = t / sqrt(t² + df) (textbook identity)"
_Z = "Fisher (1921), z = artanh r"


@relation(gives="r", rising=["t_value"], either=["df_error"], designs=TWO_GROUP, source=_R)
def r_from_t(t_value: FloatArray, df_error: FloatArray) -> FloatArray:
    """r = t / sqrt(t² + df2)."""
    return t_value / np.sqrt(t_value**2 + df_error)


@relation(gives="t_value", rising=["r"], either=["df_error"], designs=TWO_GROUP, source=_R)
def t_from_r(r: FloatArray, df_error: FloatArray) -> FloatArray:
    """t = r · sqrt(df2 / (1 - r²))."""
    return r * np.sqrt(df_error / ((1 - r) * (1 + r)))


@relation(gives="fisher_z", rising=["r"], designs=TWO_GROUP, source=_Z)
def fisher_z_from_r(r: FloatArray) -> FloatArray:
    """z_r = artanh r."""
    return np.arctanh(r)


@relation(gives="r", rising=["fisher_z"], designs=TWO_GROUP, source=_Z)
def r_from_fisher_z(fisher_z: FloatArray) -> FloatArray:
    """r = tanh z_r."""
    return np.tanh(fisher_z)
