"""The derivations as written say what the tables of steps and of routes say, which are put together otherwise."""

from __future__ import annotations

import json
import math
from pathlib import Path

import pandas as pd
import pytest

from extractor.api import Result, convert
from extractor.output import trail
from tests.recorded import recorded_cells

ROWS = [
    # n of a group or a direction is there in some rows of one way of reporting only
    {"study": "A", "design": "two-group", "n_1": "20", "n_2": "21", "t_value": "2.10", "direction": "1 > 2"},
    {"study": "A", "design": "two-group", "n_1": "30", "n_2": "21", "t_value": "-0.00", "page": "7"},
    {"study": "B", "design": "two-group", "n_1": "20", "n_2": "20", "t_value": "1.5", "p_value": "< .2"},
    {"study": 'C "9"', "design": "one-way", "f_value": "4.10", "df_effect": "2", "df_error": "57"},
    {
        "study": "C",
        "design": "one-way",
        "f_value": "0.7",
        "df_effect": "2",
        "df_error": "57",
        "covariates": "age",
    },
    {"study": "D", "p_value": ".03"},
    {"study": "E", "mean_1": "4.0"},
]


@pytest.fixture(params=["omega_squared", "hedges_g"])
def result(request: pytest.FixtureRequest) -> Result:
    return convert(pd.DataFrame(ROWS).fillna(""), to=request.param)


@pytest.mark.parametrize("chunk", [3, 20_000])
def test_derivations_say_what_the_tables_say(
    result: Result, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, chunk: int
) -> None:
    monkeypatch.setattr(trail, "_CHUNK", chunk)
    trail.write_derivations(result, tmp_path / "d.json", lambda _: None)
    found = json.loads((tmp_path / "d.json").read_text(encoding="utf-8"))
    rows = found["rows"]
    assert [row["row"] for row in rows] == result.effects["row"].tolist()
    assert [row["status"] for row in rows] == result.effects["status"].tolist()
    assert [row["cells"] for row in rows] == recorded_cells(result.conversion.evidence.table)
    steps = [
        {
            "row": row["row"],
            "group": 0,
            "relation": "",
            "cell": "",
            **step,
            "grade": found["relations"][step["relation"]]["grade"] if "relation" in step else step["grade"],
        }
        for row in rows
        for step in row["steps"]
    ]
    same(steps, result.derivations, ["row", "step", "role", "quantity", "group", "relation", "grade", "cell"])
    same(steps, result.derivations, ["value", "low", "high"])
    others = [{"row": row["row"], **other} for row in rows for other in row["alternatives"]]
    same(others, result.alternatives, list(result.alternatives.columns))


def same(found: list[dict[str, object]], table: pd.DataFrame, names: list[str]) -> None:
    """Whether some columns hold the same; a number that is missing or without a limit is null."""
    assert len(table)
    expected = [
        [None if isinstance(value, float) and not math.isfinite(value) else value for value in line]
        for line in table[names].to_numpy(dtype=object).tolist()
    ]
    assert [[each[name] for name in names] for each in found] == expected
