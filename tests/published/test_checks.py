"""Worked examples of published sources, two groups and contrasts: each within the precision the source prints.

The tables of one-way designs stand in ``test_textbook_tables``, distributions in ``test_distributions``. Beside each
check stands its id in ``data/worked_examples.json``, where source, locator, licence and confidence are said; values
marked "value from memory" there were recalled and not compared with a copy.

Records about other designs, ranks and counts stand in ``test_design_checks``, which says where the rest is checked.

Parts of covered records left out: the variances converted from V(ln OR) or V(r) in T2-10, T2-11 and T2-12, because
variances here come from the effect and the sample sizes; Glass's delta in T2-26 (control group's SD); 2t/sqrt(df) in
T2-25, which overstates d; Cox's index in T10-28.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from extractor.catalogue import contrasts, correlations, counts, groups, homogeneity, odds, p_values
from extractor.catalogue import variance_explained as explained
from extractor.catalogue.relation import FloatArray, Interval, catalogue
from extractor.routes.intervals import image
from tests.published.support import (
    agrees,
    assert_prints,
    box,
    converted,
    group,
    inputs,
    interval,
    one,
    published,
    reference,
    summaries,
)

MANY = 1e12
"""A number of participants so large that formulas of the large-sample limit hold to the last printed digit."""


# ---- standard errors, limits, t and p (Cochrane Handbook) ----------------------------------------


def test_width_of_a_large_sample_interval() -> None:
    """T1-01: width over SE; the t of very many degrees of freedom is normal."""
    levels = inputs("T1-01")["confidence"]
    width = [1 / contrasts.standard_error_from_limits(*one(0, 1, MANY, level)) for level in levels]
    assert_prints(width, published("T1-01"))


def test_width_of_a_small_sample_interval() -> None:
    """T1-02: half-width and width over SE with n = 25."""
    x = inputs("T1-02")
    sd = groups.sd_from_limits(group(0), group(1), group(x["n"]), *one(x["confidence"]))
    width = np.sqrt(x["n"]) / sd
    assert_prints([width / 2, width], published("T1-02"))


def test_t_from_exact_p() -> None:
    """T1-03: |t| from p = .008 with 45 df, by catalogue and through the whole conversion."""
    x = inputs("T1-03")
    f = p_values.f_from_p(*one(x["p"], 1, x["df"]))
    assert_prints([np.sqrt(f)], published("T1-03"))
    row = converted("two-group", "cohens_d", {"p_value": x["p"], "n": [x["n1"], x["n2"]]}, direction="+")
    assert_prints([row.estimate / np.sqrt(1 / x["n1"] + 1 / x["n2"])], published("T1-03"))


def test_sd_from_the_standard_error_of_a_difference() -> None:
    """T1-05, value from memory."""
    x = inputs("T1-05")
    inverse_n = contrasts.inverse_effective_size(group(x["n1"], x["n2"]), group(1, -1))
    assert_prints(
        [contrasts.pooled_sd_from_standard_error(*one(float(x["SE"])), inverse_n)], published("T1-05")
    )


# ---- mean differences, d and g --------------------------------------------------------------------


def _borenstein() -> dict[str, list[float]]:
    x = inputs("T2-01")
    return {"n": [x["n1"], x["n2"]], "mean": [x["M1"], x["M2"]], "sd": [x["S1"], x["S2"]]}


def test_raw_mean_difference() -> None:
    """T2-01, value from memory: pooled SD, variance and standard error."""
    cells = _borenstein()
    row = converted("two-group", "mean_difference", cells)
    within = groups.error_sum_from_sds(group(*cells["n"]), group(*cells["sd"]))
    pooled = contrasts.pooled_sd_from_mean_square(within / 98)
    assert_prints([pooled, row.variance, row.standard_error], published("T2-01"))
    assert row.estimate == pytest.approx(3.0, rel=1e-12)


def test_standardised_mean_difference() -> None:
    """T2-02, value from memory: d, its large-sample variance and standard error."""
    row = converted("two-group", "cohens_d", _borenstein(), method="large-sample")
    assert_prints([row.estimate, row.variance, row.standard_error], published("T2-02"))


def test_small_sample_correction() -> None:
    """T2-03, value from memory: the source's J is approximate; the exact J prints the same."""
    factor = contrasts.g_from_d(*one(1, inputs("T2-03")["df"]))
    row = converted("two-group", "hedges_g", _borenstein(), method="large-sample")
    assert_prints([factor, row.estimate, row.variance, row.standard_error], published("T2-03"))


