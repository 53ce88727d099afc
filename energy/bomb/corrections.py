"""What else gave heat in the bomb: ignition, nitric and sulfuric acid, combustion aid, capsule, bag.

Heats in J, masses in g, (n,) arrays over runs. A heat that did not come from the sample is subtracted in a test and added
to the known heat in a calibration; the order is that of the standards: ignition, nitric acid, sulfur, then aids.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from energy.bomb.constants import constants, ignition_materials, in_joule
from energy.bomb.constants import value as constant
from energy.bomb.drift import Flags, Floats
from energy.problems import WrongUse

#: why sulfur is left out unless asked for
SULFUR_REASON = (
    "Sulfur is not corrected: the factors of food and feed energy systems were measured in bombs without this correction,"
    " and a gross energy with it would not meet them (about 94 J/g per 1 % sulfur). Ask for it for fuels."
)
SULFUR = {
    "off": SULFUR_REASON,
    "separate": "sulfuric acid instead of sulfur dioxide; nitric acid was found separately",
    "total_acid": "the extra of sulfuric acid where all acid was booked as nitric",
}
#: what becomes of a run with soot
SOOT_REASON = (
    f"soot or unburnt sample: the run is rejected, not corrected (1 mg of carbon withholds about {constant('soot') * 1e-3:.0f} J);"
    " repeat it with a smaller or better pressed pellet, or an aid"
)


@dataclass(frozen=True)
class Term:
    """One heat of n runs: heat, u (n,) J; note : (n,) where the figure comes from."""

    name: str
    title: str
    heat: Floats
    u: Floats
    note: str = ""

    @property
    def used(self) -> Flags:
        """(n,) where this term holds a heat."""
        return np.asarray(self.heat != 0)


def _array(value: ArrayLike | None, n: int, empty: float = 0.0) -> Floats:
    if value is None:
        return np.full(n, empty)
    given = np.broadcast_to(np.asarray(value, dtype=float), n)
    holes = np.isnan(given)
    return np.where(holes, empty, given) if holes.any() else given


def _or(given: ArrayLike | None, default: Floats) -> Floats:
    """What was given, the default where nothing was."""
    if given is None:
        return default
    wanted = np.broadcast_to(np.asarray(given, dtype=float), default.shape)
    return np.where(np.isnan(wanted), default, wanted)


def ignition(
    n: int,
    heat: ArrayLike | None = None,
    mass: ArrayLike | None = None,
    length: ArrayLike | None = None,
    material: Sequence[str] | str | None = None,
    u: ArrayLike | None = None,
) -> Term:
    """Heat of firing: a heat [J] given outright, plus wire or thread burnt, by mass [g] or length [cm].

    material : a name of ignition_materials(), one or per run. Raises WrongUse for an unknown one, or one whose constant is
    per gram where a length is given and the reverse.
    """
    total = _array(heat, n)
    if mass is not None or length is not None:
        names = np.broadcast_to(np.asarray("" if material is None else material, dtype=object), n)
        burnt, long = _array(mass, n), _array(length, n)
        used = np.flatnonzero((burnt != 0) | (long != 0))
        for name in sorted({str(m) for m in names[used]}):
            total = _of_material(name, used[names[used] == name], burnt, long, total)
    spread = constant("u_ignition") * np.abs(total)
    return Term("ignition", "ignition (wire, thread, current)", total, _or(u, spread))


def _of_material(name: str, rows: NDArray[np.intp], burnt: Floats, long: Floats, total: Floats) -> Floats:
    """The heats with those of one wire or thread put into its rows."""
    if name not in ignition_materials():
        raise WrongUse(f"The ignition material '{name}' is not known.", f"One of: {', '.join(ignition_materials())};"
                       " or give the heat itself.")  # fmt: skip
    by_length = constants()[name].unit.endswith("/cm")
    amount, other = (long, burnt) if by_length else (burnt, long)
    if (other[rows] != 0).any():
        raise WrongUse(f"The constant of '{name}' is per {'cm' if by_length else 'g'}.",
                       f"Give the {'length' if by_length else 'mass'} burnt, or choose another material.")  # fmt: skip
    out = total.copy()
    out[rows] += in_joule(name) * amount[rows]
    return out


def nitric_acid_titrated(
    volume: ArrayLike,
    concentration: ArrayLike = 0.1,
    heat_of_formation: str = "nitric_acid",
    u_volume: float | None = None,
) -> tuple[Floats, Floats]:
    """Heat and u [J] of the nitric acid found by volume [ml] of alkali [mol/l].

    heat_of_formation : name of the constant; 59.7 kJ/mol and 0.1 mol/l give 5.97 J/ml.
    """
    v, c = np.asarray(volume, dtype=float), np.asarray(concentration, dtype=float)
    entry = constants()[heat_of_formation]
    per_mmol = (
        in_joule(heat_of_formation) * constant("nitric_acid_molar_mass") / 1e3 if entry.unit == "cal/g" else entry.value
    )
    heat = v * c * per_mmol
    each = constant("u_acid_volume") if u_volume is None else u_volume
    return heat, np.sqrt((each * c * per_mmol) ** 2 + (heat * (entry.u / entry.value)) ** 2)


def nitric_acid_share(bomb_heat: ArrayLike) -> Floats:
    """Share of the bomb heat [J/g] that is booked as nitric acid where nobody titrated (GB/T 213)."""
    q = np.asarray(bomb_heat, dtype=float)
    low, middle, high = (constants()[f"nitric_acid_share_{w}"] for w in ("low", "middle", "high"))
    return np.where(q <= low.high, low.value, np.where(q <= middle.high, middle.value, high.value))


def sulfur(
    n: int, mass: ArrayLike, content: ArrayLike | None, convention: str = "off", u: ArrayLike | None = None
) -> Term:
    """Heat of sulfuric acid. content : mass fraction of sulfur in what was burnt. convention : a name of SULFUR.

    Raises WrongUse for an unknown convention.
    """
    if convention not in SULFUR:
        raise WrongUse(f"The sulfur convention '{convention}' is not known.", f"One of: {', '.join(SULFUR)}.")
    if convention == "off":
        return Term("sulfur", "sulfuric acid", np.zeros(n), np.zeros(n), SULFUR_REASON)
    entry = constants()[f"sulfur_{convention}"]
    amount = _array(content, n) * 100 * _array(mass, n)
    relative = constant("u_sulfur") if u is None else 0.0
    own = 0.0 if u is None else _array(u, n) * 100 * _array(mass, n) * entry.value
    spread = np.hypot(np.hypot(amount * entry.u, relative * amount * entry.value), own)
    return Term("sulfur", "sulfuric acid", amount * entry.value, spread, SULFUR[convention])


def burnt_beside(
    name: str, title: str, n: int, mass: ArrayLike | None, heat: ArrayLike | None, u_heat: ArrayLike | None = None
) -> Term:
    """An aid, capsule or bag: mass [g] times its own heat [J/g], from blanks of the same lot."""
    m, q = _array(mass, n), _array(heat, n)
    of_blank = m * _or(u_heat, constant("u_blank") * q)
    weighed = np.where(m > 0, constant("u_mass") * q, 0.0)
    return Term(name, title, m * q, np.sqrt(of_blank**2 + weighed**2))


@dataclass(frozen=True)
class Budget:
    """Where the heat of n runs came from. taken_up : heat capacity x rise, J. terms : what did not come from the sample."""

    taken_up: Floats
    u_taken_up: Floats
    terms: tuple[Term, ...]
    mass: Floats
    u_mass: Floats

    @property
    def sample_heat(self) -> Floats:
        """(n,) J of the sample: what the calorimeter took up less every other heat, in the order of the terms."""
        heat = self.taken_up.copy()
        for term in self.terms:
            heat -= term.heat
        return heat

    @property
    def per_gram(self) -> Floats:
        """(n,) J/g at constant volume, per gram as weighed."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return self.sample_heat / self.mass

    @property
    def u_per_gram(self) -> Floats:
        """(n,) its standard uncertainty, first order."""
        return self.u_of(self.per_gram)

    def u_of(self, per_gram: Floats) -> Floats:
        """The same, `per_gram` known already."""
        squares = self.u_taken_up**2
        for term in self.terms:
            squares = squares + term.u**2
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.sqrt(squares + (per_gram * self.u_mass) ** 2) / self.mass

    def rows(self, i: int) -> list[tuple[str, float, float, float, float, str]]:
        """Budget of run i: (item, heat J, u J, J/g, share of what was taken up, note); the heats add up to the last row."""
        lines = [("taken up: heat capacity × rise", float(self.taken_up[i]), float(self.u_taken_up[i]), "")]
        lines += [(t.title, -h, u, t.note) for t, h, u in self._heats(i)]
        heat, u = float(self.sample_heat[i]), float(self.u_per_gram[i] * self.mass[i])
        return self._shared(i, [*lines, ("heat of the sample", heat, u, "")])

    def calibration_rows(self, i: int) -> list[tuple[str, float, float, float, float, str]]:
        """The same of a calibration run: its known heats add up to what the calorimeter took up."""
        heat = float(self.sample_heat[i])
        lines = [("calibrant: mass × its heat", heat, abs(heat / float(self.mass[i]) * float(self.u_mass[i])), "")]
        lines += [(t.title, h, u, t.note) for t, h, u in self._heats(i)]
        total = float(np.sqrt(sum(line[2] ** 2 for line in lines)))
        return self._shared(i, [*lines, ("taken up: heat capacity × rise", float(self.taken_up[i]), total, "")])

    def _heats(self, i: int) -> list[tuple[Term, float, float]]:
        return [(t, float(t.heat[i]), float(t.u[i])) for t in self.terms if t.heat[i] != 0]

    def _shared(
        self, i: int, lines: list[tuple[str, float, float, str]]
    ) -> list[tuple[str, float, float, float, float, str]]:
        total, mass = float(self.taken_up[i]) or np.nan, float(self.mass[i]) or np.nan
        return [(item, joule, u, joule / mass, joule / total, note) for item, joule, u, note in lines]


def aid_share(terms: Sequence[Term], taken_up: Floats) -> Floats:
    """(n,) share of the heat taken up that aids, capsule and bag gave."""
    beside = sum((t.heat for t in terms if t.name in ("aid", "capsule", "bag")), np.zeros_like(taken_up))
    with np.errstate(divide="ignore", invalid="ignore"):
        return beside / taken_up


def counted(terms: Sequence[Term], rows: Flags) -> dict[str, bool]:
    """Whether ignition and nitric acid were counted in some runs: term -> yes or no."""
    return {t.name: bool(t.used[rows].any()) for t in terms if t.name in ("ignition", "nitric_acid")}
