"""Factorial tables from cell summaries: open data with known results, textbook examples, raw scores."""

import json
from itertools import product
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from statsmodels.formula.api import ols
from statsmodels.stats.anova import anova_lm

from extractor.study.cell_contrasts import cell_contrast, marginal_contrast, simple_effect
from extractor.study.cell_means import (
    KINDS,
    Kind,
    Levels,
    factorial_table,
    restored_mean_square,
    term_forms,
)

OPEN = json.loads((Path(__file__).parent / "data" / "factorial.json").read_text(encoding="utf-8"))["analyses"]
TABLES = [
    (name, kind, expected)
    for name, analysis in OPEN.items()
    for kinds, expected in analysis["tables"].items()
    for kind in kinds.split(", ")
]
CLOSE = {"rtol": 1e-9, "atol": 0.0}

Cells = tuple[list[int], list[float], list[float], dict[str, list[object]]]


def cells_of(analysis: dict) -> Cells:
    cells = analysis["cells"]
    summaries = ([cell[name] for cell in cells] for name in ("n", "mean", "sd"))
    n, mean, sd = summaries
    return n, mean, sd, {factor: [cell[factor] for cell in cells] for factor in analysis["factors"]}


def cells_from_scores(scores: dict[tuple[object, ...], list[float]], factors: list[str]) -> Cells:
    """Summaries of raw scores keyed by their levels."""
    values = [np.array(v, dtype=float) for v in scores.values()]
    levels = {factor: [key[i] for key in scores] for i, factor in enumerate(factors)}
    n = [len(v) for v in values]
    return n, [v.mean() for v in values], [v.std(ddof=1) if len(v) > 1 else np.nan for v in values], levels


# ---- open data -------------------------------------------------------------------------------------


@pytest.mark.parametrize(("name", "kind", "expected"), TABLES, ids=[f"{n} {k}" for n, k, _ in TABLES])
def test_open_data_reproduce(name: str, kind: Kind, expected: dict) -> None:
    """Sources of the data stand in the file; each type of sums of squares, from the summaries alone."""
    analysis = OPEN[name]
    rows = factorial_table(*cells_of(analysis), kind)
    assert [row.term for row in rows] == list(expected)
    for row in rows:
        for quantity, value in expected[row.term].items():
            np.testing.assert_allclose(
                getattr(row, quantity), value, err_msg=f"{row.term} {quantity}", **CLOSE
            )
        np.testing.assert_allclose(row.ss_error, analysis["ss_error"], **CLOSE)
        np.testing.assert_allclose(row.ss_total, analysis["ss_total"], **CLOSE)
        assert row.df_error == analysis["df_error"]


def test_types_differ_where_they_must() -> None:
    """A guard on the check above: with unequal n the three types are different numbers."""
    cells = cells_of(OPEN["anes96.income~vote*educ"])
    first, second, third = ([row.ss for row in factorial_table(*cells, kind)] for kind in KINDS)
    assert first[0] > 1.4 * second[0] > 5 * third[0]


@pytest.mark.parametrize("name", OPEN)
def test_weighted_marginal_contrasts_compare_the_participants_of_each_level(name: str) -> None:
    analysis = OPEN[name]
    n, mean, sd, levels = cells_of(analysis)
    for factor, marginal in analysis["marginal"].items():
        first, second = marginal[0], marginal[-1]
        weights = {first["label"]: 1.0, second["label"]: -1.0}
        found = marginal_contrast(n, mean, sd, levels, factor, weights, weighted=True)
        np.testing.assert_allclose(found.difference, first["mean"] - second["mean"], rtol=1e-9)
        np.testing.assert_allclose(found.inverse_effective_n, 1 / first["n"] + 1 / second["n"], rtol=1e-12)


# ---- published examples ----------------------------------------------------------------------------

# Crump, Navarro & Suzuki (2018), Answering Questions with Data, ch. 9; five scores a cell
DISTRACTION: dict[tuple[object, ...], list[float]] = {
    ("no", "no"): [10, 8, 11, 9, 10],
    ("yes", "no"): [5, 4, 3, 4, 2],
    ("no", "yes"): [12, 13, 14, 11, 13],
    ("yes", "yes"): [9, 8, 10, 11, 12],
}
DISTRACTED = cells_from_scores(DISTRACTION, ["distraction", "reward"])


