"""Honest rows of the other designs: factorial, within, paired, mixed and covariance-adjusted studies.

As in ``honest``, raw scores are drawn, the analysis is computed from them, and only then numbers are printed.
"""

from __future__ import annotations

import numpy as np
from scipy import stats

from tests.evidence.printing import Printed, Sheet, rounded

Found = dict[str, np.ndarray]
RNG = np.random.Generator


def _say(rng: RNG, sheet: Sheet, found: Found, names: dict[str, float]) -> None:
    for name, chance in names.items():
        if name in found and rng.random() < chance:
            sheet.columns[name, None] = rounded(found[name], int(rng.integers(1, 4)))


def _count(sheet: Sheet, name: str, value: float | np.ndarray, rows: int, group: int | None = None) -> None:
    sheet.columns[name, group] = Printed(np.full(rows, value, dtype=float), 0)


def _say_p(rng: RNG, sheet: Sheet, p: np.ndarray) -> None:
    kind = rng.choice(["exact", "threshold", "none"])
    places = int(rng.integers(2, 5))
    if kind == "exact":
        printed = np.round(p, places)
        nought = printed == 0
        sheet.columns["p_value", None] = Printed(
            np.where(nought, 10.0**-places, printed), places, below=nought
        )
    elif kind == "threshold":
        value = np.where(p < 0.01, 0.01, 0.05)
        sheet.columns["p_value", None] = Printed(value, 3, below=p < 0.05, above=p > 0.05)


def _test(found: Found, v1: float, v2: float, ss: np.ndarray, error: np.ndarray) -> None:
    """F and what follows from it, for an effect and its error term."""
    f = ss / v1 / (error / v2)
    found |= {
        "ss_effect": ss,
        "ss_error": error,
        "ms_effect": ss / v1,
        "ms_error": error / v2,
        "f_value": f,
        "p_value": stats.f.sf(f, v1, v2),
        "partial_eta_squared": ss / (ss + error),
        "cohens_f": np.sqrt(ss / error),
    }


_FROM_F = {
    "f_value": 0.9,
    "ss_effect": 0.3,
    "ss_error": 0.3,
    "ms_effect": 0.2,
    "ms_error": 0.3,
    "partial_eta_squared": 0.5,
    "cohens_f": 0.2,
    "ss_total": 0.3,
    "eta_squared": 0.3,
}


def within_sheet(rng: RNG, rows: int) -> Sheet:
    """One within factor of two to five levels; conditions printed or not; sphericity-corrected df or not."""
    k, n = int(rng.integers(2, 6)), int(rng.integers(4, 40))
    person = rng.normal(0, rng.choice([0.3, 1.0, 2.0]), size=(rows, n, 1))
    scores = (
        10 + person + rng.normal(0, np.exp(rng.normal(0, 0.3, k)), size=(rows, n, k)) + rng.normal(0, 0.4, k)
    )
    mean, sd = scores.mean(axis=1), scores.std(axis=1, ddof=1)
    grand = scores.mean(axis=(1, 2), keepdims=True)
    total = ((scores - grand) ** 2).sum(axis=(1, 2))
    effect = n * ((mean - grand[:, 0]) ** 2).sum(axis=1)
    subjects = k * ((scores.mean(axis=2) - grand[:, 0]) ** 2).sum(axis=1)
    v1, v2 = k - 1.0, (k - 1.0) * (n - 1)
    found: Found = {"ss_total": total, "eta_squared": effect / total, "ss_subjects": subjects}
    _test(found, v1, v2, effect, total - effect - subjects)
    f = found["f_value"]
    found["partial_omega_squared"] = v1 * (f - 1) / (v1 * (f - 1) + n * k)
    found["generalized_eta_squared"] = effect / total
    sheet = Sheet({}, {"design": "within", "term": "condition"})
    if rng.random() < 0.6:
        for j in range(k):
            _count(sheet, "n", n, rows, j + 1)
            sheet.columns["mean", j + 1] = rounded(mean[:, j], int(rng.integers(0, 3)))
            sheet.columns["sd", j + 1] = rounded(sd[:, j], int(rng.integers(1, 3)))
    if rng.random() < 0.5:
        _count(sheet, "n_total", n, rows)
    if k > 2 and rng.random() < 0.3:
        return _corrected(rng, sheet, found, rows, k, n)
    _count(sheet, "df_effect", v1, rows)
    _count(sheet, "df_error", v2, rows)
    more = {"ss_subjects": 0.2, "partial_omega_squared": 0.2, "generalized_eta_squared": 0.2}
    _say(rng, sheet, found, _FROM_F | more)
    _say_p(rng, sheet, found["p_value"])
    return sheet


