"""Is a verdict right as often as it says? Samples with a known truth, taken through the whole assessment.

Run: python tests/benchmarks/bench_verdict.py [samples] [plot.html]     prints tables; exit 1 if a bar is missed.

A food and a feed whose gross energy is exactly what the heats of its composition give, plus a true difference. Every
determination is in duplicate: each value carries an error of its laboratory and one of each duplicate, the gross energy
besides the misfit of the general heats. Three ways to know u: given by the user, pooled over batches of fifteen samples
(fifteen degrees of freedom), the dictionary's default. The limit is set so that u(difference)/limit has the value wanted.

Bars: true difference 0 and u up to the limit: at most 1 % discordant, and the interval covers the truth in 94 to 96 %;
true difference twice the limit and u a fifth of it: at least 99 % discordant; u under a quarter of the limit and the
true difference under half of it: at most 5 % inconclusive.
"""

import sys
from dataclasses import dataclass

import numpy as np

import energy
from energy.compare import DISCORDANT, INCONCLUSIVE, VERDICTS
from energy.quantities import dictionary
from energy.samples import Samples
from energy.uncertainty import mean_of, of_means

SEED = 20261201
BATCH = 15
RATIOS = (0.05, 0.1, 0.2, 0.24, 0.35, 0.5, 0.75, 1.0, 1.5)
DIFFERENCES = (0.0, 0.25, 0.49, 0.75, 1.0, 1.25, 1.5, 2.0, 3.0)
#: repeatability within a laboratory as a share of what the dictionary gives between laboratories (of the simulation)
WITHIN = 0.8


@dataclass
class Material:
    target: str
    basis: str
    columns: dict[str, float]


MATERIALS = {
    "food": Material("human", "as_is", {"moisture": 0.36, "crude_protein": 0.09, "crude_fat": 0.04, "ash": 0.015,
                                        "available_carbohydrate": 0.43, "total_dietary_fibre": 0.065}),
    "feed": Material("growing_pig", "as_is", {"moisture": 0.12, "crude_protein": 0.17, "crude_fat": 0.04, "ash": 0.055,
                                              "crude_fibre": 0.045}),
}  # fmt: skip


def between(name, value):
    absolute, relative = dictionary()[name].default_u
    return np.hypot(absolute, relative * value)


def truth(material):
    """Gross energy by the heats at the exact composition, u of the heats there."""
    columns = {c: np.array([v]) for c, v in material.columns.items()} | {"gross_energy": np.array([20.0])}
    a = energy.assess(Samples.from_arrays(columns, basis=material.basis), target=material.target)
    return 20.0 - a.blocks.measurement[0, 0], a.blocks.u_model[0, 0]


def duplicates(material, n, way, rng):
    """column -> (2, n) values without a true difference."""
    ge, model = truth(material)
    found = {}
    for c, value in (material.columns | {"gross_energy": ge}).items():
        u = between(c, value)
        shared = rng.normal(size=n) * u + (rng.normal(size=n) * model if c == "gross_energy" else 0.0)
        # a default is what one laboratory's result is known to: its duplicates add nothing to it
        within = 0.0 if way == "default" else WITHIN
        found[c] = value + shared + rng.normal(size=(2, n)) * within * u
    return found


def samples_of(material, drawn, difference, way):
    values = {c: np.maximum(x, 1e-6) for c, x in drawn.items()}
    values["gross_energy"] = drawn["gross_energy"] + difference
    means = {c: mean_of(x)[0] for c, x in values.items()}
    n = len(means["gross_energy"])
    if way == "default":
        return Samples.from_arrays(means, basis=material.basis)
    if way == "known":
        ge, _ = truth(material)
        true = material.columns | {"gross_energy": ge}
        u = {c: np.full(n, between(c, true[c]) * np.sqrt(1 + WITHIN**2 / 2)) for c in means}
        return Samples.from_arrays(means, basis=material.basis, u=u)
    u, freedom = {}, {}
    for c, x in values.items():
        parts = [of_means(x[:, i : i + BATCH], dictionary()[c].default_u) for i in range(0, n, BATCH)]
        u[c] = np.concatenate([p[0] for p in parts])
        freedom[c] = np.concatenate([p[2] for p in parts])
    samples = Samples.from_arrays(means, basis=material.basis, u=u)
    samples.freedom = freedom
    return samples


