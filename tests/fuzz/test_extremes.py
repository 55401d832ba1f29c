"""Numbers at the ends of what is printed and of what doubles hold: no crash, no warning, nothing impossible.

Warnings are errors in every test of this project. That estimates are right at such ends is checked elsewhere against
mpmath; here stand closed forms that need no library.
"""

from __future__ import annotations

import math
from collections.abc import Iterable

import numpy as np
import pandas as pd
import pytest

from extractor.api import convert, read
from extractor.quantities import METRICS, VOCABULARY, Quantity, group_heading
from extractor.routes.conversion import convert_evidence

REFUSED = ("1e308", "-1e308", "1e400", "1" * 300, "inf", "-inf", "Infinity", "1" + "0" * 299 + ".5")
MISSING = ("nan", "NaN", "NA", "", "-", "—")


def frame(rows: Iterable[dict[str, str]]) -> pd.DataFrame:
    return pd.DataFrame(list(rows), dtype=object).fillna("")


def effects(rows: Iterable[dict[str, str]], *metrics: str) -> pd.DataFrame:
    """The effect table of the last metric, after looking at all of them for what no effect can be."""
    reading = read(frame(rows))
    for metric in metrics:
        conversion = convert_evidence(reading.evidence, metric)
        look(conversion.effects, VOCABULARY[metric])
    reading.audit(conversion)
    return conversion.effects


def look(found: pd.DataFrame, quantity: Quantity) -> None:
    estimate = found["estimate"].to_numpy(dtype=float)
    assert np.array_equal(np.isfinite(estimate), found["status"] == "converted")
    assert not np.any(estimate < quantity.low)
    assert not np.any(estimate > quantity.high)
    assert not np.any(found["variance"].to_numpy(dtype=float) < 0)
    assert not np.any(found["ci_low"] > found["ci_high"])
    assert not np.any(found["estimate_low"] > found["estimate"])
    assert not np.any(found["estimate"] > found["estimate_high"])
    assert np.all((found["reason"] != "") | (found["status"] != "blocked"))
    assert found["status"].isin(["converted", "bounded", "blocked"]).all()


ENDS = ("0", "-0.0", "1e-300", "1e-320", "1e-17", "0.5", "1", "1e6", "1e8", "1e15", "1e100", "-1", "-1e6")
DFS = ("0", "1", "2", "57", "1000000", "1e6", "1e15", "0.5", "-1")

TESTS = [
    {"design": "one-way", "f_value": f, "df_effect": df1, "df_error": df2}
    for f in ("0", "0.00", "1e-300", "0.5", "1.00", "1e6", "1e15", "1e100", "-0.0")
    for df1, df2 in (
        ("1", "1"),
        ("2", "57"),
        ("199", "1000000"),
        ("1", "1000000"),
        ("2", "1"),
        ("1e6", "1e6"),
    )
]
PROBABILITIES = [
    {
        "design": design,
        "p_value": p,
        "df_effect": "1",
        "df_error": df2,
        "n_1": "20",
        "n_2": "20",
        "direction": "+",
    }
    for design in ("one-way", "two-group")
    for p in ("1e-300", "1e-310", "< 1e-300", ".000", "1", "1.000", "0.9999999", "> .999", "0", "1e-17")
    for df2 in ("38", "1", "1000000")
]
SIZES = [
    {"design": design, **{group_heading(name, at): cell for at in range(1, 1 + k) for name, cell in cells}}
    for design in ("one-way", "two-group", "paired", "within")
    for k in (2, 3, 11)
    for cells in (
        (("n", "1"), ("mean", "5"), ("sd", "1")),
        (("n", "0"), ("mean", "5"), ("sd", "1")),
        (("n", "2"), ("mean", "5"), ("sd", "0")),
        (("n", "2"), ("mean", "-0.0"), ("sd", "0.0")),
        (("n", "1000000"), ("mean", "5.2"), ("sd", "1e-100")),
        (("n", "9007199254740992"), ("mean", "5.2"), ("sd", "1")),
        (("n", "20"), ("mean", "1e100"), ("sd", "1e-100")),
        (("mean", "5"), ("se", "0")),
    )
]
OTHERS = [
    {"design": "two-group", "t_value": t, "df": df, "n_1": "2", "n_2": n}
    for t in ("0", "-0.0", "1e6", "-1e6", "1e50", "1e-300")
    for df, n in (("1", "1"), ("2", "2"), ("1000000", "1000000"))
] + [
    {"design": "two-group", "count_a": a, "count_b": b, "count_c": c, "count_d": d}
    for a, b, c, d in (
        ("0", "0", "0", "0"),
        ("0", "5", "5", "0"),
        ("1", "1000000000", "1", "1"),
        ("1e15",) * 4,
    )
]


