"""Bench: load a table, map its units, read the board of verdicts."""

from __future__ import annotations

from functools import partial

import streamlit as st

from energy.assessment import demo_paths
from energy.intake import inspect_table
from energy.pages import session
from energy.problems import EnergyError
from energy.report import board as boards
from energy.report import screen

st.title("Bench")
table = session.source()
if table["demo"]:
    st.info("Invented demo data: no real food, maker or laboratory. Load your own table below.")


def mapping_form() -> None:
    """Ask for the units and bases the headers do not give."""
    try:
        meanings = inspect_table(table["data"], units=table["units"], name=table["name"])
    except EnergyError:
        return
    lacking = screen.missing_headers(meanings)
    if not lacking:
        return
    st.subheader("What the headers do not say")
    with st.form("mapping"):
        chosen = {
            m.header: st.selectbox(
                f"Unit and basis of '{m.header}'", screen.unit_choices(m), index=None, key=f"unit_{m.header}"
            )
            for m in lacking
        }
        if st.form_submit_button("Use these units"):
            table["units"].update({header: unit for header, unit in chosen.items() if unit})
            st.rerun()


with st.expander("Load a table", expanded=not table["demo"]):
    upload = st.file_uploader(
        "CSV, XLSX or Parquet; wide or long", type=["csv", "txt", "tsv", "xlsx", "parquet"], key="upload"
    )
    if upload is not None and st.session_state.get("taken") != upload.file_id:
        st.session_state["taken"] = upload.file_id
        session.use(upload.name, upload.getvalue())
        st.rerun()
    left, right = st.columns(2)
    for place, path in zip((left, right), demo_paths(), strict=False):
        if place.button(f"Demo: {path.stem.replace('_', ' ')}", key=f"demo_{path.stem}"):
            session.use(path.name, path.read_bytes())
            session.source()["demo"] = True
            st.rerun()

laws = {"": "no law: general Atwater beside the bomb", **screen.laws("human")}
one, two, three = st.columns([3, 2, 2])
kept = session.setting("law", "eu_1169_2011") or ""
law = one.selectbox("Label law", list(laws), index=list(laws).index(kept), format_func=laws.__getitem__, key="law")
unit = two.selectbox("Unit", screen.UNITS, index=screen.UNITS.index(session.setting("unit", "kJ/100 g")), key="unit")
limit = three.text_input(
    "Practical limit", value=session.setting("limit", None) or "", placeholder="5 % (default)", key="limit"
)
session.keep("law", law or None)
session.keep("unit", unit)
session.keep("limit", limit.strip() or None)

assessment = session.current()
if assessment is None:
    mapping_form()
else:
    st.subheader("Board of verdicts")
    st.write(f"**{boards.counts(assessment)}.** Do bomb and composition describe the same material?")
    table_shown = screen.board_table(assessment)
    first, second = st.columns([2, 1])
    words = first.multiselect("Verdicts", [boards.word(v) for v in boards.MARKS], key="words", placeholder="all")
    text = second.text_input("Sample or name holds", key="search")
    shown = screen.board_filter(table_shown, words, text)
    picked = st.dataframe(
        shown.style.apply(screen.verdict_styles, subset=["verdict"]).format(precision=1, na_rep=""),
        hide_index=True,
        width="stretch",
        on_select="rerun",
        selection_mode="single-row",
        height=430,
        key="board",
    )
    rows = picked["selection"]["rows"]
    if rows:
        st.session_state["sample"] = str(shown.iloc[rows[0]]["sample"])
        st.switch_page("energy/pages/sample.py")
    st.caption(
        "Tick a row to open the sample. Difference = bomb less composition = measurement part + heats part + convention "
        "part. The verdict is about the measurement part; the convention part is expected and nobody's fault. "
        f"Limit: {assessment.choice.limit.reason}. Energies {assessment.shown.basis.replace('_', ' ')}."
    )
    if assessment.problems:
        st.subheader("Found while reading the table")
        st.dataframe(screen.problem_rows(assessment.problems), hide_index=True, width="stretch")
    st.subheader("Take it with you")
    a, b, c = st.columns(3)
    a.download_button("Results (CSV)", partial(screen.file_bytes, assessment, ".csv"), "results.csv", key="csv")
    b.download_button("Evidence (XLSX)", partial(screen.file_bytes, assessment, ".xlsx"), "evidence.xlsx", key="xlsx")
    c.download_button("Evidence (HTML)", partial(screen.file_bytes, assessment, ".html"), "evidence.html", key="html")
session.footer()
