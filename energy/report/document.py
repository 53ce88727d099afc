"""The evidence document: one self-contained HTML page an auditor can recompute from."""

from __future__ import annotations

import datetime
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

from energy import __version__
from energy.catalogue.tables import targets
from energy.report.board import CAUTIONS, FIGURES, board, counts
from energy.report.tables import problem_table

if TYPE_CHECKING:
    import pandas as pd

    from energy.assessment import Assessment

MOST_IN_DETAIL = 200
STYLE = """
body{font:15px/1.5 Georgia,serif;max-width:92rem;margin:2rem auto;padding:0 1rem;color:#1c2733;background:#fff}
h1,h2,h3{font-weight:600;line-height:1.25} h2{margin-top:2.5rem;border-bottom:1px solid #8aa0b4} h3{margin:1.2rem 0 .3rem}
table{border-collapse:collapse;font:13px/1.4 system-ui,sans-serif;margin:.6rem 0} td,th{padding:.2rem .6rem;text-align:left;
border-bottom:1px solid #d5dde5;vertical-align:top} th{border-bottom:2px solid #8aa0b4} td.n{text-align:right;white-space:nowrap;
font-variant-numeric:tabular-nums} .scroll{overflow-x:auto} .quiet{color:#51606e;font-size:.9em} dt{font-weight:600;margin-top:.5rem}
"""


def document(assessment: Assessment) -> str:
    """The page as text. Above 200 samples only those whose verdict is not concordant are told in full."""
    a = assessment
    found = board(a)
    ids = [str(i) for i in a.samples.ids]
    told = ids
    if len(ids) > MOST_IN_DETAIL:
        open_ones = a.verdicts.loc[a.verdicts["verdict"].isin(["discordant", "biased", "inconclusive"]), "sample_id"]
        told = list(dict.fromkeys(open_ones))[:MOST_IN_DETAIL]
    parts = [
        "<!doctype html><html lang='en'><head><meta charset='utf-8'><title>Energy evidence</title>",
        f"<style>{STYLE}</style></head><body><h1>Energy evidence</h1>",
        f"<p>{escape(counts(a))}. Target {escape(a.target)}; law {escape(a.law or 'none chosen')}; "
        f"energies in {escape(a.shown.unit)}, {escape(a.shown.basis.replace('_', ' '))}; "
        f"intervals: value &plusmn; {a.coverage:g} u; practical limit: {escape(a.choice.limit.reason)}. Systems: "
        f"{escape(str(targets()[a.target]['systems_reason']))}.</p>",
        f"<p class='quiet'>Made {datetime.date.today().isoformat()} by Energy Concordance {escape(__version__)} from "
        f"{escape(a.samples.source or 'a table')}.</p>",
        "<h2>Board of verdicts</h2>", html_table(_board(found, a)),
    ]  # fmt: skip
    if len(told) < len(ids):
        parts.append(f"<p>{len(ids)} samples; the {len(told)} whose verdict is open are told in full below.</p>")
    for identity in told:
        parts.append(_sample(a, identity))
    problems = problem_table(a)
    parts += ["<h2>Problems found in the table</h2>", html_table(problems) if len(problems) else "<p>None.</p>"]
    parts += ["<h2>Sources</h2>", html_table(a.sources), "<h2>Cautions</h2>"]
    parts += [f"<p>{escape(c)}</p>" for c in CAUTIONS]
    return "\n".join([*parts, "</body></html>\n"])


def _sample(a: Assessment, identity: str) -> str:
    row = a.index(identity)
    name = a.samples.text.get("name", np.full(len(a.samples), "", dtype=object))[row] or ""
    parts = [f"<h2>{escape(identity)} {escape(str(name))}</h2><dl>"]
    for question, answer in a.questions(identity):
        parts.append(f"<dt>{escape(question)}</dt><dd>{escape(answer)}</dd>")
    parts.append("</dl><h3>What was given</h3>")
    parts.append(html_table(a.inputs(identity).drop(columns=["sample_id"])))
    parts.append("<h3>Energy partition, both routes</h3>")
    parts.append(html_table(a.partition(identity)))
    lines = a.explain(identity)
    if len(lines):
        parts.append("<h3>The difference in three parts, line by line</h3>")
        parts.append(html_table(lines))
        sums = lines.groupby("part", sort=False)["contribution"].sum()
        parts.append("<p>" + "; ".join(f"{p} part {v:+.4g}" for p, v in sums.items()) + f" {escape(a.shown.unit)}</p>")
    notes = a.notes(identity)
    parts += ["<h3>Notes</h3><ul>", *(f"<li>{escape(n)}</li>" for n in notes), "</ul>"] if notes else []
    return "\n".join(parts)


def _board(found: pd.DataFrame, a: Assessment) -> pd.DataFrame:
    """The board rounded as it is read; every digit stands in the tables of the samples and in the workbook."""
    table = found.drop(columns=["reason", "next_measurement"]).copy()
    table.insert(3, "stage of the figures", table.pop("stage"))
    numbers = list(FIGURES)
    table[numbers] = table[numbers].astype(float).round(1 if a.shown.scale < 0.5 else 3) + 0.0
    table["verdict"] = table["verdict"].str.replace(" ", "\u00a0")
    return table


def html_table(frame: pd.DataFrame) -> str:
    head = "".join(f"<th>{escape(str(c).replace('_', ' '))}</th>" for c in frame.columns)
    body = "\n".join("<tr>" + "".join(_cell(v) for v in row) + "</tr>" for row in frame.itertuples(index=False))
    return f"<div class='scroll'><table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table></div>"


def _cell(value: Any) -> str:
    if value is None or (isinstance(value, float) and not np.isfinite(value)):
        return "<td></td>"
    if isinstance(value, (int, float, np.integer, np.floating)) and not isinstance(value, bool):
        return f"<td class='n'>{float(value):.6g}</td>"
    return f"<td>{escape(str(value))}</td>"
