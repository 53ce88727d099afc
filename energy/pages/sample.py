"""Sample: one sample, the six questions, both energy partitions, the three parts."""

from __future__ import annotations

import streamlit as st

from energy.assessment import Assessment
from energy.pages import drawing, session
from energy.report import screen


def choose(assessment: Assessment) -> str:
    """The sample looked at; kept between pages."""
    ids = [str(i) for i in assessment.samples.ids]
    names = dict(zip(ids, assessment.samples.text.get("name", assessment.samples.ids), strict=True))
    kept = st.session_state.get("sample", ids[0])
    sample = st.selectbox(
        "Sample",
        ids,
        index=ids.index(kept) if kept in ids else 0,
        format_func=lambda i: f"{i}  {names[i] or ''}",
        key="sample_choice",
    )
    st.session_state["sample"] = sample
    return sample


def questions(assessment: Assessment, sample: str) -> None:
    """The six questions beside their answers."""
    for question, answer in assessment.questions(sample):
        asked, answered = st.columns([2, 3])
        asked.markdown(f"##### {question}")
        answered.markdown(screen.plain(screen.answer(answer)))


def partitions(assessment: Assessment, sample: str) -> None:
    """From gross energy to what the eater gets, by both routes side by side."""
    st.subheader("Energy partition", anchor=False)
    for place, route, title in zip(
        st.columns(2), ("bomb", "composition"), ("Bomb route", "Composition route"), strict=True
    ):
        place.markdown(f"**{title}**")
        place.table(screen.safe(screen.partition_table(assessment, sample, route)), hide_index=True)
    points = screen.partition_points(assessment, sample)
    if len(points):
        st.altair_chart(drawing.partition_chart(points, assessment.shown.unit), width="stretch")
        st.caption(f"Lines are intervals of {assessment.coverage:g} standard uncertainties.")
    with st.expander("Sources of these figures"):
        st.table(screen.safe(screen.partition_sources(assessment, sample)), hide_index=True)


def three_parts(assessment: Assessment, sample: str) -> None:
    """The difference as three bars and line by line."""
    st.subheader("The difference in three parts", anchor=False)
    st.markdown(screen.plain(screen.parts_sentence(assessment, sample)))
    parts = screen.parts(assessment, sample)
    if parts is None:
        return
    st.altair_chart(drawing.parts_chart(parts, assessment.shown.unit), width="stretch")
    st.caption(
        "The line across the measurement bar is its interval, the ticks beside it are the practical limits. Measurement: bomb and laboratory disagree about the material. Heats: general heats of combustion do not fit it. "
        "Convention: the two systems value the same grams differently; nobody is at fault."
    )
    st.table(screen.safe(screen.parts_table(assessment, sample)), hide_index=True)


def causes(assessment: Assessment, sample: str) -> None:
    """What would explain the difference in gross energy, and what would settle it."""
    table = screen.causes_table(assessment, sample)
    if not len(table):
        return
    st.subheader("What would explain the difference", anchor=False)
    st.table(screen.safe(table), hide_index=True)
    st.caption(
        "Each error known here is tried alone, at the size that closes. The weight says how well it fits, how common it is and "
        "how usual its size, against all others and against no error at all; how common an error is is our own judgement. "
        "Food matrix, heat damage and resistant starch are no causes: where they matter, both routes overstate what is used."
    )


def uncertainty(assessment: Assessment, sample: str) -> None:
    """What carries the uncertainty of a figure, and whether first order may be trusted."""
    systems = screen.computed_systems(assessment, sample)
    if not systems:
        return
    st.subheader("What carries the uncertainty", anchor=False)
    system = st.selectbox("Figure", list(systems), format_func=lambda i: systems[i], key="budget_system")
    table = screen.budget_table(assessment, sample, system)
    if len(table):
        st.table(screen.safe(table), hide_index=True)
    if st.button("Check by Monte Carlo", help="JCGM 101: draws of the measured inputs, 100,000 or more, fixed seed"):
        st.markdown(screen.plain(screen.checked_sentence(assessment, sample, system)))


session.opening(
    "Sample", "One sample: six questions, the energy partition by both routes, and where the difference lies."
)
assessment = session.current()
if assessment is not None:
    sample = choose(assessment)
    st.html(drawing.verdict_line(*screen.sample_line(assessment, sample)))
    questions(assessment, sample)
    notes = assessment.notes(sample)
    if notes:
        st.subheader("Notes", anchor=False)
        st.markdown("\n".join(f"- {screen.plain(screen.answer(note))}" for note in notes))
    partitions(assessment, sample)
    three_parts(assessment, sample)
    causes(assessment, sample)
    uncertainty(assessment, sample)
    st.subheader("What was given", anchor=False)
    st.dataframe(screen.given_table(assessment, sample), hide_index=True, width="stretch")
    st.subheader("Every figure, with its source", anchor=False)
    st.dataframe(screen.figure_table(assessment, sample), hide_index=True, width="stretch", placeholder="")
session.footer()
