"""Rank statistics against ranked raw scores and the literature, and what they must not lead to."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from extractor.catalogue import ranks
from extractor.catalogue.relation import Grade
from extractor.routes.planner import Start, search
from tests.catalogue.families import check_family, relations_in
from tests.catalogue.worlds import World

ROWS = 150


def two_groups(seed: int, *, ties: bool) -> World:
    """Ranks of raw scores of two groups, every statistic by its definition from the scores."""
    rng = np.random.default_rng(seed)
    rows: list[dict[str, object]] = []
    for _ in range(ROWS):
        first, second = (
            rng.normal(rng.normal(), 1, rng.integers(3, 30)),
            rng.normal(0, 1, rng.integers(3, 30)),
        )
        if ties:
            first, second = np.round(first), np.round(second)
        above = (first[:, None] > second).sum() + (first[:, None] == second).sum() / 2
        n = np.array([len(first), len(second)], dtype=float)
        ranked = stats.rankdata(np.concatenate([first, second]))
        weight = rng.choice([-1.0, 1.0])
        biserial = weight * (2 * above / n.prod() - 1)
        rows.append(
            {
                "n": n,
                "n_total": n.sum(),
                "k_groups": 2.0,
                "u_value": rng.choice([above, n.prod() - above]),
                "rank_sum": ranked[: len(first)].sum(),
                "contrast_weight": np.array([weight, -weight]),
                "direction": 1.0 if biserial == 0 else np.sign(biserial),
                "rank_biserial": biserial,
                "z_value": (above - n.prod() / 2) / np.sqrt(n.prod() * (n.sum() + 1) / 12),
                **of_ranks(ranked, [len(first), len(second)]),
            }
        )
    return {name: np.array([row[name] for row in rows]) for name in rows[0]}


def of_ranks(ranked: np.ndarray, sizes: list[int]) -> dict[str, float]:
    """H and the analysis of variance of the ranks."""
    groups = np.split(ranked, np.cumsum(sizes)[:-1])
    between = sum(len(g) * (g.mean() - ranked.mean()) ** 2 for g in groups)
    total = ((ranked - ranked.mean()) ** 2).sum()
    df = len(ranked) - len(groups)
    epsilon = (between - (len(groups) - 1) * (total - between) / df) / total
    return {
        "h_value": float(stats.kruskal(*groups).statistic),
        "rank_eta_squared": between / total,
        "rank_epsilon_squared": epsilon,
    }


def paired(seed: int) -> World:
    """Signed ranks of differences without ties or zeros."""
    rng = np.random.default_rng(seed)
    rows: list[dict[str, float]] = []
    for _ in range(ROWS):
        differences = rng.normal(rng.normal(), 1, rng.integers(4, 40))
        ranked = stats.rankdata(np.abs(differences))
        up, down = ranked[differences > 0].sum(), ranked[differences < 0].sum()
        rows.append(
            {
                "n_total": float(len(differences)),
                "signed_rank_sum": rng.choice([up, down]),
                "direction": 1.0 if up >= down else -1.0,
                "rank_biserial": (up - down) / ranked.sum(),
            }
        )
    return {name: np.array([row[name] for row in rows]) for name in rows[0]}


TIED, UNTIED, PAIRS = two_groups(1, ties=True), two_groups(2, ties=False), paired(3)


# ---- truth -----------------------------------------------------------------------------------------


@pytest.mark.parametrize("world", [TIED, UNTIED], ids=["ties", "no ties"])
def test_indices_of_the_ranks_are_those_of_an_analysis_of_the_ranks(world: World) -> None:
    """Reference: analysis of variance of the ranks; scipy.stats.kruskal for H."""
    n, k, h = world["n_total"], world["k_groups"], world["h_value"]
    close = {"rtol": 1e-9, "atol": 1e-12}
    np.testing.assert_allclose(ranks.rank_eta_squared_from_h(h, n), world["rank_eta_squared"], **close)
    np.testing.assert_allclose(
        ranks.rank_epsilon_squared_from_h(h, n, k), world["rank_epsilon_squared"], **close
    )
    np.testing.assert_allclose(ranks.h_from_rank_eta_squared(world["rank_eta_squared"], n), h, **close)
    back = ranks.h_from_rank_epsilon_squared(world["rank_epsilon_squared"], n, k)
    np.testing.assert_allclose(back, h, **close)


@pytest.mark.parametrize("world", [TIED, UNTIED], ids=["ties", "no ties"])
def test_rank_biserial_is_the_excess_of_pairs_in_favour(world: World) -> None:
    """Reference: counting all pairs of scores; either group's U gives the same size."""
    found = ranks.rank_biserial_from_u(world["u_value"], world["n"], world["direction"])
    np.testing.assert_allclose(found, world["rank_biserial"], rtol=1e-12, atol=1e-14)
    found = ranks.rank_biserial_from_rank_sum(world["rank_sum"], world["n"], world["contrast_weight"])
    np.testing.assert_allclose(found, world["rank_biserial"], rtol=1e-12, atol=1e-14)


