"""The energy of a charge against what the vessel is rated for: a warning above, and no word below."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray


def run_energy(mass: ArrayLike, expected: ArrayLike, beside: ArrayLike = 0.0) -> NDArray[np.float64]:
    """Energy [J] a charge is expected to give: mass [g] x expected heat [J/g] + aid, capsule, bag and firing [J]."""
    return np.asarray(mass, dtype=float) * np.asarray(expected, dtype=float) + np.asarray(beside, dtype=float)


def over_rating(energy: ArrayLike, rated: ArrayLike) -> NDArray[np.bool_]:
    """(n,) runs whose energy [J] passes what the vessel is rated for [J]; False where no rating is known.

    False is no statement of safety.
    """
    with np.errstate(invalid="ignore"):
        return np.atleast_1d(np.asarray(energy, dtype=float) > np.asarray(rated, dtype=float))


def rating_sentence(energy: float, rated: float) -> str:
    """What is said of a charge over the rating."""
    return (f"this charge gives about {energy / 1e3:.1f} kJ, over the {rated / 1e3:.1f} kJ the vessel is rated for: do not"
            " fire such a charge; ask those who answer for the vessel")  # fmt: skip
