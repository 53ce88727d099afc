"""Tables made from the blocks of an assessment when somebody asks for them."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from energy import causes, figures, reasons, scores
from energy.catalogue.records import SOURCE_STATUS, System
from energy.compare import VERDICTS
from energy.declare import PER_WORDS, Declared, outcome_words, proposals, rule_words, warnings_of
from energy.display import basis_factor, scale_of, visible
from energy.evaluate import MISSING, STATUS
from energy.gather import UNIT_SHOWN
from energy.handling import determination
from energy.problems import WrongUse
from energy.quantities import DISPLAY_SCALE, dictionary
from energy.samples import BASES, U_SOURCES

if TYPE_CHECKING:
    import pandas as pd

    from energy.assessment import Assessment

RESULT_COLUMNS = (
    "sample_id", "target", "stage", "route", "system", "value", "unit", "basis", "u", "leading", "status", "reason",
    "source", "locator", "source_status",
)  # fmt: skip
VERDICT_COLUMNS = (
    "sample_id", "target", "stage", "bomb_system", "composition_system", "bomb", "composition", "difference",
    "difference_percent", "measurement_part", "heats_part", "convention_part", "u_difference", "limit_lower",
    "limit_upper", "coverage", "verdict", "reason", "probable_cause", "next_measurement", "unit", "basis",
    "food_name", "u_measurement_part", "zeta", "en",
)  # fmt: skip
DECLARED_COLUMNS = (
    "sample_id", "law", "declared_kj", "declared_kcal", "computed_kj", "computed_kcal", "rounded_kj", "rounded_kcal",
    "lower", "upper", "probability_within", "verdict", "locator",
    "judged_unit", "per", "u", "label_kj", "label_kcal", "spread_low", "spread_high", "decision_rule", "speaks_of", "rule",
    "source_status", "rounding_rule", "rounding_locator", "rounding_status", "bomb_words", "proposal", "warning",
)  # fmt: skip
#: the columns every table of balances has; reconciled values follow, one triple per measured column
BALANCE_COLUMNS = (
    "sample_id", "mass_sum", "heat_from_components", "residual_energy", "chi_square", "p_value", "freedom", "suspects",
)  # fmt: skip
EQUATION_COLUMNS = (
    "id", "title", "target", "stage", "kind", "route", "steps", "body", "law", "formula", "latex", "symbols", "result", "basis",
    "nitrogen_factor", "twin", "methods", "domain", "residual_sd", "r2", "source", "locator", "source_status", "source_words", "note", "file",
)  # fmt: skip


def results(
    a: Assessment,
    target: str | None = None,
    stage: str | None = None,
    system: str | None = None,
    sample_id: str | None = None,
) -> pd.DataFrame:
    """The tidy table; narrowed before it is made."""
    import pandas as pd

    rows = slice(None) if sample_id is None else slice(a.index(sample_id), a.index(sample_id) + 1)
    ids = a.samples.ids[rows]
    factor = basis_factor(a.samples, a.blocks.basis, a.shown.basis)
    factor = factor if isinstance(factor, float) else factor[rows]
    off = np.isnan(factor) & np.ones(len(ids), dtype=bool)  # rows that cannot be brought to the basis shown
    pieces: dict[str, list[Any]] = {name: [] for name in RESULT_COLUMNS}
    count = 0
    for i, s in enumerate(a.choice.systems):
        if stage not in (None, s.stage) or system not in (None, s.id) or target not in (None, a.target):
            continue
        if not visible(s, a.shown):
            continue
        count += 1
        own = own_unit(s)
        # an amount per mass stands on the basis shown, a ratio or a digestibility on none
        based = not own or s.result_basis != "any"
        k = (1.0 / s.result_scale if own else scale_of(s, a.shown)) * (factor if based else 1.0)
        for name, values in (
            ("value", a.blocks.value[i, rows] * k),
            ("u", a.blocks.u[i, rows] * k),
            ("leading", leading_shown(a, i)[rows]),
            (
                "status",
                np.array(STATUS, dtype=object)[
                    np.where(off & based, np.maximum(a.blocks.status[i, rows], MISSING), a.blocks.status[i, rows])
                ],
            ),
            (
                "reason",
                np.where(
                    off & based & (a.blocks.status[i, rows] < MISSING),
                    f"needs dry matter to be shown per {a.shown.basis.replace('_', ' ')}",
                    figures.figure_reasons(a, i)[rows],
                ),
            ),
        ):
            pieces[name].append(values)
        for name, text in (
            ("stage", s.stage), ("route", s.route), ("system", s.id), ("source", s.citation), ("locator", s.locator),
            ("source_status", s.source_status), ("unit", own or a.shown.unit), ("basis", a.shown.basis if based else ""),
        ):  # fmt: skip
            pieces[name].append(text)
    table: dict[str, Any] = {}
    n = len(ids)
    for name in RESULT_COLUMNS:
        if name == "sample_id":
            table[name] = np.tile(ids, count)
        elif name == "target":
            table[name] = a.target
        elif name in ("stage", "route", "system", "unit", "basis", "source", "locator", "source_status"):
            kinds = list(dict.fromkeys(pieces[name]))
            codes = np.repeat([kinds.index(x) for x in pieces[name]], n)
            table[name] = pd.Categorical(np.array(kinds, dtype=object)[codes], categories=kinds)
        else:
            table[name] = np.concatenate(pieces[name]) if pieces[name] else np.empty(0)
    frame = pd.DataFrame(table, columns=list(RESULT_COLUMNS), index=range(n * count))
    if n * count:
        order = np.arange(n * count).reshape(count, n).T.ravel()
        frame = frame.iloc[order].reset_index(drop=True)
    return frame


def own_unit(s: System) -> str:
    """The unit of a figure that is no energy per mass (a digestibility, a ratio, an amount); '' for energies."""
    if s.stage not in ("digestibility", "other") or s.energy_family:
        return ""
    return s.result_unit


def leading_shown(a: Assessment, i: int) -> np.ndarray:
    """(n,) bool: does system i lead, when a twin stands in for a leading system that is not shown?"""
    s = a.choice.systems[i]
    if s.twin_of is not None and s.twin_of in a.blocks.systems and a.shown.family == s.energy_family:
        return np.asarray(a.leading[a.blocks.row(s.twin_of)])
    return np.asarray(a.leading[i])


def verdicts(a: Assessment) -> pd.DataFrame:
    """One row per sample and comparison, sample by sample; rows no system serves are left out if others do."""
    import pandas as pd

    factor = basis_factor(a.samples, a.blocks.basis, a.shown.basis)
    frames = []
    for p in range(len(a.blocks.pairs)):
        rows = reasons.pair_rows(a, p)
        if not len(rows):
            continue
        frames.append(
            _pair_table(a, p, rows, factor if isinstance(factor, float) else factor[rows]).assign(_p=p, _i=rows)
        )
    if not frames:
        return pd.DataFrame(columns=list(VERDICT_COLUMNS))
    table = pd.concat(frames, ignore_index=True).sort_values(["_i", "_p"], kind="stable", ignore_index=True)
    return table[list(VERDICT_COLUMNS)]


def _pair_table(a: Assessment, p: int, rows: np.ndarray, factor: np.ndarray | float) -> pd.DataFrame:
    import pandas as pd

    b, pair = a.blocks, a.blocks.pairs[p]
    bomb, composition = a.catalogue[pair.bomb], a.catalogue[pair.composition]
    shown_composition = composition
    value = b.value[b.row(pair.composition), rows]
    difference, convention = b.difference[p, rows], b.convention[p, rows]
    if composition.twin_id in b.systems and not visible(composition, a.shown):
        # the twin's own sum stands on the label in this unit; the change belongs to the convention
        shown_composition = a.catalogue[str(composition.twin_id)]
        other = b.value[b.row(shown_composition.id), rows]
        difference, convention = difference - (other - value), convention - (other - value)
        value = other
    k = scale_of(bomb, a.shown) * factor
    law = scale_of(shown_composition, a.shown) * factor
    shown_value = value * law
    # a law's own kilocalorie moves the composition figure by 0.1 %: that too is convention
    shift = shown_value - value * k
    codes = a.verdict[p, rows]
    cause, following = a.causes
    told = reasons.pair_reasons(a, p, rows)
    n = len(rows)
    u = np.hypot(b.u_measurement[p, rows], b.u_model[p, rows])
    return pd.DataFrame(
        {
            "sample_id": a.samples.ids[rows],
            "target": a.target,
            "stage": pair.stage,
            "bomb_system": pair.bomb,
            "composition_system": shown_composition.id,
            "bomb": b.value[b.row(pair.bomb), rows] * k,
            "composition": shown_value,
            "difference": difference * k - shift,
            "difference_percent": 100 * (difference * k - shift) / shown_value,
            "measurement_part": b.measurement[p, rows] * k,
            "heats_part": b.heats[p, rows] * k,
            "convention_part": convention * k - shift,
            "u_difference": b.u_difference[p, rows] * k,
            "limit_lower": a.edges[0][p, rows] * k,
            "limit_upper": a.edges[1][p, rows] * k,
            "coverage": a.coverage_factor[p, rows],
            "verdict": np.array(VERDICTS, dtype=object)[codes],
            "reason": told,
            "probable_cause": cause[rows],
            "next_measurement": following[rows],
            "unit": a.shown.unit,
            "basis": a.shown.basis,
            "food_name": a.samples.text.get("name", np.full(len(a.samples), "", dtype=object))[rows],
            "u_measurement_part": u * k,
            # u is that of the part itself, so that what both routes share has cancelled; En at k = 2
            "zeta": scores.zeta_of_difference(b.measurement[p, rows], u),
            "en": scores.zeta_of_difference(b.measurement[p, rows], 2 * u),
        },
        index=range(n),
    )


def declared(found: Sequence[Declared], ids: np.ndarray) -> pd.DataFrame:
    """One row per sample and law: declared against computed, rounded, limits, probability, verdict, and every source.

    Energies per `per`; lower, upper, u, spread in `judged_unit`. label_kj, label_kcal : from the grams as printed.
    rounded_kj, rounded_kcal : as the law rounds them, NaN where no rule was found. proposal : the figures to print with the
    sum that leads to them. bomb_words : whether a bomb figure may stand on the label.
    """
    import pandas as pd

    frames = [_declared_of(d, ids) for d in found]
    if not frames:
        return pd.DataFrame(columns=list(DECLARED_COLUMNS))
    table = pd.concat([f.assign(_i=np.arange(len(f)), _law=k) for k, f in enumerate(frames)], ignore_index=True)
    return table.sort_values(["_i", "_law"], kind="stable", ignore_index=True)[list(DECLARED_COLUMNS)]


def _declared_of(d: Declared, ids: np.ndarray) -> pd.DataFrame:
    import pandas as pd

    n = len(ids)
    nothing = np.full(n, np.nan)

    def judged(parts: dict[str, np.ndarray]) -> np.ndarray:
        return np.where(d.judged == "kJ", parts.get("kJ", nothing), parts.get("kcal", nothing)).astype(float)

    first = d.energy.leading
    rules = [d.rounding_rule(first, i) for i in range(n)]
    return pd.DataFrame(
        {
            "sample_id": ids, "law": d.law.id,
            "declared_kj": d.declared["kJ"], "declared_kcal": d.declared["kcal"],
            "computed_kj": d.computed.get("kJ", nothing), "computed_kcal": d.computed.get("kcal", nothing),
            "rounded_kj": d.printed.get("kJ", nothing), "rounded_kcal": d.printed.get("kcal", nothing),
            "lower": d.lower, "upper": d.upper, "probability_within": d.probability, "verdict": outcome_words(d),
            "locator": d.rule.locator, "judged_unit": d.judged, "per": PER_WORDS[d.per], "u": judged(d.u),
            "label_kj": d.from_label.get("kJ", nothing), "label_kcal": d.from_label.get("kcal", nothing),
            "spread_low": judged(d.spread_low), "spread_high": judged(d.spread_high), "decision_rule": d.decision_words,
            "speaks_of": d.speaks_of, "rule": rule_words(d), "source_status": d.rule.source_status,
            "rounding_rule": [r.words if r else "no rule was found" for r in rules],
            "rounding_locator": [f"{r.source}, {r.locator}" if r else "" for r in rules],
            "rounding_status": [r.source_status if r else "" for r in rules],
            "bomb_words": d.bomb, "proposal": proposals(d), "warning": warnings_of(d),
        }
    )  # fmt: skip


def balances(a: Assessment) -> pd.DataFrame:
    """Both balances per sample, the global test, and each measured column reconciled (in its own unit of `inputs`).

    mass_sum : sum of the components (1 when all is there), NaN unless carbohydrate was determined. residual_energy :
    MJ/kg on the working basis. suspects : measurements that cannot be told apart as the culprit, likeliest first; empty
    where the global test passes, or where carbohydrate was found by difference.
    """
    import pandas as pd

    b, i = a.balance, a.blocks.row(a.blocks.pairs[0].heats)
    failed = b.p_value < reasons.FAILS
    table: dict[str, Any] = {
        "sample_id": a.samples.ids,
        "mass_sum": reasons.mass_sum(a.samples),
        "heat_from_components": a.blocks.value[i],
        "residual_energy": a.blocks.measurement[0],
        "chi_square": b.chi_square,
        "p_value": b.p_value,
        "freedom": b.freedom,
        "suspects": [", ".join(names) if bad else "" for names, bad in zip(b.suspects(), failed, strict=True)],
    }
    for name, kept in b.columns.items():
        scale = 1 / DISPLAY_SCALE[dictionary()[name].dimension]
        table[f"reconciled_{name}"] = kept["value"] * scale
        table[f"u_reconciled_{name}"] = kept["u"] * scale
        table[f"size_{name}"] = np.where(failed, kept["size"], np.nan) * scale
    return pd.DataFrame(table)


def sources(a: Assessment) -> pd.DataFrame:
    """Publications behind the figures, once each."""
    import pandas as pd

    rows = [
        {"system": s.id, "title": s.title, "formula": s.formula.text, "unit": s.result_unit, "source": s.citation,
         "locator": s.locator, "source_status": s.source_status, "words": SOURCE_STATUS[s.source_status],
         "note": s.note}
        for s in a.choice.systems
    ]  # fmt: skip
    return pd.DataFrame(rows)


INPUT_COLUMNS = ("sample_id", "quantity", "value", "unit", "basis", "u", "u_from", "replicates", "below_limit")


def inputs(a: Assessment, sample_id: str | None = None) -> pd.DataFrame:
    """What was given, one row per value, in g/100 g, %, MJ/kg or g/ml on the basis it was stated on."""
    import pandas as pd

    s = a.samples
    rows = np.arange(len(s)) if sample_id is None else np.array([a.index(sample_id)])
    pieces = []
    for name, values in s.columns.items():
        here = rows[~np.isnan(values[rows])]
        entry = dictionary()[name]
        scale = 1 / DISPLAY_SCALE[entry.dimension]
        unit = {"mass_fraction": "g/100 g", "fraction": "%", **UNIT_SHOWN}.get(entry.dimension, "1")
        basis = s.basis.get(name)
        pieces.append(
            pd.DataFrame(
                {
                    "sample_id": s.ids[here],
                    "quantity": entry.title,
                    "value": values[here] * scale,
                    "unit": unit,
                    "basis": entry.basis if basis is None else np.array(BASES, dtype=object)[basis[here]],
                    "u": s.u[name][here] * scale,
                    "u_from": np.array(U_SOURCES, dtype=object)[s.u_source[name][here]],
                    "replicates": s.replicates.get(name, np.ones(len(s), dtype=int))[here],
                    "below_limit": s.censored.get(name, np.zeros(len(s), dtype=bool))[here],
                    "_row": here,
                }
            )
        )
    if not pieces:
        return pd.DataFrame(columns=list(INPUT_COLUMNS))
    table = pd.concat(pieces, ignore_index=True).sort_values("_row", kind="stable", ignore_index=True)
    return table[list(INPUT_COLUMNS)]


def wide(a: Assessment, quantity: str) -> pd.DataFrame:
    """samples x systems, a view of the block."""
    import pandas as pd

    if quantity not in ("value", "u", "status"):
        raise WrongUse(f"'{quantity}' is not a block.", "Use value, u or status.")
    block = getattr(a.blocks, quantity)
    index = pd.Index(a.samples.ids, name="sample_id")
    return pd.DataFrame(block.T, index=index, columns=list(a.blocks.systems), copy=False)


def equation_row(s: System) -> dict[str, Any]:
    """One line of the catalogue's table."""
    domain = "; ".join(b.words for b in s.domain)
    return {
        "id": s.id,
        "title": s.title,
        "target": ", ".join(s.targets),
        "stage": s.stage,
        "kind": s.kind,
        "route": s.route,
        "steps": ", ".join(s.steps),
        "body": s.body,
        "law": s.law,
        "formula": s.formula.text,
        "latex": s.formula.latex,
        "symbols": "; ".join(f"{n} = {x.quantity} [{x.unit}]" for n, x in s.symbols.items() if x.quantity),
        "result": s.result_unit,
        "basis": s.result_basis,
        "nitrogen_factor": str(s.nitrogen_factor),
        "twin": s.twin,
        "methods": "; ".join(f"{column} {' or '.join(m)}" for column, m in s.requires_methods.items()),
        "domain": "; ".join(x for x in (domain, s.domain_words) if x),
        "residual_sd": s.residual_sd,
        "r2": s.r2,
        "source": s.citation,
        "locator": s.locator,
        "source_status": s.source_status,
        "source_words": SOURCE_STATUS[s.source_status],
        "note": s.note,
        "file": s.file,
    }


