"""The campaign of published pressures reads as its README says. Skipped where the data are absent."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from tapband.files.load import load

DATA = Path(__file__).parents[3] / "shared" / "data" / "rae2822"
needs_data = pytest.mark.skipif(not DATA.is_dir(), reason="the published data are not beside the project")


@needs_data
def test_published_campaign_loads() -> None:
    """AGARD AR-138, 105 taps and five points; case 6 lost a block of taps (README beside the data)."""
    campaign = load(DATA / "campaign.toml")
    points = campaign.points
    assert points is not None
    assert points.names == ("case01", "case06", "case07", "case09", "case12")
    assert len(campaign.taps.names) == 105
    assert campaign.section.chord == 0.61
    assert not campaign.section.full_arm
    assert [source.name for source in campaign.sources][:2] == ["capsule", "static pressure capsule"]
    lost = np.isnan(points.readings).sum(axis=1)
    assert lost[1] == lost.max()
    assert campaign.warnings == ()


@needs_data
def test_published_coefficients_load_as_readings(tmp_path: Path) -> None:
    for name in ("contour.csv", "taps.csv", "points_cp.csv"):
        (tmp_path / name).write_bytes((DATA / name).read_bytes())
    text = (DATA / "campaign.toml").read_text()
    head = text[: text.index("[[source]]")].replace("points.csv", "points_cp.csv")
    head = head.replace("relative to vacuum", "pressure coefficient").replace("total and static", "mach")
    (tmp_path / "campaign.toml").write_text(head)
    campaign = load(tmp_path / "campaign.toml")
    assert campaign.points is not None
    assert campaign.points.channels["mach"].tolist() == [0.676, 0.725, 0.725, 0.73, 0.73]
