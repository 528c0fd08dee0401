"""Compressibility rules against values computed elsewhere and their own inverses."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq

from tapband.experiment.rule import RULES, concerns, moved, refused, to_incompressible, to_mach
from tapband.experiment.stream import critical_cp

# Recomputed independently from the published formulas; -0.375 is a textbook value (from memory).
VALUES = (
    (-0.3, 0.6, (-0.37500, -0.38961, -0.41229)),
    (-1.0, 0.5, (-1.15470, -1.25150, -1.39964)),
    (0.5, 0.6, (0.62500, 0.58824, 0.54312)),
)


@pytest.mark.parametrize(("cp0", "mach", "expected"), VALUES)
def test_rules_give_the_tabulated_values(cp0: float, mach: float, expected: tuple[float, ...]) -> None:
    for rule, value in zip(RULES, expected, strict=True):
        assert to_mach(np.array(cp0), np.array(mach), rule) == pytest.approx(value, abs=5e-6)


@pytest.mark.parametrize("rule", RULES)
def test_a_rule_and_its_inverse_cancel(rule: str) -> None:
    cp0 = np.linspace(-2.0, 1.0, 31)
    back = to_incompressible(to_mach(cp0, np.array(0.5), rule), np.array(0.5), rule)
    np.testing.assert_allclose(back, cp0, rtol=0, atol=1e-14)
    there = moved(to_mach(cp0, np.array(0.5), rule), np.array(0.5), np.array(0.3), rule)
    np.testing.assert_allclose(there, to_mach(cp0, np.array(0.3), rule), rtol=0, atol=1e-14)


def test_critical_mach_number_by_each_rule() -> None:
    """Recomputed independently for Cp₀ = −0.43."""
    for rule, expected in zip(RULES, (0.7371, 0.7229, 0.7000), strict=True):
        found = brentq(
            lambda m, rule=rule: float(
                to_mach(np.array(-0.43), np.array(m), rule) - critical_cp(np.array(m))
            ),
            0.5,
            0.78,
        )
        assert found == pytest.approx(expected, abs=5e-5)


def test_lift_of_one_becomes_about_1_4_at_mach_0_7() -> None:
    """Common practice, no source."""
    assert to_mach(np.array(1.0), np.array(0.7), "prandtl-glauert") == pytest.approx(1.4, abs=0.05)


def test_rules_are_refused_near_their_poles() -> None:
    """Kármán-Tsien has its pole at Cp₀ = −5, M 0.7; Laitone has turned sign at Cp₀ = −3, M 0.7."""
    mach = np.array([0.7])
    beta = np.sqrt(1 - 0.49)
    assert beta + 0.49 / (1 + beta) * -5.0 / 2 == pytest.approx(0.0, abs=1e-3)
    assert to_mach(np.array(-3.0), np.array(0.7), "laitone") > 0.0
    at_pole = to_mach(np.array([-4.9]), mach, "karman-tsien")
    assert refused(at_pole, mach, 0.0, "karman-tsien")[0]
    assert refused(np.array([-4.9]), np.array([0.0]), 0.7, "karman-tsien")[0]
    assert refused(np.array([-3.0]), np.array([0.0]), 0.7, "laitone")[0]
    assert not refused(np.array([-0.5]), mach, 0.0, "karman-tsien")[0]


def test_rules_are_refused_past_vacuum_and_beyond_mach_one() -> None:
    assert refused(np.array([-3.0]), np.array([0.7]), 0.0, "prandtl-glauert")[0]  # vacuum is −2.92
    assert refused(np.array([-2.2]), np.array([0.0]), 0.75, "prandtl-glauert")[0]  # −3.33 there, vacuum −2.54
    assert refused(np.array([0.1]), np.array([1.01]), 0.0, "prandtl-glauert")[0]


def test_supersonic_places_stagnation_and_high_mach_numbers_are_said() -> None:
    said = concerns(np.array([-1.2, 1.3]), 0.72, 0.0, "prandtl-glauert")
    assert said == (
        "Prandtl-Glauert at Mach 0.720: usable to about 0.7",
        "a Cp of 1.300 lies above stagnation at the measured Mach number 0.720",
        "a Cp of -1.200 is locally supersonic at the measured Mach number 0.720",
    )
    assert concerns(np.array([-0.3, 0.9]), 0.3, 0.0, "karman-tsien") == ()
