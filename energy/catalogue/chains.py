"""Chains: entries put one into the other, so that GE -> digestibility -> DE -> ME -> NE is one formula.

A chain is a formula like any other: it is differentiated, converted and shown by the same code. What a step gives is
put where a later step asks for that quantity; where the two stand on different bases, dry matter is divided out or in.
"""

from __future__ import annotations

import ast
import dataclasses
from collections.abc import Mapping
from typing import Any

from energy.catalogue.records import Bound, Symbol, System, Tolerance, weakest
from energy.formula import Formula, parse
from energy.problems import CatalogueProblem, FormulaProblem, UnitProblem
from energy.units import parse_unit

#: what a step gives to the steps after it, by stage and kind
FEEDS = {
    ("GE", ""): "gross_energy", ("digestibility", ""): "energy_digestibility",
    ("digestibility", "organic_matter"): "organic_matter_digestibility", ("DE", ""): "digestible_energy",
    ("UE", ""): "urinary_energy", ("CH4E", ""): "methane_energy", ("ME", ""): "metabolizable_energy",
    ("ME", "AME"): "apparent_metabolizable_energy", ("ME", "AMEn"): "apparent_metabolizable_energy_n_corrected",
    ("NE", ""): "net_energy",
}  # fmt: skip
BASIS_WORDS = {"as_is": "as is", "dry_matter": "DM", "organic_matter": "OM"}
#: the name of dry matter in a composed formula
DRY = "DM_basis"


@dataclasses.dataclass
class _Part:
    """What a step has given: its formula as a syntax tree, in a unit of `scale`, on `basis`."""

    tree: ast.expr
    scale: float
    basis: str


def compose(entry: Mapping[str, Any], common: dict[str, Any], found: Mapping[str, System]) -> System:
    """A chain as a system. Raises CatalogueProblem where its steps do not fit."""
    where = f"{common['file']}, {common['id']}"
    steps = [_step(str(identity), found, where) for identity in entry.get("steps", ())]
    if len(steps) < 2:
        raise CatalogueProblem(where, "a chain has at least two steps.", "Give steps = [id, id, ...].")
    _fit_together(steps, common["targets"], where)
    # a step that may stand on any basis takes that of the steps that may not
    basis = next((s.result_basis for s in steps if s.result_basis != "any"), "any")
    steps = [_on(s, basis) if s.result_basis == "any" else s for s in steps]
    symbols: dict[str, Symbol] = {}
    bounds: list[Bound] = []
    fed: dict[str, _Part] = {}
    for step in steps:
        part = _put_in(step, fed, symbols, bounds)
        fed[_feed(step, where, last=step is steps[-1])] = part
    last, part = steps[-1], fed[_feed(steps[-1], where, last=True)]
    used = {n.id for n in ast.walk(part.tree) if isinstance(n, ast.Name)}
    heats = _own_heats(entry, found, symbols, where)
    kept = used | (heats.symbols if heats else set()) | {b.symbol for b in bounds}
    methods: dict[str, tuple[str, ...]] = {}
    for step in steps:
        methods |= dict(step.requires_methods)
    words = dict.fromkeys([common["domain_words"], *(s.domain_words for s in steps)])
    status = weakest([common["source_status"], *(s.source_status for s in steps)])
    return System(
        **{**common, "source_status": status, "domain_words": "; ".join(w for w in words if w)},
        formula=_formula(part.tree, where),
        heats=heats,
        symbols={name: symbol for name, symbol in symbols.items() if name in kept},
        result_unit=last.result_unit,
        result_scale=last.result_scale,
        result_basis=part.basis,
        energy_family=last.energy_family,
        residual_sd=None,
        domain=(*bounds, *(b for b in last.domain if b.symbol == "result")),
        requires_methods=methods,
        steps=tuple(s.id for s in steps),
    )


def _fit_together(steps: list[System], targets: tuple[str, ...], where: str) -> None:
    for step in steps:
        rivals = {s.id for s in steps} & set(step.excludes)
        if rivals:
            what = f"'{step.id}' must not be combined with {', '.join(sorted(rivals))}."
            raise CatalogueProblem(where, what, "Take the steps of one publication.")
        strangers = set(targets) - set(step.targets)
        if strangers:
            what = f"the step '{step.id}' is not for {', '.join(sorted(strangers))}."
            raise CatalogueProblem(where, what, "Choose a step for that species.")


def _step(identity: str, found: Mapping[str, System], where: str) -> System:
    if identity not in found:
        raise CatalogueProblem(where, f"there is no step '{identity}'.", "Name entries of the catalogue.")
    return found[identity]


def _feed(step: System, where: str, last: bool) -> str:
    found = FEEDS.get((step.stage, step.kind))
    if found is None and not last:
        raise CatalogueProblem(where, f"no later step can take what '{step.id}' gives.", "Put it last.")
    return found or "result"


