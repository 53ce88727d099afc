"""Tables and charts for the screens, made from an assessment, so that a page holds no arithmetic."""

from __future__ import annotations

from io import BytesIO
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import TYPE_CHECKING, Any

import numpy as np

from energy.catalogue import reader
from energy.catalogue.records import SOURCE_STATUS, System
from energy.headers import Meaning
from energy.report import board as boards
from energy.report.tables import save

if TYPE_CHECKING:
    import altair as alt
    import pandas as pd

    from energy.assessment import Assessment

#: Okabe-Ito colours; each verdict also has its word and its own mark
COLOURS = {
    "concordant": "#0072B2",
    "biased": "#56B4E9",
    "inconclusive": "#E69F00",
    "discordant": "#D55E00",
    "single_route": "#7A7A7A",
    "not_computed": "#7A7A7A",
}
PART_COLOURS = {"measurement": "#D55E00", "heats": "#009E73", "convention": "#0072B2"}
UNITS = ("kJ/100 g", "kcal/100 g", "MJ/kg", "kcal/kg")


def laws(target: str) -> dict[str, str]:
    """id -> what people read, of the laws a target has."""
    found = reader.systems().values()
    return {s.id: f"{s.body}: {s.title}" for s in found if s.law and s.twin_of is None and target in s.targets
            and s.route == "composition"}  # fmt: skip


#: what needs a look comes first
ORDER = ("discordant", "inconclusive", "biased", "not_computed", "single_route", "concordant")


def board_table(a: Assessment) -> pd.DataFrame:
    """The board as shown: one row per sample, what needs a look first, headings in words with the unit."""
    found = boards.board(a)
    places = {boards.word(v): k for k, v in enumerate(ORDER)}
    found = found.iloc[np.argsort([places[w] for w in found["verdict"]], kind="stable")].reset_index(drop=True)
    unit = a.shown.unit
    table = found[["sample_id", "food_name", "verdict"]].rename(columns={"sample_id": "sample", "food_name": "name"})
    for name, title in (
        ("bomb", f"by bomb, {unit}"),
        ("composition", f"by composition, {unit}"),
        ("difference", "difference"),
        ("measurement_part", "measurement part"),
        ("heats_part", "heats part"),
        ("convention_part", "convention part"),
    ):
        table[title] = np.round(found[name].astype(float), 1 if a.shown.scale < 0.5 else 3)
    lacking = found["verdict"].isin([boards.word("single_route"), boards.word("not_computed")])
    table["probable cause, or what is missing"] = found["probable_cause"].where(~lacking, found["reason"])
    return table


def board_filter(table: pd.DataFrame, words: list[str], text: str) -> pd.DataFrame:
    """Rows whose verdict is among the words (all if none) and whose sample or name holds the text."""
    keep = np.ones(len(table), dtype=bool)
    if words:
        keep &= table["verdict"].isin(words).to_numpy()
    if text:
        both = table["sample"].astype(str) + " " + table["name"].fillna("").astype(str)
        keep &= both.str.contains(text, case=False, regex=False).to_numpy()
    return table[keep]


def verdict_styles(column: pd.Series[Any]) -> list[str]:
    """Text colour per verdict cell; the word and the mark stand beside it."""
    by_word = {boards.word(v): c for v, c in COLOURS.items()}
    return [f"color: {by_word.get(str(v), '#1c2733')}; font-weight: 600" for v in column]


def problem_rows(problems: list[Any]) -> pd.DataFrame:
    """Problems as a table of texts."""
    import pandas as pd

    columns = ["row", "sample", "column", "value", "what", "how to mend it"]
    return pd.DataFrame(
        [["" if p.row is None else str(p.row), p.sample_id or "", p.column or "", p.value or "", p.what, p.cure]
         for p in problems], columns=columns)  # fmt: skip


def missing_headers(meanings: list[Meaning]) -> list[Meaning]:
    """Headers that lack a unit or a basis and could be used if one were given."""
    return [m for m in meanings if m.quantity is not None and m.problem is not None]


