"""A pure substance burnt like a sample: does the calorimeter give its heat?

The heats of the literature are of standard conditions and of masses in vacuum; a bomb gives heat per gram weighed in air
under its own conditions. Benzoic acid, certified on both bases, is held against its heat weighed in air. It shows how much
that can be: its certificate (bomb conditions) lies 0.078 % above its standard energy, and its value weighed in air 0.077 %
above that in vacuum. Both stand as rectangular components of u of the reference, so that zeta does not promise more than is
known.
"""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np

from energy import scores
from energy.bomb.constants import value as constant

#: what air can make: benzoic acid weighed in air against in vacuum
AIR = constant("benzoic_acid_air") / constant("benzoic_acid_vacuum") - 1
#: what bomb conditions can make: benzoic acid's certificate against its standard energy (enthalpy 26.4235 less R T / 2 per mole)
CONDITIONS = constant("benzoic_acid_vacuum") / 26413.5 - 1


@dataclass(frozen=True)
class Substance:
    """heat, u : kJ/g as printed, u standard."""

    name: str
    title: str
    heat: float
    u: float
    basis: str
    u_words: str
    source: str
    source_status: str

    @property
    def u_of_reference(self) -> float:
        """Standard uncertainty of the heat a bomb should give per gram weighed in air, kJ/g."""
        other = 0.0 if self.basis.startswith("bomb conditions") else CONDITIONS
        air = 0.0 if self.basis.endswith("weighed in air") else AIR
        return float(np.sqrt(self.u**2 + (self.heat * other) ** 2 / 3 + (self.heat * air) ** 2 / 3))


@cache
def substances() -> dict[str, Substance]:
    """name -> Substance, in the order of the file."""
    raw = tomllib.loads(Path(__file__).with_name("check_substances.toml").read_text(encoding="utf-8"))
    return {name: Substance(name=name, **entry) for name, entry in raw.items()}


def named(text: str) -> Substance | None:
    """The substance a sample's name means, None if it is none."""
    plain = " ".join(text.lower().replace("_", " ").split())
    return next((s for s in substances().values() if plain in (s.name.replace("_", " "), s.title.lower())), None)


@dataclass(frozen=True)
class Checked:
    """measured, u : kJ/g (MJ/kg). zeta : over both standard uncertainties. word : satisfactory, warning or action."""

    substance: Substance
    measured: float
    u: float
    zeta: float
    word: str
    words: str


def check(substance: Substance, measured: float, u: float) -> Checked:
    """Hold a measured heat (MJ/kg as weighed in air, standard u) against the substance's own."""
    score = float(scores.zeta(measured, substance.heat, u, substance.u_of_reference))
    word = scores.word(score)
    off = measured / substance.heat - 1
    told = f"{substance.title}: {measured:.4f} against {substance.heat:.4f} kJ/g ({100 * off:+.3f} %), zeta {score:+.1f}: {word}"
    if not word:
        told = f"{substance.title}: {measured:.4f} against {substance.heat:.4f} kJ/g, not judged: the run has no u"
    elif word != "satisfactory":
        told += ". Look at the last calibration, the thermometer and the wire before anything is reported"
    return Checked(substance, measured, u, score, word, told)
