"""Honest studies: raw scores are drawn, statistics computed from the scores, and only then printed."""

from __future__ import annotations

import numpy as np
from scipy import stats

from extractor.sampling.moments import small_sample_factor
from tests.evidence.printing import Printed, Sheet, rounded

DESIGNS = ("one-way", "two-group")


def statistics(scores: list[np.ndarray]) -> dict[str, np.ndarray]:
    """One-way statistics of raw scores, one array of shape (rows, n_j) per group."""
    n = np.array([s.shape[1] for s in scores], dtype=float)
    mean = np.column_stack([s.mean(axis=1) for s in scores])
    sd = np.column_stack([s.std(axis=1, ddof=1) for s in scores])
    total, k = n.sum(), len(scores)
    grand = (mean * n).sum(axis=1) / total
    ss_effect = (n * (mean - grand[:, None]) ** 2).sum(axis=1)
    ss_error = ((n - 1) * sd**2).sum(axis=1)
    v1, v2 = k - 1.0, total - k
    ms_effect, ms_error = ss_effect / v1, ss_error / v2
    f = ms_effect / ms_error
    found = {
        "mean": mean,
        "sd": sd,
        "se": sd / np.sqrt(n),
        "ss_effect": ss_effect,
        "ss_error": ss_error,
        "ss_total": ss_effect + ss_error,
        "ms_effect": ms_effect,
        "ms_error": ms_error,
        "f_value": f,
        "p_value": stats.f.sf(f, v1, v2),
        "eta_squared": ss_effect / (ss_effect + ss_error),
        "omega_squared": v1 * (f - 1) / (v1 * (f - 1) + total),
        "epsilon_squared": v1 * (f - 1) / (v1 * f + v2),
        "cohens_f": np.sqrt(ss_effect / ss_error),
    }
    if k == 2:
        found["mean_difference"] = mean[:, 0] - mean[:, 1]
        found["cohens_d"] = found["mean_difference"] / np.sqrt(ms_error)
        found["hedges_g"] = found["cohens_d"] * small_sample_factor(v2)
        found["t_value"] = found["cohens_d"] / np.sqrt((1 / n).sum())
        found["se_difference"] = np.sqrt(ms_error * (1 / n).sum())
        found["r"] = found["t_value"] / np.sqrt(found["t_value"] ** 2 + v2)
    return found


def draw_scores(rng: np.random.Generator, rows: int, sizes: np.ndarray, integer: bool) -> list[np.ndarray]:
    """Raw scores per group: normal with unequal spreads, or whole numbers on a 1 to 7 scale."""
    k = len(sizes)
    shift = rng.normal(0, rng.choice([0.0, 0.3, 1.0]), size=k)
    spread = np.exp(rng.normal(0, 0.2, size=k))
    unit = 10.0 ** rng.integers(-1, 3)
    scores = []
    for j, n in enumerate(sizes):
        raw = rng.normal(shift[j], spread[j], size=(rows, n))
        scores.append(np.clip(np.round(4 + 1.3 * raw), 1, 7) if integer else unit * (5 + raw))
    return scores