CAUSE_COLUMNS = (
    "cause", "words", "share", "size", "measured", "computed", "difference_left", "closes", "next_measurement", "unit", "basis",
)  # fmt: skip


def probable_causes(a: Assessment, sample_id: str) -> pd.DataFrame:
    """The causes that explain a sample's difference in gross energy, likeliest first, with 'no error' among them.

    share : of probability, among what was tried. size : that closes, kg/kg or MJ/kg in the column's own basis, 1 where it is
    known. measured, computed : gross energy corrected for it. Empty for a sample that needs no explanation.
    """
    import pandas as pd

    c, row = a.tried, a.index(sample_id)
    if row not in c.place:
        return pd.DataFrame(columns=list(CAUSE_COLUMNS))
    k = c.place[row]
    scale = scale_of(a.catalogue[a.blocks.pairs[0].bomb], a.shown) * reasons.factor_of(a, row)
    lines = []
    for j in np.argsort(-c.weight[:, k], kind="stable"):
        if c.weight[j, k] < 0.001:
            break
        lines.append({
            "cause": causes.title(c, j), "words": causes.sentence(c, j, k), "share": c.weight[j, k], "size": c.size[j, k],
            "measured": c.measured[j, k] * scale, "computed": c.computed[j, k] * scale,
            "difference_left": (c.measured[j, k] - c.computed[j, k]) * scale, "closes": bool(c.closes[j, k]),
            "next_measurement": determination(c.effects[j].repeats)["words"],
        })  # fmt: skip
    none = {"cause": "no error", "words": "scatter of the determinations alone", "share": c.none[k], "size": np.nan,
            "measured": c.m.measured[k] * scale, "computed": c.m.computed[k] * scale,
            "difference_left": c.m.energy[k] * scale, "closes": False, "next_measurement": ""}  # fmt: skip
    frame = pd.DataFrame([*lines, none]).sort_values("share", ascending=False, kind="stable", ignore_index=True)
    return frame.assign(unit=a.shown.unit, basis=a.shown.basis)[list(CAUSE_COLUMNS)]
