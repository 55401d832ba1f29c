"""Writes the demo sheets. Everything in them is invented: places, studies and numbers.

    python examples/build_demo.py

Scenario: does gardening at school change attention scores? Scores are drawn at random, statistics are computed from
them, and each study then prints them in its own way. A few rows carry a slip on purpose; their note says which.
"""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
from openpyxl import Workbook
from other_reports import Row, p_text, rows_other_reports
from scipy import stats

from extractor.output.workbook import save

HERE = Path(__file__).parent
RNG = np.random.default_rng(20261201)

GROUPS = 4
COLUMNS = [
    "study", "outcome", "page", "design", "analysis", "term", "contrast", "direction", "reported",
    "f_value", "df_effect", "df_error", "t_value", "df", "p_value", "tails", "n_total", "k_groups",
    "ss_effect", "ss_error", "ss_total", "ss_subjects", "ms_effect", "ms_error",
    *(f"{name}_{g}" for g in range(1, GROUPS + 1) for name in ("n", "mean", "sd")),
    *(f"{name}_{g}" for g in (1, 2, 3) for name in ("se",)),
    *(f"{name}_{g}" for g in (1, 2) for name in ("ci_low", "ci_high", "adjusted_mean")),
    *(f"{name}_{g}" for g in (1, 2) for name in ("mean_pre", "sd_pre", "mean_post", "sd_post")),
    "mean_difference", "se_difference", "ci_low_difference", "ci_high_difference",
    "eta_squared", "partial_eta_squared", "omega_squared", "epsilon_squared", "cohens_f", "cohens_d", "hedges_g",
    "r", "correlation", "covariate_r", "n_covariates", "measured_factors",
    "welch_f", "welch_df_error", "adjusted_p", "comparisons", "lsd_value", "significance_level",
    *(f"{name}_{g}" for g in (1, 2) for name in ("median", "q1", "q3", "mean_change", "sd_change")),
    "u_value", "h_value", "z_value", "chi_squared", "count_a", "count_b", "count_c", "count_d", "odds_ratio",
    "effect_ci_low", "effect_ci_high", "scale_min", "scale_max", "scale_items", "responses", "icc", "cluster_size",
    "standardizer", "school", "note",
]  # fmt: skip


def one_way(sizes: list[int], shift: float = 0.35) -> dict[str, np.ndarray | float]:
    """Statistics of one simulated study; shift is the spread of the group means in SDs."""
    means = 50 + 8 * shift * np.linspace(1, -1, len(sizes)) + RNG.normal(0, 0.8, len(sizes))
    scores = [RNG.normal(m, 8, n) for m, n in zip(means, sizes, strict=True)]
    n = np.array(sizes)
    mean = np.array([s.mean() for s in scores])
    sd = np.array([s.std(ddof=1) for s in scores])
    grand = (n * mean).sum() / n.sum()
    effect, error = (n * (mean - grand) ** 2).sum(), ((n - 1) * sd**2).sum()
    v1, v2 = len(n) - 1, int(n.sum() - len(n))
    f = effect / v1 / (error / v2)
    d = (mean[0] - mean[1]) / np.sqrt(error / v2)
    return {
        "n": n, "mean": mean, "sd": sd, "v1": v1, "v2": v2, "ss": effect, "sse": error, "f": f,
        "p": float(stats.f.sf(f, v1, v2)), "d": d, "t": d / np.sqrt(1 / n[0] + 1 / n[1]), "mse": error / v2,
    }  # fmt: skip


def group_cells(s: dict, *names: str, mean_places: int = 1, sd_places: int = 1) -> Row:
    """Group columns of a study."""
    row: Row = {}
    for j in range(len(s["n"])):
        for name in names:
            value = {
                "n": f"{s['n'][j]}",
                "mean": f"{s['mean'][j]:.{mean_places}f}",
                "sd": f"{s['sd'][j]:.{sd_places}f}",
                "se": f"{s['sd'][j] / np.sqrt(s['n'][j]):.2f}",
            }[name]
            row[f"{name}_{j + 1}"] = value
    return row


