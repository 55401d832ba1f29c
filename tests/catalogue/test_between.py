"""The between-group sum of squares over boxes of means: both extremes against brute force and optimisation."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import optimize

from extractor.catalogue.groups import effect_sum_from_means, greatest_between, least_between
from extractor.catalogue.relation import FloatArray


def between(n: FloatArray, mean: FloatArray) -> FloatArray:
    """SS_effect of (rows, groups) or broadcast arrays, by its definition."""
    grand = (n * mean).sum(axis=-1) / n.sum(axis=-1)
    return np.asarray((n * (mean - grand[..., None]) ** 2).sum(axis=-1))


def vertices(n: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """SS_effect at every vertex of the box, shape (vertices, rows)."""
    choices = np.array(list(product([False, True], repeat=n.shape[1])))
    return np.stack([between(n, np.where(choice, high, low)) for choice in choices])


def random_boxes(
    rng: np.random.Generator, rows: int, groups: int, *, equal: bool = False
) -> tuple[FloatArray, FloatArray, FloatArray]:
    n = rng.integers(1, 80, size=(rows, groups)).astype(float)
    if equal:
        n[:] = 10.0
    middle = rng.normal(0, 1, size=(rows, groups))
    half = rng.exponential(0.5, size=(rows, groups)) * rng.choice([0.0, 0.1, 1.0, 3.0], size=(rows, groups))
    return n, middle - half, middle + half


@pytest.mark.parametrize("groups", range(2, 11))
def test_greatest_is_the_best_vertex(groups: int) -> None:
    """The sum of squares is convex in the means, so its maximum over a box lies on a vertex."""
    n, low, high = random_boxes(np.random.default_rng(groups), 60, groups)
    expected = vertices(n, low, high).max(axis=0)
    np.testing.assert_allclose(greatest_between(n, low, high), expected, rtol=1e-12)


def sorted_threshold(n: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """The tempting shortcut: sort by middle, lower ends below a threshold, upper ends above it."""
    order = np.argsort(low + high, axis=1)
    n, low, high = (np.take_along_axis(one, order, axis=1) for one in (n, low, high))
    place = np.arange(n.shape[1])
    return np.max([between(n, np.where(place < cut, low, high)) for cut in range(n.shape[1] + 1)], axis=0)


def test_sorted_thresholds_miss_the_maximum_with_unequal_sizes_and_this_does_not() -> None:
    """With half-widths and sizes equal the shortcut is right; with unequal sizes it is wrong in some boxes."""
    rng = np.random.default_rng(20)
    rows, groups = 4000, 5
    middle = np.round(rng.normal(0, 0.6, size=(rows, groups)), 0)
    low, high = middle - 0.5, middle + 0.5
    equal = np.full((rows, groups), 12.0)
    unequal = rng.integers(2, 100, size=(rows, groups)).astype(float)
    np.testing.assert_allclose(
        sorted_threshold(equal, low, high), greatest_between(equal, low, high), rtol=1e-12
    )
    best = greatest_between(unequal, low, high)
    shortcut = sorted_threshold(unequal, low, high)
    missed = shortcut < best * (1 - 1e-9)
    assert 0.001 < missed.mean() < 0.5
    np.testing.assert_allclose(best, vertices(unequal, low, high).max(axis=0), rtol=1e-12)


@pytest.mark.parametrize("groups", [11, 14])
def test_above_ten_groups_greatest_is_a_bound_that_is_not_far_off(groups: int) -> None:
    rng = np.random.default_rng(groups)
    n, low, high = random_boxes(rng, 3, groups)
    true = vertices(n, low, high).max(axis=0)
    bound = greatest_between(n, low, high)
    assert (bound >= true * (1 - 1e-12)).all()
    # Σ n·(M - c)² exceeds Σ n·(M - GM)² by N·(GM - c)², and c is the middle of the box
    half = (n * (high - low) / 2).sum(axis=1)
    assert (bound <= true + half**2 / n.sum(axis=1) * (1 + 1e-9)).all()


@pytest.mark.parametrize("groups", [2, 3, 6, 12])
def test_least_agrees_with_numerical_optimisation(groups: int) -> None:
    """scipy.optimize.minimize with bounds, started in the middle of the box."""
    n, low, high = random_boxes(np.random.default_rng(30 + groups), 25, groups)
    found = least_between(n, low, high)
    for i in range(len(n)):
        sizes = n[i]

        def gradient(mean: FloatArray, sizes: FloatArray = sizes) -> FloatArray:
            return 2 * sizes * (mean - (sizes * mean).sum() / sizes.sum())

        best = optimize.minimize(
            lambda mean, sizes=sizes: float(between(sizes, mean)),
            (low[i] + high[i]) / 2,
            jac=gradient,
            bounds=list(zip(low[i], high[i], strict=True)),
            options={"ftol": 1e-15, "gtol": 1e-10, "maxiter": 2000},
        )
        assert found[i] <= best.fun * (1 + 1e-9) + 1e-12
        assert found[i] == pytest.approx(best.fun, rel=1e-6, abs=1e-7)


@pytest.mark.parametrize("groups", [2, 4, 7])
def test_no_point_of_the_box_lies_outside_the_extremes(groups: int) -> None:
    rng = np.random.default_rng(40 + groups)
    n, low, high = random_boxes(rng, 500, groups)
    least, greatest = least_between(n, low, high), greatest_between(n, low, high)
    for _ in range(200):
        value = between(n, low + (high - low) * rng.random(low.shape))
        assert (value >= least * (1 - 1e-12) - 1e-12).all()
        assert (value <= greatest * (1 + 1e-12) + 1e-12).all()


def test_box_without_width_is_the_sum_of_squares_itself() -> None:
    n, low, high = random_boxes(np.random.default_rng(50), 300, 4)
    mean = (low + high) / 2
    expected = effect_sum_from_means(n, mean)
    np.testing.assert_allclose(least_between(n, mean, mean), expected, rtol=1e-11)
    np.testing.assert_allclose(greatest_between(n, mean, mean), expected, rtol=1e-11)


def test_equal_means_without_width_give_zero() -> None:
    n = np.array([[3.0, 5.0, 8.0]])
    mean = np.full((1, 3), 2.5)
    assert least_between(n, mean, mean)[0] == 0.0
    assert greatest_between(n, mean, mean)[0] == pytest.approx(0.0, abs=1e-12)


def test_overlapping_boxes_can_hold_equal_means() -> None:
    n, low, high = random_boxes(np.random.default_rng(51), 500, 5)
    overlap = low.max(axis=1) <= high.min(axis=1)
    assert overlap.any() and not overlap.all()
    least = least_between(n, low, high)
    assert (least[overlap] == 0).all()
    assert (least[~overlap] > 0).all()


def test_a_mean_of_which_nothing_is_known_leaves_the_least_to_the_others() -> None:
    n, low, high = random_boxes(np.random.default_rng(52), 200, 4)
    expected = least_between(n[:, :3], low[:, :3], high[:, :3])
    low[:, 3], high[:, 3] = -np.inf, np.inf
    np.testing.assert_allclose(least_between(n, low, high), expected, rtol=1e-12)


def test_a_mean_bounded_on_one_side_only() -> None:
    """Means 0 and at least 3, ten participants each: the least is at 3, where SS_effect = 10·1.5²·2."""
    n = np.full((1, 2), 10.0)
    low, high = np.array([[0.0, 3.0]]), np.array([[0.0, np.inf]])
    assert least_between(n, low, high)[0] == pytest.approx(45.0, rel=1e-12)
    with np.errstate(all="ignore"):
        unknown = greatest_between(n, low, high)[0]
    assert np.isnan(unknown) or unknown == np.inf


def test_all_means_unknown_give_zero_at_least() -> None:
    n = np.full((2, 3), 7.0)
    unknown = np.full((2, 3), np.inf)
    np.testing.assert_array_equal(least_between(n, -unknown, unknown), 0.0)


_NUMBERS = st.floats(-50, 50, allow_nan=False).map(lambda x: round(x, 3))
_GROUPS = st.lists(
    st.tuples(st.integers(1, 200), _NUMBERS, st.floats(0, 5), st.floats(0, 1)), min_size=2, max_size=8
)


@settings(max_examples=200, deadline=None)
@given(_GROUPS)
def test_extremes_enclose_any_point_and_widen_with_the_box(
    groups: list[tuple[int, float, float, float]],
) -> None:
    n = np.array([[float(g[0]) for g in groups]])
    low = np.array([[g[1] for g in groups]])
    high = low + np.array([[g[2] for g in groups]])
    value = between(n, low + (high - low) * np.array([[g[3] for g in groups]]))
    least, greatest = least_between(n, low, high), greatest_between(n, low, high)
    room = 1e-9 * (1 + value)
    assert least <= value + room
    assert greatest >= value - room
    assert least_between(n, low - 0.5, high + 0.5) <= least + room
    assert greatest_between(n, low - 0.5, high + 0.5) >= greatest - room
    # more participants at the same means only add to the sum of squares
    assert least_between(n + 1, low, high) >= least - room
