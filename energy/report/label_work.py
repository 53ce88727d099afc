"""Declared values as tables, texts and files: one law, or all side by side."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from html import escape
from pathlib import Path
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np

from energy import rounding, views
from energy.catalogue import reader
from energy.catalogue.records import SOURCE_STATUS, weakest
from energy.declare import PER_WORDS, Declared, declare, outcome_words, rule_words, warnings_of
from energy.label_law import declares, label_law
from energy.quantities import dictionary
from energy.report.tables import check_ending, whole, workbook
from energy.samples import Samples

if TYPE_CHECKING:
    import pandas as pd


class Holder(Protocol):
    """Whatever holds the samples that were judged: an assessment, or products made from recipes."""

    @property
    def samples(self) -> Samples: ...


ORDER = ("outside", "inconclusive", "within", "no_rule", "")
#: every law of a species or use
ALL = "all"
#: outcome -> its mark; none speaks without its word
MARKS = {"within": "◆", "outside": "✕", "inconclusive": "◇", "no_rule": "○", "": "·"}
WORDS = {
    "within": "within",
    "outside": "outside",
    "inconclusive": "not decided",
    "no_rule": "no rule found",
    "": "not judged",
}
CAUTION = ("This does not replace the law's text or a licensed adviser: what may stand on a label is decided by them. Figures of "
           "laws are marked as read at the source, read in a second document, or recalled.")  # fmt: skip
ROUTE = ("Laws speak of figures found in their own way. What is judged here is the law's sum from the composition; a figure by "
         "bomb is evidence about the label unless the law says that it may stand.")  # fmt: skip


def word(outcome: str) -> str:
    """An outcome with its mark."""
    return f"{MARKS[outcome]} {WORDS[outcome]}"


def laws(target: str) -> dict[str, str]:
    """id -> title of what an energy may be declared by, for a species or use."""
    return {s.id: s.title for s in reader.systems().values() if declares(s) and target in s.targets}


def bounds(samples: Samples) -> tuple[Samples, Samples] | None:
    """The batch with every value below its limit at nothing, and at the limit itself; None where there is no such value."""
    below = {c: b for c, b in samples.censored.items() if b.any()}
    if not below:
        return None
    found = []
    for times in (0.0, 2.0):  # such a value stands at half its limit
        columns = {c: np.where(below[c], times * v, v) if c in below else v for c, v in samples.columns.items()}
        found.append(replace(samples, columns=columns, memo=dict(samples.memo)))
    return found[0], found[1]


def judge(samples: Samples, target: str, law: str, **wishes: Any) -> list[Declared]:
    """Every sample under one law, or under all of a species or use. wishes : as for declare.declare. Raises WrongUse."""
    catalogue = reader.systems()
    chosen = list(laws(target)) if law == ALL else [law]
    return [declare(samples, catalogue[i], catalogue, **wishes) for i in chosen]


def again(d: Declared, samples: Samples) -> Declared:
    """The same law and amount for another batch of as many samples."""
    per = d.per
    serving = float(d.amount[0] * 100) if per == "serving" and len(d.amount) else None
    return declare(samples, d.law, reader.systems(), per=per, serving=serving)


def status(name: str) -> str:
    """How a rule is known, in words."""
    return SOURCE_STATUS.get(name, "no source")


def share(percent: float) -> float:
    """A percentage as a share."""
    return percent / 100


def capital(text: str) -> str:
    """A sentence's first letter."""
    return f"{text[:1].upper()}{text[1:]}"


#: the marks in words
LEGEND = ("From printed grams: the same sum from the grams as the label prints them. Rounding alone allows: what other foods with "
          "the same printed grams can have. Probability: that the true energy lies within the limits.")  # fmt: skip


def headline(d: Declared) -> str:
    """What a table of verdicts is about."""
    return (f"{d.law.title}, per {PER_WORDS[d.per]}. Decision rule: {d.decision_words}. The verdict is about {d.speaks_of}. "
            f"Limit: {rule_words(d)} ({d.rule.source + ', ' + d.rule.locator if d.rule.source else 'no source'}; "
            f"{status(d.rule.source_status)}).")  # fmt: skip


def table(a: Holder, found: Sequence[Declared]) -> pd.DataFrame:
    """One row per sample and law, as `Assessment.declared`."""
    return views.declared(found, a.samples.ids)


def _n(x: float, digits: int = 1) -> str:
    return f"{x:.{digits}f}" if np.isfinite(x) else ""


