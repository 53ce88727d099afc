"""The run sheet of a bomb calorimeter: one row per firing, and the table of what came of each.

`OUTCOME_COLUMNS` is what `reduce_runs(...).runs` and `calibrate(...).runs` hand on, one row per run in the order of the
sheet; control charts and the calorimeter's record read these names.
"""

from __future__ import annotations

import datetime
import difflib
import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cache, cached_property
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from energy import cells
from energy.bomb.constants import CALORIE, constants, ignition_materials
from energy.bomb.drift import Flags, Floats
from energy.bomb.periods import Records, records_of_long
from energy.bomb.preparation import day_warning
from energy.headers import split_header
from energy.problems import Problem, StructuralProblems, UnitProblem, WrongUse
from energy.quantities import normal_form
from energy.tabular import RawTable, read_table
from energy.units import parse_unit

#: what a run was fired for; in a sheet without the column every run is a test
KINDS = ("test", "calibration", "control", "blank")
#: what became of a run. warned: computed, with something to look at (in `reason`); rejected: stays visible, counts for
#: nothing (soot, a spoilt firing); problem: could not be computed, `reason` says what is missing
RUN_STATUS = ("ok", "warned", "rejected", "problem")

#: name -> (unit, what it is), one row per run
OUTCOME_COLUMNS = {
    "run_id": ("", "as in the sheet, unique, text"),
    "sample_id": ("", "what was burnt; the name of the control material, of benzoic acid in a calibration"),
    "kind": ("", "one of KINDS"),
    "instrument": ("", "as in the sheet, '' where not given"),
    "operator": ("", "as in the sheet, '' where not given"),
    "date": ("", "ISO date text, '' where not given"),
    "batch": ("", "as in the sheet, '' where not given"),
    "preparation": ("", "as in the sheet, '' where not given"),
    "rise": ("K", "corrected temperature rise"),
    "u_rise": ("K", "its standard uncertainty"),
    "heat_capacity": ("J/K", "the one used for this run; in a calibration run the one this run gives"),
    "u_heat_capacity": ("J/K", "its standard uncertainty; in a calibration run that of this run alone"),
    "calibration_id": ("", "the calibration used; in a calibration run the one it belongs to"),
    "mass": ("g", "of what was burnt, as weighed in air"),
    "gross_energy": ("MJ/kg", "at constant volume, as analysed (as weighed); NaN in a calibration run"),
    "u": ("MJ/kg", "standard uncertainty of gross_energy of this run alone, calibration included"),
    "status": ("", "one of RUN_STATUS"),
    "reason": ("", "why it is not ok, in words"),
}

#: dimension -> unit as written -> size in the internal unit, which stands first
UNITS: dict[str, dict[str, float]] = {
    "mass": {"g": 1.0, "mg": 1e-3, "kg": 1e3},
    "rise": {"K": 1.0, "°C": 1.0, "C": 1.0, "mK": 1e-3},
    "heat": {"J": 1.0, "kJ": 1e3, "cal": CALORIE, "kcal": 1e3 * CALORIE},
    "heat_capacity": {"J/K": 1.0, "kJ/K": 1e3, "J/°C": 1.0, "kJ/°C": 1e3, "J/C": 1.0, "kJ/C": 1e3, "cal/K": CALORIE,
                      "cal/°C": CALORIE, "cal/C": CALORIE, "MJ/K": 1e6},
    "length": {"cm": 1.0, "mm": 0.1},
    "volume": {"ml": 1.0, "mL": 1.0, "cm3": 1.0, "l": 1e3},
    "size": {"dm3": 1.0, "l": 1.0, "L": 1.0, "ml": 1e-3, "mL": 1e-3, "cm3": 1e-3},
    "concentration": {"mol/l": 1.0, "mol/L": 1.0, "mmol/l": 1e-3, "M": 1.0},
    "pressure": {"MPa": 1.0, "bar": 0.1, "atm": 0.101325, "kPa": 1e-3},
    "temperature": {"°C": 1.0, "C": 1.0},
    "time": {"s": 1.0, "min": 60.0, "h": 3600.0},
    "drift": {"K/s": 1.0, "K/min": 1 / 60, "°C/min": 1 / 60, "mK/min": 1e-3 / 60},
}  # fmt: skip
BASIS_WORDS = {"air": "air", "in air": "air", "weighed in air": "air", "vacuum": "vacuum", "in vacuum": "vacuum",
               "mass in vacuum": "vacuum"}  # fmt: skip


