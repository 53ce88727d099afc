"""The energy a law computes for a label: from the analysis as it stands, and from the grams as the label prints them.

A law's energy is a sum over its components, so every figure here is linear in the grams: `coefficients` says what one
gram of each quantity brings once everything that a component takes out has been taken out. kJ and kcal are two sums.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from energy import algebra, rounding
from energy.balance import slope_of
from energy.catalogue.records import Symbol, System
from energy.display import basis_factor
from energy.evaluate import MISSING, PROBLEM, BySystem, evaluate
from energy.formula import parse
from energy.programs import values_of
from energy.resolve import Resolver, signatures
from energy.rounding import Floats
from energy.samples import Samples

#: g per 100 g in kg/kg, and MJ/kg in kJ per 100 g
PER_100 = 100.0


@dataclass(frozen=True)
class UnitSum:
    """A law's energy in one unit, per 100 g as is. value, u : (n,). own : by its own factors, not by conversion."""

    unit: str
    value: Floats
    u: Floats
    own: bool


@dataclass(frozen=True)
class LabelEnergy:
    """What a law computes for a batch, per 100 g as is.

    sums : unit ("kJ", "kcal") -> UnitSum, only units the law gives; `leading` first. status : (n,) as in evaluate.
    grams : quantity -> (n,) g per 100 g of what the law's components rest on. freedom : (n,) degrees of freedom of u.
    """

    law: System
    leading: str
    sums: dict[str, UnitSum]
    status: np.ndarray
    grams: dict[str, Floats]
    freedom: Floats


def unit_of(system: System) -> str:
    """ "kJ" or "kcal", by the family a system's energy belongs to."""
    return "kJ" if system.energy_family == "J" else "kcal"


def _label_scale(unit: str, kilocalorie: float = 4.184) -> float:
    """MJ/kg -> kJ or kcal per 100 g; a unit's size, not a conversion between two sums of a law."""
    return PER_100 if unit == "kJ" else PER_100 / kilocalorie


def label_energy(samples: Samples, law: System, catalogue: Mapping[str, System]) -> LabelEnergy:
    """Energies and grams of a law for a batch of n samples. Raises nothing: what cannot be had is NaN with its status."""
    twin = catalogue[law.twin_id] if law.twin_id else None
    systems = [law] if twin is None else [law, twin]
    parts = _amount_systems(BySystem(law))
    blocks = evaluate(samples, [*systems, *(s for _, s in parts)])
    factor = basis_factor(samples, blocks.basis, "as_is")
    sums: dict[str, UnitSum] = {}
    for i, system in enumerate(systems):
        unit = unit_of(system)
        scale = _label_scale(unit) * factor
        sums[unit] = UnitSum(unit, blocks.value[i] * scale, blocks.u[i] * scale, True)
    leading = unit_of(law)
    if law.twin.startswith("conversion_"):  # the law's own conversion, on the unrounded sum
        kilocalorie = float(law.twin.removeprefix("conversion_"))
        first = sums[leading]
        k = 1 / kilocalorie if leading == "kJ" else kilocalorie
        other = "kcal" if leading == "kJ" else "kJ"
        sums[other] = UnitSum(other, first.value * k, first.u * k, False)
    grams = {q: blocks.value[len(systems) + j] * PER_100 * factor for j, (q, _) in enumerate(parts)}
    status = blocks.status[0].copy()
    status[np.isnan(sums[leading].value) & (status < MISSING)] = PROBLEM
    return LabelEnergy(law, leading, sums, status, grams, figure_freedom(samples, law))


@lru_cache(maxsize=256)
def _amount_systems(law: BySystem) -> tuple[tuple[str, System], ...]:
    """Each quantity of a law's components as a system of its own, so that it is had by the law's own rules."""
    system, found = law.system, {}
    for component in system.components:
        for quantity in (component.quantity, *component.subtract):
            absent = component.absent if quantity == component.quantity else "zero"
            if quantity in found and absent != "missing_input":
                continue
            symbol = Symbol(name="x", unit="", quantity=quantity, basis="any", absent=absent)
            found[quantity] = System(
                id=f"grams of {quantity} for {system.id}", title=quantity, targets=(), stage="", route="",
                formula=parse("x"), symbols={"x": symbol}, result_unit="", result_scale=1.0, result_basis="any",
                energy_family="", citation="", locator="", source_status="derived",
                nitrogen_factor=system.nitrogen_factor, takes_out=system.takes_out, by_group=system.by_group,
            )  # fmt: skip
    return tuple(found.items())


