"""Colours, marks and charts. Colours are Okabe and Ito's; none speaks without its word and mark."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Any

from energy.report import board as boards

if TYPE_CHECKING:
    import altair as alt
    import pandas as pd

INK = "#1c2733"
#: the grey is no colour of theirs: two verdicts say that there is nothing to judge
COLOURS = {
    "concordant": "#0072B2",
    "biased": "#56B4E9",
    "inconclusive": "#CC79A7",
    "discordant": "#D55E00",
    "screening": "#E69F00",
    "single_route": "#5d6a75",
    "not_computed": "#5d6a75",
}
PART_COLOURS = {"measurement": "#D55E00", "heats": "#E69F00", "convention": "#56B4E9"}

STYLE = """<style>
.stMainBlockContainer {padding-top: 4.2rem; padding-bottom: 2rem}
.stMainBlockContainer h1 {font-size: 2rem; padding: 0.2rem 0}
.stMainBlockContainer h3 {font-size: 1.25rem; padding-bottom: 0.3rem}
.stMainBlockContainer h5 {padding: 0.1rem 0 0.5rem 0}
[data-testid="stTable"] :is(td, th, td *, th *) {max-width: none}
.katex-display {overflow-x: auto; overflow-y: hidden; padding: 0.3rem 0}
</style>"""


def verdict_styles(column: pd.Series[Any]) -> list[str]:
    """Text colour per verdict cell; the word and the mark stand in the cell."""
    by_word = {boards.word(v): c for v, c in COLOURS.items()}
    return [f"color: {by_word.get(str(v), INK)}; font-weight: 600" for v in column]


#: outcomes of a declared value; each also has its word and mark
OUTCOME_COLOURS = {"within": "#0072B2", "outside": "#D55E00", "not decided": "#CC79A7"}


def outcome_styles(column: pd.Series[Any]) -> list[str]:
    """Text colour per outcome; the word and the mark stand in the cell."""
    return [
        f"color: {next((c for w, c in OUTCOME_COLOURS.items() if str(v).endswith(w)), '#5d6a75')}; font-weight: 600"
        for v in column
    ]


def verdict_line(verdict: str, sentence: str) -> str:
    """A verdict with its mark, larger, and what it rests on."""
    colour = COLOURS[verdict]
    return (
        f'<div style="border-left: 5px solid {colour}; padding: 0.1rem 0 0.1rem 0.8rem">'
        f'<span style="color: {colour}; font-size: 1.3rem; font-weight: 600">{escape(boards.word(verdict))}</span>'
        f"<br>{escape(sentence)}</div>"
    )


def parts_chart(parts: pd.DataFrame, unit: str) -> alt.LayerChart:
    """The three parts as bars from zero, each with its figure in its label."""
    import altair as alt

    order = list(parts["label"])
    axis = alt.Axis(labelFontSize=14, labelLimit=0, labelColor=INK, ticks=False, domain=False, labelPadding=10)
    bars = (
        alt.Chart(parts)
        .mark_bar(size=20)
        .encode(
            x=alt.X(
                "value:Q",
                title=f"bomb less composition, {unit}",
                axis=alt.Axis(tickCount=6, labelFontSize=12, titleFontSize=12),
            ),
            y=alt.Y("label:N", sort=order, title=None, axis=axis),
            color=alt.Color(
                "part:N",
                scale=alt.Scale(domain=list(PART_COLOURS), range=list(PART_COLOURS.values())),
                legend=None,
            ),
            tooltip=[alt.Tooltip("part:N"), alt.Tooltip("value:Q", format="+.2f")],
        )
    )
    zero = alt.Chart(parts).mark_rule(color=INK).encode(x=alt.datum(0))
    y = alt.Y("label:N", sort=order, title=None, axis=axis)
    whisker = alt.Chart(parts[:1]).mark_rule(color=INK, strokeWidth=2).encode(x="low:Q", x2="high:Q", y=y)
    limits = [alt.Chart(parts[:1]).mark_tick(color=INK, thickness=2, size=30, strokeDash=[3, 2]).encode(x=f"{end}:Q", y=y)
              for end in ("limit_lower", "limit_upper")]  # fmt: skip
    chart = alt.LayerChart(layer=[bars, zero, whisker, *limits])
    return chart.properties(height=alt.Step(34))


ROUTE_MARKS = {"bomb": ("#0072B2", "diamond"), "composition": ("#D55E00", "circle")}


def partition_chart(points: pd.DataFrame, unit: str) -> alt.LayerChart:
    """Both routes' steps under each other, each figure with its interval; mark and colour tell the route."""
    import altair as alt

    routes = [r for r in ROUTE_MARKS if r in set(points["route"])]
    order = list(dict.fromkeys(points["step"]))
    y = alt.Y("step:N", sort=order, title=None,
              axis=alt.Axis(labelFontSize=13, labelLimit=0, labelColor=INK, ticks=False, domain=False, labelPadding=10))  # fmt: skip
    shift = alt.YOffset("route:N", sort=routes)
    colour = alt.Color("route:N", scale=alt.Scale(domain=routes, range=[ROUTE_MARKS[r][0] for r in routes]),
                       legend=alt.Legend(title=None, orient="top"))  # fmt: skip
    x = alt.X("value:Q", title=unit, scale=alt.Scale(zero=False), axis=alt.Axis(tickCount=6))
    base = alt.Chart(points)
    line = base.mark_rule(strokeWidth=2).encode(
        x=alt.X("low:Q", title=unit), x2="high:Q", y=y, yOffset=shift, color=colour
    )
    mark = base.mark_point(size=90, filled=True, opacity=1).encode(
        x=x, y=y, yOffset=shift, color=colour,
        shape=alt.Shape("route:N", scale=alt.Scale(domain=routes, range=[ROUTE_MARKS[r][1] for r in routes])),
        tooltip=["step:N", "route:N", "figure:N"],
    )  # fmt: skip
    return alt.LayerChart(layer=[line, mark]).properties(height=alt.Step(26))


