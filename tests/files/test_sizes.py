"""Every statement of a size becomes the standard uncertainty of JCGM 100, 4.3."""

from __future__ import annotations

from math import inf, isclose, pi, sqrt
from pathlib import Path

import pytest

from bad_input_corpus import good
from tapband.files.load import load
from tapband.nouns.source import Scale, Shape, Size, Source, Term

STATED = 'expanded = "30 Pa"\nk = 2'
"""How the good campaign states the size of its source "static pressure"."""


def size_of(folder: Path, text: str, *changes: tuple[str, str, str]) -> Size:
    """The size that a statement on the static pressure becomes."""
    campaign = load(good(folder, ("campaign.toml", STATED, text), *changes))
    return next(source for source in campaign.sources if source.name == "static pressure").size


def source_of(folder: Path, name: str, *changes: tuple[str, str, str]) -> Source:
    """A source of the good campaign after changes."""
    return next(source for source in load(good(folder, *changes)).sources if source.name == name)


@pytest.mark.parametrize(
    ("text", "standard", "shape"),
    [
        # U with k is U/k; U at level p is U/Φ⁻¹((1+p)/2), 1.959964 at 95 % (tables of the normal law)
        ('standard = "12 Pa"', 12.0, Shape.NORMAL),
        ('expanded = "30 Pa"\nk = 2', 15.0, Shape.NORMAL),
        ('expanded = "30 Pa"\nlevel = 0.95', 30.0 / 1.959963984540054, Shape.NORMAL),
        # half-width over √3, √6, √2, and √(6/(1+β²)) (JCGM 100, 4.3.7 and 4.3.9; arcsine: JCGM 101, table 1)
        ('limits = "30 Pa"', 30.0 / sqrt(3.0), Shape.RECTANGULAR),
        ('limits = "30 Pa"\nshape = "rectangular"', 30.0 / sqrt(3.0), Shape.RECTANGULAR),
        ('limits = "30 Pa"\nshape = "triangular"', 30.0 / sqrt(6.0), Shape.TRIANGULAR),
        ('limits = "30 Pa"\nshape = "arcsine"', 30.0 / sqrt(2.0), Shape.ARCSINE),
        ('limits = "30 Pa"\nshape = "trapezoidal"\ntop = 0.5', 30.0 * sqrt(1.25 / 6.0), Shape.TRAPEZOIDAL),
        ('limits = "30 Pa"\nshape = "trapezoidal"\ntop = 0', 30.0 / sqrt(6.0), Shape.TRAPEZOIDAL),
        ('limits = "30 Pa"\nshape = "trapezoidal"\ntop = 1', 30.0 / sqrt(3.0), Shape.TRAPEZOIDAL),
        # the full step over √12 (JCGM 100, F.2.2.1)
        ('resolution = "30 Pa"', 30.0 / sqrt(12.0), Shape.RECTANGULAR),
        ('standard = "0 Pa"', 0.0, Shape.NORMAL),
        ('limits = "0.3 hPa"', 30.0 / sqrt(3.0), Shape.RECTANGULAR),
    ],
)
def test_statement_becomes_standard_uncertainty(
    text: str, standard: float, shape: Shape, tmp_path: Path
) -> None:
    size = size_of(tmp_path, text)
    assert isclose(size.terms[0].half / size.divisor, standard, rel_tol=1e-12)
    assert size.terms[0].middle == 0.0
    assert size.shape is shape


def test_one_sided_limits_imply_their_middle_as_correction(tmp_path: Path) -> None:
    """The true value lies in [reading + lower, reading + upper] (JCGM 100, 4.3.8)."""
    (term,) = size_of(tmp_path, 'lower = "0 Pa"\nupper = "20 Pa"').terms
    assert (term.middle, term.half) == (10.0, 10.0)


def test_unequal_limits_keep_shape_and_sign(tmp_path: Path) -> None:
    size = size_of(tmp_path, 'lower = "-30 Pa"\nupper = "-10 Pa"\nshape = "triangular"')
    assert size.terms == (Term(lower=-30.0, upper=-10.0),)
    assert size.shape is Shape.TRIANGULAR


