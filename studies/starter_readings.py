"""Where do the readings of the starter campaign come from, and do their errors stay within what it declares?

The section, the tunnel and the test are invented. The pressures are those of inviscid flow at a reduced angle
of attack, with the recovery at the rear flattened as a boundary layer would: enough to give a plausible
polar, and known exactly. Every error that ``campaign.toml`` declares is then drawn once, as declared.

Run without arguments: writes the tables of the starter campaign beside its campaign file. With ``--check``:
compares them with those there.
"""

from __future__ import annotations

import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tapband.experiment.contour import Contour
from tapband.experiment.inviscid import flow_round
from tapband.experiment.sections import four_digit

Array = NDArray[np.float64]
FOLDER = Path(__file__).parents[1] / "src" / "tapband" / "files" / "starter"
CHORD = 350.0
"""[mm]"""
FULL_SCALE = 7000.0
"""[Pa]"""
EXCLUDED, LOST = "L07", ("R1", "P05", "U13")
SAMPLED, SAMPLES = ("R1", "P03"), 24


@dataclass(frozen=True, slots=True, kw_only=True)
class Layout:
    """Taps (n,): names, x [chords], surfaces, modules, rows and arc lengths."""

    names: list[str]
    x: Array
    upper: NDArray[np.bool_]
    module: list[str]
    row: list[str]
    s: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class Point:
    """A test point as set: angle [deg], total pressure [Pa] and temperature [deg C]."""

    run: str
    name: str
    config: str
    alpha: float
    p_total: float
    t_total: float


def contour() -> tuple[Array, Array]:
    """The section: 14 % thick, 2.5 % camber at 0.42 chords, blunt; lower surface first, as tabulated."""
    x, y = four_digit(0.025, 0.42, 0.14, 161, closed=False)
    return np.round(x, 6), np.round(y, 6)


def layout(shape: Contour) -> Layout:
    """A tap at the nose, 22 above and 18 below, denser towards the nose; wired in blocks to four modules."""
    up = np.round(0.965 * (np.arange(1, 23) / 22) ** 1.9, 4)
    down = np.round(0.960 * (np.arange(1, 19) / 18) ** 1.9, 4)
    x = np.concatenate([[0.0], up, down])
    upper = np.arange(41) < 23
    names = ["N00", *(f"U{i:02d}" for i in range(1, 23)), *(f"L{i:02d}" for i in range(1, 19))]
    module = ["M1"] * 11 + ["M2"] * 12 + ["M3"] * 9 + ["M4"] * 9
    row = ["upper"] * 23 + ["lower"] * 18
    s = shape.place_x(x, upper)
    s[0] = 0.0
    return Layout(names=names, x=x, upper=upper, module=module, row=row, s=s)


def matrix() -> list[Point]:
    """Twelve points: a polar with a clean nose, then a repeat of one angle and four points with a trip."""
    first = [("clean", a) for a in (-4.0, -1.0, 2.0, 5.0, 8.0, 10.0, 12.0)]
    second = [("clean", 2.0), ("tripped", -1.0), ("tripped", 2.0), ("tripped", 5.0), ("tripped", 8.0)]
    points = []
    for run, part, pressure, warmth in (("R1", first, 101290.0, 21.4), ("R2", second, 100940.0, 22.8)):
        for i, (config, alpha) in enumerate(part):
            name = f"P{len(points) + 1:02d}"
            points.append(
                Point(
                    run=run, name=name, config=config, alpha=alpha,
                    p_total=pressure - 8.0 * i, t_total=warmth + 0.3 * i,
                )
            )  # fmt: skip
    return points


