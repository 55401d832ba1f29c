"""Granularity: which printed means and SDs whole-number data can produce.

n people who answer k whole-number items have a total T that is a whole number, so their mean is one of the
fractions T/(n*k); the sum of squares limits their SD in the same way. A printed pair that no such data round
to is out of reach. This holds only for unweighted whole-number responses, complete data, and the stated n, k.

All comparisons are made in whole numbers: a printed number is a closed interval whose ends are integers
over a decimal scale (`Printed`), so nothing is lost to binary fractions. Array in, array out; arguments
broadcast. A row that cannot be judged (a value missing or not whole, products too large for 64 bits) counts
as reachable; `mean_can_be_checked` and `sd_can_be_checked` tell such rows apart.

Sources: Brown & Heathers 2017 (GRIM); Anaya 2016 and Allard 2018 (GRIMMER); Heathers & Brown 2019 (DEBIT).
"""

from collections.abc import Callable
from typing import Any, Literal, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

Numbers = ArrayLike
Flags = NDArray[np.bool_]
Ints = NDArray[np.int64]
Floats = NDArray[np.float64]
Rounding = Literal["nearest", "truncated", "either"]
Spread = Literal["sd", "variance", "se"]

_LARGEST = 2.0**61  # products stay below this, which leaves room for a doubling or a sum of two
_LARGEST_COUNT = 2**30
_UNLIMITED = 2**31  # above any total whose square stays below _LARGEST
_MOST_TOTALS = 4096  # candidate totals one row may have
_MOST_MIDDLES = 64  # candidate middle values in a set of three
_POWERS_OF_TEN = 10.0 ** np.arange(16)
_CHUNK = 2**16  # rows
_EPS = float(np.finfo(np.float64).eps)


class Printed(NamedTuple):
    """Closed intervals [low/scale, high/scale] holding the true values behind printed numbers.

    Three int64 arrays of one shape. A scale of 0 marks a number that is missing or could not be read.
    """

    low: Ints
    high: Ints
    scale: Ints


class NearestMeans(NamedTuple):
    """The reachable means around a printed one; float arrays, NaN where nothing is known.

    The printed ones are total/(n*items) to the decimals of the mean that was given, ties away from zero.
    """

    total_below: Floats
    total_above: Floats
    printed_below: Floats
    printed_above: Floats


def printed_interval(value: Numbers, decimals: Numbers, rounding: Rounding = "nearest") -> Printed:
    """The values that print as `value` with `decimals` decimals (0 to 15), in whole half units.

    nearest: half a unit either way; both ends included, as programs differ on ties.
    truncated: from the printed number to one unit further from zero; a printed zero reaches both ways.
    either: the union of the two.

    Left unread, rather than rounded a second time, is a value with more decimals than stated (5.193 with 2),
    or more than 15 digits. Raises ValueError for an unknown rounding rule.
    """
    if rounding not in ("nearest", "truncated", "either"):
        raise ValueError(f"rounding must be nearest, truncated or either, not {rounding!r}")
    places, usable = _whole(decimals, 0, len(_POWERS_OF_TEN) - 1)
    number = np.asarray(value, dtype=np.float64)
    power = _POWERS_OF_TEN[places]
    usable = usable & (np.abs(number) <= 1e15 / power)
    units = np.where(usable, number, 0.0) * power
    whole = np.rint(units).astype(np.int64)
    usable &= np.abs(units - whole) <= 1e-6 + 4 * _EPS * np.abs(units)
    toward_zero = 0 if rounding == "truncated" else 1
    away = 1 if rounding == "nearest" else 2
    return Printed(
        low=2 * whole - np.where(whole > 0, toward_zero, away),
        high=2 * whole + np.where(whole < 0, toward_zero, away),
        scale=np.where(usable, 2 * power, 0.0).astype(np.int64),
    )


def informative(n: Numbers, items: Numbers, decimals: Numbers) -> Flags:
    """Whether some means with so many decimals are out of reach: 10**decimals > n*items. NaN gives False."""
    count = np.asarray(n, dtype=np.float64) * np.asarray(items, dtype=np.float64)
    return np.asarray(10.0 ** np.asarray(decimals, dtype=np.float64) > count)