@pytest.mark.parametrize("kind", KINDS)
def test_textbook_two_by_two(kind: Kind) -> None:
    rows = factorial_table(*DISTRACTED, kind)
    assert [row.term for row in rows] == ["distraction", "reward", "distraction x reward"]
    np.testing.assert_allclose([row.ss for row in rows], [92.45, 110.45, 14.45], rtol=1e-12)
    np.testing.assert_allclose([rows[0].ss_error, rows[0].ss_total], [25.6, 242.95], rtol=1e-12)
    assert {row.df for row in rows} == {1}
    assert rows[0].df_error == 16


def test_indices_by_their_definitions() -> None:
    """By hand from the sums of squares printed by Crump, Navarro & Suzuki (2018), ch. 9; MS_error = 1.6."""
    row = factorial_table(*DISTRACTED, "III", measured=["reward"])[0]
    assert row.f == pytest.approx(92.45 / 1.6)
    assert row.eta_squared == pytest.approx(92.45 / 242.95)
    assert row.partial_eta_squared == pytest.approx(92.45 / (92.45 + 25.6))
    assert row.omega_squared == pytest.approx((92.45 - 1.6) / (242.95 + 1.6))
    f = 92.45 / 1.6
    assert row.partial_omega_squared == pytest.approx((f - 1) / (f - 1 + 20))


@pytest.mark.parametrize(
    ("measured", "expected"),
    [
        ([], [92.45 / (92.45 + 25.6), 110.45 / (110.45 + 25.6), 14.45 / (14.45 + 25.6)]),
        (["reward"], [92.45 / 242.95, 110.45 / 150.5, 14.45 / 150.5]),
        (["distraction", "reward"], [92.45 / 242.95, 110.45 / 242.95, 14.45 / 242.95]),
    ],
)
def test_generalized_eta_squared(measured: list[str], expected: list[float]) -> None:
    """Olejnik & Algina (2003): all manipulated gives the partial index, all measured the classical one.

    With reward measured its own SS and the interaction's join the error: 110.45 + 14.45 + 25.6 = 150.5.
    """
    rows = factorial_table(*DISTRACTED, "III", measured=measured)
    np.testing.assert_allclose([row.generalized_eta_squared for row in rows], expected, rtol=1e-12)


def test_generalized_eta_squared_is_not_guessed() -> None:
    assert all(np.isnan(row.generalized_eta_squared) for row in factorial_table(*DISTRACTED, "III"))


def test_nuisance_variance_put_back() -> None:
    """Cortina & Nouri (2000): with equal cells the restored mean square is that of the one-way analysis."""
    rows = factorial_table(*DISTRACTED, "III")
    scores = {
        level: [v for key, values in DISTRACTION.items() if key[0] == level for v in values]
        for level in ("no", "yes")
    }
    one_way = factorial_table(
        *cells_from_scores({(k,): v for k, v in scores.items()}, ["distraction"]), "III"
    )
    assert restored_mean_square(rows, "distraction") == pytest.approx(one_way[0].ms_error, rel=1e-12)
    assert restored_mean_square(rows, "distraction") > 5 * rows[0].ms_error


def test_contrasts_of_the_textbook_two_by_two() -> None:
    """The interaction of a 2 x 2 is a difference of differences, and t² = F for each contrast of one df."""
    n, mean, sd, levels = DISTRACTED
    effects = {row.term: row for row in factorial_table(n, mean, sd, levels, "III")}
    crossed = cell_contrast(n, mean, sd, [1, -1, -1, 1])
    assert crossed.difference == pytest.approx((9.6 - 3.6) - (12.6 - 10.0))
    assert crossed.t**2 == pytest.approx(effects["distraction x reward"].f)
    assert crossed.p == pytest.approx(effects["distraction x reward"].p)
    main = marginal_contrast(n, mean, sd, levels, "distraction", {"no": 1, "yes": -1})
    assert main.difference == pytest.approx((9.6 + 12.6) / 2 - (3.6 + 10.0) / 2)
    assert main.inverse_effective_n == pytest.approx(1 / 10 + 1 / 10)
    assert main.t**2 == pytest.approx(effects["distraction"].f)
    assert main.d == pytest.approx(main.difference / np.sqrt(1.6))
    simple = simple_effect(n, mean, sd, levels, "distraction", {"no": 1, "yes": -1}, {"reward": "yes"})
    assert (simple.difference, simple.df_error) == (pytest.approx(2.6), 16)
    assert simple.inverse_effective_n == pytest.approx(1 / 5 + 1 / 5)
    assert simple.t == pytest.approx(2.6 / np.sqrt(1.6 * 0.4))


