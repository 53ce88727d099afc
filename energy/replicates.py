"""Replicates: how far repeated values of one sample may lie apart, and what is reported where they lie too far apart.

Arrays are (samples, replicates), NaN where a value is missing, in any one unit. ISO 5725-2 gives the pooled standard
deviation and Cochran's test, ISO 5725-6 what to do with results that differ too much: more results, then their mean or
their median, never the two of them that happen to agree.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import brentq
from scipy.special import fdtri, ndtr, stdtrit

from energy.problems import WrongUse

Floats = NDArray[np.float64]

#: fewest values for Grubbs' test. Ours: the largest G that can occur, (n - 1) / sqrt(n), must leave room above the critical
#: value at 1 %; with 3 values it is 1.1547 against 1.1547, with 6 it is 2.04 against 1.94
GRUBBS_NEEDS = 6
#: ISO 5725-2: beyond the critical value at 5 % a straggler, at 1 % an outlier
STRAGGLER, OUTLIER = 0.05, 0.01
JUDGED = ("none", "straggler", "outlier")


# ---- scatter of repeated values ------------------------------------------------------------------------------------


def pooled_sd(values: ArrayLike, relative: bool = False) -> tuple[float, int]:
    """Standard deviation within samples and its degrees of freedom: root of the mean of the variances (ISO 5725-2).

    values : (samples, replicates). relative : deviations as shares of each sample's mean, for a batch that spans levels;
    samples with a mean of zero are left out. (nan, 0) where no sample has two values.
    """
    squares, freedom = _squares(values, relative)
    total = int(freedom.sum())
    return (float(np.sqrt(squares.sum() / total)), total) if total else (np.nan, 0)


def pooled_sd_of_alike(values: ArrayLike, relative: bool = False) -> tuple[float, int, NDArray[np.intp]]:
    """The same without samples whose replicates scatter as an outlier, as ISO 5725-2 pools; and their indices.

    An outlier: F of its variance over that of all others beyond the 1 % point shared by all samples, which with equal
    numbers of replicates is Cochran's test; repeated until none is left. So one mistyped replicate does not set the
    repeatability of a batch. Nobody is left out where the others do not scatter at all.
    """
    squares, freedom = _squares(values, relative)
    kept = freedom > 0
    for _ in range(10):
        total, n, p = float(squares[kept].sum()), float(freedom[kept].sum()), int(kept.sum())
        others = n - freedom
        if p < 3:
            break
        with np.errstate(divide="ignore", invalid="ignore"):
            rest = (total - squares) / others
            ratio = np.where(kept & (rest > 1e-12 * total), squares / np.maximum(freedom, 1) / rest, 0.0)
        worst = ratio > fdtri(np.maximum(freedom, 1), np.maximum(others, 1), 1 - OUTLIER / p)
        if not worst.any():
            break
        # the largest first: it may hide what the others are, and make them look worse or better than they are
        kept &= ~(worst & (ratio >= ratio.max() / 4))
    total = int(freedom[kept].sum())
    if not total:
        return np.nan, 0, np.empty(0, dtype=np.intp)
    return float(np.sqrt(squares[kept].sum() / total)), total, np.flatnonzero((freedom > 0) & ~kept)


def _squares(values: ArrayLike, relative: bool) -> tuple[Floats, NDArray[np.intp]]:
    """(samples,) sums of squared deviations, and their degrees of freedom."""
    v = np.asarray(values, dtype=float)
    count = (~np.isnan(v)).sum(axis=1)
    mean = np.nansum(v, axis=1) / np.maximum(count, 1)
    use = (count >= 2) & ((mean != 0) if relative else True)
    with np.errstate(divide="ignore", invalid="ignore"):
        away = v / mean[:, None] - 1 if relative else v - mean[:, None]
    return np.where(use, np.nansum(away**2, axis=1), 0.0), np.where(use, count - 1, 0)


def repeatability_limit(s_r: float) -> float:
    """r = 2.8 s_r: two results of one laboratory differ by more in 5 cases of 100 only (ISO 5725-6)."""
    return critical_factor(2) * s_r


@cache
def critical_factor(n: int) -> float:
    """f(n): the range of n results exceeds f s_r in 5 cases of 100 (ISO 5725-6); 2.8, 3.3, 3.6, 3.9 for 2 to 5.

    Computed: the 95 % point of the range of n values of a standard normal distribution, to one decimal as printed there.
    """
    if n < 2:
        raise WrongUse(f"A range of {n} results cannot be judged.", "Give at least two results.")
    z = np.linspace(-9.0, 9.0, 3601)
    density = np.exp(-(z**2) / 2) / np.sqrt(2 * np.pi)

    def beyond(w: float) -> float:
        return float(np.trapezoid(n * density * (ndtr(z + w) - ndtr(z)) ** (n - 1), z)) - 0.95

    return round(float(brentq(beyond, 0.1, 12.0)), 1)


@dataclass(frozen=True)
class Components:
    """Variance components of nested replicates, outermost first, the residual last.

    variance : estimates, 0 where the analysis of variance gave a negative one (then `negative` is True). u_of_mean : of the
    mean of all values, every level counted with the numbers it really has.
    """

    levels: tuple[str, ...]
    variance: tuple[float, ...]
    negative: tuple[bool, ...]
    freedom: tuple[int, ...]
    mean: float
    u_of_mean: float

    @property
    def sentence(self) -> str:
        """What scatters most."""
        total = sum(self.variance)
        if total == 0:
            return "The values do not scatter."
        k = int(np.argmax(self.variance))
        return (f"{self.variance[k] / total:.0%} of the variance lies between {self.levels[k]}s"
                f" (standard deviation {np.sqrt(self.variance[k]):.3g}).")  # fmt: skip


def components(values: ArrayLike, levels: dict[str, Sequence[object]], residual: str = "pellet") -> Components:
    """Components of variance of one material by analysis of variance, balanced or not.

    values : (N,). levels : name -> (N,) labels, outermost first, e.g. {"day": ..., "preparation": ...}; a label need be
    unique only inside the level above. residual : what the single values are. Sums of squares are set equal to their
    expectations: the component of level j enters level i's with sum n_v^2 (1/n_i - 1/n_(i-1)) over the units v of j, n_i
    the values in the unit of level i around v (the weights of a mean squared; Searle, Linear Models, 1971). Raises WrongUse
    where a level has no second unit to compare with.
    """
    y = np.asarray(values, dtype=float)
    keep = ~np.isnan(y)
    y = y[keep]
    total = len(y)
    codes = [np.zeros(total, dtype=np.intp)]
    for labels in levels.values():
        _, own = np.unique(np.asarray(labels, dtype=object)[keep].astype(str), return_inverse=True)
        _, code = np.unique(codes[-1] * (own.max(initial=0) + 1) + own, return_inverse=True)
        codes.append(code)
    codes.append(np.arange(total))
    names = (*levels, residual)
    sizes = [np.bincount(code) for code in codes]
    means = [np.bincount(code, weights=y) / size for code, size in zip(codes, sizes, strict=True)]
    freedom = tuple(len(sizes[i]) - len(sizes[i - 1]) for i in range(1, len(codes)))
    if min(freedom) < 1:
        lacking = names[freedom.index(min(freedom))]
        raise WrongUse(f"No unit holds a second {lacking}: its scatter cannot be told apart.", "Leave that level out.")
    squares = [float(((means[i][codes[i]] - means[i - 1][codes[i - 1]]) ** 2).sum()) for i in range(1, len(codes))]
    weights = np.zeros((len(names), len(names)))
    for j in range(1, len(codes)):
        unit = np.unique(codes[j], return_index=True)[1]
        n_v = sizes[j].astype(float)
        for i in range(1, j + 1):
            around, above = sizes[i][codes[i][unit]], sizes[i - 1][codes[i - 1][unit]]
            weights[i - 1, j - 1] = (n_v**2 * (1 / around - 1 / above)).sum()
    raw = np.linalg.solve(weights, squares)
    variance = np.maximum(raw, 0.0)
    shares = np.array([(size.astype(float) ** 2).sum() / total**2 for size in sizes[1:]])
    return Components(names, tuple(variance.tolist()), tuple((raw < 0).tolist()), freedom, float(y.mean()),
                      float(np.sqrt(shares @ variance)))  # fmt: skip


# ---- tests for a value or a scatter that stands out -----------------------------------------------------------------


@dataclass(frozen=True)
class Outlying:
    """A test's statistic against its critical values. index : of the value or sample tested. judged : a word of JUDGED."""

    statistic: float
    critical_5: float
    critical_1: float
    index: int
    judged: str


