"""The summary fits 80 columns and shows names as they are."""

from __future__ import annotations

import io
import os
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

import pytest
from rich.console import Console

from synthetic_results import Synthetic, synthetic
from tapband.cli import main
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


def test_a_narrow_terminal_loses_no_column(tmp_path: Path) -> None:
    done = _command(tmp_path, "reduce", COLUMNS="40")
    assert "R1/P01 " in done.stdout
    assert "…   " not in done.stdout
    assert max(len(line.rstrip()) for line in done.stdout.splitlines()[:-1]) <= 80


def test_a_terminal_without_unicode_shows_intervals_in_plain_letters(tmp_path: Path) -> None:
    done = _command(tmp_path, "reduce", PYTHONIOENCODING="ascii")
    assert "?" not in done.stdout
    assert " +- 0." in done.stdout
    assert "target cl +- 0.02: met" in done.stdout


def test_output_closed_early_is_no_failure(tmp_path: Path) -> None:
    for name in ("reduce", "check", "schema"):
        read, write = os.pipe()
        os.close(read)
        assert _command(tmp_path, name, stdout=write) == _Done(code=0, stdout="", stderr="")
        os.close(write)


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="the system has no full device")
def test_output_without_room_is_said_in_one_line(tmp_path: Path) -> None:
    said = "tapband: the output cannot be written (no space left on device); write it elsewhere\n"
    with open("/dev/full", "w") as full:
        for name in ("reduce", "check", "schema"):
            assert _command(tmp_path, name, stdout=full.fileno()) == _Done(code=2, stdout="", stderr=said)


def test_help_says_where_results_go(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["reduce", "--help"]) == 0
    said = " ".join(capsys.readouterr().out.replace("│", " ").split())
    assert "Default: CAMPAIGN-results beside the campaign, CAMPAIGN the name of its file without" in said


@dataclass(frozen=True, slots=True, kw_only=True)
class _Done:
    code: int
    stdout: str
    stderr: str


def _command(folder: Path, name: str, stdout: int = subprocess.PIPE, **environment: str) -> _Done:
    """One command on a starter campaign of three points, in a process of its own."""
    campaign = folder / "demo" / "campaign.toml"
    if not campaign.exists():
        assert main(["start", str(campaign.parent), "--quiet"]) == 0
        table = campaign.with_name("points.csv")
        lines = [
            line for line in table.read_text(encoding="utf-8").splitlines(keepends=True) if line[0] != "#"
        ]
        table.write_text("".join(lines[:4]), encoding="utf-8")
    arguments = [] if name == "schema" else [str(campaign)]
    arguments += ["--trials", "256"] if name == "reduce" else []
    done = subprocess.run(
        [sys.executable, "-m", "tapband", name, *arguments], stdout=stdout, stderr=subprocess.PIPE, text=True,
        encoding="utf-8", timeout=100, check=False, env={**os.environ, **environment},
    )  # fmt: skip
    return _Done(code=done.returncode, stdout=done.stdout or "", stderr=done.stderr)
