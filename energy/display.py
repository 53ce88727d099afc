"""Unit and basis in which results are shown, and quantities of a batch as plain arrays."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from energy.catalogue.records import Symbol, System
from energy.evaluate import evaluate
from energy.formula import parse
from energy.problems import UnitProblem, WrongUse
from energy.samples import BASES, Samples
from energy.units import parse_unit

#: a kilocalorie of a law that prints 'kcal = kJ / 4.18'
LAW_CALORIE = {"conversion_4.18": 4.18}


@dataclass(frozen=True)
class Display:
    """Unit and basis of the tables handed out. family is "J" or "cal" when the user chose one, else None."""

    unit: str
    scale: float
    basis: str
    family: str | None


def display(unit: str | None, basis: str | None, working: str) -> Display:
    """The user's choice, or MJ/kg on the batch's basis. A basis inside the unit text counts as well."""
    if basis is not None and basis not in BASES:
        raise WrongUse(f"The basis '{basis}' is not known.", f"One of: {', '.join(BASES)}.")
    if unit is None:
        return Display("MJ/kg", 1.0, basis or working, None)
    try:
        read = parse_unit(unit, "energy")
    except UnitProblem as problem:
        raise WrongUse(f"The unit '{unit}' cannot be read: {problem.what}", problem.cure) from None
    if read.per_volume:
        raise WrongUse(f"'{unit}' is per volume.", "Choose a unit per mass; labels per 100 ml come with the density.")
    if read.basis and basis and read.basis != basis:
        raise WrongUse(f"The unit '{unit}' and basis '{basis}' disagree.", "Give one of them.")
    # a law prints kJ or kcal; any other unit is made from its leading sum
    family = read.energy_family if read.energy_family in ("J", "cal") else None
    return Display(read.display, read.scale, basis or read.basis or working, family)


def basis_factor(samples: Samples, working: str, goal: str) -> np.ndarray | float:
    """(n,) what a value per kg on the working basis is multiplied by to stand on the goal's."""
    if goal == working:
        return 1.0
    dry = dry_matter(samples)
    if {goal, working} == {"as_is", "dry_matter"}:
        return 1.0 / dry if goal == "dry_matter" else dry
    raise WrongUse(f"Results cannot be shown on '{goal}'.", "Choose as_is or dry_matter.")


def dry_matter(samples: Samples) -> np.ndarray:
    """(n,) kg dry matter per kg as is, NaN where not known."""
    return quantity_values(samples, "dry_matter")


def quantity_values(samples: Samples, name: str) -> np.ndarray:
    """(n,) a measured or derived quantity on the working basis, NaN where it cannot be had."""
    return quantity_figures(samples, name)[0]


def quantity_figures(samples: Samples, name: str) -> tuple[np.ndarray, np.ndarray]:
    """(n,) a measured or derived quantity on the working basis and its standard uncertainty, NaN where not to be had."""
    blocks = evaluate(samples, [_identity(name)])
    return np.asarray(blocks.value[0]), np.asarray(blocks.u[0])


@lru_cache(maxsize=64)
def _identity(name: str) -> System:
    symbol = Symbol(name="x", unit="", quantity=name, basis="any")
    return System(
        id=f"value of {name}", title=name, targets=(), stage="", route="", formula=parse("x"), symbols={"x": symbol},
        result_unit="", result_scale=1.0, result_basis="any", energy_family="", citation="", locator="",
        source_status="derived",
    )  # fmt: skip


def scale_of(system: System, shown: Display) -> float:
    """MJ/kg -> the unit shown; a law that sets its own kilocalorie (4.18 kJ) is converted by it."""
    law = LAW_CALORIE.get(system.twin)
    if law is not None and shown.family == "cal":
        return 4.184 / law / shown.scale
    return 1.0 / shown.scale


def visible(system: System, shown: Display) -> bool:
    """A unit switch shows the twin with factors of its own, never a conversion of ours."""
    if shown.family is None or system.twin != "factors":
        return True
    return system.energy_family == shown.family
