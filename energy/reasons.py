"""What an assessment says in words: why a figure has its status, why a verdict, the six questions."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from energy.catalogue import tables
from energy.catalogue.records import SOURCE_STATUS, System
from energy.causes import Causes, find
from energy.compare import BIASED, CONCORDANT, DISCORDANT, INCONCLUSIVE, NOT_COMPUTED, SCREENING, SINGLE_ROUTE, VERDICTS
from energy.display import basis_factor, quantity_values, scale_of, visible
from energy.evaluate import (
    MISSING,
)
from energy.explain import component_amounts, is_amount, parts_by_component
from energy.figures import figure_reasons
from energy.quantities import DISPLAY_SCALE, dictionary
from energy.samples import Samples

if TYPE_CHECKING:
    import pandas as pd

    from energy.assessment import Assessment

#: the balances of a sample are said not to close below this p-value
FAILS = 0.05
STAGE_WORDS = {
    "GE": "gross energy", "DE": "digestible energy", "ME": "metabolizable energy", "NE": "net energy",
    "label": "label energy (not a metabolizable energy)", "digestibility": "digestibility", "UE": "energy in urine",
    "CH4E": "energy in methane", "other": "ratio or amount",
}  # fmt: skip


# ---- a comparison ---------------------------------------------------------------------------------------------


def pair_rows(a: Assessment, p: int) -> np.ndarray:
    """Rows a comparison speaks for: each sample is compared by the first bomb system that serves it."""
    pairs, b = a.blocks.pairs, a.blocks
    alike = [q for q, x in enumerate(pairs) if (x.stage, x.composition) == (pairs[p].stage, pairs[p].composition)]
    free = np.ones(len(a.samples), dtype=bool)
    for q in alike:
        serves = b.status[b.row(pairs[q].bomb)] < MISSING
        takes = free if q == alike[-1] else free & serves
        if q == p:
            return np.flatnonzero(takes)
        free = free & ~serves
    return np.flatnonzero(free)


def pair_reasons(a: Assessment, p: int, rows: np.ndarray) -> np.ndarray:
    """One sentence per verdict."""
    b, pair = a.blocks, a.blocks.pairs[p]
    u = np.hypot(b.u_measurement[p], b.u_model[p])
    with np.errstate(all="ignore"):
        share = 100 * b.measurement[p] / b.at_heats[p]
        interval = 100 * a.coverage_factor[p] * u / b.at_heats[p]
        limits = [100 * edge[p] / b.at_heats[p] for edge in a.edges]
    texts = np.full(len(rows), "", dtype=object)
    lacking: dict[str, np.ndarray] = {}
    for k, i in enumerate(rows):
        code = a.verdict[p, i]
        if code in (SINGLE_ROUTE, NOT_COMPUTED):
            ends = [pair.bomb, pair.composition]
            gone = [x for x in ends if b.status[b.row(x), i] >= MISSING]
            for x in gone:
                if x not in lacking:
                    lacking[x] = figure_reasons(a, b.row(x))
            texts[k] = "; ".join(f"{x}: {lacking[x][i]}" for x in gone)
            continue
        figures = f"measurement part {share[i]:+.1f} % +/- {interval[i]:.1f} %, limit {_limit_words(limits[0][i], limits[1][i])}"
        words = {
            CONCORDANT: "the interval lies inside the limits and holds zero",
            BIASED: "inside the limits, but zero is outside the interval",
            DISCORDANT: "the interval lies outside the limits altogether",
            INCONCLUSIVE: "the interval straddles a limit: the measurements do not decide"
            if np.isfinite(u[i]) else "no uncertainty is known",
            SCREENING: "the composition is a near-infrared prediction, whose constituents share one spectrum: a screening, no verdict",
        }  # fmt: skip
        texts[k] = f"{words[code]} ({figures})"
    return texts


#: a sample is looked at where its difference is this many u, or its balances fail at this p-value; 'no error' is surer
#: than any cause below that
WORTH_A_LOOK, PERHAPS_FAILS = 1.2, 0.2


def _limit_words(low: float, high: float) -> str:
    return f"+/- {high:.1f} %" if abs(low + high) < 0.005 * high else f"{low:.1f} to {high:+.1f} %"


def causes(a: Assessment) -> Causes:
    """What may explain each sample's difference in gross energy, for the samples that need it."""
    b, code = a.blocks, a.verdict[0]
    with np.errstate(invalid="ignore"):
        far = np.abs(b.measurement[0]) > WORTH_A_LOOK * np.hypot(b.u_measurement[0], b.u_model[0])
        rows = np.flatnonzero((code == DISCORDANT) | far | (a.balance.p_value < PERHAPS_FAILS))
    lower, upper = (edge[0] for edge in a.edges)
    heats = a.catalogue[b.pairs[0].heats]
    return find(a.samples, heats, a.target, rows, lower, upper, code == DISCORDANT)


