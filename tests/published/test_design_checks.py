"""Worked examples of published sources for pairs, repeated measures, factorial terms, covariates, ranks and counts.

As in ``test_checks``; beside each check stands its id in ``data/worked_examples.json``. Records of the collection
that are checked elsewhere: medians, quartiles and ranges (T6-01 to T6-05, ``tests/catalogue``), granularity (T7-01 to
T7-09, ``tests/audit``), covariances of effects that share a group (T9-02, T9-04, ``tests/overlap``).

Not checked: T1-11 and T10-19, whose d is printed elsewhere; T8-04, a variance for a pretest-posttest gain over one raw
SD, which is not offered; T3-06, population effects; T3-20, a slip of its source; T10-03, Brown-Forsythe's F*, and
T10-05 and T10-13, whose scores are not printed with the record.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from scipy import stats

from extractor.catalogue import adjusted, paired, proportions, ranks
from extractor.catalogue.p_values import p_from_f
from extractor.catalogue.source_table import error_mean_square, f_from_mean_squares
from extractor.catalogue.terms import partial_eta_from_sums, partial_omega_from_f
from extractor.sampling.difference_precision import morris_g
from extractor.sampling.moments import small_sample_factor
from extractor.study.cell_means import factorial_table
from tests.published.support import (
    agrees,
    assert_prints,
    converted,
    group,
    inputs,
    one,
    published,
    reference,
)

ROUNDED = 1e-9
"""Reference figures are written with ten digits."""


# ---- pairs and repeated measures --------------------------------------------------------------------


@pytest.mark.parametrize("name", ["T1-06", "T1-07"])
def test_correlation_from_the_sd_of_change(name: str) -> None:
    """T1-06 and T1-07, values from memory."""
    x = inputs(name)
    r = paired.correlation_from_difference_sd(group(x["SD_base"], x["SD_final"]), *one(x["SD_change"]))
    assert_prints([r], published(name))


def test_standard_error_of_a_crossover_difference() -> None:
    """T1-09: through the whole conversion, the SD of differences from both SDs and r."""
    x = inputs("T1-09")
    cells = {"n": [x["N"]] * 2, "mean": [0.0, 0.0], "sd": [x["SDE"], x["SDC"]], "correlation": x["corr"]}
    assert_prints([converted("paired", "mean_difference", cells).standard_error], published("T1-09"))


def test_paired_t_from_the_sd_of_differences() -> None:
    """T1-14: the source divides by its rounded standard error, which the printed t shows."""
    x, (error, t, p) = inputs("T1-14"), published("T1-14")
    cells = {"n_total": x["n"], "mean_difference": x["mean_diff"], "sd_change": [x["sd_diff"]]}
    row = converted("paired", "mean_difference", cells)
    found = x["mean_diff"] / row.standard_error
    assert_prints([row.standard_error, x["mean_diff"] / float(error)], [error, t])
    assert_prints([2 * stats.t.sf(found, x["n"] - 1)], [p])


def test_matched_groups_raw_difference() -> None:
    """T2-04, value from memory: SD of differences, variance and standard error."""
    x = inputs("T2-04")
    cells = {"n": [x["n"]] * 2, "mean": [x["D"], 0.0], "sd": [x["S1"], x["S2"]], "correlation": x["r"]}
    row = converted("paired", "mean_difference", cells)
    spread = paired.difference_sd_from_correlation(group(x["S1"], x["S2"]), *one(x["r"]))
    assert_prints([spread, row.variance, row.standard_error], published("T2-04"))


def test_within_subjects_example() -> None:
    """T3-25, values from memory: r, t, p, limits of the difference, d_z and d_av from means and variances."""
    x = inputs("T3-25")
    spreads = [float(np.sqrt(float(Fraction(v)))) for v in x["variances"]]
    change = float(Fraction(x["SDdiff"]))
    cells = {"n": [x["n"]] * 2, "mean": [x["Mdiff"], 0.0], "sd": spreads, "sd_change": [change]}
    r = paired.correlation_from_difference_sd(group(*spreads), *one(change))
    raw, average = (converted("paired", metric, cells) for metric in ("mean_difference", "cohens_d"))
    d_z = paired.d_difference_from_means(*one(x["Mdiff"], change))
    t = d_z * np.sqrt(x["n"])
    p = p_from_f(t**2, *one(1, x["n"] - 1))
    assert average.standardizer == "average"
    assert_prints([r, t, p, raw.ci_low, raw.ci_high, d_z, average.estimate], published("T3-25"))


def test_generalized_index_of_a_repeated_measures_example() -> None:
    """T3-21: SS 72, 52.6667 and 177.3333, each rounded: η²G to the digits they leave, partial .2888."""
    x = inputs("T3-21")
    effect, subjects, error = (float(s) for s in x["SS"])
    cells = {"ss_effect": effect, "ss_subjects": subjects, "ss_error": error}
    for metric in ("generalized_eta_squared", "eta_squared"):
        assert converted("within", metric, cells).estimate == pytest.approx(reference("T3-21"), rel=1e-6)
    assert agrees(partial_eta_from_sums(*one(effect, error)), "0.2888")


def test_two_by_two_within_by_contrasts() -> None:
    """T3-23: each effect of a 2 x 2 within design is a paired t of its contrast scores; the interaction's F is t²."""
    x = inputs("T3-23")
    a, b, c, d = (np.array(x[cell], dtype=float) for cell in "ABCD")
    found: list[float] = []
    for scores in (a - b + c - d, c + d - a - b, (a - b) - (c - d)):
        d_z = paired.d_difference_from_means(*one(scores.mean(), scores.std(ddof=1)))
        t = paired.t_from_d_difference(d_z, *one(len(scores)))
        found += [float(np.abs(t[0])), float(p_from_f(t**2, *one(1, len(scores) - 1))[0])]
    assert_prints([*found, found[4] ** 2], published("T3-23"))