# ---- raw data by regression ------------------------------------------------------------------------


def unequal_design(
    seed: int, shape: tuple[int, ...], least: int = 2
) -> dict[tuple[object, ...], list[float]]:
    rng = np.random.default_rng(seed)
    return {
        tuple(f"l{level}" for level in cell): list(rng.normal(50 + sum(cell) + cell[0] * cell[-1], 3, size))
        for cell, size in zip(
            product(*map(range, shape)), rng.integers(least, 9, int(np.prod(shape))), strict=True
        )
    }


@pytest.mark.parametrize(("shape", "least"), [((3,), 2), ((2, 3), 1), ((2, 3, 2), 1), ((2, 2, 2, 2), 1)])
def test_raw_data_give_the_same_table(shape: tuple[int, ...], least: int) -> None:
    """Reference: statsmodels, regression on the raw scores with sum-to-zero coding, types 1, 2 and 3."""
    factors = [f"f{i}" for i in range(len(shape))]
    scores = unequal_design(len(shape), shape, least)
    frame = pd.DataFrame(
        [(*key, value) for key, values in scores.items() for value in values], columns=[*factors, "y"]
    )
    model = ols("y ~ " + " * ".join(f"C({factor}, Sum)" for factor in factors), data=frame).fit()
    for kind, number in zip(KINDS, (1, 2, 3), strict=True):
        expected = anova_lm(model, typ=number)
        for row in factorial_table(*cells_from_scores(scores, factors), kind):
            reference = expected.loc[":".join(f"C({factor}, Sum)" for factor in row.factors)]
            np.testing.assert_allclose(row.ss, reference["sum_sq"], rtol=1e-9)
            np.testing.assert_allclose(row.f, reference["F"], rtol=1e-9)
            np.testing.assert_allclose(row.p, reference["PR(>F)"], rtol=1e-8)
            assert row.df == reference["df"]


def test_order_of_entry_is_that_of_type_one_only() -> None:
    cells = cells_from_scores(unequal_design(7, (2, 3, 2)), ["a", "b", "c"])
    entry = ["c", "a", "b"]
    reordered = {row.term: row.ss for row in factorial_table(*cells, "I", order=entry)}
    assert list(reordered) == ["c", "a", "b", "a x c", "b x c", "a x b", "a x b x c"]
    n, mean, sd, levels = cells
    relabelled = factorial_table(n, mean, sd, {factor: levels[factor] for factor in entry}, "I")
    np.testing.assert_allclose(list(reordered.values()), [row.ss for row in relabelled], rtol=1e-9)
    assert reordered["a"] != pytest.approx(factorial_table(*cells, "I")[0].ss, rel=1e-3)
    for kind in ("II", "III"):
        plain = {row.term: row.ss for row in factorial_table(*cells, kind)}
        other = {row.term: row.ss for row in factorial_table(*cells, kind, order=entry)}
        assert plain == {term: pytest.approx(ss, rel=1e-9) for term, ss in other.items()}


# ---- identities ------------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", range(5))
def test_type_one_sums_add_up_to_the_sum_between_cells(seed: int) -> None:
    rows = factorial_table(*cells_from_scores(unequal_design(seed, (3, 2, 2)), ["a", "b", "c"]), "I")
    between = rows[0].ss_total - rows[0].ss_error
    assert sum(row.ss for row in rows) == pytest.approx(between, rel=1e-10)
    assert sum(row.df for row in rows) == 11


@pytest.mark.parametrize("seed", range(5))
def test_types_agree_when_cells_are_equal(seed: int) -> None:
    rng = np.random.default_rng(seed)
    levels: Levels = {"a": list("112233"), "b": list("xyxyxy")}
    tables = [
        [row.ss for row in factorial_table([7] * 6, mean, [2.0] * 6, levels, kind)]
        for mean in [rng.normal(size=6)]
        for kind in KINDS
    ]
    np.testing.assert_allclose(tables[1], tables[0], rtol=1e-10)
    np.testing.assert_allclose(tables[2], tables[0], rtol=1e-10)


