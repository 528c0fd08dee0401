"""The timed campaign as files, for whole commands: the same taps, points and sources as ``budgets.normal``."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from budgets import polar

HEAD = """format = 1
title = "Exact flow about a 12 % section"

[section]
contour = "contour.csv"
chord = "400 mm"
moment_centre = 0.25

[taps]
table = "taps.csv"

[readings]
table = "points.csv"
pressures = "relative to static"

[stream]
from = "total and static"

[intervals]
trials = "{trials}"
"""
SOURCES = (
    ("port zero", "tap pressure", "4 Pa", "independent", "independent"),
    ("module zero", "tap pressure", "1.7 Pa", "by module", "by run"),
    ("module gain", "tap pressure", "0.05 % of reading", "by module", "common"),
    ("tap location", "tap location", "0.05 mm", "independent", "common"),
    ("total", "total pressure", "8 Pa", "", "independent"),
    ("static", "static pressure", "6 Pa", "", "by run"),
    ("angle", "angle", "0.03 deg", "", "common"),
)


def write(folder: Path, points: int, taps: int = 60, trials: str = "auto") -> Path:
    """Write the tables and the campaign file, whose path is returned."""
    made = polar(points, taps)
    assert made.points is not None
    folder.mkdir(parents=True, exist_ok=True)
    contour = "".join(f"{x:.9f},{y:.9f}\n" for x, y in zip(made.section.x, made.section.y, strict=True))
    (folder / "contour.csv").write_text("x,y\n" + contour)
    rows = zip(made.taps.names, made.taps.x, made.taps.y, made.taps.columns["module"], strict=True)
    places = "".join(f"{name},{x:.9f},{y:.9f},{module}\n" for name, x, y, module in rows)
    (folder / "taps.csv").write_text("tap,x,y,module\n" + places)
    head = ["run", "point", "alpha [deg]", "p_total [Pa]", "p_static [Pa]"]
    head += [f"{name} [Pa]" for name in made.taps.names]
    channels = [
        np.degrees(made.points.alpha),
        made.points.channels["p_total"],
        made.points.channels["p_static"],
    ]
    values = np.column_stack([*channels, made.points.readings])
    with (folder / "points.csv").open("w") as table:
        table.write(",".join(head) + "\n")
        for run, name, row in zip(made.points.runs, made.points.names, values, strict=True):
            table.write(f"{run},{name}," + ",".join(f"{value:.4f}" for value in row) + "\n")
    text = HEAD.format(trials=trials) + "".join(_source(*one) for one in SOURCES)
    (folder / "campaign.toml").write_text(text)
    return folder / "campaign.toml"


def _source(name: str, acts_on: str, standard: str, across_taps: str, across_points: str) -> str:
    taps = f'across_taps = "{across_taps}"\n' if across_taps else ""
    return (
        f'\n[[source]]\nname = "{name}"\nacts_on = "{acts_on}"\nstandard = "{standard}"\n{taps}'
        f'across_points = "{across_points}"\n'
    )


def write_samples(folder: Path, samples: int, taps: int = 60) -> Path:
    """One point with so many rows, each tap with noise of its own; the campaign file's path is returned."""
    path = write(folder, 1, taps)
    table = path.with_name("points.csv")
    head, row = table.read_text().splitlines()
    start = row.split(",")[:-taps]
    mean = np.array(row.split(",")[-taps:], dtype=np.float64)
    rng = np.random.default_rng(1)
    with table.open("w") as out:
        out.write(head + "\n")
        for _ in range(0, samples, 1_000):
            readings = mean + rng.normal(0.0, 5.0, (1_000, taps))
            out.writelines(
                ",".join([*start, *(f"{value:.2f}" for value in line)]) + "\n" for line in readings.tolist()
            )
    return path
