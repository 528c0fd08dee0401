"""Full scales: of a source itself, and of everything that a size in per cent of full scale acts on."""

from __future__ import annotations

from math import isfinite, nan

from tapband.files.faults import listed, shown
from tapband.files.folder import Folder
from tapband.files.model import StatedPart
from tapband.files.setting import Place, Setting
from tapband.files.units import PRESSURE, quantity
from tapband.nouns.source import COMMON, INDEPENDENT, Scale, Source


def own_full_scale(part: StatedPart, place: Place, setting: Setting) -> float | None:
    """The full scale that a source states itself [Pa]."""
    if part.full_scale is None:
        return None
    return read_full_scale(part.full_scale, place.at("full_scale"), setting.folder)


def read_full_scale(value: object, where: str, folder: Folder) -> float:
    """A full scale [Pa], NaN with its fault noted."""
    found = folder.findings.take(where, lambda: quantity(value, PRESSURE), nan)
    if found <= 0.0:
        folder.findings.add(
            where, "must be above zero", shown(value), "write the largest magnitude of the range"
        )
    return found


def check_full_scale(source: Source, place: Place, setting: Setting) -> None:
    """Where a size is per cent of full scale, the full scale of everything acted on is known."""
    if source.full_scale is not None or not any(t.scale is Scale.FULL_SCALE for t in source.size.terms):
        return
    findings, taps = setting.folder.findings, setting.taps
    say = 'write full_scale = "..." in the source'
    for act in source.acts_on:
        channel = setting.arrangement.channel(act)
        if channel == "taps":
            if taps is None:
                continue
            lacking = [
                name
                for name, scale, dead in zip(taps.names, taps.full_scale, taps.excluded.tolist(), strict=True)
                if not dead and not isfinite(scale)
            ]
            if lacking:
                what = "any tap" if len(lacking) == int((~taps.excluded).sum()) else listed(lacking)
                findings.add(
                    place.whole, "needs the full scale that its per cent are of", f"none for {what}",
                    f"{say}, or a column full_scale [kPa] in {taps.table.file}",
                )  # fmt: skip
            if act == "tap pressure" and not lacking:
                _check_ports_scale(source, place, setting)
        elif channel not in setting.channels or not isfinite(setting.channels[channel].full_scale):
            findings.add(
                place.whole, "needs the full scale that its per cent are of", f"none for {act}",
                say + (f", or for {channel} in [stream.channels]" if channel else ""),
            )  # fmt: skip


def _check_ports_scale(source: Source, place: Place, setting: Setting) -> None:
    """A channel on a module is one more port of the taps and needs its full scale too."""
    stated = {setting.arrangement.channel(act) for act in source.acts_on}
    for name, channel in setting.channels.items():
        shares = source.across_taps in {INDEPENDENT, COMMON} or source.across_taps in channel.columns
        if shares and name not in stated and not isfinite(channel.full_scale):
            setting.folder.findings.add(
                place.whole, "needs the full scale that its per cent are of",
                f"none for {name}, which hangs on a module",
                f'write {name} = {{ ..., full_scale = "..." }} in [stream.channels]',
            )  # fmt: skip
