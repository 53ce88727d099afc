"""Do two routes agree over a batch? Bias and limits of agreement, lines with errors on both sides, concordance.

x and y are (n,) values of the same samples by two routes, in one unit; pairs with a missing value are left out. Every
method can be made robust to a few wild samples, which are named by index and never dropped in silence.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtri, stdtr, stdtrit

from energy.problems import WrongUse
from energy.robust import MEAN_U, algorithm_a, median_and_mad

Floats = NDArray[np.float64]
Interval = tuple[float, float]

#: a pair is wild when its difference lies this many robust standard deviations from the others'. Ours: of 1,000 normal
#: differences 0.5 lie as far
WILD = 3.5
#: fewest pairs for a statement, and for a line. Ours
NEEDED, NEEDED_FOR_A_LINE = 3, 8
#: Passing and Bablok's line wants 30 pairs or more; its slopes number n (n - 1) / 2, which ends where memory does
ADVISED, MOST = 30, 5_000

#: above this a concordance has nothing worth a cause. Ours
NEAR_PERFECT = 0.99


def complete(x: ArrayLike, y: ArrayLike, needed: int = NEEDED) -> tuple[Floats, Floats, NDArray[np.intp]]:
    """The complete pairs and their indices. Raises WrongUse where lengths differ or fewer than `needed` are left."""
    a, b = np.asarray(x, dtype=float), np.asarray(y, dtype=float)
    if a.shape != b.shape or a.ndim != 1:
        raise WrongUse(
            f"{a.size} values of one route and {b.size} of the other make no pairs.", "Give one of each per sample."
        )
    index = np.flatnonzero(np.isfinite(a) & np.isfinite(b))
    if len(index) < needed:
        raise WrongUse(f"{len(index)} samples have both figures; this needs {needed}.", "Give more samples.")
    return a[index], b[index], index


def wild_pairs(x: ArrayLike, y: ArrayLike) -> NDArray[np.intp]:
    """Indices of pairs whose difference y - x lies WILD robust standard deviations or more from the median difference."""
    a, b, index = complete(x, y, 1)
    d = b - a
    found = median_and_mad(d)
    # where most differences are equal the median deviation is 0: then the robust spread of algorithm A, 0 as well, says
    # nothing and no pair is called wild
    return index[np.abs(d - found.centre) > WILD * found.sd] if found.sd > 0 else index[:0]


def _tame(x: ArrayLike, y: ArrayLike, robust: bool, needed: int) -> tuple[Floats, Floats, tuple[int, ...]]:
    a, b, index = complete(x, y, needed)
    wild = wild_pairs(x, y)
    if robust and len(wild):
        keep = ~np.isin(index, wild)
        if keep.sum() >= needed:
            a, b = a[keep], b[keep]
    return a, b, tuple(wild.tolist())


# ---- bias and limits of agreement -----------------------------------------------------------------------------------


@dataclass(frozen=True)
class LimitsOfAgreement:
    """y - x: bias and the limits within which 95 of 100 differences lie, each with its own interval (Bland & Altman 1986).

    slope : of the difference against the mean of the two; p_slope : how probable so large a one is where the difference
    does not depend on the level. wild : indices of wild pairs, counted in unless robust.
    """

    n: int
    bias: float
    sd: float
    lower: float
    upper: float
    bias_interval: Interval
    lower_interval: Interval
    upper_interval: Interval
    slope: float
    p_slope: float
    robust: bool
    wild: tuple[int, ...] = ()

    @property
    def proportional(self) -> bool:
        """The difference grows or shrinks with the level, at 5 %."""
        return self.p_slope < 0.05

    @property
    def biased(self) -> bool:
        """The interval of the bias excludes zero."""
        return self.bias_interval[0] > 0 or self.bias_interval[1] < 0

    def sentence(self, unit: str = "") -> str:
        """The result as people say it."""
        u = f" {unit}" if unit else ""
        level = (f"The difference changes with the level, by {self.slope:+.3g} per unit (p {self.p_slope:.2g}); one bias does not"
                 " describe it." if self.proportional else f"It does not change with the level (p {self.p_slope:.2g}).")  # fmt: skip
        verb = "differs" if len(self.wild) == 1 else "differ"
        wild = f" {len(self.wild)} of {self.n} {verb} wildly from the rest." if self.wild else ""
        return (f"Over {self.n} samples the difference is {self.bias:+.3g}{u} on average"
                f" ({self.bias_interval[0]:+.3g} to {self.bias_interval[1]:+.3g}); 95 of 100 single differences lie between"
                f" {self.lower:+.3g} and {self.upper:+.3g}{u}. {level}{wild}")  # fmt: skip


def limits_of_agreement(
    x: ArrayLike, y: ArrayLike, robust: bool = False, confidence: float = 0.95
) -> LimitsOfAgreement:
    """Bias, limits and the test for a proportional bias of y - x.

    Limits are bias +/- 1.96 s; their intervals +/- t sqrt(3 / n) s, an approximation of Bland & Altman. robust : centre and
    spread by algorithm A (ISO 13528), u of the centre 1.25 s* / sqrt n, the slope without wild pairs. Raises WrongUse.
    """
    a, b, _ = complete(x, y)
    wild = wild_pairs(x, y)
    d, n = b - a, len(a)
    if robust:
        found = algorithm_a(d)
        bias, sd, u = found.centre, found.sd, MEAN_U * found.sd / np.sqrt(n)
    else:
        bias, sd = float(d.mean()), float(d.std(ddof=1))
        u = sd / np.sqrt(n)
    t = float(stdtrit(n - 1, (1 + confidence) / 2))
    z = 1.96
    half = t * np.sqrt(3 / n) * sd
    tame_a, tame_b, _ = _tame(x, y, robust, NEEDED)
    slope, p = _slope_test((tame_a + tame_b) / 2, tame_b - tame_a)
    low, high = bias - z * sd, bias + z * sd
    return LimitsOfAgreement(
        n, bias, sd, low, high, (bias - t * u, bias + t * u), (low - half, low + half), (high - half, high + half),
        slope, p, robust, tuple(wild.tolist()),
    )  # fmt: skip


def _slope_test(x: Floats, y: Floats) -> tuple[float, float]:
    """Slope of least squares and the two-sided probability of one as large by chance (Student's t, n - 2)."""
    n = len(x)
    away = x - x.mean()
    s_xx = float(away @ away)
    if n < 3 or s_xx <= 0:
        return 0.0, 1.0
    slope = float(away @ y) / s_xx
    rest = y - y.mean() - slope * away
    variance = float(rest @ rest) / (n - 2) / s_xx
    if variance <= 0:
        return slope, 0.0 if slope else 1.0
    return slope, float(2 * stdtr(n - 2, -abs(slope) / np.sqrt(variance)))


# ---- lines with errors on both sides ---------------------------------------------------------------------------------


@dataclass(frozen=True)
class Line:
    """y = intercept + slope x, with 95 % intervals; n pairs used, wild : indices of wild pairs (left out where robust)."""

    method: str
    n: int
    slope: float
    intercept: float
    slope_interval: Interval
    intercept_interval: Interval
    wild: tuple[int, ...] = ()
    facts: dict[str, float] = field(default_factory=dict)

    @property
    def proportional(self) -> bool:
        """The interval of the slope excludes 1."""
        return not self.slope_interval[0] <= 1 <= self.slope_interval[1]

    @property
    def constant(self) -> bool:
        """The interval of the intercept excludes 0."""
        return not self.intercept_interval[0] <= 0 <= self.intercept_interval[1]

    @property
    def sentence(self) -> str:
        """The result as people say it, with the method it rests on."""
        kind = {
            (False, False): "no constant and no proportional difference is seen",
            (True, False): "a proportional difference",
            (False, True): "a constant difference",
            (True, True): "a constant and a proportional difference",
        }[self.proportional, self.constant]
        few = f" {self.n} pairs are few for it." if self.n < ADVISED else ""
        return (f"{self.method}: slope {self.slope:.4g} ({self.slope_interval[0]:.4g} to {self.slope_interval[1]:.4g}), intercept"
                f" {self.intercept:.4g} ({self.intercept_interval[0]:.4g} to {self.intercept_interval[1]:.4g}): {kind}.{few}")  # fmt: skip


def deming(
    x: ArrayLike,
    y: ArrayLike,
    y_error_variance_over_x_error_variance: float = 1.0,
    constant_relative_error: bool = False,
    robust: bool = False,
) -> Line:
    """Deming's line; intervals by the jackknife (Linnet 1990), Student's t with n - 2.

    y_error_variance_over_x_error_variance : the ratio var(error of y) / var(error of x); other authors define it the other
    way round. constant_relative_error : errors grow with the level, so pairs are weighted by 1 / level^2 (Linnet's weighted
    line, iterated). robust : wild pairs are left out. Raises WrongUse.
    """
    ratio = y_error_variance_over_x_error_variance
    if not ratio > 0:
        raise WrongUse(
            f"A ratio of variances of {ratio} cannot be.", "Give var(error of y) / var(error of x), above 0."
        )
    a, b, wild = _tame(x, y, robust, NEEDED)
    n = len(a)
    if a.std() == 0:
        raise WrongUse("All samples have one value of x; no line can be drawn.", "Give samples of different level.")
    if constant_relative_error:
        slope, intercept, left_out = _weighted_deming(a, b, ratio)
    else:
        slope, intercept, left_out = _plain_deming(a, b, ratio)
    pseudo = n * np.array([[slope], [intercept]]) - (n - 1) * left_out
    se = pseudo.std(axis=1, ddof=1) / np.sqrt(n)
    t = float(stdtrit(n - 2, 0.975))
    name = "weighted Deming" if constant_relative_error else "Deming"
    return Line(f"{name}, var(error of y) / var(error of x) = {ratio:g}", n, slope, intercept,
                (slope - t * float(se[0]), slope + t * float(se[0])),
                (intercept - t * float(se[1]), intercept + t * float(se[1])), wild,
                {"slope_se": float(se[0]), "intercept_se": float(se[1])})  # fmt: skip


def _line_of_sums(n: Floats | float, sums: Sequence[Floats], ratio: float) -> tuple[Floats, Floats]:
    """Slope and intercept from the sum of the weights and the weighted sums of x, y, x^2, y^2 and x y."""
    x, y, xx, yy, xy = sums
    gap = (yy - y**2 / n) - ratio * (xx - x**2 / n)
    s_xy = xy - x * y / n
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = (gap + np.sqrt(gap**2 + 4 * ratio * s_xy**2)) / (2 * s_xy)
    return slope, (y - slope * x) / n


def _plain_deming(x: Floats, y: Floats, ratio: float) -> tuple[float, float, Floats]:
    """The line, and the (2, n) lines without each pair: sums less the pair's own part."""
    mid_x, mid_y = float(x.mean()), float(y.mean())
    u, v = x - mid_x, y - mid_y  # centred, so that sums of squares keep their digits
    parts = (u, v, u * u, v * v, u * v)
    sums = [np.asarray(part.sum()) for part in parts]
    slope, rest = _line_of_sums(float(len(x)), sums, ratio)
    slopes, rests = _line_of_sums(len(x) - 1.0, [s - p for s, p in zip(sums, parts, strict=True)], ratio)
    return (float(slope), float(rest + mid_y - slope * mid_x), np.array([slopes, rests + mid_y - slopes * mid_x]))


def _weighted_deming(x: Floats, y: Floats, ratio: float) -> tuple[float, float, Floats]:
    """The same with weights that follow the line; the jackknife in blocks of lines, each settled by itself."""
    n = len(x)
    slope, intercept = _settled(x, y, np.ones((1, n)), ratio)
    left_out = []
    block = max(1, 4_000_000 // n)
    for start in range(0, n, block):
        stop = min(start + block, n)
        keep = np.ones((stop - start, n))
        keep[np.arange(stop - start), np.arange(start, stop)] = 0.0
        left_out.append(np.array(_settled(x, y, keep, ratio)))
    return float(slope[0]), float(intercept[0]), np.concatenate(left_out, axis=1)


def _settled(x: Floats, y: Floats, keep: Floats, ratio: float) -> tuple[Floats, Floats]:
    """(k,) slopes and intercepts for (k, n) pairs kept, weights 1 / level^2 until the slopes stand still."""
    weights, slope = keep, np.full(len(keep), np.nan)
    for _ in range(50):
        before = slope
        sums = [weights @ part for part in (x, y, x * x, y * y, x * y)]
        slope, intercept = _line_of_sums(weights.sum(axis=1), sums, ratio)
        if (np.abs(slope - before) < 1e-12 * np.abs(slope)).all():
            break
        away = y - intercept[:, None] - slope[:, None] * x
        below = (ratio + slope**2)[:, None]
        at_x, at_y = x + slope[:, None] * away / below, y - ratio * away / below
        weights = keep / ((ratio * at_x + at_y) / (1 + ratio)) ** 2
    return slope, intercept


def passing_bablok(x: ArrayLike, y: ArrayLike, confidence: float = 0.95) -> Line:
    """Passing & Bablok's line (1983): the shifted median of all slopes between two samples. Robust as it is.

    Pairs equal in both and slopes of exactly -1 are dropped, equal x counts as an infinite slope of the difference's sign;
    differences count as equal within 1e-9 of the range, since decimal numbers are not stored exactly. Between 3 and 5,000
    pairs, 30 or more advised. facts : slopes, shift (slopes below -1). Raises WrongUse.
    """
    a, b, _ = complete(x, y)
    n = len(a)
    if n > MOST:
        raise WrongUse(
            f"{n} samples make more slopes than memory holds.", f"Give up to {MOST} samples, e.g. a group of them."
        )
    near = 1e-9 * max(float(np.ptp(a)), float(np.ptp(b)), 1e-300)
    parts = []
    for start in range(0, n - 1, 512):  # in blocks of rows, so that the work beside the slopes stays small
        rows = np.arange(start, min(start + 512, n - 1))
        first, second = np.nonzero(np.arange(n)[None, :] > rows[:, None])
        dx, dy = a[second] - a[rows[first]], b[second] - b[rows[first]]
        dx[np.abs(dx) <= near] = 0.0
        dy[np.abs(dy) <= near] = 0.0
        use = ((dx != 0) | (dy != 0)) & (np.abs(dx + dy) > near)
        with np.errstate(divide="ignore", invalid="ignore"):
            parts.append(np.where(dx[use] == 0, np.sign(dy[use]) * np.inf, dy[use] / dx[use]))
    slopes = np.sort(np.concatenate(parts)) if parts else np.empty(0)
    count = len(slopes)
    if count < 2:
        raise WrongUse("The samples lie on one point; no line can be drawn.", "Give samples of different level.")
    shift = int((slopes < -1).sum())
    at = _median_at(slopes, count, shift)
    c = float(ndtri((1 + confidence) / 2)) * np.sqrt(n * (n - 1) * (2 * n + 5) / 18)
    low = round((count - c) / 2)
    lower = float(slopes[min(max(low + shift - 1, 0), count - 1)])
    upper = float(slopes[min(count - low + shift, count - 1)])
    return Line("Passing-Bablok", n, at, _intercept(a, b, at), (lower, upper),
                (_intercept(a, b, upper), _intercept(a, b, lower)), tuple(wild_pairs(x, y).tolist()),
                {"slopes": count, "shift": shift})  # fmt: skip


def _median_at(slopes: Floats, count: int, shift: int) -> float:
    last = count - 1
    if count % 2:
        return float(slopes[min((count - 1) // 2 + shift, last)])
    return float((slopes[min(count // 2 - 1 + shift, last)] + slopes[min(count // 2 + shift, last)]) / 2)


def _intercept(x: Floats, y: Floats, slope: float) -> float:
    return float(np.median(y - slope * x)) if np.isfinite(slope) else -np.inf if slope > 0 else np.inf


# ---- concordance ------------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Concordance:
    """Lin's coefficient: how near the pairs lie to the line y = x. value = correlation x accuracy, with its interval."""

    n: int
    value: float
    interval: Interval
    correlation: float
    accuracy: float
    wild: tuple[int, ...] = ()

    @property
    def sentence(self) -> str:
        """The result as people say it, with what lowers it."""
        cause = "scatter" if self.correlation <= self.accuracy else "a difference of level or spread"
        lowered = f", lowered mostly by {cause}" if self.value < NEAR_PERFECT else ""
        return (f"Lin's concordance over {self.n} samples is {self.value:.4g} ({self.interval[0]:.4g} to"
                f" {self.interval[1]:.4g}){lowered}; it rises with the range of the samples.")  # fmt: skip


def concordance(
    x: ArrayLike, y: ArrayLike, divisor: str = "n", robust: bool = False, confidence: float = 0.95
) -> Concordance:
    """Lin's concordance correlation coefficient (1989), its interval by the inverse hyperbolic tangent.

    divisor : "n" as Lin has it, or "n-1", for variances and covariance. robust : wild pairs are left out. Raises WrongUse.
    """
    if divisor not in ("n", "n-1"):
        raise WrongUse(f"The divisor '{divisor}' is not known.", "Use 'n' (Lin 1989) or 'n-1'.")
    a, b, wild = _tame(x, y, robust, NEEDED + 1)
    n, freedom = len(a), 0 if divisor == "n" else 1
    s_x, s_y = float(a.std(ddof=freedom)), float(b.std(ddof=freedom))
    if s_x == 0 or s_y == 0:
        raise WrongUse(
            "One route gives one value for all samples; there is nothing to concord.", "Give different samples."
        )
    r = float(((a - a.mean()) * (b - b.mean())).sum() / (n - freedom)) / (s_x * s_y)
    shift = float(a.mean() - b.mean())
    value = 2 * r * s_x * s_y / (s_x**2 + s_y**2 + shift**2)
    accuracy = 2 * s_x * s_y / (s_x**2 + s_y**2 + shift**2)
    return Concordance(n, value, _lin_interval(value, r, shift**2 / (s_x * s_y), n, confidence), r, accuracy, wild)


def _lin_interval(value: float, r: float, shift2: float, n: int, confidence: float) -> Interval:
    """shift2 : squared difference of the means over the product of the standard deviations (Lin 1989, corrected 2000)."""
    if abs(value) >= 1 or r == 0:
        return value, value
    rest = 1 - value**2
    variance = ((1 - r**2) * value**2 / (rest * r**2) + 2 * value**3 * (1 - value) * shift2 / (r * rest**2)
                - value**4 * shift2**2 / (2 * r**2 * rest**2)) / (n - 2)  # fmt: skip
    half = float(ndtri((1 + confidence) / 2)) * np.sqrt(max(variance, 0.0))
    z = np.arctanh(value)
    return float(np.tanh(z - half)), float(np.tanh(z + half))


# ---- a batch, group by group -------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class GroupAgreement:
    """Two routes over one group of samples; what the group is too small for is None, and `note` says so."""

    group: str
    n: int
    limits: LimitsOfAgreement | None
    deming: Line | None
    passing_bablok: Line | None
    concordance: Concordance | None
    note: str = ""


def by_group(x: ArrayLike, y: ArrayLike, groups: ArrayLike, robust: bool = True) -> list[GroupAgreement]:
    """Agreement of y with x for all samples ("all") and for each group of (n,) words, the largest first.

    Indices of wild pairs are those in x and y. An empty word belongs to no group.
    """
    a, b, words = np.asarray(x, dtype=float), np.asarray(y, dtype=float), np.asarray(groups, dtype=object).astype(str)
    both = np.isfinite(a) & np.isfinite(b)
    names, counts = np.unique(words[both & (words != "") & (words != "None")], return_counts=True)
    chosen = [("all", both), *((str(names[i]), both & (words == names[i])) for i in np.argsort(-counts, kind="stable"))]
    return [_one_group(name, np.where(rows, a, np.nan), np.where(rows, b, np.nan), int(rows.sum()), robust)
            for name, rows in chosen]  # fmt: skip


def _one_group(name: str, x: Floats, y: Floats, n: int, robust: bool) -> GroupAgreement:
    if n < NEEDED:
        return GroupAgreement(
            name, n, None, None, None, None, f"{n} samples with both figures are too few for any statement"
        )
    limits = limits_of_agreement(x, y, robust)
    spread = min(float(np.nanstd(x)), float(np.nanstd(y)))
    if n < NEEDED_FOR_A_LINE or spread == 0:
        return GroupAgreement(name, n, limits, None, None, None,
                              f"no line: that needs {NEEDED_FOR_A_LINE} samples of different level")  # fmt: skip
    line = passing_bablok(x, y) if n <= MOST else None
    note = "" if line else f"Passing-Bablok left out: more than {MOST} samples"
    return GroupAgreement(name, n, limits, deming(x, y, robust=robust), line, concordance(x, y, robust=robust), note)
