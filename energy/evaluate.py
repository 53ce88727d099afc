"""Samples x systems -> blocks of value, u and status; and pairs of systems -> differences and their parts.

For each signature of rows (resolve.py) all formulas are substituted down to measured columns, differentiated, and
written as one piece of numpy that runs over chunks of rows small enough to stay in cache. Blocks are
(systems, n) arrays in MJ/kg on the batch's working basis.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from energy import algebra
from energy.algebra import Node
from energy.catalogue.derived import derived_rules
from energy.catalogue.records import System
from energy.programs import CHUNK, compile_roots, leaf, take
from energy.resolve import Parameter, Resolver, Signature, signatures
from energy.samples import Samples

#: worst last
STATUS = (
    "ok", "assumed", "outside_domain", "method_mismatch", "implausible", "missing_input", "missing_factor", "not_admissible",
    "problem",
)  # fmt: skip
OK, ASSUMED, OUTSIDE, METHOD, IMPLAUSIBLE, MISSING, NO_FACTOR, NOT_ADMISSIBLE, PROBLEM = range(9)

#: which amount a table row belongs to; a missing row matters where the amount is present
ROW_AMOUNT = {
    "protein": "crude_protein",
    "fat": "crude_fat",
    "carbohydrate": "carbohydrate_all",
    "alcohol": "alcohol",
}


@dataclass(frozen=True)
class Pair:
    """A bomb system against a composition system; heats names the system of best component heats."""

    stage: str
    bomb: str
    composition: str
    heats: str


@dataclass
class Blocks:
    """Results of a batch. (systems, n) and (pairs, n); MJ/kg on `basis`.

    difference = bomb - composition = measurement + heats + convention. u_measurement holds the inputs' share,
    u_model that of the component heats. at_heats is the bomb system's result for the computed gross energy, to
    which percentages and limits of the measurement part refer.
    """

    systems: tuple[str, ...]
    pairs: tuple[Pair, ...]
    basis: str
    value: np.ndarray
    u: np.ndarray
    status: np.ndarray
    difference: np.ndarray
    u_difference: np.ndarray
    measurement: np.ndarray
    u_measurement: np.ndarray
    u_model: np.ndarray
    heats: np.ndarray
    convention: np.ndarray
    at_heats: np.ndarray

    def row(self, system: str) -> int:
        """Index of a system."""
        return self.systems.index(system)


@dataclass(frozen=True)
class Plan:
    """Compiled arithmetic for one signature."""

    run: Callable[[list[np.ndarray], list[np.ndarray]], None]
    inputs: tuple[str, ...]
    outputs: tuple[tuple[str, int], ...]
    parameters: Mapping[str, Parameter]
    computed: tuple[bool, ...]
    status: tuple[SystemStatus, ...]
    nonlinear: tuple[bool, ...]


@dataclass(frozen=True)
class SystemStatus:
    """What decides a system's status in rows of one signature."""

    base: int
    required: tuple[str, ...] = ()
    optional: tuple[str, ...] = ()
    factors: tuple[tuple[str, str], ...] = ()  # (parameter, output name of the amount)
    methods: tuple[tuple[str, tuple[str, ...]], ...] = ()
    bounds: tuple[tuple[str, float | None, float | None], ...] = ()


PAIR_OUTPUTS = (
    "difference", "u_difference", "measurement", "u_measurement", "u_model", "heats", "convention", "at_heats",
)  # fmt: skip


# ---- writing the arithmetic ---------------------------------------------------------------------------------


@lru_cache(maxsize=256)
def plan(signature: Signature, columns: frozenset[str], systems: tuple[BySystem, ...], pairs: tuple[Pair, ...]) -> Plan:
    """The compiled plan of a signature; remembered, so that a second batch of the same shape costs nothing."""
    resolver = Resolver(signature, columns)
    chosen = [s.system for s in systems]
    nodes = [_system_node(resolver, s) for s in chosen]
    index = {s.id: i for i, s in enumerate(chosen)}
    roots: dict[tuple[str, int], Node] = {}
    for i, node in enumerate(nodes):
        if node is not None:
            roots["value", i] = node
            roots["u", i] = algebra.apply("sqrt", _variance(node))
    for p, pair in enumerate(pairs):
        _pair_roots(resolver, pair, p, chosen, nodes, index, roots)
    status = tuple(
        _system_status(resolver, s, node, i, roots) for i, (s, node) in enumerate(zip(chosen, nodes, strict=True))
    )
    ready = [(p, index[pair.bomb], index[pair.composition]) for p, pair in enumerate(pairs) if ("at_heats", p) in roots]
    run, inputs, outputs = compile_roots(roots, ready)
    return Plan(
        run=run,
        inputs=inputs,
        outputs=outputs,
        parameters=dict(resolver.parameters),
        computed=tuple(node is not None for node in nodes),
        status=status,
        nonlinear=tuple(node is not None and _nonlinear(node) for node in nodes),
    )


