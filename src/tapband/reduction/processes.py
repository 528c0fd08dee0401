"""Monte Carlo of many points on all processors of this machine: the same rows as in one process.

An accelerated point is some thousand short steps, between which threads wait for each other; processes do not.
Workers are programs of their own that are sent blocks of points through a pipe, so that a user's script needs no
guard; a block whose worker dies is computed here.
"""

from __future__ import annotations

import os
import pickle
import signal
import subprocess
import sys
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager, suppress
from queue import Empty, SimpleQueue
from threading import Event

from tapband.probability.montecarlo import MonteCarlo, run
from tapband.reduction.cluster import joined
from tapband.reduction.problem import CampaignProblem

FEWEST = 1_500
"""Points below which workers do not earn the second that they take to start."""
BLOCK = 256
Plan = tuple[float, str, int]
"""Level, trials, seed."""
Worker = subprocess.Popen[bytes]
START = "import sys; sys.path[:] = {path!r}; from tapband.reduction.processes import serve; serve()"


def workers_for(points: int) -> int:
    """How many workers to use for so many points; 0: compute here."""
    available = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
    return available if points >= FEWEST and available > 1 and sys.executable else 0


def run_apart(
    problem: CampaignProblem, plan: Plan, workers: int, progress: Callable[[int, int], None] | None = None
) -> MonteCarlo:
    """As :func:`tapband.probability.montecarlo.run`, in so many processes."""
    size = len(problem.alpha)
    blocks = [slice(start, min(start + BLOCK, size)) for start in range(0, size, BLOCK)]
    found: dict[int, MonteCarlo] = {}
    waiting: SimpleQueue[int] = SimpleQueue()
    finished: SimpleQueue[Exception | None] = SimpleQueue()
    stopped = Event()
    for index in range(len(blocks)):
        waiting.put(index)

    def work(worker: Worker) -> None:
        with suppress(Empty):
            while not stopped.is_set():
                index = waiting.get_nowait()
                found[index] = _answer(worker, problem.part(blocks[index]), plan, stopped)
                finished.put(None)

    with _started(workers) as team, ThreadPoolExecutor(workers) as pool:
        try:
            for worker in team:
                pool.submit(_told, work, worker, finished)
            for done in range(1, len(blocks) + 1):
                fault = finished.get()
                if fault is not None:
                    raise fault
                if progress is not None:
                    progress(min(BLOCK * done, size), size)
        except BaseException:
            stopped.set()
            for worker in team:
                worker.kill()
            raise
    return joined([found[index] for index in range(len(blocks))])


def _told(work: Callable[[Worker], None], worker: Worker, finished: SimpleQueue[Exception | None]) -> None:
    """Do the work; what goes wrong is raised where the answers are awaited."""
    try:
        work(worker)
    except Exception as error:
        finished.put(error)


def _answer(worker: Worker, part: CampaignProblem, plan: Plan, stopped: Event) -> MonteCarlo:
    """From the worker, or from here where it died unasked."""
    answer = _asked(worker, part, plan)
    if answer is None and stopped.is_set():
        raise EOFError("the worker was ended")
    return _here(part, plan) if answer is None else answer


def _here(part: CampaignProblem, plan: Plan) -> MonteCarlo:
    level, trials, seed = plan
    return run(part, level, trials, seed, threads=1)


@contextmanager
def _started(workers: int) -> Iterator[list[Worker]]:
    """Workers that are gone at the end, whatever happens."""
    code = START.format(path=sys.path)
    environment = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}
    pipe = subprocess.PIPE
    team = [
        subprocess.Popen([sys.executable, "-c", code], stdin=pipe, stdout=pipe, env=environment)
        for _ in range(workers)
    ]
    try:
        yield team
    finally:
        for worker in team:
            worker.kill()
            with suppress(OSError):
                worker.communicate()


def _asked(worker: Worker, part: CampaignProblem, plan: Plan) -> MonteCarlo | None:
    """A worker's answer; None where it died."""
    assert worker.stdin is not None
    assert worker.stdout is not None
    try:
        pickle.dump((part, plan), worker.stdin, protocol=pickle.HIGHEST_PROTOCOL)
        worker.stdin.flush()
        answer = pickle.load(worker.stdout)
    except (OSError, EOFError, pickle.UnpicklingError):
        return None
    if isinstance(answer, Exception):
        raise answer
    return answer if isinstance(answer, MonteCarlo) else None


def serve() -> None:
    """What a worker does: answer blocks until there are no more."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # an interrupt is the caller's to handle, who then ends us
    asked, answers = sys.stdin.buffer, sys.stdout.buffer
    sys.stdout = sys.stderr
    while True:
        try:
            part, plan = pickle.load(asked)
        except EOFError:
            return
        try:
            answer: object = _here(part, plan)
        except Exception as error:
            answer = error
        with suppress(BrokenPipeError):
            pickle.dump(answer, answers, protocol=pickle.HIGHEST_PROTOCOL)
            answers.flush()
