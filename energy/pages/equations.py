"""Equations: the catalogue, filtered, with each entry as typeset mathematics and its source."""

from __future__ import annotations

import pandas as pd
import streamlit as st

from energy.assessment import equations
from energy.catalogue.reader import systems
from energy.pages import session
from energy.report import entries, screen

FILTERS = (
    ("target", "Species or use"),
    ("stage", "Stage"),
    ("route", "Route"),
    ("source_words", "How it is known"),
    ("source", "Source"),
)


def filtered() -> pd.DataFrame:
    """The entries that pass the filters."""
    table = equations()
    wanted = {}
    for place, (name, title) in zip(st.columns(len(FILTERS)), FILTERS, strict=True):
        values = entries.equation_filters(table, name)
        wanted[name] = place.multiselect(title, values, key=f"filter_{name}", placeholder="all")
    text = st.text_input("Title, source, country or id holds", key="filter_text")
    return entries.equation_filter(table, wanted, text)


def choose(table: pd.DataFrame) -> str:
    """The entry looked at: ticked in the table or taken from the list."""
    shown = entries.equation_list(table)
    picked = st.dataframe(
        shown,
        hide_index=True,
        width="stretch",
        height=280 if len(shown) > 7 else "auto",
        on_select="rerun",
        selection_mode="single-row",
        column_config={
            "title": st.column_config.TextColumn(width=330),
            "how it is known": st.column_config.TextColumn(width=210),
            "source": st.column_config.TextColumn(width="large"),
        },
        key="list",
    )
    ids = list(table["id"])
    rows = picked["selection"]["rows"]
    ticked = ids[rows[0]] if rows and rows[0] < len(ids) else None
    if ticked is not None and ticked != st.session_state.get("ticked"):
        st.session_state["entry"] = ticked
    st.session_state["ticked"] = ticked
    if st.session_state.get("entry") not in ids:
        st.session_state["entry"] = ids[0]
    titles = {i: f"{title}  ({i})" for i, title in zip(ids, table["title"], strict=True)}
    return st.selectbox("Entry (or tick a row)", ids, format_func=titles.__getitem__, key="entry")


def show(table: pd.DataFrame, chosen: str) -> None:
    """One entry: formula, facts, symbols, factors, worked values."""
    system = systems()[chosen]
    st.subheader(system.title, anchor=False)
    st.latex(entries.latex_line(system))
    domain = str(table.loc[table["id"] == chosen, "domain"].iloc[0])
    st.table(screen.safe(entries.fact_table(system, domain)), hide_index=True, hide_header=True)
    st.markdown("**Symbols**")
    st.table(screen.safe(entries.symbol_table(system)), hide_index=True)
    if system.components:
        st.markdown("**Factors**")
        st.table(screen.safe(entries.component_table(system)), hide_index=True)
    if system.checks:
        st.markdown("**Worked values it reproduces**")
        st.table(screen.safe(entries.check_table(system)), hide_index=True)


session.opening("Equations", "The catalogue: every formula and factor with its source, and how it is known.")
found = filtered()
st.markdown(f"**{len(found)} {'entry' if len(found) == 1 else 'entries'}**")
if found.empty:
    st.info("No entry fits these filters.")
else:
    show(found, choose(found))
session.footer()
