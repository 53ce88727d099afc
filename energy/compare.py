"""Differences, practical limits and verdict words.

The verdict is about the measurement part of a difference: an interval measurement +/- coverage * u is held against
the practical limits. All functions are vectorised over samples; energies in MJ/kg.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr, stdtrit

from energy.problems import UnitProblem, WrongUse
from energy.units import parse_unit

VERDICTS = ("concordant", "biased", "inconclusive", "discordant", "screening", "single_route", "not_computed")
CONCORDANT, BIASED, INCONCLUSIVE, DISCORDANT, SCREENING, SINGLE_ROUTE, NOT_COMPUTED = range(7)

#: with u below this share of the limit the estimate itself decides whether a difference lies inside (simple acceptance,
#: as commonly admitted where the limit is at least four times the standard uncertainty; JCGM 106:2012, 8.2)
DECISIVE = 0.25


@dataclass(frozen=True)
class Limit:
    """A practical limit around zero, as wide below as above or not.

    below, above : shares of |reference|. floor_below, floor_above : MJ/kg; the larger of share and floor holds. look :
    share of the limit from which a difference is worth a look. as_is : the law states it per mass as it is.
    """

    below: float
    above: float
    floor_below: float
    floor_above: float
    look: float
    reason: str
    as_is: bool = False

    def edges(self, reference: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """(n,) lower (negative) and upper limit in MJ/kg."""
        size = np.abs(reference)
        return -np.maximum(self.below * size, self.floor_below), np.maximum(self.above * size, self.floor_above)


def even(relative: float, floor: float, look: float, reason: str, as_is: bool = False) -> Limit:
    """A limit as wide below as above: a share, at least `floor` MJ/kg."""
    return Limit(relative, relative, floor, floor, look, reason, as_is)


_NUMBER = r"([0-9]*\.?[0-9]+)"


def read_limit(text: str | float) -> Limit:
    """A user's limit: 0.05, '5%', '-5%/+10%', '100 kJ/100 g' or '-0.4/+0.8 MJ/kg'. Raises WrongUse with the forms."""
    cure = "Write a share (0.05), a percentage ('5%', '-5%/+10%') or an energy with its unit ('100 kJ/100 g', '-0.4/+0.8 MJ/kg')."
    if isinstance(text, (int, float)):
        if not 0 < text < 1:
            raise WrongUse(f"The limit {text} is not a share between 0 and 1.", cure)
        return even(float(text), 0.0, 0.6, f"{100 * text:g} %, chosen by the user")
    plain = re.fullmatch(rf"\s*{_NUMBER}\s*(.*?)\s*", text)
    two = re.fullmatch(rf"\s*-\s*{_NUMBER}\s*%?\s*/\s*\+\s*{_NUMBER}\s*(.*?)\s*", text.replace("−", "-"))
    if two is not None:
        below, above, unit = float(two[1]), float(two[2]), two[3]
    elif plain is not None:
        below = above = float(plain[1])
        unit = plain[2]
    else:
        raise WrongUse(f"The limit '{text}' cannot be read.", cure)
    if below <= 0 or above <= 0:
        raise WrongUse(f"The limit '{text}' leaves no room.", cure)
    reason = f"{text.strip()}, chosen by the user"
    if unit in ("", "%"):
        share = 100.0 if unit == "%" else 1.0
        if max(below, above) >= share:
            raise WrongUse(f"The limit '{text}' is not a share between 0 and 1.", cure)
        if below == above:
            return even(below / share, 0.0, 0.6, f"{100 * below / share:g} %, chosen by the user")
        return Limit(below / share, above / share, 0.0, 0.0, 0.6, reason)
    try:
        scale = parse_unit(unit, "energy").scale
    except UnitProblem as problem:
        raise WrongUse(f"The limit '{text}' cannot be read: {problem.what}", cure) from None
    return Limit(0.0, 0.0, below * scale, above * scale, 0.6, reason)


def verdict_codes(
    measurement: np.ndarray, u: np.ndarray, lower: np.ndarray, upper: np.ndarray, coverage: np.ndarray | float
) -> np.ndarray:
    """(n,) int8 index into VERDICTS for rows where both routes are there; NaN measurement -> not_computed.

    Where u is at most a quarter of the nearer limit, an estimate inside the limits is inside them; where it is larger,
    the whole interval must be.
    """
    low, high = measurement - coverage * u, measurement + coverage * u
    decisive = (u <= DECISIVE * np.minimum(-lower, upper)) & (measurement >= lower) & (measurement <= upper)
    inside = (low >= lower) & (high <= upper) | decisive
    holds_zero = (low <= 0) & (high >= 0)
    codes = np.full(measurement.shape, INCONCLUSIVE, dtype=np.int8)
    codes[inside & holds_zero] = CONCORDANT
    codes[inside & ~holds_zero] = BIASED
    codes[(high < lower) | (low > upper)] = DISCORDANT
    codes[np.isnan(measurement)] = NOT_COMPUTED
    return codes


def coverage_of(coverage: float, freedom: np.ndarray) -> np.ndarray:
    """The factor with which an interval keeps the probability of `coverage` standard normal deviations.

    freedom : effective degrees of freedom, inf where u is known. Student's t at JCGM 100:2008, G.3.
    """
    found = np.full(np.shape(freedom), coverage)
    few = np.isfinite(freedom)
    if few.any():
        found[few] = stdtrit(freedom[few], ndtr(coverage))
    return found
