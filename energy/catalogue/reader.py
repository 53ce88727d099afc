"""Reads catalogue files into systems, and refuses entries that break a rule.

The same reader serves the files of this package and a house file of the user's own.
"""

from __future__ import annotations

import math
import re
import tomllib
from collections.abc import Callable, Mapping
from functools import cache
from pathlib import Path
from typing import Any

from energy.catalogue.chains import compose, read_tolerance
from energy.catalogue.records import (
    ABSENT,
    KINDS,
    ROUTES,
    SOURCE_STATUS,
    STAGES,
    TARGETS,
    TWINS,
    Bound,
    Check,
    Component,
    Publication,
    Symbol,
    System,
    weakest,
)
from energy.catalogue.tables import FOLDER, table
from energy.formula import Formula, parse
from energy.problems import CatalogueProblem, FormulaProblem, UnitProblem
from energy.quantities import dictionary
from energy.units import parse_unit

#: quantities that exist only by a rule of derived.toml
DERIVED_ONLY = ("carbohydrate_all", "solids")
#: with a factor of their own these leave a carbohydrate found by difference; fibre and acids do so by its rule
TAKEN_OUT = ("glycerol", "tagatose", "polydextrose", "unavailable_carbohydrate")
NOT_SYSTEMS = (
    "derived", "targets", "component_heats", "food_matrix", "measured_vs_computed", "silage_dry_matter",
    "handling_errors",
)  # fmt: skip


def _raw(path: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError, RecursionError) as error:
        raise CatalogueProblem(path.name, f"it cannot be read ({error}).", "Mend the TOML.") from None


def _publication(raw: Mapping[str, Any], path: Path) -> Publication:
    about = _need(raw, "publication", dict, path.name)
    return Publication(
        key=str(about.get("key", path.stem)),
        citation=str(_need(about, "citation", str, f"{path.name}, publication")),
        note=str(about.get("note", "")),
    )


def _entries(raw: Mapping[str, Any], kind: str, path: Path, read: Callable[[Any], list[System]]) -> list[System]:
    entries = raw.get(kind, [])
    if not isinstance(entries, list):
        raise CatalogueProblem(path.name, f"'{kind}' is one table.", f"Write it as [[{kind}]].")
    systems: list[System] = []
    for entry in entries:
        try:
            systems.extend(read(entry))
        except (KeyError, TypeError, ValueError, AttributeError, OSError) as error:
            name = entry.get("id", "?") if isinstance(entry, dict) else "?"
            what = f"something in it is missing or of the wrong kind ({type(error).__name__}: {error})."
            cure = "Compare it with an entry of the same kind."
            raise CatalogueProblem(f"{path.name}, {name}", what, cure) from None
    return systems


def read_file(path: Path) -> list[System]:
    """Every factor table and equation of one file. Raises CatalogueProblem with the place and the cure."""
    raw = _raw(path)
    publication = _publication(raw, path)
    tables = _entries(raw, "factor_table", path, lambda entry: _factor_table(entry, publication, path))
    return tables + _entries(raw, "equation", path, lambda entry: _equation(entry, publication, path))


def read_chains(path: Path, found: Mapping[str, System]) -> list[System]:
    """The chains of one file: entries put one into the other. found : the entries they are made of."""
    raw = _raw(path)
    publication = _publication(raw, path)

    def read(entry: Mapping[str, Any]) -> list[System]:
        return [compose(entry, _common(entry, publication, path), found)]

    return _entries(raw, "chain", path, read)


def _need(entry: Mapping[str, Any], key: str, kind: type, where: str) -> Any:
    if key not in entry:
        raise CatalogueProblem(where, f"'{key}' is missing.", f"Give {key} = ... .")
    if not isinstance(entry[key], kind):
        raise CatalogueProblem(where, f"'{key}' has the wrong type.", f"It must be a {kind.__name__}.")
    return entry[key]


def _text(entry: Mapping[str, Any], key: str, where: str) -> str:
    value = str(_need(entry, key, str, where)).strip()
    if not value:
        raise CatalogueProblem(where, f"'{key}' is empty.", f"Give {key} = ... .")
    return value


def _number(value: Any, what: str, where: str) -> float:
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not math.isfinite(value):
        raise CatalogueProblem(where, f"{what} = {value!r} is not a number.", "Give a finite number.")
    return float(value)


