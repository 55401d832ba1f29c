"""GRIM, GRIMMER, DEBIT and the limits of the scale, from printed cells to findings."""

from decimal import ROUND_DOWN, ROUND_HALF_EVEN, ROUND_HALF_UP, Decimal

import numpy as np
import pandas as pd
import pytest

from extractor.audit.granular import unreachable
from extractor.codebook import Codebook, default_codebook, parse_codebook
from extractor.evidence import gather
from extractor.findings import Severity
from extractor.sheet import read_table
from tests.evidence.printing import Printed, Sheet, rounded, table

INTEGER = {"study": "Study 1", "design": "one-way", "responses": "integer"}


def audited(*rows, codebook: Codebook | None = None):
    frame = pd.DataFrame(list(rows), dtype=object)
    return list(unreachable(gather(read_table(frame, codebook or default_codebook()))))


def found(*rows, codebook: Codebook | None = None):
    findings = audited(*rows, codebook=codebook)
    return [(f.severity.word, f.rule, f.cells[0].partition(" [")[0]) for f in findings]


# --- published examples ------------------------------------------------------------------------------

PUBLISHED_MEANS = [
    # Encyclopedia article on the GRIM test, die example; source seen.
    ("3.48", "20", False),
    # The Economist, "Come again", 18 June 2016, worked example; source seen.
    ("5.93", "49", False),
    ("5.92", "49", True),
    # Brown & Heathers 2017, Soc. Psychol. Pers. Sci. 8:363-369, introductory example; value from memory.
    ("5.19", "28", False),
    # Crump, Navarro & Suzuki 2018, Answering Questions with Data, ch. 7; numbers seen, verdict by rule.
    ("5.11", "18", True),
    ("1.89", "18", True),
    ("3.89", "18", True),
]


@pytest.mark.parametrize(("mean", "n", "honest"), PUBLISHED_MEANS)
def test_published_means(mean, n, honest):
    expected = [] if honest else [("impossible", "granularity of the mean", "mean_2")]
    assert found(INTEGER | {"mean_2": mean, "n_2": n}) == expected


def test_the_message_gives_the_neighbouring_means_and_the_caution():
    (finding,) = audited(INTEGER | {"mean_1": "5.93", "n_1": "49"})
    assert finding.message.startswith(
        "no whole-number total of 49 scores prints as 5.93: 290/49 prints 5.92, 291/49 prints 5.94; "
    )
    assert "unweighted whole-number items, complete data and the stated n" in finding.message
    assert finding.cells == ("mean_1 [D2]", "n_1 [E2]")
    assert finding.printed == "5.93"


def test_published_sd_of_the_wrong_parity():
    """Allard 2018, parity example: total 62 is even, the one sum of squares in range odd; from memory."""
    row = INTEGER | {"mean_1": "3.44", "n_1": "18"}
    (finding,) = audited(row | {"sd_1": "2.47"})
    assert (finding.severity, finding.rule) == (Severity.IMPOSSIBLE, "granularity of the SD")
    # (316 - 62²/18)/17 = 2.455² and (318 - 62²/18)/17 = 2.479²
    assert "(the nearest: 2.45 and 2.48)" in finding.message
    assert found(row | {"sd_1": "2.45"}) == found(row | {"sd_1": "2.48"}) == []


def test_published_binary_groups():
    """SciPy reference documentation, two-sample t from summary statistics: 30 of 150, 45 of 200; source seen.

    The variances there, .161073 and .175251, are those of SDs .4013 and .4186 (arithmetic).
    """
    row = {"design": "two-group", "responses": "binary", "n_1": "150", "n_2": "200", "mean_1": "0.2"}
    row |= {"mean_2": "0.225"}
    assert found(row | {"sd_1": "0.4013", "sd_2": "0.4186"}) == []
    (finding,) = audited(row | {"sd_1": "0.4013", "sd_2": "0.4816"})
    assert (finding.severity, finding.rule) == (Severity.IMPOSSIBLE, "binary SD")
    # n/(n - 1)·p(1 - p) for p from .2245 to .2255 (arithmetic)
    assert finding.expected_low == pytest.approx((200 / 199 * 0.2245 * 0.7755) ** 0.5)
    assert finding.expected_high == pytest.approx((200 / 199 * 0.2255 * 0.7745) ** 0.5)


# --- what is judged, and what is not -----------------------------------------------------------------


