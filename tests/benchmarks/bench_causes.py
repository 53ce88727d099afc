"""How often is the cause named that was planted? Errors of the library, planted in the demo's own foods and feeds.

Run: python tests/benchmarks/bench_causes.py [copies]     prints a table; exit 1 if a bar is missed.

Every faultless demo sample is made to close exactly (gross energy, and carbohydrate where it was determined), then copied
with the scatter of its own uncertainties and of the heats. One error per copy is planted by hand here, at a realistic
size, in the columns as stated; uncertainties are then filled in as for a table. Counted: among copies whose verdict on
gross energy is 'discordant', how often the error is in the set of probable causes and how often it is named first; the
latter also among those samples whose figures can separate it, that is where without scatter, and were all errors equally
common, it is likelier than all others together. On clean copies: how often any cause is named.
"""

import glob
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np

import energy
from energy.compare import VERDICTS
from energy.matrices import matrices
from energy.samples import BASIS_CODE

ROOT = Path(__file__).parents[2]
KCAL = 4.184
#: an error that makes fewer of its copies discordant than this is too small to be seen; scatter makes those few
HARDLY = 0.02
#: a column without which the error cannot be made
NEEDS = {
    "fibre_twice": "available_carbohydrate", "fibre_left_out": "total_dietary_fibre", "ash_in_carbohydrate": "available_carbohydrate",
    "low_molecular_fibre": "available_carbohydrate", "nitrogen_as_protein": "crude_protein", "urea_as_protein": "crude_protein",
    "ether_extract": "crude_fat", "decimal_crude_fat": "crude_fat", "decimal_crude_protein": "crude_protein",
    "decimal_ash": "ash", "protein_as_nitrogen": "crude_protein", "nitrogen_factor": "crude_protein",
    "fibre_outside": "carbohydrate_by_difference",
}  # fmt: skip


def demos():
    for path in sorted(glob.glob(str(ROOT / "demo_data" / "f*.csv"))):
        name = Path(path).name
        if name.startswith(("foods", "feeds")):
            yield name, energy.read_samples(path), "human" if name.startswith("foods") else None


def clean(batch, target):
    """Assessment of a demo and the rows of its faultless samples."""
    a = energy.assess(batch, target=target)
    named = a.causes[0] != ""
    good = (
        ~named
        & np.isfinite(a.blocks.measurement[0])
        & np.isin(a.verdict[0], [VERDICTS.index(v) for v in ("concordant", "inconclusive", "biased")])
    )
    return a, np.flatnonzero(good)


def closing(a, rows):
    """Columns of the rows, changed so that both balances close, and the SD of the heats."""
    heats = a.catalogue[a.blocks.pairs[0].heats]
    m = matrices(a.samples, heats, rows)
    base = a.samples.take(m.rows)
    columns = {c: v.copy() for c, v in base.columns.items()}
    energy_left = m.energy.copy()
    for c in ("available_carbohydrate", "carbohydrate_total"):
        if c in columns and c in m.slope_mass:
            has = m.two & np.isfinite(columns[c])
            change = np.where(has, m.mass / np.where(m.slope_mass[c] == 0, 1, m.slope_mass[c]), 0.0)
            columns[c] = columns[c] - change
            energy_left = energy_left - np.where(has, m.slope_energy[c] * change, 0.0)
    columns["gross_energy"] = columns["gross_energy"] - energy_left / m.slope_energy["gross_energy"]
    inputs = sum((m.slope_energy[c] * m.u(c)) ** 2 for c in m.slope_energy)
    return (
        replace(base, columns=columns, memo={}),
        np.sqrt(np.maximum(m.v22 - inputs, 0)) / np.abs(m.slope_energy["gross_energy"]),
        m,
    )


def scattered(base, model, copies, rng):
    n = len(base)
    take = np.repeat(np.arange(n), copies)
    many = base.take(take)
    many.ids = np.array([f"{i}-{k}" for k, i in enumerate(many.ids)], dtype=object)
    for c, v in many.columns.items():
        u = np.nan_to_num(many.u[c])
        if c == "gross_energy":
            u = np.hypot(u, model[take])
        many.columns[c] = np.where(np.isfinite(v), np.maximum(v + rng.normal(size=len(v)) * u, 0.0), v)
    return many


