"""What to ask: every offer keeps its promise, no part of it would do, and easy numbers come first."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from extractor.api import read
from extractor.asking.batch import unlocking
from extractor.asking.questions import Aim, Offer, burden, questions
from extractor.asking.typical import width_left
from extractor.codebook import Codebook
from extractor.quantities import METRICS, VOCABULARY
from extractor.routes.conversion import Conversion, convert_evidence
from extractor.routes.planner import Start
from extractor.routes.unlock import (
    ASKABLE,
    BURDEN,
    EASE,
    Ease,
    any_point,
    follows,
    graph,
    in_words,
    smallest_sets,
    unlocking_sets,
)
from tests.evidence.unlocking import tried, with_precision
from tests.simulated_review import ASSUMING, review

DEFAULTS = frozenset({"tails", "confidence_level"})


def converted(metric: str, codebook: Codebook | None = None, **row: str) -> Conversion:
    sheet = pd.DataFrame([{"study": "Study 1", **row}])
    return convert_evidence(read(sheet, codebook).evidence, metric)


def offers(metric: str, codebook: Codebook | None = None, **row: str) -> list[Offer]:
    return [offer for some in questions(converted(metric, codebook, **row)) for offer in some.offers]


def asked(found: list[Offer]) -> list[frozenset[str]]:
    return [offer.asked for offer in found]


# ---- the promise -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("metric", "seed"), [("cohens_d", 31), ("omega_squared", 32), ("partial_eta_squared", 33)]
)
def test_every_offer_does_what_it_promises_and_no_part_of_it_does(metric: str, seed: int) -> None:
    """Filled with the true values of simulated studies; the sheet is read and converted anew each time."""
    lines = tried(seed, 60, metric)
    assert lines["full"].sum() > 40
    assert (~lines["full"]).sum() > 80
    broken = lines[lines["full"] != lines["done"]]
    assert broken.empty, broken.to_string()


@pytest.mark.parametrize("metric", ["hedges_g", "omega_squared"])
def test_what_a_letter_asks_for_brings_estimate_and_variance(metric: str) -> None:
    effects = with_precision(22, 80, metric)
    assert len(effects) > 5
    assert (effects["status"] == "converted").all()
    assert np.isfinite(effects["variance"]).all()


def test_the_promise_holds_for_bounds_and_assumptions() -> None:
    """Rows of the kinds that a simulated review has few of."""
    rows = [
        {"design": "two-group", "p_value": "< .05", "n_1": "20", "n_2": "24", "direction": "+"},
        {"design": "two-group", "t_value": "2.31", "n_total": "44"},
        {"design": "one-way", "p_value": "< .01", "df_effect": "2", "df_error": "57"},
        {"design": "paired", "mean_1": "5.1", "mean_2": "4.2", "sd_1": "1.9", "sd_2": "2.1", "n_total": "30"},
    ]
    found = [
        [(some.aim, bool(some.offers)) for some in questions(converted("cohens_d", ASSUMING, **r))]
        for r in rows
    ]
    assert found[0] == [(Aim.TIGHTENS, True)]
    assert (Aim.FREES, True) in found[1]
    assert found[2] == [(Aim.OPENS, True)]
    assert (Aim.FREES, True) in found[3]
    freed = asked(
        [o for some in questions(converted("cohens_d", ASSUMING, **rows[3]), most=10) for o in some.offers]
    )
    assert freed[0] == {"sd_difference"}
    assert {"correlation"} in freed
    assert asked(offers("omega_squared", **rows[2]))[0] == {"f_value"}


# ---- order -----------------------------------------------------------------------------------------------


def test_sizes_means_and_sds_come_before_tests_and_tests_before_raw_scores() -> None:
    assert EASE["n"] == EASE["mean"] == EASE["sd"] < EASE["t_value"] < EASE["ss_error"] < EASE["correlation"]
    costs = BURDEN["n"], BURDEN["t_value"], BURDEN["ss_error"], BURDEN["correlation"]
    assert list(costs) == sorted(set(costs))
    sheet, _ = review(34, 60)
    for some in questions(convert_evidence(read(sheet, ASSUMING).evidence, "cohens_d")):
        groups = some.block.groups or (3 if some.block.design == "one-way" else 2)
        found = [burden(offer.asked, groups) for offer in some.offers]
        assert found == sorted(found)


def test_short_questions_come_before_long_ones() -> None:
    """Two SDs rather than an F, but one F rather than the nine summary statistics of three groups."""
    two = offers("omega_squared", design="two-group", n_1="20", n_2="22", mean_1="5.1", mean_2="4.2")
    assert asked(two)[:2] == [{"sd"}, {"f_value"}]
    three = asked(offers("omega_squared", design="one-way", df_effect="2", df_error="57"))
    assert three[0] == {"f_value"}
    # whoever has no F is shown a way without it
    assert any("f_value" not in some for some in three)


def test_an_omnibus_f_asks_for_the_contrast_itself() -> None:
    found = asked(offers("hedges_g", design="one-way", f_value="4.31", df_effect="2", df_error="57"))
    assert found[0] == {"n", "mean"}
    assert all(some & {"mean", "mean_difference", "t_value"} for some in found)
    assert not any("direction" in some for some in found)


def test_a_direction_is_all_that_a_two_group_f_needs() -> None:
    found = offers("hedges_g", design="two-group", f_value="4.31", df_error="38", n_1="20", n_2="20")
    assert found[0].asked == {"direction"}
    assert found[0].ease is Ease.ARTICLE
    assert not found[0].assuming


def test_a_direction_is_no_remedy_where_the_f_has_several_df() -> None:
    row = {"design": "factorial", "f_value": "4.31", "df_error": "54", "n_1": "20", "n_2": "20", "n_3": "20"}
    assert any("direction" in s for s in asked(offers("cohens_d", **{**row, "df_effect": "1"})))
    assert not any("direction" in s for s in asked(offers("cohens_d", **{**row, "df_effect": "2"})))


def test_a_number_that_stands_for_several_is_asked_once() -> None:
    found = asked(offers("cohens_d", design="paired", t_value="2.4"))
    assert frozenset({"n_total"}) in found
    assert not any("n" in some for some in found)


def test_what_stays_assumed_is_said() -> None:
    found = {o.asked: o for o in offers("cohens_d", design="two-group", f_value="4.31", n_total="40")}
    assert found[frozenset({"direction"})].assuming


def test_rounding_decides_between_equally_easy_sets() -> None:
    """A p value of three decimals leaves more room than an F of two."""
    base = frozenset({"df_effect", "df_error", "tails"})
    assert width_left("one-way", base | {"f_value"}, "eta_squared") < width_left(
        "one-way", base | {"p_value"}, "eta_squared"
    )
    found = asked(offers("eta_squared", design="one-way", df_effect="2", df_error="57"))
    assert found.index(frozenset({"f_value"})) < found.index(frozenset({"p_value"}))


def test_what_the_variance_needs_beyond_is_said() -> None:
    found = offers("cohens_d", design="one-way", ms_error="4.1", k_groups="3")
    means = next(offer for offer in found if offer.asked == {"mean"})
    assert means.also


# ---- rows that cannot be asked about ---------------------------------------------------------------------


def test_a_metric_that_a_design_does_not_have_is_not_asked_for() -> None:
    assert offers("r", design="one-way", f_value="4.31", df_effect="2", df_error="57") == []


def test_a_welch_test_is_not_asked_for_again() -> None:
    row = {"design": "two-group", "t_value": "2.1", "df": "31.7", "n_1": "20", "n_2": "15"}
    found = asked(offers("cohens_d", **row))
    assert found
    assert not any(some & {"t_value", "f_value", "p_value", "df_error"} for some in found)


def test_numbers_that_lead_nowhere_are_asked_about_in_another_way() -> None:
    """An F with two df and a direction looks like a t to the graph, and gives none."""
    row = {"design": "factorial", "f_value": "4.31", "direction": "+", "df_effect": "2", "df_error": "57"}
    found = asked(offers("cohens_d", **row, n_1="20", n_2="20", mean_difference="1.2"))
    assert found[0] == {"t_value"}
    assert {"ms_error"} in found


# ---- tables ----------------------------------------------------------------------------------------------


def sheet_of_gaps() -> pd.DataFrame:
    return pd.DataFrame(
        [
            {
                "study": "North",
                "design": "two-group",
                "mean_1": "5.1",
                "mean_2": "4.2",
                "n_1": "20",
                "n_2": "22",
            },
            {
                "study": "South",
                "design": "two-group",
                "mean_1": "6.1",
                "mean_2": "5.5",
                "n_1": "31",
                "n_2": "30",
            },
            {
                "study": "East",
                "design": "two-group",
                "mean_1": "6.1",
                "mean_2": "5.5",
                "n_1": "31",
                "sd_1": "2.0",
            },
            {"study": "West", "design": "two-group", "t_value": "2.1", "n_1": "15", "n_2": "15"},
            {"study": "Centre", "design": "twogroup"},
        ]
    ).fillna("")


def test_rows_say_what_to_ask_and_where_it_goes() -> None:
    found = unlocking(convert_evidence(read(sheet_of_gaps()).evidence, "cohens_d"))
    rows = found.rows.set_index(["row", "choice"])
    assert rows.loc[(2, 1), "question"] == "SD of groups 1 and 2"
    assert rows.loc[(2, 1), "cells"] == "sd_1 [G2]; sd_2 [new column]"
    # known members of a group quantity are not asked for again
    assert rows.loc[(4, 1), "question"] == "n of group 2; SD of group 2"
    assert 5 not in found.rows["row"].to_numpy()
    assert "did you mean two-group?" in rows.loc[(6, 1), "reason"]
    assert rows.loc[(6, 1), "question"] == ""


def test_the_batch_view_counts_the_rows_that_one_question_serves() -> None:
    batch = unlocking(convert_evidence(read(sheet_of_gaps()).evidence, "cohens_d")).batch
    sds = batch[batch["question"] == "SD of each group"].iloc[0]
    assert sds["row_numbers"] == [2, 3]
    both = batch[batch["question"] == "n of each group; SD of each group"].iloc[0]
    assert both["row_numbers"] == [2, 3, 4]
    assert (both["opens"], both["studies"]) == (3, 3)
    # of questions that do the same, only the one that costs least is shown, and nothing that does less for more
    assert len(batch) == 2


def test_rows_show_what_an_answer_would_narrow() -> None:
    found = unlocking(
        converted(
            "cohens_d", ASSUMING, design="paired", mean_1="5.1", mean_2="4.2", t_value="2.1", n_total="30"
        )
    ).rows
    freed = found[found["does"] == Aim.FREES.value]
    assert len(freed) == 0 or (freed["gain"] > 0).all()
    bounded = unlocking(
        converted("omega_squared", design="one-way", p_value="< .05", df_effect="2", df_error="57")
    )
    first = bounded.rows.iloc[0]
    assert first["does"] == Aim.TIGHTENS.value
    # the least ω² with p < .05: F = 3.159 (upper 5 % point of F(2, 57)), so 2·2.159/(2·2.159 + 60)
    assert first["now_low"] == pytest.approx(0.0671, abs=5e-4)
    assert first["now_high"] == 1.0


def test_the_gain_of_a_freed_row_is_the_reach_of_its_assumption() -> None:
    """d over the within SD from d_z: d_z·sqrt(2(1 - r)) (Borenstein et al. 2009, ch. 4), r from .3 to .8."""
    conversion = convert_evidence(
        read(
            pd.DataFrame([{"study": "A", "design": "paired", "t_value": "3.0", "n_total": "36"}]), ASSUMING
        ).evidence,
        "cohens_d",
        standardizer="within",
    )
    row = unlocking(conversion, standardizer="within").rows.iloc[0]
    assert row["does"] == Aim.FREES.value
    d_z = 3.0 / np.sqrt(36)
    assert row["now_low"] == pytest.approx(d_z * np.sqrt(2 * 0.2), rel=1e-9)
    assert row["now_high"] == pytest.approx(d_z * np.sqrt(2 * 0.7), rel=1e-9)


# ---- sets on the graph -----------------------------------------------------------------------------------


def test_smallest_sets_against_a_search_of_all_sets() -> None:
    """Every set of up to two quantities from which the goal follows, found by trying all of them."""
    from itertools import combinations

    relations = graph("two-group", any_point, frozenset(), None)
    known = frozenset({"n_total", "k_groups", "contrast_weight", *DEFAULTS})
    goal = frozenset({"cohens_d"})
    names = sorted({q for r in relations for q in r.needs} & ASKABLE - known)
    single = {frozenset([n]) for n in names if goal <= follows(known | {n}, relations)}
    double = {
        frozenset(pair)
        for pair in combinations(names, 2)
        if goal <= follows(known | set(pair), relations) and not any({q} in single for q in pair)
    }
    found = set(smallest_sets(known, ASKABLE, relations, goal, most=10_000))
    assert {s for s in found if len(s) == 1} == single
    missed = double - found
    # antichains are cut, so that hard sets may be missed, but no set of the easiest kind
    assert not any(max(EASE[q] for q in s) <= Ease.SUMMARY for s in missed)
    assert {s for s in found if len(s) == 2} <= double


def test_an_open_metric_needs_nothing() -> None:
    start = Start(frozenset({"f_value", "df_effect", "df_error"}), frozenset(), DEFAULTS)
    assert unlocking_sets(start, "one-way", "eta_squared") == []


def test_sets_are_the_same_whatever_the_metric_was_asked_before() -> None:
    start = Start(frozenset({"f_value"}), frozenset(), DEFAULTS)
    first = {metric: unlocking_sets(start, "one-way", metric) for metric in METRICS}
    again = {metric: unlocking_sets(start, "one-way", metric) for metric in reversed(METRICS)}
    assert first == again


def test_words() -> None:
    assert (
        in_words([frozenset({"mean", "n_total"}), frozenset({"t_value"})])
        == "n_total and mean of each group; or t_value"
    )
    assert VOCABULARY.keys() >= ASKABLE
