"""Many points in worker processes: the rows of one process, a dead worker, a refusal, a script without a guard."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import numpy as np
import pytest

from campaigns import TWELVE, campaign, every_kind
from tapband.nouns.campaign import Campaign
from tapband.probability.montecarlo import run
from tapband.probability.outcome import NAMES
from tapband.reduction import assemble, processes
from tapband.reduction.processes import run_apart, workers_for

POINTS = 40
PLAN = (0.95, "256", 3)


def _campaign() -> Campaign:
    return campaign(
        every_kind(), taps=TWELVE.taps(21, "cosine", 0.98), alphas=np.linspace(-2.0, 8.0, POINTS).tolist()
    )


@pytest.fixture(autouse=True)
def _small_blocks(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(processes, "BLOCK", 16)


def test_processes_give_the_rows_of_one_process() -> None:
    problem = assemble(_campaign()).problem
    told: list[int] = []
    here = run(problem, *PLAN, threads=1)
    apart = run_apart(problem, PLAN, 2, lambda done, total: told.append(done))
    for name in (*NAMES, "trials", "reached"):
        np.testing.assert_array_equal(getattr(apart, name), getattr(here, name))
    assert apart.method == here.method
    assert told[-1] == POINTS


def test_a_worker_that_dies_costs_time_and_no_result(monkeypatch: pytest.MonkeyPatch) -> None:
    problem = assemble(_campaign()).problem
    asked, killed = processes._asked, []

    def deadly(worker: processes.Worker, *rest: object) -> object:
        if not killed:
            killed.append(worker.pid)
            os.kill(worker.pid, signal.SIGKILL)
        return asked(worker, *rest)  # type: ignore[arg-type]  # passed on as it came

    monkeypatch.setattr(processes, "_asked", deadly)
    apart = run_apart(problem, PLAN, 2)
    assert killed
    np.testing.assert_array_equal(apart.high, run(problem, *PLAN, threads=1).high)


def test_what_a_worker_refuses_is_raised_here() -> None:
    with pytest.raises(ValueError, match='trials: needs "auto"'):
        run_apart(assemble(_campaign()).problem, (0.95, "many", 1), 1)


def test_an_interrupt_ends_the_workers_at_once() -> None:
    """The interrupt comes with the first block; the rest would take many times as long."""
    problem = assemble(_campaign()).problem
    seen: list[processes.Worker] = []
    started = processes._started

    @contextmanager
    def watched(workers: int) -> Iterator[list[processes.Worker]]:
        with started(workers) as team:
            seen.extend(team)
            yield team

    def interrupt(done: int, total: int) -> None:
        raise KeyboardInterrupt

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(processes, "_started", watched)
        with pytest.raises(KeyboardInterrupt):
            run_apart(problem, PLAN, 2, interrupt)
    assert len(seen) == 2
    assert all(worker.poll() is not None for worker in seen)


def test_few_points_start_no_workers() -> None:
    assert workers_for(processes.FEWEST - 1) == 0


def test_a_script_without_a_guard_may_reduce_many_points(tmp_path: Path) -> None:
    """Worker processes of the standard library would run the script once more, and again."""
    script = tmp_path / "plain_script.py"
    script.write_text(
        f"import sys; sys.path.insert(0, {str(Path(__file__).parents[1])!r})\n"
        "from campaigns import campaign\n"
        "from tapband.reduction import processes, reduce_campaign\n"
        "processes.FEWEST, processes.BLOCK = 4, 2\n"
        "reduced = reduce_campaign(campaign(alphas=(0.0, 2.0, 4.0, 6.0)), '256')\n"
        "print(len(reduced.montecarlo.method), 'points')\n"
    )
    done = subprocess.run(
        [sys.executable, "-W", "error", str(script)], capture_output=True, text=True, check=True
    )
    assert done.stdout == "4 points\n"
    assert done.stderr == ""
