"""May a declared energy stand? What a law computes and how it is rounded, what may differ, and how sure we are.

Everything is per the amount the label speaks of (100 g, 100 ml or a serving), in kJ and kcal as two sums of the law. The
limits lie around the *declared* figure; what is held against them is the law's energy from the analysis.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from energy import rounding
from energy.catalogue.records import SOURCE_STATUS, System
from energy.conformity import (
    DECISION_RULES,
    NO_RULE,
    NOT_JUDGED,
    OUTCOMES,
    OUTSIDE,
    decide,
    lot_uncertainty,
    probability_within,
)
from energy.label_energy import (
    LabelEnergy,
    LabelGrams,
    coefficients,
    energy_of,
    label_energy,
    label_grams,
    spread,
    unit_of,
)
from energy.label_law import Claim, LabelLaw, bomb_words, claims, label_law
from energy.label_tolerance import EnergyRule, energy_rule, feed_limits, label_tolerance
from energy.problems import WrongUse
from energy.rounding import Floats
from energy.samples import Samples

UNITS = ("kJ", "kcal")
PER_WORDS = {"100g": "100 g", "100ml": "100 ml", "serving": "serving"}
#: what is said where a guard band is put on top of limits that hold measurement uncertainty already
TWICE = ("the law's tolerance contains measurement uncertainty already: a guard band on top counts it twice and rejects "
         "lawful labels")  # fmt: skip


@dataclass(frozen=True)
class Lot:
    """What must be known before anything is said of a lot: relative standard deviations of sampling and from unit to unit.

    units : how many units the composite holds.
    """

    sampling: float
    production: float
    units: int = 1


@dataclass
class Declared:
    """n samples under one law, per `per`. Energies in kJ and kcal; NaN where a figure cannot be had.

    amount : (n,) the amount of the label in 100 g. computed, u : unit -> (n,) from the unrounded analysis. from_label : unit
    -> (n,) from the grams as printed. spread_low, spread_high : unit -> (n,) what other foods with the same printed grams can
    have. printed : unit -> (n,) the computed energy as the law rounds it, NaN where no rule was found. declared : unit -> (n,).
    judged : unit the verdict is about. lower, upper : (n,) limits in it. probability : (n,). outcome : (n,) index into OUTCOMES.
    widest : (n,) room if every nutrient used up its tolerance at once, NaN where the limit is not propagated. flips : (n,)
    the outcome changes if energy is computed from printed grams. claim_flips : claim -> (n,) rounding changes whether it is met.
    """

    law: System
    rules: LabelLaw
    energy: LabelEnergy
    rule: EnergyRule
    decision: str
    per: str
    amount: Floats
    label: LabelGrams
    speaks_of: str
    computed: dict[str, Floats] = field(default_factory=dict)
    u: dict[str, Floats] = field(default_factory=dict)
    from_label: dict[str, Floats] = field(default_factory=dict)
    spread_low: dict[str, Floats] = field(default_factory=dict)
    spread_high: dict[str, Floats] = field(default_factory=dict)
    rounded: dict[str, rounding.Rounded] = field(default_factory=dict)
    printed: dict[str, Floats] = field(default_factory=dict)
    declared: dict[str, Floats] = field(default_factory=dict)
    coefficient: dict[str, dict[str, Floats]] = field(default_factory=dict)
    judged: np.ndarray = field(default_factory=lambda: np.empty(0, dtype=object))
    lower: Floats = field(default_factory=lambda: np.empty(0))
    upper: Floats = field(default_factory=lambda: np.empty(0))
    probability: Floats = field(default_factory=lambda: np.empty(0))
    outcome: np.ndarray = field(default_factory=lambda: np.empty(0, dtype=np.int8))
    widest: Floats = field(default_factory=lambda: np.empty(0))
    flips: np.ndarray = field(default_factory=lambda: np.empty(0, dtype=bool))
    #: (n,) declared in both units, and the one that is not judged lies outside its own limits
    other_outside: np.ndarray = field(default_factory=lambda: np.empty(0, dtype=bool))
    claim_flips: dict[Claim, np.ndarray] = field(default_factory=dict)
    warnings: list[str] = field(default_factory=list)
    twin: System | None = None

    @property
    def bomb(self) -> str:
        """Whether a bomb figure may stand on this law's label, in words."""
        return bomb_words(self.law)

    @property
    def decision_words(self) -> str:
        """The decision rule as printed beside a verdict."""
        return DECISION_RULES[self.decision]

    def rounding_rule(self, unit: str, i: int) -> rounding.Rule | None:
        """The rule that rounds one figure; None where none was found."""
        found = self.rounded.get(unit)
        return None if found is None or found.row[i] < 0 else found.rules[int(found.row[i])]

    def text(self, unit: str, i: int) -> str:
        """The figure as the law prints it; with '(no rule)' where none was found."""
        if self.computed[unit][i] < 0:
            return "below zero: mend the composition"
        rule = self.rounding_rule(unit, i)
        if rule is not None and rule.kind == "step" and not rule.printed and rule.step >= 1:
            return f"{self.rounded[unit].value[i]:.0f}"
        return rounding.text_of(self.rules.rounding_set, f"energy_{unit}", float(self.computed[unit][i]))

    def sum_words(self, unit: str, i: int) -> str:
        """The sum that leads to a figure: factor times grams, per the label's amount."""
        if unit not in self.coefficient:
            first = unit_of(self.law)
            if not self.law.components:
                return f"the law's formula: {self.computed[first][i] / (100 if first == 'kJ' else 1):.5g} {'MJ/kg' if first == 'kJ' else first}"
            return f"{self.computed[first][i]:.6g} {first} by the law's own conversion"
        lines = []
        for component in (self.law if unit_of(self.law) == unit else self._twin()).components:
            grams = self.energy.grams[component.quantity][i] * self.amount[i]
            grams -= sum(self.energy.grams[q][i] * self.amount[i] for q in component.subtract)
            if np.isfinite(grams) and abs(grams) > 1e-12:
                factor = component.factor if component.factor is not None else self._factor(unit, component.quantity, i)
                lines.append(f"{factor:g} x {grams:.4g}")
        return f"{' + '.join(lines) or '0'} = {self.computed[unit][i]:.6g} {unit}"

    def _factor(self, unit: str, quantity: str, i: int) -> float:
        k = self.coefficient[unit][quantity]
        return float(k[i] if len(k) > 1 else k[0])

    def _twin(self) -> System:
        return self.twin if self.twin is not None else self.law


