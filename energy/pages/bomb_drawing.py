"""A thermogram with its three periods, both drift lines and the corrected rise."""

from __future__ import annotations

from typing import TYPE_CHECKING

from energy.pages.drawing import INK

if TYPE_CHECKING:
    import altair as alt
    import pandas as pd

#: period -> colour (Okabe and Ito) and mark; neither speaks alone
PERIODS = {"fore period": ("#0072B2", "circle"), "main period": ("#D55E00", "triangle-up"),
           "after period": ("#009E73", "square")}  # fmt: skip
LINES = {"drift before firing": "#0072B2", "drift after": "#009E73"}


def thermogram(curves: dict[str, pd.DataFrame]) -> alt.LayerChart:
    """Readings by period, bounds, drift lines and the corrected rise as a bar between them."""
    import altair as alt

    x = alt.X("minutes:Q", title="minutes", axis=alt.Axis(labelFontSize=12, titleFontSize=12))
    y = alt.Y("temperature:Q", title="temperature, °C", scale=alt.Scale(zero=False, nice=True),
              axis=alt.Axis(labelFontSize=12, titleFontSize=12))  # fmt: skip
    legend = alt.Legend(title=None, orient="top", labelFontSize=13, symbolSize=90, labelLimit=0)
    names, colours = list(PERIODS), [c for c, _ in PERIODS.values()]
    marks = [m for _, m in PERIODS.values()]
    readings = (
        alt.Chart(curves["readings"])
        .mark_point(filled=True, size=42, opacity=0.85)
        .encode(
            x=x,
            y=y,
            color=alt.Color("period:N", scale=alt.Scale(domain=names, range=colours), legend=legend),
            shape=alt.Shape("period:N", scale=alt.Scale(domain=names, range=marks), legend=legend),
            tooltip=[alt.Tooltip("minutes:Q", format=".2f"), alt.Tooltip("temperature:Q", format=".4f"), "period:N"],
        )
    )
    drifts = [
        alt.Chart(curves["drifts"][curves["drifts"]["line"] == name])
        .mark_line(color=colour, strokeWidth=1.6, strokeDash=[6, 3])
        .encode(x=x, y=y, tooltip=["line:N"])
        for name, colour in LINES.items()
    ]
    bounds = (
        alt.Chart(curves["bounds"])
        .mark_rule(color=INK, strokeDash=[2, 4], opacity=0.6)
        .encode(x="minutes:Q", tooltip=["what:N", alt.Tooltip("minutes:Q", format=".2f")])
    )
    named = (
        alt.Chart(curves["bounds"])
        .mark_text(angle=270, align="center", baseline="bottom", dy=-3, color=INK, fontSize=12)
        .encode(x="minutes:Q", y="temperature:Q", text="what:N")
    )
    bar = (
        alt.Chart(curves["rise"])
        .mark_rule(color=INK, strokeWidth=3)
        .encode(x="minutes:Q", y=alt.Y("low:Q"), y2="high:Q", tooltip=["label:N"])
    )
    label = (
        alt.Chart(curves["rise"])
        .mark_text(align="left", dx=10, color=INK, fontSize=14, fontWeight="bold")
        .encode(x="minutes:Q", y=alt.Y("written:Q"), text="label:N")
    )
    return alt.LayerChart(layer=[bounds, *drifts, readings, bar, label, named]).properties(height=420)
