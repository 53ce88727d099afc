"""Bomb runs as people read them: text for the terminal, files, and the tables and curves of the screen."""

from __future__ import annotations

import datetime
from html import escape
from pathlib import Path
from types import SimpleNamespace
from typing import TYPE_CHECKING, Any

import numpy as np

from energy import __version__
from energy.assessment import demo_paths
from energy.bomb.cautions import CAUTIONS
from energy.bomb.outcome import Reduction
from energy.bomb.rise import METHODS
from energy.bomb.runs import KINDS, template
from energy.report.tables import check_ending, whole, workbook
from energy.tabular import read_table

if TYPE_CHECKING:
    import pandas as pd

#: what became of a run -> its mark and word
STATUS_WORDS = {"ok": "● counts", "warned": "◇ counts, look", "rejected": "✕ rejected", "problem": "· not computed"}
DUPLICATE_WORDS = {"single": "◇ one run only", "mean": "● mean of all", "third_run": "✕ burn a third", "fourth_run":
                   "✕ median, burn a fourth", "median": "✕ median", "none": "· none counts"}  # fmt: skip
#: remarks set on screen in full
MOST_TOLD = 40
_RISKY = ("=", "+", "-", "@", "\t")
ABOUT_U = "u is this laboratory's own; between laboratories gross energy of feeds spreads more (some 0.24 MJ/kg in a ring test)."


def problem_table(found: Reduction) -> pd.DataFrame:
    """The problems of the sheet, one row each."""
    import pandas as pd

    columns = ["severity", "row", "column", "value", "what", "cure", "where"]
    return pd.DataFrame([{c: getattr(p, c) for c in columns} for p in found.problems], columns=columns)


def budgets(found: Reduction) -> pd.DataFrame:
    """The correction budgets of all runs, one below the other."""
    import pandas as pd

    rows = [(run, *line) for i, run in enumerate(found.sheet.text["run_id"]) for line in found.budget_rows(i)]
    return pd.DataFrame(rows, columns=["run_id", "item", "heat_j", "u_j", "j_per_g", "share", "note"])


def tables(found: Reduction) -> dict[str, pd.DataFrame]:
    """name -> table, the most wanted first."""
    return {"samples": found.samples, "runs": found.runs, "budgets": budgets(found), "calibrations": found.calibration_table,
            "fuel values": found.fuel_values, "problems": problem_table(found)}  # fmt: skip


def save(found: Reduction, path: str | Path, first: pd.DataFrame | None = None) -> list[Path]:
    """Write by the path's ending. A CSV or Parquet holds `first` (the samples as a sample table where None), its runs
    beside it as <name>_runs; XLSX, JSON and HTML hold everything."""
    goal = check_ending(path)
    main = found.sample_table if first is None else first
    ending = goal.suffix.lower()
    if ending in (".csv", ".parquet"):
        beside = goal.with_name(f"{goal.stem}_runs{ending}")
        for place, table in ((goal, main), (beside, found.runs)):
            if ending == ".csv":
                whole(place, lambda p, t=table: _text_safe(t).to_csv(p, index=False))  # type: ignore[misc]
            else:
                whole(place, lambda p, t=table: t.to_parquet(p, index=False))  # type: ignore[misc]
        return [goal, beside]
    if ending == ".xlsx":
        whole(goal, lambda p: workbook({"sample table": main, **tables(found)}, p))
    elif ending == ".json":
        whole(goal, lambda p: _json({"sample_table": main, **tables(found)}, p))
    else:
        whole(goal, lambda p: _write(p, document(found)))
    return [goal]


def _write(path: Path, text: str) -> None:
    path.write_text(text, encoding="utf-8")


def _json(parts: dict[str, pd.DataFrame], path: Path) -> None:
    import json

    body = ",\n".join(f"{json.dumps(n)}: {t.to_json(orient='records', double_precision=15)}" for n, t in parts.items())
    _write(path, "{" + body + "}\n")


