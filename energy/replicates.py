"""Replicates: means, and the standard deviation pooled over a batch."""

from __future__ import annotations

import numpy as np

#: below this many degrees of freedom a pooled standard deviation is not used: a pair of duplicates never sets u
NEEDED_FREEDOM = 10


def mean_of(values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """(r, n) replicate values, NaN where there is none -> (n,) mean and (n,) count."""
    count = (~np.isnan(values)).sum(axis=0)
    total = np.nansum(values, axis=0)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.where(count > 0, total / count, np.nan)
    return mean, count


def pooled_relative_sd(values: np.ndarray) -> tuple[float, int]:
    """Repeatability as a relative SD pooled over samples with two or more values, and its degrees of freedom.

    Pooled as root of the sum of squared relative deviations over the degrees of freedom (ISO 5725-2, within-cell
    variance), relative because a batch spans materials of different level.
    """
    mean, count = mean_of(values)
    use = (count >= 2) & (mean != 0)
    freedom = int((count[use] - 1).sum())
    if freedom == 0:
        return np.nan, 0
    relative = values[:, use] / mean[use] - 1
    return float(np.sqrt(np.nansum(relative**2) / freedom)), freedom
