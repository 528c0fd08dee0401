"""What ``reduce`` says between points: tables with the columns of the formats, kept when written and read."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from campaigns import campaign, every_kind
from tapband.face import Results, reduce
from tapband.nouns.campaign import Campaign
from tapband.nouns.plan import Limit, Plan
from tapband.questions.stated import STATED

COLUMNS = {
    "differences": (
        "a", "b", "coefficient", "difference", "u", "U", "k", "low", "high", "u_if_independent",
        "significant",
    ),
    "fits": (
        "run", "config", "quantity", "value", "u", "U", "k", "low", "high", "points_used", "note",
    ),
    "repeats": (
        "config", "alpha", "coefficient", "n", "scatter", "predicted", "dof", "chi2", "p", "verdict",
    ),
    "regions": ("point", "run", "a", "b", "k", "semi_major", "semi_minor", "tilt", "method"),
    "decisions": (
        "point", "coefficient", "value", "U", "lower", "upper", "probability", "rule", "answer",
    ),
}  # fmt: skip
"""formats.md, section 4."""
SUFFIXES = (
    "", "_u", "_b", "_s", "_dof", "_k", "_U", "_low", "_high", "_mc", "_mc_u", "_mc_low", "_mc_high",
    "_short_low", "_short_high", "_agrees",
)  # fmt: skip


def made(limit: Limit) -> Campaign:
    angles = [-2.0, 0.0, 2.0, 4.0, 6.0, 8.0, 4.0]
    ideal = campaign(every_kind(), alphas=angles, runs=["R1"] * 6 + ["R2"], trials="600")
    assert ideal.points is not None
    points = replace(ideal.points, nominal_alpha=np.radians(angles))
    return replace(ideal, points=points, plan=Plan(limits=(limit,)))


@cache
def results() -> Results:
    return reduce(made(Limit(coefficient="cm", lower=-1.0, upper=1.0)))


@pytest.mark.parametrize("name", ["fits", "repeats", "regions", "decisions"])
def test_tables_have_the_columns_of_the_formats(name: str) -> None:
    table = getattr(results(), name)
    assert tuple(table.columns[: len(COLUMNS[name])]) == COLUMNS[name]
    assert len(table) > 0


def test_differences_have_the_columns_of_the_formats() -> None:
    table = results().compare("R1", "R2")
    assert tuple(table.columns[: len(COLUMNS["differences"])]) == COLUMNS["differences"]
    assert set(table["a"]) == {"R1/P4"}


def test_stated_coefficients_stand_beside_the_measured_ones() -> None:
    columns = set(results().coefficients.columns)
    assert {f"{name}{end}" for name in STATED for end in SUFFIXES} <= columns
    budget = results().budget
    mine = budget[budget["coefficient"] == "cl_stated"]
    total = mine.groupby("point")["share"].sum()
    np.testing.assert_allclose(total, 1.0, rtol=1e-12)  # rounding of some twenty shares


def test_every_answer_comes_back_from_a_written_folder(tmp_path: Path) -> None:
    results().write(tmp_path / "out")
    again = Results.read(tmp_path / "out")
    for name in ("fits", "repeats", "regions", "decisions"):
        assert (tmp_path / "out" / f"{name}.csv").exists()
        assert again.tables[name].shape == results().tables[name].shape
    first, second = results().compare("P1", "P7"), again.compare("P1", "P7")
    np.testing.assert_allclose(first["u"], second["u"], rtol=1e-12)
    # Joint trials need the campaign itself; a folder has linearised intervals alone.
    assert second["mc_low"].isna().all()
    fitted = again.fit("R1")
    # What was stored is the latents to the last bit; only sums over them may round differently.
    np.testing.assert_allclose(fitted["u"], results().fit("R1")["u"], rtol=1e-12)


def test_a_decision_that_fails_sets_the_exit_status() -> None:
    assert results().exit_status == 0
    failing = reduce(made(Limit(coefficient="cl", upper=0.1)))
    assert "fails" in set(failing.decisions["answer"])
    assert failing.exit_status == 1
    said = [text for text in failing.warnings if text.startswith("decision")]
    assert said[0].startswith("decision: cl of R1/P2 fails; 0.25")
    assert said[0].endswith(" is asked to be at most 0.1")
    assert said[-1] == "decisions: 3 more fail; see the table of decisions"


def test_joint_draws_have_the_covariance_of_the_linear_model() -> None:
    """4,000 trials of two points: a covariance is good to √(1 + ρ²) u u'/√4000, here four of those."""
    drawn = results().draws("P4", "P7", trials=4_000)
    assert drawn.shape == (4_000, 2 * len(results().latents.outputs))
    first, second = drawn["R1/P4"]["cl"], drawn["R2/P7"]["cl"]
    expected = results().covariance("P4", "P7").loc["cl", "cl"]
    spread = float(first.std() * second.std())
    assert abs(float(np.cov(first, second)[0, 1]) - expected) < 4.0 * np.sqrt(2.0) * spread / np.sqrt(4_000)
    # What is shared cancels in the difference, as it does in the covariance.
    difference = results().compare("P4", "P7").set_index("coefficient").loc["cl", "u"]
    np.testing.assert_allclose((first - second).std(), difference, rtol=4.0 / np.sqrt(2.0 * 4_000))
