"""Constants of bomb calorimetry with their sources, read from constants.toml once."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from functools import cache
from pathlib import Path

#: one thermochemical calorie in J, by definition
CALORIE = 4.184


@dataclass(frozen=True, slots=True)
class Constant:
    """One fact: value in its unit, where it is published and how it is known.

    u : standard uncertainty in the same unit, 0 where none is known. reference, low, high : the value a condition is
    counted from and the range it is published for. role : "ignition" for what a run may be fired with.
    """

    name: str
    title: str
    value: float
    unit: str
    source: str
    source_status: str
    u: float = 0.0
    u_source: str = ""
    note: str = ""
    role: str = ""
    reference: float = 0.0
    low: float = float("-inf")
    high: float = float("inf")


@cache
def constants() -> dict[str, Constant]:
    """name -> Constant, in the order of the file."""
    raw = tomllib.loads(Path(__file__).with_suffix(".toml").read_text(encoding="utf-8"))
    return {name: Constant(name=name, **entry) for name, entry in raw.items()}


def value(name: str) -> float:
    """The number alone, in its published unit."""
    return constants()[name].value


def in_joule(name: str) -> float:
    """The number in joules per what it is per: calories are the thermochemical ones."""
    found = constants()[name]
    return found.value * CALORIE if found.unit.startswith("cal/") else found.value


@cache
def ignition_materials() -> tuple[str, ...]:
    """Names a run sheet may give as what fired the run."""
    return tuple(name for name, entry in constants().items() if entry.role == "ignition")
