"""Long tables: one row per result, as certificates and laboratory systems export them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from energy import cells
from energy.gather import Gathered, Table, texts_or_none
from energy.headers import basis_of, read_header
from energy.problems import Problem
from energy.quantities import TEXT_COLUMNS, dictionary, normal_form, synonym_index
from energy.samples import BASES, BASIS_CODE, Samples
from energy.units import Unit

#: headers that make a table a long one, in normal form
NEEDED = {"sample id", "analyte", "result"}


class LongTable(Table):
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
                self.text[name] = texts_or_none(column[first])
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
