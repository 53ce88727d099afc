"""Handling errors as effects on the two balances: what each would add to the mass and the energy residual.

An effect per unit size and a size, usual or exact, is all the weighing (causes.py) needs. The words, how common an error
is and which sizes are believed stand in catalogue/handling_errors.toml.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from functools import cache
from typing import Any

import numpy as np

from energy.catalogue.reader import systems
from energy.catalogue.records import System
from energy.catalogue.tables import food_groups, handling_errors
from energy.matrices import Matrices
from energy.quantities import DISPLAY_SCALE, dictionary
from energy.samples import BASIS_CODE

JOULE_PER_CALORIE = 4.184
JOULE_PER_TABLE_CALORIE = 4.1868
#: who can use urea, and is fed it
RUMINANTS = ("cattle", "dairy_cow", "sheep")
#: crude protein of dry matter below which nobody adds urea to a feed (judgement of ours)
UREA_FROM = 0.14
#: ash of dry matter from which a charge burns badly (judgement of ours)
MUCH_ASH = 0.12
#: fibre methods that hold the low molecular weight part
WHOLE_FIBRE = ("aoac_2009_01", "aoac_2011_25", "aoac_2017_16")
AS_IS, AS_ANALYSED, DRY = (BASIS_CODE[b] for b in ("as_is", "as_analysed", "dry_matter"))
#: determinations of which one alone may simply be wrong, and what would repeat each
DETERMINATIONS = {
    "gross_energy": "bomb", "moisture": "moisture", "dry_matter": "moisture", "crude_protein": "nitrogen", "nitrogen": "nitrogen",
    "crude_fat": "fat", "ash": "ash", "available_carbohydrate": "carbohydrate", "carbohydrate_total": "carbohydrate",
    "total_dietary_fibre": "fibre", "crude_fibre": "fibre",
}  # fmt: skip
#: the columns of a composition that a basis mix-up moves together
COMPOSITION = ("crude_protein", "nitrogen", "crude_fat", "ash", "available_carbohydrate", "carbohydrate_total",
               "carbohydrate_by_difference", "total_dietary_fibre", "crude_fibre", "nitrogen_free_extract", "sugars",
               "starch")  # fmt: skip


@dataclass
class Effect:
    """One handling error on k rows.

    mass, energy : (k,) what a size of one adds to the residuals (measured less computed). size, spread : the size it has,
    exactly known where `exact`, else what is usual. in_measured : the share of `energy` that is an error of the measured
    gross energy. extra : (v11, v12, v22) to add to the covariance, since an uncertainty grows with the value it belongs to.
    density : how much denser the figures as entered lie than the right ones. amount : what the words show, None = the size
    in g per 100 g. fill : other words for {placeholders}. pointed : the table itself points at it.
    """

    id: str
    applies: np.ndarray
    mass: np.ndarray
    energy: np.ndarray
    size: np.ndarray
    spread: np.ndarray
    exact: bool
    in_measured: float
    low: float = -np.inf
    high: float = np.inf
    extra: tuple[np.ndarray, np.ndarray, np.ndarray] | None = None
    density: np.ndarray | float = 1.0
    amount: np.ndarray | None = None
    fill: dict[str, Any] = field(default_factory=dict)
    pointed: np.ndarray | None = None
    commonness: np.ndarray | float | None = None
    repeats: str = ""
    column: str = ""


@cache
def entry(identity: str) -> dict[str, Any]:
    """An error's words, commonness and usual size."""
    return next(e for e in handling_errors()["error"] if e["id"] == identity)


@cache
def determination(identity: str) -> dict[str, Any]:
    """What would settle an error."""
    return next(d for d in handling_errors()["determination"] if d["id"] == identity)


@cache
def heat_of(identity: str, symbol: str) -> float:
    """A heat of combustion of a gross energy system, MJ/kg."""
    found = systems()[identity].symbols[symbol]
    value = found.constant if found.constant is not None else found.fallback
    if value is None:
        raise KeyError(symbol)
    return value * found.scale


def short_title(column: str) -> str:
    """What people call a column, without what its title explains."""
    return dictionary()[column].title.split(" (")[0].removesuffix(" of the material as it is")


def effects(m: Matrices, heats: System, target: str) -> Iterator[Effect]:
    """Every error of the library on the rows of m."""
    if not len(m):
        return
    for make in KINDS:
        yield from make(m, heats, target)


# ---- factors on the measured gross energy ------------------------------------------------------------------------


