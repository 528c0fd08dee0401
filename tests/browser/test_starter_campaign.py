"""On the starter campaign: a slider answers as the reduction does, and the text it writes reduces."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Callable
from pathlib import Path

import pytest
from selenium.webdriver import Chrome

import tapband
from browser_checks import CONTRAST, OVERFLOW, OVERLAP, SHOWN, UNNAMED, complaints, move
from tapband.files.starter import write_starter

Show = Callable[..., Chrome]
COEFFICIENTS = ("cn", "ct", "cm", "cl", "cd_pressure")


@pytest.fixture(scope="module")
def starter(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The starter campaign, reduced."""
    folder = tmp_path_factory.mktemp("starter") / "demo"
    write_starter(folder)
    campaign = tapband.load(folder / "campaign.toml")
    tapband.reduce(campaign, trials="plain:2000").write(folder / "results")
    return folder


def with_sources(text: str, changed: str) -> str:
    """The campaign text with the sources of ``changed`` in place of those of the same name."""
    names = {source["name"] for source in tomllib.loads(changed)["source"]}
    head, *blocks = re.split(r"(?m)^(?=\[)", text)
    kept = [
        b
        for b in blocks
        if not (b.startswith("[[source]]") and tomllib.loads(b)["source"][0]["name"] in names)
    ]
    return head + "".join(kept) + "\n" + changed


@pytest.mark.parametrize("source", ["tunnel calibration", "twist under load"])
def test_a_halved_source_shows_what_reduce_gives_with_it_halved(
    source: str, show: Show, starter: Path
) -> None:
    browser = show(starter / "results" / "report.html")
    move(browser, source, 0.5)
    browser.execute_script("document.getElementById('write').click()")
    changed = browser.execute_script("return document.getElementById('text').value")
    copy = starter / f"halved {source}.toml"
    copy.write_text(
        with_sources((starter / "campaign.toml").read_text(encoding="utf-8"), changed), encoding="utf-8"
    )
    halved = tapband.reduce(tapband.load(copy), trials="plain:2000").coefficients.iloc[0]
    for name in COEFFICIENTS:
        estimate, _, half, low, high = browser.execute_script(SHOWN, name)
        # 1e-6 is what the page promises; contributions travel in double precision and agree further.
        assert half == pytest.approx(halved[f"{name}_U"], rel=1e-6)
        assert estimate == pytest.approx(halved[name], rel=1e-9)
        assert (low, high) == pytest.approx((halved[f"{name}_low"], halved[f"{name}_high"]), rel=1e-6)


def test_every_declared_source_of_the_starter_can_be_written_as_text(show: Show, starter: Path) -> None:
    browser = show(starter / "results" / "report.html")
    declared = tapband.load(starter / "campaign.toml")
    for source in declared.sources:
        move(browser, source.name, 2.0)
    browser.execute_script("document.getElementById('write').click()")
    changed = browser.execute_script("return document.getElementById('text').value")
    copy = starter / "doubled.toml"
    copy.write_text(
        with_sources((starter / "campaign.toml").read_text(encoding="utf-8"), changed), encoding="utf-8"
    )
    doubled = {source.name: source for source in tapband.load(copy).sources}
    for source in declared.sources:
        halves = [term.half for term in source.size.terms]
        assert [term.half for term in doubled[source.name].size.terms] == pytest.approx(
            [2 * h for h in halves], rel=1e-9
        )
        middles = [term.middle for term in source.size.terms]
        assert [term.middle for term in doubled[source.name].size.terms] == pytest.approx(middles, abs=1e-12)


def test_bands_of_cp_follow_their_sources(show: Show, starter: Path) -> None:
    browser = show(starter / "results" / "report.html")
    band = "return document.querySelector('#cp-chord path.band').getAttribute('d')"
    before = browser.execute_script(band)
    move(browser, "hole size and burrs", 4)
    assert browser.execute_script(band) != before


def test_decisions_follow_a_slider_and_come_back(show: Show, starter: Path) -> None:
    browser = show(starter / "results" / "report.html")
    cells = (
        "return [...document.getElementById('rows-decisions').rows[0].cells].map((cell) => cell.textContent)"
    )
    declared = browser.execute_script(cells)
    assert declared[-1] == "meets"
    for source in ("spanwise uniformity", "module zero", "hole size and burrs", "tap location", "tap row"):
        move(browser, source, 4)
    changed = browser.execute_script(cells)
    _, _, half, _, _ = browser.execute_script(SHOWN, "cm")
    assert changed[-6] != declared[-6]
    assert half > 0.002  # so that the guard band, one U, is another
    browser.execute_script("document.getElementById('reset').click()")
    assert browser.execute_script(cells) == declared


def test_rankings_and_wiring_of_a_point_are_drawn_and_tabled(show: Show, starter: Path) -> None:
    browser = show(starter / "results" / "report.html")
    for figure, rows in (("tap-section", "tap-rows"), ("wiring", "wiring-rows"), ("tap-chord", "group-rows")):
        assert (
            browser.execute_script(
                "return document.querySelectorAll(arguments[0]).length", f"#{figure} svg path"
            )
            > 2
        )
        assert (
            browser.execute_script("return document.querySelectorAll(arguments[0]).length", f"#{rows} tr") > 3
        )


@pytest.mark.parametrize(("width", "dark"), [(1280, False), (390, True)])
def test_the_whole_report_of_the_starter_is_legible(
    width: int, dark: bool, show: Show, starter: Path
) -> None:
    browser = show(starter / "results" / "report.html", width, dark)
    browser.execute_script("document.querySelectorAll('details').forEach((node) => { node.open = true; })")
    assert complaints(browser) == []
    assert browser.execute_script(OVERFLOW) == [0]
    assert browser.execute_script(OVERLAP) == []
    assert browser.execute_script(CONTRAST) == []
    assert browser.execute_script(UNNAMED) == []
