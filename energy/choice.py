"""Which systems are computed for a batch, which are compared, and which figure leads: defaults and wishes."""

from __future__ import annotations

import difflib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

from energy.catalogue import reader, tables
from energy.catalogue.derived import derived_rules
from energy.catalogue.records import System
from energy.compare import Limit, even, read_limit
from energy.evaluate import Pair
from energy.problems import WrongUse

MEASURED = "gross_energy_measured"
#: stages of which one figure per sample leads; digestibilities, losses and ratios are steps on the way
LED = ("GE", "DE", "ME", "NE", "label")


@dataclass(frozen=True)
class Wanted:
    """What the caller of `assess` asked for; None where the target's default holds."""

    target: str
    bomb_system: str | None = None
    composition_system: str | None = None
    law: str | None = None
    limit: float | str | None = None
    systems: str = "default"


@dataclass(frozen=True)
class Choice:
    """What is computed for a batch: systems in order, pairs that are compared, and the rule for the leading figure.

    leading : per stage, ids in order of preference. limits : one per pair; the first, on the gross energy, is the one that
    is spoken of.
    """

    target: str
    law: str | None
    systems: tuple[System, ...]
    pairs: tuple[Pair, ...]
    leading: dict[str, tuple[str, ...]]
    limits: tuple[Limit, ...]

    @property
    def limit(self) -> Limit:
        """The practical limit on the gross energy."""
        return self.limits[0]


def choose_shipped(wanted: Wanted, columns: frozenset[str]) -> Choice:
    """`choose` from the shipped catalogue, remembered; columns count only where a default depends on them."""
    default = tables.targets().get(wanted.target, {})
    depends = any(name.endswith("_if_measured") for name in default)
    return _remembered(wanted, columns if depends else frozenset())


@lru_cache(maxsize=64)
def _remembered(wanted: Wanted, columns: frozenset[str]) -> Choice:
    return choose(reader.systems(), wanted, columns)


def choose(catalogue: dict[str, System], wanted: Wanted, columns: frozenset[str]) -> Choice:
    """Which systems are computed and compared; defaults from targets.toml. columns : what the table holds."""
    target, law = wanted.target, wanted.law
    if wanted.systems not in ("default", "all"):
        raise WrongUse(f"systems = '{wanted.systems}' is not known.", "Use 'default' or 'all'.")
    default = tables.targets()[target]
    heats = str(default["gross_energy_system"])
    laws = _laws(catalogue, target, law)
    bombs = _default(catalogue, default, "bomb_systems", columns)
    if wanted.bomb_system:
        _admit(_find(catalogue, wanted.bomb_system, target, "bomb system"), "bomb")
        bombs = [wanted.bomb_system]
    if wanted.composition_system:
        _admit(_find(catalogue, wanted.composition_system, target, "composition system"), "composition")
    against = [wanted.composition_system] if wanted.composition_system else list(laws)
    if not against:
        against = _default(catalogue, default, "composition_systems", columns)
    beside = [b for b in default.get("beside", ()) if b not in against]
    if wanted.bomb_system and wanted.composition_system:
        _same_stage(catalogue[wanted.bomb_system], catalogue[wanted.composition_system])
    pairs = [Pair("GE", MEASURED, heats, heats)]
    for c in (*against, *beside):
        if catalogue[c].stage == "GE":
            pairs.append(Pair("GE", MEASURED, c, heats))
        pairs += [Pair(catalogue[c].stage, b, c, heats) for b in bombs
                  if catalogue[c].route == "composition" and comparable(catalogue[b], catalogue[c])]  # fmt: skip
    shown = _default(catalogue, default, "shown", columns)
    ids = [MEASURED, heats, *bombs, *_with_twins(catalogue, against), *beside, *shown]
    if law in catalogue:  # a law that lets a bomb value stand shows that value too
        ids += [s.id for s in catalogue.values() if s.law and s.route == "bomb" and s.body == catalogue[law].body
                and target in s.targets]  # fmt: skip
    if wanted.systems == "all":
        ids += [s.id for s in catalogue.values() if target in s.targets]
    chosen = tuple(catalogue[i] for i in dict.fromkeys(ids))
    return Choice(
        target=target,
        law=law,
        systems=chosen,
        pairs=tuple(dict.fromkeys(pairs)),
        leading=_leading(chosen, against, bombs, bool(law or wanted.composition_system)),
        limits=tuple(_limit(catalogue, wanted, default, pair) for pair in dict.fromkeys(pairs)),
    )


