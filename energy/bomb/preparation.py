"""From the material as it came to what lay in the crucible, and back.

Mass fractions in kg/kg, (n,) arrays. yield : mass of powder per mass of material as it is (freeze-dried or pre-dried);
residual : water still in the powder on the day the pellets were pressed.
"""

from __future__ import annotations

from datetime import date

import numpy as np
from numpy.typing import ArrayLike

from energy.bomb.constants import value as constant
from energy.bomb.drift import Floats


def powder_yield(received: ArrayLike, dried: ArrayLike) -> Floats:
    """Yield from the mass as received and the mass after freeze-drying or pre-drying, in one unit of mass."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(dried, dtype=float) / np.asarray(received, dtype=float)


def dry_matter(powder: ArrayLike, residual: ArrayLike) -> Floats:
    """Dry matter of the material as it is: yield x (1 - residual moisture)."""
    return np.asarray(powder, dtype=float) * (1 - np.asarray(residual, dtype=float))


def on_dry_matter(
    energy: ArrayLike, u: ArrayLike, residual: ArrayLike, u_residual: ArrayLike | None = None
) -> tuple[Floats, Floats]:
    """An energy per gram as analysed -> per gram of dry matter, with u. u_residual : the constant u_moisture where None."""
    q, w = np.asarray(energy, dtype=float), np.asarray(residual, dtype=float)
    uw = np.where(w > 0, constant("u_moisture"), 0.0) if u_residual is None else np.asarray(u_residual, dtype=float)
    value = q / (1 - w)
    return value, np.hypot(np.asarray(u, dtype=float) / (1 - w), value / (1 - w) * uw)


def as_it_is(
    energy: ArrayLike, u: ArrayLike, powder: ArrayLike, u_powder: ArrayLike | None = None
) -> tuple[Floats, Floats]:
    """An energy per gram as analysed -> per gram of material as it is, by the yield alone: moisture does not enter.

    u_powder : relative u_yield where None; a yield of 1 (nothing was dried) carries none.
    """
    q, y = np.asarray(energy, dtype=float), np.asarray(powder, dtype=float)
    uy = np.where(y != 1, constant("u_yield") * y, 0.0) if u_powder is None else np.asarray(u_powder, dtype=float)
    return q * y, np.hypot(np.asarray(u, dtype=float) * y, q * uy)


def net_mass(together: ArrayLike, wrapping: ArrayLike) -> Floats:
    """Mass of what lies in a weighed bag or capsule: pellet, powder, or wet material burnt as it is."""
    return np.asarray(together, dtype=float) - np.asarray(wrapping, dtype=float)


def day_warning(pellets: str, moisture: str) -> str:
    """What is said where the residual moisture was not taken on the day of the pellets; '' where it was."""
    try:
        apart = abs((date.fromisoformat(pellets) - date.fromisoformat(moisture)).days)
    except ValueError:
        return ""
    if apart == 0:
        return ""
    return (
        f"the residual moisture was taken {apart} day{'s' if apart > 1 else ''} away from the pellets; a powder takes up or"
        " loses water within hours: weigh both on one day"
    )