def _text_safe(frame: pd.DataFrame) -> pd.DataFrame:
    """Texts that a spreadsheet would take for a formula get a leading apostrophe."""
    return frame.map(lambda t: f"'{t}" if isinstance(t, str) and t.startswith(_RISKY) else t)


def document(found: Reduction) -> str:
    """Everything on one page that can be recomputed from."""
    from energy.report.document import STYLE, html_table

    parts = [
        "<!doctype html><html lang='en'><head><meta charset='utf-8'><title>Bomb runs</title>",
        f"<style>{STYLE}</style></head><body><h1>Bomb runs</h1>",
        f"<p class='quiet'>Made {datetime.date.today().isoformat()} by Energy Concordance {escape(__version__)} from "
        f"{escape(found.sheet.source or 'a sheet')}.</p>",
        f"<p>{escape(ABOUT_U)} Duplicates are judged by r = {found.repeatability:g} J/g"
        f" ({escape(found.repeatability_sd[1])}).</p>",
    ]
    for name, table in tables(found).items():
        if len(table):
            parts += [f"<h2>{escape(name.capitalize())}</h2>", html_table(table)]
    parts += ["<h2>Notes</h2><ul>", *(f"<li>{escape(n)}</li>" for n in found.notes), "</ul><h2>Cautions</h2>"]
    return "\n".join([*parts, *(f"<p>{escape(c)}</p>" for c in CAUTIONS), "</body></html>\n"])


# ---- terminal --------------------------------------------------------------------------------------------------------


def samples_text(found: Reduction) -> str:
    """Gross energies per sample, then what became of each run."""
    lines = [f"{'sample':<26}{'GE':>9}{'u':>8}{'n':>3}{'dry matter':>12}{'as is':>9}  verdict on duplicates", "-" * 100]
    for r in map(_Line, found.samples.to_dict(orient="records")):
        basis = "" if r.basis == "as_analysed" else f"  ({str(r.basis).replace('_', ' ')})"
        lines.append(f"{r.sample_id!s:<26.25}{_n(r.gross_energy, 3):>9}{_n(r.u, 3):>8}{r.n:>3}{_n(r.gross_energy_dry_matter, 3):>12}"
                     f"{_n(r.gross_energy_as_is, 3):>9}  {DUPLICATE_WORDS[str(r.status)]}{basis}")  # fmt: skip
        if r.reason:
            lines.append(f"{'':<10}{r.reason}")
    lines += ["-" * 100, "GE in MJ/kg as analysed, at constant volume. " + ABOUT_U, ""]
    return "\n".join([*lines, runs_text(found)])


class _Line(SimpleNamespace):
    """One row of a table, its columns as attributes."""

    def __init__(self, row: dict[Any, Any]):
        super().__init__(**row)

    def __getattr__(self, name: str) -> Any:
        raise AttributeError(name)


def runs_text(found: Reduction, kinds: tuple[str, ...] = KINDS) -> str:
    """What became of each run of these kinds."""
    lines = [f"{'run':<8}{'sample':<26}{'kind':<13}{'rise K':>9}{'J/K':>10}{'GE MJ/kg':>10}  ", "-" * 100]
    for r in map(_Line, found.runs[found.runs["kind"].isin(kinds)].to_dict(orient="records")):
        lines.append(f"{r.run_id!s:<8.7}{r.sample_id!s:<26.25}{r.kind!s:<13}{_n(r.rise, 4):>9}{_n(r.heat_capacity, 1):>10}"
                     f"{_n(r.gross_energy, 3):>10}  {STATUS_WORDS[str(r.status)]}")  # fmt: skip
        if r.reason:
            lines.append(_wrap(str(r.reason)))
    return "\n".join(lines)


def calibrations_text(found: Reduction) -> str:
    """Each heat capacity with its uncertainty and what is to be said of it."""
    lines = [f"{'calibration':<32}{'J/K':>10}{'u':>7}{'n':>4}{'RSD %':>8}", "-" * 100]
    for c in found.calibrations:
        lines.append(f"{c.id:<32.31}{c.mean:>10.1f}{c.u:>7.1f}{c.n:>4}{_n(c.rsd * 100, 3):>8}")
        lines += [_wrap(w) for w in c.warnings]
    return "\n".join([*lines, "", runs_text(found, ("calibration",))])


