"""``extractor trace``."""

from __future__ import annotations

from pathlib import Path

from .conftest import Run


def test_tree_leads_from_the_estimate_to_the_cells(run: Run) -> None:
    result = run("trace", "coded.csv", "2", "--to", "omega_squared")
    assert result.exit_code == 0
    lines = result.stdout.splitlines()
    assert lines[0] == "row 2, North Quay, recall"
    assert lines[1].startswith(
        "omega_squared = 0.09937; the rounding of the printed numbers allows 0.09923 to"
    )
    assert "95 % CI" in lines[2]
    text = result.stdout
    assert "ω² = df1·(F - 1) / (df1·(F - 1) + N)" in text
    assert "Hays (1963)" in text
    assert "f_value = 4.31 [4.305, 4.315]  reported in reported [D" in text
    assert "Variance: exact moments of the noncentral F" in text
    assert "Confidence limits: noncentral F inverted" in text
    assert "Routes not taken" in text
    assert "p_value, tails -> omega_squared" in text
    assert " away; identity" in text


def test_group_values_stand_side_by_side_and_repeated_branches_once(run: Run) -> None:
    text = run("trace", "coded.csv", "3", "--to", "hedges_g").stdout
    assert "mean = 10.2 [10.15, 10.25], 12.6 [12.55, 12.65]" in text
    assert "(as above)" in text
    assert "Variance: large sample" in text


def test_large_sample_variance_is_named(run: Run) -> None:
    text = run("trace", "coded.csv", "2", "--to", "eta_squared", "--variance", "large-sample").stdout
    assert "Variance: large sample (Olkin & Finn 1995" in text
    assert "They also need" in text


def test_assumptions_are_listed(run: Run, folder: Path) -> None:
    (folder / "t.csv").write_text("study,design,t_value,df\nA,two-group,2.10,38\n")
    text = run("trace", "t.csv", "2", "--to", "cohens_d").stdout
    assert "Taken for granted" in text
    assert "groups of equal size" in text


def test_blocked_rows_say_why(run: Run) -> None:
    result = run("trace", "coded.csv", "6", "--to", "omega_squared")
    assert result.exit_code == 0
    assert "blocked: design 'nonsense'" in result.stdout


def test_bounds_are_no_estimates(run: Run, folder: Path) -> None:
    (folder / "b.csv").write_text("study,design,df_effect,df_error,p_value\nA,one-way,2,57,< .05\n")
    text = run("trace", "b.csv", "2", "--to", "omega_squared").stdout
    assert "omega_squared lies from 0.0" in text
    assert "only a bound" in text


def test_findings_of_the_row_come_with_their_cautions(run: Run) -> None:
    text = run("trace", "coded.csv", "4", "--to", "omega_squared").stdout
    assert "row 4 inconsistent: " in text
    assert "not an accusation" in text
    assert "not an accusation" not in run("trace", "coded.csv", "2", "--to", "omega_squared").stdout
