"""How a label is rounded: the rules of laws and guidances, row by row of `catalogue/label_rounding.csv`.

Rounding is decimal, not binary: a value is first read as a decimal number of twelve significant digits (far more than
any measurement has, and free of the binary dust that unit conversions and sums leave behind), and is then rounded with
whole numbers only, so that 0.5, 2.5, 47.5, 50 and 55 fall where the rule puts them. All of it runs on arrays.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from energy.catalogue.tables import FOLDER
from energy.problems import WrongUse

Floats = NDArray[np.float64]

#: significant digits a value is read with, and the most decimals it can then have in 64-bit whole numbers
DIGITS = 12
MOST_DECIMALS = 17
#: powers of ten, exact in both kinds of number; looking one up is several times as fast as raising ten
TENS = np.array([10**k for k in range(19)], dtype=np.int64)
FLOAT_TENS = TENS.astype(np.float64)


@dataclass(frozen=True)
class Rule:
    """One row of a rule set: how values of one class are printed.

    unit : of class bounds and step ("" where the rule holds in any). kind : "step" (nearest multiple of `step`), "zero"
    (printed as 0, or as `printed` says), "significant" (`step` significant digits). condition : "" always, "may" where
    the rule permits it, "claim" where only a food that meets the matching 'free of' claim may. per : what the law
    states its figures for. tie : where a value midway goes. source_status : of the rule; tie_status : of the tie.
    """

    rule_set: str
    quantity: str
    unit: str
    class_low: float
    class_low_included: bool
    class_high: float
    class_high_included: bool
    kind: str
    step: float
    printed: str
    condition: str
    per: str
    tie: str
    tie_status: str
    words: str
    source: str
    locator: str
    source_status: str
    how_known: str

    def holds(self, values: Floats) -> NDArray[np.bool_]:
        """(n,) which values fall into the class. Bounds and values are decimals read alike, so equality is exact."""
        above = values >= self.class_low if self.class_low_included else values > self.class_low
        below = values <= self.class_high if self.class_high_included else values < self.class_high
        return above & below


def _number(text: str, empty: float) -> float:
    return float(text) if text else empty


@cache
def _sets() -> dict[str, dict[str, tuple[Rule, ...]]]:
    found: dict[str, dict[str, tuple[Rule, ...]]] = {}
    with (FOLDER / "label_rounding.csv").open(encoding="utf-8", newline="") as handle:
        for row in csv.DictReader(handle):
            texts = {k: v for k, v in row.items() if not k.startswith("class_") and k != "step"}
            rule = Rule(
                class_low=_number(row["class_low"], 0.0),
                class_low_included=row["class_low_included"] == "yes",
                class_high=_number(row["class_high"], np.inf),
                class_high_included=row["class_high_included"] == "yes",
                step=_number(row["step"], 0.0),
                **texts,
            )
            of_set = found.setdefault(rule.rule_set, {})
            of_set[rule.quantity] = (*of_set.get(rule.quantity, ()), rule)
    return found


def rule_sets() -> dict[str, tuple[str, ...]]:
    """Rule set -> the quantities it has rules for."""
    return {name: tuple(quantities) for name, quantities in _sets().items()}


def rules(rule_set: str, quantity: str) -> tuple[Rule, ...]:
    """The rows for a quantity, in the order they are tried; empty where the set (or "") has no rule for it.

    quantity : a name of the dictionary (crude_fat), "energy_kJ", "energy_kcal", or a label word such as "salt".
    Raises WrongUse for a rule set that is not there.
    """
    if not rule_set:
        return ()
    if rule_set not in _sets():
        raise WrongUse(f"There is no set of rounding rules '{rule_set}'.", f"One of: {', '.join(_sets())}.")
    of_set = _sets()[rule_set]
    return of_set.get(quantity) or of_set.get("any", ())


def decimal_parts(values: Floats) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Mantissa m and decimals k of each value: the value is m / 10**k exactly, with at most twelve digits.

    Values below 1e-6 keep seventeen decimals; NaN and infinite values come as 0.
    """
    known = np.where(np.isfinite(values), values, 0.0)
    size = np.abs(known)
    with np.errstate(divide="ignore"):
        exponent = np.where(size > 0, np.floor(np.log10(size)), 0.0)
    k = np.clip(DIGITS - 1 - exponent, 0, MOST_DECIMALS).astype(np.int64)
    mantissa = np.rint(known * FLOAT_TENS[k])
    return mantissa.astype(np.int64), k


