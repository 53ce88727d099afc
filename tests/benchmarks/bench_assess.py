"""Speed of `assess` up to its blocks, against the best hand-written numpy of the same arithmetic.

Run: python tests/benchmarks/bench_assess.py     prints a table; exit 1 if a bar is missed.

Both sides compute, for a batch given by difference without food groups and the European Union's law: seven systems
(value, u, status) and five comparisons (difference, u of it, measurement part, its u by inputs and by heats, heats part,
convention part, bomb system at the computed heats). Fresh output arrays, one thread, chunks of 16,384 rows,
candidates interleaved, first round dropped, minima compared.
"""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[name] = "1"

import subprocess
import sys
import time

import numpy as np

from energy.assessment import assess
from energy.samples import Samples

CHUNK = 16_384
KCAL = 4.184
ROUNDS = 9
COLUMNS = ("moisture", "crude_protein", "crude_fat", "ash", "total_dietary_fibre", "sugars", "gross_energy")
PAIR = ("difference", "u_difference", "measurement", "u_measurement", "u_model", "heats", "convention", "at_heats")


def batch(n):
    rng = np.random.default_rng(5)
    bounds = ((0.05, 0.2), (0.02, 0.3), (0.01, 0.4), (0.01, 0.03), (0.0, 0.1), (0.0, 0.05), (10, 20))
    return Samples.from_arrays({c: rng.uniform(*b, n) for c, b in zip(COLUMNS, bounds, strict=True)})


def by_hand(samples):
    n = len(samples)
    value, u, status = np.empty((7, n)), np.empty((7, n)), np.empty((7, n), dtype=np.int8)
    pairs = {name: np.empty((5, n)) for name in PAIR}
    for low in range(0, n, CHUNK):
        here = slice(low, min(low + CHUNK, n))
        chunk(*(samples.columns[c][here] for c in COLUMNS), *(samples.u[c][here] for c in COLUMNS),
              value[:, here], u[:, here], {k: v[:, here] for k, v in pairs.items()})  # fmt: skip
    status[:] = np.array([0, 1, 5, 1, 1, 1, 1], dtype=np.int8)[:, None]
    return value, u, status, pairs


def chunk(m, p, f, a, t, s, g, um, up, uf, ua, ut, us, ug, value, u, pair):
    """One chunk: all slopes written out by hand, shared pieces computed once."""
    vm, vp, vf, va, vt, vs, vg = um * um, up * up, uf * uf, ua * ua, ut * ut, us * us, ug * ug
    hp, hf, hc = 5.65 * KCAL, 9.4 * KCAL, 4.15 * KCAL
    hs, ht = 16.5, 17.4
    value[0], u[0] = g, np.sqrt(vg)
    # heats: carbohydrate by difference, sugars and fibre by their own heat
    h = hc + (hp - hc) * p + (hf - hc) * f - hc * a - hc * m + (hs - hc) * s + (ht - hc) * t
    kp, kf, ks, kt = hp - hc, hf - hc, hs - hc, ht - hc
    value[1] = h
    u[1] = np.sqrt(hc**2 * va + kf**2 * vf + hc**2 * vm + kp**2 * vp + ks**2 * vs + kt**2 * vt)
    value[2], u[2] = np.nan, np.nan
    # bomb route, general: share of digested heat
    nc, np_, nf = 4.15 * 0.97, 5.65 * 0.92 - 4.15 * 0.97, 9.4 * 0.95 - 4.15 * 0.97
    dp, df = 5.65 - 4.15, 9.4 - 4.15
    num = nc + np_ * p + nf * f - nc * a - nc * m
    den = 4.15 + dp * p + df * f - 4.15 * a - 4.15 * m
    urine = 1.25 * 0.92 * KCAL
    share = num / den
    bomb = g * share - urine * p
    value[3] = bomb
    x, y = g / den, g * share / den
    sp, sf, sa = np_ * x - dp * y - urine, nf * x - df * y, 4.15 * y - nc * x
    vms = sa * sa
    u[3] = np.sqrt(share * share * vg + sp * sp * vp + sf * sf * vf + vms * (va + vm))
    # law, two sums
    eu = 17 + 20 * f - 17 * a - 17 * m - 9 * t
    value[4], u[4] = eu, np.sqrt(289 * va + 400 * vf + 289 * vm + 81 * vt)
    k4 = 4 * KCAL
    value[5] = k4 + 5 * KCAL * f - k4 * a - k4 * m - 2 * KCAL * t
    u[5] = np.sqrt(k4**2 * va + (5 * KCAL) ** 2 * vf + k4**2 * vm + (2 * KCAL) ** 2 * vt)
    ap, af, ac = (4.05 - 4.03) * KCAL, (8.93 - 4.03) * KCAL, 4.03 * KCAL
    atwater = ac + ap * p + af * f - ac * a - ac * m
    value[6], u[6] = atwater, np.sqrt(ac**2 * va + af**2 * vf + ac**2 * vm + ap**2 * vp)
    # parts
    at_heats = h * share - urine * p
    own = num * KCAL - urine * p
    measurement = bomb - at_heats
    d = g - h
    x, y = d / den, d * share / den
    mp, mf, ma = np_ * x - dp * y - kp * share, nf * x - df * y - kf * share, 4.15 * y - nc * x + hc * share
    shared = share * share
    u_measurement = np.sqrt(
        shared * vg + mp * mp * vp + mf * mf * vf + ma * ma * (va + vm) + shared * (ks**2 * vs + kt**2 * vt)
    )
    rest = 1 - m - p - f - a - s - t
    kcal2 = KCAL**2
    model = (
        (0.28**2 * kcal2) * p * p
        + (0.13**2 * kcal2) * f * f
        + (0.16**2 * kcal2) * rest * rest
        + 0.27**2 * s * s
        + 0.25 * t * t
    )
    u_heats = np.sqrt(model)
    for k in range(5):
        if k in (1, 3):
            for name in PAIR:
                pair[name][k] = np.nan
    pair["difference"][0], pair["u_difference"][0] = d, np.sqrt(vg + u[1] * u[1])
    pair["measurement"][0], pair["u_measurement"][0], pair["u_model"][0] = d, pair["u_difference"][0], u_heats
    pair["heats"][0], pair["convention"][0], pair["at_heats"][0] = 0.0, 0.0, h
    for k, other, lp, lf, lc, lt in ((2, eu, 0.0, 20.0, 17.0, 9.0), (4, atwater, ap, af, ac, 0.0)):
        pair["difference"][k] = bomb - other
        qp, qf, qa = sp - lp, sf - lf, sa + lc
        total = shared * vg + qp * qp * vp + qf * qf * vf + qa * qa * (va + vm)
        if lt:
            total = total + lt**2 * vt
        pair["u_difference"][k] = np.sqrt(total)
        pair["measurement"][k], pair["u_measurement"][k] = measurement, u_measurement
        pair["u_model"][k] = share * u_heats
        pair["heats"][k] = at_heats - own
        pair["convention"][k] = own - other
        pair["at_heats"][k] = at_heats