def _column(entry: Mapping[str, Any], where: str) -> str:
    """The column a table symbol reads; the table, its row and the column must be there."""
    file, row, column = str(entry["table"]), str(entry["row"]), str(_need(entry, "column", str, where))
    if not re.fullmatch(r"[A-Za-z0-9_]+\.csv", file) or not (FOLDER / file).is_file():
        raise CatalogueProblem(where, f"there is no table '{file[:60]}'.", "Name a CSV file of the catalogue.")
    found = [r for (slug, part), r in table(file).items() if part == row and entry.get("slug") in (None, slug)]
    if not found:
        raise CatalogueProblem(where, f"the table has no row '{row}'.", "See the CSV file.")
    if column not in found[0]:
        raise CatalogueProblem(where, f"the table has no column '{column}'.", f"One of: {', '.join(found[0])}.")
    for cell in (r[column] for r in found):
        try:
            float(cell)
        except ValueError:
            raise CatalogueProblem(where, f"column '{column}' holds '{cell}'.", "Choose a column of numbers.") from None
    return column


def _one_of(entry: Mapping[str, Any], key: str, allowed: Any, where: str, default: str | None = None) -> str:
    value = entry.get(key, default)
    if value is None:
        raise CatalogueProblem(where, f"'{key}' is missing.", f"One of: {', '.join(allowed)}.")
    if value not in allowed:
        raise CatalogueProblem(where, f"{key} = '{value}' is not known.", f"One of: {', '.join(allowed)}.")
    return str(value)


def _common(entry: Mapping[str, Any], publication: Publication, path: Path) -> dict[str, Any]:
    identity = str(_need(entry, "id", str, path.name))
    if not re.fullmatch(r"[A-Za-z][A-Za-z0-9_.]*", identity):
        raise CatalogueProblem(
            path.name, f"the id '{identity[:40]}' is not a plain name.", "Use letters, digits and _."
        )
    where = f"{path.name}, {identity}"
    targets = tuple(_need(entry, "target", list, where))
    if targets == ("any",):
        targets = TARGETS
    for target in targets:
        if target not in TARGETS:
            raise CatalogueProblem(where, f"target '{target}' is not known.", f"One of: {', '.join(TARGETS)}.")
    status = _one_of(entry, "source_status", SOURCE_STATUS, where)
    locator = str(_need(entry, "locator", str, where))
    if not publication.citation.strip() or not locator.strip():
        raise CatalogueProblem(where, "a number without its place in a source.", "Give citation and locator.")
    nitrogen = entry.get("nitrogen_factor", "own")
    if nitrogen not in ("own", "feed") and not 4 <= _number(nitrogen, "nitrogen_factor", where) <= 7:
        raise CatalogueProblem(where, f"nitrogen_factor {nitrogen} is not plausible.", "From 4 to 7, 'own' or 'feed'.")
    return {
        "id": identity,
        "title": _text(entry, "title", where),
        "targets": targets,
        "stage": _one_of(entry, "stage", STAGES, where),
        "kind": _one_of(entry, "kind", KINDS, where) if "kind" in entry else "",
        "route": _one_of(entry, "route", ROUTES, where),
        "law": bool(entry.get("law", False)),
        "body": str(entry.get("body", "")),
        "bomb_allowed": str(entry.get("bomb_allowed", "unknown")),
        "nitrogen_factor": nitrogen if nitrogen in ("own", "feed") else float(nitrogen),
        "citation": publication.citation,
        "locator": locator,
        "source_status": status,
        "excludes": tuple(entry.get("excludes", ())),
        "domain_words": str(entry.get("domain_words", "")),
        "note": str(entry.get("note", "")),
        "file": path.name,
        "checks": tuple(_check(c, where) for c in entry.get("check", ())),
        "tolerance": read_tolerance(entry["tolerance"], where) if "tolerance" in entry else None,
    }


def _check(entry: Mapping[str, Any], where: str) -> Check:
    tolerance = _number(_need(entry, "tolerance", object, where), "tolerance", where)
    if tolerance < 0:
        raise CatalogueProblem(where, f"the tolerance {tolerance} is negative.", "Give it as a positive number.")
    unit = str(_need(entry, "unit", str, where))
    _unit(unit, "fraction" if unit.startswith(("%", "fraction")) else "mass" if "/" not in unit else None, where)
    return Check(
        name=str(_need(entry, "name", str, where)),
        inputs={
            _known_quantity(str(k), where): _number(v, k, where) for k, v in _need(entry, "inputs", dict, where).items()
        },
        inputs_unit=str(entry.get("inputs_unit", "")),
        units={str(k): str(v) for k, v in entry.get("units", {}).items()},
        text={str(k): str(v) for k, v in entry.get("text", {}).items()},
        expected=_number(_need(entry, "expected", object, where), "expected", where),
        unit=str(_need(entry, "unit", str, where)),
        tolerance=tolerance,
        kind=_one_of(entry, "kind", ("published", "worked_by_hand"), where),
        source=str(_need(entry, "source", str, where)),
        source_status=_one_of(entry, "source_status", SOURCE_STATUS, where),
        note=str(entry.get("note", "")),
    )


