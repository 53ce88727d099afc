"""Where the standard uncertainty of a measured value comes from.

The user's own figure; else the repeatability pooled over the batch (ten degrees of freedom or more) with the
between-laboratory part; else the dictionary's default. A pair of duplicates alone never sets it. How uncertainty travels
through formulas is algebra (algebra.variance), compiled in evaluate.
"""

from __future__ import annotations

import numpy as np

from energy import replicates
from energy.samples import U_SOURCES

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
    """(r, n) -> repeatability as a relative SD pooled over samples with two or more values, and its degrees of freedom.

    Pooled as root of the sum of squared relative deviations over the degrees of freedom (ISO 5725-2, within-cell
    variance), relative because a batch spans materials of different level; samples whose replicates scatter as an outlier
    are left out, so that one mistyped replicate does not set the u of a batch.
    """
    sd, freedom, _ = replicates.pooled_sd_of_alike(values.T, relative=True)
    return sd, freedom


def of_means(
    values: np.ndarray,
    default: tuple[float, float] | None,
    given: np.ndarray | None = None,
    censored: np.ndarray | None = None,
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """(r, n) replicate values -> (n,) standard uncertainty of the means, its source (index into U_SOURCES), its freedom.

    default : (absolute, relative) between laboratories. given : (n,) the user's u, NaN where none. censored : (n,) u of
    a value below a limit. NaN where nothing is known; the dictionary's default is filled in by Samples.fill_default_u.
    Degrees of freedom are those of the pooled repeatability, by Welch and Satterthwaite beside a between-laboratory part
    that is known (JCGM 100:2008, G.4.1); inf elsewhere.
    """
    mean, count = mean_of(values)
    u = np.full(len(mean), np.nan) if given is None else given.copy()
    source = np.where(np.isnan(u), U_SOURCES.index("none"), U_SOURCES.index("given")).astype(np.int8)
    if censored is not None:
        take = np.isnan(u) & ~np.isnan(censored)
        u[take], source[take] = censored[take], U_SOURCES.index("given")
    degrees = np.full(len(mean), np.inf)
    sd, freedom = pooled_relative_sd(values)
    if freedom >= NEEDED_FREEDOM and default is not None:
        take = np.isnan(u) & (count >= 1)
        between = np.hypot(default[0], default[1] * np.abs(mean[take]))
        within = sd * np.abs(mean[take]) / np.sqrt(count[take])
        u[take] = np.hypot(within, between)
        source[take] = U_SOURCES.index("replicates")
        with np.errstate(divide="ignore", invalid="ignore"):
            degrees[take] = np.where(within > 0, freedom * (u[take] / within) ** 4, np.inf)
    return u, source, degrees
