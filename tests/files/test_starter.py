"""The starter campaign is written whole or not at all, and is what its study computes."""

from __future__ import annotations

import importlib.util
import os
import sys
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest

from tapband.files import starter
from tapband.files.load import load
from tapband.files.starter import FILES, write_starter
from tapband.nouns.errors import InputError
from tapband.nouns.source import Scale, Shape

STUDY = Path(__file__).parents[2] / "studies" / "starter_readings.py"


@pytest.fixture(scope="module")
def study() -> ModuleType:
    spec = importlib.util.spec_from_file_location("starter_readings", STUDY)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    # Its frozen dataclasses look their module up by name.
    sys.modules["starter_readings"] = module
    spec.loader.exec_module(module)
    return module


def test_new_folder_holds_the_whole_campaign_and_nothing_else(tmp_path: Path) -> None:
    write_starter(tmp_path / "deep" / "demo")
    assert sorted(os.listdir(tmp_path / "deep" / "demo")) == sorted(FILES)
    assert os.listdir(tmp_path / "deep") == ["demo"]
    size = sum((tmp_path / "deep" / "demo" / name).stat().st_size for name in FILES)
    assert size < 200_000  # wanted: small enough to read


def test_empty_folder_is_filled(tmp_path: Path) -> None:
    (tmp_path / "demo").mkdir()
    write_starter(tmp_path / "demo")
    assert sorted(os.listdir(tmp_path / "demo")) == sorted(FILES)


def test_folder_that_holds_files_is_left_alone(tmp_path: Path) -> None:
    (tmp_path / "mine.txt").write_text("kept")
    with pytest.raises(InputError) as caught:
        write_starter(tmp_path)
    assert str(caught.value) == (
        f"{tmp_path}: must be a new or an empty folder; got one that holds files; name another folder"
    )
    assert os.listdir(tmp_path) == ["mine.txt"]


def test_file_in_the_way_is_refused(tmp_path: Path) -> None:
    (tmp_path / "demo").write_text("a file")
    with pytest.raises(InputError, match="must be a new or an empty folder; got a file"):
        write_starter(tmp_path / "demo")


def test_failure_half_way_leaves_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(starter, "FILES", (*FILES, "missing.csv"))
    with pytest.raises(
        InputError, match=r"demo: must be writable; got No such file or directory; name another"
    ):
        write_starter(tmp_path / "demo")
    assert os.listdir(tmp_path) == []


def test_shipped_tables_are_those_the_study_computes(study: ModuleType) -> None:
    for name, text in study.tables(study.drawn()).items():
        made, shipped = text.splitlines(), (study.FOLDER / name).read_text(encoding="utf-8").splitlines()
        assert len(made) == len(shipped)
        for one, other in zip(made, shipped, strict=True):
            if one == other:
                continue
            # Another linear-algebra library may round a reading to the neighbouring step of 0.5 Pa.
            pairs = [p for p in zip(one.split(","), other.split(","), strict=True) if p[0] != p[1]]
            assert np.abs([float(a) - float(b) for a, b in pairs]) == pytest.approx(0.5)


def test_starter_shows_every_part_of_the_format_and_reads_without_fault_or_warning(tmp_path: Path) -> None:
    write_starter(tmp_path / "demo")
    one = load(tmp_path / "demo" / "campaign.toml")
    assert one.warnings == ()
    assert len(one.taps.names) == 41
    assert sorted(set(one.taps.columns["module"])) == ["M1", "M2", "M3", "M4"]
    assert [name for name, out in zip(one.taps.names, one.taps.excluded, strict=True) if out] == ["L07"]
    assert one.points is not None
    assert len(one.points.names) == 12
    assert set(one.points.runs) == {"R1", "R2"}
    assert set(one.points.columns["config"]) == {"clean", "tripped"}
    lost = np.argwhere(np.isnan(one.points.readings))
    assert [(one.points.keys[p], one.taps.names[t]) for p, t in lost] == [("R1/P05", "U13")]
    assert {s.size.shape for s in one.sources} == set(Shape)
    assert {s.size.terms[0].scale for s in one.sources} == set(Scale)
    assert {s.across_taps for s in one.sources} >= {"independent", "common", "module", "row"}
    assert {s.across_points for s in one.sources} == {"independent", "common", "run", "config"}
    plan = one.plan
    assert plan.forecast is not None
    assert plan.layout is not None
    assert plan.wiring is not None
    assert [len(slot.options) for slot in plan.slots] == [3, 2]
    assert (len(plan.targets), len(plan.limits)) == (3, 1)


def test_repeat_of_an_angle_is_within_what_counts_as_one_angle(tmp_path: Path) -> None:
    write_starter(tmp_path / "demo")
    one = load(tmp_path / "demo" / "campaign.toml")
    assert one.points is not None
    at = dict(zip(one.points.keys, one.points.alpha, strict=True))
    assert abs(at["R1/P03"] - at["R2/P08"]) < one.plan.polar.same_angle


def test_starter_reduces_to_intervals_that_hold_the_known_truth(study: ModuleType) -> None:
    over = study.misses(study.drawn(), study.FOLDER)
    assert over.shape == (3, 12)
    # 95 % of 36; a draw with every error as declared, so that only a wrong sign or size would miss.
    assert np.sum(np.abs(over) <= 1.0) >= 34
