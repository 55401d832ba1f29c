"""The report in a browser: every filter, a silent console, no request, no serious barrier.

Needs playwright and a Chromium (set CHROMIUM to its path where it is not found by itself); the check for barriers
also needs axe-core (set AXE_CORE to its axe.min.js). Skipped where they are missing.
"""

from __future__ import annotations

import os
import shutil
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from extractor.api import Result, convert
from extractor.output.report import write_report
from extractor.output.request import Request

playwright = pytest.importorskip("playwright.sync_api")

Converted = Callable[[str], tuple[Result, Request]]


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    program = os.environ.get("CHROMIUM") or shutil.which("chromium") or shutil.which("google-chrome")
    if program is None:
        pytest.skip("there is no Chromium")
    with playwright.sync_playwright() as started:
        found = started.chromium.launch(executable_path=program, args=["--no-sandbox", "--disable-gpu"])
        yield found
        found.close()


@pytest.fixture
def report(converted: Converted, tmp_path: Path) -> Path:
    result, request = converted("omega_squared")
    write_report(result, request, tmp_path / "report.html")
    return tmp_path / "report.html"


def opened(browser: Any, path: Path, width: int) -> tuple[Any, list[str], list[str]]:
    """The page, what its console said, and what it asked for beside itself."""
    page = browser.new_page(viewport={"width": width, "height": 900})
    said: list[str] = []
    asked: list[str] = []
    page.on("console", lambda message: said.append(message.text))
    page.on("pageerror", lambda error: said.append(str(error)))
    page.on("request", lambda request: asked.append(request.url))
    page.goto(path.as_uri())
    page.wait_for_selector("#filter:not([hidden])")
    return page, said, [url for url in asked if url != path.as_uri()]


@pytest.mark.parametrize("width", [1400, 400])
def test_every_filter_shows_what_it_says(browser: Any, report: Path, width: int) -> None:
    page, said, asked = opened(browser, report, width)
    rows = page.locator("article").count()
    for name in ("status", "severity", "grade"):
        for option in page.eval_on_selector_all(
            f"select[name={name}] option", "all => all.map(o => o.value)"
        ):
            page.select_option(f"select[name={name}]", option)
            fitting = f'article[data-{name}~="{option}"]' if option else "article"
            count = page.locator(fitting).count()
            assert count > 0
            assert page.locator("article:visible").count() == count
            assert page.locator(".forest tr[data-row]:visible").count() == count
            assert page.text_content("#filter output") == f"{count} of {rows} rows shown"
        page.select_option(f"select[name={name}]", "")
    page.fill("input[name=study]", "STATION")
    assert page.locator("article:visible").count() == 1
    assert page.locator(".study:visible").count() == 1
    page.click("button[type=reset]")
    # the page's policy forbids evaluating strings, so the text is awaited rather than a function
    page.locator("#filter output", has_text=f"{rows} of").wait_for()
    assert said == asked == []


@pytest.mark.parametrize("width", [1400, 400])
def test_page_is_as_wide_as_the_window(browser: Any, report: Path, width: int) -> None:
    page, _, _ = opened(browser, report, width)
    page.eval_on_selector_all("details", "all => all.forEach(d => { d.open = true })")
    assert page.evaluate("document.documentElement.scrollWidth") == width


def test_everything_can_be_reached_by_keyboard(browser: Any, report: Path) -> None:
    page, _, _ = opened(browser, report, 1400)
    page.keyboard.press("Tab")
    assert page.evaluate("document.activeElement.className") == "skip"
    page.focus("summary")
    page.keyboard.press("Enter")
    assert page.locator("details[open]").count() == 1


@pytest.mark.parametrize("width", [1400, 400])
def test_no_barrier_is_found(browser: Any, report: Path, width: int) -> None:
    axe = os.environ.get("AXE_CORE")
    if not axe:
        pytest.skip("AXE_CORE names no axe.min.js")
    context = browser.new_context(viewport={"width": width, "height": 900}, bypass_csp=True)
    page = context.new_page()
    page.goto(report.as_uri())
    page.eval_on_selector_all("details", "all => all.forEach(d => { d.open = true })")
    page.add_script_tag(path=axe)
    found = page.evaluate("axe.run()")["violations"]
    assert [(each["id"], each["nodes"][0]["html"]) for each in found] == []