def test_cells_may_come_in_any_order_and_under_any_labels() -> None:
    n, mean, sd, levels = (
        np.array(part, dtype=object) if not isinstance(part, dict) else part
        for part in cells_from_scores(unequal_design(11, (3, 2)), ["a", "b"])
    )
    shuffled = np.random.default_rng(1).permutation(6)
    renamed = {factor: [(hash(factor), labels[i]) for i in shuffled] for factor, labels in levels.items()}
    for kind in KINDS:
        plain = factorial_table(n.astype(float), mean.astype(float), sd.astype(float), levels, kind)
        moved = factorial_table(
            n[shuffled].astype(float), mean[shuffled].astype(float), sd[shuffled].astype(float), renamed, kind
        )
        np.testing.assert_allclose([r.ss for r in moved], [r.ss for r in plain], rtol=1e-9)


@pytest.mark.parametrize("kind", KINDS)
def test_forms_give_the_sums_of_squares_and_ignore_the_level_of_the_means(kind: Kind) -> None:
    n, mean, sd, levels = cells_from_scores(unequal_design(13, (2, 4)), ["a", "b"])
    forms = term_forms(n, levels, kind)
    for row in factorial_table(n, mean, sd, levels, kind):
        rows = forms[row.term]
        assert rows.shape == (row.df, 8)
        np.testing.assert_allclose(((rows @ np.array(mean)) ** 2).sum(), row.ss, rtol=1e-9)
        np.testing.assert_allclose(rows.sum(axis=1), 0, atol=1e-12)


def test_large_means_do_not_cost_digits() -> None:
    n, mean, sd, levels = cells_from_scores(unequal_design(17, (2, 3)), ["a", "b"])
    shifted = [m + 2.0**40 for m in np.round(np.array(mean) * 1024) / 1024]
    near = [m - 2.0**40 for m in shifted]
    for far_row, row in zip(
        factorial_table(n, shifted, sd, levels, "III"),
        factorial_table(n, near, sd, levels, "III"),
        strict=True,
    ):
        assert far_row.ss == pytest.approx(row.ss, rel=1e-6)


# ---- simple effects and marginal contrasts ---------------------------------------------------------


def test_one_df_marginal_contrast_is_the_type_three_effect() -> None:
    n, mean, sd, levels = cells_from_scores(unequal_design(19, (2, 3, 2)), ["a", "b", "c"])
    effects = {row.term: row for row in factorial_table(n, mean, sd, levels, "III")}
    for factor in ("a", "c"):
        found = marginal_contrast(n, mean, sd, levels, factor, {"l0": 1, "l1": -1})
        assert found.t**2 == pytest.approx(effects[factor].f, rel=1e-9)
        assert found.p == pytest.approx(effects[factor].p, rel=1e-8)


def test_simple_effects_average_over_factors_not_held() -> None:
    n, mean, sd, levels = cells_from_scores(unequal_design(23, (2, 3, 2)), ["a", "b", "c"])
    by_key = dict(zip(zip(*levels.values(), strict=True), zip(n, mean, strict=True), strict=True))
    found = simple_effect(n, mean, sd, levels, "a", {"l0": 1, "l1": -1}, {"b": "l2"})
    cells = {(a, c): by_key[a, "l2", c] for a in ("l0", "l1") for c in ("l0", "l1")}
    expected = sum((1 if a == "l0" else -1) * m / 2 for (a, _), (_, m) in cells.items())
    assert found.difference == pytest.approx(expected, rel=1e-12)
    assert found.inverse_effective_n == pytest.approx(sum(0.25 / size for size, _ in cells.values()))


# ---- refusals --------------------------------------------------------------------------------------

GOOD: Levels = {"a": ["1", "1", "2", "2"], "b": ["x", "y", "x", "y"]}


