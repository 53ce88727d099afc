"""Tables and sentences for the screens, made from an assessment, so that a page holds no arithmetic."""

from __future__ import annotations

import re
from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import TYPE_CHECKING, Any

import numpy as np

from energy.catalogue import reader, tables
from energy.catalogue.records import SOURCE_STATUS, TARGETS
from energy.choice import LED
from energy.figures import ON
from energy.headers import Meaning
from energy.quantities import dictionary
from energy.reasons import STAGE_WORDS
from energy.report import board as boards
from energy.report.tables import save

if TYPE_CHECKING:
    import pandas as pd

    from energy.assessment import Assessment

#: a cause is listed on the screen from this weight
CAUSE_SHOWN = 0.01
#: a difference falls into these, in this order
PARTS = ("measurement", "heats", "convention")
UNITS = ("kJ/100 g", "kcal/100 g", "MJ/kg", "kcal/kg", "kJ/100 g DM", "kcal/100 g DM", "MJ/kg DM")
BASIS_CHOICES = {"": "each header says its own", "as_is": "as is (as received, as sold)", "dry_matter": "dry matter",
                 "as_analysed": "as analysed (the powder)"}  # fmt: skip
DECIMAL_CHOICES = {"": "found out from the table", "point": "point: 1.5", "comma": "comma: 1,5"}
STATUS_WORDS = {
    "ok": "", "assumed": "with assumptions", "outside_domain": "outside its domain", "method_mismatch": "needs another "
    "method", "implausible": "cannot be, or hardly", "missing_input": "something is not given", "missing_factor": "no factor for this food", "not_admissible":
    "not allowed here", "problem": "a value could not be used",
}  # fmt: skip
U_WORDS = {"none": "not known", "given": "given", "replicates": "the replicates", "default": "the dictionary's default"}
TWIN_WORDS = {
    "none": "the source prints one unit only", "factors": "kJ and kcal each by factors of their own: two sums",
    "conversion_4.184": "by conversion, 1 kcal = 4.184 kJ", "conversion_4.18": "by conversion, 1 kcal = 4.18 kJ",
}  # fmt: skip
TARGET_WORDS = {"human": "people", "none": "nobody: check of gross energy only"}


def laws(target: str) -> dict[str, str]:
    """id -> what people read, of the laws a target has."""
    found = reader.systems().values()
    return {s.id: s.title for s in found if s.law and s.twin_of is None and target in s.targets
            and s.route == "composition"}  # fmt: skip


def targets() -> dict[str, str]:
    """id -> what people read, of the species and uses this version has systems for."""
    return {t: TARGET_WORDS.get(t, t.replace("_", " ")) for t in TARGETS if t in tables.targets()}


def units(target: str) -> list[str]:
    """Units to choose from, those of the target's users first."""
    return list(dict.fromkeys([*tables.targets()[target]["units"], *UNITS]))


def first_law(target: str) -> str | None:
    """The law a target opens with: the European Union's for people, none for feeds (their own systems lead)."""
    return "eu_1169_2011" if target == "human" else None


def systems_reason(target: str) -> str:
    """Why the target's systems are what they are."""
    return _sentence(str(tables.targets()[target]["systems_reason"]))


def systems_to_choose(target: str, route: str) -> dict[str, str]:
    """id -> title of the systems of a route that may stand in for the target's own; '' for those."""
    found = {s.id: s.title for s in reader.systems().values() if target in s.targets and s.route == route
             and s.stage in LED and s.stage != "GE" and s.twin_of is None}  # fmt: skip
    if route == "bomb":  # a comparison needs a system that takes the measured gross energy
        takes = {
            s.id for s in reader.systems().values() if any(x.quantity == "gross_energy" for x in s.inputs.values())
        }
        found = {i: t for i, t in found.items() if i in takes}
    return {"": "the target's own", **dict(sorted(found.items(), key=lambda item: item[1]))}


def limit_hint(target: str) -> str:
    """The practical limit that holds when none is given."""
    return f"{100 * float(tables.targets()[target]['limit_act']):g} % by default"


@cache
def _titles() -> tuple[re.Pattern[str], dict[str, str]]:
    titles = {s.id: s.title for s in reader.systems().values()}
    titles |= {verdict: words for verdict, words in boards.WORDS.items()}
    longest_first = sorted(titles, key=len, reverse=True)
    return re.compile(r"\b(" + "|".join(map(re.escape, longest_first)) + r")\b"), titles


