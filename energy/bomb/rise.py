"""Corrected temperature rise of many runs at once, with its uncertainty.

All methods take off what stirring and the jacket would have done to the water between firing and the end of the main
period. Rates are dT/dt, positive where the temperature rises.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from energy.bomb.constants import value as constant
from energy.bomb.drift import Drift, Flags, Floats, fit
from energy.bomb.periods import Periods, Records, periods, resolution
from energy.problems import WrongUse

METHODS = {
    "regnault_pfaundler": "Regnault and Pfaundler: leak proportional to the temperature difference, integral by trapezoids"
    " (end ordinates halved)",
    "dickinson": "Dickinson: both drifts meet where 0.60 of the rise is reached",
    "dickinson_exponential": "Dickinson with 0.63: the share 1 - 1/e of a rise that is exactly exponential",
    "adiabatic": "adiabatic jacket: the mean of the residual drifts over the main period",
}

#: what is told of a record: bit -> sentence
WARNINGS = {
    "unreadable": "the record holds no rise: fewer than six readings, or the temperature does not climb; nothing is computed",
    "no_fore_period": "there are fewer than three readings before firing: the drift before firing is unknown and taken as"
    " zero; give the fore period, or its drift",
    "not_steady": "the after period is not steady: its rate still changes, and the corrected rise depends on the readings"
    " chosen; record longer, or set the end of the main period",
    "short_after": "the after period is short beside the main period, so that its drift is carried over four times its own"
    " length or more; record longer, or set the end of the main period",
    "unfinished": "the combustion has hardly died away at the end of the main period: by how fast it died away before, more"
    " than 0.1 % of the rise may be lacking; record longer, or set the end of the main period later",
    "coarse": "the thermometer's step is coarse for this rise; read one more decimal",
    "disordered": "readings were out of order of time, or two have one time; they were put in order, check the times",
    "falls_in_rise": "the temperature falls inside the main period: a swapped or misread reading",
    "impossible": "readings that no calorimeter can show were left out",
}
BIT = {name: 1 << k for k, name in enumerate(WARNINGS)}
#: fewest readings of a record, and of a fitted drift
FEWEST_READINGS, FEWEST_DRIFT = 6, 3
#: the after period's drift is carried over a main period of at most so many times its length untold (ours)
LONGEST_REACH = 4.0


@dataclass(frozen=True)
class Rise:
    """Corrected rises of n runs.

    value, u : (n,) K and its standard uncertainty; freedom : degrees of freedom of u. observed : end less start of the main
    period. correction : value - observed. leak : cooling constant (1 per unit of time), NaN where the method has none.
    step : resolution of the readings. warned : (n,) bits of BIT.
    """

    ids: NDArray[np.object_]
    value: Floats
    u: Floats
    freedom: Floats
    observed: Floats
    correction: Floats
    leak: Floats
    step: Floats
    fore: Drift
    after: Drift
    periods: Periods
    warned: NDArray[np.int64]
    method: str
    left_out: dict[int, list[tuple[float, float]]]

    def has(self, name: str) -> Flags:
        """(n,) which records carry the warning."""
        return (self.warned & BIT[name]) > 0

    def sentences(self, i: int) -> list[str]:
        """What is told of record i."""
        said = [words for name, words in WARNINGS.items() if self.warned[i] & BIT[name]]
        if i in self.left_out:
            said.append("left out: " + ", ".join(f"{temp:g} °C at {time:g}" for time, temp in self.left_out[i]))
        return said


def _given(drift: Drift, given: tuple[ArrayLike, ArrayLike] | None) -> tuple[Drift, Flags]:
    """The fitted drift with the user's rate and mean temperature in its place where they are given."""
    n = len(drift.rate)
    if given is None:
        return drift, np.zeros(n, dtype=bool)
    rate, mean = (np.broadcast_to(np.asarray(a, dtype=float), n) for a in given)
    use = ~np.isnan(rate)
    return Drift(np.where(use, rate, drift.rate), drift.time, np.where(use, mean, drift.temperature),
                 np.where(use, np.nan, drift.sd), np.where(use, 0, drift.count), np.where(use, 0.0, drift.sxx)), use  # fmt: skip


