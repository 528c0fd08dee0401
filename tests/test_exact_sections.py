"""The exact sections agree with printed values, and with themselves when integrated."""

from __future__ import annotations

import numpy as np
import pytest

from exact_sections import coefficients, section, section_of

# Recomputed for this project by residues and by surface integration; printed to six decimals.
TABLE = [
    (-0.10, 2.0, 5.0, 4.033333, -2.033333, 0.597399, -0.002347, 0.595126, -0.052067),
    (-0.10 + 0.10j, 2.0, 5.0, 4.033604, -2.033604, 1.218072, -0.146843, 1.213437, -0.106162),
    (-0.10 + 0.10j, 1.9, 5.0, 3.840682, -1.940682, 1.279257, -0.166367, 1.274389, -0.111495),
    (-0.08 + 0.05j, 2.0 - 1.0 / 18.0, 4.0, 3.913758, -1.969313, 0.804087, -0.081564, 0.802128, -0.056090),
]
HALF_DIGIT = 0.6e-6
"""Half a unit of the sixth decimal, and a tenth for the printed inputs."""


@pytest.mark.parametrize(("mu", "n", "alpha", "chord", "x_nose", "cl", "cm", "cn", "ct"), TABLE)
def test_closed_form_gives_the_tabulated_coefficients(
    mu: complex,
    n: float,
    alpha: float,
    chord: float,
    x_nose: float,
    cl: float,
    cm: float,
    cn: float,
    ct: float,
) -> None:
    exact = section(mu, n)
    got = exact.coefficients(np.radians(alpha))
    assert [exact.chord, exact.x_nose] == pytest.approx([chord, x_nose], abs=HALF_DIGIT)
    assert [got.cl, got.cm, got.cn, got.ct] == pytest.approx([cl, cm, cn, ct], abs=HALF_DIGIT)


@pytest.mark.parametrize(("mu", "n"), [(row[0], row[1]) for row in TABLE])
def test_surface_pressure_integrates_to_the_closed_form(mu: complex, n: float) -> None:
    exact = section(mu, n)
    alpha = np.radians([-3.0, 0.0, 7.0])
    theta = np.linspace(2.0 * np.pi - exact.beta, -exact.beta, 40001)
    x, y = exact.point(theta)
    cp = exact.cp(theta, alpha)
    middle, dx, dy = 0.5 * (cp[:, 1:] + cp[:, :-1]), np.diff(x), np.diff(y)
    xm, ym = 0.5 * (x[1:] + x[:-1]), 0.5 * (y[1:] + y[:-1])
    want = exact.coefficients(alpha)
    # The trapezoidal rule on 40,000 intervals leaves about 1e-8.
    assert -middle @ dx == pytest.approx(want.cn, abs=1e-7)
    assert middle @ dy == pytest.approx(want.ct, abs=1e-7)
    assert middle @ ((xm - 0.25) * dx + ym * dy) == pytest.approx(want.cm, abs=1e-7)


def test_coefficients_broadcast_as_the_single_sections_do() -> None:
    mu = np.array([[-0.1], [-0.08 + 0.05j]])
    n = np.array([[2.0], [1.9]])
    alpha = np.radians([0.0, 4.0, 8.0])
    together = coefficients(mu, n, alpha)
    apart = np.array([section(m, e).coefficients(alpha).cm for m, e in zip(mu[:, 0], n[:, 0], strict=True)])
    assert together.cm.shape == (2, 3)
    assert together.cm == pytest.approx(apart, abs=1e-14)


@pytest.mark.parametrize("n", [2.0, 1.9])
def test_arc_length_equals_the_length_of_a_fine_polygon(n: float) -> None:
    exact = section(-0.1 + 0.1j, n)
    theta = np.linspace(exact.theta_nose, -exact.beta, 20001)
    x, y = exact.point(theta)
    # A chord of the polygon is short of its arc by h³κ²/24: about 1e-9 in all.
    assert exact.arc_length(-exact.beta) == pytest.approx(np.sum(np.hypot(np.diff(x), np.diff(y))), abs=1e-8)


def test_taps_stand_on_the_contour_where_the_layout_says() -> None:
    exact = section_of(0.12, 0.02)
    taps = exact.taps(41, "sqrt", rearmost=0.97)
    t = np.arange(21) / 20
    assert taps.x[20:] == pytest.approx(0.97 * t**2, abs=1e-12)
    assert taps.x[20::-1] == pytest.approx(0.97 * t**2, abs=1e-12)
    assert np.all(np.diff(taps.s) > 0.0)
    assert taps.s[20] == 0.0
    assert exact.thickness == pytest.approx(0.12, abs=1e-6)


def test_pressure_at_a_sharp_trailing_edge_is_finite_for_a_cusp_and_stagnant_for_a_wedge() -> None:
    cusp, wedge = section(-0.1), section(-0.1, 1.9)
    assert cusp.cp(-cusp.beta, 0.1) == pytest.approx(cusp.cp(2.0 * np.pi - cusp.beta, 0.1), abs=1e-9)
    assert wedge.cp(-wedge.beta, 0.1) == 1.0
