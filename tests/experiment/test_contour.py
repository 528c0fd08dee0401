"""Placing taps on the contour."""

from __future__ import annotations

import numpy as np

from exact_sections import section
from tapband.experiment.contour import Contour

CIRCLE = np.linspace(0.0, 2.0 * np.pi, 201)


def _circle() -> Contour:
    return Contour.of(0.5 + 0.5 * np.cos(CIRCLE), 0.5 * np.sin(CIRCLE))


def test_arc_length_of_a_circle() -> None:
    contour = _circle()
    # A cubic spline through 200 points of a circle of diameter one: fourth order in the step of 0.0157.
    assert abs(contour.s_upper - np.pi / 2) < 1e-7
    assert abs(contour.s_lower + np.pi / 2) < 1e-7


def test_places_by_station_and_by_point_agree() -> None:
    exact = section(-0.1 + 0.1j, 1.9)
    contour = Contour.of(*exact.contour(401))
    places = exact.taps(41, "cosine", 0.97)
    by_point, distance = contour.place_xy(places.x, places.y)
    inner = places.x > 0.001
    by_station = contour.place_x(places.x[inner], places.upper[inner])
    assert distance.max() < 1e-7
    np.testing.assert_allclose(by_station, by_point[inner], atol=1e-6)
    np.testing.assert_allclose(by_point, places.s, atol=2e-6)  # the exact arc length, nose at least x


def test_a_station_beyond_the_surface_has_no_place() -> None:
    contour = _circle()
    s = contour.place_x(np.array([1.01, 1.001, -0.01]), np.array([True, True, False]))
    assert np.isnan(s[[0, 2]]).all()
    assert s[1] == contour.s_upper


def test_upper_follows_from_the_direction_of_travel_not_from_the_sign_of_y() -> None:
    """A section so cambered that its lower surface lies above the chord line."""
    exact = section(-0.05 + 0.5j, 1.95)
    x, y = exact.contour(401)
    assert np.interp(0.5, x[200:][::1], y[200:]) != 0.0
    contour = Contour.of(x, y)
    s = contour.place_x(np.array([0.5, 0.5]), np.array([True, False]))
    py = contour.point(s)[1]
    assert py[0] > py[1] > 0.0
