"""The whole job for a batch: figures by every system, differences in three parts, verdicts, causes, evidence."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import cached_property, lru_cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from energy import display, reasons, views
from energy.catalogue import reader, tables
from energy.catalogue.records import SOURCE_STATUS, TARGETS, System
from energy.compare import NOT_COMPUTED, SINGLE_ROUTE, VERDICTS, Limit, read_limit, verdict_codes
from energy.evaluate import MISSING, Blocks, Pair, evaluate
from energy.problems import Problem, WrongUse
from energy.samples import Samples

if TYPE_CHECKING:
    import pandas as pd

MEASURED = "gross_energy_measured"


@dataclass(frozen=True)
class Choice:
    """What is computed for a batch: systems in order, pairs that are compared, and the rule for the leading figure.

    leading : per stage, ids in order of preference.
    """

    target: str
    law: str | None
    systems: tuple[System, ...]
    pairs: tuple[Pair, ...]
    leading: dict[str, tuple[str, ...]]
    limit: Limit


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
    if house is None:
        catalogue = reader.systems()
        choice = _choose_shipped(aim, bomb_system, composition_system, law, limit, systems)
    else:
        catalogue = reader.with_house(house)
        choice = choose(catalogue, aim, bomb_system, composition_system, law, limit, systems)
    blocks = evaluate(batch, choice.systems, choice.pairs)
    return Assessment(batch, choice, blocks, coverage, display.display(unit, basis, blocks.basis), catalogue)


def _read(table: str | Path | pd.DataFrame, target: str | None) -> Samples:
    from energy.intake import read_samples

    return read_samples(table, target=target)


def _target(samples: Samples, target: str | None) -> str:
    wanted = target or samples.target
    if wanted is None and "target" in samples.text:
        named = {str(t) for t in samples.text["target"] if t not in (None, "") and t == t}
        if len(named) > 1:
            raise WrongUse(f"The table names several targets: {', '.join(sorted(named))}.", "Choose one with target=.")
        wanted = next(iter(named), None)
    if wanted is None:
        raise WrongUse("It is not said for whom the energy is meant.", f"Give target=, one of: {', '.join(TARGETS)}.")
    if wanted not in TARGETS:
        raise WrongUse(f"The target '{wanted}' is not known.", f"One of: {', '.join(TARGETS)}.")
    return wanted


def _find(catalogue: dict[str, System], identity: str, target: str, role: str) -> System:
    if identity not in catalogue:
        import difflib

        near = difflib.get_close_matches(identity, catalogue, n=3, cutoff=0.4)
        raise WrongUse(f"There is no {role} '{identity}'.", f"Did you mean {', '.join(near)}?" if near else
                       "List them with: python -m energy equations.")  # fmt: skip
    system = catalogue[identity]
    if target not in system.targets:
        raise WrongUse(f"'{identity}' is for {', '.join(system.targets)}, not for {target}.", "Choose another one.")
    return system


@lru_cache(maxsize=64)
def _choose_shipped(
    target: str, bomb: str | None, composition: str | None, law: str | None, limit: float | str | None, which: str
) -> Choice:
    return choose(reader.systems(), target, bomb, composition, law, limit, which)


def choose(
    catalogue: dict[str, System],
    target: str,
    bomb_system: str | None,
    composition_system: str | None,
    law: str | None,
    limit: float | str | None,
    which: str,
) -> Choice:
    """Which systems are computed and compared; defaults from targets.toml."""
    if which not in ("default", "all"):
        raise WrongUse(f"systems = '{which}' is not known.", "Use 'default' or 'all'.")
    if target not in tables.targets():
        raise WrongUse(
            f"No system for {target} is in this version.", "Use target='none' for the check of gross energy alone."
        )
    default = tables.targets()[target]
    heats = str(default.get("gross_energy_system", "ge_heats_best"))
    laws = _laws(catalogue, target, law)
    bombs = [bomb_system] if bomb_system else [
        x for x in (default.get("bomb_system_with_group"), default.get("bomb_system")) if x]  # fmt: skip
    if bomb_system:
        _admit(_find(catalogue, bomb_system, target, "bomb system"), "bomb")
    if composition_system:
        _admit(_find(catalogue, composition_system, target, "composition system"), "composition")
    against = [composition_system] if composition_system else list(laws)
    beside = [b for b in default.get("beside", ()) if b not in against]
    if not against and default.get("composition_system"):
        against = [str(default["composition_system"])]
        beside = [b for b in beside if b not in against]
    pairs = [Pair("GE", MEASURED, heats, heats)]
    pairs += [Pair(catalogue[c].stage, b, c, heats) for c in (*against, *beside) for b in bombs
              if catalogue[c].route == "composition"]  # fmt: skip
    ids = [MEASURED, heats, *bombs, *_with_twins(catalogue, against), *beside]
    if law in catalogue:  # a law that lets a bomb value stand shows that value too
        ids += [s.id for s in catalogue.values() if s.law and s.route == "bomb" and s.body == catalogue[law].body]
    if which == "all":
        ids += [s.id for s in catalogue.values() if target in s.targets]
    chosen = tuple(catalogue[i] for i in dict.fromkeys(ids))
    return Choice(
        target=target,
        law=law,
        systems=chosen,
        pairs=tuple(pairs),
        leading=_leading(chosen, against, bombs, bool(law or composition_system)),
        limit=read_limit(limit) if limit is not None else _default_limit(default),
    )


def _laws(catalogue: dict[str, System], target: str, law: str | None) -> list[str]:
    laws = [s.id for s in catalogue.values() if s.law and target in s.targets and s.twin_of is None]
    if law is None:
        return []
    if law == "all":
        return [x for x in laws if catalogue[x].route == "composition"]
    system = _find(catalogue, law, target, "law")
    if not system.law:
        raise WrongUse(f"'{law}' is not a law or code.", f"One of: {', '.join(laws)}.")
    return [law]


def _admit(system: System, route: str) -> None:
    if system.route != route or system.stage == "GE":
        raise WrongUse(f"'{system.id}' is no {route} system: it gives {system.stage} on the {system.route} route.",
                       f"Choose one of the {route} route: python -m energy equations.")  # fmt: skip


def _with_twins(catalogue: dict[str, System], ids: Sequence[str]) -> list[str]:
    found: list[str] = []
    for identity in ids:
        found.append(identity)
        twin = catalogue[identity].twin_id
        if twin:
            found.append(twin)
    return found


def _leading(
    chosen: Sequence[System], against: Sequence[str], bombs: Sequence[str], law: bool
) -> dict[str, tuple[str, ...]]:
    """GE: the measured one. ME: what the chosen law computes if a law was chosen, else the bomb route."""
    first = [*against, *bombs] if law else [*bombs, *against]
    order = [MEASURED, *first, *(s.id for s in chosen if s.twin_of is None)]
    found: dict[str, list[str]] = {}
    stages = {s.id: s.stage for s in chosen}
    for identity in dict.fromkeys(order):
        if identity in stages:
            found.setdefault(stages[identity], []).append(identity)
    return {stage: tuple(ids) for stage, ids in found.items()}


def _default_limit(default: dict[str, Any]) -> Limit:
    floor = float(default.get("limit_floor_kJ_per_100g", 0.0)) * 0.01
    return Limit(float(default["limit_act"]), floor, float(default["limit_look"]), str(default["reason"]))


@dataclass
class Assessment:
    """The result of `assess`. Tables are made when asked for; blocks hold the numbers (MJ/kg, working basis)."""

    samples: Samples
    choice: Choice
    blocks: Blocks
    coverage: float
    shown: display.Display
    catalogue: dict[str, System] = field(repr=False)

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
        """Everything found while reading the table."""
        return self.samples.problems

    @cached_property
    def width(self) -> np.ndarray:
        """(pairs, n) half-width of the practical limit, MJ/kg."""
        return np.array([self.choice.limit.width(row) for row in self.blocks.at_heats]).reshape(
            self.blocks.at_heats.shape
        )

    @cached_property
    def verdict(self) -> np.ndarray:
        """(pairs, n) int8 index into compare.VERDICTS."""
        b = self.blocks
        found = np.empty(b.measurement.shape, dtype=np.int8)
        with np.errstate(invalid="ignore"):
            for p, pair in enumerate(b.pairs):
                u = np.hypot(b.u_measurement[p], b.u_model[p])
                found[p] = verdict_codes(b.measurement[p], u, -self.width[p], self.width[p], self.coverage)
                have = [b.status[b.row(x)] < MISSING for x in (pair.bomb, pair.composition)]
                found[p][have[0] ^ have[1]] = SINGLE_ROUTE
                found[p][~have[0] & ~have[1]] = NOT_COMPUTED
        return found

    @cached_property
    def causes(self) -> tuple[np.ndarray, np.ndarray]:
        """(n,) probable cause and next measurement, '' where there is nothing to explain."""
        return reasons.causes(self)

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
        """Declared values; filled by the label module, columns present until then."""
        return views.declared(self)

    @cached_property
    def balances(self) -> pd.DataFrame:
        """Balances; columns present, filled as far as this version computes them."""
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

    def partition(self, sample_id: str) -> pd.DataFrame:
        """GE -> losses -> ME of both routes."""
        return reasons.partition(self, sample_id)

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
        if (target is None or target in s.targets) and stage in (None, s.stage) and route in (None, s.route)
    ]
    return pd.DataFrame(rows, columns=list(views.EQUATION_COLUMNS))


def demo_paths() -> list[Path]:
    """The invented demo tables, from an installed wheel or a checkout."""
    here = Path(__file__).parent
    for folder in (here / "demo_data", here.parent / "demo_data"):
        found = sorted(folder.glob("*.csv"), reverse=True)
        if found:
            return found
    raise WrongUse("The demo tables are not there.", "Install the package again.")


__all__ = ["SOURCE_STATUS", "VERDICTS", "Assessment", "Choice", "assess", "choose", "demo_paths", "equations"]
