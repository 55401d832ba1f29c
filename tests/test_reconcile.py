"""Double coding: rows that find each other, cells that agree or do not, and disputes by what they do to the effect.

All coded data are invented.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from openpyxl import Workbook, load_workbook
from scipy import stats

import extractor
from extractor.agreement import cohens_kappa, icc_agreement
from extractor.codebook import default_codebook, parse_codebook
from extractor.displacement import DECIDES, MOVES, MOVES_IN_WORDS, NOTHING, VARIANCE
from extractor.disputes import reading_text
from extractor.errors import UnreadableInput, UsageError
from extractor.matching import Printed, alike, plain_label
from extractor.output.comparing import CONSENSUS, MERGED, write_comparison, write_settled
from extractor.output.consensus import Settled, has_agreed, read_consensus
from extractor.output.merged import merged
from extractor.quantities import VOCABULARY
from extractor.reading import Reading
from extractor.reconcile import Reconciliation, reconcile
from extractor.reported import read_number

TO = "hedges_g"
SHEET = pd.DataFrame(
    [
        ("North Quay", "recall", "20", "10.20", "3.12", "22", "12.61", "3.41", "x", "12"),
        ("North Quay", "sleep", "20", "1.21", "0.31", "22", "2.61", "0.42", "x", "13"),
        ("Site 7", "recall", "31", "5.13", "1.22", "30", "4.42", "1.33", "y", "4"),
        ("Mill Lane", "recall", "15", "5.30", "1.27", "16", "4.45", "1.36", "z", "3"),
    ],
    columns=["study", "outcome", "n_1", "mean_1", "sd_1", "n_2", "mean_2", "sd_2", "country", "page"],
).assign(design="two-group", direction="+")


def changed(sheet: pd.DataFrame, *cells: tuple[int, str, str]) -> pd.DataFrame:
    """The sheet with some cells saying something else."""
    copy = sheet.copy()
    for row, name, text in cells:
        copy.loc[row, name] = text
    return copy


def pairs_of(found: Reconciliation) -> list[tuple[int | None, ...]]:
    """Spreadsheet rows that were matched, by coder."""
    columns = [found.effects[f"row {coder}"] for coder in found.coders]
    return [tuple(None if pd.isna(n) else int(n) for n in line) for line in zip(*columns, strict=True)]


# ---- numbers --------------------------------------------------------------------------------------------


def printed(*cells: object, quantity: str = "mean") -> Printed:
    """Cells of one column, read."""
    kinds = {"": 0, "=": 1, "<": 2, ">": 3}
    readings = [read_number(cell, VOCABULARY[quantity]) for cell in cells]
    ends = (np.array([getattr(reading, end) for reading in readings]) for end in ("value", "low", "high"))
    return Printed(np.array([kinds[reading.comparator] for reading in readings]), *ends)


@pytest.mark.parametrize(
    ("one", "other", "quantity", "agree"),
    [
        ("3.4", "3.40", "mean", True),
        ("3.4", "3.41", "mean", True),
        ("3.4", "3.45", "mean", True),
        ("3.4", "3.46", "mean", False),
        ("3.4", "3.5", "mean", False),
        ("3.40", "3.41", "mean", False),
        ("-3.4", "3.4", "mean", False),
        ("20", "20", "n", True),
        ("20", "21", "n", False),
        ("< .05", "< 0.050", "p_value", True),
        ("< .05", "< .01", "p_value", False),
        ("< .05", ".03", "p_value", False),
        ("< .05", "> .05", "p_value", False),
        ("ns", "> .05", "p_value", True),
        ("", "", "mean", True),
        ("", "0", "mean", False),
    ],
)
def test_numbers_agree_where_rounding_intervals_overlap(
    one: str, other: str, quantity: str, agree: bool
) -> None:
    assert bool(alike(printed(one, quantity=quantity), printed(other, quantity=quantity))[0]) is agree


@given(
    value=st.decimals(-1000, 1000, allow_nan=False, places=9),
    places=st.tuples(st.integers(0, 6), st.integers(0, 6)),
)
@settings(max_examples=300, deadline=None)
def test_one_number_printed_with_different_decimals_always_agrees(
    value: object, places: tuple[int, int]
) -> None:
    one, other = (f"{value:.{digits}f}" for digits in places)
    assert alike(printed(one), printed(other))[0]


def test_a_tolerance_widens_what_agrees() -> None:
    one, other = printed("100.0"), printed("101.0")
    assert not alike(one, other)[0]
    assert not alike(one, other, 0.009)[0]
    assert alike(one, other, 0.01)[0]


@given(
    text=st.one_of(
        st.decimals(-10_000, 10_000, allow_nan=False, places=3).map(str),
        st.integers(-500, 500).map(str),
        st.sampled_from([".018", "1.20e3", "0.0", "-.50", "1,234.5", "12e1"]),
        st.floats(-1e6, 1e6, allow_nan=False).map(lambda x: round(x, 2)),
    ),
    mark=st.sampled_from([".", ","]),
)
@settings(max_examples=300, deadline=None)
def test_a_reading_as_text_reads_back_to_itself(text: object, mark: str) -> None:
    quantity = VOCABULARY["mean"]
    reading = read_number(text, quantity)
    again = read_number(reading_text(reading, mark), quantity, decimal_mark=mark)
    for name in ("value", "low", "high", "unit", "comparator"):
        assert getattr(again, name) == pytest.approx(getattr(reading, name), rel=1e-15, abs=0, nan_ok=True), (
            name
        )


@pytest.mark.parametrize("text", ["< .05", "< .001", "> .10", "ns", ".000", "0.05"])
def test_a_bound_as_text_reads_back_to_itself(text: str) -> None:
    quantity = VOCABULARY["p_value"]
    reading = read_number(text, quantity)
    again = read_number(reading_text(reading), quantity)
    assert (again.comparator, again.low, again.high) == (reading.comparator, reading.low, reading.high)


def test_blank_and_refused_readings_as_text() -> None:
    assert reading_text(Reading()) == ""
    assert reading_text(read_number("abc", VOCABULARY["mean"])).startswith("not understood: 'abc'")


# ---- rows -----------------------------------------------------------------------------------------------


def test_labels_are_compared_without_case_space_and_signs_but_numbers_stay_apart() -> None:
    assert plain_label("North  Quay (2)") == plain_label("north quay 2")
    assert plain_label("Site_7") == plain_label("site 7")
    assert plain_label("1.2") != plain_label("12")
    assert plain_label("Étude") == plain_label("étude")
    assert plain_label("+") != plain_label("-")


@given(seed=st.integers(0, 10**6))
@settings(max_examples=25, deadline=None)
def test_rows_find_each_other_in_any_order_with_rows_missing(seed: int) -> None:
    """Labels alone, in a shuffled sheet from which rows are missing on both sides."""
    rng = np.random.default_rng(seed)
    sheet = random_sheet(rng, 30)
    first = sheet.drop(index=rng.choice(30, 4, replace=False))
    second = sheet.drop(index=rng.choice(30, 4, replace=False)).sample(frac=1, random_state=seed)
    found = reconcile([first.reset_index(drop=True), second.reset_index(drop=True)])
    place = {label: row + 2 for row, label in enumerate(second.index)}
    both = {(row + 2, place[label]) for row, label in enumerate(first.index) if label in place}
    assert {pair for pair in pairs_of(found) if None not in pair} == both
    assert len(found.single) == len(first) + len(second) - 2 * len(both)
    assert not len(found.disputes)


def test_rows_with_the_same_labels_are_told_apart_by_their_numbers() -> None:
    sheet = random_sheet(np.random.default_rng(4), 12).assign(study="North Quay", outcome="recall")
    order = np.random.default_rng(5).permutation(12)
    second = changed(sheet, (3, "page", "999")).iloc[order].reset_index(drop=True)
    found = reconcile([sheet, second])
    expected = {(row + 2, int(np.flatnonzero(order == row)[0]) + 2) for row in range(12)}
    assert set(pairs_of(found)) == expected
    assert set(found.effects["matched"]) == {"several rows have these labels; told apart by their numbers"}
    assert list(found.disputes["variable"]) == ["page"]


@pytest.mark.parametrize(
    ("cells", "variables"),
    [
        ([(0, "outcome", "Recall ")], []),
        ([(0, "outcome", "")], ["outcome"]),
        ([(0, "outcome", "memory")], ["outcome"]),
        ([(0, "outcome", "memory"), (0, "sd_1", "9.99")], ["sd_1", "outcome"]),
    ],
    ids=["spelling", "blank", "another word", "another word and a slip"],
)
def test_a_label_that_differs_is_a_dispute_and_no_lost_row(
    cells: list[tuple[int, str, str]], variables: list[str]
) -> None:
    found = reconcile([SHEET, changed(SHEET, *cells)], TO)
    assert pairs_of(found) == [(row, row) for row in range(2, 6)]
    assert list(found.disputes["variable"]) == variables


def test_rows_whose_numbers_all_differ_are_not_forced_together() -> None:
    other = changed(SHEET, *((0, name, "7.77") for name in SHEET.columns[2:8]), (0, "outcome", "attention"))
    found = reconcile([SHEET, other])
    assert (2, None) in pairs_of(found)
    assert (None, 2) in pairs_of(found)


def test_a_study_spelled_otherwise_is_pointed_out() -> None:
    found = reconcile([SHEET, changed(SHEET, (2, "study", "Sight 7"))])
    assert list(found.single["present"]) == ["A", "B"]
    assert "is 'Sight 7' meant?" in found.single["hint"].iloc[0]
    assert "is 'Site 7' meant?" in found.single["hint"].iloc[1]


def test_analyses_that_are_only_named_otherwise_are_no_dispute_and_regrouped_ones_are() -> None:
    one = FACTORIAL
    renamed = reconcile([one, one.assign(analysis="the model")])
    assert not len(renamed.disputes)
    assert "1 analysis has another name with coder B" in renamed.notes[0]
    regrouped = reconcile([one, changed(one, (2, "analysis", "m2"))])
    assert list(regrouped.disputes["variable"]) == ["analysis"]


def test_a_term_in_another_order_is_the_same_term() -> None:
    found = reconcile([FACTORIAL, changed(FACTORIAL, (2, "term", "sex × age"))])
    assert pairs_of(found) == [(2, 2), (3, 3), (4, 4)]
    assert not len(found.disputes)


# ---- disputes -------------------------------------------------------------------------------------------

FACTORIAL = pd.DataFrame(
    [
        ("age", "1", "6.31", "12.62"),
        ("sex", "1", "2.10", "4.20"),
        ("age x sex", "2", "3.45", "13.80"),
    ],
    columns=["term", "df_effect", "f_value", "ss_effect"],
).assign(
    study="North Quay", outcome="recall", analysis="m1", design="factorial", df_error="54", ss_error="108.0"
)


def random_sheet(rng: np.random.Generator, size: int) -> pd.DataFrame:
    """Two-group rows that report means, a t, or an F, with numbers of their own."""
    rows = []
    for i in range(size):
        n_1, n_2 = (int(n) for n in rng.integers(12, 60, 2))
        g, sd, mean = rng.normal(0.4, 0.4), rng.gamma(9, 0.4), rng.normal(10, 3)
        t = g / math.sqrt(1 / n_1 + 1 / n_2)
        row = {
            "study": f"Site {i // 2 + 1}",
            "outcome": ("recall", "sleep")[i % 2],
            "design": "two-group",
            "n_1": str(n_1),
            "n_2": str(n_2),
            "direction": "+" if g > 0 else "-",
            "country": str(rng.choice(["x", "y", "z"])),
            "page": str(rng.integers(1, 20)),
        }
        kind = rng.random()
        if kind < 0.6:
            row |= {"mean_1": f"{mean + g * sd:.2f}", "sd_1": f"{sd * rng.uniform(0.85, 1.15):.2f}"}
            row |= {"mean_2": f"{mean:.2f}", "sd_2": f"{sd * rng.uniform(0.85, 1.15):.2f}"}
        elif kind < 0.8:
            row |= {"t_value": f"{t:.2f}", "df": str(n_1 + n_2 - 2)}
        else:
            row |= {"f_value": f"{t * t:.2f}", "df_effect": "1", "df_error": str(n_1 + n_2 - 2)}
        rows.append(row)
    return pd.DataFrame(rows).fillna("")


def slip(rng: np.random.Generator, row: pd.Series, name: str) -> str:
    """What a hurried coder types: the other sign, a neighbour's digits, a lost point, a standard error for an SD."""
    text = str(row[name])
    if name == "direction":
        return "-" if text == "+" else "+"
    if name == "country":
        return {"x": "y", "y": "z", "z": "x"}[text]
    if "." not in text:
        return str(int(text) + int(rng.choice([-3, 1, 10]))) if int(text) > 5 else str(int(text) + 1)
    value, places = float(text), len(text.partition(".")[2])
    kind = rng.integers(4)
    if kind == 0:
        new = value / math.sqrt(float(row[f"n{name[2:]}"])) if name.startswith("sd") else -value
    elif kind == 1:
        new = value * 10
    elif kind == 2:
        new = value + float(rng.choice([-0.1, 0.1, 1.0]))
    else:
        digits = list(text)
        digits[-1], digits[-2] = digits[-2], digits[-1]
        new = float("".join(digits))
    found = f"{new:.{places}f}"
    return found if found not in (text, "0.00") else f"{value + 0.5:.{places}f}"


