"""Compressible flow about a Joukowski section to the order M², exactly: what rules of compressibility are held to.

The potential φ₀ + M²φ₁ with ∇²φ₁ = ½∇φ₀·∇q₀². With w the complex velocity of the incompressible flow and
I = ∫w²dz, ¼Re[w(Ī + c̄ ln(ζ − μ))] is a single-valued solution (c the residue of w²); an analytic function is added
that takes away its flow through the surface and at infinity, and a vortex for a smooth flow off the trailing edge.
Everything is evaluated on the circle ζ = μ + R exp(iθ), by discrete Fourier transform.

*Source* Lord Rayleigh, Phil. Mag. 32 (1916) 1; Janzen, Phys. Z. 14 (1913) 639; the complex form after Imai (1942);
all from memory. Held to three things that are known: 7/6 at the shoulder of a circle; Kutta and Joukowski's theorem
against integrated pressure, and no drag; Kaplan's rule for lift (NACA Report 863, from memory) within 2 %.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]


@dataclass(frozen=True, slots=True, kw_only=True)
class Series:
    """At N places of the surface, counterclockwise from the trailing edge: z, incompressible Cp, ∂Cp/∂M² at M = 0.

    ``lift`` and ``lift_slope`` are cl and ∂cl/∂M² from the circulation, times the chord.
    """

    z: Complex
    dz: Complex
    speed: Array
    speed_slope: Array
    cp: Array
    cp_slope: Array
    lift: float
    lift_slope: float

    def force(self, cp: Array, alpha: float) -> tuple[float, float]:
        """Lift and drag of a pressure coefficient on the surface, in units of length."""
        x, y = -float(cp @ self.dz.imag), float(cp @ self.dz.real)
        return y * np.cos(alpha) - x * np.sin(alpha), x * np.cos(alpha) + y * np.sin(alpha)


def joukowski(mu: complex, alpha: float, places: int = 2048) -> Series:
    """The flow about z = ζ + 1/ζ of the circle about μ through ζ = 1, at the angle of attack [rad]."""
    radius, beta = abs(1.0 - mu), -float(np.angle(1.0 - mu))
    theta = -beta + 2.0 * np.pi * (np.arange(places) + 0.5) / places
    zeta = mu + radius * np.exp(1j * theta)
    vortex = 2.0 * radius * np.sin(alpha + beta)
    return _series(zeta + 1.0 / zeta, 1.0 - 1.0 / zeta**2, theta, radius, alpha, vortex, kutta=True)


def circle(places: int = 512) -> Series:
    """The flow about a circle of radius 1, without circulation."""
    theta = 2.0 * np.pi * (np.arange(places) + 0.5) / places
    zeta = np.exp(1j * theta)
    return _series(zeta, np.ones_like(zeta), theta, 1.0, 0.0, 0.0, kutta=False)


def _series(
    z: Complex, z_zeta: Complex, theta: Array, radius: float, alpha: float, vortex: float, *, kutta: bool
) -> Series:
    """``vortex`` is the circulation (clockwise) over 2π; z is the map and its slope at ζ on the circle."""
    unit = np.exp(1j * theta)
    in_circle_plane = np.exp(-1j * alpha) - np.exp(1j * alpha) / unit**2 + 1j * vortex / (radius * unit)
    w, z_theta = in_circle_plane / z_zeta, 1j * radius * unit * z_zeta
    along = (in_circle_plane * 1j * radius * unit).real
    wave = np.fft.fftfreq(theta.size, 1.0 / theta.size)
    squared = w * along
    residue = squared.mean() / 1j
    swing = np.fft.fft(squared - squared.mean())
    swing[1:] /= 1j * wave[1:]
    inside = np.conj(np.fft.ifft(swing)) + np.conj(residue) * np.log(radius)
    w_theta = np.fft.ifft(1j * wave * np.fft.fft(w))
    particular = 0.25 * (w_theta * inside + 1j * w * np.conj(residue))
    far = -0.25j * np.exp(-1j * alpha) * radius * unit
    # What flows through the circle is taken away by a function that is analytic outside it.
    through = np.fft.fft(-particular.imag - far.imag)
    rest = np.fft.ifft(np.where(wave < 0.0, 2j * through, 0.0))
    slope = particular.real + 0.25 * np.abs(w) ** 2 * along + (far + rest).real
    if kutta:
        half_a_place = np.exp(-1j * wave * np.pi / theta.size)
        slope = slope - float(np.mean(np.fft.fft(slope) * half_a_place).real)
    stretch = np.abs(z_theta)
    speed, speed_slope = along / stretch, slope / stretch
    cp = 1.0 - speed**2
    return Series(
        z=z,
        dz=z_theta * 2.0 * np.pi / theta.size,
        speed=speed,
        speed_slope=speed_slope,
        cp=cp,
        cp_slope=-2.0 * speed * speed_slope + 0.25 * cp**2,
        lift=4.0 * np.pi * vortex,
        lift_slope=-2.0 * float(np.sum(slope)) * 2.0 * np.pi / theta.size,
    )
