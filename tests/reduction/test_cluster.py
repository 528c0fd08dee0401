"""Points spread over a cluster of real worker processes, one of which is killed on the way."""

from __future__ import annotations

import os
import signal
import warnings

import numpy as np
import pytest

from campaigns import campaign, every_kind
from tapband.reduction import reduce_campaign

distributed = pytest.importorskip("distributed", reason="the extra cluster is not installed")
SOURCES = [s for s in every_kind() if s.name not in ("hole", "one-sided")]


def test_a_cluster_gives_the_rows_of_one_machine_even_when_a_worker_is_killed() -> None:
    points = 24
    c = campaign(SOURCES, alphas=np.linspace(-2.0, 8.0, points).tolist(), trials="2000")
    here = reduce_campaign(c, threads=1)
    done: list[int] = []
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # the cluster's own word on ports and on a worker that died
        cluster = distributed.LocalCluster(
            n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None, silence_logs=50
        )
        with cluster, distributed.Client(cluster) as client:
            victim = client.run(os.getpid)

            def progress(finished: int, _: int) -> None:
                if not done:
                    os.kill(next(iter(victim.values())), signal.SIGKILL)
                done.append(finished)

            there = reduce_campaign(c, progress=progress, client=client)
    for name in ("mean", "u", "low", "high", "short_low", "short_high", "trials"):
        np.testing.assert_array_equal(getattr(there.montecarlo, name), getattr(here.montecarlo, name))
    assert done[-1] == points