@pytest.mark.parametrize("seed", range(5))
def test_disputes_stand_in_the_order_of_the_slips_true_displacements(
    seed: int, record_property: Callable[[str, object], None]
) -> None:
    """300 effects coded twice with known slips, up to two in a row and each with either coder.

    The true displacement of a slip is that of the effect of the truth when only this slip is made.
    """
    rng = np.random.default_rng(seed)
    truth = random_sheet(rng, 300)
    coders = [truth.copy(), truth.copy()]
    slips: list[tuple[int, str, str]] = []
    for i in range(len(truth)):
        filled = [
            name
            for name in truth.columns
            if truth.loc[i, name] and name not in ("study", "outcome", "design")
        ]
        for name in rng.choice(filled, rng.choice([0, 1, 2], p=[0.65, 0.25, 0.1]), replace=False):
            slips.append((i, str(name), slip(rng, truth.loc[i], str(name))))
            coders[rng.integers(2)].loc[i, name] = slips[-1][2]
    alone = truth.loc[[i for i, _, _ in slips]].reset_index(drop=True)
    alone = changed(alone, *((at, name, text) for at, (_, name, text) in enumerate(slips)))
    before = extractor.convert(truth, TO).effects["estimate"].to_numpy()[[i for i, _, _ in slips]]
    after = extractor.convert(alone, TO).effects["estimate"].to_numpy()
    displacement = np.abs(after - before)
    assert np.isfinite(displacement).all()

    found = reconcile([coders[0], coders[1].sample(frac=1, random_state=seed).reset_index(drop=True)], TO)
    lines = found.disputes
    order = {
        key: at
        for at, key in enumerate(zip(lines["study"], lines["outcome"], lines["variable"], strict=True))
    }
    at = np.array([order[truth.loc[i, "study"], truth.loc[i, "outcome"], name] for i, name, _ in slips])
    assert len(lines) == len(slips)
    rank_correlation = float(stats.spearmanr(displacement, -at).statistic)
    touching = displacement > 0
    among_touching = float(stats.spearmanr(displacement[touching], -at[touching]).statistic)
    record_property("slips", len(slips))
    record_property("rank correlation of true displacement and order", round(rank_correlation, 3))
    record_property("the same among slips that touch the effect", round(among_touching, 3))
    assert rank_correlation > 0.9
    assert among_touching > 0.95
    # the ten that matter most are among the first twenty
    assert (at[np.argsort(-displacement)[:10]] < 20).all()


