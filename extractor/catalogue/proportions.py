"""A binary outcome in two groups: the 2 x 2 table, its odds ratio, chi-square and phi.

Groups are the rows of the table: a and b are the participants of group 1 with and without the event, c and d
those of group 2. Counts are exact, so most relations conclude nothing from counts that are not known. A
chi-square with Yates's continuity correction is checked against the counts but leads to no effect size.
"""

from __future__ import annotations

import numpy as np
from scipy import special

from extractor.catalogue.branches import signed_image, square_image
from extractor.catalogue.relation import TWO_GROUP, FloatArray, Grade, Interval, relation

_TABLE = "definition of the 2 x 2 table: a, b in group 1 and c, d in group 2"
_ODDS = "definition of the odds ratio"
_WOOLF = "Woolf (1955), variance of the log odds ratio: 1/a + 1/b + 1/c + 1/d"
_WALD = "confidence limits from the normal distribution on the log scale (Cochrane Handbook, ch. 6)"
_CHI = "Pearson (1900), chi-square of a 2 x 2 table on one df, without continuity correction"
_YATES = "Yates (1934), continuity correction"
_PHI = "phi = sqrt(chi-square / N) with one df, the correlation of two binary variables (identity)"
_D = "Rosenthal (1994); Lipsey & Wilson (2001): d = 2·φ / sqrt(1 - φ²)"
_R = "phi is the product-moment correlation of two binary variables (identity)"
_COUNTS = ("count_a", "count_b", "count_c", "count_d")
_ASYMMETRY = 0.25


@relation(gives="n_total", rising=_COUNTS, designs=TWO_GROUP, source=_TABLE)
def total_from_counts(
    count_a: FloatArray, count_b: FloatArray, count_c: FloatArray, count_d: FloatArray
) -> FloatArray:
    """N = a + b + c + d."""
    return count_a + count_b + count_c + count_d


@relation(gives="n", rising=_COUNTS, designs=TWO_GROUP, source=_TABLE)
def sizes_from_counts(
    count_a: FloatArray, count_b: FloatArray, count_c: FloatArray, count_d: FloatArray
) -> FloatArray:
    """n1 = a + b, n2 = c + d."""
    return np.stack([count_a + count_b, count_c + count_d], axis=-1)


@relation(gives="odds_ratio", exact=[*_COUNTS, "contrast_weight"], designs=TWO_GROUP, source=_ODDS)
def odds_ratio_from_counts(
    count_a: FloatArray,
    count_b: FloatArray,
    count_c: FloatArray,
    count_d: FloatArray,
    contrast_weight: FloatArray,
) -> FloatArray:
    """OR = a·d / (b·c) for the contrast 1 - 2, its reciprocal for 2 - 1."""
    along, across = count_a * count_d, count_b * count_c
    forward = contrast_weight[:, 0] > 0
    return np.where(forward, along, across) / np.where(forward, across, along)


@relation(gives="se_log_odds_ratio", falling=_COUNTS, designs=TWO_GROUP, source=_WOOLF)
def log_odds_ratio_error_from_counts(
    count_a: FloatArray, count_b: FloatArray, count_c: FloatArray, count_d: FloatArray
) -> FloatArray:
    """SE(ln OR) = sqrt(1/a + 1/b + 1/c + 1/d)."""
    return np.sqrt(1 / count_a + 1 / count_b + 1 / count_c + 1 / count_d)


def _log_width(low: FloatArray, high: FloatArray, level: FloatArray) -> FloatArray:
    return np.asarray((np.log(high) - np.log(low)) / (2 * special.ndtri((1 + level) / 2)))


def _log_width_image(
    odds_ratio: Interval, effect_ci_low: Interval, effect_ci_high: Interval, confidence_level: Interval
) -> Interval:
    level = confidence_level[0]
    least = _log_width(effect_ci_low[1], effect_ci_high[0], level)
    return least, _log_width(effect_ci_low[0], effect_ci_high[1], level)


@relation(
    gives="se_log_odds_ratio",
    image=_log_width_image,
    exact=["confidence_level"],
    designs=TWO_GROUP,
    grade=Grade.APPROXIMATION,
    assumes="confidence limits of the odds ratio from the normal distribution on the log scale",
    source=_WALD,
    accuracy=1e-12,
)
def log_odds_ratio_error_from_limits(
    odds_ratio: FloatArray,
    effect_ci_low: FloatArray,
    effect_ci_high: FloatArray,
    confidence_level: FloatArray,
) -> FloatArray:
    """SE(ln OR) = (ln U - ln L) / (2·z_crit).

    The odds ratio must lie near the middle of its limits on the log scale, to a quarter of half the width.
    Other limits belong to another effect size, or are not of this kind.
    """
    with np.errstate(all="ignore"):
        centre = (np.log(effect_ci_high) + np.log(effect_ci_low)) / 2
        half = (np.log(effect_ci_high) - np.log(effect_ci_low)) / 2
        fits = (effect_ci_low > 0) & (np.abs(np.log(odds_ratio) - centre) <= _ASYMMETRY * half)
        return np.where(fits, _log_width(effect_ci_low, effect_ci_high, confidence_level), np.nan)


