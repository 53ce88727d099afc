"""Unit text at the door: what a header says -> a scale factor, a dimension and a basis.

The only file that imports pint, and only for the size of single units: a text such as 'kJ/100g' is taken apart
here, since pint would read it as kilojoules times a hundredth of a gram.
"""

from __future__ import annotations

import difflib
import re
from dataclasses import dataclass
from functools import cache, lru_cache
from typing import Any

from energy.problems import UnitProblem

#: grams of ethanol per ml at 20 degC: 789.24 kg/m3, recalled as the value of OIML R 22, not read there
ETHANOL_DENSITY = 0.78924

_BASIS_WORDS = {
    "as is": "as_is", "as received": "as_is", "as fed": "as_is", "as sold": "as_is", "fresh": "as_is",
    "fresh matter": "as_is", "fm": "as_is", "dm": "dry_matter", "dry matter": "dry_matter", "dry basis": "dry_matter",
    "d.b.": "dry_matter", "db": "dry_matter", "as analysed": "as_analysed", "as analyzed": "as_analysed",
    "air-dry": "as_analysed", "aa": "as_analysed", "om": "organic_matter", "organic matter": "organic_matter",
}  # fmt: skip
#: our spelling -> pint's name, family
_ENERGY = {
    "J": ("joule", "J"), "kJ": ("kilojoule", "J"), "MJ": ("megajoule", "J"), "cal": ("calorie", "cal"),
    "Cal": ("kilocalorie", "cal"), "kcal": ("kilocalorie", "cal"), "Mcal": ("megacalorie", "cal"),
    "cal_IT": ("international_calorie", "cal"), "kcal_IT": ("kilo_international_calorie", "cal"),
    "Btu": ("international_british_thermal_unit", "Btu"),
}  # fmt: skip
_ENERGY_SPELLINGS = {"kj": "kJ", "mj": "MJ", "KJ": "kJ", "Kcal": "kcal", "KCAL": "kcal", "BTU": "Btu", "btu": "Btu",
                     "cal_it": "cal_IT", "calIT": "cal_IT", "kcal_it": "kcal_IT", "j": "J", "mcal": None}  # fmt: skip
