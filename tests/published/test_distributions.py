"""Limits from the noncentral F and t, exact moments, and variances over intervals, against published examples.

Ids, sources, licences and confidence stand in ``data/worked_examples.json``; ``test_checks`` says what is left out.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy import optimize, stats

from extractor.catalogue import p_values
from extractor.catalogue.groups import greatest_between, least_between
from extractor.sampling import moments
from extractor.sampling.noncentral import t_noncentrality_limits
from tests.published.support import (
    assert_prints,
    converted,
    group,
    inputs,
    interval,
    one,
    published,
    reference,
)


def test_limits_of_the_root_mean_square_effect() -> None:
    """T4-03: p of F(3, 236) and the 90 % limits of sqrt(λ/((k - 1) n)), n in each group.

    The printed F stands for an interval; the printed figures lie in its range, whose ends are known.
    """
    x = inputs("T4-03")
    k, n = x["k"], x["n"]
    v1, v2 = k - 1, k * (n - 1)

    def at(f: float) -> list[float]:
        row = converted(
            "one-way", "cohens_f", {"f_value": f, "df_effect": v1, "df_error": v2}, level=x["conf"]
        )
        scale = np.sqrt(k / (k - 1))
        return [p_values.p_from_f(*one(f, v1, v2)).item(), row.ci_low * scale, row.ci_high * scale]

    low, high = (at(end.item()) for end in interval(x["F"]))
    middle = at(float(x["F"]))
    assert_prints(middle, published("T4-03"))
    for found, expected in zip(zip(low, middle, high, strict=True), reference("T4-03"), strict=True):
        assert found[1] == pytest.approx(expected["value"], rel=1e-8)
        # p falls as F grows, the limits rise
        assert sorted([found[0], found[2]]) == pytest.approx([expected["low"], expected["high"]], rel=1e-8)


def test_limits_of_eta_squared() -> None:
    """T4-04, value from memory: λ/(λ + N), not λ/(λ + df2), which would give .03 and .50."""
    x = inputs("T4-04")
    cells = {"f_value": x["F"], "df_effect": x["df1"], "df_error": x["df2"]}
    row = converted("one-way", "partial_eta_squared", cells, level=x["conf"])
    assert_prints([row.ci_low, row.ci_high], published("T4-04"))


def test_one_way_analysis_of_all_cells() -> None:
    """T4-05: the four cells of the two-way example as one factor: R², F and p of the whole model."""
    x = inputs("T4-05")
    cells = {"ss_effect": sum(x["SS"]), "ss_error": x["SSE"], "df_effect": 3, "df_error": x["dfE"]}
    eta = converted("one-way", "eta_squared", cells).estimate
    f = eta / (1 - eta) * x["dfE"] / 3
    assert_prints([eta, f, p_values.p_from_f(*one(f, 3, x["dfE"]))], published("T4-05")[6:])


def test_other_effects_put_back_into_the_error() -> None:
    """T4-06: one factor of the example as a one-way analysis of its own."""
    x = inputs("T4-06")
    v1, v2 = x["df"]
    cells = {"ss_effect": x["SS_gender"], "ss_total": x["SST"], "df_effect": v1, "df_error": v2}
    eta = converted("one-way", "eta_squared", cells).estimate
    f = eta / (1 - eta) * v2 / v1
    assert_prints([f, eta, p_values.p_from_f(*one(f, v1, v2))], published("T4-06"))


def test_both_limits_come_from_one_t() -> None:
    """T4-08, values from memory: the t whose lower limit is the given one has the given upper limit.

    The t itself is not printed with the record; scipy.stats.nct finds it from the lower limit.
    """
    x, expected = inputs("T4-08"), reference("T4-08")
    df = x["n1"] + x["n2"] - 2
    t = optimize.brentq(lambda at: stats.nct.sf(at, df, expected["ncp"][0]) - 0.025, 0, 10, xtol=1e-12)
    low, high = t_noncentrality_limits(*one(t, df), 0.95)
    assert low.item() == pytest.approx(expected["ncp"][0], abs=1e-8)
    assert high.item() == pytest.approx(expected["ncp"][1], abs=5e-7)
    row = converted("two-group", "cohens_d", {"t_value": t, "n": [x["n1"], x["n2"]]})
    assert [row.ci_low, row.ci_high] == pytest.approx(expected["delta"], abs=5e-5)


def test_moments_of_eta_squared() -> None:
    """T5-01 and T5-02, identities: three groups, 20 participants, f² = .25."""
    x = inputs("T5-01")
    lam, v1, v2 = x["N"] * x["f2"], x["k"] - 1, x["N"] - x["k"]
    mean, variance = moments.eta_squared_moments(lam, v1, v2)
    assert mean == pytest.approx(reference("T5-01"), rel=1e-9)
    assert variance == pytest.approx(reference("T5-02"), rel=1e-9)


def test_variance_of_r_squared_without_effect() -> None:
    """T5-03, identity: 2p(n - p - 1)/((n - 1)²(n + 1))."""
    x = inputs("T5-03")
    mean, variance = moments.eta_squared_moments(0.0, x["p"], x["n"] - x["p"] - 1)
    assert variance == pytest.approx(reference("T5-03"), rel=1e-9)
    assert mean == pytest.approx(x["p"] / (x["n"] - 1), rel=1e-12)


def test_g_is_unbiased() -> None:
    """T2-17, identity, value from memory: E[J d] = δ."""
    x = inputs("T2-17")
    df, inverse_n = x["n1"] + x["n2"] - 2, 1 / x["n1"] + 1 / x["n2"]
    mean, _ = moments.cohens_d_moments(x["delta"], inverse_n, df)
    assert mean * moments.small_sample_factor(df) == pytest.approx(reference("T2-17"), rel=1e-14)


@pytest.mark.parametrize(
    ("name", "extreme"),
    [("T12-04", least_between), ("T12-05", greatest_between), ("T12-06", greatest_between)],
)
def test_variance_over_intervals(name: str, extreme: object) -> None:
    """With one participant in each group, SS_effect over n is the population variance of the interval data."""
    assert callable(extreme)
    low, high = np.array(inputs(name)["intervals"]).T
    found = extreme(group(*np.ones(len(low))), low[None], high[None]) / len(low)
    assert found.item() == pytest.approx(reference(name), rel=1e-9)