def ours(samples):
    return assess(samples, target="human", law="eu_1169_2011").blocks


def agree(samples):
    """Both sides must mean the same before their times are compared."""
    value, u, status, pairs = by_hand(samples)
    b = ours(samples)
    assert b.systems == ("gross_energy_measured", "ge_heats_best", "bomb_atwater_by_group", "bomb_atwater_general", "eu_1169_2011",
                         "eu_1169_2011_kcal", "atwater_general_unrounded"), b.systems  # fmt: skip
    np.testing.assert_allclose(b.value, value, rtol=1e-11)
    np.testing.assert_allclose(b.u, u, rtol=1e-9)
    assert np.array_equal(b.status, status)
    for name, block in pairs.items():
        np.testing.assert_allclose(getattr(b, name), block, rtol=1e-8, atol=1e-11, err_msg=name)


def minima(samples):
    times = {"ours": [], "hand": []}
    for _ in range(ROUNDS):
        for name, run in (("ours", ours), ("hand", by_hand)):
            start = time.perf_counter()
            kept = run(samples)
            times[name].append(time.perf_counter() - start)
            del kept
    return min(times["ours"][1:]), min(times["hand"][1:])


def memory_growth():
    """Growth of peak memory over bytes returned, in a fresh process at 1e6 rows."""
    code = (
        "import sys, resource; sys.path.insert(0, 'tests/benchmarks'); import bench_assess as b\n"
        "s = b.batch(1_000_000); b.ours(b.batch(1000));\n"
        "before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss\n"
        "found = b.ours(s); after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss\n"
        "size = sum(x.nbytes for x in vars(found).values() if hasattr(x, 'nbytes'))\n"
        "print((after - before) * 1024 / size)"
    )
    return float(subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout)


def start_ratio():
    """`python -m energy --help` over `import pandas`, minima of several starts."""

    def best(arguments):
        times = []
        for _ in range(7):
            start = time.perf_counter()
            subprocess.run([sys.executable, *arguments], capture_output=True, check=True)
            times.append(time.perf_counter() - start)
        return min(times)

    return best(["-m", "energy", "--help"]) / best(["-c", "import pandas"])


def main():
    agree(batch(1000))
    rows, seconds = [], {}
    growth = memory_growth()  # first: a child's peak starts at its parent's size
    for n, bar in ((1_000, 2.0), (100_000, 1.5), (1_000_000, 1.5)):
        samples = batch(n)
        mine, hand = minima(samples)
        seconds[n] = mine
        rows.append(
            (
                f"assess against hand-written numpy, {n:>9,} samples",
                mine / hand,
                bar,
                f"{mine * 1e3:.2f} / {hand * 1e3:.2f} ms",
            )
        )
    rows.append(("time at 1e6 over time at 1e5", seconds[1_000_000] / seconds[100_000], 13, ""))
    rows.append(("growth of peak memory over bytes returned", growth, 1.1, ""))
    rows.append(("python -m energy --help over import pandas", start_ratio(), 0.6, ""))
    for what, found, bar, remark in rows:
        print(f"{what:<58}{found:>7.2f}   bar {bar:<5g}{'ok' if found <= bar else 'MISSED'}   {remark}")
    return int(any(found > bar for _, found, bar, _ in rows))


if __name__ == "__main__":
    sys.exit(main())
