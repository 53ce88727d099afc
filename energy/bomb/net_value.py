"""From gross energy at constant volume to constant pressure, and to the net (lower) calorific value of a fuel.

The net calorific value is a fuel's: the heat left when the water leaves as vapour. It has nothing to do with the net
energy of a feed, which is what an animal retains or works with. Energies in J/g, elements and moisture as mass fractions
of what the energy is per; elements are of dry matter in the net values.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from energy.bomb.constants import in_joule
from energy.bomb.constants import value as constant
from energy.bomb.drift import Floats
from energy.problems import WrongUse

NET_METHODS = {
    "constant_pressure": "ISO 1928: constant pressure, from hydrogen, oxygen and nitrogen of the dry matter",
    "constant_volume": "GB/T 213: constant volume, from hydrogen",
    "simple": "24.42 (W + 8.94 H): a latent heat at constant pressure taken from a value at constant volume",
    "mahler": "600 cal per gram of water, 6 (M + 9 H): older books",
}
KEPT_APART = "net calorific value: a fuel quantity, not the net energy of a feed"


def _percent(share: ArrayLike) -> Floats:
    return np.asarray(share, dtype=float) * 100


def constant_pressure(
    gross: ArrayLike, hydrogen: ArrayLike, oxygen: ArrayLike, nitrogen: ArrayLike, u: ArrayLike = 0.0
) -> tuple[Floats, Floats]:
    """Gross value at constant pressure and u, from that at constant volume, all on one basis (dn RT at 298.15 K)."""
    share = {"hydrogen": hydrogen, "oxygen": oxygen, "nitrogen": nitrogen}
    value = np.asarray(gross, dtype=float)
    variance = np.asarray(u, dtype=float) ** 2
    for element, content in share.items():
        per_percent = constant(f"pressure_{element}")
        value = value + per_percent * _percent(content)
        variance = variance + (per_percent * constant("u_element")) ** 2
    return value, np.sqrt(variance)


def net_calorific_value(
    gross_dry: ArrayLike,
    hydrogen: ArrayLike,
    oxygen: ArrayLike = 0.0,
    nitrogen: ArrayLike = 0.0,
    moisture: ArrayLike = 0.0,
    method: str = "constant_pressure",
    u: ArrayLike = 0.0,
) -> tuple[Floats, Floats]:
    """Net (lower) calorific value per gram of material with its moisture, and u.

    gross_dry, hydrogen, oxygen, nitrogen : of the dry matter, at constant volume. method : one of NET_METHODS. Raises
    WrongUse for an unknown method. Two methods that count the latent heat alike still differ: see their words.
    """
    if method not in NET_METHODS:
        raise WrongUse(f"The method '{method}' is not known.", f"One of: {', '.join(NET_METHODS)}.")
    q, h, w = np.asarray(gross_dry, dtype=float), _percent(hydrogen), np.asarray(moisture, dtype=float)
    dry = 1 - w
    if method == "constant_pressure":
        per_h, per_water = constant("net_hydrogen"), constant("net_moisture")
        rest = constant("net_oxygen_nitrogen") * (_percent(oxygen) + _percent(nitrogen))
    elif method == "constant_volume":
        per_h, per_water, rest = constant("net_volume_hydrogen"), constant("net_volume_moisture"), np.zeros_like(q)
    else:
        per_water = -in_joule(f"net_water_{method}")
        per_h, rest = per_water * constant(f"net_hydrogen_{method}"), np.zeros_like(q)
    value = (q + per_h * h + rest) * dry + per_water * _percent(w)
    variance = (np.asarray(u, dtype=float) * dry) ** 2 + (per_h * dry * constant("u_element")) ** 2
    water = np.where(w > 0, constant("u_moisture"), 0.0) * (100 * per_water - (q + per_h * h + rest))
    return np.asarray(value), np.sqrt(variance + water**2)