def test_d_and_g_of_a_second_example() -> None:
    """T2-18: worked out from the source's inputs; the exact J is 5e-5 of itself from the approximate one."""
    x, expected = inputs("T2-18"), reference("T2-18")
    cells = {"n": [x["n1"], x["n2"]], "mean": [x["M1"], x["M2"]], "sd": [x["SD1"], x["SD2"]]}
    d = converted("two-group", "cohens_d", cells, method="large-sample")
    g = converted("two-group", "hedges_g", cells, method="large-sample")
    approximate = 1 - 3 / (4 * 98 - 1)
    assert d.estimate == pytest.approx(expected["d"], rel=1e-9)
    assert d.estimate * approximate == pytest.approx(expected["g_with_approximate_factor"], rel=1e-9)
    assert d.variance * approximate**2 == pytest.approx(expected["variance_of_g"], rel=1e-9)
    assert g.estimate == pytest.approx(expected["g_with_approximate_factor"], rel=5e-5)
    assert g.variance == pytest.approx(expected["variance_of_g"], rel=1e-4)


def test_d_of_groups_of_equal_size() -> None:
    """T2-24: the root mean variance is the pooled SD when the groups are of equal size, as 80 participants here."""
    x = inputs("T2-24")
    half = x["N"] // 2
    cells = {"n": [half, half], "mean": [x["M1"], x["M2"]], "sd": [x["s1"], x["s2"]]}
    assert_prints([converted("two-group", "cohens_d", cells).estimate], published("T2-24"))


def test_d_from_t_and_n() -> None:
    """T2-25: 2t/sqrt(N) for an equal split."""
    x = inputs("T2-25")
    row = converted("two-group", "cohens_d", {"t_value": x["t"], "n_total": x["N"]})
    assert_prints([row.estimate], published("T2-25")[1:])
    assert row.grade == "assumption"


def test_fractional_df_are_not_taken_for_the_pooled_t() -> None:
    """T2-25: with the printed 73.89 df it is a Welch t, which the pooled conversion must not use."""
    x = inputs("T2-25")
    row = converted("two-group", "cohens_d", {"t_value": x["t"], "df": str(x["df"]), "n_total": x["N"]})
    assert row.status == "blocked"


def test_summary_t_of_two_groups() -> None:
    """T3-24, value from memory: t(18), p, limits of the difference, d and g from the exact variances."""
    x = inputs("T3-24")
    sd = [float(np.sqrt(float(Fraction(v)))) for v in x["exact_variances"]]
    cells = {"n": [x["n"], x["n"]], "mean": [x["M1"], x["M2"]], "sd": sd}
    difference = converted("two-group", "mean_difference", cells)
    d, g = (converted("two-group", metric, cells).estimate for metric in ("cohens_d", "hedges_g"))
    t = d / np.sqrt(2 / x["n"])
    p = p_values.p_from_f(*one(t**2, 1, 18))
    assert_prints([t, p, difference.ci_low, difference.ci_high, d, g], published("T3-24"))


@pytest.mark.parametrize("name", ["T7-10", "T10-12"])
def test_pooled_t_to_full_precision(name: str) -> None:
    """T7-10 and T10-12: sixteen printed digits of t and p, of which doubles allow fourteen."""
    x = inputs(name)
    n = group(*x["n"])
    within = groups.error_sum_from_sds(n, np.sqrt(group(*x["var"])))
    pooled = contrasts.pooled_sd_from_mean_square(within / (n.sum() - 2))
    difference = contrasts.difference_of_means(group(*x.get("M", x.get("m"))), group(1, -1))
    inverse_n = contrasts.inverse_effective_size(n, group(1, -1))
    t = contrasts.t_from_difference(difference, contrasts.standard_error_of_difference(pooled, inverse_n))
    p = p_values.p_from_f(contrasts.f_from_t(t), *one(1, n.sum() - 2))
    for found, text in zip((t, p), published(name), strict=True):
        assert found[0] == pytest.approx(float(text), rel=1e-14)


