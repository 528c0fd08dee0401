"""The campaign file, part one: what was tested, how it is reduced, and the error sources."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import ConfigDict, Discriminator, Tag

from tapband.files.acts import ACTS
from tapband.files.fields import Part, Quantity, Sizes, Text, example, names_of

INTEGRATIONS = Literal["contour-cubic", "contour-linear", "polygon"]
RULES = Literal["none", "prandtl-glauert", "karman-tsien", "laitone"]
SHAPES = Literal["rectangular", "triangular", "arcsine", "trapezoidal"]
STREAMS = Literal["total and static", "difference and static", "dynamic and mach", "mach"]


SHARING = {"pattern": "^(independent|common|by .+)$"}
Acts = Annotated[Any, *names_of(tuple(ACTS))]
"""One quantity or a list of them; read as a list."""


class SectionPart(Part):
    """The section under test."""

    contour: Text = example("contour.csv", "Table of the contour: x, y in order round the section.")
    chord: Quantity = example(
        "400 mm",
        "Chord. Turns lengths into fractions of the chord and gives the Reynolds number; nothing else.",
    )
    moment_centre: float = example(0.25, "Where the moment is taken about, x/c.", default=0.25)
    moment_arm: Literal["full", "chordwise"] = example(
        "full", "chordwise leaves out the lever of the tangential force.", default="full"
    )


class TapsPart(Part):
    """The pressure taps."""

    table: Text = example("taps.csv", "Table of the taps: tap, and x with surface, or x with y, or s.")
    excluded: list[Text] = example(["U07"], "Taps that are never used.", default_factory=list)


class ReadingsPart(Part):
    """The tap readings."""

    table: Text | None = example(
        "points.csv", "Table of the test points. May be left out where a forecast is stated.", default=None
    )
    pressures: Text = example(
        "relative to vacuum",
        "What the readings are relative to: relative to static, total, vacuum, or the name of an absolute "
        "column; or pressure coefficient.",
    )


class ChannelPart(Part):
    """A stream channel that hangs on a module, as one more port of it.

    Further keys are grouping columns of the tap table.
    """

    model_config = ConfigDict(strict=True, extra="allow", frozen=True)

    module: Text | None = example("M1", "The module this reading hangs on.", default=None)
    full_scale: Quantity | None = example(
        "7 kPa", "Largest magnitude of the range of this channel.", default=None
    )


class StreamPart(Part):
    """Where the state of the stream comes from."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True, populate_by_name=True)

    source: STREAMS = example("total and static", "The stream readings.", alias="from")
    channels: dict[str, ChannelPart] = example(
        {"p_static": {"module": "M1"}}, "Stream columns that share a module with taps.", default_factory=dict
    )


class ClosurePart(Part):
    """A stated pressure coefficient at the trailing edge."""

    cp: float = example(0.12, "Pressure coefficient at the trailing edge.")
    standard: float = example(0.03, "Its standard uncertainty.", ge=0.0)


Closure = Annotated[
    Annotated[Literal["rear taps", "extrapolate"], Tag("<rule>")] | Annotated[ClosurePart, Tag("<value>")],
    Discriminator(lambda value: "<value>" if isinstance(value, (dict, ClosurePart)) else "<rule>"),
]


class ReductionPart(Part):
    """How pressures become coefficients."""

    integration: INTEGRATIONS = example(
        "contour-cubic", "How Cp is taken between taps.", default="contour-cubic"
    )
    spacing: Literal["rule difference", "none"] = example(
        "rule difference", "The error term for the finite number of taps.", default="rule difference"
    )
    trailing_edge: Closure = example(
        "rear taps", "How the contour is closed behind the last taps.", default="rear taps"
    )
    compressibility: RULES = example(
        "none", "Rule that takes coefficients to the reference Mach number.", default="none"
    )
    reference_mach: float = example(
        0.0, "Mach number that the rule corrects to.", default=0.0, ge=0.0, lt=1.0
    )


class IntervalsPart(Part):
    """The level of the intervals and the Monte Carlo plan."""

    level: float = example(0.95, "Coverage probability.", default=0.95, gt=0.0, le=0.9999)
    trials: Quantity = example("auto", '"auto", a number, or "plain:N".', default="auto")
    seed: int = example(7, "Seed of the Monte Carlo draws.", default=1, ge=0, lt=2**63)


class StatedPart(Part):
    """What a source may state, whether it stands alone or replaces another."""

    name: Text = example("module zero", "Name, once only.")
    group: Text | None = example("scanner", "Sources of one group are ranked together.", default=None)
    standard: Quantity | None = example("20 Pa", "Standard uncertainty.", default=None)
    expanded: Sizes | None = example("40 Pa", "Expanded uncertainty, with k or level.", default=None)
    k: float | None = example(2.0, "Coverage factor of the expanded uncertainty.", default=None, gt=0.0)
    level: float | None = example(0.95, "Level of the expanded uncertainty.", default=None, gt=0.0, lt=1.0)
    limits: Sizes | None = example(
        "0.03 % of full scale", "Half-width of the limits; a list adds absolute values.", default=None
    )
    lower: Quantity | None = example("0 Pa", "Lower limit of the true value less the reading.", default=None)
    upper: Quantity | None = example("15 Pa", "Upper limit of the true value less the reading.", default=None)
    resolution: Quantity | None = example("1 Pa", "The full step of the display.", default=None)
    shape: SHAPES | None = example("rectangular", "Distribution between the limits.", default=None)
    top: float | None = example(0.5, "Top over base of a trapezoidal shape.", default=None, ge=0.0, le=1.0)
    across_taps: Text | None = example(
        "by module",
        "independent, common, or by a column of the tap table.",
        default=None,
        json_schema_extra=SHARING,
    )
    full_scale: Quantity | None = example("7 kPa", "Largest magnitude of the range.", default=None)
    dof: float | None = example(9.0, "Degrees of freedom of the size.", default=None, gt=0.0)
    reliability: Quantity | None = example("25 %", "Relative doubt in the size itself.", default=None)


class SourcePart(StatedPart):
    """An error source."""

    acts_on: Acts = example(
        "tap pressure", "The quantity the error enters, or a list where one error enters several."
    )
    across_points: Text = example(
        "by run", "independent, common, or by a column of the points table.", json_schema_extra=SHARING
    )
