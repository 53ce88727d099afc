"""Wide tables: one row per sample, one column per quantity and replicate."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from energy import cells
from energy.gather import Table, texts_or_none
from energy.headers import PERHAPS_TARGET, Meaning, read_header
from energy.problems import Problem
from energy.quantities import dictionary, normal_form
from energy.samples import BASIS_CODE, Samples


class WideTable(Table):
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
                self.text[str(m.quantity)] = texts_or_none(self.raw.cells[:, k])
            elif m.kind == "unused":
                self.text.setdefault(m.header, texts_or_none(self.raw.cells[:, k]))
                cure = ("Call it 'target' if it says for whom the energy is meant; it is kept as a note."
                        if normal_form(m.header) in PERHAPS_TARGET else "Nothing to do; it is kept as a note.")  # fmt: skip
                self.problems.append(Problem("this column is not used.", cure, self.raw.where, None, m.header, None,
                                             "warning"))  # fmt: skip
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


def _unique_ids(table: Table) -> None:
    seen: dict[str, int] = {}
    for i, identity in enumerate(table.ids):
        if identity == "":
            table.stop("the sample_id is empty.", "Give every sample a unique text.", "sample_id", int(table.rows[i]))
        elif identity in seen:
            table.stop(f"the sample_id stands twice (first in row {seen[identity]}).", "Make the ids unique, or write replicates as 'name #2'.",
                       "sample_id", int(table.rows[i]), str(identity))  # fmt: skip
        seen.setdefault(str(identity), int(table.rows[i]))
