"""Control runs among the samples: a failed one holds every result back to the last that passed.

Runs of one instrument in the order they were fired (date, then row). A control is a run of kind `control`: a house material
with a value of its own, or a pure substance. Its result stands against the assigned value where one is given, else against
the substance's heat, else against the mean and scatter of its own earlier passed runs.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri, stdtr

from energy.bomb.charts import ACTION
from energy.bomb.check_substance import named
from energy.bomb.constants import value as constant

if TYPE_CHECKING:
    import pandas as pd

Floats = NDArray[np.float64]
NOT_JUDGED, PASSED, FAILED = 0, 1, 2
WORDS = ("not judged", "passed", "failed")


@dataclass(frozen=True)
class Assigned:
    """What a control material is known to hold: MJ/kg as weighed, and the standard deviation its runs may have."""

    value: float
    sd: float


@dataclass(frozen=True)
class Blank:
    """Blanks of one thing (thread, capsule, bag, paraffin): J per g, u of the mean (Student's t not applied), n."""

    what: str
    mean: float
    sd: float
    u: float
    n: int

    @property
    def words(self) -> str:
        """The blank as people say it."""
        u = f"u {self.u:.0f}" if self.n > 1 else "one run alone: no u"
        return f"{self.what}: {self.mean:.0f} J/g ({u}, n {self.n})"


@dataclass
class Controls:
    """n runs. outcome : (n,) index into WORDS, of control runs. score : (n,). held : (n,) bool. because : (n,) row of the
    failed control, -1. overdue : (n,) runs since the last control, of samples beyond what is allowed. told : (n,) words.
    """

    outcome: NDArray[np.int8]
    score: Floats
    held: NDArray[np.bool_]
    because: NDArray[np.intp]
    overdue: NDArray[np.intp]
    told: list[str]
    blanks: list[Blank] = field(default_factory=list)


def _in_order(runs: pd.DataFrame) -> NDArray[np.intp]:
    """Rows as they were fired: by date, then as they stand; a date that cannot be read keeps its row's place."""
    text = runs["date"].astype(str)
    dates = text.where(text.str.fullmatch(r"\d{4}-\d{2}-\d{2}.*")).ffill().fillna("").to_numpy()
    return np.asarray(np.lexsort((np.arange(len(runs)), dates)), dtype=np.intp)


def judge(
    runs: pd.DataFrame, assigned: Mapping[str, Assigned] | None = None, every: int | None = None, width: float = ACTION
) -> Controls:
    """Judge the controls of a table of runs (`reduce_runs(...).runs`) and hold what they do not vouch for.

    assigned : material -> Assigned. every : runs after which a control is due. width : standard deviations beyond which a
    control fails.
    """
    n = len(runs)
    allowed = int(constant("control_every")) if every is None else every
    found = Controls(np.zeros(n, np.int8), np.full(n, np.nan), np.zeros(n, bool), np.full(n, -1, np.intp), np.zeros(n, np.intp),
                     [""] * n)  # fmt: skip
    kind, status = runs["kind"].to_numpy(), runs["status"].to_numpy()
    value, u = runs["gross_energy"].to_numpy(dtype=float), runs["u"].to_numpy(dtype=float)
    material, instrument = runs["sample_id"].astype(str).to_numpy(), runs["instrument"].astype(str).to_numpy()
    order = _in_order(runs)
    history: dict[tuple[str, str], list[float]] = {}
    open_: dict[str, list[int]] = {}
    failed: dict[str, int] = {}
    for i in order.tolist():
        name = str(instrument[i])
        waiting = open_.setdefault(name, [])
        if kind[i] == "test":
            waiting.append(i)
            if len(waiting) > allowed:
                found.overdue[i] = len(waiting)
                found.told[i] = (
                    f"a control is overdue: {len(waiting)} runs since the last one that passed, {allowed} are allowed"
                )
            if name in failed:
                _hold(found, [i], failed[name], runs)
            continue
        if kind[i] != "control" or status[i] == "rejected":
            continue
        key = (name, str(material[i]))
        found.score[i], words = _score(str(material[i]), value[i], u[i], assigned or {}, history.get(key, []))
        if np.isnan(found.score[i]):
            found.told[i] = words
        elif abs(found.score[i]) <= width:
            found.outcome[i] = PASSED
            found.told[i] = f"control passed, {words}"
            history.setdefault(key, []).append(float(value[i]))
            failed.pop(name, None)
            open_[name] = []
        else:
            found.outcome[i] = FAILED
            found.told[i] = (
                f"control FAILED, {words}: results back to the last control that passed are held, {len(waiting)} runs"
            )
            failed[name] = i
            _hold(found, waiting, i, runs)
        if np.isnan(found.score[i]) and np.isfinite(value[i]):
            history.setdefault(key, []).append(float(value[i]))
    found.blanks = blanks(runs)
    return found


def _hold(found: Controls, rows: list[int], cause: int, runs: pd.DataFrame) -> None:
    for j in rows:
        if found.because[j] < 0:
            found.held[j], found.because[j] = True, cause
            found.told[j] = (
                f"held: control {runs['run_id'].iloc[cause]} failed and none has passed since the one before it"
            )


def _score(
    material: str, value: float, u: float, assigned: Mapping[str, Assigned], earlier: list[float]
) -> tuple[float, str]:
    """Deviation in standard deviations, and what it was held against; NaN with the reason where it cannot be judged."""
    if not np.isfinite(value):
        return np.nan, "the control gave no figure"
    if material in assigned:
        a = assigned[material]
        return (
            value - a.value
        ) / a.sd, f"{value:.3f} against {a.value:.3f} MJ/kg assigned, {(value - a.value) / a.sd:+.1f} SD"
    substance = named(material)
    if substance is not None:
        room = float(np.hypot(u, substance.u_of_reference))
        return (value - substance.heat) / room, f"{value:.4f} against {substance.heat:.4f} kJ/g of {substance.title}"
    needed = int(constant("control_history"))
    if len(earlier) < needed:
        return np.nan, (f"control not judged: no value is assigned to '{material}', and {len(earlier)} of {needed} runs are there "
                        "to take one from")  # fmt: skip
    mean, sd = float(np.mean(earlier)), float(np.std(earlier, ddof=1))
    # a mean of few runs is itself uncertain
    room = sd * float(np.sqrt(1 + 1 / len(earlier)))
    # and so is a scatter of few runs: the normal score with the same probability as Student's t has here
    tail = float(stdtr(len(earlier) - 1, -abs(value - mean) / room))
    score = float(-ndtri(max(tail, 1e-300)) * np.sign(value - mean))
    return score, f"{value:.3f} against {mean:.3f} MJ/kg, mean of {len(earlier)} earlier runs, {score:+.1f} SD"


def blanks(runs: pd.DataFrame) -> list[Blank]:
    """Mean heat of every kind of blank burnt, J per g."""
    mine = runs[
        (runs["kind"] == "blank") & np.isfinite(runs["gross_energy"].astype(float)) & (runs["status"] != "rejected")
    ]
    found = []
    for what, group in mine.groupby("sample_id", sort=True):
        x = group["gross_energy"].to_numpy(dtype=float) * 1e3
        sd = float(x.std(ddof=1)) if len(x) > 1 else np.nan
        found.append(Blank(str(what), float(x.mean()), sd, sd / np.sqrt(len(x)) if len(x) > 1 else np.nan, len(x)))
    return found