def _default(
    catalogue: Mapping[str, System], default: Mapping[str, Any], name: str, columns: frozenset[str]
) -> list[str]:
    """Ids a target names, and those it names for tables that hold what they need."""
    always = [str(x) for x in default.get(name, ())]
    perhaps = [str(x) for x in default.get(f"{name}_if_measured", ())]
    return always + [x for x in perhaps if measured(catalogue[x], columns)]


def measured(system: System, columns: frozenset[str]) -> bool:
    """True if a table holds every quantity a formula needs that no rule derives."""
    needed = {s.quantity for n, s in system.inputs.items() if s.quantity and n in system.formula.symbols
              and s.absent == "missing_input"}  # fmt: skip
    return needed - set(derived_rules()) - set(reader.DERIVED_ONLY) - {"crude_protein"} <= columns


def comparable(bomb: System, composition: System) -> bool:
    """A bomb and a composition system speak of one energy; for people a label's energy counts as ME."""
    alike = {"label": "ME"}
    kinds = ("" if s.kind == "NME" else s.kind for s in (bomb, composition))
    stages = (alike.get(s.stage, s.stage) for s in (bomb, composition))
    return len(set(stages)) == 1 and len(set(kinds)) == 1


def _same_stage(bomb: System, composition: System) -> None:
    if not comparable(bomb, composition):
        said = [f"'{s.id}' gives {s.kind or s.stage}" for s in (bomb, composition)]
        raise WrongUse(f"{said[0]}, {said[1]}: they are not compared.", "Choose two systems of one stage.")


def _find(catalogue: dict[str, System], identity: str, target: str, role: str) -> System:
    fits = [s.id for s in catalogue.values() if target in s.targets and (s.law or role != "law")]
    if identity not in catalogue:
        near = difflib.get_close_matches(identity, fits, n=3, cutoff=0.4)
        raise WrongUse(f"There is no {role} '{identity}'.", f"Did you mean {', '.join(near)}?" if near else
                       "List them with: python -m energy equations.")  # fmt: skip
    system = catalogue[identity]
    if target not in system.targets:
        raise WrongUse(f"'{identity}' is for {', '.join(system.targets)}, not for {target}.",
                       f"Choose another one{': ' + ', '.join(fits) if role == 'law' and fits else ''}.")  # fmt: skip
    return system


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
        if stages.get(identity) in LED:
            found.setdefault(stages[identity], []).append(identity)
    return {stage: tuple(ids) for stage, ids in found.items()}


def _limit(catalogue: Mapping[str, System], wanted: Wanted, default: Mapping[str, Any], pair: Pair) -> Limit:
    """The user's practical limit, else the energy tolerance of the law compared with, else the target's default.

    A law's tolerance speaks of its own energy, not of the gross energy.
    """
    if wanted.limit is not None:
        return read_limit(wanted.limit)
    tolerance = catalogue[pair.composition].tolerance if pair.composition == wanted.law else None
    if tolerance is not None and tolerance.absolute is not None:
        return even(0.0, tolerance.absolute, 0.6, f"the law's tolerance, {tolerance.words}", as_is=True)
    return house_limit(default)


def house_limit(default: Mapping[str, Any]) -> Limit:
    """A target's own limit."""
    act, floor = float(default["limit_act"]), float(default.get("limit_floor_kJ_per_100g", 0.0)) * 0.01
    return even(act, floor, float(default["limit_look"]) / act, str(default["reason"]))
