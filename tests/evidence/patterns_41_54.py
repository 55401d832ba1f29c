"""Reporting patterns 41 to 54: pre and post, logs, medians, ranks, counts, scales, dependence, typography."""

from __future__ import annotations

import math

from scipy import stats

from tests.evidence.patterns_data import (
    Case,
    case,
    d_variance,
    five_mean,
    five_sd,
    inverse,
    morris_variance,
    normal_d,
    of_groups,
    pooled,
    quartile_mean,
    quartile_sd,
    refused,
    row,
)

_GAINS = row("pre-post-control", **of_groups(
    n="26 24", mean_pre="47.2 47.9", sd_pre="8.1 7.7", mean_post="52.0 49.1", sd_post="8.4 8.0"))  # fmt: skip
_D_GAIN = (4.8 - 1.2) / pooled([26, 24], [8.1, 7.7])
_G_GAIN = _D_GAIN * (1 - 3 / (4 * 48 - 1))
_HALF_R = (
    'design = "pre-post-control"\n[assume.correlation]\nvalue = 0.5\nrange = [0.3, 0.8]\nby = "protocol"\n'
)
_QUARTILES = row("two-group", **of_groups(n="40 42", median="14.0 11.0", q1="11.0 8.2", q3="17.5 14.0"))
_FIVE = row("two-group", **of_groups(
    n="100 100", minimum="8.0 7.0", q1="13.0 12.0", median="14.0 13.0", q3="15.0 14.0",
         maximum="18.0 18.0"))  # fmt: skip
_U = of_groups(n="20 18")
_Z_OF_U = (180 - 120) / math.sqrt(360 * 39 / 12)
_ITEM = {"scale_min": "1", "scale_max": "5"}
_PAIN = row("two-group", study="one", **of_groups(n="25 25", mean="10.1 9.0", sd="2.0 2.1"))
_ARMS = of_groups(n="25 25 25", mean="10.1 9.6 9.0", sd="2.0 2.1 1.9")
_CLUSTERED = row("two-group", cluster_size="20", **of_groups(n="60 60", mean="10.1 9.0", sd="2.0 2.1"))
_D_CLUSTERED = 1.1 / pooled([60, 60], [2.0, 2.1])
_D_SHARED = 1.1 / pooled([25, 24], [2.0, 1.9])
_CROSSED = row("paired", **of_groups(n="10 10", mean="7.02 6.00", sd="2.38 2.21"))
_AVERAGE = 1.02 / math.sqrt((2.38**2 + 2.21**2) / 2)
_PLAIN = of_groups(n="30 30", sd="1.0 1.0")
_NOT_READ = ("no relation leads from mean, n, sd", "Would open it: mean of each group")


def _counts(a: int, b: int, c: int, d: int, **more: str) -> dict[str, str]:
    return row("two-group", count_a=str(a), count_b=str(b), count_c=str(c), count_d=str(d), **more)


def _cell(printed: str, mean: str, value: float | None, *note: str) -> Case:
    """A mean of 2.00 compared with a cell as typed."""
    given = row("two-group", mean_1=mean, mean_2="2.00", **_PLAIN)
    if value is None:
        return refused(54, printed, given, "mean_difference", *_NOT_READ, finding=("note", *note))
    return case(54, printed, given, "mean_difference", "as a reader of the page understands it", value)


