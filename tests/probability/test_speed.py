"""Ratios of computing times within one run; processor time, so that other work on the machine counts less."""

from __future__ import annotations

from collections.abc import Callable
from time import process_time

import numpy as np
import pytest

from tap_chain import CURVED, NORMAL_DOMINATED, Error, TapChain
from tapband.probability.draws import fresh
from tapband.probability.linearised import propagate
from tapband.probability.montecarlo import run


def least(work: Callable[[], object], times: int) -> float:
    """Least processor time of several runs [s]."""
    taken = []
    for _ in range(times):
        start = process_time()
        work()
        taken.append(process_time() - start)
    return min(taken)


def test_plain_trials_cost_little_more_than_their_draws() -> None:
    """At most 2.5 times: 131 latents; half as much again is left to the machine."""
    chain = TapChain(NORMAL_DOMINATED)
    generator, buffer = fresh(), np.empty((1_000, 131))

    def draw() -> None:
        for _ in range(100):
            generator.standard_normal(out=buffer)

    ratio = least(lambda: run(chain, 0.95, "plain:100000", 1, threads=1), 2) / least(draw, 2)
    assert ratio < 2.5 * 1.5


@pytest.mark.parametrize(
    ("errors", "fraction"), [(NORMAL_DOMINATED, 1 / 200), (CURVED, 1 / 20)], ids=["smooth", "curved"]
)
def test_accelerated_trials_cost_a_fraction_of_plain_ones(errors: tuple[Error, ...], fraction: float) -> None:
    """1/200 and 1/20 of plain trials to the same tolerance; as much again is left to the machine.

    The chain of these tests costs next to nothing, which flatters plain trials.
    """
    chain = TapChain(errors)
    auto = least(lambda: run(chain, 0.95, "auto", 1, threads=1), 7)
    plain = least(lambda: run(chain, 0.95, "plain:100000", 1, threads=1), 1)
    needed = run(chain, 0.95, "plain", 1).trials[0, 0] / 1e5
    assert auto < 2.0 * fraction * plain * needed


def test_time_grows_no_faster_than_points() -> None:
    few, many = (TapChain(NORMAL_DOMINATED, np.linspace(-0.04, 0.14, n)) for n in (64, 512))
    exponent = np.log(
        least(lambda: run(many, 0.95, "auto", 1, threads=1), 2)
        / least(lambda: run(few, 0.95, "auto", 1, threads=1), 3)
    ) / np.log(8)
    assert exponent < 1.2
    linear = np.log(
        least(lambda: propagate(many, 0.95), 5) / least(lambda: propagate(few, 0.95), 5)
    ) / np.log(8)
    assert linear < 1.2