def refreshed(samples):
    """Default uncertainties filled in anew, as they would be for a table with these figures."""
    for c in samples.columns:
        default = samples.u_source[c] == 3
        samples.u[c] = np.where(default, np.nan, samples.u[c])
    samples.memo = {k: v for k, v in samples.memo.items() if k == "declared"}
    samples.fill_default_u()
    return samples


def column(samples, name):
    return samples.columns.get(name, np.full(len(samples), np.nan))


def on(samples, name, basis):
    return samples.basis.get(name, np.full(len(samples), -1)) == BASIS_CODE[basis]


def dry(samples):
    d = column(samples, "dry_matter")
    return np.where(np.isfinite(d), d, 1 - column(samples, "moisture"))


def shrink(samples, amount, name="crude_fat"):
    """A column of a composition too low by an amount; a remainder found by difference from it too high."""
    samples.columns[name] = samples.columns[name] - amount
    for rest in ("nitrogen_free_extract", "carbohydrate_by_difference"):
        if rest in samples.columns:
            samples.columns[rest] = samples.columns[rest] + amount


def plant(kind, s, rng):
    """Change the columns of s in place; returns the rows in which the error could be planted."""
    n = len(s)
    everywhere = np.ones(n, dtype=bool)
    ge = s.columns["gross_energy"]
    if kind in NEEDS and NEEDS[kind] not in s.columns:
        return ~everywhere
    d, residual = dry(s), column(s, "residual_moisture")
    size = rng.uniform(0.02, 0.06, n)

    def factor(f, where=everywhere):
        s.columns["gross_energy"] = np.where(where, ge * f, ge)
        return where

    if kind == "kcal_as_kJ":
        return factor(1 / KCAL)
    if kind == "kJ_as_kcal":
        return factor(KCAL)
    if kind == "calorie_other_way":
        return factor(4.1868 / 4.184)
    if kind == "decimal_up":
        return factor(10)
    if kind == "decimal_down":
        return factor(0.1)
    if kind == "dry_matter_as_is":
        return factor(1 / d, on(s, "gross_energy", "as_is") & (d < 0.95))
    if kind == "as_is_as_dry_matter":
        return factor(d, on(s, "gross_energy", "dry_matter") & (d < 0.95))
    if kind == "as_analysed_as_dry_matter":  # the powder's residual moisture is known, and was not used
        where = on(s, "gross_energy", "dry_matter")
        left = rng.uniform(0.04, 0.09, n)
        s.columns["residual_moisture"] = np.where(where, left, residual)
        s.fill_default_u()
        return factor(1 - left, where)
    if kind == "protein_as_nitrogen":
        nitrogen = np.where(
            np.isfinite(column(s, "nitrogen")), column(s, "nitrogen"), column(s, "crude_protein") / 6.25
        )
        where = np.isfinite(nitrogen) & ~np.isfinite(column(s, "nitrogen_free_extract"))
        where &= np.isnan(column(s, "nitrogen_factor")) | (column(s, "nitrogen_factor") == 6.25)
        stated = s.basis["nitrogen"] if "nitrogen" in s.columns else s.basis["crude_protein"]
        s.columns["nitrogen"] = np.where(where, 6.25 * nitrogen, column(s, "nitrogen"))
        s.basis["nitrogen"] = stated.copy()
        s.columns["crude_protein"] = np.where(where, np.nan, s.columns["crude_protein"])
        s.fill_default_u()
        return where
    if kind == "nitrogen_factor":
        from energy.catalogue.tables import food_groups

        groups = s.text.get("food_group", np.full(n, "", dtype=object))
        own = np.array([float(food_groups().get(str(g), {}).get("nitrogen_factor") or np.nan) for g in groups])
        where = np.isfinite(own) & (np.abs(own - 6.25) > 0.05) & np.isnan(column(s, "nitrogen_factor"))
        where &= np.isfinite(column(s, "crude_protein")) & ~np.isfinite(column(s, "nitrogen"))
        s.columns["crude_protein"] = np.where(
            where, s.columns["crude_protein"] * own / 6.25, s.columns["crude_protein"]
        )
        return where
    if kind == "fibre_outside":
        fibre, difference = column(s, "total_dietary_fibre"), column(s, "carbohydrate_by_difference")
        where = (fibre > 0.02) & (difference > fibre) & ~np.isfinite(column(s, "available_carbohydrate"))
        s.columns["carbohydrate_by_difference"] = np.where(where, difference - fibre, difference)
        return where
    if kind == "as_analysed_as_is":
        return factor(
            (1 - np.where(np.isfinite(residual), residual, 0.04)) / d, on(s, "gross_energy", "as_is") & (d < 0.8)
        )
    if kind in ("composition_of_dry_matter_as_is", "composition_as_is_as_dry_matter"):
        basis, f = ("as_is", 1 / d) if kind == "composition_of_dry_matter_as_is" else ("dry_matter", d)
        where = d < 0.95
        parts = [
            c
            for c in (
                "crude_protein",
                "nitrogen",
                "crude_fat",
                "ash",
                "available_carbohydrate",
                "total_dietary_fibre",
                "crude_fibre",
                "nitrogen_free_extract",
                "sugars",
                "starch",
                "carbohydrate_by_difference",
            )
            if c in s.columns
        ]
        where = where & np.logical_and.reduce([on(s, c, basis) | ~np.isfinite(s.columns[c]) for c in parts])
        # a remainder would leave the sum negative: such a table is refused, not explained
        total = sum(np.nan_to_num(s.columns[c]) for c in ("crude_protein", "crude_fat", "ash") if c in s.columns)
        where &= total * f < np.where(basis == "as_is", d, 1.0)
        for c in parts:
            s.columns[c] = np.where(where, s.columns[c] * f, s.columns[c])
        return where
    if kind == "nitrogen_as_protein":
        p = column(s, "crude_protein")
        where = np.isfinite(p) & ~np.isfinite(column(s, "nitrogen")) & ~np.isfinite(column(s, "nitrogen_free_extract"))
        s.columns["crude_protein"] = np.where(where, p / 6.25, p)
        return where
    if kind == "ether_extract":
        bound = rng.uniform(0.02, 0.06, n)
        method = s.text.get("fat_method", np.full(n, None, dtype=object))
        where = (s.columns["crude_fat"] > bound + 0.005) if "crude_fat" in s.columns else ~everywhere
        shrink(s, np.where(where, bound, 0.0))
        s.text["fat_method"] = np.array(["ether_extract"] * n, dtype=object)
        del method
        return where
    if kind == "urea_as_protein":
        # w of urea on dry matter: stands in protein as 2.91541 w; burns with 10.52 MJ/kg
        w = rng.uniform(0.015, 0.04, n)
        p = column(s, "crude_protein")
        silage = np.char.find(s.text.get("form", np.full(n, "", dtype=object)).astype(str), "silage") >= 0
        where = on(s, "crude_protein", "dry_matter") & on(s, "gross_energy", "dry_matter") & (p > 0.10) & ~silage
        where &= ~np.isfinite(column(s, "urea")) & ~np.isfinite(column(s, "nonprotein_nitrogen"))
        s.columns["crude_protein"] = np.where(where, p + 2.91541 * w, p)
        if "nitrogen_free_extract" in s.columns:
            s.columns["nitrogen_free_extract"] = np.where(
                where, s.columns["nitrogen_free_extract"] - 2.91541 * w, s.columns["nitrogen_free_extract"]
            )
        # one of urea takes the place of one of nitrogen-free extract at 17.5
        s.columns["gross_energy"] = np.where(where, ge + w * (10.52 - 17.5), ge)
        return where
    if kind == "moisture_taken_up":
        return factor(1 - size, on(s, "gross_energy", "as_is"))
    if kind == "moisture_lost":
        return factor(1 / (1 - size))
    if kind == "powder_moisture_forgotten":
        return factor(1 - size, on(s, "gross_energy", "dry_matter") & ~np.isfinite(residual))
    if kind == "incomplete_combustion":
        ash = column(s, "ash") / np.where(on(s, "ash", "dry_matter"), 1.0, d)
        return factor(1 - size, ash > 0.0)
    if kind == "volatiles_lost":
        alcohol = column(s, "alcohol")
        where = (alcohol > 0.02) & on(s, "gross_energy", "as_is")
        s.columns["gross_energy"] = np.where(where, ge - 29.67 * alcohol, ge)
        return where
    if kind == "fibre_twice":
        f = column(s, "total_dietary_fibre")
        where = (f > 0.02) & np.isfinite(column(s, "available_carbohydrate"))
        s.columns["available_carbohydrate"] = np.where(
            where, column(s, "available_carbohydrate") + f, column(s, "available_carbohydrate")
        )
        return where
    if kind == "fibre_left_out":
        f = column(s, "total_dietary_fibre")
        where = (f > 0.02) & np.isfinite(column(s, "available_carbohydrate"))
        s.columns["total_dietary_fibre"] = np.where(where, np.nan, f)
        return where
    if kind == "low_molecular_fibre":
        f = column(s, "total_dietary_fibre")
        missed = rng.uniform(0.02, 0.08, n)
        where = (f > 0.0) & np.isfinite(column(s, "available_carbohydrate"))
        # the material holds more fibre than the method found: other components make room, in proportion
        room = 1 - missed
        for c in (
            "moisture",
            "crude_protein",
            "crude_fat",
            "ash",
            "available_carbohydrate",
            "total_dietary_fibre",
            "sugars",
            "starch",
            "polyols",
            "alcohol",
        ):
            if c in s.columns:
                s.columns[c] = np.where(where, s.columns[c] * room, s.columns[c])
        s.columns["gross_energy"] = np.where(where, ge * room + 17.4 * missed, ge)
        s.text["fibre_method"] = np.array(["aoac_985_29"] * n, dtype=object)
        return where
    if kind == "ash_in_carbohydrate":
        a = column(s, "ash")
        where = (a > 0.02) & np.isfinite(column(s, "available_carbohydrate"))
        s.columns["available_carbohydrate"] = np.where(
            where, column(s, "available_carbohydrate") + a, column(s, "available_carbohydrate")
        )
        return where
    if kind == "acid_left_out":
        return factor(1.0015)
    if kind == "carbonate":
        lime = rng.uniform(0.02, 0.08, n)
        s.columns["gross_energy"] = ge - 0.9 * lime
        return everywhere
    if kind.startswith("decimal_"):
        c = kind.removeprefix("decimal_")
        v = column(s, c)
        where = v > 0.01
        s.columns[c] = np.where(where, v / 10, v)
        return where
    if kind == "swapped":
        other = np.roll(np.arange(n), 1)
        where = (np.arange(n) // 2 * 2 + 1 < n) & everywhere
        other = np.where(np.arange(n) % 2 == 0, np.minimum(np.arange(n) + 1, n - 1), np.arange(n) - 1)
        alike = s.basis["gross_energy"] == s.basis["gross_energy"][other]
        where = where & alike & alike[other]
        s.columns["gross_energy"] = np.where(where, ge[other], ge)
        return where
    raise KeyError(kind)


KINDS = (
    "kcal_as_kJ", "kJ_as_kcal", "calorie_other_way", "decimal_up", "decimal_down", "dry_matter_as_is", "as_is_as_dry_matter",
    "as_analysed_as_dry_matter", "as_analysed_as_is", "composition_of_dry_matter_as_is", "composition_as_is_as_dry_matter",
    "nitrogen_as_protein", "protein_as_nitrogen", "nitrogen_factor", "urea_as_protein", "powder_moisture_forgotten", "moisture_taken_up", "moisture_lost", "volatiles_lost",
    "fibre_twice", "fibre_outside", "fibre_left_out", "low_molecular_fibre", "ash_in_carbohydrate", "incomplete_combustion", "acid_left_out",
    "ether_extract", "carbonate", "decimal_crude_fat", "decimal_crude_protein", "decimal_ash", "swapped",
)  # fmt: skip


def matches(effect, kind):
    if kind.startswith("decimal_") and kind not in ("decimal_up", "decimal_down"):
        return (
            effect.id == "decimal_column"
            and effect.column == kind.removeprefix("decimal_")
            and effect.fill["way"] == "small"
        )
    return effect.id == kind


def tried(samples, target):
    a = energy.assess(samples, target=target)
    return a, a.tried


def count(kind, base, model, target, copies, rng):
    """(discordant copies, in the set, first, separable, first of these, size of sets, planted) for one demo."""
    # the noise-free case decides what the figures can separate
    still = refreshed(replace(base.take(np.arange(len(base))), memo={}))
    where0 = plant(kind, still, np.random.default_rng(1))
    _, c0 = tried(refreshed(still), target)
    index = [j for j, e in enumerate(c0.effects) if matches(e, kind)]
    clear = np.zeros(len(base), dtype=bool)
    if index:
        share = c0.likelihood[index].sum(axis=0)
        clear[c0.m.rows] = share > 0.5
    order = np.repeat(np.arange(len(base)), copies)
    if kind == "swapped":  # neighbours of one copy are swapped, not copies of one sample
        order = np.tile(np.arange(len(base)), copies)
    many = scattered(base, model, copies, rng)
    if kind == "swapped":
        many = many.take(np.argsort(np.tile(np.arange(copies), len(base)), kind="stable"))
        pieces = [many.take(np.arange(k * len(base), (k + 1) * len(base))) for k in range(copies)]
    else:
        pieces = [many]
    total = np.zeros(7)
    at = 0
    for piece in pieces:
        where = plant(kind, piece, rng)
        a, c = tried(refreshed(piece), target)
        index = [j for j, e in enumerate(c.effects) if matches(e, kind)]
        discordant = (a.verdict[0] == VERDICTS.index("discordant")) & where
        rows = c.m.rows
        open_rows = discordant[rows]
        inside = c.beside()[index].any(axis=0) & open_rows if index else np.zeros(len(rows), dtype=bool)
        first = np.isin(c.best, index) & c.named & open_rows
        separable = clear[order[at : at + len(piece)]][rows] & open_rows
        total += [discordant.sum(), inside.sum(), first.sum(), separable.sum(), (first & separable).sum(),
                  (c.beside().sum(axis=0) * open_rows).sum(), where.sum()]  # fmt: skip
        at += len(piece)
    del where0
    return total


def main(copies=20):
    rng = np.random.default_rng(20261201)
    bases = []
    for name, batch, target in demos():
        a, rows = clean(batch, target)
        if len(rows):
            base, model, _ = closing(a, rows)
            bases.append((name, base, model, target))
    named = samples = 0
    for _, base, model, target in bases:
        many = refreshed(scattered(base, model, copies, rng))
        a = energy.assess(many, target=target)
        named += int((a.causes[0] != "").sum())
        samples += len(many)
    print(f"clean copies: {samples}, a cause is named on {100 * named / samples:.2f} % (bar 2 %)")
    ok = named <= 0.02 * samples
    print(
        f"{'error':34}{'planted':>8}{'discordant':>11}{'in the set':>11}{'first':>8}{'separable':>10}{'first':>8}{'mean set':>9}"
    )
    whole = np.zeros(7)
    for kind in KINDS:
        total = sum((count(kind, base, model, target, copies, rng) for _, base, model, target in bases), np.zeros(7))
        n, inside, first, apart, first_apart, sets, planted = total
        whole += total
        if not planted:
            print(f"{kind:34}{0:>8}   no demo sample can carry it")
            continue
        if n < HARDLY * planted:
            print(
                f"{kind:34}{int(planted):>8}{int(n):>11}   hardly ever discordant: scatter makes those, not the error"
            )
            continue
        line = (
            f"{kind:34}{int(planted):>8}{int(n):>11}{100 * inside / n:>10.1f}%{100 * first / n:>7.1f}%{int(apart):>10}"
        )
        line += f"{100 * first_apart / apart:>7.1f}%" if apart else f"{'-':>8}"
        good = inside >= 0.95 * n and (apart == 0 or first_apart >= 0.75 * apart)
        ok &= bool(good)
        print(f"{line}{sets / n:>9.1f}{'' if good else '   missed'}")
    n, inside, first, apart, first_apart, sets, planted = whole
    print(
        f"{'all':34}{int(planted):>8}{int(n):>11}{100 * inside / n:>10.1f}%{100 * first / n:>7.1f}%{int(apart):>10}{100 * first_apart / apart:>7.1f}%{sets / n:>9.1f}"
    )
    return 0 if ok else 1


if __name__ == "__main__":
    sys.exit(main(*(int(x) for x in sys.argv[1:])))