CASES: list[Case] = [
    # 41 pretest, posttest, control
    case(41, "pre and post M, SD per group, no r", _GAINS, "hedges_g",
         "difference of gains over the pooled pretest SD, c = 1 - 3/(4(N - 2) - 1) (Morris 2008)", _G_GAIN,
         standardizer="pre", reason=("no sampling variance", "correlation")),
    case(41, "the same with r assumed by the protocol", _GAINS, "hedges_g", "variance at r = .5 (Morris 2008)",
         _G_GAIN,
         variance=morris_variance(26, 24, 0.5, _G_GAIN), grade="assumption", standardizer="pre",
         said=("correlation = 0.5 (protocol)",), codebook=_HALF_R),
    # 42 other scales
    case(42, "means and SDs of logarithms", row("two-group", **of_groups(n="40 38", mean="2.31 2.05", sd="0.52 0.49")),
         "mean_difference", "difference of log means, the log of the ratio of geometric means", 0.26,
         variance=pooled([40, 38], [0.52, 0.49]) ** 2 * inverse(40, 38)),
    refused(42, "means in per cent", row("two-group", mean_1="12%", mean_2="5%", **_PLAIN), "mean_difference",
            "no relation leads", "Would open it: mean of each group", finding=("note", "percentage")),
    refused(42, "geometric means with limits, raw SD wanted",
            row("two-group", reported="geometric mean 12.3, 95% CI [10.1, 15.0]", **of_groups(n="40 38")), "hedges_g",
            "sizes and degrees of freedom alone", "Would open it",
            ),
    # 43 medians
    case(43, "median and quartiles, n", _QUARTILES, "cohens_d", "mean by Luo et al. (2018), SD by Wan et al. (2014)",
         (quartile_mean(11, 14, 17.5, 40) - quartile_mean(8.2, 11, 14, 42))
         / pooled([40, 42], [quartile_sd(11, 17.5, 40), quartile_sd(8.2, 14, 42)]),
         grade="approximation", said=("visibly skewed is refused",)),
    refused(43, "median and quartiles, skewed", {**_QUARTILES, "q3_1": "29.0", "q3_2": "26.0"}, "cohens_d", "skew"),
    case(43, "five numbers, n", _FIVE, "cohens_d", "mean by Luo et al. (2018), SD by Shi et al. (2020)",
         (five_mean(8, 13, 14, 15, 18, 100) - five_mean(7, 12, 13, 14, 18, 100))
         / pooled([100, 100], [five_sd(8, 13, 15, 18, 100), five_sd(7, 12, 14, 18, 100)]), grade="approximation"),
    # 44 ranks
    case(44, "U, ns", row("two-group", u_value="120", direction="+", **_U), "cohens_d",
         "P(X > Y) = 1 - U/(n1·n2), d of normal groups (McGraw & Wong 1992)", normal_d(1 - 120 / 360),
         grade="approximation", said=("normal shift",)),
    case(44, "sum of ranks W of group 1, ns", row("two-group", rank_sum="450", **_U), "cohens_d",
         "U1 = W - n1(n1 + 1)/2 = 240 (Mann & Whitney 1947)", normal_d(240 / 360), grade="approximation"),
    case(44, "z of a rank test, ns", row("two-group", z_value=f"{_Z_OF_U:.6f}", direction="+", **_U), "cohens_d",
         "the same study: z = (n1·n2/2 - U)/sqrt(n1·n2(N + 1)/12)", f"{normal_d(1 - 120 / 360):.5f}",
         grade="approximation", said=("Mann-Whitney test without ties",)),
    case(44, "z and N, the test not said", row("two-group", z_value="2.10", direction="+", n_total="38"), "r",
         "r = z/sqrt(N) (Rosenthal 1991)", 2.10 / math.sqrt(38), grade="assumption",
         said=("normal deviate of a comparison of two means",)),
    refused(44, "U without direction", row("two-group", u_value="120", **_U), "cohens_d", "have no sign",
            "Would open it: direction"),
    refused(44, "Kruskal-Wallis H", row("one-way", h_value="12.076", n_total="18", k_groups="3"), "eta_squared",
            "the η² of the ranks, not of the scores", "Would open it"),
    refused(44, "Wilcoxon's signed ranks", row("paired", signed_rank_sum="35", direction="+", **of_groups(n="20 20")),
            "cohens_d", "a rank test is not about means and standard deviations", "Would open it"),
    # 45 counts
    case(45, "2 x 2 counts", _counts(1219, 36244, 3108, 239241), "log_odds_ratio",
         "Poldrack (2019), ch. 12, odds ratio",
         "2.59", variance=inverse(1219, 36244, 3108, 239241), shown=math.exp),
    case(45, "2 x 2 counts beside the ns",
         _counts(1219, 36244, 3108, 239241, **of_groups(n="37463 242349")), "log_odds_ratio",
         "Poldrack (2019), ch. 12, odds ratio", "2.59", variance=inverse(1219, 36244, 3108, 239241), shown=math.exp),
    case(45, "chi-square on 1 df, N", row("two-group", chi_squared="6.153846", n_total="16", direction="-"),
         "cohens_d",
         "Rosenthal (1994): d = 2φ/sqrt(1 - φ²), φ = sqrt(χ²/N); table of Navarro (2018), ch. 12", "-1.581139",
         grade="assumption", said=("groups of equal size",)),
    case(45, "chi-square on 1 df, N", row("two-group", chi_squared="6.153846", n_total="16", direction="-"), "r",
         "φ = sqrt(χ²/N) (identity), taken as r", "-0.620174", grade="approximation"),
    refused(45, "chi-square without direction", row("two-group", chi_squared="6.15", n_total="16"), "r",
         "have no sign",
            "Would open it: direction"),
    refused(45, "chi-square with Yates's correction", row("two-group", chi_squared_corrected="3.3094", n_total="16",
            direction="-"), "r", "Yates's correction", "Would open it"),
    refused(45, "chi-square on 2 df", row("two-group", reported="χ²(2, N = 100) = 5.77", direction="+"), "r",
            "sizes and degrees of freedom alone", "Would open it"),
    case(45, "odds ratio with CI", row("two-group", odds_ratio="2.67", effect_ci_low="1.19", effect_ci_high="5.98"),
         "log_odds_ratio", "ln OR; SE = (ln U - ln L)/(2·1.96) (Cochrane Handbook, ch. 6; scipy)", math.log(2.67),
         variance=(math.log(5.98 / 1.19) / (2 * stats.norm.ppf(0.975))) ** 2, grade="assumption",
         said=("normal distribution on the log scale",)),
    # 46 bounded scores
    case(46, "SD that the scale cannot have", row("two-group", **of_groups(n="20 20", mean="4.6 4.1", sd="1.40 0.90"),
         **_ITEM),
         "cohens_d", "SD² ≤ (M - a)(b - M)n/(n - 1): at most 1.297 for M from 4.55", None, grade="",
         finding=("impossible", "1.297")),
    case(46, "mean that whole-number items cannot have",
         row("two-group", **of_groups(n="20 20", mean="3.48 3.10", sd="1.10 0.90"), **_ITEM, scale_items="1",
         responses="integer"),
         "cohens_d", "encyclopedia article on the granularity test: 3.48 with n = 20 is impossible", None, grade="",
         finding=("impossible", "no whole-number total of 20 scores prints as 3.48")),
    case(46, "a mean that they can have",
         row("two-group", **of_groups(n="18 18", mean="5.11 3.89", sd="1.18 1.28"), scale_items="1",
         responses="integer"),
         "cohens_d", "Crump, Navarro & Suzuki (2018): 5.11 and 3.89 with n = 18",
         (5.11 - 3.89) / pooled([18, 18], [1.18, 1.28])),
    # 47, 48 dependence
    case(47, "two outcomes of the same people", [{**_PAIN, "outcome": "pain"}, {**_PAIN, "outcome": "sleep",
         "mean_1": "9.9"}],
         "cohens_d", "each effect alone (textbook identity)", 0.9 / pooled([25, 25], [2.0, 2.1]), at=1),
    case(48, "two arms, one control", [row("one-way", study="one", analysis="arms", contrast=c,
         **_ARMS) for c in ("1 - 3", "2 - 3")],
         "cohens_d", "each contrast over the SD pooled over all arms", 0.6 / pooled([25] * 3, [2.0, 2.1, 1.9]),
         variance=inverse(25, 25) + (0.6 / pooled([25] * 3, [2.0, 2.1, 1.9])) ** 2 / 150, at=1,
         said=("contrast 2 - 3",)),
    case(48, "one of two comparisons, the control group divided between them",
         row("two-group", control_comparisons="2", **of_groups(n="25 24", mean="10.1 9.0", sd="2.0 1.9")), "cohens_d",
         "d of all participants; variance with half of the control group (Cochrane Handbook, ch. 23)", _D_SHARED,
         variance=d_variance(25, 12, _D_SHARED)),
    # 49, 50 units of analysis
    case(49, "groups randomised, ICC and cluster size", {**_CLUSTERED, "icc": "0.05"}, "cohens_d",
         "variance times 1 + (m - 1)·ICC = 1.95 (Cochrane Handbook, ch. 23)", _D_CLUSTERED,
         variance=1.95 * d_variance(60, 60, _D_CLUSTERED)),
    case(49, "ICC borrowed by the protocol", _CLUSTERED, "cohens_d", "the same, marked as an assumption", _D_CLUSTERED,
         variance=1.95 * d_variance(60, 60, _D_CLUSTERED), grade="assumption", said=("icc = 0.05 (protocol)",),
         codebook='design = "two-group"\n[assume.icc]\nvalue = 0.05\nby = "protocol"\n'),
    case(49, "groups randomised, no ICC", _CLUSTERED, "cohens_d", "no variance without ICC", _D_CLUSTERED,
         variance=math.nan, reason=("no sampling variance", "icc")),
    case(50, "crossover with r", {**_CROSSED, "correlation": ".68"}, "cohens_d",
         "over the average SD; V = d²(1 + r²)/(4(n - 1)) + 2(1 - r)/(n - 1) (Bonett 2008)", _AVERAGE,
         standardizer="average",
         variance=_AVERAGE**2 * (1 + 0.68**2) / 36 + 0.64 / 9),
    case(50, "crossover, r from the SD of differences", {**_CROSSED, "correlation": ".68"}, "mean_difference",
         "Cochrane Handbook 16.4.6.4: SD of differences from r, SE = .583", 1.02,
         variance=(2.38**2 + 2.21**2 - 2 * 0.68 * 2.38 * 2.21) / 10),
    case(50, "crossover without r", _CROSSED, "cohens_d", "the effect, and no variance without r", _AVERAGE,
         standardizer="average", variance=math.nan, reason=("no sampling variance", "correlation")),
    case(50, "crossover analysed as parallel arms", {**_CROSSED, "t_value": "0.99", "df": "18"}, "cohens_d",
         "df = n - 1 = 9, and t = 0.99 on 18 df for two groups of these means and SDs (textbook identities)", None,
         grade="", finding=("doubtful", "df of 9", "df of independent groups")),
    case(50, "crossover whose t no correlation allows", {**_CROSSED, "t_value": "5.20", "sd_1": "0.24"}, "cohens_d",
         "SD of differences 1.02·sqrt(10)/5.20 = 0.62, and at least 2.21 - 0.24 (textbook identities)", None, grade="",
         finding=("inconsistent", "SD")),
    # 51, 52 other models
    case(51, "df2 far above N", row("one-way", f_value="7.20", df_effect="1", df_error="1438", n_total="36"),
         "omega_squared",
         "df2 = N - k = 34, and 36·40 - 2 = 1438 for 40 trials of each (textbook identities)", None, grade="",
         finding=("doubtful", "df2 of 34", "trials counted as participants")),
    case(51, "df2 far above N, no whole number of trials",
         row("one-way", f_value="7.20", df_effect="1", df_error="1440", n_total="36"), "omega_squared",
         "df2 = N - k = 34 (textbook identity)", None, grade="", finding=("inconsistent", "df2 of 34")),
    refused(52, "z of a mixed model", row("mixed", term="group x time", z_value="2.33", direction="+",
         **of_groups(n="30 30")),
            "cohens_d", "a mixed model", "Would open it"),
    refused(52, "Bayes factor", row("two-group", reported="BF10 = 4.2", **of_groups(n="30 30")), "cohens_d",
            "sizes and degrees of freedom alone", "Would open it"),
    # 53 subgroups
    case(53, "subgroups of an arm, to be merged", row("one-way", analysis="arms", contrast="1 - 2"), "cohens_d",
         "n, M, SD of the union (Cochrane Handbook 6.5.2.10): d of the merged arm and the control",
         (9.85 - 9.0) / pooled([50, 25], [math.sqrt((24 * (2.0**2 + 2.1**2) + 12.5 * 0.5**2) / 49), 1.9]),
         groups=tuple({"analysis": "arms", "group": g, "n": "25", "mean": m, "sd": s} for g, m, s in (
             ("arm", "10.1", "2.0"), ("arm", "9.6", "2.1"), ("control", "9.0", "1.9")))),
    # 54 typography
    _cell("decimal comma", "3,45", 1.45),
    _cell("Unicode minus", "−3.45", -5.45),
    _cell("stars after a number", ".04*", -1.96),
    _cell("a footnote mark", "3.45a", 1.45),
    _cell("thousands or decimals", "1,234", None, "thousands (1234) or decimals (1.234)"),
    _cell("two numbers in a cell", "12 (3.4)", None, "two numbers in one cell"),
    _cell("a date made from 3-5", "2024-05-03", None, "a date or time"),
    _cell("a range", "3-5", None, "a range"),
    _cell("about", "~3", None, "no rounding interval"),
    case(54, "a workbook whose cells are text", row("two-group", mean_1="3.40", mean_2="2.00", **_PLAIN),
         "mean_difference",
         "the printed zero is kept: the interval is 1.40 ± 0.01", 1.4, workbook=True),
    case(54, "a German sheet", row("one-way", f_value="4,50", df_effect="2", df_error="57"), "omega_squared",
         "decimal_mark in the codebook; Hays (1963)", "0.1045", codebook='design = "one-way"\ndecimal_mark = ","\n'),
]  # fmt: skip