def _corrected(rng: RNG, sheet: Sheet, found: Found, rows: int, k: int, n: int) -> Sheet:
    """F with both df multiplied by a sphericity correction and printed with decimals."""
    epsilon = rng.uniform(1 / (k - 1), 0.99, size=rows)
    v1, v2 = epsilon * (k - 1), epsilon * (k - 1) * (n - 1)
    places = int(rng.integers(1, 3))
    keep = (np.round(v2, places) % 1 != 0) & (np.round(v1, places) % 1 != 0)
    for variable, printed in sheet.columns.items():
        sheet.columns[variable] = Printed(printed.value[keep], printed.decimals)
    for name, value in (("df_effect", v1), ("df_error", v2)):
        sheet.columns[name, None] = Printed(np.round(value[keep], places), places)
    found = {name: values[keep] for name, values in found.items()}
    _say(rng, sheet, found, {"f_value": 1.0, "partial_eta_squared": 0.6})
    _say_p(rng, sheet, stats.f.sf(found["f_value"], v1[keep], v2[keep]))
    return sheet


def paired_sheet(rng: RNG, rows: int) -> Sheet:
    """Two conditions of the same participants."""
    n = int(rng.integers(4, 60))
    person = rng.normal(0, rng.choice([0.0, 0.7, 2.0]), size=(rows, n, 1))
    scores = 50 + 5 * (person + rng.normal(0, np.exp(rng.normal(0, 0.3, 2)), size=(rows, n, 2)))
    scores[:, :, 1] += rng.choice([0.0, 2.0])
    mean, sd = scores.mean(axis=1), scores.std(axis=1, ddof=1)
    change = scores[:, :, 0] - scores[:, :, 1]
    sd_change = change.std(axis=1, ddof=1)
    t = change.mean(axis=1) / (sd_change / np.sqrt(n))
    centred = scores - scores.mean(axis=1, keepdims=True)
    found: Found = {
        "t_value": t,
        "f_value": t**2,
        "mean_difference": change.mean(axis=1),
        "se_difference": sd_change / np.sqrt(n),
        "correlation": centred.prod(axis=2).sum(axis=1) / (n - 1) / sd.prod(axis=1),
        "partial_eta_squared": t**2 / (t**2 + n - 1),
    }
    kinds = {
        "average": change.mean(axis=1) / np.sqrt((sd**2).mean(axis=1)),
        "difference": change.mean(axis=1) / sd_change,
    }
    sheet = Sheet({}, {"design": "paired"})
    if rng.random() < 0.8:
        for j in range(2):
            if rng.random() < 0.8:
                _count(sheet, "n", n, rows, j + 1)
            sheet.columns["mean", j + 1] = rounded(mean[:, j], int(rng.integers(0, 3)))
            sheet.columns["sd", j + 1] = rounded(sd[:, j], int(rng.integers(1, 3)))
        if rng.random() < 0.2:
            sheet.columns["sd_change", 1] = rounded(sd_change, 2)
    if rng.random() < 0.4:
        _count(sheet, "n_total", n, rows)
    if rng.random() < 0.3:
        kind = str(rng.choice(list(kinds)))
        found["cohens_d"] = kinds[kind]
        sheet.facts["standardizer"] = kind if rng.random() < 0.7 else ""
    names = dict.fromkeys(found, 0.3) | {"t_value": 0.8, "cohens_d": 1.0}
    _say(rng, sheet, found, names)
    if ("t_value", None) in sheet.columns:
        _count(sheet, "df", n - 1, rows)
    _say_p(rng, sheet, stats.f.sf(t**2, 1, n - 1))
    return sheet