def corrected_rise(
    found: Records,
    method: str = "regnault_pfaundler",
    bounds: Periods | None = None,
    fore_drift: tuple[ArrayLike, ArrayLike] | None = None,
    after_drift: tuple[ArrayLike, ArrayLike] | None = None,
) -> Rise:
    """Corrected rises of n records.

    method : one of METHODS. bounds : the three periods, found automatically where None. fore_drift, after_drift : (rate,
    mean temperature) known otherwise, one or (n,), NaN for 'fit it'; the end of that period is then the reading itself,
    else the fitted line's temperature. Raises WrongUse for an unknown method.
    u : first order (JCGM 100) from the scatter about both lines through the method's own formula, and two roundings of the
    thermometer. Regnault (1866) and Pfaundler; Dickinson, Bull. Bur. Standards 11:189 (1915).
    """
    if method not in METHODS:
        raise WrongUse(f"The method '{method}' is not known.", f"One of: {', '.join(METHODS)}.")
    bounds = periods(found) if bounds is None else bounds
    t, temp = found.time, found.temperature
    start, lit, end, stop = (
        b[:, None] for b in (bounds.fore_start, bounds.ignition, bounds.main_end, bounds.after_end)
    )
    with np.errstate(invalid="ignore"):
        fore, fore_known = _given(fit(t, np.where((t >= start) & (t <= lit), temp, np.nan)), fore_drift)
        after, after_known = _given(fit(t, np.where((t >= end) & (t <= stop), temp, np.nan)), after_drift)
        inside = (t >= lit) & (t <= end)
    no_fore = ~fore_known & (fore.count < FEWEST_DRIFT)
    first, last, area, weight2 = _main_period(t, np.where(inside, temp, np.nan), bounds)
    fore = Drift(np.where(no_fore, 0.0, fore.rate), fore.time, np.where(no_fore, first, fore.temperature), fore.sd,
                 fore.count, np.where(no_fore, 0.0, fore.sxx))  # fmt: skip
    t_i, t_f = bounds.ignition, bounds.main_end
    low = np.where(no_fore | fore_known, first, fore.at(t_i))
    high = np.where(after_known | (after.count < FEWEST_DRIFT), last, after.at(t_f))
    observed = high - low
    length = t_f - t_i
    noise2, freedom = _noise(fore, after)
    to_i, to_f = np.where(no_fore | fore_known, 0.0, t_i - fore.time), np.where(after_known, 0.0, t_f - after.time)
    leak, cut = np.full(len(t), np.nan), np.zeros(len(t))
    with np.errstate(invalid="ignore", divide="ignore"):
        if method == "regnault_pfaundler":
            apart = after.temperature - fore.temperature
            leak = (fore.rate - after.rate) / apart
            lack = after.temperature * length - area
            taken = after.rate * length + leak * lack
            slopes = (-1 - lack * leak / apart, -to_i - lack / apart, 1 - leak * length + leak * lack / apart,
                      to_f - length + lack / apart)  # fmt: skip
            extra = leak**2 * weight2
            # trapezoids cut the bend at firing by about a twelfth of the steepest step times its duration
            drawn = np.where(inside[:, 1:] & inside[:, :-1], np.diff(temp, axis=1) * np.diff(t, axis=1), 0.0)
            cut = np.abs(leak) * np.max(np.nan_to_num(drawn), axis=1, initial=0.0) / 12
        elif method == "adiabatic":
            taken = (fore.rate + after.rate) / 2 * length
            slopes = (-np.ones_like(low), -to_i - length / 2, np.ones_like(low), to_f - length / 2)
            extra = np.zeros_like(low)
        else:
            name = "dickinson_share" if method == "dickinson" else "dickinson_share_exponential"
            reached = _time_reached(t, np.where(inside, temp, np.nan), low + constant(name) * observed)
            taken = fore.rate * (reached - t_i) + after.rate * (t_f - reached)
            slopes = (-np.ones_like(low), -to_i - (reached - t_i), np.ones_like(low), to_f - (t_f - reached))
            extra = np.zeros_like(low)
        value = observed - taken
        step = resolution(temp)
        variance = noise2 * (
            slopes[0] ** 2 / np.maximum(np.where(no_fore | fore_known, 1, fore.count), 1)
            + np.where(fore.sxx > 0, slopes[1] ** 2 / np.where(fore.sxx > 0, fore.sxx, 1.0), 0.0)
            + slopes[2] ** 2 / np.maximum(after.count, 1)
            + np.where(after.sxx > 0, slopes[3] ** 2 / np.where(after.sxx > 0, after.sxx, 1.0), 0.0)
            + extra
        )
        # two rectangular roundings, 2 x step^2 / 12; and drifts slower than the thermometer's step shows
        hidden = step / np.sqrt(12) * length / (bounds.after_end - bounds.main_end)
        u = np.sqrt(variance + cut**2 + step**2 / 6 + np.where(after_known, 0.0, hidden) ** 2)
        # what is still to come lies anywhere between nothing and this
        to_come = _still_to_come(t, np.where(inside, temp, np.nan), low, after, bounds)
        u = np.hypot(u, np.where(after_known, 0.0, to_come) / np.sqrt(3))
    warned, change = _warnings(found, bounds, after, value, u, step, inside, no_fore, noise2, after_known)
    late = ~after_known & (to_come > constant("unfinished_share") * value) & ((warned & BIT["unreadable"]) == 0)
    warned |= np.where(late, BIT["unfinished"], 0)
    unreadable = (warned & BIT["unreadable"]) > 0
    value = np.where(unreadable, np.nan, value)
    # where the drift changes, the rise could lie anywhere between those of its first and its last rate
    u = np.where(unreadable, np.nan, np.where((warned & BIT["not_steady"]) > 0, np.hypot(u, change / np.sqrt(12)), u))
    return Rise(found.ids, value, u, freedom, observed, value - observed, leak, step, fore, after, bounds, warned, method,
                found.left_out)  # fmt: skip


