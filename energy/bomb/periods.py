"""Time-temperature records, many at once, and their fore, main and after periods.

Records are padded: row i holds the readings of run i in order of time, NaN behind its last one. Every step works on
whole arrays; no loop runs over readings or runs.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from energy.bomb.drift import Drift, Flags, Floats, fit

#: fewest readings a straight line is fitted to when the tool looks for the after period
FEWEST = 5
#: a step of this share of the steepest one belongs to the main period (ours)
STEEP = 0.02
#: readings stand out from a line beyond so many standard deviations (ours)
BEYOND = 4.0
#: what is left of the combustion hides in the scatter where the after period seems to begin; it dies away while the main
#: period is made longer by this share of itself (ours)
LONGER = 0.5
#: share of the rise below which a departure from the after period's line is of no account (ours: a fifth of steady_share)
NO_ACCOUNT = 1e-4
#: °C a calorimeter's water can have
POSSIBLE = (0.0, 60.0)


@dataclass(frozen=True)
class Records:
    """n time-temperature records of at most m readings.

    time, temperature : (n, m), any unit of time, °C; NaN where there is no reading. ids : (n,) run ids. disordered : (n,)
    the readings did not come in order of time, or two have the same time. impossible : (n,) readings left out because no
    calorimeter shows them; `left_out` names them.
    """

    time: Floats
    temperature: Floats
    ids: NDArray[np.object_]
    disordered: Flags
    impossible: NDArray[np.intp]
    left_out: dict[int, list[tuple[float, float]]]

    @property
    def count(self) -> NDArray[np.intp]:
        """(n,) readings of each record."""
        return (~np.isnan(self.temperature)).sum(axis=1)

    def take(self, rows: NDArray[np.intp]) -> Records:
        """Some of the records, in the order of `rows` (k,)."""
        left = {new: self.left_out[old] for new, old in enumerate(rows.tolist()) if old in self.left_out}
        return Records(self.time[rows], self.temperature[rows], self.ids[rows], self.disordered[rows],
                       self.impossible[rows], left)  # fmt: skip


def records(time: ArrayLike, temperature: ArrayLike, ids: ArrayLike | None = None) -> Records:
    """(n, m) padded readings, or (m,) of one run -> Records in order of time, what cannot be read left out and told."""
    t, temp = (np.atleast_2d(np.array(a, dtype=float)) for a in (time, temperature))
    t, temp = (np.array(a) for a in np.broadcast_arrays(t, temp))
    n = len(temp)
    names = np.arange(1, n + 1).astype(str).astype(object) if ids is None else np.asarray(ids, dtype=object)
    empty = ~(np.isfinite(t) & np.isfinite(temp))
    t[empty], temp[empty] = np.nan, np.nan
    with np.errstate(invalid="ignore"):
        follows = (np.diff(t, axis=1) > 0) | np.isnan(t[:, 1:]) | np.isnan(t[:, :-1])
    disordered = ~follows.all(axis=1)
    t, temp = _in_order(t, temp)
    wrong = _impossible(temp)
    left = {i: [(float(a), float(b)) for a, b in zip(t[i][wrong[i]], temp[i][wrong[i]], strict=True)]
            for i in np.flatnonzero(wrong.any(axis=1)).tolist()}  # fmt: skip
    t[wrong], temp[wrong] = np.nan, np.nan
    t, temp = _in_order(t, temp)
    return Records(t, temp, names, disordered, wrong.sum(axis=1), left)


def _in_order(t: Floats, temp: Floats) -> tuple[Floats, Floats]:
    order = np.argsort(t, axis=1, kind="stable")  # NaN goes to the end
    return np.take_along_axis(t, order, 1), np.take_along_axis(temp, order, 1)


def records_of_long(ids: ArrayLike, time: ArrayLike, temperature: ArrayLike) -> Records:
    """A long table (N,) of run id, time, temperature -> Records, runs in the order in which they first appear."""
    names = np.asarray(ids, dtype=object)
    _, first, code = np.unique(names.astype(str), return_index=True, return_inverse=True)
    rank = np.argsort(np.argsort(first))
    run = rank[code]
    order = np.argsort(run, kind="stable")
    sizes = np.bincount(run)
    starts = np.repeat(np.cumsum(sizes) - sizes, sizes)
    place = np.arange(len(run)) - starts
    t, temp = (np.full((len(sizes), int(sizes.max())), np.nan) for _ in range(2))
    t[run[order], place] = np.asarray(time, dtype=float)[order]
    temp[run[order], place] = np.asarray(temperature, dtype=float)[order]
    return records(t, temp, names[np.sort(first)])


def _impossible(temp: Floats) -> Flags:
    """Readings outside what water in a calorimeter can have, or leaping by half the rise away from both neighbours."""
    with np.errstate(invalid="ignore"):
        wrong = (temp < POSSIBLE[0]) | (temp > POSSIBLE[1])
    if temp.shape[1] < 3:
        return np.asarray(wrong)
    before, here, after = temp[:, :-2], temp[:, 1:-1], temp[:, 2:]
    with np.errstate(invalid="ignore"):
        leap = np.minimum(np.abs(here - before), np.abs(here - after))
        same_side = (here - before) * (here - after) > 0
        span = np.abs(after - before)
        whole = _span(temp)[:, None]
        wrong[:, 1:-1] |= same_side & (leap > 0.5 * whole) & (leap > span)
    return np.asarray(wrong)


def _span(temp: Floats) -> Floats:
    """(n,) how far the record climbs, by middle values so that one bad reading does not set it."""
    ordered = np.sort(temp, axis=1)  # NaN last
    count = np.maximum((~np.isnan(temp)).sum(axis=1), 1)
    row = np.arange(len(temp))
    low, high = ordered[row, np.minimum(1, count - 1)], ordered[row, np.maximum(count - 2, 0)]
    return np.asarray(high - low)


def resolution(temp: Floats) -> Floats:
    """(n,) the power of ten in which the readings step (0.1, 0.01 ... 1e-6), by the decimals they are written with."""
    step = np.full(len(temp), 1e-6)
    for power in range(5, -1, -1):
        with np.errstate(invalid="ignore"):
            scaled = temp * 10.0**power
            fits = (np.abs(scaled - np.round(scaled)) < 1e-4) | np.isnan(scaled)
        step[fits.all(axis=1)] = 10.0**-power
    return step


@dataclass(frozen=True)
class Periods:
    """Bounds of the three periods, (n,) times: fore start .. ignition .. main end .. after end; bounds belong to both.

    steady : (n,) the after period found is straight; True where the user gave its start.
    """

    fore_start: Floats
    ignition: Floats
    main_end: Floats
    after_end: Floats
    steady: Flags


def periods(
    found: Records,
    fore_start: ArrayLike | None = None,
    ignition: ArrayLike | None = None,
    main_end: ArrayLike | None = None,
    after_end: ArrayLike | None = None,
) -> Periods:
    """The three periods, found from the readings; a time given (one, or (n,) with NaN for 'find it') stands.

    Ignition is the last reading before the steps grow to 2 % of the steepest one, searched backwards from that step. The
    after period is the longest run of last readings (at least five) in which no two neighbours depart from the line through
    those behind them by more than four standard deviations of a reading, 0.01 % of the rise and three quarters of the
    thermometer's step. Its first half is then given to the main period as far as that grows by half, so that the end of the
    combustion does not hide in the scatter. Where no such run exists the last readings are taken and `steady` is False.
    """
    t, temp = found.time, found.temperature
    n = len(t)
    first, last = t[:, 0], np.nanmax(np.where(np.isnan(t), -np.inf, t), axis=1, initial=-np.inf)
    start = _or(fore_start, np.where(np.isfinite(first), first, np.nan), n)
    stop = _or(after_end, np.where(np.isfinite(last), last, np.nan), n)
    with np.errstate(invalid="ignore"):
        inside = (t >= start[:, None]) & (t <= stop[:, None])
    used, cut = np.where(inside, t, np.nan), np.where(inside, temp, np.nan)
    if t.shape[1] < 3:
        nothing = np.full(n, np.nan)
        return Periods(start, _or(ignition, nothing, n), _or(main_end, nothing, n), stop, np.zeros(n, dtype=bool))
    fire, steepest = _ignition(used, cut)
    lit = _or(ignition, np.take_along_axis(used, fire[:, None], 1)[:, 0], n)
    with np.errstate(invalid="ignore"):
        fore = np.where(used <= lit[:, None], cut, np.nan)
    begin, steady = _after(used, cut, np.maximum(steepest + 1, fire + 1), fit(used, fore))
    begin = _longer(used, fire, begin)
    end = _or(main_end, np.take_along_axis(used, begin[:, None], 1)[:, 0], n)
    given = ~np.isnan(np.full(n, np.nan) if main_end is None else np.broadcast_to(np.asarray(main_end, float), n))
    return Periods(start, lit, end, stop, steady | given)


def _or(given: ArrayLike | None, automatic: Floats, n: int) -> Floats:
    if given is None:
        return automatic
    wanted = np.broadcast_to(np.asarray(given, dtype=float), n)
    return np.where(np.isnan(wanted), automatic, wanted)


def _ignition(t: Floats, temp: Floats) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Index of the last reading before the rise, and of the reading before the steepest step."""
    with np.errstate(invalid="ignore", divide="ignore"):
        rate = np.diff(temp, axis=1) / np.diff(t, axis=1)
    rate = np.where(np.isfinite(rate), rate, -np.inf)
    steepest = rate.argmax(axis=1)
    top = np.take_along_axis(rate, steepest[:, None], 1)
    index = np.arange(rate.shape[1])[None, :]
    calm = (rate < STEEP * top) & (index < steepest[:, None])
    reach = np.where(calm, index + 1, 0).max(axis=1)
    first = np.argmax(~np.isnan(temp), axis=1)
    return np.maximum(reach, first), steepest


