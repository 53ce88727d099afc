"""Differences, practical limits and verdict words.

The verdict is about the measurement part of a difference: an interval measurement +/- coverage * u is held against
the practical limits. All functions are vectorised over samples; energies in MJ/kg.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np

from energy.problems import UnitProblem, WrongUse
from energy.units import parse_unit

VERDICTS = ("concordant", "biased", "inconclusive", "discordant", "single_route", "not_computed")
CONCORDANT, BIASED, INCONCLUSIVE, DISCORDANT, SINGLE_ROUTE, NOT_COMPUTED = range(6)


@dataclass(frozen=True)
class Limit:
    """A practical limit: the larger of relative * |reference| and floor (MJ/kg); `look` is the share to look at."""

    relative: float
    floor: float
    look: float
    reason: str

    def width(self, reference: np.ndarray) -> np.ndarray:
        """(n,) half-width in MJ/kg around zero."""
        width: np.ndarray = np.maximum(self.relative * np.abs(reference), self.floor)
        return width

    def look_width(self, reference: np.ndarray) -> np.ndarray:
        """(n,) half-width of the look level in MJ/kg."""
        width: np.ndarray = np.maximum(
            self.look * np.abs(reference), self.floor * self.look / max(self.relative, 1e-12)
        )
        return width


def read_limit(text: str | float) -> Limit:
    """A user's limit: 0.05, '5%' or '100 kJ/100 g'. Raises WrongUse with the accepted forms."""
    cure = "Write a share (0.05), a percentage ('5%') or an energy with its unit ('100 kJ/100 g')."
    if isinstance(text, (int, float)):
        if not 0 < text < 1:
            raise WrongUse(f"The limit {text} is not a share between 0 and 1.", cure)
        return Limit(float(text), 0.0, 0.6 * float(text), f"{100 * text:g} %, chosen by the user")
    match = re.fullmatch(r"\s*([0-9]*\.?[0-9]+)\s*(.*?)\s*", text)
    if match is None or float(match[1]) <= 0:
        raise WrongUse(f"The limit '{text}' cannot be read.", cure)
    value, unit = float(match[1]), match[2]
    if unit in ("", "%"):
        return read_limit(value / 100 if unit == "%" else value)
    try:
        scale = parse_unit(unit, "energy").scale
    except UnitProblem as problem:
        raise WrongUse(f"The limit '{text}' cannot be read: {problem.what}", cure) from None
    return Limit(0.0, value * scale, 0.0, f"{text.strip()}, chosen by the user")


def verdict_codes(
    measurement: np.ndarray, u: np.ndarray, lower: np.ndarray, upper: np.ndarray, coverage: float
) -> np.ndarray:
    """(n,) int8 index into VERDICTS for rows where both routes are there; NaN measurement -> not_computed."""
    low, high = measurement - coverage * u, measurement + coverage * u
    inside = (low >= lower) & (high <= upper)
    holds_zero = (low <= 0) & (high >= 0)
    codes = np.full(measurement.shape, INCONCLUSIVE, dtype=np.int8)
    codes[inside & holds_zero] = CONCORDANT
    codes[inside & ~holds_zero] = BIASED
    codes[(high < lower) | (low > upper)] = DISCORDANT
    codes[np.isnan(measurement)] = NOT_COMPUTED
    return codes
