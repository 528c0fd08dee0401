"""Samples: rows that repeat a point are its readings in time, and their scatter becomes a source of its own.

The mean of correlated samples is worse known than s/√n says; here the readings wander with a memory of about ten
rows, and the source "scatter of samples" takes that from batches of rows.
"""

from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import pandas as pd

import tapband
from tapband.files.starter import write_starter

with TemporaryDirectory() as name:
    folder = Path(name) / "demo"
    write_starter(folder)
    points = pd.read_csv(folder / "points.csv", comment="#")
    samples = pd.concat([points[points["point"] == "P03"]] * 400, ignore_index=True)

    # The dynamic pressure swings by 2 % with a memory of about ten rows; each tap adds noise of its own.
    rng, swing = np.random.default_rng(1), np.zeros(400)
    for i in range(1, 400):
        swing[i] = 0.9 * swing[i - 1] + rng.normal(0.0, 0.02 * (1 - 0.9**2) ** 0.5)
    taps = samples.columns[samples.columns.str.match(r"[NUL]\d\d")]
    samples[taps] = samples[taps].mul(1.0 + swing, axis=0) + rng.normal(0.0, 5.0, (400, len(taps)))
    samples.to_csv(folder / "points.csv", index=False)

    results = tapband.reduce(tapband.load(folder / "campaign.toml"))
    scatter = results.budget.query("source == 'scatter of samples' and coefficient in ['cl', 'cm']")
    print(scatter[["point", "coefficient", "contribution", "share", "dof"]].to_string(index=False))
    cl = results.coefficients.cl[0]
    print(f"0.02 cl / 20, as if the rows were independent: {0.02 * cl / 20:.4f}")
