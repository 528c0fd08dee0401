"""The studies at reduced size: each must reach its conclusion, and draw the same small picture twice."""

from __future__ import annotations

import importlib
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

STUDIES = Path(__file__).parents[1] / "studies"
SIZES: dict[str, Callable[[Any], Any]] = {
    "how_many_taps": lambda study: study.find((21, 31, 41, 61), (0.12,)),
    "taps_or_transducers": lambda study: study.find(thicknesses=(0.12, 0.18)),
    "module_wiring": lambda study: study.find(),
    "linearised_interval": lambda study: study.find((0.25, 1.0, 32.0), tiles=2),
    "does_95_percent_hold": lambda study: study.find(tests=300, taps=(25, 61)),
    "how_long_to_average": lambda study: study.find((20, 50, 200), records=120),
    "compressibility_rule": lambda study: study.find((0.06, 0.15), (2.0, 4.0)),
}
HELPERS = {"study_figure", "rayleigh_janzen"}
LARGEST = 60_000
"""Bytes of a figure."""


@pytest.fixture
def studies(monkeypatch: pytest.MonkeyPatch) -> Iterator[Callable[[str], ModuleType]]:
    """Imports a study as its own folder would."""
    monkeypatch.syspath_prepend(str(STUDIES))
    yield importlib.import_module
    for name in (*SIZES, *HELPERS):
        sys.modules.pop(name, None)


def test_every_study_is_held_somewhere() -> None:
    """Here, or by a test that names it."""
    tests = "".join(path.read_text(encoding="utf-8") for path in Path(__file__).parent.rglob("test_*.py"))
    for path in STUDIES.glob("*.py"):
        assert path.stem in tests, path


@pytest.mark.parametrize("name", SIZES)
def test_study_reaches_its_conclusion(
    name: str, studies: Callable[[str], ModuleType], tmp_path: Path
) -> None:
    study = studies(name)
    found = SIZES[name](study)
    study.conclude(found)
    first, second = tmp_path / f"{name}.svg", tmp_path / "again" / f"{name}.svg"
    second.parent.mkdir()
    study.draw(found, first)
    study.draw(found, second)
    assert first.read_bytes() == second.read_bytes()
    committed = STUDIES / f"{name}.svg"
    assert 0 < committed.stat().st_size < LARGEST
    assert "*Answer*" in (study.__doc__ or "")


def test_the_compressible_series_is_held_to_what_is_known(studies: Callable[[str], ModuleType]) -> None:
    """7/6 at the shoulder of a circle (Rayleigh, from memory), Kutta and Joukowski, no drag, Kaplan's rule."""
    studies("compressibility_rule").known()
