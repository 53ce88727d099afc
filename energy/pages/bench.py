"""Bench: load a table, map its units, read the board of verdicts."""

from __future__ import annotations

from functools import partial

import streamlit as st

from energy.assessment import Assessment, demo_paths
from energy.intake import inspect_table
from energy.pages import agreement_plots, drawing, session
from energy.problems import EnergyError
from energy.report import board as boards
from energy.report import screen

SAMPLE_PAGE = "energy/pages/sample.py"


def loading() -> None:
    """Upload, demo tables, and how a table is to be read."""
    table = session.source()
    with st.expander("Load your own table", expanded=not table["demo"]):
        upload = st.file_uploader(
            "CSV, XLSX or Parquet; one row per sample, or one row per result",
            type=["csv", "txt", "tsv", "xlsx", "parquet"],
            key="upload",
        )
        if upload is not None and st.session_state.get("taken") != upload.file_id:
            st.session_state["taken"] = upload.file_id
            session.use(upload.name, upload.getvalue())
            st.rerun()
        left, right = st.columns(2)
        for place, name, title, choices in (
            (left, "basis", "Basis of figures whose header names none", screen.BASIS_CHOICES),
            (right, "decimal", "Decimal sign", screen.DECIMAL_CHOICES),
        ):
            kept = session.setting(name) or ""
            chosen = place.selectbox(
                title, list(choices), index=list(choices).index(kept), format_func=choices.__getitem__, key=name
            )
            session.keep(name, chosen or None)
        if not table["demo"] and st.button("Back to the invented demo", key="back_to_demo"):
            path = demo_paths()[0]
            session.use(path.name, path.read_bytes(), demo=True)
            st.rerun()
    if table["units"]:
        said = "; ".join(f"{header}: {unit}" for header, unit in table["units"].items())
        st.caption(screen.plain(f"Units given by hand: {said}"))
        if st.button("Forget the units given by hand", key="forget"):
            table["units"].clear()
            st.rerun()


def demonstration() -> None:
    """That the data are invented, and which of the demo tables is shown."""
    paths = {path.name: path for path in demo_paths()}
    said, place = st.columns([3, 2], vertical_alignment="bottom")
    said.info("Invented demo data: no real food, feed, maker or laboratory.", icon=":material/science:")
    shown = session.source()["name"]
    name = place.selectbox(
        "Demo table",
        list(paths),
        index=list(paths).index(shown),
        format_func=lambda n: n.removesuffix(".csv").replace("_", " "),
        key="demo_table",
    )
    if name != shown:
        session.use(name, paths[name].read_bytes(), demo=True)
        st.rerun()


def choosing() -> None:
    """For whom, by which law, in which unit, within what limit."""
    one, two, three, four = st.columns([2, 3, 2, 2])
    targets, named = screen.targets(), session.named()
    if named and session.setting("target") not in named and "asked_target" not in st.session_state:
        st.session_state["target"] = named[0]  # a new table says for whom it is
    elif "target" not in st.session_state:
        st.session_state["target"] = session.setting("target")
    target = one.selectbox(
        "Species or use",
        list(targets),
        format_func=lambda t: f"{targets[t]}{' (in the table)' if t in named else ''}",
        key="target",
        on_change=lambda: st.session_state.update(asked_target=True),
    )
    if target != session.setting("target"):
        session.keep("law", screen.first_law(target))
        session.keep("unit", screen.units(target)[0])
        session.keep("bomb", None)
        session.keep("composition", None)
    session.keep("target", target)
    laws = {"": "no law: the target's own systems", **screen.laws(target)}
    kept = session.setting("law") or ""
    law = two.selectbox(
        "Label law" if target == "human" else "Law",
        list(laws),
        index=list(laws).index(kept) if kept in laws else 0,
        format_func=laws.__getitem__,
        key=f"law_{target}",
    )
    units = screen.units(target)
    kept_unit = session.setting("unit")
    unit = three.selectbox(
        "Unit", units, index=units.index(kept_unit) if kept_unit in units else 0, key=f"unit_{target}"
    )
    limit = four.text_input(
        "Practical limit",
        value=session.setting("limit") or "",
        placeholder=screen.limit_hint(target),
        help="A share such as 5 %, or an energy such as 100 kJ/100 g.",
        key="limit",
    )
    choosing_systems(target)
    session.keep("law", law or None)
    session.keep("unit", unit)
    session.keep("limit", limit.strip() or None)


def choosing_systems(target: str) -> None:
    """Why these systems, and others of the catalogue that may stand in for them."""
    with st.expander("Systems used, and others to choose"):
        st.markdown(screen.plain(screen.systems_reason(target)))
        for place, route, title in zip(
            st.columns(2), ("bomb", "composition"), ("Bomb system", "Composition system"), strict=True
        ):
            options = screen.systems_to_choose(target, route)
            kept = session.setting(route) or ""
            chosen = place.selectbox(
                title,
                list(options),
                index=list(options).index(kept) if kept in options else 0,
                format_func=options.__getitem__,
                key=f"{route}_{target}",
            )
            session.keep(route, chosen or None)