def _times(
    m: Matrices, identity: str, right: np.ndarray | float, applies: np.ndarray | bool, amount: np.ndarray | None
) -> Effect:
    """The measured gross energy must be multiplied by `right` to be right."""
    k = len(m)
    factor = np.broadcast_to(np.asarray(right, dtype=float), k)
    zero = np.zeros(k)
    u = m.u("gross_energy") / np.abs(m.own["gross_energy"])
    # 1 : an error of one MJ/kg in the measured gross energy stands in the energy residual as it is
    return Effect(
        identity, np.broadcast_to(applies, k) & np.isfinite(factor), zero, m.measured * (1 - factor), np.ones(k), zero,
        exact=True, in_measured=1.0, extra=(zero, zero, (factor**2 - 1) * u**2), density=factor, amount=amount,
        repeats=entry(identity)["repeats"], column="gross_energy",
    )  # fmt: skip


def _gross_energy(m: Matrices, heats: System, target: str) -> Iterator[Effect]:
    ratio = m.measured / m.computed
    everywhere = np.ones(len(m), dtype=bool)
    yield _times(m, "kcal_as_kJ", JOULE_PER_CALORIE, everywhere, ratio)
    yield _times(m, "kJ_as_kcal", 1 / JOULE_PER_CALORIE, everywhere, ratio)
    for way in (1, -1):
        yield _times(m, "calorie_other_way", (JOULE_PER_CALORIE / JOULE_PER_TABLE_CALORIE) ** way, everywhere, ratio)
    yield _times(m, "decimal_up", 0.1, everywhere, ratio)
    yield _times(m, "decimal_down", 10.0, everywhere, ratio)
    dry, basis = m.amounts.get("dry_matter", np.full(len(m), np.nan)), m.basis("gross_energy")
    moist, residual = dry < 0.97, m.value("residual_moisture")
    yield _times(m, "dry_matter_as_is", dry, (basis == AS_IS) & moist, 100 * dry)
    yield _times(m, "as_is_as_dry_matter", 1 / dry, (basis == DRY) & moist, 100 * dry)
    yield _times(m, "as_analysed_as_dry_matter", 1 / (1 - residual), (basis == DRY) & (residual > 0.01), 100 * residual)
    # of a powder whose residual moisture is known, or of one dried to a usual few per cent
    left = np.where(np.isfinite(residual), residual, 0.04)
    yield _times(m, "as_analysed_as_is", dry / (1 - left), (basis == AS_IS) & (dry < 0.85), 100 * dry)


# ---- factors on the composition ----------------------------------------------------------------------------------


def _scaled(m: Matrices, identity: str, columns: dict[str, np.ndarray], applies: np.ndarray, amount: np.ndarray | None,
            **more: Any) -> Effect:  # fmt: skip
    """The columns must be multiplied by their factor to be right."""
    k = len(m)
    mass, energy, v11, v12, v22, density = (np.zeros(k) for _ in range(6))
    density += 1.0
    for column, factor in columns.items():
        if column not in m.slope_energy:
            continue
        value, u = np.nan_to_num(m.value(column)), m.u(column)
        first, last = m.slope_mass.get(column, np.zeros(k)), m.slope_energy[column]
        mass, energy = mass + first * value * (1 - factor), energy + last * value * (1 - factor)
        grown = (factor**2 - 1) * u**2
        v11, v12, v22 = v11 + first**2 * grown, v12 + first * last * grown, v22 + last**2 * grown
    return Effect(identity, applies & np.isfinite(energy), mass, energy, np.ones(k), np.zeros(k), exact=True, in_measured=0.0,
                  extra=(v11, v12, v22), density=density, amount=amount, repeats=entry(identity)["repeats"], **more)  # fmt: skip


def _composition(m: Matrices, heats: System, target: str) -> Iterator[Effect]:
    dry = m.amounts.get("dry_matter", np.full(len(m), np.nan))
    moist = dry < 0.97
    here = {c: m.basis(c) for c in COMPOSITION if c in m.slope_energy}
    for identity, basis, factor in (
        ("composition_of_dry_matter_as_is", AS_IS, dry),
        ("composition_as_is_as_dry_matter", DRY, 1 / dry),
    ):
        columns = {c: np.where(b == basis, factor, 1.0) for c, b in here.items()}
        count = sum(((b == basis) & np.isfinite(m.value(c)) for c, b in here.items()), np.zeros(len(m), dtype=int))
        yield _scaled(m, identity, columns, moist & (count >= 2), 100 * dry)


