"""Why a difference: its parts by component, and handling errors as hypotheses that are tried on the figures.

A part is a function of component amounts that doubles when all amounts double, so that amount times slope, summed
over the components, is the part itself (Euler's theorem on homogeneous functions).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np

from energy import algebra
from energy.algebra import Node
from energy.catalogue.derived import derived_rules
from energy.catalogue.reader import systems
from energy.catalogue.records import System
from energy.evaluate import Pair
from energy.quantities import dictionary
from energy.resolve import ASSUMED_NITROGEN_FACTOR, Resolver, Signature, signatures
from energy.samples import Samples

JOULE_PER_CALORIE = 4.184

#: components a part is told in, and what people call them
COMPONENTS = {
    "nitrogen": "protein",
    "crude_fat": "fat",
    "rest": "digestible carbohydrate",
    "sugars": "sugars",
    "starch": "starch",
    "total_dietary_fibre": "dietary fibre",
    "crude_fibre": "crude fibre",
    "polyols": "polyols",
    "organic_acids": "organic acids",
    "alcohol": "alcohol",
}


class ComponentResolver(Resolver):
    """A resolver whose quantities are sums of components instead of measured columns, for one row."""

    own_factor: float = 6.25
    fibre: str = "total_dietary_fibre"  # the fibre that is a component of its own; the other kind stays as measured

    def quantity(self, name: str, nitrogen_factor: float | str = "own", filled: bool = False) -> Node | None:
        """Quantities in components; what has no component keeps its measured value (a frozen number)."""
        named = {"own": self.own_factor, "feed": ASSUMED_NITROGEN_FACTOR}
        factor = named[nitrogen_factor] if isinstance(nitrogen_factor, str) else float(nitrogen_factor)
        if name == "crude_protein":
            return algebra.scale(factor, "nitrogen")
        if name in ("nitrogen", "crude_fat", "alcohol", self.fibre, "polyols", "organic_acids"):
            return name
        # carbohydrate by difference shrinks by what a larger nitrogen factor makes of the same nitrogen
        shift = algebra.scale(self.own_factor - factor, "nitrogen") if self._by_difference(name) else 0.0
        rest: Node = algebra.add("rest", "sugars", "starch", shift)
        if name in ("carbohydrate_all", "carbohydrate_by_difference", "carbohydrate_total"):
            return algebra.add(rest, self.fibre, "polyols", "organic_acids")
        if name == "nitrogen_free_extract" and self.fibre == "crude_fibre":
            return algebra.add(rest, "polyols", "organic_acids")
        if name == "available_carbohydrate":
            return algebra.add(rest, "polyols")
        if name in ("sugars", "starch"):
            return name
        return super().quantity(name, nitrogen_factor, filled)

    def _by_difference(self, name: str) -> bool:
        choice = self.choices.get(name, 0)
        return choice > 0 and "solids" in derived_rules()[name][choice - 1].formula.symbols


#: quantities that are sums of components
TOLD_BY_COMPONENTS = (
    "crude_protein", "nitrogen", "carbohydrate_all", "carbohydrate_by_difference", "carbohydrate_total",
    "available_carbohydrate", "nitrogen_free_extract",
)  # fmt: skip


class FeedComponentResolver(ComponentResolver):
    """The components of a feed: protein, fat, crude fibre, nitrogen-free extract, ash; dry matter is their sum.

    So a constant per kg of dry matter is shared out among what the dry matter is made of, and a fibre content in per
    cent of dry matter stays the same when all amounts double. What else a formula asks for (NDF, ADF) has its own line.
    """

    fibre = "crude_fibre"

    def quantity(self, name: str, nitrogen_factor: float | str = "own", filled: bool = False) -> Node | None:
        """Quantities in components; columns of mass per mass keep their own name, on the working basis."""
        if name == "dry_matter":
            carbohydrate = super().quantity("carbohydrate_all")
            return algebra.add(algebra.scale(ASSUMED_NITROGEN_FACTOR, "nitrogen"), "crude_fat", carbohydrate, "ash")
        known = super().quantity(name, nitrogen_factor, filled)
        # a plain column, on whatever basis it was stated, stands for its own amount on the working basis
        plain = name in self.columns and is_amount(name) and self.choices.get(name, 0) == 0
        return name if plain and name not in TOLD_BY_COMPONENTS else known


def is_amount(quantity: str) -> bool:
    """True for mass per mass of material, which doubles when all amounts double."""
    return dictionary()[quantity].dimension == "mass_fraction"


def parts_by_component(
    samples: Samples, row: int, pair: Pair, systems: Mapping[str, System], values: Mapping[str, float]
) -> list[dict[str, Any]]:
    """Lines of the heats and the convention part of one sample; each part's contributions add up to the part.

    values : component -> amount in kg/kg on the working basis (see `component_amounts`). A line: part, component,
    amount, bomb, composition, contribution (MJ/kg).
    """
    feed = systems[pair.heats].nitrogen_factor == "feed"
    kind = FeedComponentResolver if feed else ComponentResolver
    resolver = kind(_signature_of(samples, row), frozenset(samples.columns))
    resolver.own_factor = values["own_factor"]
    bomb, composition, heats = systems[pair.bomb], systems[pair.composition], systems[pair.heats]
    best = resolver.system(heats)
    at_heats = resolver.system(bomb, gross_energy=best)
    at_own = resolver.system(bomb, gross_energy="heats") if bomb.heats is not None else at_heats
    other = resolver.system(composition)
    if at_heats is None or at_own is None or other is None:
        return []
    point = dict(values)
    codes = samples.memo["group_codes"]
    for name, parameter in resolver.parameters.items():
        point[name] = float(parameter.values[codes[row]])
    for name, column in samples.columns.items():  # what is no component keeps its measured value
        for column_name in (name, name + "?"):
            point.setdefault(column_name, 0.0 if np.isnan(column[row]) else float(column[row]))
    lines = []
    parts = [("heats", at_heats, at_own)] if bomb.heats is not None else []
    for part, first, second in (*parts, ("convention", at_own, other)):
        others = {n: dictionary()[n].title for n in sorted(algebra.names(first) | algebra.names(second))
                  if n in samples.columns and n not in COMPONENTS and is_amount(n)}  # fmt: skip
        for component, words in {**COMPONENTS, **others}.items():
            amount = point.get(component, 0.0)
            a = amount * _at(algebra.slope(first, component), point)
            b = amount * _at(algebra.slope(second, component), point)
            if amount != 0.0 and (abs(a) > 1e-12 or abs(b) > 1e-12):
                lines.append(
                    {
                        "part": part,
                        "component": "nitrogen-free extract" if feed and component == "rest" else words,
                        "amount": amount,
                        "bomb": a,
                        "composition": b,
                        "contribution": a - b,
                    }
                )
    return lines


def component_amounts(
    columns: Mapping[str, float], own_factor: float, fibre: str = "total_dietary_fibre"
) -> dict[str, float]:
    """Component amounts of one sample from its quantities on the working basis (kg/kg); absent ones are zero."""

    def get(name: str) -> float:
        value = columns.get(name, np.nan)
        return 0.0 if np.isnan(value) else float(value)

    inside = (fibre, "polyols", "organic_acids", "sugars", "starch")
    amounts = {name: get(name) for name in (*inside, "crude_fat", "alcohol")}
    amounts["nitrogen"] = get("crude_protein") / own_factor
    amounts["rest"] = get("carbohydrate_all") - sum(amounts[name] for name in inside)
    amounts["own_factor"] = own_factor
    return amounts


def _signature_of(samples: Samples, row: int) -> Signature:
    for signature, rows in signatures(samples):
        if rows is None or row in rows:
            return signature
    raise IndexError(row)


def _at(node: Node, point: Mapping[str, float]) -> float:
    """A node's value at a point, by walking the tree: one row only, so no need to compile."""
    if isinstance(node, float):
        return node
    if isinstance(node, str):
        return float(point.get(node, 0.0))
    head = node[0]
    if head == "lin":
        return float(node[1] + sum(k * _at(a, point) for a, k in node[2]))
    if head == "where":
        left, right = _at(node[2], point), _at(node[3], point)
        holds = {"<": left < right, "<=": left <= right, ">": left > right, ">=": left >= right}[node[1]]
        return _at(node[4] if holds else node[5], point)
    args = [_at(child, point) for child in algebra.children(node)]
    if head == "**":
        return float(args[0] ** node[2])
    functions: dict[str, Callable[..., float]] = {
        "*": lambda a, b: a * b, "/": lambda a, b: a / b if b else np.nan, "min": min, "max": max,
        "exp": np.exp, "log": np.log, "sqrt": np.sqrt,
    }  # fmt: skip
    return float(functions[head](*args))