@pytest.mark.parametrize("seed", range(3))
def test_changed_is_what_converting_the_changed_sheet_gives(seed: int) -> None:
    """Every dispute of the batch against a conversion of its own, cell by cell."""
    rng = np.random.default_rng(50 + seed)
    sheet = random_sheet(rng, 24)
    other = sheet.copy()
    for i in range(24):
        filled = [
            name
            for name in sheet.columns
            if sheet.loc[i, name] and name not in ("study", "outcome", "design")
        ]
        for name in rng.choice(filled, 2, replace=False):
            other.loc[i, name] = slip(rng, sheet.loc[i], str(name))
    assert_brute_force(sheet, other, TO)


def assert_brute_force(sheet: pd.DataFrame, other: pd.DataFrame, metric: str) -> None:
    """Rows of the two sheets stand in the same order."""
    found = reconcile([sheet, other], metric).disputes
    assert len(found)
    for line in found.to_dict("records"):
        row, name = int(line["of_effect"]), str(line["variable"])
        assert_moves(line, sheet, changed(sheet, (row, name, str(other.loc[row, name]))), metric)


def assert_moves(line: dict[str, object], before: object, after: object, metric: str) -> None:
    """What a dispute's line says against the conversions of both sheets, whichever row moves most."""
    own, new = (extractor.convert(sheet, metric).effects for sheet in (before, after))
    moved = (new["estimate"] - own["estimate"]).abs()
    errors = (new["standard_error"] - own["standard_error"]).abs()
    if line["moves"] == MOVES_IN_WORDS[DECIDES]:
        assert (new["estimate"].isna() != own["estimate"].isna()).any()
        return
    assert (new["estimate"].isna() == own["estimate"].isna()).all()
    if line["moves"] == MOVES_IN_WORDS[MOVES]:
        assert line["shift"] == pytest.approx(moved.max(), rel=1e-9)
        assert line["estimate"] == pytest.approx(own["estimate"][moved.idxmax()], rel=1e-9)
        assert line["changed"] == pytest.approx(new["estimate"][moved.idxmax()], rel=1e-9)
        error = own["standard_error"][moved.idxmax()]
        assert line["shift_in_se"] == pytest.approx(moved.max() / error, rel=1e-9, nan_ok=True)
        return
    assert moved.max() == pytest.approx(0, abs=1e-12) or not own["estimate"].notna().any()
    assert (errors.max() > 1e-12) is (line["moves"] == MOVES_IN_WORDS[VARIANCE])


