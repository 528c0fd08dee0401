"""The command ``tapband``.

Exit status: 0 done, 1 done but a target is missed, 2 bad input or no room for the output,
70 a fault of ours, 130 interrupted.

Nothing heavy is imported before a command needs it, so that ``--help`` and ``--version`` answer at once.
"""

from __future__ import annotations

import codecs
import errno
import os
import sys
from collections.abc import Sequence

INTERRUPTED = 130
BAD_INPUT = 2
OUR_FAULT = 70
NO_ROOM = frozenset({errno.ENOSPC, errno.EDQUOT, errno.EFBIG, errno.EIO})
PLAIN = {"…": "..", "±": "+-", "\N{MINUS SIGN}": "-", "\N{EN DASH}": "-", "°": " deg", "×": "x", "·": "*"}
"""What a terminal without Unicode shows; every other letter it lacks becomes "?"."""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command line (default: that of the process) and return its exit status."""
    try:
        return _run(sys.argv[1:] if arguments is None else list(arguments))
    except KeyboardInterrupt:
        return _interrupted()
    except (BrokenPipeError, SystemExit):  # the parser of the command line turns the former into the latter
        _drop_output()
        return 0
    except Exception as error:
        return _failed(error)


def _plain(error: UnicodeError) -> tuple[str, int]:
    if not isinstance(error, UnicodeEncodeError):
        raise error
    lost = error.object[error.start : error.end]
    return "".join(PLAIN.get(letter, "?") for letter in lost), error.end


codecs.register_error("tapband.plain", _plain)


def _run(arguments: list[str]) -> int:
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="tapband.plain")
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
    if isinstance(error, OSError) and error.errno in NO_ROOM:
        _drop_output()
        reason = (error.strerror or "no reason given").lower()
        print(f"tapband: the output cannot be written ({reason}); write it elsewhere", file=sys.stderr)
        return BAD_INPUT
    import traceback

    traceback.print_exception(error)
    print("tapband: this is a fault of tapband, not of your input", file=sys.stderr)
    return OUR_FAULT


def _drop_output() -> None:
    """Nobody reads on, or there is no room: nothing more is written, and the flush at exit stays quiet."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
