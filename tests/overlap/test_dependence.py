"""Covariances of effects that share participants, against simulated studies and identities.

No worked example with printed covariances was at hand, so the formulas are held against Monte Carlo studies drawn
from raw scores or from the sampling distributions of means and variances, which know nothing of them.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from extractor.api import Result, convert
from extractor.errors import UsageError
from extractor.overlap.covariances import contrast_covariance, correlation_covariance, logit_covariance
from extractor.overlap.dependence import check_positive, covariance_matrix, dependence
from extractor.sampling.moments import small_sample_factor
from extractor.table import Assumption

HALF = Assumption(0.5, "review protocol")
DRAWS = 400_000


def sheet(rows: list[dict[str, object]]) -> pd.DataFrame:
    return pd.DataFrame(rows).fillna("")


def groups(**values: tuple[object, ...]) -> dict[str, object]:
    return {
        f"{name}_{at}": str(value) for name, column in values.items() for at, value in enumerate(column, 1)
    }


THREE = groups(n=(24, 30, 18), mean=("11.2", "12.9", "13.8"), sd=("3.1", "2.8", "2.7"))


def three_groups(contrast: str, **more: object) -> dict[str, object]:
    about = {
        "study": "Site 1",
        "outcome": "recall",
        "analysis": "m1",
        "design": "one-way",
        "contrast": contrast,
    }
    return {**about, **THREE, **more}


def converted(rows: list[dict[str, object]], metric: str = "cohens_d") -> Result:
    result = convert(sheet(rows), to=metric, variance=None if metric == "mean_difference" else "large-sample")
    assert set(result.effects["status"]) == {"converted"}
    return result


def test_contrasts_of_one_analysis_share_groups_and_error_term() -> None:
    """Gleser & Olkin (2009): 1/n_C + d1 d2/(2N) for two contrasts with one control group."""
    result = converted([three_groups("1 - 3"), three_groups("2 - 3")])
    d1, d2 = result.effects["estimate"]
    pairs = dependence(result).pairs
    assert pairs[["row", "other_row"]].to_numpy().tolist() == [[2, 3]]
    assert pairs["covariance"][0] == pytest.approx(1 / 18 + d1 * d2 / (2 * 72), rel=1e-12)
    assert pairs["why"][0] == "contrasts of the same groups"


def test_a_row_covaries_with_itself_by_its_variance() -> None:
    """The formula for two rows becomes the large-sample variance when they are one."""
    result = converted([three_groups("1 - 3"), three_groups("2 - 3")])
    for row, size in zip(result.effects.to_dict("records"), (24, 30), strict=True):
        d = np.array([row["estimate"]])
        total = np.array([72.0])
        own = contrast_covariance(np.array([1 / size + 1 / 18]), d, d, total, total, total)
        assert own[0] == pytest.approx(row["variance"], rel=1e-12)


def test_g_takes_the_small_sample_factors_of_both_rows() -> None:
    rows = [three_groups("1 - 3"), three_groups("2 - 3")]
    d, g = (dependence(converted(rows, metric)).pairs["covariance"][0] for metric in ("cohens_d", "hedges_g"))
    assert g == pytest.approx(d * float(small_sample_factor(69.0)) ** 2, rel=1e-10)


def test_flipped_rows_flip_the_sign() -> None:
    rows = [three_groups("1 - 3"), three_groups("2 - 3", orientation="-")]
    plain = dependence(converted([three_groups("1 - 3"), three_groups("2 - 3")])).pairs["covariance"][0]
    assert dependence(converted(rows)).pairs["covariance"][0] == pytest.approx(-plain, rel=1e-12)


def two_groups(study: str, outcome: str, **values: tuple[object, ...]) -> dict[str, object]:
    return {"study": study, "outcome": outcome, "design": "two-group", **groups(**values)}


def test_two_outcomes_need_their_correlation() -> None:
    """rho (1/n1 + 1/n2) + rho² d1 d2/(2N), the formula of Gleser & Olkin (2009)."""
    rows = [
        two_groups("Site 2", "recall", n=(30, 25), mean=("5.4", "5.0"), sd=("1.0", "1.0")),
        two_groups("Site 2", "speed", n=(30, 25), mean=("5.6", "5.0"), sd=("1.0", "1.0")),
    ]
    result = converted(rows)
    assert result.effects["estimate"].tolist() == pytest.approx([0.4, 0.6])
    without = dependence(result)
    assert without.pairs.empty
    assert without.unresolved["why"].tolist() == [
        "cannot be computed, because two outcomes of the same groups need their correlation"
    ]
    found = dependence(result, HALF).pairs
    # n 30 and 25, d .4 and .6, rho .5 give .0372121 by the formula (two routes agree)
    assert found["covariance"][0] == pytest.approx(0.03721212121, rel=1e-9)
    assert "correlation 0.5 (review protocol)" in found["why"][0]


def test_control_group_printed_alike_is_recognised() -> None:
    rows = [
        two_groups("Site 3", "recall", n=(20, 22), mean=("5.4", "5.0"), sd=("1.1", "1.2")),
        two_groups("Site 3", "recall", n=(24, 22), mean=("5.9", "5.0"), sd=("1.0", "1.2")),
    ]
    result = converted(rows)
    d1, d2 = result.effects["estimate"]
    pairs = dependence(result).pairs
    assert pairs["covariance"][0] == pytest.approx(1 / 22 + d1 * d2 * 22 / (2 * 42 * 46), rel=1e-12)
    assert pairs["why"][0] == "one group has the same n, mean and SD in both rows"


def test_rows_of_one_label_with_unlike_means_are_not_the_same_groups() -> None:
    """Two comparisons with one control may carry one label and equal sizes; their treatments still differ."""
    control = {"n": (20, 20), "sd": ("1.1", "1.2")}
    rows = [
        {**two_groups("Site 3", "recall", mean=("5.4", "5.0"), **control), "analysis": "m1"},
        {**two_groups("Site 3", "recall", mean=("5.9", "5.0"), **control), "analysis": "m1"},
    ]
    assert dependence(converted(rows)).pairs["why"].tolist() == [
        "one group has the same n, mean and SD in both rows"
    ]


def test_shared_group_on_the_other_side_turns_the_sign() -> None:
    rows = [
        two_groups("Site 3", "recall", n=(20, 22), mean=("5.4", "5.0"), sd=("1.1", "1.2")),
        two_groups("Site 3", "recall", n=(22, 24), mean=("5.0", "5.9"), sd=("1.2", "1.0")),
    ]
    result = converted(rows)
    d1, d2 = result.effects["estimate"]
    expected = -1 / 22 + d1 * d2 * 22 / (2 * 42 * 46)
    assert dependence(result).pairs["covariance"][0] == pytest.approx(expected, rel=1e-12)


def test_independent_rows_have_no_entry_and_doubtful_ones_are_said() -> None:
    rows = [
        two_groups("Site 4", "recall", n=(20, 22), mean=("5.4", "5.0"), sd=("1.1", "1.2")),
        two_groups("Site 5", "recall", n=(20, 22), mean=("5.4", "5.0"), sd=("1.1", "1.2")),
        two_groups("Site 5", "recall", n=(31, 29), mean=("5.1", "5.0"), sd=("1.3", "1.2")),
    ]
    found = dependence(converted(rows))
    assert found.pairs.empty
    assert found.unresolved[["row", "other_row"]].to_numpy().tolist() == [[3, 4]]
    assert "no shared group" in found.unresolved["why"][0]


def test_effects_without_a_formula_stay_unresolved() -> None:
    result = convert(sheet([three_groups("1 - 3"), three_groups("2 - 3")]), to="omega_squared")
    found = dependence(result)
    assert found.pairs.empty
    assert found.unresolved["why"].tolist() == ["cannot be computed, because no formula is known for ω²"]


def two_by_two(a: int, b: int, **more: str) -> dict[str, object]:
    cells = {
        "count_a": str(a),
        "count_b": str(b),
        "count_c": "10",
        "count_d": "90",
        "n_1": str(a + b),
        "n_2": "100",
    }
    return {"study": "Site 6", "outcome": "relapse", "design": "two-group", **cells, **more}


def test_log_odds_ratios_share_the_second_group() -> None:
    """1/c + 1/d (Gleser & Olkin 2009): control cells 10 and 90 give .1111."""
    pairs = dependence(converted([two_by_two(5, 95), two_by_two(8, 72)], "log_odds_ratio")).pairs
    assert pairs["covariance"][0] == pytest.approx(0.1111111111, rel=1e-9)
    flipped = [two_by_two(5, 95), two_by_two(8, 72, orientation="-")]
    assert dependence(converted(flipped, "log_odds_ratio")).pairs["covariance"][0] == pytest.approx(
        -0.1111111111, rel=1e-9
    )


def test_matrix_holds_variances_and_covariances() -> None:
    rows = [three_groups("1 - 3"), three_groups("2 - 3")]
    rows.append(two_groups("Site 7", "recall", n=(20, 22), mean=("5.4", "5.0"), sd=("1.1", "1.2")))
    result = converted(rows)
    numbers, matrix = covariance_matrix(result.effects, dependence(result).pairs)
    assert numbers.tolist() == [2, 3, 4]
    assert np.diag(matrix).tolist() == result.effects["variance"].tolist()
    assert (matrix == matrix.T).all()
    assert matrix[0, 1] != 0
    assert matrix[2, :2].tolist() == [0, 0]
    assert np.linalg.eigvalsh(matrix).min() > 0


@pytest.mark.parametrize(
    "contrasts",
    [("1 - 2", "1 - 2"), ("1 - 2", "2 - 3", "1 - 3")],
    ids=["one effect twice", "one the sum of others"],
)
def test_what_is_not_positive_definite_is_refused(contrasts: tuple[str, ...]) -> None:
    result = converted([three_groups(contrast) for contrast in contrasts])
    with pytest.raises(UsageError, match=r"rows 2(, 3)? and \d is not positive definite"):
        dependence(result)


def test_covariance_beyond_the_variances_is_refused() -> None:
    effects = pd.DataFrame({"row": [2, 3], "status": "converted", "variance": [0.1, 0.2]})
    pairs = pd.DataFrame({"row": [2], "other_row": [3], "covariance": [0.1 * 2**0.5], "why": ["invented"]})
    with pytest.raises(UsageError, match="rows 2 and 3"):
        check_positive(effects, pairs)
    check_positive(effects, pairs.assign(covariance=0.1))


def standardized(
    rng: np.random.Generator, sizes: list[int], means: list[float]
) -> tuple[np.ndarray, np.ndarray]:
    """Means and variances of simulated groups with unit SD: shape (draws, groups) each."""
    n = np.array(sizes)
    return (
        rng.normal(means, 1 / np.sqrt(n), (DRAWS, len(n))),
        rng.chisquare(n - 1, (DRAWS, len(n))) / (n - 1),
    )


def pooled(variances: np.ndarray, sizes: np.ndarray, which: list[int]) -> np.ndarray:
    df = sizes[which] - 1
    return np.sqrt((variances[:, which] * df).sum(axis=1) / df.sum())


def covariance_with_error(one: np.ndarray, two: np.ndarray) -> tuple[float, float]:
    products = (one - one.mean()) * (two - two.mean())
    return float(products.mean()), float(products.std() / np.sqrt(len(products)))


def test_simulated_studies_covary_as_the_formula_says() -> None:
    """Contrasts with a common error term, and comparisons that share the control group alone.

    The formula is a large-sample one: it leaves out terms smaller by a factor of about 1 / df.
    """
    rng = np.random.default_rng(7)
    n = np.array([60, 80, 50])
    means, variances = standardized(rng, n.tolist(), [1.5, 0.9, 0.0])
    first, second = means[:, 0] - means[:, 2], means[:, 1] - means[:, 2]
    true = (np.array([1.5]), np.array([0.9]))
    whole = pooled(variances, n, [0, 1, 2])
    apart = pooled(variances, n, [0, 2]), pooled(variances, n, [1, 2])
    total = np.array([190.0])
    common = contrast_covariance(np.array([1 / 50]), *true, total, total, total)[0]
    alone = contrast_covariance(np.array([1 / 50]), *true, *(np.array([float(k)]) for k in (50, 110, 130)))[0]
    assert common != pytest.approx(alone, rel=0.02)
    for one, two, expected in (
        (first / whole, second / whole, common),
        (first / apart[0], second / apart[1], alone),
    ):
        found, error = covariance_with_error(one, two)
        assert abs(found - expected) < 4 * error + expected * 3 / 108


def test_simulated_outcomes_covary_as_the_formula_says() -> None:
    rng = np.random.default_rng(8)
    sizes, rho, draws = (40, 50), 0.6, 20_000
    d = np.zeros((2, draws))
    spread = np.zeros((2, draws))
    for size, shift in zip(sizes, ((1.2, 0.8), (0.0, 0.0)), strict=True):
        noise = rng.normal(size=(2, draws, size))
        scores = np.stack([noise[0] + shift[0], rho * noise[0] + np.sqrt(1 - rho**2) * noise[1] + shift[1]])
        d += scores.mean(axis=2) * (1 if size == sizes[0] else -1)
        spread += scores.var(axis=2, ddof=1) * (size - 1)
    d /= np.sqrt(spread / (sum(sizes) - 2))
    total = np.array([float(sum(sizes))])
    expected = contrast_covariance(
        np.array([1 / 40 + 1 / 50]), np.array([1.2]), np.array([0.8]), total, total, total, rho
    )[0]
    found, error = covariance_with_error(d[0], d[1])
    assert abs(found - expected) < 4 * error + expected * 3 / 88


def test_simulated_correlations_of_two_outcomes_covary_as_the_formula_says() -> None:
    """Two outcomes and one further variable of the same participants, all normal, as the variance of r assumes too."""
    rng = np.random.default_rng(9)
    size, r_one, r_two, within = 80, 0.5, 0.3, 0.6
    overall = within * np.sqrt((1 - r_one**2) * (1 - r_two**2)) + r_one * r_two
    root = np.linalg.cholesky([[1, r_one, r_two], [r_one, 1, overall], [r_two, overall, 1]])
    scores = np.einsum("ij,jdn->idn", root, rng.normal(size=(3, 40_000, size)))
    centred = scores - scores.mean(axis=2, keepdims=True)
    norms = np.sqrt((centred**2).sum(axis=2))
    r = [(centred[0] * centred[k]).sum(axis=1) / (norms[0] * norms[k]) for k in (1, 2)]
    times_n = correlation_covariance(np.array(r_one), np.array(r_two), within)
    for transform, scale in (
        (lambda x: x, 1 / (size - 1)),
        (np.arctanh, 1 / ((1 - r_one**2) * (1 - r_two**2) * (size - 3))),
    ):
        found, error = covariance_with_error(*(transform(each) for each in r))
        assert abs(found - times_n * scale) < 4 * error + times_n * scale * 3 / size


def test_correlation_of_an_outcome_with_itself_gives_its_variance() -> None:
    r = np.array([-0.7, 0.0, 0.4])
    assert correlation_covariance(r, r, 1.0) == pytest.approx((1 - r**2) ** 2, rel=1e-12)


def test_simulated_log_odds_of_two_outcomes_covary_as_the_formula_says() -> None:
    rng = np.random.default_rng(10)
    size, p_one, p_two, phi = 200, 0.4, 0.3, 0.5
    both = p_one * p_two + phi * np.sqrt(p_one * (1 - p_one) * p_two * (1 - p_two))
    cells = rng.multinomial(size, [both, p_one - both, p_two - both, 1 - p_one - p_two + both], DRAWS)
    one, two = cells[:, 0] + cells[:, 1], cells[:, 0] + cells[:, 2]
    found, error = covariance_with_error(np.log(one / (size - one)), np.log(two / (size - two)))
    tables = (np.array([size * p, size * (1 - p)]) for p in (p_one, p_two))
    expected = float(logit_covariance(*tables, phi))
    assert abs(found - expected) < 4 * error + expected * 5 / size


OUTCOMES = [
    two_groups("Site 8", "recall", n=(30, 25), mean=("5.4", "5.0"), sd=("1.0", "1.0")),
    two_groups("Site 8", "speed", n=(30, 25), mean=("11.2", "10.0"), sd=("2.0", "2.0")),
]


def test_raw_differences_covary_as_linear_combinations_of_means() -> None:
    """w' S u with S the covariance of the group means: textbook algebra, no approximation but the estimated SDs."""
    result = converted([three_groups("1 - 3"), three_groups("2 - 3")], "mean_difference")
    one, two = result.effects["variance"]
    spread = one / (1 / 24 + 1 / 18)
    assert spread == pytest.approx(two / (1 / 30 + 1 / 18), rel=1e-9)
    assert dependence(result).pairs["covariance"][0] == pytest.approx(spread / 18, rel=1e-9)
    outcomes = dependence(converted(OUTCOMES, "mean_difference"), HALF).pairs
    assert outcomes["covariance"][0] == pytest.approx(0.5 * 1.0 * 2.0 * (1 / 30 + 1 / 25), rel=1e-9)


