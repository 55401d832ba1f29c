"""Reporting patterns 1 to 18: groups, F tests, source tables, repeated measurements."""

from __future__ import annotations

import math

from scipy import stats

from tests.evidence.patterns_data import (
    OPEN,
    Case,
    between,
    bound,
    case,
    correction,
    d_variance,
    eta,
    inverse,
    of_groups,
    omega,
    pooled,
    refused,
    row,
)

_BORENSTEIN = of_groups(n="50 50", mean="103 100", sd="5.5 4.5")
_FEED = of_groups(
    n="12 10 12 11 14 12",
    mean="323.58 160.20 218.75 276.91 246.43 328.92",
    sd="64.43 38.63 52.24 64.90 54.13 48.84",
)
_CRUMP = of_groups(n="3 3 3", mean="11.0 5.0 5.0", sd="9.0 2.645751 5.196152")
_ORTHOGONAL = "sums of squares add up in a balanced design: df·F over the sum of all df·F and df2"
_HAYS = "formula of Hays (1963)"


def _model(dfe: str, *terms: tuple[str, str, str], **shared: str) -> list[dict[str, str]]:
    """Rows (term, F, df) of one factorial model."""
    common = {"study": "one", "analysis": "model", "df_error": dfe, **shared}
    return [row("factorial", term=t, f_value=f, df_effect=df, **common) for t, f, df in terms]


def _table(sums: dict[str, tuple[str, str]], **shared: str) -> list[dict[str, str]]:
    """Rows (SS, df) by term of one source table."""
    common = {"study": "one", "analysis": "model", **shared}
    return [row("factorial", term=t, ss_effect=ss, df_effect=df, **common) for t, (ss, df) in sums.items()]


_TASK = _table(
    {"distraction": ("92.45", "1"), "reward": ("110.45", "1"), "distraction x reward": ("14.45", "1")},
    ss_error="25.6", df_error="16", ss_total="242.95", measured_factors="reward",
)  # fmt: skip
_TASK_SOURCE = "Crump, Navarro & Suzuki (2018), ch. 9, printed sums of squares; "
_TWO_BY_TWO = _model("60", ("a", "12.0", "1"), ("b", "4.0", "1"), ("a x b", "2.0", "1"))
_MAIN = row("factorial", term="a", f_value="12.0", df_effect="1", df_error="60", **of_groups(n="32 32"))
_WITHIN = row("within", f_value="6.34", df_effect="2", df_error="38")
_MIXED = row("mixed", f_value="6.90", df_effect="1", df_error="46", direction="+", **of_groups(n="24 24"))
_F8 = row("one-way", f_value="4.50", df_effect="2", df_error="57")

_OATS = [
    row("within", study="oats", analysis="model", term=term, f_value=f, df_effect=df1, df_error=df2)
    for term, f, df1, df2 in (
        ("variety", "1.49", "2", "10"), ("nitrogen", "55.98", "3", "15"), ("variety x nitrogen", "0.26", "6", "30"))
]  # fmt: skip