def coefficients(samples: Samples, system: System) -> dict[str, Floats]:
    """quantity -> energy of one gram of it, in the system's unit per g: (n,) where factors go by food group, else (1,)."""
    found: dict[str, Floats] = {}
    for component in system.components:
        if component.factor is None:
            factor = _group_factor(samples, system, component.name)
        else:
            factor = np.array([component.factor])
        found[component.quantity] = found.get(component.quantity, np.zeros(1)) + factor
        for quantity in component.subtract:
            found[quantity] = found.get(quantity, np.zeros(1)) - factor
    return found


def _group_factor(samples: Samples, system: System, row: str) -> Floats:
    """(n,) factor of a component by each sample's food group, NaN where the group has none."""
    resolver = Resolver(signatures(samples)[0][0], frozenset(samples.columns))
    symbol = system.symbols.get(f"f_{row}")
    name = None if symbol is None else resolver.lookup(symbol)
    if isinstance(name, float):
        return np.array([name])
    if not isinstance(name, str):
        return np.full(len(samples), np.nan)
    parameter = resolver.parameters[name]
    values = np.where(parameter.missing, np.nan, parameter.values)
    return np.asarray(values[samples.memo["group_codes"]])


def energy_of(grams: Mapping[str, Floats], coefficient: Mapping[str, Floats]) -> Floats:
    """(n,) sum of grams times what a gram brings; a quantity of which there is none brings nothing, factor or not."""
    total: Floats = np.zeros(1)
    for quantity, k in coefficient.items():
        amount = grams[quantity]
        total = total + np.where(amount == 0, 0.0, amount * k)
    return total


@dataclass(frozen=True)
class LabelGrams:
    """Grams as a label prints them, per the amount the label speaks of.

    printed, low, high : quantity -> (n,); low and high are what the printed figure can mean (high itself no longer
    rounds to it). ruled : quantity -> whether a rounding rule was found; unrounded where not.
    """

    printed: dict[str, Floats]
    low: dict[str, Floats]
    high: dict[str, Floats]
    ruled: dict[str, bool]


def label_grams(grams: Mapping[str, Floats], rule_set: str, free_claim: bool = False) -> LabelGrams:
    """Round the grams of a law by a rule set; amounts below zero (a difference that went wrong) stay NaN."""
    found = LabelGrams({}, {}, {}, {})
    for quantity, amount in grams.items():
        ruled = bool(rounding.rules(rule_set, quantity))
        amount = np.where(amount < 0, np.nan, amount)
        found.ruled[quantity] = ruled
        if not ruled or not amount.any():  # of what no sample holds, every rule prints nought
            found.printed[quantity] = found.low[quantity] = found.high[quantity] = rounding.tidy(amount)
            continue
        printed = rounding.rounded(rule_set, quantity, amount, free_claim).value
        found.printed[quantity] = printed
        low, high = rounding.meaning(rule_set, quantity, printed, free_claim)
        # what is not in the food is not on its label: only a printed nought may stand for a little
        nothing = amount == 0
        found.low[quantity], found.high[quantity] = np.where(nothing, 0.0, low), np.where(nothing, 0.0, high)
    return found


def spread(label: LabelGrams, coefficient: Mapping[str, Floats]) -> tuple[Floats, Floats]:
    """(n,) lowest and highest energy of foods whose grams round to the same label: what rounding alone allows."""
    low: Floats = np.zeros(1)
    high: Floats = np.zeros(1)
    for quantity, k in coefficient.items():
        ends = np.stack(np.broadcast_arrays(label.low[quantity] * k, label.high[quantity] * k))
        ends = np.where((label.high[quantity] == 0) & np.isnan(ends), 0.0, ends)
        low, high = low + ends.min(axis=0), high + ends.max(axis=0)
    return low, high


def figure_freedom(samples: Samples, system: System) -> Floats:
    """(n,) effective degrees of freedom of a figure's u (Welch and Satterthwaite, JCGM 100:2008, G.4.1); inf where known."""
    found = np.full(len(samples), np.inf)
    few = {name: values for name, values in samples.freedom.items() if np.isfinite(values).any()}
    if not few:
        return found
    with np.errstate(all="ignore"):
        for signature, rows in signatures(samples):
            resolver = Resolver(signature, frozenset(samples.columns))
            here = np.arange(len(samples)) if rows is None else rows
            node = resolver.system(system)
            if node is None:
                continue
            names = sorted({n.removesuffix("?") for n in algebra.names(node) if not n.startswith(("@", "V@"))})
            values = values_of(samples, resolver, [slope_of(node, c) for c in names], here)
            shares = {c: (s * np.nan_to_num(samples.u[c][here])) ** 2 for c, s in zip(names, values, strict=True)}
            below = sum((shares[c] ** 2 / few[c][here] for c in names if c in few), np.zeros(len(here)))
            total = sum(shares.values(), np.zeros(len(here)))
            found[here] = np.where(below > 0, total**2 / below, np.inf)
    return found
