"""A pure substance burnt like a sample: does the calorimeter give its heat?

The heats of the literature are of standard conditions and of masses in vacuum; a bomb gives heat per gram weighed in air
under its own conditions. Benzoic acid shows how much that can be: its certificate (bomb conditions) lies 0.078 % above its
standard energy, and its value weighed in air 0.077 % above that in vacuum. Both stand as rectangular components of u of the
reference, so that zeta does not promise more than is known.
"""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np

from energy import scores

#: what bomb conditions, and air, can make: benzoic acid 26.434 against 26.4135 (its enthalpy 26.4235 less R T / 2 per mole),
#: and 26.454 against 26.434
CONDITIONS, AIR = 26.434 / 26.4135 - 1, 26.454 / 26.434 - 1
#: benzoic acid, J/g: in vacuum, weighed in air
IN_VACUUM, IN_AIR = 26434.0, 26454.0
#: relative gap of the two bases, and how near a ratio must come to it to be called by that name
GAP, NEAR = IN_AIR / IN_VACUUM - 1, 0.25


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
        return float(np.sqrt(self.u**2 + (self.heat * other) ** 2 / 3 + (self.heat * AIR) ** 2 / 3))


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
    if word != "satisfactory":
        told += ". Look at the last calibration, the thermometer and the wire before anything is reported"
    return Checked(substance, measured, u, score, word, told)


def wrong_basis(heat: float, stated: str) -> str:
    """Whether a certificate value of benzoic acid (J/g) belongs to the other basis; '' if it fits. stated : air, vacuum."""
    right, other = (IN_AIR, IN_VACUUM) if stated == "air" else (IN_VACUUM, IN_AIR)
    room = NEAR * GAP * IN_VACUUM
    if abs(heat - right) <= room or abs(heat - other) > room:
        return ""
    name = "in vacuum" if stated == "air" else "weighed in air"
    return (f"{heat:g} J/g is the heat of benzoic acid {name}, but the basis is given as {stated}: every result would be off by"
            f" {100 * GAP:.3f} %")  # fmt: skip
