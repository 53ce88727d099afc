"""Declared values of many samples: time against evaluating one system, and how it grows.

Run: python tests/benchmarks/bench_declare.py [samples]     prints a table; exit 1 if a bar is missed.

Invented foods, each with a declared energy near the law's own. Ratio: time of `declare` over time of evaluating the law's
sum alone on the same samples, both the fastest of three. The sum is a handful of multiplications; `declare` also rounds
every nutrient in decimals, asks what each printed figure can mean and, in Europe, propagates every nutrient's tolerance.

Bars, set after measuring 80 to 500 times and growth of 9 to 14: at most 1000 times one evaluation under any law, and ten
times the samples take at most twenty times as long (a loop over samples would miss the first bar many times over).
"""

import sys
from time import perf_counter

import numpy as np

from energy.catalogue.reader import systems
from energy.declare import declare
from energy.evaluate import evaluate
from energy.samples import Samples

SEED = 20261201
LAWS = ("eu_1169_2011", "us_21cfr_101_9_b", "fsanz_sch11", "ca_cfia_atwater", "jp_food_labelling_standard")
MOST_RATIO, MOST_GROWTH = 1000.0, 20.0


def foods(n: int) -> Samples:
    rng = np.random.default_rng(SEED)
    protein, fat, fibre, ash = (rng.uniform(0, high, n) for high in (0.25, 0.3, 0.1, 0.03))
    available = rng.uniform(0, 0.3, n)
    moisture = 1 - protein - fat - fibre - ash - available
    samples = Samples.from_arrays(
        {"moisture": moisture, "crude_protein": protein, "crude_fat": fat, "total_dietary_fibre": fibre, "ash": ash,
         "available_carbohydrate": available}
    )  # fmt: skip
    kcal = (4 * (protein + available) + 9 * fat + 2 * fibre) * 100
    samples.memo["declared"] = {"kcal": np.round(kcal * rng.normal(1, 0.1, n))}
    return samples


def fastest(work, times: int = 3) -> float:
    taken = []
    for _ in range(times):
        start = perf_counter()
        work()
        taken.append(perf_counter() - start)
    return min(taken)


def main() -> int:
    n = int(sys.argv[1]) if len(sys.argv) > 1 else 100_000
    catalogue = systems()
    many, few = foods(n), foods(n // 10)
    missed = 0
    print(f"{'law':<30}{'evaluate ms':>12}{'declare ms':>12}{'ratio':>8}{'growth':>8}")
    for law in LAWS:
        system = catalogue[law]
        one = fastest(lambda system=system: evaluate(many, [system]))
        whole = fastest(lambda system=system: declare(many, system, catalogue))
        small = fastest(lambda system=system: declare(few, system, catalogue))
        ratio, growth = whole / one, whole / small
        bad = ratio > MOST_RATIO or growth > MOST_GROWTH
        missed += bad
        print(f"{law:<30}{one * 1e3:>12.1f}{whole * 1e3:>12.1f}{ratio:>8.1f}{growth:>8.1f}{'  missed' if bad else ''}")
    return 1 if missed else 0


if __name__ == "__main__":
    sys.exit(main())
