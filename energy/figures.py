"""What an assessment says in words of one figure: what was assumed, what is missing, what lies outside."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from energy.catalogue.derived import derived_rules
from energy.catalogue.records import System
from energy.display import Display
from energy.evaluate import METHOD, MISSING, NO_FACTOR, OUTSIDE, BySystem, assumes_nitrogen_factor, is_listed, plan
from energy.quantities import dictionary
from energy.resolve import Resolver, signatures
from energy.samples import Samples

if TYPE_CHECKING:
    from energy.assessment import Assessment

#: (needed, given, words): quantities that sound alike and never stand in for each other
NOT_THE_SAME = (
    ("crude_fibre", "total_dietary_fibre", "total dietary fibre is not crude fibre and is not taken for it"),
    ("total_dietary_fibre", "crude_fibre", "crude fibre is not total dietary fibre and is not taken for it"),
    (
        "energy_digestibility",
        "organic_matter_digestibility",
        "the digestibility of organic matter is not that of energy",
    ),
    ("ndf", "total_dietary_fibre", "total dietary fibre is not NDF and is not taken for it"),
    ("ndf", "crude_fibre", "crude fibre is not NDF and is not taken for it"),
)

#: a basis in the middle of a sentence
ON = {
    "as_is": "as is",
    "dry_matter": "per dry matter",
    "as_analysed": "as analysed",
    "organic_matter": "per organic matter",
}


def quantity_title(name: str) -> str:
    """What people call a quantity."""
    known = dictionary().get(name)
    return known.title if known else name.replace("_", " ")


def figure_reasons(a: Assessment, i: int) -> np.ndarray:
    """(n,) text per figure of system i: what was assumed, what is missing, what lies outside; '' if nothing."""
    system = a.choice.systems[i]
    found = np.full(len(a.samples), "", dtype=object)
    wanted = tuple(BySystem(s) for s in a.choice.systems)
    columns = frozenset(a.samples.columns)
    for signature, rows in signatures(a.samples):
        here = np.arange(len(a.samples)) if rows is None else rows
        made = plan(signature, columns, wanted, a.blocks.pairs)
        status = made.status[i]
        resolver = Resolver(signature, columns)
        if not made.computed[i]:
            found[here] = _missing_words(a.samples, resolver, system)
            continue
        fixed = [*_fixed_words(resolver, system), *_unit_words(system, a.shown)]
        notes: list[tuple[np.ndarray, str]] = []
        for column in status.required:
            empty = np.isnan(a.samples.columns[column][here])
            bad = a.samples.voided.get(column, np.zeros(len(a.samples), dtype=bool))[here]
            notes.append((bad, f"{quantity_title(column)}: the value given could not be used"))
            notes.append((empty & ~bad, f"needs {quantity_title(column)}: not given"))
            unknown = np.isnan(a.samples.u[column][here]) & ~empty & (a.blocks.status[i, here] < MISSING)
            notes.append(
                (unknown, f"its u is not known: none is given for {quantity_title(column)}, and there is no default")
            )
        for column in (c for c in status.optional if is_listed(system, c)):
            gone = np.isnan(a.samples.columns[column][here])
            notes.append((gone, _zero_words(system, column)))
        for column, allowed in status.methods:
            stated = stated_methods(a.samples, column)[here]
            words = f"{column.replace('_', ' ')} not stated: taken as {' or '.join(allowed).replace('_', ' ')}"
            notes.append((stated == "", words))
        code = a.blocks.status[i, here]
        notes.append((code == NO_FACTOR, "the food group has no factor for a component that is present"))
        impossible = a.findings.figures.get(i)
        if impossible is not None:
            notes += [(impossible[here] == text, text) for text in set(impossible[here]) - {""}]
        notes.append((code == METHOD, f"needs another method: {_methods(system)}"))
        notes.append((code == OUTSIDE, f"outside its domain: {'; '.join(b.words for b in system.domain)}"))
        found[here] = _join(fixed, notes, len(here))
    return found


def stated_methods(samples: Samples, column: str) -> np.ndarray:
    """(n,) the method a table states in a method column, '' where it states none."""
    if column not in samples.text:
        return np.full(len(samples), "", dtype=object)
    return np.array([str(m) if m and m == m else "" for m in samples.text[column]], dtype=object)


def _join(fixed: list[str], notes: list[tuple[np.ndarray, str]], n: int) -> np.ndarray:
    """Texts per row, made once per combination of notes that occurs."""
    live = [(mask, text) for mask, text in notes if text and mask.any()]
    code = np.zeros(n, dtype=np.int64)
    for k, (mask, _) in enumerate(live[:60]):
        code |= mask.astype(np.int64) << k
    unique, inverse = np.unique(code, return_inverse=True)
    texts = [
        "; ".join(dict.fromkeys([*[t for k, (_, t) in enumerate(live[:60]) if c >> k & 1], *fixed])) for c in unique
    ]
    return np.array(texts, dtype=object)[inverse]


def _fixed_words(resolver: Resolver, system: System) -> list[str]:
    words = [_zero_sentence(quantity, then) for quantity, then in resolver.assumed(system).items()]
    words += resolver.presumed(system)
    if assumes_nitrogen_factor(resolver, system):
        words.append("nitrogen factor 6.25 assumed for the protein given")
    return words


def _unit_words(system: System, shown: Display) -> list[str]:
    """Which figure is the source's own and which is a conversion, in the unit shown."""
    if system.route != "composition" or system.stage == "GE":
        return []
    if system.twin.startswith("conversion"):
        return [f"second unit by conversion, 1 kcal = {system.twin.removeprefix('conversion_')} kJ"]
    words = []
    in_joules = shown.family == "J" or shown.unit == "MJ/kg"
    if system.energy_family == "cal" and in_joules:
        words.append("summed in kcal; shown by 1 kcal = 4.184 kJ, which is not the source's own")
    if system.energy_family == "J" and shown.family == "cal":
        words.append("summed in kJ; shown by 1 kcal = 4.184 kJ, which is not the source's own")
    if shown.unit.startswith("Btu"):
        words.append("shown by 1 Btu/lb = 2326 J/kg, which is not the source's own")
    return words