def true_cp(shape: Contour, s: Array, alpha: Array, tripped: NDArray[np.bool_], mach: float) -> Array:
    """Cp (P, n) at arc lengths s (P, n), angles [deg] (P,) and Mach number."""
    onset = np.where(tripped, 9.2, 10.2)
    past = np.logaddexp(0.0, (alpha - onset) / 0.9)
    lost = (0.040 + 0.012 * tripped) * (alpha + 3.5) + 1.1 * past
    flow = flow_round(shape, np.radians(alpha - lost))
    ideal = np.stack([flow.cp(row)[i] for i, row in enumerate(s)])
    x = shape.point(s)[0]
    start = np.where(s > 0.0, 0.75 - 0.12 * past[:, None], 0.85)
    flat = np.clip((x - start) / (1.0 - start), 0.0, 1.0) ** 2
    edge = (0.10 - 0.02 * tripped - 0.10 * past)[:, None]
    return np.asarray((ideal + flat * (edge - ideal)) / np.sqrt(1.0 - mach**2))


def draws(taps: Layout, points: list[Point], rng: np.random.Generator) -> dict[str, Array]:
    """One draw of every declared error, as true value less reading; shapes broadcast to (P, n) or (P,)."""
    size, count = len(points), len(taps.names)
    runs = np.array([0 if p.run == "R1" else 1 for p in points])
    module = np.array([int(m[1]) - 1 for m in taps.module])
    row = np.array([0 if r == "upper" else 1 for r in taps.row])
    zero = rng.uniform(-0.0003, 0.0003, (2, 4)) * FULL_SCALE
    port = rng.normal(0.0, 0.0001, (2, count + 1)) * FULL_SCALE
    gain = rng.normal(0.0, 0.0003, 4)
    return {
        "zero": zero[runs][:, module] + port[runs][:, :count],
        "zero_difference": zero[runs, 3] + port[runs, count],
        "gain": gain[module],
        "gain_difference": gain[3],
        "static": rng.normal(0.0, 1.5, 1),
        "location": rng.triangular(-0.15, 0.0, 0.15, count) / CHORD,
        "row": rng.normal(0.0, 0.10, 2)[row] / CHORD,
        "hole": rng.normal(0.0, 0.001, count),
        "barometer": rng.normal(0.0, 60.0 / 1.96, 1),
        "tunnel": rng.normal(0.0, 0.0015, 1),
        "unsteady": rng.normal(0.0, 0.0008, size),
        "flow_angle": rng.normal(0.0, 0.03, 1),
        "setting": 0.01 * (rng.uniform(-1.0, 1.0, size) + 0.5 * rng.uniform(-1.0, 1.0, size)),
        "twist": rng.triangular(0.0, 0.015, 0.03, 1) * np.ones(size),
        "noise": rng.normal(0.0, 1.0, (SAMPLES, count + 2)),
    }


def tables() -> dict[str, str]:
    """The three tables by file name."""
    x, y = contour()
    shape = Contour.of(x, y)
    taps, points = layout(shape), matrix()
    error = draws(taps, points, np.random.Generator(np.random.PCG64(20)))
    tangent = shape.tangent(taps.s)[0]
    shown = np.array([p.alpha for p in points]) + np.array([0.02, -0.01, 0.03, 0.0, -0.02, 0.01] * 2)
    alpha = shown + error["flow_angle"] + error["setting"] + error["twist"]
    place = taps.s + error["location"] + tangent * error["row"]
    mach = 0.14
    tripped = np.array([p.config == "tripped" for p in points])
    cp = true_cp(shape, np.tile(place, (len(points), 1)), alpha, tripped, mach) - error["hole"]
    total = np.array([p.p_total for p in points])
    static = total * (1.0 + 0.2 * mach**2) ** -3.5
    lines = [_points_head(taps)]
    for i, point in enumerate(points):
        sampled = (point.run, point.name) == SAMPLED
        noise = error["noise"] if sampled else np.zeros((1, len(taps.names) + 2))
        mismatch = error["tunnel"][0] + (0.0035 * noise[:, -1] if sampled else error["unsteady"][i])
        # Read is the dynamic pressure upstream; at the section it is larger by the errors of the calibration.
        difference = _difference(0.7 * static[i] * mach**2 / (1.0 + mismatch), static[i])
        channel = difference - error["zero_difference"][i] - error["static"]
        pressure = cp[i] * 0.7 * static[i] * mach**2 + 3.0 * noise[:, :-2]
        pressure = pressure - error["zero"][i] - error["static"]
        lines += _rows(
            point, shown[i], channel / (1.0 + error["gain_difference"]),
            static[i] - error["barometer"][0], pressure / (1.0 + error["gain"]), taps,
        )  # fmt: skip
    return {
        "contour.csv": _contour_text(x, y),
        "taps.csv": _taps_text(taps),
        "points.csv": "\n".join(lines) + "\n",
    }