def in_words(text: str) -> str:
    """A sentence with the titles of systems in place of their ids."""
    pattern, titles = _titles()
    return pattern.sub(lambda found: titles[found[1]], text)


def answer(text: str) -> str:
    """An answer as a sentence: titles in place of ids, a capital and a full stop."""
    return _sentence(in_words(text))


def plain(text: object) -> str:
    """Text a page may set as Markdown without any of it being taken for a sign."""
    return re.sub(r"([\\`*_${}\[\]()<>#+\-.!|~:])", r"\\\1", str(text))


def safe(table: pd.DataFrame) -> pd.DataFrame:
    """A table of texts for a page that sets cells as Markdown."""
    return table.map(plain)


#: what needs a look comes first
ORDER = ("discordant", "inconclusive", "biased", "screening", "not_computed", "single_route", "concordant")


def stages(a: Assessment) -> dict[str, str]:
    """stage -> words, of the stages that were compared; what the eater gets first."""
    found = list(dict.fromkeys(a.verdicts["stage"]))
    return {s: STAGE_WORDS[s] for s in sorted(found, key=lambda s: s == "GE")}


def board_table(a: Assessment, stage: str | None = None) -> pd.DataFrame:
    """The board as shown: one row per sample and stage, what needs a look first, headings in words with the unit.

    stage : one stage, or None for all. Each sample and stage is shown by its first comparison: the chosen law, or the
    target's default.
    """
    found = a.verdicts.drop_duplicates(["sample_id", "stage"])
    if stage is not None:
        found = found[found["stage"] == stage]
    found = found.iloc[np.argsort([ORDER.index(v) for v in found["verdict"]], kind="stable")].reset_index(drop=True)
    table = found[["sample_id", "food_name"]].rename(columns={"sample_id": "sample", "food_name": "name"})
    table["verdict"] = [boards.word(v) for v in found["verdict"]]
    table["stage"] = [STAGE_WORDS[s] for s in found["stage"]]
    for name, title in (
        ("bomb", f"by bomb, {a.shown.unit}"),
        ("composition", f"by composition, {a.shown.unit}"),
        ("difference", "difference"),
        ("difference_percent", "difference, %"),
        ("measurement_part", "measurement part"),
        ("heats_part", "heats part"),
        ("convention_part", "convention part"),
    ):
        digits = 1 if name == "difference_percent" else _digits(a)
        table[title] = np.round(found[name].astype(float), digits) + 0.0
    lacking = found["verdict"].isin(["single_route", "not_computed"])
    said = found["probable_cause"].where(~lacking | (found["probable_cause"] != ""), found["reason"])
    table["probable cause, or what is missing"] = [in_words(str(text)) for text in said]
    table["to measure next"] = found["next_measurement"]
    return table


def _digits(a: Assessment) -> int:
    return 1 if a.shown.scale < 0.5 else 3


def summary(a: Assessment) -> list[str]:
    """One line per stage that was compared: how many samples have each verdict."""
    return [f"{words[:1].upper()}{words[1:]}: {counts(board_table(a, stage))}" for stage, words in stages(a).items()]


def counts(table: pd.DataFrame) -> str:
    """How many samples of a board have each verdict, in words."""
    found = table["verdict"].value_counts()
    words = {boards.word(v): boards.WORDS.get(v, v) for v in boards.MARKS}
    parts = [f"{found[shown]} {word}" for shown, word in words.items() if shown in found]
    n = table["sample"].nunique()
    return f"{n} sample{'s' if n != 1 else ''}: {', '.join(parts)}"


def to_look_at(table: pd.DataFrame, most: int = 6) -> list[tuple[str, str, str]]:
    """(sample, its verdict and name, cause and next measurement) of the rows that name a cause, one per sample."""
    named = table[(table["probable cause, or what is missing"] != "") & (table["to measure next"] != "")]
    named = named.drop_duplicates("sample").head(most)
    return [
        (str(sample), f"{verdict}: {sample} {name or ''}".rstrip(), f"{_sentence(cause)} Next: {_sentence(following, False)}")
        for sample, verdict, name, cause, following in zip(
            named["sample"], named["verdict"], named["name"], named["probable cause, or what is missing"],
            named["to measure next"], strict=True,
        )
    ]  # fmt: skip


