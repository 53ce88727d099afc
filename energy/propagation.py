"""Propagation of distributions by the Monte Carlo method (JCGM 101:2008), and by first order (JCGM 100:2008) beside it.

A model is a vectorised function: it takes a dictionary name -> (n,) draws and gives (n,), or (m, n) for m results.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from energy.problems import WrongUse

Floats = NDArray[np.float64]
Model = Callable[[Mapping[str, Floats]], Floats]

#: trials in one sequence of the adaptive procedure: at least 10 000, and 100 / (1 - p) (JCGM 101, 7.9.4 b)
SEQUENCE = 10_000


class Distribution(Protocol):
    """What is known of one input, or of several that hang together."""

    @property
    def means(self) -> Floats:
        """(d,) expectations."""
        ...

    @property
    def covariance(self) -> Floats:
        """(d, d)."""
        ...

    def draw(self, generator: np.random.Generator, n: int) -> Floats:
        """(d, n) draws."""
        ...


@dataclass(frozen=True)
class _Single:
    centre: float

    @property
    def means(self) -> Floats:
        return np.array([self.centre])

    @property
    def covariance(self) -> Floats:
        return np.array([[self.u**2]])

    @property
    def u(self) -> float:
        raise NotImplementedError


@dataclass(frozen=True)
class Normal(_Single):
    """centre and standard uncertainty."""

    standard: float

    @property
    def u(self) -> float:
        return self.standard

    def draw(self, generator: np.random.Generator, n: int) -> Floats:
        return generator.normal(self.centre, self.standard, (1, n))


@dataclass(frozen=True)
class Rectangular(_Single):
    """Anywhere within half_width of the centre, equally likely (JCGM 101, 6.4.2)."""

    half_width: float

    @property
    def u(self) -> float:
        return float(self.half_width / np.sqrt(3))

    def draw(self, generator: np.random.Generator, n: int) -> Floats:
        return generator.uniform(self.centre - self.half_width, self.centre + self.half_width, (1, n))


@dataclass(frozen=True)
class Triangular(_Single):
    """Within half_width of the centre, likelier towards it (JCGM 101, 6.4.5)."""

    half_width: float

    @property
    def u(self) -> float:
        return float(self.half_width / np.sqrt(6))

    def draw(self, generator: np.random.Generator, n: int) -> Floats:
        return self.centre + self.half_width * (generator.random((1, n)) + generator.random((1, n)) - 1)


@dataclass(frozen=True)
class Arcsine(_Single):
    """A cycle, such as a thermostat's, of this amplitude around the centre (JCGM 101, 6.4.6)."""

    half_width: float

    @property
    def u(self) -> float:
        return float(self.half_width / np.sqrt(2))

    def draw(self, generator: np.random.Generator, n: int) -> Floats:
        return self.centre + self.half_width * np.sin(generator.uniform(0, 2 * np.pi, (1, n)))


@dataclass(frozen=True)
class StudentT(_Single):
    """A mean whose u was estimated with few degrees of freedom: centre + scale t (JCGM 101, 6.4.9). freedom above 2.

    Its standard deviation, scale sqrt(freedom / (freedom - 2)), is larger than the scale, which JCGM 100 calls u.
    """

    scale: float
    freedom: float

    @property
    def u(self) -> float:
        return float(self.scale * np.sqrt(self.freedom / (self.freedom - 2))) if self.freedom > 2 else np.inf

    def draw(self, generator: np.random.Generator, n: int) -> Floats:
        return self.centre + self.scale * generator.standard_t(self.freedom, (1, n))


@dataclass(frozen=True)
class CorrelatedNormal:
    """Several inputs that hang together: (d,) centres and (d, d) covariance."""

    centres: tuple[float, ...]
    covariances: tuple[tuple[float, ...], ...]

    @classmethod
    def of(cls, centres: ArrayLike, covariance: ArrayLike) -> CorrelatedNormal:
        """From arrays. Raises WrongUse where the covariance cannot be one."""
        m, c = np.asarray(centres, dtype=float), np.asarray(covariance, dtype=float)
        if (
            c.shape != (len(m), len(m))
            or not np.allclose(c, c.T)
            or np.linalg.eigvalsh(c).min() < -1e-9 * np.abs(c).max()
        ):
            raise WrongUse(
                "This covariance matrix cannot be one.", "It is square, symmetric and has no negative variance."
            )
        return cls(tuple(m.tolist()), tuple(tuple(line) for line in c.tolist()))

    @property
    def means(self) -> Floats:
        return np.array(self.centres)

    @property
    def covariance(self) -> Floats:
        return np.array(self.covariances)

    def draw(self, generator: np.random.Generator, n: int) -> Floats:
        return generator.multivariate_normal(self.means, self.covariance, n, method="eigh").T


Inputs = Mapping[str | tuple[str, ...], Distribution]


def _names(key: str | tuple[str, ...]) -> tuple[str, ...]:
    return (key,) if isinstance(key, str) else key


@dataclass(frozen=True)
class Simulated:
    """What a Monte Carlo calculation gave; one entry per result of the model.

    low, high : shortest interval that holds `probability` of the draws. settled : the adaptive procedure reached its
    tolerance (always True with a fixed number of trials). invalid : share of draws for which the model gives no number;
    they are left out. draws : (m, trials).
    """

    mean: Floats
    u: Floats
    low: Floats
    high: Floats
    probability: float
    trials: int
    settled: bool
    invalid: float
    draws: Floats = field(repr=False)

    @property
    def correlation(self) -> Floats:
        """(m, m)."""
        return np.atleast_2d(np.corrcoef(self.draws))

    def central(self) -> tuple[Floats, Floats]:
        """Ends that leave equal shares outside on both sides."""
        tail = (1 - self.probability) / 2
        low, high = np.quantile(self.draws, [tail, 1 - tail], axis=1)
        return low, high