def _difference(q: Array, static: float) -> Array:
    """Total minus static pressure [Pa] of a dynamic pressure [Pa]."""
    return np.asarray(static * ((1.0 + 0.2 * q / (0.7 * static)) ** 3.5 - 1.0))


def _contour_text(x: Array, y: Array) -> str:
    head = "# x and y in chords, from the lower trailing edge round the nose to the upper one.\nx,y\n"
    return head + "".join(f"{a:.6f},{b:.6f}\n" for a, b in zip(x, y, strict=True))


def _taps_text(taps: Layout) -> str:
    lines = [
        "# One row a tap: its name heads its readings in points.csv. No unit on x: fractions of the chord.",
        "# module and row are columns of our own that sources group by; upper and lower taps were drilled in",
        "# two settings of the model.",
        "tap,surface,x,module,full_scale [kPa],row",
    ]
    for i, name in enumerate(taps.names):
        surface = "upper" if taps.upper[i] else "lower"
        lines.append(f"{name},{surface},{taps.x[i]:.4f},{taps.module[i]},{FULL_SCALE / 1000:g},{taps.row[i]}")
    return "\n".join(lines) + "\n"


def _points_head(taps: Layout) -> str:
    columns = ["run", "point", "config", "alpha [deg]", "nominal_alpha [deg]", "nominal_mach"]
    columns += ["p_difference [Pa]", "p_static [kPa]", "t_total [degC]"]
    return (
        "# One row a test point; rows that repeat run and point are samples in time. NA: no reading.\n"
        "# Tap readings are relative to the static pressure of the stream.\n"
        + ",".join(columns + [f"{name} [Pa]" for name in taps.names])
    )


def _rows(
    point: Point, alpha: float, difference: Array, static: float, pressure: Array, taps: Layout
) -> list[str]:
    """Rows of one point; readings come in steps of 0.5 Pa."""
    rows = []
    for delta, taken in zip(np.round(2.0 * difference) / 2.0, np.round(2.0 * pressure) / 2.0, strict=True):
        readings = dict(zip(taps.names, (f"{v:.1f}" for v in taken), strict=True))
        # The tube of this tap leaks: it reads little more than half of what it should.
        readings[EXCLUDED] = f"{np.round(1.2 * float(readings[EXCLUDED])) / 2.0:.1f}"
        if (point.run, point.name) == LOST[:2]:
            readings[LOST[2]] = "NA"
        cells = [point.run, point.name, point.config, f"{alpha:.2f}", f"{point.alpha:g}", "0.14"]
        cells += [f"{delta:.1f}", f"{static / 1000.0:.3f}", f"{point.t_total:.1f}", *readings.values()]
        rows.append(",".join(cells))
    return rows


def main() -> int:
    """Write, or compare with what is there."""
    made = tables()
    if "--check" not in sys.argv:
        for name, text in made.items():
            (FOLDER / name).write_text(text, encoding="utf-8", newline="\n")
        return 0
    differing = [name for name, text in made.items() if (FOLDER / name).read_text(encoding="utf-8") != text]
    print("differs: " + ", ".join(differing) if differing else "the starter tables are those computed here")
    return len(differing)


if __name__ == "__main__":
    sys.exit(main())