def _noise(fore: Drift, after: Drift) -> tuple[Floats, Floats]:
    """Variance of a reading, pooled over both lines, and its degrees of freedom."""
    own = [np.where(np.isnan(d.sd), 0, np.maximum(d.count - 2, 0)) for d in (fore, after)]
    squares = own[0] * np.nan_to_num(fore.sd) ** 2 + own[1] * np.nan_to_num(after.sd) ** 2
    freedom = own[0] + own[1]
    variance = np.divide(squares, freedom, out=np.zeros(len(squares)), where=freedom > 0)
    return variance, np.where(freedom > 0, freedom, np.inf).astype(float)


def _main_period(t: Floats, temp: Floats, bounds: Periods) -> tuple[Floats, Floats, Floats, Floats]:
    """First and last temperature, integral by trapezoids and the sum of squared weights of the main period's readings.

    A bound that lies between two readings is not met by a reading; the nearest reading inside stands for it, carried to
    the bound at its own temperature.
    """
    ok = ~np.isnan(temp)
    index = np.arange(t.shape[1])[None, :]
    i = np.where(ok, index, t.shape[1] - 1).min(axis=1)
    j = np.where(ok, index, 0).max(axis=1)
    row = np.arange(len(t))
    first, last = temp[row, i], temp[row, j]
    both = ok[:, 1:] & ok[:, :-1]
    gap = np.where(both, np.diff(t, axis=1), 0.0)
    # readings left out leave a hole of one place at most in sorted records: sorted NaN stand at the end
    area = (gap * np.where(both, temp[:, 1:] + temp[:, :-1], 0.0)).sum(axis=1) / 2
    weight = np.zeros_like(temp)
    weight[:, 1:] += gap / 2
    weight[:, :-1] += gap / 2
    with np.errstate(invalid="ignore"):
        area = area + (t[row, i] - bounds.ignition) * first + (bounds.main_end - t[row, j]) * last
    return first, last, area, (weight**2).sum(axis=1)


def _time_reached(t: Floats, temp: Floats, level: Floats) -> Floats:
    """(n,) time at which the temperature first reaches a level, straight between readings."""
    with np.errstate(invalid="ignore", divide="ignore"):
        over = temp >= level[:, None]
        k = np.maximum(over.argmax(axis=1), 1)
        row = np.arange(len(t))
        before, after = temp[row, k - 1], temp[row, k]
        share = np.where(after > before, (level - before) / (after - before), 1.0)
        time = t[row, k - 1] + np.clip(share, 0.0, 1.0) * (t[row, k] - t[row, k - 1])
    return np.asarray(time)