def _n(value: float, digits: int) -> str:
    return "" if not np.isfinite(value) else f"{value:.{digits}f}"


def _wrap(sentence: str) -> str:
    import textwrap

    return textwrap.fill(sentence, 112, initial_indent=" " * 10, subsequent_indent=" " * 12)


# ---- screen ----------------------------------------------------------------------------------------------------------


def run_rows(found: Reduction) -> pd.DataFrame:
    """The runs as texts for a table on screen."""
    t = found.runs
    import pandas as pd

    return pd.DataFrame({
        "run": t["run_id"], "sample": t["sample_id"], "kind": t["kind"], "": [STATUS_WORDS[s] for s in t["status"]],
        "corrected rise, K": [_n(v, 4) for v in t["rise"]], "heat capacity, J/K": [_n(v, 1) for v in t["heat_capacity"]],
        "gross energy as burnt, MJ/kg": [_n(v, 3) for v in t["gross_energy"]], "u": [_n(v, 3) for v in t["u"]],
        "operator": t["operator"], "date": t["date"], "batch": t["batch"],
    })  # fmt: skip


def sample_rows(found: Reduction) -> pd.DataFrame:
    """The samples as texts for a table on screen."""
    import pandas as pd

    t = found.samples
    return pd.DataFrame({
        "sample": t["sample_id"], "gross energy, MJ/kg": [_n(v, 3) for v in t["gross_energy"]],
        "u": [_n(v, 3) for v in t["u"]], "runs": [str(v) for v in t["n"]],
        "basis": [b.replace("_", " ") for b in t["basis"]], "in dry matter": [_n(v, 3) for v in t["gross_energy_dry_matter"]],
        "as is": [_n(v, 3) for v in t["gross_energy_as_is"]], "duplicates": [DUPLICATE_WORDS[s] for s in t["status"]],
    })  # fmt: skip


def calibration_rows(found: Reduction) -> pd.DataFrame:
    """The calibrations as texts for a table on screen."""
    import pandas as pd

    return pd.DataFrame([{
        "calibration": c.id, "heat capacity, J/K": f"{c.mean:.1f}", "u": f"{c.u:.1f}", "runs": str(len(c.run_ids)),
        "RSD, %": _n(c.rsd * 100, 3), "to look at": "; ".join(c.warnings) or "nothing",
    } for c in found.calibrations])  # fmt: skip


def budget_rows(found: Reduction, run_id: str) -> pd.DataFrame:
    """The correction budget of a run as texts; the heats add up to its last row."""
    import pandas as pd

    table = found.budget(run_id)
    return pd.DataFrame({
        "heat": table["item"], "J": [f"{v:+.1f}" for v in table["heat_j"]], "u, J": [_n(v, 1) for v in table["u_j"]],
        "J per g": [f"{v:+.1f}" for v in table["j_per_g"]], "share of the whole": [f"{v:.1%}" for v in table["share"]],
    })  # fmt: skip


def budget_line(found: Reduction, run_id: str) -> str:
    """The run's gross energy in a sentence."""
    i = found.row_of(run_id)
    if found.sheet.kind_code[i] == KINDS.index("calibration"):
        c, u_c = found.heat_capacity[i], found.u_heat_capacity[i]
        if not np.isfinite(c):
            return "No heat capacity: " + "; ".join(found.sentences(i))
        return f"Over the rise of {found.rise[i]:.4f} K: a heat capacity of {c:.1f} J/K, u {u_c:.1f} of this run alone."
    q, u = found.budgets.per_gram[i], found.budgets.u_per_gram[i]
    if not np.isfinite(q):
        return "No gross energy: " + "; ".join(found.sentences(i))
    counted = "" if np.isfinite(found.gross[i]) else " It counts for nothing: see why above."
    return f"{q * 1e-3:.4f} MJ/kg as burnt, u {u * 1e-3:.4f}, from {found.mass[i]:.4f} g.{counted}"


