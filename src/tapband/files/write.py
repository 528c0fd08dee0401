"""Results on disk: a folder with every table, ``results.json``, what covariances need, and further files."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Protocol

import numpy as np

from tapband.files.write_excel import write_excel
from tapband.files.write_folder import MARKER, replacing
from tapband.files.write_json import json_text
from tapband.files.write_tables import write_csv, write_parquet
from tapband.nouns.version import VERSION

if TYPE_CHECKING:
    import pandas as pd

LATENTS = "latents.npz"
WORKBOOK = "results.xlsx"


class Outcome(Protocol):
    """What a result holds, as far as writing it goes."""

    @property
    def tables(self) -> Mapping[str, pd.DataFrame]:
        """Tables by file name without ending."""
        ...

    @property
    def meta(self) -> Mapping[str, object]:
        """Kind, level, seed, versions, input hashes, warnings and the like."""
        ...

    @property
    def arrays(self) -> Mapping[str, np.ndarray]:
        """What covariances between points are computed from."""
        ...


def write(
    results: Outcome,
    folder: str | Path,
    excel: bool = False,
    parquet: bool = False,
    also: Mapping[str, Callable[[Path], None]] | None = None,
    progress: Callable[[int, int, str], None] | None = None,
) -> Path:
    """Write the results into ``folder`` whole or not at all, and return it.

    ``also`` names further files of the folder (``report.html``, ``figures/…``) and what writes each.
    ``progress`` is called with files written, files in all, and "writing".
    """
    folder = Path(folder)
    jobs = _jobs(results, excel, parquet) | dict(also or {})
    with replacing(folder) as stage:
        for done, (name, job) in enumerate(jobs.items()):
            if progress is not None:
                progress(done, len(jobs), "writing")
            (stage / name).parent.mkdir(parents=True, exist_ok=True)
            job(stage / name)
        text = json_text(VERSION, [*jobs, MARKER], results.meta, results.tables)
        (stage / MARKER).write_text(text, encoding="utf-8")
    return folder


def _jobs(results: Outcome, excel: bool, parquet: bool) -> dict[str, Callable[[Path], None]]:
    jobs: dict[str, Callable[[Path], None]] = {}
    for name, frame in results.tables.items():
        jobs[f"{name}.csv"] = partial(write_csv, name=name, frame=frame)
        if parquet:
            jobs[f"{name}.parquet"] = partial(write_parquet, name=name, frame=frame)
    if excel:
        jobs[WORKBOOK] = partial(write_excel, tables=results.tables, meta=results.meta)
    if results.arrays:
        jobs[LATENTS] = partial(write_arrays, arrays=results.arrays)
    return jobs


def write_arrays(path: Path, arrays: Mapping[str, np.ndarray]) -> None:
    """Store arrays under any names; nothing in the file is ever executed on reading."""
    names = np.array(json.dumps(list(arrays)))
    numbered = {f"array_{i}": np.asarray(array) for i, array in enumerate(arrays.values())}
    np.savez_compressed(path, allow_pickle=False, names=names, **numbered)
