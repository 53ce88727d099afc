"""The agreement of the two routes over a batch: difference against mean, and the ratio in the order of the batch."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import streamlit as st

from energy.assessment import Assessment
from energy.pages import drawing
from energy.reasons import STAGE_WORDS
from energy.report import agreement as reports
from energy.report import screen

if TYPE_CHECKING:
    import altair as alt
    import pandas as pd

#: Okabe and Ito's, with a mark of its own each
COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#E69F00", "#5d6a75")
MARKS = ("circle", "square", "diamond", "triangle-up", "cross", "triangle-down")
TOOLTIP = ("sample", "name", "kind", "batch")


def agreement_panel(assessment: Assessment, stage: str) -> None:
    """Both charts, what they say in words, and the groups as a table."""
    choice = st.segmented_control("Differences in", ["per cent", "energy"], default="per cent", key="agreement_in")
    found = reports.panel(assessment, stage, percent=choice != "energy")
    if found is None:
        st.info("Fewer than three samples have both figures at this stage: nothing can be said of the batch.")
        return
    left, right = st.columns(2)
    with left:
        st.markdown(f"**Bomb less composition, {screen.plain(STAGE_WORDS[stage])}**")
        st.altair_chart(difference_chart(found), width="stretch")
    along = found if stage == "GE" else reports.panel(assessment, "GE")
    with right:
        st.markdown("**Gross energy measured over computed, along the table**")
        if along is None:
            st.info("Fewer than three samples have a measured and a computed gross energy.")
        else:
            st.altair_chart(order_chart(along), width="stretch")
    for sentence in reports.sentences(found):
        st.markdown(screen.plain(sentence))
    if along is not None and along.drift is not None:
        st.markdown(screen.plain(reports.drift_sentence(along.drift, len(along.points))))
    st.caption(
        "Left: bias and the limits between which 95 of 100 differences lie, each with its 95 % interval; computed so that"
        " a few wild samples hardly move them. Right: the robust centre, and dashed a line that a slow drift would tilt."
        " Points named at the edge lie farther out. Beyond gross energy the difference holds the convention part, which is"
        " expected."
    )
    table = reports.group_table(found)
    if len(table) > 1:
        st.markdown(f"**By kind of material** {screen.plain(f'({found.energy_unit})')}")
        st.dataframe(table, hide_index=True, width="stretch", key="agreement_groups")
        st.caption(reports.left_out(found))


def difference_chart(found: reports.Panel) -> alt.LayerChart:
    """Each sample's difference against the mean of its two figures, with bias and limits of agreement."""
    import altair as alt

    y = alt.Y("plotted:Q", title=f"difference, {found.short_unit}", axis=alt.Axis(tickCount=7))
    band = alt.Chart(found.bands).mark_rect(opacity=0.12, color=COLOURS[0]).encode(y="low:Q", y2="high:Q")
    line = (
        alt.Chart(found.bands)
        .mark_rule(strokeWidth=1.5, color=drawing.INK)
        .encode(
            y="at:Q",
            strokeDash=alt.StrokeDash(
                "what:N",
                scale=alt.Scale(domain=["bias", "upper limit", "lower limit"], range=[[1, 0], [6, 4], [6, 4]]),
                legend=None,
            ),
            tooltip=[alt.Tooltip("what:N"), alt.Tooltip("at:Q", format="+.3g")],
        )
    )
    zero = alt.Chart(found.bands[:1]).mark_rule(color="#9aa5ad", strokeWidth=1).encode(y=alt.datum(0))
    points = _points(
        found,
        found.drawn,
        alt.X("mean:Q", title=f"mean of both, {found.energy_unit}", scale=alt.Scale(zero=False)),
        y,
        "difference",
        "beyond",
        "mean",
    )
    return alt.LayerChart(layer=[band, zero, line, *points]).properties(height=430)


def order_chart(found: reports.Panel) -> alt.LayerChart:
    """Each sample's ratio along the batch, with the robust centre and the line of a drift."""
    import altair as alt

    y = alt.Y(
        "plotted_ratio:Q", title="measured over computed, %", scale=alt.Scale(zero=False), axis=alt.Axis(tickCount=7)
    )
    x = alt.X("order:Q", title="place in the table", axis=alt.Axis(tickMinStep=1))
    layers = _points(found, found.drawn, x, y, "ratio", "beyond_ratio", "order")
    drift = found.drift
    if drift is not None:
        centre = (
            alt.Chart(found.bands[:1]).mark_rule(color=drawing.INK, strokeWidth=1.5).encode(y=alt.datum(drift.centre))
        )
        slope = (
            alt.Chart(drift.line)
            .mark_line(color="#D55E00", strokeWidth=2, strokeDash=[6, 4])
            .encode(x="order:Q", y="ratio:Q")
        )
        layers = [centre, slope, *layers]
    return alt.LayerChart(layer=layers).properties(height=430)


def _points(
    found: reports.Panel, points: pd.DataFrame, x: alt.X, y: alt.Y, figure: str, beyond: str, across: str
) -> list[alt.Chart]:
    """The samples, kind by colour and mark; those at the edge are named."""
    import altair as alt

    scale: dict[str, Any] = {"domain": found.kinds, "range": list(COLOURS[: len(found.kinds)])}
    marks: dict[str, Any] = {"domain": found.kinds, "range": list(MARKS[: len(found.kinds)])}
    legend = alt.Legend(title=None, orient="bottom", columns=2, labelLimit=115)
    tooltip = [*TOOLTIP, alt.Tooltip("bomb:Q", format=".4g"), alt.Tooltip("composition:Q", format=".4g"),
               alt.Tooltip(f"{figure}:Q", format="+.3g" if figure == "difference" else ".4g")]  # fmt: skip
    shown = (
        alt.Chart(points)
        .mark_point(size=70, filled=True, opacity=0.85)
        .encode(
            x=x,
            y=y,
            color=alt.Color("shown_kind:N", scale=alt.Scale(**scale), legend=legend),
            shape=alt.Shape("shown_kind:N", scale=alt.Scale(**marks), legend=legend),
            tooltip=tooltip,
        )
    )
    layers = [shown]
    # named inside the chart, at three heights by turns, so that neighbours at the edge can be read
    for side, heights in (("above", (13, 25, 37)), ("below", (-11, -23, -35))):
        edge = points[points[beyond] == side].sort_values(across)
        for turn, height in enumerate(heights):
            part = edge[turn::3]
            if not part.empty:
                text = alt.Chart(part).mark_text(dy=height, fontSize=11, color=drawing.INK)
                layers.append(text.encode(x=x, y=y, text="sample:N"))
    return layers