def honest_sheet(rng: np.random.Generator, rows: int) -> Sheet:
    """One kind of study, printed ``rows`` times: one design, one set of group sizes, one choice of what is printed."""
    k = 2 if rng.random() < 0.4 else int(rng.integers(3, 9))
    low, high = (3, 12) if rng.random() < 0.4 else (8, 40)
    equal = rng.random() < 0.5
    sizes = np.full(k, rng.integers(low, high)) if equal else rng.integers(low, high, size=k)
    integer = bool(rng.random() < 0.4)
    scores = draw_scores(rng, rows, sizes, integer)
    with np.errstate(all="ignore"):
        found = statistics(scores)
    usable = np.isfinite(found["f_value"])
    found = {name: values[usable] for name, values in found.items()}
    rows = int(usable.sum())
    two_group = k == 2 and rng.random() < 0.7
    sheet = Sheet({}, {"design": "two-group" if two_group else "one-way"})
    if rng.random() < 0.5:
        sheet.facts["standardizer"] = "pooled"
    if integer and rng.random() < 0.8:
        sheet.facts["responses"] = "integer"
        if rng.random() < 0.7:
            sheet.columns["scale_min", None] = Printed(np.full(rows, 1.0), 0)
            sheet.columns["scale_max", None] = Printed(np.full(rows, 7.0), 0)

    def say(name: str, chance: float, decimals: int | None = None) -> None:
        if name in found and rng.random() < chance:
            places = int(rng.integers(1, 4)) if decimals is None else decimals
            sheet.columns[name, None] = rounded(found[name], places)

    def count(name: str, value: float, chance: float, group: int | None = None) -> None:
        if rng.random() < chance:
            sheet.columns[name, group] = Printed(np.full(rows, float(value)), 0)

    with_groups = rng.random() < 0.8
    mean_places, spread_places = int(rng.integers(0, 4)), int(rng.integers(1, 4))
    for j, n in enumerate(sizes, start=1):
        if with_groups or rng.random() < 0.1:
            count("n", n, 0.9 if with_groups else 0.3, j)
            sheet.columns["mean", j] = rounded(found["mean"][:, j - 1], mean_places)
    if with_groups:
        kind = rng.choice(["sd", "se", "both", "none"], p=[0.6, 0.15, 0.1, 0.15])
        for j in range(1, k + 1):
            if kind in ("sd", "both"):
                sheet.columns["sd", j] = rounded(found["sd"][:, j - 1], spread_places)
            if kind in ("se", "both"):
                sheet.columns["se", j] = rounded(found["se"][:, j - 1], spread_places)
    elif not any(q == "mean" for q, _ in sheet.columns):
        # scalars only: groups, if any, are unknown to the reader
        sheet.columns = {v: p for v, p in sheet.columns.items() if v[1] is None}
    coded = {g for _, g in sheet.columns if g is not None}
    if coded and coded != set(range(1, k + 1)):
        sheet.columns = {v: p for v, p in sheet.columns.items() if v[1] is None}
    if two_group and with_groups and rng.random() < 0.3:
        _say_limits(rng, sheet, found, sizes)
    count("n_total", sizes.sum(), 0.4)
    count("k_groups", k, 0.2)
    say("f_value", 0.8)
    if ("f_value", None) in sheet.columns and rng.random() < 0.9:
        count("df_effect", k - 1, 1.0)
        count("df_error", sizes.sum() - k, 1.0)
    if two_group and rng.random() < 0.6:
        say("t_value", 1.0)
        count("df", sizes.sum() - k, 0.8)
    _say_p(rng, sheet, found["p_value"])
    for name in ("eta_squared", "omega_squared", "epsilon_squared", "cohens_f"):
        say(name, 0.2)
    for name in ("ss_effect", "ss_error", "ss_total", "ms_effect", "ms_error"):
        say(name, 0.15)
    if two_group:
        for name in ("cohens_d", "hedges_g", "r", "mean_difference", "se_difference"):
            say(name, 0.2)
    if not sheet.columns:
        say("f_value", 1.0)
        count("df_effect", k - 1, 1.0)
        count("df_error", sizes.sum() - k, 1.0)
    return sheet


def _say_limits(
    rng: np.random.Generator, sheet: Sheet, found: dict[str, np.ndarray], sizes: np.ndarray
) -> None:
    """95 % limits of the group means (from t or z, own or pooled SD: papers differ) and of the difference."""
    places = int(rng.integers(1, 4))
    pooled = rng.random() < 0.3
    for j, n in enumerate(sizes, start=1):
        spread = np.sqrt(found["ms_error"]) if pooled else found["sd"][:, j - 1]
        critical = 1.96 if rng.random() < 0.3 else stats.t.ppf(0.975, sizes.sum() - 2 if pooled else n - 1)
        half = critical * spread / np.sqrt(n)
        sheet.columns["ci_low", j] = rounded(found["mean"][:, j - 1] - half, places)
        sheet.columns["ci_high", j] = rounded(found["mean"][:, j - 1] + half, places)
    half = stats.t.ppf(0.975, sizes.sum() - 2) * found["se_difference"]
    sheet.columns["ci_low_difference", None] = rounded(found["mean_difference"] - half, places)
    sheet.columns["ci_high_difference", None] = rounded(found["mean_difference"] + half, places)


def _say_p(rng: np.random.Generator, sheet: Sheet, p: np.ndarray) -> None:
    kind = rng.choice(["exact", "threshold", "none"], p=[0.5, 0.25, 0.25])
    if kind == "exact":
        places = int(rng.integers(2, 5))
        printed = np.round(p, places)
        nought = printed == 0
        # "p = .000" stands for anything below half a unit, and "p < .001" is printed in its stead
        bound = 10.0**-places * (0.5 if rng.random() < 0.5 else 1.0)
        value = np.where(nought, bound, printed)
        sheet.columns["p_value", None] = Printed(value, places, below=nought)
    elif kind == "threshold":
        below, above = p < 0.05, p > 0.05
        value = np.where(p < 0.001, 0.001, np.where(p < 0.01, 0.01, 0.05))
        sheet.columns["p_value", None] = Printed(value, 3, below=below, above=above)