def mixed_sheet(rng: RNG, rows: int) -> Sheet:
    """Groups by times: one of the three terms, each with its own error term."""
    groups, times = int(rng.integers(2, 4)), int(rng.integers(2, 4))
    size = int(rng.integers(4, 20))
    people = groups * size
    person = rng.normal(0, 1, size=(rows, groups, size, 1))
    scores = person + rng.normal(0, 1, size=(rows, groups, size, times))
    grand = scores.mean(axis=(1, 2, 3), keepdims=True)
    by_person, by_group = scores.mean(axis=3, keepdims=True), scores.mean(axis=(2, 3), keepdims=True)
    by_time, by_cell = scores.mean(axis=(1, 2), keepdims=True), scores.mean(axis=2, keepdims=True)
    every = (1, 2, 3)
    between = size * times * ((by_group - grand) ** 2).sum(axis=every)
    persons = times * ((by_person - by_group) ** 2).sum(axis=every)
    time = people * ((by_time - grand) ** 2).sum(axis=every)
    joint = size * ((by_cell - by_group - by_time + grand) ** 2).sum(axis=every)
    within = ((scores - by_cell - by_person + by_group) ** 2).sum(axis=every)
    total = ((scores - grand) ** 2).sum(axis=every)
    terms = {
        "group": (between, persons, groups - 1, people - groups),
        "time": (time, within, times - 1, (times - 1) * (people - groups)),
        "group x time": (joint, within, (groups - 1) * (times - 1), (times - 1) * (people - groups)),
    }
    term = str(rng.choice(list(terms)))
    effect, error, v1, v2 = terms[term]
    found: Found = {"ss_total": total, "eta_squared": effect / total}
    _test(found, v1, v2, effect, error)
    sheet = Sheet({}, {"design": "mixed", "term": term})
    _count(sheet, "df_effect", v1, rows)
    _count(sheet, "df_error", v2, rows)
    if rng.random() < 0.5:
        for j in range(groups):
            _count(sheet, "n", size, rows, j + 1)
    if rng.random() < 0.5:
        _count(sheet, "n_total", people, rows)
    _say(rng, sheet, found, _FROM_F)
    _say_p(rng, sheet, found["p_value"])
    return sheet