@dataclass(frozen=True, eq=False)
class BySystem:
    """A system that is equal to another by identity of its record: plans are remembered by it."""

    system: System

    def __hash__(self) -> int:
        return id(self.system)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, BySystem) and other.system is self.system


def _system_node(resolver: Resolver, system: System) -> Node | None:
    if system.by_group and resolver.signature.group == 0:
        return None
    return resolver.system(system)


def _variance(node: Node) -> Node:
    measured = {n: ("**", "U:" + n, 2.0) for n in algebra.names(node) if not n.startswith(("@", "V@"))}
    return algebra.variance(node, measured)


def _nonlinear(node: Node) -> bool:
    if isinstance(node, tuple) and node[0] == "lin":
        return any(_nonlinear(child) for child in algebra.children(node))
    return isinstance(node, tuple) and node[0] != "*"


def _pair_roots(
    resolver: Resolver,
    pair: Pair,
    p: int,
    systems: Sequence[System],
    nodes: Sequence[Node | None],
    index: Mapping[str, int],
    roots: dict[tuple[str, int], Node],
) -> None:
    bomb, composition = nodes[index[pair.bomb]], nodes[index[pair.composition]]
    best = nodes[index[pair.heats]]
    if bomb is None or composition is None or best is None:
        return
    system = systems[index[pair.bomb]]
    at_heats = resolver.system(system, gross_energy=best)
    if at_heats is None:
        return
    # a bomb system without heats of its own (US method (E), Miller & Payne) has no heats part: it takes GE as it comes
    at_own = resolver.system(system, gross_energy="heats") if system.heats is not None else at_heats
    difference = algebra.subtract(bomb, composition)
    measurement = algebra.subtract(bomb, at_heats)
    model = resolver.model_variance(systems[index[pair.heats]])
    gain = _gross_energy_gain(resolver, system, best)
    roots["u_difference", p] = algebra.apply("sqrt", _variance(difference))
    roots["at_heats", p] = at_heats
    roots["at_own", p] = at_own
    roots["u_measurement", p] = algebra.apply("sqrt", _variance(measurement))
    roots["u_model", p] = algebra.apply("sqrt", algebra.multiply(algebra.power(gain, 2.0), model))


def measurement_node(resolver: Resolver, pair: Pair, catalogue: Mapping[str, System]) -> tuple[Node, Node] | None:
    """The measurement part of a pair and the variance that the heats give it; None if it cannot be had in these rows."""
    system, heats = catalogue[pair.bomb], catalogue[pair.heats]
    bomb, best = resolver.system(system), resolver.system(heats)
    at_heats = None if best is None else resolver.system(system, gross_energy=best)
    if bomb is None or at_heats is None:
        return None
    gain = _gross_energy_gain(resolver, system, best)
    return algebra.subtract(bomb, at_heats), algebra.multiply(algebra.power(gain, 2.0), resolver.model_variance(heats))


def _gross_energy_gain(resolver: Resolver, system: System, at: Node) -> Node:
    """Slope of a bomb system's result with respect to gross energy, both in MJ/kg, where that is `at`."""
    probe = "gross energy"
    node = resolver.system(system, gross_energy=probe)
    return algebra.substitute(algebra.slope(node, probe), {probe: at}) if node is not None else 0.0