def _judged(statistic: float, critical: tuple[float, float], index: int) -> Outlying:
    word = JUDGED[int(statistic > critical[0]) + int(statistic > critical[1])]
    return Outlying(statistic, critical[0], critical[1], index, word)


def cochran_critical(alpha: float, n: int, p: int) -> float:
    """Critical value of Cochran's C for p variances of n values each, one-sided."""
    f = float(fdtri(n - 1, (p - 1) * (n - 1), 1 - alpha / p))
    return 1 / (1 + (p - 1) / f)


def cochran(variances: ArrayLike, n: int) -> Outlying:
    """Is the largest of p variances too large? C = largest / sum (ISO 5725-2).

    variances : (p,), each of n values; NaN are left out. It can not tell a variance that is too small. Raises WrongUse.
    """
    v = np.asarray(variances, dtype=float)
    p = int((~np.isnan(v)).sum())
    if p < 2 or n < 2:
        raise WrongUse("Cochran's test compares variances.", "Give two samples or more with two values or more each.")
    total = float(np.nansum(v))
    index = int(np.nanargmax(v))
    c = float(v[index]) / total if total > 0 else 1 / p
    return _judged(c, (cochran_critical(STRAGGLER, n, p), cochran_critical(OUTLIER, n, p)), index)


def cochran_of_batch(values: ArrayLike, relative: bool = False) -> tuple[Outlying, int] | None:
    """Cochran's test over the samples of a batch that have the commonest number of replicates, and that number.

    values : (samples, replicates). The test needs equal numbers. None where fewer than two samples have replicates.
    """
    v = np.asarray(values, dtype=float)
    count = (~np.isnan(v)).sum(axis=1)
    repeated = count[count >= 2]
    if len(repeated) < 2:
        return None
    n = int(np.bincount(repeated).argmax())
    rows = np.flatnonzero(count == n)
    if len(rows) < 2:
        return None
    here = v[rows]
    if relative:
        with np.errstate(divide="ignore", invalid="ignore"):
            here = here / np.nanmean(here, axis=1, keepdims=True)
    found = cochran(np.nanvar(here, axis=1, ddof=1), n)
    return Outlying(found.statistic, found.critical_5, found.critical_1, int(rows[found.index]), found.judged), n


