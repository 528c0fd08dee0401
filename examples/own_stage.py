"""A stage of one's own behind the chain: here a closed-wall correction, whose factor is known to 20 %.

Any function of arrays will do that is analytic (derivatives go by complex step). What comes out of the reduction
enters with its covariance; both propagators then run on it.
"""

from math import inf
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np

import tapband
from tapband.files.starter import write_starter
from tapband.nouns.problem import Family
from tapband.nouns.source import Shape
from tapband.probability.functional import equation
from tapband.probability.linearised import propagate
from tapband.probability.montecarlo import run

with TemporaryDirectory() as folder:
    write_starter(Path(folder) / "demo")
    results = tapband.reduce(tapband.load(Path(folder) / "demo" / "campaign.toml"))
point = results.coefficients.set_index("point").loc["P05"]
covariance = results.covariance("P05", "P05").loc[["cl", "cm"], ["cl", "cm"]].to_numpy()


def corrected(cl, cm, factor):
    """Lift terms of NACA Report 782 (from memory) for a chord of 0.35 m between walls 1.8 m apart."""
    s = factor * np.pi**2 / 48 * (0.35 / 1.8) ** 2
    return cl * (1 - s), cm + s * cl / 4


one = {"point_group": ("",), "scale_group": ("",), "dof": np.array([inf])}
reduced = Family(source="as reduced", members=("first", "second"), **one)
walls = Family(source="wall factor", members=("",), shape=Shape.RECTANGULAR, **one)
loading = [np.vstack([np.linalg.cholesky(covariance), np.zeros(2)]), [[0.0], [0.0], [0.2 / np.sqrt(3)]]]
stage = equation(corrected, [point.cl, point.cm, 1.0], [reduced, walls], loading, outputs=("cl", "cm"))
linear, drawn = propagate(stage, 0.95), run(stage, 0.95)
for j, name in enumerate(stage.outputs):
    share = linear.contribution[0, j, 1] / linear.u[0, j]
    print(f"{name}: {point[name]:.4f} becomes {linear.estimate[0, j]:.4f} ± {linear.U[0, j]:.4f}", end=", ")
    print(
        f"by Monte Carlo {drawn.low[0, j]:.4f} to {drawn.high[0, j]:.4f}; u of the walls over u: {share:.0%}"
    )
