"""The starter campaign: complete, runnable, of our own invention; its comments teach the file format.

The files stand beside this module in ``starter``; ``studies/starter_readings.py`` computes their readings.
"""

from __future__ import annotations

import os
import secrets
import shutil
from importlib.resources import as_file, files
from pathlib import Path

from tapband.nouns.errors import Fault, InputError

FILES = ("campaign.toml", "contour.csv", "taps.csv", "points.csv")


def write_starter(folder: Path) -> None:
    """Write the starter campaign into a new or empty folder, whole or not at all.

    Raises :class:`InputError` where the folder holds anything or cannot be written; nothing is overwritten.
    """
    target = folder.expanduser().resolve()
    if target.is_dir():
        if any(target.iterdir()):
            raise _refusal(folder, "must be a new or an empty folder", "one that holds files")
    elif target.exists() or target.is_symlink():
        raise _refusal(folder, "must be a new or an empty folder", "a file")
    stage = target.parent / f".{target.name}.tapband-{os.getpid()}-{secrets.token_hex(4)}"
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        stage.mkdir()
        _fill(stage)
        if target.is_dir():
            target.rmdir()
        stage.rename(target)
    except OSError as error:
        raise _refusal(folder, "must be writable", error.strerror or str(error)) from error
    finally:
        shutil.rmtree(stage, ignore_errors=True)


def _fill(stage: Path) -> None:
    with as_file(files("tapband.files") / "starter") as shipped:
        for name in FILES:
            (stage / name).write_bytes((shipped / name).read_bytes())


def _refusal(folder: Path, rule: str, got: str) -> InputError:
    return InputError([Fault(where=str(folder), rule=rule, got=got, do="name another folder")])
