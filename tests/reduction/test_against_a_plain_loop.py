"""Estimates, sensitivities and Monte Carlo against sums that share no code with the project."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from uncertainties import ufloat, umath

import plain_chain
from campaigns import campaign, every_kind
from tapband.probability.linearised import propagate
from tapband.reduction import Assembled, assemble, reduce_campaign

POINT = 1
LOST = 5


@cache
def _assembled() -> Assembled:
    return assemble(
        campaign(every_kind(), lost={(POINT, LOST): True}, runs=["R1", "R2", "R2"], taps=None, spacing=False)
    )


def _chain(a: Assembled) -> plain_chain.Plain:
    return plain_chain.plain(a.contour, a.s.tolist(), a.nominal.live[POINT].tolist())


FLOATS = plain_chain.Maths(sqrt=np.sqrt, cos=np.cos, sin=np.sin)


def _nominal(a: Assembled) -> dict[str, object]:
    taps = range(a.s.size)
    return {
        "reading": {i: float(a.points.readings[POINT, i]) for i in taps},
        "p_total": float(a.points.channels["p_total"][POINT]),
        "p_static": float(a.points.channels["p_static"][POINT]), "alpha": float(a.points.alpha[POINT]),
        "shift": dict.fromkeys(taps, 0.0), "extra": dict.fromkeys(taps, 0.0),
    }  # fmt: skip


def test_estimates_equal_a_plain_loop() -> None:
    a = _assembled()
    y = plain_chain.coefficients(_chain(a), FLOATS, **_nominal(a))
    np.testing.assert_allclose(a.problem.estimate[POINT], y, rtol=0, atol=1e-12)


def test_sensitivities_equal_those_of_uncertainties() -> None:
    """Each input becomes an ``uncertainties`` variable; its derivatives are that library's, not ours."""
    a = _assembled()
    start = _nominal(a)
    live = [i for i in range(a.s.size) if i != LOST]
    keyed = {
        slot: {i: ufloat(start[slot][i], 1.0) for i in live}  # type: ignore[index]
        for slot in ("reading", "shift", "extra")
    }
    scalars = {name: ufloat(start[name], 1.0) for name in ("p_total", "p_static", "alpha")}
    scalars |= {n: ufloat(0.0, 1.0) for n in ("mach_shift", "q_shift", "edge_common", "edge_loading")}
    scalars["centre"] = ufloat(0.25, 1.0)
    maths = plain_chain.Maths(
        sqrt=umath.sqrt, cos=umath.cos, sin=umath.sin,
        plain_value=lambda v: v.nominal_value, settle=lambda v: v.derivatives and v,
    )  # fmt: skip
    y = plain_chain.coefficients(_chain(a), maths, **keyed, **scalars)
    for loaded, s in zip(a.loaded, a.problem.sensitivity, strict=True):
        expected = np.zeros(s.shape[1:])
        for entry in loaded.entries:
            for j, value in enumerate(y):
                if entry.on_taps:
                    for i in live:
                        by = value.derivatives.get(keyed[entry.slot][i], 0.0)
                        expected[j, entry.member[i]] += by * entry.load[POINT, i]
                elif entry.slot == "added":
                    expected[j] += entry.load[POINT, j]
                else:
                    by = value.derivatives.get(scalars[entry.slot], 0.0)
                    expected[j, entry.member[0]] += by * entry.load[POINT]
        # Relative to the largest of the family: a common zero has sensitivities that cancel to rounding.
        scale = max(float(np.abs(expected).max()), 1e-7)
        np.testing.assert_allclose(
            s[POINT], expected, rtol=0, atol=1e-9 * scale, err_msg=loaded.family.source
        )


def test_combined_uncertainty_equals_the_root_sum_of_squares_of_the_sensitivities() -> None:
    a = _assembled()
    linear = propagate(a.problem, 0.95)
    u2 = sum((s[POINT] ** 2).sum(axis=1) for s in a.problem.sensitivity)
    np.testing.assert_allclose(linear.u[POINT], np.sqrt(u2), rtol=1e-13)


@pytest.mark.parametrize("trials", ["plain:200000", "auto"])
def test_monte_carlo_equals_trials_of_a_plain_loop(trials: str) -> None:
    """200,000 trials of each: differences stay within five standard errors of both together."""
    kinds = [
        s
        for s in every_kind()
        if s.name in ("port zero", "module zero", "static", "tunnel", "place", "angle")
    ]
    c = campaign(kinds, alphas=(4.0,), spacing=False, trials=trials, seed=11)
    r = reduce_campaign(c)
    a = r.assembled
    y = _drawn(a, 200_000)
    half_height = {0.025: 0.0584, 0.5: 0.3989}[0.025]
    for j in range(5):
        u = y[j].std()
        n = y[j].size
        assert r.montecarlo.mean[0, j] == pytest.approx(y[j].mean(), abs=7 * u / np.sqrt(n) + 1e-15)
        assert r.montecarlo.u[0, j] == pytest.approx(u, rel=7 / np.sqrt(2 * n))
        error = np.sqrt(0.025 * 0.975 / n) / half_height * u
        low, high = np.quantile(y[j], [0.025, 0.975])
        own = r.montecarlo.low_sd[0, j], r.montecarlo.high_sd[0, j]
        assert r.montecarlo.low[0, j] == pytest.approx(low, abs=5 * np.hypot(error, own[0]))
        assert r.montecarlo.high[0, j] == pytest.approx(high, abs=5 * np.hypot(error, own[1]))


def _drawn(a: Assembled, trials: int) -> list[np.ndarray]:
    """Coefficients of independent trials, errors drawn from their declarations by NumPy alone."""
    rng = np.random.default_rng(2024)
    size, n = trials, a.s.size
    root3 = np.sqrt(3.0)
    modules = {m: rng.uniform(-6.0, 6.0, size) for m in sorted(set(a.campaign.taps.columns["module"]))}
    doubt = rng.uniform(-1.0, 1.0, size)
    points = a.points
    wired = a.campaign.taps.columns["module"]
    static = 6.0 * (1.0 + root3 * 0.2 * doubt) * rng.uniform(-1.0, 1.0, size)
    chain = plain_chain.plain(a.contour, a.s.tolist(), [True] * n)
    return plain_chain.coefficients(
        chain,
        FLOATS,
        reading={i: points.readings[0, i] + rng.normal(0.0, 4.0, size) + modules[wired[i]] for i in range(n)},
        p_total=points.channels["p_total"][0] + np.zeros(size),
        p_static=points.channels["p_static"][0] + static,
        alpha=points.alpha[0] + rng.normal(0.0, np.radians(0.03), size),
        mach_shift=rng.normal(0.0, 0.0008, size),
        shift={i: rng.uniform(-4e-4, 4e-4, size) for i in range(n)},
        extra=dict.fromkeys(range(n), 0.0),
        edge_common=a.loaded[-2].entries[0].load[0] * rng.uniform(-root3, root3, size),
        edge_loading=a.loaded[-1].entries[0].load[0] * rng.uniform(-root3, root3, size),
    )
