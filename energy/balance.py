"""Mass and energy balance of a batch: do the components sum to the whole, and do their heats give the measured GE?

Where carbohydrate was determined both balances hold information: components sum to one, and GE equals the sum of heat
times amount. Where carbohydrate was found by difference the mass balance is spent on finding it: one residual is left,
and no measurement can be told from another. Sign: residual = measured minus computed; size of an error = measured minus
true. First order: the balances are written in the measured columns, and their slopes take the place of the matrix A.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from scipy.special import chdtrc

from energy import algebra
from energy.algebra import Node
from energy.catalogue.records import System
from energy.evaluate import values_of
from energy.quantities import dictionary
from energy.reconcile import Reconciled, reconcile_independent
from energy.resolve import Resolver, signatures
from energy.samples import Samples

#: rows are reconciled so many at a time, so that their slopes stay in cache
ROWS = 16_384
#: likelihood ratios within this of the largest are not told apart (95 % point of chi-square, one degree of freedom)
INDISTINGUISHABLE = 3.84
#: carbohydrate that was determined, and what else stands beside it in the sum
DETERMINED = {
    "available_carbohydrate": ("total_dietary_fibre", "organic_acids", "alcohol"),
    "carbohydrate_total": ("alcohol",),
}
#: what the sum needs to be whole, by the determined carbohydrate
NEEDED = {"available_carbohydrate": ("total_dietary_fibre",), "carbohydrate_total": ()}


@dataclass
class Balances:
    """Results for n samples; NaN where a balance cannot be drawn up.

    mass, energy : residuals, kg/kg and MJ/kg on the working basis. chi_square, freedom, p_value : the global test.
    columns : measured column -> arrays (n,) value, u (reconciled), ratio, size, in the column's own unit and basis, and
    possible: 1 where the value less that size is one the quantity can have.
    """

    mass: np.ndarray
    energy: np.ndarray
    chi_square: np.ndarray
    freedom: np.ndarray
    p_value: np.ndarray
    columns: dict[str, dict[str, np.ndarray]] = field(default_factory=dict)

    def suspects(self) -> list[list[str]]:
        """Per sample the measurements that cannot be told apart as the culprit, likeliest first; [] without two balances."""
        names = list(self.columns)
        ratio = np.array([np.where(self.columns[c]["possible"], self.columns[c]["ratio"], 0.0) for c in names])
        ratio = np.nan_to_num(ratio).reshape(len(names), -1)
        order = np.argsort(-ratio, axis=0)
        inside = ratio >= ratio.max(axis=0, initial=0.0) - INDISTINGUISHABLE
        return [
            [names[j] for j in order[:, i] if inside[j, i] and ratio[j, i] > 0] if self.freedom[i] > 1 else []
            for i in range(len(self.freedom))
        ]


def balances(samples: Samples, heats: System) -> Balances:
    """Draw up both balances. heats : the system whose component heats the energy balance rests on."""
    n = len(samples)
    nothing = np.full(n, np.nan)
    found = Balances(nothing.copy(), nothing.copy(), nothing.copy(), np.zeros(n, dtype=int), nothing.copy())
    columns = frozenset(samples.columns)
    for signature, rows in signatures(samples):
        resolver = Resolver(signature, columns)
        here = np.arange(n) if rows is None else rows
        energy = _energy(resolver, heats)
        if energy is None:
            continue
        model = resolver.model_variance(heats)
        mass, kind = _mass(resolver, samples, here)
        whole = np.zeros(len(here), dtype=bool)
        if mass is not None and kind is not None:
            needed = (kind, *NEEDED[kind])
            whole = np.logical_and.reduce([~np.isnan(samples.columns[c][here]) for c in needed])
        with np.errstate(all="ignore"):
            if whole.any() and mass is not None:
                _solve(samples, resolver, [mass, energy], model, here[whole], found)
            if not whole.all():
                _solve(samples, resolver, [energy], model, here[~whole], found)
    return found


def _energy(resolver: Resolver, heats: System) -> Node | None:
    """Measured GE less the sum of heat times amount, MJ/kg."""
    measured, computed = resolver.quantity("gross_energy"), resolver.system(heats)
    return None if measured is None or computed is None else algebra.subtract(measured, computed)


def _mass(resolver: Resolver, samples: Samples, here: np.ndarray) -> tuple[Node | None, str | None]:
    """The sum of all components less one, kg/kg; None unless carbohydrate was determined."""
    kind = next(
        (c for c in DETERMINED if c in samples.columns and (~np.isnan(samples.columns[c][here])).any()
         and all(x in samples.columns for x in NEEDED[c])), None)  # fmt: skip
    if kind is None:
        return None, None
    solids = resolver.quantity("solids")
    parts = [resolver.quantity("crude_protein"), *(resolver.measured(c) for c in ("crude_fat", "ash", kind))]
    if solids is None or any(p is None for p in parts):
        return None, None
    others = [resolver.quantity(c, filled=True) for c in DETERMINED[kind]]
    return algebra.subtract(algebra.add(*parts, *others), solids), kind


def _solve(
    samples: Samples, resolver: Resolver, nodes: Sequence[Node], model: Node, here: np.ndarray, found: Balances
) -> None:
    """Residuals, global test and reconciled columns of the rows of one signature."""
    named = {n.removesuffix("?") for node in nodes for n in algebra.names(node) if not n.startswith(("@", "V@"))}
    names = sorted(n for n in named if dictionary()[n].dimension != "number")  # a stated nitrogen factor is exact
    slopes = [_slope(node, name) for node in nodes for name in names]
    m, k = len(nodes), len(names)
    for low in range(0, len(here), ROWS):
        rows = here[low : low + ROWS]
        values = values_of(samples, resolver, [*nodes, *slopes, model], rows)
        residual, a = values[:m], values[m:-1].reshape(m, k, -1)
        y = np.nan_to_num(np.array([samples.columns[c][rows] for c in names]))
        u = np.nan_to_num(np.array([samples.u[c][rows] for c in names]))
        unknown = [np.isnan(samples.u[c][rows]) & ~np.isnan(samples.columns[c][rows]) for c in names]
        good = np.isfinite(values).all(axis=0) & ~np.logical_or.reduce(unknown)
        found.energy[rows] = residual[-1]
        if m > 1:
            found.mass[rows] = residual[0]
        if not good.any():
            continue
        extra = np.zeros((m, int(good.sum())))
        extra[-1] = values[-1][good]  # the heats' own uncertainty belongs to the energy balance
        result = reconcile_independent(y[:, good], u[:, good] ** 2, a[:, :, good], residual[:, good], extra)
        _keep(samples, found, rows[good], names, result)


def _slope(node: Node, name: str) -> Node:
    """Slope with respect to a column, whether it stands plain or filled with zeros."""
    return algebra.add(algebra.slope(node, name), algebra.slope(node, name + "?"))


def _keep(samples: Samples, found: Balances, rows: np.ndarray, names: Sequence[str], result: Reconciled) -> None:
    found.chi_square[rows] = result.global_test
    found.freedom[rows] = result.freedom
    found.p_value[rows] = chdtrc(result.freedom, result.global_test)
    for j, name in enumerate(names):
        kept = found.columns.setdefault(
            name, {part: np.full(len(samples), np.nan) for part in ("value", "u", "ratio", "size", "possible")}
        )
        given = ~np.isnan(samples.columns[name][rows])
        for part in ("value", "u", "ratio", "size"):
            kept[part][rows[given]] = getattr(result, part)[given, j]
        low, high = dictionary()[name].range
        true = samples.columns[name][rows] - result.size[:, j]
        room = 2 * samples.u[name][rows]
        kept["possible"][rows[given]] = ((true >= low - room) & (true <= high + room))[given]