def _sentence(text: str, first: bool = True) -> str:
    """Words closed by a full stop, unless they are a question."""
    start = f"{text[:1].upper()}{text[1:]}" if first else text
    return start if start.endswith(("?", ".")) else f"{start}."


def board_formats(table: pd.DataFrame) -> dict[Any, Any]:
    """How the figures of a board are printed."""
    fine = any("MJ/kg" in str(c) for c in table.columns)
    return {
        str(c): "{:.1f}" if str(c).endswith("%") or not fine else "{:.3f}"
        for c in table.columns
        if table[c].dtype.kind == "f"
    }


def unit_sentence(a: Assessment) -> str:
    """Where the figures of the composition route come from in the unit shown; '' if there is nothing to say."""
    if a.law is None or a.shown.family is None:
        return ""
    law = a.catalogue[a.law]
    unit = {"J": "kilojoules", "cal": "kilocalories"}[a.shown.family]
    if law.twin == "factors":
        return f"{law.title} in {unit}: the law's own sum by its factors for that unit, not a conversion."
    if law.energy_family == a.shown.family:
        return ""
    return f"{law.title} in {unit}: {TWIN_WORDS[law.twin]}."


def board_filter(table: pd.DataFrame, words: list[str], text: str) -> pd.DataFrame:
    """Rows whose verdict is among the words (all if none) and whose sample or name holds the text."""
    keep = np.ones(len(table), dtype=bool)
    if words:
        keep &= table["verdict"].isin(words).to_numpy()
    if text:
        both = table["sample"].astype(str) + " " + table["name"].fillna("").astype(str)
        keep &= both.str.contains(text, case=False, regex=False).to_numpy()
    return table[keep]


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


def understood_table(meanings: list[Meaning]) -> pd.DataFrame:
    """Headers that need nothing, and what each is read as."""
    import pandas as pd

    rows = [
        [
            m.header,
            {"text": "text", "unused": "kept as a note, not computed with"}.get(m.kind)
            or f"{'standard uncertainty of ' if m.kind == 'u' else ''}{dictionary()[str(m.quantity)].title}",
            m.unit.display if m.unit else "",
            (m.basis or "").replace("_", " "),
        ]
        for m in meanings
        if m.problem is None
    ]
    return pd.DataFrame(rows, columns=["header", "read as", "unit", "basis"])


def unit_choices(meaning: Meaning) -> list[str]:
    """Units with basis to choose from for one header."""
    entry = dictionary()[str(meaning.quantity)]
    units = {"energy": ["kJ/100 g", "kcal/100 g", "kJ/g", "MJ/kg", "kcal/kg", "cal/g"], "density": ["g/ml", "kg/l"],
             "number": ["1"], "fraction": ["%", "g/kg"]}.get(entry.dimension, ["g/100 g", "%", "g/kg", "mg/g"])  # fmt: skip
    if entry.basis != "stated":
        return units
    return [f"{u} {b}" for b in ("as is", "DM", "as analysed") for u in units]


def sample_line(a: Assessment, sample_id: str) -> tuple[str, str]:
    """(verdict, sentence) of the comparison a sample's screen opens with."""
    table = _leading_rows(a)
    row = table[table["sample_id"] == sample_id].iloc[0]
    return str(row["verdict"]), _sentence(f"{STAGE_WORDS[row['stage']]}: {in_words(str(row['reason']))}")


def _leading_rows(a: Assessment) -> pd.DataFrame:
    """One verdict row per sample: the first beyond GE, else GE."""
    table = a.verdicts
    beyond = table[table["stage"] != "GE"].drop_duplicates("sample_id")
    return beyond if len(beyond) else table


def partition_table(a: Assessment, sample_id: str, route: str) -> pd.DataFrame:
    """One route's energy partition as texts: a line per step, with its standard uncertainty."""
    import pandas as pd

    found = a.partition(sample_id)
    found = found[found["route"] == route]
    known = np.isfinite(found["value"].to_numpy(dtype=float))
    return pd.DataFrame(
        {
            "step": found["step"].to_numpy(),
            a.shown.unit: [_figure(v, _digits(a)) or "not known" for v in found["value"]],
            "u": [_figure(v, _digits(a)) for v in found["u"]],
            "how": [in_words(str(w)) if stage == "loss" or not k else in_words(str(s))
                    for s, w, stage, k in zip(found["system"], found["words"], found["stage"], known, strict=True)],
        }
    )  # fmt: skip


