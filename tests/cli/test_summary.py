"""The summary fits 80 columns and shows names as they are."""

from __future__ import annotations

import io
from pathlib import Path

import pytest
from rich.console import Console

from synthetic_results import Synthetic, synthetic
from tapband.cli.summary import print_summary

HALF_DIGIT = 0.51e-4
"""Half of the fourth decimal, the last one shown here."""


def printed(results: Synthetic, width: int = 80) -> list[str]:
    console = Console(file=io.StringIO(), width=width, highlight=False)
    print_summary(results, Path("out"), console)
    assert isinstance(console.file, io.StringIO)
    return console.file.getvalue().splitlines()


@pytest.mark.parametrize("points", [1, 6, 12, 200])
def test_summary_fits_eighty_columns_and_forty_lines(points: int) -> None:
    lines = printed(synthetic(points=points, taps=11, sources=6))
    assert max(map(len, lines)) <= 80
    assert len(lines) <= 40


def test_long_campaigns_say_how_many_points_are_left_out() -> None:
    assert any("… 188 more" in line for line in printed(synthetic(points=200, taps=11, sources=6)))


def test_an_unconfirmed_interval_is_marked_and_its_ends_are_those_of_monte_carlo() -> None:
    results = synthetic(points=4)
    row = results.tables["coefficients"].iloc[3]
    line = next(line for line in printed(results) if "P004" in line)
    low, high = line.split()[5].split("…")
    assert high.endswith("*")
    assert float(high[:-1]) == pytest.approx(row["cd_pressure_mc_high"], abs=HALF_DIGIT)
    assert float(low) == pytest.approx(row["cd_pressure_mc_low"], abs=HALF_DIGIT)


def test_missed_and_met_targets_are_told_apart() -> None:
    results = synthetic(points=4)
    lines = printed(results)
    frame = results.tables["coefficients"]
    assert (frame["cl_U"] <= 0.006).all()
    assert (frame["cd_pressure_U"] > 0.0016).all()
    assert sum(line.startswith("target cl ± 0.006: met") for line in lines) == 1
    assert sum(line.startswith("target cd_pressure ± 0.0016: MISSED at 2 of 2") for line in lines) == 1


def test_hostile_names_are_shown_and_not_obeyed() -> None:
    names = ["[bold red]x[/]", "\x1b[31mred", "two\nlines", "x" * 300]
    text = "\n".join(printed(synthetic(points=4, taps=11, sources=6, names=names)))
    assert "\x1b" not in text
    assert "[bold red]x[/]: 4 points" in text
