"""The order of energies: what cannot be, or can hardly be, is said with its reason and never clipped.

Gross energy is not less than digestible, digestible not less than metabolizable, metabolizable not less than net
energy; a digestibility is not over 100 %; methane over 15 % of gross energy is beyond what ruminants lose (6 to 7 %,
IPCC 2019 Table 10.12). A balance of nitrogen may be negative: AMEn above AME is possible and is left alone. A figure is
judged against the gross energy of its own route, so that a wrong bomb value does not accuse the composition.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from energy.catalogue.chains import up_to
from energy.catalogue.records import System
from energy.display import quantity_values
from energy.evaluate import IMPLAUSIBLE, MISSING, Blocks, evaluate
from energy.problems import Problem
from energy.quantities import dictionary
from energy.samples import Samples

RANK = {"GE": 0, "DE": 1, "ME": 2, "NE": 3}
MOST_METHANE = 0.15
#: measured energies by the rank of their stage, and what people call them
MEASURED = (
    ("gross_energy", 0, "gross energy"), ("digestible_energy", 1, "digestible energy"),
    ("metabolizable_energy", 2, "metabolizable energy"),
    ("apparent_metabolizable_energy", 2, "apparent metabolizable energy"),
    ("apparent_metabolizable_energy_n_corrected", 2, "nitrogen-corrected apparent metabolizable energy"),
    ("net_energy", 3, "net energy"),
)  # fmt: skip
#: columns of a trial beside the amounts, heats and excreta of one: given for nothing where no figure uses them
OF_A_TRIAL = ("nitrogen_retained", "marker_in_feed", "energy_digestibility")
#: (part, whole): the digestible part of a constituent is not more than the constituent
PARTS = (
    ("digestible_crude_protein", "crude_protein"), ("digestible_crude_fat", "crude_fat"),
    ("digestible_crude_fibre", "crude_fibre"), ("digestible_nitrogen_free_extract", "nitrogen_free_extract"),
    ("digestible_organic_matter", "organic_matter"), ("digestible_adf", "adf"), ("adf", "ndf"), ("lignin", "adf"),
)  # fmt: skip
#: (whole, losses, what must be left)
BALANCES = (
    ("gross_energy", ("faecal_energy",), "digestible_energy"),
    ("digestible_energy", ("urinary_energy", "methane_energy"), "metabolizable_energy"),
)
#: share of the whole that rounding and means of animals may leave open
BALANCE_ROOM = 0.01
WORDS = {"GE": "gross energy", "DE": "digestible energy", "ME": "metabolizable energy", "NE": "net energy"}
#: figures are compared with this much room for rounding
ROOM = 1 + 1e-9


@dataclass
class Findings:
    """What does not fit: per system (row of the blocks) texts by sample, and problems of the table itself."""

    figures: dict[int, np.ndarray] = field(default_factory=dict)
    problems: list[Problem] = field(default_factory=list)


def find(samples: Samples, systems: Sequence[System], blocks: Blocks, catalogue: Mapping[str, System]) -> Findings:
    """Figures and given values against the order of energies; marks the figures' status in `blocks`."""
    found = Findings()
    given = _given(samples)
    _check_given(samples, given, found)
    _unused(samples, systems, catalogue, found)
    computed = blocks.value[blocks.row(blocks.pairs[0].heats)]
    measured = given.get("gross_energy", computed)
    measured = np.where(np.isnan(measured), computed, measured)
    for i, system in enumerate(systems):
        texts = np.full(len(samples), "", dtype=object)
        value = blocks.value[i]
        gross = computed if _by_composition(system) else measured
        if system.stage == "digestibility":
            _say(texts, value > ROOM, value, 100, "impossible: a digestibility of {0:.1f} %, over 100 %")
        if system.stage == "CH4E":
            _share(texts, value, gross)
        if system.stage in ("DE", "ME", "NE"):
            _against(texts, value, system, gross, "gross energy")
            for name, rank, words in MEASURED[1:]:
                if name in given and rank < RANK[system.stage]:
                    _against(texts, value, system, given[name], f"the {words} given")
            for step, stage_value in _between(samples, system, catalogue):
                _against(texts, value, system, stage_value, f"its own {WORDS[step.stage]}")
        marked = texts != ""
        if marked.any():
            found.figures[i] = texts
            blocks.status[i] = np.where(
                marked & (blocks.status[i] < MISSING), np.maximum(blocks.status[i], IMPLAUSIBLE), blocks.status[i]
            )
    return found


def _given(samples: Samples) -> dict[str, np.ndarray]:
    """Measured energies on the working basis."""
    names = [name for name, _, _ in MEASURED] + ["methane_energy", "faecal_energy", "urinary_energy"]
    names += [name for pair in PARTS for name in pair]
    return {name: quantity_values(samples, name) for name in dict.fromkeys(names) if name in samples.columns}


def _between(samples: Samples, system: System, catalogue: Mapping[str, System]) -> list[tuple[System, np.ndarray]]:
    """The energies a chain passes on its way, each from its own steps."""
    found = []
    for count in range(1, len(system.steps)):
        step = catalogue[system.steps[count - 1]]
        if step.stage in ("DE", "ME") and RANK[step.stage] < RANK.get(system.stage, 0):
            part = up_to(system, count, catalogue)
            found.append((part, evaluate(samples, [part]).value[0]))
    return found


