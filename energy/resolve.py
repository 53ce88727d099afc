"""From quantities to measured columns: which rule gives each quantity in which rows, on one working basis.

Rows of a batch differ in what was measured and on which basis. Rows alike in both share a `Signature`; for each
signature every quantity becomes one expression in measured columns (names as in the dictionary; `name?` is the
column with zeros where nothing was given). Slopes of these expressions reach the measured columns.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from energy import basis as bases
from energy.algebra import Node, add, multiply, power, scale, slope, substitute
from energy.catalogue.derived import derived_rules
from energy.catalogue.records import Bound, Symbol, System
from energy.catalogue.tables import food_groups, table
from energy.quantities import dictionary
from energy.samples import BASES, Samples

ASSUMED_NITROGEN_FACTOR = 6.25


@dataclass(frozen=True)
class Signature:
    """What rows have in common: rule per derived quantity (0 given, k rule k, -1 none), basis per column, group."""

    choices: tuple[tuple[str, int], ...]
    basis: tuple[tuple[str, str], ...]
    group: int  # 0 no known food group, 1 known with a nitrogen factor of its own, 2 known without
    working: str


def present(samples: Samples, quantity: str) -> np.ndarray:
    """(n,) bool: a value was given, usable or not. An unusable cell counts, so that no other rule hides it."""
    if quantity not in samples.columns:
        return np.zeros(len(samples), dtype=bool)
    given = ~np.isnan(samples.columns[quantity])
    voided = samples.voided.get(quantity)
    return given if voided is None else given | voided


def rule_choices(samples: Samples) -> dict[str, np.ndarray]:
    """derived quantity -> (n,) int8: 0 measured, k the k-th rule of derived.toml, -1 cannot be had."""
    n = len(samples)
    measured = {q: present(samples, q) for q in samples.columns}
    no = np.zeros(n, dtype=bool)
    protein = measured.get("crude_protein", no) | measured.get("nitrogen", no)
    choices: dict[str, np.ndarray] = {}

    def has(word: str) -> np.ndarray:
        if word.startswith("any:"):
            return np.logical_or.reduce([measured.get(q, no) for q in word[4:].split(",")])
        if word == "crude_protein":
            return protein
        if word == "solids":
            if working_basis(samples, choices) == "dry_matter":
                return np.ones(n, dtype=bool)
            word = "dry_matter"
        return choices[word] >= 0 if word in choices else measured.get(word, no)

    for quantity, rules in derived_rules().items():
        choice = np.full(n, -1, dtype=np.int8)
        for number in range(len(rules), 0, -1):
            rule = rules[number - 1]
            if not rule.given <= measured.keys():
                continue  # a column it needs is not in the table at all
            fits = np.ones(n, dtype=bool)
            for word in rule.requires:
                fits &= measured.get(word, no) if word in rule.given else has(word)
            if rule.unless_form and "form" in samples.text:
                fits &= ~np.isin(samples.text["form"].astype(str), rule.unless_form)
            choice[fits] = number
        choice[measured.get(quantity, no)] = 0
        choices[quantity] = choice
    return choices


def working_basis(samples: Samples, choices: Mapping[str, np.ndarray]) -> str:
    """as_is where any row can be brought to it; dry_matter for a batch that knows only dry matter."""
    if bool((choices["dry_matter"] >= 0).any()) or not samples.basis:
        return "as_is"
    stated = [codes[present(samples, q)] for q, codes in samples.basis.items()]
    return "as_is" if any((codes == 0).any() for codes in stated) else "dry_matter"


def group_codes(samples: Samples) -> np.ndarray:
    """(n,) index into the sorted food groups; their number where none, or an unknown one, is named."""
    groups = {slug: i for i, slug in enumerate(sorted(food_groups()))}
    if "food_group" not in samples.text:
        return np.full(len(samples), len(groups))
    unique, inverse = np.unique(samples.text["food_group"].astype(str), return_inverse=True)
    return np.array([groups.get(u, len(groups)) for u in unique], dtype=np.intp)[inverse]


def _group_kind(samples: Samples, codes: np.ndarray) -> np.ndarray:
    groups = food_groups()
    kinds = np.array([1 if groups[slug]["nitrogen_factor"] else 2 for slug in sorted(groups)] + [0], dtype=np.int8)
    return kinds[codes]


def signatures(samples: Samples) -> list[tuple[Signature, np.ndarray | None]]:
    """The signatures of a batch with the rows of each (None = all rows); remembered on the samples."""
    if "signatures" not in samples.memo:
        samples.memo["signatures"] = _signatures(samples)
    found: list[tuple[Signature, np.ndarray | None]] = samples.memo["signatures"]
    return found


def _signatures(samples: Samples) -> list[tuple[Signature, np.ndarray | None]]:
    choices = rule_choices(samples)
    working = working_basis(samples, choices)
    codes = samples.memo.setdefault("group_codes", group_codes(samples))
    parts: dict[tuple[str, str], np.ndarray] = {("choice", q): c for q, c in choices.items()}
    for q, basis in samples.basis.items():
        here = present(samples, q)
        usual = np.bincount(basis[here], minlength=1).argmax() if here.any() else 0
        parts["basis", q] = np.where(here, basis, usual).astype(np.int8)
    parts["group", ""] = _group_kind(samples, codes)
    varying = {key: a for key, a in parts.items() if len(a) and (a != a[0]).any()}
    if not varying:
        first = np.zeros(1, dtype=np.intp)
        return [(_signature(parts, first[0], working), None)] if len(samples) else []
    key = np.zeros(len(samples), dtype=np.int64)
    for a in varying.values():
        _, inverse = np.unique(a, return_inverse=True)
        _, key = np.unique(key * (inverse.max() + 1) + inverse, return_inverse=True)
    rows = [np.flatnonzero(key == k) for k in range(key.max() + 1)]
    return [(_signature(parts, r[0], working), r) for r in rows]


def _signature(parts: Mapping[tuple[str, str], np.ndarray], row: int, working: str) -> Signature:
    return Signature(
        choices=tuple((q, int(a[row])) for (kind, q), a in parts.items() if kind == "choice"),
        basis=tuple((q, BASES[int(a[row])]) for (kind, q), a in parts.items() if kind == "basis"),
        group=int(parts["group", ""][row]),
        working=working,
    )


@dataclass(frozen=True)
class Parameter:
    """A number looked up by food group: name in expressions, values and variances by group, missing groups."""

    name: str
    values: np.ndarray  # (groups + 1,), 0 where missing
    variances: np.ndarray
    missing: np.ndarray  # (groups + 1,) bool
    row: str


@dataclass
class Resolver:
    """Expressions of quantities in measured columns, for one signature.

    columns : names of the columns that exist. parameters : filled with what was looked up.
    assumed : per quantity counted as zero when absent, where it is then counted.
    """

    signature: Signature
    columns: frozenset[str]
    parameters: dict[str, Parameter] = field(default_factory=dict)

    @cached_property
    def choices(self) -> dict[str, int]:
        """Rule per derived quantity."""
        return dict(self.signature.choices)

    @cached_property
    def stated(self) -> dict[str, str]:
        """Basis per column."""
        return dict(self.signature.basis)

    def _dry(self, basis: str) -> Node | None:
        dry = self.quantity("dry_matter")
        residual = "residual_moisture" if "residual_moisture" in self.columns else None
        ash = self._dry_ash(dry, residual) if basis == "organic_matter" else None
        return bases.dry_part(basis, dry, residual, ash)

    def _dry_ash(self, dry: Node | None, residual: Node | None) -> Node | None:
        """Ash per kg of dry matter, from whatever basis it was stated on."""
        stated = self.stated.get("ash")
        if "ash" not in self.columns or stated in (None, "organic_matter"):
            return None
        return bases.convert("ash", bases.dry_part(str(stated), dry, residual, None), 1.0)

    def measured(self, name: str, filled: bool = False) -> Node | None:
        """A measured column on the working basis; filled: zero where nothing was given."""
        if name not in self.columns:
            return 0.0 if filled else None
        node: Node = name + "?" if filled else name
        if name not in self.stated or self.stated[name] == self.signature.working:
            return node
        return self._onto(node, name, self.stated[name], self.signature.working)

    def _onto(self, node: Node, name: str | None, source: str, goal: str) -> Node | None:
        """A quantity of one basis on another; a mass of feed grows with the water where an amount per mass shrinks."""
        ends = self._dry(source), self._dry(goal)
        known = dictionary().get(str(name))
        return bases.convert(node, *(ends[::-1] if known is not None and known.dimension == "mass" else ends))

    def quantity(self, name: str, nitrogen_factor: float | str = "own", filled: bool = False) -> Node | None:
        """Any quantity on the working basis, by the rule that holds in these rows; None if it cannot be had."""
        if name == "solids":
            return self._dry(self.signature.working)
        if name == "crude_protein":
            return self._protein(nitrogen_factor)
        if name == "nitrogen_factor":
            return "nitrogen_factor?" if "nitrogen_factor" in self.columns else ASSUMED_NITROGEN_FACTOR
        choice = self.choices.get(name)
        if choice is None or choice == 0:
            return self.measured(name, filled)
        if choice < 0:
            return 0.0 if filled else None
        rule = derived_rules()[name][choice - 1]
        values: dict[str, Node] = {}
        summed = any(word.startswith("any:") for word in rule.requires)
        for symbol in rule.formula.symbols:
            if symbol in rule.given:
                node = self.measured(symbol)
            else:
                node = self.quantity(symbol, nitrogen_factor, filled=summed or symbol in rule.optional)
            if node is None:
                return 0.0 if filled else None
            values[symbol] = node
        return substitute(rule.formula.node, values)

    def _protein(self, factor: float | str) -> Node | None:
        nitrogen = self.quantity("nitrogen")
        given_as_protein = self.choices.get("nitrogen", -1) != 0
        if nitrogen is None:
            return None
        if factor == "feed":  # crude protein of a feed is N x 6.25 by definition; given as such, it needs no factor
            if given_as_protein and "nitrogen_factor" not in self.columns:
                return self.measured("crude_protein")
            factor = ASSUMED_NITROGEN_FACTOR
        if factor != "own":
            return multiply(nitrogen, float(factor))
        if self.signature.group == 1:
            return multiply(nitrogen, self._nitrogen_parameter())
        if given_as_protein:
            return self.measured("crude_protein")
        own = self.quantity("nitrogen_factor")
        return None if own is None else multiply(nitrogen, own)

    def _nitrogen_parameter(self) -> Node:
        groups = food_groups()
        values = np.array([float(groups[g]["nitrogen_factor"] or 0) for g in sorted(groups)] + [0.0])
        name = "@nitrogen_factor"
        self.parameters[name] = Parameter(name, values, np.zeros_like(values), values == 0, "protein")
        return name

    def lookup(self, symbol: Symbol) -> Node:
        """A table or constant symbol: a number, or the name of a parameter by food group."""
        if symbol.constant is not None:
            return symbol.constant * symbol.scale
        assert symbol.table and symbol.row and symbol.column
        rows = table(symbol.table)
        if symbol.slug is not None:
            return float(rows[symbol.slug, symbol.row][symbol.column]) * symbol.scale
        name = "@" + "|".join([symbol.table, symbol.row, symbol.column, repr(symbol.fallback), repr(symbol.scale)])
        if name not in self.parameters:
            slugs = [*sorted(food_groups()), ""]
            raw = [rows.get((slug, symbol.row), {}).get(symbol.column) or "nan" for slug in slugs]
            values = np.array([float(v) for v in raw])
            missing = np.isnan(values)
            u = np.where(missing, symbol.fallback_u, symbol.u) * symbol.scale
            filled = 0.0 if symbol.fallback is None else symbol.fallback
            values = np.where(missing, filled, values) * symbol.scale
            if symbol.fallback is not None:
                missing = np.zeros_like(missing)
            self.parameters[name] = Parameter(name, values, u**2, missing, symbol.row)
        return name

    def symbol(self, symbol: Symbol, system: System) -> Node | None:
        """What a formula's symbol is, in the paper's unit; None if it cannot be had in these rows."""
        if symbol.quantity is None:
            return self.lookup(symbol)
        node = self.quantity(symbol.quantity, system.nitrogen_factor, filled=symbol.absent != "missing_input")
        if node is None:
            return None
        return self._in_paper_units(self._taken_out(node, symbol.quantity, system), symbol, system)

    def bound(self, bound: Bound, system: System, result: Node) -> Node | None:
        """What a bound looks at, in the bound's own unit and on its own basis; None if it cannot be had in these rows.

        result : the system's result in MJ/kg on the working basis. A homogeneous formula may be used on any basis, but
        the range it was found in was printed on one.
        """
        if bound.symbol == "result":
            node: Node | None = result
            basis = bound.basis
        else:
            symbol = system.symbols[bound.symbol]
            if symbol.quantity is None:
                return self.lookup(symbol)
            node = self.quantity(symbol.quantity, system.nitrogen_factor, filled=symbol.absent != "missing_input")
            basis = symbol.basis if bound.basis in (None, "any") else bound.basis
        if node is not None and basis not in (None, "any", self.signature.working):
            name = None if bound.symbol == "result" else system.symbols[bound.symbol].quantity
            node = self._onto(node, name, self.signature.working, str(basis))
        return None if node is None else multiply(1.0 / bound.scale, node)

    def _in_paper_units(self, node: Node, symbol: Symbol, system: System) -> Node | None:
        """A quantity on the working basis, in the unit and on the basis of a formula's symbol."""
        working = self.signature.working
        if symbol.basis not in (None, "any", working) and not system.homogeneous:
            found = self._onto(node, symbol.quantity, working, str(symbol.basis))
            if found is None:
                return None
            node = found
        return multiply(1.0 / symbol.scale, node)

    def _taken_out(self, node: Node, quantity: str, system: System) -> Node:
        """Carbohydrate by difference without what the system counts apart (FSANZ Schedule 11 and its like)."""
        if quantity != "available_carbohydrate" or self.choices.get(quantity, 0) <= 0:
            return node
        for name in system.takes_out:
            amount = self.quantity(name, filled=True)
            if name == "unavailable_carbohydrate":  # its fibre has left already
                amount = add(amount, scale(-1.0, self.quantity("total_dietary_fibre", filled=True)))
            node = add(node, scale(-1.0, amount))
        return node

    def assumed(self, system: System) -> dict[str, str]:
        """Quantities a system counts as zero because their column is not there -> where they then count."""
        found: dict[str, str] = {}
        settled = {s.quantity for s in system.inputs.values() if s.quantity and s.absent == "zero"}
        for symbol in system.inputs.values():
            if symbol.quantity is None:
                continue
            if symbol.absent == "zero_and_listed" and self._gone(symbol.quantity):
                found[symbol.quantity] = symbol.absent_then
            choice = self.choices.get(symbol.quantity, 0)
            if choice > 0:
                rule = derived_rules()[symbol.quantity][choice - 1]
                for name, words in rule.optional.items():
                    if words and name not in settled and self._gone(name):
                        found.setdefault(name, words)
        return found

    def presumed(self, system: System) -> list[str]:
        """What the rules a system's quantities rest on take for granted, in words."""
        found = []
        for symbol in system.inputs.values():
            choice = self.choices.get(str(symbol.quantity), 0)
            if choice > 0 and (words := derived_rules()[str(symbol.quantity)][choice - 1].assumed):
                found.append(words)
        return found

    def _gone(self, quantity: str) -> bool:
        return isinstance(self.quantity(quantity, filled=True), float)

    def system(self, system: System, gross_energy: Node | None = None) -> Node | None:
        """A system's result in MJ/kg on the working basis.

        gross_energy : what to put in place of the measured one, in MJ/kg; "heats" for the system's own heats.
        """
        tree = system.formula.node
        needed = set(system.formula.symbols)
        if gross_energy == "heats":
            if system.heats is None:
                return None
            needed |= system.heats.symbols
        values: dict[str, Node] = {}
        for name, symbol in system.inputs.items():
            if name not in needed:
                continue
            if symbol.quantity == "gross_energy" and gross_energy == "heats" and system.heats is not None:
                tree = substitute(tree, {name: system.heats.node})
                continue
            if symbol.quantity == "gross_energy" and gross_energy is not None:
                node = self._in_paper_units(gross_energy, symbol, system)
            else:
                node = self.symbol(symbol, system)
            if node is None:
                return None
            values[name] = node
        return self._result(multiply(system.result_scale, substitute(tree, values)), system)

    def heat_sum(self, system: System) -> Node | None:
        """Gross energy by the system's own heats, MJ/kg on the working basis; None if it has none."""
        if system.heats is None:
            return None
        values: dict[str, Node] = {}
        for name, symbol in system.inputs.items():
            if name not in system.heats.symbols:
                continue
            node = self.symbol(symbol, system)
            if node is None:
                return None
            values[name] = node
        scale = next(s.scale for s in system.inputs.values() if s.quantity == "gross_energy")
        return self._result(multiply(scale, substitute(system.heats.node, values)), system)

    def _result(self, node: Node, system: System) -> Node | None:
        if system.result_basis in ("any", self.signature.working) or system.homogeneous:
            return node
        return bases.convert(node, self._dry(system.result_basis), self._dry(self.signature.working))

    def model_variance(self, system: System) -> Node:
        """Variance of the result from the published factors or heats themselves, and from what was counted as zero."""
        values: dict[str, Node] = {}
        for name, symbol in system.inputs.items():
            node = self.symbol(symbol, system)
            if node is None:
                return 0.0
            values[name] = node
        terms: list[Node] = []
        for name, symbol in system.inputs.items():
            variance = self._absent_variance(symbol) if symbol.quantity else self._symbol_variance(symbol)
            if variance == 0.0:
                continue
            effect = multiply(system.result_scale, substitute(slope(system.formula.node, name), values))
            terms.append(multiply(power(effect, 2.0), variance))
        return add(*terms) if terms else 0.0

    def _absent_variance(self, symbol: Symbol) -> float:
        """Of a quantity counted as zero because its column is not there; 0 where absence is certain enough."""
        known = dictionary().get(str(symbol.quantity))
        if known is None or not known.absent_u or not self._gone(known.name):
            return 0.0
        return float((known.absent_u / symbol.scale) ** 2)

    def _symbol_variance(self, symbol: Symbol) -> Node:
        if symbol.constant is not None or symbol.slug is not None:
            return (symbol.u * symbol.scale) ** 2
        name = self.lookup(symbol)
        variances = self.parameters[name].variances
        return float(variances[0]) if (variances == variances[0]).all() else "V" + str(name)
