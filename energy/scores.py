"""Scores of a result against a reference: z, z', zeta (ISO 13528) and En (ISO/IEC 17043). Single values or (n,) arrays."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]

#: ISO 13528: |score| above the first is a warning, above the second calls for action
WARNING, ACTION = 2.0, 3.0


def _over(difference: Floats, scale: Floats) -> Floats:
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(difference / scale)


def _gap(result: ArrayLike, reference: ArrayLike) -> Floats:
    return np.asarray(np.asarray(result, dtype=float) - np.asarray(reference, dtype=float))


def z(result: ArrayLike, reference: ArrayLike, sigma: ArrayLike) -> Floats:
    """(x - reference) / sigma, sigma the standard deviation set for the assessment."""
    return _over(_gap(result, reference), np.asarray(sigma, dtype=float))


def z_prime(result: ArrayLike, reference: ArrayLike, sigma: ArrayLike, u_reference: ArrayLike) -> Floats:
    """z with the reference's own standard uncertainty in the denominator, where that is not small against sigma."""
    return _over(_gap(result, reference), np.hypot(sigma, u_reference))


def zeta(result: ArrayLike, reference: ArrayLike, u_result: ArrayLike, u_reference: ArrayLike) -> Floats:
    """Difference over the two STANDARD uncertainties; results that share inputs need `zeta_of_difference`."""
    return _over(_gap(result, reference), np.hypot(u_result, u_reference))


def zeta_of_difference(difference: ArrayLike, u_difference: ArrayLike) -> Floats:
    """The same where u was taken on the difference itself, so that shared inputs have cancelled."""
    return _over(np.asarray(difference, dtype=float), np.asarray(u_difference, dtype=float))


def en(result: ArrayLike, reference: ArrayLike, expanded_result: ArrayLike, expanded_reference: ArrayLike) -> Floats:
    """En: difference over the two EXPANDED uncertainties (k = 2); |En| <= 1 is satisfactory. At k = 2, half of zeta."""
    return _over(_gap(result, reference), np.hypot(expanded_result, expanded_reference))


def word(score: float) -> str:
    """What a z, z' or zeta score calls for: 'satisfactory', 'warning' or 'action'; '' where there is none."""
    if np.isnan(score):
        return ""
    return "action" if abs(score) > ACTION else "warning" if abs(score) > WARNING else "satisfactory"
