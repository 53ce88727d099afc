"""Equations: the catalogue, filtered, with each entry as typeset mathematics and its source."""

from __future__ import annotations

import streamlit as st

from energy.assessment import equations
from energy.catalogue.reader import systems
from energy.pages import session
from energy.report import screen

st.title("Equations")
table = equations()
filters = st.columns(4)
for place, name, title in zip(
    filters,
    ("stage", "route", "source_words", "target"),
    ("Stage", "Route", "How it is known", "Species or use"),
    strict=True,
):
    values = (
        sorted({part for cell in table[name] for part in str(cell).split(", ")})
        if name == "target"
        else sorted(set(table[name]))
    )
    picked = place.multiselect(title, values, key=f"filter_{name}", placeholder="all")
    if picked and name == "target":
        table = table[[any(p in str(cell).split(", ") for p in picked) for cell in table[name]]]
    elif picked:
        table = table[table[name].isin(picked)]
text = st.text_input("Title, source or id holds", key="filter_text")
if text:
    joined = table["id"] + " " + table["title"] + " " + table["source"]
    table = table[joined.str.contains(text, case=False, regex=False)]
st.write(f"{len(table)} entries")
st.dataframe(
    table[["id", "title", "stage", "route", "source", "source_words"]].rename(
        columns={"source_words": "how it is known"}
    ),
    hide_index=True,
    width="stretch",
    height=260,
)
if len(table):
    chosen = st.selectbox("Entry", list(table["id"]), key="entry")
    system = systems()[chosen]
    st.subheader(system.title)
    st.latex(rf"\mathrm{{{system.stage}}} = {system.formula.latex}\quad\mathrm{{[{system.result_unit}]}}")
    row = table[table["id"] == chosen].iloc[0]
    for title, value in (
        ("Formula as text", system.formula.text),
        ("Source", system.citation),
        ("Place", system.locator),
        ("How it is known", row["source_words"]),
        ("Domain", row["domain"] or "none printed"),
        ("Protein from nitrogen", f"factor {system.nitrogen_factor}"),
        ("Second unit", {"none": "none printed"}.get(system.twin, system.twin.replace("_", " "))),
        ("Note", system.note),
    ):
        if value:
            st.markdown(f"**{title}**")
            st.text(value)
    st.markdown("**Symbols**")
    st.dataframe(screen.symbol_table(system), hide_index=True, width="stretch")
    if system.components:
        st.markdown("**Factors**")
        st.dataframe(screen.component_table(system), hide_index=True, width="stretch")
    if system.checks:
        st.markdown("**Printed worked values it reproduces**")
        st.dataframe(screen.check_table(system), hide_index=True, width="stretch")
session.footer()