def shortest_interval(draws: Floats, probability: float) -> tuple[Floats, Floats]:
    """(m, n) draws -> ends of the shortest interval that holds this share of them (JCGM 101, 7.7)."""
    ordered = np.sort(draws, axis=1)
    n = ordered.shape[1]
    q = min(max(round(probability * n), 1), n - 1)
    first = np.argmin(ordered[:, q:] - ordered[:, : n - q], axis=1)
    line = np.arange(len(ordered))
    return ordered[line, first], ordered[line, first + q]


def numerical_tolerance(u: Floats, digits: int) -> Floats:
    """Half a unit in the last of so many significant digits of u (JCGM 101, 7.9.2)."""
    with np.errstate(divide="ignore"):
        last = np.floor(np.log10(u)) - (digits - 1)
    return np.where(u > 0, 0.5 * 10.0**last, np.inf)


def propagate(
    model: Model,
    inputs: Inputs,
    *,
    seed: int,
    trials: int | None = None,
    probability: float = 0.95,
    digits: int = 2,
    fewest: int = SEQUENCE,
    most: int = 2_000_000,
) -> Simulated:
    """Draw the inputs, run the model, describe the results (JCGM 101, 7).

    trials : None = adaptive (7.9.4): sequences of draws until mean, u and both ends of the central interval stand still within
    half a unit of the last of `digits` significant digits of u, between `fewest` and `most` trials. The same seed gives the
    same numbers. Raises WrongUse for an impossible probability or number of trials.
    """
    if not 0 < probability < 1:
        raise WrongUse(f"A probability of {probability} cannot be.", "Give a share between 0 and 1, e.g. 0.95.")
    if trials is not None and trials < 100:
        raise WrongUse(f"{trials} trials say little.", "Give 100 or more, or leave the number to the procedure.")
    generator = np.random.default_rng(seed)
    size = max(SEQUENCE, int(np.ceil(100 / (1 - probability))))
    found: list[Floats] = []
    seen: list[Floats] = []
    invalid, done, settled = 0, 0, trials is not None
    while True:
        n = size if trials is None else min(size, trials - done)
        y = np.atleast_2d(_draws(model, inputs, generator, n))
        good = np.isfinite(y).all(axis=0)
        invalid += int(n - good.sum())
        done += n
        y = y[:, good]
        if y.shape[1]:
            found.append(y)
        if trials is not None:
            if done >= trials:
                break
            continue
        if y.shape[1] >= 2:
            # the ends watched are those of the central interval: the shortest one slides to and fro where the
            # distribution is nearly symmetric, which says nothing of convergence
            low, high = np.quantile(y, [(1 - probability) / 2, (1 + probability) / 2], axis=1)
            seen.append(np.array([y.mean(axis=1), y.std(axis=1, ddof=1), low, high]))
        if len(seen) >= 2 and done >= fewest:
            spread = 2 * np.std(seen, axis=0, ddof=1) / np.sqrt(len(seen))
            u = np.concatenate(found, axis=1).std(axis=1, ddof=1)
            settled = bool((spread <= numerical_tolerance(u, digits)).all())
        if settled or done + size > most:
            break
    if not found:
        raise WrongUse("The model gave no number for any draw.", "Check its inputs and their uncertainties.")
    draws = np.concatenate(found, axis=1)
    low, high = shortest_interval(draws, probability)
    return Simulated(draws.mean(axis=1), draws.std(axis=1, ddof=1), low, high, probability, done, settled, invalid / done,
                     draws)  # fmt: skip


def _draws(model: Model, inputs: Inputs, generator: np.random.Generator, n: int) -> Floats:
    values: dict[str, Floats] = {}
    for key, distribution in inputs.items():
        values.update(zip(_names(key), distribution.draw(generator, n), strict=True))
    return np.asarray(model(values), dtype=float)


def effective_freedom(contributions: ArrayLike, freedom: ArrayLike) -> float:
    """Degrees of freedom of a combined u, by Welch and Satterthwaite (JCGM 100, G.4.1). (d,) parts of u, their freedom."""
    parts, nu = np.asarray(contributions, dtype=float), np.asarray(freedom, dtype=float)
    below = float((parts**4 / nu).sum())
    return float((parts**2).sum() ** 2 / below) if below > 0 else np.inf


def first_order(model: Model, inputs: Inputs) -> tuple[Floats, Floats]:
    """(m,) results at the expectations and their (m, m) covariance, by slopes (JCGM 100, 5.1.2 and H.2).

    Slopes are central differences over a thousandth of u on both sides.
    """
    names = [name for key in inputs for name in _names(key)]
    centre = np.concatenate([d.means for d in inputs.values()])
    covariance = np.zeros((len(names), len(names)))
    at = 0
    for d in inputs.values():
        size = len(d.means)
        covariance[at : at + size, at : at + size] = d.covariance
        at += size
    step = 1e-3 * np.sqrt(np.diag(covariance))
    points = np.concatenate([centre[:, None], centre[:, None] + np.diag(step), centre[:, None] - np.diag(step)], axis=1)
    y = np.atleast_2d(model(dict(zip(names, points, strict=True))))
    k = len(names)
    with np.errstate(divide="ignore", invalid="ignore"):
        slopes = np.where(step > 0, (y[:, 1 : k + 1] - y[:, k + 1 :]) / (2 * step), 0.0)
    return y[:, 0], slopes @ covariance @ slopes.T