def test_route_is_drawn_when_opened_and_its_words_stay(browser: Any, report: Path) -> None:
    page, said, _ = opened(browser, report, 1400)
    assert page.locator("svg.route").count() == 0
    page.eval_on_selector_all("details", "all => all.forEach(d => { d.open = true })")
    page.locator("details[open] svg.route").last.wait_for()
    assert page.locator("svg.route").count() == page.locator("p.steps").count() > 3
    outside = page.evaluate(
        """() => [...document.querySelectorAll("svg.route g")].flatMap(box => {
             const [frame, text] = [box.querySelector(":scope > rect"), box.querySelector(":scope > text")];
             if (!frame) return [];
             const [f, t] = [frame.getBoundingClientRect(), text.getBoundingClientRect()];
             const fits = t.left >= f.left && t.right <= f.right && t.top >= f.top && t.bottom <= f.bottom;
             return fits && text.firstChild.data ? [] : [text.textContent];
           })"""
    )
    assert outside == []
    first = page.locator("svg.route").first.text_content() or ""
    for line in (page.locator("p.steps").first.text_content() or "").split("\n"):
        value, origin = line.split("\t")
        assert value in first
        assert origin.replace(" ", "") in first.replace(" ", "")
    assert said == []


def test_paper_gets_every_route_of_the_rows_shown(browser: Any, report: Path) -> None:
    page, _, _ = opened(browser, report, 1400)
    page.select_option("select[name=status]", "converted")
    page.evaluate("dispatchEvent(new Event('beforeprint'))")
    assert page.locator("details[open] svg.route").count() == page.locator("details:visible").count() > 3
    page.evaluate("dispatchEvent(new Event('afterprint'))")
    assert page.locator("details[open]").count() == 0


def test_without_scripts_nothing_is_missing(browser: Any, report: Path) -> None:
    context = browser.new_context(java_script_enabled=False)
    page = context.new_page()
    page.goto(report.as_uri())
    assert page.locator("#filter").is_hidden()
    page.locator("summary").first.click()
    assert "f_value [F2]" in page.locator("details[open] p.steps").inner_text()
    context.close()


def test_a_thousand_rows_are_usable_within_two_seconds(browser: Any, coded: Path, tmp_path: Path) -> None:
    """Everything the browser computes from opening the page until the first filter is answered on the screen.

    Measured is the processor time of the process that shows the page, all its threads added up, as the browser
    reports it: on an idle machine nobody waits longer for it, and other work on the machine is not the report's.
    """
    frame = pd.read_excel(coded, sheet_name="coded", dtype=str, keep_default_na=False)
    many = pd.concat([frame] * 125, ignore_index=True)
    many["study"] = [f"{study} {at}" for at, study in enumerate(many["study"])]
    path = tmp_path / "thousand.html"
    write_report(convert(many, to="hedges_g"), Request(sheet="-", metric="hedges_g"), path)
    assert path.stat().st_size < 5_000_000
    assert min(_seconds_to_first_answer(browser, path) for _ in range(3)) < 2


def _seconds_to_first_answer(browser: Any, path: Path) -> float:
    page = browser.new_page(viewport={"width": 1400, "height": 900})
    session = page.context.new_cdp_session(page)
    session.send("Performance.enable")
    before = _processor_time(session)
    page.goto(path.as_uri())
    page.select_option("select[name=status]", "bounded")
    # until the frame with the answer has been drawn
    page.evaluate("() => new Promise(done => requestAnimationFrame(() => requestAnimationFrame(done)))")
    taken = _processor_time(session) - before
    assert page.text_content("#filter output") == "125 of 1000 rows shown"
    page.close()
    return taken


def _processor_time(session: Any) -> float:
    metrics = {each["name"]: each["value"] for each in session.send("Performance.getMetrics")["metrics"]}
    return float(metrics["ProcessTime"])