def unit_choices(meaning: Meaning) -> list[str]:
    """Units with basis to choose from for one header."""
    from energy.quantities import dictionary

    entry = dictionary()[str(meaning.quantity)]
    units = {"energy": ["kJ/100 g", "kcal/100 g", "kJ/g", "MJ/kg", "kcal/kg", "cal/g"], "density": ["g/ml", "kg/l"],
             "number": ["1"], "fraction": ["%", "g/kg"]}.get(entry.dimension, ["g/100 g", "%", "g/kg", "mg/g"])  # fmt: skip
    if entry.basis != "stated":
        return units
    return [f"{u} {b}" for b in ("as is", "DM", "as analysed") for u in units]


def partition_table(a: Assessment, sample_id: str, route: str) -> pd.DataFrame:
    """One route's energy partition as texts."""
    import pandas as pd

    found = a.partition(sample_id)
    found = found[found["route"] == route]
    digits = 1 if a.shown.scale < 0.5 else 3
    return pd.DataFrame(
        {
            "step": found["step"].to_numpy(),
            a.shown.unit: [_figure(v, digits) for v in found["value"]],
            "u": [_figure(v, digits) for v in found["u"]],
            "system": found["system"].to_numpy(),
            "in words": found["words"].to_numpy(),
            "source": [f"{s}; {w}" for s, w in zip(found["source"], found["locator"], strict=True)],
            "known": found["source_status"].to_numpy(),
        }
    )


def _figure(value: float, digits: int) -> str:
    return "" if not np.isfinite(value) else f"{value:.{digits}f}"


def parts_table(a: Assessment, sample_id: str) -> pd.DataFrame:
    """Lines of the three parts as shown."""
    found = a.explain(sample_id)
    digits = 1 if a.shown.scale < 0.5 else 3
    table = found[["part", "component"]].copy()
    table["g per 100 g"] = [_figure(v, 1) for v in found["amount"]]
    for name, title in (("bomb", "bomb"), ("composition", "against"), ("contribution", "difference")):
        table[f"{title}, {a.shown.unit}"] = [_figure(v, digits) for v in found[name]]
    table["in words"] = found["words"]
    return table


def parts_sentence(a: Assessment, sample_id: str) -> str:
    """The three sums in one line, or why there are none."""
    found = a.explain(sample_id)
    if found.empty:
        return "One route only: there is no difference to split."
    sums = found.groupby("part", sort=False)["contribution"].sum()
    digits = 1 if a.shown.scale < 0.5 else 3
    parts = [f"{name} part {sums.get(name, 0.0):+.{digits}f}" for name in PART_COLOURS]
    return f"difference {sums.sum():+.{digits}f} {a.shown.unit} = " + ", ".join(parts)


def parts_chart(a: Assessment, sample_id: str) -> alt.Chart | None:
    """The three parts as bars from zero."""
    import altair as alt
    import pandas as pd

    found = a.explain(sample_id)
    if found.empty:
        return None
    sums = found.groupby("part", sort=False)["contribution"].sum()
    data = pd.DataFrame({"part": list(PART_COLOURS), "value": [float(sums.get(p, 0.0)) for p in PART_COLOURS]})
    scale = alt.Scale(domain=list(PART_COLOURS), range=list(PART_COLOURS.values()))
    base = alt.Chart(data).encode(
        y=alt.Y("part:N", sort=None, title=None, axis=alt.Axis(labelOverlap=False, labelFontSize=13))
    )
    bars = base.mark_bar(size=18).encode(
        x=alt.X("value:Q", title=f"bomb less composition, {a.shown.unit}"),
        color=alt.Color("part:N", scale=scale, legend=None),
        tooltip=["part", alt.Tooltip("value:Q", format="+.2f")],
    )
    zero = alt.Chart(pd.DataFrame({"x": [0.0]})).mark_rule(color="#1c2733").encode(x="x:Q")
    chart: alt.Chart = (bars + zero).properties(height=alt.Step(34))
    return chart


def file_bytes(a: Assessment, ending: str) -> bytes:
    """The evidence as bytes for a download."""
    with TemporaryDirectory() as folder:
        return save(a, Path(folder) / f"evidence{ending}")[0].read_bytes()


def workbook(a: Assessment) -> BytesIO:
    """The evidence workbook."""
    return BytesIO(file_bytes(a, ".xlsx"))


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
