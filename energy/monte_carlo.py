"""A figure of one sample by Monte Carlo (JCGM 101:2008), and whether its first-order uncertainty may be trusted.

The measured inputs of the sample are drawn around their values with their standard uncertainties: from a normal
distribution; from Student's t where a u rests on few degrees of freedom; from a rectangle where a cell said '<x'. The
system, or the difference of two, is computed on every draw; both share each draw, so that what they have in common cancels.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from energy import algebra
from energy.algebra import Node
from energy.balance import slope_of
from energy.catalogue.records import System
from energy.problems import WrongUse
from energy.programs import compiled, leaf, take, values_of
from energy.propagation import Distribution, Floats, Inputs, Normal, Rectangular, StudentT, propagate
from energy.quantities import dictionary
from energy.resolve import Resolver, signatures
from energy.samples import Samples

#: u by the two ways may differ by this share; ends of the interval, and the means, by this share of u. Ours: JCGM 101, 8
#: asks for agreement within the digits of u that are reported, which lies between 0.5 and 5 % of u for two digits
U_AGREES, ENDS_AGREE = 0.02, 0.05
#: enough draws that u is known to some 0.2 % (1 / sqrt(2 n)), a tenth of what is asked of it
FEWEST = 100_000
FIRST_ORDER, MONTE_CARLO, NEITHER = "first order", "monte carlo", "neither"


@dataclass(frozen=True)
class Checked:
    """One figure by both ways; MJ/kg (or the figure's own unit) on the batch's working basis.

    value, u_first_order : at the measured values, by slopes. mean, u, low, high : by Monte Carlo, the ends being those of
    the shortest interval that holds `probability`. trust : 'first order', 'monte carlo' or 'neither', with the reason.
    """

    sample_id: str
    figure: str
    value: float
    u_first_order: float
    mean: float
    u: float
    low: float
    high: float
    probability: float
    trials: int
    settled: bool
    seed: int
    trust: str
    reason: str

    @property
    def sentence(self) -> str:
        """The result as people say it."""
        return (f"{self.figure} of {self.sample_id}: {self.mean:.4g} with u {self.u:.2g} by Monte Carlo ({self.trials} trials,"
                f" {self.probability:.0%} between {self.low:.4g} and {self.high:.4g}), {self.value:.4g} with u"
                f" {self.u_first_order:.2g} by first order. Trust {self.trust}: {self.reason}.")  # fmt: skip


def is_linear(node: Node) -> bool:
    """True where no slope with respect to a measured column depends on a measured column."""
    return not bends(node)


def bends(node: Node) -> list[str]:
    """Measured columns whose slope depends on measured columns, i.e. that enter by a product, a quotient or a curve."""
    columns = sorted({n.removesuffix("?") for n in _measured(node)})
    return [c for c in columns if _measured(slope_of(node, c))]


def _measured(node: Node) -> set[str]:
    return {n for n in algebra.names(node) if not n.startswith(("@", "V@"))}


def monte_carlo(
    samples: Samples,
    row: int,
    system: System,
    less: System | None = None,
    *,
    seed: int = 1,
    trials: int | None = None,
    probability: float = 0.95,
) -> Checked:
    """One figure of one sample, or with `less` the difference of two, by Monte Carlo and by first order.

    row : of the sample. trials : None = the adaptive procedure, 100,000 at least. The same seed gives the same numbers.
    Raises WrongUse where the sample lacks what the system needs.
    """
    signature = next(s for s, rows in signatures(samples) if rows is None or row in rows)
    resolver = Resolver(signature, frozenset(samples.columns))
    node = _node(resolver, system, samples, row)
    if less is not None:
        node = algebra.subtract(node, _node(resolver, less, samples, row))
    figure = system.id if less is None else f"{system.id} less {less.id}"
    return of_node(samples, row, resolver, node, figure, seed=seed, trials=trials, probability=probability)


def _node(resolver: Resolver, system: System, samples: Samples, row: int) -> Node:
    node = resolver.system(system)
    if node is None or (system.by_group and resolver.signature.group == 0):
        raise WrongUse(f"Sample {samples.ids[row]} lacks what '{system.id}' needs.",
                       "`equations(id)` lists its inputs; choose a system that the sample serves.")  # fmt: skip
    return node


def of_node(
    samples: Samples,
    row: int,
    resolver: Resolver,
    node: Node,
    figure: str,
    *,
    seed: int = 1,
    trials: int | None = None,
    probability: float = 0.95,
) -> Checked:
    """The same for any expression in measured columns that the resolver made for this sample."""
    sample_id = str(samples.ids[row])
    inputs = _inputs(samples, row, node)
    slopes = [slope_of(node, str(c)) for c in inputs]
    with np.errstate(all="ignore"):
        value, *at = values_of(samples, resolver, [node, *slopes], np.array([row]))[:, 0].tolist()
    u_first = float(np.sqrt(sum((s * _first_order_u(d)) ** 2 for s, d in zip(at, inputs.values(), strict=True))))
    if not np.isfinite(value):
        raise WrongUse(
            f"Sample {sample_id} has no figure by '{figure}': a value is missing or impossible.", "Complete it."
        )
    if not any(d.covariance[0, 0] for d in inputs.values()):
        return Checked(sample_id, figure, value, 0.0, value, 0.0, value, value, probability, 0, True, seed, FIRST_ORDER,
                       "no input has an uncertainty")  # fmt: skip
    found = propagate(_Drawn(samples, row, resolver, node), inputs, seed=seed, trials=trials, probability=probability,
                      fewest=FEWEST)  # fmt: skip
    mean, u, low, high = (float(a[0]) for a in (found.mean, found.u, found.low, found.high))
    k = float(ndtri((1 + probability) / 2))
    ends = [float(a[0]) for a in found.central()]
    off = max(abs(ends[0] - (value - k * u_first)), abs(ends[1] - (value + k * u_first)), abs(mean - value))
    trust, reason = _trust(u_first, u, off, found.invalid, node, inputs)
    return Checked(sample_id, figure, value, u_first, mean, u, low, high, probability, found.trials, found.settled, seed,
                   trust, reason)  # fmt: skip


def _inputs(samples: Samples, row: int, node: Node) -> Inputs:
    """column -> what is known of it in this sample."""
    inputs: dict[str | tuple[str, ...], Distribution] = {}
    for name in sorted(_measured(node)):
        column = name.removesuffix("?")
        array, uncertainty = leaf(samples, name), leaf(samples, "U:" + name)
        assert array is not None and uncertainty is not None
        centre, u = float(array[row]), float(np.nan_to_num(uncertainty[row]))
        freedom = float(samples.freedom[column][row]) if column in samples.freedom else np.inf
        if column in samples.censored and samples.censored[column][row]:
            inputs[column] = Rectangular(centre, u * np.sqrt(3))
        elif np.isfinite(freedom) and u > 0:
            inputs[column] = StudentT(centre, u, freedom)
        else:
            inputs[column] = Normal(centre, u)
    return inputs


def _first_order_u(d: Distribution) -> float:
    """What JCGM 100 calls u: the scale of a t distribution, not its standard deviation."""
    return d.scale if isinstance(d, StudentT) else float(np.sqrt(d.covariance[0, 0]))


class _Drawn:
    """The expression as a function of draws, for one sample: other numbers of its food group stay as they are."""

    def __init__(self, samples: Samples, row: int, resolver: Resolver, node: Node):
        self.program = compiled({("value", 0): node}, resolver)
        self.fixed = {}
        codes = samples.memo.get("group_codes")
        here = np.array([row])
        for name in self.program.inputs:
            if name.startswith("@"):
                self.fixed[name] = float(take(None, name, self.program.parameters, here, codes)[0])

    def __call__(self, draws: Mapping[str, Floats]) -> Floats:
        n = len(next(iter(draws.values())))
        given = [np.full(n, self.fixed[name]) if name in self.fixed else draws[name.removesuffix("?")]
                 for name in self.program.inputs]  # fmt: skip
        out = np.empty(n)
        with np.errstate(all="ignore"):
            self.program.call(given, [out])
        return out


def _trust(
    u_first: float,
    u: float,
    off: float,
    invalid: float,
    node: Node,
    inputs: Inputs,
) -> tuple[str, str]:
    if invalid > 0:
        words = f"{invalid:.2%} of the draws leave the range in which the formula gives a number"
        return (MONTE_CARLO if invalid < 0.001 else NEITHER), words
    agree = abs(u - u_first) <= U_AGREES * u and off <= ENDS_AGREE * u
    if agree:
        return FIRST_ORDER, f"both agree, u within {U_AGREES:.0%} and the interval within {ENDS_AGREE:.0%} of u"
    by = f"u {u_first / u - 1:+.0%} off by first order, an end of the interval or the mean {off / u:.0%} of u off"
    why = []
    bent = [dictionary()[c].title for c in bends(node)]
    if bent:
        why.append(f"the formula is no straight line in {', '.join(bent)}")
    few = [dictionary()[str(c)].title for c, d in inputs.items() if isinstance(d, StudentT)]
    if few:
        why.append(f"u of {', '.join(few)} rests on few degrees of freedom")
    flat = [dictionary()[str(c)].title for c, d in inputs.items() if isinstance(d, Rectangular)]
    if flat:
        why.append(f"{', '.join(flat)} is below a limit and not normal")
    return MONTE_CARLO, f"{by}: {'; '.join(why)}" if why else by