def judged_table(a: Holder, d: Declared) -> pd.DataFrame:
    """One law as people read it: declared, computed, from printed grams, limits, probability, outcome."""
    import pandas as pd

    outcome = outcome_words(d)
    rows = []
    for i, sample in enumerate(a.samples.ids):
        unit = str(d.judged[i])
        nothing = np.full(len(outcome), np.nan)
        rows.append({
            "sample": str(sample), "verdict": _verdict(d, i, str(outcome[i])),
            f"declared per {PER_WORDS[d.per]}": " / ".join(
                f"{d.declared[u][i]:.6g} {u}" for u in ("kJ", "kcal") if np.isfinite(d.declared[u][i])
            ),
            "judged in": unit, "from the analysis": _n(d.computed.get(unit, nothing)[i]), "u": _n(d.u.get(unit, nothing)[i]),
            "from printed grams": _n(d.from_label.get(unit, nothing)[i]),
            "rounding alone allows": _span(d.spread_low.get(unit, nothing)[i], d.spread_high.get(unit, nothing)[i]),
            "at least": _n(d.lower[i]), "at most": _n(d.upper[i]),
            "probability": "" if np.isnan(d.probability[i]) else f"{d.probability[i]:.3f}",
        })  # fmt: skip
    found = pd.DataFrame(rows)
    # what needs a look comes first
    return found.iloc[np.argsort([ORDER.index(str(o)) for o in outcome], kind="stable")].reset_index(drop=True)


def _verdict(d: Declared, i: int, outcome: str) -> str:
    if outcome == "" and not any(np.isfinite(d.declared[u][i]) for u in d.declared):
        return f"{MARKS['']} nothing declared"
    return word(outcome)


def _span(low: float, high: float) -> str:
    return f"{low:.1f} to {high:.1f}" if np.isfinite(low) and np.isfinite(high) else ""


def side_by_side(a: Holder, found: Sequence[Declared]) -> pd.DataFrame:
    """Samples x laws: the outcome of each law beside the others."""
    import pandas as pd

    columns = {"sample": [str(i) for i in a.samples.ids]}
    for d in found:
        columns[d.law.id] = [word(str(o)) for o in outcome_words(d)]
    return pd.DataFrame(columns)


def proposal_table(a: Holder, found: Sequence[Declared]) -> pd.DataFrame:
    """The figures to print under each law with the sums that lead to them, and what rounding would decide."""
    import pandas as pd

    rows = []
    ends = bounds(a.samples)
    for d in found:
        minds = warnings_of(d)
        low, high = (None, None) if ends is None else (again(d, batch) for batch in ends)
        for i, sample in enumerate(a.samples.ids):
            if not np.isfinite(d.computed[d.energy.leading][i]):
                continue
            row = {"sample": str(sample)} | ({"law": d.law.title} if len(found) > 1 else {})
            for unit in ("kJ", "kcal"):
                row[f"{unit} per {PER_WORDS[d.per]}"] = (
                    d.text(unit, i) if unit in d.computed else "not given by the law"
                )
            for unit in ("kJ", "kcal"):
                row[f"sum in {unit}"] = d.sum_words(unit, i) if unit in d.computed else ""
            if low is not None and high is not None:
                first = d.energy.leading
                texts = low.text(first, i), high.text(first, i)
                row["values below a limit"] = "" if texts[0] == texts[1] else f"{texts[0]} to {texts[1]} {first}"
            rows.append(row | {"mind": minds[i]})
    return pd.DataFrame(rows)


def rules_table(found: Sequence[Declared]) -> pd.DataFrame:
    """What each law says: limit and rounding with article and paragraph, how known, and whether a bomb figure may stand."""
    import pandas as pd

    rows = []
    for d in found:
        law = label_law(d.law.id)
        rows += [
            {"law": d.law.title, "about": "energy", "rule": f"{d.law.title}: sum of factors times grams",
             "where": d.law.citation if d.law.locator in d.law.citation else f"{d.law.citation}, {d.law.locator}", "how it is known": status(d.law.source_status)},
            {"law": "", "about": "tolerance", "rule": rule_words(d), "where": f"{d.rule.source}, {d.rule.locator}".strip(", "),
             "how it is known": status(d.rule.source_status)},
            {"law": "", "about": "what the tolerance holds for", "rule": d.rule.tested or "not said", "where": "", "how it is known": ""},
            *_rounding_rows(d),
            {"law": "", "about": "grams the energy is computed from",
             "rule": {"unrounded": "unrounded", "either": "unrounded or as printed"}.get(law.energy_from, "not said: both are shown"),
             "where": f"{law.source}, {law.locator}".strip(", "), "how it is known": status(law.source_status)},
            {"law": "", "about": "a figure by bomb", "rule": d.bomb, "where": "", "how it is known": ""},
        ]  # fmt: skip
    return pd.DataFrame(rows)