# fmt: off
# one line for each study reads best


def rows_one_way() -> list[Row]:
    """Studies with one factor and independent groups: each prints in another way."""
    three = lambda shift=0.35: one_way([int(n) for n in RNG.integers(15, 32, 3)], shift)  # noqa: E731
    two = lambda shift=0.35: one_way([int(n) for n in RNG.integers(14, 40, 2)], shift)  # noqa: E731
    rows: list[Row] = []

    def add(place: str, design: str, cells: Row, note: str = "") -> None:
        attention = {"outcome": "attention", "page": str(RNG.integers(101, 480)), "note": note}
        rows.append({"study": place, "design": design} | attention | cells)

    s = three()
    add("Alder Quay", "one-way", group_cells(s, "n", "mean", "sd"), "means, SDs and ns only")
    s = one_way([18, 21, 19, 24])
    full = {"f_value": f"{s['f']:.2f}", "df_effect": "3", "df_error": str(s["v2"]), "p_value": p_text(s["p"])}
    add("Birchmere", "one-way", group_cells(s, "n", "mean", "sd") | full, "four groups, printed twice over")
    s = three()
    add("Cobble Bay", "one-way", group_cells(s, "n", "mean", mean_places=2) | {"f_value": f"{s['f']:.2f}"},
         "no SDs: MS_error from F")
    s = three()
    add("Dunmoor", "one-way", group_cells(s, "n", "mean") | {"ms_error": f"{s['mse']:.1f}"}, "means and MS_error")
    s = three()
    add("Elmstead", "one-way", group_cells(s, "n", "mean", "se"), "standard errors")
    s = three()
    add("Fernhill", "one-way", {"f_value": f"{s['f']:.2f}", "df_effect": "2", "df_error": str(s["v2"])}, "F with dfs")
    s = three()
    add("Gorse Point", "one-way", {"f_value": f"{s['f']:.1f}", "n_total": str(s["n"].sum()), "k_groups": "3"},
         "F with N and k")
    s = three(0.5)
    add("Harrow Dyke", "one-way", {"p_value": p_text(max(s["p"], 0.0012)), "df_effect": "2",
         "df_error": str(s["v2"])}, "exact p with dfs")
    s = three(0.5)
    add("Ivy Cross", "one-way", {"p_value": "< .05", "n_total": str(s["n"].sum()), "k_groups": "3"},
         "a bound: p < .05")
    add("Juniper Flats", "one-way", {"p_value": "ns", "n_total": "66", "k_groups": "3"}, "a bound: not significant")
    s = three()
    table = {"ss_effect": f"{s['ss']:.1f}", "ss_error": f"{s['sse']:.1f}", "df_effect": "2", "df_error": str(s["v2"])}
    add("Kestrel Edge", "one-way", table, "source table")
    s = three()
    total = {"ss_effect": f"{s['ss']:.1f}", "ss_total": f"{s['ss'] + s['sse']:.1f}", "n_total": str(s["n"].sum()),
         "k_groups": "3"}
    add("Larch Fold", "one-way", total, "source table with one line missing")
    s = three()
    squares = {"ms_effect": f"{s['ss'] / 2:.1f}", "ms_error": f"{s['mse']:.1f}", "df_effect": "2",
         "df_error": str(s["v2"])}
    add("Mallow Green", "one-way", squares, "mean squares")
    s = three()
    eta = s["ss"] / (s["ss"] + s["sse"])
    add("Nettle Hythe", "one-way", {"eta_squared": f"{eta:.3f}".lstrip("0"), "df_effect": "2",
         "df_error": str(s["v2"])}, "eta squared with dfs")
    s = three(0.6)
    omega = 2 * (s["f"] - 1) / (2 * (s["f"] - 1) + s["n"].sum())
    add("Oakham Reach", "one-way", {"omega_squared": f"{omega:.2f}".lstrip("0"), "n_total": str(s["n"].sum()),
         "k_groups": "3"}, "omega squared")
    s = three(0.6)
    epsilon = 2 * (s["f"] - 1) / (2 * s["f"] + s["v2"])
    add("Pine Sound", "one-way", {"epsilon_squared": f"{epsilon:.3f}", "df_effect": "2", "df_error": str(s["v2"])},
         "epsilon squared")
    s = three()
    add("Quarry Lane", "one-way", {"cohens_f": f"{np.sqrt(s['ss'] / s['sse']):.2f}", "df_effect": "2",
         "df_error": str(s["v2"])}, "Cohen's f")
    s = three(0.5)
    eta = s["ss"] / (s["ss"] + s["sse"])
    p_printed = p_text(s["p"]).removeprefix("< ")
    text = f"F(2, {s['v2']}) = {s['f']:.2f}, p = {p_printed}, η² = {eta:.2f}".replace("= .001,", "< .001,")
    add("Rowan Weir", "one-way", {"reported": text}, "free text")
    s = three()
    slip = f"{s['f'] * 10:.1f}"
    wrong = {"f_value": slip, "df_effect": "2", "df_error": str(s["v2"])}
    add("Sedge Moor", "one-way", group_cells(s, "n", "mean", "sd", mean_places=2, sd_places=2) | wrong,
         "planted: decimal point of F slipped")
    s = three(0.5)
    wrong = {f"sd_{j + 1}": f"{s['sd'][j] / np.sqrt(s['n'][j]):.2f}" for j in range(3)}
    printed = {"f_value": f"{s['f']:.2f}", "df_effect": "2", "df_error": str(s["v2"])}
    add("Thistle Bank", "one-way", group_cells(s, "n", "mean", mean_places=2) | wrong | printed,
         "planted: standard errors in the SD columns")

    s = two()
    add("Upper Vetch", "two-group", {"t_value": f"{s['t']:.2f}", "df": str(s["v2"]), "n_1": str(s["n"][0]),
         "n_2": str(s["n"][1])}, "t with df and ns")
    s = two()
    add("Vale of Wick", "two-group", {"t_value": f"{s['t']:.2f}", "n_total": str(s["n"].sum())},
         "t with N only: equal groups assumed for d")
    s = two()
    add("Willow Ford", "two-group", group_cells(s, "n", "mean", "sd"), "two groups")
    s = two(0.5)
    f_row = {"f_value": f"{s['f']:.2f}", "df_effect": "1", "n_total": str(s["n"].sum()), "n_1": str(s["n"][0]),
         "n_2": str(s["n"][1]), "direction": "+"}
    add("Yarrow Hill", "two-group", f_row, "F with one df; the sign from the text")
    s = two()
    add("Zinnia Court", "two-group", {"f_value": f"{s['f']:.2f}", "df_effect": "1", "df_error": str(s["v2"])},
         "F with one df, no sign")
    s = two(0.5)
    add("Ashby East", "two-group", {"cohens_d": f"{s['d']:.2f}", "n_1": str(s["n"][0]), "n_2": str(s["n"][1])},
         "printed d")
    s = two(0.5)
    g = s["d"] * (1 - 3 / (4 * s["v2"] - 1))
    add("Ashby West", "two-group", {"hedges_g": f"{g:.2f}", "n_1": str(s["n"][0]), "n_2": str(s["n"][1])}, "printed g")
    s = two(0.5)
    r = s["t"] / np.sqrt(s["t"] ** 2 + s["v2"])
    add("Bramble End", "two-group", {"r": f"{r:.2f}", "n_total": str(s["n"].sum())}, "point-biserial r")
    s = two()
    limits = {}
    for j in range(2):
        half = stats.t.ppf(0.975, s["n"][j] - 1) * s["sd"][j] / np.sqrt(s["n"][j])
        limits |= {f"ci_low_{j + 1}": f"{s['mean'][j] - half:.2f}", f"ci_high_{j + 1}": f"{s['mean'][j] + half:.2f}"}
    add("Clover Hatch", "two-group", group_cells(s, "n", "mean", mean_places=2) | limits,
         "confidence limits of the means")
    s = two(0.5)
    difference = s["mean"][0] - s["mean"][1]
    half = stats.t.ppf(0.975, s["v2"]) * np.sqrt(s["mse"] * (1 / s["n"]).sum())
    limits = {"mean_difference": f"{difference:.2f}", "ci_low_difference": f"{difference - half:.2f}",
         "ci_high_difference": f"{difference + half:.2f}"}
    add("Daisy Holm", "two-group", limits | {"n_1": str(s["n"][0]), "n_2": str(s["n"][1])},
         "difference with confidence limits")
    s = one_way([22, 20, 25], 0.5)
    add("Elder Strand", "one-way", group_cells(s, "n", "mean", "sd") | {"contrast": "1 - 3"},
         "a contrast of two of three groups")
    return rows