def _known_quantity(name: str, where: str) -> str:
    if name not in dictionary() and name not in DERIVED_ONLY:
        raise CatalogueProblem(where, f"'{name}' is not a quantity of the dictionary.", "Add it to quantities.toml.")
    return name


def _absent(entry: Mapping[str, Any], where: str) -> tuple[str, str]:
    absent = _one_of(entry, "absent", ABSENT, where, default="missing_input")
    return absent, str(entry.get("absent_then", ""))


def _formula(text: str, where: str) -> Formula:
    try:
        return parse(text)
    except FormulaProblem as problem:
        raise CatalogueProblem(where, str(problem), "") from problem


def _unit(text: str, dimension: str | None, where: str) -> Any:
    try:
        return parse_unit(text, dimension)
    except UnitProblem as problem:
        raise CatalogueProblem(where, str(problem), "") from problem


def _split_any(text: str) -> tuple[str, bool]:
    bare = text.removesuffix(" any basis").removesuffix(" any")
    return bare, bare != text


# ---- factor tables ----------------------------------------------------------------------------------------


def _factor_table(entry: Mapping[str, Any], publication: Publication, path: Path) -> list[System]:
    common = _common(entry, publication, path)
    where = f"{path.name}, {common['id']}"
    leading = _one_of(entry, "leading", ("kJ", "kcal"), where)
    twin = _one_of(entry, "twin", TWINS, where)
    basis = _one_of(entry, "basis", ("as_is", "dry_matter", "any"), where)
    lines = _need(entry, "component", list, where)
    other = "kcal" if leading == "kJ" else "kJ"
    systems = [_sum_of_components(common, lines, leading, basis, path)]
    if twin == "factors":
        twin_id = f"{common['id']}_{other.lower()}"
        second = {**common, "id": twin_id, "title": f"{common['title']} ({other} factors)", "checks": ()}
        systems.append(_sum_of_components(second, lines, other, basis, path, twin="factors", twin_of=common["id"]))
        common["twin_id"] = twin_id
    systems[0] = _sum_of_components(common, lines, leading, basis, path, twin=twin)
    checks = systems[0].checks
    if twin == "factors":  # each check belongs to the sum in its own unit
        import dataclasses

        own = tuple(c for c in checks if c.unit.startswith(leading))
        theirs = tuple(c for c in checks if not c.unit.startswith(leading))
        systems = [dataclasses.replace(systems[0], checks=own), dataclasses.replace(systems[1], checks=theirs)]
    return systems


def _sum_of_components(
    common: Mapping[str, Any], lines: list[dict[str, Any]], unit: str, basis: str, path: Path, **extra: Any
) -> System:
    where = f"{path.name}, {common['id']}"
    symbols: dict[str, Symbol] = {}
    components: list[Component] = []
    terms: list[str] = []
    statuses = [common["source_status"]]
    for line in lines:
        component = _component(line, unit, where)
        if component.quantity in {c.quantity for c in components}:
            raise CatalogueProblem(where, f"'{component.quantity}' is counted twice.", "Keep one component of it.")
        components.append(component)
        statuses.append(component.source_status)
        names = [_amount_symbol(q, component if q == component.quantity else None, basis, symbols, where)
                 for q in (component.quantity, *component.subtract)]  # fmt: skip
        amount = names[0] if len(names) == 1 else f"({' - '.join(names)})"
        if component.factor is None:
            factor = _table_symbol(line, symbols, where)
            terms.append(f"{factor}*{amount}")
        elif component.factor != 0.0:
            terms.append(f"{component.factor:g}*{amount}")
        else:
            terms.append(f"0*{amount}")
    subtracted = {q for c in components for q in c.subtract}
    return System(
        **{**common, "source_status": weakest(statuses)},
        takes_out=tuple(c.quantity for c in components if c.quantity in TAKEN_OUT and c.quantity not in subtracted),
        formula=_formula(" + ".join(terms), where),
        symbols=symbols,
        result_unit=f"{unit}/g",
        result_scale=_unit(f"{unit}/g", "energy", where).scale,
        result_basis=basis,
        energy_family="J" if unit == "kJ" else "cal",
        by_group=any("table" in line and "slug" not in line for line in lines),
        components=tuple(components),
        **extra,
    )


