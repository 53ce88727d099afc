"""What an entry of the catalogue is, once read.

A `System` is one published way to an energy: a formula in the publication's own units with a meaning for each
symbol. Factor tables become systems too: their formula is the sum over the components.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

from energy.formula import Formula

#: in the order energy is lost; digestibility, UE, CH4E and "other" (ratios, efficiencies) are steps between
STAGES = ("GE", "digestibility", "DE", "UE", "CH4E", "ME", "NE", "label", "other")
#: kinds of a stage that have a name of their own
KINDS = ("NME", "AME", "AMEn", "TME", "TMEn", "NEL", "NEm", "NEg", "organic_matter", "elements", "ME/DE", "efficiency")
ROUTES = ("bomb", "composition", "declared", "loss")
TARGETS = (
    "human", "dog", "cat", "growing_pig", "sow", "poultry", "duck", "cattle", "dairy_cow", "sheep", "horse",
    "rabbit", "fish", "none",
)  # fmt: skip
TWINS = ("factors", "conversion_4.184", "conversion_4.18", "none")
ABSENT = ("missing_input", "zero_and_listed", "zero")

#: source_status -> the words people read, best first
SOURCE_STATUS = {
    "read": "read at the source",
    "read_secondary": "read in a second document",
    "derived": "derived",
    "memory_high": "recalled, not yet checked at the source",
    "memory_medium": "recalled, not yet checked at the source (less sure)",
    "house": "our own",
}


def weakest(statuses: list[str]) -> str:
    """The weakest of several source statuses; mixed facts take it."""
    order = list(SOURCE_STATUS)
    return max(statuses, key=order.index)


@dataclass(frozen=True)
class Publication:
    """Where a file's facts stand."""

    key: str
    citation: str
    note: str = ""


@dataclass(frozen=True)
class Symbol:
    """What a symbol of a formula means.

    Exactly one of `quantity` (measured or derived), `constant`, `table` (a value looked up by the sample's food
    group, or in one fixed `slug`). `scale`: value in the formula = internal value / scale for a quantity, and
    table or constant value * scale for a parameter. `basis`: as_is, dry_matter, ..., "any", or None.
    """

    name: str
    unit: str
    quantity: str | None = None
    constant: float | None = None
    table: str | None = None
    row: str | None = None
    column: str | None = None
    slug: str | None = None
    fallback: float | None = None
    scale: float = 1.0
    basis: str | None = None
    absent: str = "missing_input"
    absent_then: str = ""
    u: float = 0.0
    fallback_u: float = 0.0
    note: str = ""


@dataclass(frozen=True)
class Bound:
    """A limit of validity. symbol : of the formula, of the entry's symbols, or "result".

    unit : as printed, with its basis; value in that unit = internal value / scale. basis : None or "any" where the
    paper names none: then that on which the symbol is used.
    """

    symbol: str
    low: float | None = None
    high: float | None = None
    locator: str = ""
    unit: str = ""
    scale: float = 1.0
    basis: str | None = None

    @property
    def words(self) -> str:
        """The bound as people read it: symbol, from, to, unit and basis."""
        ends = [word.format(x) for word, x in (("from {:g}", self.low), ("to {:g}", self.high)) if x is not None]
        return " ".join([self.symbol, *ends, self.unit.removesuffix(" any basis").removesuffix(" any")])


@dataclass(frozen=True)
class Tolerance:
    """What difference a law bears between a declared and a checked energy.

    below, above : shares of the declared value (0.05). absolute : MJ/kg. Either may be None.
    """

    words: str
    below: float | None
    above: float | None
    absolute: float | None
    locator: str
    source_status: str


@dataclass(frozen=True)
class Check:
    """A worked value an entry must reproduce. inputs: quantity -> value in inputs_unit (or its own unit)."""

    name: str
    inputs: Mapping[str, float]
    inputs_unit: str
    expected: float
    unit: str
    tolerance: float
    kind: str
    source: str
    source_status: str
    text: Mapping[str, str] = field(default_factory=dict)
    units: Mapping[str, str] = field(default_factory=dict)
    note: str = ""


