"""From body axes to wind axes; no small-angle form."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

Values = NDArray[Any]


def wind_axes(cn: Values, ct: Values, alpha: Values) -> tuple[Values, Values]:
    """Lift and pressure drag coefficients (cl, cd_pressure); alpha [rad]."""
    cos, sin = np.cos(alpha), np.sin(alpha)
    return cn * cos - ct * sin, cn * sin + ct * cos
