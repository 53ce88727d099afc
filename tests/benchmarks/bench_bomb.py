"""How long reducing bomb runs takes, against the bare arithmetic in numpy.

python tests/benchmarks/bench_bomb.py
Must hold: 10,000 runs given as rises under 10 times the bare arithmetic; 1,000 thermograms of 60 readings without a loop
over readings (the time per record is told, and that of ten times as many readings).
"""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

import sys
import time

import numpy as np

from energy.bomb.periods import records
from energy.bomb.reduction import reduce_runs
from energy.bomb.rise import corrected_rise
from energy.bomb.runs import RunSheet

N = 10_000
ALLOWED = 10.0


def best(work, repeats=30):
    """Shortest of several times, s."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def sheet():
    rng = np.random.default_rng(1)
    return RunSheet.from_arrays({
        "sample_mass": rng.uniform(0.7, 1.1, N), "rise": rng.uniform(1.2, 2.2, N), "ignition_heat": np.full(N, 50.0),
        "acid_volume": rng.uniform(5, 12, N), "aid_mass": rng.uniform(0, 0.1, N), "aid_heat": np.full(N, 45_900.0),
    })  # fmt: skip


def bare(s):
    """Gross energy, its uncertainty and the aid's share, as one would write them down in numpy."""
    c, uc = 10_062.0, 3.0
    m, dt, ign, v = (s.number[k] for k in ("sample_mass", "rise", "ignition_heat", "acid_volume"))
    ma, qa = s.number["aid_mass"], s.number["aid_heat"]
    acid, aid = v * 5.97, ma * qa
    taken = c * dt
    heat = taken - ign - acid - aid
    q = heat / m
    u2 = (c * 0.001) ** 2 + (dt * uc) ** 2 + (0.1 * ign) ** 2 + (0.05 * 5.97) ** 2 + (acid * 0.01) ** 2
    u2 += (ma * 0.005 * qa) ** 2 + (0.0002 * qa) ** 2 + (q * 0.0002) ** 2
    return q, np.sqrt(u2) / m, aid / taken > 1 / 3


def thermograms(runs, readings):
    rng = np.random.default_rng(2)
    t = np.linspace(0, 30, readings)
    x = np.clip(t - 6, 0, None)
    shape = 3 * (np.exp(-0.002 * x) - np.exp(-x / 0.7)) + 26.5 - 4 * np.exp(-0.002 * t)
    return records(np.tile(t, (runs, 1)), shape + rng.normal(0, 0.0005, (runs, readings)))


def main():
    s = sheet()
    reduce_runs(s, heat_capacity=10_062.0, u_heat_capacity=3.0)
    q, _, _ = bare(s)
    found = reduce_runs(s, heat_capacity=10_062.0, u_heat_capacity=3.0)
    assert np.allclose(found.gross, q, rtol=1e-12)
    plain, whole = best(lambda: bare(s)), best(lambda: reduce_runs(s, heat_capacity=10_062.0, u_heat_capacity=3.0))
    ratio = whole / plain
    print(f"{N} runs given as rises: {whole * 1e3:.2f} ms, bare arithmetic {plain * 1e3:.2f} ms, {ratio:.1f} times")
    for runs, readings in ((1000, 60), (1000, 600)):
        given = thermograms(runs, readings)
        took = best(lambda given=given: corrected_rise(given), 5)
        print(
            f"{runs} thermograms of {readings} readings: {took * 1e3:.0f} ms, {took / runs / readings * 1e9:.0f} ns a reading"
        )
    return 0 if ratio < ALLOWED else 1


if __name__ == "__main__":
    sys.exit(main())
