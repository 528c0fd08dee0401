"""Sources that a careful test would have and a campaign does not list."""

from __future__ import annotations

from tapband.nouns.campaign import Campaign

NO_WALL_CORRECTION = "No value is corrected for the walls of the tunnel."
NOT_TOTAL_DRAG = "cd_pressure is the drag of the pressures alone: taps do not see friction."


def undeclared(campaign: Campaign) -> tuple[str, ...]:
    """Each as one line that names the quantity and what its absence assumes (common practice, no source)."""
    acts = {act for source in campaign.sources for act in source.acts_on}
    reached = set(acts)
    if "tap pressure" in acts:
        ports = {
            "p_total": "total pressure",
            "p_static": "static pressure",
            "p_difference": "pressure difference",
        }
        reached |= {ports[name] for name in campaign.channels if name in ports}
    said = []
    coefficients = campaign.pressures == "pressure coefficient"
    if not reached & {"tap pressure", "tap coefficient"}:
        said.append("tap readings: taken as exact")
    if "angle" not in acts:
        said.append("angle of attack and flow angle: taken as exact")
    if not acts & {"tap location", "tap row"}:
        said.append("tap location: every tap and the row taken to sit exactly where the table says")
    elif "tap row" not in acts:
        said.append("tap row: the row as a whole taken to sit exactly where the table says")
    if not coefficients:
        said += _stream(campaign, reached)
    said += [
        text
        for word, text in (
            ("hole", "hole size, burrs and edge shape of the taps"),
            ("contour", "contour as built, against the table"),
            ("span", "spanwise uniformity of the flow"),
            ("wall", "walls of the tunnel: interference and blockage"),
            ("steady", "unsteadiness within a reading"),
        )
        if not any(word in source.name.lower() for source in campaign.sources)
    ]
    return tuple(said)


def _stream(campaign: Campaign, reached: set[str]) -> list[str]:
    needs = {
        "total and static": ("total pressure", "static pressure"),
        "difference and static": ("pressure difference", "static pressure"),
        "dynamic and mach": ("dynamic pressure", "mach"),
        "mach": ("mach",),
    }[campaign.stream]
    said = [f"{name}: taken as exact" for name in needs if name not in reached]
    if "dynamic pressure" not in reached and "mach" not in reached:
        said.append("calibration of the stream at the section against the readings of the tunnel")
    if campaign.pressures.removeprefix("relative to ") not in ("vacuum", "static", "total") and (
        "reference pressure" not in reached
    ):
        said.append("reference pressure of the taps: taken as exact")
    return said