def _component(line: Mapping[str, Any], unit: str, where: str) -> Component:
    name = str(_need(line, "name", str, where))
    place = f"{where}, {name}"
    if "table" not in line and unit not in line:
        raise CatalogueProblem(place, f"no factor in {unit} per g.", f"Give {unit} = ... , or twin = 'none'.")
    absent, then = _absent(line, place)
    return Component(
        name=name,
        quantity=_known_quantity(str(_need(line, "quantity", str, place)), place),
        subtract=tuple(_known_quantity(str(q), place) for q in line.get("subtract", ())),
        factor=None if "table" in line else _number(line[unit], unit, place),
        absent=absent,
        absent_then=then,
        source_status=_one_of(line, "source_status", SOURCE_STATUS, place),
        locator=str(line.get("locator", "")),
        note=str(line.get("note", "")),
    )


def quantity_symbol(quantity: str) -> str:
    """The symbol a quantity gets in a generated formula."""
    entry = dictionary().get(quantity)
    return entry.symbol if entry else {"carbohydrate_all": "C_all", "solids": "S_all"}[quantity]


def _amount_symbol(
    quantity: str, component: Component | None, basis: str, symbols: dict[str, Symbol], where: str
) -> str:
    _known_quantity(quantity, where)
    name = quantity_symbol(quantity)
    if name not in symbols or component is not None:
        absent = component.absent if component else "zero"
        then = component.absent_then if component else ""
        symbols[name] = Symbol(name=name, unit="g/g", quantity=quantity, basis=basis, absent=absent, absent_then=then)
    return name


def _table_symbol(line: Mapping[str, Any], symbols: dict[str, Symbol], where: str) -> str:
    name = "f_" + str(line["row"])
    symbols[name] = Symbol(
        name=name,
        unit=f"{line['unit']}/g",
        table=str(line["table"]),
        row=str(line["row"]),
        column=_column(line, where),
        slug=line.get("slug"),
    )
    return name


# ---- equations --------------------------------------------------------------------------------------------


def _equation(entry: Mapping[str, Any], publication: Publication, path: Path) -> list[System]:
    common = _common(entry, publication, path)
    where = f"{path.name}, {common['id']}"
    formula = _formula(str(_need(entry, "formula", str, where)), where)
    heats = _formula(entry["heats"], where) if "heats" in entry else None
    result, any_basis = _split_any(str(_need(entry, "result", str, where)))
    usual = "fraction" if common["stage"] in ("digestibility", "other") else "energy"
    dimension = _one_of(entry, "dimension", ("energy", "fraction", "mass_fraction", "mass"), where, default=usual)
    unit = _unit(result, dimension, where)
    if not any_basis and unit.basis is None and dimension in ("energy", "mass_fraction"):
        raise CatalogueProblem(where, f"result '{result}' has no basis.", "Write for example 'kcal/g as is', or 'any'.")
    declared = _need(entry, "symbols", dict, where)
    symbols = {name: _symbol(name, s, unit.scale, where) for name, s in declared.items()}
    unknown = sorted((formula.symbols | (heats.symbols if heats else frozenset())) - set(symbols))
    if unknown:
        raise CatalogueProblem(where, f"the formula uses {', '.join(unknown)}.", "Say what they are under symbols.")
    # a share, a ratio or an amount per head stands on no basis
    basis = "any" if any_basis or dimension in ("fraction", "mass") else (unit.basis or "as_is")
    answer = Symbol(name="result", unit=str(entry["result"]), scale=unit.scale, basis=basis)
    bounds = [_bound(b, symbols | {"result": answer}, dimension, where) for b in entry.get("domain", ())]
    spoken_of = formula.symbols | (heats.symbols if heats else frozenset()) | {b.symbol for b in bounds}
    unused = sorted(set(symbols) - spoken_of)
    if unused:
        raise CatalogueProblem(where, f"symbols never used: {', '.join(unused)}.", "Take them out.")
    return [_system_of(common, entry, formula, heats, symbols, unit, basis, bounds)]