@pytest.mark.parametrize("metric", ["r", "fisher_z"])
def test_correlations_of_two_outcomes(metric: str) -> None:
    """Pearson & Filon (1898): with a within-group correlation near 1 and equal r the covariance is the variance."""
    alike = [OUTCOMES[0], {**OUTCOMES[0], "outcome": "speed"}]
    near = dependence(converted(alike, metric), Assumption(0.999, "review protocol"))
    variance = converted(alike, metric).effects["variance"][0]
    assert near.pairs["covariance"][0] == pytest.approx(variance, rel=2e-3)
    turned = [alike[0], {**alike[1], "orientation": "-"}]
    turned_pairs = dependence(converted(turned, metric), Assumption(0.999, "review protocol")).pairs
    assert turned_pairs["covariance"][0] == pytest.approx(-near.pairs["covariance"][0], rel=1e-9)
    assert dependence(converted(alike, metric)).unresolved["why"].tolist() == [
        "cannot be computed, because two outcomes of the same groups need their correlation"
    ]


def test_correlations_with_one_group_in_common_have_no_formula() -> None:
    rows = [
        two_groups("Site 3", "recall", n=(20, 22), mean=("5.4", "5.0"), sd=("1.1", "1.2")),
        two_groups("Site 3", "recall", n=(24, 22), mean=("5.9", "5.0"), sd=("1.0", "1.2")),
    ]
    assert dependence(converted(rows, "r")).unresolved["why"].tolist() == [
        "cannot be computed, because no formula is known for two correlations that share one group"
    ]