@pytest.mark.parametrize("metric", ["eta_squared", "partial_omega_squared"])
def test_a_cell_of_a_model_moves_the_effects_of_its_other_terms_too(metric: str) -> None:
    """Classical eta squared of every term depends on all terms; the line names the one that moves most."""
    other = changed(FACTORIAL, (0, "f_value", "3.61"), (1, "df_effect", "2"), (2, "f_value", "3.54"))
    without_ss = FACTORIAL.drop(columns=["ss_effect", "ss_error"])
    assert_brute_force(without_ss, other.drop(columns=["ss_effect", "ss_error"]), metric)


def test_a_missing_number_that_blocks_a_row_comes_first_and_what_changes_nothing_last() -> None:
    other = changed(
        SHEET,
        (0, "sd_1", ""),
        (1, "mean_1", "1.22"),
        (2, "mean_1", "5.31"),
        (3, "n_1", "51"),
        (3, "page", "9"),
    )
    other.loc[2, "country"] = "x"
    lines = reconcile([SHEET, other], TO).disputes
    assert list(lines["variable"]) == ["sd_1", "mean_1", "n_1", "mean_1", "country", "page"]
    assert [str(w) for w in lines["moves"]] == [
        MOVES_IN_WORDS[DECIDES],
        *[MOVES_IN_WORDS[MOVES]] * 3,
        *[MOVES_IN_WORDS[NOTHING]] * 2,
    ]
    shifts = lines["shift"].to_numpy()[1:4]
    assert (np.diff(shifts) < 0).all()


