"""The calorimeter's record: its calibrations and check substances over time, and which results rest on which."""

from __future__ import annotations

import datetime
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from energy.bomb import check_substance, control
from energy.bomb.charts import Cusum, Drift, Individuals, cusum, drift, individuals, reasons
from energy.bomb.constants import constants
from energy.bomb.constants import value as constant
from energy.bomb.control import Assigned, Controls
from energy.bomb.outcome import Reduction
from energy.problems import WrongUse

if TYPE_CHECKING:
    import pandas as pd

#: calibrations from which the centre and scatter of the chart are taken; later ones are held against them
FIRST = 6


def day_of(text: str) -> datetime.date | None:
    """A date written year-month-day; None for anything else, which the sheet's reader has told."""
    try:
        return datetime.date.fromisoformat(text[:10])
    except ValueError:
        return None


@dataclass(frozen=True)
class History:
    """One instrument's heat capacities: ids, dates, days since the first, J/K, u, chart, sums, drift, (n,) reasons."""

    instrument: str
    ids: list[str]
    dates: list[str]
    days: np.ndarray
    values: np.ndarray
    u: np.ndarray
    chart: Individuals
    sums: Cusum
    drift: Drift
    told: list[str]


@dataclass
class Record:
    """What a calorimeter did. runs : the table of all runs; controls : its verdicts, row by row."""

    found: Reduction
    runs: pd.DataFrame
    controls: Controls
    checks: list[tuple[int, check_substance.Checked]] = field(default_factory=list)

    @property
    def instruments(self) -> list[str]:
        """Instruments with a calibration."""
        return list(dict.fromkeys(c.instrument for c in self.found.calibrations if day_of(c.date)))

    def history(self, instrument: str) -> History:
        """Heat capacities over time. Raises WrongUse for an unknown instrument."""
        dated = [(day, c) for c in self.found.calibrations if c.instrument == instrument and (day := day_of(c.date))]
        mine = [c for _, c in sorted(dated, key=lambda found: found[0])]
        if not mine:
            raise WrongUse(
                f"No dated calibration of '{instrument}' is in the record.",
                f"There are: {', '.join(self.instruments)}.",
            )
        days = np.array([float(day.toordinal()) for day, _ in sorted(dated, key=lambda found: found[0])])
        values, u = np.array([c.mean for c in mine]), np.array([c.u for c in mine])
        first = individuals(values[:FIRST])
        # the scatter of a mean is no less than its own u
        sigma = float(np.nanmax([first.sigma, float(np.median(u))])) if len(values) > 1 else float(u[0])
        chart = individuals(values, first.centre, sigma)
        sums = cusum(values, first.centre, sigma)
        return History(instrument, [c.id for c in mine], [c.date[:10] for c in mine], days - days[0], values, u, chart, sums,
                       drift(days, values), reasons(chart, sums))  # fmt: skip

    def due(self, instrument: str, today: datetime.date, days: int | None = None) -> tuple[datetime.date, str]:
        """When the heat capacity must be found anew, and why. days : the house's own interval."""
        last = self.history(instrument).dates[-1]
        entry = constants()["recalibration_days"]
        span = int(constant("recalibration_days")) if days is None else days
        when = datetime.date.fromisoformat(last) + datetime.timedelta(days=span)
        why = (
            f"{span} days after the calibration of {last} ({entry.source if days is None else 'interval of the house'})"
        )
        late = (today - when).days
        return when, f"{why}; {f'overdue by {late} days' if late > 0 else f'{-late} days are left'}"

    def used(self, calibration_id: str) -> pd.DataFrame:
        """Runs whose result rests on a calibration. Raises WrongUse for an unknown one."""
        if calibration_id not in {c.id for c in self.found.calibrations}:
            raise WrongUse(f"There is no calibration '{calibration_id}'.", "See the list of calibrations.")
        mine = (self.runs["calibration_id"] == calibration_id) & (self.runs["kind"] != "calibration")
        return self.runs[mine].reset_index(drop=True)

    def withdraw(self, calibration_id: str) -> tuple[pd.DataFrame, str]:
        """What must be reduced anew if a calibration is withdrawn, and the sentence for the list."""
        mine = self.used(calibration_id)
        samples = list(dict.fromkeys(mine.loc[mine["kind"] == "test", "sample_id"].astype(str)))
        told = (f"{calibration_id} withdrawn: {len(mine)} runs rest on it, samples {', '.join(samples) or 'none'}. Reduce them with "
                "another calibration, and tell whoever has the figures")  # fmt: skip
        return mine, told


def record(found: Reduction, assigned: dict[str, Assigned] | None = None, every: int | None = None) -> Record:
    """The record of a reduced sheet. assigned, every : of the control materials, see control.judge."""
    runs = found.runs
    controls = control.judge(runs, assigned, every)
    checks = []
    for i, row in enumerate(runs.to_dict("records")):
        substance = check_substance.named(str(row["sample_id"]))
        if substance is not None and row["kind"] in ("test", "control") and np.isfinite(row["gross_energy"]) \
                and row["status"] != "rejected":  # fmt: skip
            checks.append((i, check_substance.check(substance, float(row["gross_energy"]), float(row["u"]))))
    return Record(found, runs, controls, checks)
