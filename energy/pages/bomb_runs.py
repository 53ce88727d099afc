"""Bomb runs: a run sheet and its thermograms -> gross energies, every correction in sight."""

from __future__ import annotations

from typing import Any

import streamlit as st

from energy.bomb.cautions import CAUTIONS
from energy.bomb.corrections import SULFUR, SULFUR_REASON
from energy.bomb.outcome import Reduction
from energy.bomb.reduction import reduce_runs
from energy.bomb.rise import METHODS
from energy.pages import bomb_drawing, session
from energy.problems import EnergyError, StructuralProblems
from energy.report import bench_work, screen

#: choices that outlive their widgets
DEFAULTS: dict[str, Any] = {"method": "regnault_pfaundler", "sulfur": "off", "nitric_acid": "given", "rated": None}
BASES = {"as_analysed": "as analysed (with the powder's moisture)", "dry_matter": "dry matter", "as_is": "as is"}
NITRIC_ACID = {"given": "as the sheet gives it", "share": "a share of the heat where nobody titrated"}


def kept(name: str) -> Any:
    """A choice made before."""
    return st.session_state.setdefault(f"runs_{name}", DEFAULTS[name])


def at_hand() -> dict[str, Any]:
    """The sheet and thermograms looked at: the demo until others are loaded."""
    if "runs_source" not in st.session_state:
        sheet, readings = bench_work.demo()
        st.session_state["runs_source"] = {"name": "bomb_runs.csv", "data": sheet, "demo": True, "moved": {},
                                           "readings_name": "bomb_thermograms.csv", "readings": readings}  # fmt: skip
    found: dict[str, Any] = st.session_state["runs_source"]
    return found


@st.cache_resource(max_entries=8, show_spinner=False)
def _reduced(
    name: str,
    data: bytes,
    readings_name: str | None,
    readings: bytes | None,
    moved: tuple[tuple[str, tuple[float, float]], ...],
    method: str,
    sulfur: str,
    nitric_acid: str,
    rated: float | None,
) -> Reduction:
    return reduce_runs(
        data,
        readings,
        name=name,
        thermograms_name=readings_name,
        moved=dict(moved),
        method=method,
        sulfur=sulfur,
        nitric_acid=nitric_acid,
        rated_energy=bench_work.joule(rated),
    )


def load() -> None:
    """Take another sheet."""
    with st.expander("Load your own run sheet"):
        left, right = st.columns(2)
        sheet = left.file_uploader("Run sheet: one row per run", ["csv", "xlsx", "parquet"], key="runs_upload")
        readings = right.file_uploader(
            "Thermograms, if the rises are not in the sheet: run_id, time [s], temperature [°C]",
            ["csv", "xlsx", "parquet"],
            key="readings_upload",
        )
        st.download_button("Empty run sheet", bench_work.empty_sheet(), "runs.csv", "text/csv")
        if sheet is None:
            return
        new = {"name": sheet.name, "data": sheet.getvalue(), "demo": False, "moved": {},
               "readings_name": readings.name if readings else None,
               "readings": readings.getvalue() if readings else None}  # fmt: skip
        old = at_hand()
        if any(old[k] != new[k] for k in ("name", "data", "readings")):
            st.session_state["runs_source"] = new
            st.session_state.pop("run_choice", None)


def choices() -> None:
    """How the runs are to be reduced."""
    one, two, three, four = st.columns([3, 3, 3, 2])
    method = one.selectbox("Corrected rise by", list(METHODS), index=list(METHODS).index(kept("method")),
                           format_func=bench_work.method_name)  # fmt: skip
    acid = two.selectbox("Nitric acid", list(NITRIC_ACID), index=list(NITRIC_ACID).index(kept("nitric_acid")),
                         format_func=lambda a: NITRIC_ACID[a])  # fmt: skip
    sulfur = three.selectbox("Sulfur", list(SULFUR), index=list(SULFUR).index(kept("sulfur")),
                             format_func=bench_work.sulfur_name, help=SULFUR_REASON)  # fmt: skip
    rated = four.number_input("Vessel rated for, kJ", min_value=0.0, value=kept("rated"), placeholder="not given",
                              help="A charge over it is warned of. Below it nothing is said.")  # fmt: skip
    for name, value in (("method", method), ("nitric_acid", acid), ("sulfur", sulfur), ("rated", rated)):
        st.session_state[f"runs_{name}"] = value


def current() -> Reduction | None:
    """The runs at hand reduced; None, with the problems on screen, where they cannot be."""
    source = at_hand()
    try:
        found: Reduction = _reduced(
            source["name"],
            source["data"],
            source["readings_name"],
            source["readings"],
            tuple(sorted(source["moved"].items())),
            kept("method"),
            kept("sulfur"),
            kept("nitric_acid"),
            kept("rated"),
        )
        return found
    except StructuralProblems as problems:
        st.error(f"{source['name']} cannot be used yet. To mend: {len(problems.problems)}.")
        session.problem_list(problems.problems)
    except EnergyError as problem:
        st.error(str(problem))
    return None


