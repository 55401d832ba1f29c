"""An invented review of simulated studies: every number of every row is known, and only some of them are printed.

The numbers are computed from raw scores by the textbook formulas, without the program's own relations.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd
from scipy import stats

from extractor.codebook import Codebook
from extractor.table import Assumption

Truth = dict[str, float]
"""The numbers of one row by heading."""

ASSUMING = Codebook(
    assumptions={"correlation": Assumption(0.5, "invented protocol", 0.3, 0.8)},
    path="assuming.toml",
    title="assuming",
)
"""A codebook that supplies the correlation of repeated measurements, with its range."""


def _summaries(groups: list[np.ndarray], suffix: str = "") -> Truth:
    found: Truth = {}
    for number, scores in enumerate(groups, 1):
        found[f"mean{suffix}_{number}"] = float(scores.mean())
        found[f"sd{suffix}_{number}"] = float(scores.std(ddof=1))
    return found


def _test(f: float, df_effect: int, df_error: int) -> Truth:
    p = float(stats.f.sf(f, df_effect, df_error))
    return {"f_value": f, "df_effect": df_effect, "df_error": df_error, "p_value": p, "tails": 2}


def _table(ss_effect: float, df_effect: int, ss_error: float, df_error: int) -> Truth:
    ms_error = ss_error / df_error
    found = _test(ss_effect / df_effect / ms_error, df_effect, df_error)
    return found | {"ss_effect": ss_effect, "ss_error": ss_error, "ms_error": ms_error}


def _contrast(difference: float, se: float) -> Truth:
    t = difference / se
    return {"mean_difference": difference, "se_difference": se, "t_value": t, "direction": float(np.sign(t))}


def one_way(rng: np.random.Generator, k: int) -> Truth:
    sizes = rng.integers(8, 40, k)
    groups = [rng.normal(5 + rng.normal(0, 1), 2, n) for n in sizes]
    every = np.concatenate(groups)
    between = float(sum(len(g) * (g.mean() - every.mean()) ** 2 for g in groups))
    within = float(sum(((g - g.mean()) ** 2).sum() for g in groups))
    found = _table(between, k - 1, within, len(every) - k)
    se = float(np.sqrt(found["ms_error"] * (1 / sizes[0] + 1 / sizes[1])))
    found |= _contrast(float(groups[0].mean() - groups[1].mean()), se)
    found |= {f"n_{i}": int(n) for i, n in enumerate(sizes, 1)} | {"n_total": len(every), "k_groups": k}
    return found | _summaries(groups) | {"ss_total": between + within}


def two_group(rng: np.random.Generator) -> Truth:
    return one_way(rng, 2)


def paired(rng: np.random.Generator) -> Truth:
    n = int(rng.integers(12, 40))
    base = rng.normal(5, 1.5, n)
    scores = [base + rng.normal(shift, 1.2, n) for shift in (0.0, rng.normal(0, 1))]
    change = scores[0] - scores[1]
    found = _contrast(float(change.mean()), float(change.std(ddof=1) / np.sqrt(n)))
    found |= _test(found["t_value"] ** 2, 1, n - 1)
    found |= {"n_total": n, "sd_change_1": float(change.std(ddof=1))}
    return found | _summaries(scores) | {"correlation": float(np.corrcoef(*scores)[0, 1])}


def within(rng: np.random.Generator) -> Truth:
    n, k = int(rng.integers(12, 30)), 3
    scores = rng.normal(5, 1.5, n)[:, None] + rng.normal(rng.normal(0, 0.7, k), 1.0, (n, k))
    grand = scores.mean()
    effect = float(n * ((scores.mean(axis=0) - grand) ** 2).sum())
    subjects = float(k * ((scores.mean(axis=1) - grand) ** 2).sum())
    total = float(((scores - grand) ** 2).sum())
    found = _table(effect, k - 1, total - effect - subjects, (k - 1) * (n - 1))
    found |= {"ss_total": total, "ss_subjects": subjects, "n_total": n, "k_groups": k}
    mean = float(scores[:, 0].mean() - scores[:, 1].mean())
    cross = np.cov(scores.T)
    product = np.sqrt(np.outer(np.diag(cross), np.diag(cross)))
    off = ~np.eye(k, dtype=bool)
    # the mean covariance over the mean product of SDs, as the error mean square defines it
    found |= {"mean_difference": mean, "correlation": float(cross[off].mean() / product[off].mean())}
    return found | _summaries(list(scores.T))


def pre_post(rng: np.random.Generator) -> Truth:
    sizes = rng.integers(10, 40, 2)
    before = [rng.normal(5, 2, n) for n in sizes]
    after = [
        0.6 * b + rng.normal(2 + s, 1.5, len(b)) for b, s in zip(before, rng.normal(0.5, 1, 2), strict=True)
    ]
    change = [a - b for a, b in zip(after, before, strict=True)]
    n = int(sizes.sum())
    error = float(sum(((c - c.mean()) ** 2).sum() for c in change) / (n - 2))
    se = float(np.sqrt(error * (1 / sizes[0] + 1 / sizes[1])))
    found = _contrast(float(change[0].mean() - change[1].mean()), se)
    found |= _test(found["t_value"] ** 2, 1, n - 2) | {"n_total": n}
    found |= {f"n_{i}": int(size) for i, size in enumerate(sizes, 1)}
    weights = np.array([s - 1 for s in sizes], dtype=float)
    covariance = np.array([np.cov(a, b)[0, 1] for a, b in zip(after, before, strict=True)])
    spread = np.array([a.std(ddof=1) * b.std(ddof=1) for a, b in zip(after, before, strict=True)])
    found["correlation"] = float((weights * covariance).sum() / (weights * spread).sum())
    for name, scores in (("_pre", before), ("_post", after), ("_change", change)):
        found |= _summaries(scores, name)
    return found


def ancova(rng: np.random.Generator) -> Truth:
    sizes = rng.integers(12, 40, 2)
    covariate = [rng.normal(10, 2, n) for n in sizes]
    scores = [
        0.6 * x + rng.normal(s, 1.5, len(x)) for x, s in zip(covariate, rng.normal(0, 1, 2), strict=True)
    ]
    n = int(sizes.sum())
    x_within = np.concatenate([x - x.mean() for x in covariate])
    y_within = np.concatenate([y - y.mean() for y in scores])
    slope = float((x_within * y_within).sum() / (x_within**2).sum())
    ms_error = float(((y_within - slope * x_within) ** 2).sum() / (n - 3))
    x_gap = float(covariate[0].mean() - covariate[1].mean())
    adjusted = float(scores[0].mean() - scores[1].mean() - slope * x_gap)
    se = float(np.sqrt(ms_error * (1 / sizes[0] + 1 / sizes[1] + x_gap**2 / (x_within**2).sum())))
    found = _contrast(adjusted, se)
    found |= _test(found["t_value"] ** 2, 1, n - 3)
    found |= {"n_total": n, "ms_error": ms_error, "n_covariates": 1, "k_groups": 2}
    found["covariate_r"] = float(np.corrcoef(x_within, y_within)[0, 1])
    centre = float(np.concatenate(covariate).mean())
    for i in (1, 2):
        found[f"n_{i}"] = int(sizes[i - 1])
        found[f"sd_{i}"] = float(scores[i - 1].std(ddof=1))
        found[f"adjusted_mean_{i}"] = float(scores[i - 1].mean() - slope * (covariate[i - 1].mean() - centre))
    return found


def factorial(rng: np.random.Generator, levels: int) -> Truth:
    each = int(rng.integers(6, 15))
    scores = rng.normal(5, 2, (levels, 2, each)) + rng.normal(0, 1, (levels, 1, 1))
    grand = scores.mean()
    cells = scores.mean(axis=2)
    error = float(((scores - cells[:, :, None]) ** 2).sum())
    effect = float(2 * each * ((cells.mean(axis=1) - grand) ** 2).sum())
    found = _table(effect, levels - 1, error, levels * 2 * (each - 1))
    groups = [row.ravel() for row in scores]
    se = float(np.sqrt(found["ms_error"] * (2 / (2 * each))))
    found |= _contrast(float(groups[0].mean() - groups[1].mean()), se)
    found |= {"n_total": levels * 2 * each, "ss_total": float(((scores - grand) ** 2).sum())}
    return found | _summaries(groups) | {f"n_{i}": 2 * each for i in range(1, levels + 1)}


Maker = Callable[[np.random.Generator], Truth]
MAKERS: dict[str, tuple[str, Maker]] = {
    "one-way, 3 groups": ("one-way", lambda rng: one_way(rng, 3)),
    "one-way, 4 groups": ("one-way", lambda rng: one_way(rng, 4)),
    "one-way, 2 groups": ("one-way", lambda rng: one_way(rng, 2)),
    "two-group": ("two-group", two_group),
    "paired": ("paired", paired),
    "within": ("within", within),
    "pre-post-control": ("pre-post-control", pre_post),
    "ancova": ("ancova", ancova),
    "factorial, 2 levels": ("factorial", lambda rng: factorial(rng, 2)),
    "factorial, 3 levels": ("factorial", lambda rng: factorial(rng, 3)),
}


def written(name: str, value: float) -> str:
    """A number as an author who has all digits would send it."""
    if name == "direction":
        return "+" if value > 0 else "-"
    if isinstance(value, int):
        return str(value)
    return f"{value:.20f}" if name == "p_value" else f"{value:.9f}"


def review(seed: int, rows: int) -> tuple[pd.DataFrame, list[Truth]]:
    """A sheet with planted gaps, and the truth of each of its rows.

    Groups of numbers are left out together, as articles do; some p values are printed as bounds, some columns of
    groups lack one group.
    """
    rng = np.random.default_rng(seed)
    kinds = list(MAKERS.values())
    lines, truths = [], []
    for at in range(rows):
        design, make = kinds[at % len(kinds)]
        truth = make(rng)
        line: dict[str, str] = {
            "study": f"Study {at // 2 + 1}",
            "outcome": f"outcome {at % 5}",
            "design": design,
        }
        shown = float(rng.choice([0.15, 0.3, 0.5]))
        stems = sorted({_stem(name) for name in truth})
        for stem in (s for s in stems if rng.random() < shown):
            members = [name for name in sorted(truth) if _stem(name) == stem]
            if len(members) > 2 and rng.random() < 0.15:
                members = members[:-1]
            line |= {name: written(name, truth[name]) for name in members}
        if "p_value" in line and rng.random() < 0.3:
            line["p_value"] = "< .05" if truth["p_value"] < 0.05 else "> .05"
        lines.append(line)
        truths.append(truth)
    return pd.DataFrame(lines).fillna(""), truths


def _stem(name: str) -> str:
    head, _, tail = name.rpartition("_")
    return head if tail.isdigit() else name
