"""Equivalence by two one-sided t tests (Schuirmann 1987): is a mean difference shown to lie inside the margins?

Not significant is not equivalent: a difference that cannot be told from zero may still reach beyond a margin.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import stdtr, stdtrit

from energy.problems import WrongUse


@dataclass(frozen=True)
class Equivalence:
    """difference and its standard error; p : the larger of the two one-sided probabilities, which is the test's own.

    interval : of 1 - 2 alpha, which lies inside the margins exactly where the test says equivalent at alpha.
    """

    difference: float
    standard_error: float
    freedom: float
    lower: float
    upper: float
    p_lower: float
    p_upper: float
    alpha: float
    interval: tuple[float, float]

    @property
    def p(self) -> float:
        """Probability of the test."""
        return max(self.p_lower, self.p_upper)

    @property
    def equivalent(self) -> bool:
        """Shown to lie inside the margins."""
        return self.p < self.alpha

    @property
    def sentence(self) -> str:
        """The result as people say it."""
        word = "equivalent" if self.equivalent else "not shown to be equivalent"
        return (f"Within {self.lower:g} to {self.upper:g} the two are {word} (p {self.p:.2g}): the difference is"
                f" {self.difference:.3g}, {1 - 2 * self.alpha:.0%} between {self.interval[0]:.3g} and {self.interval[1]:.3g}.")  # fmt: skip


def _test(difference: float, se: float, freedom: float, lower: float, upper: float, alpha: float) -> Equivalence:
    if not lower < upper:
        raise WrongUse(f"Margins from {lower} to {upper} hold nothing.", "Give the lower one first.")
    if not 0 < alpha < 0.5:
        raise WrongUse(f"alpha = {alpha} cannot be.", "Give a share below 0.5, usually 0.05.")
    if not se > 0:
        raise WrongUse(
            "The differences do not scatter; there is nothing to test.", "Compare the difference with the margins."
        )
    p_lower = float(stdtr(freedom, -(difference - lower) / se))
    p_upper = float(stdtr(freedom, (difference - upper) / se))
    half = float(stdtrit(freedom, 1 - alpha)) * se
    return Equivalence(
        difference, se, freedom, lower, upper, p_lower, p_upper, alpha, (difference - half, difference + half)
    )


def of_mean(mean: float, sd: float, n: int, lower: float, upper: float, alpha: float = 0.05) -> Equivalence:
    """The mean of n values (or of n paired differences) against margins, from its mean and standard deviation.

    Raises WrongUse for fewer than two values, margins the wrong way round, or no scatter.
    """
    if n < 2:
        raise WrongUse(f"{n} values have no scatter.", "Give two or more.")
    return _test(mean, sd / np.sqrt(n), n - 1.0, lower, upper, alpha)


def of_pairs(x: ArrayLike, y: ArrayLike, lower: float, upper: float, alpha: float = 0.05) -> Equivalence:
    """y - x of the same samples against margins; (n,) each, incomplete pairs left out. Raises WrongUse as `of_mean`."""
    d = np.asarray(y, dtype=float) - np.asarray(x, dtype=float)
    d = d[np.isfinite(d)]
    if len(d) < 2:
        raise WrongUse("Fewer than two samples have both figures.", "Give more samples.")
    return of_mean(float(d.mean()), float(d.std(ddof=1)), len(d), lower, upper, alpha)


def of_two_groups(
    first: ArrayLike, second: ArrayLike, lower: float, upper: float, alpha: float = 0.05, equal_variances: bool = False
) -> Equivalence:
    """Mean of first - mean of second against margins; unequal variances (Welch) unless said otherwise. Raises WrongUse."""
    a, b = (v[np.isfinite(v)] for v in (np.asarray(first, dtype=float), np.asarray(second, dtype=float)))
    if min(len(a), len(b)) < 2:
        raise WrongUse("A group has fewer than two values.", "Give two or more in each.")
    s_a, s_b = float(a.var(ddof=1)), float(b.var(ddof=1))
    if equal_variances:
        freedom = len(a) + len(b) - 2.0
        variance = ((len(a) - 1) * s_a + (len(b) - 1) * s_b) / freedom * (1 / len(a) + 1 / len(b))
    else:
        u, w = s_a / len(a), s_b / len(b)
        variance = u + w
        freedom = variance**2 / (u**2 / (len(a) - 1) + w**2 / (len(b) - 1)) if variance > 0 else 1.0
    return _test(float(a.mean() - b.mean()), float(np.sqrt(variance)), freedom, lower, upper, alpha)
