"""Cost of balances, parts and causes for 100,000 samples, as a multiple of one bomb system evaluated with uncertainty.

Run: python tests/benchmarks/bench_explain.py     prints a table; exit 1 if a bar is missed.

Two batches: an ordinary one, in which one sample in twenty is wrong, and one in which every sample is wrong. One thread,
first round dropped, minima compared. The words of a cause are made for the samples that are looked at and are not timed.
"""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[name] = "1"

import sys
import time

import numpy as np

from energy.assessment import assess
from energy.balance import balances
from energy.catalogue.reader import systems
from energy.evaluate import evaluate
from energy.samples import Samples

N, ROUNDS = 100_000, 7
BAR_BALANCES, BAR_ALL = 15, 60


def batch(wrong):
    """A food with determined carbohydrate whose gross energy is right but for a share of the samples."""
    rng = np.random.default_rng(11)
    parts = rng.dirichlet((4, 2, 2, 0.6, 8, 1), N)
    names = ("moisture", "crude_protein", "crude_fat", "ash", "available_carbohydrate", "total_dietary_fibre")
    columns = dict(zip(names, parts.T.copy(), strict=True))
    heats = (0.0, 23.64, 39.33, 0.0, 17.36, 17.4)
    true = parts @ np.array(heats)
    off = np.where(rng.random(N) < wrong, rng.choice((0.85, 0.9, 1.1, 1.15, 0.239, 4.184), N), 1.0)
    columns["gross_energy"] = true * off * (1 + 0.003 * rng.normal(size=N))
    return Samples.from_arrays(columns)


def fastest(run):
    times = []
    for _ in range(ROUNDS):
        start = time.perf_counter()
        kept = run()
        times.append(time.perf_counter() - start)
        del kept
    return min(times[1:])


def main():
    found, catalogue = [], systems()
    for words, wrong in (("one in twenty wrong", 0.05), ("every sample wrong", 1.0)):
        samples = batch(wrong)
        one = fastest(lambda s=samples: evaluate(s, [catalogue["bomb_atwater_general"]], []))
        both = fastest(lambda s=samples: balances(s, catalogue["ge_heats_best"]))

        def everything(s=samples):
            a = assess(s, target="human", systems="default")
            return a.verdict, a.balance, a.tried

        whole = fastest(everything)
        found.append((f"balances, {words}", both / one, BAR_BALANCES, f"{both * 1e3:.0f} ms"))
        bar = BAR_ALL if wrong < 1 else float("inf")  # every sample wrong: no bar, for the record
        found.append(
            (f"figures, parts, verdicts, balances and causes, {words}", whole / one, bar, f"{whole * 1e3:.0f} ms")
        )
    for what, ratio, bar, remark in found:
        print(f"{what:<70}{ratio:>7.1f}   bar {bar:<4}{'ok' if ratio <= bar else 'MISSED'}   {remark}")
    return int(any(ratio > bar for _, ratio, bar, _ in found))


if __name__ == "__main__":
    sys.exit(main())
