"""Stream channels that hang on a module with the taps."""

from __future__ import annotations

from math import nan

from tapband.files.acts import Arrangement
from tapband.files.faults import offer, shown
from tapband.files.folder import Folder
from tapband.files.full_scales import read_full_scale
from tapband.files.model import ChannelPart, StreamPart
from tapband.files.taps import TapList
from tapband.nouns.campaign import Channel


def read_channels(
    part: StreamPart, arrangement: Arrangement, taps: TapList | None, folder: Folder
) -> dict[str, Channel]:
    """The channels by the column that reads them."""
    pressures = [name for name in arrangement.columns if name != "mach"]
    found = {}
    for name, channel in part.channels.items():
        where = f"stream.channels.{name}"
        if name not in pressures:
            rule = (
                "must be a pressure column of the stream" if pressures else "no stream pressure is read here"
            )
            folder.findings.add(folder.at(where), rule, shown(name), offer(name, pressures))
            continue
        before = len(folder.findings)
        columns = _columns(channel, where, taps, folder)
        if len(folder.findings) > before:
            continue
        scale = nan
        if channel.full_scale is not None:
            scale = read_full_scale(channel.full_scale, folder.at(f"{where}.full_scale"), folder)
        elif taps is not None and "module" in columns:
            scale = _scale_of_module(columns["module"], taps)
        found[name] = Channel(columns=columns, full_scale=scale)
    return found


def _columns(channel: ChannelPart, where: str, taps: TapList | None, folder: Folder) -> dict[str, str]:
    """The group of each grouping column that the channel belongs to."""
    columns: dict[str, str] = {"module": channel.module} if channel.module else {}
    for key, value in (channel.model_extra or {}).items():
        known = ["module", "full_scale", *(taps.columns if taps else ())]
        if taps is not None and key not in taps.columns:
            folder.findings.add(folder.at(f"{where}.{key}"), "unknown key", shown(key), offer(key, known))
        elif not isinstance(value, str) or not value:
            folder.findings.add(
                folder.at(f"{where}.{key}"), "must be text in quotes", shown(value), f'write "{value}"'
            )
        else:
            columns[key] = value
    for key, value in columns.items():
        if taps is None:
            continue
        if key not in taps.columns:
            folder.findings.add(
                folder.at(f"{where}.{key}"), f"needs a column {key} in {taps.table.file}", shown(value),
                f"add the column {key} to {taps.table.file}, or remove {key} here",
            )  # fmt: skip
        elif value not in taps.columns[key]:
            folder.findings.warn(
                f"{folder.at(where)}: no tap has {key} {shown(value)}, so it shares no error by {key}"
            )
    return columns


def _scale_of_module(module: str, taps: TapList) -> float:
    """The full scale that all taps of a module have [Pa], NaN where they have none or several."""
    modules = taps.columns.get("module", ("",) * len(taps.names))
    live = zip(modules, taps.full_scale.tolist(), taps.excluded.tolist(), strict=True)
    scales = {scale for name, scale, dead in live if name == module and not dead and scale > 0.0}
    return scales.pop() if len(scales) == 1 else nan
