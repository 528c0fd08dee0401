"""What the report shows of each table that a question or a plan leaves."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from tapband.report.parts import Column, amount, angle, between, interval, number, percent, text, with_unit

LAYOUT: Mapping[str, tuple[str, tuple[str, ...]]] = {
    "decisions": ("Decisions", ("decisions",)),
    "between": ("Between points", ("differences", "fits", "repeats", "regions")),
    "planned": ("Planned against achieved", ("planned",)),
}
"""Sections of the report of a reduction, by anchor: title and tables."""

SHOWN: Mapping[str, tuple[str, str, Sequence[Column]]] = {
    "decisions": (
        "Limits on the measured value",
        "Probability that the value lies within its limits, and the answer by the guard band (JCGM 106).",
        (
            text("run"), text("point"), text("coefficient"), interval("value"),
            number("lower"), number("upper"),
            percent("probability", "probability"), text("rule"), text("answer"),
        ),
    ),
    "differences": (
        "Differences",
        "First side less second; what the two share cancels. Beside it, the standard uncertainty that would "
        "stand if nothing were shared.",
        (
            text("a"), text("b"), text("coefficient"),
            angle("alpha_a", "α a [deg]"), angle("alpha_b", "α b [deg]"),
            interval("difference"), number("u_if_independent", "u if independent", 2), text("significant"),
            text("remaining", "what remains"),
        ),
    ),
    "fits": (
        "Polar fits",
        "Weighted by the random part alone, so that shared errors do not bias a slope; covariance in full. "
        "Angles in degrees, slope per degree. A star: the interval is that of Monte Carlo.",
        (
            text("run"), text("config"), text("quantity"), interval("value"), number("points_used", "points"),
            text("note"),
        ),
    ),
    "repeats": (
        "Repeats",
        "Scatter of repeated points against the sources that change between them, and no others.",
        (
            text("config"), angle("alpha", "α [deg]"), text("coefficient"), number("n"),
            number("scatter", "scatter", 2), number("predicted", "predicted", 2), number("dof", "ν"),
            number("chi2", "χ²"), number("p", "p", 2), text("verdict"),
        ),
    ),
    "regions": (
        "Joint regions",
        "Ellipses that hold two coefficients together at the level of the intervals (JCGM 102).",
        (
            text("run"), text("point"), text("a"), text("b"), number("k"), number("semi_major", "", 2),
            number("semi_minor", "", 2), angle("tilt", "tilt [deg]"), text("method"),
        ),
    ),
    "planned": (
        "Half-widths",
        "What the forecast promised and what the readings gave; a ratio under one is better than planned.",
        (
            text("run"), text("point"), angle("alpha", "α [deg]"), text("coefficient"),
            number("planned_U", "planned", 2), number("achieved_U", "achieved", 2), number("ratio"),
        ),
    ),
    "targets": (
        "Targets",
        "Half-width of the headline interval at each point against what is asked.",
        (
            text("run"), text("point"), text("coefficient"), number("U", "half-width", 2), number("target"),
            percent("ratio", "of target"), text("met"),
        ),
    ),
    "ranges": (
        "Ranges",
        "Pressures each tap will see, margin and fluctuation included, against its full scale.",
        (
            text("tap"), between("lowest", "highest", "will see [Pa]"),
            number("full_scale", "full scale [Pa]", 4),
            percent("utilisation", "used"), text("saturates"),
        ),
    ),
    "allowances": (
        "Allowances",
        "The largest standard uncertainty of a source, all others as declared, that meets every target.",
        (
            text("source"), with_unit("declared", "declared"), with_unit("allowed", "allowed"),
            number("headroom"), text("binding_point", "binds at"), text("binding_coefficient", "in"),
            with_unit("equal_contribution", "all together, equal"),
            with_unit("least_cost", "all together, cheapest"), text("reason"),
        ),
    ),
    "options": (
        "Options",
        "Every option of every slot: whether the expected readings fit its range, and whether it is chosen.",
        (
            text("slot"), text("option"), amount("cost"), number("full_scale", "full scale [Pa]", 4),
            text("eligible"), text("chosen"), text("reason"),
        ),
    ),
    "selection": (
        "Selection",
        "The cheapest set of options that meets every target at every point.",
        (text("slot"), text("option"), amount("cost")),
    ),
    "frontier": ("Cost against interval", "Every set that no cheaper one beats.", ()),
    "wirings": (
        "Wirings compared",
        "The widest interval over its target with the taps wired so, linearised; as wired, where that fits.",
        (
            text("wiring"), number("worst_ratio", "widest over target", 4),
            text("binding_coefficient", "in"), text("binding_point", "at"),
        ),
    ),
    "layouts": (
        "Layouts compared",
        "By number of taps: the widest linearised interval, and the worst true root mean square error that taps "
        "make in inviscid flow round this section, both over their targets.",
        (
            number("taps", "taps", 3), text("layout"), number("worst_ratio", "widest interval"),
            number("rms_error_ratio", "worst error"),
        ),
    ),
    "averaging": (
        "Averaging",
        "Standard uncertainty that the fluctuation leaves in one instant and in the mean of a record, taps swinging "
        "independently; the shortest record that keeps the target; points at each of two conditions that show a "
        "difference as large as the target, nine times in ten.",
        (
            text("point"), text("coefficient"), number("u_single", "u, instant", 2),
            number("u_mean", "u, record", 2), number("record_needed", "record needed [s]"),
            number("samples_needed", "independent samples", 4), number("repeats_needed", "points", 3),
        ),
    ),
    "wiring": (
        "Wiring",
        "The assignment of taps to modules with the smallest widest interval.",
        (text("tap"), text("module")),
    ),
    "layout": (
        "Tap layout",
        "Positions found for the number of taps asked for.",
        (text("tap"), text("surface"), number("x", "x/c", 4), number("y", "y/c", 4)),
    ),
}  # fmt: skip
"""Title, note and columns of each table."""
