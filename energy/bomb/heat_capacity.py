"""Effective heat capacity of a calorimeter from runs of benzoic acid.

The certificate's heat travels with its basis: 26 434 J/g is per gram of mass in vacuum, 26 454 J/g per gram weighed in
air; they are the same acid. Masses here are as the balance shows them, in air.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import stdtr

from energy.bomb.constants import constants
from energy.bomb.constants import value as constant
from energy.bomb.corrections import Term
from energy.bomb.drift import Flags, Floats
from energy.replicates import GRUBBS_NEEDS, grubbs

BASES = ("air", "vacuum")
#: J/g within which a certificate value is taken for one of the two known ones; they lie 20 apart
NEAR = 5.0


def buoyancy(density: float | None = None, weights: str = "weights_density") -> float:
    """Mass in vacuum over mass weighed in air. density : g/cm3 of the sample, benzoic acid's where None."""
    rho = constant("benzoic_acid_density") if density is None else density
    return 1 + constant("air_density") * (1 / rho - 1 / constant(weights))


def certificate_trouble(heat: float, basis: str) -> str:
    """What is wrong with a certificate value [J/g] and its stated basis; '' where nothing is."""
    vacuum, air = constant("benzoic_acid_vacuum"), constant("benzoic_acid_air")
    if basis not in BASES:
        return f"the basis of the certificate value {heat:g} J/g is not said: write 'air' (weighed in air) or 'vacuum'"
    other = {"air": vacuum, "vacuum": air}[basis]
    mine = {"air": air, "vacuum": vacuum}[basis]
    if abs(heat - other) < NEAR and abs(heat - mine) > NEAR:
        meant = "vacuum" if basis == "air" else "air"
        return (f"{heat:g} J/g is benzoic acid's heat {'per mass in vacuum' if meant == 'vacuum' else 'weighed in air'}, but"
                f" the basis is given as '{basis}'; every result would be off by 0.077 %: write certificate_basis"
                f" '{meant}', or give {mine:g}")  # fmt: skip
    return ""


def heat_weighed_in_air(heat: ArrayLike, basis: ArrayLike) -> Floats:
    """(n,) certificate heats [J/g] -> per gram weighed in air, by each row's basis. Brass weights, as the certificate has."""
    q, on = np.asarray(heat, dtype=float), np.asarray(basis)
    return np.where(on == "vacuum", q * buoyancy(), q)


def conditions_factor(
    pressure: ArrayLike, sample: ArrayLike, water: ArrayLike, volume: ArrayLike, temperature: ArrayLike
) -> tuple[Floats, Flags]:
    """Factor on the certificate heat for bomb conditions, and whether they lie in the certificate's range.

    pressure : MPa of oxygen. sample, water : g in the bomb. volume : dm3 inside. temperature : °C of reference. Outside the
    range the factor is 1: nothing is extrapolated, and the second array says so. NaN in any of them: 1, and True.
    """
    atm = np.asarray(pressure, dtype=float) / 0.101325
    v = np.asarray(volume, dtype=float)
    given = {"pressure": atm, "sample": np.asarray(sample, dtype=float) / v, "water": np.asarray(water, dtype=float) / v,
             "temperature": np.asarray(temperature, dtype=float)}  # fmt: skip
    factor, inside, known = np.ones(1), np.array(True), np.array(True)
    for name, value in given.items():
        entry = constants()[f"conditions_{name}"]
        factor = factor + entry.value * (value - entry.reference)
        known = known & ~np.isnan(value)
        with np.errstate(invalid="ignore"):
            inside = inside & (value >= entry.low - 1e-9) & (value <= entry.high + 1e-9)
    return np.where(known & inside, factor, 1.0), np.asarray(inside | ~known)


def conditions_size(pressure: float, sample: float, water: float, volume: float, temperature: float) -> float:
    """What the formula would give outside its range, J/g: told, never applied."""
    given = {"pressure": pressure / 0.101325, "sample": sample / volume, "water": water / volume,
             "temperature": temperature}  # fmt: skip
    total = sum(constant(f"conditions_{k}") * (v - constants()[f"conditions_{k}"].reference) for k, v in given.items())
    return total * constant("benzoic_acid_vacuum")


def of_runs(
    mass: ArrayLike, heat: ArrayLike, rise: ArrayLike, terms: tuple[Term, ...] = (), u_rise: ArrayLike = 0.0,
    u_mass: float | None = None,
) -> tuple[Floats, Floats]:  # fmt: skip
    """(n,) heat capacity [J/K] of each run and its u: (mass x heat + what else gave heat) / rise.

    heat : J/g per gram weighed in air. The certificate's own u is common to all runs and not in it.
    """
    m, q, dt = (np.asarray(a, dtype=float) for a in (mass, heat, rise))
    total = m * q
    variance = (q * (constant("u_mass") if u_mass is None else u_mass)) ** 2
    for term in terms:
        total = total + term.heat
        variance = variance + term.u**2
    with np.errstate(divide="ignore", invalid="ignore"):
        value = total / dt
        return value, np.hypot(np.sqrt(variance) / dt, value / dt * np.asarray(u_rise, dtype=float))


