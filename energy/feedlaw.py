"""Feed law as limits: how far an analysed value may lie from the declared one.

Each law sets its limits per constituent and per class of declared value: so many points of percentage, so
many percent of the declared value, or (a/X + b) percent of a guarantee X. The rows, with publication, place
and how each is known, stand in `catalogue/feed_limits.csv`.
"""

from __future__ import annotations

import csv
import difflib
from collections.abc import Iterable
from dataclasses import asdict, dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from energy.catalogue.tables import FOLDER
from energy.problems import WrongUse

#: who is fed; a law may set wider limits for animals that are not kept for food
ANIMALS = ("food_producing", "non_food_producing")


@dataclass(frozen=True, slots=True)
class Limit:
    """One row of a law: what it bears on one side of the declared value X, in one class of X.

    constituent : slug. animal : "food_producing", "non_food_producing" or "any". feed : the only feed it is
    written for, empty for every feed. unit : of the declared value, and of `absolute`. declared : the class
    as printed; class_low and class_high : its bounds in `unit`, None where open, with whether the bound
    itself belongs to the class. side : "below_label", "above_label", "both" or "guarantee"; guarantee : for
    the last, "minimum", "maximum" or "either". absolute : in `unit` (points where that is %). relative : in
    % of X. formula_a, formula_b : (a/X + b) % of X. None of these four: the law sets no limit on this side.
    superseded : the law is no longer in force. source_status : read, read_secondary, memory_high,
    memory_medium.
    """

    law: str
    constituent: str
    animal: str
    feed: str
    unit: str
    declared: str
    class_low: float
    class_low_included: bool
    class_high: float | None
    class_high_included: bool
    side: str
    guarantee: str
    absolute: float | None
    relative: float | None
    formula_a: float | None
    formula_b: float | None
    superseded: bool
    source: str
    locator: str
    source_status: str
    how_known: str
    note: str

    @classmethod
    def from_row(cls, row: dict[str, str]) -> Limit:
        """A row of the file: figures as numbers, yes and no as booleans, an empty figure as None."""
        read: dict[str, Any] = dict(row)
        for name in ("class_low", "class_high", "absolute", "relative", "formula_a", "formula_b"):
            read[name] = float(row[name]) if row[name] else None
        for name in ("class_low_included", "class_high_included", "superseded"):
            read[name] = row[name] == "yes"
        return cls(**read)

    @property
    def bounds_below(self) -> bool:
        """Whether a value under the declared one is limited by this row."""
        return self.side in ("below_label", "both") or self.guarantee in ("minimum", "either")

    @property
    def bounds_above(self) -> bool:
        """Whether a value over the declared one is limited by this row."""
        return self.side in ("above_label", "both") or self.guarantee in ("maximum", "either")

    def holds(self, declared: NDArray[np.float64]) -> NDArray[np.bool_]:
        """Which declared values fall into this class; shape of `declared`."""
        inside = declared >= self.class_low if self.class_low_included else declared > self.class_low
        if self.class_high is not None:
            inside &= declared <= self.class_high if self.class_high_included else declared < self.class_high
        return inside

    def allowed(self, declared: NDArray[np.float64]) -> NDArray[np.float64]:
        """The departure this row bears, in the unit of `declared` and of its shape; inf where it sets none."""
        if self.absolute is not None:
            return np.full_like(declared, self.absolute)
        if self.relative is not None:
            return declared * self.relative / 100
        if self.formula_a is not None and self.formula_b is not None:
            # (a/X + b) % of X, multiplied out so that a guarantee of 0 needs no division
            return (self.formula_a + self.formula_b * declared) / 100
        return np.full_like(declared, np.inf)


@cache
def _limits() -> tuple[Limit, ...]:
    with (FOLDER / "feed_limits.csv").open(encoding="utf-8", newline="") as handle:
        return tuple(Limit.from_row(row) for row in csv.DictReader(handle))


