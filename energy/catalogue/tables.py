"""Printed tables and small files of facts that stand beside the catalogue's equations."""

from __future__ import annotations

import csv
import tomllib
from functools import cache
from pathlib import Path
from typing import Any

from energy.catalogue.records import TARGETS

FOLDER = Path(__file__).parent


@cache
def table(file: str) -> dict[tuple[str, str], dict[str, str]]:
    """A printed table: (slug, component) -> its row as text. `component` is empty where a table has none."""
    with (FOLDER / file).open(encoding="utf-8", newline="") as handle:
        return {(row["slug"], row.get("component", "")): row for row in csv.DictReader(handle)}


@cache
def food_groups() -> dict[str, dict[str, str]]:
    """slug -> title and nitrogen factor (empty where the group does not fix one) of every food group."""
    return {slug: row for (slug, _), row in table("food_groups.csv").items()}


@cache
def targets() -> dict[str, dict[str, Any]]:
    """Defaults per target, with their reasons."""
    raw = tomllib.loads((FOLDER / "targets.toml").read_text(encoding="utf-8"))
    return {name: entry for name, entry in raw.items() if name in TARGETS}


@cache
def food_matrix() -> tuple[dict[str, Any], ...]:
    """Where food structure hides energy from the eater: food groups, forms, words, source."""
    raw = tomllib.loads((FOLDER / "food_matrix.toml").read_text(encoding="utf-8"))
    return tuple(raw["matrix"])


@cache
def handling_errors() -> dict[str, list[dict[str, Any]]]:
    """`error`: handling errors with words, commonness and usual size; `determination`: what settles which."""
    return tomllib.loads((FOLDER / "handling_errors.toml").read_text(encoding="utf-8"))


@cache
def silage_corrections() -> dict[str, dict[str, Any]]:
    """Text of the column `form` -> constant and slope of the dry matter correction, with its citation."""
    raw = tomllib.loads((FOLDER / "silage_dry_matter.toml").read_text(encoding="utf-8"))
    return {entry["form"]: {**entry, "source": raw["publication"]["citation"]} for entry in raw["correction"]}