# ---- correlations and odds ------------------------------------------------------------------------


def test_variance_of_r_and_fisher_z() -> None:
    """T2-09, value from memory."""
    x = inputs("T2-09")
    r, z = (converted("two-group", m, {"r": x["r"], "n_total": x["n"]}) for m in ("r", "fisher_z"))
    assert_prints([r.variance, z.estimate, z.variance, z.standard_error], published("T2-09"))


def test_d_from_a_log_odds_ratio() -> None:
    """T2-10 and T10-28, values from memory: sqrt(3)/pi, and its square as the factor of the variance."""
    assert_prints([odds.d_from_log_odds_ratio(*one(inputs("T2-10")["lnOR"]))], published("T2-10")[:1])
    factor = odds.d_from_log_odds_ratio(*one(1))
    assert_prints([factor**2], published("T10-28")[1:])


def _r_of_d(*d: float) -> FloatArray:
    """r from d for very many participants in groups of equal size: d/sqrt(d² + 4)."""
    many = np.full(len(d), MANY)
    return correlations.r_from_t(contrasts.t_from_d(np.array(d), counts.equal_split(many)), many - 2)


def _d_of_r(*r: float) -> FloatArray:
    many = np.full(len(r), MANY)
    return contrasts.d_from_t(correlations.t_from_r(np.array(r), many - 2), counts.equal_split(many))


def test_r_and_d_in_the_large_sample_limit() -> None:
    """T2-11, T2-12, T3-02 (values from memory), T2-26, T3-08: the sources' a = 4 is the limit of N(N - 2)/(n1 n2)."""
    assert_prints([*_d_of_r(inputs("T2-11")["r"])], published("T2-11")[:1])
    assert_prints([*_r_of_d(inputs("T2-12")["d"])], published("T2-12")[:1])
    assert_prints([*_r_of_d(inputs("T2-26")["d"])], published("T2-26")[2:])
    r = _r_of_d(*inputs("T3-02")["d"])
    assert_prints(list(np.column_stack([r, r**2]).ravel()), published("T3-02"))
    x = inputs("T3-08")
    assert_prints([*_d_of_r(*x["r"]), *_r_of_d(x["d"])], published("T3-08"))


def test_r_from_t() -> None:
    """T2-26: sqrt(t²/(t² + df)) at the printed df."""
    x = inputs("T2-26")
    assert_prints([correlations.r_from_t(*one(x["t"], x["df"]))], published("T2-26")[1:2])


# ---- unequal variances ----------------------------------------------------------------------------


def _welch(n: list[float], mean: list[float], sd: list[float]) -> tuple[FloatArray, FloatArray]:
    """|t| and df of two groups: Welch's F is t² then."""
    f = homogeneity.welch_f_from_summaries(group(*n), group(*mean), group(*sd))
    return np.sqrt(f), homogeneity.welch_df_from_summaries(group(*n), group(*sd))


def test_welch_t() -> None:
    """T10-06: the printed SD .866 is sqrt(.75), as the printed df shows."""
    x = inputs("T10-06")
    t, df = _welch(x["n"], x["M"], [float(np.sqrt(0.75)), x["s"][1]])
    assert_prints([-t, df, p_values.contrast_p(t, df)], published("T10-06"))


def test_unpooled_t_with_conservative_df() -> None:
    """T10-09 and T10-10: p from the printed t, as the book does, and df one less than the smaller group."""
    x = inputs("T10-09")
    for first, second, texts in (
        ("linseed", "horsebean", published("T10-09")[:2]),
        ("casein", "soybean", published("T10-09")[2:]),
    ):
        mean, sd, n = zip(x[first], x[second], strict=True)
        t, _ = _welch(list(n), list(mean), list(sd))
        assert_prints([t, p_values.contrast_p(*one(float(texts[0]), min(n) - 1))], texts)
    x = inputs("T10-10")
    t, _ = _welch([x["n"]] * 2, x["M"], x["s"])
    assert_prints([t, p_values.contrast_p(t, *one(x["n"] - 1))], published("T10-10"))