def laws() -> list[dict[str, Any]]:
    """Every limit, one dictionary per row of `catalogue/feed_limits.csv`, with the fields of `Limit`.

    Shape: a list in the order of the file, a new one at each call. Units: each row's `unit` for class bounds
    and `absolute`, % of the declared value for `relative` and the formula. Source: each row's `source`,
    `locator`, `source_status` and `how_known`.
    """
    return [asdict(limit) for limit in _limits()]


def _refuse_unknown(given: str, there: Iterable[str], what: str) -> None:
    """Refuse a name that is not there, with the nearest ones, or all where none is near."""
    names = sorted(set(there))
    if given in names:
        return
    near = difflib.get_close_matches(str(given), names, n=3, cutoff=0.4)
    raise WrongUse(what, f"Did you mean {' or '.join(near)}?" if near else f"There are: {', '.join(names)}.")


def _rows(law: str, constituent: str, animal: str) -> list[Limit]:
    """The rows of a law for a constituent and an animal, or a refusal."""
    _refuse_unknown(law, (limit.law for limit in _limits()), f"there is no feed law '{law}'.")
    of_law = [limit for limit in _limits() if limit.law == law]
    _refuse_unknown(constituent, (limit.constituent for limit in of_law), f"{law} sets no limit of '{constituent}'.")
    _refuse_unknown(animal, ANIMALS, f"there is no kind of animal '{animal}'.")
    of_constituent = [limit for limit in of_law if limit.constituent == constituent]
    rows = [limit for limit in of_constituent if limit.animal in (animal, "any")]
    if not rows:
        raise WrongUse(
            f"{law} sets no limit of {constituent} for animal='{animal}'.",
            f"It sets one for animal='{of_constituent[0].animal}'.",
        )
    return rows


def _clean(declared: ArrayLike, unit: str) -> NDArray[np.float64]:
    """Declared values as numbers, or a refusal of those that cannot be declared."""
    values: NDArray[np.float64] = np.asarray(declared, dtype=np.float64)
    if np.any(values < 0):
        raise WrongUse(f"a declared value is negative: {np.nanmin(values):g}.", "Give what the label declares, from 0.")
    if np.any(np.isinf(values)):
        raise WrongUse("a declared value is infinite.", "Give a number, or NaN where nothing is declared.")
    if unit == "%" and np.any(values > 100):
        raise WrongUse(
            f"a declared value is above 100 %: {np.nanmax(values):g}.", "Give % of the feed; g/kg divided by 10 is %."
        )
    return values


def feed_tolerance(
    law: str, constituent: str, declared: ArrayLike, animal: str = "food_producing"
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """The interval in which an analysed value may lie when `declared` stands on the label.

    law, constituent : slugs, as `laws()` lists them. declared : any shape, a single number too; in % of the
    feed, for an energy value in MJ/kg (a limit that is a share of the declared value is good in any unit).
    animal : "food_producing" or "non_food_producing".

    Returns lower and upper, two arrays of the shape of `declared` and in its unit; -inf or +inf where the law
    sets no limit on that side, NaN where `declared` is NaN. Lower is what the law says and may be below 0.

    Raises `WrongUse` for a law, constituent or animal that is not there, and for a declared value that is
    negative, infinite, or above 100 where the unit is %.

    Source: `source`, `locator` and `source_status` of each row in `laws()`; some are remembered, not read.
    """
    rows = _rows(law, constituent, animal)
    values = _clean(declared, rows[0].unit)
    lower = np.where(np.isnan(values), np.nan, -np.inf)
    upper = np.where(np.isnan(values), np.nan, np.inf)
    for limit in rows:
        inside, allowed = limit.holds(values), limit.allowed(values)
        if limit.bounds_below:
            lower = np.where(inside, values - allowed, lower)
        if limit.bounds_above:
            upper = np.where(inside, values + allowed, upper)
    return lower, upper
