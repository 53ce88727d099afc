"""What wide and long tables share: values gathered per quantity, problems collected, samples made at the end."""

from __future__ import annotations

import difflib
from dataclasses import dataclass, field

import numpy as np

from energy import cells, duplicates, silage, uncertainty
from energy.catalogue.records import TARGETS
from energy.catalogue.tables import food_groups
from energy.problems import Problem, StructuralProblems
from energy.quantities import DISPLAY_SCALE, Quantity, dictionary, method_columns, normal_form
from energy.samples import BASIS_CODE, Samples
from energy.tabular import RawTable
from energy.targets import target_slug, targets_like
from energy.units import Unit

METHOD_WORDS = {
    "soxhlet": "ether_extract", "ether extract": "ether_extract", "ether extraction": "ether_extract",
    "weibull stoldt": "acid_hydrolysis", "acid hydrolysis": "acid_hydrolysis", "schmid bondzynski ratzlaff": "acid_hydrolysis",
    "freeze dried": "freeze_drying", "lyophilised": "freeze_drying", "lyophilized": "freeze_drying",
    "karl fischer": "karl_fischer", "oven drying": "oven", "freeze drying": "freeze_drying", "vacuum oven": "vacuum",
}  # fmt: skip

#: units in which problems tell a value
UNIT_SHOWN = {"energy": "MJ/kg", "density": "g/ml", "mass": "kg", "heat": "MJ", "gas_yield": "ml/200 mg"}
#: moisture above which a freeze-dried material was wet as it came: the powder is not the material
WET = 0.15


@dataclass
class Gathered:
    """Values of one quantity while a table is read: replicate number -> (n,) internal values."""

    values: dict[int, np.ndarray] = field(default_factory=dict)
    basis: np.ndarray | None = None
    u: np.ndarray | None = None
    censored: np.ndarray | None = None
    u_censored: np.ndarray | None = None
    voided: np.ndarray | None = None


class Table:
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
            if len(values) > 1:
                mean = self._judge_replicates(samples, quantity, values, found.censored)
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
            samples.u[quantity], samples.u_source[quantity], freedom = uncertainty.of_means(
                values, dictionary()[quantity].default_u, found.u, found.u_censored
            )
            if np.isfinite(freedom).any():
                samples.freedom[quantity] = freedom
        self._check_ranges(samples)
        self._check_text(samples)
        self._check_preparation(samples)
        silage.correct(samples)
        if self.declared:
            samples.memo["declared"] = self.declared
        samples.fill_default_u()
        return samples

    def _judge_replicates(
        self, samples: Samples, quantity: str, values: np.ndarray, censored: np.ndarray | None
    ) -> np.ndarray:
        """(n,) what the replicates give; all of them stay on record in memo["runs"]."""
        entry = dictionary()[quantity]
        judged = duplicates.judge(entry, values, censored, _unit_shown(entry))
        for i, what, cure in judged.findings:
            self.tell(what, cure, i, quantity, None, "warning")
        samples.memo.setdefault("runs", {})[quantity] = values
        samples.memo.setdefault("accepted", {})[quantity] = judged.accepted
        return judged.accepted.value

    def _check_ranges(self, samples: Samples) -> None:
        for quantity, values in samples.columns.items():
            entry = dictionary()[quantity]
            low, high = entry.range
            scale = 1 / DISPLAY_SCALE[entry.dimension]
            unit = _unit_shown(entry)
            with np.errstate(invalid="ignore"):
                impossible = ((values < 0) & (low >= 0)) | (
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
        self._check_freeze_drying(samples, residual)
        alcohol = samples.columns.get("alcohol")
        if alcohol is not None and "moisture" in samples.columns:
            method = samples.text.get("moisture_method", np.full(len(self.ids), None, dtype=object))
            loses = np.array([m in ("oven", "vacuum", "freeze_drying", None, "") for m in method])
            for i in np.flatnonzero(loses & (np.nan_to_num(alcohol) > 0.002)).tolist():
                self.tell("moisture by drying holds the alcohol as well, and alcohol is given apart.",
                          "Use Karl Fischer water, or subtract the alcohol from the loss.", i, "moisture", None, "warning")  # fmt: skip

    def _check_freeze_drying(self, samples: Samples, residual: np.ndarray) -> None:
        """A freeze-dried powder keeps some per cent of water: without it neither GE nor dry matter stands."""
        n = len(self.ids)
        nothing = np.full(n, None, dtype=object)
        wet = np.nan_to_num(samples.columns.get("moisture", np.zeros(n))) > WET
        wet |= samples.columns.get("dry_matter", np.ones(n)) < 1 - WET
        dried = np.array([m == "freeze_drying" for m in samples.text.get("moisture_method", nothing)], dtype=bool)
        dried |= wet & np.array([f == "freeze_dried" for f in samples.text.get("form", nothing)], dtype=bool)
        dried |= ~np.isnan(samples.columns.get("preparation_yield", np.full(n, np.nan)))
        energy = samples.columns.get("gross_energy", np.full(n, np.nan))
        lacking = dried & np.isnan(residual) & ~np.isnan(energy)
        for i in np.flatnonzero(lacking).tolist():
            self.tell("the material was freeze-dried, but the residual moisture of the powder is not given: its gross energy"
                      " would be understated by as many per cent as the powder holds water (usually 2 to 6).",
                      "Add residual_moisture [%], measured on the day of the pellets; write 0 only if it was measured as 0.",
                      i, "gross_energy")  # fmt: skip
        if lacking.any():
            self._void(samples, "gross_energy", lacking)

    def _check_text(self, samples: Samples) -> None:
        if "target" in samples.text:
            samples.text["target"] = np.array([target_slug(t) for t in samples.text["target"]], dtype=object)
            for i, value in enumerate(samples.text["target"]):
                if value and value not in TARGETS:
                    self.tell(f"the target '{value}' is not known.", targets_like(str(value)), i, "target", str(value),
                              "warning")  # fmt: skip
        if "food_group" in samples.text:
            for i, value in enumerate(samples.text["food_group"]):
                if value and value not in food_groups():
                    near = difflib.get_close_matches(str(value), food_groups(), n=3, cutoff=0.4)
                    self.tell(
                        f"the food group '{value}' is not in Table 13; the sample is taken as having none.",
                        f"Did you mean {', '.join(near)}?" if near else "See food_groups.csv in the catalogue.",
                        i,
                        "food_group",
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


def _unit_shown(entry: Quantity) -> str:
    return UNIT_SHOWN.get(entry.dimension, "" if entry.dimension == "number" else "%")


def _method(word: str | None) -> str | None:
    if not word:
        return None
    plain = normal_form(word)
    return METHOD_WORDS.get(plain, plain.replace(" ", "_"))


def texts_or_none(column: np.ndarray) -> np.ndarray:
    return np.array([t if t != "" else None for t in column], dtype=object)
