"""Merging subgroups into the group they make up, and splitting a control group that several arms share.

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


def split_control(n: ArrayLike, arms: ArrayLike) -> FloatArray:
    """Participants of a shared control group for each of ``arms`` comparisons: n / arms.

    The mean and the standard deviation stay as they are; of a 2 x 2 table both counts are divided. The parts
    are not whole numbers in general. This keeps participants from being counted twice but only partly removes
    the dependence of the comparisons (Cochrane Handbook, ch. 23, 23.3.4; locator from memory).

    Raises
    ------
    ValueError
        when the number of arms is not a whole number of at least 1.
    """
    sizes, parts = np.asarray(n, dtype=np.float64), np.asarray(arms, dtype=np.float64)
    if not ((parts >= 1) & (parts % 1 == 0)).all():
        raise ValueError("a control group is shared by a whole number of arms, at least 1")
    return np.asarray(sizes / parts)
