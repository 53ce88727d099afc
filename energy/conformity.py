"""Is it inside the limits? Conformity as a probability, and decision rules (JCGM 106:2012).

`probability_within` speaks of one measured item: what is known of it is a normal distribution around the measured
value, or Student's t scaled by u where u has few degrees of freedom (JCGM 106, 7; JCGM 101, 6.4.9). The *global* risks
at the end speak of a decision rule over many items (JCGM 106, 9) and answer another question.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.integrate import quad
from scipy.optimize import brentq
from scipy.special import ndtr, stdtr

from energy.problems import WrongUse

Floats = NDArray[np.float64]

#: a decision rule is chosen before the result is looked at, and printed with it
DECISION_RULES = {
    "simple": "simple acceptance: inside the tolerance counts as within, whatever the uncertainty (JCGM 106, 8.2)",
    "guarded": "guard band w = U: within only if inside the tolerance by U or more, else not accepted (JCGM 106, 8.3.2)",
    "conditional": "guard band w = U on both sides of a limit: within, outside, or inconclusive between",
}
OUTCOMES = ("within", "outside", "inconclusive", "no_rule", "")
WITHIN, OUTSIDE, INCONCLUSIVE, NO_RULE, NOT_JUDGED = range(5)


def probability_within(
    value: ArrayLike, u: ArrayLike, lower: ArrayLike, upper: ArrayLike, freedom: ArrayLike = np.inf
) -> Floats:
    """Probability that the item measured lies between the limits. All (n,) or single, one unit.

    lower, upper : -inf, inf where there is no limit. freedom : degrees of freedom of u, inf where it is known. NaN where
    value, u or a limit is. With u = 0 it is 0 or 1.
    """
    y, s, low, high, nu = np.broadcast_arrays(*(np.asarray(a, dtype=float) for a in (value, u, lower, upper, freedom)))
    with np.errstate(all="ignore"):
        below, above = _share(y - low, s, nu), _share(y - high, s, nu)
        # between two limits; computed from the nearer tail, so that small shares keep their digits
        found = np.where(y <= (low + high) / 2, _share(high - y, s, nu) - _share(low - y, s, nu), below - above)
    found = np.where(np.isinf(low) & np.isinf(high), 1.0, np.clip(found, 0.0, 1.0))
    return np.where(np.isnan(y) | np.isnan(s) | np.isnan(low) | np.isnan(high), np.nan, found)


def _share(distance: Floats, u: Floats, freedom: Floats) -> Floats:
    """Distribution function at distance / u, of the normal distribution or Student's t."""
    z = np.where(u > 0, distance / np.where(u > 0, u, 1.0), np.where(distance >= 0, np.inf, -np.inf))
    found = ndtr(z)
    few = np.isfinite(freedom)
    if few.any():
        found = np.where(few, stdtr(np.where(few, freedom, 1.0), z), found)
    return np.asarray(found, dtype=float)


def decide(rule: str, value: Floats, guard: Floats, lower: Floats, upper: Floats) -> NDArray[np.int8]:
    """(n,) index into OUTCOMES. guard : (n,) expanded uncertainty U, used by the rules with a guard band.

    A missing value or limit is NOT_JUDGED; a missing U makes a guarded decision INCONCLUSIVE. Raises WrongUse.
    """
    if rule not in DECISION_RULES:
        raise WrongUse(f"There is no decision rule '{rule}'.", f"One of: {', '.join(DECISION_RULES)}.")
    inside = (value >= lower) & (value <= upper)
    found = np.where(inside, WITHIN, OUTSIDE).astype(np.int8)
    if rule != "simple":
        with np.errstate(invalid="ignore"):
            safe = (value - guard >= lower) & (value + guard <= upper)
            clear = (value + guard < lower) | (value - guard > upper)
        found = np.where(safe, WITHIN, OUTSIDE).astype(np.int8)
        if rule == "conditional":
            found[~safe & ~clear] = INCONCLUSIVE
        found[np.isnan(guard)] = INCONCLUSIVE
    found[np.isnan(value) | np.isnan(lower) | np.isnan(upper)] = NOT_JUDGED
    return found