def _zero_words(system: System, quantity: str) -> str:
    for symbol in system.inputs.values():
        if symbol.quantity == quantity:
            if symbol.absent == "zero":
                return ""
            return _zero_sentence(quantity, symbol.absent_then)
    if quantity == "nitrogen_factor":
        return "nitrogen factor not given: 6.25 assumed"
    for rules in derived_rules().values():
        for rule in rules:
            if rule.optional.get(quantity):
                return _zero_sentence(quantity, rule.optional[quantity])
    return ""


def _zero_sentence(quantity: str, then: str) -> str:
    return f"{quantity_title(quantity)} not given: taken as 0" + (f" (any there is counts {then})" if then else "")


def _missing_words(samples: Samples, resolver: Resolver, system: System) -> str:
    if system.by_group and resolver.signature.group == 0:
        return "needs a food group of the table; none, or an unknown one, is given"
    lacking = [
        quantity_title(s.quantity)
        for s in system.inputs.values()
        if s.quantity
        and s.name in system.formula.symbols
        and s.absent == "missing_input"
        and resolver.symbol(s, system) is None
    ]
    if not lacking:
        return "cannot be computed from what is given"
    working = resolver.signature.working
    if resolver.quantity("dry_matter") is None:  # given, but on a basis nothing leads away from
        for symbol in system.inputs.values():
            name = str(symbol.quantity)
            stated = resolver.stated.get(name) or (resolver.stated.get("nitrogen") if name == "crude_protein" else None)
            goal = working if symbol.basis in (None, "any") else symbol.basis
            if stated not in (None, goal) and quantity_title(name) in lacking:
                return f"needs dry matter: {quantity_title(name)} is given {ON[stated]}, but needed {ON[str(goal)]}"
    other = [words for needed, given, words in NOT_THE_SAME
             if quantity_title(needed) in lacking and given in resolver.columns and needed not in resolver.columns]  # fmt: skip
    return "; ".join([f"needs {', '.join(dict.fromkeys(lacking))}: not given, nor derivable on this basis", *other])


def _methods(system: System) -> str:
    return "; ".join(f"{c.replace('_', ' ')} {' or '.join(m)}" for c, m in system.requires_methods.items())