def mapping() -> None:
    """Ask for the units and bases the headers do not give."""
    table = session.source()
    try:
        meanings = inspect_table(
            table["data"], units=table["units"], basis=session.setting("basis"), name=table["name"]
        )
    except EnergyError:
        return
    lacking = screen.missing_headers(meanings)
    if lacking:
        st.subheader("What the headers do not say", anchor=False)
        with st.form("mapping"):
            chosen = {}
            for meaning in lacking:
                chosen[meaning.header] = st.selectbox(
                    f"Unit and basis of '{meaning.header}'",
                    screen.unit_choices(meaning),
                    index=None,
                    placeholder="choose what the laboratory meant",
                    key=f"unit_{meaning.header}",
                )
            if st.form_submit_button("Use these units", type="primary"):
                table["units"].update({header: unit for header, unit in chosen.items() if unit})
                st.rerun()
    understood = screen.understood_table(meanings)
    if len(understood):
        with st.expander(f"Headers that are understood: {len(understood)}"):
            st.table(screen.safe(understood), hide_index=True)


def board(assessment: Assessment) -> None:
    """The verdicts, filtered, with a way to each sample."""
    stages = screen.stages(assessment)
    st.markdown("  \n".join(f"**{screen.plain(line)}**" for line in screen.summary(assessment)))
    place_stage, place_words, place_text = st.columns([2, 2, 1])
    options = [*stages, "every stage"] if len(stages) > 1 else list(stages)
    stage = place_stage.selectbox("Stage", options, format_func=lambda s: stages.get(s, s), key="stage")
    words = place_words.multiselect("Verdict", [boards.word(v) for v in boards.MARKS], key="words", placeholder="all")
    text = place_text.text_input("Sample or name holds", key="search")
    table = screen.board_table(assessment, stage if stage in stages else None)
    shown = screen.board_filter(table, words, text)
    if shown.empty:
        st.info("No sample fits these filters.")
        return
    picked = st.dataframe(
        shown.style.apply(drawing.verdict_styles, subset=["verdict"]).format(screen.board_formats(shown), na_rep=""),
        hide_index=True,
        width="stretch",
        on_select="rerun",
        selection_mode="single-row",
        height=398 if len(shown) > 10 else "auto",
        placeholder="",
        column_order=[c for c in shown.columns if c != "stage" or stage not in stages],
        column_config={
            "sample": st.column_config.TextColumn(width=70),
            "name": st.column_config.TextColumn(width=270),
            "verdict": st.column_config.TextColumn(width=125),
            "probable cause, or what is missing": st.column_config.TextColumn(width="large"),
            "to measure next": st.column_config.TextColumn(width="large"),
        },
        key="board",
    )
    st.caption(
        "Tick a row to open its sample. The verdict answers whether bomb and composition describe the same material: it "
        "is about the measurement part. The convention part is expected and nobody's fault. "
        f"Limit: {assessment.choice.limit.reason}. Energies {assessment.shown.basis.replace('_', ' ')}. "
        f"{screen.unit_sentence(assessment)}"
    )
    rows = picked["selection"]["rows"]
    if rows:
        open_sample(str(shown.iloc[rows[0]]["sample"]))
    waiting = screen.to_look_at(shown)
    if waiting:
        st.subheader("To look at first", anchor=False)
        for sample, title, sentence in waiting:
            words_place, button_place = st.columns([6, 1], vertical_alignment="center")
            words_place.markdown(f"**{screen.plain(title)}**  \n{screen.plain(sentence)}")
            if button_place.button(f"Open {sample}", key=f"open_{sample}"):
                open_sample(sample)


def open_sample(sample: str) -> None:
    """Go to one sample's screen."""
    st.session_state["sample"] = sample
    st.switch_page(SAMPLE_PAGE)


session.opening("Bench", "Does the bomb's energy meet the energy from composition, sample by sample?")
if session.source()["demo"]:
    demonstration()
loading()
choosing()
assessment = session.current()
if assessment is None:
    mapping()
else:
    board(assessment)
    with st.expander("Do the routes agree over the whole batch?"):
        stage = st.session_state.get("stage")
        agreement_plots.agreement_panel(assessment, stage if stage in screen.stages(assessment) else "GE")
    if assessment.problems:
        st.subheader("Found while reading the table", anchor=False)
        session.problem_list(assessment.problems)
    st.subheader("Take it with you", anchor=False)
    with st.container(horizontal=True):
        for title, name, key in (
            ("Results (CSV)", "results.csv", "csv"),
            ("Evidence (XLSX)", "evidence.xlsx", "xlsx"),
            ("Evidence (HTML)", "evidence.html", "html"),
        ):
            st.download_button(title, partial(screen.file_bytes, assessment, f".{key}"), name, key=key)
session.footer()