@pytest.mark.parametrize(
    "row",
    [
        {"responses": "continuous"},
        {"responses": ""},
        {"mean_1": "< 5.93"},
        {"n_1": "> 40"},
        {"n_1": ""},
        {"mean_1": 5.9312345678901234},
    ],
)
def test_rows_that_cannot_be_judged(row):
    assert found(INTEGER | {"mean_1": "5.93", "n_1": "49"} | row) == []


def test_items_make_the_grid_finer():
    row = INTEGER | {"n_1": "49", "scale_items": "3"}
    # 871/147 = 5.9252 and 872/147 = 5.9320 (arithmetic)
    assert found(row | {"mean_1": "5.93"}) == found(row | {"mean_1": "5.932"}) == []
    (finding,) = audited(row | {"mean_1": "5.928"})
    assert (
        "total of 49 x 3 answers prints as 5.928: 871/147 prints 5.925, 872/147 prints 5.932"
        in finding.message
    )


def test_the_rounding_rule_of_the_sheet():
    """145/28 = 5.1786 is cut to 5.17 and rounds to 5.18 (arithmetic)."""
    row = INTEGER | {"n_1": "28", "mean_1": "5.17"}
    assert found(row) == [("impossible", "granularity of the mean", "mean_1")]
    for rule in ("truncated", "either"):
        assert found(row, codebook=parse_codebook(f'rounding = "{rule}"', "rule")) == []
    (finding,) = audited(row | {"mean_1": "5.18"}, codebook=parse_codebook('rounding = "truncated"', "rule"))
    assert "145/28 is 5.1786, 146/28 is 5.2143" in finding.message


def test_numbers_printed_to_tens_are_no_whole_numbers():
    """Two scores with total 10 have SDs of 70/sqrt(2) = 49.5 - .003 or 72/sqrt(2) = 50.9 (arithmetic)."""
    row = INTEGER | {"mean_1": "5.0", "n_1": "2"}
    assert found(row | {"sd_1": "50"}) == [("impossible", "granularity of the SD", "sd_1")]
    assert found(row | {"sd_1": "5e1"}) == []


def test_changes_and_repeated_means_are_judged():
    row = {"design": "pre-post-control", "responses": "integer", "n_1": "20"}
    assert found(row | {"mean_pre_1": "3.48"}) == [("impossible", "granularity of the mean", "mean_pre_1")]
    assert found(row | {"mean_change_1": "-0.48"}) == [
        ("impossible", "granularity of the mean", "mean_change_1")
    ]
    # a change may leave the scale; a mean may not
    scale = {"scale_min": "1", "scale_max": "7"}
    assert found(row | scale | {"mean_change_1": "-0.45"}) == []
    assert found(row | scale | {"mean_post_1": "0.45"}) == [
        ("impossible", "outside the scale", "mean_post_1")
    ]


def test_two_answers_scored_in_another_way():
    row = {"design": "two-group", "responses": "binary", "n_1": "30"}
    # a percentage is not judged as a share
    assert found(row | {"mean_1": "45.25", "sd_1": "12.3"}) == []
    assert found(row | {"scale_min": "0", "scale_max": "100", "mean_1": "45.25", "sd_1": "49.77"}) == []
    # 30 answers scored 1 and 2 with total 43: 13 twos, SD sqrt(30/29·13/30·17/30) = .504 (arithmetic)
    coded = row | {"scale_min": "1", "scale_max": "2", "mean_1": "1.43"}
    assert found(coded | {"sd_1": "0.504"}) == []
    assert found(coded | {"sd_1": "0.501"}) == [("impossible", "granularity of the SD", "sd_1")]


# --- the scale ---------------------------------------------------------------------------------------

SCALE = {"design": "one-way", "scale_min": "1", "scale_max": "7"}


def test_means_lie_on_the_scale():
    assert found(SCALE | {"mean_1": "7.04", "mean_2": "0.5", "median_3": "1"}) == [
        ("impossible", "outside the scale", "mean_1"),
        ("impossible", "outside the scale", "mean_2"),
    ]
    # 7 may be anything down to 6.5, and an adjusted mean may leave the scale
    assert found(SCALE | {"mean_1": "7", "mean_2": "1", "adjusted_mean_1": "7.4"}) == []
    (finding,) = audited(SCALE | {"mean_1": "43.1"})
    assert (finding.expected_low, finding.expected_high) == (1.0, 7.0)