def tidy(values: ArrayLike) -> Floats:
    """Values as the decimals of twelve digits they stand for: 14.499999999999998 is 14.5. Shape kept."""
    x = np.asarray(values, dtype=np.float64)
    mantissa, k = decimal_parts(x)
    # a whole number below 2**53 over a power of ten is the float nearest to that decimal
    return np.where(np.isfinite(x), mantissa / FLOAT_TENS[k], x)


def _whole(step: float) -> tuple[int, int]:
    """A step as a whole number over a power of ten: 0.01 is (1, 2)."""
    text = f"{step:.6f}".rstrip("0")
    decimals = len(text.split(".")[1])
    return round(step * 10**decimals), decimals


def nearest(values: ArrayLike, step: float, tie: str = "half_up") -> Floats:
    """Each value (from 0) at its nearest multiple of `step`. Shape kept, NaN stays NaN.

    tie : where a value midway goes, "half_up" or "half_even" (to the even multiple).
    """
    x = np.asarray(values, dtype=np.float64)
    mantissa, k = decimal_parts(x)
    whole, decimals = _whole(step)
    # mantissa/10**k : whole/10**decimals, as one fraction of whole numbers
    above = mantissa * 10**decimals
    below = whole * TENS[k]
    count = (2 * above + below) // (2 * below)
    if tie == "half_even":
        count -= ((2 * above + below) % (2 * below) == 0) & (count % 2 == 1)
    return np.where(np.isfinite(x), count * whole / 10.0**decimals, np.nan)


def significant(values: ArrayLike, digits: int) -> Floats:
    """Each value with so many significant digits, midway upwards (values from 0). Shape kept."""
    x = np.asarray(values, dtype=np.float64)
    mantissa, k = decimal_parts(x)
    length = np.where(mantissa > 0, np.floor(np.log10(np.maximum(mantissa, 1).astype(float))) + 1, digits)
    drop = np.maximum(length.astype(np.int64) - digits, 0)
    unit = TENS[drop]
    kept = (2 * mantissa + unit) // (2 * unit) * unit
    return np.where(np.isfinite(x), kept / FLOAT_TENS[k], np.nan)


@dataclass(frozen=True)
class Rounded:
    """Values as a label prints them: value (n,), and row (n,) the index of the rule used, -1 where there is none."""

    value: Floats
    row: NDArray[np.int8]
    rules: tuple[Rule, ...]


def rounded(rule_set: str, quantity: str, values: ArrayLike, free_claim: bool = False) -> Rounded:
    """Round as a rule set says. values : (n,) in the unit of the rules. free_claim : the food meets the 'free of' claim.

    value is NaN (and row -1) where there is no rule, or no value. Raises WrongUse for an unknown set, and for a
    negative value, which no label prints.
    """
    found = rules(rule_set, quantity)
    x = tidy(np.atleast_1d(np.asarray(values, dtype=np.float64)))
    if np.any(x < 0):
        raise WrongUse(f"A label prints no negative figure: {np.nanmin(x):g}.", "Mend the composition.")
    value, row = np.full(x.shape, np.nan), np.full(x.shape, -1, dtype=np.int8)
    for i, rule in enumerate(found):
        if rule.condition == "claim" and not free_claim:
            continue
        here = (row < 0) & rule.holds(x)
        if not here.any():
            continue
        row[here] = i
        if rule.kind == "zero":
            value[here] = 0.0
        elif rule.kind == "significant":
            value[here] = significant(x[here], int(rule.step))
        else:
            value[here] = nearest(x[here], rule.step, rule.tie)
    return Rounded(value, row, found)