def test_exact_variance_of_a_pretest_posttest_control_effect() -> None:
    """T8-05: Morris (2008), the formula at delta = .5 with rho = .6."""
    x = inputs("T8-05")
    variance = morris_g(*one(x["delta"], 1 / x["nT"] + 1 / x["nC"], x["nT"] + x["nC"], x["rho"]))
    assert variance[0] == pytest.approx(reference("T8-05"), rel=ROUNDED)


# ---- factorial terms and covariates -----------------------------------------------------------------


def test_sums_of_squares_of_a_two_by_two() -> None:
    """T3-22: from cell sizes, means and SDs alone."""
    x = inputs("T3-22")
    cells = [np.array(x[cell], dtype=float) for cell in "ABCD"]
    levels = {"distraction": ["no", "yes", "no", "yes"], "reward": ["no", "no", "yes", "yes"]}
    n, mean, sd = [len(c) for c in cells], [c.mean() for c in cells], [c.std(ddof=1) for c in cells]
    table = factorial_table(n, mean, sd, levels, "III")
    assert_prints([*(row.ss for row in table), table[0].ss_error, table[0].ss_total], published("T3-22"))


def test_partial_omega_squared_of_a_term() -> None:
    """T3-17: with N, not with the shortcut for one-way designs, which gives .8037; the reference has unrounded F."""
    x = inputs("T3-17")
    cells = {"f_value": str(x["F"]), "df_effect": x["df1"], "df_error": x["df2"], "n_total": x["N"]}
    row = converted("factorial", "partial_omega_squared", cells, term="drug")
    assert_prints([row.estimate, partial_omega_from_f(*one(x["F"], x["df1"], x["N"]))], ["0.7734", "0.7734"])
    assert row.estimate_low <= reference("T3-17") <= row.estimate_high


