"""The figure: what is in the table is in the drawing, with the same bytes every time and nothing of the sheet run."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path
from xml.etree import ElementTree

import matplotlib
import pandas as pd
import pytest
from matplotlib.figure import Figure

from extractor.api import Result
from extractor.errors import UsageError
from extractor.output import figure
from extractor.output.figure import _figure, _rows, write_figure
from extractor.output.request import Request
from extractor.output.scale import scale_of

Converted = Callable[[str], tuple[Result, Request]]
STARTS = {".svg": b"<?xml", ".pdf": b"%PDF-", ".png": b"\x89PNG"}


@pytest.fixture
def effects(converted: Converted) -> pd.DataFrame:
    return converted("hedges_g")[0].effects


def drawn(effects: pd.DataFrame, by: str = "outcome") -> Figure:
    shown = effects[effects["status"] != "blocked"]
    with matplotlib.rc_context(figure._SETTINGS):
        return _figure(_rows(shown, by), scale_of(shown), effects, 0.95)


def texts(made: Figure) -> list[str]:
    return [text.get_text() for text in (*made.texts, *made.axes[0].texts)]


@pytest.mark.parametrize("ending", [".svg", ".pdf", ".png"])
def test_file_is_what_its_ending_says(ending: str, effects: pd.DataFrame, tmp_path: Path) -> None:
    write_figure(effects, tmp_path / f"f{ending}")
    assert (tmp_path / f"f{ending}").read_bytes().startswith(STARTS[ending])


def test_environment_and_settings_are_left_as_they_were(
    effects: pd.DataFrame, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.delenv("SOURCE_DATE_EPOCH", raising=False)
    before = dict(matplotlib.rcParams)
    write_figure(effects, tmp_path / "f.pdf")
    assert "SOURCE_DATE_EPOCH" not in os.environ
    assert dict(matplotlib.rcParams) == before


def test_fonts_are_inside_the_files(effects: pd.DataFrame, tmp_path: Path) -> None:
    write_figure(effects, tmp_path / "f.pdf")
    write_figure(effects, tmp_path / "f.svg")
    content = (tmp_path / "f.pdf").read_bytes()
    assert b"/FontFile2" in content
    assert b"/Type3" not in content
    svg = ElementTree.parse(tmp_path / "f.svg").getroot()
    assert not list(svg.iter("{http://www.w3.org/2000/svg}text"))


def test_every_effect_is_drawn_at_its_estimate(effects: pd.DataFrame) -> None:
    axes = drawn(effects).axes[0]
    squares = sorted(float(line.get_xdata()[0]) for line in axes.lines if line.get_marker() == "s")
    assert squares == sorted(effects.loc[effects["status"] == "converted", "estimate"])
    limits = {tuple(line.get_xdata()) for line in axes.lines if len(line.get_xdata()) == 2}
    for low, high in effects.loc[effects["ci_low"].notna(), ["ci_low", "ci_high"]].itertuples(index=False):
        assert (low, high) in limits


def test_envelope_of_rounding_is_drawn_to_scale(effects: pd.DataFrame) -> None:
    bands = sorted((p.get_x(), p.get_x() + p.get_width()) for p in drawn(effects).axes[0].patches)
    pointed = effects[effects["status"] == "converted"]
    expected = sorted(zip(pointed["estimate_low"], pointed["estimate_high"], strict=True))
    assert [pytest.approx(pair) for pair in expected] == bands


def test_more_precise_effects_have_larger_squares(effects: pd.DataFrame) -> None:
    marked = [line for line in drawn(effects).axes[0].lines if line.get_marker() == "s"]
    size = {float(line.get_xdata()[0]): line.get_markersize() for line in marked}
    pointed = effects[effects["status"] == "converted"].sort_values("variance")
    sizes = [size[estimate] for estimate in pointed["estimate"]]
    assert sizes == sorted(sizes, reverse=True)
    assert sizes[0] > sizes[-1]


def test_rows_are_grouped_by_any_column(effects: pd.DataFrame) -> None:
    assert {"recall", "fatigue"} <= set(texts(drawn(effects)))
    by_page = texts(drawn(effects, "grade"))
    assert {"identity", "assumption", "bound"} <= set(by_page)
    assert "recall" not in texts(drawn(effects, ""))


def test_bound_is_dashed_and_rows_without_effect_are_counted(effects: pd.DataFrame) -> None:
    made = drawn(effects)
    dashed = [line for line in made.axes[0].lines if line.is_dashed()]
    assert len(dashed) == 1
    said = " ".join(texts(made))
    assert "at least 0.506" in said
    assert "3 rows without an effect not shown" in said


def test_words_of_the_sheet_are_not_typeset(effects: pd.DataFrame, tmp_path: Path) -> None:
    changed = effects.assign(study=r"$\frac{1}{0$ \badmacro <b>&", outcome="a$b_{")
    write_figure(changed, tmp_path / "f.svg")
    assert any(text.startswith(r"$\frac{1}{0$") for text in texts(drawn(changed)))


@pytest.mark.parametrize(
    ("name", "by", "message"),
    [
        ("f.jpg", "outcome", "writes .svg, .pdf, .png"),
        ("f.svg", "outcom", "did you mean outcome"),
    ],
)
def test_wrong_wishes_are_refused(
    name: str, by: str, message: str, effects: pd.DataFrame, tmp_path: Path
) -> None:
    with pytest.raises(UsageError, match=message):
        write_figure(effects, tmp_path / name, by=by)
    assert os.listdir(tmp_path) == ["coded.xlsx"]


def test_tables_that_cannot_be_drawn_are_refused(
    effects: pd.DataFrame, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    with pytest.raises(UsageError, match="no row has an effect"):
        write_figure(effects[effects["status"] == "blocked"], tmp_path / "f.svg")
    monkeypatch.setattr(figure, "MOST", 3)
    with pytest.raises(UsageError, match="at most 3 rows"):
        write_figure(effects, tmp_path / "f.svg")
