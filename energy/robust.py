"""Centres and spreads that a few wild values hardly move: median and MAD, algorithms A and S (ISO 13528, ISO 5725-5)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import gammainc, gammaincinv

from energy.problems import WrongUse

Floats = NDArray[np.float64]

#: makes the median of absolute deviations a standard deviation where values are normal (ISO 13528)
MAD_TO_SD = 1.483
#: algorithm A: values farther than 1.5 s* are pulled in; 1.134 makes up for what that takes from the spread (ISO 13528)
PULLED_BEYOND, SPREAD_AGAIN = 1.5, 1.134
#: standard uncertainty of a robust mean of p values: 1.25 s* / sqrt p (ISO 13528)
MEAN_U = 1.25


@dataclass(frozen=True)
class RobustMean:
    """centre and standard deviation of n values, after so many iterations (0: none were needed)."""

    centre: float
    sd: float
    n: int
    iterations: int

    @property
    def u(self) -> float:
        """Standard uncertainty of the centre."""
        return float(MEAN_U * self.sd / np.sqrt(self.n))


def _given(values: ArrayLike) -> Floats:
    v = np.asarray(values, dtype=float)
    v = v[~np.isnan(v)]
    if not len(v):
        raise WrongUse("There is no value to take a centre of.", "Give at least one.")
    return v


def median_and_mad(values: ArrayLike) -> RobustMean:
    """Median, and 1.483 times the median of the absolute deviations from it. NaN are left out. Raises WrongUse."""
    v = _given(values)
    centre = float(np.median(v))
    return RobustMean(centre, MAD_TO_SD * float(np.median(np.abs(v - centre))), len(v), 0)


def algorithm_a(values: ArrayLike, tolerance: float = 1e-9, iterations: int = 500) -> RobustMean:
    """Robust mean and standard deviation of (n,) values, NaN left out (ISO 13528, ISO 5725-5).

    Stops when neither moves by more than `tolerance` times s*, or after `iterations`: s* converges slowly, and 'no change
    in the third figure' would stop some 3 % low. Where more than half the values are equal, s* is 0 and so it stays.
    Raises WrongUse without a value.
    """
    v = _given(values)
    start = median_and_mad(v)
    centre, sd = start.centre, start.sd
    for step in range(iterations):
        if sd == 0 or len(v) < 2:
            return RobustMean(centre, sd, len(v), step)
        reach = PULLED_BEYOND * sd
        pulled = np.clip(v, centre - reach, centre + reach)
        mean, new = float(pulled.mean()), SPREAD_AGAIN * float(pulled.std(ddof=1))
        still = abs(new - sd) <= tolerance * new and abs(mean - centre) <= tolerance * new
        centre, sd = mean, new
        if still:
            return RobustMean(centre, sd, len(v), step + 1)
    return RobustMean(centre, sd, len(v), iterations)


def algorithm_s(spreads: ArrayLike, freedom: int = 1, tolerance: float = 1e-9, iterations: int = 500) -> float:
    """Robust pooled value of (p,) standard deviations, or ranges of pairs, of `freedom` degrees each (ISO 5725-5).

    Limit factor and adjustment are computed: eta^2 = chi2(0.9) / freedom, and 1 / xi^2 the mean of the squares pulled to
    eta; 1.645 and 1.097 for one degree of freedom. For ranges of pairs, s_r is the result over sqrt 2. Raises WrongUse.
    """
    w = _given(spreads)
    eta = float(np.sqrt(2 * gammaincinv(freedom / 2, 0.9) / freedom))
    kept = float(gammainc(freedom / 2 + 1, freedom * eta**2 / 2))
    xi = 1 / np.sqrt(kept + 0.1 * eta**2)
    found = float(np.median(w))
    for _ in range(iterations):
        new = float(xi * np.sqrt((np.minimum(w, eta * found) ** 2).mean()))
        if abs(new - found) <= tolerance * new:
            return new
        found = new
    return found