def _bound(entry: Mapping[str, Any], symbols: Mapping[str, Symbol], dimension: str, where: str) -> Bound:
    """A limit of validity; in the unit of its symbol, or in one of its own where the paper prints it in another."""
    symbol = symbols.get(str(entry.get("symbol")))
    if symbol is None:
        what = f"the domain names '{entry.get('symbol')}'."
        raise CatalogueProblem(where, what, "Use one of the entry's symbols, or 'result'.")
    low, high = (None if entry.get(k) is None else _number(entry[k], k, where) for k in ("low", "high"))
    text, scale, basis = symbol.unit, symbol.scale, symbol.basis
    if "unit" in entry:
        text = str(entry["unit"])
        known = dictionary().get(str(symbol.quantity))
        kind = known.dimension if known else "mass_fraction" if symbol.quantity else dimension
        unit = _unit(text, kind, where)
        scale, basis = unit.scale, unit.basis
    return Bound(symbol.name, low, high, str(entry.get("locator", "")), text, scale, basis)


def _system_of(
    common: dict[str, Any],
    entry: Mapping[str, Any],
    formula: Formula,
    heats: Formula | None,
    symbols: dict[str, Symbol],
    unit: Any,
    basis: str,
    bounds: list[Bound],
) -> System:
    return System(
        **common,
        formula=formula,
        heats=heats,
        symbols=symbols,
        result_unit=unit.display,
        result_scale=unit.scale,
        result_basis=basis,
        energy_family=unit.energy_family or "",
        by_group=any(s.table and s.slug is None and s.fallback is None for s in symbols.values()),
        residual_sd=None if "residual_sd" not in entry else _number(entry["residual_sd"], "residual_sd", common["id"]),
        r2=None if "r2" not in entry else _number(entry["r2"], "r2", common["id"]),
        domain=tuple(bounds),
        requires_methods={k: tuple(v) for k, v in entry.get("requires_methods", {}).items()},
    )


def _symbol(name: str, entry: Mapping[str, Any], result_scale: float, where: str) -> Symbol:
    place = f"{where}, symbol {name}"
    if sum(k in entry for k in ("quantity", "constant", "table")) != 1:
        raise CatalogueProblem(place, "it is neither a quantity, a constant nor a table.", "Give exactly one.")
    text, any_basis = _split_any(str(_need(entry, "unit", str, place)))
    common: dict[str, Any] = {
        "name": name,
        "unit": str(entry["unit"]),
        "note": str(entry.get("note", entry.get("u_note", ""))),
    }
    if "quantity" in entry:
        quantity = _known_quantity(str(entry["quantity"]), place)
        known = dictionary().get(quantity)
        unit = _unit(text, known.dimension if known else "mass_fraction", place)
        absent, then = _absent(entry, place)
        fixed = known is not None and known.basis != "stated"
        if not any_basis and not fixed and unit.basis is None:
            raise CatalogueProblem(place, f"unit '{text}' has no basis.", "Write for example 'g/g as is', or 'any'.")
        basis = "any" if any_basis else (None if fixed else unit.basis)
        return Symbol(**common, quantity=quantity, scale=unit.scale, basis=basis, absent=absent, absent_then=then)
    unit = _unit(text, None, place) if text not in ("", "1") else None
    # energies per gram enter a formula in the unit of its result, percentages as fractions
    scale = 1.0 if unit is None else unit.scale / (result_scale if unit.dimension == "energy" else 1.0)
    scale = 1.0 if abs(scale - 1.0) < 1e-12 else scale
    if "constant" in entry:
        return Symbol(
            **common,
            constant=_number(entry["constant"], "constant", place),
            scale=scale,
            u=_number(entry.get("u", 0.0), "u", place),
        )
    fallback = entry.get("fallback")
    return Symbol(
        **common,
        table=str(entry["table"]),
        row=str(entry["row"]),
        column=_column(entry, place),
        slug=entry.get("slug"),
        fallback=None if fallback is None else float(fallback),
        scale=scale,
        u=float(entry.get("u", 0.0)),
        fallback_u=float(entry.get("fallback_u", 0.0)),
    )


# ---- the whole catalogue --------------------------------------------------------------------------------------


@cache
def systems() -> dict[str, System]:
    """Every shipped system by id."""
    found: dict[str, System] = {}
    paths = [path for path in sorted(FOLDER.glob("*.toml")) if path.stem not in NOT_SYSTEMS]
    for path in paths:
        _join(found, read_file(path))
    for path in paths:  # chains are made of entries, which may stand in any file
        _join(found, read_chains(path, found))
    return found


def with_house(path: str | Path) -> dict[str, System]:
    """The shipped systems and those of a house file; the same rules hold for both."""
    found = dict(systems())
    _join(found, read_file(Path(path)))
    _join(found, read_chains(Path(path), found))
    return found


def _join(found: dict[str, System], more: list[System]) -> None:
    for system in more:
        if system.id in found:
            raise CatalogueProblem(system.file, f"the id '{system.id}' is there twice.", "Choose another id.")
        found[system.id] = system