def lot_uncertainty(u: ArrayLike, sampling: ArrayLike, production: ArrayLike, units: int = 1) -> Floats:
    """Standard uncertainty of the average of a lot from one composite: sqrt(u^2 + sampling^2 + production^2 / units).

    sampling : of drawing and reducing the sample. production : standard deviation from unit to unit of the lot. units :
    how many units the composite holds. One unit for all. Source: variances of independent effects add (JCGM 100, 5.1.2).
    """
    if units < 1:
        raise WrongUse(f"A composite of {units} units cannot be.", "Give a whole number from 1.")
    s = np.asarray(sampling, dtype=float) ** 2 + np.asarray(production, dtype=float) ** 2 / units
    return np.asarray(np.sqrt(np.asarray(u, dtype=float) ** 2 + s))


# ---- many items: global risks ---------------------------------------------------------------------------------


class Product(Protocol):
    """How the true values of many items are distributed, as scipy.stats gives it when frozen."""

    def pdf(self, x: float) -> float: ...

    def cdf(self, x: float) -> float: ...

    def support(self) -> tuple[float, float]: ...


@dataclass(frozen=True)
class GlobalRisk:
    """Shares of all items: outside without inspection, false accepts (consumer), false rejects (producer), accepted."""

    outside: float
    consumer: float
    producer: float
    accepted: float

    @property
    def consumer_among_accepted(self) -> float:
        """Share of the accepted items that are outside."""
        return self.consumer / self.accepted


def global_risk(
    product: Product,
    u: float,
    lower: float = -np.inf,
    upper: float = np.inf,
    accept_lower: float | None = None,
    accept_upper: float | None = None,
) -> GlobalRisk:
    """Risks of a decision rule over many items (JCGM 106, 9.5): tolerance and acceptance interval, normal measurement.

    accept_lower, accept_upper : the tolerance limits where not given (simple acceptance).
    """
    a = lower if accept_lower is None else accept_lower
    b = upper if accept_upper is None else accept_upper
    start, end = (float(x) for x in product.support())
    far = 12 * u
    # quadrature needs ends: beyond these the product holds less than 1e-15, or nothing is accepted
    start = max(start, _end(product, start, -1)) if np.isinf(start) else start
    end = min(end, _end(product, end, 1)) if np.isinf(end) else end

    def accepts(x: float) -> float:
        return float(ndtr((b - x) / u) - ndtr((a - x) / u))

    def share(low: float, high: float, accepted: bool) -> float:
        low, high = max(low, start), min(high, end)
        if low >= high:
            return 0.0
        marks = sorted({x for x in (a - far, a, a + far, b - far, b, b + far) if low < x < high})
        total = 0.0
        for i, j in zip([low, *marks], [*marks, high], strict=True):
            total += quad(lambda x: product.pdf(x) * (accepts(x) if accepted else 1 - accepts(x)), i, j,
                          epsabs=1e-12, epsrel=1e-10, limit=200)[0]  # fmt: skip
        return float(total)

    false_accept = share(start, lower, True) + share(upper, end, True)
    outside = float(product.cdf(lower)) if np.isfinite(lower) else 0.0
    outside += 1 - float(product.cdf(upper)) if np.isfinite(upper) else 0.0
    return GlobalRisk(outside, false_accept, share(lower, upper, False), false_accept + share(lower, upper, True))


def _end(product: Product, end: float, sign: int) -> float:
    """A point beyond which a product distribution of infinite support holds next to nothing."""
    x = 1.0
    while (product.cdf(-x) if sign < 0 else 1 - product.cdf(x)) > 1e-15 and x < 1e12:
        x *= 2
    return sign * x


def acceptance_limit(product: Product, u: float, upper: float, consumer: float) -> float:
    """The acceptance limit under an upper tolerance limit that holds the consumer's risk at `consumer` (a share)."""

    def gap(limit: float) -> float:
        return global_risk(product, u, upper=upper, accept_upper=limit).consumer - consumer

    if gap(upper) <= 0:
        return upper
    return float(brentq(gap, upper - 10 * u, upper, xtol=1e-9))
