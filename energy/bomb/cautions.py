"""Cautions of bomb work, in general terms: said on screen, in the terminal's help and in the README."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

CAUTIONS = (
    "A bomb holds oxygen under high pressure and a fire inside: the maker's manual, local codes and licensed people decide"
    " what may be burnt and how. Nothing here says that a run is safe.",
    "Keep to the energy the vessel is rated for, sample, aid and capsule together, and to the sample mass and the oxygen"
    " pressure of its manual; start an unknown material with a fraction of the usual mass.",
    "No oil, grease or other fuel on threads, seals and fittings that oxygen reaches.",
    "Never burn explosives, propellants, peroxides, or volatile or unknown materials without the approval of those who"
    " answer for safety.",
    "Stand away from the vessel while it is fired and for the time the manual gives after; never open one that failed to"
    " fire before that time is over.",
    "Vent slowly, in a hood or outdoors, before opening.",
    "Look at vessel, seals and electrodes before every run, and keep to the dates of inspection and pressure test.",
)


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