def test_who_is_borne_out_by_the_other_numbers_of_the_row() -> None:
    """F(2, 57) = 4.31 has p = .018; an F of 3.41 has not."""
    sheet = pd.DataFrame(
        [
            {
                "study": "Site 7",
                "design": "one-way",
                "f_value": "4.31",
                "df_effect": "2",
                "df_error": "57",
                "p_value": ".018",
            }
        ]
    )
    wrong = changed(sheet, (0, "f_value", "3.41"))
    assert list(reconcile([sheet, wrong]).disputes["fits"]) == ["A"]
    assert list(reconcile([wrong, sheet], "omega_squared").disputes["fits"]) == ["B"]
    assert list(reconcile([wrong, changed(wrong, (0, "f_value", "3.14"))]).disputes["fits"]) == ["none"]
    silent = sheet.drop(columns="p_value")
    assert list(reconcile([silent, wrong.drop(columns="p_value")]).disputes["fits"]) == [""]


def test_both_values_are_given_as_printed_with_their_addresses() -> None:
    other = changed(SHEET, (2, "mean_1", "5.3")).iloc[::-1].reset_index(drop=True)
    line = reconcile([SHEET, other], TO).disputes.iloc[0]
    assert (line["variable"], line["A"], line["A cell"], line["B"], line["B cell"]) == (
        "mean_1",
        "5.13",
        "mean_1 [D4]",
        "5.3",
        "mean_1 [D3]",
    )


# ---- agreement ------------------------------------------------------------------------------------------


def test_agreement_is_that_of_the_matched_cells_before_anything_is_settled() -> None:
    rng = np.random.default_rng(8)
    sheet = random_sheet(rng, 60)
    other = sheet.copy()
    flips = rng.choice(60, 12, replace=False)
    for i in flips:
        other.loc[i, "country"] = slip(rng, sheet.loc[i], "country")
        other.loc[i, "n_1"] = str(int(sheet.loc[i, "n_1"]) + 4)
    shuffled = other.sample(frac=1, random_state=1).reset_index(drop=True)
    table = reconcile([sheet, shuffled], TO).agreement.set_index("variable")
    words = np.unique(np.concatenate([sheet["country"], other["country"]]))
    codes = np.column_stack([np.searchsorted(words, each["country"]) for each in (sheet, other)])
    kappa = cohens_kappa(codes)
    country = table.loc["country"]
    assert (country["rows"], country["all_agree"], country["raw_agreement"]) == (60, 48, pytest.approx(0.8))
    assert [country["kappa"], country["kappa_low"], country["kappa_high"]] == pytest.approx(
        [kappa.value, kappa.low, kappa.high]
    )
    icc = icc_agreement(np.column_stack([each["n_1"].astype(float) for each in (sheet, other)]))
    assert table.loc["n_1", "icc"] == pytest.approx(icc.value)
    assert table.loc["n_1", "all_agree"] == 48
    assert table.loc["design", "ac1"] == 1.0
    assert math.isnan(table.loc["design", "kappa"])
    assert table.loc[TO, "kind"] == "effect"
    assert "study" not in table.index


def test_a_blank_against_a_number_is_a_disagreement_and_is_counted() -> None:
    table = reconcile([SHEET, changed(SHEET, (0, "sd_1", ""))]).agreement.set_index("variable")
    assert list(table.loc["sd_1", ["rows", "all_agree", "one_blank"]]) == [4, 3, 1]
    assert table.loc["sd_1", "raw_agreement"] == 0.75


def test_more_decimals_are_no_disagreement_and_a_tolerance_is_the_user_s() -> None:
    other = changed(SHEET, (0, "mean_1", "10.2"), (1, "mean_1", "1.22"))
    assert list(reconcile([SHEET, other]).disputes["of_effect"]) == [1]
    assert not len(reconcile([SHEET, other], tolerance=0.01).disputes)


