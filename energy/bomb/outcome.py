"""What came of a sheet of bomb runs: the object users hold, its tables made when asked for."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from energy.bomb import net_value, preparation
from energy.bomb.constants import constants
from energy.bomb.constants import value as constant
from energy.bomb.corrections import SOOT_REASON, Budget, aid_share
from energy.bomb.drift import Flags, Floats
from energy.bomb.heat_capacity import Calibration, conditions_size
from energy.bomb.preparation import day_warning
from energy.bomb.rating import rating_sentence
from energy.bomb.rise import Rise
from energy.bomb.runs import KINDS, OUTCOME_COLUMNS, RUN_STATUS, RunSheet
from energy.problems import Problem, WrongUse
from energy.replicates import MEDIAN, NOTHING, ONE_MORE, SINGLE, TWO_MORE, accept, pooled_sd
from energy.uncertainty import NEEDED_FREEDOM

if TYPE_CHECKING:
    import pandas as pd

#: why a run has no figure: bit -> sentence
LACKS = {
    "no_mass": "the mass of what was burnt is missing, or nothing is left of it without its bag and capsule",
    "no_rise": "there is neither a temperature rise nor a thermogram with one",
    "no_heat_capacity": "there is no heat capacity: calibrate, name the calibration, or give one",
    "unknown_calibration": "the calibration it names is not known",
    "nothing_left": "what was burnt beside it gave more heat than the calorimeter took up: check masses, heats and rise",
    "many_calibrations": "several calibrations could be meant: name one in calibration_id",
}
#: what is told of a run that has one: bit -> sentence
TOLD = {
    "aid_third": "aid, capsule and bag gave more than a third of the heat: the sample's own is poorly seen; burn more of the"
    " sample, or less aid",
    "ignition_differs": "the heat of ignition was counted in {where} but not in {other}; count it in both, or in neither",
    "nitric_acid_differs": "nitric acid was counted in {where} but not in {other}; count it in both, or in neither",
    "material_differs": "the calibration was fired with another wire or thread: the constant of one method belongs to both",
    "rise_far": "the rise lies far outside those of the calibration",
    "days_apart": "",
    "over_rating": "",
    "implausible": "the gross energy is not plausible for food or feed: check mass, rise and units",
    "water_unknown": "the bucket water is given here but not in the calibration: no correction for another mass was made",
    "conditions": "the bomb conditions lie outside the certificate's range: its heat was taken as it stands (its formula would"
    " give {size:+.0f} J/g there); calibrate and test under the same conditions",
    "bag_bare": "a bag, capsule or aid was weighed, but its heat is not given, or the reverse: it counts as nothing; burn"
    " blanks of the lot",
}
BIT = {name: 1 << k for k, name in enumerate([*LACKS, *TOLD])}
REASON_SHOWN = 400


@dataclass(frozen=True)
class Reduction:
    """n runs reduced. All arrays (n,), rows as in the sheet.

    rise, u_rise : K. heat_capacity, u_heat_capacity : J/K. gross, u : J/g at constant volume as weighed; common : the part
    of u that all runs of a calibration share. flags : bits of BIT. status : index into RUN_STATUS. calibration : index into
    `calibrations`, -1 none. thermograms : rises found from records, `sheet.place` leads to them.
    """

    sheet: RunSheet
    rise: Floats
    u_rise: Floats
    heat_capacity: Floats
    u_heat_capacity: Floats
    mass: Floats
    budgets: Budget
    gross: Floats
    u: Floats
    common: Floats
    flags: NDArray[np.int64]
    status: NDArray[np.int8]
    calibration: NDArray[np.intp]
    calibrations: tuple[Calibration, ...]
    thermograms: Rise | None
    rated: Floats
    energy: Floats
    repeatability: float
    notes: tuple[str, ...] = ()
    extra_problems: list[Problem] = field(default_factory=list)

    def __len__(self) -> int:
        return len(self.sheet)

    @property
    def problems(self) -> list[Problem]:
        """Everything found wrong in the sheet, the thermograms and the certificate values."""
        return [*self.sheet.problems, *self.extra_problems]

    def _has(self, i: int, name: str) -> bool:
        return bool(self.flags[i] & BIT[name])

    def sentences(self, i: int) -> list[str]:
        """What is to be said of run i, gravest first."""
        if self.status[i] == RUN_STATUS.index("rejected"):
            return [self._rejection(i)]
        if i in self.sheet.void:
            return [self.sheet.void[i]]
        recorded = self.record_of(i) is not None  # the record's own sentence says why it holds no rise
        said = [words for name, words in LACKS.items() if self._has(i, name) and not (name == "no_rise" and recorded)]
        for name, words in TOLD.items():
            if self._has(i, name):
                said.append(self._told(i, name, words))
        said += self._of_record(i)
        return said

    def _rejection(self, i: int) -> str:
        given = str(self.sheet.words("rejected")[i])
        plain = given.strip().lower()
        return SOOT_REASON if plain in ("yes", "x", "1", "true") or "soot" in plain else f"rejected: {given}"

    def _told(self, i: int, name: str, words: str) -> str:
        if name == "days_apart":
            return day_warning(str(self.sheet.words("pellet_date")[i]), str(self.sheet.words("moisture_date")[i]))
        if name == "conditions":
            given = [
                float(np.nan_to_num(self.sheet.values(c)[i])) for c in ("oxygen_pressure", "bomb_water", "bomb_volume")
            ]
            warm = float(self.sheet.values("final_temperature")[i])
            size = conditions_size(given[0], float(self.mass[i]), given[1], given[2], warm if warm == warm else 25.0)
            return words.format(size=size)
        if name == "over_rating":
            return rating_sentence(float(self.energy[i]), float(self.rated[i]))
        if "{where}" in words:
            term = next(t for t in self.budgets.terms if t.name == name.removesuffix("_differs"))
            where = ("this run", "the calibration") if term.heat[i] != 0 else ("the calibration", "this run")
            return words.format(where=where[0], other=where[1])
        return words

    def _of_record(self, i: int) -> list[str]:
        place = self.record_of(i)
        return [] if place is None or self.thermograms is None else self.thermograms.sentences(place)

    def record_of(self, i: int) -> int | None:
        """Row of run i in the thermograms, None where its rise was given or there is no record."""
        if self.sheet.place is None or self.thermograms is None or not np.isnan(self.sheet.values("rise")[i]):
            return None
        place = int(self.sheet.place[i])
        return place if place >= 0 else None

    def row_of(self, run_id: str) -> int:
        """Row of a run. Raises WrongUse."""
        found = np.flatnonzero(self.sheet.text["run_id"] == run_id)
        if not len(found):
            raise WrongUse(f"There is no run '{run_id}'.", "See the column run_id of `.runs`.")
        return int(found[0])

    @cached_property
    def runs(self) -> pd.DataFrame:
        """One row per run: OUTCOME_COLUMNS."""
        import pandas as pd

        sheet, n = self.sheet, len(self)
        named = np.array([*[c.id for c in self.calibrations], ""], dtype=object)[self.calibration]
        reasons = np.full(n, "", dtype=object)
        for i in np.flatnonzero(self.status != RUN_STATUS.index("ok")).tolist():
            reasons[i] = "; ".join(self.sentences(i))[:REASON_SHOWN]
        known: dict[str, Any] = {
            "kind": np.array(KINDS, dtype=object)[sheet.kind_code], "rise": self.rise, "u_rise": self.u_rise,
            "heat_capacity": self.heat_capacity, "u_heat_capacity": self.u_heat_capacity, "calibration_id": named,
            "mass": self.mass, "gross_energy": self.gross * 1e-3, "u": self.u * 1e-3,
            "status": np.array(RUN_STATUS, dtype=object)[self.status], "reason": reasons,
        }  # fmt: skip
        return pd.DataFrame({name: known[name] if name in known else sheet.words(name) for name in OUTCOME_COLUMNS})

    def budget(self, run_id: str) -> pd.DataFrame:
        """Correction budget of a run: the heats add up to the last row. Columns item, heat_j, u_j, j_per_g, share, note."""
        import pandas as pd

        columns = ["item", "heat_j", "u_j", "j_per_g", "share", "note"]
        return pd.DataFrame(self.budget_rows(self.row_of(run_id)), columns=columns)

    def budget_rows(self, i: int) -> list[tuple[str, float, float, float, float, str]]:
        """The budget of run i by its kind."""
        calibrating = self.sheet.kind_code[i] == KINDS.index("calibration")
        return self.budgets.calibration_rows(i) if calibrating else self.budgets.rows(i)

    # ---- samples ---------------------------------------------------------------------------------------------------

    @cached_property
    def _grouped(self) -> tuple[NDArray[np.object_], Floats, NDArray[np.intp]]:
        """Samples of tests and controls, (s, r) J/g of the runs that count, NaN padded, and (n,) sample of each run or -1."""
        wanted = np.isin(self.sheet.kind_code, (KINDS.index("test"), KINDS.index("control")))
        of_run = np.full(len(self), -1, dtype=np.intp)
        chosen = np.flatnonzero(wanted)
        if not len(chosen):
            return np.array([], dtype=object), np.empty((0, 1)), of_run
        names = self.sheet.text["sample_id"][chosen]
        _, first, code = np.unique(names.astype(str), return_index=True, return_inverse=True)
        rank = np.argsort(np.argsort(first))[code]
        of_run[chosen] = rank
        counts = chosen[self.counts[chosen]]
        group = of_run[counts]
        order = np.argsort(group, kind="stable")
        sizes = np.bincount(group, minlength=len(first))
        place = np.arange(len(counts)) - np.repeat(np.cumsum(sizes) - sizes, sizes)
        table = np.full((len(first), max(int(sizes.max(initial=0)), 1)), np.nan)
        table[group[order], place] = self.gross[counts][order]
        return names[np.sort(first)], table, of_run

    @property
    def counts(self) -> Flags:
        """(n,) runs that have a figure and were not rejected."""
        return np.asarray(np.isin(self.status, (0, 1)) & ~np.isnan(self.gross))

    @cached_property
    def repeatability_sd(self) -> tuple[float, str]:
        """s_r [J/g] the duplicates are judged by, and where it is from.

        The batch's own pooled scatter is told, but a batch does not judge itself: r is the published or the given one.
        """
        own, freedom = pooled_sd(self._grouped[1])
        entry = constants()["repeatability"]
        source = entry.source if self.repeatability == entry.value else "given"
        if freedom >= NEEDED_FREEDOM:
            source += f"; the runs here scatter by {own:.0f} J/g ({freedom} degrees of freedom)"
        return self.repeatability / constant("critical_range_two"), source

    @cached_property
    def samples(self) -> pd.DataFrame:
        """One row per sample of a test or control: gross energy as analysed, in dry matter and as is, with u and n.

        Columns sample_id, kind, gross_energy, u, n [MJ/kg], basis (as_analysed; as_is where it was burnt wet), spread, limit,
        status (single, mean, third_run, fourth_run, median, none), reason, residual_moisture, preparation_yield, dry_matter as is [kg/kg],
        gross_energy_dry_matter, u_dry_matter, gross_energy_as_is, u_as_is.
        """
        import pandas as pd

        names, table, of_run = self._grouped
        s_r, _ = self.repeatability_sd
        found = accept(table, s_r)
        count = len(names)
        own2 = np.maximum(self.u**2 - self.common**2, 0.0)
        independent2 = np.maximum(self._mean(own2, of_run, count), s_r**2)
        with np.errstate(divide="ignore", invalid="ignore"):
            u = np.sqrt(independent2 / found.n + self._mean(self.common, of_run, count) ** 2)
        # runs that lie too far apart: the value could be anywhere between them
        u = np.where(found.too_far_apart, np.hypot(u, found.spread / np.sqrt(12)), u)
        residual = self._mean(self.sheet.values("residual_moisture"), of_run, count, all_runs=True)
        powder = self._mean(self._yields, of_run, count, all_runs=True)
        wet = np.zeros(count, dtype=bool)
        wet[of_run[self._wet & (of_run >= 0)]] = True
        dry, u_dry = preparation.on_dry_matter(found.value, u, residual)
        as_is, u_as_is = preparation.as_it_is(found.value, u, np.where(wet, 1.0, powder))
        judged = {SINGLE: "single", TWO_MORE: "third_run", ONE_MORE: "fourth_run", MEDIAN: "median", NOTHING: "none"}
        status = [judged.get(code, "mean") for code in found.done.tolist()]
        reasons = [
            _judgement(s, float(d), float(limit)) for s, d, limit in zip(status, found.spread, found.limit, strict=True)
        ]
        control = np.zeros(count, dtype=bool)
        control[of_run[(self.sheet.kind_code == KINDS.index("control")) & (of_run >= 0)]] = True
        return pd.DataFrame({
            "sample_id": names, "kind": np.where(control, "control", "test"), "gross_energy": found.value * 1e-3, "u": u * 1e-3, "n": found.n,
            "basis": np.where(wet, "as_is", "as_analysed"), "spread": found.spread * 1e-3, "limit": found.limit * 1e-3,
            "status": status, "reason": reasons, "residual_moisture": residual, "preparation_yield": powder,
            "dry_matter": preparation.dry_matter(np.where(wet, 1.0, powder), residual),
            "gross_energy_dry_matter": dry * 1e-3, "u_dry_matter": u_dry * 1e-3,
            "gross_energy_as_is": as_is * 1e-3, "u_as_is": u_as_is * 1e-3,
        })  # fmt: skip

    @property
    def _wet(self) -> Flags:
        return np.array([str(p).strip().lower().startswith("wet") for p in self.sheet.words("preparation")], dtype=bool)

    @property
    def _yields(self) -> Floats:
        given = self.sheet.values("preparation_yield")
        weighed = preparation.powder_yield(self.sheet.values("received_mass"), self.sheet.values("dried_mass"))
        return np.where(np.isnan(given), weighed, given)

    def _mean(self, values: Floats, of_run: NDArray[np.intp], count: int, all_runs: bool = False) -> Floats:
        """(s,) mean over the runs of each sample that have the value (and count, unless all_runs)."""
        use = (of_run >= 0) & ~np.isnan(values) & (self.counts | all_runs)
        number = np.bincount(of_run[use], minlength=count)
        total = np.bincount(of_run[use], weights=values[use], minlength=count)
        return np.divide(total, number, out=np.full(count, np.nan), where=number > 0)

    @cached_property
    def sample_table(self) -> pd.DataFrame:
        """The samples as a table `energy.read_samples` takes: gross energy with u, residual moisture, yield, and how many runs.

        One row per sample, as analysed or (burnt wet) as is; where a sheet holds both, one row per result, since a wide
        column has one basis.
        """
        import pandas as pd

        found = self._tests
        if found["basis"].nunique() <= 1:
            return self._wide(None)
        lines = [found[["sample_id", "basis", "u", "n"]].assign(analyte="gross_energy", result=found["gross_energy"],
                                                                unit="MJ/kg")]  # fmt: skip
        for column in ("residual_moisture", "preparation_yield"):
            has = found[found[column].notna()]
            lines.append(pd.DataFrame({"sample_id": has["sample_id"], "analyte": column, "result": has[column] * 100,
                                       "unit": "%", "basis": ""}))  # fmt: skip
        long = pd.concat([part for part in lines if len(part)], ignore_index=True)
        return long[["sample_id", "analyte", "result", "unit", "basis", "u", "n"]].rename(columns={"n": "runs"})

    @property
    def _tests(self) -> pd.DataFrame:
        """The samples that have a figure; controls are not samples of anybody."""
        found = self.samples
        return found[(found["n"] > 0) & (found["kind"] == "test")].reset_index(drop=True)

    def _wide(self, basis: str | None) -> pd.DataFrame:
        import pandas as pd

        found = self._tests
        on = basis or (str(found["basis"].iloc[0]) if len(found) else "as_analysed")
        words = {"as_analysed": "as analysed", "as_is": "as is", "dry_matter": "DM"}.get(on)
        if words is None:
            raise WrongUse(f"The basis '{basis}' is not known here.", "One of: as_analysed, as_is, dry_matter.")
        value, u = ("gross_energy", "u") if on == "as_analysed" else (f"gross_energy_{on}", f"u_{on}")
        own = found["basis"] == on
        table: dict[str, Any] = {
            "sample_id": found["sample_id"],
            f"gross_energy [MJ/kg {words}]": found["gross_energy"].where(own, found[value] if value in found and on !=
                                                                         "as_analysed" else np.nan),
            "u(gross_energy) [MJ/kg]": found["u"].where(own, found[u] if on != "as_analysed" else np.nan),
        }  # fmt: skip
        if on == "as_analysed":
            for column in ("residual_moisture", "preparation_yield"):
                if found[column].notna().any():
                    table[f"{column} [%]"] = found[column] * 100
        return pd.DataFrame({**table, "runs": found["n"]})

    def joined(self, table: pd.DataFrame, basis: str | None = None) -> pd.DataFrame:
        """A wide sample table (column sample_id) with the gross energies found here beside each sample; no row is lost.

        basis : as_analysed, as_is or dry_matter; needed where the sheet holds samples burnt wet and others. Raises WrongUse.
        """
        if "sample_id" not in table.columns:
            raise WrongUse("The sample table has no column sample_id.", "Give the table with its sample ids.")
        if basis is None and self._tests["basis"].nunique() > 1:
            raise WrongUse("Some samples were burnt wet, others as a powder.",
                           "Choose one basis for the column: basis='dry_matter' or 'as_is'.")  # fmt: skip
        mine = self._wide(basis)
        taken = [c for c in mine.columns if c != "sample_id" and c in table.columns]
        if taken:
            raise WrongUse(
                f"The sample table already has {', '.join(taken)}.", "Drop or rename the older columns first."
            )
        left = table.assign(sample_id=table["sample_id"].astype(str))
        return left.merge(mine.assign(sample_id=mine["sample_id"].astype(str)), "left", "sample_id")

    @cached_property
    def fuel_values(self) -> pd.DataFrame:
        """Constant-pressure and net (lower) calorific values per run, where hydrogen was given: fuel quantities.

        Columns run_id, sample_id, gross_constant_pressure, u, net_calorific_value, u_net, note [MJ/kg, with the powder's
        moisture]; elements are of the dry matter. A net calorific value is not the net energy of a feed.
        """
        import pandas as pd

        sheet = self.sheet
        w = np.nan_to_num(sheet.values("residual_moisture"))
        h, o, nitrogen = (sheet.values(name) for name in ("hydrogen", "oxygen", "nitrogen"))
        rows = np.flatnonzero(~np.isnan(h) & self.counts)
        dry, u_dry = preparation.on_dry_matter(self.gross, self.u, w)
        o, nitrogen = np.nan_to_num(o), np.nan_to_num(nitrogen)
        at_p, u_p = net_value.constant_pressure(dry, h, o, nitrogen, u_dry)
        net, u_net = net_value.net_calorific_value(dry, h, o, nitrogen, w, u=u_dry)
        return pd.DataFrame({
            "run_id": sheet.text["run_id"], "sample_id": sheet.text["sample_id"],
            "gross_constant_pressure": at_p * (1 - w) * 1e-3, "u": u_p * (1 - w) * 1e-3, "net_calorific_value": net * 1e-3,
            "u_net": u_net * 1e-3, "note": net_value.KEPT_APART,
        }).iloc[rows].reset_index(drop=True)  # fmt: skip

    @cached_property
    def calibration_table(self) -> pd.DataFrame:
        """One row per calibration: heat capacity with u, scatter, trend, outlier, what was counted and what is to be said."""
        import pandas as pd

        return pd.DataFrame([{
            "calibration_id": c.id, "instrument": c.instrument, "date": c.date, "heat_capacity": c.mean, "u": c.u, "n": c.n,
            "rsd_percent": c.rsd * 100, "trend_per_k": c.trend, "trend_p": c.trend_p, "outlier": c.outlier,
            "rise_low": c.low, "rise_high": c.high, "warnings": "; ".join(c.warnings),
        } for c in self.calibrations])  # fmt: skip

    @property
    def aid_shares(self) -> Floats:
        """(n,) share of the heat that aid, capsule and bag gave."""
        return aid_share(self.budgets.terms, self.budgets.taken_up)


def _judgement(status: str, spread: float, limit: float) -> str:
    apart = (
        f"the runs differ by {spread:.0f} J/g, over the {limit:.0f} J/g that repeated runs may"
        if limit == limit
        else ""
    )
    return {
        "single": "one run only: burn a second",
        "mean": "",
        "third_run": f"{apart}: burn a third; their mean stands for the time being",
        "fourth_run": f"{apart}: their median stands, burn a fourth",
        "median": f"{apart}: the median of all stands",
        "none": "no run of this sample counts",
    }[status]
