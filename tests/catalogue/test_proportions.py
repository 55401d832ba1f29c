"""The 2 x 2 table against raw binary scores, scipy, statsmodels and the literature."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats
from statsmodels.stats.contingency_tables import Table2x2

from extractor.catalogue import proportions
from extractor.catalogue.odds import d_from_log_odds_ratio, log_odds_ratio_from_odds_ratio
from extractor.catalogue.relation import Grade, Relation
from extractor.routes.planner import Start, search
from tests.catalogue.families import check_family, evaluate, relations_in
from tests.catalogue.worlds import World

COUNTS = ("count_a", "count_b", "count_c", "count_d")


def table(*cells: float, weight: float = 1.0) -> World:
    """One 2 x 2 table."""
    return {
        **{name: np.array([float(cell)]) for name, cell in zip(COUNTS, cells, strict=True)},
        "contrast_weight": np.array([[weight, -weight]]),
    }


def value(name: str, world: World) -> float:
    return float(evaluate(next(r for r in relations_in(proportions) if r.name == name), world)[0])


def world(seed: int, rows: int = 150) -> World:
    """Random tables; every statistic from scipy, statsmodels or raw binary scores."""
    rng = np.random.default_rng(seed)
    found: list[dict[str, object]] = []
    for _ in range(rows):
        cells = rng.integers(1, 40, size=(2, 2))
        weight = rng.choice([-1.0, 1.0])
        group = np.repeat([1, 1, 0, 0], cells.ravel())
        event = np.repeat([1, 0, 1, 0], cells.ravel())
        phi = weight * np.corrcoef(group, event)[0, 1]
        reference = Table2x2(cells if weight > 0 else cells[::-1])
        level = rng.choice([0.9, 0.95, 0.99])
        low, high = reference.oddsratio_confint(1 - level)
        found.append(
            {
                **{name: float(cell) for name, cell in zip(COUNTS, cells.ravel(), strict=True)},
                "contrast_weight": np.array([weight, -weight]),
                "n": cells.sum(axis=1).astype(float),
                "n_total": float(cells.sum()),
                "odds_ratio": reference.oddsratio,
                "se_log_odds_ratio": reference.log_oddsratio_se,
                "effect_ci_low": low,
                "effect_ci_high": high,
                "confidence_level": level,
                "chi_squared": stats.chi2_contingency(cells, correction=False).statistic,
                "chi_squared_corrected": stats.chi2_contingency(cells, correction=True).statistic,
                "phi": phi,
                "direction": 1.0 if phi >= 0 else -1.0,
            }
        )
    return {name: np.array([row[name] for row in found]) for name in found[0]}


WORLD = world(1)
REFERENCED = [r for r in relations_in(proportions) if r.gives in WORLD]


@pytest.mark.parametrize("relation", REFERENCED, ids=lambda r: r.name)
def test_formulas_give_what_the_references_give(relation: Relation) -> None:
    """chi-square: scipy; odds ratio, its SE and limits: statsmodels; phi: correlation of the raw scores."""
    found = evaluate(relation, WORLD)
    np.testing.assert_allclose(found, WORLD[relation.gives], rtol=1e-9, atol=1e-12)


def test_images_hold_the_values() -> None:
    check_family(proportions, {"two-group": WORLD})


# ---- literature ------------------------------------------------------------------------------------


def test_two_by_two_of_a_textbook_with_yates_correction() -> None:
    """Navarro (2018), Learning Statistics with R, ch. 12.6: chi-square with correction 3.3094.

    Without correction 6.153846154 and phi .6202 (computed from the table by two routes; not printed).
    """
    cells = table(3, 3, 10, 0)
    assert round(value("corrected_chi_squared_from_counts", cells), 4) == 3.3094
    assert value("chi_squared_from_counts", cells) == pytest.approx(6.153846154, rel=1e-9)
    assert round(value("phi_from_counts", cells), 4) == -0.6202
    assert round(value("phi_from_counts", table(3, 3, 10, 0, weight=-1.0)), 4) == 0.6202


def test_chi_squared_to_d() -> None:
    """Rosenthal (1994), Lipsey & Wilson (2001), from memory: d = 2·sqrt(χ²/(N - χ²)), here 1.58113883."""
    chi, total = np.array([6.153846153846154]), np.array([16.0])
    phi = proportions.phi_from_chi_squared(chi, total, np.array([-1.0]))
    np.testing.assert_allclose(proportions.d_from_phi(phi), -1.58113883, rtol=1e-9)
    np.testing.assert_allclose(proportions.d_from_phi(phi), -2 * np.sqrt(chi / (total - chi)), rtol=1e-12)


def test_odds_ratio_of_a_textbook() -> None:
    """Poldrack (2019), Statistical Thinking for the 21st Century, ch. 12: police searches, OR 2.59."""
    assert round(value("odds_ratio_from_counts", table(1219, 36244, 3108, 239241)), 2) == 2.59
    backwards = value("odds_ratio_from_counts", table(1219, 36244, 3108, 239241, weight=-1.0))
    assert backwards == pytest.approx(1 / 2.588941176, rel=1e-9)


def test_log_odds_ratio_of_a_textbook() -> None:
    """Borenstein et al. (2009), ch. 5, values from memory: 5/95 against 10/90, ln OR -.7472, SE .5671.

    Hasselblad & Hedges (1995): d = ln OR·sqrt(3)/π = -.4120, V(d) = .304·V(ln OR) (Sánchez-Meca et al. 2003).
    """
    cells = table(5, 95, 10, 90)
    log_odds = log_odds_ratio_from_odds_ratio(np.array([value("odds_ratio_from_counts", cells)]))
    assert round(float(log_odds[0]), 4) == -0.7472
    assert round(value("log_odds_ratio_error_from_counts", cells), 4) == 0.5671
    assert round(float(d_from_log_odds_ratio(log_odds)[0]), 4) == -0.4120
    assert round(float(d_from_log_odds_ratio(np.ones(1))[0] ** 2), 3) == 0.304


# ---- refusals --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("odds_ratio", "low", "high"),
    [(2.5, 1.2, 1.9), (2.5, -0.2, 5.2), (2.5, 2.4, 12.0), (2.5, 0.0, 6.0), (0.0, 0.5, 6.0)],
)
def test_limits_that_are_not_those_of_the_odds_ratio_give_nothing(
    odds_ratio: float, low: float, high: float
) -> None:
    arguments = (np.array([x]) for x in (odds_ratio, low, high, 0.95))
    assert np.isnan(proportions.log_odds_ratio_error_from_limits(*arguments)).all()


def test_empty_cells_give_no_finite_log_odds_ratio() -> None:
    assert np.isnan(value("log_odds_ratio_error_from_counts", table(0, 10, 5, 5)))
    assert value("odds_ratio_from_counts", table(0, 10, 5, 5)) == 0.0
    assert np.isnan(value("odds_ratio_from_counts", table(5, 0, 5, 5)))


def test_a_corrected_chi_squared_leads_nowhere() -> None:
    start = Start(frozenset({"chi_squared_corrected", "n_total", "direction"}))
    reached = search(start, "two-group")
    assert {"phi", "cohens_d", "r", "odds_ratio"}.isdisjoint(reached)


def test_chi_squared_needs_a_direction_and_is_an_approximation_of_d() -> None:
    known = {"chi_squared", "n_total"}
    assert {"phi", "cohens_d", "r"}.isdisjoint(search(Start(frozenset(known)), "two-group"))
    reached = search(Start(frozenset(known | {"direction"})), "two-group")
    assert reached["phi"][0].grade is Grade.IDENTITY
    assert {route.grade for name in ("cohens_d", "r") for route in reached[name]} == {Grade.APPROXIMATION}
    assert "phi" not in search(Start(frozenset(known | {"direction"})), "one-way")
