"""Ratios of processor time between things that are run in turns, and peak memory of a program of its own.

Processor time, not time on the wall, so that other work on the machine counts as little as it can; the median of
the ratios of neighbouring runs, so that what disturbs both disturbs neither. One thread unless said otherwise.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

TESTS = Path(__file__).parents[2] / "tests"
ONE_THREAD = dict.fromkeys(("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"), "1")


@dataclass(frozen=True, slots=True, kw_only=True)
class Versus:
    """Processor seconds (medians) of ours and of theirs, and the median ratio ours/theirs."""

    ours: float
    theirs: float
    ratio: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Ran:
    """What a program took: seconds of processor and on the wall, peak memory [MB], standard output."""

    processor: float
    wall: float
    peak: float
    output: str


def seconds(work: Callable[[], object]) -> float:
    """Processor seconds of one call."""
    start = time.process_time()
    work()
    return time.process_time() - start


def interleaved(
    ours: Callable[[], object], theirs: Callable[[], object], rounds: int, scale: float = 1.0
) -> Versus:
    """Both in turns; ``scale`` multiplies the time of theirs, of which a part was run."""
    ours()
    pairs = [(seconds(ours), scale * seconds(theirs)) for _ in range(rounds)]
    return Versus(
        ours=statistics.median(a for a, _ in pairs),
        theirs=statistics.median(b for _, b in pairs),
        ratio=statistics.median(a / b for a, b in pairs),
    )


def program(arguments: Sequence[str], *, one_thread: bool = True, ok: Sequence[int] = (0,)) -> Ran:
    """Run a program to its end, alone."""
    environment = {**os.environ, **(ONE_THREAD if one_thread else {})}
    start, peak = time.perf_counter(), 0.0
    with tempfile.TemporaryFile() as out, tempfile.TemporaryFile() as said:
        process = subprocess.Popen(list(arguments), env=environment, stdout=out, stderr=said)
        while (ended := os.wait4(process.pid, os.WNOHANG))[0] == 0:
            peak = max(peak, _peak_of(process.pid))
            time.sleep(0.005)
        wall = time.perf_counter() - start
        process.returncode = os.waitstatus_to_exitcode(ended[1])
        out.seek(0)
        said.seek(0)
        assert process.returncode in ok, said.read().decode()
        output = out.read().decode()
    return Ran(processor=ended[2].ru_utime + ended[2].ru_stime, wall=wall, peak=peak, output=output)


def _peak_of(pid: int) -> float:
    """Peak memory of a running program [MB]; what wait4 tells would count the memory of this one too."""
    try:
        status = Path(f"/proc/{pid}/status").read_text()
    except (FileNotFoundError, ProcessLookupError):
        return 0.0
    lines = (line.split() for line in status.splitlines())
    return max((float(words[1]) / 1024.0 for words in lines if words and words[0] == "VmHWM:"), default=0.0)


def python(code: str, *, one_thread: bool = True) -> Ran:
    """Run Python code that may import from the tests and from this folder."""
    paths = [str(TESTS), str(Path(__file__).parent)]
    head = f"import sys; sys.path[:0] = {paths!r}\n"
    return program([sys.executable, "-c", head + code], one_thread=one_thread)


def exponent(sizes: Sequence[float], times: Sequence[float]) -> float:
    """Growth exponent between the first and the last size."""
    from math import log

    return log(times[-1] / times[0]) / log(sizes[-1] / sizes[0])
