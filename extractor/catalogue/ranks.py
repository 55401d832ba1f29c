"""Rank tests: Kruskal-Wallis H, Mann-Whitney U, Wilcoxon's sums of ranks.

The names of two indices are crossed in the literature: H/(N - 1), exactly the eta squared of the ranks, is
usually labelled epsilon squared, and (H - k + 1)/(N - k), exactly Kelley's epsilon squared of the ranks, is
usually labelled eta squared. Here each is called what it is. Neither leads to an index of the raw scores; the
steps from ranks to d, and from a z of unsaid origin to r, name their assumptions.
"""

from __future__ import annotations

import numpy as np
from scipy import special

from extractor.catalogue.branches import signed_image, square_image
from extractor.catalogue.relation import (
    ONE_FACTOR,
    PAIRED,
    TWO_GROUP,
    FloatArray,
    Grade,
    Interval,
    relation,
)

_ETA = "eta squared of the ranks with H corrected for ties (identity; reported by Tomczak & Tomczak 2014)"
_EPSILON = "Kelley (1935), epsilon squared, applied to the ranks (identity)"
_BISERIAL = "rank-biserial correlation 1 - 2U/(n1·n2) (Wendt 1972; Kerby 2014)"
_RANK_SUM = "Mann & Whitney (1947): U1 = W1 - n1(n1 + 1)/2"
_NORMAL = "Mann & Whitney (1947), mean n1·n2/2 and variance n1·n2(N + 1)/12 of U"
_ROOT = "Rosenthal (1991), r = z / sqrt(N)"
_SHIFT = "McGraw & Wong (1992): P(X > Y) = Φ(d / sqrt(2)) for normal groups of equal variance"
_PAIRS = "Kerby (2014), matched-pairs rank-biserial: (favourable - unfavourable rank sum) / sum of all ranks"


@relation(gives="rank_eta_squared", rising=["h_value"], falling=["n_total"], designs=ONE_FACTOR, source=_ETA)
def rank_eta_squared_from_h(h_value: FloatArray, n_total: FloatArray) -> FloatArray:
    """η² of the ranks = H / (N - 1)."""
    return h_value / (n_total - 1)


@relation(gives="h_value", rising=["rank_eta_squared", "n_total"], designs=ONE_FACTOR, source=_ETA)
def h_from_rank_eta_squared(rank_eta_squared: FloatArray, n_total: FloatArray) -> FloatArray:
    """H = η² of the ranks · (N - 1)."""
    return rank_eta_squared * (n_total - 1)


@relation(
    gives="rank_epsilon_squared",
    rising=["h_value"],
    exact=["n_total", "k_groups"],
    designs=ONE_FACTOR,
    source=_EPSILON,
)
def rank_epsilon_squared_from_h(h_value: FloatArray, n_total: FloatArray, k_groups: FloatArray) -> FloatArray:
    """ε² of the ranks = (H - k + 1) / (N - k)."""
    return (h_value - k_groups + 1) / (n_total - k_groups)


@relation(
    gives="h_value",
    rising=["rank_epsilon_squared"],
    exact=["n_total", "k_groups"],
    designs=ONE_FACTOR,
    source=_EPSILON,
)
def h_from_rank_epsilon_squared(
    rank_epsilon_squared: FloatArray, n_total: FloatArray, k_groups: FloatArray
) -> FloatArray:
    """H = ε² of the ranks · (N - k) + k - 1."""
    return rank_epsilon_squared * (n_total - k_groups) + k_groups - 1


def _magnitude(value: Interval) -> Interval:
    """Interval of an absolute value; an undefined end says nothing."""
    squared = square_image(value)
    least = np.where(np.isnan(squared[0]), 0.0, np.sqrt(squared[0]))
    return least, np.where(np.isnan(squared[1]), np.inf, np.sqrt(squared[1]))


def _biserial_image(
    u_value: Interval, n: Interval, direction: Interval, current: Interval | None
) -> Interval:
    low = 1 - 2 * u_value[1] / n[0].prod(axis=-1)
    high = 1 - 2 * u_value[0] / n[1].prod(axis=-1)
    return signed_image(_magnitude((low, high)), direction, current)


@relation(
    gives="rank_biserial",
    image=_biserial_image,
    narrows=True,
    designs=TWO_GROUP,
    source=_BISERIAL,
    accuracy=1e-12,
)
def rank_biserial_from_u(u_value: FloatArray, n: FloatArray, direction: FloatArray) -> FloatArray:
    """r_rb = sign · |1 - 2U / (n1·n2)|.

    Either group's U may be printed, or the smaller of the two: they give the same size and opposite signs, so
    U alone has no direction.
    """
    return np.asarray(direction * np.abs(1 - 2 * u_value / n.prod(axis=-1)))