def _system_status(
    resolver: Resolver, system: System, node: Node | None, i: int, roots: dict[tuple[str, int], Node]
) -> SystemStatus:
    if node is None:
        return SystemStatus(base=MISSING)
    used = algebra.names(node)
    required = tuple(sorted(n for n in used if not n.startswith(("@", "V@")) and not n.endswith("?")))
    optional = {n[:-1] for n in used if n.endswith("?") and is_listed(system, n[:-1])}
    assumed = resolver.assumed(system) or resolver.presumed(system) or assumes_nitrogen_factor(resolver, system)
    base = ASSUMED if assumed else OK
    factors = []
    for name in sorted(n for n in used if n.startswith("@") and n != "@nitrogen_factor"):
        parameter = resolver.parameters[name]
        if parameter.missing.any():
            amount = _amount_of(resolver, system, parameter.row)
            if amount is not None:
                key = f"amount of {parameter.row}"
                roots[key, i] = amount
                factors.append((name, key))
    bounds = []
    for k, bound in enumerate(system.domain):
        target = resolver.bound(bound, system, node)
        if target is not None:
            key = f"domain {k}"
            roots[key, i] = target
            bounds.append((key, bound.low, bound.high))
    return SystemStatus(
        base=base,
        required=required,
        optional=tuple(sorted(optional)),
        factors=tuple(factors),
        methods=tuple(system.requires_methods.items()),
        bounds=tuple(bounds),
    )


def is_listed(system: System, quantity: str) -> bool:
    """True where a quantity counted as zero must be told: the system, or a rule it rests on, says so."""
    direct = [s.absent for s in system.inputs.values() if s.quantity == quantity]
    if direct:
        return "zero_and_listed" in direct
    if quantity == "nitrogen_factor":  # crude protein of a feed is N x 6.25 by definition
        return system.nitrogen_factor != "feed"
    used = {s.quantity for s in system.inputs.values()}
    return any(rule.optional.get(quantity) for name in used if name for rule in derived_rules().get(name, ()))


def _amount_of(resolver: Resolver, system: System, row: str) -> Node | None:
    for symbol in system.inputs.values():
        if symbol.quantity and (symbol.quantity == ROW_AMOUNT.get(row) or row in symbol.quantity):
            return resolver.quantity(symbol.quantity, system.nitrogen_factor, filled=symbol.absent != "missing_input")
    return None


def assumes_nitrogen_factor(resolver: Resolver, system: System) -> bool:
    """True where protein had to be turned into nitrogen, or back, with a factor nobody stated."""
    if "nitrogen_factor" in resolver.columns or system.nitrogen_factor == "feed":
        return False
    uses = any(s.quantity in ("crude_protein", "carbohydrate_all", "carbohydrate_by_difference", "nitrogen")
               for s in system.inputs.values())  # fmt: skip
    as_protein = resolver.choices.get("nitrogen", -1) != 0
    if system.nitrogen_factor == "own":
        return uses and (not as_protein or resolver.signature.group == 1)
    return uses and as_protein


# ---- running it -----------------------------------------------------------------------------------------------


def evaluate(samples: Samples, systems: Sequence[System], pairs: Sequence[Pair] = ()) -> Blocks:
    """Blocks of a batch for the systems and pairs named. Every pair's systems must be among `systems`."""
    n, s, p = len(samples), len(systems), len(pairs)
    found = signatures(samples)
    blocks = Blocks(
        systems=tuple(x.id for x in systems),
        pairs=tuple(pairs),
        basis=found[0][0].working if found else "as_is",
        value=np.empty((s, n)),
        u=np.empty((s, n)),
        status=np.empty((s, n), dtype=np.int8),
        **{name: np.empty((p, n)) for name in PAIR_OUTPUTS},
    )
    columns = frozenset(samples.columns)
    wanted = tuple(BySystem(x) for x in systems)
    with np.errstate(all="ignore"):
        for signature, rows in found:
            _run(samples, plan(signature, columns, wanted, tuple(pairs)), rows, blocks)
    return blocks


