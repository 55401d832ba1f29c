"""Tables of one within factor: open data with known results, a textbook example, what no data can give."""

import json
from itertools import combinations
from pathlib import Path

import numpy as np
import pytest

from extractor.study.within_table import WithinTable, covariance_range, within_table

OPEN = json.loads((Path(__file__).parent / "data" / "within.json").read_text(encoding="utf-8"))["analyses"]

# Crump, Navarro & Suzuki (2018), Answering Questions with Data, ch. 8: three participants, three conditions
SCORES = np.array([[20.0, 6, 2], [11, 2, 11], [2, 7, 2]])


def of_scores(scores: np.ndarray, **known: object) -> WithinTable:
    return within_table(len(scores), scores.mean(axis=0), scores.std(axis=0, ddof=1), **known)


@pytest.mark.parametrize("route", ["f", "correlation"])
@pytest.mark.parametrize("name", OPEN)
def test_open_data_reproduce(name: str, route: str) -> None:
    """Sources of the data stand in the file; the whole table from the summaries and one thing more."""
    analysis = OPEN[name]
    expected = analysis["expected"]
    known = {"f": expected["f"]} if route == "f" else {"correlation": analysis["correlation"]}
    found = within_table(analysis["n"], analysis["mean"], analysis["sd"], **known)
    for quantity, value in expected.items():
        np.testing.assert_allclose(getattr(found, quantity), value, rtol=1e-9, atol=0, err_msg=quantity)
    assert found.possible


@pytest.mark.parametrize("name", OPEN)
def test_means_and_sds_alone_give_the_total_and_eta_squared(name: str) -> None:
    analysis = OPEN[name]
    expected = analysis["expected"]
    found = within_table(analysis["n"], analysis["mean"], analysis["sd"])
    for quantity in ("ss_effect", "ms_effect", "ss_total", "eta_squared", "generalized_eta_squared"):
        np.testing.assert_allclose(getattr(found, quantity), expected[quantity], rtol=1e-9, atol=0)
    both = expected["ss_subjects"] + expected["ss_error"]
    np.testing.assert_allclose(found.ss_within, both, rtol=1e-9)
    for unknown in (
        "ss_error",
        "ms_error",
        "ss_subjects",
        "f",
        "p",
        "partial_eta_squared",
        "mean_covariance",
    ):
        assert np.isnan(getattr(found, unknown))
    assert found.possible


def test_implied_correlation_of_two_conditions_is_the_correlation() -> None:
    """Student (1908), sleep data: r = .7951702 (computed in exact arithmetic from the published scores)."""
    analysis = OPEN["sleep.extra~group|ID"]
    found = within_table(analysis["n"], analysis["mean"], analysis["sd"], f=analysis["expected"]["f"])
    assert found.common_correlation == pytest.approx(0.7951702058335778, rel=1e-9)
    back = within_table(analysis["n"], analysis["mean"], analysis["sd"], correlation=0.7951702058335778)
    assert back.f == pytest.approx(analysis["expected"]["f"], rel=1e-9)


def test_textbook_example() -> None:
    """Sums of squares printed by Crump, Navarro & Suzuki (2018), ch. 8: 72, 177.33 and in total 302.

    The book also prints 52.75 for the participants, from means cut to two decimals; 52.67 is exact.
    """
    found = of_scores(SCORES, correlation=np.corrcoef(SCORES.T).round(15))
    assert round(found.ss_effect, 2) == 72.0
    assert round(found.ss_error, 2) == 177.33
    assert round(found.ss_subjects, 2) == 52.67
    assert round(found.ss_total, 2) == 302.0
    assert (found.df_effect, found.df_error, found.df_subjects) == (2, 4, 2)


def test_generalized_and_partial_eta_squared_of_the_textbook_example() -> None:
    """Olejnik & Algina (2003) on the sums of squares above: 72/302 = .2384 and 72/(72 + 177.33) = .2888."""
    matrix = np.corrcoef(SCORES.T)
    np.fill_diagonal(matrix, 1.0)
    found = of_scores(SCORES, correlation=(matrix + matrix.T) / 2)
    assert round(found.generalized_eta_squared, 4) == 0.2384
    assert round(found.partial_eta_squared, 4) == 0.2888


