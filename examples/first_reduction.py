"""A first reduction: from a campaign file to coefficients with their intervals, and a folder with a report.

The starter campaign stands for your own; ``tapband start DIR`` writes the same files.
"""

from pathlib import Path
from tempfile import TemporaryDirectory

import tapband
from tapband.files.starter import write_starter

with TemporaryDirectory() as folder:
    write_starter(Path(folder) / "demo")
    results = tapband.reduce(tapband.load(Path(folder) / "demo" / "campaign.toml"))

    # One row a point: the estimate, its expanded uncertainty, and whether Monte Carlo confirms the interval.
    print(results.coefficients[["point", "alpha", "cl", "cl_U", "cl_agrees", "cd_pressure", "cd_pressure_U"]])

    # What drives the interval of one coefficient at one point.
    budget = results.budget.query("point == 'P05' and coefficient == 'cl'")
    print(budget.nlargest(4, "share")[["source", "contribution", "share"]].to_string(index=False))

    # What to know before quoting a number.
    print(*results.warnings[:3], sep="\n")

    results.write(Path(folder) / "results")
    print(sorted(path.name for path in (Path(folder) / "results").iterdir()))
