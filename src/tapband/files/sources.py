"""Declared sources: what they act on, how they are shared, and whether the tables bear it."""

from __future__ import annotations

from tapband.files.acts import ACTS, AUTOMATIC
from tapband.files.faults import RuleError, offer, shown
from tapband.files.full_scales import check_full_scale, own_full_scale
from tapband.files.model import StatedPart
from tapband.files.setting import Place, Setting
from tapband.files.sizes import Measured, read_size
from tapband.nouns.source import COMMON, INDEPENDENT, Source

_KINDS = ("by COLUMN", INDEPENDENT, COMMON)


def read_source(
    part: StatedPart,
    place: Place,
    setting: Setting,
    *,
    doubtful: bool = False,
    full_scale: float | None = None,
) -> Source | None:
    """The source, None with its faults noted. ``full_scale`` [Pa] is that of an option, which comes first."""
    findings = setting.folder.findings
    before = len(findings)
    if part.name in AUTOMATIC:
        findings.add(
            place.at("name"), "is reserved for a source that the program adds itself", shown(part.name),
            "choose another name",
        )  # fmt: skip
    acts = _acts(part, place, setting)
    own = own_full_scale(part, place, setting)
    across_points = _across_points(part, place, setting)
    if not acts:
        return None
    measured = Measured(acts=acts, arrangement=setting.arrangement, chord=setting.chord)
    size = read_size(part, measured, place.at, place.whole, findings, doubtful=doubtful)
    across_taps = _across_taps(part, acts, place, setting, doubtful=doubtful)
    _check_list(part, acts, across_taps, place, setting)
    if len(findings) > before or size is None:
        return None
    source = Source(
        name=part.name, group=part.group or part.name, acts_on=acts, size=size, across_taps=across_taps,
        across_points=across_points, full_scale=own if full_scale is None else full_scale, place=place.whole,
    )  # fmt: skip
    check_full_scale(source, place, setting)
    return source


def _acts(part: StatedPart, place: Place, setting: Setting) -> tuple[str, ...]:
    """The acts, empty where one is refused."""
    findings = setting.folder.findings
    before = len(findings)
    acts = tuple(getattr(part, "acts_on", None) or ())
    for act in acts:
        if act not in ACTS:
            findings.add(place.at("acts_on"), "must be a quantity of the chain", shown(act), offer(act, ACTS))
        elif reason := setting.arrangement.lacks(act):
            do = (
                'write "tap coefficient"'
                if act == "tap pressure"
                else "remove the source or change what it acts on"
            )
            findings.add(place.at("acts_on"), f"has nothing to act on: {reason}", shown(act), do)
    if len(findings) > before:
        return ()
    if len(set(acts)) < len(acts):
        findings.add(
            place.at("acts_on"), "must name each quantity once", shown(list(acts)), "remove the repeated one"
        )
    dimensions = {ACTS[act].dimension for act in acts}
    if len(dimensions) > 1:
        findings.add(
            place.at("acts_on"), "must name quantities of one dimension", shown(list(acts)),
            "split it into sources of one dimension each",
        )  # fmt: skip
        return ()
    return acts


def _sharing(text: str) -> str:
    """ "independent", "common" or a column name."""
    if text in {INDEPENDENT, COMMON}:
        return text
    column = text[3:].strip() if text.startswith("by ") else ""
    if not column or column in {INDEPENDENT, COMMON}:
        raise RuleError('must be "independent", "common" or "by COLUMN"', shown(text), offer(text, _KINDS))
    return column


