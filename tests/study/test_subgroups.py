"""Subgroups in the sheet of groups: merged exactly, the interval holding every true value."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from extractor.api import convert, read


def _sheet(lines: list[dict[str, str]]) -> tuple[pd.DataFrame, pd.DataFrame]:
    return pd.DataFrame([{"design": "one-way", "analysis": "m", "contrast": "1 - 2"}]), pd.DataFrame(lines)


def _line(group: str, scores: np.ndarray, places: int) -> dict[str, str]:
    return {
        "analysis": "m",
        "group": group,
        "n": str(len(scores)),
        "mean": f"{scores.mean():.{places}f}",
        "sd": f"{scores.std(ddof=1):.{places}f}",
    }


@pytest.mark.parametrize("seed", range(25))
def test_interval_holds_the_union(seed: int) -> None:
    rng = np.random.default_rng(seed)
    parts = [rng.normal(rng.normal(50, 5), 8, rng.integers(2, 30)) for _ in range(rng.integers(2, 5))]
    control = rng.normal(50, 8, 20)
    places = int(rng.integers(0, 3))
    rows, lines = _sheet([*(_line("arm", part, places) for part in parts), _line("none", control, places)])
    block = read(rows, groups=lines).evidence.blocks[0]
    union = np.concatenate(parts)
    for name, true in (("n", len(union)), ("mean", union.mean()), ("sd", union.std(ddof=1))):
        leaf = block.leaves[name]
        assert leaf.low[0, 0] <= true <= leaf.high[0, 0], name
    np.testing.assert_allclose(block.leaves["mean"].value[0, 1], float(lines["mean"].iloc[-1]))


def test_value_is_that_of_the_cochrane_formula() -> None:
    """Handbook 6.5.2.10 for two groups (locator from memory)."""
    n1, m1, s1, n2, m2, s2 = 18, 54.2, 7.6, 20, 51.9, 8.3
    spread = np.sqrt(
        ((n1 - 1) * s1**2 + (n2 - 1) * s2**2 + n1 * n2 / (n1 + n2) * (m1 - m2) ** 2) / (n1 + n2 - 1)
    )
    rows, lines = _sheet(
        [
            {"analysis": "m", "group": "arm", "n": "18", "mean": "54.2", "sd": "7.6"},
            {"analysis": "m", "group": "arm", "n": "20", "mean": "51.9", "sd": "8.3"},
            {"analysis": "m", "group": "none", "n": "37", "mean": "49.5", "sd": "7.9"},
        ]
    )
    found = convert(rows, "cohens_d", groups=lines).effects["estimate"].iloc[0]
    pooled = np.sqrt((37 * spread**2 + 36 * 7.9**2) / 73)
    assert found == pytest.approx(((n1 * m1 + n2 * m2) / 38 - 49.5) / pooled, rel=1e-12)


def test_without_labels_every_line_is_a_group() -> None:
    rows, lines = _sheet(
        [{"analysis": "m", "group": "", "n": "20", "mean": str(m), "sd": "2.0"} for m in (5, 6, 7)]
    )
    assert read(rows, groups=lines).evidence.blocks[0].groups == 3


def test_a_part_without_sd_leaves_the_union_without_one() -> None:
    rows, lines = _sheet(
        [
            {"analysis": "m", "group": "arm", "n": "18", "mean": "54.2", "sd": ""},
            {"analysis": "m", "group": "arm", "n": "20", "mean": "51.9", "sd": "8.3"},
            {"analysis": "m", "group": "none", "n": "37", "mean": "49.5", "sd": "7.9"},
        ]
    )
    effects = convert(rows, "cohens_d", groups=lines).effects
    assert effects["status"].iloc[0] == "blocked"
    assert convert(rows, "mean_difference", groups=lines).effects["estimate"].iloc[0] == pytest.approx(
        (18 * 54.2 + 20 * 51.9) / 38 - 49.5
    )
