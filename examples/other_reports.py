"""The rows of the demo for the ways of reporting that are left, each with the number it has among the patterns.

Drawn from a generator of their own, so that the other rows keep their numbers. Invented, as all of the demo.
"""

from __future__ import annotations

import numpy as np
from scipy import stats

Row = dict[str, str]
DRAW = np.random.default_rng(20261202)


def p_text(p: float) -> str:
    """A p value as journals print it."""
    return "< .001" if p < 0.001 else f"{p:.3f}".lstrip("0")


def groups_of(*sizes: int, shift: float = 0.4, spread: float = 8.0) -> dict:
    """Scores of independent groups and their pooled test."""
    centres = 50 + spread * shift * np.linspace(1, -1, len(sizes))
    scores = [DRAW.normal(centre, spread, n) for centre, n in zip(centres, sizes, strict=True)]
    n, mean, sd = (
        np.array(sizes),
        np.array([x.mean() for x in scores]),
        np.array([x.std(ddof=1) for x in scores]),
    )
    v1, v2 = len(n) - 1, int(n.sum() - len(n))
    mse = ((n - 1) * sd**2).sum() / v2
    f = (n * (mean - (n * mean).sum() / n.sum()) ** 2).sum() / v1 / mse
    t = (mean[0] - mean[1]) / np.sqrt(mse * (1 / n[0] + 1 / n[1]))
    p = float(stats.f.sf(f, v1, v2))
    return {
        "scores": scores,
        "n": n,
        "mean": mean,
        "sd": sd,
        "v1": v1,
        "v2": v2,
        "mse": mse,
        "f": f,
        "t": t,
        "p": p,
    }


def numbered(name: str, values: list | np.ndarray, places: int = 1) -> Row:
    """One column per group."""
    return {f"{name}_{j}": f"{value:.{places}f}" for j, value in enumerate(values, start=1)}


def summaries(s: dict, places: int = 1) -> Row:
    """n, mean and SD of each group."""
    return numbered("n", s["n"], 0) | numbered("mean", s["mean"], places) | numbered("sd", s["sd"], places)


# fmt: off
# one line for each study reads best


