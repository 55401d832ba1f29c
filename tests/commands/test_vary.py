"""Sensitivity through the command line: what is written and what is said. Figures come from the runs themselves."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest
from click.testing import CliRunner

from extractor.commands.main import cli

DEMO = Path(__file__).parents[2] / "examples" / "gardens.csv"
TABLES = ("sensitivity.csv", "assumptions.csv", "routes.csv")


def converted(tmp_path: Path, *options: str) -> str:
    words = ["convert", str(DEMO), "--to", "hedges_g", "--out", str(tmp_path / "out"), *options]
    done = CliRunner().invoke(cli, words, catch_exceptions=False)
    assert done.exit_code == 0, done.stderr
    return " ".join(done.stdout.split())


@pytest.mark.parametrize("way", ["option", "codebook"])
def test_a_range_from_an_option_or_a_codebook(tmp_path: Path, way: str) -> None:
    book = tmp_path / "book.toml"
    book.write_text(
        '[assume.confidence_level]\nvalue = 0.95\nrange = [0.9, 0.99]\nby = "protocol"\n', encoding="utf-8"
    )
    options = ["--vary", "confidence_level=.9:.99"] if way == "option" else ["--codebook", str(book)]
    said = converted(tmp_path, *options)
    effects, assumptions, routes = (pd.read_csv(tmp_path / "out" / name) for name in TABLES)
    # the two rows of the demo that print confidence limits without their level
    assert effects["study"].tolist() == ["Clover Hatch", "Daisy Holm"]
    assert (effects["estimate_low"] < effects["estimate"]).all()
    assert (effects["estimate"] < effects["estimate_high"]).all()
    assert (effects["variance_low"] < effects["variance_high"]).all()
    assert assumptions["assumption"].iloc[0] == "confidence_level"
    worst = effects.sort_values("swing_in_se").iloc[-1]
    assert "confidence_level from 0.9 to 0.99: 2 rows, moved by" in said
    assert f"(row {worst['row']}, {worst['swing_in_se']:.3f} standard errors)" in said
    # the ends are those that a run with another level gives
    (tmp_path / "ends.toml").write_text(
        '[assume.confidence_level]\nvalue = 0.9\nby = "protocol"\n', encoding="utf-8"
    )
    converted(tmp_path / "ends", "--codebook", str(tmp_path / "ends.toml"))
    other = pd.read_csv(tmp_path / "ends" / "out" / "effects.csv").set_index("row")["estimate"]
    assert effects["estimate_low"].tolist() == pytest.approx(other[effects["row"]].tolist(), rel=1e-9)
    # and along every admissible route
    apart = routes[routes["beyond_rounding"]]
    assert f"in {len(apart)} the routes differ beyond rounding" in said
    assert (apart["highest"] > apart["lowest"]).all()


def test_without_ranges_nothing_is_written_about_them(tmp_path: Path) -> None:
    converted(tmp_path)
    assert not any((tmp_path / "out" / name).exists() for name in TABLES)


def test_in_blocks_ranges_of_a_codebook_are_said_to_be_left_alone(tmp_path: Path) -> None:
    book = tmp_path / "book.toml"
    book.write_text(
        '[assume.confidence_level]\nvalue = 0.95\nrange = [0.9, 0.99]\nby = "protocol"\n', encoding="utf-8"
    )
    words = ["convert", str(DEMO), "--to", "hedges_g", "--out", str(tmp_path / "out"), "--workers", "1"]
    done = CliRunner().invoke(cli, [*words, "--codebook", str(book)], catch_exceptions=False)
    assert done.exit_code == 0
    assert "not moved over the ranges of the codebook" in " ".join(done.stderr.split())
    assert "ranges of the codebook" not in CliRunner().invoke(cli, [*words, "--force"]).stderr