def _by_composition(system: System) -> bool:
    """True for a figure that no bomb value enters."""
    return system.route == "composition" and all(s.quantity != "gross_energy" for s in system.inputs.values())


def _unused(samples: Samples, systems: Sequence[System], catalogue: Mapping[str, System], found: Findings) -> None:
    """Columns of a trial that no figure computed here uses: told, with what would."""
    used = {s.quantity for system in systems for s in system.inputs.values()}
    species = set.intersection(*(set(system.targets) for system in systems)) if systems else set()
    species = {samples.target} if samples.target in species else species
    for name in samples.columns:
        known = dictionary()[name]
        of_a_trial = known.own_matter or known.dimension in ("mass", "heat") or name in OF_A_TRIAL
        if not of_a_trial or name in used or np.isnan(samples.columns[name]).all():
            continue
        others = [s.id for s in catalogue.values() if species & set(s.targets)
                  and any(x.quantity == name for x in s.inputs.values())]  # fmt: skip
        what = f"{known.title} is given, but no figure computed here for {_named(species)} uses it."
        cure = (f"With all systems (--systems all) it is used by {', '.join(others[:3])}, where the rest of the trial is given."
                if others else "The catalogue has no system for this species that does; nothing to mend.")  # fmt: skip
        found.problems.append(Problem(what, cure, samples.source, None, name, None, "warning"))


def _named(species: set[str]) -> str:
    return " or ".join(sorted(x.replace("_", " ") for x in species))


def _against(texts: np.ndarray, value: np.ndarray, system: System, above: np.ndarray, words: str) -> None:
    with np.errstate(invalid="ignore"):
        over = value > above * ROOM
    for k in np.flatnonzero(over):
        text = f"impossible: {WORDS[system.stage]} of {value[k]:.4g} MJ/kg is more than {words}, {above[k]:.4g} MJ/kg"
        texts[k] = f"{texts[k]}; {text}" if texts[k] else text


def _say(texts: np.ndarray, over: np.ndarray, value: np.ndarray, scale: float, words: str) -> None:
    for k in np.flatnonzero(over):
        texts[k] = words.format(value[k] * scale)


def _share(texts: np.ndarray, methane: np.ndarray, gross: np.ndarray) -> None:
    with np.errstate(invalid="ignore", divide="ignore"):
        share = methane / gross
        _say(texts, share > MOST_METHANE, share, 100, "implausible: methane takes {0:.1f} % of gross energy, over 15 %")


def _check_given(samples: Samples, given: Mapping[str, np.ndarray], found: Findings) -> None:
    """Problems of the values in the table, compared on one basis."""
    for lower, rank, words in MEASURED:
        for upper, other, upper_words in MEASURED:
            if other < rank and {lower, upper} <= given.keys():
                low, high = given[lower], given[upper]
                for k in _over(low, high):
                    what = (
                        f"impossible: {words} of {low[k]:.4g} MJ/kg is more than {upper_words} of {high[k]:.4g} MJ/kg."
                    )
                    _tell(samples, found, lower, k, what)
    _check_balance(samples, given, found)
    for part, whole in PARTS:
        if {part, whole} <= given.keys():
            for k in _over(given[part], given[whole]):
                a, b = (dictionary()[name].title for name in (part, whole))
                what = f"impossible: {a} of {100 * given[part][k]:.4g} % is more than {b} of {100 * given[whole][k]:.4g} %."
                _tell(samples, found, part, k, what)
    gross = given.get("gross_energy")
    if gross is None:
        return
    for name, most, words in (
        ("methane_energy", MOST_METHANE, "implausible: energy in methane"),
        ("faecal_energy", 1.0, "impossible: energy in faeces"),
        ("urinary_energy", 1.0, "impossible: energy in urine"),
    ):
        if name in given:
            for k in _over(given[name], most * gross):
                share = 100 * given[name][k] / gross[k]
                _tell(samples, found, name, k, f"{words} is {share:.1f} % of gross energy, over {100 * most:.0f} %.")


def _check_balance(samples: Samples, given: Mapping[str, np.ndarray], found: Findings) -> None:
    """Given energies must close: DE = GE - faeces, ME = DE - urine - methane; rounding of printed figures is borne."""
    for whole, losses, rest in BALANCES:
        if not {whole, *losses, rest} <= given.keys():
            continue
        left = given[whole] - sum(given[name] for name in losses)
        with np.errstate(invalid="ignore"):
            open_rows = np.abs(left - given[rest]) > BALANCE_ROOM * given[whole]
        for k in np.flatnonzero(open_rows).tolist():
            a, b = dictionary()[whole].title, dictionary()[rest].title
            what = (f"the balance does not close: {a} of {given[whole][k]:.4g} less {' and '.join(losses).replace('_', ' ')} "
                    f"leaves {left[k]:.4g}, but {b} is given as {given[rest][k]:.4g} MJ/kg.")  # fmt: skip
            _tell(samples, found, rest, k, what)


def _over(value: np.ndarray, most: np.ndarray) -> list[int]:
    with np.errstate(invalid="ignore"):
        return [int(k) for k in np.flatnonzero(value > most * ROOM)]


def _tell(samples: Samples, found: Findings, column: str, k: int, what: str) -> None:
    row = None if samples.rows is None else int(samples.rows[k])
    cure = "Check the values, their units and their bases: energy cannot be gained on the way. Nothing was clipped."
    found.problems.append(Problem(what, cure, samples.source, row, column, None, "warning", str(samples.ids[k])))