def curves(found: Reduction, run_id: str) -> dict[str, pd.DataFrame] | None:
    """What the thermogram is drawn from, None where the run has none.

    readings : minutes, temperature, period. drifts : minutes, temperature, line. bounds : minutes, what, temperature (where to
    write it). rise : minutes,
    low, high, label: the corrected rise, drawn where the two drift lines lie exactly that far apart.
    """
    import pandas as pd

    place = found.record_of(found.row_of(run_id))
    records, rise = found.sheet.records, found.thermograms
    if place is None or records is None or rise is None or not np.isfinite(rise.value[place]):
        return None
    count = int(records.count[place])
    t, temp = records.time[place, :count] / 60, records.temperature[place, :count]
    start, lit, end, stop = (float(b[place]) / 60 for b in (rise.periods.fore_start, rise.periods.ignition,
                                                            rise.periods.main_end, rise.periods.after_end))  # fmt: skip
    slopes = [float(d.rate[place]) * 60 for d in (rise.fore, rise.after)]
    heights = [float(d.temperature[place] - d.rate[place] * d.time[place]) for d in (rise.fore, rise.after)]
    value = float(rise.value[place])
    with np.errstate(divide="ignore", invalid="ignore"):
        meet = (heights[1] - heights[0] - value) / np.float64(slopes[0] - slopes[1])
    at = float(np.clip(meet, lit, end)) if np.isfinite(meet) else (lit + end) / 2
    spans = {"drift before firing": (start, max(at, lit)), "drift after": (min(at, end), stop)}
    lines = [(m, heights[k] + slopes[k] * m, name) for k, (name, span) in enumerate(spans.items()) for m in span]
    high = heights[1] + slopes[1] * at
    period = np.where(t <= lit, "fore period", np.where(t < end, "main period", "after period"))
    return {
        "readings": pd.DataFrame({"minutes": t, "temperature": temp, "period": period}),
        "drifts": pd.DataFrame(lines, columns=["minutes", "temperature", "line"]),
        "bounds": pd.DataFrame({"minutes": [lit, end], "what": ["firing", "end of the main period"],
                                "temperature": (temp.min() + temp.max()) / 2}),
        "rise": pd.DataFrame({"minutes": [at], "high": [high], "low": [high - value], "written": [high - 0.85 * value],
                              "label": [f"corrected rise {value:.4f} K"]}),
    }  # fmt: skip


def rise_rows(found: Reduction, run_id: str) -> pd.DataFrame:
    """The parts of a corrected rise, and how well the drifts fit, as texts."""
    import pandas as pd

    i = found.record_of(found.row_of(run_id))
    r = found.thermograms
    assert i is not None and r is not None

    def drift(d: object, name: str) -> str:
        rate, sd, count = (getattr(d, k)[i] for k in ("rate", "sd", "count"))
        return (
            f"{rate * 60:+.5f} K/min from {count} readings, {sd * 1e3:.2f} mK about the line"
            if count > 2
            else f"{rate * 60:+.5f} K/min, {name}"
        )

    rows = [("observed rise", f"{r.observed[i]:.4f} K"), ("correction", f"{r.correction[i]:+.4f} K"),
            ("corrected rise", f"{r.value[i]:.4f} K, u {r.u[i]:.4f} K"), ("drift before firing", drift(r.fore, "not fitted")),
            ("drift after", drift(r.after, "not fitted")), ("thermometer's step", f"{r.step[i]:g} K")]  # fmt: skip
    if np.isfinite(r.leak[i]):
        rows.insert(5, ("leak to the jacket", f"{r.leak[i] * 60:.5f} per min"))
    return pd.DataFrame(rows, columns=["quantity", "value"])


def charted(found: Reduction) -> list[str]:
    """Run ids: those with a thermogram first, tests before the others."""
    plain = found.sheet.kind_code == KINDS.index("test")
    order = sorted(range(len(found)), key=lambda i: (found.record_of(i) is None, not plain[i]))
    return [str(found.sheet.text["run_id"][i]) for i in order]


