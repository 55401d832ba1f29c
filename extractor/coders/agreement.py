"""Agreement of coders: raw, corrected for chance, and for numbers the intraclass correlation.

Ratings are arrays of shape (subjects, coders). Words are category codes 0, 1, ..., with -1 where a coder did not rate
the subject; numbers are floats, NaN where missing. A coefficient that the data leave undefined is NaN, as is a
confidence limit: where only one category was ever used, chance agreement is total and kappa says nothing.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy import stats

FloatArray = NDArray[np.float64]
Codes = NDArray[np.int64]

MISSING = -1
"""Code of a rating that was not given."""
_NOISE = 1e-24
"""Squared relative size below which a sum of squares is only rounding error."""


@dataclass(frozen=True, slots=True)
class Coefficient:
    """An agreement coefficient with its confidence limits; NaN where undefined."""

    value: float
    low: float = math.nan
    high: float = math.nan


UNDEFINED = Coefficient(math.nan)


def counts_of(codes: Codes, categories: int) -> FloatArray:
    """How many coders put each subject into each category, shape (subjects, categories)."""
    found = np.zeros((len(codes), categories))
    subject, coder = np.nonzero(codes != MISSING)
    np.add.at(found, (subject, codes[subject, coder]), 1.0)
    return found


def raw_agreement(counts: FloatArray) -> float:
    """Share of agreeing pairs of ratings, averaged over subjects with at least two ratings (Fleiss 1971).

    Parameters
    ----------
    counts : as ``counts_of`` gives them.
    """
    agreeing = _agreeing(_rated_twice(counts))
    return float(agreeing.mean()) if len(agreeing) else math.nan


def cohens_kappa(codes: Codes, level: float = 0.95) -> Coefficient:
    """Cohen's kappa of two coders, with large-sample limits.

    Parameters
    ----------
    codes : shape (subjects, 2); subjects that one coder did not rate are left out.
    level : confidence level of the limits, as a proportion.

    Sources: Cohen 1960, Educational and Psychological Measurement 20, 37-46; variance by Fleiss, Cohen & Everitt
    1969, Psychological Bulletin 72, 323-327.
    """
    both = codes[(codes != MISSING).all(axis=1)]
    if not len(both):
        return UNDEFINED
    categories = int(both.max()) + 1
    cross = np.zeros((categories, categories))
    np.add.at(cross, (both[:, 0], both[:, 1]), 1.0 / len(both))
    first, second = cross.sum(axis=1), cross.sum(axis=0)
    observed, chance = float(np.trace(cross)), float(first @ second)
    if len(both) < 2 or chance >= 1.0 - 1e-12:
        return UNDEFINED
    kappa = (observed - chance) / (1 - chance)
    # the published sum, written about its mean so that it loses no digits
    share = np.eye(categories) * (1 - chance) - (second[:, None] + first[None, :]) * (1 - observed)
    share -= float((cross * share).sum())
    variance = float((cross * share**2).sum()) / (len(both) * (1 - chance) ** 4)
    half = float(stats.norm.ppf((1 + level) / 2)) * math.sqrt(variance)
    return _limited(kappa, half)


def fleiss_kappa(counts: FloatArray, level: float = 0.95) -> Coefficient:
    """Fleiss' kappa of two or more coders, who need not be the same for each subject.

    Parameters
    ----------
    counts : as ``counts_of`` gives them; subjects with fewer than two ratings are left out.

    The limits come from each subject's linear share in the coefficient, with t quantiles.
    Sources: Fleiss 1971, Psychological Bulletin 76, 378-382; variance by Gwet 2021, Educational and Psychological
    Measurement 81, 781-790 (locator from memory; it is the delta method, written out here).
    """
    rated = _rated_twice(counts)
    shares = rated / rated.sum(axis=1, keepdims=True)
    used = shares.mean(axis=0) if len(rated) else np.zeros(counts.shape[1])
    chance = float(used @ used)
    return _corrected(_agreeing(rated), chance, 2 * (shares @ used - chance), level)


def gwets_ac1(counts: FloatArray, categories: int | None = None, level: float = 0.95) -> Coefficient:
    """Gwet's AC1 of two or more coders, which does not collapse when one category dominates.

    Parameters
    ----------
    counts : as ``counts_of`` gives them; subjects with fewer than two ratings are left out.
    categories : how many the coders could choose from; by default those that ``counts`` has columns for.

    Source: Gwet 2008, British Journal of Mathematical and Statistical Psychology 61, 29-48; limits with t quantiles.
    """
    size = max(categories or 0, counts.shape[1])
    if size < 2:
        return UNDEFINED
    rated = _rated_twice(counts)
    shares = rated / rated.sum(axis=1, keepdims=True)
    used = shares.mean(axis=0) if len(rated) else np.zeros(counts.shape[1])
    spread = float(used @ used)
    moved = -2 * (shares @ used - spread) / (size - 1)
    return _corrected(_agreeing(rated), (1 - spread) / (size - 1), moved, level)


def icc_agreement(values: FloatArray, level: float = 0.95) -> Coefficient:
    """Intraclass correlation for absolute agreement of single measures, coders and subjects both random.

    Parameters
    ----------
    values : shape (subjects, coders); subjects with a missing value are left out.

    A coder who is always 10 higher lowers it, which Pearson's r would not see. Limits are undefined where the coders
    never differ. Sources: Shrout & Fleiss 1979, Psychological Bulletin 86, 420-428, ICC(2,1); McGraw & Wong 1996,
    Psychological Methods 1, 30-46, ICC(A,1).
    """
    complete = values[np.isfinite(values).all(axis=1)]
    n, k = complete.shape
    if n < 2 or k < 2:
        return UNDEFINED
    largest = float(np.abs(complete).max())
    if largest == 0:
        return UNDEFINED
    # in units of the largest value, so that no square of a tiny one is lost, and about the grand mean, so that large
    # ones lose no digits
    complete = complete / largest
    centred = complete - complete.mean()
    by_subject, by_coder = centred.mean(axis=1, keepdims=True), centred.mean(axis=0, keepdims=True)
    rest = centred - by_subject - by_coder
    subjects = float(k * (by_subject**2).sum() / (n - 1))
    coders = float(n * (by_coder**2).sum() / (k - 1))
    error = float((rest**2).sum() / ((n - 1) * (k - 1)))
    total = subjects + (k - 1) * error + k * (coders - error) / n
    if total <= _NOISE:
        return UNDEFINED
    icc = (subjects - error) / total
    if coders + error <= _NOISE:
        return Coefficient(icc)
    ratio = k * icc / (n * (1 - icc))
    a, b = ratio, 1 + ratio * (n - 1)
    divisor = (a * coders) ** 2 / (k - 1) + (b * error) ** 2 / ((n - 1) * (k - 1))
    if divisor == 0:
        # subjects that do not differ, coded by coders who differ by the same everywhere
        return Coefficient(icc)
    df = (a * coders + b * error) ** 2 / divisor
    upper = float(stats.f.ppf((1 + level) / 2, n - 1, df))
    lower = float(stats.f.ppf((1 + level) / 2, df, n - 1))
    spread = k * coders + (k * n - k - n) * error
    return Coefficient(
        icc,
        n * (subjects - upper * error) / (upper * spread + n * subjects),
        n * (lower * subjects - error) / (spread + n * lower * subjects),
    )


def krippendorffs_alpha(values: FloatArray, metric: Literal["nominal", "interval"]) -> float:
    """Krippendorff's alpha of two or more coders, with missing values.

    Parameters
    ----------
    values : shape (subjects, coders), NaN where missing; category codes as floats for ``nominal``.
    metric : how two values differ: at all (``nominal``), or by the square of their distance (``interval``).

    Subjects with a single value take no part. Source: Krippendorff 2011, Computing Krippendorff's alpha-reliability,
    University of Pennsylvania, Annenberg School for Communication.
    """
    known = np.isfinite(values)
    paired = known.sum(axis=1) >= 2
    values, known = values[paired], known[paired]
    total = int(known.sum())
    if not total:
        return math.nan
    each = known.sum(axis=1)
    if metric == "nominal":
        categories, codes = np.unique(values[known], return_inverse=True)
        filled = np.full(values.shape, MISSING, dtype=np.int64)
        filled[known] = codes.ravel()
        counts = counts_of(filled, len(categories))
        within = each.astype(float) ** 2 - (counts**2).sum(axis=1)
        overall = total**2 - float((counts.sum(axis=0) ** 2).sum())
    else:
        centred = np.where(known, values - values[known].mean(), 0.0)
        within = 2 * (each * (centred**2).sum(axis=1) - centred.sum(axis=1) ** 2)
        overall = 2 * (total * float((centred**2).sum()) - float(centred.sum()) ** 2)
    expected = overall / (total * (total - 1))
    if expected <= _NOISE * float(np.abs(values[known]).max()) ** 2:
        return math.nan
    return 1 - float((within / (each - 1)).sum()) / total / expected


def _rated_twice(counts: FloatArray) -> FloatArray:
    return np.asarray(counts[counts.sum(axis=1) >= 2])


def _agreeing(counts: FloatArray) -> FloatArray:
    """Share of agreeing pairs of ratings, shape (subjects,)."""
    each = counts.sum(axis=1)
    return np.asarray((counts * (counts - 1)).sum(axis=1) / (each * (each - 1)))


def _corrected(agreeing: FloatArray, chance: float, moved: FloatArray, level: float) -> Coefficient:
    """(observed - chance) / (1 - chance) with limits from each subject's share in it.

    Parameters
    ----------
    agreeing : share of agreeing pairs, shape (subjects,).
    moved : by how much a subject moves the chance agreement, per unit of weight; sums to zero.
    """
    n = len(agreeing)
    if not n or chance >= 1 - 1e-12:
        return UNDEFINED
    observed = float(agreeing.mean())
    value = (observed - chance) / (1 - chance)
    if n < 2:
        return Coefficient(value)
    shares = (agreeing - observed) / (1 - chance) - (1 - value) * moved / (1 - chance)
    half = float(stats.t.ppf((1 + level) / 2, n - 1)) * math.sqrt(float((shares**2).sum()) / (n * (n - 1)))
    return _limited(value, half)


def _limited(value: float, half: float) -> Coefficient:
    """Limits at a distance, cut where no coefficient can be."""
    return Coefficient(value, max(value - half, -1.0), min(value + half, 1.0))