def test_three_coders() -> None:
    second = changed(SHEET, (0, "mean_1", "12.20"), (1, "country", "y"))
    third = (
        changed(SHEET, (0, "mean_1", "10.90"), (1, "country", "y")).iloc[[3, 2, 1, 0]].reset_index(drop=True)
    )
    found = reconcile([SHEET, second, third], TO)
    assert pairs_of(found) == [(2, 2, 5), (3, 3, 4), (4, 4, 3), (5, 5, 2)]
    assert list(found.disputes["variable"]) == ["mean_1", "country"]
    line = found.disputes.iloc[0]
    assert (line["A"], line["B"], line["C"]) == ("10.20", "12.20", "10.90")
    # of the two other values the one that moves the effect further
    alone = reconcile([SHEET, changed(SHEET, (0, "mean_1", "12.20"))], TO).disputes.iloc[0]
    assert line["shift"] == pytest.approx(alone["shift"])
    country = found.agreement.set_index("variable").loc["country"]
    assert country["raw_agreement"] == pytest.approx((3 + 1 / 3) / 4)
    assert math.isfinite(country["alpha"])


def test_rows_that_only_later_coders_have_find_each_other() -> None:
    found = reconcile([SHEET.iloc[:2], SHEET, SHEET.iloc[::-1]])
    assert pairs_of(found) == [(2, 2, 5), (3, 3, 4), (None, 4, 3), (None, 5, 2)]
    assert list(found.single["present"]) == ["B and C", "B and C"]
    assert list(found.single["absent"]) == ["A", "A"]


def test_running_text_is_not_compared_and_says_so() -> None:
    sheet = random_sheet(np.random.default_rng(2), 20)
    one = sheet.assign(remark=[f"thought about it for {i} minutes" for i in range(20)])
    two = sheet.assign(remark=[f"quick, {i}" for i in range(20)])
    found = reconcile([one, two])
    assert not len(found.disputes)
    assert any("running text" in note for note in found.notes)


def test_words_are_refused_with_one_sentence() -> None:
    with pytest.raises(UsageError, match="2 to 26 sheets"):
        reconcile([SHEET])
    with pytest.raises(UsageError, match="tolerance 2 is not a share"):
        reconcile([SHEET, SHEET], tolerance=2.0)
    with pytest.raises(UsageError, match="did you mean hedges_g"):
        reconcile([SHEET, SHEET], "hedges")
    with pytest.raises(UsageError, match="not from standard input"):
        reconcile(["-", SHEET])


def test_ten_thousand_rows_take_seconds() -> None:
    sheet = random_sheet(np.random.default_rng(1), 10_000)
    other = sheet.sample(frac=1, random_state=2).reset_index(drop=True)
    other.loc[::50, "n_1"] = "99"
    found = reconcile([sheet, other], TO)
    assert len(found.single) == 0
    assert 150 <= len(found.disputes) <= 200


# ---- the sheet of groups ----------------------------------------------------------------------------------


def workbook(path: Path, rows: pd.DataFrame, lines: list[tuple[object, ...]]) -> Path:
    """A coded sheet with a sheet of groups."""
    book = Workbook()
    coded = book.worksheets[0]
    coded.title = "coded"
    for line in [list(rows.columns), *rows.to_numpy().tolist()]:
        coded.append([None if cell == "" else cell for cell in line])
    long = book.create_sheet("groups")
    for cells in [("analysis", "age", "sex", "n", "mean", "sd"), *lines]:
        long.append(cells)
    book.save(path)
    return path


CELLS: list[tuple[object, ...]] = [
    ("m1", "old", "f", 14, "5.11", "1.32"),
    ("m1", "old", "m", 15, "4.42", "1.18"),
    ("m1", "young", "f", 13, "6.73", "1.41"),
    ("m1", "young", "m", 16, "5.06", "1.27"),
]
TERMS = pd.DataFrame({"term": ["age", "sex", "age x sex"]}).assign(
    study="North Quay", outcome="recall", analysis="m1", design="factorial"
)


def test_a_cell_of_the_sheet_of_groups_is_one_dispute_and_is_changed_for_the_whole_model(
    tmp_path: Path,
) -> None:
    wrong = [*CELLS[:2], ("m1", "young", "f", 13, "7.63", "1.41"), CELLS[3]]
    sheets = [
        workbook(tmp_path / name, TERMS, lines) for name, lines in (("a.xlsx", CELLS), ("b.xlsx", wrong))
    ]
    for metric in ("partial_omega_squared", "eta_squared"):
        lines = reconcile(sheets, metric).disputes
        assert list(lines["variable"]) == ["mean_3"]
        assert lines["moves"].iloc[0] == MOVES_IN_WORDS[MOVES]
        assert_moves(lines.iloc[0].to_dict(), sheets[0], sheets[1], metric)


# ---- consensus ------------------------------------------------------------------------------------------


def fill(path: Path, answers: dict[str, object], title: str = "consensus") -> None:
    """Write into the column ``agreed``: by variable, or in every line under ""."""
    book = load_workbook(path)
    sheet = book[title]
    headings = [cell.value for cell in sheet[1]]
    for line in sheet.iter_rows(min_row=2):
        key = "" if title == "rows" else str(line[headings.index("variable")].value)
        if key in answers:
            line[headings.index("agreed")].value = answers[key]
    book.save(path)


