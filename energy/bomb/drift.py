"""Straight drifts of many time-temperature records at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class Drift:
    """A drift of n records: rate (K per unit of time) at the mean time and temperature of its readings.

    sd : residual standard deviation about the line, NaN under three readings. count : readings. sxx : sum of squares of
    their times about the mean time.
    """

    rate: Floats
    time: Floats
    temperature: Floats
    sd: Floats
    count: NDArray[np.intp]
    sxx: Floats

    def at(self, time: Floats) -> Floats:
        """The line's temperature."""
        return self.temperature + self.rate * (time - self.time)


def fit(t: Floats, temp: Floats) -> Drift:
    """Straight lines through the readings of each row that are not NaN."""
    ok = ~np.isnan(temp) & ~np.isnan(t)
    count = ok.sum(axis=1)
    some = np.maximum(count, 1)
    mean_t = np.where(ok, t, 0.0).sum(axis=1) / some
    mean_y = np.where(ok, temp, 0.0).sum(axis=1) / some
    x = np.where(ok, t - mean_t[:, None], 0.0)
    y = np.where(ok, temp - mean_y[:, None], 0.0)
    sxx = (x * x).sum(axis=1)
    rate = np.divide((x * y).sum(axis=1), sxx, out=np.zeros(len(t)), where=sxx > 0)
    rest = np.where(ok, y - rate[:, None] * x, 0.0)
    with np.errstate(invalid="ignore", divide="ignore"):
        sd = np.where(count > 2, np.sqrt((rest**2).sum(axis=1) / (count - 2)), np.nan)
    return Drift(rate, mean_t, mean_y, sd, count, sxx)