def partition_points(a: Assessment, sample_id: str) -> pd.DataFrame:
    """Both routes' steps for drawing: step, route, value and the ends of its interval; losses have no point of their own."""
    found = a.partition(sample_id)
    found = found[(found["stage"] != "loss") & np.isfinite(found["value"].astype(float))]
    u = found["u"].astype(float).fillna(0.0)
    value = found["value"].astype(float)
    table = found[["step", "route"]].assign(value=value, low=value - a.coverage * u, high=value + a.coverage * u)
    table["figure"] = [
        f"{_figure(v, _digits(a))} ± {_figure(a.coverage * x, _digits(a))}" for v, x in zip(value, u, strict=True)
    ]
    return table.reset_index(drop=True)


def causes_table(a: Assessment, sample_id: str) -> pd.DataFrame:
    """What would explain a sample's difference, likeliest first; empty where nothing needs explaining."""
    import pandas as pd

    found = a.probable_causes(sample_id)
    found = found[found["share"] >= CAUSE_SHOWN]
    if not len(found) or found["cause"].tolist() == ["no error"]:
        return pd.DataFrame()
    digits = _digits(a)
    return pd.DataFrame(
        {
            "what would explain it": [_sentence(w) for w in found["words"]],
            "weight": [f"{100 * x:.0f} %" for x in found["share"]],
            f"bomb corrected, {a.shown.unit}": [_figure(v, digits) for v in found["measured"]],
            f"composition corrected, {a.shown.unit}": [_figure(v, digits) for v in found["computed"]],
            "then": ["closes" if x else f"leaves {_figure(left, digits, True)}"
                     for x, left in zip(found["closes"], found["difference_left"], strict=True)],
            "what would settle it": [_sentence(w) if w else "" for w in found["next_measurement"]],
        }
    )  # fmt: skip


def computed_systems(a: Assessment, sample_id: str) -> dict[str, str]:
    """id -> stage and title of the figures a sample has, the leading ones first."""
    found = a.select(sample_id=sample_id)
    found = found[np.isfinite(found["value"].astype(float))].sort_values("leading", ascending=False, kind="stable")
    return {str(i): f"{STAGE_WORDS.get(stage, stage)}: {in_words(str(i))}"
            for i, stage in zip(found["system"], found["stage"], strict=True)}  # fmt: skip


def budget_table(a: Assessment, sample_id: str, system: str) -> pd.DataFrame:
    """Which determination carries how much of the uncertainty of one figure, the largest first."""
    import pandas as pd

    found = a.budget(sample_id, system)
    return pd.DataFrame(
        {
            "determination": found["input"].astype(str),
            "value": [f"{v:.4g} {unit}" for v, unit in zip(found["value"], found["unit"], strict=True)],
            "u": [f"{u:.2g}" for u in found["u"]],
            "u is from": [U_WORDS.get(w, w) for w in found["u_from"]],
            "brings, MJ/kg": [f"{abs(c):.3f}" for c in found["contribution"]],
            "of the variance": [f"{100 * x:.0f} %" for x in found["share"]],
        }
    )


def checked_sentence(a: Assessment, sample_id: str, system: str) -> str:
    """One figure by Monte Carlo beside first order, in words."""
    from energy.problems import WrongUse

    try:
        found = a.monte_carlo(sample_id, system)
        return f"In MJ/kg {ON[a.blocks.basis]} (a ratio is a number): {in_words(found.sentence)}"
    except WrongUse as reason:
        return str(reason)


def partition_sources(a: Assessment, sample_id: str) -> pd.DataFrame:
    """The systems behind both energy partitions, once each, with source and place."""
    found = a.partition(sample_id).drop_duplicates("system")
    table = found[["system", "source", "locator", "source_status"]].rename(
        columns={"locator": "place", "source_status": "how it is known"}
    )
    table["system"] = [in_words(s) for s in table["system"]]
    return table