def _protein(m: Matrices, heats: System, target: str) -> Iterator[Effect]:
    feed = heats.nitrogen_factor == "feed"
    protein, nitrogen = m.value("crude_protein"), m.value("nitrogen")
    lone = np.isfinite(protein) & ~np.isfinite(nitrogen)
    stated = m.value("nitrogen_factor")
    factor = np.where(np.isfinite(stated), stated, 6.25)
    yield _scaled(
        m,
        "nitrogen_as_protein",
        {"crude_protein": factor},
        lone & (protein < 0.16),
        100 * protein,
        column="crude_protein",
    )
    yield _scaled(
        m, "protein_as_nitrogen", {"nitrogen": 1 / factor}, np.isfinite(nitrogen), 100 * nitrogen, column="nitrogen"
    )
    groups = food_groups()
    own = np.array([float(groups.get(str(g), {}).get("nitrogen_factor") or np.nan) for g in m.text("food_group")])
    # nobody stated a factor: the tool turned the protein into nitrogen by 6.25, and back by the group's own
    yield _scaled(m, "nitrogen_factor", {"crude_protein": 6.25 / own},
                  lone & ~np.isfinite(stated) & (not feed) & np.isfinite(own), own, column="crude_protein")  # fmt: skip
    solids = m.amounts.get("solids", np.full(len(m), np.nan))
    share = m.amounts.get("crude_protein", np.full(len(m), np.nan)) / solids
    ruminant = np.full(len(m), target in RUMINANTS) & (share > UREA_FROM)
    hp, hn, hur = (heat_of("ge_heats_feed", x) for x in ("hp", "hn", "hur"))
    silage = np.char.find(m.text("form").astype(str), "silage") >= 0
    known = np.isfinite(m.value("urea")) | np.isfinite(m.value("nonprotein_nitrogen"))
    # one of urea stands in crude protein as 2.91541 (N x 6.25), and takes 1.91541 from what is found by difference
    mass = np.where(m.two, 1.91541, 0.0)
    energy = -np.where(m.two, 2.91541 * hp - hur, 2.91541 * hp - 1.91541 * hn - hur)
    yield _sized(
        m, "urea_as_protein", feed & ~known & ~silage & (share > 0.05), mass, energy, in_measured=0.0, pointed=ruminant
    )


# ---- fibre, ash and what carbohydrate means ------------------------------------------------------------------------


def _sized(m: Matrices, identity: str, applies: np.ndarray | bool, mass: np.ndarray | float, energy: np.ndarray | float,
           in_measured: float, **more: Any) -> Effect:  # fmt: skip
    """An error whose size is not known but usual."""
    k, e = len(m), entry(identity)
    return Effect(
        identity, np.broadcast_to(applies, k), np.broadcast_to(mass, k), np.broadcast_to(energy, k),
        np.full(k, e.get("size", 0.0)), np.full(k, e.get("spread", 0.0)), exact=False, in_measured=in_measured,
        low=e["low"], high=e["high"], repeats=e["repeats"], **more,
    )  # fmt: skip


def _known(
    m: Matrices, identity: str, applies: np.ndarray, column: str, amount: np.ndarray, sign: float = 1.0
) -> Effect:
    """A column too large (too small: sign -1) by an amount that the table itself gives, kg/kg on the working basis."""
    k = len(m)
    mass, energy = m.effect(column)
    size = np.nan_to_num(amount)
    return Effect(identity, applies & (size > 0.003), sign * mass * size, sign * energy * size, np.ones(k), np.zeros(k),
                  exact=True, in_measured=0.0, amount=100 * size, repeats=entry(identity)["repeats"], column=column)  # fmt: skip


def _fibre_and_ash(m: Matrices, heats: System, target: str) -> Iterator[Effect]:
    available = np.isfinite(m.value("available_carbohydrate"))
    fibre = m.amounts.get("total_dietary_fibre", np.full(len(m), np.nan))
    ash = m.amounts.get("ash", np.full(len(m), np.nan))
    yield _known(m, "fibre_twice", available, "available_carbohydrate", fibre)
    difference = np.isfinite(m.value("carbohydrate_by_difference"))
    yield _known(m, "fibre_outside", difference & ~available, "carbohydrate_by_difference", fibre, sign=-1.0)
    for column, given in (
        ("available_carbohydrate", available),
        ("carbohydrate_by_difference", difference & ~available),
    ):
        yield _known(m, "ash_in_carbohydrate", given, column, ash)
    heat = heat_of("ge_heats_best", "hfi")
    lost_mass = np.where(m.two, -1.0, 0.0)
    undetermined = available & ~np.isfinite(m.value("total_dietary_fibre")) & ~np.isfinite(m.value("soluble_fibre"))
    yield _sized(m, "fibre_left_out", undetermined, lost_mass, heat, in_measured=0.0, pointed=undetermined)
    method = m.text("fibre_method")
    old = np.array([x != "" and x not in WHOLE_FIBRE for x in method], dtype=bool)
    whole = np.isin(method.astype(str), WHOLE_FIBRE)
    yield _sized(m, "low_molecular_fibre", available & np.isfinite(fibre) & ~undetermined & ~whole, lost_mass, heat,
                 in_measured=0.0, pointed=old)  # fmt: skip


