"""The report: one file, nothing fetched, nothing of the sheet taken for markup, every effect followed to its cells."""

from __future__ import annotations

import base64
import hashlib
import html
import re
from collections.abc import Callable
from html.parser import HTMLParser
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pandas as pd
import pytest

import extractor
from extractor.api import Result, convert
from extractor.errors import UsageError
from extractor.output import report
from extractor.output.labels import short_labels
from extractor.output.layout import arrange
from extractor.output.report import render, write_report
from extractor.output.report_rows import sentence, shown
from extractor.output.request import Request
from extractor.output.route_graph import ancestors, route_steps
from extractor.output.scale import round_scale, scale_of
from extractor.output.strips import allowed, sides

Converted = Callable[[str], tuple[Result, Request]]
VOID = frozenset({"meta", "input", "br", "hr", "img", "link"})
OPTIONAL = frozenset({"td", "tr", "li"})


class Page(HTMLParser):
    """Elements of a page, and whether its tags are balanced (the closing tags HTML lets out aside)."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.elements: list[tuple[str, dict[str, str]]] = []
        self.faults: list[str] = []
        self.words: list[str] = []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, {name: value or "" for name, value in attrs}))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, {name: value or "" for name, value in attrs}))

    def handle_endtag(self, tag: str) -> None:
        while self.open and self.open[-1] != tag and self.open[-1] in OPTIONAL:
            self.open.pop()
        if not self.open or self.open.pop() != tag:
            self.faults.append(tag)

    def handle_data(self, data: str) -> None:
        self.words.append(data)


@pytest.fixture
def page(converted: Converted) -> Page:
    return Page(render(*converted("omega_squared")))


def test_page_is_well_formed_with_unique_ids(page: Page) -> None:
    assert page.faults == []
    assert page.open == []
    ids = [attributes["id"] for _, attributes in page.elements if "id" in attributes]
    assert len(ids) == len(set(ids))
    targets = {a["href"] for tag, a in page.elements if tag == "a"}
    targets |= {f"#{a['data-shape']}" for _, a in page.elements if "data-shape" in a}
    assert {"#r2", "#s1"} <= targets
    assert {target.removeprefix("#") for target in targets} <= set(ids)


def test_nothing_is_fetched(page: Page) -> None:
    for tag, attributes in page.elements:
        assert tag not in ("img", "link", "iframe", "object", "embed", "base")
        assert "src" not in attributes
        assert all(not name.startswith("on") and name != "style" for name in attributes), tag
        assert attributes.get("href", "#").startswith("#")


def test_policy_allows_exactly_the_own_style_and_script(converted: Converted) -> None:
    text = render(*converted("hedges_g"))
    policy = re.search(r'http-equiv="Content-Security-Policy" content="([^"]*)"', text)
    assert policy is not None
    assert policy[1].startswith("default-src 'none'; ")
    for kind in ("style", "script"):
        body = re.findall(rf"<{kind}>(.*?)</{kind}>", text, re.DOTALL)
        assert len(body) == 1
        digest = base64.b64encode(hashlib.sha256(body[0].encode()).digest()).decode()
        assert f"{kind}-src 'sha256-{digest}'" in policy[1]


def test_words_of_the_sheet_are_never_markup(coded: Path) -> None:
    hostile = "</style><script>alert(1)</script>\"'&<img src=x onerror=y>"
    frame = pd.read_excel(coded, sheet_name="coded", dtype=str, keep_default_na=False)
    clean = render(convert(frame, to="omega_squared"), Request(sheet="-"))
    for name in ("study", "outcome", "effect", "page", "design"):
        frame[name] = frame[name] + hostile if name != "design" else frame[name].replace("two-group", hostile)
    text = render(convert(frame, to="omega_squared"), Request(sheet=f"{hostile}.xlsx"))
    assert hostile not in text
    assert "<img" not in text
    assert text.count("<script") == clean.count("<script") == 1
    assert Page(text).faults == []


def test_counts_are_those_of_the_tables(converted: Converted) -> None:
    result, request = converted("omega_squared")
    context = report._summary(result)
    for line in context["counts"]:
        mine = result.effects[result.effects["status"] == line["status"]]
        assert line["all"] == len(mine)
    assert sum(line["all"] for line in context["counts"]) == len(result.effects)
    assert sum(line["findings"] for line in context["severities"]) == len(result.findings)
    assert "6 converted, 1 bounded and 1 blocked; " in render(result, request)


def test_every_row_has_its_entry_and_its_line(converted: Converted) -> None:
    result, request = converted("hedges_g")
    page = Page(render(result, request))
    articles = [a for tag, a in page.elements if tag == "article"]
    lines = [a["data-row"] for tag, a in page.elements if tag == "tr" and "data-row" in a]
    rows = [str(row) for row in result.effects["row"]]
    assert sorted(rows) == sorted(a["data-row"] for a in articles) == sorted(lines)
    status = {a["data-row"]: a["data-status"] for a in articles}
    assert status == dict(zip(rows, result.effects["status"], strict=True))


def test_finding_is_shown_with_arithmetic_and_suspect_cell(converted: Converted) -> None:
    result, request = converted("omega_squared")
    text = render(result, request)
    finding = next(f for f in result.audit.findings if f.severity.word == "inconsistent")
    assert f"<strong>!! inconsistent</strong> {finding.message.replace('<', '&lt;')}" in text
    assert f"<b>{finding.cells[0]}</b>" in text
    assert "A finding is a question" in text


def test_route_shows_cells_values_formulas_and_sources(converted: Converted) -> None:
    result, request = converted("omega_squared")
    text = render(result, request)
    assert "F = 4.31 (4.305 to 4.315)" in text
    assert "f_value [F2]" in text
    assert "ω² = df1·(F - 1) / (df1·(F - 1) +" in text
    page = Page(text)
    said = " ".join(page.words)
    used = result.derivations.loc[result.derivations["relation"] != "", "source"].unique()
    assert len(used) > 2
    assert all(source.rstrip(".") in said for source in used)


def test_settings_versions_hash_and_cautions_are_there(converted: Converted, coded: Path) -> None:
    text = render(*converted("omega_squared"))
    assert hashlib.sha256(coded.read_bytes()).hexdigest() in text
    assert f"Extractor {extractor.__version__}" in text
    assert f"numpy {np.__version__}" in text
    assert "A bound is not an estimate" in text


def test_glance_is_marked_as_a_check_with_its_warnings(converted: Converted) -> None:
    text = render(*converted("omega_squared"))
    assert "a check on the extraction, not a synthesis" in text
    assert "ω² has no direction" in text
    assert "without rows that carry findings" in text
    assert "has no direction" not in render(*converted("hedges_g"))


def test_thirty_rows_are_small_and_a_thousand_share_their_drawings(coded: Path) -> None:
    frame = pd.read_excel(coded, sheet_name="coded", dtype=str, keep_default_na=False)
    sizes = {}
    for rows in (30, 300):
        many = pd.concat([frame] * (rows // len(frame) + 1), ignore_index=True).head(rows)
        many["study"] = [f"{study} {at}" for at, study in enumerate(many["study"])]
        text = render(convert(many, to="hedges_g"), Request(sheet="-", metric="hedges_g"))
        sizes[rows] = len(text.encode())
    assert sizes[30] < 400_000
    # bytes a further row takes: a thousand of them stay far below 5 MB, since shapes are shared and lines are short
    assert (sizes[300] - sizes[30]) / 270 < 3_000


def test_too_many_rows_are_refused(
    converted: Converted, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(report, "MOST", 3)
    with pytest.raises(UsageError, match="at most 3 rows"):
        write_report(*converted("hedges_g"), tmp_path / "r.html")
    assert not (tmp_path / "r.html").exists()


def test_shape_has_a_box_for_every_line_of_each_of_its_routes(converted: Converted) -> None:
    """The script puts line after line into box after box; what is derived brings its formula, the rest its cells."""
    page = render(*converted("hedges_g"))
    shapes = {
        name: ElementTree.fromstring(svg)
        for name, svg in re.findall(r'<template id="(s[0-9]+)">(.*?)</template>', page)
    }
    routes = re.findall(r'data-shape="(s[0-9]+)">([^<]*)</p>', page)
    assert {name for name, _ in routes} == set(shapes)
    for name, text in routes:
        boxes = [group for group in shapes[name].iter("g") if group.find("rect") is not None]
        lines = [line.split("\t") for line in html.unescape(text).split("\n")]
        assert len(boxes) == len(lines) > 1
        for box, (_, origin) in zip(boxes, lines, strict=True):
            formula = " ".join(str(span.text) for span in box.iter("tspan"))
            assert formula == ("" if "leaf" in box.get("class", "") else origin)
    first = html.unescape(routes[0][1])
    assert "M = 11.2, 12.9, 13.8\tmean_1 [N2], mean_2 [Q2], mean_3 [T2]" in first
    assert re.search(r"^g = -0\.58\d+ \(.*\)\tg = J\(df2\) · d, .* \[\d+\]$", first, re.MULTILINE)


def test_drawing_leaves_out_what_only_the_variance_needs(converted: Converted) -> None:
    result, _ = converted("omega_squared")
    steps = route_steps(result.derivations[result.derivations["row"] == 2].to_dict("records"))
    route = ancestors(steps, "omega_squared")
    assert "n_observations" in steps
    assert "n_observations" not in route
    assert {"f_value", "df_effect", "omega_squared"} <= set(route)


def test_boxes_do_not_overlap_and_arrows_go_forward() -> None:
    needs = {
        "a": (), "b": (), "c": ("a", "b"), "d": ("c", "a"), "e": ("d", "b", "c"), "f": ("e", "a"),
    }  # fmt: skip
    sizes = {name: (60.0 + 40 * at, 30.0 + 5 * at) for at, name in enumerate(needs)}
    places, bends = arrange(needs, "f", sizes, 30, 10)
    boxes = [(x, y, x + sizes[n][0], y + sizes[n][1]) for n, (x, y) in places.items()]
    for at, (left, top, right, bottom) in enumerate(boxes):
        for other in boxes[:at]:
            assert right <= other[0] or left >= other[2] or bottom <= other[1] or top >= other[3]
    for (start, end), points in bends.items():
        assert places[start][0] + sizes[start][0] < places[end][0]
        for x, y in points[:-1]:
            assert not any(left < x < right and top < y < bottom for left, top, right, bottom in boxes)


@pytest.mark.parametrize(
    ("low", "high"), [(0.0, 1.0), (-1.86, 1.35), (0.001, 0.0042), (-3e5, 12.0), (2.0, 2.0)]
)
def test_scale_reaches_over_both_ends_with_round_ticks(low: float, high: float) -> None:
    scale = round_scale(low, high)
    assert scale.low <= low
    assert scale.high >= high
    assert 2 <= len(scale.ticks) <= 9
    assert np.allclose(np.diff(scale.ticks), scale.step)
    printed = [float(scale.label(tick).replace("−", "-")) for tick in scale.ticks]
    assert np.allclose(printed, scale.ticks, rtol=0, atol=1e-9 * max(1, abs(high), abs(low)))


def test_scale_does_not_stretch_to_limits_far_outside() -> None:
    effects = pd.DataFrame(
        {
            "status": ["converted"] * 12 + ["bounded"],
            "estimate": [*np.linspace(0.1, 0.5, 12), np.nan],
            "estimate_low": [*np.linspace(0.1, 0.5, 12), 0.04],
            "estimate_high": [*np.linspace(0.1, 0.5, 12), np.inf],
            "ci_low": [*np.linspace(-0.1, 0.3, 11), -400.0, np.nan],
            "ci_high": [*np.linspace(0.3, 0.7, 11), 400.0, np.nan],
        }
    )
    scale = scale_of(effects)
    assert -1 < scale.low <= -0.1
    assert 0.7 <= scale.high < 2
    assert scale.share(-400.0) == 0.0
    assert scale.share(400.0) == 1.0


def test_squares_grow_with_the_weight() -> None:
    found = sides(pd.DataFrame({"variance": [0.04, 0.01, np.nan]}))
    assert found[0] < found[1]
    assert found[2] == min(found)


def test_strip_of_a_finding_shows_only_what_lies_outside() -> None:
    assert "printed" in allowed(0.20, 0.118, 0.119)
    assert allowed(12.0, 10.0, 14.0) == ""
    assert allowed(float("nan"), 10.0, 14.0) == ""


@pytest.mark.parametrize(
    ("value", "expected"),
    [(-0.0144, "−0.014"), (0.0, "0.000"), (0.00024637, "0.0002"), (float("nan"), "–"), (1.0, "1.000")],
)
def test_effects_are_printed_with_three_decimals(value: float, expected: str) -> None:
    assert shown(value) == expected


def test_symbols_keep_their_case_at_the_start_of_a_sentence() -> None:
    assert sentence("ω² has no direction") == "ω² has no direction"
    assert sentence("rows 2 and 3") == "Rows 2 and 3"


def test_rows_that_would_be_called_alike_are_told_apart() -> None:
    effects = pd.DataFrame({"row": [2, 3, 4, 5], "study": ["A", "A", "B", ""], "effect": ["x", "x", "", ""]})
    assert short_labels(effects) == ["A, x, row 2", "A, x, row 3", "B", "row 5"]