def factorial_sheet(rng: RNG, rows: int) -> Sheet:
    """One term of a two-factor design, cells of equal or unequal size, sums of squares of type I, II or III."""
    a, b = int(rng.integers(2, 4)), int(rng.integers(2, 4))
    equal = rng.random() < 0.5
    sizes = np.full((a, b), rng.integers(3, 12)) if equal else rng.integers(3, 12, size=(a, b))
    level_a = np.repeat(np.arange(a * b) // b, sizes.ravel())
    level_b = np.repeat(np.arange(a * b) % b, sizes.ravel())
    one, first, second = (np.ones((len(level_a), 1)), _coded(level_a, a), _coded(level_b, b))
    joint = (first[:, :, None] * second[:, None, :]).reshape(len(level_a), -1)
    scores = rng.normal(0, 1, size=(rows, len(level_a))) + 0.5 * rng.choice([0, 1]) * level_a
    full = [one, first, second, joint]
    term = str(rng.choice(["A", "B", "A x B"]))
    own = {"A": first, "B": second, "A x B": joint}[term]
    kind = str(rng.choice(["I", "II", "III"]))
    before = {
        "I": {"A": [one], "B": [one, first], "A x B": [one, first, second]},
        "II": {"A": [one, second], "B": [one, first], "A x B": [one, first, second]},
        "III": {"A": [one, second, joint], "B": [one, first, joint], "A x B": [one, first, second]},
    }[kind][term]
    error = _residual(scores, full)
    effect = _residual(scores, before) - _residual(scores, [*before, own])
    total = _residual(scores, [one])
    v1, v2 = own.shape[1], len(level_a) - a * b
    found: Found = {"ss_total": total, "eta_squared": effect / total}
    _test(found, v1, v2, effect, error)
    f = found["f_value"]
    found["partial_omega_squared"] = v1 * (f - 1) / (v1 * (f - 1) + len(level_a))
    found["omega_squared"] = (effect - v1 * error / v2) / (total + error / v2)
    sheet = Sheet({}, {"design": "factorial", "term": term})
    _count(sheet, "df_effect", v1, rows)
    _count(sheet, "df_error", v2, rows)
    if rng.random() < 0.6:
        _count(sheet, "n_total", len(level_a), rows)
    _say(rng, sheet, found, _FROM_F | {"partial_omega_squared": 0.3, "omega_squared": 0.3})
    _say_p(rng, sheet, found["p_value"])
    return sheet


def _coded(levels: np.ndarray, count: int) -> np.ndarray:
    """Sum-to-zero columns."""
    eye = np.vstack([np.eye(count - 1), -np.ones((1, count - 1))])
    return np.asarray(eye[levels])


def _residual(scores: np.ndarray, blocks: list[np.ndarray]) -> np.ndarray:
    """Residual sum of squares of each row of scores on the columns."""
    basis = np.linalg.qr(np.hstack(blocks))[0]
    return np.asarray((scores**2).sum(axis=1) - ((scores @ basis) ** 2).sum(axis=1))


def ancova_sheet(rng: RNG, rows: int) -> Sheet:
    """Two or three groups compared after adjustment for one covariate."""
    k, size = int(rng.integers(2, 4)), int(rng.integers(6, 25))
    n = k * size
    group = np.repeat(np.arange(k), size)
    covariate = rng.normal(0, 1, size=n)
    scores = rng.normal(0, 1, size=(rows, n)) + 0.8 * covariate + 0.3 * group
    one, coded, x = np.ones((n, 1)), _coded(group, k), covariate[:, None]
    error = _residual(scores, [one, x, coded])
    effect = _residual(scores, [one, x]) - error
    total = _residual(scores, [one])
    found: Found = {"ss_total": total, "eta_squared": effect / total}
    v1, v2 = k - 1, n - k - 1
    _test(found, v1, v2, effect, error)
    sheet = Sheet({}, {"design": "ancova"})
    for name, value in (("df_effect", v1), ("df_error", v2), ("n_covariates", 1)):
        _count(sheet, name, value, rows)
    if rng.random() < 0.6:
        for j in range(k):
            _count(sheet, "n", size, rows, j + 1)
            mine = scores[:, group == j]
            sheet.columns["mean", j + 1] = rounded(mean_of(mine), int(rng.integers(1, 3)))
            sheet.columns["sd", j + 1] = rounded(mine.std(axis=1, ddof=1), 2)
    if rng.random() < 0.5:
        _count(sheet, "n_total", n, rows)
    _say(rng, sheet, found, _FROM_F)
    _say_p(rng, sheet, found["p_value"])
    return sheet


def mean_of(scores: np.ndarray) -> np.ndarray:
    """Mean of each row of scores."""
    return np.asarray(scores.mean(axis=1))


def pre_post_sheet(rng: RNG, rows: int) -> Sheet:
    """Treatment and control before and after."""
    sizes = rng.integers(5, 40, size=2)
    sheet = Sheet({}, {"design": "pre-post-control"})
    for j, n in enumerate(sizes, start=1):
        person = rng.normal(0, 1, size=(rows, n, 1))
        scores = 20 + 3 * (person + rng.normal(0, 0.7, size=(rows, n, 2)))
        change = scores[:, :, 1] - scores[:, :, 0]
        _count(sheet, "n", n, rows, j)
        places = int(rng.integers(0, 3))
        for time, label in enumerate(("pre", "post")):
            sheet.columns[f"mean_{label}", j] = rounded(scores[:, :, time].mean(axis=1), places)
            sheet.columns[f"sd_{label}", j] = rounded(scores[:, :, time].std(axis=1, ddof=1), 2)
        sheet.columns["mean_change", j] = rounded(change.mean(axis=1), places)
        sheet.columns["sd_change", j] = rounded(change.std(axis=1, ddof=1), 2)
    return sheet


DESIGN_SHEETS = (within_sheet, paired_sheet, mixed_sheet, factorial_sheet, ancova_sheet, pre_post_sheet)


def honest_design_sheet(rng: RNG, rows: int) -> Sheet:
    """One kind of study of a design other than one-way and two-group."""
    make = DESIGN_SHEETS[int(rng.integers(len(DESIGN_SHEETS)))]
    return make(rng, rows)
