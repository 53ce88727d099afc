"""Entries of the catalogue as screens show them: filtered, listed, typeset, with their facts, symbols and checks."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from energy.catalogue import reader
from energy.catalogue.records import SOURCE_STATUS, TARGETS, System
from energy.report.screen import TWIN_WORDS, in_words

if TYPE_CHECKING:
    import pandas as pd


def equation_filters(table: pd.DataFrame, column: str) -> list[str]:
    """What a column of the catalogue's table can be narrowed to."""
    return sorted({part for cell in table[column] for part in _cells(column, cell)})


def equation_filter(table: pd.DataFrame, wanted: dict[str, list[str]], text: str) -> pd.DataFrame:
    """Rows that hold one of the wanted values in each column (all if none is wanted) and the text anywhere."""
    keep = np.ones(len(table), dtype=bool)
    for column, values in wanted.items():
        if values:
            keep &= np.array([bool(set(values) & set(_cells(column, cell))) for cell in table[column]], dtype=bool)
    if text:
        joined = table["id"] + " " + table["title"] + " " + table["source"] + " " + table["body"].fillna("")
        keep &= joined.str.contains(text, case=False, regex=False).to_numpy()
    return table[keep]


def _cells(column: str, cell: object) -> list[str]:
    return str(cell).split(", ") if column == "target" else [str(cell)]


def equation_list(table: pd.DataFrame) -> pd.DataFrame:
    """The catalogue's table as shown."""
    shown = table[["title", "stage", "route", "target", "source_words", "source", "id"]].copy()
    shown["stage"] = [kind or stage for kind, stage in zip(table["kind"], table["stage"], strict=True)]
    shown["target"] = [_species(t.split(", ")) for t in shown["target"]]
    return shown.rename(columns={"target": "species or use", "source_words": "how it is known"})


def _species(targets: list[str]) -> str:
    """The species of an entry in words, short where they are many."""
    eaters = set(TARGETS) - {"none"}
    if eaters <= set(targets):
        return "every species and use"
    if eaters - {"human"} <= set(targets):
        return "every animal"
    return ", ".join(t.replace("_", " ") for t in targets)


#: signs of stages and kinds in typeset formulas
SIGNS = {
    "digestibility": "d_{E}", "organic_matter": "d_{OM}", "CH4E": r"\mathrm{CH_{4}E}", "other": "x",
    "ME/DE": r"\mathrm{ME}/\mathrm{DE}", "efficiency": "k", "elements": r"\mathrm{GE}",
    "AMEn": r"\mathrm{AME_{n}}", "TMEn": r"\mathrm{TME_{n}}", "NEL": r"\mathrm{NE_{L}}",
    "NEm": r"\mathrm{NE_{m}}", "NEg": r"\mathrm{NE_{g}}", "NME": r"\mathrm{NME}",
}  # fmt: skip


def latex_line(system: System) -> str:
    """The formula typeset, with its result's stage and unit; a chain as its steps, one line each."""
    if not system.steps:
        sign, formula = _sides(system)
        return f"{sign} = {formula}"
    lines = [_sides(reader.systems()[step]) for step in system.steps]
    body = r" \\[6pt] ".join(f"{sign} &= {formula}" for sign, formula in lines)
    return rf"\begin{{aligned}} {body} \end{{aligned}}"


def _sides(system: System) -> tuple[str, str]:
    """What a formula gives, and the formula with its unit."""
    unit = re.sub(r"([%&#_$])", r"\\\1", system.result_unit)
    if system.stage not in ("digestibility", "other") and system.result_basis not in ("", "none"):
        unit += {"any": "", "as_is": " as is", "dry_matter": " DM", "organic_matter": " OM"}[system.result_basis]
    sign = SIGNS.get(system.kind or system.stage, rf"\mathrm{{{system.kind or system.stage}}}")
    return sign, rf"{system.formula.latex}\quad\text{{[{unit}]}}"


def fact_table(system: System, domain: str) -> pd.DataFrame:
    """What is known of an entry, one fact per line."""
    import pandas as pd

    factor = system.nitrogen_factor
    rows = [
        ("formula as text", system.formula.text),
        ("steps", in_words(", then ".join(system.steps))),
        ("source", system.citation),
        ("place in it", system.locator),
        ("how it is known", SOURCE_STATUS[system.source_status]),
        ("law or code of", system.body if system.law else ""),
        ("domain", domain or "none printed"),
        ("nitrogen to protein", {"own": "the food's own factor", "feed": "crude protein, nitrogen times 6.25"}.get(
            str(factor), f"factor {factor}")),
        ("kJ and kcal", TWIN_WORDS[system.twin]),
        ("r squared", "" if system.r2 is None else f"{system.r2:g}"),
        ("the law's tolerance", "" if system.tolerance is None else
         f"{system.tolerance.words} ({SOURCE_STATUS[system.tolerance.source_status]}: {system.tolerance.locator})"),
        ("spread about it", "" if system.residual_sd is None else f"residual SD {system.residual_sd:g} {system.result_unit}"),
        ("methods it needs", "; ".join(f"{c.replace('_', ' ')}: {' or '.join(m).replace('_', ' ')}"
                                       for c, m in system.requires_methods.items())),
        ("not to be mixed with", in_words(", ".join(system.excludes))),
        ("note", system.note),
        ("id", system.id),
    ]  # fmt: skip
    return pd.DataFrame([row for row in rows if row[1]], columns=["fact", "value"])


def symbol_table(system: System) -> pd.DataFrame:
    """What the symbols of a formula mean."""
    import pandas as pd

    rows = []
    for s in system.symbols.values():
        if s.quantity:
            meaning = s.quantity.replace("_", " ")
        elif s.constant is not None:
            meaning = f"constant {s.constant:g}"
        else:
            meaning = (
                f"by food group: {s.row}, {str(s.column).replace('_', ' ')}"
                if s.slug is None
                else f"{s.row} of the table"
            )
        absent = {"missing_input": "needed", "zero_and_listed": "0 if absent, and said", "zero": "0 if absent"}[
            s.absent
        ]
        rows.append([s.name, meaning, s.unit, absent if s.quantity else "", s.absent_then or s.note])
    return pd.DataFrame(rows, columns=["symbol", "meaning", "unit", "if not given", "remark"])


def component_table(system: System) -> pd.DataFrame:
    """Factors of a factor table with their places."""
    import pandas as pd

    rows = [
        [c.name, c.quantity.replace("_", " "), ", ".join(c.subtract).replace("_", " "),
         "by food group" if c.factor is None else f"{c.factor:g} {system.result_unit}", c.locator,
         SOURCE_STATUS[c.source_status], c.note]
        for c in system.components
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=["component", "quantity", "less", "factor", "place", "known", "note"])


def check_table(system: System) -> pd.DataFrame:
    """Printed worked values of an entry."""
    import pandas as pd

    rows = [
        [c.name, f"{c.expected:g} {c.unit}", c.source, SOURCE_STATUS[c.source_status], c.note] for c in system.checks
    ]
    return pd.DataFrame(rows, columns=["worked value", "printed", "source", "known", "note"])