# ---- handling errors as hypotheses ----------------------------------------------------------------------------


@dataclass(frozen=True)
class Facts:
    """What the hypotheses look at: (n,) arrays, energies in MJ/kg, amounts in kg/kg on the working basis."""

    measured: np.ndarray
    computed: np.ndarray
    u: np.ndarray
    limit: np.ndarray
    dry_matter: np.ndarray
    fibre: np.ndarray
    mass_sum: np.ndarray
    available_given: np.ndarray
    ether_extract: np.ndarray
    on_dry_matter: np.ndarray
    may_hold_urea: np.ndarray  # a ruminant's feed whose urea was not determined
    ash_of_dry_matter: np.ndarray


@dataclass(frozen=True)
class Hypothesis:
    """A handling error: the corrected measured and computed GE, where it can apply, and what to say and do.

    prior : how common it is, from 0 to 1 (our own judgement). `words` may hold {amount}.
    """

    id: str
    prior: float
    measured: Callable[[Facts], np.ndarray]
    computed: Callable[[Facts], np.ndarray]
    applies: Callable[[Facts], np.ndarray]
    amount: Callable[[Facts], np.ndarray]
    words: str
    next_measurement: str


def _same_measured(f: Facts) -> np.ndarray:
    return f.measured


def _same_computed(f: Facts) -> np.ndarray:
    return f.computed


