"""Sample: one sample, the six questions, both energy partitions, the three parts."""

from __future__ import annotations

import streamlit as st

from energy.pages import session
from energy.report import screen

st.title("Sample")
assessment = session.current()
if assessment is not None:
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
    for question, answer in assessment.questions(sample):
        st.markdown(f"**{question}**")
        st.text(answer)
    st.subheader("Energy partition")
    bomb, composition = st.columns(2)
    bomb.markdown("**Bomb route**")
    bomb.table(screen.partition_table(assessment, sample, "bomb").iloc[:, :4])
    composition.markdown("**Composition route**")
    composition.table(screen.partition_table(assessment, sample, "composition").iloc[:, :4])
    st.subheader("The difference in three parts")
    st.text(screen.parts_sentence(assessment, sample))
    chart = screen.parts_chart(assessment, sample)
    if chart is not None:
        st.altair_chart(chart, width="stretch")
        st.dataframe(screen.parts_table(assessment, sample), hide_index=True, width="stretch")
        st.caption(
            "Measurement: bomb and laboratory disagree about the material. Heats: general heats of combustion do not fit "
            "it. Convention: the two systems value the same grams differently; nobody is at fault."
        )
    notes = assessment.notes(sample)
    if notes:
        st.subheader("Notes")
        for note in notes:
            st.text(f"• {note}")
    st.subheader("What was given")
    st.dataframe(assessment.inputs(sample).drop(columns=["sample_id"]), hide_index=True, width="stretch")
    st.subheader("Every figure, with its source")
    figures = assessment.select(sample_id=sample).drop(columns=["sample_id", "target"])
    st.dataframe(figures, hide_index=True, width="stretch")
session.footer()
