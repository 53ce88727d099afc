"""Which input carries how much of an uncertainty, and what results of one sample share.

First order (JCGM 100:2008, 5.1): the slope of a result with respect to every measured column, times its standard
uncertainty. Two results of one sample share inputs: their covariance is the sum of the products of their slopes times the
variances (JCGM 100:2008, H.2), and it belongs to the uncertainty of their difference.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

import numpy as np

from energy import algebra
from energy.algebra import Node
from energy.balance import slope_of
from energy.catalogue.records import System
from energy.evaluate import Pair, measurement_node
from energy.programs import compiled, values_of
from energy.quantities import DISPLAY_SCALE, dictionary
from energy.resolve import Resolver, signatures
from energy.samples import U_SOURCES, Samples

if TYPE_CHECKING:
    import pandas as pd

    from energy.assessment import Assessment


def freedom(samples: Samples, pairs: Sequence[Pair], catalogue: Mapping[str, System]) -> np.ndarray:
    """(pairs, n) effective degrees of freedom of the measurement parts (Welch and Satterthwaite, JCGM 100:2008, G.4.1).

    inf where every u is known, given or by default; few only where a repeatability was pooled over a batch.
    """
    found = np.full((len(pairs), len(samples)), np.inf)
    few = {name: values for name, values in samples.freedom.items() if np.isfinite(values).any()}
    if not few:
        return found
    with np.errstate(all="ignore"):
        for signature, rows in signatures(samples):
            resolver = Resolver(signature, frozenset(samples.columns))
            here = np.arange(len(samples)) if rows is None else rows
            for p, pair in enumerate(pairs):
                made = measurement_node(resolver, pair, catalogue)
                if made is None:
                    continue
                node, model = made
                names = [c for c in few if slope_of(node, c) != 0.0]
                if not names:
                    continue
                total = algebra.add(_variance(node), model)
                values = values_of(samples, resolver, [total, *(slope_of(node, c) for c in names)], here)
                below = sum(((s * samples.u[c][here]) ** 4 / few[c][here] for c, s in zip(names, values[1:], strict=True)),
                            np.zeros(len(here)))  # fmt: skip
                found[p, here] = np.where(below > 0, values[0] ** 2 / below, np.inf)
    return found


def _variance(node: Node) -> Node:
    measured = {n: ("**", "U:" + n, 2.0) for n in algebra.names(node) if not n.startswith(("@", "V@"))}
    return algebra.variance(node, measured)


def covariance_of(samples: Samples, first: System, second: System) -> np.ndarray:
    """(n,) covariance of two results of each sample by the inputs they share, (MJ/kg)^2 on the working basis."""
    found = np.full(len(samples), np.nan)
    with np.errstate(all="ignore"):
        for signature, rows in signatures(samples):
            resolver = Resolver(signature, frozenset(samples.columns))
            a, b = resolver.system(first), resolver.system(second)
            if a is None or b is None:
                continue
            shared = sorted(n for n in algebra.names(a) & algebra.names(b) if not n.startswith(("@", "V@")))
            terms = [algebra.multiply(algebra.multiply(algebra.slope(a, n), algebra.slope(b, n)), ("**", "U:" + n, 2.0))
                     for n in shared]  # fmt: skip
            node = algebra.add(*terms) if terms else 0.0
            if isinstance(node, float):
                found[slice(None) if rows is None else rows] = node
                continue
            compiled({("covariance", 0): node}, resolver).run(samples, rows, {("covariance", 0): found})
    return found


BUDGET_COLUMNS = ("input", "value", "unit", "u", "u_from", "slope", "contribution", "share")


def budget(a: Assessment, sample_id: str, system: str) -> pd.DataFrame:
    """The uncertainty budget of one figure: per measured input its u, the slope, and what it brings to u of the result.

    value, u in the unit of `inputs`; slope and contribution in MJ/kg on the working basis per that unit; share of the
    variance, summing to 1.
    """
    import pandas as pd

    samples, row = a.samples, a.index(sample_id)
    signature = next(s for s, rows in signatures(samples) if rows is None or row in rows)
    resolver = Resolver(signature, frozenset(samples.columns))
    node = resolver.system(a.catalogue[system])
    if node is None or isinstance(node, float):
        return pd.DataFrame(columns=list(BUDGET_COLUMNS))
    names = sorted(n.removesuffix("?") for n in algebra.names(node) if not n.startswith(("@", "V@")))
    slopes = values_of(samples, resolver, [slope_of(node, c) for c in names], np.array([row]))[:, 0]
    lines = []
    for c, slope in zip(names, slopes, strict=True):
        entry = dictionary()[c]
        scale = DISPLAY_SCALE[entry.dimension]
        u = np.nan_to_num(samples.u[c][row])
        lines.append({
            "input": entry.title, "value": samples.columns[c][row] / scale,
            "unit": {"mass_fraction": "g/100 g", "fraction": "%", "energy": "MJ/kg"}.get(entry.dimension, entry.dimension),
            "u": u / scale, "u_from": U_SOURCES[samples.u_source[c][row]], "slope": slope * scale,
            "contribution": slope * u, "share": (slope * u) ** 2,
        })  # fmt: skip
    frame = pd.DataFrame(lines, columns=list(BUDGET_COLUMNS))
    total = frame["share"].sum()
    frame["share"] = frame["share"] / total if total > 0 else 0.0
    return frame.sort_values("share", ascending=False, ignore_index=True)
