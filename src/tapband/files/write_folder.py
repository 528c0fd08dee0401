"""A folder of results, written whole or not at all.

Everything is written into a hidden folder beside the target and renamed over it at the end. A killed process
leaves the old result, the new one, or a hidden folder that the next run clears away.
"""

from __future__ import annotations

import json
import os
import re
import secrets
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from tapband.nouns.errors import Fault, InputError

MARKER = "results.json"
_HEAD = re.compile(r'\{"tapband":"[^"]*","format":\d+,"files":')
_HEAD_BYTES = 65_536


def check_target(folder: Path) -> None:
    """Refuse a target that exists and is not a folder of ours, or that cannot be written."""
    if folder.is_dir():
        if any(folder.iterdir()) and files_of(folder) is None:
            rule = "an existing folder is replaced only if tapband wrote it"
            raise _refusal(folder, rule, f"no {MARKER} of ours")
    elif folder.exists() or folder.is_symlink():
        raise _refusal(folder, "must be a folder", "a file")


def files_of(folder: Path) -> tuple[str, ...] | None:
    """Names of the files that tapband wrote into the folder; None where it did not write the folder."""
    try:
        with (folder / MARKER).open(encoding="utf-8", errors="replace") as file:
            head = file.read(_HEAD_BYTES)
    except OSError:
        return None
    match = _HEAD.match(head)
    if match is None:
        return None
    try:
        names, _ = json.JSONDecoder().raw_decode(head, match.end())
    except ValueError:
        return ()
    return tuple(str(name) for name in names)


@contextmanager
def replacing(target: Path) -> Iterator[Path]:
    """Give an empty folder to write into; at the end of the block it stands at ``target``, whole.

    Files in an old result that tapband did not write are carried over. On any exception nothing changes.
    """
    target = target.resolve()
    check_target(target)
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        _clear_abandoned(target)
        stage = target.parent / f".{target.name}.tapband-{os.getpid()}-{secrets.token_hex(4)}"
        stage.mkdir()
    except OSError as error:
        raise _refusal(target, "the folder must be writable", error.strerror or str(error)) from error
    try:
        yield stage
        _carry_over(target, stage)
        _swap(stage, target)
    except OSError as error:
        raise _refusal(target, "the folder must be writable", error.strerror or str(error)) from error
    finally:
        shutil.rmtree(stage, ignore_errors=True)


def _swap(stage: Path, target: Path) -> None:
    if not target.exists():
        stage.rename(target)
        return
    old = stage.with_name(f"{stage.name}-old")
    target.rename(old)
    try:
        stage.rename(target)
    except BaseException:
        old.rename(target)
        raise
    shutil.rmtree(old, ignore_errors=True)


def _carry_over(target: Path, stage: Path) -> None:
    if not target.is_dir():
        return
    ours = {name.split("/")[0] for name in files_of(target) or ()} | {MARKER}
    for entry in target.iterdir():
        if entry.name in ours or (stage / entry.name).exists():
            continue
        if entry.is_dir() and not entry.is_symlink():
            shutil.copytree(entry, stage / entry.name, symlinks=True)
        else:
            shutil.copy2(entry, stage / entry.name, follow_symlinks=False)


def _clear_abandoned(target: Path) -> None:
    """Remove what a killed run left beside the target; a result it had just moved away comes back."""
    pattern = re.compile(re.escape(f".{target.name}.tapband-") + r"(\d+)-[0-9a-f]{8}(-old)?")
    for entry in target.parent.iterdir():
        match = pattern.fullmatch(entry.name)
        if match is None or _alive(int(match[1])):
            continue
        if match[2] and not target.exists():
            entry.rename(target)
        else:
            shutil.rmtree(entry, ignore_errors=True)


def _alive(process: int) -> bool:
    if os.name != "posix":  # elsewhere signal 0 is no harmless question
        return False
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except OSError:
        return True
    return True


def _refusal(folder: Path, rule: str, got: str) -> InputError:
    return InputError([Fault(where=str(folder), rule=rule, got=got, do="choose another --out")])