def declare(
    samples: Samples,
    law: System,
    catalogue: Mapping[str, System],
    *,
    per: str = "100g",
    serving: float | None = None,
    decision: str = "simple",
    coverage: float = 1.96,
    lot: Lot | None = None,
    tolerance_set: str | None = None,
) -> Declared:
    """Judge the declared energies of a batch under one law.

    per : "100g", "100ml" (needs density) or "serving" with `serving` in g. decision : a key of DECISION_RULES, chosen before
    the result. coverage : of the guard band. lot : speaks of the lot's average instead of the sample tested. tolerance_set :
    another set than the law's own. Raises WrongUse.
    """
    if decision not in DECISION_RULES:
        raise WrongUse(f"There is no decision rule '{decision}'.", f"One of: {', '.join(DECISION_RULES)}.")
    amount = _amount(samples, per, serving)
    rules, n = label_law(law.id), len(samples)
    found = label_energy(samples, law, catalogue)
    grams = {q: g * amount for q, g in found.grams.items()}
    d = Declared(law, rules, found, energy_rule(law, rules, tolerance_set), decision, per, amount,
                 label_grams(grams, rules.rounding_set), "the average of the lot" if lot else "the sample tested")  # fmt: skip
    d.twin = catalogue[law.twin_id] if law.twin_id else None
    of = {unit_of(s): coefficients(samples, s) for s in (law, d.twin) if s is not None and s.components}
    for unit, total in found.sums.items():
        d.computed[unit], d.u[unit] = total.value * amount, total.u * amount
        k = of.get(unit)
        if k is not None:
            d.coefficient[unit] = k
            d.from_label[unit] = np.broadcast_to(energy_of(d.label.printed, k), (n,)).copy()
            low, high = spread(d.label, k)
            d.spread_low[unit], d.spread_high[unit] = np.broadcast_to(low, (n,)), np.broadcast_to(high, (n,))
        d.printed[unit] = np.full(n, np.nan)
        if rounding.rules(rules.rounding_set, f"energy_{unit}"):
            shown = np.where(d.computed[unit] < 0, np.nan, d.computed[unit])
            d.rounded[unit] = rounding.rounded(rules.rounding_set, f"energy_{unit}", shown)
            d.printed[unit] = d.rounded[unit].value
    _convert_rest(d)
    stated: Mapping[str, Floats] = samples.memo.get("declared", {})
    for unit in UNITS:
        d.declared[unit] = stated[unit] * amount if unit in stated else np.full(n, np.nan)
    _judge(d, coverage, lot, tolerance_set)
    _claims(d)
    if decision != "simple" and d.rule.contains_uncertainty == "yes":
        d.warnings.append(TWICE)
    if rules.per == "serving" and per != "serving":
        d.warnings.append("this law states energy per serving: without a serving size its rounding is applied to 100 g")
    return d


