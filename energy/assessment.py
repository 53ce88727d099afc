"""The whole job for a batch: figures by every system, differences in three parts, verdicts, causes, evidence."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from energy import consistency, display, order, reasons, sensitivity, views
from energy import partition as partitions
from energy.agreement import GroupAgreement, by_group
from energy.balance import Balances
from energy.balance import balances as draw_up
from energy.catalogue import reader, tables
from energy.catalogue.records import TARGETS, System
from energy.causes import NOTHING_CLOSES, REPEAT_BOTH, Causes, texts, to_decide
from energy.choice import Choice, Wanted, choose, choose_shipped, house_limit
from energy.compare import (
    BIASED,
    CONCORDANT,
    DISCORDANT,
    INCONCLUSIVE,
    NOT_COMPUTED,
    SCREENING,
    SINGLE_ROUTE,
    coverage_of,
    verdict_codes,
)
from energy.declare import Declared, declare
from energy.evaluate import MISSING, Blocks, evaluate
from energy.label_law import declares
from energy.matrices import matrices
from energy.monte_carlo import Checked, monte_carlo
from energy.problems import Problem, WrongUse
from energy.samples import Samples, by_near_infrared
from energy.targets import target_slug, targets_like

if TYPE_CHECKING:
    import pandas as pd


def assess(
    samples: Samples | str | Path | pd.DataFrame,
    target: str | None = None,
    bomb_system: str | None = None,
    composition_system: str | None = None,
    law: str | None = None,
    limit: float | str | None = None,
    coverage: float = 1.96,
    systems: str = "default",
    unit: str | None = None,
    basis: str | None = None,
    house: str | Path | None = None,
) -> Assessment:
    """Assess a batch.

    samples : what read_samples gives, or a path or DataFrame it takes. target : species or use; else the table says.
    bomb_system, composition_system : ids of systems; else the target's defaults. law : id of a label law, or "all".
    limit : practical limit (0.05, "5%", "100 kJ/100 g"). coverage : factor of the interval. unit, basis : of the
    tables handed out; MJ/kg on the batch's basis otherwise. house : a TOML file of the house's own equations.
    Raises StructuralProblems (table), WrongUse (an argument names nothing we have).
    """
    batch = samples if isinstance(samples, Samples) else _read(samples, target)
    aim = _target(batch, target)
    batch = _rows_for(batch, aim)
    wanted = Wanted(aim, bomb_system, composition_system, law, limit, systems)
    columns = frozenset(batch.columns)
    if house is None:
        catalogue = reader.systems()
        choice = choose_shipped(wanted, columns)
    else:
        catalogue = reader.with_house(house)
        choice = choose(catalogue, wanted, columns)
    blocks = evaluate(batch, choice.systems, choice.pairs)
    shown = display.display(unit, basis, blocks.basis)
    if np.isnan(display.basis_factor(batch, blocks.basis, shown.basis)).all() and len(batch):
        raise WrongUse(f"Nothing can be shown on '{shown.basis}': no sample of the table has a dry matter or moisture.",
                       f"Give it, or choose {blocks.basis}.")  # fmt: skip
    if aim in ("human", "none"):  # a food's ME is never set beside its GE by one system alone
        return Assessment(batch, choice, blocks, coverage, shown, catalogue)
    findings = order.find(batch, choice.systems, blocks, catalogue)
    return Assessment(batch, choice, blocks, coverage, shown, catalogue, findings)


def _read(table: str | Path | pd.DataFrame, target: str | None) -> Samples:
    from energy.intake import read_samples

    return read_samples(table, target=target)


def named_targets(samples: Samples) -> list[str]:
    """The targets a table's own column names, in the order they appear."""
    if "target" not in samples.text:
        return []
    return list(dict.fromkeys(str(t) for t in samples.text["target"] if t not in (None, "") and t == t))


def _target(samples: Samples, target: str | None) -> str:
    wanted = target or samples.target
    if wanted is None:
        named = named_targets(samples)
        if len(named) > 1:
            raise WrongUse(f"The table names several targets: {', '.join(sorted(named))}.",
                           "Choose one with target=, or take them one by one with assess_each.")  # fmt: skip
        wanted = next(iter(named), None)
    if wanted is None:
        raise WrongUse("It is not said for whom the energy is meant.", f"Give target=, one of: {', '.join(TARGETS)}.")
    wanted = target_slug(wanted)
    if wanted not in TARGETS:
        raise WrongUse(f"The target '{wanted}' is not known.", targets_like(str(wanted)))
    return wanted