def shares(code):
    return np.bincount(code, minlength=len(VERDICTS)) / len(code)


def main(n=20_000, plot=None):
    n = n // BATCH * BATCH + BATCH
    rows, missed = [], []

    def bar(fine, words):
        if not fine:
            missed.append(words)

    for kind, material in MATERIALS.items():
        for way in ("known", "pooled", "default"):
            rng = np.random.default_rng(SEED)
            drawn = duplicates(material, n, way, rng)
            first = energy.assess(samples_of(material, drawn, 0.0, way), target=material.target)
            u = np.hypot(first.blocks.u_measurement[0], first.blocks.u_model[0])
            size = float(np.median(u))
            covered = np.mean(np.abs(first.blocks.measurement[0]) <= first.coverage_factor[0] * u)
            print(
                f"\n{kind}, u {way}: u(difference) {size:.3f} MJ/kg, the interval covers the truth in {100 * covered:.2f} %"
            )
            bar(0.94 <= covered <= 0.96, f"{kind}, {way}: coverage {covered:.4f}")
            print(f"{'u/limit':>8}{'d/limit':>8}" + "".join(f"{w:>14}" for w in VERDICTS[:4]))
            for ratio in RATIOS:
                limit = size / ratio
                for d in DIFFERENCES:
                    samples = samples_of(material, drawn, d * limit, way)
                    a = energy.assess(samples, target=material.target, limit=f"{limit:.9f} MJ/kg")
                    share = shares(a.verdict[0])
                    print(f"{ratio:>8.2f}{d:>8.2f}" + "".join(f"{100 * x:>13.2f}%" for x in share[:4]))
                    rows += [{"material": kind, "u": way, "u/limit": ratio, "difference/limit": d, "word": w, "share": x}
                             for w, x in zip(VERDICTS, share, strict=True)]  # fmt: skip
                    if d == 0 and ratio <= 1:
                        bar(
                            share[DISCORDANT] <= 0.01,
                            f"{kind}, {way}, u/limit {ratio}: {share[DISCORDANT]:.4f} discordant",
                        )
                    if d == 2 and ratio == 0.2:
                        bar(
                            share[DISCORDANT] >= 0.99,
                            f"{kind}, {way}: {share[DISCORDANT]:.4f} discordant at twice the limit",
                        )
                    small = np.hypot(a.blocks.u_measurement[0], a.blocks.u_model[0]) < limit / 4
                    if d < 0.5 and ratio < 0.25:
                        open_share = np.mean(a.verdict[0][small] == INCONCLUSIVE)
                        bar(open_share <= 0.05, f"{kind}, {way}, {ratio}, {d}: {open_share:.4f} inconclusive")
    print("\nscreening, single_route and not_computed depend on what is in the table, not on the figures: 0 here")
    if plot:
        draw(rows, plot)
    for words in missed:
        print("missed:", words)
    return 1 if missed else 0


def draw(rows, path):
    import altair as alt
    import pandas as pd

    table = pd.DataFrame([r for r in rows if r["word"] in VERDICTS[:4]])
    alt.Chart(table).mark_line(point=True).encode(
        x="difference/limit:Q", y="share:Q", color="word:N", row="u:N", column=alt.Column("u/limit:O"),
        strokeDash="material:N",
    ).properties(width=110, height=110).save(path)  # fmt: skip


if __name__ == "__main__":
    sys.exit(main(*(int(x) if x.isdigit() else x for x in sys.argv[1:])))