def _amount(samples: Samples, per: str, serving: float | None) -> Floats:
    """(n,) the amount of the label in units of 100 g."""
    n = len(samples)
    if per not in PER_WORDS:
        raise WrongUse(f"A label per '{per}' is not known.", f"One of: {', '.join(PER_WORDS)}.")
    if per == "serving":
        if serving is None or not serving > 0:
            raise WrongUse("The size of a serving is not given.", "Give it in g.")
        return np.full(n, serving / 100.0)
    if per == "100ml":
        density = samples.columns.get("density")
        if density is None:
            raise WrongUse("Energy per 100 ml needs a density.", "Add density [g/ml].")
        return np.asarray(density, dtype=float)
    return np.ones(n)


def _convert_rest(d: Declared) -> None:
    """The unit a law converts to: grams as printed by the same conversion as the sum."""
    for unit in d.computed:
        if unit not in d.from_label and d.from_label:
            first = next(iter(d.from_label))
            kilocalorie = float(d.law.twin.removeprefix("conversion_"))
            k = 1 / kilocalorie if first == "kJ" else kilocalorie
            d.from_label[unit] = d.from_label[first] * k
            d.spread_low[unit], d.spread_high[unit] = d.spread_low[first] * k, d.spread_high[first] * k


def _judge(d: Declared, coverage: float, lot: Lot | None, tolerance_set: str | None) -> None:
    n = len(d.amount)
    first = d.energy.leading
    other = "kcal" if first == "kJ" else "kJ"
    takes = np.isfinite(d.declared[first]) | ~np.isfinite(d.declared[other])
    d.judged = np.where(takes, first, other).astype(object)
    d.lower, d.upper, d.widest = (np.full(n, np.nan) for _ in range(3))
    d.probability, d.outcome = np.full(n, np.nan), np.full(n, NOT_JUDGED, dtype=np.int8)
    d.flips = np.zeros(n, dtype=bool)
    for unit in (first, other):
        here = (d.judged == unit) & np.isfinite(d.declared[unit])
        if not here.any() or unit not in d.computed:
            continue
        lower, upper, widest = _limits(d, unit, tolerance_set)
        value, u = d.computed[unit], d.u[unit]
        if lot is not None:
            u = lot_uncertainty(u, np.abs(value) * lot.sampling, np.abs(value) * lot.production, lot.units)
        chance = probability_within(value, u, lower, upper, d.energy.freedom)
        outcome = decide(d.decision, value, coverage * u, lower, upper)
        if unit in d.from_label:
            again = decide(d.decision, d.from_label[unit], coverage * u, lower, upper)
            d.flips |= here & (again != outcome) & (again != NOT_JUDGED)
        if d.rule.kind == "none":
            outcome = np.full(n, NO_RULE, dtype=np.int8)
            chance = np.full(n, np.nan)
        for target, values in ((d.lower, lower), (d.upper, upper), (d.widest, widest), (d.probability, chance)):
            target[here] = np.broadcast_to(values, (n,))[here]
        d.outcome[here] = np.where(np.isnan(value) & (d.rule.kind != "none"), NOT_JUDGED, outcome)[here]
    both = np.isfinite(d.declared[first]) & np.isfinite(d.declared[other])
    d.other_outside = np.zeros(n, dtype=bool)
    if both.any() and other in d.computed and d.rule.kind != "none":
        lower, upper, _ = _limits(d, other, tolerance_set)
        d.other_outside = both & (decide("simple", d.computed[other], np.zeros(n), lower, upper) == OUTSIDE)


def _limits(d: Declared, unit: str, tolerance_set: str | None) -> tuple[Floats, Floats, Floats]:
    declared, n = d.declared[unit], len(d.amount)
    nothing = np.full(n, np.nan)
    if d.rule.kind == "limits":
        # limits are written per 100 g or per 100 ml
        scale = np.ones(n) if d.per == "100ml" else d.amount
        name = d.rules.tolerance_set if tolerance_set is None else tolerance_set
        lower, upper = label_tolerance(name, "energy", declared / scale, d.rules.rounding_set, unit)
        return lower * scale, upper * scale, nothing
    if d.rule.kind == "feed":
        size = 1.0 if unit == "kJ" else 4.184
        lower, upper = feed_limits(d.law, d.rules, declared / d.amount * size)
        return lower * d.amount / size, upper * d.amount / size, nothing
    if d.rule.kind == "propagated" and unit in d.coefficient:
        below, above, widest = _propagated(d, unit, d.rules.tolerance_set if tolerance_set is None else tolerance_set)
        return declared - below, declared + above, widest
    return nothing, nothing, nothing