def test_log_odds_ratios_that_stand_for_d_covary_as_d_does() -> None:
    d = dependence(converted(OUTCOMES), HALF).pairs["covariance"][0]
    odds = dependence(converted(OUTCOMES, "log_odds_ratio"), HALF).pairs["covariance"][0]
    assert odds == pytest.approx(d * np.pi**2 / 3, rel=1e-9)


def test_log_odds_ratios_of_two_outcomes_and_with_the_first_group_in_common() -> None:
    rows = [two_by_two(20, 80), two_by_two(30, 70, count_c="15", count_d="85", outcome="arrest")]
    found = dependence(converted(rows, "log_odds_ratio"), HALF).pairs["covariance"][0]
    logits = [0.5 * 100 / np.sqrt(20 * 80 * 30 * 70), 0.5 * 100 / np.sqrt(10 * 90 * 15 * 85)]
    assert found == pytest.approx(sum(logits), rel=1e-9)
    shared = [two_by_two(20, 80), two_by_two(20, 80, count_c="15", count_d="85")]
    pairs = dependence(converted(shared, "log_odds_ratio")).pairs
    assert pairs["covariance"][0] == pytest.approx(1 / 20 + 1 / 80, rel=1e-9)
    assert pairs["why"][0] == "the first group has the same cells in both rows"