def mass_sum(samples: Samples) -> np.ndarray:
    """(n,) sum of the components on the working basis, 1 when all is there; NaN unless carbohydrate was determined."""
    if "available_carbohydrate" not in samples.columns:
        return np.full(len(samples), np.nan)
    total = 1 - quantity_values(samples, "solids") + quantity_values(samples, "crude_protein")
    for name in ("crude_fat", "ash", "available_carbohydrate"):
        total = total + quantity_values(samples, name)
    for name in ("total_dietary_fibre", "organic_acids", "alcohol"):
        total = total + np.nan_to_num(quantity_values(samples, name))
    measured = ~np.isnan(samples.columns["available_carbohydrate"])
    return np.where(measured, total, np.nan)


# ---- one sample -----------------------------------------------------------------------------------------------


def main_pair(a: Assessment, row: int) -> int | None:
    """The comparison a sample's screen opens with: the first beyond GE that serves it, else GE."""
    for p in [*range(1, len(a.blocks.pairs)), 0]:
        if row in pair_rows(a, p) and a.verdict[p, row] not in (SINGLE_ROUTE, NOT_COMPUTED):
            return p
    return None


def shown_system(a: Assessment, identity: str) -> System:
    """The system itself, or its twin where that one's own sum stands in the unit shown."""
    system = a.catalogue[identity]
    if system.twin_id in a.blocks.systems and not visible(system, a.shown):
        return a.catalogue[str(system.twin_id)]
    return system


def factor_of(a: Assessment, row: int) -> float:
    """What a value on the working basis is multiplied by to stand on the basis shown, for one sample."""
    factor = basis_factor(a.samples, a.blocks.basis, a.shown.basis)
    return float(factor if isinstance(factor, float) else factor[row])


def explain(a: Assessment, sample_id: str) -> pd.DataFrame:
    """The parts of the main comparison line by line, in the unit shown; lines of a part add up to the part."""
    import pandas as pd

    columns = ["part", "component", "amount", "unit", "bomb", "composition", "contribution", "words"]
    row = a.index(sample_id)
    p = main_pair(a, row)
    if p is None:
        return pd.DataFrame(columns=columns)
    b, pair = a.blocks, a.blocks.pairs[p]
    composition = shown_system(a, pair.composition)
    k, k_composition = (scale_of(s, a.shown) * factor_of(a, row) for s in (a.catalogue[pair.bomb], composition))
    # the twin's own sum stands on the label in this unit; the change belongs to the convention
    change = b.value[b.row(composition.id), row] - b.value[b.row(pair.composition), row]
    measured, at_heats = b.at_heats[p, row] + b.measurement[p, row], b.at_heats[p, row]
    lines: list[dict[str, Any]] = [
        {"part": "measurement", "component": "gross energy", "amount": np.nan,
         "bomb": measured, "composition": at_heats, "contribution": b.measurement[p, row],
         "words": "what the bomb system makes of the measured GE, and of the GE computed from the components' heats"}
    ]  # fmt: skip
    values = {name: quantity_values(a.samples, name)[row] for name in (
        "crude_protein", "crude_fat", "carbohydrate_all", "alcohol", "total_dietary_fibre", "crude_fibre", "polyols",
        "organic_acids", "sugars", "starch")}  # fmt: skip
    feed = a.catalogue[pair.heats].nitrogen_factor == "feed"
    fibre = "crude_fibre" if feed else "total_dietary_fibre"
    amounts = component_amounts(values, 6.25 if feed else _own_factor(a.samples, row), fibre)
    if feed:
        given = [n for n in a.samples.columns if n not in values and is_amount(n)]
        amounts |= {n: float(np.nan_to_num(quantity_values(a.samples, n)[row])) for n in given}
    for line in parts_by_component(a.samples, row, replace(pair, composition=composition.id), a.catalogue, amounts):
        if line["component"] == "protein":
            line["amount"] *= amounts["own_factor"]
        what = (
            "general heats against the best heats for it"
            if line["part"] == "heats"
            else _convention_words(line, a.shown.family)
        )
        lines.append({**line, "words": what})
    for part in ("heats", "convention"):
        whole = getattr(b, part)[p, row] - (change if part == "convention" else 0.0)
        rest = whole - sum(x["contribution"] for x in lines if x["part"] == part)
        if abs(rest) > 1e-9:
            component, words = (
                ("not by component", "constants of the equations, water, and fibre where it sets a digestibility")
                if feed
                else ("columns that do not agree", "the table gives carbohydrate in two ways that differ")
            )
            lines.append({"part": part, "component": component, "amount": np.nan, "bomb": np.nan,
                          "composition": np.nan, "contribution": rest, "words": words})  # fmt: skip
    frame = pd.DataFrame(lines)
    other = np.where(frame["part"] == "convention", k_composition, k)
    shift = np.nan_to_num(frame["composition"].to_numpy(dtype=float)) * (other - k)
    frame["bomb"] = frame["bomb"] * k
    frame["composition"] = frame["composition"] * other
    frame["contribution"] = frame["contribution"] * k - shift
    frame["amount"] = 100 * frame["amount"] * factor_of(a, row)
    frame["unit"] = a.shown.unit
    return frame[columns]