@dataclass(frozen=True, slots=True)
class RunColumn:
    """One column a run sheet may have. low, high : plausible; least, most : possible, in the internal unit."""

    name: str
    title: str
    dimension: str
    synonyms: tuple[str, ...]
    low: float
    high: float
    least: float
    most: float
    template: str | None


@cache
def run_columns() -> dict[str, RunColumn]:
    """name -> RunColumn, in the order of the file."""
    raw = tomllib.loads(Path(__file__).with_name("run_columns.toml").read_text(encoding="utf-8"))
    return {name: _column(name, entry) for name, entry in raw.items()}


def _column(name: str, entry: dict[str, Any]) -> RunColumn:
    low, high = entry.get("range", (-np.inf, np.inf))
    # a mass, a rise, a heat of nothing is none: zero is impossible unless the file says otherwise
    least = entry.get("least", 1e-12 if "range" in entry else -np.inf)
    return RunColumn(name, entry["title"], entry["dimension"], tuple(entry["synonyms"]), low, high, least,
                     entry.get("most", np.inf), entry.get("template"))  # fmt: skip


@cache
def _index() -> dict[str, str]:
    return {normal_form(word): c.name for c in run_columns().values() for word in (c.name, *c.synonyms)}


def template() -> str:
    """The header line of an empty run sheet."""
    named = [
        f"{c.name} [{c.template}]" if c.template else c.name for c in run_columns().values() if c.template is not None
    ]
    return ",".join(named)


@dataclass
class RunSheet:
    """n runs as given. number, u : column -> (n,) in internal units, NaN where empty. text : column -> (n,) str.

    void : (n,) the row holds a cell that cannot be used. rows : (n,) as the user counts. records : thermograms, place :
    (n,) row of each run in them, -1 for none.
    """

    text: dict[str, np.ndarray]
    number: dict[str, Floats] = field(default_factory=dict)
    u: dict[str, Floats] = field(default_factory=dict)
    void: dict[int, str] = field(default_factory=dict)
    problems: list[Problem] = field(default_factory=list)
    rows: np.ndarray | None = None
    source: str = ""
    records: Records | None = None
    place: np.ndarray | None = None

    def __len__(self) -> int:
        return len(self.text["run_id"])

    def words(self, column: str, empty: str = "") -> np.ndarray:
        """(n,) texts of a column, `empty` throughout where the sheet has none."""
        found = self.text.get(column)
        return np.full(len(self), empty, dtype=object) if found is None else found

    def values(self, column: str) -> Floats:
        """(n,) numbers of a column, NaN throughout where the sheet has none."""
        found = self.number.get(column)
        return np.full(len(self), np.nan) if found is None else found

    @cached_property
    def kind_code(self) -> NDArray[np.int8]:
        """(n,) index into KINDS."""
        return np.array([KINDS.index(str(k)) for k in self.text["kind"]], dtype=np.int8)

    @cached_property
    def is_rejected(self) -> Flags:
        """(n,) the sheet says why the run counts for nothing."""
        return np.array([bool(str(r)) for r in self.words("rejected")], dtype=bool)

    @cached_property
    def is_void(self) -> Flags:
        """(n,) the row holds a cell that cannot be used."""
        mask = np.zeros(len(self), dtype=bool)
        mask[list(self.void)] = True
        return mask

    @cached_property
    def days_apart(self) -> Flags:
        """(n,) the residual moisture was not taken on the day of the pellets."""
        pellets, moisture = self.words("pellet_date"), self.words("moisture_date")
        return np.array([bool(day_warning(str(a), str(b))) for a, b in zip(pellets, moisture, strict=True)], dtype=bool)

    @classmethod
    def from_arrays(cls, number: Mapping[str, Any], text: Mapping[str, Any] | None = None) -> RunSheet:
        """A sheet from arrays in internal units, for programs. kind is test where not given."""
        arrays = {name: np.asarray(values, dtype=float) for name, values in number.items()}
        n = len(next(iter(arrays.values())))
        words = {name: np.asarray(values, dtype=object) for name, values in (text or {}).items()}
        words.setdefault("run_id", np.arange(1, n + 1).astype(str).astype(object))
        words.setdefault("sample_id", words["run_id"])
        words.setdefault("kind", np.full(n, "test", dtype=object))
        return cls(words, arrays)


