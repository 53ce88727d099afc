"""Calorimetry in an open vessel: constant pressure, heats of solution and mixing, and the vessel's own heat capacity.

Heat = mass x specific heat x rise of the liquid, plus the heat capacity of the hardware x rise. Masses in g, rises in K,
heats in J, (n,) arrays; positive heats are given off by what is studied (its enthalpy change is the negative).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from energy.bomb.constants import constants
from energy.bomb.constants import value as constant
from energy.bomb.drift import Floats

CONSTANT_PRESSURE = (
    "an open vessel gives heat at constant pressure (an enthalpy), a bomb heat at constant volume (an internal energy):"
    " they differ by the gas made or used up"
)


@dataclass(frozen=True)
class Heat:
    """Heat [J] given off and u, and the same per gram (or per mole where a molar mass was given, J/mol)."""

    heat: Floats
    u: Floats
    per_amount: Floats
    u_per_amount: Floats
    amount: str

    @property
    def enthalpy_change(self) -> Floats:
        """(n,) of what was dissolved or mixed, per amount: negative where it warms."""
        return -self.per_amount


def heat_given_off(
    liquid: ArrayLike,
    rise: ArrayLike,
    solute: ArrayLike,
    hardware: ArrayLike = 0.0,
    specific_heat: ArrayLike | None = None,
    molar_mass: float | None = None,
    u_rise: ArrayLike | None = None,
    u_hardware: ArrayLike = 0.0,
) -> Heat:
    """Heat of a solution or mixing run.

    liquid : mass that warms (of the solution where its specific heat is known, else of the water). solute : mass of what
    was dissolved or mixed in. hardware : J/K of vessel, stirrer and thermometer. specific_heat : J/(g K), water's where
    None. molar_mass : g/mol for a result per mole.
    """
    m, dt, own = (np.asarray(a, dtype=float) for a in (liquid, rise, solute))
    c = constant("water_heat") if specific_heat is None else np.asarray(specific_heat, dtype=float)
    capacity = m * c + np.asarray(hardware, dtype=float)
    heat = capacity * dt
    from_rise = capacity * (constants()["u_rise"].value if u_rise is None else np.asarray(u_rise, dtype=float))
    from_mass = c * dt * constant("u_mass")
    u = np.sqrt(from_rise**2 + from_mass**2 + (np.asarray(u_hardware, dtype=float) * dt) ** 2)
    per = 1.0 if molar_mass is None else molar_mass
    each = heat / own * per
    u_each = np.hypot(u / own * per, each * constant("u_mass") / own)
    return Heat(heat, u, each, u_each, "g" if molar_mass is None else "mol")


def vessel_heat_capacity(
    cold: ArrayLike,
    cold_temperature: ArrayLike,
    hot: ArrayLike,
    hot_temperature: ArrayLike,
    mixed_temperature: ArrayLike,
    u_temperature: float | None = None,
) -> tuple[Floats, Floats]:
    """J/K of a vessel that held the cold water, and u, from mixing hot water in: what the hot lost and the cold did not gain.

    masses in g, temperatures in °C, water's specific heat. u_temperature : of each reading, the constant u_rise where None.
    """
    mc, tc, mh, th, t = (
        np.asarray(a, dtype=float) for a in (cold, cold_temperature, hot, hot_temperature, mixed_temperature)
    )
    c = constant("water_heat")
    gain = t - tc
    value = c * (mh * (th - t) / gain - mc)
    each = constant("u_rise") if u_temperature is None else u_temperature
    to_hot, to_cold = c * mh / gain, c * mh * (th - t) / gain**2
    to_mixed = -c * mh / gain - c * mh * (th - t) / gain**2
    return value, each * np.sqrt(to_hot**2 + to_cold**2 + to_mixed**2)