def test_zero_limit_takes_the_kind_of_the_other(tmp_path: Path) -> None:
    (term,) = size_of(tmp_path, 'lower = "0 Pa"\nupper = "0.2 % of reading"').terms
    assert term == Term(lower=0.0, upper=0.002, scale=Scale.READING)


def test_per_cent_multiplies_reading_or_full_scale(tmp_path: Path) -> None:
    (reading,) = size_of(tmp_path, 'limits = "0.05 % of reading"').terms
    assert (reading.scale, reading.half) == (Scale.READING, pytest.approx(5e-4, rel=1e-15))
    (full,) = size_of(tmp_path, 'limits = "0.05 % of full scale"\nfull_scale = "130 kPa"').terms
    assert (full.scale, full.half) == (Scale.FULL_SCALE, pytest.approx(5e-4, rel=1e-15))


def test_list_of_sizes_keeps_its_terms(tmp_path: Path) -> None:
    size = source_of(tmp_path, "port").size
    assert [(term.scale, term.half) for term in size.terms] == [
        (Scale.FULL_SCALE, pytest.approx(2e-4, rel=1e-15)), (Scale.READING, pytest.approx(1e-4, rel=1e-15)),
    ]  # fmt: skip


def test_list_may_be_expanded(tmp_path: Path) -> None:
    change = (
        "campaign.toml",
        'limits = ["0.02 % of full scale"',
        'k = 2\nexpanded = ["0.02 % of full scale"',
    )
    size = source_of(tmp_path, "port", change).size
    assert (size.divisor, len(size.terms)) == (2.0, 2)


def test_doubt_in_a_size_becomes_degrees_of_freedom(tmp_path: Path) -> None:
    """ν = ½ r⁻²: 10 % gives 50, 25 % gives 8, 50 % gives 2 (JCGM 100, G.4.2)."""
    assert size_of(tmp_path, STATED).nu == 12.0
    for text, nu in (("10 %", 50.0), ("25 %", 8.0), ("50 %", 2.0)):
        change = ("campaign.toml", 'reliability = "25 %"', f'reliability = "{text}"')
        assert isclose(source_of(tmp_path, "flow angle", change).size.nu, nu, rel_tol=1e-12)
    assert source_of(tmp_path, "location").size.nu == inf


def test_angles_become_radians_and_lengths_chords(tmp_path: Path) -> None:
    assert isclose(source_of(tmp_path, "flow angle").size.terms[0].half, 0.03 * pi / 180.0, rel_tol=1e-15)
    assert isclose(source_of(tmp_path, "location").size.terms[0].half, 0.1 / 400.0, rel_tol=1e-15)


@pytest.mark.parametrize(
    ("act", "text", "half"),
    [
        ("mach", "0.002", 0.002), ("mach", 0.002, 0.002), ("moment centre", "0.001", 0.001),
        ("moment centre", "0.4 mm", 0.001), ("tap row", "0.4 mm", 0.001), ("chord", "0.5 mm", 5e-4),
        ("trailing-edge coefficient", 0.02, 0.02), ("cl", 0.001, 0.001), ("cd_pressure", "0.0002", 0.0002),
        ("total pressure", "20 Pa", 20.0), ("dynamic pressure", "2 Pa", 2.0), ("angle", "1 mrad", 1e-3),
    ],
)  # fmt: skip
def test_every_quantity_takes_sizes_of_its_dimension(
    act: str, text: object, half: float, tmp_path: Path
) -> None:
    shown = f'"{text}"' if isinstance(text, str) else str(text)
    changes = (("campaign.toml", 'acts_on = "static pressure"', f'acts_on = "{act}"'),)
    size = size_of(tmp_path, f"standard = {shown}", *changes)
    assert isclose(size.terms[0].half, half, rel_tol=1e-14)
