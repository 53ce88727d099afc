"""The dictionary of quantities, read from quantities.toml once.

Internal units: mass fractions and other fractions as kg/kg, energies as MJ/kg, density as g/ml, amounts of a trial as
kg and MJ, gas production as ml/g.
"""

from __future__ import annotations

import re
import tomllib
from dataclasses import dataclass, field
from functools import cache
from pathlib import Path
from typing import Any

#: text columns of a table; `sample_id` is needed, the rest are optional
TEXT_COLUMNS = (
    "sample_id",
    "name",
    "target",
    "food_group",
    "form",
    "origin",
    "batch",
    "note",
)

#: what one unit of a TOML range or default_u is worth in internal units
DISPLAY_SCALE = {
    "mass_fraction": 0.01,
    "fraction": 0.01,
    "energy": 1.0,
    "density": 1.0,
    "number": 1.0,
    "mass": 1.0,
    "heat": 1.0,
    "gas_yield": 5.0,
}


@dataclass(frozen=True, slots=True)
class Quantity:
    """One entry of the dictionary.

    dimension : mass_fraction, fraction, energy (per mass), density, number, mass, heat or gas_yield.
    basis : "stated" (the table must say it) or the one the quantity has by its meaning.
    range : plausible bounds in internal units. default_u : (absolute, relative) in internal units. absent_u : standard
    uncertainty of a value that is not given and therefore counted as zero. own_matter : of faeces or excreta; the table
    must say that it is of their dry matter, since only the feed's moisture is in it.
    """

    name: str
    title: str
    symbol: str
    dimension: str
    basis: str
    range: tuple[float, float]
    synonyms: tuple[str, ...]
    infoods: tuple[str, ...] = ()
    method_column: str | None = None
    methods: tuple[str, ...] = ()
    default_u: tuple[float, float] | None = None
    default_u_source: str = ""
    default_u_status: str = ""
    absent_u: float = 0.0
    note: str = ""
    own_matter: bool = False
    header_implies: dict[str, str] = field(default_factory=dict)


def normal_form(text: str) -> str:
    """A header word without case, punctuation and spacing: 'Crude  Protein' and 'crude_protein' meet."""
    return re.sub(r"[\s_\-,;:.()/]+", " ", text.strip().lower()).strip()


@cache
def dictionary() -> dict[str, Quantity]:
    """name -> Quantity, in the order of the file."""
    raw = tomllib.loads(Path(__file__).with_suffix(".toml").read_text(encoding="utf-8"))
    shared = raw.pop("_default_u")
    return {name: _quantity(name, entry, shared) for name, entry in raw.items()}


def _quantity(name: str, entry: dict[str, Any], shared: dict[str, Any]) -> Quantity:
    scale = DISPLAY_SCALE[entry["dimension"]]
    low, high = entry["range"]
    default = entry.get("default_u")
    source, status = entry.get("default_u_source", ""), entry.get("default_u_status", "")
    if isinstance(default, str):
        default, source, status = (shared[default][key] for key in ("value", "source", "status"))
    return Quantity(
        name=name,
        title=entry["title"],
        symbol=entry["symbol"],
        dimension=entry["dimension"],
        basis=entry["basis"],
        range=(low * scale, high * scale),
        synonyms=tuple(entry["synonyms"]),
        infoods=tuple(entry.get("infoods", ())),
        method_column=entry.get("method_column"),
        methods=tuple(entry.get("methods", ())),
        default_u=(default[0] * scale, default[1]) if default else None,
        default_u_source=source,
        default_u_status=status,
        absent_u=float(entry.get("absent_u", 0.0)) * scale,
        note=entry.get("note", ""),
        own_matter=bool(entry.get("own_matter", False)),
        header_implies=dict(entry.get("header_implies", {})),
    )


@cache
def synonym_index() -> dict[str, str]:
    """normal form of every name, synonym and INFOODS tagname -> quantity name."""
    index: dict[str, str] = {}
    for quantity in dictionary().values():
        for word in (quantity.name, *quantity.synonyms, *quantity.infoods):
            form = normal_form(word)
            if index.setdefault(form, quantity.name) != quantity.name:
                raise ValueError(f"'{word}' names both {index[form]} and {quantity.name}")
    return index


@cache
def method_columns() -> dict[str, Quantity]:
    """method column (fat_method ...) -> the quantity it speaks of."""
    return {q.method_column: q for q in dictionary().values() if q.method_column}