def _margins(a: FloatArray, b: FloatArray, c: FloatArray, d: FloatArray) -> FloatArray:
    return (a + b) * (c + d) * (a + c) * (b + d)


@relation(gives="chi_squared", exact=_COUNTS, designs=TWO_GROUP, source=_CHI)
def chi_squared_from_counts(
    count_a: FloatArray, count_b: FloatArray, count_c: FloatArray, count_d: FloatArray
) -> FloatArray:
    """χ² = N·(ad - bc)² / ((a + b)(c + d)(a + c)(b + d))."""
    total = count_a + count_b + count_c + count_d
    crossed = count_a * count_d - count_b * count_c
    return total * crossed**2 / _margins(count_a, count_b, count_c, count_d)


@relation(gives="chi_squared_corrected", exact=_COUNTS, designs=TWO_GROUP, source=_YATES)
def corrected_chi_squared_from_counts(
    count_a: FloatArray, count_b: FloatArray, count_c: FloatArray, count_d: FloatArray
) -> FloatArray:
    """χ²_c = N·max(|ad - bc| - N/2, 0)² / ((a + b)(c + d)(a + c)(b + d))."""
    total = count_a + count_b + count_c + count_d
    crossed = np.maximum(np.abs(count_a * count_d - count_b * count_c) - total / 2, 0)
    return np.asarray(total * crossed**2 / _margins(count_a, count_b, count_c, count_d))


@relation(gives="phi", exact=[*_COUNTS, "contrast_weight"], designs=TWO_GROUP, source=_PHI)
def phi_from_counts(
    count_a: FloatArray,
    count_b: FloatArray,
    count_c: FloatArray,
    count_d: FloatArray,
    contrast_weight: FloatArray,
) -> FloatArray:
    """φ = (ad - bc) / sqrt((a + b)(c + d)(a + c)(b + d)) for the contrast 1 - 2."""
    crossed = count_a * count_d - count_b * count_c
    return np.asarray(
        np.sign(contrast_weight[:, 0]) * crossed / np.sqrt(_margins(count_a, count_b, count_c, count_d))
    )


def _phi_image(
    chi_squared: Interval, n_total: Interval, direction: Interval, current: Interval | None
) -> Interval:
    least, most = np.sqrt(chi_squared[0] / n_total[1]), np.sqrt(chi_squared[1] / n_total[0])
    magnitude = np.where(np.isnan(least), 0.0, least), np.where(np.isnan(most), np.inf, most)
    return signed_image(magnitude, direction, current)


@relation(gives="phi", image=_phi_image, narrows=True, designs=TWO_GROUP, source=_PHI)
def phi_from_chi_squared(chi_squared: FloatArray, n_total: FloatArray, direction: FloatArray) -> FloatArray:
    """φ = sign · sqrt(χ² / N), with one df and no continuity correction."""
    return direction * np.sqrt(chi_squared / n_total)


def _chi_image(phi: Interval, n_total: Interval) -> Interval:
    least, most = square_image(phi)
    return least * n_total[0], most * n_total[1]


@relation(gives="chi_squared", image=_chi_image, designs=TWO_GROUP, source=_PHI)
def chi_squared_from_phi(phi: FloatArray, n_total: FloatArray) -> FloatArray:
    """χ² = N · φ²."""
    return n_total * phi**2


@relation(
    gives="cohens_d",
    rising=["phi"],
    designs=TWO_GROUP,
    grade=Grade.APPROXIMATION,
    assumes="phi is taken as the correlation of group and a continuous outcome, with groups of equal size",
    source=_D,
)
def d_from_phi(phi: FloatArray) -> FloatArray:
    """d = 2·φ / sqrt(1 - φ²)."""
    return 2 * phi / np.sqrt((1 - phi) * (1 + phi))


@relation(
    gives="r",
    rising=["phi"],
    designs=TWO_GROUP,
    grade=Grade.APPROXIMATION,
    assumes="phi is taken as the correlation of group and a continuous outcome",
    source=_R,
)
def r_from_phi(phi: FloatArray) -> FloatArray:
    """r = φ."""
    return phi