def rows_other_reports() -> list[Row]:
    """The ways of reporting that are left: other tests, bounds, ranks, counts, dependence, cells that are unclear."""
    rows: list[Row] = []

    def add(place: str, pattern: int, note: str, design: str, *cells: Row, **more: str) -> None:
        row: Row = {"study": place, "outcome": "attention", "page": str(DRAW.integers(101, 480)), "design": design}
        for part in cells:
            row |= part
        rows.append(row | more | {"note": f"pattern {pattern}: {note}"})

    s = groups_of(23, 25)
    plain = numbered("n", s["n"], 0) | numbered("mean", s["mean"])
    add("Quill Strand", 7, "read off a graph, bars not explained: refused", "two-group", plain)
    s = groups_of(22, 27)
    plain = numbered("n", s["n"], 0) | numbered("mean", s["mean"])
    add("Rook Landing", 7, "read off a graph, bars said to be standard errors", "two-group", plain,
        numbered("se", s["sd"] / np.sqrt(s["n"])))
    s = groups_of(21, 19, 23)
    add("Salt Row", 11, "planted: total df printed as error df", "one-way", f_value=f"{s['f']:.2f}", df_effect="2",
        df_error=str(s["v2"] + 2), n_total=str(s["n"].sum()), k_groups="3")
    add("Tarn End", 12, "a main effect F alone", "factorial", term="garden", f_value="6.84", df_effect="1",
         df_error="76",
        n_1="40", n_2="40", direction="+")
    add("Umber Dock", 19, "a multivariate test: refused", "one-way",
         reported="Wilks' Λ = .83, F(4, 112) = 2.75, p = .032")
    s = groups_of(18, 22, 20)
    weight = s["n"] / s["sd"] ** 2
    share = weight / weight.sum()
    imbalance = ((1 - share) ** 2 / (s["n"] - 1)).sum()
    welch = (weight * (s["mean"] - (share * s["mean"]).sum()) ** 2).sum() / 2 / (1 + imbalance / 4)
    heteroscedastic = {"welch_f": f"{welch:.2f}", "df_effect": "2", "welch_df_error": f"{8 / (3 * imbalance):.2f}"}
    add("Vetch Barrow", 20, "Welch's F: refused", "one-way", heteroscedastic)
    add("Warren Slip", 20, "Welch's F beside means, SDs and ns", "one-way", heteroscedastic,
        summaries(s))
    scores = DRAW.normal(53, 8, 26)
    one = (scores.mean() - 50) / (scores.std(ddof=1) / np.sqrt(26))
    add("Yew Hythe", 24, "one sample against the norm of 50, coded as paired", "paired", t_value=f"{one:.2f}", df="25")
    s = groups_of(28, 26)
    add("Acorn Mole", 26, "one-tailed p", "two-group", numbered("n", s["n"], 0), p_value=p_text(max(s["p"] / 2,
         0.002)),
        tails="1", direction="+")
    add("Bracken Spit", 28, "p = .000 is a bound", "two-group", numbered("n", s["n"], 0), p_value=".000",
         direction="+")
    s = groups_of(24, 24, 24, shift=0.5)
    raw = 2 * float(stats.t.sf(abs(s["t"]), s["v2"]))
    add("Cedar Bight", 30, "Bonferroni's p of three comparisons", "one-way", numbered("n", s["n"], 0),
        adjusted_p=p_text(max(min(3 * raw, 1), 0.002)), comparisons="3", direction="+")
    least = stats.t.ppf(0.975, s["v2"]) * np.sqrt(2 * s["mse"] / 24)
    means = numbered("n", s["n"], 0) | numbered("mean", s["mean"])
    add("Dock Furlong", 31, "least significant difference", "one-way", means, lsd_value=f"{least:.2f}",
         significance_level=".05")
    s = groups_of(21, 21, 21)
    marked = {f"mean_{j}": f"{s['mean'][j - 1]:.1f}{letter}" for j, letter in enumerate("abb", start=1)}
    add("Elm Shoal", 31, "letters only: refused", "one-way", numbered("n", s["n"], 0), marked)
    for term, f, share in (("garden", "51.1", ".46"), ("season", "43.4", ".42"), ("garden x season", "25.7", ".30")):
        add("Fern Staithe", 32, "planted: partial eta squared labelled eta squared", "factorial",
        analysis="Fern Staithe 1",
            term=term, f_value=f, df_effect="1", df_error="60", eta_squared=share)
    add("Gale Croft", 33, "partial eta squared with dfs and N", "factorial", term="garden", partial_eta_squared=".17",
        df_effect="1", df_error="60", n_total="64")
    s = groups_of(31, 29)
    add("Holm Weir", 39, "weight of a group dummy, covariates in the model", "ancova", numbered("n", s["n"], 0),
        numbered("sd", s["sd"]), mean_difference="3.10", se_difference="1.45", n_covariates="2")
    add("Iris Quay", 40, "change scores", "pre-post-control", n_1="27", n_2="25", mean_change_1="4.8",
         sd_change_1="6.2",
        mean_change_2="1.2", sd_change_2="5.9")
    times = groups_of(30, 28, shift=0.25, spread=0.5)
    add("Juncus Lode", 42, "means and SDs of log reaction times", "two-group", summaries(times, 2),
         outcome="log reaction time")
    add("Kelp Nook", 42, "change in per cent: refused", "two-group", n_1="30", n_2="30", mean_1="12%", mean_2="5%",
        sd_1="4.1", sd_2="4.4", outcome="change in attention")
    for place, sizes, skew in (("Ling Saltern", (40, 42), 0.0), ("Maple Hard", (38, 41), 20.0)):
        s = groups_of(*sizes)
        quartiles = np.array([np.quantile(x, (0.25, 0.5, 0.75)) for x in s["scores"]])
        quartiles[:, 2] += skew
        middle = numbered("n", s["n"], 0)
        for name, values in zip(("q1", "median", "q3"), quartiles.T, strict=True):
            middle |= numbered(name, values)
        note = "medians and quartiles" + (", skewed: refused" if skew else "")
        add(place, 43, note, "two-group", middle)
    s = groups_of(20, 18)
    u = float(stats.mannwhitneyu(*s["scores"]).statistic)
    add("Nettle Cut", 44, "Mann-Whitney U", "two-group", numbered("n", s["n"], 0), u_value=f"{u:.0f}",
        direction="+" if u > 180 else "-")
    s = groups_of(15, 16, 17)
    add("Oak Levels", 44, "Kruskal-Wallis H: refused", "one-way",
         h_value=f"{stats.kruskal(*s['scores']).statistic:.2f}",
        n_total="48", k_groups="3")
    counts = {"count_a": "30", "count_b": "20", "count_c": "18", "count_d": "32"}
    add("Pear Ness", 45, "counts", "two-group", counts, n_1="50", n_2="50", outcome="passed the attention test")
    add("Quince Flats", 45, "chi-square with N", "two-group", chi_squared="5.77", n_total="100", direction="+",
        outcome="passed the attention test")
    add("Reed Wharf", 45, "odds ratio with limits", "two-group", odds_ratio="2.67", effect_ci_low="1.19",
         effect_ci_high="5.98",
        outcome="passed the attention test")
    items = {"scale_min": "1", "scale_max": "5", "scale_items": "1", "responses": "integer", "outcome": "one rating"}
    add("Sorrel Dyke", 46, "planted: a mean that 20 whole ratings cannot have", "two-group", items, n_1="20", n_2="20",
        mean_1="3.48", mean_2="3.10", sd_1="1.10", sd_2="0.91")
    for outcome in ("attention", "absence"):
        s = groups_of(25, 25)
        add("Thyme Batch", 47, "two outcomes of the same children", "two-group", summaries(s),
        outcome=outcome)
    for contrast in ("1 - 3", "2 - 3"):
        add("Ulex Head", 48, "two arms, one control; groups in the sheet groups", "one-way", analysis="Ulex Head 1",
            contrast=contrast)
    s = groups_of(60, 60)
    add("Viola Marsh", 49, "classes of 20 randomised", "two-group", summaries(s),
         cluster_size="20", icc=".05")
    add("Wold Sluice", 50, "crossover", "paired", n_1="22", n_2="22", mean_1="52.4", mean_2="49.9", sd_1="7.9",
         sd_2="8.3",
        correlation=".68")
    add("Yarrow Edge", 51, "planted: trials counted as children", "one-way", f_value="7.20", df_effect="1",
         df_error="1438",
        n_total="36")
    add("Ash Hollow", 52, "z of a mixed model: refused", "mixed", term="garden x time", z_value="2.33", n_1="30",
         n_2="30",
        direction="+")
    add("Beech Rise", 52, "Bayes factor: refused", "two-group", reported="BF10 = 4.2", n_1="30", n_2="30")
    add("Clary Moor", 53, "an arm in two subgroups; groups in the sheet groups", "one-way", analysis="Clary Moor 1",
        contrast="0.5, 0.5, -1")
    for place, n, cell, note in (
        ("Dill Bank", "29", "53,4", "a decimal comma"),
        ("Erica Combe", "32", "52.6*", "a star"),
        ("Flax Pool", "27", "54.1 (7.8)", "two numbers in a cell: refused"),
    ):
        add(place, 54, note, "two-group", n_1=n, n_2="30", mean_1=cell, mean_2="49.8", sd_1="7.8", sd_2="8.1")
    return rows
