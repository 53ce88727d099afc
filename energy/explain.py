"""Why a difference: its three parts by component.

A part is a function of component amounts that doubles when all amounts double, so that amount times slope, summed
over the components, is the part itself (Euler's theorem on homogeneous functions).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from energy import algebra
from energy.algebra import Node
from energy.catalogue.derived import derived_rules
from energy.catalogue.records import System
from energy.evaluate import Pair
from energy.quantities import dictionary
from energy.resolve import ASSUMED_NITROGEN_FACTOR, Resolver, Signature, signatures
from energy.samples import Samples

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
