"""Every example runs as a user would run it, without a warning, and says what it is about."""

from __future__ import annotations

import ast
import runpy
from pathlib import Path

import pytest

FOLDER = Path(__file__).parents[1] / "examples"
SAYS = {
    "first_reduction": ("cl_U", "finite tap spacing", "report.html"),
    "cp_only": ("Cp as reported", "rear loading"),
    "samples": ("P03", "as if the rows were independent"),
    "difference_that_matters": ("significant: yes", "called independent"),
    "polar_fit": ("cl_slope", "alpha_zero_lift", "as the sources that change predict", "polar.svg"),
    "sizing_a_scanner": ("17 kPa modules", "worst_ratio", "headroom"),
    "own_stage": ("cl: ", "cm: ", "by Monte Carlo"),
    "many_campaigns": ("better scanner", 'needs a unit; got "0.03"; write the unit that is meant'),
}
LOOP = "many_campaigns"
LONGEST = 45
"""Lines of a script that one copies from."""


def test_every_example_is_run_here() -> None:
    assert {path.stem for path in FOLDER.glob("*.py")} == set(SAYS)


@pytest.mark.parametrize("name", [name for name in SAYS if name != LOOP])
def test_example_runs(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    _run(name, capsys)


def test_better_sources_never_widen_an_interval(capsys: pytest.CaptureFixture[str]) -> None:
    """What the loop over campaigns shows, a third of a source at a time."""
    rows = [line.split() for line in _run(LOOP, capsys).splitlines()[-3:]]
    declared, scanner, angle = ([float(value) for value in row[-3:]] for row in rows)
    assert all(a <= b for better in (scanner, angle) for a, b in zip(better, declared, strict=True))
    assert scanner[2] < declared[2]
    assert angle[1] < declared[1]


def _run(name: str, capsys: pytest.CaptureFixture[str]) -> str:
    """What the example prints; it is short, has a docstring and says what it is about."""
    path = FOLDER / f"{name}.py"
    runpy.run_path(str(path), run_name="__main__")
    said = capsys.readouterr().out
    for words in SAYS[name]:
        assert words in said, words
    text = path.read_text(encoding="utf-8")
    assert ast.get_docstring(ast.parse(text))
    assert len(text.splitlines()) <= LONGEST
    return said
