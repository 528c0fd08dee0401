"""The page of a plan answers first whether the test is ready, then what to buy and how good each source must be."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from synthetic_results import synthetic
from tapband.report import figures_plan
from tapband.report.plan_page import plan_report

HOSTILE = "<img src=x onerror=alert(1)>"
TABLES = {
    "targets": pd.DataFrame(
        {"point": ["F1", "F2"], "run": ["forecast"] * 2, "coefficient": ["cl"] * 2, "U": [0.004, 0.006],
         "target": [0.005] * 2, "ratio": [0.8, 1.2], "met": ["yes", "no"]}
    ),
    "selection": pd.DataFrame({"slot": ["scanner"], "option": [HOSTILE], "cost": [9000.0]}),
    "frontier": pd.DataFrame({"cost": [6800.0, 9000.0], "worst_ratio": [1.3, 0.9], "scanner": ["a", "b"]}),
    "allowances": pd.DataFrame(
        {"source": ["zero", "gain"], "declared": [1.2, 0.03], "allowed": [2.6, np.inf], "unit": ["Pa", "1"],
         "headroom": [2.2, np.inf], "binding_point": ["F2", ""], "binding_coefficient": ["cl", ""],
         "reason": ["", "acts on no target"]}
    ),
    "ranges": pd.DataFrame(
        {"tap": ["U01", "p_static"], "lowest": [-5516.0, 99000.0], "highest": [1693.0, 101000.0],
         "full_scale": [7000.0, np.nan], "utilisation": [0.788, np.nan], "saturates": ["no", ""]}
    ),
}  # fmt: skip


@pytest.fixture(scope="module")
def text() -> str:
    notes = ["Some targets are missed.", HOSTILE]
    return plan_report(TABLES, {"undeclared": ["walls"]}, notes, synthetic(taps=11, sources=6).campaign)


def test_the_answer_comes_before_the_tables(text: str) -> None:
    order = [
        text.index(said) for said in ("Nothing here was measured", "missed at 1 of 2 points", 'id="choices"')
    ]
    assert order == sorted(order)
    assert text.index("Some targets are missed.") < text.index('id="choices"')


def test_names_in_a_plan_are_text(text: str) -> None:
    assert HOSTILE not in text
    assert text.count("&lt;img src=x onerror=alert(1)&gt;") == 2
    assert "<script" not in text


def test_numbers_stand_with_their_units(text: str) -> None:
    for said in ("9000", "1.20 Pa", "2.60 Pa", "−5516 … 1693", "78.8 %"):
        assert f"<bdi>{said}</bdi>" in text, said


def test_channels_without_a_full_scale_do_not_flatten_the_figure(text: str) -> None:
    figure = text[text.index("What each tap will see against its full scale") :].split("</svg>")[0]
    assert "U01" in figure
    assert "p_stat" not in figure


def test_a_plan_without_choices_has_no_such_section() -> None:
    tables = {"targets": TABLES["targets"]}
    page = plan_report(tables, {}, [], synthetic(taps=11, sources=6).campaign)
    assert 'id="choices"' not in page
    assert 'id="held"' in page


def test_plan_figures_name_axes_and_what_they_compare() -> None:
    frontier = figures_plan.frontier(TABLES["frontier"])
    assert frontier.get_xlabel() == "cost [as stated]"
    assert frontier.get_legend_handles_labels()[1] == ["every target met below"]
    assert [label.get_text() for label in figures_plan.ranges(TABLES["ranges"]).get_xticklabels()] == ["U01"]
    bars = figures_plan.allowances(TABLES["allowances"])
    assert [label.get_text() for label in bars.get_yticklabels()] == ["zero"]