@pytest.mark.parametrize("rows", [TESTS, PROBABILITIES, SIZES, OTHERS], ids=["F", "p", "groups", "others"])
def test_no_row_falls(rows: list[dict[str, str]]) -> None:
    assert len(effects(rows, *METRICS)) == len(rows)


@pytest.mark.parametrize("name", ["f_value", "df_error"])
def test_numbers_beyond_doubles(name: str) -> None:
    """They are refused or read as blank, cell by cell; the row says why it has no effect."""
    row = {"design": "one-way", "f_value": "4.31", "df_effect": "2", "df_error": "57"}
    cells = (*REFUSED, *MISSING)
    result = convert(frame({**row, name: cell} for cell in cells), to="omega_squared")
    assert set(result.effects["status"]) == {"blocked"}
    refused = [finding.row for finding in result.audit.findings if finding.rule == "not understood"]
    assert refused == [at + 2 for at in range(len(REFUSED))]


def test_counts_beyond_doubles() -> None:
    whole = {"design": "one-way", "f_value": "4.31", "k_groups": "3"}
    rows = [whole | {"n_total": n} for n in ("9007199254740993", "1e20")]
    result = convert(frame(rows), to="omega_squared")
    assert result.effects["status"].tolist() == ["blocked", "blocked"]
    assert all("more than any study counts" in finding.message for finding in result.audit.findings)


@pytest.mark.parametrize("f", ["", "1.31"])
@pytest.mark.parametrize("size", ["1", "1000000"])
def test_two_hundred_groups(size: str, f: str) -> None:
    row = {"design": "one-way", "contrast": "1 - 200", "f_value": f}
    for group in range(1, 201):
        row |= {f"n_{group}": size, f"mean_{group}": f"{5 + group % 7}.0", f"sd_{group}": "1.5"}
    # single scores have no spread to standardise by
    assert (effects([row], "omega_squared", "hedges_g")["status"] == "blocked").tolist() == [size == "1"]
    assert effects([row], "mean_difference")["estimate"].tolist() == [6.0 - 9.0]


@pytest.mark.parametrize("digits", [10, 100, 300])
def test_eta_squared_of_a_tiny_p(digits: int) -> None:
    """For two numerator dfs the upper tail of F is (1 + 2F/v)^(-v/2), so eta squared is 1 - p^(2/v) (plain algebra)."""
    row = {"design": "one-way", "p_value": f"1e-{digits}", "df_effect": "2", "df_error": "57"}
    found = effects([row], "eta_squared").iloc[0]
    assert found["estimate"] == pytest.approx(-math.expm1(-digits * math.log(10) * 2 / 57), rel=1e-12)


@pytest.mark.parametrize(
    ("f", "df1", "df2"),
    [("1e6", "1", "1000000"), ("1000000", "1000000", "1000000"), ("1e15", "1", "1"), ("0", "2", "9")],
)
def test_eta_squared_of_a_huge_f(f: str, df1: str, df2: str) -> None:
    """F df1 / (F df1 + df2), the definition."""
    row = {"design": "one-way", "f_value": f, "df_effect": df1, "df_error": df2}
    found = effects([row], "eta_squared").iloc[0]
    explained = float(f) * float(df1)
    assert found["estimate"] == pytest.approx(explained / (explained + float(df2)), rel=1e-14)


@pytest.mark.parametrize("name", ["f_value", "t_value", "mean_difference", "cohens_d", "r"])
def test_negative_zero_is_zero(name: str) -> None:
    row = {"design": "two-group", name: "-0.0", "n_1": "20", "n_2": "22", "df_effect": "1", "direction": "+"}
    plain = {**row, name: "0.0"}
    metric = "mean_difference" if name == "mean_difference" else "cohens_d"
    both = effects([row, plain], metric).drop(columns="row")
    pd.testing.assert_series_equal(both.iloc[0], both.iloc[1], check_names=False)
    assert str(both["estimate"].iloc[0]) != "-0.0"


def test_every_end_in_every_column_of_a_test() -> None:
    rows = [
        {"design": "one-way", "f_value": f, "df_effect": df1, "df_error": df2}
        for f in ENDS
        for df1 in DFS
        for df2 in DFS
    ]
    assert len(effects(rows, "omega_squared", "partial_eta_squared", "fisher_z")) == len(rows)
