"""What declared sources and plans are checked against, and where one of them stands in the campaign file."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from tapband.files.acts import Arrangement
from tapband.files.folder import Folder
from tapband.files.points import PointList
from tapband.files.taps import TapList
from tapband.files.validate import dotted
from tapband.nouns.campaign import Channel


@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """What sources are checked against; what could not be read is None and not checked against."""

    folder: Folder
    arrangement: Arrangement
    chord: float
    taps: TapList | None
    points: PointList | None
    forecast: bool
    channels: Mapping[str, Channel]
    blanks: set[str] = field(default_factory=set)
    """Grouping columns whose blank cells are said already."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Place:
    """Where a source stands in the campaign file: its path, and how it is named as a whole."""

    folder: Folder
    path: tuple[str | int, ...]
    whole: str

    def at(self, key: str) -> str:
        """The place of one of its keys."""
        return self.folder.at(f"{dotted(self.path)}.{key}")
