"""The campaign file, part two: questions between points, and planning; then the file as a whole."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from tapband.files.fields import Pair, Part, Quantity, Text, example
from tapband.files.model import (
    Acts,
    IntervalsPart,
    ReadingsPart,
    ReductionPart,
    SectionPart,
    SourcePart,
    StatedPart,
    StreamPart,
    TapsPart,
)  # fmt: skip

COEFFICIENT = Literal["cn", "ct", "cm", "cl", "cd_pressure"]


class PolarPart(Part):
    """How polars are read."""

    linear_range: Pair | None = example(
        ["-4 deg", "6 deg"],
        "Angles for slope, zero lift and aerodynamic centre; found where absent.",
        default=None,
    )
    same_angle: Quantity = example("0.1 deg", "What counts as one angle.", default="0.1 deg")


class LimitPart(Part):
    """A decision about the measured value of a coefficient."""

    coefficient: COEFFICIENT = example("cm", "The coefficient judged.")
    lower: float | None = example(-0.06, "Lowest value that conforms.", default=None)
    upper: float | None = example(0.0, "Highest value that conforms.", default=None)
    guard: float = example(1.0, "Guard band in units of U; 0 is simple acceptance.", default=1.0, ge=0.0)
    alpha_range: Pair | None = example(["0 deg", "0 deg"], "Angles it holds at.", default=None)
    points: list[Text] | None = example(["a01"], "Points it holds at.", default=None)


class ForecastPart(Part):
    """A test to come."""

    alpha: Annotated[list[Quantity], Field(min_length=1)] = example(["-4 deg", "0 deg"], "Angles.")
    p_total: Quantity = example("101.3 kPa", "Total pressure.")
    t_total: Quantity | None = example("293 K", "Total temperature.", default=None)
    mach: float = example(0.15, "Mach number.", gt=0.0, lt=1.0)
    pressures: Text = example(
        "inviscid", "inviscid, or a table of expected Cp: alpha, then a column a tap.", default="inviscid"
    )
    margin: Quantity = example("20 %", "Margin on the range each tap sees.", default=0.0)
    fluctuation: Text | None = example(
        "2 % of dynamic pressure", "Standard deviation of the readings in time.", default=None
    )
    time_scale: Quantity | None = example("0.05 s", "Integral time scale of the fluctuation.", default=None)
    record: Quantity | None = example("10 s", "Length of the record of a point.", default=None)


class TargetPart(Part):
    """The largest expanded uncertainty wanted."""

    coefficient: COEFFICIENT = example("cl", "The coefficient.")
    expanded: float = example(0.005, "Largest expanded uncertainty, at the level of the intervals.", gt=0.0)
    alpha_range: Pair | None = example(["-4 deg", "8 deg"], "Angles it holds at.", default=None)
    points: list[Text] | None = example(["a01"], "Points it holds at.", default=None)


class OptionSourcePart(StatedPart):
    """A source as an option would have it; what is not stated is taken from the source it replaces."""

    acts_on: Acts | None = example("tap pressure", "As in a source.", default=None)
    across_points: Text | None = example("by run", "As in a source.", default=None)


class OptionPart(Part):
    """One choice of a slot."""

    name: Text = example("7 kPa range, two modules", "Name, once in its slot.")
    cost: float = example(9000.0, "Cost, in any currency.", ge=0.0)
    full_scale: Quantity | None = example("7 kPa", "Largest magnitude of its range.", default=None)
    sources: list[OptionSourcePart] = example(
        [{"name": "module zero", "limits": "0.03 % of full scale"}], "The sources it puts in place."
    )


class SlotPart(Part):
    """A choice to be made."""

    name: Text = example("pressure scanner", "Name, once only.")
    replaces: Annotated[list[Text], Field(min_length=1)] = example(
        ["module zero", "port zero"], "The sources that the options put others in place of."
    )
    option: Annotated[list[OptionPart], Field(min_length=1)] = example(
        [{"name": "7 kPa range", "cost": 9000.0, "sources": []}], "The options."
    )


class LayoutPart(Part):
    """A tap layout to be found."""

    taps: int = example(31, "Number of taps.", ge=5, le=2000)
    smallest_spacing: Quantity = example("2 mm", "Smallest distance between taps.", default=0.0)
    rearmost: float = example(0.97, "Place of the last tap, x/c.", default=1.0, gt=0.0, le=1.0)
    fixed: list[Text] = example(["U01"], "Taps that stay where they are.", default_factory=list)


class WiringPart(Part):
    """Modules to wire taps to."""

    modules: int = example(4, "Number of modules.", ge=1, le=1000)
    ports: int = example(16, "Ports of each.", ge=1, le=10000)


_SOURCE = {
    "name": "flow angle", "acts_on": "angle", "standard": "0.03 deg", "across_points": "common",
}  # fmt: skip
_SLOT = {
    "name": "pressure scanner", "replaces": ["module zero"],
    "option": [{"name": "7 kPa range", "cost": 9000.0, "sources": []}],
}  # fmt: skip


class CampaignPart(Part):
    """A campaign file of tapband."""

    format: Literal[1] = example(1, "Version of this format.")
    title: str = example("Section B, entry 2", "Title of the report.", default="")
    section: SectionPart = example({"contour": "contour.csv", "chord": "400 mm"}, "The section under test.")
    taps: TapsPart = example({"table": "taps.csv"}, "The pressure taps.")
    readings: ReadingsPart = example(
        {"table": "points.csv", "pressures": "relative to vacuum"}, "The tap readings."
    )
    stream: StreamPart = example({"from": "total and static"}, "Where the stream comes from.")
    reduction: ReductionPart = example(
        {"integration": "contour-cubic"}, "How pressures become coefficients.", default=ReductionPart()
    )
    intervals: IntervalsPart = example({"level": 0.95}, "Level and trials.", default=IntervalsPart())
    source: list[SourcePart] = example([_SOURCE], "The declared error sources.", default_factory=list)
    polar: PolarPart = example({"same_angle": "0.1 deg"}, "How polars are read.", default=PolarPart())
    limit: list[LimitPart] = example(
        [{"coefficient": "cm", "upper": 0.0}], "Decisions.", default_factory=list
    )
    forecast: ForecastPart | None = example(
        {"alpha": ["0 deg"], "p_total": "101.3 kPa", "mach": 0.15}, "A test to come.", default=None
    )
    target: list[TargetPart] = example(
        [{"coefficient": "cl", "expanded": 0.005}], "Largest uncertainties wanted.", default_factory=list
    )
    slot: list[SlotPart] = example([_SLOT], "Choices to be made.", default_factory=list)
    layout: LayoutPart | None = example({"taps": 31}, "A tap layout to be found.", default=None)
    wiring: WiringPart | None = example({"modules": 4, "ports": 16}, "Modules to wire to.", default=None)