def _still_to_come(t: Floats, temp: Floats, low: Floats, after: Drift, bounds: Periods) -> Floats:
    """(n,) K by which the rise may be off because the combustion had not died away when the after period began.

    From 90 to 99 % of the rise an exponential takes ln 10 of its time constants; what it still has to give at the end of
    the main period is then known. In the after period it also bends the fitted drift: a line through an exponential of
    time constant c over a window A has the slope 6 c / A^2 of its first value, at most 1 / c, and that slope is carried
    over the main period.
    """
    whole = after.temperature[:, None] + after.rate[:, None] * (t - after.time[:, None]) - low[:, None]
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        share = (temp - low[:, None]) / whole
        nearly, almost = (_time_reached(t, share, np.full(len(t), level)) for level in (0.90, 0.99))
        fading = (almost - nearly) / np.log(10)
        tail = 0.01 * (after.at(bounds.main_end) - low) * np.exp(-(bounds.main_end - almost) / fading)
        window = bounds.after_end - bounds.main_end
        slope = np.minimum(1 / fading, 6 * fading / window**2)
        lacking = tail * (1 + (bounds.main_end - bounds.ignition) * slope)
    return np.where(np.isfinite(lacking) & (fading > 0), lacking, 0.0)


def _warnings(
    found: Records,
    bounds: Periods,
    after: Drift,
    value: Floats,
    u: Floats,
    step: Floats,
    inside: Flags,
    no_fore: Flags,
    noise2: Floats,
    after_known: Flags,
) -> tuple[NDArray[np.int64], Floats]:
    """The bits told, and by how much the rise changes between the two halves of the after period."""
    t, temp = found.time, found.temperature
    with np.errstate(invalid="ignore", divide="ignore"):
        unreadable = (found.count < FEWEST_READINGS) | ~np.isfinite(value) | (value <= 0)
        length = bounds.main_end - bounds.ignition
        later = (t >= bounds.main_end[:, None]) & (t <= bounds.after_end[:, None])
        half = after.time[:, None]
        early = fit(t, np.where(later & (t <= half), temp, np.nan))
        late = fit(t, np.where(later & (t >= half), temp, np.nan))
        change = np.abs(early.rate - late.rate) * length
        scatter = (
            _noise(early, late)[0] + step**2 / 12
        )  # about two lines: one line's scatter would hold the bend itself
        reach = 1 / np.where(early.sxx > 0, early.sxx, np.inf) + 1 / np.where(late.sxx > 0, late.sxx, np.inf)
        allowed = np.maximum(constant("steady_share") * value, 3 * length * np.sqrt(scatter * reach))
        bends = (early.count >= FEWEST_DRIFT) & (late.count >= FEWEST_DRIFT) & (change > allowed)
        short = (after.count < FEWEST_DRIFT) & ~after_known
        unsteady = (bends | short | ~bounds.steady) & ~after_known
        coarse = step / np.sqrt(6) > constant("resolution_share") * value
        drop = np.diff(temp, axis=1)
        fall = inside[:, 1:] & inside[:, :-1] & (drop < -(4 * np.sqrt(2 * noise2) + 1.5 * step)[:, None])
        climbing = temp[:, :-1] < (_highest(found, bounds) - 0.05 * value)[:, None]
        falls = (fall & climbing).any(axis=1)
        brief = ((bounds.after_end - bounds.main_end) * LONGEST_REACH <= length) & ~after_known
    told = {"unreadable": unreadable, "no_fore_period": no_fore, "not_steady": unsteady, "short_after": brief, "coarse": coarse,
            "disordered": found.disordered, "falls_in_rise": falls, "impossible": found.impossible > 0}  # fmt: skip
    warned = np.zeros(len(t), dtype=np.int64)
    for name, where in told.items():
        warned |= np.where(where & (~unreadable | (name == "unreadable") | (name == "impossible")), BIT[name], 0)
    return warned, np.nan_to_num(change)


def _highest(found: Records, bounds: Periods) -> Floats:
    """(n,) the highest temperature up to the end of the main period."""
    with np.errstate(invalid="ignore"):
        seen = np.where(found.time <= bounds.main_end[:, None], found.temperature, -np.inf)
    return np.asarray(np.where(np.isnan(seen), -np.inf, seen).max(axis=1))