def _put_in(step: System, fed: Mapping[str, _Part], symbols: dict[str, Symbol], bounds: list[Bound]) -> _Part:
    """A step's tree with what earlier steps gave in place of its symbols."""
    names: dict[str, ast.expr] = {}
    for symbol in step.symbols.values():
        part = fed.get(symbol.quantity) if symbol.quantity else None
        if part is not None and symbol.name in step.formula.symbols:
            names[symbol.name] = _converted(part, symbol, symbols)
            continue
        names[symbol.name] = ast.Name(_named(symbol, symbols), ast.Load())
    for b in step.domain:
        if b.symbol != "result" and isinstance(names[b.symbol], ast.Name):
            bounds.append(dataclasses.replace(b, symbol=names[b.symbol].id))  # type: ignore[attr-defined]
    tree = _Rename(names).visit(ast.parse(step.formula.text.replace("\n", " "), mode="eval").body)
    return _Part(tree, step.result_scale, step.result_basis)


class _Rename(ast.NodeTransformer):
    """Puts trees in place of names; the names of functions stay."""

    def __init__(self, names: Mapping[str, ast.expr]):
        self.names = names

    def visit_Name(self, node: ast.Name) -> ast.expr:
        """A symbol becomes what it stands for."""
        return self.names.get(node.id, node)

    def visit_Call(self, node: ast.Call) -> ast.expr:
        """Only the arguments of a function are symbols."""
        return ast.Call(node.func, [self.visit(a) for a in node.args], [])


def _converted(part: _Part, symbol: Symbol, symbols: dict[str, Symbol]) -> ast.expr:
    tree = part.tree
    factor = part.scale / symbol.scale
    if abs(factor - 1.0) > 1e-12:
        tree = ast.BinOp(ast.Constant(float(f"{factor:.15g}")), ast.Mult(), tree)
    if symbol.basis in (None, "any", part.basis) or part.basis == "any":
        return tree
    name = _named(Symbol(name=DRY, unit="fraction", quantity="dry_matter"), symbols)
    dry = ast.Name(name, ast.Load())
    if (part.basis, symbol.basis) == ("as_is", "dry_matter"):
        return ast.BinOp(tree, ast.Div(), dry)
    return ast.BinOp(tree, ast.Mult(), dry)


def _named(symbol: Symbol, symbols: dict[str, Symbol]) -> str:
    """The symbol's name in the chain: its own, or a numbered one where another meaning has taken that."""
    name, number = symbol.name, 2
    while name in symbols and dataclasses.replace(symbols[name], name="", note="") != dataclasses.replace(
        symbol, name="", note=""
    ):
        name, number = f"{symbol.name}_{number}", number + 1
    symbols[name] = dataclasses.replace(symbol, name=name)
    return name


def _own_heats(
    entry: Mapping[str, Any], found: Mapping[str, System], symbols: dict[str, Symbol], where: str
) -> Formula | None:
    """The gross energy by the chain's own heats, in the unit and on the basis of its gross energy."""
    if "own_heats" not in entry:
        return None
    heats = _step(str(entry["own_heats"]), found, where)
    energy = next((s for s in symbols.values() if s.quantity == "gross_energy"), None)
    if energy is None:
        raise CatalogueProblem(where, "own_heats without a measured gross energy.", "Leave own_heats out.")
    if heats.result_basis == "any":
        heats = _on(heats, str(energy.basis))
    return _formula(_converted(_put_in(heats, {}, symbols, []), energy, symbols), where)


def _on(system: System, basis: str) -> System:
    """A system that may stand on any basis, on one; shares and ratios stay as they are."""
    if system.stage in ("digestibility", "other"):
        return system
    words = BASIS_WORDS.get(basis, "any basis")
    symbols = {
        n: dataclasses.replace(s, basis=basis, unit=f"{s.unit.removesuffix(' any basis').removesuffix(' any')} {words}")
        if s.basis == "any"
        else s
        for n, s in system.symbols.items()
    }
    return dataclasses.replace(system, symbols=symbols, result_basis=basis)


def _formula(tree: ast.expr, where: str) -> Formula:
    try:
        return parse(ast.unparse(ast.fix_missing_locations(tree)))
    except FormulaProblem as problem:
        raise CatalogueProblem(where, str(problem), "Use fewer steps.") from problem


def read_tolerance(entry: Mapping[str, Any], where: str) -> Tolerance:
    """The energy tolerance of a law."""
    absolute = entry.get("absolute")
    try:
        size = None if absolute is None else float(absolute) * parse_unit(str(entry["unit"]), "energy").scale
    except UnitProblem as problem:
        raise CatalogueProblem(where, str(problem), "") from problem
    return Tolerance(
        words=str(entry["words"]),
        below=None if "below" not in entry else float(entry["below"]),
        above=None if "above" not in entry else float(entry["above"]),
        absolute=size,
        locator=str(entry["locator"]),
        source_status=str(entry["source_status"]),
    )


def up_to(system: System, count: int, found: Mapping[str, System]) -> System:
    """The first steps of a chain as a system of their own, for the energies between its ends."""
    steps = [found[identity] for identity in system.steps[:count]]
    if count == 1:
        return steps[0]
    last = steps[-1]
    common = {
        "id": last.id,
        "title": last.title,
        "targets": system.targets,
        "stage": last.stage,
        "kind": last.kind,
        "route": system.route,
        "nitrogen_factor": last.nitrogen_factor,
        "citation": last.citation,
        "locator": last.locator,
        "source_status": last.source_status,
        "domain_words": "",
        "file": system.file,
    }
    return compose({"steps": system.steps[:count]}, common, found)
