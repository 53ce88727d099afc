"""Control charts: individuals with their limits (Shewhart), cumulative sums, drift. (n,) arrays in the order of time."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import stats

from energy.bomb.constants import value as constant

Floats = NDArray[np.float64]
#: mean absolute difference of two normal values, in standard deviations: 2 / sqrt(pi)
D2 = 2 / np.sqrt(np.pi)
#: Shewhart's limits, in standard deviations
WARNING, ACTION = 2.0, 3.0
DAYS_PER_MONTH = 365.25 / 12


@dataclass(frozen=True)
class Individuals:
    """Values about a centre. score : (n,) (value - centre) / sigma. sigma_from : words. action, warning : (n,) bool."""

    values: Floats
    centre: float
    sigma: float
    sigma_from: str
    score: Floats

    @property
    def warning(self) -> NDArray[np.bool_]:
        """Beyond two standard deviations."""
        return np.abs(self.score) > WARNING

    @property
    def action(self) -> NDArray[np.bool_]:
        """Beyond three standard deviations."""
        return np.abs(self.score) > ACTION

    def limits(self, width: float = ACTION) -> tuple[float, float]:
        """Lower and upper limit."""
        return self.centre - width * self.sigma, self.centre + width * self.sigma


def individuals(values: ArrayLike, centre: float | None = None, sigma: float | None = None) -> Individuals:
    """Chart of single values; NaN stays out. centre : their mean where None. sigma : from the mean moving range where None."""
    x = np.asarray(values, dtype=float)
    known = x[np.isfinite(x)]
    mid = float(known.mean()) if centre is None and len(known) else (np.nan if centre is None else centre)
    told = "given"
    if sigma is None:
        sigma = float(np.abs(np.diff(known)).mean() / D2) if len(known) > 1 else np.nan
        told = f"mean moving range of {len(known)} values over {D2:.3f}"
    with np.errstate(invalid="ignore", divide="ignore"):
        score = (x - mid) / sigma if sigma > 0 else np.full(x.shape, np.nan)
    return Individuals(x, mid, sigma, told, np.asarray(score))


@dataclass(frozen=True)
class Cusum:
    """Tabular cumulative sums in the values' unit. upper, lower : (n,). k, h : reference and decision value, same unit.

    signal : (n,) bool. since : (n,) index after which the sum has been above zero, i.e. where a shift may have begun.
    """

    upper: Floats
    lower: Floats
    k: float
    h: float
    since_upper: NDArray[np.intp]
    since_lower: NDArray[np.intp]

    @property
    def signal(self) -> NDArray[np.bool_]:
        """One of the sums lies beyond the decision interval."""
        return (self.upper > self.h) | (self.lower > self.h)


def cusum(values: ArrayLike, centre: float, sigma: float, k: float | None = None, h: float | None = None) -> Cusum:
    """C+ = max(0, C+ + x - centre - K) and C- likewise; k and h in standard deviations (Montgomery: 0.5 and 5)."""
    x = np.asarray(values, dtype=float)
    reference = (constant("cusum_reference") if k is None else k) * sigma
    decision = (constant("cusum_decision") if h is None else h) * sigma
    # a value that is missing leaves both sums where they are
    upper, since_up = _sums(np.nan_to_num(x - centre - reference, nan=0.0))
    lower, since_down = _sums(np.nan_to_num(centre - x - reference, nan=0.0))
    return Cusum(upper, lower, reference, decision, since_up, since_down)


def _sums(steps: Floats) -> tuple[Floats, NDArray[np.intp]]:
    """Sums that never fall below zero, and the last index at which each was zero (-1 before the first).

    The running sum less its lowest point so far, and zero before it, is what the recursion gives.
    """
    total = np.cumsum(steps)
    lowest = np.minimum(np.minimum.accumulate(total), 0.0)
    found = total - lowest
    at_zero = np.where(found <= 0, np.arange(len(steps)), -1)
    return found, np.maximum.accumulate(at_zero) if len(steps) else at_zero


def reasons(chart: Individuals, sums: Cusum) -> list[str]:
    """(n,) why a point calls for attention, '' where it does not."""
    found = []
    for i in range(len(chart.values)):
        told = []
        if chart.action[i] or chart.warning[i]:
            side = "above" if chart.score[i] > 0 else "below"
            call = "action" if chart.action[i] else "warning"
            told.append(f"{call}: {abs(chart.score[i]):.1f} standard deviations {side} the centre")
        for name, sum_, since in (("upward", sums.upper, sums.since_upper), ("downward", sums.lower, sums.since_lower)):
            if sum_[i] > sums.h:
                told.append(
                    f"{name} shift: the cumulative sum passes {sums.h:.3g} (it is {sum_[i]:.3g}); it began after point {since[i] + 1}"
                )
        found.append("; ".join(told))
    return found


@dataclass(frozen=True)
class Drift:
    """Change per month with its standard uncertainty and how probable so large a one is without any drift; NaN below 3 points."""

    per_month: float
    u: float
    p: float
    n: int

    @property
    def words(self) -> str:
        """The drift as people say it."""
        if self.n < 3 or not np.isfinite(self.per_month):
            return "too few points for a drift"
        sure = "no drift can be told from scatter" if self.p > 0.05 else "the drift is real"
        return f"{self.per_month:+.3g} per month (u {self.u:.2g}, p {self.p:.2g}): {sure}"


def drift(days: ArrayLike, values: ArrayLike) -> Drift:
    """Least-squares line over time. days : (n,) any origin."""
    t, x = np.asarray(days, dtype=float), np.asarray(values, dtype=float)
    use = np.isfinite(t) & np.isfinite(x)
    if use.sum() < 3 or np.ptp(t[use]) == 0:
        return Drift(np.nan, np.nan, np.nan, int(use.sum()))
    line = stats.linregress(t[use], x[use])
    return Drift(line.slope * DAYS_PER_MONTH, line.stderr * DAYS_PER_MONTH, float(line.pvalue), int(use.sum()))