def text_of(rule_set: str, quantity: str, value: float, free_claim: bool = False) -> str:
    """A value as it is printed, by its rule; unrounded to four digits, with '(no rule)', where there is none."""
    if not np.isfinite(value):
        return ""
    found = rounded(rule_set, quantity, value, free_claim)
    row = int(found.row[0])
    if row < 0:
        return f"{float(tidy(value)):.4g} (no rule)"
    rule = found.rules[row]
    if rule.printed:
        return rule.printed
    figure = float(found.value[0])
    if rule.kind == "significant":
        return _plain(figure)
    # 9.96 g rounds to 10: it is printed as the class of 10 prints
    own = rounded(rule_set, quantity, figure, free_claim)
    step = own.rules[int(own.row[0])].step if own.row[0] >= 0 else rule.step
    return f"{figure:.{_whole(step or 1.0)[1]}f}"


def _plain(figure: float) -> str:
    return f"{figure:.0f}" if figure == round(figure) else f"{figure:.10g}"


def printable(rule_set: str, quantity: str, figures: ArrayLike, free_claim: bool = False) -> NDArray[np.bool_]:
    """(n,) whether the rules can print a figure at all; True where there is no rule, or no figure."""
    x = tidy(np.atleast_1d(np.asarray(figures, dtype=np.float64)))
    if not rules(rule_set, quantity):
        return np.ones(x.shape, dtype=bool)
    low, _ = meaning(rule_set, quantity, x, free_claim)
    return np.isnan(x) | np.isfinite(low)


def meaning(
    rule_set: str, quantity: str, printed: ArrayLike, free_claim: bool = False, one_more_decimal: bool = False
) -> tuple[Floats, Floats]:
    """What a printed figure can mean: (n,) lowest value that rounds to it, and the value from which it no longer does.

    one_more_decimal : the upper end as practice writes it, the last value with one decimal more than the step (6.4 g is
    6.35 to 6.44). NaN where the rules cannot print the figure; without a rule the figure means itself.
    """
    x = tidy(np.atleast_1d(np.asarray(printed, dtype=np.float64)))
    found = rules(rule_set, quantity)
    if not found:
        return x.copy(), x.copy()
    low, high = np.full(x.shape, np.inf), np.full(x.shape, -np.inf)
    for rule in found:
        if rule.condition == "claim" and not free_claim:
            continue
        below, above, last = _cell(rule, x)
        below = np.maximum(below, rule.class_low)
        cut = above > rule.class_high
        above = np.minimum(above, rule.class_high)
        ends = np.where(cut, above, last if one_more_decimal else above)
        # a value that rounds up to the class's open edge belongs to it from below
        there = (below < above) | ((below == above) & rule.holds(below) & (rule.kind != "zero"))
        if rule.kind == "zero":
            there = x == 0
        low = np.where(there, np.minimum(low, below), low)
        high = np.where(there, np.maximum(high, ends), high)
    nothing = np.isinf(low)
    return np.where(nothing, np.nan, tidy(low)), np.where(nothing, np.nan, tidy(high))


def _cell(rule: Rule, x: Floats) -> tuple[Floats, Floats, Floats]:
    """(n,) from, up to and the last value with one decimal more of what a rule prints as x; empty where it cannot."""
    if rule.kind == "zero":
        return np.full(x.shape, rule.class_low), np.full(x.shape, rule.class_high), np.full(x.shape, rule.class_high)
    if rule.kind == "significant":
        with np.errstate(divide="ignore"):
            exponent = np.where(x > 0, np.floor(np.log10(np.where(x > 0, x, 1.0))), 0.0)
        step = 10.0 ** (exponent - rule.step + 1)
        fits = significant(x, int(rule.step)) == x
        # below a power of ten the next figure down is ten times as near
        power = tidy(x / 10.0**exponent) == 1.0
        below, above, last = x - np.where(power, step / 20, step / 2), x + step / 2, x + step / 2 - step / 10
        above, last = np.where(x > 0, above, 0.0), np.where(x > 0, last, 0.0)  # what is not zero has a first digit
        below = np.where(x > 0, below, 0.0)
    else:
        step = np.full(x.shape, rule.step)
        fits = nearest(x, rule.step, rule.tie) == x
        below, above, last = x - step / 2, x + step / 2, x + step / 2 - step / 10
    empty = np.full(x.shape, np.inf)
    below, above = np.where(fits, tidy(below), empty), np.where(fits, tidy(above), -empty)
    return below, above, np.where(fits, tidy(last), -empty)
