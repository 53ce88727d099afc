"""Both balances of chosen samples as numbers: residuals, their covariance, and what an error of each column does to them.

For the rows that need an explanation only. Where carbohydrate was found by difference there is one balance: the mass
residual is then 0 with variance 1 and no slope, so that one set of formulas serves both cases.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import lru_cache

import numpy as np

from energy import algebra
from energy.algebra import Node, add, multiply, power
from energy.balance import NEEDED, determined, energy_balance, mass_balance, slope_of
from energy.catalogue.records import System
from energy.evaluate import BySystem
from energy.programs import Program, compiled
from energy.quantities import dictionary
from energy.resolve import Resolver, Signature, signatures
from energy.samples import Samples

#: quantities on the working basis that handling errors look at
WANTED = ("dry_matter", "solids", "ash", "crude_protein", "total_dietary_fibre", "crude_fat", "moisture", "alcohol",
          "acetic_acid", "propionic_acid", "butyric_acid")  # fmt: skip
#: what a laboratory finds by difference -> what it takes off
REMAINDERS = {
    "nitrogen_free_extract": ("moisture", "crude_protein", "nitrogen", "crude_fat", "crude_fibre", "ash"),
    "carbohydrate_by_difference": ("moisture", "crude_protein", "nitrogen", "crude_fat", "ash"),
}


@dataclass
class Matrices:
    """(k,) arrays for k rows of a batch; MJ/kg and kg/kg on the working basis.

    rows : their indices. mass, energy : residuals. v11, v12, v22 : covariance of the two, inputs and heats. two : both
    balances are there. measured, computed : gross energy. slope_mass, slope_energy : per column, what an error of one in
    the column's own unit and basis adds to each residual. own : per column, what one kg/kg on the working basis is in the
    column's own. amounts : the quantities of WANTED, NaN where not to be had.
    """

    samples: Samples
    rows: np.ndarray
    mass: np.ndarray
    energy: np.ndarray
    v11: np.ndarray
    v12: np.ndarray
    v22: np.ndarray
    two: np.ndarray
    measured: np.ndarray
    computed: np.ndarray
    by_difference: np.ndarray
    slope_mass: dict[str, np.ndarray] = field(default_factory=dict)
    slope_energy: dict[str, np.ndarray] = field(default_factory=dict)
    own: dict[str, np.ndarray] = field(default_factory=dict)
    amounts: dict[str, np.ndarray] = field(default_factory=dict)

    def __len__(self) -> int:
        return len(self.rows)

    def value(self, column: str) -> np.ndarray:
        """(k,) a measured column as stated, NaN where not given."""
        found = self.samples.columns.get(column)
        return np.full(len(self), np.nan) if found is None else found[self.rows]

    def u(self, column: str) -> np.ndarray:
        """(k,) its standard uncertainty, 0 where not known."""
        found = self.samples.u.get(column)
        return np.zeros(len(self)) if found is None else np.nan_to_num(found[self.rows])

    def text(self, column: str) -> np.ndarray:
        """(k,) a text column, '' where there is none."""
        found = self.samples.text.get(column)
        if found is None:
            return np.full(len(self), "", dtype=object)
        return np.array([t if t else "" for t in found[self.rows]], dtype=object)

    def basis(self, column: str) -> np.ndarray:
        """(k,) code of the basis a column was stated on, -1 where it has none."""
        found = self.samples.basis.get(column)
        return np.full(len(self), -1) if found is None else found[self.rows].astype(int)

    def slopes(self, column: str) -> tuple[np.ndarray, np.ndarray]:
        """What an error of one, in the column's own unit and basis, adds to mass and energy residual.

        A remainder that the laboratory itself found by difference (nitrogen-free extract, carbohydrate by difference) is
        wrong with the column it was found from, the other way round.
        """
        zero = np.zeros(len(self))
        mass, energy = (s.get(column, zero) for s in (self.slope_mass, self.slope_energy))
        for remainder, parts in REMAINDERS.items():
            if column in parts and remainder in self.slope_energy:
                trade = np.where(np.isfinite(self.value(remainder)), self.own[remainder] / self.own[column], 0.0)
                mass = mass - self.slope_mass.get(remainder, zero) * trade
                energy = energy - self.slope_energy[remainder] * trade
        return mass, energy

    def effect(self, column: str) -> tuple[np.ndarray, np.ndarray]:
        """The same for an error of one kg/kg (MJ/kg) on the working basis."""
        mass, energy = self.slopes(column)
        own = self.own.get(column, np.zeros(len(self)))
        return mass * own, energy * own


@dataclass(frozen=True)
class _Made:
    program: Program
    names: tuple[str, ...]
    two: bool
    by_difference: bool


@lru_cache(maxsize=64)
def _made(signature: Signature, columns: frozenset[str], heats: BySystem, kind: str | None) -> _Made | None:
    resolver = Resolver(signature, columns)
    energy = energy_balance(resolver, heats.system)
    mass = mass_balance(resolver, kind) if kind is not None else None
    measured, computed = resolver.quantity("gross_energy"), resolver.system(heats.system)
    if energy is None or measured is None or computed is None:
        return None
    residuals: dict[str, Node] = {"energy": energy} | ({} if mass is None else {"mass": mass})
    named = {n.removesuffix("?") for r in residuals.values() for n in algebra.names(r) if not n.startswith(("@", "V@"))}
    names = sorted(n for n in named if dictionary()[n].dimension != "number")
    leaves = {c: c if any(c in algebra.names(r) for r in residuals.values()) else c + "?" for c in names}
    variance = {c: power("U:" + leaves[c], 2.0) for c in names}
    slopes = {part: {c: slope_of(r, c) for c in names} for part, r in residuals.items()}
    roots: dict[tuple[str, str], Node] = {
        ("energy", ""): energy,
        ("measured", ""): measured,
        ("computed", ""): computed,
    }
    last = slopes["energy"]
    roots["v22", ""] = add(*(multiply(power(last[c], 2.0), v) for c, v in variance.items()),
                           resolver.model_variance(heats.system))  # fmt: skip
    if mass is not None:
        first = slopes["mass"]
        roots["mass", ""] = mass
        roots["v11", ""] = add(*(multiply(power(first[c], 2.0), v) for c, v in variance.items()))
        roots["v12", ""] = add(*(multiply(multiply(first[c], last[c]), v) for c, v in variance.items()))
    for part, found in slopes.items():
        roots |= {(f"slope_{part}", c): node for c, node in found.items()}
    for c in names:
        working = resolver.measured(c, filled=c != leaves[c])
        roots["own", c] = algebra.divide(1.0, slope_of(working, c)) if working is not None else 1.0
    for q in WANTED:
        node = resolver.quantity(q)
        if node is not None:
            roots["amounts", q] = node
    protein_apart = "crude_protein" in columns or "nitrogen" in columns
    spent = protein_apart and mass is None and {"crude_fat", "ash"} <= set(names)
    return _Made(compiled(roots, resolver), tuple(names), mass is not None, spent)


def matrices(samples: Samples, heats: System, rows: Sequence[int] | np.ndarray) -> Matrices:
    """The matrices of some rows; rows whose gross energy or heats cannot be had are left out."""
    asked = np.asarray(rows, dtype=int)
    n = len(samples)
    full = {part: np.full(n, np.nan) for part in ("mass", "energy", "v11", "v12", "v22", "measured", "computed")}
    full["mass"][:], full["v11"][:], full["v12"][:] = 0.0, 1.0, 0.0
    two, spent = np.zeros(n, dtype=bool), np.zeros(n, dtype=bool)
    of: dict[str, dict[str, np.ndarray]] = {"slope_mass": {}, "slope_energy": {}, "own": {}, "amounts": {}}
    mine = np.zeros(n, dtype=bool)
    mine[asked] = True
    for signature, found in signatures(samples):
        here = np.flatnonzero(mine) if found is None else found[mine[found]]
        if not len(here):
            continue
        kind = determined(samples, here)
        whole = np.zeros(len(here), dtype=bool)
        if kind is not None:
            whole = np.logical_and.reduce([~np.isnan(samples.columns[c][here]) for c in (kind, *NEEDED[kind])])
        for both, these in ((True, here[whole]), (False, here[~whole])):
            made = None
            if len(these):
                made = _made(signature, frozenset(samples.columns), BySystem(heats), kind if both else None)
            if made is None:
                continue
            out = {}
            for part, c in made.program.outputs:
                fill = 0.0 if part.startswith("slope") else np.nan
                out[part, c] = full[part] if c == "" else of[part].setdefault(c, np.full(n, fill))
            with np.errstate(all="ignore"):
                made.program.run(samples, these, out)
            two[these], spent[these] = made.two, made.by_difference
    kept = asked[np.isfinite(full["energy"][asked]) & np.isfinite(full["v22"][asked])]
    one = {part: values[kept] for part, values in full.items()}
    many = {part: {c: values[kept] for c, values in found.items()} for part, found in of.items()}
    return Matrices(
        samples=samples, rows=kept, two=two[kept], by_difference=spent[kept],
        mass=one["mass"], energy=one["energy"], v11=one["v11"], v12=one["v12"], v22=one["v22"], measured=one["measured"],
        computed=one["computed"], slope_mass=many["slope_mass"], slope_energy=many["slope_energy"], own=many["own"],
        amounts=many["amounts"],
    )  # fmt: skip
