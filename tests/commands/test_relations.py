"""``extractor relations``."""

from __future__ import annotations

import pytest

from extractor.catalogue.relation import catalogue

from .conftest import Run


def named(text: str) -> list[str]:
    """The relations a listing shows, in its order."""
    return [line.split()[0] for line in text.splitlines() if line.startswith("  ") and line[2] != " "]


def test_everything_is_listed_once_with_its_source(run: Run) -> None:
    result = run("relations")
    assert result.exit_code == 0
    assert sorted(named(result.stdout)) == sorted(catalogue())
    assert result.stdout.count("source: ") == len(catalogue())
    assert result.stdout.endswith(f"{len(catalogue())} relations\n")


def test_a_relation_shows_all_it_is(run: Run) -> None:
    text = run("relations", "--from", "f_value", "--to", "omega_squared").stdout
    assert "omega_squared_from_f" in named(text)
    assert "omega_squared_from_f  ω² = df1·(F - 1) / (df1·(F - 1) + N)" in text
    assert "gives omega_squared; needs f_value, df_effect, n_total; grade identity" in text
    assert "designs: one-way, one-way with some groups not coded, two-group" in text
    assert "source: Hays (1963)" in text


@pytest.mark.parametrize(
    ("option", "word", "holds"),
    [
        ("--from", "f_value", lambda relation: "f_value" in relation.needs),
        ("--to", "f_value", lambda relation: relation.gives == "f_value"),
        ("--design", "two-group", lambda relation: "two-group" in relation.designs),
    ],
)
def test_filters(run: Run, option: str, word: str, holds: object) -> None:
    assert callable(holds)
    expected = sorted(name for name, relation in catalogue().items() if holds(relation))
    assert expected
    assert sorted(named(run("relations", option, word).stdout)) == expected


def test_none_is_said(run: Run) -> None:
    assert run("relations", "--from", "coder_agreement").exit_code == 2
    assert run("relations", "--from", "scale_items", "--to", "omega_squared").stdout == "0 relations\n"