@dataclass(frozen=True)
class Component:
    """One line of a factor table, for people: the publication's word, what it multiplies, by how much."""

    name: str
    quantity: str
    subtract: tuple[str, ...]
    factor: float | None
    absent: str
    absent_then: str
    source_status: str
    locator: str
    note: str


@dataclass(frozen=True)
class System:
    """One published way to an energy value."""

    id: str
    title: str
    targets: tuple[str, ...]
    stage: str
    route: str
    formula: Formula
    symbols: Mapping[str, Symbol]
    result_unit: str
    result_scale: float  # internal = value * scale
    result_basis: str  # as_is, dry_matter, any
    energy_family: str  # "J" or "cal"
    citation: str
    locator: str
    source_status: str
    kind: str = ""
    law: bool = False
    body: str = ""
    bomb_allowed: str = "unknown"
    nitrogen_factor: float | str = "own"
    by_group: bool = False
    twin: str = "none"
    twin_id: str | None = None
    twin_of: str | None = None
    heats: Formula | None = None
    residual_sd: float | None = None
    r2: float | None = None
    domain: tuple[Bound, ...] = ()
    domain_words: str = ""
    requires_methods: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    excludes: tuple[str, ...] = ()
    components: tuple[Component, ...] = ()
    takes_out: tuple[str, ...] = ()  # determined apart: leaves a carbohydrate that was found by difference
    checks: tuple[Check, ...] = ()
    steps: tuple[str, ...] = ()  # ids of the entries a chain is made of, in order
    tolerance: Tolerance | None = None
    note: str = ""
    file: str = ""

    @cached_property
    def inputs(self) -> dict[str, Symbol]:
        """Symbols of the formula; those that speak of the domain only are left out."""
        used = self.formula.symbols | (self.heats.symbols if self.heats else frozenset())
        return {name: symbol for name, symbol in self.symbols.items() if name in used}

    @cached_property
    def homogeneous(self) -> bool:
        """True if all amounts and the result stand on one and the same basis and scale together.

        Such a system may be used on any basis: per kg of dry matter in, per kg of dry matter out.
        """
        bases = {s.basis for s in self.inputs.values() if s.quantity} | {self.result_basis}
        return len(bases - {None}) <= 1 and _degree_one(self)


def _degree_one(system: System) -> bool:
    """Doubling every amount doubles the result (tried at three points; exact for what formulas here can be)."""
    from energy.algebra import Source

    # shares, digestibilities and plain numbers do not grow with the amounts
    amounts = [n for n, s in system.inputs.items() if s.quantity and s.scale > 0 and s.basis is not None]
    variables = {name: f"v[{name!r}]" for name in system.inputs}
    source = Source([system.formula.node], variables)
    final = source.text(system.formula.node)
    code = compile("\n".join([*source.lines, f"out = {final}"]), "<formula>", "exec")
    import numpy as np

    functions: dict[str, Any] = {name: getattr(np, name) for name in
                                 ("exp", "log", "sqrt", "minimum", "maximum", "where", "power")}  # fmt: skip

    def value(v: dict[str, float]) -> float:
        space: dict[str, Any] = dict(functions, v=v)
        exec(code, {"__builtins__": {}}, space)  # our own generated text: registered names and numbers only
        return float(space["out"])

    with np.errstate(all="ignore"):
        for trial in range(3):
            point = {name: 0.31 + 0.17 * ((7 * i + 3 * trial) % 5) for i, name in enumerate(system.inputs)}
            double = {n: 2 * v if n in amounts else v for n, v in point.items()}
            a, b = value(point), value(double)
            if not np.isclose(b, 2 * a, rtol=1e-9, atol=0):
                return False
    return True


@dataclass(frozen=True)
class DerivedRule:
    """One way to get a quantity from others; formula in internal units on the working basis.

    unless_form : texts of the column `form` for which the rule does not hold. assumed : what a result that rests on it
    must say, "" where nothing is assumed.
    """

    quantity: str
    formula: Formula
    requires: tuple[str, ...]
    given: frozenset[str]
    optional: Mapping[str, str]
    words: str
    source: str
    source_status: str
    unless_form: tuple[str, ...] = ()
    assumed: str = ""
