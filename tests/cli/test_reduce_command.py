"""``tapband reduce`` end to end on the starter campaign: what it writes, says and refuses."""

from __future__ import annotations

import json
import os
import pty
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pandas as pd
import pytest

from tapband.cli import main

TRIALS = ("--trials", "256")
TAPBAND = (sys.executable, "-m", "tapband")


def shorten(campaign: Path) -> None:
    """Keep three points of the readings: the command is under test here, not the campaign."""
    table = campaign.with_name("points.csv")
    lines = table.read_text(encoding="utf-8").splitlines(keepends=True)
    rows = [line for line in lines if not line.startswith("#")]
    table.write_text("".join(rows[:4]), encoding="utf-8")


@pytest.fixture(scope="module")
def started(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A starter campaign, reduced once."""
    folder = tmp_path_factory.mktemp("cli") / "demo"
    assert main(["start", str(folder), "--quiet"]) == 0
    shorten(folder / "campaign.toml")
    assert main(["reduce", str(folder / "campaign.toml"), "--quiet", *TRIALS]) == 0
    return folder


@pytest.fixture
def demo(started: Path, tmp_path: Path) -> Path:
    """A copy of the campaign, not reduced."""
    copy = tmp_path / "demo"
    shutil.copytree(started, copy, ignore=shutil.ignore_patterns("*-results"))
    return copy


def test_start_then_reduce_leaves_every_table_and_the_report(started: Path) -> None:
    written = {file.name for file in (started / "campaign-results").iterdir()}
    for name in ("coefficients", "cp", "budget", "correlation", "tap_ranking", "ranking", "fits"):
        assert f"{name}.csv" in written
    assert {"results.json", "report.html", "latents.npz"} <= written
    assert json.loads((started / "campaign-results" / "results.json").read_text())["format"] == 1


def test_summary_goes_to_standard_output_and_nothing_to_standard_error(
    demo: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["reduce", str(demo / "campaign.toml"), *TRIALS]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert max(map(len, out.splitlines())) <= 80
    assert "target cl ± 0.02: met" in out
    assert out.rstrip().endswith("report.html")


def test_quiet_is_silent(demo: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["reduce", "--quiet", str(demo / "campaign.toml"), *TRIALS]) == 0
    assert main(["--quiet", "check", str(demo / "campaign.toml")]) == 0
    assert capsys.readouterr() == ("", "")


def test_check_computes_and_writes_nothing(demo: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", str(demo / "campaign.toml")]) == 0
    assert "no faults; 3 points, 40 taps" in capsys.readouterr().out
    assert not (demo / "campaign-results").exists()


def test_a_missed_target_is_exit_1_with_everything_written(
    demo: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    file = demo / "campaign.toml"
    target = '\n[[target]]\ncoefficient = "cl"\nexpanded = 1e-6\n'
    file.write_text(file.read_text(encoding="utf-8") + target, encoding="utf-8")
    assert main(["reduce", str(file), *TRIALS]) == 1
    assert "MISSED" in capsys.readouterr().out
    assert (demo / "campaign-results" / "report.html").exists()


def test_bad_input_is_exit_2_and_leaves_nothing(demo: Path, capsys: pytest.CaptureFixture[str]) -> None:
    file = demo / "campaign.toml"
    file.write_text(file.read_text(encoding="utf-8").replace("contour.csv", "missing.csv"), encoding="utf-8")
    assert main(["reduce", str(file)]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert "missing.csv" in err
    assert "Traceback" not in err
    assert not (demo / "campaign-results").exists()


def test_a_campaign_that_is_not_there_is_named(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["reduce", str(tmp_path / "no.toml")]) == 2
    err = capsys.readouterr().err
    assert "no.toml" in err
    assert err.count("\n") == 1


def test_a_folder_of_someone_else_is_refused_before_any_computation(
    demo: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    mine = demo / "mine"
    mine.mkdir()
    (mine / "thesis.txt").write_text("years")
    assert main(["reduce", str(demo / "campaign.toml"), "--out", str(mine)]) == 2
    assert "an existing folder is replaced only if tapband wrote it" in capsys.readouterr().err
    assert (mine / "thesis.txt").read_text() == "years"


def test_out_makes_the_folders_it_needs_and_is_replaced_on_the_next_run(demo: Path) -> None:
    out = demo / "a" / "b"
    assert main(["reduce", str(demo / "campaign.toml"), "--out", str(out), "-q", "--seed", "3", *TRIALS]) == 0
    first = pd.read_csv(out / "coefficients.csv")
    assert main(["reduce", str(demo / "campaign.toml"), "--out", str(out), "-q", "--seed", "4", *TRIALS]) == 0
    second = pd.read_csv(out / "coefficients.csv")
    assert (first["cl_U"] == second["cl_U"]).all()
    assert (first["cl_mc"] != second["cl_mc"]).any()
    assert json.loads((out / "results.json").read_text())["seed"] == 4


def test_forecast_needs_no_readings_and_is_marked(demo: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["forecast", str(demo / "campaign.toml"), "--out", str(demo / "plan"), *TRIALS]) in (0, 1)
    assert "forecast" in capsys.readouterr().out.splitlines()[0]
    assert "Nothing here was measured" in (demo / "plan" / "report.html").read_text(encoding="utf-8")


def test_a_scheduler_that_is_not_there_is_bad_input(demo: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["reduce", str(demo / "campaign.toml"), "--scheduler", "nonsense address"]) == 2
    assert "--scheduler: must be the address of a running Dask scheduler" in capsys.readouterr().err


@pytest.mark.skipif(os.name != "posix", reason="needs signals")
@pytest.mark.parametrize("after", [0.4, 1.1, 1.8])
def test_killed_at_any_moment_it_leaves_the_whole_result_or_none(after: float, demo: Path) -> None:
    process = subprocess.Popen([*TAPBAND, "reduce", str(demo / "campaign.toml"), "-q", *TRIALS])
    time.sleep(after)
    process.kill()
    process.wait()
    results = demo / "campaign-results"
    if results.exists():
        assert {"results.json", "report.html", "coefficients.csv"} <= {
            file.name for file in results.iterdir()
        }


@pytest.mark.skipif(os.name != "posix", reason="needs signals")
def test_interrupted_it_says_so_in_one_line_and_leaves_nothing(demo: Path) -> None:
    process = subprocess.Popen(
        [*TAPBAND, "reduce", str(demo / "campaign.toml"), "--trials", "plain:200000000"],
        stderr=subprocess.PIPE,
        text=True,
    )
    time.sleep(2.0)
    process.send_signal(signal.SIGINT)
    assert process.communicate(timeout=30)[1] == "tapband: interrupted; nothing is left half-written\n"
    # Where the interrupt falls into code that Python made from text (dataclasses, while importing), Python itself
    # leaves by the signal. A shell shows 130 for both.
    assert process.returncode in (130, -signal.SIGINT)
    assert {entry.name for entry in demo.iterdir()} == {
        "campaign.toml",
        "contour.csv",
        "taps.csv",
        "points.csv",
    }


@pytest.mark.skipif(os.name != "posix", reason="needs a pseudo-terminal")
def test_progress_shows_on_a_terminal_and_goes_away(demo: Path) -> None:
    ours, theirs = pty.openpty()
    # Progress is shown past two seconds: enough trials for that on a machine that does nothing else.
    command = [*TAPBAND, "reduce", str(demo / "campaign.toml"), "--trials", "plain:400000"]
    environment = {**os.environ, "TERM": "xterm-256color", "COLUMNS": "80"}
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=theirs, env=environment)
    os.close(theirs)
    shown = b""
    while True:
        try:
            part = os.read(ours, 65536)
        except OSError:  # the other end has closed
            break
        if not part:
            break
        shown += part
    process.communicate()
    assert process.returncode == 0
    assert b"%" in shown
    assert b"left" in shown