def grubbs_critical(alpha: float, n: int, sides: int = 2) -> float:
    """Critical value of Grubbs' G for n values; tables differ by one- or two-sided, so name which."""
    t = float(stdtrit(n - 2, 1 - alpha / (sides * n)))
    return float((n - 1) / np.sqrt(n) * np.sqrt(t**2 / (n - 2 + t**2)))


def grubbs(values: ArrayLike, sides: int = 2) -> Outlying:
    """Does the value farthest from the mean stand out? G = max |x - mean| / s, all values included.

    values : (n,), at least GRUBBS_NEEDS. sides : 2, either end; 1, the end named by the data. Raises WrongUse.
    """
    v = np.asarray(values, dtype=float)
    n = int((~np.isnan(v)).sum())
    if n < GRUBBS_NEEDS:
        raise WrongUse(f"Grubbs' test on {n} values says next to nothing.", f"It needs at least {GRUBBS_NEEDS} values.")
    if sides not in (1, 2):
        raise WrongUse(f"A test of {sides} sides is not known.", "sides=2 looks at both ends, sides=1 at one.")
    away = np.abs(v - np.nanmean(v))
    index, s = int(np.nanargmax(away)), float(np.nanstd(v, ddof=1))
    g = float(away[index]) / s if s > 0 else 0.0
    return _judged(g, (grubbs_critical(STRAGGLER, n, sides), grubbs_critical(OUTLIER, n, sides)), index)


# ---- results that differ too much -----------------------------------------------------------------------------------

#: what was done with the replicates of a sample
SINGLE, MEAN, TWO_MORE, ONE_MORE, MEDIAN, NOTHING = range(6)
DONE = (
    "single value",
    "mean of all",
    "mean of the two for the time being: they differ too much, two more are needed",
    "median of three: they differ too much, one more is needed",
    "median of all: they differ too much for a mean",
    "no value",
)


@dataclass(frozen=True)
class Accepted:
    """What is reported for each sample. value, n, spread (range), limit : (n,) arrays; done : (n,) index into DONE.

    No value was left out of `n`: runs that disagree stay in the median and on the record.
    """

    value: Floats
    n: NDArray[np.intp]
    done: NDArray[np.int8]
    spread: Floats
    limit: Floats

    @property
    def words(self) -> list[str]:
        """What was done, per sample."""
        return [DONE[code] for code in self.done.tolist()]

    @property
    def too_far_apart(self) -> NDArray[np.bool_]:
        """(n,) the range passed its limit."""
        return np.isin(self.done, (TWO_MORE, ONE_MORE, MEDIAN))


def accept(values: ArrayLike, s_r: ArrayLike) -> Accepted:
    """The ISO 5725-6 way, over a batch: the mean where the range is within f(n) s_r, else more results, else the median.

    values : (samples, replicates). s_r : repeatability standard deviation, one or (samples,), in the values' unit; NaN
    where unknown, then the mean is taken unjudged. Two values too far apart: their mean stands for the time being and two
    more are asked for; of four, the mean if the range is within 3.6 s_r, else the median; never the best two of three.
    """
    v = np.asarray(values, dtype=float)
    count = (~np.isnan(v)).sum(axis=1)
    s = np.broadcast_to(np.asarray(s_r, dtype=float), count.shape)
    factor = np.full(v.shape[1] + 1, np.nan)
    for n in np.unique(count[count >= 2]).tolist():
        factor[n] = critical_factor(n)
    limit = factor[count] * s
    filled = np.where(np.isnan(v), -np.inf, v).max(axis=1), np.where(np.isnan(v), np.inf, v).min(axis=1)
    with np.errstate(invalid="ignore", divide="ignore"):
        spread = np.where(count >= 2, filled[0] - filled[1], np.nan)
        value = np.nansum(v, axis=1) / count
        # differences of decimal numbers carry the rounding of their storage: a range at the limit is within it
        apart = spread > limit * (1 + 1e-9)
    done = np.where(count == 0, NOTHING, np.where(count == 1, SINGLE, MEAN)).astype(np.int8)
    done[apart & (count == 2)] = TWO_MORE
    done[apart & (count == 3)] = ONE_MORE
    done[apart & (count >= 4)] = MEDIAN
    middle = apart & (count >= 3)
    if middle.any():
        value[middle] = np.nanmedian(v[middle], axis=1)
    return Accepted(value, count, done, spread, limit)
