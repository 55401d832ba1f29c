"""Granularity checks against published examples, against every small data set, and against drawn data."""

import itertools
from decimal import ROUND_DOWN, ROUND_HALF_DOWN, ROUND_HALF_EVEN, ROUND_HALF_UP, Decimal, localcontext
from fractions import Fraction
from math import isqrt

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from extractor.audit.granularity import (
    Printed,
    _root_down,
    binary_sd_is_reachable,
    informative,
    mean_can_be_checked,
    mean_is_reachable,
    nearest_reachable_means,
    printed_interval,
    sd_can_be_checked,
    sd_is_reachable,
    sd_upper_limit,
)

HABITS = {
    "nearest": (ROUND_HALF_UP, ROUND_HALF_EVEN, ROUND_HALF_DOWN),
    "truncated": (ROUND_DOWN,),
    "either": (ROUND_HALF_UP, ROUND_DOWN),
}


def decimal_root(number, power):
    """number**(1/power) for power 1 or 2 to 60 digits."""
    with localcontext() as context:
        context.prec = 60
        value = Decimal(number.numerator) / Decimal(number.denominator)
        return value.sqrt() if power == 2 else value


def prints(number, decimals, habit, power=1):
    """The printed form, as a float, of number**(1/power) under a rounding habit of the decimal module."""
    return float(decimal_root(number, power).quantize(Decimal(1).scaleb(-decimals), rounding=habit))


def moments(total, squares, n, items):
    """Exact mean and variance (divisor n - 1) of n scores counted in units of 1/items."""
    return Fraction(total, n * items), Fraction(n * squares - total**2, n * (n - 1) * items**2)


# --- published examples ---------------------------------------------------------------------------

PUBLISHED_MEANS = [
    # Encyclopedia article on the GRIM test, die example; source seen.
    ("3.48", 20, False),
    # The Economist, "Come again", 18 June 2016, worked example; source seen.
    ("5.93", 49, False),
    # Not by itself the test: 5.92 * 49 = 290.08 is no whole number, yet 290/49 prints 5.92; arithmetic.
    ("5.92", 49, True),
    # Brown & Heathers 2017, Soc. Psychol. Pers. Sci. 8:363-369, introductory example; value from memory.
    ("5.19", 28, False),
    # Crump, Navarro & Suzuki 2018, Answering Questions with Data, ch. 7; means and n seen, verdict by rule.
    ("5.11", 18, True),
    ("1.89", 18, True),
    ("3.89", 18, True),
    # 66/19 = 3.4737 and 67/19 = 3.5263; arithmetic.
    ("3.47", 19, True),
    ("3.48", 19, False),
]


@pytest.mark.parametrize(("mean", "n", "expected"), PUBLISHED_MEANS)
def test_published_means(mean, n, expected):
    printed = printed_interval(float(mean), len(mean.split(".")[1]))
    assert bool(mean_can_be_checked(n, 1, *printed))
    assert bool(mean_is_reachable(n, 1, *printed)) is expected


def test_published_mean_and_sd_with_wrong_parity():
    """Allard 2018, parity example: total 62 is even, the one sum of squares in range odd; from memory."""
    mean, sd = printed_interval(3.44, 2), printed_interval(2.47, 2)
    assert mean_is_reachable(18, 1, *mean)
    assert not sd_is_reachable(18, 1, mean, sd)
    # (316 - 62**2/18)/17 = 2.455**2 and (318 - 62**2/18)/17 = 2.479**2
    assert sd_is_reachable(18, 1, mean, printed_interval([2.45, 2.48], 2)).all()


def test_published_binary_variances():
    """SciPy reference documentation, two-sample t from summary statistics, binary example; source seen.

    30 of 150 and 45 of 200; the first variance, .1610738, is printed truncated.
    """
    n = [150, 200]
    mean = printed_interval([0.2, 0.225], 3)
    variance = printed_interval([0.161073, 0.175251], 6)
    assert binary_sd_is_reachable(n, mean, variance, spread="variance").tolist() == [False, True]
    for rule in ("truncated", "either"):
        variance = printed_interval([0.161073, 0.175251], 6, rule)
        assert binary_sd_is_reachable(n, mean, variance, spread="variance").all()
    slipped = printed_interval([0.171073, 0.157251], 6, "either")
    assert not binary_sd_is_reachable(n, mean, slipped, spread="variance").any()


