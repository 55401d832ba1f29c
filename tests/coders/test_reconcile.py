"""Double coding: how well coders agree, and disputes by what they do to the effect. All data are invented."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import extractor
from extractor.coders.agreement import cohens_kappa, icc_agreement
from extractor.coders.displacement import DECIDES, MOVES, MOVES_IN_WORDS, NOTHING, VARIANCE
from extractor.coders.reconcile import reconcile
from extractor.errors import UsageError
from tests.double_coding import (
    CELLS,
    FACTORIAL,
    SHEET,
    TERMS,
    TO,
    changed,
    pairs_of,
    random_sheet,
    slip,
    workbook,
)
from tests.evidence.double_coding import measured


@pytest.mark.parametrize("seed", range(5))
def test_disputes_stand_in_the_order_of_the_slips_true_displacements(seed: int) -> None:
    found = measured(seed)
    assert found.disputes == found.slips
    assert found.ranks > 0.9
    assert found.touching > 0.95
    assert found.top == 10


@pytest.mark.parametrize("seed", range(2))
def test_changed_is_what_converting_the_changed_sheet_gives(seed: int) -> None:
    """Every dispute of the batch against a conversion of its own, cell by cell."""
    rng = np.random.default_rng(50 + seed)
    sheet = random_sheet(rng, 16)
    other = sheet.copy()
    for i in range(16):
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
    own = extractor.convert(sheet, metric).effects
    assert len(found)
    for line in found.to_dict("records"):
        row, name = int(line["of_effect"]), str(line["variable"])
        new = extractor.convert(changed(sheet, (row, name, str(other.loc[row, name]))), metric).effects
        assert_moves(line, own, new)


def assert_moves(line: dict[str, object], own: pd.DataFrame, new: pd.DataFrame) -> None:
    """What a dispute's line says against the effects of both sheets, whichever row moves most."""
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
    assert bool(errors.max() > 1e-12) is (line["moves"] == MOVES_IN_WORDS[VARIANCE])


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
    assert list(lines["variable"]) == ["sd_1", "mean_1", "mean_1", "n_1", "country", "page"]
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
        own, new = (extractor.convert(sheet, metric).effects for sheet in sheets)
        assert_moves(lines.iloc[0].to_dict(), own, new)


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
