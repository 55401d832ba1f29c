"""``extractor quick``."""

from __future__ import annotations

import pytest
from scipy import stats

from extractor.words import plain

from .conftest import Run


def values(text: str) -> dict[str, str]:
    """What is printed beside each name."""
    lines = [line for line in text.splitlines()[1:] if line[:24].strip()]
    return {line[:24].strip(): line[24:] for line in lines}


@pytest.mark.parametrize("printed", ["4.5", "4.50"])
def test_variance_explained_by_hand(run: Run, printed: str) -> None:
    """F = 4.5 with 2 and 57 df, N = 60, by the definitions (Hays 1963; Kelley 1935; Cohen 1988).

    η² = 9/66, ω² = 7/67, ε² = 7/66, f = sqrt(9/57).
    """
    result = run("quick", f"F(2, 57) = {printed}", "--to", "omega_squared")
    assert result.exit_code == 0
    found = values(result.stdout)
    assert found["read as"] == "one-way, unless --design says otherwise"
    assert found["omega_squared"] == plain(7 / 67) == "0.1045"
    assert found["eta_squared"].startswith("0.1364 ")
    assert found["epsilon_squared"].startswith("0.1061 ")
    assert found["cohens_f"].startswith("0.3974 ")
    assert found["p"].startswith("0.01533 ")
    assert float(stats.f.sf(4.5, 2, 57)) == pytest.approx(0.01533, abs=5e-6)
    assert found["grade"] == "identity"
    assert "exact moments of the noncentral F" in found["variance"]
    assert found["95 % CI"].count(" to ") == 1
    assert found["route"] == "df_effect, df_error, f_value -> omega_squared"


def test_envelope_follows_the_printed_digits(run: Run) -> None:
    """F from 4.45 to 4.55 gives ω² from 6.9/66.9 to 7.1/67.1; two decimals give 6.99/66.99 to 7.01/67.01."""
    one = values(run("quick", "F(2, 57) = 4.5", "--to", "omega_squared").stdout)
    two = values(run("quick", "F(2, 57) = 4.50", "--to", "omega_squared").stdout)
    assert one["rounding allows"] == f"{plain(6.9 / 66.9)} to {plain(7.1 / 67.1)}" == "0.1031 to 0.1058"
    assert two["rounding allows"] == f"{plain(6.99 / 66.99)} to {plain(7.01 / 67.01)}"


def test_t_is_taken_as_two_groups_and_says_so(run: Run) -> None:
    found = values(
        run("quick", "t(38) = 2.10", "--to", "hedges_g", "--also", "n_1=20", "--also", "n_2=20").stdout
    )
    assert found["read as"] == "two-group (t compares two groups), unless --design says otherwise"
    assert found["grade"] == "identity"
    assert "cohens_f" not in found


def test_assumptions_are_said(run: Run) -> None:
    found = values(run("quick", "t(38) = 2.10", "--to", "cohens_d").stdout)
    assert found["grade"] == "assumption"
    assert "groups of equal size" in found["assumes"]


def test_the_design_can_be_named(run: Run) -> None:
    found = values(run("quick", "F(1, 38) = 4.41", "--to", "eta_squared", "--design", "two-group").stdout)
    assert found["read as"] == "two-group"
    assert found["eta_squared"] == plain(4.41 / 42.41)


def test_refusals_say_why(run: Run) -> None:
    result = run("quick", "F(2, 57) = 4.5", "--to", "cohens_d")
    assert result.exit_code == 0
    assert "blocked: d is refused: an F with more than one numerator df" in result.stdout


def test_bounds_are_no_estimates(run: Run) -> None:
    found = values(run("quick", "p < .05, N = 60", "--to", "omega_squared", "--also", "k_groups=3").stdout)
    assert found["omega_squared"].startswith("from 0.06")
    assert found["grade"] == "bound"
    assert "variance" not in found


def test_what_was_not_read_is_said(run: Run) -> None:
    text = run("quick", "F(2, 57) = 4.5, see the appendix", "--to", "omega_squared").stdout
    assert "not read: 'see the appendix'" in text


def test_odd_readings_are_said(run: Run) -> None:
    assert "comma" in values(run("quick", "t(38) = 2,1", "--to", "r").stdout)["note"]


def test_contradictions_are_said_with_the_cautions(run: Run) -> None:
    text = run("quick", "F(2, 57) = 4.31, p = .18", "--to", "omega_squared").stdout
    assert "inconsistent: " in text
    assert "not an accusation" in text
    assert "not an accusation" not in run("quick", "F(2, 57) = 4.31", "--to", "omega_squared").stdout


def test_level_and_variance_are_heard(run: Run) -> None:
    narrow = values(run("quick", "F(2, 57) = 4.5", "--to", "eta_squared", "--level", ".8").stdout)
    assert "80 % CI" in narrow
    large = values(run("quick", "F(2, 57) = 4.5", "--to", "eta_squared", "--variance", "large-sample").stdout)
    assert "large sample" in large["variance"]
    assert large["omega_squared"].startswith("0.1045")