# ---- verdicts and slips in print -------------------------------------------------------------------


def _image(name: str, **ends: Interval) -> Interval:
    return image(catalogue()[name], ends)


def _meets(found: Interval, text: str) -> bool:
    low, high = interval(text)
    return bool(found[0][0] <= high[0] and found[1][0] >= low[0])


def _p_of_t(t: str, df: int) -> Interval:
    exact = one(df)[0], one(df)[0]
    low, high = interval(t)
    return _image("contrast_p", t_value=(low, high), df_error=exact)


def test_p_that_fits_its_t() -> None:
    """T7-15: t(310044) = 2.71 and p = .007 hold together."""
    x = inputs("T7-15")
    assert _meets(_p_of_t(x["t"], x["df"]), published("T7-15")[0])


def test_p_that_belongs_to_another_t() -> None:
    """T7-12: t(34) = 2.99 and p = .318 do not; p needs |t| = 1.01."""
    x = inputs("T7-12")
    assert not _meets(_p_of_t(x["t"], x["df"]), x["p"])
    assert agrees(np.sqrt(p_values.f_from_p(*one(float(x["p"]), 1, x["df"]))), "1.01")


def test_four_printed_d_of_which_one_slipped() -> None:
    """T7-16: d = 2t/sqrt(N) with an equal split; t = 2.71 gives d = .0097, so the printed .001 is a tenfold slip."""
    x = inputs("T7-16")
    verdicts = []
    for t, df, d in zip(x["t"], x["df"], published("T7-16"), strict=True):
        low, high = interval(t)
        inverse_n = counts.equal_split(*one(df + 2))
        found = _image("d_from_t", t_value=(low, high), inverse_effective_n=(inverse_n, inverse_n))
        magnitude = (found[0], found[1]) if low[0] > 0 else (-found[1], -found[0])
        verdicts.append("consistent" if _meets(magnitude, d) else "inconsistent")
    assert verdicts == ["consistent", "inconsistent", "consistent", "consistent"]


def test_contrast_whose_printed_t_is_a_slip() -> None:
    """T7-20: (6.21 + 3.21)/(9.793 sqrt(2/14)) is 2.54 or 2.55, not the printed 2.52; the printed p fits it."""
    x = inputs("T7-20")
    weight = group(1, -1), group(1, -1)
    difference = _image("difference_of_means", mean=box(x["M1"], x["M3"]), contrast_weight=weight)
    inverse_n = contrasts.inverse_effective_size(group(14, 14), weight[0])
    spread = _image(
        "standard_error_of_difference",
        pooled_sd=interval("9.793"),
        inverse_effective_n=(inverse_n, inverse_n),
    )
    t = _image("t_from_difference", mean_difference=difference, se_difference=spread)
    assert not _meets(t, published("T7-20")[0])
    assert _meets(_p_of_t("2.545", x["df"]), x["p"])


def test_one_sided_p_that_does_not_follow_from_its_data() -> None:
    """T7-21: the printed .03 is .369 from the printed scores."""
    x = inputs("T7-21")
    n, mean, sd = summaries([x["A"], x["B"]])
    within = groups.error_sum_from_sds(n, sd) / (n.sum() - 2)
    f = groups.effect_sum_from_means(n, mean) / within
    one_sided = p_values.printed_p(p_values.p_from_f(f, *one(1, n.sum() - 2)), *one(1))
    assert agrees(one_sided, "0.369")
    assert not agrees(one_sided, published("T7-21")[0])


def test_conversion_printed_without_its_root() -> None:
    """T3-07: eta² = .20 is f = .50; the displayed formula, which lacks the root, would give .25."""
    f = explained.cohens_f_from_eta_squared(*one(inputs("T3-07")["eta2"]))
    assert agrees(f, "0.50")
    assert not agrees(f, published("T3-07")[0])
