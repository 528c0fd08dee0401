"""The mean of a series in time, and how well it is known: batch means, their number chosen and checked.

Neighbouring samples are alike, so s/√n is far too small. Means of batches much longer than the memory of the
series are nearly independent, and their scatter carries the correlation in time and between columns.

*Source* Conway, Management Science 10 (1963) 47; Law and Kelton, Simulation Modeling and Analysis, ch. 9
(batch means); Sokal, Monte Carlo methods in statistical mechanics (1989), sec. 3 (window of the integral time
scale); all from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.fft import irfft, next_fast_len, rfft
from scipy.special import stdtr

Array = NDArray[np.float64]

FEW = 20
"""Fewer samples than this are too few to see how they are correlated in time."""
FEWEST, MOST = 5, 20
"""Numbers of batches."""
EACH = 10.0
"""Effective samples wanted in each batch."""
SHORT = 75.0
"""Fewer effective samples in all leave the means of batches alike, or too few of them."""
WINDOW = 6.0
"""Lags, in integral time scales, over which the correlation is summed."""
DRIFT = 0.002
"""Probability of a trend by chance under which it counts as drift; some columns of many points are tried."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class SeriesMean:
    """What a series (n, m) says of its mean."""

    covariance: Array
    """(m, m) of the mean, from b batches: ν = b − 1."""
    samples: int
    batches: int
    effective: Array
    """(m,) effective sample size, at most n; NaN where a column does not vary or is missing."""
    time_scale: Array
    """(m,) integral time scale, in samples; ½ where they are independent."""
    drift: Array
    """(m,) change along the record by a straight line through the means of batches."""
    drift_p: Array
    """(m,) probability of so large a trend by chance."""
    short: bool
    """Whether the record is short against the memory of the series."""

    @property
    def drifts(self) -> NDArray[np.bool_]:
        """(m,) whether the mean moves along the record."""
        return np.asarray(self.drift_p < DRIFT)

    @property
    def notes(self) -> tuple[str, ...]:
        """What to say of the record as a whole."""
        if self.samples < FEW:
            return (
                f"{self.samples} samples are too few to see correlation in time; they are taken as independent",
            )
        if not self.short:
            return ()
        least = float(np.nanmin(self.effective))
        return (
            f"the record is short: its {self.samples} samples are worth about {least:.0f} independent ones, "
            f"in {self.batches} batches; its scatter may be taken too small",
        )


def series_mean(series: Array) -> SeriesMean:
    """The mean of a series (n, m) in time order, n at least 2.

    The number of batches is chosen so that each holds about ten effective samples, between 5 and 20. With
    fewer than 20 samples each sample is its own batch.
    """
    size, columns = series.shape
    scale = np.array([integral_time_scale(series[:, j]) for j in range(columns)])
    effective = np.minimum(size / (2.0 * scale), size)
    least = float(np.nanmin(effective)) if np.any(np.isfinite(effective)) else float(size)
    few = size < FEW
    batches = size if few else int(np.clip(least // EACH, FEWEST, MOST))
    length = size // batches
    means = series[size - batches * length :].reshape(batches, length, columns).mean(axis=1)
    centred = means - means.mean(axis=0)
    drift, p = trend(means)
    return SeriesMean(
        covariance=centred.T @ centred / (batches * (batches - 1)),
        samples=size,
        batches=batches,
        effective=effective,
        time_scale=scale,
        drift=drift,
        drift_p=np.ones(columns) if few else p,
        short=not few and (least < min(SHORT, 0.7 * size) or _correlated(centred)),
    )


def integral_time_scale(values: Array) -> float:
    """½ + Σ ρ(lag) of one column (n,), in samples; NaN where it does not vary.

    Summed to the first lag past six time scales, which keeps the noise of far lags out.
    """
    size = values.size
    centred = values - values.mean()
    power = float(centred @ centred)
    if size < 4 or not power > 0.0:
        return np.nan
    length = next_fast_len(2 * size, real=True)
    spectrum = np.asarray(rfft(centred, length))
    correlation = np.asarray(irfft(np.abs(spectrum) ** 2, length))[: size // 2] / power
    sums = 0.5 + np.cumsum(correlation[1:])
    inside = np.arange(1, sums.size + 1) < WINDOW * sums
    last = int(np.argmin(inside)) if not inside.all() else sums.size - 1
    return max(float(sums[last]), 0.5)


def trend(means: Array) -> tuple[Array, Array]:
    """Change (m,) along a record by the line through its batch means (b, m), and its probability by chance."""
    b = len(means)
    if b < 4:
        return np.zeros(means.shape[1]), np.ones(means.shape[1])
    x = np.arange(b) - 0.5 * (b - 1)
    slope = x @ means / (x @ x)
    left = means - means.mean(axis=0) - x[:, None] * slope
    u = np.sqrt(np.sum(left**2, axis=0) / (b - 2) / (x @ x))
    with np.errstate(invalid="ignore", divide="ignore"):
        t = np.abs(slope) / u
    t = np.where(np.isfinite(t), t, np.where(np.abs(slope) > 0.0, np.inf, 0.0))
    return slope * b, np.asarray(2.0 * stdtr(b - 2.0, -t))


def _correlated(centred: Array) -> bool:
    """Whether neighbouring batch means (b, m), centred, are alike beyond chance (von Neumann's ratio).

    Under independence the ratio of the mean square successive difference to the variance has mean 2 and
    variance 4(b − 2)/(b² − 1); below three standard deviations a drift or a memory longer than a batch is left.
    """
    b = len(centred)
    variance = np.sum(centred**2, axis=0) / (b - 1)
    successive = np.sum(np.diff(centred, axis=0) ** 2, axis=0) / (b - 1)
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = successive / variance
    low = 2.0 - 3.0 * np.sqrt(4.0 * (b - 2) / (b * b - 1.0))
    return bool(np.any(ratio < low))