def _propagated(d: Declared, unit: str, tolerance_set: str) -> tuple[Floats, Floats, Floats]:
    """(n,) room below and above: the nutrients' tolerances times their factors, in quadrature as independent; and their sum."""
    n = len(d.amount)
    scale = np.ones(n) if d.per == "100ml" else d.amount
    below, above, widest = np.zeros(n), np.zeros(n), np.zeros(n)
    for quantity, k in d.coefficient[unit].items():
        printed = np.broadcast_to(d.label.printed[quantity], (n,)) / scale
        # an absent nutrient has no tolerance to use up
        if not np.any(np.nan_to_num(printed) > 0):
            continue
        lower, upper = label_tolerance(tolerance_set, quantity, printed, d.rules.rounding_set)
        down = np.where(np.isfinite(lower), printed - lower, 0.0) * np.abs(k) * scale
        up = np.where(np.isfinite(upper), upper - printed, 0.0) * np.abs(k) * scale
        present = np.nan_to_num(printed) > 0
        below, above = below + np.where(present, down, 0.0) ** 2, above + np.where(present, up, 0.0) ** 2
        widest = widest + np.where(present, np.maximum(up, down), 0.0)
    missing = np.isnan(d.computed[unit])
    return (np.where(missing, np.nan, np.sqrt(below)), np.where(missing, np.nan, np.sqrt(above)),
            np.where(missing, np.nan, widest))  # fmt: skip


def _claims(d: Declared) -> None:
    for claim in claims(d.rules.claim_set, d.per):
        if claim.unit not in d.computed:
            continue
        exact, printed = d.computed[claim.unit], d.printed[claim.unit]
        with np.errstate(invalid="ignore"):
            met = exact < claim.at_most if claim.strictly else exact <= claim.at_most
            met_printed = printed < claim.at_most if claim.strictly else printed <= claim.at_most
        d.claim_flips[claim] = (met != met_printed) & np.isfinite(exact) & np.isfinite(printed)


def outcome_words(d: Declared) -> np.ndarray:
    """(n,) within, outside, inconclusive, no_rule or '' where nothing is declared or computed."""
    return np.array(OUTCOMES, dtype=object)[d.outcome]


def rule_words(d: Declared) -> str:
    """What the limit is, and how a propagated one arises."""
    if d.rule.kind != "propagated":
        return d.rule.words
    return (f"{d.rule.words}: each nutrient's tolerance times its factor, added in quadrature as independent; around the grams "
            "that the label would print")  # fmt: skip


def proposals(d: Declared) -> list[str]:
    """(n,) the figures to print in both units, each with the sum that leads to it; '' where nothing can be computed."""
    found = []
    for i in range(len(d.amount)):
        told = [f"{d.text(unit, i)} {unit} ({d.sum_words(unit, i)})" for unit in UNITS
                if unit in d.computed and np.isfinite(d.computed[unit][i])]  # fmt: skip
        found.append("; ".join(told))
    return found


def warnings_of(d: Declared) -> list[str]:
    """(n,) what must be known beside a verdict; '' where nothing."""
    found = []
    for i in range(len(d.amount)):
        told = list(d.warnings) if np.isfinite(d.computed[d.energy.leading][i]) else []
        if d.flips[i]:
            told.append("computed from the grams as printed the verdict would be another: rounding decides it")
        if d.other_outside[i]:
            first, other = str(d.judged[i]), "kcal" if d.judged[i] == "kJ" else "kJ"
            told.append(f"the verdict is about the {first} declared; the {d.declared[other][i]:.6g} {other} beside it lie outside "
                        f"the limits of {other}")  # fmt: skip
        for claim, flips in d.claim_flips.items():
            if flips[i]:
                told.append(f"rounding decides whether the claim '{claim.claim}' ({claim.at_most:g} {claim.unit}, {claim.source}, "
                            f"{claim.locator}; {SOURCE_STATUS[claim.source_status]}) is met")  # fmt: skip
        found.append("; ".join(told))
    return found