def _convention_words(line: dict[str, Any], family: str | None) -> str:
    """What a gram is worth to each system, in the family of units shown: a kcal factor is not told in kJ."""
    unit, size = ("kcal/g", 4.184) if family == "cal" else ("kJ/g", 1.0)
    per_bomb, per_other = (line[x] / line["amount"] / size for x in ("bomb", "composition"))
    digits = 2 if family == "cal" else 1
    return f"{per_bomb:.{digits}f} {unit} by the bomb system, {per_other:.{digits}f} {unit} by the composition system"


def _own_factor(samples: Samples, row: int) -> float:
    groups = tables.food_groups()
    if "food_group" in samples.text:
        found = groups.get(str(samples.text["food_group"][row]), {}).get("nitrogen_factor")
        if found:
            return float(found)
    if "nitrogen_factor" in samples.columns and not np.isnan(samples.columns["nitrogen_factor"][row]):
        return float(samples.columns["nitrogen_factor"][row])
    return 6.25


def notes(a: Assessment, sample_id: str) -> list[str]:
    """Warnings that are no causes: food matrix, missing route, what was assumed."""
    row, found = a.index(sample_id), []
    found += matrix_notes(a.samples, row)
    for s in a.choice.systems:
        if a.leading[a.blocks.row(s.id), row]:
            text = figure_reasons(a, a.blocks.row(s.id))[row]
            if text:
                found.append(f"{s.id}: {text}")
    found += _elements(a, row)
    found += [str(p) for p in a.problems if p.sample_id == sample_id]
    return found


def _elements(a: Assessment, row: int) -> list[str]:
    """The gross energy by the elements beside the measured one: a check that shares nothing with the proximate lab."""
    b = a.blocks
    said = []
    for i, s in enumerate(a.choice.systems):
        measured, value = b.value[b.row(b.pairs[0].bomb), row], b.value[i, row]
        if s.kind == "elements" and np.isfinite(measured) and np.isfinite(value):
            share = 100 * (value - measured) / measured
            said.append(
                f"{s.id}: the elements give a gross energy {share:+.1f} % from the measured one ({s.note.split('. ')[0]})"
            )
    return said


def matrix_notes(samples: Samples, row: int) -> list[str]:
    """'Both routes overstate ME' where food structure is known to hide energy from the eater."""
    group = str(samples.text["food_group"][row]) if "food_group" in samples.text else ""
    form = str(samples.text["form"][row]) if "form" in samples.text else ""
    return [
        f"both routes overstate ME: {entry['words']} ({entry['source']})"
        for entry in tables.food_matrix()
        if group in entry["food_groups"] and form in entry["forms"]
    ]


def questions(a: Assessment, sample_id: str) -> list[tuple[str, str]]:
    """The six questions of a sample, each with its answer."""
    row, b = a.index(sample_id), a.blocks
    p = main_pair(a, row)
    cause, following = a.causes
    unit = a.shown.unit
    measured = b.row(b.pairs[0].bomb)
    ge = VERDICTS[a.verdict[0, row]]
    material = pair_reasons(a, 0, np.array([row]))[0]
    leads = [
        f"{STAGE_WORDS[s.stage]}: {_say(a, b.row(s.id), row)} by {s.id}"
        for s in sorted(
            (shown_system(a, x.id) for x in a.choice.systems if a.leading[b.row(x.id), row]),
            key=lambda s: list(STAGE_WORDS).index(s.stage),
        )
    ]
    if p is None:
        routes = "one route only: nothing to compare"
    else:
        sums = explain(a, sample_id).groupby("part")["contribution"].sum()
        parts = [sums.sum(), *(sums.get(x, 0.0) for x in ("measurement", "heats", "convention"))]
        routes = (
            f"{VERDICTS[a.verdict[p, row]]} in the measurement part. Bomb less composition is {parts[0]:+.2f} {unit}: "
            f"measurement {parts[1]:+.2f}, heats {parts[2]:+.2f}, convention {parts[3]:+.2f}"
        )
        if b.pairs[p].stage != "GE":  # at GE both sides are heats of combustion: there is no convention between them
            routes += f". The convention part is expected between {b.pairs[p].bomb} and {shown_system(a, b.pairs[p].composition).id}"
    probable = cause[row] or _no_cause(int(a.verdict[0, row]))
    probable += f". Next: {following[row]}" if following[row] else ""
    return [
        ("What does the bomb say?", _say(a, measured, row)),
        ("Do bomb and composition describe the same material?", f"{ge}: {material}{balance_words(a, row)}"),
        ("What does the eater get, and which figure leads?", "; ".join(leads) or "nothing can be computed"),
        ("Do the routes agree?", routes),
        ("If not, what is the probable cause, and what should be measured next?", probable),
        ("May the declared value stand?", _declared_words(a, row)),
    ]