def to_look_at(found: Reduction) -> pd.DataFrame:
    """Samples whose duplicates disagree and runs that do not simply count, with the reason, as texts."""
    import pandas as pd

    pairs = [
        (r["sample_id"], DUPLICATE_WORDS[r["status"]], r["reason"])
        for r in found.samples.to_dict("records")
        if r["reason"]
    ]
    runs = [(f"run {r['run_id']}, {r['sample_id']}", STATUS_WORDS[r["status"]], r["reason"])
            for r in found.runs.to_dict("records") if r["reason"]]  # fmt: skip
    rows = [*pairs, *runs]
    if len(rows) > MOST_TOLD:
        rows = [*rows[:MOST_TOLD], (f"{len(rows) - MOST_TOLD} more", "", "take the written results to see them all")]
    return pd.DataFrame(rows, columns=["sample or run", "what became of it", "why"])


def period_bounds(found: Reduction, run_id: str) -> tuple[float, float, float, float] | None:
    """First reading, firing, end of the main period, last reading, in minutes."""
    place = found.record_of(found.row_of(run_id))
    if place is None or found.thermograms is None:
        return None
    p = found.thermograms.periods
    first, lit, end, last = (float(b[place]) / 60 for b in (p.fore_start, p.ignition, p.main_end, p.after_end))
    return first, lit, end, last


def seconds(minutes: tuple[float, float]) -> tuple[float, float]:
    """Firing and end of the main period, as reduce_runs takes them."""
    return minutes[0] * 60, minutes[1] * 60


def joule(kilojoule: float | None) -> float | None:
    """A rating typed in kJ."""
    return None if not kilojoule else kilojoule * 1e3


def demo() -> tuple[bytes, bytes]:
    """The invented run sheet and its thermograms."""
    folder = demo_paths()[0].parent
    return (folder / "bomb_runs.csv").read_bytes(), (folder / "bomb_thermograms.csv").read_bytes()


def sample_csv(found: Reduction) -> bytes:
    """The samples as a sample table to load elsewhere."""
    return _text_safe(found.sample_table).to_csv(index=False).encode("utf-8")


def counts(found: Reduction) -> str:
    """What became of the runs, in a line."""
    number = found.runs["status"].value_counts()
    words = {"ok": "count", "warned": "count with a remark", "rejected": "rejected", "problem": "not computed"}
    return f"{len(found)} runs: " + ", ".join(f"{number[s]} {w}" for s, w in words.items() if s in number)


def empty_sheet() -> str:
    """The header line of an empty run sheet."""
    return template() + "\n"


def method_name(method: str) -> str:
    """A method as a choice."""
    return METHODS[method].split(":")[0]


def sulfur_name(convention: str) -> str:
    """A sulfur convention as a choice."""
    return {"off": "off (food and feed)", "separate": "nitric acid found separately", "total_acid":
            "all acid booked as nitric"}[convention]  # fmt: skip


def run_titles(found: Reduction) -> dict[str, str]:
    """Run id -> what stands in the choice: id, what was burnt, what became of it."""
    t = found.runs
    return {str(r): f"{r}  {sample}  {STATUS_WORDS[str(status)]}"
            for r, sample, status in zip(t["run_id"], t["sample_id"], t["status"], strict=True)}  # fmt: skip


def joined_csv(found: Reduction, data: bytes, name: str, basis: str) -> tuple[bytes, str]:
    """A wide sample table with the gross energies beside it, and how many of its samples got one."""
    import io

    import pandas as pd

    raw = read_table(data, name)
    table = found.joined(pd.DataFrame(raw.cells, columns=raw.headers), basis)
    column = next(c for c in table.columns if c.startswith("gross_energy ["))
    count = int(table[column].notna().sum())
    buffer = io.StringIO()
    _text_safe(table).to_csv(buffer, index=False)
    return buffer.getvalue().encode("utf-8"), f"{count} of {len(table)} samples got a gross energy."


def remarks(found: Reduction, run_id: str) -> list[str]:
    """What is to be said of a run."""
    return found.sentences(found.row_of(run_id))