@pytest.mark.parametrize("seed", range(20))
def test_mean_covariance_of_raw_scores_lies_in_its_range(seed: int) -> None:
    rng = np.random.default_rng(seed)
    k = int(rng.integers(2, 6))
    scores = rng.normal(size=(int(rng.integers(2, 30)), k)) @ rng.normal(size=(k, k)) * rng.uniform(0.1, 9, k)
    covariance = np.cov(scores.T)
    mean = np.mean([covariance[i, j] for i, j in combinations(range(k), 2)])
    low, high = covariance_range(scores.std(axis=0, ddof=1))
    assert low - 1e-9 * high <= mean <= high * (1 + 1e-9)
    matrix = covariance / np.sqrt(np.outer(np.diag(covariance), np.diag(covariance)))
    np.fill_diagonal(matrix, 1.0)
    found = of_scores(scores, correlation=np.clip((matrix + matrix.T) / 2, -1, 1))
    assert found.mean_covariance == pytest.approx(mean, rel=1e-9, abs=1e-9 * high)
    assert -1 / (k - 1) - 1e-9 <= found.intraclass <= 1 + 1e-9
    assert found.possible


@pytest.mark.parametrize(("sd", "low"), [([1, 1, 1], -0.5), ([3, 1, 1], -10 / 6), ([2, 2], -4.0)])
def test_range_of_the_mean_covariance(sd: list[float], low: float) -> None:
    """Equal SDs end at -V/(k - 1), two at -SD²; SDs 3, 1, 1 close no triangle: (1² - 11)/6 = -10/6."""
    found = covariance_range(sd)
    assert found[0] == pytest.approx(low)
    assert found[1] == pytest.approx(np.mean([a * b for a, b in combinations(sd, 2)]))


def test_common_correlation_may_lie_below_the_bound_of_the_intraclass_one() -> None:
    """Two opposite conditions and a nearly constant third: possible data, common correlation near -1."""
    found = within_table(3, [0, 1, 2], [1, 1, 0.01], correlation=[[1, -1, 0], [-1, 1, 0], [0, 0, 1]])
    assert found.common_correlation < -0.9 < -0.5 <= found.intraclass
    assert found.possible


def test_an_impossible_f_is_seen() -> None:
    """With SDs of 1 MS_error is at most 1.5 (three conditions that cancel) and at least 0."""
    largest = within_table(10, [0, 1, 2], [1, 1, 1], f=10 / 1.5)
    assert largest.possible
    assert largest.intraclass == pytest.approx(-0.5)
    assert not within_table(10, [0, 1, 2], [1, 1, 1], f=10 / 1.6).possible
    assert not within_table(10, [0, 1, 2], [1, 1, 1], f=0).possible
    # even with a correlation of 1, unequal SDs leave MS_error = V - SD_1·SD_2
    assert within_table(10, [0, 1], [np.sqrt(1), np.sqrt(8)], f=5 / (4.5 - np.sqrt(8))).possible
    assert not within_table(10, [0, 1], [np.sqrt(1), np.sqrt(8)], f=5 / (4.4 - np.sqrt(8))).possible


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"n": 1}, "at least 2"),
        ({"n": 2.5}, "at least 2"),
        ({"mean": [1], "sd": [1]}, "two or more conditions"),
        ({"mean": [1, 2, 3]}, "two or more conditions"),
        ({"mean": [1, np.nan]}, "needs its mean"),
        ({"sd": [1, -1]}, "needs its mean and its SD"),
        ({"f": 1.0, "correlation": 0.5}, "give one of them"),
        ({"f": -1.0}, "at least 0"),
        ({"f": float("nan")}, "at least 0"),
        ({"correlation": 1.2}, "lie in"),
        ({"correlation": float("nan")}, "lie in"),
        ({"correlation": [0.5, 0.5]}, "matrix of shape"),
        ({"correlation": np.eye(3)}, "matrix of shape"),
        ({"correlation": [[1, 0.5], [0.4, 1]]}, "symmetric"),
        ({"correlation": [[0.9, 0.5], [0.5, 1]]}, "ones on its diagonal"),
    ],
)
def test_refusals_say_why(arguments: dict, message: str) -> None:
    with pytest.raises(ValueError, match=message):
        within_table(**{"n": 10, "mean": [1, 2], "sd": [1, 1]} | arguments)
