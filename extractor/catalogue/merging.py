"""Merging subgroups into the group they make up.

Merging is exact: the union's mean and standard deviation follow from its parts (Cochrane Handbook, ch. 6,
6.5.2.10, gives the formula for two groups; locator from memory). Averaging the standard deviations would drop
the variation between the subgroups' means. There is no relation here: which subgroups make up a group is for
the coder to decide.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from extractor.catalogue.relation import FloatArray


def merged_groups(n: ArrayLike, mean: ArrayLike, sd: ArrayLike) -> tuple[FloatArray, FloatArray, FloatArray]:
    """n, mean and standard deviation of the union of groups that share no participant.

    Parameters
    ----------
    n, mean, sd : of the groups, along the last axis, shape (..., groups). The SD of a single participant is
        not read. A group with an n of 0 or NaN is no part of the union.

    Returns
    -------
    tuple of arrays of shape (...,)
        NaN where a part lacks a number, and for the SD of a union of one participant.

    Raises
    ------
    ValueError
        when the shapes differ or an n is negative.
    """
    sizes, means, sds = (np.asarray(x, dtype=np.float64) for x in (n, mean, sd))
    if not sizes.shape == means.shape == sds.shape or sizes.ndim < 1:
        raise ValueError(f"n, mean and sd differ in shape: {sizes.shape}, {means.shape}, {sds.shape}")
    sizes = np.where(np.isnan(sizes), 0.0, sizes)
    if (sizes < 0).any():
        raise ValueError("a group cannot have fewer than 0 participants")
    part = sizes > 0
    means = np.where(part, means, 0.0)
    within = np.where(part & (sizes != 1), (sizes - 1) * sds**2, 0.0).sum(axis=-1)
    total = sizes.sum(axis=-1)
    with np.errstate(divide="ignore", invalid="ignore"):
        grand = (sizes * means).sum(axis=-1) / total
        between = (sizes * (means - grand[..., None]) ** 2).sum(axis=-1)
        variance = np.where(total > 1, (within + between) / (total - 1), np.nan)
    return total, grand, np.sqrt(variance)
