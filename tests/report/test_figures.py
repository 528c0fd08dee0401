"""Figures name their axes, units and level; names in them are text; files come in every kind asked for."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from xml.etree import ElementTree

import pytest
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from synthetic_results import Synthetic, synthetic
from tapband.nouns.errors import QuestionError
from tapband.report import figures
from tapband.report.figure_files import figure_jobs
from tapband.report.publish import publish

Draw = Callable[[Synthetic, Axes | None], Axes]
DRAWINGS: list[tuple[str, Draw]] = [
    ("coefficient", lambda r, ax: figures.coefficient(r, "cl", ax=ax)),
    ("half_width", lambda r, ax: figures.half_width(r, "cd_pressure", ax=ax)),
    ("pressure", lambda r, ax: figures.pressure(r, "R1/P001", ax=ax)),
    ("pressure_half_width", lambda r, ax: figures.pressure_half_width(r, "R1/P001", ax=ax)),
    ("contributors", lambda r, ax: figures.contributors(r, "cl", ax=ax)),
    ("contributors_at", lambda r, ax: figures.contributors(r, "cl", "R1/P001", ax=ax)),
    ("shares", lambda r, ax: figures.shares(r, "cl", ax=ax)),
]


@pytest.fixture(scope="module")
def results() -> Synthetic:
    return synthetic(taps=11, sources=14)


@pytest.mark.parametrize("draw", [d for _, d in DRAWINGS], ids=[name for name, _ in DRAWINGS])
def test_a_figure_draws_on_the_axes_given_or_on_its_own(draw: Draw, results: Synthetic) -> None:
    ax = Figure().add_subplot()
    assert draw(results, ax) is ax
    own = draw(results, None)
    for drawn in (ax, own):
        assert drawn.get_xlabel()
        assert drawn.has_data()
        assert any(mark in drawn.get_xlabel() for mark in ("[deg]", "[1]", "[%]"))


def test_bars_name_their_level_and_doubted_points_are_ringed(results: Synthetic) -> None:
    assert figures.coefficient(results, "cl").get_title(loc="left") == "bars: 95 % coverage interval"
    labels = figures.half_width(results, "cd_pressure").get_legend_handles_labels()[1]
    assert {"not confirmed by Monte Carlo", "target"} <= set(labels)
    assert (
        "not confirmed by Monte Carlo" not in figures.half_width(results, "cl").get_legend_handles_labels()[1]
    )


def test_bars_span_the_headline_interval(results: Synthetic) -> None:
    row = results.tables["coefficients"].iloc[3]  # Monte Carlo does not confirm its pressure drag
    assert row["cd_pressure_agrees"] == "no"
    bars = figures.coefficient(results, "cd_pressure").collections[0].get_segments()  # type: ignore[attr-defined]
    ends = {(round(float(s[0, 1]), 12), round(float(s[1, 1]), 12)) for s in bars}
    assert (round(row["cd_pressure_mc_low"], 12), round(row["cd_pressure_mc_high"], 12)) in ends


def test_contributors_of_a_point_add_up_to_the_whole_variance(results: Synthetic) -> None:
    widths = [bar.get_width() for bar in figures.contributors(results, "cl", "R1/P001").patches]  # type: ignore[attr-defined]
    assert sum(widths) == pytest.approx(100.0, abs=1e-9)  # rounding of fourteen shares


@pytest.mark.parametrize(
    ("ask", "message"),
    [
        (lambda r: figures.coefficient(r, "cd"), "needs a coefficient of these results; got 'cd'"),
        (lambda r: figures.pressure(r, "P999"), "needs one point named 'P999'; got none; write RUN/POINT"),
        (lambda r: figures.contributors(r, "cl", "P999"), "needs a budget of 'cl'; got none at P999"),
    ],
)
def test_a_question_without_an_answer_is_refused(
    ask: Callable[[Synthetic], Axes], message: str, results: Synthetic
) -> None:
    with pytest.raises(QuestionError, match=message):
        ask(results)


HEADS = {"png": b"\x89PNG", "pdf": b"%PDF", "svg": b"<?xml"}


@pytest.mark.parametrize("kind", HEADS)
def test_figure_files_are_of_the_kind_asked_for(kind: str, tmp_path: Path) -> None:
    jobs = figure_jobs(synthetic(points=2, taps=11, sources=6, coefficients=("cl", "cm")), kind)
    assert len(jobs) == 2 * 3 + 2  # three a coefficient, one a point
    for name in ("cl-drivers", "cp-0001-R1-P001"):
        jobs[f"figures/{name}.{kind}"](tmp_path / f"{name}.{kind}")
        assert (tmp_path / f"{name}.{kind}").read_bytes().startswith(HEADS[kind])


def test_figures_stand_in_the_folder_of_the_results(tmp_path: Path) -> None:
    results = synthetic(points=1, taps=11, sources=6, coefficients=("cl", "cm"))
    figures_in = publish(results, tmp_path / "out", figures="svg") / "figures"
    assert {file.name for file in figures_in.glob("c[lp]-*")} == {
        "cl-against-angle.svg", "cl-drivers.svg", "cl-shares.svg", "cp-0001-R1-P001.svg",
    }  # fmt: skip


def test_svg_figures_hold_hostile_names_as_text_and_repeat_byte_for_byte(tmp_path: Path) -> None:
    names = ["$x^2$ <b>", "../../up", "翼型"]
    jobs = figure_jobs(synthetic(points=3, taps=11, sources=9, coefficients=("cl", "cm"), names=names), "svg")
    assert {name for name in jobs if name.startswith("figures/cp-")} == {
        "figures/cp-0001-R1-x-2-b.svg", "figures/cp-0002-R1-..-..-up.svg", "figures/cp-0003-R2.svg",
    }  # fmt: skip
    for name in ("first.svg", "second.svg"):
        jobs["figures/cl-drivers.svg"](tmp_path / name)
    drivers = (tmp_path / "first.svg").read_bytes()
    assert drivers == (tmp_path / "second.svg").read_bytes()
    texts = {node.text for node in ElementTree.fromstring(drivers).iter("{http://www.w3.org/2000/svg}text")}
    assert "$x^2$ <b>" in texts
