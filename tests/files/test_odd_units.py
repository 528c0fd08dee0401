"""A tap in a unit of its own is said, for it is seldom meant."""

from __future__ import annotations

from pathlib import Path

from tapband.files.load import load
from tapband.files.starter import write_starter


def test_a_tap_in_another_unit_than_the_rest_is_said(tmp_path: Path) -> None:
    write_starter(tmp_path / "demo")
    points = tmp_path / "demo" / "points.csv"
    assert not any("another unit" in text for text in load(tmp_path / "demo" / "campaign.toml").warnings)
    points.write_text(points.read_text(encoding="utf-8").replace("U05 [Pa]", "U05 [kPa]"), encoding="utf-8")
    said = [t for t in load(tmp_path / "demo" / "campaign.toml").warnings if "another unit" in t]
    assert said == ["points.csv: taps in another unit than the others, which are in Pa: U05 [kPa]"]