@pytest.fixture
def settled_folder(tmp_path: Path) -> Callable[..., tuple[Reconciliation, Path]]:
    """Compares sheets and writes the folder."""

    def made(*sheets: object, to: str | None = TO) -> tuple[Reconciliation, Path]:
        found = reconcile(list(sheets), to)
        write_comparison(tmp_path / "out", found, raw=False, force=False)
        return found, tmp_path / "out" / CONSENSUS

    return made


Folder = Callable[..., tuple[Reconciliation, Path]]


def test_the_workbook_has_one_line_per_dispute_with_an_empty_column_to_fill(settled_folder: Folder) -> None:
    other = changed(SHEET, (0, "mean_1", "12.20"), (1, "country", "y"))
    found, path = settled_folder(SHEET, other)
    sheet = load_workbook(path)["consensus"]
    lines = [
        dict(zip([c.value for c in sheet[1]], [c.value for c in line], strict=True))
        for line in sheet.iter_rows(min_row=2)
    ]
    assert [(line["variable"], line["A"], line["B"], line["agreed"]) for line in lines] == [
        ("mean_1", "10.20", "12.20", None),
        ("country", "x", "y", None),
    ]
    assert [(line["row A"], line["A cell"]) for line in lines] == [(2, "mean_1 [D2]"), (3, "country [I3]")]
    assert not has_agreed(path)
    assert read_consensus(found, path) == Settled()


def test_settling_every_dispute_with_the_truth_gives_the_effects_of_the_truth(
    settled_folder: Folder, tmp_path: Path
) -> None:
    rng = np.random.default_rng(12)
    truth = random_sheet(rng, 40)
    coders = [truth.copy(), truth.copy()]
    for i in range(40):
        filled = [
            name
            for name in truth.columns
            if truth.loc[i, name] and name not in ("study", "outcome", "design")
        ]
        name = str(rng.choice(filled))
        coders[rng.integers(2)].loc[i, name] = slip(rng, truth.loc[i], name)
    found, path = settled_folder(coders[0], coders[1].sample(frac=1, random_state=3).reset_index(drop=True))
    book = load_workbook(path)
    sheet = book["consensus"]
    headings = [cell.value for cell in sheet[1]]
    at = {(row["study"], row["outcome"]): row for row in truth.to_dict("records")}
    for line in sheet.iter_rows(min_row=2):
        said = dict(zip(headings, (cell.value for cell in line), strict=True))
        line[headings.index("agreed")].value = at[said["study"], said["outcome"]][said["variable"]]
    book.save(path)
    assert has_agreed(path)
    notes = write_settled(tmp_path / "final", found, read_consensus(found, path), force=False)
    assert notes == []
    merged_effects = extractor.convert(tmp_path / "final" / MERGED, TO).effects
    expected = extractor.convert(truth, TO).effects
    for name in ("estimate", "variance", "estimate_low", "estimate_high"):
        assert merged_effects[name].to_numpy() == pytest.approx(
            expected[name].to_numpy(), rel=1e-12, nan_ok=True
        )
    assert list(merged_effects["country"]) == list(expected["country"])


def test_what_is_not_settled_stays_blank_and_is_counted(settled_folder: Folder) -> None:
    other = changed(SHEET, (0, "mean_1", "12.20"), (1, "mean_1", "1.22"), (2, "sd_1", ""))
    found, path = settled_folder(SHEET, other)
    fill(path, {"sd_1": "blank"})
    frame, notes = merged(found, read_consensus(found, path))
    assert list(frame["mean_1"]) == ["", "", "5.13", "5.30"]
    assert list(frame["sd_1"]) == ["3.12", "0.31", "", "1.27"]
    assert notes == ["2 disputes not settled: left blank in the merged sheet"]


def test_of_agreeing_numbers_the_more_exact_one_is_kept(settled_folder: Folder) -> None:
    found, _ = settled_folder(changed(SHEET, (0, "mean_1", "10.2")), changed(SHEET, (1, "mean_1", "1.2")))
    frame, _ = merged(found, Settled())
    assert list(frame["mean_1"]) == list(SHEET["mean_1"])


def test_a_number_typed_into_the_workbook_is_read_like_any_cell(settled_folder: Folder) -> None:
    found, path = settled_folder(SHEET, changed(SHEET, (0, "mean_1", "12.20")))
    fill(path, {"mean_1": 11.5})
    frame, _ = merged(found, read_consensus(found, path))
    assert frame["mean_1"].iloc[0] == "11.5"


def test_rows_of_one_coder_are_kept_or_dropped_as_settled(settled_folder: Folder) -> None:
    found, path = settled_folder(SHEET.iloc[:3], SHEET)
    frame, notes = merged(found, read_consensus(found, path))
    assert len(frame) == 3
    assert notes == ["1 single row not settled: left out of the merged sheet"]
    fill(path, {"": "keep"}, "rows")
    frame, notes = merged(found, read_consensus(found, path))
    assert list(frame["study"]) == list(SHEET["study"])
    assert notes == []
    fill(path, {"": "perhaps"}, "rows")
    with pytest.raises(UnreadableInput, match="'perhaps' is neither keep nor drop"):
        read_consensus(found, path)


