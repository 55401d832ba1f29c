"""LSD, HSD and Bonferroni against scipy, printed tables and the definition."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from extractor.catalogue import multiple_comparisons
from extractor.catalogue.multiple_comparisons import (
    contrast_p_from_bonferroni,
    hsd_from_mean_square,
    lsd_from_mean_square,
    mean_square_from_hsd,
    mean_square_from_lsd,
    two_sided_p_from_bonferroni,
)
from extractor.catalogue.relation import Relation
from extractor.routes.intervals import image
from extractor.routes.planner import Start, search
from tests.catalogue.families import check_family, relations_in
from tests.catalogue.worlds import World

# Dobson (1983), An Introduction to Statistical Modelling, plant weights: 3 groups of 10, residual mean square
# .38859593 (computed in exact arithmetic from the published scores)
MS_ERROR, SIZES, GROUPS, DF = 0.3885959259259259, np.full((1, 3), 10.0), 3.0, 27.0


def one(value: float) -> np.ndarray:
    return np.array([value])


def world(seed: int, rows: int = 60) -> World:
    """Studies with equal groups; the LSD and HSD from scipy.stats."""
    rng = np.random.default_rng(seed)
    groups, n = 3, rng.choice([4.0, 11.0], size=(rows, 1))
    sizes = np.repeat(n, groups, axis=1)
    df = sizes.sum(axis=1) - groups
    alpha, error = rng.choice([0.01, 0.05], size=rows), np.exp(rng.normal(size=rows))
    comparisons = rng.integers(1, 10, size=rows).astype(float)
    p = rng.uniform(1e-6, 0.99, size=rows) / comparisons
    cases = {
        (a, v): stats.studentized_range.ppf(1 - a, groups, v) for a, v in set(zip(alpha, df, strict=True))
    }
    quantile = [cases[case] for case in zip(alpha, df, strict=True)]
    return {
        "n": sizes,
        "k_groups": np.full(rows, float(groups)),
        "df_error": df,
        "significance_level": alpha,
        "ms_error": error,
        "lsd_value": stats.t.ppf(1 - alpha / 2, df) * np.sqrt(error * 2 / n[:, 0]),
        "hsd_value": np.array(quantile) * np.sqrt(error / n[:, 0]),
        "comparisons": comparisons,
        "adjusted_p": p * comparisons,
        "p_contrast": p,
        "p_two_sided": p,
    }


WORLD = world(1)


@pytest.mark.parametrize("relation", relations_in(multiple_comparisons), ids=lambda r: r.name)
def test_formulas_give_what_the_definitions_give(relation: Relation) -> None:
    found = relation.formula(*(WORLD[need] for need in relation.needs))
    np.testing.assert_allclose(found, WORLD[relation.gives], rtol=1e-9)


def test_images_hold_the_values() -> None:
    check_family(multiple_comparisons, {"one-way": WORLD, "two-group": WORLD})


@pytest.mark.parametrize(
    ("alpha", "groups", "df", "printed"), [(0.05, 3, 10, 3.88), (0.05, 4, 20, 3.96), (0.01, 3, 10, 5.27)]
)
def test_studentized_range_of_printed_tables(alpha: float, groups: int, df: int, printed: float) -> None:
    """Textbook tables of the studentized range, from memory; with MS_error = n the HSD is the quantile."""
    n = np.full((1, groups), 4.0)
    found = hsd_from_mean_square(one(4.0), n, one(groups), one(df), one(alpha))
    assert round(float(found[0]), 2) == printed


def test_hsd_of_the_plant_weights() -> None:
    """Half-width .6912161 of the simultaneous intervals of these data as base R prints them; from memory."""
    found = hsd_from_mean_square(one(MS_ERROR), SIZES, one(GROUPS), one(DF), one(0.05))
    assert round(float(found[0]), 7) == 0.6912161
    back = mean_square_from_hsd(one(0.69), SIZES, one(GROUPS), one(DF), one(0.05))
    assert back[0] == pytest.approx(MS_ERROR, rel=2 * 0.005 / 0.69)


def test_lsd_of_the_plant_weights() -> None:
    """Student's t table: 2.052 for df 27 and two-sided .05 (common practice, any textbook)."""
    found = lsd_from_mean_square(one(MS_ERROR), SIZES, one(DF), one(0.05))
    assert found[0] == pytest.approx(2.052 * np.sqrt(2 * MS_ERROR / 10), rel=0.0005 / 2.052)
    printed = np.array([0.565, 0.575])  # LSD = .57
    low, high = mean_square_from_lsd(
        printed, np.repeat(SIZES, 2, axis=0), *(np.full(2, x) for x in (DF, 0.05))
    )
    assert low < MS_ERROR < high


def test_two_groups_need_no_correction() -> None:
    """With two groups q = t·sqrt(2), so LSD and HSD are one number (identity)."""
    n = np.full((1, 2), 16.0)
    hsd = hsd_from_mean_square(one(2.0), n, one(2.0), one(30.0), one(0.05))
    assert hsd[0] == pytest.approx(lsd_from_mean_square(one(2.0), n, one(30.0), one(0.05))[0], rel=1e-9)


def test_unequal_groups_give_nothing() -> None:
    n = np.array([[10.0, 10.0, 9.0]])
    assert np.isnan(mean_square_from_lsd(one(0.5), n, one(26.0), one(0.05)))
    assert np.isnan(mean_square_from_hsd(one(0.5), n, one(3.0), one(26.0), one(0.05)))
    for relation in relations_in(multiple_comparisons):
        if "n" in relation.needs:
            inputs = {need: (WORLD[need][:1], WORLD[need][:1]) for need in relation.needs} | {"n": (n, n)}
            low, high = image(relation, inputs)
            assert (low[0], high[0]) == (0.0, np.inf)


def test_bonferroni_is_undone_below_one_only() -> None:
    p = contrast_p_from_bonferroni(np.array([0.036, 1.0]), np.array([3.0, 3.0]))
    assert p[0] == pytest.approx(0.012)
    assert np.isnan(p[1])
    assert np.isnan(two_sided_p_from_bonferroni(one(1.0), one(3.0)))
    for relation in relations_in(multiple_comparisons):
        if relation.needs == ("adjusted_p", "comparisons"):
            three = one(3.0), one(3.0)
            low, high = image(relation, {"adjusted_p": (one(0.995), one(1.0)), "comparisons": three})
            assert (low[0], high[0]) == (pytest.approx(0.995 / 3), 1.0)


def test_an_lsd_opens_the_contrasts_of_a_one_way_table() -> None:
    known = {"mean", "n", "lsd_value", "significance_level", "df_error", "contrast_weight"}
    assert "cohens_d" in search(Start(frozenset(known)), "one-way")
    assert "cohens_d" not in search(Start(frozenset(known - {"lsd_value"})), "one-way")


def test_an_adjusted_p_needs_the_number_of_comparisons() -> None:
    assert "p_contrast" not in search(Start(frozenset({"adjusted_p"})), "one-way")
    assert "p_contrast" in search(Start(frozenset({"adjusted_p", "comparisons"})), "one-way")