def _run(samples: Samples, plan: Plan, rows: np.ndarray | None, blocks: Blocks) -> None:
    n = len(samples) if rows is None else len(rows)
    leaves = [leaf(samples, name) for name in plan.inputs]
    codes = samples.memo.get("group_codes")
    contributions = [_contributions(samples, status) for status in plan.status]
    outside = {key for key in plan.outputs if key[0].startswith(("amount", "domain"))}
    spare = {key: np.empty(min(n, CHUNK)) for key in outside} if rows is None else {}
    arrays = {name: getattr(blocks, name) for name in ("value", "u", *PAIR_OUTPUTS)}
    for low in range(0, n, CHUNK):
        high = min(low + CHUNK, n)
        here: Any = slice(low, high) if rows is None else rows[low:high]
        inputs = [
            take(column, name, plan.parameters, here, codes) for column, name in zip(leaves, plan.inputs, strict=True)
        ]
        direct = rows is None
        if direct:
            out = [spare[key][: high - low] if key in outside else arrays[key[0]][key[1], here] for key in plan.outputs]
        else:
            out = [np.empty(high - low) for _ in plan.outputs]
        plan.run(inputs, out)
        computed = dict(zip(plan.outputs, out, strict=True))
        if not direct:
            for key, array in computed.items():
                if key not in outside:
                    getattr(blocks, key[0])[key[1], here] = array
        for i, status in enumerate(plan.status):
            _set_status(blocks, plan, i, status, contributions[i], here, computed, codes)
        for q in range(len(blocks.pairs)):
            if ("at_heats", q) not in computed:
                for name in PAIR_OUTPUTS:
                    getattr(blocks, name)[q, here] = np.nan


def _contributions(samples: Samples, status: SystemStatus) -> list[np.ndarray]:
    """(n,) int8 arrays whose maximum with the base is the status; only for columns that have gaps."""
    found = []
    for column in status.required:
        found += _gap(samples, column, MISSING)
    for column in status.optional:
        found += _gap(samples, column, ASSUMED)
    for column, allowed in status.methods:
        found += _method(samples, column, allowed)
    return found


def _gap(samples: Samples, column: str, code: int) -> list[np.ndarray]:
    memo: dict[tuple[str, int], list[np.ndarray]] = samples.memo.setdefault("gaps", {})
    if (column, code) not in memo:
        empty = np.isnan(samples.columns[column])
        array = np.where(empty, code, OK).astype(np.int8)
        if column in samples.voided:
            array[samples.voided[column]] = PROBLEM
        memo[column, code] = [array] if array.any() else []
    return memo[column, code]


def _method(samples: Samples, column: str, allowed: tuple[str, ...]) -> list[np.ndarray]:
    if column not in samples.text:
        return [np.full(len(samples), ASSUMED, dtype=np.int8)]
    unique, inverse = np.unique(samples.text[column].astype(str), return_inverse=True)
    codes = [OK if u in allowed else ASSUMED if u in ("None", "", "nan") else METHOD for u in unique]
    return [np.array(codes, dtype=np.int8)[inverse]]


def _set_status(
    blocks: Blocks,
    plan: Plan,
    i: int,
    status: SystemStatus,
    contributions: list[np.ndarray],
    here: Any,
    computed: Mapping[tuple[str, int], np.ndarray],
    codes: np.ndarray | None,
) -> None:
    if not plan.computed[i]:
        blocks.status[i, here] = MISSING
        blocks.value[i, here] = np.nan
        blocks.u[i, here] = np.nan
        return
    if not contributions and not status.factors and not status.bounds and not plan.nonlinear[i]:
        blocks.status[i, here] = status.base
        return
    value = computed["value", i]
    found = np.full(len(value), status.base, dtype=np.int8)
    for array in contributions:
        np.maximum(found, array[here], out=found)
    for name, key in status.factors:
        assert codes is not None
        lacking = plan.parameters[name].missing[codes[here]] & (computed[key, i] > 1e-9)
        found[lacking] = np.maximum(found[lacking], NO_FACTOR)
    for key, low, high in status.bounds:
        x = computed[key, i]
        beyond = np.zeros(len(x), dtype=bool)
        if low is not None:
            beyond |= x < low
        if high is not None:
            beyond |= x > high
        found[beyond] = np.maximum(found[beyond], OUTSIDE)
    if plan.nonlinear[i]:
        found[~np.isfinite(value) & (found < METHOD)] = PROBLEM
    blocks.status[i, here] = found
    void = found >= MISSING
    if void.any():
        rows = np.arange(len(blocks.value[i]))[here][void] if isinstance(here, slice) else here[void]
        blocks.value[i, rows] = np.nan
        blocks.u[i, rows] = np.nan
        for p, pair in enumerate(blocks.pairs):
            if blocks.systems[i] in (pair.bomb, pair.composition, pair.heats):
                for name in PAIR_OUTPUTS:
                    getattr(blocks, name)[p, rows] = np.nan