def test_a_workbook_that_does_not_belong_to_the_sheets_is_refused_with_its_cell(
    settled_folder: Folder,
) -> None:
    other = changed(SHEET, (0, "mean_1", "12.20"))
    found, path = settled_folder(SHEET, other)
    fill(path, {"mean_1": "abc"})
    with pytest.raises(UnreadableInput, match=r"cell [A-Z]+2: 'abc'"):
        read_consensus(found, path)
    fill(path, {"mean_1": "10.20"})
    corrected = reconcile([SHEET, changed(SHEET, (0, "mean_1", "13.20"))], TO)
    with pytest.raises(UnreadableInput, match=r"sheet B now says '13.20' there"):
        read_consensus(corrected, path)
    with pytest.raises(UnreadableInput, match="no such dispute"):
        read_consensus(reconcile([SHEET, SHEET], TO), path)
    with pytest.raises(UnreadableInput, match="no consensus workbook"):
        read_consensus(found, workbook(path.parent / "other.xlsx", TERMS, CELLS))


def test_agreed_values_are_never_overwritten(settled_folder: Folder) -> None:
    found, path = settled_folder(SHEET, changed(SHEET, (0, "mean_1", "12.20")))
    write_comparison(path.parent, found, raw=False, force=True)
    fill(path, {"mean_1": "10.20"})
    with pytest.raises(UsageError, match="holds agreed values"):
        write_comparison(path.parent, found, raw=False, force=True)


def test_the_same_comparison_writes_the_same_bytes(tmp_path: Path) -> None:
    other = changed(SHEET, (0, "mean_1", "12.20"), (1, "country", "y")).iloc[:3]
    for name in ("one", "two"):
        found = reconcile([SHEET, other], TO)
        write_comparison(tmp_path / name, found, raw=False, force=False)
        write_settled(tmp_path / f"{name} final", found, Settled(), force=False)
    for folder in ("", " final"):
        for path in sorted((tmp_path / f"one{folder}").iterdir()):
            assert path.read_bytes() == (tmp_path / f"two{folder}" / path.name).read_bytes(), path.name


def test_a_merged_factorial_model_keeps_its_cells(settled_folder: Folder, tmp_path: Path) -> None:
    wrong = [*CELLS[:2], ("m1", "young", "f", 13, "7.63", "1.41"), CELLS[3]]
    sheets = [
        workbook(tmp_path / name, TERMS, lines) for name, lines in (("a.xlsx", CELLS), ("b.xlsx", wrong))
    ]
    found, path = settled_folder(*sheets, to="eta_squared")
    fill(path, {"mean_3": "6.73"})
    write_settled(tmp_path / "final", found, read_consensus(found, path), force=False)
    again = extractor.convert(tmp_path / "final" / MERGED, "eta_squared").effects
    expected = extractor.convert(sheets[0], "eta_squared").effects
    assert again["estimate"].to_numpy() == pytest.approx(expected["estimate"].to_numpy(), rel=1e-12)
    assert again["estimate"].notna().all()


def test_a_codebook_s_decimal_mark_goes_through_the_merged_sheet(tmp_path: Path) -> None:
    book = parse_codebook('title = "t"\ndesign = "two-group"\ndecimal_mark = ","\n', "book.toml")
    comma = SHEET.map(lambda text: text.replace(".", ",")).drop(columns="design")
    found = reconcile([comma, changed(comma, (0, "mean_1", "12,20"))], TO, book)
    assert list(found.agreement["variable"]).count("design") == 0
    write_settled(tmp_path / "final", found, Settled({(0, 1): ""}), force=False)
    again = extractor.convert(tmp_path / "final" / MERGED, TO, book).effects
    assert again["estimate"].to_numpy()[1:] == pytest.approx(
        extractor.convert(SHEET, TO).effects["estimate"][1:]
    )


def test_places_of_words_are_given_with_a_team_s_own_headings() -> None:
    text = 'title = "t"\ndesign = "two-group"\n[columns]\nstandardizer = ["divided by"]\nn_1 = ["size one"]\n'
    book = parse_codebook(text, "book.toml")
    sheet = SHEET.rename(columns={"n_1": "size one"}).assign(**{"divided by": "pooled"})
    other = changed(sheet, (0, "divided by", "control"), (0, "size one", "25"))
    lines = reconcile([sheet, other], None, book).disputes
    assert list(lines["variable"]) == ["n_1", "standardizer"]
    assert list(lines["A cell"]) == ["size one [C2]", "divided by [M2]"]
    assert default_codebook().meaning("size one") is None
