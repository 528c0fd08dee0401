"""What does reading and checking a long table cost beside ``pandas.read_csv`` alone, and in how much memory?

A campaign of 10,000 points and 60 taps (about 6 MB): ``tapband.load`` reads, converts and checks every cell, and
finds all faults at once; pandas only parses. Then one point with 200,000 samples of 60 taps (100 MB), streamed.

*Answer* about four times the parsing; a long record needs no more memory than the imports.
"""

from __future__ import annotations

import tempfile
from dataclasses import dataclass
from pathlib import Path

import pandas as pd
from timing import Versus, interleaved, python
from written import write, write_samples

from tapband.files.load import load


@dataclass(frozen=True, slots=True, kw_only=True)
class Long:
    """Memory [MB] of the imports alone and with a long record read and reduced; size of its table [MB]."""

    imports: float
    peak: float
    table: float


def compare(points: int = 10_000, rounds: int = 3) -> Versus:
    """Loading the campaign against parsing its table of points."""
    with tempfile.TemporaryDirectory() as folder:
        path = write(Path(folder) / "campaign", points)
        return interleaved(lambda: load(path), lambda: pd.read_csv(path.with_name("points.csv")), rounds)


def long_record(samples: int = 200_000) -> Long:
    """One point with many samples through the whole reduction."""
    with tempfile.TemporaryDirectory() as folder:
        path = write_samples(Path(folder) / "campaign", samples)
        table = path.with_name("points.csv").stat().st_size / 1e6
        code = "from tapband.face import load, reduce\nimport pandas\n"
        imports = python(code).peak
        ran = python(f"{code}found = load({str(path)!r})\nreduce(found, trials=256)\n")
    return Long(imports=imports, peak=ran.peak, table=table)


def main() -> None:
    """Full size."""
    one = compare()
    print(
        f"10,000 rows: load {one.ours:.2f} s, pandas {one.theirs:.2f} s of processor, ratio {one.ratio:.1f}"
    )
    record = long_record()
    print(
        f"{record.table:.0f} MB of samples: peak {record.peak:.0f} MB, the imports alone {record.imports:.0f} MB"
    )


if __name__ == "__main__":
    main()
