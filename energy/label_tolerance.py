"""How far a checked value may lie from a declared one: rows of `catalogue/label_tolerances.csv`, and feed law.

Where the food law has a limit for energy it is used; where it has none but limits the nutrients (the European
Union), a limit of energy can be propagated from theirs; where neither is there, there is no rule.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from energy import rounding
from energy.catalogue.records import System, weakest
from energy.catalogue.tables import FOLDER
from energy.feedlaw import feed_tolerance, laws
from energy.label_law import LabelLaw
from energy.problems import WrongUse
from energy.rounding import Floats, tidy

#: kJ per 100 g in one MJ per kg
KJ_PER_MJ = 100.0


@dataclass(frozen=True)
class ToleranceRow:
    """One row: what a rule bears around a declared value X of one class.

    unit : of class bounds and absolute limits, per 100 g unless the row says otherwise. kind : "limits", "propagated"
    (energy follows from the nutrients), or "none" (the source was looked at, and sets no number). below_absolute,
    above_absolute : in `unit`; below_percent, above_percent : of X; neither on a side: no limit there. applied :
    "widened" where X is first widened to its rounding interval and the limits are rounded. contains_uncertainty : "yes"
    where measurement uncertainty is in the limits already. tested : what the limit holds for.
    """

    rule_set: str
    quantity: str
    unit: str
    class_low: float
    class_low_included: bool
    class_high: float
    class_high_included: bool
    kind: str
    below_absolute: float
    below_percent: float
    above_absolute: float
    above_percent: float
    applied: str
    contains_uncertainty: str
    tested: str
    words: str
    source: str
    locator: str
    source_status: str
    how_known: str

    def holds(self, declared: Floats) -> NDArray[np.bool_]:
        """(n,) which declared values fall into the class."""
        above = declared >= self.class_low if self.class_low_included else declared > self.class_low
        below = declared <= self.class_high if self.class_high_included else declared < self.class_high
        return above & below

    @property
    def share_only(self) -> bool:
        """Whether the row is a share of any declared value, and so holds in any unit."""
        bounded = self.class_low > 0 or np.isfinite(self.class_high)
        return not bounded and not np.isfinite(self.below_absolute) and not np.isfinite(self.above_absolute)

    def room(self, declared: Floats) -> tuple[Floats, Floats]:
        """(n,) room below and above, inf where there is no limit on that side."""
        below = _size(declared, self.below_absolute, self.below_percent)
        return below, _size(declared, self.above_absolute, self.above_percent)


def _size(declared: Floats, absolute: float, percent: float) -> Floats:
    if np.isfinite(absolute):
        return np.full_like(declared, absolute)
    return declared * percent / 100 if np.isfinite(percent) else np.full_like(declared, np.inf)


@cache
def _sets() -> dict[str, dict[str, tuple[ToleranceRow, ...]]]:
    found: dict[str, dict[str, tuple[ToleranceRow, ...]]] = {}
    numbers = ("below_absolute", "below_percent", "above_absolute", "above_percent")
    with (FOLDER / "label_tolerances.csv").open(encoding="utf-8", newline="") as handle:
        for row in csv.DictReader(handle):
            texts: dict[str, Any] = {k: v for k, v in row.items() if k not in numbers and not k.startswith("class_")}
            sizes: dict[str, Any] = {name: float(row[name] or np.nan) for name in numbers}
            made = ToleranceRow(
                class_low=float(row["class_low"] or 0),
                class_low_included=row["class_low_included"] == "yes",
                class_high=float(row["class_high"] or np.inf),
                class_high_included=row["class_high_included"] == "yes",
                **sizes,
                **texts,
            )
            of_set = found.setdefault(made.rule_set, {})
            of_set[made.quantity] = (*of_set.get(made.quantity, ()), made)
    return found


def tolerance_sets() -> tuple[str, ...]:
    """The sets there are."""
    return tuple(_sets())


def tolerance_rows(rule_set: str, quantity: str) -> tuple[ToleranceRow, ...]:
    """The rows of a set for a quantity ("energy", crude_fat, ...), empty where there is none. Raises WrongUse."""
    if not rule_set:
        return ()
    if rule_set not in _sets():
        raise WrongUse(f"There is no set of tolerances '{rule_set}'.", f"One of: {', '.join(_sets())}.")
    return _sets()[rule_set].get(quantity, ())


def label_tolerance(
    rule_set: str, quantity: str, declared: ArrayLike, rounding_set: str = "", unit: str = ""
) -> tuple[Floats, Floats]:
    """(n,) lower and upper limit around declared values, -inf or inf where the rule sets none on that side.

    declared : (n,) per 100 g or 100 ml, in `unit`, by default the rows' own (g; mg for cholesterol and sodium; kcal or kJ).
    rounding_set : for rules that widen the declared value to its rounding interval and round the limits. NaN where no
    class holds the value, where the rule is no limit of this quantity, or where a row is written for another unit (one
    that is a share of the declared value holds in any). Raises WrongUse for an unknown set.
    """
    x = tidy(np.atleast_1d(np.asarray(declared, dtype=np.float64)))
    lower, upper = np.full(x.shape, np.nan), np.full(x.shape, np.nan)
    for row in tolerance_rows(rule_set, quantity):
        if row.kind != "limits":
            continue
        if unit not in ("", row.unit) and not row.share_only:
            continue
        here, (below, above) = row.holds(x), row.room(x)
        if row.applied == "widened" and rounding.rules(rounding_set, quantity):
            low, high = rounding.meaning(rounding_set, quantity, x, one_more_decimal=True)
            low, high = np.where(np.isnan(low), x, low), np.where(np.isnan(high), x, high)
            bottom = _rounded_limit(rounding_set, quantity, np.maximum(low - below, 0.0))
            top = _rounded_limit(rounding_set, quantity, high + above)
        else:
            bottom, top = tidy(x - below), tidy(x + above)
        lower, upper = np.where(here, bottom, lower), np.where(here, top, upper)
    return lower, upper


def _rounded_limit(rounding_set: str, quantity: str, limit: Floats) -> Floats:
    """A limit rounded as the label is; a limit at or below what may be printed as zero is zero."""
    return rounding.rounded(rounding_set, quantity, limit).value


@dataclass(frozen=True)
class EnergyRule:
    """What holds for the declared energy of a law.

    kind : "limits", "propagated", "feed" or "none". contains_uncertainty : "yes", "no", "unknown". source_status : ""
    where no source was found at all.
    """

    kind: str
    words: str
    tested: str = ""
    contains_uncertainty: str = "unknown"
    source: str = ""
    locator: str = ""
    source_status: str = ""


def energy_rule(system: System, law: LabelLaw, tolerance_set: str | None = None) -> EnergyRule:
    """The rule for the declared energy of a law. tolerance_set : another set the user chose instead."""
    if tolerance_set is None and system.tolerance is not None:
        t = system.tolerance
        return EnergyRule("feed", f"the law's tolerance, {t.words}", "the feed as checked", "unknown", system.citation,
                          t.locator, t.source_status)  # fmt: skip
    name = law.tolerance_set if tolerance_set is None else tolerance_set
    if tolerance_set is None and law.feed:
        row = next(r for r in laws() if r["law"] == law.feed and r["constituent"] == "energy_value")
        return EnergyRule("feed", "feed law as a fallback: 5 % below and 10 % above the declared value, only where no official "
                          "method sets a tolerance", "the feed as checked", "yes", row["source"], row["locator"],
                          weakest([row["source_status"], law.tolerance_status or row["source_status"]]))  # fmt: skip
    rows = tolerance_rows(name, "energy")
    if not rows:
        return EnergyRule("none", "no tolerance was found for this law")
    statuses = [r.source_status for r in rows]
    if law.tolerance_status and tolerance_set is None:
        statuses.append(law.tolerance_status)
    return EnergyRule(rows[0].kind, "; ".join(r.words for r in rows), rows[0].tested, rows[0].contains_uncertainty,
                      rows[0].source, rows[0].locator, weakest(statuses))  # fmt: skip


def feed_limits(system: System, law: LabelLaw, declared: Floats) -> tuple[Floats, Floats]:
    """(n,) limits of a declared energy of feed: the law's own tolerance, else its feed law. kJ per 100 g."""
    if system.tolerance is not None and system.tolerance.absolute is not None:
        room = system.tolerance.absolute * KJ_PER_MJ
        return tidy(declared - room), tidy(declared + room)
    lower, upper = feed_tolerance(law.feed, "energy_value", np.maximum(declared, 0.0) / KJ_PER_MJ)
    return tidy(lower * KJ_PER_MJ), tidy(upper * KJ_PER_MJ)