def for_other_water(
    heat_capacity: ArrayLike, water: ArrayLike, water_at_calibration: ArrayLike, specific_heat: str = "water_heat"
) -> Floats:
    """Heat capacity [J/K] with another mass of bucket water [g] than in the calibration.

    specific_heat : water_heat (4.184 J/(g K)) or water_heat_25 (4.18, at 25 °C); 10 g apart they differ by 0.04 J/K.
    """
    change = np.asarray(water, dtype=float) - np.asarray(water_at_calibration, dtype=float)
    return np.asarray(heat_capacity, dtype=float) + change * constant(specific_heat)


@dataclass(frozen=True)
class Calibration:
    """The heat capacity found by one set of runs.

    values : (n,) J/K of the runs that count. mean, sd : J/K. u : of the mean, scatter and certificate. freedom : of the
    scatter. trend : J/K per K of rise and trend_p its p-value. outlier : run id, '' for none. warnings : in words. low,
    high : rises met. water : g of bucket water, NaN unknown. counted : which corrections were made. fired_with : ignition
    materials named.
    """

    id: str
    run_ids: tuple[str, ...]
    values: Floats
    mean: float
    sd: float
    u: float
    freedom: int
    trend: float
    trend_p: float
    outlier: str
    low: float
    high: float
    water: float
    instrument: str = ""
    date: str = ""
    counted: dict[str, bool] = field(default_factory=dict)
    fired_with: tuple[str, ...] = ()
    warnings: tuple[str, ...] = ()

    @property
    def n(self) -> int:
        """Runs that count."""
        return len(self.values)

    @property
    def rsd(self) -> float:
        """Relative standard deviation of the runs."""
        return self.sd / self.mean


def given(heat_capacity: float, u: float | None = None, name: str = "given") -> Calibration:
    """A heat capacity known otherwise. u : J/K, the scatter five runs may have (0.20 %) over root five where None."""
    spread = constant("calibration_rsd") * heat_capacity / np.sqrt(constant("calibration_runs")) if u is None else u
    told = (
        ()
        if u is not None
        else ("the heat capacity came without u; that of five runs at the limit of 0.20 % is taken",)
    )
    return Calibration(name, (), np.array([heat_capacity]), heat_capacity, np.nan, float(spread), 0, np.nan, np.nan, "",
                       -np.inf, np.inf, np.nan, warnings=told)  # fmt: skip


def summary(
    name: str,
    run_ids: ArrayLike,
    values: ArrayLike,
    rise: ArrayLike,
    u_runs: ArrayLike | None = None,
    water: float = np.nan,
    instrument: str = "",
    date: str = "",
    counted: dict[str, bool] | None = None,
    odd_terms: float = 0.0,
    fired_with: tuple[str, ...] = (),
) -> Calibration:
    """Mean heat capacity of n runs [J/K] with what is to be said of them.

    rise : (n,) K. odd_terms : J/K of u common to all runs (ignition, acid constants). With one run u is that of the run.
    No run is dropped: an outlier is named, and a person decides.
    """
    c, dt = np.asarray(values, dtype=float), np.asarray(rise, dtype=float)
    ids = np.asarray(run_ids, dtype=object)
    n = len(c)
    mean = float(c.mean())
    sd = float(c.std(ddof=1)) if n > 1 else np.nan
    own = float(np.mean(np.asarray(u_runs, dtype=float))) if u_runs is not None else 0.0
    scatter = sd / np.sqrt(n) if n > 1 else own
    entry = constants()["benzoic_acid_air"]
    u = float(np.sqrt(scatter**2 + (mean * entry.u / entry.value) ** 2 + odd_terms**2))
    slope, p = _trend(dt, c)
    said = []
    fewest = int(constant("calibration_runs"))
    if n < fewest:
        said.append(f"{n} calibration run{'s' if n > 1 else ''}; at least {fewest} are needed")
    if n > 1 and sd / mean > constant("calibration_rsd"):
        said.append(f"the runs scatter by {sd / mean:.2%}; {constant('calibration_rsd'):.2%} is the limit")
    if np.isfinite(p) and p < 0.05:
        said.append(f"the heat capacity changes with the rise by {slope:+.3g} J/K per K (p = {p:.2g}); calibrate with rises"
                    " like those of the tests")  # fmt: skip
    outlier = ""
    if n >= GRUBBS_NEEDS:
        found = grubbs(c)
        if found.judged != "none":
            outlier = str(ids[found.index])
            said.append(f"run {outlier} stands out (Grubbs, {found.judged}); find out why before it is left out")
    return Calibration(name, tuple(str(i) for i in ids), c, mean, sd, u, n - 1, slope, p, outlier, float(dt.min()),
                       float(dt.max()), water, instrument, date, counted or {}, fired_with, tuple(said))  # fmt: skip


def _trend(x: Floats, y: Floats) -> tuple[float, float]:
    """Slope of y over x and its two-sided p; NaN where x hardly varies or runs are few."""
    n = len(x)
    away = x - x.mean()
    sxx = float(away @ away)
    if n < 4 or sxx < n * (0.02 * x.mean()) ** 2:
        return np.nan, np.nan
    slope = float(away @ y) / sxx
    rest = y - y.mean() - slope * away
    spread = float(np.sqrt(rest @ rest / (n - 2) / sxx))
    if spread == 0:
        return slope, 0.0 if slope else 1.0
    return slope, float(2 * stdtr(n - 2, -abs(slope) / spread))