def mean_can_be_checked(n: Numbers, items: Numbers, low: Numbers, high: Numbers, scale: Numbers) -> Flags:
    """Whether `mean_is_reachable` judges the row.

    Needed are n and items whole, 1 to 2**30; low <= high; scale > 0; |low|, |high| times n*items < 2**61.
    """
    return _totals(n, items, low, high, scale)[2]


def mean_is_reachable(n: Numbers, items: Numbers, low: Numbers, high: Numbers, scale: Numbers) -> Flags:
    """GRIM: whether a whole number T exists with low/scale <= T/(n*items) <= high/scale.

    `items` whole-number items are averaged into one score (1 for a single response). Exact. True where the
    row cannot be checked. Source: Brown & Heathers 2017.
    """
    first, last, usable = _totals(n, items, low, high, scale)
    return np.asarray(~usable | (first <= last))


def sd_can_be_checked(
    n: Numbers,
    items: Numbers,
    mean: Printed,
    sd: Printed,
    scale_min: Numbers = np.nan,
    scale_max: Numbers = np.nan,
    spread: Spread = "sd",
) -> Flags:
    """Whether `sd_is_reachable` judges the row.

    Needed are n of at least 2, a mean, an SD that is not negative, scale limits that are whole numbers in
    order or unknown, at most 4096 totals compatible with the mean, and products that 64 bits hold.
    """
    return _judge_sd(lambda usable, _: usable, spread, n, items, scale_min, scale_max, *mean, *sd)


def sd_is_reachable(
    n: Numbers,
    items: Numbers,
    mean: Printed,
    sd: Printed,
    scale_min: Numbers = np.nan,
    scale_max: Numbers = np.nan,
    spread: Spread = "sd",
) -> Flags:
    """GRIMMER: whether whole-number data exist whose mean and SD (divisor n - 1) print as given.

    `scale_min` and `scale_max` are the whole-number limits of one item, NaN where unknown; a lower limit
    may stand alone, an upper limit alone is not used. `spread` says what `sd` holds: SDs, variances or
    standard errors of the mean. True where the row cannot be checked. A row whose mean is already out of
    reach is False too, so ask `mean_is_reachable` first to know which number to doubt.

    Count in units of 1/items: the scores are whole numbers with total T and sum of squares Q, and their
    variance is (n*Q - T**2)/(n*(n - 1)). For every T compatible with the printed mean, the printed spread
    confines n*Q - T**2, hence Q, to a range of whole numbers. Each condition then put on Q is necessary:

    - Q and T have the same parity, since y**2 and y do;
    - Q is at least the sum of squares of the most even split of T, and at most that of the most extreme
      split within the limits (convexity of the square);
    - n = 2: 2Q - T**2 is the square of the difference, which has the parity of T;
    - n = 3: some middle value leaves a pair that fulfils the line above. The middle deviation of three is
      at most sqrt((3Q - T**2)/18), reached when two are equal, so only values that near to T/3 are tried;
    - n = 4: 4Q - T**2 = (a+b-c-d)**2 + (a-b+c-d)**2 + (a-b-c+d)**2, and no number 4**j*(8*m + 7) is a sum
      of three squares (Legendre). It is 3 modulo 8 for odd T and 4*(Q - T**2/4) for even T; of two
      neighbouring Q of one parity at most one is barred then.

    Without limits this is also sufficient for n of 2, 4 and (up to 64 middle values) 3; enumeration finds no
    gap for n of 5 to 9. With limits, some Q close to the largest are accepted though no data reach them.
    Sources: Anaya 2016; Allard 2018; the conditions for n = 2, 3, 4 are derived here.
    """
    return _judge_sd(_some_total_fits, spread, n, items, scale_min, scale_max, *mean, *sd)