# --- no reachable pair is rejected: every small data set ------------------------------------------


def every_data_set():
    """(n, items, limits, total, sum of squares) of all multisets of n 2 to 6 on scales 1-2 to 1-5."""
    for n, top, items in itertools.product(range(2, 7), range(2, 6), (1, 2)):
        if items == 2 and n > 4:
            continue
        seen = set()
        for scores in itertools.combinations_with_replacement(range(items, items * top + 1), n):
            seen.add((sum(scores), sum(score * score for score in scores)))
        for total, squares in seen:
            yield n, items, 1, top, total, squares


@pytest.mark.parametrize("rule", HABITS)
@pytest.mark.parametrize(("decimals", "sd_decimals"), [(0, 1), (1, 0), (1, 1), (2, 2), (2, 3), (3, 2)])
def test_no_data_set_is_rejected(rule, decimals, sd_decimals):
    rows = list(every_data_set())
    n, items, least, most = (np.array(column) for column in list(zip(*rows, strict=True))[:4])
    exact = [moments(total, squares, size, per) for size, per, _, _, total, squares in rows]
    for mean_habit, sd_habit in itertools.product(HABITS[rule], repeat=2):
        mean = printed_interval([prints(m, decimals, mean_habit) for m, _ in exact], decimals, rule)
        sd = printed_interval([prints(v, sd_decimals, sd_habit, 2) for _, v in exact], sd_decimals, rule)
        variance = printed_interval([prints(v, sd_decimals, sd_habit) for _, v in exact], sd_decimals, rule)
        assert mean_is_reachable(n, items, *mean).all()
        for limits in ({}, {"scale_min": least}, {"scale_min": least, "scale_max": most}):
            assert sd_can_be_checked(n, items, mean, sd, **limits).all()
            assert sd_is_reachable(n, items, mean, sd, **limits).all()
            assert sd_is_reachable(n, items, mean, variance, **limits, spread="variance").all()


@pytest.mark.parametrize("rule", HABITS)
@pytest.mark.parametrize("decimals", [1, 2, 3, 4])
def test_no_binary_data_set_is_rejected(rule, decimals):
    rows = [(n, ones) for n in range(2, 41) for ones in range(n + 1)]
    exact = [moments(ones, ones, n, 1) for n, ones in rows]
    n = np.array([size for size, _ in rows])
    for mean_habit, sd_habit in itertools.product(HABITS[rule], repeat=2):
        mean = printed_interval([prints(m, decimals, mean_habit) for m, _ in exact], decimals, rule)
        sd = printed_interval([prints(v, decimals, sd_habit, 2) for _, v in exact], decimals, rule)
        assert binary_sd_is_reachable(n, mean, sd).all()
        assert sd_is_reachable(n, 1, mean, sd, 0, 1).all()


# --- how much of what is unreachable is caught ----------------------------------------------------


def reachable_sums(n, low, high):
    """{total: bit set of the sums of squares} of all n-tuples of whole numbers in [low, high]."""
    sums = {0: 1}
    for _ in range(n):
        longer: dict[int, int] = {}
        for total, squares in sums.items():
            for score in range(low, high + 1):
                longer[total + score] = longer.get(total + score, 0) | squares << score * score
        sums = longer
    return sums