def samples(found: Reduction) -> None:
    """What the sheet gives: gross energy per sample."""
    st.subheader("Gross energy", anchor=False)
    st.markdown(screen.plain(bench_work.counts(found)))
    if len(found.samples):
        st.dataframe(bench_work.sample_rows(found), hide_index=True, width="stretch")
        st.caption(bench_work.ABOUT_U)
        st.download_button("Sample table (CSV)", bench_work.sample_csv(found), "gross_energy.csv", "text/csv")
        beside(found)
    look = bench_work.to_look_at(found)
    if len(look):
        st.subheader("To look at", anchor=False)
        st.table(screen.safe(look), hide_index=True)
    if found.calibrations:
        st.subheader("Heat capacity", anchor=False)
        st.table(screen.safe(bench_work.calibration_rows(found)), hide_index=True)


def beside(found: Reduction) -> None:
    """A sample table with the gross energies put beside it, to take away or to the Bench."""
    with st.expander("Put them beside a sample table"):
        place, words = st.columns(2)
        table = place.file_uploader("Sample table with a column sample_id", ["csv", "xlsx"], key="beside_upload")
        basis = words.selectbox("Basis of the gross energy", list(BASES), format_func=lambda b: BASES[b])
        if table is None:
            return
        try:
            data, told = bench_work.joined_csv(found, table.getvalue(), table.name, basis)
        except StructuralProblems as problems:
            session.problem_list(problems.problems)
            return
        except EnergyError as problem:
            st.error(str(problem))
            return
        st.markdown(screen.plain(told))
        st.download_button("Joined table (CSV)", data, "joined.csv", "text/csv")
        if st.button("Assess it on the Bench"):
            session.use("joined.csv", data)
            st.switch_page("energy/pages/bench.py")


def one_run(found: Reduction) -> None:
    """One run: the thermogram, the parts of its rise and the budget of its heat."""
    st.subheader("One run", anchor=False)
    titles = bench_work.run_titles(found)
    run = st.selectbox("Run", bench_work.charted(found), key="run_choice", format_func=lambda r: titles.get(r, r))
    for sentence in bench_work.remarks(found, run):
        st.warning(screen.plain(sentence))
    curves = bench_work.curves(found, run)
    if curves is None:
        st.info("The rise of this run stands in the sheet; there is no thermogram to draw.")
    else:
        drawn, told = st.columns([3, 2])
        with drawn:
            st.altair_chart(bomb_drawing.thermogram(curves), width="stretch")
            move(found, run)
        told.table(screen.safe(bench_work.rise_rows(found, run)), hide_index=True)
    st.markdown("##### Where the heat came from")
    st.table(screen.safe(bench_work.budget_rows(found, run)), hide_index=True)
    st.markdown(screen.plain(bench_work.budget_line(found, run)))


def move(found: Reduction, run: str) -> None:
    """Firing and the end of the main period, moved by hand."""
    bounds = bench_work.period_bounds(found, run)
    if bounds is None:
        return
    first, lit, end, last = bounds
    wanted = st.slider("Main period, minutes: firing and end", first, last, (lit, end), key=f"main_period_{run}")
    source = at_hand()
    if wanted != (lit, end):
        source["moved"][run] = bench_work.seconds(wanted)
        st.rerun()
    if run in source["moved"]:
        st.caption("The periods of this run were set by hand.")
        if st.button("Find the periods again"):
            source["moved"].pop(run)
            st.session_state.pop(f"main_period_{run}", None)
            st.rerun()


session.opening("Bomb runs", "From raw firings to gross energy: the rise, every correction, duplicates, moisture.")
st.warning(screen.plain(CAUTIONS[0]))
with st.expander("Before any firing"):
    st.markdown("\n".join(f"- {screen.plain(caution)}" for caution in CAUTIONS[1:]))
load()
if at_hand()["demo"]:
    st.info("Invented demo data: no real laboratory, calorimeter or material.")
choices()
reduction = current()
if reduction is not None:
    samples(reduction)
    one_run(reduction)
    st.subheader("All runs", anchor=False)
    st.dataframe(bench_work.run_rows(reduction), hide_index=True, width="stretch")
    st.subheader("Notes", anchor=False)
    st.markdown("\n".join(f"- {screen.plain(note)}" for note in reduction.notes) or "None.")
    if reduction.problems:
        st.subheader("Found while reading the sheet", anchor=False)
        session.problem_list(reduction.problems)
session.footer()