@pytest.mark.parametrize(
    ("changed", "message"),
    [
        ({"levels": {"a": ["1", "1", "2"], "b": ["x", "y", "x"]}}, "1 of 4 cells are missing"),
        ({"levels": {"a": ["1", "1", "2", "2"], "b": ["x", "x", "x", "y"]}}, "more than once"),
        ({"levels": {"a": ["1", "1", "1", "1"], "b": ["x", "y", "x", "y"]}}, "at least two levels"),
        ({"levels": {"a": ["1", "1", "2"], "b": ["x", "y", "x", "y"]}}, "3 labels for 4 cells"),
        ({"levels": {}}, "at least one factor"),
        ({"levels": {"a x b": ["1", "1", "2", "2"], "b": ["x", "y", "x", "y"]}}, "part of a factor's name"),
        ({"n": [5, 5, 5, np.nan]}, "every cell needs its n"),
        ({"n": [5, 5, 5, 0]}, "every cell needs its n"),
        ({"n": [5, 5, 5, 4.5]}, "every cell needs its n"),
        ({"n": [1, 1, 1, 1]}, "nothing is left"),
        ({"mean": [1, 2, 3, np.nan]}, "needs its mean"),
        ({"mean": [1, 2, 3]}, "differ in shape"),
        ({"sd": [1, 1, 1, np.nan]}, "needs its SD"),
        ({"sd": [1, 1, 1, -1]}, "needs its SD"),
        ({"kind": "IV"}, "type I, II or III"),
        ({"order": ["a"]}, "name each factor once"),
        ({"order": ["a", "b", "b"]}, "name each factor once"),
        ({"measured": ["age"]}, "does not have: age"),
    ],
)
def test_refusals_say_why(changed: dict, message: str) -> None:
    arguments = {"n": [5] * 4, "mean": [1, 2, 3, 5], "sd": [1.0] * 4, "levels": GOOD, "kind": "II"} | changed
    if len(arguments["levels"].get("a", "1111")) == 3 and len(arguments["levels"]["b"]) == 3:
        arguments |= {"n": [5] * 3, "mean": [1, 2, 3], "sd": [1.0] * 3}
    with pytest.raises(ValueError, match=message):
        factorial_table(**arguments)


@pytest.mark.parametrize(
    ("weights", "message"),
    [
        ([1, -1, 0], "as many weights"),
        ([1, 1, 0, 0], "sum to 0"),
        ([0] * 4, "sum to 0"),
        ([1, np.nan, 0, -1], "sum to 0"),
    ],
)
def test_contrasts_need_weights_that_sum_to_zero(weights: list[float], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        cell_contrast([5] * 4, [1, 2, 3, 5], [1.0] * 4, weights)


def test_contrasts_of_unknown_factors_and_levels_are_refused() -> None:
    summaries = [5] * 4, [1, 2, 3, 5], [1.0] * 4
    with pytest.raises(ValueError, match="no factor 'dose'"):
        marginal_contrast(*summaries, GOOD, "dose", {"1": 1, "2": -1})
    with pytest.raises(ValueError, match="no level 3"):
        marginal_contrast(*summaries, GOOD, "a", {"1": 1, "3": -1})
    with pytest.raises(ValueError, match="no level z"):
        simple_effect(*summaries, GOOD, "a", {"1": 1, "2": -1}, {"b": "z"})
    with pytest.raises(ValueError, match="cannot be held"):
        simple_effect(*summaries, GOOD, "a", {"1": 1, "2": -1}, {"a": "1"})
    with pytest.raises(ValueError, match="missing"):
        marginal_contrast(
            [5] * 3, [1, 2, 3], [1.0] * 3, {"a": list("112"), "b": list("xyx")}, "a", {"1": 1, "2": -1}
        )
    with pytest.raises(ValueError, match="sum to 0"):
        marginal_contrast(*summaries, GOOD, "a", {"1": 1})


def test_single_participant_cells_do_not_need_an_sd() -> None:
    rows = factorial_table([1, 5, 5, 5], [1, 2, 3, 5], [np.nan, 1, 1, 1], GOOD, "III")
    assert (rows[0].df_error, rows[0].ss_error) == (12, 12.0)


def test_no_error_variance_gives_an_infinite_f() -> None:
    row = factorial_table([5] * 4, [1, 2, 3, 5], [0.0] * 4, GOOD, "III")[0]
    assert (row.f, row.p, row.partial_eta_squared) == (np.inf, 0.0, 1.0)