def test_f_and_p_of_two_factors() -> None:
    """T7-17: both F share the error term of 5 df."""
    x = inputs("T7-17")["table"]
    error = error_mean_square(*one(x["SS_resid"], x["df_resid"]))
    found = []
    for effect in (x["SS_attend"], x["SS_reading"]):
        f = f_from_mean_squares(*one(effect), error)
        found += [f, p_from_f(f, *one(1, x["df_resid"]))]
    assert_prints(found, published("T7-17"))


def test_adjusted_means_and_covariate_correlation() -> None:
    """T11-01, values from memory: the unadjusted SD, d, its variance, J, g and its variance."""
    x = inputs("T11-01")
    cells = {
        "n": [x["n1"], x["n2"]],
        "adjusted_mean": x["Madj"],
        "ms_error": x["Sadj"] ** 2,
        "covariate_r": x["R"],
        "n_covariates": x["q"],
    }
    d, g = (converted("ancova", metric, cells) for metric in ("cohens_d", "hedges_g"))
    spread = adjusted.unadjusted_sd(*one(x["Sadj"] ** 2, x["R"]))
    factor = small_sample_factor(*one(x["n1"] + x["n2"] - 2 - x["q"]))
    assert_prints([spread, d.estimate, d.variance, factor, g.estimate, g.variance], published("T11-01"))


def test_d_from_an_adjusted_f() -> None:
    """T11-02: d = sqrt(F(n1 + n2)/(n1·n2))·sqrt(1 - R²)."""
    x = inputs("T11-02")
    cells = {"f_value": x["F"], "df_effect": 1, "n": [x["n1"], x["n2"]], "covariate_r": x["R"]}
    found = converted("ancova", "cohens_d", cells, direction="+").estimate
    assert found == pytest.approx(reference("T11-02"), rel=ROUNDED)


def test_standardizer_with_the_other_factor_put_back() -> None:
    """T11-03: the restored SD is the one of the one-way analysis, not the residual .2333."""
    x = inputs("T11-03")
    error, others, joint = x["df"]
    spread = adjusted.restored_sd(*one(x["SSE"], x["SSB"] + x["SSAB"], error, others + joint))
    assert spread[0] == pytest.approx(reference("T11-03"), rel=1e-6)


# ---- ranks and counts -------------------------------------------------------------------------------


def test_eta_squared_of_ranks() -> None:
    """T10-15: H/(N - 1), printed under another name by most."""
    x = inputs("T10-15")
    found = ranks.rank_eta_squared_from_h(*one(x["H"], x["N"]))
    assert agrees(found, "0.7104")
    # the reference has unrounded H
    assert found[0] == pytest.approx(reference("T10-15"), abs=0.0005 / (x["N"] - 1))


def test_chi_square_with_continuity_correction() -> None:
    """T10-22: statistic and tail; it leads to no effect size."""
    counts = [float(n) for row in inputs("T10-22")["table"] for n in row]
    found = proportions.corrected_chi_squared_from_counts(*one(*counts))
    assert_prints([found, stats.chi2.sf(found[0], 1)], published("T10-22"))


def test_odds_ratio_of_two_groups() -> None:
    """T10-26: odds of either group and their ratio, through the whole conversion."""
    (a, b), (c, d) = inputs("T10-26")["table"]
    cells = {"count_a": a, "count_b": b, "count_c": c, "count_d": d}
    row = converted("two-group", "log_odds_ratio", cells)
    assert_prints([a / b, c / d, np.exp(row.estimate)], published("T10-26"))


def test_d_from_chi_square() -> None:
    """T10-29: d = 2φ/sqrt(1 - φ²) with φ = sqrt(χ²/N)."""
    x = inputs("T10-29")
    cells = {"chi_squared": x["chi2"], "n_total": x["N"]}
    row = converted("two-group", "cohens_d", cells, direction="+")
    assert row.estimate == pytest.approx(reference("T10-29"), rel=ROUNDED)