CALL_MARKS = {"quiet": ("#0072B2", "circle"), "signals": ("#D55E00", "triangle-up")}
LINE_DASHES = {"centre": [1, 0], "warning": [6, 4], "action": [2, 3]}


def record_chart(points: pd.DataFrame, lines: pd.DataFrame) -> alt.LayerChart:
    """Heat capacities over time with their intervals, centre and limits; what signals has its own mark."""
    import altair as alt

    y = alt.Y("heat capacity:Q", title="heat capacity, J/K", scale=alt.Scale(zero=False))
    x = alt.X("date:T", title=None)
    kinds = list(CALL_MARKS)
    colour = alt.Color("call:N", scale=alt.Scale(domain=kinds, range=[CALL_MARKS[k][0] for k in kinds]),
                       legend=alt.Legend(title=None, orient="top"))  # fmt: skip
    rule = alt.Chart(lines).mark_rule(color=INK).encode(
        y="at:Q", strokeDash=alt.StrokeDash("line:N", scale=alt.Scale(domain=list(LINE_DASHES), range=list(LINE_DASHES.values())), legend=None)
    )  # fmt: skip
    bar = (
        alt.Chart(points)
        .mark_rule(strokeWidth=1.5)
        .encode(x=x, y=alt.Y("low:Q", title="heat capacity, J/K"), y2="high:Q", color=colour)
    )
    mark = alt.Chart(points).mark_point(size=80, filled=True, opacity=1).encode(
        x=x, y=y, color=colour, shape=alt.Shape("call:N", scale=alt.Scale(domain=kinds, range=[CALL_MARKS[k][1] for k in kinds])),
        tooltip=["calibration:N", "heat capacity:Q", "why:N"],
    )  # fmt: skip
    return alt.LayerChart(layer=[rule, bar, mark]).properties(height=300)


def sums_chart(sums: pd.DataFrame, decision: float) -> alt.LayerChart:
    """Both cumulative sums, and the lines beyond which a shift is signalled."""
    import altair as alt
    import pandas as pd

    sides = ["upward", "downward"]
    line = alt.Chart(sums).mark_line(point=True).encode(
        x=alt.X("date:T", title=None), y=alt.Y("sum:Q", title="cumulative sum, J/K"),
        color=alt.Color("side:N", scale=alt.Scale(domain=sides, range=["#0072B2", "#CC79A7"]), legend=alt.Legend(title=None, orient="top")),
        strokeDash=alt.StrokeDash("side:N", scale=alt.Scale(domain=sides, range=[[1, 0], [5, 3]]), legend=None),
    )  # fmt: skip
    limits = (
        alt.Chart(pd.DataFrame({"at": [decision, -decision]})).mark_rule(color=INK, strokeDash=[6, 4]).encode(y="at:Q")
    )
    return alt.LayerChart(layer=[line, limits]).properties(height=300)
