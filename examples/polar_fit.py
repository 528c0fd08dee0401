"""A polar fit: lift slope, zero-lift angle and aerodynamic centre with their intervals, and a figure.

Angle errors and errors common to the polar are carried into the fit; ``linear_range`` under ``[polar]`` of the
campaign file says which points are fitted.
"""

from pathlib import Path
from tempfile import TemporaryDirectory

import tapband
from tapband.files.starter import write_starter
from tapband.report import figures

with TemporaryDirectory() as name:
    folder = Path(name)
    write_starter(folder / "demo")
    results = tapband.reduce(tapband.load(folder / "demo" / "campaign.toml"))

    fits = results.fits[["run", "config", "quantity", "value", "U", "points_used", "note"]]
    wanted = fits["quantity"].isin(["cl_slope", "alpha_zero_lift", "aerodynamic_centre"])
    print(fits[wanted].to_string(index=False))

    # Scatter of repeats, held against the sources that change between them.
    repeats = results.repeats[["config", "alpha", "coefficient", "scatter", "predicted", "verdict"]]
    print(repeats.to_string(index=False))

    # Every figure of the report is a function that draws on an ax of yours, or makes one.
    ax = figures.coefficient(results, "cl")
    ax.figure.savefig(folder / "polar.svg")
    print((folder / "polar.svg").stat().st_size, "bytes of polar.svg")
