"""Mass and energy balance of a batch: do the components sum to the whole, and do their heats give the measured GE?

Where carbohydrate was determined both balances hold information: components sum to one, and GE equals the sum of heat
times amount. Where carbohydrate was found by difference the mass balance is spent on finding it: one residual is left,
and no measurement can be told from another. Sign: residual = measured minus computed; size of an error = measured minus
true. First order: the balances are written in the measured columns, and their slopes take the place of the matrix A. The
closed form of reconcile.py for measurements without covariance is written out as algebra and compiled, since for most
columns a slope is a plain number.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import lru_cache

import numpy as np
from scipy.special import erfc

from energy import algebra
from energy.algebra import Node, add, divide, multiply, power, scale, subtract
from energy.catalogue.records import System
from energy.evaluate import BySystem
from energy.programs import Program, compiled
from energy.quantities import dictionary
from energy.resolve import Resolver, Signature, signatures
from energy.samples import Samples

#: likelihood ratios within this of the largest are not told apart (95 % point of chi-square, one degree of freedom)
INDISTINGUISHABLE = 3.84
#: carbohydrate that was determined, and what else stands beside it in the sum
DETERMINED = {
    "available_carbohydrate": ("total_dietary_fibre", "organic_acids", "alcohol"),
    "carbohydrate_total": ("alcohol",),
}
#: what the sum needs to be whole, by the determined carbohydrate
NEEDED = {"available_carbohydrate": ("total_dietary_fibre",), "carbohydrate_total": ()}
#: what is a part of what
WHOLE = {"sugars": "available_carbohydrate", "starch": "available_carbohydrate"}


@dataclass
class Balances:
    """Results for n samples; NaN where a balance cannot be drawn up.

    mass, energy : residuals, kg/kg and MJ/kg on the working basis. chi_square, freedom, p_value : the global test.
    columns : measured column -> arrays (n,) value, u (reconciled), ratio, size, in the column's own unit and basis.
    """

    samples: Samples

    mass: np.ndarray
    energy: np.ndarray
    chi_square: np.ndarray
    freedom: np.ndarray
    p_value: np.ndarray
    columns: dict[str, dict[str, np.ndarray]] = field(default_factory=dict)

    def possible(self, name: str) -> np.ndarray:
        """(n,) bool: the value of a column less the size of its error is one the quantity can have."""
        low, high = dictionary()[name].range
        true = self.samples.columns[name] - self.columns[name]["size"]
        room = 2 * self.samples.u[name]
        fine = (true >= low - room) & (true <= high + room)
        whole = self.samples.columns.get(WHOLE.get(name, ""))
        if whole is not None:  # a part of a carbohydrate is no larger than it, stated on one basis
            alike = self.samples.basis[name] == self.samples.basis[WHOLE[name]]
            fine &= ~alike | np.isnan(whole) | (true <= whole + room)
        return np.asarray(fine)

    def suspected(self) -> tuple[list[str], np.ndarray]:
        """Names of the columns and their ratio (k, n), 0 for those that can be told from the likeliest culprit."""
        names = list(self.columns)
        ratio = [np.where(self.possible(c), np.nan_to_num(self.columns[c]["ratio"]), 0.0) for c in names]
        found = np.array(ratio).reshape(len(names), len(self.freedom))
        inside = (found >= found.max(axis=0, initial=0.0) - INDISTINGUISHABLE) & (self.freedom > 1)
        return names, np.where(inside, found, 0.0)

    def suspects(self) -> list[list[str]]:
        """Per sample the measurements that cannot be told apart as the culprit, likeliest first; [] without two balances."""
        names, ratio = self.suspected()
        order = np.argsort(-ratio, axis=0, kind="stable")
        return [[names[j] for j in order[:, i] if ratio[j, i] > 0] for i in range(ratio.shape[1])]


def balances(samples: Samples, heats: System) -> Balances:
    """Draw up both balances. heats : the system whose component heats the energy balance rests on."""
    n = len(samples)
    nothing = np.full(n, np.nan)
    found = Balances(samples, nothing, nothing.copy(), nothing.copy(), np.zeros(n, dtype=int), nothing.copy())
    columns = frozenset(samples.columns)
    for signature, rows in signatures(samples):
        here = np.arange(n) if rows is None else rows
        kind = determined(samples, here)
        whole = np.zeros(len(here), dtype=bool)
        if kind is not None:
            whole = np.logical_and.reduce([~np.isnan(samples.columns[c][here]) for c in (kind, *NEEDED[kind])])
        with np.errstate(all="ignore"):
            for two, these in ((True, whole), (False, ~whole)):
                made = _drawn(signature, columns, BySystem(heats), kind if two else None) if these.any() else None
                if made is not None:
                    _keep(samples, made, rows if these.all() else here[these], found)
    return found


def determined(samples: Samples, here: np.ndarray) -> str | None:
    """The carbohydrate column that was determined in these rows, if with it the sum can be whole."""
    return next((c for c in DETERMINED if c in samples.columns and (~np.isnan(samples.columns[c][here])).any()
                 and all(x in samples.columns for x in NEEDED[c])), None)  # fmt: skip


def energy_balance(resolver: Resolver, heats: System) -> Node | None:
    """Measured GE less the sum of heat times amount, MJ/kg on the working basis."""
    measured, computed = resolver.quantity("gross_energy"), resolver.system(heats)
    return None if measured is None or computed is None else subtract(measured, computed)


def mass_balance(resolver: Resolver, kind: str) -> Node | None:
    """The sum of all components less one, kg/kg, with the carbohydrate determined as `kind`."""
    solids = resolver.quantity("solids")
    parts = [resolver.quantity("crude_protein"), *(resolver.measured(c) for c in ("crude_fat", "ash", kind))]
    if solids is None or any(p is None for p in parts):
        return None
    others = [resolver.quantity(c, filled=True) for c in DETERMINED[kind]]
    return subtract(add(*parts, *others), solids)


@dataclass(frozen=True)
class Drawn:
    """The compiled balances of one signature. names : the measured columns they hold."""

    program: Program
    names: tuple[str, ...]
    freedom: int


@lru_cache(maxsize=64)
def _drawn(signature: Signature, columns: frozenset[str], heats: BySystem, kind: str | None) -> Drawn | None:
    resolver = Resolver(signature, columns)
    energy = energy_balance(resolver, heats.system)
    mass = mass_balance(resolver, kind) if kind is not None else None
    if energy is None:
        return None
    residuals = [energy] if mass is None else [mass, energy]
    named = {n.removesuffix("?") for node in residuals for n in algebra.names(node) if not n.startswith(("@", "V@"))}
    names = sorted(n for n in named if dictionary()[n].dimension != "number")  # a stated nitrogen factor is exact
    leaves = {c: c if any(c in algebra.names(r) for r in residuals) else c + "?" for c in names}
    slopes = [{c: slope_of(r, c) for c in names} for r in residuals]
    variances = {c: power("U:" + leaves[c], 2.0) for c in names}
    roots = _reconciled(residuals, slopes, variances, resolver.model_variance(heats.system))
    roots |= {("value", c): subtract(leaves[c], multiply(variances[c], roots.pop(("drive", c)))) for c in names}
    return Drawn(compiled(roots, resolver), tuple(names), len(residuals))


def slope_of(node: Node, name: str) -> Node:
    """Slope with respect to a column, whether it stands plain or filled with zeros."""
    return add(algebra.slope(node, name), algebra.slope(node, name + "?"))


def _reconciled(
    residuals: Sequence[Node], slopes: Sequence[dict[str, Node]], variances: dict[str, Node], model: Node
) -> dict[tuple[str, str], Node]:
    """reconcile.reconcile_independent as algebra: residuals, global test, and per column u, ratio, size and drive.

    The variance of the heats belongs to the energy balance, which comes last.
    """
    energy, last = residuals[-1], slopes[-1]
    v22 = add(*(multiply(power(last[c], 2.0), v) for c, v in variances.items()), model)
    roots: dict[tuple[str, str], Node] = {("energy", ""): energy}
    if len(residuals) == 1:
        weights = [divide(energy, v22)]
        roots["chi_square", ""] = multiply(energy, weights[0])
    else:
        mass, first = residuals[0], slopes[0]
        roots["mass", ""] = mass
        v11 = add(*(multiply(power(first[c], 2.0), v) for c, v in variances.items()))
        v12 = add(*(multiply(multiply(first[c], last[c]), v) for c, v in variances.items()))
        one = divide(1.0, subtract(multiply(v11, v22), power(v12, 2.0)))
        i11, i12, i22 = multiply(v22, one), scale(-1.0, multiply(v12, one)), multiply(v11, one)
        weights = [add(multiply(i11, mass), multiply(i12, energy)), add(multiply(i12, mass), multiply(i22, energy))]
        roots["chi_square", ""] = add(multiply(mass, weights[0]), multiply(energy, weights[1]))
    for c, variance in variances.items():
        drive = add(*(multiply(s[c], w) for s, w in zip(slopes, weights, strict=True)))
        if len(residuals) == 1:
            quadratic = divide(power(last[c], 2.0), v22)
        else:
            quadratic = add(multiply(power(slopes[0][c], 2.0), i11), scale(2.0, multiply(multiply(slopes[0][c], last[c]), i12)),
                            multiply(power(last[c], 2.0), i22))  # fmt: skip
        size = divide(drive, quadratic)
        left = algebra.apply("max", subtract(1.0, multiply(variance, quadratic)), 0.0)
        roots["drive", c] = drive
        roots["size", c], roots["ratio", c] = size, multiply(size, drive)
        roots["u", c] = algebra.apply("sqrt", multiply(variance, left))
    return roots


def _keep(samples: Samples, made: Drawn, rows: np.ndarray | None, found: Balances) -> None:
    """Run a program for its rows and put the results where they belong."""
    n = len(samples)
    out: dict[tuple[str, str], np.ndarray] = {}
    for part, c in made.program.outputs:
        if c == "":
            out[part, c] = getattr(found, part)
        else:
            kept = found.columns.setdefault(c, {})
            out[part, c] = kept.setdefault(part, np.empty(n) if rows is None else np.full(n, np.nan))
    made.program.run(samples, rows, out)
    here: slice | np.ndarray = slice(None) if rows is None else rows
    for c in made.names:
        empty = np.isnan(samples.columns[c][here])
        if empty.any():  # what was not measured is not reconciled
            for array in found.columns[c].values():
                array[here] = np.where(empty, np.nan, array[here])
    chi = found.chi_square[here]
    # the upper tail of chi-square with one or two degrees of freedom in closed form
    found.p_value[here] = erfc(np.sqrt(chi / 2)) if made.freedom == 1 else np.exp(-chi / 2)
    found.freedom[here] = np.where(np.isnan(chi), 0, made.freedom)