def figure_table(a: Assessment, sample_id: str) -> pd.DataFrame:
    """Every figure of a sample: system, source, place and how it is known, in words."""
    import pandas as pd

    found = a.select(sample_id=sample_id)
    return pd.DataFrame(
        {
            "leads": ["◂ leads" if x else "" for x in found["leading"]],
            "stage": [STAGE_WORDS.get(s, s) for s in found["stage"]],
            "route": found["route"].astype(str),
            "system": [in_words(s) for s in found["system"]],
            "value": np.round(found["value"].astype(float), _digits(a)),
            "u": np.round(found["u"].astype(float), _digits(a)),
            "unit": found["unit"].astype(str),
            "state": [STATUS_WORDS[s] for s in found["status"]],
            "what was assumed, or is missing": [in_words(r) for r in found["reason"]],
            "source": found["source"].astype(str),
            "place": found["locator"].astype(str),
            "how it is known": [SOURCE_STATUS[s] for s in found["source_status"]],
            "id": found["system"].astype(str),
        }
    )


def given_table(a: Assessment, sample_id: str) -> pd.DataFrame:
    """What was given for a sample, as stated, and where each standard uncertainty comes from."""
    import pandas as pd

    found = a.inputs(sample_id)
    return pd.DataFrame(
        {
            "quantity": found["quantity"].astype(str),
            "value": [f"{v:.6g} {u}".replace(" 1", "") if u == "1" else f"{v:.6g} {u}"
                      for v, u in zip(found["value"], found["unit"], strict=True)],
            "basis": [{"none": ""}.get(b, b.replace("_", " ")) for b in found["basis"]],
            "u": [f"{u:.2g}" if np.isfinite(u) else "" for u in found["u"]],
            "u is from": [U_WORDS.get(w, w) for w in found["u_from"]],
            "mean of": [str(n) for n in found["replicates"]],
            "remark": ["below the limit: half of it taken" if b else "" for b in found["below_limit"]],
        }
    )  # fmt: skip


def parts_table(a: Assessment, sample_id: str) -> pd.DataFrame:
    """Lines of the three parts as shown; a part's name stands on its first line."""
    found = a.explain(sample_id)
    first = ~found["part"].duplicated()
    table = found[["component"]].copy()
    table.insert(0, "part", [p if f else "" for p, f in zip(found["part"], first, strict=True)])
    table["g per 100 g"] = [_figure(v, 1) for v in found["amount"]]
    for name, title in (("bomb", "this"), ("composition", "against this"), ("contribution", "makes")):
        digits = _digits(a)
        table[f"{title}, {a.shown.unit}"] = [_figure(v, digits, name == "contribution") for v in found[name]]
    table["in words"] = found["words"]
    return table


def parts(a: Assessment, sample_id: str) -> pd.DataFrame | None:
    """The three parts of the leading comparison for drawing: part, value, label; None with one route only."""
    import pandas as pd

    rows = _leading_rows(a)
    row = rows[rows["sample_id"] == sample_id].iloc[0]
    values = [float(row[f"{part}_part"]) for part in PARTS]
    if not np.isfinite(values).all():
        return None
    labels = [f"{part}  {_figure(v, _digits(a), True)}" for part, v in zip(PARTS, values, strict=True)]
    room = float(row["coverage"] * row["u_measurement_part"])
    # the verdict is about the measurement part: its interval and the practical limits belong to that bar alone
    return pd.DataFrame(
        {"part": list(PARTS), "value": values, "label": labels, "low": [values[0] - room, np.nan, np.nan],
         "high": [values[0] + room, np.nan, np.nan], "limit_lower": [float(row["limit_lower"]), np.nan, np.nan],
         "limit_upper": [float(row["limit_upper"]), np.nan, np.nan]}
    )  # fmt: skip


def parts_sentence(a: Assessment, sample_id: str) -> str:
    """The three parts in one line, or why there are none."""
    found = parts(a, sample_id)
    if found is None:
        return "One route only: there is no difference to split."
    said = [f"{p} part {_figure(v, _digits(a), True)}" for p, v in zip(found["part"], found["value"], strict=True)]
    total = _figure(float(found["value"].sum()), _digits(a), True)
    return f"Bomb less composition {total} {a.shown.unit} = {', '.join(said)}."


def _figure(value: float, digits: int, signed: bool = False) -> str:
    """A number as text, '' if there is none; never a minus before zero."""
    if not np.isfinite(value):
        return ""
    rounded = round(float(value), digits) + 0.0
    return f"{rounded:+.{digits}f}" if signed and rounded else f"{rounded:.{digits}f}"


def file_bytes(a: Assessment, ending: str) -> bytes:
    """The evidence as bytes for a download."""
    with TemporaryDirectory() as folder:
        return save(a, Path(folder) / f"evidence{ending}")[0].read_bytes()
