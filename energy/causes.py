"""Which handling error explains a difference: each is weighed by how well it closes the balances, how common it is, and
whether its size is a usual one.

The residuals r of a sample (mass and energy; energy alone where carbohydrate was found by difference) are normal with
covariance V if nothing is wrong. An error of direction d and size b shifts them by d b; with a usual size mu +/- s the
residuals are normal around d mu with covariance V + d d' s^2. Weight = commonness x density; the weights of all errors and
of 'no error' are shares of one. Sizes shown are those that close: b = d'V^-1 r / d'V^-1 d. One error at a time is tried.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from energy.catalogue.records import System
from energy.handling import DETERMINATIONS, Effect, determination, effects, entry, short_title
from energy.matrices import Matrices, matrices
from energy.quantities import DISPLAY_SCALE, dictionary
from energy.samples import Samples

#: causes whose weight is at least this share of the likeliest one's are told beside it
BESIDE = 0.02
#: both balances count as closed below this chi-square (99.9 % point, two degrees of freedom)
CLOSED = 13.82
#: neighbours in gross energy among which a swapped partner is looked for
NEIGHBOURS = 8
#: what is said of a discordant sample that no error of the library closes
NOTHING_CLOSES = "no single error known here closes the balances: more than one, or another"
REPEAT_BOTH = "repeat the bomb and the moisture on one fresh subsample, and compare the certificates with the table"


@dataclass
class Causes:
    """What was tried on k rows. weight : (errors, k) share of probability, 'no error' apart in `none`.

    size : (errors, k) that closes (1 = as known). measured, computed : (errors, k) corrected gross energies, MJ/kg on the
    working basis. closes : (errors, k). named : (k,) a cause is named. partner : (k,) index of the sample swapped with.
    """

    m: Matrices
    effects: list[Effect]
    weight: np.ndarray
    none: np.ndarray
    size: np.ndarray
    measured: np.ndarray
    computed: np.ndarray
    closes: np.ndarray
    named: np.ndarray
    partner: np.ndarray
    likelihood: np.ndarray
    place: dict[int, int] = field(default_factory=dict)

    @property
    def best(self) -> np.ndarray:
        """(k,) index of the likeliest error; meaningful where `named`."""
        if not len(self.effects):
            return np.zeros(len(self.m), dtype=int)
        return np.asarray(self.weight.argmax(axis=0))

    def beside(self) -> np.ndarray:
        """(errors, k) bool: in the set of probable causes of a named row."""
        return (self.weight >= BESIDE * self.weight.max(axis=0, initial=0.0)) & (self.weight > 0) & self.named

    def order(self, k: int) -> list[int]:
        """The set of one row, likeliest first."""
        w = self.weight[:, k]
        inside = np.flatnonzero((w >= BESIDE * w.max(initial=0.0)) & (w > 0) & self.named[k])
        return [int(j) for j in inside[np.argsort(-self.weight[inside, k], kind="stable")]]


def find(
    samples: Samples,
    heats: System,
    target: str,
    rows: np.ndarray,
    lower: np.ndarray,
    upper: np.ndarray,
    discordant: np.ndarray,
) -> Causes:
    """Weigh every error on the rows given. lower, upper, discordant : (n,) of the whole batch, MJ/kg."""
    m = matrices(samples, heats, rows)
    low, high, outside = lower[m.rows], upper[m.rows], discordant[m.rows]
    tried = list(effects(m, heats, target))
    with np.errstate(all="ignore"):
        plain = _log_density(m.mass, m.energy, m.v11, m.v12, m.v22)
        swap, partner = _swapped(m, low, high)
        tried.append(swap)
        shape = (len(tried), len(m))
        logs, plainly, size = np.full(shape, -np.inf), np.full(shape, -np.inf), np.zeros(shape)
        measured, computed, closes = np.empty(shape), np.empty(shape), np.zeros(shape, dtype=bool)
        for j, e in enumerate(tried):
            if not np.any(e.applies):
                measured[j], computed[j] = m.measured, m.computed
                continue
            plainly[j], logs[j], size[j], measured[j], computed[j], closes[j] = _weigh(m, e, low, high)
        top = np.maximum(logs.max(axis=0, initial=-np.inf), plain)
        shares, none = np.exp(logs - top), np.exp(plain - top)
        total = shares.sum(axis=0) + none
        shares, none = shares / total, none / total
        likely = np.exp(plainly - np.maximum(plainly.max(axis=0, initial=-np.inf), plain))
        likely = likely / np.maximum(likely.sum(axis=0), 1e-300)
    some = shares.max(axis=0, initial=0.0) > 0
    named = some & (outside | (none < 0.5))
    return Causes(m, tried, shares, none, size, measured, computed, closes, named, partner, likely,
                  {int(i): k for k, i in enumerate(m.rows)})  # fmt: skip


def _log_density(x: np.ndarray, y: np.ndarray, v11: np.ndarray, v12: np.ndarray, v22: np.ndarray) -> np.ndarray:
    """Of two normal residuals, without the constant."""
    determinant = v11 * v22 - v12**2
    return np.asarray(-0.5 * ((v22 * x**2 - 2 * v12 * x * y + v11 * y**2) / determinant + np.log(determinant)))


def _weigh(m: Matrices, e: Effect, low: np.ndarray, high: np.ndarray) -> tuple[np.ndarray, ...]:
    """Log likelihood, log weight, size, corrected measured and computed gross energy, and whether the error closes the difference."""
    words = entry(e.id)
    v11, v12, v22 = m.v11, m.v12, m.v22
    if e.extra is not None:
        v11, v12, v22 = v11 + e.extra[0], v12 + e.extra[1], v22 + e.extra[2]
    determinant = v11 * v22 - v12**2
    a, b = (v22 * e.mass - v12 * e.energy) / determinant, (v11 * e.energy - v12 * e.mass) / determinant
    fitted = (a * m.mass + b * m.energy) / (a * e.mass + b * e.energy)
    size = e.size if e.exact else fitted
    left_mass, left = m.mass - e.mass * size, m.energy - e.energy * size
    quadratic = (v22 * left_mass**2 - 2 * v12 * left_mass * left + v11 * left**2) / determinant
    closes = _closed(left, low, high, v22) & (~m.two | (quadratic < CLOSED))
    spread = e.spread**2
    log = _log_density(m.mass - e.mass * e.size, m.energy - e.energy * e.size, v11 + e.mass**2 * spread,
                       v12 + e.mass * e.energy * spread, v22 + e.energy**2 * spread)  # fmt: skip
    usual = words.get("commonness_by", {}).get(e.column, words["commonness"])
    common = np.full(len(m), usual if e.commonness is None else e.commonness, dtype=float)
    if e.pointed is not None:
        common = np.where(e.pointed, words.get("commonness_where", words["commonness"]), common)
    believed = e.applies & closes & (size >= e.low) & (size <= e.high) & np.isfinite(log) & (common > 0)
    if e.column and not e.exact:
        believed &= _possible(m, e, size)
    plainly = np.where(believed, log + np.log(e.density), -np.inf)
    log = np.where(believed, plainly + np.log(common), -np.inf)
    shift = e.energy * size
    return (plainly, log, np.nan_to_num(size), m.measured - e.in_measured * shift,
            m.computed + (1 - e.in_measured) * shift, believed & (left >= low) & (left <= high))  # fmt: skip


def _closed(left: np.ndarray, low: np.ndarray, high: np.ndarray, variance: np.ndarray) -> np.ndarray:
    """What is left lies inside the limits, or is no more than scatter."""
    return np.asarray(((left >= low) & (left <= high)) | (left**2 < CLOSED * variance))


def _possible(m: Matrices, e: Effect, size: np.ndarray) -> np.ndarray:
    """The value without the error is one the quantity can have."""
    low, high = dictionary()[e.column].range
    sign = -1.0 if e.id == "ether_extract" else 1.0
    true, room = m.value(e.column) - sign * size, 2 * m.u(e.column)
    return np.asarray((true >= low - room) & (true <= high + room))


def _swapped(m: Matrices, low: np.ndarray, high: np.ndarray) -> tuple[Effect, np.ndarray]:
    """Two rows of the batch whose measured gross energies each fit the other's composition.

    Looked for among the nearest in measured gross energy; the more rows there are to choose from, the more chance alone
    would find one.
    """
    k = len(m)
    partner, best = np.full(k, -1), np.full(k, np.inf)
    sd = np.sqrt(m.v22)
    if k > 1:
        # figures are swapped as they are written, each on the basis it was stated on
        stated, own, basis = m.value("gross_energy"), m.own["gross_energy"], m.basis("gross_energy")
        order = np.argsort(stated, kind="stable")
        rank = np.searchsorted(stated[order], m.computed * own)
        batch = m.text("batch").astype(str)
        for offset in range(-NEIGHBOURS // 2, NEIGHBOURS // 2):
            place = rank + offset
            other = order[np.clip(place, 0, k - 1)]
            mine, theirs = stated[other] / own - m.computed, stated / own[other] - m.computed[other]
            good = (
                (place >= 0) & (place < k) & (other != np.arange(k)) & (batch[other] == batch) & (basis[other] == basis)
            )
            good &= _closed(mine, low, high, m.v22) & _closed(theirs, low[other], high[other], m.v22[other])
            far = np.where(good, (mine / sd) ** 2 + (theirs / sd[other]) ** 2, np.inf)
            better = far < best
            best, partner = np.where(better, far, best), np.where(better, other, partner)
    found = partner >= 0
    zero, error, theirs = np.zeros(k), np.zeros(k), np.zeros(k)
    if found.any():
        error = np.where(found, m.measured - stated[partner] / own, 0.0)
        # both samples are explained at once: what the partner's figures say for the swap counts here as well
        theirs = np.where(found, stated / own[partner] - m.computed[partner], 0.0)
    gain = np.where(found, np.exp(np.clip(0.5 * (m.energy[partner] ** 2 - theirs**2) / m.v22[partner], -50, 50)), 0.0)
    return Effect("swapped", found, zero, error, np.ones(k), zero, exact=True, in_measured=1.0,
                  commonness=entry("swapped")["commonness"] * gain / max(k - 1, 1), repeats="samples",
                  column="gross_energy"), np.where(found, m.rows[partner], -1)  # fmt: skip


# ---- in words ----------------------------------------------------------------------------------------------------


def sentence(c: Causes, j: int, k: int) -> str:
    """One error on one row, as people read it."""
    e = c.effects[j]
    words = entry(e.id)
    text = words["words_where"] if "words_where" in words and e.pointed is not None and e.pointed[k] else words["words"]
    fill: dict[str, Any] = {key: x[k] if isinstance(x, np.ndarray) else x for key, x in e.fill.items()}
    if e.id == "swapped":
        fill["partner"] = c.m.samples.ids[c.partner[k]]
    if e.id == "measurement":
        fill["way"] = "high" if c.size[j, k] > 0 else "low"
    return str(text.format(amount=_amount(c, j, k), **fill))


def _amount(c: Causes, j: int, k: int) -> float:
    """The figure the words show."""
    e = c.effects[j]
    if e.amount is None:
        return abs(100 * float(c.size[j, k]))
    if e.amount.ndim == 0:
        return abs(float(e.amount) * float(c.size[j, k]))
    return float(e.amount[k])


def title(c: Causes, j: int) -> str:
    """A few words for an error."""
    e = c.effects[j]
    if e.id in ("measurement", "decimal_column"):
        return f"{'an error' if e.id == 'measurement' else 'the decimal point'} of {e.fill['column']}"
    return str(entry(e.id)["title"])


def next_measurement(c: Causes, k: int) -> str:
    """The determination that parts what remains most evenly, the cheaper one where two do alike; and what it would change.

    A determination tests the errors it would show; its worth is the probability it separates: 4 p (1 - p) of the set, or
    p where one error alone is left.
    """
    inside = c.order(k)
    if not inside:
        return ""
    weight = c.weight[inside, k] / c.weight[inside, k].sum()
    tests = list(dict.fromkeys(c.effects[j].repeats for j in inside))
    worth = {}
    for t in tests:
        p = sum(w for j, w in zip(inside, weight, strict=True) if c.effects[j].repeats == t)
        parts = 4 * p * (1 - p) if len(tests) > 1 else 1.0
        worth[t] = (0.3 * p + parts) / determination(t)["effort"] ** 0.5
    chosen = max(tests, key=lambda t: worth[t])
    told = [_expected(c, j, k) for j in inside if c.effects[j].repeats == chosen]
    change = next((x for x in told if x), "")
    return f"{determination(chosen)['words']}{change}"


def _expected(c: Causes, j: int, k: int) -> str:
    """What a repeated determination would give if this error is the one."""
    e = c.effects[j]
    if e.id == "powder_moisture_forgotten" or not e.column or e.column not in c.m.samples.columns or e.id == "swapped":
        return ""
    value = c.m.value(e.column)[k]
    scale = DISPLAY_SCALE[dictionary()[e.column].dimension]
    unit = "MJ/kg" if e.column == "gross_energy" else "g per 100 g"
    if e.exact:
        if e.column == "gross_energy":
            right = value * c.measured[j, k] / c.m.measured[k]
        else:
            return ""
    else:
        right = value - (-1.0 if e.id == "ether_extract" else 1.0) * c.size[j, k]
    return f" ({right / scale:.3g} {unit} expected if it is {title(c, j)}, {value / scale:.3g} if not)"


def texts(c: Causes, n: int) -> tuple[np.ndarray, np.ndarray]:
    """(n,) probable cause and next measurement of a batch of n, '' where none is named."""
    cause, following = np.full(n, "", dtype=object), np.full(n, "", dtype=object)
    for k in np.flatnonzero(c.named).tolist():
        i = int(c.m.rows[k])
        cause[i], following[i] = words(c, k), next_measurement(c, k)
    return cause, following


def to_decide(m: Matrices) -> np.ndarray:
    """(k,) what would narrow an undecided difference most: the determination that carries most of its variance."""
    columns = [c for c in DETERMINATIONS if c in m.slope_energy]
    parts = np.array([(m.slope_energy[c] * m.u(c)) ** 2 for c in columns]).reshape(len(columns), len(m))
    heats = np.maximum(m.v22 - sum(((m.slope_energy[c] * m.u(c)) ** 2 for c in m.slope_energy), np.zeros(len(m))), 0.0)
    everything = np.vstack([parts, heats])
    chosen, share = everything.argmax(axis=0), everything.max(axis=0) / m.v22
    said = [
        f"{short_title(c)} carries {{:.0f}} % of what is uncertain: {determination(DETERMINATIONS[c])['words']}"
        for c in columns
    ]
    said.append(
        "the general heats carry {:.0f} % of what is uncertain: determine sugars, starch and fibre, so that closer heats hold"
    )
    return np.array([said[j].format(100 * x) for j, x in zip(chosen, share, strict=True)], dtype=object)


def words(c: Causes, k: int) -> str:
    """The probable cause of one row, and what cannot be told from it."""
    inside = c.order(k)
    if not inside:
        return ""
    if all(c.effects[j].id == "measurement" for j in inside):
        return _by_size(c, inside, k)
    others = [title(c, j) for j in inside[1:5]]
    more = f" (not told apart: {'; '.join(dict.fromkeys(others))})" if others else ""
    return sentence(c, inside[0], k) + more


def _by_size(c: Causes, inside: Sequence[int], k: int) -> str:
    """No known error fits: what each determination would have to be wrong by."""
    told = [sentence(c, j, k).removesuffix(" would explain it") for j in inside]
    return f"nothing specific fits; {'alone, ' if len(told) > 1 else ''}{' or '.join(told)} would explain it"