def read_runs(
    table: Any,
    thermograms: Any = None,
    units: Mapping[str, str] | None = None,
    decimal: str | None = None,
    name: str | None = None,
    thermograms_name: str | None = None,
) -> RunSheet:
    """A run sheet (CSV, XLSX, Parquet, bytes with `name`, DataFrame) and thermograms -> RunSheet.

    thermograms : long table run_id, time [s or min], temperature [°C]. units : header -> unit where the header has none.
    Raises StructuralProblems with all that stops the file; lesser problems are in `.problems`.
    """
    if isinstance(table, RunSheet):
        sheet = table
    else:
        sheet = _Reader(read_table(table, name), dict(units or {}), decimal).read()
    if thermograms is not None:
        _attach(sheet, read_table(thermograms, thermograms_name), dict(units or {}), decimal)
    return sheet


def scale_of(text: str, dimension: str) -> float:
    """Size of a unit in the internal one. Raises UnitProblem with the cure."""
    bare = text.strip()
    if dimension in ("energy", "fraction"):
        unit = parse_unit(bare, dimension)
        if unit.per_volume:
            raise UnitProblem(text, "it is per volume.", "Give it per mass, such as 'J/g'.")
        return unit.scale * 1e3 if dimension == "energy" else unit.scale
    known = UNITS[dimension]
    if bare not in known:
        raise UnitProblem(text, "it is not a unit of this column.", f"One of: {', '.join(known)}.")
    return known[bare]


