"""The calorimeter's record as tables and sentences for a screen."""

from __future__ import annotations

import datetime
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from energy.assessment import demo_paths
from energy.bomb.charts import ACTION, WARNING
from energy.bomb.control import FAILED, PASSED, WORDS
from energy.bomb.record import FIRST, History, Record

if TYPE_CHECKING:
    import pandas as pd

#: outcome of a control -> its mark; none speaks without its word
MARKS = {"passed": "◆", "failed": "✕", "not judged": "·"}


def demo() -> bytes:
    """The invented year."""
    folder: Path = demo_paths()[0].parent
    return (folder / "calorimeter_record.csv").read_bytes()


def points(h: History) -> pd.DataFrame:
    """Calibrations for drawing: date, J/K, ends of the interval, whether it signals, and why."""
    import pandas as pd

    return pd.DataFrame({
        "date": pd.to_datetime(h.dates), "heat capacity": h.values, "low": h.values - 2 * h.u, "high": h.values + 2 * h.u,
        "calibration": h.ids, "call": ["signals" if t else "quiet" for t in h.told], "why": [t or "inside the limits" for t in h.told],
    })  # fmt: skip


def lines(h: History) -> pd.DataFrame:
    """Centre and limits of the chart."""
    import pandas as pd

    rows = [("centre", h.chart.centre)]
    for words, width in (("warning", WARNING), ("action", ACTION)):
        rows += [(words, x) for x in h.chart.limits(width)]
    return pd.DataFrame(rows, columns=["line", "at"])


def sums(h: History) -> pd.DataFrame:
    """Cumulative sums for drawing, J/K; the lower one downward."""
    import pandas as pd

    date = pd.to_datetime(h.dates)
    up = pd.DataFrame({"date": date, "sum": h.sums.upper, "side": "upward"})
    down = pd.DataFrame({"date": date, "sum": -h.sums.lower, "side": "downward"})
    return pd.concat([up, down], ignore_index=True)


def calibrations(h: History, record: Record) -> pd.DataFrame:
    """Calibrations with what rests on each and what it calls for, the latest first."""
    import pandas as pd

    found = pd.DataFrame({
        "calibration": h.ids, "date": h.dates, "heat capacity, J/K": [f"{x:.1f}" for x in h.values], "u": [f"{x:.1f}" for x in h.u],
        "from the centre, SD": [f"{x:+.1f}" for x in h.chart.score],
        "runs resting on it": [str(len(record.used(i))) for i in h.ids],
        "calls for": [f"✕ {t}" if t else "◆ nothing" for t in h.told],
    })  # fmt: skip
    return found.iloc[::-1].reset_index(drop=True)


def headline(h: History, record: Record, today: datetime.date, days: int | None) -> list[str]:
    """What the chart says in sentences: centre, scatter, drift, due date."""
    when, why = record.due(h.instrument, today, days)
    return [
        f"Centre {h.chart.centre:.1f} J/K and scatter {h.chart.sigma:.1f} J/K from the first {min(FIRST, len(h.values))} calibrations (mean"
        " moving range, or the u of one calibration where that is larger).",
        f"Drift in J/K: {h.drift.words}.",
        f"The next calibration is due on {when.isoformat()}: {why}.",
    ]  # fmt: skip


def controls(record: Record) -> pd.DataFrame:
    """Control runs with their outcome, the latest first."""
    import pandas as pd

    c = record.controls
    mine = np.flatnonzero((record.runs["kind"] == "control").to_numpy())[::-1]
    return pd.DataFrame({
        "run": record.runs["run_id"].to_numpy()[mine], "date": record.runs["date"].to_numpy()[mine],
        "material": record.runs["sample_id"].to_numpy()[mine],
        "outcome": [f"{MARKS[WORDS[c.outcome[i]]]} {WORDS[c.outcome[i]]}" for i in mine], "why": [c.told[i] for i in mine],
    })  # fmt: skip


def control_counts(record: Record) -> str:
    """How many controls passed, failed, and how many results are held."""
    o = record.controls.outcome
    return (f"{int((o == PASSED).sum())} controls passed, {int((o == FAILED).sum())} failed; {int(record.controls.held.sum())} results"
            " are held.")  # fmt: skip


def held(record: Record) -> pd.DataFrame:
    """Results that are held, and why."""
    import pandas as pd

    mine = np.flatnonzero(record.controls.held)
    return pd.DataFrame({
        "run": record.runs["run_id"].to_numpy()[mine], "date": record.runs["date"].to_numpy()[mine],
        "sample": record.runs["sample_id"].to_numpy()[mine], "why": [record.controls.told[i] for i in mine],
    })  # fmt: skip


def rejected(record: Record) -> pd.DataFrame:
    """Rejected runs with their reason."""
    mine = record.runs[record.runs["status"] == "rejected"]
    return mine[["run_id", "date", "sample_id", "reason"]].rename(
        columns={"run_id": "run", "sample_id": "sample", "reason": "why"}
    )


def overdue(record: Record) -> list[str]:
    """Runs at which a control was overdue, in words; a few."""
    c = record.controls
    mine = np.flatnonzero(c.overdue > 0)
    told = [
        f"{record.runs['run_id'].iloc[i]}: a control is overdue, {c.overdue[i]} runs since the last one that passed"
        for i in mine[:5]
    ]
    return [*told, f"and {len(mine) - 5} more runs without a control"] if len(mine) > 5 else told


def checks(record: Record) -> pd.DataFrame:
    """Check substances against their heats, the latest first."""
    import pandas as pd

    marks = {"satisfactory": "◆", "warning": "◇", "action": "✕"}
    rows = [{
        "run": record.runs["run_id"].iloc[i], "date": record.runs["date"].iloc[i], "substance": c.substance.title,
        "measured, kJ/g": f"{c.measured:.4f}", "of the literature": f"{c.substance.heat:.4f}", "zeta": f"{c.zeta:+.1f}",
        "calls for": f"{marks.get(c.word, '·')} {c.word}", "source": c.substance.source,
    } for i, c in reversed(record.checks)]  # fmt: skip
    return pd.DataFrame(rows)