def _always(f: Facts) -> np.ndarray:
    return np.ones(len(f.measured), dtype=bool)


@cache
def heat(symbol: str) -> float:
    """A general heat of ge_heats_best in MJ/kg: hp protein, hf fat, hc carbohydrate, hfi fibre."""
    found = systems()["ge_heats_best"].symbols[symbol]
    value = found.constant if found.constant is not None else found.fallback
    if value is None:
        raise KeyError(symbol)
    return value * found.scale


@cache
def feed_heat(symbol: str) -> float:
    """A heat of ge_heats_feed in MJ/kg: hp protein, hn nitrogen-free extract, hur urea."""
    found = systems()["ge_heats_feed"].symbols[symbol]
    if found.constant is None:
        raise KeyError(symbol)
    return found.constant * found.scale


def needed_by_difference(gap: float) -> tuple[float, float, float]:
    """kg/kg of moisture, fat, protein that would each alone make a gap in GE (MJ/kg), carbohydrate by difference."""
    return gap / heat("hc"), gap / (heat("hf") - heat("hc")), gap / (heat("hp") - heat("hc"))


def _missing_fat(f: Facts) -> np.ndarray:
    """kg fat per kg that must sit in carbohydrate by difference instead."""
    return (f.measured - f.computed) / (heat("hf") - heat("hc"))


def _urea(f: Facts) -> np.ndarray:
    """kg urea per kg that must stand in crude protein (N x 6.25) instead: its protein burns, it does not."""
    protein, rest, urea = (feed_heat(x) for x in ("hp", "hn", "hur"))
    return (f.computed - f.measured) / (2.91541 * protein - 1.91541 * rest - urea)


def _powder_moisture(f: Facts) -> np.ndarray:
    return 1 - f.measured / f.computed


