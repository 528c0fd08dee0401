"""The ratios that matter, at reduced size and with slack for a machine that does other things beside.

In full: ``python studies/benchmarks/table.py``.
"""

from __future__ import annotations

import importlib
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from types import ModuleType

import pytest

FOLDER = Path(__file__).parents[1] / "studies" / "benchmarks"
SLACK = 2.0
"""Processor time itself doubles where others use the caches."""
Import = Callable[[str], ModuleType]


@pytest.fixture
def benchmark_of(monkeypatch: pytest.MonkeyPatch) -> Iterator[Import]:
    """Imports a benchmark as its own folder would."""
    monkeypatch.syspath_prepend(str(FOLDER))
    yield importlib.import_module
    for path in FOLDER.glob("*.py"):
        sys.modules.pop(path.stem, None)


def test_linearised_propagation_is_a_thousand_times_quicker_than_uncertainties(benchmark_of: Import) -> None:
    """200 points × 60 taps × 133 latents on the same chain; also with the geometry in ours."""
    found = benchmark_of("linearised").compare(few=1, rounds=2)
    assert found["weights given"].ratio < 1e-3
    assert found["whole"].ratio < 1e-3
    assert found["weights given, shortened by hand"].ratio < 1e-2 * SLACK


def test_plain_trials_cost_little_more_than_their_normals(benchmark_of: Import) -> None:
    plain = benchmark_of("plain_trials")
    assert plain.compare(trials=20_000, rounds=5).ratio < plain.LARGEST * SLACK


def test_memory_of_plain_trials_is_bounded(benchmark_of: Import) -> None:
    plain = benchmark_of("plain_trials")
    assert plain.peak(300_000) < plain.MEMORY


@pytest.mark.parametrize("name", ["normal", "curved"])
def test_accelerated_trials_need_a_small_part_of_plain_ones(name: str, benchmark_of: Import) -> None:
    accelerated = benchmark_of("accelerated")
    found = accelerated.compare(accelerated.BUDGETS[name], rounds=1)
    assert found.times.ratio < accelerated.LARGEST[name] * 2.0 * SLACK
    assert found.trials * 100 < found.plain_trials


def test_time_grows_no_faster_than_points_taps_sources_and_trials(benchmark_of: Import) -> None:
    """Twice the taps and four times the rest; 0.3 is allowed for noise over so short a span."""
    thousands = benchmark_of("thousands")
    for name, power in thousands.growth(factor=4, rounds=2, points=16).items():
        assert power < thousands.GROWTH + 0.3, (name, power)


def test_ranking_costs_less_than_two_linearised_reductions(benchmark_of: Import) -> None:
    ranking = benchmark_of("ranking")
    assert ranking.linear(rounds=3).ratio < ranking.LARGEST * SLACK


def test_sobol_indices_cost_a_small_part_of_salibs_and_are_closer(benchmark_of: Import) -> None:
    found = benchmark_of("ranking").indices(samples=256, rounds=1)
    assert found.times.ratio < 0.1
    assert found.ours < found.theirs


def test_loading_costs_a_few_parses(benchmark_of: Import) -> None:
    """A thousand rows: the campaign file and the contour count too."""
    assert benchmark_of("reading").compare(points=1_000, rounds=3).ratio < 40.0
