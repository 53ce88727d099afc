"""Quantities computed from others: the rules of derived.toml, in the order they are tried."""

from __future__ import annotations

import tomllib
from functools import cache

from energy.catalogue.records import DerivedRule
from energy.catalogue.tables import FOLDER
from energy.formula import parse


@cache
def derived_rules() -> dict[str, tuple[DerivedRule, ...]]:
    """quantity -> the ways to get it, best first."""
    raw = tomllib.loads((FOLDER / "derived.toml").read_text(encoding="utf-8"))
    rules: dict[str, list[DerivedRule]] = {}
    for entry in raw["rule"]:
        requires = tuple(str(r) for r in entry["requires"])
        rules.setdefault(entry["quantity"], []).append(
            DerivedRule(
                quantity=entry["quantity"],
                formula=parse(entry["formula"]),
                requires=tuple(r.removesuffix(":given") for r in requires),
                given=frozenset(r.removesuffix(":given") for r in requires if r.endswith(":given")),
                optional=dict(entry.get("optional", {})),
                words=entry["words"],
                source=entry["source"],
                source_status=entry["source_status"],
                unless_form=tuple(entry.get("unless_form", ())),
                assumed=str(entry.get("assumed", "")),
            )
        )
    return {name: tuple(found) for name, found in rules.items()}
