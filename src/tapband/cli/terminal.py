"""What people see while they wait: a progress line on a terminal, nothing in a pipe."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from time import monotonic
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rich.console import Console
    from rich.progress import Progress
    from rich.table import Table

WAIT = 0.7
"""Seconds before a progress line appears; shorter work shows none."""
LEAST, WIDTH = 60, 80


def output() -> Console:
    """Standard output, 60 to 80 columns; colours only on a terminal, and none with ``NO_COLOR``."""
    from rich.console import Console

    class Output(Console):
        def on_broken_pipe(self) -> None:
            """Leave it to the command, whose work is done, to end."""
            raise BrokenPipeError

    wide = Console(file=sys.stdout, highlight=False)
    return Output(file=sys.stdout, highlight=False, width=max(LEAST, min(wide.width, WIDTH)))


def print_table(console: Console, table: Table) -> None:
    """Print a table at its full 80 columns: a narrower terminal wraps it, and no column is lost."""
    narrow, console.width = console.width, max(console.width, WIDTH)
    console.print(table)
    console.width = narrow


class ProgressLine:
    """Called as ``progress(done, total, doing)`` by long work; draws on standard error."""

    def __init__(self) -> None:
        self._bar: Progress | None = None
        self._tasks: dict[str, int] = {}
        self._start = monotonic()

    def __call__(self, done: float, total: float, doing: str = "reducing") -> None:
        """Say how far the work has come."""
        if self._bar is None and monotonic() - self._start < WAIT:
            return
        bar = self._started()
        if doing not in self._tasks:
            self._tasks[doing] = bar.add_task(doing, total=total)
        bar.update(self._tasks[doing], completed=done, total=total)  # type: ignore[arg-type]

    def _started(self) -> Progress:
        if self._bar is None:
            from rich.console import Console
            from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn, TimeRemainingColumn

            columns = (
                TextColumn("{task.description}", markup=False), BarColumn(), TaskProgressColumn(),
                TimeRemainingColumn(), TextColumn("left"),
            )  # fmt: skip
            self._bar = Progress(*columns, console=Console(file=sys.stderr), transient=True)
            self._bar.start()
        return self._bar

    def close(self) -> None:
        """Take the line off the terminal."""
        if self._bar is not None:
            self._bar.stop()


@contextmanager
def progress(quiet: bool) -> Iterator[ProgressLine | None]:
    """A progress line where someone watches, else None."""
    if quiet or not sys.stderr.isatty():
        yield None
        return
    line = ProgressLine()
    try:
        yield line
    finally:
        line.close()