_MASS = {"mg": 1e-6, "g": 1e-3, "kg": 1.0, "t": 1e3, "oz": 28.349523125e-3, "lb": 0.45359237}
_VOLUME = {"ml": 1.0, "mL": 1.0, "l": 1e3, "L": 1e3, "dl": 100.0}  # ml
#: ml of gas per mg of feed, as the Hohenheim gas test states it
_GAS = {"ml/200 mg": 1 / 200e-3, "ml/g": 1.0, "ml/200mg": 1 / 200e-3}
_PLAIN = {
    "%": 0.01,
    "% (m/m)": 0.01,
    "% m/m": 0.01,
    "% w/w": 0.01,
    "percent": 0.01,
    "fraction": 1.0,
    "ppm": 1e-6,
    "ratio": 1.0,
}
_VOLUME_PERCENT = ("% vol", "% v/v", "vol%", "%vol", "% (v/v)", "vol %")
#: what a share is a share of, and the period of an amount: said for people, of no weight in the number
_OF = (" of GE", " of DE", " of ME", " of OM", " of N", " BW")
_PERIODS = ("/d", "/day", "/ d", " per day")
_CURE = "Write for example 'kJ/100 g as is', 'MJ/kg DM', 'g/100 g as is', '% DM', 'g/kg DM'."


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit read from text: internal value = value * scale (per_volume: and over the density in g/ml).

    dimension : energy (per mass), mass_fraction, fraction, volume_fraction, density, number, mass (an amount or an
    amount per period, internally kg), heat (MJ) or gas_yield (ml per g). basis : one of the four bases, None when the
    text does not say. energy_family : "J", "cal" or "Btu" for energies.
    """

    text: str
    dimension: str
    scale: float
    basis: str | None = None
    per_volume: bool = False
    energy_family: str | None = None
    display: str = ""


@cache
def _registry() -> Any:
    import pint

    return pint.UnitRegistry()


@cache
def _megajoule(name: str) -> float:
    """Size of an energy unit in MJ."""
    if name == "international_british_thermal_unit":
        return 2326e-6 * 0.45359237  # Btu_IT is defined by 2326 J/kg per Btu/lb
    if name.endswith("international_calorie"):
        return 4.1868e-6 * (1000 if name.startswith("kilo") else 1)
    return float(_registry().Quantity(1.0, name).to("megajoule").magnitude)


@lru_cache(maxsize=4096)
def parse_unit(text: str, dimension: str | None = None) -> Unit:
    """Read a unit text, with its basis if it names one. Raises UnitProblem with the cure."""
    bare = " ".join(text.replace("\u00a0", " ").split())
    bare, basis = _split_basis(bare)
    unit = _read(text, bare, dimension)
    if dimension is not None and unit.dimension != dimension and not _fits(unit.dimension, dimension):
        raise UnitProblem(text, f"it is a unit of {_words(unit.dimension)}, not of {_words(dimension)}.", _CURE)
    kind = dimension if dimension and unit.dimension in ("mass_fraction", "fraction") else unit.dimension
    return Unit(text, kind, unit.scale, basis, unit.per_volume, unit.energy_family, unit.display)


def _fits(found: str, wanted: str) -> bool:
    return {found, wanted} <= {"mass_fraction", "fraction"} or (found, wanted) == ("volume_fraction", "mass_fraction")


def _words(dimension: str) -> str:
    return {"energy": "energy per mass", "mass_fraction": "mass per mass", "fraction": "mass per mass",
            "volume_fraction": "volume per volume", "density": "mass per volume", "number": "a plain number",
            "mass": "mass", "heat": "energy", "gas_yield": "gas per mass"}[dimension]  # fmt: skip


def _split_basis(text: str) -> tuple[str, str | None]:
    lowered = text.lower()
    for word in sorted(_BASIS_WORDS, key=len, reverse=True):
        if lowered == word:
            return "", _BASIS_WORDS[word]
        for ending in (f" of {word}", f" in {word}", f" ({word})", f" {word}"):
            if lowered.endswith(ending):
                return text[: -len(ending)].rstrip(" ,"), _BASIS_WORDS[word]
    return text, None


def _amount(text: str, bare: str, dimension: str) -> Unit | None:
    """An amount that is not per mass of feed: of a trial, a period or an animal."""
    if dimension == "gas_yield" and bare in _GAS:
        return Unit(text, "gas_yield", _GAS[bare], display=bare)
    if dimension not in ("mass", "heat"):
        return None
    plain = next((bare[: -len(p)] for p in _PERIODS if bare.endswith(p)), bare)
    if dimension == "mass" and plain in _MASS:
        return Unit(text, "mass", _MASS[plain], display=bare)
    if dimension == "heat" and plain in _ENERGY:
        name, family = _ENERGY[plain]
        return Unit(text, "heat", _megajoule(name), energy_family=family, display=bare)
    return None


def _read(text: str, bare: str, dimension: str | None) -> Unit:
    if bare in ("", "1", "-") and dimension == "number":
        return Unit(text, "number", 1.0, display="1")
    if dimension in ("mass", "heat", "gas_yield"):
        amount = _amount(text, bare, dimension)
        if amount is not None:
            return amount
    if dimension in ("fraction", "mass_fraction"):
        bare = next((bare[: -len(word)] for word in _OF if bare.endswith(word)), bare)
    if bare.lower() in _VOLUME_PERCENT:
        return Unit(text, "volume_fraction", 0.01 * ETHANOL_DENSITY, per_volume=True, display="% vol")
    if bare in _PLAIN:
        return Unit(text, "mass_fraction", _PLAIN[bare], display="%" if bare.startswith("%") else bare)
    match = re.fullmatch(r"(?P<top>[^/]+?)\s*(?:/|\bper\b)\s*(?P<n>[0-9.]*)\s*(?P<bottom>[A-Za-z0-9]+)", bare)
    if match is None:
        raise UnitProblem(text, "it is not a unit that is known here.", _near(bare))
    top, bottom = match["top"].strip(), match["bottom"]
    try:
        count = float(match["n"] or 1)
    except ValueError:
        raise UnitProblem(text, f"'{match['n']}' is not a number.", _CURE) from None
    if count <= 0:
        raise UnitProblem(text, "it divides by nothing.", _CURE)
    shown = f"{top}/{match['n'] + ' ' if match['n'] else ''}{bottom}"
    if bottom == "m3" and top in _MASS:
        return Unit(text, "density", _MASS[top] * 1e3 / 1e6 / count, display=shown)
    if top in _MASS:
        return _mass_over(text, _MASS[top], count, bottom, shown, dimension)
    return _energy_over(text, top, count, bottom, shown)


def _mass_over(text: str, mass: float, count: float, bottom: str, shown: str, dimension: str | None) -> Unit:
    if bottom in _MASS:
        return Unit(text, "mass_fraction", mass / (count * _MASS[bottom]), display=shown)
    if bottom in _VOLUME:
        gram_per_ml = 1e3 * mass / (count * _VOLUME[bottom])
        if dimension == "density":
            return Unit(text, "density", gram_per_ml, display=shown)
        return Unit(text, "mass_fraction", gram_per_ml, per_volume=True, display=shown)
    raise UnitProblem(text, f"'{bottom}' is neither a mass nor a volume that is known here.", _CURE)


def _energy_over(text: str, top: str, count: float, bottom: str, shown: str) -> Unit:
    if top in ("CAL", "Calorie", "Calories", "calories", "calorie", "kilocalories", "KJOULE"):
        raise UnitProblem(text, f"'{top}' is ambiguous.", "Write 'cal' (4.184 J), 'kcal' or 'Cal' (1000 cal), or 'kJ'.")
    name = _ENERGY_SPELLINGS.get(top, top) if top not in _ENERGY else top
    if name is None or name not in _ENERGY:
        raise UnitProblem(text, f"'{top}' is not a unit that is known here.", _near(top))
    pint_name, family = _ENERGY[name]
    size = _megajoule(pint_name)
    shown = shown.replace(top, name, 1)
    if bottom in _MASS:
        return Unit(text, "energy", size / (count * _MASS[bottom]), energy_family=family, display=shown)
    if bottom in _VOLUME:
        per_gram = size / (count * _VOLUME[bottom] * 1e-3)
        return Unit(text, "energy", per_gram, per_volume=True, energy_family=family, display=shown)
    raise UnitProblem(text, f"'{bottom}' is neither a mass nor a volume that is known here.", _CURE)


def _near(text: str) -> str:
    known = ["kJ/100 g", "kcal/100 g", "MJ/kg", "kJ/g", "kcal/kg", "cal/g", "Btu/lb", "g/100 g", "g/kg", "%", "mg/kg"]
    near = difflib.get_close_matches(text, known, n=1, cutoff=0.5)
    return f"Did you mean '{near[0]}'? {_CURE}" if near else _CURE
