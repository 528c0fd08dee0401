"""An error source as the campaign declares it, in SI units: what it acts on, how large, how shared."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from math import inf, sqrt


class Shape(StrEnum):
    """Distribution of a standardised latent (mean 0, variance 1 where it exists)."""

    NORMAL = "normal"
    RECTANGULAR = "rectangular"
    TRIANGULAR = "triangular"
    TRAPEZOIDAL = "trapezoidal"
    ARCSINE = "arcsine"


class Scale(StrEnum):
    """What a size multiplies."""

    ABSOLUTE = "absolute"
    READING = "reading"
    FULL_SCALE = "full scale"


@dataclass(frozen=True, slots=True, kw_only=True)
class Term:
    """One term of a size: bounds in SI units, or as a fraction of the reading or of the full scale.

    For a symmetric statement ``lower == -upper``.
    """

    lower: float
    upper: float
    scale: Scale = Scale.ABSOLUTE

    @property
    def half(self) -> float:
        """Half-width."""
        return 0.5 * (self.upper - self.lower)

    @property
    def middle(self) -> float:
        """Correction that the middle of the bounds implies (JCGM 100, 4.3.8)."""
        return 0.5 * (self.upper + self.lower)


@dataclass(frozen=True, slots=True, kw_only=True)
class Size:
    """How large an error is: terms whose absolute values add, and the divisor to a standard uncertainty.

    *Source* JCGM 100:2008, 4.3.
    """

    terms: tuple[Term, ...]
    divisor: float
    shape: Shape = Shape.NORMAL
    top: float = 0.0
    dof: float = inf
    reliability: float = 0.0

    @property
    def nu(self) -> float:
        """Degrees of freedom for Welch-Satterthwaite; a relative doubt r gives 1/(2 r²) (JCGM 100, G.4.2)."""
        return min(self.dof, 0.5 / self.reliability**2 if self.reliability > 0 else inf)


def divisor_of(shape: Shape, top: float = 0.0) -> float:
    """Half-width over standard uncertainty of a bounded shape (JCGM 100, 4.3.7-4.3.9; JCGM 101, table 1)."""
    match shape:
        case Shape.RECTANGULAR:
            return sqrt(3.0)
        case Shape.TRIANGULAR:
            return sqrt(6.0)
        case Shape.ARCSINE:
            return sqrt(2.0)
        case Shape.TRAPEZOIDAL:
            return sqrt(6.0 / (1.0 + top * top))
        case Shape.NORMAL:
            raise ValueError("a normal error has no bounds")


INDEPENDENT = "independent"
COMMON = "common"


@dataclass(frozen=True, slots=True, kw_only=True)
class Source:
    """A declared error.

    ``across_taps`` and ``across_points`` are "independent", "common" or the name of a grouping column
    (empty: the source acts on no tap). ``full_scale`` [Pa] overrides that of taps and channels.
    """

    name: str
    group: str
    acts_on: tuple[str, ...]
    size: Size
    across_taps: str = ""
    across_points: str
    full_scale: float | None = None
    place: str = ""

    @property
    def systematic(self) -> bool:
        """Whether points share the error."""
        return self.across_points != INDEPENDENT
