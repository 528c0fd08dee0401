"""The Python face, used from outside: names, correlated numbers, folders written and read back."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import tapband
from campaigns import campaign, every_kind
from tapband.nouns.errors import QuestionError


@pytest.fixture(scope="module")
def results() -> tapband.Results:
    c = campaign(every_kind(), runs=["R1", "R1", "R2"], compressibility="karman-tsien", reference_mach=0.1)
    return tapband.reduce(c, trials="auto", seed=3)


def test_public_names_resolve() -> None:
    for name in tapband.__all__:
        assert getattr(tapband, name) is not None
    assert not hasattr(tapband, "nothing")


def test_correlated_numbers_carry_the_combined_uncertainty(results: tapband.Results) -> None:
    numbers = results.ufloats("P2")
    row = results.coefficients.set_index("point").loc["P2"]
    for name in ("cl", "cd_pressure", "cm", "cl_ref"):
        assert numbers[name].nominal_value == row[name]
        assert numbers[name].std_dev == pytest.approx(row[f"{name}_u"], rel=1e-12)


def test_a_difference_of_correlated_numbers_has_the_covariance_between_points(
    results: tapband.Results,
) -> None:
    a, b = results.ufloats("P1"), results.ufloats("P3")
    covariance = results.covariance("P1", "P3")
    expected = a["cl"].std_dev ** 2 + b["cl"].std_dev ** 2 - 2.0 * covariance.loc["cl", "cl"]
    assert (a["cl"] - b["cl"]).std_dev ** 2 == pytest.approx(expected, rel=1e-10)
    assert covariance.loc["cl", "cl"] > 0.0
    own = results.covariance("P1", "P1")
    table = results.correlation.query("point == 'P1' and a == 'cm' and b == 'cl'")
    assert own.loc["cm", "cl"] == pytest.approx(table["covariance"].iloc[0], rel=1e-12)


def test_a_written_folder_reads_back_with_its_correlations(results: tapband.Results, tmp_path: Path) -> None:
    folder = results.write(tmp_path / "out")
    again = tapband.Results.read(folder)
    pd.testing.assert_frame_equal(again.coefficients, results.coefficients, check_dtype=False)
    for a, b in (("P1", "P2"), ("P3", "P3")):
        pd.testing.assert_frame_equal(again.covariance(a, b), results.covariance(a, b))
    assert again.ufloats("P2")["cl"].std_dev == pytest.approx(results.ufloats("P2")["cl"].std_dev, rel=1e-14)
    assert again.meta["seed"] == 3


def test_an_ambiguous_or_unknown_point_is_named(results: tapband.Results) -> None:
    with pytest.raises(QuestionError, match='point "P9": must be a point of the campaign'):
        results.ufloats("P9")


def test_seed_and_trials_are_those_asked_for() -> None:
    c = campaign(every_kind()[:3], alphas=(3.0,), seed=1)
    ends = [
        tapband.reduce(c, trials="plain:5000", seed=seed).coefficients["cl_mc_low"].iloc[0]
        for seed in (1, 1, 2)
    ]
    assert ends[0] == ends[1] != ends[2]
    assert tapband.reduce(c, trials=5000).meta["trials"] == "5000"


def test_notebook_display_and_text_show_the_points(results: tapband.Results) -> None:
    assert "P2" in repr(results)
    assert "<table" in results._repr_html_()


def test_one_point_reduces() -> None:
    r = tapband.reduce(campaign(every_kind(), alphas=(3.0,)))
    assert len(r.coefficients) == 1
    assert np.isfinite(r.coefficients["cl_mc_low"]).all()


def test_figures_draw_on_the_axes_given(results: tapband.Results) -> None:
    from matplotlib.figure import Figure

    for draw in (
        lambda ax: results.plot_coefficient("cl", ax=ax),
        lambda ax: results.plot_pressure("P2", ax=ax),
        lambda ax: results.plot_contributors("cm", ax=ax),
        lambda ax: results.plot_groups("cl", "P2", ax=ax),
        lambda ax: results.plot_taps_along_chord("cl", "P2", ax=ax),
    ):
        ax = Figure().subplots()
        assert draw(ax) is ax
        assert ax.get_xlabel() or ax.get_ylabel()
