"""Cp only: readings that are pressure coefficients already, as a report or another program gives them.

Then the stream is known by its Mach number alone, and every error of a tap is stated in Cp.
"""

from math import cos, pi
from pathlib import Path
from tempfile import TemporaryDirectory

import tapband

CAMPAIGN = """
format = 1
title = "Pressure coefficients from a report"
section = { contour = "contour.csv", chord = "1 m" }
taps = { table = "taps.csv" }
readings = { table = "points.csv", pressures = "pressure coefficient" }
stream = { from = "mach" }

[[source]]
name = "Cp as reported"
acts_on = "tap coefficient"
limits = 0.005
across_taps = "independent"
across_points = "independent"
"""
stations = [0.5 * (1 + cos(2 * pi * i / 80)) for i in range(81)]
outline = [(x, (0.2 if i > 40 else -0.2) * x**0.5 * (1 - x)) for i, x in enumerate(stations)]
places = [(f"{side[0]}{i}", side, (i / 9) ** 2 * 0.96) for side in ("lower", "upper") for i in range(1, 10)]
cp = {tap: (0.3 if side == "lower" else -1.2) * (1 - x) + 0.1 * x for tap, side, x in places}

with TemporaryDirectory() as name:
    folder = Path(name)
    (folder / "campaign.toml").write_text(CAMPAIGN)
    (folder / "contour.csv").write_text("x,y\n" + "".join(f"{x:.6f},{y:.6f}\n" for x, y in outline))
    (folder / "taps.csv").write_text("tap,surface,x\n" + "".join(f"{t},{s},{x:.4f}\n" for t, s, x in places))
    row = ",".join(f"{value:.4f}" for value in cp.values())
    (folder / "points.csv").write_text(f"point,alpha [deg],mach,{','.join(cp)}\nA,4.0,0.2,{row}\n")
    results = tapband.reduce(tapband.load(folder / "campaign.toml"))

print(results)
budget = results.budget.query("coefficient == 'cl'")
print(budget[["source", "contribution", "share"]].to_string(index=False))