def _across_taps(
    part: StatedPart, acts: tuple[str, ...], place: Place, setting: Setting, *, doubtful: bool
) -> str:
    findings = setting.folder.findings
    stated = part.across_taps
    if not any(ACTS[act].taps for act in acts):
        if stated is not None and not ("tap row" in acts and stated == COMMON):
            rule = "is one shift of all taps" if "tap row" in acts else "acts on no tap"
            findings.add(place.at("across_taps"), f"the source {rule}", shown(stated), "remove across_taps")
        return ""
    if stated is None:
        if not doubtful:
            findings.add(
                place.whole, "needs across_taps", "nothing",
                'write across_taps = "independent", "common" or "by module" (any column of the tap table)',
            )  # fmt: skip
        return ""
    found = findings.take(place.at("across_taps"), lambda: _sharing(stated), "")
    if found == INDEPENDENT and len(acts) > 1:
        findings.add(
            place.at("across_taps"), "a list of quantities needs one error that its taps share",
            shown(stated), 'write "common" or "by module", or split the source',
        )  # fmt: skip
    taps = setting.taps
    if found in {"", INDEPENDENT, COMMON} or taps is None:
        return found
    if found not in taps.columns:
        findings.add(
            place.at("across_taps"), f"must name a column of {taps.table.file}", shown(stated),
            offer("by " + found, ["by " + name for name in taps.columns] or [INDEPENDENT, COMMON]),
        )  # fmt: skip
        return found
    _check_ports(acts, found, place, setting)
    if taps.table.file + found not in setting.blanks:
        setting.blanks.add(taps.table.file + found)
        for line, cell, dead in zip(taps.lines, taps.columns[found], taps.excluded.tolist(), strict=True):
            if not cell and not dead:
                findings.add(
                    taps.table.at(line, found), f"must not be blank: {shown(part.name)} is shared by it",
                    "nothing", "write the group of the tap", kind=taps.table.of(found),
                )  # fmt: skip
    return found


def _check_ports(acts: tuple[str, ...], column: str, place: Place, setting: Setting) -> None:
    """What else a list acts on needs a port in one of the groups that its taps form."""
    for act in acts:
        channel = setting.arrangement.channel(act)
        if channel == "taps" or ACTS[act].taps:
            continue
        stated = setting.channels.get(channel)
        if stated is None or column not in stated.columns:
            name = channel if channel and channel != "alpha" else act
            do = (
                f'write {channel} = {{ {column} = "..." }} in [stream.channels]'
                if channel
                else 'write "common"'
            )
            setting.folder.findings.add(
                place.at("across_taps"), f"must say which {column} {name} hangs on", shown(f"by {column}"), do
            )


def _across_points(part: StatedPart, place: Place, setting: Setting) -> str:
    findings = setting.folder.findings
    stated: str | None = getattr(part, "across_points", None)
    if stated is None:
        return ""
    found = findings.take(place.at("across_points"), lambda: _sharing(stated), "")
    points = setting.points
    if found in {"", INDEPENDENT, COMMON} or points is None:
        return found
    table = points.table
    if found not in points.groups:
        findings.add(
            place.at("across_points"), f"must name a column of {table.file} that has no unit", shown(stated),
            offer("by " + found, ["by " + name for name in points.groups]),
        )  # fmt: skip
    elif found in points.varying:
        findings.add(
            table.at(points.varying[found], found),
            f"must stay the same in all rows of a point: {shown(part.name)} is shared by it",
            "another value than in the rows above", "correct it, or share by another column",
        )  # fmt: skip
    elif table.file + found not in setting.blanks:
        setting.blanks.add(table.file + found)
        for line, cell in zip(points.lines, points.groups[found], strict=True):
            if not cell:
                findings.add(
                    table.at(line, found), f"must not be blank: {shown(part.name)} is shared by it",
                    "nothing", "write the group of the point", kind=table.of(found),
                )  # fmt: skip
    return found


def _check_list(
    part: StatedPart, acts: tuple[str, ...], across_taps: str, place: Place, setting: Setting
) -> None:
    """A list of sizes stands only where no taps and no quantities share the error."""
    for key in ("limits", "expanded"):
        value = getattr(part, key)
        if not isinstance(value, list) or len(value) < 2:
            continue
        shared = across_taps not in {"", INDEPENDENT}
        if shared or len(acts) > 1 or "tap row" in acts:
            what = (
                "taps share" if shared else "several quantities share" if len(acts) > 1 else "all taps share"
            )
            setting.folder.findings.add(
                place.at(key), f"a list of sizes cannot be an error that {what}", shown(value),
                "declare gain and zero as separate sources",
            )  # fmt: skip
