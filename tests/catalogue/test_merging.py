"""Merging of groups against raw scores."""

from __future__ import annotations

import numpy as np
import pytest

from extractor.catalogue.merging import merged_groups


@pytest.mark.parametrize("seed", range(10))
def test_union_of_raw_scores(seed: int) -> None:
    rng = np.random.default_rng(seed)
    groups = [rng.normal(rng.normal(0, 3), 2, int(n)) for n in rng.integers(2, 20, rng.integers(1, 6))]
    n, mean, sd = merged_groups(
        [len(g) for g in groups], [g.mean() for g in groups], [g.std(ddof=1) for g in groups]
    )
    everybody = np.concatenate(groups)
    assert n == len(everybody)
    assert mean == pytest.approx(everybody.mean(), rel=1e-12)
    assert sd == pytest.approx(everybody.std(ddof=1), rel=1e-12)


def test_two_groups_by_the_handbook() -> None:
    """Cochrane Handbook 6.5.2.10, formula from memory: the term n1·n2/N·(M1 - M2)² joins the variances."""
    (n1, m1, s1), (n2, m2, s2) = (20, 12.0, 3.0), (30, 9.5, 4.0)
    variance = ((n1 - 1) * s1**2 + (n2 - 1) * s2**2 + n1 * n2 / (n1 + n2) * (m1 - m2) ** 2) / (n1 + n2 - 1)
    n, mean, sd = merged_groups([n1, n2], [m1, m2], [s1, s2])
    assert (n, mean, sd) == (50, pytest.approx(10.5), pytest.approx(np.sqrt(variance)))
    assert sd > np.sqrt(((n1 - 1) * s1**2 + (n2 - 1) * s2**2) / (n1 + n2 - 2))


def test_merging_step_by_step_is_merging_at_once() -> None:
    sizes, means, sds = [5, 8, 12], [1.0, 4.0, 2.0], [1.0, 2.0, 0.5]
    at_once = merged_groups(sizes, means, sds)
    first = merged_groups(sizes[:2], means[:2], sds[:2])
    stepwise = merged_groups(*([f, x] for f, x in zip(first, (sizes[2], means[2], sds[2]), strict=True)))
    np.testing.assert_allclose(stepwise, at_once, rtol=1e-12)


def test_rows_are_independent_and_padding_is_no_group() -> None:
    n, mean, sd = merged_groups(
        [[10, 10, np.nan], [10, 0, 5], [1, 1, 0], [1, 0, 0], [10, 5, 5]],
        [[1, 3, np.nan], [2, np.nan, 2], [1, 3, 0], [7, 0, 0], [1, np.nan, 2]],
        [[1, 1, np.nan], [1, np.nan, 1], [np.nan, np.nan, 9], [np.nan, 0, 0], [1, 1, 1]],
    )
    np.testing.assert_array_equal(n, [20, 15, 2, 1, 20])
    np.testing.assert_allclose(mean[:4], [2, 2, 2, 7])
    np.testing.assert_allclose(sd[:3], [np.sqrt((18 + 20) / 19), np.sqrt(13 / 14), np.sqrt(2)])
    assert np.isnan(sd[3])
    assert np.isnan([mean[4], sd[4]]).all()


def test_a_part_without_its_sd_leaves_the_union_without_one() -> None:
    n, mean, sd = merged_groups([5, 6], [1, 2], [1, np.nan])
    assert (n, mean) == (11, pytest.approx(17 / 11))
    assert np.isnan(sd)


@pytest.mark.parametrize(("n", "message"), [([5, -1], "fewer than 0"), ([5, 6, 7], "differ in shape")])
def test_bad_sizes_are_refused(n: list[int], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        merged_groups(n, [1, 2], [1, 1])
