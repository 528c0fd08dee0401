"""Integration over the true contour against sections whose forces are known in closed form."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from exact_sections import section
from tapband.experiment.contour import Contour
from tapband.experiment.quadrature import Quadrature, quadrature

Array = NDArray[np.float64]
RULES = ("contour-cubic", "contour-linear", "polygon")
# Kármán-Trefftz sections; cl, cm about c/4, cn, ct recomputed by residue and by surface integration to 1e-6.
TABLE = (
    (-0.10 + 0.0j, 2.0, 5.0, 0.597399, -0.002347, 0.595126, -0.052067),
    (-0.10 + 0.10j, 2.0, 5.0, 1.218072, -0.146843, 1.213437, -0.106162),
    (-0.10 + 0.10j, 1.9, 5.0, 1.279257, -0.166367, 1.274389, -0.111495),
    (-0.08 + 0.05j, 2.0 - 1.0 / 18.0, 4.0, 0.804087, -0.081564, 0.802128, -0.056090),
)


def _setup(row: tuple[complex, float, float, float, float, float, float], taps: int, rule: str):
    mu, n, degrees = row[:3]
    exact = section(mu, n)
    contour = Contour.of(*exact.contour(801))
    places = exact.taps(taps, "cosine", 1.0 if n < 1.99 else 0.9995)
    s = np.clip(places.s, contour.s_lower, contour.s_upper)
    weights = quadrature(contour, s, np.ones(s.size, dtype=np.bool_), rule=rule)
    return weights, exact.cp(places.theta, np.radians(degrees)), np.radians(degrees)


def _forces(weights: Quadrature, cp: Array, alpha: float) -> dict[str, float]:
    cn, ct, cm0 = weights.weights @ cp + weights.constant
    return {
        "cn": cn, "ct": ct, "cm": cm0 + 0.25 * cn,
        "cl": cn * np.cos(alpha) - ct * np.sin(alpha), "cd": cn * np.sin(alpha) + ct * np.cos(alpha),
    }  # fmt: skip


@pytest.mark.parametrize("row", TABLE)
def test_101_taps_to_the_edge_hold_the_closed_form(
    row: tuple[complex, float, float, float, float, float, float],
):
    weights, cp, alpha = _setup(row, 101, "contour-cubic")
    found = _forces(weights, cp, alpha)
    cl, cm, cn, ct = row[3:]
    assert found["cl"] == pytest.approx(cl, abs=1e-4)
    assert found["cn"] == pytest.approx(cn, abs=1e-4)
    assert found["ct"] == pytest.approx(ct, abs=1e-4)
    assert found["cm"] == pytest.approx(cm, abs=1e-4)
    assert found["cd"] == pytest.approx(0.0, abs=1e-4)


@pytest.mark.parametrize(
    ("rule", "least"), [("contour-cubic", 3.0), ("contour-linear", 1.8), ("polygon", 1.8)]
)
def test_order_of_convergence(rule: str, least: float) -> None:
    """The cubic converges at order three or better, straight lines at order two, in cl of a cambered section."""
    row = TABLE[2]
    sizes = (41, 81, 161)
    error = [abs(_forces(*_setup(row, n, rule))["cl"] - row[3]) for n in sizes]
    order = np.log(error[0] / error[-1]) / np.log((sizes[-1] - 1) / (sizes[0] - 1))
    assert order > least


def test_the_cubic_beats_straight_lines_at_thirty_taps() -> None:
    row = TABLE[2]
    error = {rule: abs(_forces(*_setup(row, 31, rule))["cl"] - row[3]) for rule in RULES}
    assert error["contour-cubic"] < 0.2 * error["polygon"]


@pytest.mark.parametrize("rule", RULES)
@pytest.mark.parametrize("closure", ["rear taps", "extrapolate"])
@pytest.mark.parametrize("full_arm", [True, False])
def test_uniform_offset_leaves_closed_contour_forces_unchanged(
    rule: str, closure: str, full_arm: bool
) -> None:
    exact = section(-0.1 + 0.1j, 1.9)
    for contour in (Contour.of(*exact.contour(401)), _blunt()):
        taps = np.linspace(0.9 * contour.s_lower, 0.93 * contour.s_upper, 31)
        live = np.ones(31, dtype=np.bool_)
        weights = quadrature(contour, taps, live, rule=rule, closure=closure, full_arm=full_arm)
        offset = weights.node_weights @ weights.nodes_of @ np.ones(31)
        if not full_arm:
            # The lever of the tangential force closes on itself only together with the other one.
            offset = offset[:, :2]
        np.testing.assert_allclose(offset, 0.0, atol=1e-13)  # rounding of sums of order one


def test_a_stated_edge_coefficient_does_not_follow_a_uniform_offset() -> None:
    contour = _blunt()
    taps = np.linspace(0.8 * contour.s_lower, 0.8 * contour.s_upper, 31)
    weights = quadrature(contour, taps, np.ones(31, dtype=np.bool_), closure=0.1)
    assert abs((weights.weights @ np.ones(31))[1]) > 1e-3
    both = weights.weights @ np.full(31, 0.1) + weights.constant
    np.testing.assert_allclose(both, 0.0, atol=1e-14)  # edge and taps alike: closed again


@pytest.mark.parametrize("rule", RULES)
def test_direction_of_travel_and_order_of_taps_are_irrelevant(rule: str) -> None:
    exact = section(-0.1 + 0.1j, 1.9)
    x, y = exact.contour(401)
    places = exact.taps(41, "cosine", 0.97)
    cp = exact.cp(places.theta, 0.1)
    shuffled = np.random.default_rng(3).permutation(41)
    results = []
    for cx, cy, order in ((x, y, np.arange(41)), (x[::-1], y[::-1], shuffled)):
        contour = Contour.of(cx, cy)
        s, _ = contour.place_xy(places.x[order], places.y[order])
        weights = quadrature(contour, s, np.ones(41, dtype=np.bool_), rule=rule)
        results.append(weights.weights @ cp[order])
    np.testing.assert_allclose(results[0], results[1], atol=1e-9)  # placement on the spline: 1e-10 chords


def test_dead_taps_have_no_weight_and_shift_no_other_place() -> None:
    contour = _blunt()
    s = np.linspace(0.9 * contour.s_lower, 0.9 * contour.s_upper, 25)
    live = np.ones(25, dtype=np.bool_)
    live[[3, 11]] = False
    weights = quadrature(contour, s, live)
    fewer = quadrature(contour, s[live], np.ones(23, dtype=np.bool_))
    assert np.all(weights.weights[:, ~live] == 0.0)
    np.testing.assert_array_equal(weights.weights[:, live], fewer.weights)
    np.testing.assert_array_equal(weights.slope[np.ix_(live, live)], fewer.slope)


def test_base_drawn_as_points_equals_base_left_open() -> None:
    x, y = _blunt_points()
    drawn = Contour.of(np.r_[1.0, x, 1.0], np.r_[0.0, y, 0.0])
    left_open = Contour.of(x, y)
    np.testing.assert_allclose(drawn.knots, left_open.knots, atol=1e-15)
    taps = np.linspace(0.9 * drawn.s_lower, 0.9 * drawn.s_upper, 25)
    live = np.ones(25, dtype=np.bool_)
    a, b = quadrature(drawn, taps, live), quadrature(left_open, taps, live)
    np.testing.assert_allclose(a.weights, b.weights, atol=1e-15)


def test_pressure_on_a_blunt_base_is_drag() -> None:
    """A closing value above the rest pushes the base upstream by its thickness times Cp, and gives no lift."""
    contour = _blunt()
    taps = np.linspace(0.999 * contour.s_lower, 0.999 * contour.s_upper, 61)
    weights = quadrature(contour, taps, np.ones(61, dtype=np.bool_), closure=1.0, rule="contour-linear")
    thickness = float(contour.base[0, 1] - contour.base[-1, 1])
    ct = weights.constant[1]
    assert ct < 0.0
    assert ct == pytest.approx(-thickness, rel=0.1)  # and a little of the contour next to it


def _blunt_points() -> tuple[Array, Array]:
    """A 12 % four-digit profile, whose edge is 0.00252 thick (Abbott and von Doenhoff, eq. 6.2)."""
    x = 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, 81)))
    y = 0.6 * (0.2969 * np.sqrt(x) - 0.1260 * x - 0.3516 * x**2 + 0.2843 * x**3 - 0.1015 * x**4)
    return np.r_[x[::-1], x[1:]], np.r_[y[::-1], -y[1:]]


def _blunt() -> Contour:
    return Contour.of(*_blunt_points())
