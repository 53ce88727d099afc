"""What lives between pages: the assessment at hand and the sample looked at."""

from __future__ import annotations

from typing import Any

import streamlit as st

from energy.assessment import Assessment, assess, demo_paths
from energy.intake import read_samples
from energy.problems import EnergyError, StructuralProblems
from energy.report.board import CAUTIONS
from energy.report.screen import problem_rows


@st.cache_data(show_spinner=False)
def _demo_bytes() -> tuple[str, bytes]:
    path = demo_paths()[0]
    return path.name, path.read_bytes()


def source() -> dict[str, Any]:
    """The table at hand: its name and bytes, units given by hand, and whether it is the demo."""
    if "source" not in st.session_state:
        name, data = _demo_bytes()
        st.session_state["source"] = {"name": name, "data": data, "units": {}, "demo": True, "basis": None}
    found: dict[str, Any] = st.session_state["source"]
    return found


def use(name: str, data: bytes) -> None:
    """Take another table; what was given for the old one is forgotten."""
    st.session_state["source"] = {"name": name, "data": data, "units": {}, "demo": False, "basis": None}
    st.session_state.pop("sample", None)


@st.cache_resource(max_entries=8, show_spinner=False)
def _assess(
    name: str,
    data: bytes,
    units: tuple[tuple[str, str], ...],
    target: str,
    law: str | None,
    unit: str,
    limit: str | None,
) -> Assessment:
    samples = read_samples(data, units=dict(units), target=target, name=name)
    return assess(samples, law=law, unit=unit, limit=limit)


def setting(name: str, default: Any) -> Any:
    """A choice that outlives its widget."""
    return st.session_state.setdefault(f"kept_{name}", default)


def keep(name: str, value: Any) -> None:
    """Remember a choice."""
    st.session_state[f"kept_{name}"] = value


def current() -> Assessment | None:
    """The assessment of the table at hand; None, with the problems on screen, if it cannot be made."""
    table = source()
    units = tuple(sorted(table["units"].items()))
    try:
        return _assess(
            table["name"],
            table["data"],
            units,
            setting("target", "human"),
            setting("law", "eu_1169_2011"),
            setting("unit", "kJ/100 g"),
            setting("limit", None),
        )
    except StructuralProblems as problems:
        st.error(f"{table['name']} cannot be used yet: {len(problems.problems)} thing(s) to mend.")
        st.dataframe(problem_rows(problems.problems), hide_index=True, width="stretch")
    except EnergyError as problem:
        st.error(str(problem))
    return None


def footer() -> None:
    """The usual cautions."""
    st.divider()
    for caution in CAUTIONS:
        st.caption(caution)