def _rows_for(samples: Samples, target: str) -> Samples:
    """The samples that are for a target, or for nobody named; what is left out is told."""
    others = [t for t in named_targets(samples) if t != target]
    if not others:
        return samples
    said = samples.text["target"].astype(str)
    mine = ~np.isin(said, others)
    if not mine.any():
        raise WrongUse(f"No sample of the table is for {target}; it says {', '.join(others)}.",
                       "Choose one of these, or mend the column 'target'.")  # fmt: skip
    batch = samples.take(np.flatnonzero(mine))
    counts = ", ".join(f"{int((said == t).sum())} for {t}" for t in others)
    batch.problems.append(
        Problem(f"left out, since they are for another species or use: {counts}.", "Choose that target to see them.",
                samples.source, column="target", severity="warning")
    )  # fmt: skip
    return batch


def assess_each(samples: Samples | str | Path | pd.DataFrame, **wishes: Any) -> dict[str, Assessment]:
    """Assess a table that names several targets: target -> Assessment, in the order they appear.

    wishes : as for `assess`, without target. Raises WrongUse where the column `target` is missing or empty in a row.
    """
    batch = samples if isinstance(samples, Samples) else _read(samples, None)
    named = named_targets(batch)
    if not named:
        raise WrongUse("The table names no target.", "Fill the column 'target', or give one target for all.")
    open_rows = [f"{i} ('{t}')" if t else str(i) for i, t in zip(batch.ids, batch.text["target"], strict=True)
                 if t not in TARGETS]  # fmt: skip
    if open_rows:
        more = f" and {len(open_rows) - 10} more" if len(open_rows) > 10 else ""
        raise WrongUse(f"No known target is named for {', '.join(open_rows[:10])}{more}.",
                       f"Fill the column 'target' with one of: {', '.join(TARGETS)}; or give one target for all.")  # fmt: skip
    said = batch.text["target"].astype(str)
    found = {}
    for target in named:
        mine, own = batch.take(np.flatnonzero(said == target)), dict(wishes)
        law = reader.systems().get(str(wishes.get("law")))
        if law is not None and target not in law.targets:
            own["law"] = None
            mine.problems.append(
                Problem(f"{law.id} is for {', '.join(law.targets)}; {target} is computed without a law.",
                        "Nothing to mend, or take this species or use by itself with a law of its own.",
                        batch.source, column="target", severity="warning")
            )  # fmt: skip
        found[target] = assess(mine, target=target, **own)
    return found


