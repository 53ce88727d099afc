"""Precision from several laboratories on one material: s_r, s_L, s_R, Mandel's h and k (ISO 5725-2, ASTM E691)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import fdtri, stdtrit

from energy.problems import WrongUse
from energy.replicates import GRUBBS_NEEDS, Outlying, cochran_of_batch, critical_factor, grubbs

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Precision:
    """One material, p laboratories. Standard deviations in the values' unit; h, k, means, s : (p,) per laboratory.

    s_means : SD of the laboratory means. negative : s_L^2 came out below zero and counts as zero. cochran : None where
    there are no equal numbers of replicates; grubbs : on the means, None where laboratories are too few.
    """

    mean: float
    s_r: float
    s_L: float
    s_R: float
    s_means: float
    negative: bool
    laboratories: int
    means: Floats
    s: Floats
    h: Floats
    k: Floats
    cochran: Outlying | None
    grubbs: Outlying | None

    @property
    def r(self) -> float:
        """Repeatability limit."""
        return critical_factor(2) * self.s_r

    @property
    def R(self) -> float:
        """Reproducibility limit."""
        return critical_factor(2) * self.s_R

    @property
    def sentence(self) -> str:
        """The result as people say it."""
        return (f"{self.laboratories} laboratories, mean {self.mean:.5g}: s_r {self.s_r:.3g}, s_R {self.s_R:.3g};"
                f" two results of one laboratory should not differ by more than {self.r:.3g}, of two laboratories by more"
                f" than {self.R:.3g}.")  # fmt: skip


def precision(values: ArrayLike) -> Precision:
    """values : (laboratories, replicates), NaN where a laboratory has fewer; each laboratory one value at least.

    s_r pools the variances by degrees of freedom; s_L^2 = (s_d^2 - s_r^2) / n with n the mean number of replicates that
    ISO 5725-2 gives for unequal numbers (the number itself where they are equal), 0 where negative. Raises WrongUse.
    """
    v = np.asarray(values, dtype=float)
    v = v[~np.isnan(v).all(axis=1)]
    p = len(v)
    count = (~np.isnan(v)).sum(axis=1)
    if p < 2 or not (count >= 2).any():
        raise WrongUse("Precision needs two laboratories or more, one of them with replicates.", "Give more values.")
    means = np.nanmean(v, axis=1)
    squares = np.nansum((v - means[:, None]) ** 2, axis=1)
    with np.errstate(divide="ignore", invalid="ignore"):
        s = np.where(count >= 2, np.sqrt(squares / (count - 1)), np.nan)
    total = int(count.sum())
    s_r = float(np.sqrt(squares.sum() / (total - p)))
    mean = float((count * means).sum() / total)
    s_d2 = float((count * (means - mean) ** 2).sum() / (p - 1))
    replicates = float((total - (count**2).sum() / total) / (p - 1))
    between = (s_d2 - s_r**2) / replicates
    s_means = float(means.std(ddof=1))
    found = cochran_of_batch(v)
    return Precision(
        mean=mean, s_r=s_r, s_L=float(np.sqrt(max(between, 0.0))), s_R=float(np.sqrt(max(between, 0.0) + s_r**2)),
        s_means=s_means, negative=between < 0, laboratories=p, means=means, s=s, h=(means - means.mean()) / s_means,
        k=s / s_r, cochran=found[0] if found else None, grubbs=grubbs(means) if p >= GRUBBS_NEEDS else None,
    )  # fmt: skip


def mandel_h_critical(alpha: float, laboratories: int) -> float:
    """|h| of a laboratory exceeds this with probability alpha: (p-1) t / sqrt(p (t^2 + p - 2)), t two-sided, p - 2."""
    t = float(stdtrit(laboratories - 2, 1 - alpha / 2))
    return float((laboratories - 1) * t / np.sqrt(laboratories * (t**2 + laboratories - 2)))


def mandel_k_critical(alpha: float, laboratories: int, n: int) -> float:
    """k of a laboratory exceeds this with probability alpha, n replicates each.

    k^2 = p / (1 + (p - 1) / F), F the laboratory's variance over the mean of the others'.
    """
    f = float(fdtri(n - 1, (laboratories - 1) * (n - 1), 1 - alpha))
    return float(np.sqrt(laboratories / (1 + (laboratories - 1) / f)))


def between_two_means(r: float, R: float, n_first: int = 1, n_second: int = 1) -> float:
    """How far means of n results of two laboratories may lie apart: sqrt(R^2 - r^2 (1 - 1/(2 n1) - 1/(2 n2))) (ISO 5725-6).

    r, R : repeatability and reproducibility limits. For two means of two: sqrt(R^2 - r^2 / 2).
    """
    return float(np.sqrt(R**2 - r**2 * (1 - 1 / (2 * n_first) - 1 / (2 * n_second))))
