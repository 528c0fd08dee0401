"""The command ``tapband``.

Exit status: 0 done, 1 done but a target is missed, 2 bad input, 70 a fault of ours, 130 interrupted.

Nothing heavy is imported before a command needs it, so that ``--help`` and ``--version`` answer at once.
"""

from __future__ import annotations

import sys
from collections.abc import Sequence

INTERRUPTED = 130
BAD_INPUT = 2
OUR_FAULT = 70


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command line (default: that of the process) and return its exit status."""
    try:
        return _run(sys.argv[1:] if arguments is None else list(arguments))
    except KeyboardInterrupt:
        return _interrupted()
    except BrokenPipeError:
        _drop_output()
        return 0
    except Exception as error:
        return _failed(error)


def _run(arguments: list[str]) -> int:
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):  # a terminal without Unicode shows "?" instead of failing
            stream.reconfigure(errors="replace")
    from tapband.cli.app import app

    status = app(arguments, prog_name="tapband", standalone_mode=False)
    sys.stdout.flush()
    return _interrupted() if status == INTERRUPTED else int(status or 0)


def _interrupted() -> int:
    print("tapband: interrupted; nothing is left half-written", file=sys.stderr)
    return INTERRUPTED


def _failed(error: Exception) -> int:
    from tapband.files.write_text import printable
    from tapband.nouns.errors import TapbandError

    if isinstance(error, TapbandError):
        print(printable(str(error)), file=sys.stderr)
        return BAD_INPUT
    if hasattr(error, "format_message"):  # a usage error of the command-line parser
        context = getattr(error, "ctx", None)
        command = context.command_path if context else "tapband"
        message = printable(error.format_message()).strip().rstrip(".")
        print(f"{command}: {message}; see '{command} --help'", file=sys.stderr)
        return BAD_INPUT
    if type(error).__name__ == "Abort":
        return _interrupted()
    import traceback

    traceback.print_exception(error)
    print("tapband: this is a fault of tapband, not of your input", file=sys.stderr)
    return OUR_FAULT


def _drop_output() -> None:
    """The reader of a pipe has gone; nothing more is written, and Python's own flush at exit stays quiet."""
    import os

    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