def _rounding_rows(d: Declared) -> list[dict[str, str]]:
    """The rules that energies and grams of these samples are rounded by, each once: rule sets often treat several alike."""
    alike: dict[tuple[str, str, str], list[str]] = {}
    for name, quantity, present in [
        *((unit, f"energy_{unit}", True) for unit in d.computed),
        *((dictionary()[q].title, q, bool(np.any(g > 0))) for q, g in d.label.printed.items()),
    ]:
        rules = rounding.rules(d.rules.rounding_set, quantity) if present else ()
        if rules:
            known = weakest([r.source_status for r in rules] + [x for x in (d.rules.rounding_status,) if x])
            where = "; ".join(dict.fromkeys(f"{r.source}, {r.locator}" for r in rules))
            alike.setdefault(("; ".join(r.words for r in rules), where, status(known)), []).append(name)
        elif present:
            alike.setdefault(("no rule was found: nothing is rounded", "", ""), []).append(name)
    return [{"law": "", "about": f"rounding: {', '.join(names)}", "rule": words, "where": where, "how it is known": known}
            for (words, where, known), names in alike.items()]  # fmt: skip


def text(a: Holder, found: Sequence[Declared]) -> str:
    """For the terminal: the laws side by side where there are several, then each sample of a single law."""
    if not found:
        return "No law at hand has a formula for this species or use: there is nothing to declare by."
    if len(found) > 1:
        return f"{_columns(side_by_side(a, found))}\n\n{_rules_text(found)}"
    d = found[0]
    lines = [f"{d.law.title} ({d.law.id}), per {PER_WORDS[d.per]}; {d.decision_words}. Said of {d.speaks_of}.", ""]
    lines.append(_columns(judged_table(a, d)))
    for heading, column in (("To print:", "proposal"), ("Mind:", "warning")):
        full = table(a, found)
        told = [(str(i), str(t)) for i, t in zip(full["sample_id"], full[column], strict=True) if t]
        lines += ["", heading, *(f"  {i}: {t}" for i, t in told)] if told else []
    return "\n".join([*lines, "", _rules_text(found)])


def _columns(frame: pd.DataFrame) -> str:
    texts = [[str(value) for value in row] for row in frame.itertuples(index=False)]
    heads = [str(c) for c in frame.columns]
    widths = [max(map(len, column)) for column in zip(heads, *texts, strict=True)]
    head, *body = ("  ".join(f"{t:<{w}}" for t, w in zip(row, widths, strict=True)).rstrip() for row in [heads, *texts])
    return "\n".join([head, *body])


def _rules_text(found: Sequence[Declared]) -> str:
    lines = []
    for d in found:
        lines.append(f"{d.law.id}: {rule_words(d)}" + (f" ({d.rule.source}, {d.rule.locator}; {status(d.rule.source_status)})"
                                                      if d.rule.source else "") + f". {d.bomb}.")  # fmt: skip
    return "\n".join(lines)


def save(frame: pd.DataFrame, path: str | Path) -> list[Path]:
    """Write the table by the path's ending."""
    from energy.report.document import STYLE, html_table

    goal = check_ending(path)
    ending = goal.suffix.lower()
    if ending == ".csv":
        whole(goal, lambda p: frame.map(_safe).to_csv(p, index=False))
    elif ending == ".parquet":
        whole(goal, lambda p: frame.to_parquet(p, index=False))
    elif ending == ".xlsx":
        whole(goal, lambda p: workbook({"declared": frame}, p))
    elif ending == ".json":
        whole(goal, lambda p: _write(p, frame.to_json(orient="records", double_precision=15)))
    else:
        body = (f"<!doctype html><html lang='en'><head><meta charset='utf-8'><title>Declared values</title><style>{STYLE}</style>"
                f"</head><body><h1>Declared values</h1>{html_table(frame)}<p>{escape(ROUTE)}</p><p>{escape(CAUTION)}</p></body></html>\n")  # fmt: skip
        whole(goal, lambda p: _write(p, body))
    return [goal]


def _safe(value: object) -> object:
    """A text that a spreadsheet would take for a formula gets a leading apostrophe."""
    return f"'{value}" if isinstance(value, str) and value.startswith(("=", "+", "-", "@")) else value


def _write(path: Path, text: str) -> None:
    path.write_text(text, encoding="utf-8")
