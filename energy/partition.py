"""The energy partition of one sample: gross energy, each loss, and what is left, by both routes.

Feeds: GE -> DE -> ME -> NE, each figure by the first system of its route that serves the sample; between two figures
stands what is lost, taken apart into urine and methane where the system does so. A loss is taken within one chain: where
a figure was reached from another energy than the one that stands above it, its own is taken, and said. Net energies for
maintenance and gain are two uses of one metabolizable energy: both stand under it. Foods: GE -> ME or label energy.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from energy.catalogue.chains import up_to
from energy.catalogue.records import SOURCE_STATUS, System
from energy.display import quantity_values, scale_of
from energy.evaluate import MISSING, evaluate
from energy.figures import figure_reasons
from energy.reasons import STAGE_WORDS, factor_of, main_pair, pair_rows, shown_system

if TYPE_CHECKING:
    import pandas as pd

    from energy.assessment import Assessment

STAGES = ("DE", "ME", "NE")
#: what is lost between two stages
LOST = {
    ("GE", "DE"): "energy in faeces",
    ("GE", "ME"): "energy in faeces, urine and gas",
    ("GE", "NE"): "energy in faeces, urine, gas and heat increment",
    ("DE", "ME"): "energy in urine and gas",
    ("DE", "NE"): "energy in urine, gas and heat increment",
    ("ME", "NE"): "heat increment",
}
#: net energies by their use; of others, `STAGE_WORDS` speaks
KIND_WORDS = {
    "NEm": "net energy for maintenance",
    "NEg": "net energy for gain",
    "NEL": "net energy for lactation",
}
PARTS_OF_LOSS = (("UE", "urinary_energy", "energy in urine"), ("CH4E", "methane_energy", "energy in methane"))


def partition(a: Assessment, sample_id: str) -> pd.DataFrame:
    """Lines of both routes in the unit shown: route, step, stage, system, value, u, words, source."""
    return _of_foods(a, sample_id) if a.target in ("human", "none") else _of_feeds(a, sample_id)


def _of_feeds(a: Assessment, sample_id: str) -> pd.DataFrame:
    import pandas as pd

    row, b = a.index(sample_id), a.blocks
    lines: list[dict[str, Any]] = []
    for route, start in (("bomb", b.pairs[0].bomb), ("composition", b.pairs[0].heats)):
        first = _own_gross_energy(a, row) if route == "composition" else None
        if first is None:
            lines.append(_line(a, route, STAGE_WORDS["GE"], start, row, _figure(a, start, row)))
        else:  # the chain's own gross energy, so that a loss is a loss and not another heat of combustion
            blocks = evaluate(a.samples, [first])
            figure = {"value": float(blocks.value[0, row]), "u": float(blocks.u[0, row])}
            lines.append(_line(a, route, STAGE_WORDS["GE"], first.id, row, figure, first))
        above, stage, standing = lines[-1], "GE", {"GE": lines[-1]["value"]}
        for system, value, u in _figures(a, route, row):
            figure = {"value": value, "u": u}
            words = KIND_WORDS.get(system.kind, STAGE_WORDS[system.stage])
            line = _line(a, route, words, system.id, row, figure, system)
            if system.stage == stage:  # another use of the energy above, with no loss between the two
                lines.append(line)
                continue
            lines += _losses(a, row, above, line, (stage, system.stage), system, standing)
            lines.append(line)
            above, stage, standing[system.stage] = line, system.stage, value
    frame = pd.DataFrame(lines)
    frame[["value", "u"]] *= factor_of(a, row) / a.shown.scale
    return frame


def _own_gross_energy(a: Assessment, row: int) -> System | None:
    """The gross energy with which the first chain of the composition route that serves the sample begins."""
    for i, s in enumerate(a.choice.systems):
        if s.route == "composition" and s.stage in STAGES and a.blocks.status[i, row] < MISSING:
            first = a.catalogue[s.steps[0]] if s.steps else None
            return first if first is not None and first.stage == "GE" else None
    return None


def _figures(a: Assessment, route: str, row: int) -> list[tuple[System, float, float]]:
    """One figure per stage below GE and use of net energy: the first system that serves; else a stage its chain passes."""
    found: dict[str, tuple[System, float, float]] = {}
    uses: dict[str, tuple[System, float, float]] = {}
    ready = [s for i, s in enumerate(a.choice.systems)
             if s.route == route and s.stage in STAGES and a.blocks.status[i, row] < MISSING]  # fmt: skip
    for s in ready:
        i = a.blocks.row(s.id)
        figure = (s, float(a.blocks.value[i, row]), float(a.blocks.u[i, row]))
        (uses if s.stage == "NE" else found).setdefault(s.kind if s.stage == "NE" else s.stage, figure)
    for s in ready:
        for count in range(1, len(s.steps)):
            stage = a.catalogue[s.steps[count - 1]].stage
            if stage in STAGES and stage != "NE" and stage not in found:
                part = up_to(s, count, a.catalogue)
                blocks = evaluate(a.samples, [part])
                found[stage] = (part, float(blocks.value[0, row]), float(blocks.u[0, row]))
    return [*(found[stage] for stage in STAGES if stage in found), *uses.values()]


def _passed(a: Assessment, row: int, system: System) -> dict[str, float]:
    """Stage -> the energy a chain passes there on its way."""
    passed = {}
    for count in range(1, len(system.steps)):
        part = up_to(system, count, a.catalogue)
        if part.stage in STAGES:
            passed[part.stage] = float(evaluate(a.samples, [part]).value[0, row])
    return passed


def _losses(
    a: Assessment, row: int, above: dict[str, Any], below: dict[str, Any], stages: tuple[str, str], system: System,
    standing: dict[str, float],
) -> list[dict[str, Any]]:  # fmt: skip
    """What lies between two figures: urine and methane apart where the lower figure takes them off apart.

    standing : the figures drawn so far by stage; a chain that passes another energy there is measured by its own.
    """
    passed = _passed(a, row, system)
    last = next((stage for stage in reversed(passed) if stage in standing), None)
    if last is not None and not np.isclose(passed[last], standing[last], rtol=1e-9):
        own = last == stages[0]
        value = passed[last] - below["value"] if own else np.nan
        line = _line(a, above["route"], LOST[stages], system.id, row, {"value": value, "u": np.nan}, system)
        words = f"{STAGE_WORDS[last]} by this chain is not the one that stands above, by {above['system']}"
        return [{**line, "stage": "loss", "words": f"{words}: taken off its own" if own else f"{words}: not drawn"}]
    whole = above["value"] - below["value"]
    apart = []
    if stages == ("DE", "ME"):
        for stage, quantity, words in PARTS_OF_LOSS:
            step = next((x for x in system.steps if a.catalogue[x].stage == stage), None)
            if step is not None:
                value = float(evaluate(a.samples, [a.catalogue[step]]).value[0, row])
                apart.append(
                    _line(a, above["route"], words, step, row, {"value": value, "u": np.nan}, a.catalogue[step])
                )
            elif any(s.quantity == quantity for s in system.inputs.values()):
                value = float(quantity_values(a.samples, quantity)[row])
                measured = {"value": value, "u": np.nan}
                apart.append({**_line(a, above["route"], words, system.id, row, measured, system), "words": "measured"})
    if apart and np.isclose(sum(x["value"] for x in apart), whole, rtol=1e-6, atol=1e-9):
        return [{**x, "stage": "loss"} for x in apart]
    loss = {"value": whole, "u": np.nan}
    line = _line(a, above["route"], LOST[stages], system.id, row, loss, system)
    return [{**line, "stage": "loss", "words": f"what {stages[0]} and {stages[1]} differ by"}]


def _of_foods(a: Assessment, sample_id: str) -> pd.DataFrame:
    import pandas as pd

    row, b = a.index(sample_id), a.blocks
    p = main_pair(a, row)
    pairs = [q for q in range(len(b.pairs)) if row in pair_rows(a, q)]
    pair = b.pairs[p or pairs[min(1, len(pairs) - 1)]]
    lines = []
    for route, start, end in (
        ("bomb", b.pairs[0].bomb, pair.bomb),
        ("composition", b.pairs[0].heats, shown_system(a, pair.composition).id),
    ):
        top, bottom = (_figure(a, x, row) for x in (start, end))
        lines.append(_line(a, route, "gross energy", start, row, top))
        if end in (start, b.pairs[0].heats):
            continue
        loss = {"value": top["value"] - bottom["value"], "u": np.nan}
        stage = a.catalogue[end].stage
        words = "urine only: no faecal loss is taken off" if stage == "label" else "not digested, and lost in urine"
        lines.append({**_line(a, route, "not used by the eater", end, row, loss), "stage": "loss", "words": words})
        lines.append(_line(a, route, STAGE_WORDS[stage], end, row, bottom))
    frame = pd.DataFrame(lines)
    for line_system in frame["system"].unique():
        mask = frame["system"] == line_system
        frame.loc[mask, ["value", "u"]] *= scale_of(a.catalogue[str(line_system)], a.shown) * factor_of(a, row)
    return frame


def _figure(a: Assessment, system: str, row: int) -> dict[str, float]:
    i = a.blocks.row(system)
    return {"value": float(a.blocks.value[i, row]), "u": float(a.blocks.u[i, row])}


def _line(
    a: Assessment,
    route: str,
    step: str,
    identity: str,
    row: int,
    figure: dict[str, float],
    system: System | None = None,
) -> dict[str, Any]:
    s = system or a.catalogue[identity]
    known = np.isfinite(figure["value"]) or s.id not in a.blocks.systems
    why = "" if known else str(figure_reasons(a, a.blocks.row(s.id))[row])
    return {
        "route": route, "step": step, "stage": s.stage, "system": s.id, **figure, "unit": a.shown.unit,
        "words": why or s.title, "source": s.citation, "locator": s.locator,
        "source_status": SOURCE_STATUS[s.source_status],
    }  # fmt: skip