def rows_other_designs() -> list[Row]:
    """Studies of other designs: the conversions that go wrong most often."""
    base = {"outcome": "attention"}
    n = 24
    person = RNG.normal(0, 6, n)
    scores = 50 + person[:, None] + RNG.normal(0, 5, (n, 2)) + np.array([2.5, 0.0])
    change = scores[:, 0] - scores[:, 1]
    t = change.mean() / (change.std(ddof=1) / np.sqrt(n))
    paired = {"n_1": str(n), "n_2": str(n), "t_value": f"{t:.2f}", "df": str(n - 1)}
    for j in range(2):
        paired |= {f"mean_{j + 1}": f"{scores[:, j].mean():.2f}", f"sd_{j + 1}": f"{scores[:, j].std(ddof=1):.2f}"}
    conditions = 50 + RNG.normal(0, 6, (20, 1)) + RNG.normal(0, 4, (20, 3)) + np.array([2.0, 0.5, 0.0])
    grand = conditions.mean()
    effect = 20 * ((conditions.mean(axis=0) - grand) ** 2).sum()
    subjects = 3 * ((conditions.mean(axis=1) - grand) ** 2).sum()
    error = ((conditions - grand) ** 2).sum() - effect - subjects
    f = effect / 2 / (error / 38)
    within = {"f_value": f"{f:.2f}", "df_effect": "2", "df_error": "38"}
    sums = {"ss_effect": f"{effect:.1f}", "ss_subjects": f"{subjects:.1f}", "ss_error": f"{error:.1f}"}
    corrected = {"f_value": f"{f:.2f}", "df_effect": "1.62", "df_error": "30.78", "k_groups": "3"}
    rows = [
        {"study": "Fallow Gate", "design": "paired", "note": "pairs: r follows from t and both SDs"} | paired,
        {"study": "Glen Saltings", "design": "paired", "t_value": "2.61", "df": "27", "direction": "+",
        "note": "paired t only"},
        {"study": "Heath Barrow", "design": "within", "note": "repeated-measures F"} | within,
        {"study": "Inch Meadow", "design": "within", "note": "all sums of squares"} | within | sums,
        {"study": "Jasmine Row", "design": "within", "note": "sphericity-corrected df"} | corrected,
        {
            "study": "Kiln Orchard", "design": "pre-post-control", "n_1": "26", "n_2": "24",
            "mean_pre_1": "47.2", "sd_pre_1": "8.1", "mean_post_1": "52.0", "sd_post_1": "8.4",
            "mean_pre_2": "47.9", "sd_pre_2": "7.7", "mean_post_2": "49.1", "sd_post_2": "8.0",
            "correlation": ".62", "note": "pretest, posttest, control",
        },
        {
            "study": "Lime Wharf", "design": "ancova", "n_1": "31", "n_2": "29", "f_value": "5.40", "df_effect": "1",
            "df_error": "57", "n_covariates": "1", "covariate_r": ".55", "direction": "+", "note": "adjusted F with R",
        },
        {
            "study": "Moss Landing", "design": "ancova", "n_1": "28", "n_2": "30", "f_value": "4.10", "df_effect": "1",
            "df_error": "55", "n_covariates": "1", "direction": "+", "note": "adjusted F, R not reported: refused",
        },
        {"study": "Nut Coppice", "design": "mixed", "term": "group x time", "f_value": "6.90", "df_effect": "1",
         "df_error": "46", "n_1": "24", "n_2": "24", "direction": "+", "note": "group by time, two by two"},
    ]  # fmt: skip
    table = [("garden", "12.40", "1"), ("season", "3.10", "2"), ("garden x season", "1.80", "2")]
    for term, value, df in table:
        rows.append({
            "study": "Osier Mead", "design": "factorial", "analysis": "Osier Mead 1", "term": term, "f_value": value,
            "df_effect": df, "df_error": "84", "measured_factors": "season",
            "note": "all three F of a two-factor design", "direction": "+" if df == "1" else "",
            "n_1": "45" if df == "1" else "", "n_2": "45" if df == "1" else "",
        })  # fmt: skip
    for term in ("garden", "age", "garden x age"):
        rows.append({
            "study": "Poplar Stile", "design": "factorial", "analysis": "Poplar Stile 1", "term": term,
            "note": "cells in the sheet groups",
        })  # fmt: skip
    return [base | row for row in rows]