class _Reader:
    def __init__(self, raw: RawTable, units: dict[str, str], decimal: str | None):
        if decimal not in (None, "point", "comma"):
            raise WrongUse(f"decimal = '{decimal}' is not known.", "Use 'point' or 'comma'.")
        self.raw, self.units, self.decimal = raw, units, decimal
        self.stops: list[Problem] = []
        self.sheet = RunSheet({}, rows=raw.rows, source=raw.where)

    def stop(
        self, what: str, cure: str, column: str | None = None, row: int | None = None, value: str | None = None
    ) -> None:
        self.stops.append(Problem(what, cure, self.raw.where, row, column, value, "structural"))

    def read(self) -> RunSheet:
        places = self._headers()
        self._identities(places)
        numeric = [k for k, (column, _, _) in places.items() if run_columns()[column].dimension != "text"]
        comma = _comma(self.raw, numeric, self.decimal, self.stops)
        if self.stops:
            raise StructuralProblems(self.stops)
        for k, (column, scale, is_u) in places.items():
            if run_columns()[column].dimension == "text":
                self.sheet.text[column] = self.raw.cells[:, k].astype(object)
            else:
                self._numbers(k, column, scale, is_u, comma)
        self._words()
        return self.sheet

    def _headers(self) -> dict[int, tuple[str, float, bool]]:
        places: dict[int, tuple[str, float, bool]] = {}
        seen: dict[tuple[str, bool], str] = {}
        for k, header in enumerate(self.raw.headers):
            name, unit, _, is_u = split_header(header)
            unit = self.units.get(header, unit)
            column = _index().get(normal_form(name))
            if column is None:
                self._unknown(header, name, unit)
                continue
            if (column, is_u) in seen:
                self.stop(f"this is a second column for {run_columns()[column].title}.",
                          f"Keep it or '{seen[column, is_u]}'.", header)  # fmt: skip
                continue
            seen[column, is_u] = header
            entry = run_columns()[column]
            if entry.dimension == "text":
                places[k] = (column, 1.0, False)
                continue
            example = {"energy": "J/g", "fraction": "%"}.get(entry.dimension) or next(iter(UNITS[entry.dimension]))
            if not unit:
                self.stop(f"{entry.title} has no unit.", f"Write '{name} [{example}]'.", header)
                continue
            try:
                places[k] = (column, scale_of(unit, entry.dimension), is_u)
            except UnitProblem as found:
                cure = f"Write '{name} [{example}]'." if entry.dimension in ("energy", "fraction") else found.cure
                self.stop(f"the unit '{unit}': {found.what}", cure, header)
        return places

    def _unknown(self, header: str, name: str, unit: str | None) -> None:
        near = difflib.get_close_matches(normal_form(name), _index(), n=3, cutoff=0.6)
        names = dict.fromkeys(repr(_index()[n]) for n in near)
        close = f"Did you mean {', '.join(names)}?" if near else ""
        if unit:
            self.stop("this column is not known in a run sheet.",
                      close or "See `python -m energy template runs`, or drop its unit to keep it as a note.", header)  # fmt: skip
        elif header:
            self.sheet.problems.append(Problem("this column is not used.", close or "Nothing to do.", self.raw.where, None,
                                               header, None, "warning"))  # fmt: skip

    def _identities(self, places: dict[int, tuple[str, float, bool]]) -> None:
        if not any(c in ("sample_mass", "total_mass") for c, _, _ in places.values()):
            self.stop(
                "there is no column sample_mass.", "Add 'sample_mass [g]', or 'total_mass [g]' with the bag's mass."
            )
        column = next((k for k, (c, _, _) in places.items() if c == "run_id"), None)
        if column is None:
            self.stop("there is no column run_id.", "Add one: a unique text per firing.")
            return
        seen: dict[str, int] = {}
        for row, identity in zip(self.raw.rows.tolist(), self.raw.cells[:, column], strict=True):
            if identity == "":
                self.stop("the run_id is empty.", "Give every run a unique text.", "run_id", row)
            elif identity in seen:
                self.stop(f"the run_id stands twice (first in row {seen[identity]}).", "Give every firing its own.",
                          "run_id", row, str(identity))  # fmt: skip
            seen.setdefault(str(identity), row)

    def tell(self, i: int, what: str, cure: str, column: str, value: str, severity: str = "cell") -> None:
        sheet = self.sheet
        sheet.problems.append(Problem(what, cure, self.raw.where, int(self.raw.rows[i]), column, value, severity))
        if severity == "cell":
            sheet.void.setdefault(i, f"{column} '{value}': {what} {cure}")

    def _numbers(self, k: int, column: str, scale: float, is_u: bool, comma: bool) -> None:
        entry, header = run_columns()[column], self.raw.headers[k]
        texts = self.raw.cells[:, k]
        parsed = cells.numbers(texts, comma)
        for i, (what, cure) in parsed.bad.items():
            self.tell(i, what, cure, header, str(texts[i]))
        for i in np.flatnonzero(parsed.censored).tolist():
            self.tell(i, "a run needs a value, not a limit.", "Give what was weighed or read.", header, str(texts[i]))
        values = np.where(parsed.censored, np.nan, parsed.value * scale)
        if is_u:
            with np.errstate(invalid="ignore"):
                for i in np.flatnonzero(values < 0).tolist():
                    self.tell(i, "an uncertainty cannot be negative.", "Check the sign.", header, str(texts[i]))
                self.sheet.u[column] = np.where(values < 0, np.nan, values)
            return
        with np.errstate(invalid="ignore"):
            impossible = (values < entry.least) | (values > entry.most)
            odd = ~impossible & ((values < entry.low) | (values > entry.high))
        for i in np.flatnonzero(impossible).tolist():
            self.tell(i, f"{entry.title} of this size is impossible.", "Check the value, its unit and its decimal point.",
                      header, str(texts[i]))  # fmt: skip
        for i in np.flatnonzero(odd).tolist():
            self.tell(i, f"{entry.title} is outside the plausible {_range(entry, scale)}.",
                      "Computed all the same; check the value and its unit.", header, str(texts[i]), "warning")  # fmt: skip
        self.sheet.number[column] = np.where(impossible, np.nan, values)

    def _words(self) -> None:
        sheet, n = self.sheet, len(self.raw.rows)
        kinds = np.array([normal_form(str(k)) or "test" for k in sheet.words("kind", "test")], dtype=object)
        for i in range(n):
            if kinds[i] not in KINDS:
                self.tell(i, "this kind of run is not known.", f"One of: {', '.join(KINDS)}.", "kind",
                          str(sheet.text["kind"][i]))  # fmt: skip
                kinds[i] = "test"
        sheet.text["kind"] = kinds
        samples = sheet.words("sample_id").copy()
        for i in np.flatnonzero(samples == "").tolist():
            if kinds[i] == "calibration":
                samples[i] = "benzoic acid"
            else:
                self.tell(i, "the sample_id is empty.", "Say what was burnt.", "sample_id", "")
        sheet.text["sample_id"] = samples
        for column in ("date", "pellet_date", "moisture_date"):
            if column in sheet.text:
                sheet.text[column] = np.array([self._date(i, column, str(v)) for i, v in enumerate(sheet.text[column])],
                                              dtype=object)  # fmt: skip
        self._ignition()
        self._bounds()
        if "certificate_basis" in sheet.text:
            given = sheet.text["certificate_basis"]
            sheet.text["certificate_basis"] = np.array([BASIS_WORDS.get(normal_form(str(b)), str(b)) for b in given],
                                                       dtype=object)  # fmt: skip

    def _ignition(self) -> None:
        """Wire or thread by mass or length needs its material, and the one its constant is per."""
        words = self.sheet.words("ignition_material")
        for column, per in (("ignition_mass", "/g"), ("ignition_length", "/cm")):
            amounts = self.sheet.values(column)
            for i in np.flatnonzero(amounts > 0).tolist():
                word = normal_form(str(words[i])).replace(" ", "_")
                if word not in ignition_materials():
                    self.tell(i, "it is not said of what, or the material is not known.",
                              f"Write into ignition_material one of: {', '.join(ignition_materials())}; or give ignition_heat [J].",
                              column, str(words[i]))  # fmt: skip
                elif not constants()[word].unit.endswith(per):
                    other = "ignition_mass [mg]" if per == "/cm" else "ignition_length [cm]"
                    self.tell(i, f"the constant of {word} is per {constants()[word].unit.split('/')[1]}.",
                              f"Give {other}, or choose another material.", column, str(words[i]))  # fmt: skip
                else:
                    continue
                self.sheet.number[column][i] = np.nan
        if "ignition_material" in self.sheet.text:
            plain = [normal_form(str(w)).replace(" ", "_") for w in words]
            self.sheet.text["ignition_material"] = np.array(plain, dtype=object)

    def _bounds(self) -> None:
        """A main period that ends before it begins."""
        firing, end = self.sheet.values("firing_time"), self.sheet.values("main_end")
        for i in np.flatnonzero(firing >= end).tolist():
            self.tell(i, "the main period ends before the firing.", "Check both times and their units.", "main_end",
                      f"{end[i]:g} s")  # fmt: skip

    def _date(self, i: int, column: str, text: str) -> str:
        if not text:
            return ""
        match = re.fullmatch(r"(\d{4}-\d{2}-\d{2})([ T]00:00(:00)?)?", text)
        if match is None or not _is_day(match[1]):
            self.tell(
                i,
                "this date is not written year-month-day, or is no day.",
                "Write it as 2026-05-31.",
                column,
                text,
                "warning",
            )
            return text
        return match[1]


