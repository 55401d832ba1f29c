"""How far effects move with assumptions and routes, against closed forms and a dense search."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from extractor.api import read
from extractor.codebook import Codebook
from extractor.errors import UsageError
from extractor.evidence import gather
from extractor.routes.by_route import by_route
from extractor.routes.conversion import Conversion, convert_evidence
from extractor.routes.sensitivity import TOGETHER, Sensitivity, ranges, sensitivity, with_ranges
from extractor.table import Assumption
from tests.simulated_review import ASSUMING

PAIRED = {"study": "A", "design": "paired", "t_value": "3.0", "n_total": "36"}


def converted(
    rows: list[dict[str, str]], metric: str, book: Codebook | None = ASSUMING, **how: str
) -> Conversion:
    sheet = pd.DataFrame(rows).fillna("")
    return convert_evidence(read(sheet, book).evidence, metric, standardizer=how.get("standardizer", ""))


def moved(
    rows: list[dict[str, str]], metric: str, book: Codebook | None = ASSUMING, **how: str
) -> Sensitivity:
    return sensitivity(converted(rows, metric, book, **how))


# ---- against closed forms --------------------------------------------------------------------------------


def test_estimate_and_variance_over_the_range_of_a_correlation() -> None:
    """Borenstein et al. (2009), ch. 4: d = d_z·sqrt(2(1 - r)), variance (1/n + d²/(2n))·2(1 - r)."""
    line = moved([PAIRED], "cohens_d", standardizer="within").effects.iloc[0]
    assert (line["assumption"], line["by"]) == ("correlation", "invented protocol")
    assert (line["value"], line["range_low"], line["range_high"]) == (0.5, 0.3, 0.8)
    d = {r: 3.0 / 6 * math.sqrt(2 * (1 - r)) for r in (0.3, 0.5, 0.8)}
    variance = {r: (1 / 36 + d[r] ** 2 / 72) * 2 * (1 - r) for r in d}
    assert line["estimate"] == pytest.approx(d[0.5], rel=1e-12)
    assert line["estimate_low"] == pytest.approx(d[0.8], rel=1e-9)
    assert line["estimate_high"] == pytest.approx(d[0.3], rel=1e-9)
    assert line["estimate_low"] <= d[0.8]
    assert line["estimate_high"] >= d[0.3]
    assert line["variance"] == pytest.approx(variance[0.5], rel=1e-12)
    assert line["variance_low"] == pytest.approx(variance[0.8], rel=1e-12)
    assert line["variance_high"] == pytest.approx(variance[0.3], rel=1e-12)
    assert line["swing_in_se"] == pytest.approx((d[0.3] - d[0.8]) / math.sqrt(variance[0.5]), rel=1e-9)


def test_a_lower_score_that_is_better_turns_the_interval() -> None:
    plus = moved([PAIRED], "cohens_d", standardizer="within").effects.iloc[0]
    minus = moved([{**PAIRED, "orientation": "-"}], "cohens_d", standardizer="within").effects.iloc[0]
    assert minus["estimate"] == -plus["estimate"]
    assert (minus["estimate_low"], minus["estimate_high"]) == (-plus["estimate_high"], -plus["estimate_low"])
    assert minus["swing"] == plus["swing"]


def test_the_interval_holds_every_value_between_its_ends() -> None:
    """Paired rows with means and SDs, with t, and with a p value, converted anew at many correlations."""
    rng = np.random.default_rng(51)
    rows = []
    for at in range(12):
        row = {"study": f"S{at}", "design": "paired", "n_total": str(rng.integers(12, 60)), "direction": "+"}
        kind = at % 3
        row |= {"t_value": f"{rng.normal(2, 1):.2f}"} if kind == 1 else {}
        row |= {"p_value": f"{rng.uniform(0.001, 0.2):.3f}", "df_effect": "1"} if kind == 2 else {}
        if kind == 0 or at % 2:
            row |= {f"mean_{g}": f"{rng.normal(5, 1):.1f}" for g in (1, 2)}
            row |= {f"sd_{g}": f"{rng.uniform(1, 3):.1f}" for g in (1, 2)}
        rows.append(row)
    evidence = read(pd.DataFrame(rows).fillna(""), ASSUMING).evidence
    for standardizer, most in (("", 4), ("within", 8)):
        lines = sensitivity(convert_evidence(evidence, "cohens_d", standardizer=standardizer)).effects
        lines = lines[lines["assumption"] == "correlation"].set_index("row")
        assert len(lines) >= most
        for r in rng.uniform(0.3, 0.8, 6):
            table = replace(evidence.table, assumptions={"correlation": Assumption(float(r), "test")})
            again = convert_evidence(gather(table), "cohens_d", standardizer=standardizer).effects
            again = again.set_index("row").loc[lines.index]
            assert (lines["estimate_low"] <= again["estimate"]).all()
            assert (again["estimate"] <= lines["estimate_high"]).all()
            # variances are computed at nine values of r; between them they bend by less than this
            slack = 0.002 * lines["variance_high"]
            assert (lines["variance_low"] - slack <= again["variance"]).all()
            assert (again["variance"] <= lines["variance_high"] + slack).all()


def test_the_level_of_printed_limits_is_moved_between_the_estimates_at_its_ends() -> None:
    """SD = sqrt(n) (U - L) / (2 t(n - 1)) (Cochrane Handbook, ch. 6), so that d rises with the level of the limits."""
    row = {"design": "two-group", "n_1": "20", "n_2": "20", "mean_1": "10.0", "mean_2": "8.0"}
    row |= {"ci_low_1": "9.0", "ci_high_1": "11.0", "ci_low_2": "7.0", "ci_high_2": "9.0"}
    book = Codebook(assumptions={"confidence_level": Assumption(0.95, "protocol", 0.9, 0.99)})
    conversion = convert_evidence(read(pd.DataFrame([row]), book).evidence, "cohens_d")
    line = sensitivity(conversion).effects.iloc[0]
    ends = [2.0 * 2 * stats.t.ppf((1 + level) / 2, 19) / (math.sqrt(20) * 2.0) for level in (0.9, 0.95, 0.99)]
    found = [line["estimate_low"], line["estimate"], line["estimate_high"]]
    assert found == pytest.approx(ends, rel=1e-9)


def test_tails_are_moved_over_whole_numbers_only() -> None:
    book = Codebook(assumptions={"tails": Assumption(2.0, "test", 1.0, 2.0)})
    row = {"study": "A", "design": "two-group", "p_value": ".04", "n_1": "20", "n_2": "20", "direction": "+"}
    line = moved([row], "cohens_d", book).effects.iloc[0]
    two = converted([{**row, "tails": "2"}], "cohens_d").effects["estimate"].iloc[0]
    one = converted([{**row, "tails": "1"}], "cohens_d").effects["estimate"].iloc[0]
    assert one < two
    assert line["estimate"] == two
    assert line["estimate_low"] == pytest.approx(one, rel=1e-6)
    assert line["variance_low"] == converted([{**row, "tails": "1"}], "cohens_d").effects["variance"].iloc[0]


def test_several_assumptions_are_moved_one_by_one_and_together() -> None:
    book = Codebook(
        assumptions={
            "covariate_r": Assumption(0.5, "test", 0.2, 0.7),
            "tails": Assumption(2.0, "test", 1.0, 2.0),
        }
    )
    row = {"study": "A", "design": "ancova", "p_value": ".02", "n_1": "20", "n_2": "20", "direction": "+"}
    found = moved([{**row, "df_effect": "1", "df_error": "37"}], "cohens_d", book).effects
    assert set(found["assumption"]) == {"covariate_r"}
    paired = {"study": "A", "design": "paired", "p_value": ".02", "n_total": "30", "direction": "+"}
    book = Codebook(
        assumptions={
            "correlation": Assumption(0.5, "test", 0.3, 0.8),
            "tails": Assumption(2.0, "test", 1.0, 2.0),
        }
    )
    found = moved([paired], "cohens_d", book, standardizer="within").effects.set_index("assumption")
    assert set(found.index) == {"correlation", "tails", TOGETHER}
    assert found.loc[TOGETHER, "estimate_low"] < found.loc[["correlation", "tails"], "estimate_low"].min()
    assert found.loc[TOGETHER, "swing"] >= found.loc[["correlation", "tails"], "swing"].max()


# ---- which assumption matters ----------------------------------------------------------------------------


def test_the_summary_names_the_assumption_that_matters_most_first() -> None:
    rows = [
        PAIRED,
        {"study": "B", "design": "paired", "t_value": "6.0", "n_total": "36"},
        {"study": "C", "design": "two-group", "t_value": "2.0", "n_total": "40"},
    ]
    found = moved(rows[:2], "cohens_d", standardizer="within").assumptions
    first = found.iloc[0]
    assert (first["assumption"], first["rows"], first["largest_row"]) == ("correlation", 2, 3)
    split = moved(rows[2:], "cohens_d").assumptions.iloc[0]
    assert "equal size" in split["assumption"]
    assert (split["by"], split["rows"]) == ("no range is declared", 1)


def test_nothing_assumed_nothing_moved() -> None:
    row = {"study": "A", "design": "one-way", "f_value": "4.3", "df_effect": "2", "df_error": "57"}
    found = moved([row], "eta_squared")
    assert found.effects.empty
    idle = found.assumptions
    assert idle[["assumption", "rows"]].values.tolist() == [["correlation", 0]]
    assert moved([row], "eta_squared", None).assumptions.empty


# ---- by route --------------------------------------------------------------------------------------------


def test_routes_that_rounding_explains_do_not_matter() -> None:
    """n = 20, 20; M = 5.00, 4.00; SD = 2.00, 2.00 give t = 1.58 (textbook formula)."""
    row = {"study": "A", "design": "two-group", "n_1": "20", "n_2": "20", "mean_1": "5.00", "mean_2": "4.00"}
    row |= {"sd_1": "2.00", "sd_2": "2.00"}
    agreeing = by_route(converted([{**row, "t_value": "1.58"}], "cohens_d")).iloc[0]
    assert agreeing["routes"] >= 2
    assert not agreeing["beyond_rounding"]
    apart = by_route(converted([{**row, "t_value": "15.8"}], "cohens_d")).iloc[0]
    assert apart["beyond_rounding"]
    assert apart["lowest"] == pytest.approx(0.5, abs=1e-9)
    assert apart["highest"] == pytest.approx(15.8 * math.sqrt(0.1), rel=1e-9)
    assert "t_value" in apart["highest_route"]
    assert apart["spread"] == pytest.approx(apart["highest"] - apart["lowest"])


def test_only_routes_over_one_standardizer_are_compared() -> None:
    row = {"study": "A", "design": "paired", "n_total": "30", "mean_1": "5.0", "mean_2": "4.0", "sd_1": "2.0"}
    row |= {"sd_2": "2.0", "correlation": ".80", "t_value": "4.33"}
    found = by_route(converted([row], "cohens_d")).iloc[0]
    # d over the average SD is 0.5; d over the SD of differences, 4.33/sqrt(30) = 0.79, is another thing
    assert found["estimate"] == pytest.approx(0.5, abs=1e-3)
    assert found["highest"] < 0.7


# ---- words on the command line ---------------------------------------------------------------------------


def test_ranges_as_typed() -> None:
    found = ranges(["correlation=.3:.8", "tails=1:2:2"])
    assert (found["correlation"].low, found["correlation"].high) == (0.3, 0.8)
    assert math.isnan(found["correlation"].value)
    assert found["tails"].value == 2


@pytest.mark.parametrize(
    ("word", "says"),
    [
        ("correlation", "is not of the form"),
        ("correlation=.8:.3", "low before high"),
        ("correlation=low:high", "is not of the form"),
        ("corelation=.3:.8", "did you mean correlation"),
        ("sd=1:2", "is no quantity of a whole row"),
        ("correlation=.3:1.8", "lies between -1 and 1"),
    ],
)
def test_ranges_that_are_refused(word: str, says: str) -> None:
    with pytest.raises(UsageError, match=says):
        ranges([word])
    with pytest.raises(UsageError, match="twice"):
        ranges(["tails=1:2", "tails=1:2"])


def test_a_range_keeps_the_value_in_use() -> None:
    table = read(pd.DataFrame([PAIRED]), ASSUMING).table
    taken = with_ranges(table, ranges(["correlation=.4:.6"])).assumptions["correlation"]
    assert taken == Assumption(0.5, "invented protocol", 0.4, 0.6)
    with pytest.raises(UsageError, match="leaves out the value in use"):
        with_ranges(table, ranges(["correlation=.6:.8"]))
    typed = with_ranges(table, ranges(["correlation=.6:.7:.8"])).assumptions["correlation"]
    assert (typed.value, typed.by) == (0.7, "--vary")
    new = with_ranges(table, ranges(["covariate_r=.2:.6"])).assumptions["covariate_r"]
    assert new.value == pytest.approx(0.4)
    default = with_ranges(table, ranges(["tails=1:2"])).assumptions["tails"]
    assert default.value == 2
