"""Replicates of a table judged while it is read: what value they give, and which lie too far apart (ISO 5725-6).

The limit is r = 2.8 s_r with s_r pooled over the batch, relative to each sample's mean and without outliers, where that
has ten degrees of freedom or more and most samples scatter at all; else the published limit of the quantity in catalogue/duplicate_limits.csv; else nothing is judged.
"""

from __future__ import annotations

import csv
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from energy.catalogue.records import SOURCE_STATUS
from energy.quantities import DISPLAY_SCALE, Quantity
from energy.replicates import (
    MEDIAN,
    ONE_MORE,
    TWO_MORE,
    Accepted,
    Outlying,
    accept,
    cochran_of_batch,
    critical_factor,
    pooled_sd_of_alike,
)
from energy.uncertainty import NEEDED_FREEDOM

Floats = NDArray[np.float64]

#: fewest samples with replicates for Cochran's test over a batch; ours: with less the largest is bound to stand out
COCHRAN_NEEDS = 5

CURES = {
    TWO_MORE: "Determine it twice more: the mean of four holds if they lie within 3.6 s_r, else their median; never the two"
    " that agree. Until then their mean is used.",
    ONE_MORE: "Determine it once more; until then the median of the three is used, never the best two.",
    MEDIAN: "Their median is used instead of the mean; look for the cause.",
}


@dataclass(frozen=True)
class Limit:
    """How far two results of one laboratory may lie apart, from `low` on to below `high`; internal units."""

    low: float
    high: float
    absolute: float
    relative: float
    words: str


@cache
def published_limits() -> dict[str, tuple[Limit, ...]]:
    """quantity -> limits by level."""
    found: dict[str, tuple[Limit, ...]] = {}
    path = Path(__file__).parent / "catalogue" / "duplicate_limits.csv"
    with path.open(encoding="utf-8", newline="") as handle:
        for row in csv.DictReader(handle):
            scale = 0.01 if row["unit"] == "g/100 g" else 1.0
            limit = Limit(
                float(row["from"]) * scale,
                float(row["below"] or "inf") * scale,
                float(row["absolute"] or 0) * scale,
                float(row["relative"] or 0),
                f"{row['source']}, {row['locator']}: {SOURCE_STATUS[row['source_status']]}",
            )
            found[row["quantity"]] = (*found.get(row["quantity"], ()), limit)
    return found


@dataclass(frozen=True)
class Judged:
    """accepted : value and what was done, per sample. findings : (sample, what, cure), to be told as warnings."""

    accepted: Accepted
    findings: list[tuple[int, str, str]]


def judge(entry: Quantity, values: Floats, censored: NDArray[np.bool_] | None, unit: str) -> Judged:
    """(r, n) replicate values of one quantity, internal units -> what they give and what is wrong with them.

    censored : (n,) rows that hold a '<x', which are not judged. unit : in which values are told.
    """
    v = values.T
    known = v if censored is None else np.where(censored[:, None], np.nan, v)
    s_r, why = _repeatability(entry, known)
    accepted = accept(v, s_r if censored is None else np.where(censored, np.nan, s_r))
    scale = 1 / DISPLAY_SCALE[entry.dimension]
    repeated = known[accepted.n >= 2]
    test = cochran_of_batch(known, relative=True) if len(repeated) >= COCHRAN_NEEDS and _scatters(repeated) else None
    outlier = test[0] if test and test[0].judged == "outlier" else None
    findings = []
    for i in np.flatnonzero(accepted.too_far_apart).tolist():
        what = (f"the replicates of {entry.title} {_list(v[i] * scale)} {unit} lie {accepted.spread[i] * scale:.3g} apart, more"
                f" than the {accepted.limit[i] * scale:.3g} that {int(accepted.n[i])} results of one laboratory may"
                f" ({why(i)}).")  # fmt: skip
        if outlier and outlier.index == i:
            what += f" {_cochran_words(outlier)}"
        findings.append((i, what, CURES[int(accepted.done[i])]))
    if outlier and not accepted.too_far_apart[outlier.index]:
        i = outlier.index
        findings.append((i, f"the replicates of {entry.title} {_list(v[i] * scale)} {unit} scatter more than those of the"
                         f" other samples. {_cochran_words(outlier)}",
                         "Look for the cause: a mistyped figure, two samples mixed up, a pellet that spilt."))  # fmt: skip
    return Judged(accepted, findings)


def _repeatability(entry: Quantity, known: Floats) -> tuple[Floats, Callable[[int], str]]:
    """(n,) s_r, NaN where no limit is known, and where that of a sample comes from, in words."""
    count = np.isfinite(known).sum(axis=1)
    mean = np.nansum(known, axis=1) / np.maximum(count, 1)
    usable = np.where((count >= 2) & (mean > 0), 1.0, np.nan)
    relative, freedom, wild = pooled_sd_of_alike(known * usable[:, None], relative=True)
    if freedom >= NEEDED_FREEDOM and _scatters(known[count >= 2]):
        words = f"s_r is {relative:.2%} of the mean, pooled over this batch with {freedom} degrees of freedom"
        words += f", {len(wild)} of its samples left out as outliers" if len(wild) else ""
        return relative * mean * usable, lambda i: words
    s_r, source = np.full(len(mean), np.nan), np.zeros(len(mean), dtype=np.intp)
    limits = published_limits().get(entry.name, ())
    for k, limit in enumerate(limits):
        rows = (mean >= limit.low) & (mean < limit.high) & (count >= 2)
        s_r[rows] = np.maximum(limit.absolute, limit.relative * mean[rows]) / critical_factor(2)
        source[rows] = k
    return s_r, lambda i: limits[source[i]].words


def _scatters(replicates: Floats) -> bool:
    """Most samples show some scatter; where rounding hides it a pooled s_r would call every last digit too much."""
    replicates = replicates[np.isfinite(replicates).sum(axis=1) >= 2]
    if not len(replicates):
        return False
    spread = np.nanmax(replicates, axis=1) - np.nanmin(replicates, axis=1)
    return bool(np.median(spread) > 0)


def _list(values: Floats) -> str:
    texts = [f"{x:.5g}" for x in values[np.isfinite(values)].tolist()]
    return f"{', '.join(texts[:-1])} and {texts[-1]}"


def _cochran_words(found: Outlying) -> str:
    return (f"Cochran's test calls their scatter an outlier of the batch (C {found.statistic:.3g}, limit at 1 %"
            f" {found.critical_1:.3g}).")  # fmt: skip