@dataclass
class Assessment:
    """The result of `assess`. Tables are made when asked for; blocks hold the numbers (MJ/kg, working basis)."""

    samples: Samples
    choice: Choice
    blocks: Blocks
    coverage: float
    shown: display.Display
    catalogue: dict[str, System] = field(repr=False)
    findings: order.Findings = field(default_factory=order.Findings, repr=False)

    @property
    def target(self) -> str:
        """Species or use."""
        return self.choice.target

    @property
    def law(self) -> str | None:
        """Label law chosen, if any."""
        return self.choice.law

    @property
    def problems(self) -> list[Problem]:
        """Everything found while reading the table, and values in it that cannot stand together."""
        return self.samples.problems + self._clashes + self.findings.problems

    @cached_property
    def _clashes(self) -> list[Problem]:
        return consistency.find(self.samples, feed=self.target not in ("human", "none"))

    @cached_property
    def edges(self) -> tuple[np.ndarray, np.ndarray]:
        """(pairs, n) lower and upper practical limit of the measurement part, MJ/kg on the working basis.

        A law states its tolerance per mass as it is; where a batch knows dry matter only, the target's own limit holds.
        """
        lower, upper = np.empty_like(self.blocks.at_heats), np.empty_like(self.blocks.at_heats)
        for p, (limit, reference) in enumerate(zip(self.choice.limits, self.blocks.at_heats, strict=True)):
            if limit.as_is and self.blocks.basis != "as_is":
                limit = house_limit(tables.targets()[self.target])
            lower[p], upper[p] = limit.edges(reference)
        return lower, upper

    @cached_property
    def coverage_factor(self) -> np.ndarray:
        """(pairs, n) what u is multiplied by: the coverage asked for, or Student's t where degrees of freedom are few."""
        freedom = sensitivity.freedom(self.samples, self.blocks.pairs, self.catalogue)
        return coverage_of(self.coverage, freedom)

    @cached_property
    def verdict(self) -> np.ndarray:
        """(pairs, n) int8 index into compare.VERDICTS."""
        b, (lower, upper) = self.blocks, self.edges
        found = np.empty(b.measurement.shape, dtype=np.int8)
        near_infrared = by_near_infrared(self.samples)
        with np.errstate(invalid="ignore"):
            for p, pair in enumerate(b.pairs):
                u = np.hypot(b.u_measurement[p], b.u_model[p])
                found[p] = verdict_codes(b.measurement[p], u, lower[p], upper[p], self.coverage_factor[p])
                found[p][near_infrared & np.isin(found[p], (CONCORDANT, BIASED, DISCORDANT))] = SCREENING
                have = [b.status[b.row(x)] < MISSING for x in (pair.bomb, pair.composition)]
                found[p][have[0] ^ have[1]] = SINGLE_ROUTE
                found[p][~have[0] & ~have[1]] = NOT_COMPUTED
        return found

    @cached_property
    def tried(self) -> Causes:
        """Every handling error weighed on the samples that need an explanation."""
        return reasons.causes(self)

    @cached_property
    def causes(self) -> tuple[np.ndarray, np.ndarray]:
        """(n,) probable cause and next measurement, '' where there is nothing to explain or to decide."""
        cause, following = texts(self.tried, len(self.samples))
        if len(self.verdict):
            undecided = np.flatnonzero((self.verdict[0] == INCONCLUSIVE) & (following == ""))
            m = matrices(self.samples, self.catalogue[self.blocks.pairs[0].heats], undecided)
            following[m.rows] = to_decide(m)
            unknown = (self.verdict[0] == DISCORDANT) & (cause == "")
            cause[unknown], following[unknown] = NOTHING_CLOSES, REPEAT_BOTH
        return cause, following

    def probable_causes(self, sample_id: str) -> pd.DataFrame:
        """What was tried on a sample, likeliest first: size, corrected figures, whether it closes, its share."""
        return views.probable_causes(self, sample_id)

    @cached_property
    def balance(self) -> Balances:
        """Mass and energy balance of the batch."""
        return draw_up(self.samples, self.catalogue[self.blocks.pairs[0].heats])

    @cached_property
    def leading(self) -> np.ndarray:
        """(systems, n) bool: one figure per sample and stage leads."""
        found = np.zeros(self.blocks.status.shape, dtype=bool)
        for ids in self.choice.leading.values():
            open_rows = np.ones(len(self.samples), dtype=bool)
            for identity in ids:
                i = self.blocks.row(identity)
                takes = open_rows & (self.blocks.status[i] < MISSING)
                found[i] = takes
                open_rows &= ~takes
        return found

    @cached_property
    def results(self) -> pd.DataFrame:
        """One row per sample and system, columns of the design; values in `unit` on `basis`."""
        return views.results(self)

    @cached_property
    def verdicts(self) -> pd.DataFrame:
        """One row per sample and comparison."""
        return views.verdicts(self)

    @cached_property
    def declared(self) -> pd.DataFrame:
        """Declared values under the laws of this assessment, per 100 g as is, by simple acceptance; see `declare`."""
        return views.declared(self.declare(), self.samples.ids)

    def declared_of(self, sample_id: str) -> pd.DataFrame:
        """The rows of `declared` of one sample, made alone."""
        return views.declared(self.declare(sample_id), np.array([sample_id], dtype=object))

    def declare(self, sample_id: str | None = None, **wishes: Any) -> list[Declared]:
        """The same as arrays, one per law, of the batch or of one sample.

        wishes : per, serving, decision, coverage, lot, tolerance_set of declare.declare.
        """
        samples = self.samples if sample_id is None else self.samples.take(np.array([self.index(sample_id)]))
        return [declare(samples, s, self.catalogue, **wishes) for s in self.choice.systems if declares(s)]

    @cached_property
    def balances(self) -> pd.DataFrame:
        """Mass and energy balance per sample, the global test, reconciled values and suspects."""
        return views.balances(self)

    @cached_property
    def sources(self) -> pd.DataFrame:
        """Every source used, once, with how it is known."""
        return views.sources(self)

    def wide(self, quantity: str = "value") -> pd.DataFrame:
        """samples x systems of value, u (MJ/kg on the working basis) or status, without a copy."""
        return views.wide(self, quantity)

    def select(
        self,
        target: str | None = None,
        stage: str | None = None,
        system: str | None = None,
        sample_id: str | None = None,
    ) -> pd.DataFrame:
        """Rows of `results`, narrowed before anything long is made."""
        return views.results(self, target=target, stage=stage, system=system, sample_id=sample_id)

    def inputs(self, sample_id: str | None = None) -> pd.DataFrame:
        """What was given: value, unit, basis, u and where the u comes from."""
        return views.inputs(self, sample_id)

    def explain(self, sample_id: str) -> pd.DataFrame:
        """The three parts of a sample's difference, line by line."""
        return reasons.explain(self, sample_id)

    def budget(self, sample_id: str, system: str) -> pd.DataFrame:
        """Which input carries how much of the uncertainty of one figure."""
        return sensitivity.budget(self, sample_id, system)

    def monte_carlo(
        self, sample_id: str, system: str, less: str | None = None, seed: int = 1, trials: int | None = None
    ) -> Checked:
        """One figure of a sample, or with `less` the difference of two, by Monte Carlo (JCGM 101) beside first order.

        MJ/kg on the working basis; `trust` says which of the two to believe. Raises WrongUse where a figure is not there.
        """
        for name in (system, less):
            if name is not None and name not in self.catalogue:
                raise WrongUse(f"There is no system '{name}'.", "See the column 'system' of results.")
        other = None if less is None else self.catalogue[less]
        return monte_carlo(self.samples, self.index(sample_id), self.catalogue[system], other, seed=seed, trials=trials)

    def agreement(self, robust: bool = True) -> list[GroupAgreement]:
        """Agreement of measured with computed gross energy over the batch, and per food group; MJ/kg, working basis.

        robust : a few wild samples do not set the bias and the limits.
        """
        b, computed = self.blocks, self.blocks.at_heats[0]
        groups = self.samples.text.get("food_group", np.full(len(self.samples), "", dtype=object))
        words = np.array([str(g) if g else "" for g in groups], dtype=object)
        return by_group(computed, computed + b.measurement[0], words, robust)

    def covariance(self, sample_id: str) -> pd.DataFrame:
        """Covariance of every two figures of a sample by the inputs they share, (MJ/kg)^2 on the working basis."""
        import pandas as pd

        one = self.samples.take(np.array([self.index(sample_id)]))
        able = [
            s for s in self.choice.systems if self.blocks.status[self.blocks.row(s.id), self.index(sample_id)] < MISSING
        ]
        rows = [[sensitivity.covariance_of(one, x, y)[0] for y in able] for x in able]
        return pd.DataFrame(rows, index=[s.id for s in able], columns=[s.id for s in able])

    def partition(self, sample_id: str) -> pd.DataFrame:
        """GE, each loss, and what is left, by both routes."""
        return partitions.partition(self, sample_id)

    def notes(self, sample_id: str) -> list[str]:
        """What a reader must know and what is not a cause of a difference."""
        return reasons.notes(self, sample_id)

    def questions(self, sample_id: str) -> list[tuple[str, str]]:
        """The six questions with their answers in words."""
        return reasons.questions(self, sample_id)

    def index(self, sample_id: str) -> int:
        """Row of a sample. Raises WrongUse."""
        found = np.flatnonzero(self.samples.ids == sample_id)
        if len(found) == 0:
            raise WrongUse(f"There is no sample '{sample_id}'.", "See the column sample_id.")
        return int(found[0])

    def save(self, path: str | Path) -> list[Path]:
        """Write by the path's ending: csv, xlsx, parquet, json, html. Returns what was written."""
        from energy.report.tables import save

        return save(self, path)

    to_csv = to_excel = to_html = to_parquet = to_json = save


def equations(
    target: str | None = None, stage: str | None = None, route: str | None = None, house: str | Path | None = None
) -> pd.DataFrame:
    """The catalogue as a table: formula as text and LaTeX, domain, source and how it is known."""
    import pandas as pd

    found = reader.systems() if house is None else reader.with_house(house)
    rows = [
        views.equation_row(s)
        for s in found.values()
        if (target is None or target in s.targets) and stage in (None, s.stage, s.kind) and route in (None, s.route)
    ]
    return pd.DataFrame(rows, columns=list(views.EQUATION_COLUMNS))


def demo_paths() -> list[Path]:
    """The invented demo samples, from an installed wheel or a checkout."""
    here = Path(__file__).parent
    for folder in (here / "demo_data", here.parent / "demo_data"):
        found = sorted((p for p in folder.glob("*.csv") if p.stem.startswith(("foods", "feeds"))), reverse=True)
        if found:
            return found
    raise WrongUse("The demo tables are not there.", "Install the package again.")


__all__ = ["Assessment", "assess", "assess_each", "demo_paths", "equations"]
