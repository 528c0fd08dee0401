"""How declarations become latents: sizes, sharing, ports of modules, corrections."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from campaigns import campaign, size, source
from tapband.nouns.campaign import Channel
from tapband.nouns.source import COMMON, INDEPENDENT, Scale, Shape, Size, Term, divisor_of
from tapband.probability.linearised import propagate
from tapband.reduction import Assembled, assemble
from tapband.reduction.loads import Loaded, spread

PORT = {"p_static": Channel(columns={"module": "M2"}, full_scale=50_000.0)}


def _only(a: Assembled, name: str) -> Loaded:
    return next(one for one in a.loaded if one.family.source == name)


def test_a_and_b_percent_limits_add_as_absolute_values() -> None:
    """(a·|p| + b·FS)/√3: common practice of "% of reading + % of full scale", no source."""
    terms = (
        Term(lower=-0.001, upper=0.001, scale=Scale.READING),
        Term(lower=-0.0005, upper=0.0005, scale=Scale.FULL_SCALE),
    )
    both = Size(terms=terms, divisor=divisor_of(Shape.RECTANGULAR), shape=Shape.RECTANGULAR)
    u = spread(both, np.array([-2000.0, 3000.0]), np.array(7000.0))
    np.testing.assert_allclose(u, (0.001 * np.array([2000.0, 3000.0]) + 3.5) / np.sqrt(3.0), rtol=1e-15)


def test_a_shared_gain_keeps_the_sign_of_each_reading() -> None:
    one = Size(terms=(Term(lower=-0.001, upper=0.001, scale=Scale.READING),), divisor=1.0)
    np.testing.assert_allclose(
        spread(one, np.array([-2000.0, 3000.0]), np.array(np.nan)), [-2.0, 3.0], rtol=1e-15
    )


@pytest.mark.parametrize(
    ("shape", "top", "divisor"),
    [
        (Shape.RECTANGULAR, 0.0, 3.0), (Shape.TRIANGULAR, 0.0, 6.0), (Shape.ARCSINE, 0.0, 2.0),
        (Shape.TRAPEZOIDAL, 0.5, 6.0 / 1.25), (Shape.TRAPEZOIDAL, 1.0, 3.0), (Shape.TRAPEZOIDAL, 0.0, 6.0),
    ],
)  # fmt: skip
def test_limits_become_standard_uncertainties(shape: Shape, top: float, divisor: float) -> None:
    """JCGM 100:2008, 4.3.7 and 4.3.9; arcsine JCGM 101:2008, 6.4.6."""
    assert divisor_of(shape, top) == pytest.approx(np.sqrt(divisor), rel=1e-15)


def test_relative_doubt_gives_degrees_of_freedom() -> None:
    """JCGM 100:2008, G.4.2: 10, 25 and 50 % give 50, 8 and 2."""
    for doubt, nu in ((0.10, 50.0), (0.25, 8.0), (0.50, 2.0)):
        assert size(1.0, Shape.RECTANGULAR, reliability=doubt).nu == pytest.approx(nu, rel=1e-12)


def test_a_module_zero_reaches_the_stream_channel_on_that_module() -> None:
    zero = [source("zero", "tap pressure", size(10.0), COMMON, "by module")]
    hung = assemble(campaign(zero, channels=PORT))
    free = assemble(campaign(zero))
    j = hung.problem.sensitivity[0][0] - free.problem.sensitivity[0][0]
    members = _only(hung, "zero").family.members
    moved = members.index("M2")
    static = assemble(campaign([source("static", "static pressure", size(10.0))]))
    np.testing.assert_allclose(j[:, moved], static.problem.sensitivity[0][0, :, 0], atol=1e-15)
    assert np.all(np.delete(j, moved, axis=1) == 0.0)


def test_independent_ports_give_the_channel_a_latent_of_its_own() -> None:
    zero = [source("zero", "tap pressure", size(10.0), INDEPENDENT, INDEPENDENT)]
    a = assemble(campaign(zero, channels=PORT))
    family = _only(a, "zero").family
    assert family.members[-1] == "p_static"
    static = assemble(campaign([source("static", "static pressure", size(10.0))]))
    np.testing.assert_allclose(
        a.problem.sensitivity[0][0, :, -1], static.problem.sensitivity[0][0, :, 0], atol=1e-15
    )


def test_a_channel_on_a_module_has_the_full_scale_of_its_own() -> None:
    zero = [source("zero", "tap pressure", size(0.001, scale=Scale.FULL_SCALE), COMMON, COMMON)]
    a = assemble(campaign(zero, channels=PORT, full_scale=130_000.0))
    taps, port = _only(a, "zero").entries
    assert taps.load[0, 0] == pytest.approx(130.0, rel=1e-12)
    assert port.load[0] == pytest.approx(50.0, rel=1e-12)


def test_unequal_limits_move_the_estimate_by_their_middle() -> None:
    """True static pressure lies 0 to 20 Pa above its reading (JCGM 100:2008, 4.3.8)."""
    one_sided = [source("static", "static pressure", size(10.0, Shape.RECTANGULAR, middle=10.0))]
    a = assemble(campaign(one_sided))
    plain = campaign()
    assert plain.points is not None
    channels = dict(plain.points.channels)
    channels["p_static"] = channels["p_static"] + 10.0
    moved = assemble(replace(plain, points=replace(plain.points, channels=channels)))
    np.testing.assert_allclose(a.problem.estimate, moved.problem.estimate, atol=1e-14)
    assert [str(c) for c in a.corrected.made] == [
        '"static": +10 Pa added to the static pressure (the middle of its limits)'
    ]
    assert _only(a, "static").standard[0] == pytest.approx(10.0 / np.sqrt(3.0), rel=1e-12)


ACTS = (
    "angle", "mach", "dynamic pressure", "tap pressure", "tap coefficient", "cl", "moment centre",
    "trailing-edge coefficient", "tap location", "tap row",
)  # fmt: skip


@pytest.mark.parametrize("act", ACTS)
def test_every_act_takes_a_correction_with_the_sign_of_its_sensitivity(act: str) -> None:
    """A small middle moves the estimate by the sensitivity that the half-width of the same size has."""
    taps = COMMON if act.startswith("tap") else ""
    step = 1e-5
    moved = assemble(campaign([source("e", act, size(step, middle=step), COMMON, taps)], alphas=(4.0,)))
    plain = assemble(campaign([source("e", act, size(step), COMMON, taps)], alphas=(4.0,)))
    change = moved.problem.estimate[0] - plain.problem.estimate[0]
    expected = plain.problem.sensitivity[0][0].sum(axis=1)
    # First order in the step; the place of a tap also changes the interpolant it belongs to.
    near = 0.3 if act in ("tap location", "tap row") else 1e-3
    scale = np.abs(expected).max()
    np.testing.assert_allclose(change, expected, atol=near * scale + 1e-14)


def test_systematic_and_random_parts_are_told_apart_by_sharing_across_points() -> None:
    sources = [
        source("s", "static pressure", size(6.0), "by run"),
        source("r", "total pressure", size(8.0), INDEPENDENT),
    ]
    linear = propagate(assemble(campaign(sources)).problem, 0.95)
    np.testing.assert_allclose(linear.random[:, 3], linear.contribution[:, 3, 1], rtol=1e-13)
    np.testing.assert_allclose(linear.systematic**2 + linear.random**2, linear.u**2, rtol=1e-12)


def test_chord_acts_where_the_contour_is_a_table_of_lengths() -> None:
    chord = [source("chord", "chord", size(0.0004))]
    free = assemble(campaign(chord)).problem.sensitivity[0]
    bound = assemble(campaign(chord, in_lengths=True))
    assert np.all(free == 0.0)
    cl = bound.problem.estimate[:, 3]
    np.testing.assert_allclose(bound.problem.sensitivity[0][:, 3, 0], -cl * 0.001, rtol=1e-12)