# fmt: off
HYPOTHESES = (
    Hypothesis("kcal_as_kJ", 0.9, lambda f: f.measured * JOULE_PER_CALORIE, _same_computed, _always,
               lambda f: f.measured / f.computed,
               "the gross energy looks like kilocalories entered as kilojoules "
               "(measured/computed = {amount:.3f}; 1/4.184 = 0.239)",
               "compare the bomb sheet with the table: which unit was printed?"),
    Hypothesis("kJ_as_kcal", 0.9, lambda f: f.measured / JOULE_PER_CALORIE, _same_computed, _always,
               lambda f: f.measured / f.computed,
               "the gross energy looks like kilojoules entered as kilocalories "
               "(measured/computed = {amount:.3f}; expected 4.184)",
               "compare the bomb sheet with the table: which unit was printed?"),
    Hypothesis("decimal_slip_up", 0.5, lambda f: f.measured / 10, _same_computed, _always,
               lambda f: f.measured / f.computed, "the gross energy is ten times too large (decimal point)",
               "compare the bomb sheet with the table"),
    Hypothesis("decimal_slip_down", 0.5, lambda f: f.measured * 10, _same_computed, _always,
               lambda f: f.measured / f.computed, "the gross energy is ten times too small (decimal point)",
               "compare the bomb sheet with the table"),
    Hypothesis("dry_matter_as_is", 0.8, lambda f: f.measured * f.dry_matter, _same_computed,
               lambda f: ~f.on_dry_matter & (f.dry_matter < 0.97), lambda f: 100 * f.dry_matter,
               "the gross energy fits dry matter, not the material as it is (dry matter {amount:.1f} %)",
               "ask on which basis the bomb value was reported"),
    Hypothesis("as_is_as_dry_matter", 0.6, lambda f: f.measured / f.dry_matter, _same_computed,
               lambda f: f.on_dry_matter & (f.dry_matter < 0.97), lambda f: 100 * f.dry_matter,
               "the gross energy fits the material as it is, not dry matter (dry matter {amount:.1f} %)",
               "ask on which basis the bomb value was reported"),
    Hypothesis("powder_moisture_forgotten", 0.6, _same_computed, _same_computed,
               lambda f: f.on_dry_matter & (_powder_moisture(f) > 0.02) & (_powder_moisture(f) < 0.1),
               lambda f: 100 * _powder_moisture(f),
               "the powder's residual moisture was probably left out: "
               "{amount:.1f} % of water in the powder would explain it",
               "determine the moisture of the powder that was burned, on the day of the pellets"),
    Hypothesis("fibre_twice", 0.7, _same_measured, lambda f: f.computed - heat("hfi") * f.fibre,
               lambda f: f.available_given & (f.fibre > 0.005)
               & (np.isnan(f.mass_sum) | (np.abs(f.mass_sum - 1 - f.fibre) < 0.5 * f.fibre)),
               lambda f: 100 * f.fibre,
               "the available carbohydrate seems to hold the fibre already: {amount:.1f} g per 100 g are counted twice",
               "look whether 'carbohydrate' on the certificate is with or without fibre"),
    Hypothesis("ether_extract", 0.95, _same_measured, _same_measured,
               lambda f: f.ether_extract & (_missing_fat(f) > 0.005) & (_missing_fat(f) < 0.12),
               lambda f: 100 * _missing_fat(f),
               "fat was extracted without acid hydrolysis: {amount:.1f} g of bound fat per 100 g, "
               "now inside carbohydrate by difference, would explain it",
               "repeat the fat determination with acid hydrolysis"),
    Hypothesis("urea_as_protein", 0.7, _same_measured, _same_measured,
               lambda f: f.may_hold_urea & (_urea(f) > 0.004) & (_urea(f) < 0.05),
               lambda f: 100 * _urea(f),
               "non-protein nitrogen counted as protein: {amount:.1f} g of urea per 100 g would explain it",
               "determine urea or ammonia nitrogen and give it as urea or non-protein nitrogen"),
    Hypothesis("high_ash", 0.75, _same_measured, _same_measured,
               lambda f: (f.ash_of_dry_matter > 0.12) & (f.measured < f.computed) & (f.measured > 0.88 * f.computed),
               lambda f: 100 * f.ash_of_dry_matter,
               "ash is {amount:.1f} % of dry matter: a charge that did not burn out, or carbonate that took up heat, "
               "would explain it",
               "look for soot, repeat with a combustion aid of known heat, and determine carbonate in the ash"),
)
# fmt: on


def rank(facts: Facts, rows: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Probable cause and next measurement, as texts, for the rows marked; empty elsewhere.

    A hypothesis closes a difference if the corrected figures differ by less than the practical limit. Among those
    that close, the one with the largest prior * likelihood of the remaining difference is named; a cause that tunes
    an amount to fit (fat, moisture) closes by construction and competes by its prior alone.
    """
    n = len(facts.measured)
    best = np.zeros(n)
    cause = np.full(n, "", dtype=object)
    following = np.full(n, "", dtype=object)
    with np.errstate(all="ignore"):
        for h in HYPOTHESES:
            remaining = h.measured(facts) - h.computed(facts)
            closes = rows & h.applies(facts) & (np.abs(remaining) <= facts.limit)
            weight = np.where(closes, h.prior * np.exp(-0.5 * (remaining / facts.u) ** 2), 0.0)
            better = weight > np.maximum(best, 1e-6)
            amount = h.amount(facts)
            for i in np.flatnonzero(better):
                cause[i] = h.words.format(amount=amount[i])
                following[i] = h.next_measurement
            best = np.where(better, weight, best)
        _by_size(facts, rows & (best == 0), cause, following)
    return cause, following


def _by_size(facts: Facts, rows: np.ndarray, cause: np.ndarray, following: np.ndarray) -> None:
    """No hypothesis fits: what each determination would have to be wrong by (g per 100 g), largest lever first."""
    gap = facts.measured - facts.computed
    for i in np.flatnonzero(rows):
        moisture, fat, protein = (100 * x for x in needed_by_difference(float(gap[i])))
        cause[i] = (
            f"nothing specific fits; alone, {abs(moisture):.1f} g of moisture (too {'high' if gap[i] > 0 else 'low'}), "
            f"{abs(fat):.1f} g of fat or {abs(protein):.1f} g of protein (too {'low' if gap[i] > 0 else 'high'}) "
            "per 100 g would explain it"
        )
        following[i] = "repeat the moisture of the sample, then fat; a determined carbohydrate would tell them apart"