def _after(t: Floats, temp: Floats, earliest: NDArray[np.intp], fore: Drift) -> tuple[NDArray[np.intp], Flags]:
    """Index of the after period's first reading, and whether it is straight.

    Lines through all runs of last readings at once, by sums taken from the end.
    """
    n, m = temp.shape
    index = np.arange(m)[None, :]
    ok = ~np.isnan(temp)
    last = np.where(ok, index, 0).max(axis=1)
    row = np.arange(n)
    x = np.where(ok, t - t[row, last][:, None], 0.0)
    y = np.where(ok, temp - temp[row, last][:, None], 0.0)

    def from_the_end(a: Floats) -> Floats:
        return np.cumsum(a[:, ::-1], axis=1)[:, ::-1]

    count, sx, sy = from_the_end(ok.astype(float)), from_the_end(x), from_the_end(y)
    sxx, sxy, syy = from_the_end(x * x), from_the_end(x * y), from_the_end(y * y)
    with np.errstate(invalid="ignore", divide="ignore"):
        cxx, cxy, cyy = sxx - sx**2 / count, sxy - sx * sy / count, syy - sy**2 / count
        slope = cxy / cxx
        rest = np.maximum(cyy - slope * cxy, 0.0)
        centre = sx / count
        # a reading and its neighbour against the line through those behind both
        pair = []
        for here in (slice(0, m - 2), slice(1, m - 1)):
            ahead = x[:, here] - centre[:, 2:]
            departure = y[:, here] - (sy / count)[:, 2:] - slope[:, 2:] * ahead
            pair.append((departure, 1 + 1 / count[:, 2:] + ahead**2 / cxx[:, 2:]))
    tail = np.maximum(last - FEWEST + 1, 0)
    known = np.maximum(fore.count - 2, 0)
    noise2 = (rest[row, tail] + known * np.nan_to_num(fore.sd) ** 2) / (FEWEST - 2 + known)
    floor = np.maximum(NO_ACCOUNT * _span(temp), 0.75 * resolution(temp))[:, None]
    with np.errstate(invalid="ignore"):
        out = ok[:, :-2]
        for departure, leverage in pair:
            out = out & (np.abs(departure) > np.maximum(BEYOND * np.sqrt(noise2[:, None] * leverage), floor))
    # the line itself must have three readings before it can judge others
    judged = index[:, :-2] <= (last - 4)[:, None]
    before_tail = np.where(out & judged, index[:, :-2] + 2, 0).max(axis=1)
    begin = np.maximum(before_tail, earliest)
    steady = (begin <= last - FEWEST + 1) & (last - earliest >= FEWEST - 1)
    fallback = np.maximum(last - FEWEST + 1, earliest)
    return np.minimum(np.where(steady, begin, fallback), last), steady


def _longer(t: Floats, fire: NDArray[np.intp], begin: NDArray[np.intp]) -> NDArray[np.intp]:
    """The main period made longer, as far as half of the after period and FEWEST readings stay."""
    index = np.arange(t.shape[1])[None, :]
    last = np.where(~np.isnan(t), index, 0).max(axis=1)
    row = np.arange(len(t))
    wanted = t[row, begin] + LONGER * (t[row, begin] - t[row, fire])
    wanted -= 1e-9 * np.abs(t[row, last] - t[row, fire])  # a reading at the time wanted is at it whatever the rounding
    with np.errstate(invalid="ignore"):
        there = np.where(t >= wanted[:, None], index, last[:, None]).min(axis=1)
    stays = np.maximum(FEWEST, (last - begin + 2) // 2)
    return np.maximum(np.minimum(there, last - stays + 1), begin)