CASES: list[Case] = [
    # 1 means, SDs, ns
    case(1, "M, SD, n of two groups", row("two-group", **_BORENSTEIN), "cohens_d",
         "Borenstein et al. (2009), ch. 4 (value from memory)", "0.5970", variance="0.0418"),
    case(1, "M, SD, n of two groups", row("two-group", **_BORENSTEIN), "hedges_g",
         "Borenstein et al. (2009), ch. 4, J exact (value from memory)", "0.5924", variance="0.0411"),
    case(1, "M, SD, n of six groups, and F", row("one-way", f_value="15.36", df_effect="5", df_error="65", **_FEED),
         "eta_squared", "OpenIntro Statistics (2019), printed source table: 231129.16 / (231129.16 + 195556.02)",
         eta(15.36, 5, 65), shown=float),
    case(1, "the same, F left out", row("one-way", **_FEED), "eta_squared", "OpenIntro Statistics (2019), printed F",
         "15.36", shown=lambda e: e / (1 - e) * 65 / 5),
    # 2, 3 spreads in other words
    case(2, "M, SE, n", row("two-group", **of_groups(n="24 23", mean="3.42 4.15", se="0.22 0.26")), "cohens_d",
         "SD = SE·sqrt(n), pooled (textbook identity)",
         (3.42 - 4.15) / pooled([24, 23], [0.22 * math.sqrt(24), 0.26 * math.sqrt(23)])),
    case(3, "M with 95 % CI of each group, n",
         row("two-group", **of_groups(n="25 31", mean="50.8 44.8", ci_low="47.1 41.9", ci_high="54.5 47.7")),
         "cohens_d", "SD = sqrt(n)·(U - L)/(2t), t of n - 1 df (Cochrane Handbook, ch. 6; scipy)",
         (50.8 - 44.8) / pooled([25, 31], [math.sqrt(n) * w / (2 * stats.t.ppf(0.975, n - 1))
                                            for n, w in ((25, 54.5 - 47.1), (31, 47.7 - 41.9))]),
         grade="assumption", said=("confidence limits are at 95 %", "group's own SD")),
    # 4 difference with its standard error or limits
    case(4, "mean difference, SE, ns", row("two-group", mean_difference="3.8", se_difference="1.37",
         **of_groups(n="25 22")),
         "cohens_d", "Cochrane Handbook 7.7.3.3, SD = SE/sqrt(1/n1 + 1/n2) = 4.69 (value from memory)", "4.69",
         shown=lambda d: 3.8 / d),
    case(4, "mean difference, 95 % CI, ns",
         row("two-group", mean_difference="7.15", ci_low_difference="2.01", ci_high_difference="12.29",
             **of_groups(n="20 15")), "cohens_d", "SE = (U - L)/(2t), t of N - 2 df (Cochrane Handbook, ch. 6; scipy)",
         7.15 * 2 * stats.t.ppf(0.975, 33) / 10.28 * math.sqrt(inverse(20, 15)), grade="assumption",
         said=("pooled standard error",)),
    # 5, 6 means with F, or with MSE
    case(5, "means, ns, one-way F, no SD", row("one-way", f_value="3.33", **of_groups(n="14 14 14",
         mean="6.21 2.86 -3.21")),
         "cohens_d", "MS_error = MS_between/F, d = (M1 - M2)/sqrt(MS_error) (textbook identity)",
         (6.21 - 2.86) / math.sqrt(between([14] * 3, [6.21, 2.86, -3.21]) / 2 / 3.33), said=("contrast 1 - 2",)),
    case(6, "means, ns, MSE", row("one-way", ms_error="95.91", contrast="1 - 3", **of_groups(n="14 14 14",
         mean="6.21 2.86 -3.21")),
         "cohens_d", "d = (M1 - M3)/sqrt(MSE) (textbook identity)", (6.21 + 3.21) / math.sqrt(95.91),
         variance=inverse(14, 14) + ((6.21 + 3.21) / math.sqrt(95.91)) ** 2 / (2 * 42)),
    # 7 a graph
    refused(7, "means in a graph, meaning of the bars not said",
            row("two-group", **of_groups(n="20 21", mean="5.1 4.2")), "hedges_g", "say nothing of the spread",
            "Would open it: sd of each group"),
    case(7, "means read off a graph, bars said to be SE",
         row("two-group", **of_groups(n="20 21", mean="5.1 4.2", se="0.3 0.3")), "hedges_g",
         "SD = SE·sqrt(n), pooled, times J (Hedges 1981)",
         correction(39) * 0.9 / pooled([20, 21], [0.3 * math.sqrt(20), 0.3 * math.sqrt(21)])),
    # 8, 9, 10 one-way F
    case(8, "F(df1, df2)", _F8, "eta_squared", "df1·F/(df1·F + df2) (textbook identity)", "0.1364"),
    case(8, "F(df1, df2)", _F8, "omega_squared", _HAYS, "0.1045"),
    case(8, "F(df1, df2)", _F8, "epsilon_squared", "formula of Kelley (1935)", "0.1061"),
    case(8, "F(df1, df2)", _F8, "cohens_f", "formula of Cohen (1988)", "0.3974"),
    case(8, "F(1, df2), two groups", row("one-way", f_value="6.34", df_effect="1", df_error="18"),
         "partial_eta_squared",
         "Lakens (2013) (value from memory)", "0.26"),
    refused(9, "F with df1 > 1, d of two arms wanted", row("one-way", f_value="4.50", df_effect="2", df_error="57",
            direction="+"), "cohens_d", "more than one numerator df",
            "Would open it: mean of each group and n of each group"),
    case(10, "F, N and k, no dfs", row("one-way", f_value="4.5", n_total="60", k_groups="3"), "omega_squared", _HAYS,
         omega(4.5, 2, 60)),
    # 11 dfs that are others
    case(11, "dfs swapped", row("one-way", f_value="4.50", df_effect="57", df_error="2", n_total="60", k_groups="3"),
         "eta_squared", "the audit must name the slip", None, grade="", finding=("inconsistent",
         "the two df swapped")),
    case(11, "total df as error df", row("one-way", f_value="4.50", df_effect="2", df_error="59", n_total="60",
         k_groups="3"),
         "omega_squared", "the audit must name the slip", None, grade="",
         finding=("inconsistent", "N - 1 printed as error df")),
    # 12, 13, 14 factorial F
    case(12, "main effect F, factorial", _MAIN, "partial_eta_squared", "df1·F/(df1·F + df2) (textbook identity)",
         eta(12, 1, 60)),
    case(12, "main effect F and N, factorial", {**_MAIN, "n_total": "64"}, "partial_omega_squared",
         "df1(F - 1)/(df1(F - 1) + N) (Keren & Lewis 1979)", omega(12, 1, 64)),
    refused(12, "main effect F alone, classical index wanted", _MAIN, "eta_squared",
         "effect and its own error term only",
            "ss_effect and ss_total"),
    refused(12, "main effect F alone, generalized index wanted", _MAIN, "generalized_eta_squared",
            "every measured factor", "code all terms of the model as rows"),
    case(12, "main effect F alone, d wanted", {**_MAIN, "direction": "+"}, "cohens_d",
         "t·sqrt(1/n1 + 1/n2) over the residual SD, which is said (Nouri & Greenberg 1995)",
         math.sqrt(12 * inverse(32, 32)), standardizer="residual"),
    case(12, "main effect F and N, g wanted", {**_MAIN, "n_total": "64", "direction": "+"}, "hedges_g",
         "J at the 60 df of the residual SD (Hedges 1981)", correction(60) * math.sqrt(12 * inverse(32, 32)),
         standardizer="residual",
         variance=correction(60) ** 2 * d_variance(32, 32, math.sqrt(12 * inverse(32, 32)))),
    case(12, "main effect F and all others, g wanted",
         [{**_TWO_BY_TWO[0], "direction": "+", **of_groups(n="32 32")}, *_TWO_BY_TWO[1:]], "hedges_g",
         "SD restored on 62 df, J at those (Nouri & Greenberg 1995; Hedges 1981)",
         correction(62) * math.sqrt(12 * inverse(32, 32)) * math.sqrt(62 / (60 + 4 + 2)), grade="assumption",
         standardizer="pooled"),
    case(12, "main effect F and all others, d wanted",
         [{**_TWO_BY_TWO[0], "direction": "+", **of_groups(n="32 32")}, *_TWO_BY_TWO[1:]], "cohens_d",
         "SD restored: d·sqrt((df2 + Σdf)/(df2 + Σdf·F)) (Nouri & Greenberg 1995; Morris & DeShon 1997)",
         math.sqrt(12 * inverse(32, 32)) * math.sqrt((60 + 2) / (60 + 4.0 + 2.0)), grade="assumption",
         standardizer="pooled", said=("cells of equal size",)),
    case(13, "F and df of all effects, one df2", _TWO_BY_TWO, "eta_squared", _ORTHOGONAL,
         12.0 / (12.0 + 4.0 + 2.0 + 60),
         grade="assumption", said=("cells of equal size",)),
    case(13, "F and df of all effects, one df2", _TWO_BY_TWO, "omega_squared",
         f"{_HAYS}, sums of squares over MS_error",
         (12.0 - 1) / (12.0 + 4.0 + 2.0 + 60 + 1), grade="assumption"),
    case(14, "interaction F", _TWO_BY_TWO, "partial_eta_squared", "df1·F/(df1·F + df2) (textbook identity)",
         eta(2, 1, 60), at=2),
    refused(14, "interaction F taken for the group contrast",
            row("factorial", term="a x b", f_value="12.0", df_effect="1", df_error="60", direction="+",
                **of_groups(n="32 32")), "cohens_d", "interaction"),
    case(14, "2 x 2 cells, the interaction asked for as weights",
         row("factorial", analysis="model", term="a x b", contrast="0.5, -0.5, -0.5, 0.5"), "mean_difference",
         "half the difference of differences of the cell means (textbook identity)",
         0.5 * ((7.98 - 16.77) - (13.23 - 22.70)),
         groups=tuple({"analysis": "model", "a": a, "b": b, "n": "10", "mean": m, "sd": s} for a, b, m, s in (
             ("1", "1", "7.98", "2.75"), ("1", "2", "16.77", "2.52"), ("2", "1", "13.23", "4.46"),
             ("2", "2", "22.70", "3.91")))),
    # 15 source table
    case(15, "full source table", _TASK, "eta_squared", _TASK_SOURCE + "SS/SS_total", 92.45 / 242.95),
    case(15, "full source table", _TASK, "partial_eta_squared", _TASK_SOURCE + "SS/(SS + SS_error)",
         92.45 / (92.45 + 25.6)),
    case(15, "full source table", _TASK, "omega_squared", _TASK_SOURCE + _HAYS, (92.45 - 1.6) / (242.95 + 1.6)),
    case(15, "full source table, reward measured", _TASK, "generalized_eta_squared",
         _TASK_SOURCE + "Olejnik & Algina (2003): own SS + SS of measured sources + SS_error",
         92.45 / (92.45 + 110.45 + 14.45 + 25.6)),
    case(15, "full source table, reward measured", _TASK, "generalized_eta_squared",
         _TASK_SOURCE + "Olejnik & Algina (2003): own SS is among the measured sources",
         110.45 / (110.45 + 14.45 + 25.6), at=1),
    case(15, "SS and total of a two-way table", row("factorial", term="gender", ss_effect="186.0937",
         ss_total="14651.16933"),
         "eta_squared", "Wuensch (2009), printed eta squared", "0.012702"),
    # 16, 17 repeated measurements
    case(16, "repeated-measures F", _WITHIN, "partial_eta_squared", "df1·F/(df1·F + df2) (textbook identity)",
         eta(6.34, 2, 38)),
    case(16, "repeated-measures F with one df", row("within", f_value="22.50", df_effect="1", df_error="9"),
         "partial_eta_squared", "Lakens (2013) (value from memory)", "0.71"),
    refused(16, "repeated-measures F, generalized index wanted", _WITHIN, "generalized_eta_squared",
            "sums of squares of participants", "ss_effect and ss_subjects"),
    case(16, "SS of effect, participants and error",
         row("within", ss_effect="72.0000", ss_subjects="52.6667", ss_error="177.3333", df_effect="2", df_error="4"),
         "generalized_eta_squared",
         "Crump, Navarro & Suzuki (2018), ch. 8: SS / SS_total = 72/302 with one within factor",
         "0.2384", grade="assumption", said=("the only one within participants",)),
    case(16, "the same, coded as the only term of its analysis",
         row("within", study="one", analysis="model", ss_effect="72.0000", ss_subjects="52.6667", ss_error="177.3333",
             df_effect="2", df_error="4"),
         "eta_squared", "Crump, Navarro & Suzuki (2018), ch. 8: SS / SS_total = 72/302", 72 / 302),
    case(16, "means and SDs of the conditions", row("within", **_CRUMP), "generalized_eta_squared",
         "the same study from its condition summaries (Olejnik & Algina 2003)", "0.2384", grade="assumption",
         said=("the only one within participants",)),
    case(16, "two within factors, F of all terms, partial omega squared of the interaction", _OATS,
         "partial_omega_squared",
         "Yates (1935), open data: 6 blocks, 3 x 4 conditions; df1(F - 1)/(df1(F - 1) + 72) (Maxwell & Delaney 2004)",
         omega(0.26, 6, 72), at=2),
    refused(16, "its interaction without the main effects", _OATS[2], "partial_omega_squared", "levels of its factors"),
    case(16, "a split plot coded as two within factors",
         row("within", term="nitrogen", f_value="37.69", df_effect="3", df_error="45", n_total="6"),
         "partial_eta_squared", "Yates (1935), open data: 15 error df within blocks, 45 pooled over three varieties",
         None, grade="", finding=("doubtful", "pooled over the 3 levels of another factor", "split plot")),
    refused(16, "repeated-measures F, d of two conditions wanted", _WITHIN, "hedges_g", "not the SD of scores",
            "Would open it: mean of each group and sd of each group"),
    case(17, "dfs corrected for sphericity (epsilon .7411)", row("within", f_value="106.60", df_effect="2.223",
         df_error="464.698", k_groups="4"), "partial_eta_squared",
         "open data (Greene & Hensher 1997, 210 travellers, 4 modes), exact arithmetic: .33777", "0.338",
         said=("sphericity correction",)),
    case(17, "dfs corrected for sphericity: N and whole dfs recovered", row("within", f_value="106.60",
         df_effect="2.22",
         df_error="464.70", k_groups="4"), "partial_omega_squared", "df1(F - 1)/(df1(F - 1) + N·k), N = 210, k = 4",
         omega(106.60, 3, 840)),
    case(17, "N that the dfs refute", row("within", f_value="106.60", df_effect="2.22", df_error="464.70",
         k_groups="4", n_total="200"), "partial_eta_squared", "464.70/2.22 + 1 = 210 (textbook identity)", None,
         grade="",
         finding=("inconsistent", "N")),
    case(17, "epsilon below its least value, 1/(k - 1)", row("within", f_value="106.60", df_effect="0.90",
         df_error="188.10", k_groups="4"), "partial_eta_squared", "ε·df1 is never below 1 (Greenhouse & Geisser 1959)",
         None, grade="", finding=("impossible", "df1")),
    case(17, "another epsilon in either df", row("within", f_value="6.34", df_effect="1.62", df_error="36.10",
         k_groups="3"), "partial_eta_squared", "the ratio of the dfs is N - 1, a whole number (textbook identity)",
         None,
         grade="", finding=("inconsistent", "df")),
    # 18 group by time
    case(18, "group x time F, 2 groups x 2 times", {**_MIXED, "term": "group x time"}, "hedges_g",
         "F = t² of the change scores: J·sqrt(F)·sqrt(1/n1 + 1/n2), over the SD of change (textbook identity)",
         correction(46) * math.sqrt(6.90 * inverse(24, 24)), standardizer="difference",
         variance=correction(46) ** 2 * d_variance(24, 24, math.sqrt(6.90 * inverse(24, 24)))),
    refused(18, "group main effect of such a design, d wanted", {**_MIXED, "term": "group"}, "hedges_g",
            "not the SD of scores"),
    refused(18, "group x time F with three times, d wanted",
            {**_MIXED, "term": "group x time", "df_effect": "2", "df_error": "92"}, "hedges_g",
            "more than one numerator df"),
    bound(18, "group x time, p < .05 only", row("mixed", term="group x time", p_value="< .05", df_effect="1",
         df_error="46",
          direction="+", **of_groups(n="24 24")), "cohens_d", "t with two-sided tail .05 (scipy)",
          float(stats.t.isf(0.025, 46)) * math.sqrt(inverse(24, 24)), OPEN),
]  # fmt: skip