def test_u_from_z_without_ties() -> None:
    found = ranks.u_from_z(UNTIED["z_value"], UNTIED["n"])
    smaller = np.minimum(UNTIED["u_value"], UNTIED["n"].prod(axis=1) - UNTIED["u_value"])
    np.testing.assert_allclose(found, smaller, rtol=1e-9, atol=1e-9)


def test_z_is_that_of_scipy() -> None:
    """scipy.stats.mannwhitneyu, normal approximation without continuity correction, gives p of the same z."""
    rng = np.random.default_rng(5)
    first, second = rng.normal(1, 1, 12), rng.normal(0, 1, 9)
    test = stats.mannwhitneyu(first, second, method="asymptotic", use_continuity=False)
    z = stats.norm.isf(test.pvalue / 2)
    u = ranks.u_from_z(np.array([z]), np.array([[12.0, 9.0]]))
    assert u[0] == pytest.approx(min(test.statistic, 108 - test.statistic))


def test_matched_pairs() -> None:
    found = ranks.rank_biserial_from_signed_ranks(
        PAIRS["signed_rank_sum"], PAIRS["n_total"], PAIRS["direction"]
    )
    np.testing.assert_allclose(found, PAIRS["rank_biserial"], rtol=1e-12, atol=1e-14)


# ---- literature ------------------------------------------------------------------------------------


def test_kruskal_wallis_of_a_textbook() -> None:
    """Navarro (2018), Learning Statistics with R, ch. 14.10 prints H = 12.076 for 18 scores in 3 groups.

    H/(N - 1) = .7103626943 was computed from it by two routes; no source prints it.
    """
    h, n, k = np.array([12.076]), np.array([18.0]), np.array([3.0])
    np.testing.assert_allclose(ranks.rank_eta_squared_from_h(h, n), 0.7103529412, rtol=1e-9)
    np.testing.assert_allclose(
        ranks.rank_eta_squared_from_h(np.array([12.0761658]), n), 0.7103626943, rtol=1e-8
    )
    np.testing.assert_allclose(ranks.rank_epsilon_squared_from_h(h, n, k), (12.076 - 2) / 15, rtol=1e-12)


def test_common_language_effect_size_of_heights() -> None:
    """McGraw & Wong (1992), from memory: heights 69.7 (2.8) and 64.3 (2.6) give a probability of .92."""
    d = (69.7 - 64.3) / np.sqrt((2.8**2 + 2.6**2) / 2)
    low, high = ranks.d_from_rank_biserial(2 * np.array([0.915, 0.925]) - 1)
    assert low < d < high


def test_z_over_root_n_is_another_quantity_than_the_rank_biserial_correlation() -> None:
    r_z = ranks.rank_r_from_z(UNTIED["z_value"], UNTIED["n_total"], UNTIED["direction"])
    apart = np.abs(UNTIED["rank_biserial"]) > 0.1
    # sqrt(3·n1·n2/((N + 1)·N)) is their ratio, at most sqrt(3/4)
    assert (np.abs(r_z[apart]) < 0.87 * np.abs(UNTIED["rank_biserial"][apart])).all()


# ---- images and refusals ---------------------------------------------------------------------------


@pytest.mark.parametrize("world", [TIED, UNTIED], ids=["ties", "no ties"])
def test_images_hold_the_values(world: World) -> None:
    check_family(ranks, {"two-group": world, "paired": PAIRS})


def test_groups_that_do_not_overlap_give_no_d() -> None:
    assert np.isnan(ranks.d_from_rank_biserial(np.array([-1.0, 1.0]))).all()


def test_ranks_lead_to_raw_scores_by_named_steps_only() -> None:
    inner = {r.gives for r in relations_in(ranks) if r.grade is Grade.IDENTITY}
    assert inner == {"rank_eta_squared", "rank_epsilon_squared", "rank_biserial", "rank_r", "h_value"}
    raw = [r for r in relations_in(ranks) if r.gives not in inner | {"u_value"}]
    assert {r.name: r.grade for r in raw} == {
        "d_from_rank_biserial": Grade.APPROXIMATION,
        "r_from_normal_deviate": Grade.ASSUMPTION,
    }


@pytest.mark.parametrize(
    "target", ["eta_squared", "omega_squared", "f_value", "cohens_f", "ss_effect", "cohens_d"]
)
def test_h_does_not_reach_indices_of_raw_scores(target: str) -> None:
    reached = search(Start(frozenset({"h_value", "n_total", "k_groups", "rank_eta_squared"})), "one-way")
    assert "rank_epsilon_squared" in reached
    assert target not in reached


def test_u_reaches_d_as_an_approximation_when_the_direction_is_known() -> None:
    known = {"u_value", "n", "contrast_weight"}
    assert "cohens_d" not in search(Start(frozenset(known)), "two-group")
    routes = search(Start(frozenset(known | {"direction"})), "two-group")["cohens_d"]
    assert {route.grade for route in routes} == {Grade.APPROXIMATION}
    assert all("d_from_rank_biserial" in route.steps.values() for route in routes)
    assert "cohens_d" not in search(Start(frozenset({"signed_rank_sum", "n_total", "direction"})), "paired")
