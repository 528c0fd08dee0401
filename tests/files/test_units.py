"""Units at the edge: the table, the three inches of water, and pint for the rest."""

from __future__ import annotations

import subprocess
import sys
from math import isclose, pi

import pytest

from tapband.files.faults import RuleError
from tapband.files.units import (
    ANGLE,
    LENGTH,
    NUMBER,
    PRESSURE,
    TABLE,
    TEMPERATURE,
    TIME,
    chords,
    fraction,
    quantity,
    unit,
)

# NIST Special Publication 811 (2008), appendix B.8, from memory; seven figures are printed there, fewer where
# the quantity is known to fewer.
SP_811 = {
    "atm": (101325.0, 1e-12), "bar": (1e5, 1e-12), "psi": (6894.757, 5e-8), "psf": (47.88026, 5e-8),
    "torr": (133.3224, 5e-7), "mmHg": (133.3224, 5e-7), "inHg": (3386.389, 5e-7),
    "inH2O_4C": (249.082, 2e-6), "inH2O_60F": (248.84, 2e-5), "inH2O_conventional": (249.0889, 2e-7),
    "mmH2O": (9.80665, 1e-12), "cmH2O": (98.0665, 1e-12),
}  # fmt: skip


@pytest.mark.parametrize("name", SP_811)
def test_pressure_units_have_the_published_factors(name: str) -> None:
    factor, printed = SP_811[name]
    assert isclose(quantity(f"1 {name}", PRESSURE), factor, rel_tol=printed)


def test_conventional_inch_of_water_is_its_definition() -> None:
    """0.0254 m of 1000 kg/m³ under 9.80665 m/s² (exact)."""
    assert isclose(quantity("1 inH2O_conventional", PRESSURE), 0.0254 * 1000.0 * 9.80665, rel_tol=1e-15)


def test_three_inches_of_water_differ_as_water_does() -> None:
    """Density of water over 1000 kg/m³: 0.999972 at 4 °C, 0.999014 at 60 °F, computed from the formula of
    Kell (1975, from memory). The factors are printed to six and to five digits."""
    four, sixty, conventional = (quantity(f"1 inH2O_{w}", PRESSURE) for w in ("4C", "60F", "conventional"))
    assert isclose(four / conventional, 0.999972, abs_tol=2e-6)
    assert isclose(sixty / conventional, 0.999014, abs_tol=2e-5)


@pytest.mark.parametrize("name", ["inH2O", "in H2O", "inWC", "inches of water", "iwc", "inAq", "inh2o"])
def test_bare_inch_of_water_is_refused(name: str) -> None:
    with pytest.raises(RuleError, match="which inch of water"):
        quantity(f"2 {name}", PRESSURE)


@pytest.mark.parametrize(
    ("text", "dimension", "si"),
    [
        ("35 Pa", PRESSURE, 35.0), ("7kPa", PRESSURE, 7000.0), ("-1.5e2 hPa", PRESSURE, -15000.0),
        ("1 N/m^2", PRESSURE, 1.0), ("400 mm", LENGTH, 0.4), ("2 in", LENGTH, 0.0508), ("180 deg", ANGLE, pi),
        ("1 mrad", ANGLE, 1e-3), ("293 K", TEMPERATURE, 293.0), ("20 degC", TEMPERATURE, 293.15),
        ("68 degF", TEMPERATURE, 293.15), ("0.05 s", TIME, 0.05), ("0.002", NUMBER, 0.002),
        (0.002, NUMBER, 0.002), (3, NUMBER, 3.0),
    ],
)  # fmt: skip
def test_common_quantities_become_si(text: object, dimension: str, si: float) -> None:
    assert isclose(quantity(text, dimension), si, rel_tol=1e-14)


@pytest.mark.parametrize(
    ("text", "dimension", "si"),
    [
        ("1 kgf/cm^2", PRESSURE, 98066.5), ("1 dyn/cm**2", PRESSURE, 0.1), ("1 dyne/cm**2", PRESSURE, 0.1),
        ("2 yard", LENGTH, 1.8288), ("1 week", TIME, 604800.0), ("300 kelvin", TEMPERATURE, 300.0),
        ("1 pascal", PRESSURE, 1.0),
    ],
)  # fmt: skip
def test_other_units_come_from_pint(text: str, dimension: str, si: float) -> None:
    assert isclose(quantity(text, dimension), si, rel_tol=1e-12)


def test_table_agrees_with_pint_where_both_know_a_unit() -> None:
    """pint's own definitions are an independent source; the inches of water are named differently there."""
    import pint

    registry = pint.UnitRegistry()
    for name, base in (
        ("kPa", "Pa"),
        ("psi", "Pa"),
        ("torr", "Pa"),
        ("mmHg", "Pa"),
        ("ft", "m"),
        ("arcmin", "rad"),
    ):
        assert isclose(TABLE[name].factor, registry.Quantity(1.0, name).to(base).magnitude, rel_tol=1e-9), (
            name
        )


@pytest.mark.parametrize(
    "text",
    [
        "35 Pz",
        "35 Pa**99",
        "35 9**9**9",
        "35 (Pa",
        "35 Pa Pa",
        "35 m**2",
        "35 __class__",
        "35 " + "m*" * 40,
        "1 x",
    ],
)
def test_what_is_no_pressure_is_refused(text: str) -> None:
    with pytest.raises(RuleError):
        quantity(text, PRESSURE)


@pytest.mark.parametrize(
    "text", ["nan Pa", "inf Pa", "1e999 Pa", "Pa", "", "0x10 Pa", "1_000 Pa", "±3 Pa", "1,5 Pa"]
)
def test_what_is_no_finite_number_is_refused(text: str) -> None:
    with pytest.raises(RuleError):
        quantity(text, PRESSURE)


def test_integer_past_all_floats_is_refused() -> None:
    with pytest.raises(RuleError, match="finite"):
        quantity(10**400, NUMBER)


def test_lengths_become_chords() -> None:
    assert chords(0.001, 0.4) == 0.001
    assert chords("0.001", 0.4) == 0.001
    assert isclose(chords("0.1 mm", 0.4), 0.00025, rel_tol=1e-15)
    assert isclose(chords("0.1 % of chord", 0.4), 0.001, rel_tol=1e-15)


def test_fractions_are_per_cent_or_plain() -> None:
    assert fraction("25 %") == 0.25
    assert fraction(0.25) == 0.25
    with pytest.raises(RuleError):
        fraction("25 Pa")


def test_reading_common_units_does_not_import_pint() -> None:
    code = (
        "import sys; from tapband.files.units import quantity; quantity('3 kPa', 'pressure');"
        "assert 'pint' not in sys.modules; quantity('3 pascal', 'pressure'); assert 'pint' in sys.modules"
    )
    subprocess.run([sys.executable, "-c", code], check=True)


def test_unit_is_looked_up_once() -> None:
    assert unit("furlong") is unit("furlong")