def test_a_scale_upside_down_is_said_once():
    row = SCALE | {"scale_min": "7", "scale_max": "1", "mean_1": "4.1", "sd_1": "9"}
    assert found(row) == [("inconsistent", "limits in the wrong order", "scale_min")]


def test_sds_fit_the_scale():
    """s² <= (M - a)(b - M)n/(n - 1): 2·4·10/9 = 2.98² for M = 3, n = 10 (Bhatia & Davis 2000; arithmetic)."""
    row = SCALE | {"mean_1": "3.00", "n_1": "10"}
    assert found(row | {"sd_1": "2.98"}) == []
    (finding,) = audited(row | {"sd_1": "3.00"})
    assert (finding.severity, finding.rule) == (Severity.IMPOSSIBLE, "SD beyond the scale")
    # the mean may be 3.005
    assert finding.expected_high == pytest.approx((2.005 * 3.995 * 10 / 9) ** 0.5)
    # without n two scores are possible, without a mean the middle of the scale is: 6/2·sqrt(2) = 4.243
    assert found(SCALE | {"sd_1": "4.24"}) == []
    assert found(SCALE | {"sd_1": "4.25"}) == [("impossible", "SD beyond the scale", "sd_1")]


def test_sds_fit_the_range_of_the_group():
    row = {"design": "one-way", "n_1": "12", "minimum_1": "5", "maximum_1": "5", "mean_1": "5.0"}
    assert found(row | {"sd_1": "0.0"}) == []
    # extremes printed as 5 may be 4.5 and 5.5
    assert found(row | {"sd_1": "0.5"}) == []
    assert found(row | {"sd_1": "0.8"}) == [("impossible", "SD beyond the scale", "sd_1")]


def test_an_sd_beyond_the_scale_is_said_once():
    row = INTEGER | {"scale_min": "1", "scale_max": "7", "mean_1": "3.00", "n_1": "10", "sd_1": "5.00"}
    assert found(row) == [("impossible", "SD beyond the scale", "sd_1")]


# --- no honest study, every other one ----------------------------------------------------------------


def prints(number, decimals, habit):
    return str(Decimal(float(number)).quantize(Decimal(1).scaleb(-decimals), rounding=habit))


@pytest.mark.parametrize(
    ("rule", "habit"), [("nearest", ROUND_HALF_UP), ("nearest", ROUND_HALF_EVEN), ("truncated", ROUND_DOWN)]
)
@pytest.mark.parametrize("items", [1, 3])
def test_honest_studies_have_no_findings(rule, habit, items):
    rng = np.random.default_rng(11 + items)
    rows = []
    for _ in range(300):
        n, decimals = int(rng.integers(2, 30)), rng.integers(0, 4, size=2)
        scores = rng.integers(1, 6, size=(n, items)).sum(axis=1)
        # the mean as an exact decimal, so that ties print as they would from the raw total
        mean = Decimal(int(scores.sum())) / Decimal(n * items)
        sd = scores.std(ddof=1) / items
        row = INTEGER | {"n_1": str(n), "scale_items": str(items), "scale_min": "1", "scale_max": "5"}
        row["mean_1"] = str(mean.quantize(Decimal(1).scaleb(-int(decimals[0])), rounding=habit))
        rows.append(row | {"sd_1": prints(sd, int(decimals[1]), habit)})
    assert found(*rows, codebook=parse_codebook(f'rounding = "{rule}"', "rule")) == []


def test_exactly_the_unreachable_means_are_found():
    """Every mean printed from 1.00 to 7.00 with 19 scores, against enumeration of all totals."""
    n, values = 19, np.arange(100, 701) / 100
    reachable = {
        Decimal(total).__truediv__(n).quantize(Decimal("0.01"), rounding=habit)
        for total in range(n, 7 * n + 1)
        for habit in (ROUND_HALF_UP, ROUND_HALF_EVEN)
    }
    columns = {("mean", 1): rounded(values, 2), ("n", 1): Printed(np.full(len(values), float(n)), 0)}
    findings = list(unreachable(gather(table(Sheet(columns, {"responses": "integer"})))))
    expected = [row for row, value in enumerate(values, start=2) if Decimal(f"{value:.2f}") not in reachable]
    assert [f.row for f in findings] == expected
    assert len(expected) == 601 - len(reachable)