def binary_sd_is_reachable(n: Numbers, mean: Printed, sd: Printed, spread: Spread = "sd") -> Flags:
    """DEBIT: whether n zeros and ones exist whose mean and SD (divisor n - 1) print as given.

    With T ones, n*(n - 1)*s**2 = T*(n - T) = (n**2 - k**2)/4 for k = |n - 2T|: the printed spread confines
    k, and so T to two ranges that mirror each other, one of which must meet the totals the mean allows.
    Exact. True where the row cannot be checked (as for `sd_is_reachable`). Source: Heathers & Brown 2019.
    """
    size, *ends = np.broadcast_arrays(np.asarray(n, dtype=np.float64), *mean, *sd)
    first, last, usable = _totals(size, 1, *ends[:3])
    low, high, measurable = _variation(size, 1, Printed(*ends[3:]), spread)
    count, _ = _whole(size, 2, _LARGEST_COUNT)
    square = count * count
    most = square // 4  # no variation exceeds it, and clipping there keeps four times the bound in range
    widest = square - 4 * np.minimum(low, most + 1)
    near = _root_up(square - 4 * np.minimum(high, most))
    far = _root_down(np.maximum(widest, 0))
    first, last = np.maximum(first, 0), np.minimum(last, count)
    lower = np.maximum(first, -((far - count) // 2)) <= np.minimum(last, (count - near) // 2)
    upper = np.maximum(first, -((-count - near) // 2)) <= np.minimum(last, (count + far) // 2)
    return np.asarray(~(usable & measurable) | ((widest >= 0) & (lower | upper)))


def sd_upper_limit(
    n: Numbers, mean_low: Numbers, mean_high: Numbers, scale_min: Numbers, scale_max: Numbers
) -> Floats:
    """Largest SD (divisor n - 1) of n responses within the scale whose mean lies in [mean_low, mean_high].

    s**2 <= (M - a)*(b - M)*n/(n - 1), concave in M, so the largest value is at the interval's point nearest
    to the middle of the scale. In the units of the mean; padded upward for floating point. NaN where an
    input is missing, n < 2, or the interval does not meet the scale. Source: Bhatia & Davis 2000.
    """
    given = (np.asarray(each, dtype=np.float64) for each in (n, mean_low, mean_high, scale_min, scale_max))
    count, low, high, least, most = (np.where(np.abs(each) < 1e150, each, np.nan) for each in given)
    pad = 4 * _EPS * (np.abs(low) + np.abs(high) + np.abs(least) + np.abs(most))
    usable = (count >= 2) & (low <= high) & (least <= most) & (low <= most + pad) & (high >= least - pad)
    at = np.minimum(np.maximum((least + most) / 2, low), high)
    room = np.maximum(at - least + pad, 0) * np.maximum(most - at + pad, 0) * (least < most)
    bessel = np.where(usable, count, 2.0) / np.where(usable, count - 1, 1.0)
    return np.where(usable, np.sqrt(room * bessel) * (1 + 8 * _EPS), np.nan)


def nearest_reachable_means(n: Numbers, items: Numbers, mean: Numbers, decimals: Numbers) -> NearestMeans:
    """The reachable means just below and above a printed one, the same twice where it is itself a fraction.

    For a sentence such as "290/49 prints 5.92 and 291/49 prints 5.94".
    """
    printed = printed_interval(mean, decimals)
    exact = printed.low + 1
    above, below, usable = _totals(n, items, exact, exact, printed.scale)
    count = _counts(n, items)[0]
    unit = np.maximum(printed.scale // 2, 1)
    usable &= np.maximum(np.abs(above), np.abs(below)).astype(np.float64) * unit < _LARGEST

    def shown(total: Ints) -> Floats:
        size = np.where(usable, np.abs(total), 0)
        return np.where(usable, np.sign(total) * ((2 * size * unit + count) // (2 * count)) / unit, np.nan)

    lower, upper = (np.where(usable, each, np.nan) for each in (below, above))
    return NearestMeans(lower, upper, shown(below), shown(above))


class _Scores(NamedTuple):
    """What is known of n whole numbers, counted from a base that keeps their squares small."""

    n: Ints
    first: Ints  # totals from first to last are to be tried
    last: Ints
    low: Ints  # bounds on n*Q - T**2
    high: Ints
    floored: Ints  # 1 where no score lies below the base
    width: Ints  # the highest score allowed


def _sd_problem(spread: Spread, n: Floats, items: Floats, *rest: NDArray[Any]) -> tuple[Flags, _Scores]:
    """Which rows can be judged, and the numbers to judge them by."""
    least, most, *ends = rest
    first, last, usable = _totals(n, items, *ends[:3])
    low, high, measurable = _variation(n, items, Printed(*ends[3:]), spread)
    count, _ = _whole(n, 2, _LARGEST_COUNT)
    per, _ = _whole(items, 1, _LARGEST_COUNT)
    bottom, floored = _whole(least, -_LARGEST_COUNT, _LARGEST_COUNT)
    top, capped = _whole(most, -_LARGEST_COUNT, _LARGEST_COUNT)
    usable &= measurable & (floored | np.isnan(least)) & (capped | np.isnan(most)) & ~(least > most)
    capped &= floored
    # In this order no product overflows: the limits times n first, then the totals that remain, squared.
    furthest = np.maximum(np.abs(bottom), np.abs(top)).astype(np.float64)
    usable &= furthest * per * count < _LARGEST
    bottom, top = np.where(usable, bottom, 0), np.where(usable, top, 0)
    base = np.where(floored, bottom * per, first // count)
    width = np.where(capped, np.minimum((top - bottom) * per, _UNLIMITED), _UNLIMITED)
    first, last = first - count * base, last - count * base
    first = np.where(floored, np.maximum(first, 0), first)
    last = np.minimum(last, count * width)
    usable &= (last - first < _MOST_TOTALS) & (last.astype(np.float64) ** 2 + high < _LARGEST)
    return usable, _Scores(count, first, last, low, high, floored.astype(np.int64), width)


def _some_total_fits(usable: Flags, scores: _Scores) -> Flags:
    fits = ~usable
    rows = np.flatnonzero(usable & (scores.first <= scores.last))
    step = 0
    while rows.size:  # over the candidate totals, all rows at once
        part = _Scores(*(each[rows] for each in scores))
        found = _sum_of_squares_exists(part, part.first + step)
        fits[rows[found]] = True
        rows = rows[~found & (part.first + step < part.last)]
        step += 1
    return fits


def _sum_of_squares_exists(scores: _Scores, total: Ints) -> Flags:
    """Whether some sum of squares within the bounds meets every condition of `sd_is_reachable`."""
    n, width, floored = scores.n, scores.width, scores.floored == 1
    square = total * total
    share, over = np.divmod(total, n)
    full, rest = np.divmod(total, np.maximum(width, 1))
    smallest = share * total + (share + 1) * over
    largest = np.where(floored, full * width * width + rest * rest, np.iinfo(np.int64).max)
    low = np.maximum(-((-scores.low - square) // n), smallest)
    high = np.minimum((scores.high + square) // n, largest)
    low = low + ((low ^ total) & 1)
    high = high - ((high ^ total) & 1)
    exists: Flags = np.asarray(low <= high)
    for few, refine in ((2, _pair_exists), (3, _triple_exists)):
        rows = np.flatnonzero(exists & (n == few))
        if rows.size:
            exists[rows] = refine(total[rows], low[rows], high[rows], floored[rows], width[rows])
    lone = exists & (n == 4) & (low == high) & (total % 2 == 0)
    exists &= ~(lone & _no_sum_of_three_squares(np.where(lone, low - square // 4, 0)))
    return exists


def _pair_exists(total: Ints, low: Ints, high: Ints, floored: Flags, width: Ints) -> Flags:
    """Whether two whole numbers have this total and a sum of squares in [low, high]."""
    square = total * total
    widest = 2 * high - square
    smallest = _root_up(np.maximum(2 * low - square, 0))
    largest = _root_down(np.maximum(widest, 0))
    largest = np.where(floored, np.minimum(largest, np.minimum(total, 2 * width - total)), largest)
    smallest = smallest + ((smallest ^ total) & 1)
    return np.asarray((widest >= 0) & (smallest <= largest))


def _triple_exists(total: Ints, low: Ints, high: Ints, floored: Flags, width: Ints) -> Flags:
    """As `_pair_exists` for three numbers; True where more than 64 middle values were to be tried."""
    reach = np.sqrt(np.maximum(3 * high - total * total, 0) / 18) + 1
    first = np.floor(total / 3 - reach).astype(np.int64)
    last = np.ceil(total / 3 + reach).astype(np.int64)
    first = np.where(floored, np.maximum(first, 0), first)
    last = np.where(floored, np.minimum(last, width), last)
    exists: Flags = np.asarray(last - first >= _MOST_MIDDLES)
    rows = np.flatnonzero(~exists)
    step = 0
    while rows.size:
        middle = first[rows] + step
        rest, left = middle * middle, total[rows] - middle
        found = _pair_exists(left, low[rows] - rest, high[rows] - rest, floored[rows], width[rows])
        exists[rows[found]] = True
        rows = rows[~found & (middle < last[rows])]
        step += 1
    return exists


def _no_sum_of_three_squares(number: Ints) -> Flags:
    """Whether a whole number has the form 4**j*(8*m + 7)."""
    lowest_bit = np.where(number > 0, number & -number, 1)
    even_power = (lowest_bit & 0x5555555555555555) != 0
    return np.asarray((number > 0) & even_power & ((number // lowest_bit) % 8 == 7))


def _variation(n: Numbers, items: Numbers, sd: Printed, spread: Spread) -> tuple[Ints, Ints, Flags]:
    """First and last whole number n*(n - 1)*(items*s)**2 the printed spread allows, and the usable rows."""
    if spread not in ("sd", "variance", "se"):
        raise ValueError(f"spread must be sd, variance or se, not {spread!r}")
    power = 1 if spread == "variance" else 2
    count, usable = _whole(n, 2, _LARGEST_COUNT)
    per, whole = _whole(items, 1, _LARGEST_COUNT)
    usable = usable & whole & (sd.scale > 0) & (sd.high >= 0) & (sd.low <= sd.high)
    factor = 1.0 * per * per * count * (count - 1) * (count if spread == "se" else 1)
    usable &= (factor < 2.0**53) & (np.maximum(sd.high, 1.0) ** power * factor < _LARGEST)
    usable &= sd.scale * 1.0 < _LARGEST ** (1 / power)
    exact = np.where(usable, factor, 0).astype(np.int64)
    low, high = (np.where(usable, np.maximum(each, 0), 0) ** power * exact for each in (sd.low, sd.high))
    scale = np.where(usable, sd.scale, 1) ** power
    return -(-low // scale), high // scale, usable


def _totals(n: Numbers, items: Numbers, *mean: Numbers) -> tuple[Ints, Ints, Flags]:
    """First and last whole-number total in the mean's interval (low, high, scale), and the usable rows."""
    low, high, scale = (np.asarray(each, dtype=np.int64) for each in mean)
    count, usable = _counts(n, items)
    size = np.maximum(np.maximum(high, 1.0), -1.0 * low)
    usable = usable & (scale > 0) & (low <= high) & (size * count < _LARGEST)
    low, high = (np.where(usable, each, 0) * np.where(usable, count, 1) for each in (low, high))
    scale = np.where(usable, scale, 1)
    return -(-low // scale), high // scale, usable


def _counts(n: Numbers, items: Numbers) -> tuple[Ints, Flags]:
    people, whole = _whole(n, 1, _LARGEST_COUNT)
    per, also_whole = _whole(items, 1, _LARGEST_COUNT)
    return people * per, whole & also_whole


def _whole(values: Numbers, least: int, most: int) -> tuple[Ints, Flags]:
    """The values as integers, and where they are whole and within limits; elsewhere a number stands in."""
    number = np.asarray(values, dtype=np.float64)
    usable = np.asarray((number >= least) & (number <= most) & (number == np.floor(number)))
    return np.where(usable, number, max(least, 0)).astype(np.int64), usable


def _root_down(number: Ints) -> Ints:
    """Floor of the square root of whole numbers below 2**62, exact."""
    # A double may lift a number just below a square onto it, but takes no such square below its root.
    root = np.sqrt(number).astype(np.int64)
    return np.asarray(root - (root * root > number))


def _root_up(number: Ints) -> Ints:
    root = _root_down(number)
    return np.asarray(root + (root * root < number))


def _judge_sd(judge: Callable[[Flags, _Scores], Flags], spread: Spread, *given: Numbers) -> Flags:
    """Apply `judge` a piece of the flattened rows at a time, to bound the memory of its temporaries."""
    kinds = (np.float64,) * 4 + (np.int64,) * 6
    rows = np.broadcast_arrays(*(np.asarray(each, kind) for each, kind in zip(given, kinds, strict=True)))
    flat = [each.ravel() for each in rows]
    result = np.empty(flat[0].size, dtype=np.bool_)
    for start in range(0, result.size, _CHUNK):
        part = (each[start : start + _CHUNK] for each in flat)
        result[start : start + _CHUNK] = judge(*_sd_problem(spread, *part))
    return result.reshape(rows[0].shape)