def balance_words(a: Assessment, row: int) -> str:
    """What the mass and energy balance of a sample say, as the rest of a sentence; '' where there is no test."""
    b = a.balance
    p = b.p_value[row]
    if not np.isfinite(p):
        return ""
    sums = "" if np.isnan(b.mass[row]) else f"; the components sum to {100 * (1 + b.mass[row]):.1f} %"
    which = "the balances" if b.freedom[row] > 1 else "the energy balance"
    chance = f"p {p:.2g}" if p >= 0.001 else "p below 0.001"
    if p >= FAILS:
        return f"{sums}; {which} {'close' if b.freedom[row] > 1 else 'closes'} ({chance})"
    if b.freedom[row] == 1:
        return (f"{sums}; {which} does not close ({chance}); with carbohydrate by difference no single determination can be "
                "singled out: a determined carbohydrate would restore the second balance")  # fmt: skip
    told = []
    for name in b.suspects()[row][:3]:
        entry = dictionary()[name]
        size = b.columns[name]["size"][row] / DISPLAY_SCALE[entry.dimension]
        unit = "MJ/kg" if entry.dimension == "energy" else "g per 100 g"
        told.append(f"{entry.title} {abs(size):.3g} {unit} too {'high' if size > 0 else 'low'}")
    return (
        f"{sums}; {which} do not close ({chance}); one error alone that would close them: {' or '.join(told) or 'none'}"
    )


def _no_cause(code: int) -> str:
    if code == INCONCLUSIVE:
        return "no cause is named: the measurements do not decide"
    if code in (SINGLE_ROUTE, NOT_COMPUTED):
        return "no cause is named: there is nothing to compare. Next: the route that is missing"
    return "no cause is named: bomb and composition describe the same material"


def _say(a: Assessment, i: int, row: int) -> str:
    if not np.isfinite(a.blocks.value[i, row]):
        return f"nothing: {figure_reasons(a, i)[row]}"
    k = scale_of(a.choice.systems[i], a.shown) * factor_of(a, row)
    basis = a.shown.basis.replace("_", " ")
    u = a.blocks.u[i, row] * k
    return (
        f"{a.blocks.value[i, row] * k:.4g} {a.shown.unit} {basis} ({f'u {u:.2g}' if np.isfinite(u) else 'u not known'})"
    )


def _declared_words(a: Assessment, row: int) -> str:
    """The declared figures as they were declared: two figures, neither converted into the other."""
    declared = a.samples.memo.get("declared", {})
    said = [
        f"{declared[unit][row]:.4g} {unit}/100 g"
        for unit in ("kJ", "kcal")
        if unit in declared and np.isfinite(declared[unit][row])
    ]
    given = a.samples.columns.get("declared_energy")
    if not said and given is not None and np.isfinite(given[row]):  # declared in a unit that is neither
        said = [f"{given[row] * 100:.4g} kJ/100 g (converted from the unit declared)"]
    if not said:
        return "none is declared"
    told = f"declared {' and '.join(said)} as is"
    found = a.declared_of(str(a.samples.ids[row]))
    if found.empty:
        return f"{told}; no law is chosen that could judge it"
    for line in found.itertuples():
        told += f". {_judged_words(line)}"
    return told


def _judged_words(line: Any) -> str:
    """One law's word on a declared figure."""
    unit = line.judged_unit
    computed = line.computed_kj if unit == "kJ" else line.computed_kcal
    if line.verdict == "":
        return f"{line.law}: not judged, since the law's energy cannot be computed"
    if line.verdict == "no_rule":
        return f"{line.law}: {computed:.4g} {unit} computed; {line.rule}"
    limits = [f"{word} {x:.4g}" for word, x in (("at least", line.lower), ("at most", line.upper)) if np.isfinite(x)]
    p = line.probability_within
    chance = "over 0.999" if p > 0.999 else "under 0.001" if p < 0.001 else f"{p:.3f}"
    return (f"{line.law}: {computed:.4g} {unit} computed, {' and '.join(limits)} {unit} allowed ({line.rule}; {line.locator}, "
            f"{SOURCE_STATUS.get(line.source_status, line.source_status)}): {line.verdict}; the probability of lying within is {chance}. "
            f"{line.bomb_words[:1].upper()}{line.bomb_words[1:]}")  # fmt: skip