# fmt: on

CELLS = [
    ("Poplar Stile 1", "", "yes", "younger", "12", "53.1", "7.4"), ("Poplar Stile 1", "", "yes", "older", "14",
         "55.6", "8.0"),
    ("Poplar Stile 1", "", "no", "younger", "13", "48.2", "7.9"), ("Poplar Stile 1", "", "no", "older", "11", "52.9",
         "7.1"),
    ("Ulex Head 1", "daily", "", "", "25", "53.9", "8.2"), ("Ulex Head 1", "weekly", "", "", "25", "51.6", "7.7"),
    ("Ulex Head 1", "none", "", "", "25", "49.3", "8.0"),
    ("Clary Moor 1", "garden, girls", "", "", "18", "54.2", "7.6"),
    ("Clary Moor 1", "garden, boys", "", "", "20", "51.9", "8.3"), ("Clary Moor 1", "none", "", "", "37", "49.5",
         "7.9"),
]  # fmt: skip


def write_csv(path: Path, columns: list[str], rows: list[Row]) -> None:
    """One sheet as csv."""
    with path.open("w", newline="", encoding="utf-8") as stream:
        writer = csv.DictWriter(stream, columns, restval="", lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def write_workbook(path: Path, columns: list[str], rows: list[Row], cells: list[dict[str, str]]) -> None:
    """The same with a sheet of groups; all cells are text, so that no printed zero is lost."""
    book = Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.title = "studies"
    sheet.append(columns)
    for row in rows:
        sheet.append([row.get(c, "") or None for c in columns])
    groups = book.create_sheet("groups")
    groups.append(list(cells[0]))
    for cell in cells:
        groups.append(list(cell.values()))
    for each in (sheet, groups):
        for line in each.iter_rows():
            for one in line:
                one.number_format = "@"
    save(book, path)


def main() -> None:
    """Write all demo sheets beside this file."""
    names = ("analysis", "group", "garden", "age", "n", "mean", "sd")
    cells = [dict(zip(names, cell, strict=True)) for cell in CELLS]
    between = rows_one_way()
    everything = between + rows_other_designs() + rows_other_reports()
    used = [c for c in COLUMNS if any(row.get(c) for row in between)]
    write_csv(HERE / "gardens.csv", used, between)
    used = [c for c in COLUMNS if any(row.get(c) for row in everything)]
    write_workbook(HERE / "gardens.xlsx", used, everything, cells)


if __name__ == "__main__":
    main()
