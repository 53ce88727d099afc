"""Calorimeter: its record and health: calibrations over time, controls, check substances, what rests on what."""

from __future__ import annotations

import datetime
from typing import Any

import streamlit as st

from energy.bomb.cautions import CAUTIONS
from energy.bomb.constants import value as constant
from energy.bomb.control import Assigned
from energy.bomb.record import Record, record
from energy.bomb.reduction import reduce_runs
from energy.pages import drawing, session
from energy.problems import EnergyError, StructuralProblems
from energy.report import record_work, screen


def at_hand() -> dict[str, Any]:
    """The run sheet looked at: the demo until another is loaded."""
    if "record_source" not in st.session_state:
        st.session_state["record_source"] = {"name": "calorimeter_record.csv", "data": record_work.demo(), "demo": True}
    found: dict[str, Any] = st.session_state["record_source"]
    return found


@st.cache_resource(max_entries=8, show_spinner=False)
def _record(name: str, data: bytes, material: str, value: float, sd: float, every: int) -> Record:
    assigned = {material: Assigned(value, sd)} if material and value > 0 and sd > 0 else None
    return record(reduce_runs(data, name=name), assigned, every)


def load() -> None:
    """Take another sheet."""
    with st.expander("Load your own record"):
        sheet = st.file_uploader("Run sheet of the calorimeter: calibrations, controls, blanks and samples, dated",
                                 ["csv", "xlsx", "parquet"], key="record_upload")  # fmt: skip
        if sheet is not None and sheet.getvalue() != at_hand()["data"]:
            st.session_state["record_source"] = {"name": sheet.name, "data": sheet.getvalue(), "demo": False}


def choices() -> tuple[str, float, float, int, int]:
    """What the house knows of its control material, and its intervals."""
    one, two, three, four, five = st.columns([3, 2, 2, 2, 2])
    material = one.text_input(
        "Control material with an assigned value", placeholder="its own first runs teach it", key="record_material"
    )
    value = two.number_input("Assigned, MJ/kg", min_value=0.0, value=0.0, disabled=not material, key="record_value")
    sd = three.number_input("SD, MJ/kg", min_value=0.0, value=0.02, disabled=not material, key="record_sd")
    every = four.number_input("Runs per control", min_value=1, value=int(constant("control_every")), key="record_every")
    days = five.number_input(
        "Days between calibrations", min_value=1, value=int(constant("recalibration_days")), key="record_days"
    )
    return material, value, sd, int(every), int(days)


def health(r: Record, days: int) -> None:
    """Calibrations of one instrument on both charts."""
    if not r.instruments:
        st.info("No dated calibration is in this sheet: there is nothing to chart.")
        return
    instrument = r.instruments[0]
    if len(r.instruments) > 1:
        instrument = st.selectbox("Instrument", r.instruments, key="record_instrument")
    h = r.history(instrument)
    st.subheader(f"Heat capacity of {instrument or 'the calorimeter'}", anchor=False)
    own = None if days == int(constant("recalibration_days")) else days
    for sentence in record_work.headline(h, r, datetime.date.today(), own):
        st.markdown(screen.plain(sentence))
    left, right = st.columns(2)
    left.altair_chart(drawing.record_chart(record_work.points(h), record_work.lines(h)), width="stretch")
    left.caption("Each calibration with twice its u; solid: centre, dashed: warning (2 SD), dotted: action (3 SD).")
    right.altair_chart(drawing.sums_chart(record_work.sums(h), h.sums.h), width="stretch")
    right.caption(
        "Cumulative sums of what exceeds half a standard deviation; beyond the dashed lines a shift is signalled."
    )
    st.table(screen.safe(record_work.calibrations(h, r)), hide_index=True)
    st.markdown("**Withdraw a calibration**")
    chosen = st.selectbox("Which", ["none", *reversed(h.ids)], key="record_withdraw")
    if chosen != "none":
        table, told = r.withdraw(chosen)
        st.warning(screen.plain(told))
        st.dataframe(table[["run_id", "sample_id", "kind", "date", "gross_energy"]], hide_index=True, width="stretch")


def quality(r: Record) -> None:
    """Controls, held results, rejected runs, blanks."""
    st.subheader("Controls", anchor=False)
    st.markdown(record_work.control_counts(r))
    held = record_work.held(r)
    if len(held):
        st.markdown("**Held: no control vouches for these; find the cause and burn them again**")
        st.table(screen.safe(held), hide_index=True)
    for sentence in record_work.overdue(r):
        st.caption(screen.plain(sentence))
    st.dataframe(record_work.controls(r), hide_index=True, width="stretch")
    rejected = record_work.rejected(r)
    if len(rejected):
        st.markdown("**Rejected runs, kept in sight**")
        st.table(screen.safe(rejected), hide_index=True)
    if r.controls.blanks:
        st.markdown("**Blanks**")
        for blank in r.controls.blanks:
            st.markdown(f"- {screen.plain(blank.words)}")


def substances(r: Record) -> None:
    """Check substances against their heats."""
    st.subheader("Check substances", anchor=False)
    table = record_work.checks(r)
    if not len(table):
        st.markdown(
            "None was burnt. Sucrose, hippuric acid, acetanilide, salicylic acid and stearic acid are known by name."
        )
        return
    st.table(screen.safe(table), hide_index=True)
    st.caption("The heats are of standard conditions and masses in vacuum; what bomb conditions and air can make stands in the u of "
               "the reference.")  # fmt: skip


session.opening("Calorimeter", "Its record and health: is the heat capacity still what it was, and what rests on it?")
st.warning(CAUTIONS[0])
with st.expander("Before any firing"):
    st.markdown("\n".join(f"- {screen.plain(c)}" for c in CAUTIONS))
load()
source = at_hand()
if source["demo"]:
    st.info("Invented demo data: no real laboratory, calorimeter or material.")
material, value, sd, every, days = choices()
try:
    found = _record(source["name"], source["data"], material, value, sd, every)
    health(found, days)
    quality(found)
    substances(found)
    if found.found.problems:
        st.subheader("Found while reading the sheet", anchor=False)
        session.problem_list(found.found.problems)
except StructuralProblems as problems:
    st.error(f"{source['name']} cannot be used yet.")
    session.problem_list(problems.problems)
except EnergyError as problem:
    st.error(str(problem))
session.footer()
