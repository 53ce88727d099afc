"""A laboratory's table, wide or long, -> Samples, with every problem of the file found at once."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np

from energy import cells, uncertainty
from energy.catalogue.records import TARGETS
from energy.headers import Meaning, basis_of, read_header
from energy.problems import Problem, StructuralProblems, UnitProblem, WrongUse
from energy.quantities import TEXT_COLUMNS, dictionary, method_columns, normal_form, synonym_index
from energy.samples import BASES, BASIS_CODE, Samples
from energy.tabular import RawTable, read_table
from energy.units import Unit, parse_unit

LONG_HEADERS = {"sample id", "analyte", "result"}
_LONG_EXTRA = ("unit", "basis", "method", "loq", "u", "U", "k", "replicate")
METHOD_WORDS = {
    "soxhlet": "ether_extract", "ether extract": "ether_extract", "ether extraction": "ether_extract",
    "weibull stoldt": "acid_hydrolysis", "acid hydrolysis": "acid_hydrolysis", "schmid bondzynski ratzlaff": "acid_hydrolysis",
    "karl fischer": "karl_fischer", "oven drying": "oven", "freeze drying": "freeze_drying", "vacuum oven": "vacuum",
}  # fmt: skip


@dataclass
class Gathered:
    """Values of one quantity while a table is read: replicate number -> (n,) internal values."""

    values: dict[int, np.ndarray] = field(default_factory=dict)
    basis: np.ndarray | None = None
    u: np.ndarray | None = None
    censored: np.ndarray | None = None
    u_censored: np.ndarray | None = None
    voided: np.ndarray | None = None


def read_samples(
    table: Any,
    units: Mapping[str, str] | str | Path | None = None,
    basis: str | None = None,
    target: str | None = None,
    decimal: str | None = None,
    name: str | None = None,
) -> Samples:
    """Read a table.

    table : path (CSV, XLSX, Parquet), bytes (with `name`), or DataFrame. units : header -> "unit basis", or a TOML file
    of that. basis : one of BASES for headers that give a unit alone. decimal : "point", "comma" or None (found out,
    if unmistakable). Raises StructuralProblems with every problem that stops the file; lesser ones are in `.problems`.
    """
    raw = read_table(table, name)
    wanted = _units(units)
    on = _basis(basis)
    if decimal not in (None, "point", "comma"):
        raise WrongUse(f"decimal = '{decimal}' is not known.", "Use 'point' or 'comma'.")
    if target is not None and target not in TARGETS:
        raise WrongUse(f"The target '{target}' is not known.", f"One of: {', '.join(TARGETS)}.")
    forms = {normal_form(h) for h in raw.headers}
    reader = _Long(raw, wanted, on, decimal) if forms >= LONG_HEADERS else _Wide(raw, wanted, on, decimal)
    samples = reader.read()
    samples.target = target
    return samples


def inspect_table(
    table: Any, units: Mapping[str, str] | None = None, basis: str | None = None, name: str | None = None
) -> list[Meaning]:
    """The meaning of every header, for a form that asks for what is missing."""
    raw = read_table(table, name)
    return [read_header(h, raw.where, dict(units or {}), basis) for h in raw.headers]


def _units(units: Mapping[str, str] | str | Path | None) -> dict[str, str]:
    if units is None or isinstance(units, Mapping):
        return dict(units or {})
    try:
        found = tomllib.loads(Path(units).read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as error:
        raise WrongUse(
            f"The units file '{units}' cannot be read ({error}).", 'Lines like: "protein" = "g/100 g as is".'
        ) from None
    return {str(k): str(v) for k, v in found.items()}


def _basis(text: str | None) -> str | None:
    if text is None or text in BASES:
        return text
    found = basis_of(text)
    if found is None:
        raise WrongUse(f"The basis '{text}' is not known.", f"One of: {', '.join(BASES)}.")
    return found


class _Table:
    """What wide and long tables share."""

    def __init__(self, raw: RawTable, units: dict[str, str], basis: str | None, decimal: str | None):
        self.raw, self.units, self.default_basis, self.decimal = raw, units, basis, decimal
        self.stops: list[Problem] = []
        self.problems: list[Problem] = []
        self.gathered: dict[str, Gathered] = {}
        self.text: dict[str, np.ndarray] = {}
        self.declared: dict[str, np.ndarray] = {}
        self.ids = np.array([], dtype=object)
        self.rows = np.array([], dtype=int)

    def stop(
        self, what: str, cure: str, column: str | None = None, row: int | None = None, value: str | None = None
    ) -> None:
        self.stops.append(
            Problem(
                what=what, cure=cure, where=self.raw.where, column=column, row=row, value=value, severity="structural"
            )
        )

    def tell(
        self, what: str, cure: str, i: int | None, column: str | None, value: str | None = None, severity: str = "cell"
    ) -> None:
        row = None if i is None else int(self.rows[i])
        identity = None if i is None else str(self.ids[i])
        self.problems.append(Problem(what, cure, self.raw.where, row, column, value, severity, identity))

    def comma(self, texts: np.ndarray) -> bool:
        if self.decimal is not None or self.raw.typed:
            return self.decimal == "comma"
        found = cells.decimal_of(texts, self.raw.separator)
        if found == "ambiguous":
            example = next(t for t in texts if "," in t)
            self.stop(f"'{example}' can be read with a decimal comma or a thousands comma.",
                      "Declare it: decimal='comma' or 'point' (--decimal comma).", value=str(example))  # fmt: skip
        return found == "comma"

    def slot(self, quantity: str) -> Gathered:
        return self.gathered.setdefault(quantity, Gathered())

    # ---- after all columns are read -------------------------------------------------------------------------

    def finish(self) -> Samples:
        if self.stops:
            raise StructuralProblems(self.stops + self.problems)
        n = len(self.ids)
        samples = Samples(
            ids=self.ids, columns={}, text=self.text, rows=self.rows, source=self.raw.where, problems=self.problems
        )
        for quantity, found in self.gathered.items():
            values = np.array(list(found.values.values())) if found.values else np.full((1, n), np.nan)
            mean, count = uncertainty.mean_of(values)
            samples.columns[quantity] = mean
            samples.replicates[quantity] = count
            if found.basis is not None and dictionary()[quantity].basis == "stated":
                samples.basis[quantity] = found.basis
            if found.censored is not None and found.censored.any():
                samples.censored[quantity] = found.censored
            voided = found.voided if found.voided is not None else np.zeros(n, dtype=bool)
            voided = voided & np.isnan(mean)
            if voided.any():
                samples.voided[quantity] = voided
            samples.u[quantity], samples.u_source[quantity] = uncertainty.of_means(
                values, dictionary()[quantity].default_u, found.u, found.u_censored
            )
        self._check_ranges(samples)
        self._check_preparation(samples)
        self._check_text(samples)
        if self.declared:
            samples.memo["declared"] = self.declared
        samples.fill_default_u()
        return samples

    def _check_ranges(self, samples: Samples) -> None:
        for quantity, values in samples.columns.items():
            entry = dictionary()[quantity]
            low, high = entry.range
            scale = 100 if entry.dimension in ("mass_fraction", "fraction") else 1
            unit = {"energy": "MJ/kg", "density": "g/ml"}.get(entry.dimension, "%" if scale == 100 else "")
            with np.errstate(invalid="ignore"):
                impossible = (values < 0) | (
                    (values > 1.0000001) if scale == 100 and high <= 1 else np.zeros(len(values), dtype=bool)
                )
                odd = ~impossible & ((values < low) | (values > high))
            for i in np.flatnonzero(impossible).tolist():
                self.tell(f"{entry.title} of {values[i] * scale:.4g} {unit} is impossible.",
                          "Check the value, its unit and its decimal point.", i, quantity, f"{values[i] * scale:.4g}")  # fmt: skip
            for i in np.flatnonzero(odd).tolist():
                self.tell(f"{entry.title} of {values[i] * scale:.4g} {unit} is outside the plausible {low * scale:g} to {high * scale:g}.",
                          "Computed all the same; check the value and its unit.", i, quantity, f"{values[i] * scale:.4g}", "warning")  # fmt: skip
            if impossible.any():
                self._void(samples, quantity, impossible)

    def _void(self, samples: Samples, quantity: str, mask: np.ndarray) -> None:
        samples.columns[quantity] = np.where(mask, np.nan, samples.columns[quantity])
        samples.voided[quantity] = samples.voided.get(quantity, np.zeros(len(mask), dtype=bool)) | mask

    def _check_preparation(self, samples: Samples) -> None:
        residual = samples.columns.get("residual_moisture", np.full(len(self.ids), np.nan))
        for quantity, basis in samples.basis.items():
            lacking = (basis == BASIS_CODE["as_analysed"]) & ~np.isnan(samples.columns[quantity]) & np.isnan(residual)
            title = dictionary()[quantity].title
            for i in np.flatnonzero(lacking).tolist():
                self.tell(f"{title} is given as analysed (the powder in the crucible), but the powder's residual moisture is not.",
                          "Add residual_moisture [%], measured on the day of the pellets, or give the value on dry matter.",
                          i, quantity)  # fmt: skip
            if lacking.any():
                self._void(samples, quantity, lacking)
        alcohol = samples.columns.get("alcohol")
        if alcohol is not None and "moisture" in samples.columns:
            method = samples.text.get("moisture_method", np.full(len(self.ids), None, dtype=object))
            loses = np.array([m in ("oven", "vacuum", "freeze_drying", None, "") for m in method])
            for i in np.flatnonzero(loses & (np.nan_to_num(alcohol) > 0.002)).tolist():
                self.tell("moisture by drying holds the alcohol as well, and alcohol is given apart.",
                          "Use Karl Fischer water, or subtract the alcohol from the loss.", i, "moisture", None, "warning")  # fmt: skip

    def _check_text(self, samples: Samples) -> None:
        if "target" in samples.text:
            for i, value in enumerate(samples.text["target"]):
                if value and value not in TARGETS:
                    self.tell(
                        f"the target '{value}' is not known.",
                        f"One of: {', '.join(TARGETS)}.",
                        i,
                        "target",
                        str(value),
                        "warning",
                    )
        for column, quantity in method_columns().items():
            if column not in samples.text:
                continue
            words = samples.text[column]
            samples.text[column] = np.array([_method(w) for w in words], dtype=object)
            for word in sorted({str(w) for w in samples.text[column] if w}):
                if word not in quantity.methods:
                    self.tell(f"the method '{word}' of {quantity.title} is not in the dictionary; it is kept as it is.",
                              f"Known: {', '.join(quantity.methods)}.", None, column, word, "warning")  # fmt: skip

    def per_mass(self, values: np.ndarray, unit: Unit, column: str) -> tuple[np.ndarray, np.ndarray]:
        """Internal values and the rows that lack a density."""
        if not unit.per_volume:
            return values * unit.scale, np.zeros(len(values), dtype=bool)
        density = self.gathered["density"].values[1] if "density" in self.gathered else np.full(len(values), np.nan)
        lacking = ~np.isnan(values) & np.isnan(density)
        for i in np.flatnonzero(lacking).tolist():
            self.tell(
                f"the unit '{unit.text}' is per volume and no density is given.", "Add density [g/ml].", i, column
            )
        return values * unit.scale / density, lacking


def _method(word: str | None) -> str | None:
    if not word:
        return None
    plain = normal_form(word)
    return METHOD_WORDS.get(plain, plain.replace(" ", "_"))


class _Wide(_Table):
    """One row per sample."""

    def read(self) -> Samples:
        meanings = self._meanings()
        self._ids(meanings)
        number_columns = [k for k, m in enumerate(meanings) if m.kind in ("quantity", "u") and m.problem is None]
        flat = self.raw.cells[:, number_columns].ravel() if number_columns else np.array([], dtype=object)
        comma = self.comma(flat[flat != ""]) if len(flat) else False
        order = sorted(number_columns, key=lambda k: meanings[k].quantity != "density")
        for k in order:
            self._column(meanings[k], self.raw.cells[:, k], comma)
        for k, m in enumerate(meanings):
            if m.kind == "text" and m.quantity != "sample_id":
                self.text[str(m.quantity)] = _texts(self.raw.cells[:, k])
            elif m.kind == "unused":
                self.text.setdefault(m.header, _texts(self.raw.cells[:, k]))
                self.problems.append(Problem("this column is not used.", "Nothing to do; it is kept as a note.",
                                             self.raw.where, None, m.header, None, "warning"))  # fmt: skip
            if m.implied_method:
                column = dictionary()[str(m.quantity)].method_column
                self.text.setdefault(str(column), np.full(len(self.ids), m.implied_method, dtype=object))
        return self.finish()

    def _meanings(self) -> list[Meaning]:
        meanings = [read_header(h, self.raw.where, self.units, self.default_basis) for h in self.raw.headers]
        seen: dict[tuple[str, str, int, str], int] = {}
        for k, m in enumerate(meanings):
            if m.problem is not None:
                self.stops.append(replace(m.problem, value=None))
                continue
            if m.kind == "unused" or m.quantity is None:
                continue
            family = (m.unit.energy_family or "") if m.unit and m.quantity == "declared_energy" else ""
            number = m.replicate
            while (m.kind, m.quantity, number, family) in seen and m.kind == "quantity":
                number += 1  # a plain repeated header is the next replicate
            if (m.kind, m.quantity, number, family) in seen:
                self.stop(f"there are two columns for {m.quantity}.", "Keep one.", column=m.header)
            seen[m.kind, m.quantity, number, family] = k
            meanings[k] = replace(m, replicate=number)
        unknown = sorted(set(self.units) - set(self.raw.headers))
        for header in unknown:
            self.stop(
                f"the units name a column '{header}' that is not in the table.", "Write the header as it stands there."
            )
        return meanings

    def _ids(self, meanings: list[Meaning]) -> None:
        self.rows = self.raw.rows
        column = next((k for k, m in enumerate(meanings) if m.kind == "text" and m.quantity == "sample_id"), None)
        if column is None:
            self.stop("there is no column sample_id.", "Add one: a unique text per sample.")
            self.ids = np.array([str(r) for r in self.raw.rows], dtype=object)
            return
        self.ids = self.raw.cells[:, column].astype(object)
        _unique_ids(self)

    def _column(self, m: Meaning, texts: np.ndarray, comma: bool) -> None:
        assert m.quantity is not None and m.unit is not None
        column = cells.numbers(texts, comma)
        for i, (what, cure) in column.bad.items():
            self.tell(what, cure, i, m.header, str(texts[i]))
        values, lacking = self.per_mass(column.value, m.unit, m.header)
        slot, n = self.slot(m.quantity), len(self.ids)
        if m.kind == "u":
            slot.u = values
            return
        if m.quantity == "declared_energy" and m.unit.energy_family in ("J", "cal"):
            per = 1e-2 if m.unit.energy_family == "J" else 4.184e-2
            self.declared["kJ" if m.unit.energy_family == "J" else "kcal"] = values / per
            if 1 in slot.values:
                return  # the kJ figure stands; the kcal one is kept beside it
        bad = np.zeros(n, dtype=bool)
        bad[list(column.bad)] = True
        slot.voided = bad | lacking | (slot.voided if slot.voided is not None else False)
        slot.values[m.replicate] = values
        codes = np.full(n, BASIS_CODE[m.basis or "as_is"], dtype=np.int8)
        if slot.basis is not None and (slot.basis != codes).any():
            self.stop(
                f"replicates of {m.quantity} stand on different bases.", "Bring them to one basis.", column=m.header
            )
        slot.basis = codes
        slot.censored = column.censored if slot.censored is None else slot.censored | column.censored
        if column.censored.any():
            slot.u_censored = column.u_censored * m.unit.scale


class _Long(_Table):
    """One row per result: certificates and laboratory exports."""

    def read(self) -> Samples:
        place = {(h.strip() if h.strip() in ("u", "U") else normal_form(h).replace(" ", "_")): k
                 for k, h in reversed(list(enumerate(self.raw.headers)))}  # fmt: skip
        body = {name: self.raw.cells[:, k] for name, k in place.items()}
        n = len(self.raw.rows)
        empty = np.full(n, "", dtype=object)
        first, index = self._samples(body["sample_id"])
        analyte, unit, basis = body["analyte"], body.get("unit", empty), body.get("basis", empty)
        numbers = [c for c in ("result", "u", "U", "k", "loq") if c in body]
        flat = np.concatenate([body[c] for c in numbers])
        comma = self.comma(flat[flat != ""])
        keys = np.array([f"{a}\x1f{u}\x1f{b}" for a, u, b in zip(analyte, unit, basis, strict=True)], dtype=object)
        groups, inverse = np.unique(keys.astype(str), return_inverse=True)
        kinds = [self._kind(str(g), int(self.raw.rows[np.flatnonzero(inverse == j)[0]])) for j, g in enumerate(groups)]
        self._text(body, first, index)
        parsed: dict[str, cells.Column] = {c: cells.numbers(body[c], comma) for c in numbers}
        order = sorted(range(len(groups)), key=lambda j: (kinds[j] or ("",))[0] != "density")
        for j in order:
            kind = kinds[j]
            if kind is not None:
                self._rows(kind, np.flatnonzero(inverse == j), index, parsed, body)
        return self.finish()

    def _samples(self, column: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        blank = column == ""
        for r in self.raw.rows[blank]:
            self.stop("the sample_id is empty.", "Give every row the id of its sample.", column="sample_id", row=int(r))
        ids = list(dict.fromkeys(column))
        lookup = {s: i for i, s in enumerate(ids)}
        index = np.array([lookup[s] for s in column])
        first = np.array([int(np.flatnonzero(index == i)[0]) for i in range(len(ids))]) if len(ids) < 2000 else \
            np.unique(index, return_index=True)[1]  # fmt: skip
        self.ids, self.rows = np.array(ids, dtype=object), self.raw.rows[first]
        return first, index

    def _kind(self, key: str, row: int) -> tuple[str, Unit, str | None, str] | None:
        analyte, unit_text, basis_text = key.split("\x1f")
        text = f"{unit_text} {basis_text}".strip() if basis_text else unit_text
        named = basis_of(basis_text) if basis_text else None
        header = f"{analyte} [{text}]" if text else analyte
        m = read_header(
            header if not named else f"{analyte} [{unit_text}]", self.raw.where, {}, named or self.default_basis
        )
        if basis_text and named is None:
            self.stop(
                f"the basis '{basis_text}' is not known.", f"One of: {', '.join(BASES)}.", "basis", row, basis_text
            )
            return None
        if m.problem is not None:
            self.stops.append(replace(m.problem, column="analyte", row=row, value=analyte))
            return None
        if m.kind != "quantity" or m.quantity is None or m.unit is None:
            self.stop(
                f"the analyte '{analyte}' is not in the dictionary.",
                "See the names in the README.",
                "analyte",
                row,
                analyte,
            )
            return None
        return m.quantity, m.unit, m.basis, m.implied_method or ""

    def _text(self, body: dict[str, np.ndarray], first: np.ndarray, index: np.ndarray) -> None:
        for name, column in body.items():
            if name in TEXT_COLUMNS and name != "sample_id":
                self.text[name] = _texts(column[first])
        if "method" not in body:
            return
        synonyms = synonym_index()
        for r, word in enumerate(body["method"]):
            quantity = synonyms.get(normal_form(str(body["analyte"][r])))
            column_name = dictionary()[quantity].method_column if quantity and word else None
            if column_name:
                column = self.text.setdefault(column_name, np.full(len(self.ids), None, dtype=object))
                column[index[r]] = str(word)

    def _rows(
        self,
        kind: tuple[str, Unit, str | None, str],
        rows: np.ndarray,
        index: np.ndarray,
        parsed: dict[str, cells.Column],
        body: dict[str, np.ndarray],
    ) -> None:
        quantity, unit, basis, _ = kind
        n, slot = len(self.ids), self.slot(quantity)
        at = index[rows]
        column = parsed["result"]
        for r in rows:
            if r in column.bad:
                what, cure = column.bad[int(r)]
                self._tell_row(what, cure, int(r), at[list(rows).index(r)], str(body["result"][r]))
        code = BASIS_CODE[basis or "as_is"]
        if slot.basis is None:
            slot.basis = np.full(n, code, dtype=np.int8)
            slot.voided = np.zeros(n, dtype=bool)
            slot.censored = np.zeros(n, dtype=bool)
            slot.u, slot.u_censored = np.full(n, np.nan), np.full(n, np.nan)
        assert (
            slot.voided is not None and slot.censored is not None and slot.u is not None and slot.u_censored is not None
        )
        taken = np.zeros(n, dtype=bool)
        for values in slot.values.values():
            taken |= ~np.isnan(values)
        clash = taken[at] & (slot.basis[at] != code)
        for i in np.unique(at[clash]):
            self.tell(f"{dictionary()[quantity].title} is given on two bases.", "Keep one of them.", int(i), quantity)
            slot.voided[i] = True
        slot.basis[at] = code
        dense = np.full(n, np.nan)
        scale = unit.scale
        if unit.per_volume:
            dense, lacking = self.per_mass(np.where(np.isin(np.arange(n), at), 1.0, np.nan), unit, quantity)
            slot.voided |= lacking
        factor = dense[at] if unit.per_volume else np.full(len(at), scale)
        values = column.value[rows] * factor
        values[clash] = np.nan
        position = _position(at)
        for number in range(int(position.max()) + 1 if len(position) else 0):
            here = position == number
            free = next(k for k in range(1, 10**6) if k not in slot.values or np.isnan(slot.values[k][at[here]]).all())
            array = slot.values.setdefault(free, np.full(n, np.nan))
            array[at[here]] = values[here]
        bad = np.isnan(column.value[rows]) & (body["result"][rows] != "")
        slot.voided[at[bad]] = True
        slot.censored[at] |= column.censored[rows]
        slot.u_censored[at] = np.where(column.censored[rows], column.u_censored[rows] * factor, slot.u_censored[at])
        self._stated_u(slot, rows, at, factor, parsed, quantity)

    def _tell_row(self, what: str, cure: str, r: int, i: int, value: str) -> None:
        self.problems.append(
            Problem(what, cure, self.raw.where, int(self.raw.rows[r]), "result", value, "cell", str(self.ids[i]))
        )

    def _stated_u(
        self,
        slot: Gathered,
        rows: np.ndarray,
        at: np.ndarray,
        factor: np.ndarray,
        parsed: dict[str, cells.Column],
        quantity: str,
    ) -> None:
        assert slot.u is not None
        if "u" in parsed:
            given = parsed["u"].value[rows] * factor
            slot.u[at] = np.where(np.isnan(given), slot.u[at], given)
        if "U" in parsed:
            expanded = parsed["U"].value[rows] * factor
            k = parsed["k"].value[rows] if "k" in parsed else np.full(len(rows), np.nan)
            for j in np.flatnonzero(~np.isnan(expanded) & np.isnan(k)):
                self._tell_row(f"U of {dictionary()[quantity].title} has no coverage factor k.", "Give k (usually 2); U is not used.",
                               int(rows[j]), int(at[j]), "")  # fmt: skip
            slot.u[at] = np.where(np.isnan(expanded / k), slot.u[at], expanded / k)


def _position(at: np.ndarray) -> np.ndarray:
    """For each entry, how many equal entries stand before it."""
    order = np.argsort(at, kind="stable")
    ranks = np.empty(len(at), dtype=int)
    starts = np.r_[0, np.flatnonzero(np.diff(at[order])) + 1] if len(at) else np.array([], dtype=int)
    run = np.arange(len(at)) - np.repeat(starts, np.diff(np.r_[starts, len(at)]))
    ranks[order] = run
    return ranks


def _texts(column: np.ndarray) -> np.ndarray:
    return np.array([t if t != "" else None for t in column], dtype=object)


def _unique_ids(table: _Table) -> None:
    seen: dict[str, int] = {}
    for i, identity in enumerate(table.ids):
        if identity == "":
            table.stop("the sample_id is empty.", "Give every sample a unique text.", "sample_id", int(table.rows[i]))
        elif identity in seen:
            table.stop(f"the sample_id stands twice (first in row {seen[identity]}).", "Make the ids unique, or write replicates as 'name #2'.",
                       "sample_id", int(table.rows[i]), str(identity))  # fmt: skip
        seen.setdefault(str(identity), int(table.rows[i]))


__all__ = ["UnitProblem", "inspect_table", "parse_unit", "read_samples"]
