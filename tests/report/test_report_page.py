"""The report as a text: whole, self-contained, in the order a reader needs, and inert whatever the names."""

from __future__ import annotations

import json
import re
from base64 import b64decode
from dataclasses import replace
from html.parser import HTMLParser
from time import perf_counter

import numpy as np
import pandas as pd
import pytest

from synthetic_results import Synthetic, ranked, synthetic
from tapband.nouns.plan import Plan
from tapband.report.render import report

VOID = {"meta", "input", "br", "path", "line", "link", "img", "hr"}
HOSTILE = [
    "<script>alert(1)</script>", "</script>", "\"><img src=x onerror=alert(1)>", "{{ 1+1 }}", "]]>", "\u2028",
    "a\x00b",
]  # fmt: skip


TAP_PARTS = 200 * 61 * 40 * 4 // 3
"""Bytes that the parts of the bands of Cp add where a reduction is at hand: one a tap and source, in base64."""


class Page(HTMLParser):
    """Elements with their attributes and the text of some, and that every element is closed where it must be."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.texts: list[tuple[str, str]] = []
        self.open: list[str] = []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        assert self.open, f"</{tag}> closes nothing"
        assert self.open[-1] == tag, f"</{tag}> closes <{self.open[-1]}>"
        self.open.pop()

    def handle_data(self, data: str) -> None:
        if self.open:
            self.texts.append((self.open[-1], data))

    def text(self, *without: str) -> str:
        """All text, less that of some elements."""
        return " ".join(data for tag, data in self.texts if tag not in without)

    def data(self) -> dict[str, object]:
        """The embedded data."""
        found = [data for (tag, data) in self.texts if tag == "script" and data.lstrip().startswith("{")]
        content = json.loads(found[0])
        assert isinstance(content, dict)
        return content


def page(results: Synthetic) -> Page:
    return Page(report(results, results.campaign))


@pytest.fixture(scope="module")
def results() -> Synthetic:
    return synthetic(taps=21)


@pytest.fixture(scope="module")
def shown(results: Synthetic) -> Page:
    return page(results)


def test_every_element_is_closed(shown: Page) -> None:
    assert shown.open == []


def test_nothing_refers_outside_the_file(results: Synthetic, shown: Page) -> None:
    for tag, attributes in shown.elements:
        assert tag not in {"link", "img", "iframe", "object", "embed", "base", "form"}
        assert "src" not in attributes
        assert (attributes.get("href") or "#").startswith("#")
        assert not any(name.startswith("on") for name in attributes)
    text = report(results, results.campaign)
    assert not re.search(r"url\(|@import|https?://(?!www\.w3\.org/2000/svg)", text)
    assert "default-src 'none'" in text


def test_a_reader_meets_results_then_drivers_then_doubts_then_points_then_method(shown: Page) -> None:
    sections = [attributes["id"] for tag, attributes in shown.elements if tag == "section"]
    assert sections == ["coefficients", "drivers", "distrust", "points", "point", "computed"]
    links = [a["href"] for tag, a in shown.elements if tag == "a" and (a.get("href") or "").startswith("#")]
    assert all(f"#{name}" in links for name in sections)


def test_the_report_says_what_a_careful_reader_must_know(results: Synthetic, shown: Page) -> None:
    text = shown.text("script", "style")
    for said in (
        "No value is corrected for the walls of the tunnel", "taps do not see friction",
        "hole size, contour as built, spanwise uniformity, walls", "tap T03 has no reading",
        "95 % coverage interval", "linearised", "Monte Carlo", "contour-cubic", "rear taps",
        str(results.meta["inputs"]["campaign.toml"]), np.__version__,  # type: ignore[index]
    ):  # fmt: skip
        assert said in text, said
    assert "cd_pressure" in text
    assert not re.search(r"\bcd\b(?!_)", text)  # what taps see is never called cd


def test_targets_say_whether_they_are_met_before_any_figure(results: Synthetic) -> None:
    text = report(results, results.campaign)
    assert text.index("cl ± 0.006") < text.index('id="polars"')
    assert 'id="target0" data-met="yes"' in text
    assert 'id="target1" data-met="no"' in text


def test_budget_rows_lead_to_lines_of_the_campaign_file(results: Synthetic, shown: Page) -> None:
    sources = shown.data()["sources"]
    assert isinstance(sources, list)
    lines = results.campaign.declared.splitlines()
    ids = {attributes.get("id") for _, attributes in shown.elements}
    for source in sources:
        if source["line"] is not None:
            assert lines[source["line"] - 1] == "[[source]]"
            assert f"line{source['line']}" in ids
    assert [s["name"] for s in sources if s["line"] is None] == [
        "finite tap spacing",
        "trailing edge",
        "rear loading",
    ]


def test_embedded_contributions_are_those_of_the_budget(results: Synthetic, shown: Page) -> None:
    packed = shown.data()["contribution"]
    assert isinstance(packed, dict)
    values = np.frombuffer(b64decode(packed["b"]), dtype="<f8")
    # The budget runs over points, coefficients and sources in that order here.
    assert np.array_equal(values, results.tables["budget"]["contribution"])


def test_the_page_shows_the_headline_interval_of_every_point(results: Synthetic) -> None:
    text = report(results, results.campaign)
    row = results.tables["coefficients"].iloc[3]
    cell = re.search(r'<tr data-i="3">.*?<td class="n odd">([^<]*)<span>([^<]*)<', text)
    assert cell is not None
    low, high = (float(part.replace("\N{MINUS SIGN}", "-")) for part in cell[2].split("…"))
    assert low == pytest.approx(row["cd_pressure_mc_low"], abs=0.51e-4)  # half of the last digit shown
    assert high == pytest.approx(row["cd_pressure_mc_high"], abs=0.51e-4)


def test_the_largest_report_asked_for_stays_small_and_is_written_soon() -> None:
    names = [
        name + end for end in ("", "_ref", "_stated") for name in ("cn", "ct", "cm", "cl", "cd_pressure")
    ]
    large = ranked(synthetic(200, 61, 40, coefficients=names))
    start = perf_counter()
    text = report(large, large.campaign)
    # 4 MB and 5 s are what is asked of 200 points × 60 taps × 40 sources.
    assert perf_counter() - start < 5.0
    assert len(text.encode()) + TAP_PARTS < 4e6


def test_hostile_names_become_text_and_data_and_nothing_else() -> None:
    shown = page(synthetic(8, 11, 12, names=HOSTILE))
    assert shown.open == []
    assert sum(tag == "script" for tag, _ in shown.elements) == 2
    assert "<script>alert(1)</script>" in shown.text("script", "style")
    assert "{{ 1+1 }}" in shown.text("script", "style")
    points = shown.data()["points"]
    assert isinstance(points, dict)
    assert "R1/</script>" in points["key"]


def test_a_forecast_says_so_first(results: Synthetic) -> None:
    text = report(replace(results, meta=results.meta | {"kind": "forecast"}), results.campaign)
    assert text.index("Nothing here was measured") < text.index("<h1>")


def test_points_without_a_value_are_named(results: Synthetic) -> None:
    frame = results.tables["coefficients"].copy()
    number = [c for c in frame.columns if c.startswith("cl") and c != "cl_agrees"]
    frame.loc[2, number] = np.nan
    text = report(replace(results, tables=results.tables | {"coefficients": frame}), results.campaign)
    assert "cl at 1 of 12 points: R1/P003" in text
    assert "NaN" not in text.split('id="data"')[0]


def test_a_bare_result_still_makes_a_page(results: Synthetic) -> None:
    campaign = replace(results.campaign, plan=Plan(), declared="", title="", inputs={})
    tables = {name: results.tables[name] for name in ("coefficients", "cp")}
    tables["coefficients"] = tables["coefficients"].iloc[:1].assign(run="")
    tables["cp"] = tables["cp"].iloc[:21].assign(run="")
    shown = Page(report(Synthetic(campaign=campaign, tables=tables, meta={}), campaign))
    assert shown.open == []
    assert "1 point; 21 taps" in shown.text("script", "style")


@pytest.mark.parametrize(
    ("name", "row", "said"),
    [
        ("decisions", {"point": "P001", "coefficient": "cm", "value": -0.05, "U": 0.004, "lower": -0.06,
                       "upper": 0.0, "probability": 0.998, "rule": "guarded", "answer": "meets"}, "99.8 %"),
        ("differences", {"a": "R1", "b": "R2", "coefficient": "cl", "difference": 0.0123, "U": 0.0021,
                         "u_if_independent": 0.004, "significant": "yes"}, "0.0123 ± 0.0021"),
        ("fits", {"run": "R1", "config": "", "quantity": "cl_slope", "value": 0.1104, "U": 0.0012,
                  "points_used": 6, "note": "", "agrees": "no", "mc_low": 0.1091, "mc_high": 0.1118},
         "0.1104 (0.1091 … 0.1118)*"),
        ("planned", {"run": "R1", "point": "P001", "alpha": 2.0, "coefficient": "cl", "planned_U": 0.004,
                     "achieved_U": 0.003, "ratio": 0.75}, "Planned against achieved"),
    ],
)  # fmt: skip
def test_a_question_that_was_asked_has_its_section(
    name: str, row: dict[str, object], said: str, results: Synthetic
) -> None:
    tables = results.tables | {name: pd.DataFrame([row])}
    assert said in page(replace(results, tables=tables)).text("script", "style")
