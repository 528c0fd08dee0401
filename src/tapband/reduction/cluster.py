"""Monte Carlo of many points on a running Dask cluster: the same rows as on one machine.

Points go out in blocks; a draw is keyed by its names and never by where it is made, so a block that is lost
with its worker is computed again elsewhere to the same numbers.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import fields
from typing import TYPE_CHECKING, Any

import numpy as np

from tapband.probability.montecarlo import MonteCarlo, run
from tapband.reduction.problem import CampaignProblem

if TYPE_CHECKING:
    from distributed import Client

LARGEST_BLOCK = 64


def run_on(
    client: Client,
    problem: CampaignProblem,
    level: float,
    trials: str,
    seed: int,
    progress: Callable[[int, int], None] | None = None,
) -> MonteCarlo:
    """As :func:`tapband.probability.montecarlo.run`, spread over the workers of ``client``."""
    from distributed import as_completed

    size = len(problem.alpha)
    workers = max(len(client.scheduler_info()["workers"]), 1)
    step = max(1, min(LARGEST_BLOCK, size // (4 * workers)))
    blocks = [slice(start, min(start + step, size)) for start in range(0, size, step)]
    futures = [
        client.submit(run, problem.part(block), level, trials, seed, threads=1, pure=False, retries=5)
        for block in blocks
    ]
    done = 0
    for future in as_completed(futures):
        block = blocks[futures.index(future)]
        done += block.stop - block.start
        if progress is not None:
            progress(done, size)
    return joined(client.gather(futures))


def joined(parts: Sequence[MonteCarlo]) -> MonteCarlo:
    """Results of blocks of points, one after the other."""
    values: dict[str, Any] = {}
    for item in fields(MonteCarlo):
        each = [getattr(part, item.name) for part in parts]
        if isinstance(each[0], np.ndarray):
            values[item.name] = np.concatenate(each)
        else:
            values[item.name] = tuple(x for one in each for x in one)
    return MonteCarlo(**values)