def pairs_that_print(sums, n, means, sds, mean_unit=100, sd_unit=100):
    """Which (means/mean_unit, sds/sd_unit) of a grid some data set rounds to, ties either way."""
    found = np.zeros((len(means), len(sds)), dtype=bool)
    for total, squares in sums.items():
        rows = [row for row, mean in enumerate(means) if abs(2 * mean_unit * total - 2 * mean * n) <= n]
        for q in range(squares.bit_length()) if rows else ():
            if squares >> q & 1:
                # 2 * sd_unit * SD = sqrt(ratio) lies within 2 * printed +- 1
                ratio = Fraction(4 * sd_unit**2 * (n * q - total * total), n * (n - 1))
                root = isqrt(ratio.numerator // ratio.denominator)
                for column in range(max(0, root // 2 - 1), root // 2 + 3):
                    within = max(2 * column - 1, 0) ** 2 <= ratio <= (2 * column + 1) ** 2
                    if within and column < len(sds):
                        found[rows, column] = True
    return found


def grid_verdicts(n, means, sds, mean_decimals=2, sd_decimals=2, **limits):
    mean = printed_interval(np.array(means)[:, None] / 10**mean_decimals, mean_decimals)
    sd = printed_interval(np.array(sds)[None, :] / 10**sd_decimals, sd_decimals)
    return sd_is_reachable(n, 1, mean, sd, **limits)


@pytest.mark.parametrize(("mean_decimals", "sd_decimals"), [(2, 2), (1, 2), (2, 1), (1, 1), (2, 0)])
@pytest.mark.parametrize("n", range(2, 10))
def test_without_limits_every_unreachable_pair_is_caught(n, mean_decimals, sd_decimals):
    """Means from 0 to below 1 stand for all, since adding a whole number to every score changes no SD."""
    means, sds = range(10**mean_decimals), range(3 * 10**sd_decimals + 1)
    # No score lies further from the mean than SD*(n - 1)/sqrt(n), at most 9.4 here.
    truth = pairs_that_print(reachable_sums(n, -10, 11), n, means, sds, 10**mean_decimals, 10**sd_decimals)
    verdict = grid_verdicts(n, means, sds, mean_decimals, sd_decimals)
    assert truth.any()
    assert not truth.all()
    np.testing.assert_array_equal(verdict, truth)


@pytest.mark.parametrize(("n", "share"), [(2, 1), (3, 1), (4, 0.995), (6, 0.995), (10, 0.995), (20, 0.995)])
def test_with_limits_nearly_every_unreachable_sd_is_caught(n, share):
    """Scale 1 to 5, among the means that are reachable; only sums of squares next to the largest escape."""
    means, sds = np.arange(100, 501), range(301)
    means = means[mean_is_reachable(n, 1, *printed_interval(means / 100, 2))]
    truth = pairs_that_print(reachable_sums(n, 1, 5), n, means, sds)
    verdict = grid_verdicts(n, means, sds, scale_min=1, scale_max=5)
    assert not (truth & ~verdict).any()
    assert (~truth & ~verdict).sum() >= share * (~truth).sum() > 0


@pytest.mark.parametrize("n", [2, 3, 7, 20, 31])
def test_binary_verdicts_are_exact(n):
    means, sds = range(101), range(101)
    truth = pairs_that_print(reachable_sums(n, 0, 1), n, means, sds)
    mean = printed_interval(np.array(means)[:, None] / 100, 2)
    sd = printed_interval(np.array(sds)[None, :] / 100, 2)
    np.testing.assert_array_equal(binary_sd_is_reachable(n, mean, sd), truth)
    np.testing.assert_array_equal(sd_is_reachable(n, 1, mean, sd, 0, 1), truth)


# --- drawn data -----------------------------------------------------------------------------------


@st.composite
def studies(draw):
    items = draw(st.integers(1, 6))
    bottom = draw(st.sampled_from([-3, 0, 1, 10]))
    top = bottom + draw(st.sampled_from([1, 4, 6, 10, 100]))
    score = st.integers(bottom * items, top * items)
    extreme = st.sampled_from([bottom * items, top * items])
    scores = draw(
        st.one_of(st.lists(each, min_size=2, max_size=60) for each in (score, extreme, score | extreme))
    )
    return scores, items, bottom, top


@settings(max_examples=400, deadline=None)
@given(
    study=studies(),
    rule=st.sampled_from(sorted(HABITS)),
    decimals=st.tuples(st.integers(0, 5), st.integers(0, 5)),
    data=st.data(),
)
def test_honest_rows_pass(study, rule, decimals, data):
    scores, items, bottom, top = study
    n = len(scores)
    mean, variance = moments(sum(scores), sum(score * score for score in scores), n, items)
    habit, other = (data.draw(st.sampled_from(HABITS[rule])) for _ in range(2))
    printed = printed_interval(prints(mean, decimals[0], habit), decimals[0], rule)
    assert (
        Fraction(int(printed.low), int(printed.scale))
        <= mean
        <= Fraction(int(printed.high), int(printed.scale))
    )
    assert mean_is_reachable(n, items, *printed)
    kinds = {"sd": (variance, 2), "variance": (variance, 1), "se": (variance / n, 2)}
    for spread, (value, power) in kinds.items():
        sd = printed_interval(prints(value, decimals[1], other, power), decimals[1], rule)
        for limits in ((np.nan, np.nan), (bottom, np.nan), (np.nan, top), (bottom, top)):
            assert sd_is_reachable(n, items, printed, sd, *limits, spread=spread)
    limit = sd_upper_limit(n, float(mean), float(mean), bottom, top)
    assert Fraction(float(limit)) ** 2 >= variance


@settings(max_examples=200, deadline=None)
@example(n=2**30, items=1000, mean=10**7, decimals=7)
@example(n=2**29, items=1000, mean=-(10**6), decimals=0)
@given(
    n=st.integers(1, 2**30),
    items=st.integers(1, 1000),
    mean=st.integers(-(10**7), 10**7),
    decimals=st.integers(0, 7),
)
def test_mean_verdict_equals_unbounded_integer_arithmetic(n, items, mean, decimals):
    printed = printed_interval(mean / 10**decimals, decimals)
    low, high, scale = (int(each) for each in printed)
    assert (low, high, scale) == (2 * mean - 1, 2 * mean + 1, 2 * 10**decimals)
    count = n * items
    if mean_can_be_checked(n, items, *printed):
        assert max(abs(low), abs(high)) * count < 2**63
        assert mean_is_reachable(n, items, *printed) == (-(-low * count // scale) <= high * count // scale)
    else:
        assert mean_is_reachable(n, items, *printed)
        assert max(abs(low), abs(high)) * count > 2**60


@settings(max_examples=300, deadline=None)
@given(
    n=st.integers(5, 10**6),
    items=st.integers(1, 100),
    mean=st.integers(0, 10**7),
    decimals=st.integers(0, 7),
    sd=st.integers(0, 10**7),
    sd_decimals=st.integers(0, 10),
)
def test_sd_verdict_equals_unbounded_integer_arithmetic(n, items, mean, decimals, sd, sd_decimals):
    """Parity and the most even split (n of at least 5, no limits) in Python integers; nothing wraps."""
    printed = (
        printed_interval(mean / 10**decimals, decimals),
        printed_interval(sd / 10**sd_decimals, sd_decimals),
    )
    verdict = bool(sd_is_reachable(n, items, *printed))
    if not sd_can_be_checked(n, items, *printed):
        assert verdict
        return
    scale, divisor = 2 * 10**decimals, 4 * 100**sd_decimals
    first, last = -((1 - 2 * mean) * n * items // scale), (2 * mean + 1) * n * items // scale
    least, most = (max(each, 0) ** 2 * n * (n - 1) * items**2 for each in (2 * sd - 1, 2 * sd + 1))
    assert most < 2**63 > divisor
    least, most = -(-least // divisor), most // divisor
    expected = False
    for total in range(first, last + 1):
        share, over = divmod(total, n)
        low = max(-((-least - total**2) // n), share * total + (share + 1) * over)
        high = (most + total**2) // n
        if low + (low - total) % 2 <= high:
            expected = True
            break
    assert verdict == expected


@given(root=st.integers(1, 2**31 - 1), offset=st.integers(-1, 1))
def test_integer_root_is_exact_next_to_squares(root, offset):
    """Doubles round numbers above 2**53, so the root of one just below a square comes out too large."""
    number = np.array([root * root + offset])
    assert _root_down(number).tolist() == [isqrt(root * root + offset)]


# --- limits of the scale --------------------------------------------------------------------------


def test_sd_upper_limit_worked_number():
    """Scale 1 to 5, mean 4.6, n 20: sqrt(3.6 * 0.4 * 20/19) = 1.231; textbook algebra."""
    limit = sd_upper_limit(20, 4.6, 4.6, 1, 5)
    assert limit == pytest.approx(1.2311740225, abs=5e-11)
    assert sd_upper_limit(20, 4.595, 4.605, 1, 5) > limit
    assert sd_upper_limit([20, 1, 20, np.nan, 20], 3, [3, 3, 2, 3, np.nan], 1, 5)[1:] == pytest.approx(
        [np.nan] * 4, nan_ok=True
    )


def test_sd_upper_limit_holds_for_every_data_set_and_is_attained():
    for n in (2, 3, 4, 6):
        worst: dict[int, Fraction] = {}
        for total, squares in reachable_sums(n, 1, 5).items():
            worst[total] = moments(total, squares.bit_length() - 1, n, 1)[1]
        totals = np.array(sorted(worst))
        exact = [worst[int(total)] for total in totals]
        limit = sd_upper_limit(n, totals / n, totals / n, 1, 5)
        assert all(
            Fraction(float(each)) ** 2 >= variance for each, variance in zip(limit, exact, strict=True)
        )
        split = (totals - n) % 4 == 0  # only ones and fives
        attained = np.sqrt([float(each) for each in exact])[split]
        np.testing.assert_allclose(limit[split], attained, rtol=1e-13, atol=1e-6)
        assert (limit[~split] > np.sqrt([float(each) for each in exact])[~split]).all()


def test_sd_upper_limit_uses_the_point_nearest_the_middle():
    limit = sd_upper_limit(10, [1.5, 2.0, 3.5, 5.0, 5.1], [2.0, 4.0, 4.5, 5.2, 5.2], 1, 5)
    expected = np.sqrt(np.array([1 * 3, 2 * 2, 2.5 * 1.5, 0.0]) * 10 / 9)
    np.testing.assert_allclose(limit[:4], expected, rtol=1e-13, atol=1e-6)
    assert np.isnan(limit[4])
    assert sd_upper_limit(10, 3, 3, 3, 3) == 0


# --- printed intervals and small helpers ----------------------------------------------------------


@pytest.mark.parametrize(
    ("rule", "expected"),
    [
        ("nearest", [(1037, 1039), (-1039, -1037), (-1, 1)]),
        ("truncated", [(1038, 1040), (-1040, -1038), (-2, 2)]),
        ("either", [(1037, 1040), (-1040, -1037), (-2, 2)]),
    ],
)
def test_printed_interval_rules(rule, expected):
    printed = printed_interval([5.19, -5.19, 0.0], 2, rule)
    assert list(zip(printed.low.tolist(), printed.high.tolist(), strict=True)) == expected
    assert printed.scale.tolist() == [200, 200, 200]


def test_printed_interval_leaves_unread_what_it_cannot_read():
    printed = printed_interval([5.193, np.nan, np.inf, 5.0, 5.0, 5.0, 1e16], [2, 2, 2, np.nan, -1, 1.5, 0])
    assert printed.scale.tolist() == [0] * 7
    with pytest.raises(ValueError, match="rounding must be nearest, truncated or either, not 'up'"):
        printed_interval(1.0, 0, "up")


@given(units=st.integers(-(10**15), 10**15), decimals=st.integers(0, 15))
def test_printed_interval_recovers_the_digits_of_any_decimal(units, decimals):
    printed = printed_interval(float(Decimal(units).scaleb(-decimals)), decimals)
    assert (int(printed.low), int(printed.high)) == (2 * units - 1, 2 * units + 1)
    assert int(printed.scale) == 2 * 10**decimals


def test_rows_that_cannot_be_judged_pass():
    bad_mean, bad_sd = printed_interval(3.48, 2), printed_interval(0.01, 2)
    assert not mean_is_reachable(20, 1, *bad_mean)
    n = [np.nan, 19.5, 0, -3, 2.0**31]
    assert mean_is_reachable(n, 1, *bad_mean).all()
    assert not mean_can_be_checked(n, 1, *bad_mean).any()
    assert mean_is_reachable(20, [np.nan, 0, 1.5], *bad_mean).all()
    missing = printed_interval(np.nan, 2)
    assert mean_is_reachable(20, 1, *missing)
    mean = printed_interval(3.45, 2)
    assert not sd_is_reachable(20, 1, mean, bad_sd)
    assert not binary_sd_is_reachable(20, printed_interval(0.45, 2), bad_sd)
    unread = [
        sd_can_be_checked(20, 1, missing, bad_sd),
        sd_can_be_checked(20, 1, mean, missing),
        sd_can_be_checked(20, 1, mean, printed_interval(-0.5, 2)),
        sd_can_be_checked(1, 1, mean, bad_sd),
        sd_can_be_checked(20, 1, mean, bad_sd, 0.5, 5),
        sd_can_be_checked(20, 1, mean, bad_sd, 5, 1),
        sd_can_be_checked(10**6, 1, printed_interval(3, 0), bad_sd),
        sd_can_be_checked(10**6, 10**6, mean, bad_sd),
        sd_can_be_checked(5, 1, printed_interval(3, 0), printed_interval(0, 10)),
    ]
    assert not np.any(unread)
    assert sd_is_reachable(20, 1, missing, bad_sd)
    assert sd_is_reachable(20, 1, mean, printed_interval(-0.5, 2))
    assert sd_is_reachable(1, 1, mean, bad_sd)
    assert sd_is_reachable(20, 1, mean, bad_sd, 0.5, 5)
    assert sd_is_reachable(20, 1, mean, bad_sd, 5, 1)
    assert sd_is_reachable(10**6, 1, printed_interval(3, 0), bad_sd)
    assert binary_sd_is_reachable([1, np.nan], printed_interval(0.45, 2), bad_sd).all()
    assert binary_sd_is_reachable(20, missing, bad_sd)
    with pytest.raises(ValueError, match="spread must be sd, variance or se, not 'range'"):
        sd_is_reachable(20, 1, mean, bad_sd, spread="range")


def test_a_mean_outside_the_limits_has_no_sd():
    mean, sd = printed_interval(5.25, 2), printed_interval(0.5, 2)
    assert sd_is_reachable(4, 1, mean, sd)
    assert not sd_is_reachable(4, 1, mean, sd, 1, 5)


def test_arguments_broadcast_and_long_columns_agree_with_short_ones():
    n = np.array([[20, 21, np.nan], [49, 28, 18]])
    mean = printed_interval(np.array([[3.48, 3.48, 3.48], [5.93, 5.19, 3.44]]), 2)
    # n 21, total 73: an SD of 2.46 needs a sum of squares of 375, odd as it must be; 2.47 needs 376.
    sd = printed_interval(np.array([[2.47, 2.46, 2.47], [2.47, 2.47, 2.47]]), 2)
    expected_mean = [[False, True, True], [False, False, True]]
    assert mean_is_reachable(n, 1, *mean).tolist() == expected_mean
    expected = sd_is_reachable(n, 1, mean, sd)
    assert expected.tolist() == [[False, True, True], [False, False, False]]
    tall = [np.tile(each, (25_000, 1)) for each in (n, *mean, *sd)]
    verdict = sd_is_reachable(tall[0], 1, Printed(*tall[1:4]), Printed(*tall[4:]))
    np.testing.assert_array_equal(verdict, np.tile(expected, (25_000, 1)))


def test_informative():
    assert informative([99, 100, 50, np.nan], [1, 1, 2, 1], 2).tolist() == [True, False, False, False]
    for count in (99, 100):
        means = printed_interval(np.arange(100) / 100, 2)
        assert mean_is_reachable(count, 1, *means).all() == (not informative(count, 1, 2))


def test_nearest_reachable_means():
    near = nearest_reachable_means([49, 20, np.nan, 7], [1, 1, 1, 4], [5.93, 3.45, 3.0, -1.23], 2)
    np.testing.assert_array_equal(near.total_below, [290, 69, np.nan, -35])
    np.testing.assert_array_equal(near.total_above, [291, 69, np.nan, -34])
    np.testing.assert_array_equal(near.printed_below, [5.92, 3.45, np.nan, -1.25])
    np.testing.assert_array_equal(near.printed_above, [5.94, 3.45, np.nan, -1.21])


@given(
    n=st.integers(1, 500), items=st.integers(1, 9), mean=st.integers(-3000, 3000), decimals=st.integers(0, 4)
)
def test_nearest_reachable_means_bracket_the_printed_one(n, items, mean, decimals):
    near = nearest_reachable_means(n, items, mean / 10**decimals, decimals)
    below, above = int(near.total_below), int(near.total_above)
    assert 0 <= above - below <= 1
    assert below * 10**decimals <= mean * n * items <= above * 10**decimals
    assert (below == above) == (mean * n * items % 10**decimals == 0)
    for total, printed in ((below, near.printed_below), (above, near.printed_above)):
        assert float(printed) == prints(Fraction(total, n * items), decimals, ROUND_HALF_UP)


def test_every_data_set_is_there():
    """The enumeration behind the soundness test reaches the same sums as adding one score at a time."""
    for n, top in ((2, 2), (3, 5), (6, 5)):
        sums = {
            (total, squares)
            for size, per, _, high, total, squares in every_data_set()
            if (size, per, high) == (n, 1, top)
        }
        tables = reachable_sums(n, 1, top)
        assert sums == {
            (t, q) for t, bits in tables.items() for q in range(bits.bit_length()) if bits >> q & 1
        }
