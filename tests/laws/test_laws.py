"""Laws that hold whatever the campaign: properties over drawn tap layouts, readings and errors."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from campaigns import TWELVE, campaign, every_kind, size, source
from tapband.nouns.campaign import Campaign
from tapband.nouns.source import COMMON, INDEPENDENT, Shape
from tapband.probability.linearised import propagate
from tapband.reduction import assemble, reduce_campaign

RULES = st.sampled_from(["contour-cubic", "contour-linear", "polygon"])
COUNTS = st.sampled_from([21, 31, 41])
ANGLES = st.floats(-3.0, 9.0)
few = settings(max_examples=12, deadline=None, derandomize=True)


def _moved(c: Campaign, **changes: object) -> Campaign:
    assert c.points is not None
    return replace(c, points=replace(c.points, **changes))


def _estimate(c: Campaign) -> np.ndarray:
    return assemble(c).problem.estimate


@few
@given(rule=RULES, count=COUNTS, alpha=ANGLES, offset=st.floats(-5e3, 5e3))
def test_uniform_offset_leaves_forces_unchanged(rule: str, count: int, alpha: float, offset: float) -> None:
    c = campaign(alphas=[alpha], taps=TWELVE.taps(count, "cosine", 0.97), integration=rule)
    assert c.points is not None
    moved = _moved(c, readings=c.points.readings + offset)
    # Readings of 1e5 Pa over a q of 6e3 Pa carry a rounding of some 1e-15 each into sums of order one.
    np.testing.assert_allclose(_estimate(moved), _estimate(c), rtol=0, atol=1e-12)


@few
@given(rule=RULES, alpha=ANGLES, e=st.floats(-0.1, 0.1))
def test_dynamic_pressure_scales_every_coefficient(rule: str, alpha: float, e: float) -> None:
    c = campaign(alphas=[alpha], stream="dynamic and mach", pressures="relative to static", integration=rule)
    assert c.points is not None
    channels = dict(c.points.channels)
    channels["q"] = channels["q"] * (1.0 + e)
    np.testing.assert_allclose(_estimate(_moved(c, channels=channels)) * (1.0 + e), _estimate(c), atol=1e-13)


@few
@given(alpha=ANGLES, turn=st.floats(-0.05, 0.05))
def test_rotation_at_fixed_pressures_exchanges_lift_and_drag(alpha: float, turn: float) -> None:
    """cl and cd_pressure turn as a vector, so that ∂cd/∂α = cl and ∂cl/∂α = −cd at fixed pressures."""
    c = campaign(alphas=[alpha])
    assert c.points is not None
    before, after = _estimate(c)[0], _estimate(_moved(c, alpha=c.points.alpha + turn))[0]
    cl = before[3] * np.cos(turn) - before[4] * np.sin(turn)
    cd = before[3] * np.sin(turn) + before[4] * np.cos(turn)
    np.testing.assert_allclose(after, [*before[:3], cl, cd], atol=1e-14)


@few
@given(order=st.permutations(range(41)), alpha=ANGLES)
def test_order_of_taps_changes_nothing(order: list[int], alpha: float) -> None:
    c = campaign(every_kind(), alphas=[alpha])
    assert c.points is not None
    i = np.array(order)
    taps = replace(
        c.taps, names=tuple(c.taps.names[k] for k in order), s=c.taps.s[i], x=c.taps.x[i], y=c.taps.y[i],
        upper=c.taps.upper[i], columns={"module": tuple(c.taps.columns["module"][k] for k in order)},
    )  # fmt: skip
    shuffled = replace(_moved(c, readings=c.points.readings[:, i]), taps=taps)
    a, b = (propagate(assemble(x).problem, 0.95) for x in (c, shuffled))
    np.testing.assert_allclose(b.estimate, a.estimate, atol=1e-14)
    np.testing.assert_allclose(b.contribution, a.contribution, atol=1e-14)


@few
@given(order=st.permutations(range(15)))
def test_order_and_names_of_sources_change_no_uncertainty(order: list[int]) -> None:
    kinds = every_kind()
    renamed = [replace(kinds[k], name=f"error {k}") for k in order]
    a, b = (propagate(assemble(campaign(s)).problem, 0.95) for s in (kinds, renamed))
    np.testing.assert_allclose(b.u, a.u, rtol=1e-13)
    np.testing.assert_allclose(b.covariance, a.covariance, atol=1e-16)


def test_no_error_gives_exactly_no_uncertainty() -> None:
    nothing = [replace(s, size=size(0.0)) for s in every_kind()]
    c = campaign([*nothing, source("edge", "trailing-edge coefficient", size(0.0))], spacing=False)
    r = reduce_campaign(c, trials="plain:1000")
    assert np.all(r.linear.u == 0.0)
    assert np.all(r.linear.U == 0.0)
    assert np.all(r.montecarlo.u <= 1e-15)  # rounding of a mean of equal numbers
    assert r.agrees.all()


def test_one_error_entering_twice_is_fully_correlated() -> None:
    """A zero common to the taps and their reference cancels; two independent ones do not."""
    zero = size(10.0)
    shared = source("zero", ["tap pressure", "static pressure"], zero, COMMON, COMMON)
    apart = [source("a", "tap pressure", zero, COMMON, COMMON), source("b", "static pressure", zero)]
    level = campaign([source("edge", "trailing-edge coefficient", size(0.0))], spacing=False)
    u = {}
    for name, sources in (("shared", [shared]), ("apart", apart)):
        a = assemble(replace(level, sources=(*level.sources, *sources)))
        u[name] = np.sqrt(a.cp_variance[0].sum(axis=1))
    # Cp = (p − p_static)/q: the shared zero leaves only its effect through q, none where Cp is zero.
    least = int(np.nanargmin(np.abs(a.cp[0])))
    assert u["shared"][least] < 0.05 * u["apart"][least]


def test_a_source_split_into_two_correlated_halves_changes_nothing() -> None:
    whole = [source("static", "static pressure", size(8.0))]
    half = [source("static", ["static pressure", "static pressure"], size(4.0))]
    a, b = (propagate(assemble(campaign(s)).problem, 0.95) for s in (whole, half))
    np.testing.assert_allclose(b.u, a.u, rtol=1e-14)


def test_shares_sum_to_one_and_covariance_is_positive_semi_definite() -> None:
    c = campaign(every_kind(), compressibility="karman-tsien", lost={(1, 5): True})
    linear = propagate(assemble(c).problem, 0.95)
    shares = (linear.contribution**2).sum(axis=2) / linear.u**2
    np.testing.assert_allclose(shares, 1.0, atol=1e-12)
    values = np.linalg.eigvalsh(linear.covariance)
    assert values.min() > -1e-14 * values.max()


def test_units_of_pressure_are_irrelevant() -> None:
    """Everything in another unit of pressure gives the same coefficients and uncertainties."""
    factor = 1.0 / 6894.757
    sources = [
        source("port", "tap pressure", size(4.0), INDEPENDENT, INDEPENDENT),
        source("static", "static pressure", size(6.0, Shape.RECTANGULAR)),
    ]
    scaled = [replace(s, size=size(s.size.terms[0].half * factor, s.size.shape)) for s in sources]
    c = campaign(sources)
    assert c.points is not None
    other = replace(
        _moved(
            c, readings=c.points.readings * factor,
            channels={k: v * factor for k, v in c.points.channels.items()},
        ),
        sources=tuple(scaled),
    )  # fmt: skip
    a, b = (propagate(assemble(x).problem, 0.95) for x in (c, other))
    np.testing.assert_allclose(b.estimate, a.estimate, atol=1e-12)
    np.testing.assert_allclose(b.u, a.u, rtol=1e-9)


@pytest.mark.parametrize("trials", ["auto", "plain:20000"])
def test_threads_blocks_order_of_points_and_other_sources_change_no_row(trials: str) -> None:
    sources = [s for s in every_kind() if s.name not in ("hole", "place")]
    c = campaign(sources, alphas=(0.0, 3.0, 6.0, 8.0), runs=["R1", "R1", "R2", "R2"])
    base = reduce_campaign(c, trials=trials, threads=1)
    again = reduce_campaign(c, trials=trials, threads=4)
    _same_rows(base, again, [0, 1, 2, 3])
    backwards = [3, 1, 0, 2]
    i = np.array(backwards)
    assert c.points is not None
    shuffled = _moved(
        c, names=tuple(c.points.names[k] for k in backwards), runs=tuple(c.points.runs[k] for k in backwards),
        columns={n: tuple(v[k] for k in backwards) for n, v in c.points.columns.items()},
        alpha=c.points.alpha[i], readings=c.points.readings[i],
        channels={n: v[i] for n, v in c.points.channels.items()},
    )  # fmt: skip
    _same_rows(base, reduce_campaign(shuffled, trials=trials, threads=2), backwards)
    alone = _moved(
        c, names=c.points.names[2:3], runs=c.points.runs[2:3],
        columns={n: v[2:3] for n, v in c.points.columns.items()}, alpha=c.points.alpha[2:3],
        readings=c.points.readings[2:3], channels={n: v[2:3] for n, v in c.points.channels.items()},
        counts=c.points.counts[2:3], t_total=None,
    )  # fmt: skip
    _same_rows(base, reduce_campaign(alone, trials=trials), [2])


def _same_rows(base: object, other: object, rows: list[int]) -> None:
    for name in ("mean", "u", "low", "high", "short_low", "short_high"):
        a = getattr(base.montecarlo, name)[rows]  # type: ignore[attr-defined]
        b = getattr(other.montecarlo, name)  # type: ignore[attr-defined]
        np.testing.assert_array_equal(b, a, err_msg=name)