def _is_day(text: str) -> bool:
    try:
        datetime.date.fromisoformat(text)
    except ValueError:
        return False
    return True


def _range(entry: RunColumn, scale: float) -> str:
    return f"{entry.low / scale:g} to {entry.high / scale:g}"


def _comma(raw: RawTable, columns: list[int], decimal: str | None, stops: list[Problem]) -> bool:
    if decimal is not None or raw.typed or not columns:
        return decimal == "comma"
    flat = raw.cells[:, columns].ravel()
    found = cells.decimal_of(flat[flat != ""], raw.separator)
    if found == "ambiguous":
        example = next(str(t) for t in flat if "," in t)
        stops.append(Problem(f"'{example}' can be read with a decimal comma or a thousands comma.",
                             "Declare it: decimal='comma' or 'point' (--decimal comma).", raw.where, value=example,
                             severity="structural"))  # fmt: skip
    return found == "comma"


def read_thermograms(
    table: Any, units: Mapping[str, str] | None = None, decimal: str | None = None, name: str | None = None
) -> tuple[Records, list[Problem]]:
    """A long table run_id, time [s], temperature [°C] -> Records in seconds, and what was wrong with single cells."""
    return _thermograms(read_table(table, name), dict(units or {}), decimal)


def _thermograms(raw: RawTable, units: dict[str, str], decimal: str | None) -> tuple[Records, list[Problem]]:
    stops: list[Problem] = []
    places: dict[str, tuple[int, float]] = {}
    wanted = {"run id": ("run_id", ""), "run": ("run_id", ""), "time": ("time", "time"), "t": ("time", "time"),
              "temperature": ("temperature", "temperature"), "temp": ("temperature", "temperature")}  # fmt: skip
    for k, header in enumerate(raw.headers):
        title, unit, _, _ = split_header(header)
        unit = units.get(header, unit)
        column, dimension = wanted.get(normal_form(title), ("", ""))
        if not column:
            continue
        scale = 1.0
        if dimension:
            try:
                scale = scale_of(unit or "", dimension)
            except UnitProblem as found:
                shown = next(iter(UNITS[dimension]))
                what = f"the unit '{unit}': {found.what}" if unit else f"{title} has no unit."
                stops.append(Problem(what, f"Write '{title} [{shown}]'." if not unit else found.cure, raw.where, None,
                                     header, None, "structural"))  # fmt: skip
        places[column] = (k, scale)
    for column, example in (("run_id", "run_id"), ("time", "time [s]"), ("temperature", "temperature [°C]")):
        if column not in places:
            stops.append(Problem(f"there is no column {column}.", f"Add '{example}': one row per reading.", raw.where,
                                 severity="structural"))  # fmt: skip
    if stops:
        raise StructuralProblems(stops)
    comma = _comma(raw, [places["time"][0], places["temperature"][0]], decimal, stops)
    if stops:
        raise StructuralProblems(stops)
    told: list[Problem] = []
    values = {}
    for column in ("time", "temperature"):
        k, scale = places[column]
        parsed = cells.numbers(raw.cells[:, k], comma)
        for i, (what, cure) in parsed.bad.items():
            told.append(Problem(what, f"{cure} The reading is left out.", raw.where, int(raw.rows[i]), raw.headers[k],
                                str(raw.cells[i, k]), "warning"))  # fmt: skip
        values[column] = parsed.value * scale
    return records_of_long(raw.cells[:, places["run_id"][0]], values["time"], values["temperature"]), told


def _attach(sheet: RunSheet, raw: RawTable, units: dict[str, str], decimal: str | None) -> None:
    """Give each run its thermogram; thermograms without a run, and runs with two rises, are told."""
    found, told = _thermograms(raw, units, decimal)
    sheet.problems.extend(told)
    order = {str(identity): k for k, identity in enumerate(found.ids)}
    place = np.array([order.get(str(r), -1) for r in sheet.text["run_id"]], dtype=np.intp)
    for identity in sorted(set(order) - {str(r) for r in sheet.text["run_id"]}):
        sheet.problems.append(Problem(f"there is a thermogram of run '{identity}', but no such run in the sheet.",
                                      "Add the run, or mend its run_id.", raw.where, severity="warning"))  # fmt: skip
    sheet.records, sheet.place = found, place