def test_repeated_measurements_say_what_their_covariance_would_take() -> None:
    pair = {"study": "Site 9", "design": "paired", "n_total": "30", "correlation": "0.6"}
    values = groups(mean=("5.4", "5.0"), sd=("1.1", "1.2"))
    rows = [{**pair, **values, "outcome": name} for name in ("recall", "speed")]
    why = dependence(converted(rows), HALF).unresolved["why"].tolist()
    assert why == ["cannot be computed, because not both rows give the sizes of independent groups"]


def test_matrix_is_blank_where_a_covariance_is_unknown_and_rows_line_up() -> None:
    rows = [*OUTCOMES, two_groups("Site 7", "recall", n=(20, 22), mean=("5.4", "5.0"), sd=("1.1", "1.2"))]
    result = converted(rows)
    numbers, matrix = covariance_matrix(result.effects, dependence(result).table)
    assert numbers.tolist() == [2, 3, 4]
    assert np.isnan(matrix[[0, 1], [1, 0]]).all()
    assert matrix[2].tolist() == [0, 0, result.effects["variance"][2]]


def test_a_study_of_too_many_rows_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("extractor.overlap.dependence._MOST", 1)
    with pytest.raises(UsageError, match="'Site 8' has 2"):
        dependence(converted(OUTCOMES), HALF)