# ---- water, volatiles, the bomb ------------------------------------------------------------------------------------


def _water(m: Matrices, heats: System, target: str) -> Iterator[Effect]:
    basis, residual = m.basis("gross_energy"), m.value("residual_moisture")
    no_powder = (basis == DRY) & ~np.isfinite(residual)
    yield _sized(m, "powder_moisture_forgotten", no_powder, 0.0, -m.measured, in_measured=1.0, pointed=no_powder,
                 amount=np.array(100.0))  # fmt: skip
    yield _sized(m, "moisture_taken_up", ~no_powder, 0.0, -m.measured, in_measured=1.0, amount=np.array(100.0))
    yield _sized(m, "moisture_lost", True, 0.0, m.measured, in_measured=1.0, amount=np.array(100.0))
    # what would be lost is known: the alcohol and volatile acids that the table gives
    lost, amount = np.zeros(len(m)), np.zeros(len(m))
    for quantity, symbol in (
        ("alcohol", "het"),
        ("acetic_acid", "hac"),
        ("propionic_acid", "hpr"),
        ("butyric_acid", "hbu"),
    ):
        given = np.nan_to_num(m.amounts.get(quantity, np.zeros(len(m))))
        lost, amount = lost + given * heat_of("ge_heats_feed", symbol), amount + given
    one = np.ones(len(m))
    yield Effect("volatiles_lost", amount > 0.003, np.zeros(len(m)), -lost, one, 0.15 * one, exact=False, in_measured=1.0,
                 low=0.3, high=1.3, amount=100 * amount, pointed=amount > 0.003, repeats="volatiles")  # fmt: skip


def _bomb(m: Matrices, heats: System, target: str) -> Iterator[Effect]:
    ash = m.amounts.get("ash", np.full(len(m), np.nan)) / m.amounts.get("solids", np.full(len(m), np.nan))
    much = ash > MUCH_ASH
    yield _sized(m, "incomplete_combustion", True, 0.0, -m.measured, in_measured=1.0, pointed=much,
                 amount=np.array(100.0), fill={"ash": 100 * ash})  # fmt: skip
    yield _sized(m, "acid_left_out", True, 0.0, m.measured, in_measured=1.0, amount=np.array(100.0))
    lime = heat_of("ge_heats_feed", "hca")
    known = np.isfinite(m.value("limestone"))
    yield _sized(m, "carbonate", ~known & (ash > 0.05), 0.0, -lime, in_measured=1.0, pointed=much)


def _fat(m: Matrices, heats: System, target: str) -> Iterator[Effect]:
    method = m.text("fat_method").astype(str)
    mass, energy = m.effect("crude_fat")
    yield _sized(m, "ether_extract", np.isin(method, ("", "None", "ether_extract")), -mass, -energy, in_measured=0.0,
                 pointed=method == "ether_extract", column="crude_fat")  # fmt: skip


# ---- slips and single determinations -------------------------------------------------------------------------------


def _decimals(m: Matrices, heats: System, target: str) -> Iterator[Effect]:
    for column in DETERMINATIONS:
        if column == "gross_energy" or column not in m.slope_energy:
            continue
        value, high = m.value(column), dictionary()[column].range[1]
        for way, factor in (("large", 0.1), ("small", 10.0)):
            yield _scaled(m, "decimal_column", {column: np.full(len(m), factor)}, (value > 0.002) & (factor * value <= high),
                          None, fill={"column": short_title(column), "way": way}, column=column)  # fmt: skip


def _single(m: Matrices, heats: System, target: str) -> Iterator[Effect]:
    """One determination wrong for no reason the library knows: any size, the likelier the smaller in its own u."""
    for column, repeat in DETERMINATIONS.items():
        if column not in m.slope_energy:
            continue
        mass, energy = m.slopes(column)
        value, u = m.value(column), m.u(column)
        scale = DISPLAY_SCALE[dictionary()[column].dimension]
        spread = np.maximum(12 * u, 0.05 * np.abs(value))
        yield Effect(
            "measurement", np.isfinite(value) & (spread > 0), mass, energy, np.zeros(len(m)), spread, exact=False,
            in_measured=1.0 if column == "gross_energy" else 0.0, amount=np.array(1.0 / scale), column=column, repeats=repeat,
            fill={"column": short_title(column), "unit": "MJ/kg" if column == "gross_energy" else "g per 100 g"},
        )  # fmt: skip


KINDS: tuple[Callable[[Matrices, System, str], Iterator[Effect]], ...] = (
    _gross_energy, _composition, _protein, _fibre_and_ash, _water, _bomb, _fat, _decimals, _single,
)  # fmt: skip
