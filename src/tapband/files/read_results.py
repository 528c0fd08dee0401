"""A written result brought back: tables, meta and the arrays that covariances need."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING
from zipfile import BadZipFile

import numpy as np

from tapband.files.write import LATENTS
from tapband.files.write_folder import MARKER
from tapband.files.write_json import FORMAT, tables_from
from tapband.nouns.errors import Fault, InputError

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True, slots=True, kw_only=True)
class ResultParts:
    """The parts of a written result; ``arrays`` is empty where none were stored."""

    tables: Mapping[str, pd.DataFrame]
    meta: Mapping[str, object]
    arrays: Mapping[str, np.ndarray]


def read(folder: str | Path) -> ResultParts:
    """The parts of the result in ``folder``; numbers come back bit for bit."""
    folder = Path(folder)
    content = _content(folder / MARKER)
    try:
        tables = tables_from(content.pop("tables"))
    except (KeyError, TypeError, ValueError, AttributeError) as error:
        raise _fault(folder / MARKER, "must hold tables as tapband writes them", repr(error)) from error
    for key in ("tapband", "files"):
        content.pop(key, None)
    return ResultParts(tables=tables, meta=content, arrays=_arrays(folder / LATENTS))


def _content(path: Path) -> dict[str, object]:
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise _fault(path, "must be a file that can be read", error.strerror or str(error)) from error
    except ValueError as error:
        raise _fault(path, "must be JSON", str(error)) from error
    if not isinstance(content, dict) or "tapband" not in content:
        raise _fault(path, "must be a result that tapband wrote", "something else")
    if content.get("format") != FORMAT:
        raise _fault(path, f"format must be {FORMAT}", json.dumps(content.get("format")))
    return content


def _arrays(path: Path) -> dict[str, np.ndarray]:
    if not path.exists():
        return {}
    try:
        with np.load(path, allow_pickle=False) as stored:
            names = json.loads(str(stored["names"]))
            return {name: stored[f"array_{i}"] for i, name in enumerate(names)}
    except (OSError, ValueError, KeyError, BadZipFile) as error:
        raise _fault(path, "must be arrays as tapband stores them", repr(error)) from error


def _fault(path: Path, rule: str, got: str) -> InputError:
    return InputError([Fault(where=str(path), rule=rule, got=got, do="name a folder that tapband wrote")])
