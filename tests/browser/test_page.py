"""The page is whole, quiet, legible and reachable: both widths, light and dark, with and without script."""

from __future__ import annotations

import json
from base64 import b64decode
from collections.abc import Callable
from itertools import pairwise
from pathlib import Path

import pytest
from selenium.webdriver import Chrome, Keys
from selenium.webdriver.common.by import By

from browser_checks import CONTRAST, OVERFLOW, OVERLAP, UNNAMED, complaints

Show = Callable[..., Chrome]
LOOKS = [(1280, False), (1280, True), (390, False), (390, True)]


def requests(browser: Chrome) -> list[str]:
    events = [json.loads(entry["message"])["message"] for entry in browser.get_log("performance")]
    return [e["params"]["request"]["url"] for e in events if e["method"] == "Network.requestWillBeSent"]


@pytest.mark.parametrize(("width", "dark"), LOOKS)
def test_nothing_overflows_overlaps_or_complains(width: int, dark: bool, show: Show, page: Path) -> None:
    browser = show(page, width, dark)
    assert complaints(browser) == []
    assert browser.execute_script(OVERFLOW) == [0]
    assert browser.execute_script(OVERLAP) == []


@pytest.mark.parametrize(("width", "dark"), LOOKS)
def test_text_stands_out_from_its_ground(width: int, dark: bool, show: Show, page: Path) -> None:
    # 4.5 to 1 is the level AA minimum of the Web Content Accessibility Guidelines 2.2, 1.4.3.
    assert show(page, width, dark).execute_script(CONTRAST) == []


def test_no_request_leaves_the_page(show: Show, page: Path) -> None:
    browser = show(page)
    assert [url for url in requests(browser) if not url.startswith("file:")] == []
    assert browser.execute_script("return performance.getEntriesByType('resource').length") == 0


def test_hostile_names_run_nothing_and_stay_inside(show: Show, hostile_page: Path) -> None:
    for width in (1280, 390):
        browser = show(hostile_page, width)
        assert complaints(browser) == []
        assert browser.execute_script("return window.hacked ?? null") is None
        assert browser.execute_script("return document.querySelectorAll('main img, main script').length") == 0
        assert browser.execute_script(OVERFLOW) == [0]
    shown = browser.execute_script("return document.getElementById('points').textContent")
    assert "<script>window.hacked=1</script>" in shown
    assert "{{ 7*7 }}" in shown


def test_everything_that_can_be_used_has_a_name(show: Show, page: Path) -> None:
    browser = show(page)
    browser.execute_script("document.querySelectorAll('details').forEach((node) => { node.open = true; })")
    assert browser.execute_script(UNNAMED) == []


def test_headings_descend_one_level_at_a_time_and_ids_are_unique(show: Show, page: Path) -> None:
    browser = show(page)
    levels = browser.execute_script(
        "return [...document.querySelectorAll('h1, h2, h3')].map((node) => Number(node.tagName[1]))"
    )
    assert levels[0] == 1
    assert all(b - a <= 1 for a, b in pairwise(levels))
    ids = browser.execute_script("return [...document.querySelectorAll('[id]')].map((node) => node.id)")
    assert len(ids) == len(set(ids))


def test_every_figure_has_a_title_and_a_table_beside_it(show: Show, page: Path) -> None:
    browser = show(page)
    titles = browser.execute_script(
        "const all = [...document.querySelectorAll('svg[role=img]')];"
        "return all.map((node) => node.querySelector('title')?.textContent)"
    )
    assert len(titles) >= 6
    assert all(titles)
    assert browser.execute_script("return document.querySelectorAll('main table').length") >= 5


def test_the_keyboard_reaches_skip_link_controls_and_sliders(show: Show, page: Path) -> None:
    browser = show(page)
    seen = []
    for _ in range(60):
        browser.switch_to.active_element.send_keys(Keys.TAB)
        seen.append(
            browser.execute_script("return document.activeElement.id || document.activeElement.className")
        )
    assert seen[0] == "skip"
    wanted = ["pick", "before", "after", "write"]
    assert [name for name in seen if name in wanted] == wanted
    slider = browser.find_element(By.CSS_SELECTOR, "#sliders input[type=range]")
    slider.send_keys(Keys.ARROW_LEFT)
    browser.execute_async_script("requestAnimationFrame(() => requestAnimationFrame(arguments[0]))")
    assert slider.get_attribute("aria-valuetext") == "0.95 times the declared size"


def test_a_budget_row_leads_to_its_line_of_the_campaign_file(show: Show, page: Path) -> None:
    browser = show(page)
    browser.execute_script(
        "const rows = [...document.querySelectorAll('#budget-rows tr')];"
        "rows.find((row) => row.textContent.includes('flow angle')).querySelector('a').click()"
    )
    focus = browser.execute_script("return document.activeElement")
    lines = browser.execute_script(
        "return [...document.querySelectorAll('.listing li')].map((n) => n.textContent)"
    )
    at = int(focus.get_attribute("id").removeprefix("line")) - 1
    assert lines[at : at + 2] == ["[[source]]", 'name = "flow angle"']
    assert focus.is_displayed()


def test_the_essentials_stand_without_script(show: Show, page: Path) -> None:
    browser = show(page, script=False)
    figures = browser.find_elements(By.CSS_SELECTOR, "#polars svg")
    assert len(figures) == 3
    assert all(figure.is_displayed() for figure in figures)
    assert len(browser.find_elements(By.CSS_SELECTOR, "#points tbody tr")) >= 12
    assert "missed at 6 of 6 points" in browser.find_element(By.ID, "target1").text
    assert browser.find_elements(By.CSS_SELECTOR, "#driver-rows tr")
    assert not browser.find_element(By.ID, "live").is_displayed()
    assert "need JavaScript" in browser.find_element(By.CSS_SELECTOR, "noscript").text


def test_the_page_prints_on_a4(show: Show, page: Path) -> None:
    browser = show(page)
    printed = browser.execute_cdp_cmd("Page.printToPDF", {"preferCSSPageSize": True})
    pdf = b64decode(printed["data"])
    assert pdf.startswith(b"%PDF")
    browser.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": "print"})
    a4 = {
        "width": 680,
        "height": 1009,
        "deviceScaleFactor": 1,
        "mobile": False,
    }  # less margins, 96 to the inch
    browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", a4)
    assert browser.execute_script(OVERFLOW)[0] == 0
    assert not browser.find_element(By.ID, "live").is_displayed()