@relation(
    gives="rank_biserial",
    either=["rank_sum"],
    exact=["n", "contrast_weight"],
    designs=TWO_GROUP,
    source=_RANK_SUM,
    accuracy=1e-12,
)
def rank_biserial_from_rank_sum(
    rank_sum: FloatArray, n: FloatArray, contrast_weight: FloatArray
) -> FloatArray:
    """r_rb = ±(2·(W1 - n1(n1 + 1)/2) / (n1·n2) - 1), + for the contrast 1 - 2."""
    first, second = n[:, 0], n[:, 1]
    superiority = 2 * (rank_sum - first * (first + 1) / 2) / (first * second) - 1
    return np.asarray(np.sign(contrast_weight[:, 0]) * superiority)


def _u_image(z_value: Interval, n: Interval) -> Interval:
    least, most = _magnitude(z_value)
    return _smaller_u(most, n[0]), _smaller_u(least, n[0])


def _smaller_u(size_of_z: FloatArray, n: FloatArray) -> FloatArray:
    product, total = n.prod(axis=-1), n.sum(axis=-1)
    return np.asarray(product / 2 - size_of_z * np.sqrt(product * (total + 1) / 12))


@relation(
    gives="u_value",
    image=_u_image,
    exact=["n"],
    designs=TWO_GROUP,
    grade=Grade.APPROXIMATION,
    assumes="z is that of a Mann-Whitney test without ties and without continuity correction",
    source=_NORMAL,
    accuracy=1e-12,
)
def u_from_z(z_value: FloatArray, n: FloatArray) -> FloatArray:
    """U = n1·n2/2 - |z| · sqrt(n1·n2·(N + 1)/12), the smaller of the two U."""
    return _smaller_u(np.abs(z_value), n)


def _root_image(
    z_value: Interval, n_total: Interval, direction: Interval, current: Interval | None
) -> Interval:
    least, most = _magnitude(z_value)
    return signed_image((least / np.sqrt(n_total[1]), most / np.sqrt(n_total[0])), direction, current)


@relation(gives="rank_r", image=_root_image, narrows=True, designs=TWO_GROUP, source=_ROOT)
def rank_r_from_z(z_value: FloatArray, n_total: FloatArray, direction: FloatArray) -> FloatArray:
    """r_z = sign · |z| / sqrt(N); another quantity than the rank-biserial correlation."""
    return direction * np.abs(z_value) / np.sqrt(n_total)


@relation(
    gives="r",
    image=_root_image,
    narrows=True,
    designs=TWO_GROUP,
    grade=Grade.ASSUMPTION,
    assumes="z is the normal deviate of a comparison of two means, taken for its t",
    source=_ROOT,
)
def r_from_normal_deviate(z_value: FloatArray, n_total: FloatArray, direction: FloatArray) -> FloatArray:
    """r = sign · |z| / sqrt(N)."""
    return direction * np.abs(z_value) / np.sqrt(n_total)


@relation(
    gives="cohens_d",
    rising=["rank_biserial"],
    designs=TWO_GROUP,
    grade=Grade.APPROXIMATION,
    assumes="normal distributions of equal variance behind the ranks (normal shift)",
    source=_SHIFT,
    accuracy=1e-12,
)
def d_from_rank_biserial(rank_biserial: FloatArray) -> FloatArray:
    """d = sqrt(2) · Φ⁻¹((1 + r_rb) / 2); none where the groups do not overlap at all."""
    overlapping = np.abs(rank_biserial) < 1
    return np.asarray(np.sqrt(2) * special.ndtri(np.where(overlapping, (1 + rank_biserial) / 2, np.nan)))


def _pairs_image(
    signed_rank_sum: Interval, n_total: Interval, direction: Interval, current: Interval | None
) -> Interval:
    low = 1 - 4 * signed_rank_sum[1] / (n_total[0] * (n_total[0] + 1))
    high = 1 - 4 * signed_rank_sum[0] / (n_total[1] * (n_total[1] + 1))
    return signed_image(_magnitude((low, high)), direction, current)


@relation(
    gives="rank_biserial",
    image=_pairs_image,
    narrows=True,
    designs=PAIRED,
    grade=Grade.APPROXIMATION,
    assumes="no pair without a difference, so that all pairs are ranked",
    source=_PAIRS,
    accuracy=1e-12,
)
def rank_biserial_from_signed_ranks(
    signed_rank_sum: FloatArray, n_total: FloatArray, direction: FloatArray
) -> FloatArray:
    """r_rb = sign · |1 - 4T / (N(N + 1))|, T either sum of signed ranks."""
    return direction * np.abs(1 - 4 * signed_rank_sum / (n_total * (n_total + 1)))
