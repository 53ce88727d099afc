"""What lives between pages: the table at hand, the choices made, the assessment and the sample looked at."""

from __future__ import annotations

from typing import Any

import streamlit as st

from energy.assessment import Assessment, assess, demo_paths, named_targets
from energy.catalogue import tables
from energy.intake import read_samples
from energy.pages import drawing
from energy.problems import EnergyError, StructuralProblems
from energy.report.board import CAUTIONS
from energy.report.screen import problem_rows, safe

#: choices that outlive their widgets, and what they are until somebody chooses
DEFAULTS: dict[str, Any] = {"target": "human", "law": "eu_1169_2011", "unit": "kJ/100 g", "limit": None,
                            "basis": None, "decimal": None, "bomb": None, "composition": None}  # fmt: skip

#: so many problems are set in full
FEW = 12


def opening(title: str, line: str) -> None:
    """The head of a screen."""
    st.html(drawing.STYLE)
    st.title(title, anchor=False)
    st.caption(line)


def source() -> dict[str, Any]:
    """The table at hand: its name and bytes, units given by hand, and whether it is the demo."""
    if "source" not in st.session_state:
        path = demo_paths()[0]
        use(path.name, path.read_bytes(), demo=True)
    found: dict[str, Any] = st.session_state["source"]
    return found


def use(name: str, data: bytes, demo: bool = False) -> None:
    """Take another table; what was given for the old one is forgotten."""
    st.session_state["source"] = {"name": name, "data": data, "units": {}, "demo": demo}
    for left_over in ("sample", "kept_basis", "kept_decimal", "basis", "decimal", "asked_target"):
        st.session_state.pop(left_over, None)


@st.cache_resource(max_entries=8, show_spinner=False)
def _assess(
    name: str,
    data: bytes,
    units: tuple[tuple[str, str], ...],
    basis: str | None,
    decimal: str | None,
    target: str,
    law: str | None,
    unit: str,
    limit: str | None,
    bomb: str | None,
    composition: str | None,
) -> Assessment:
    samples = read_samples(data, units=dict(units), basis=basis, target=target, decimal=decimal, name=name)
    return assess(samples, law=law, unit=unit, limit=limit, bomb_system=bomb, composition_system=composition)


@st.cache_data(max_entries=16, show_spinner=False)
def _named(
    name: str, data: bytes, units: tuple[tuple[str, str], ...], basis: str | None, decimal: str | None
) -> list[str]:
    try:
        samples = read_samples(data, units=dict(units), basis=basis, target="none", decimal=decimal, name=name)
    except EnergyError:
        return []
    return [t for t in named_targets(samples) if t in tables.targets()]


def named() -> list[str]:
    """The species or uses the table at hand names itself."""
    table = source()
    units = tuple(sorted(table["units"].items()))
    return _named(table["name"], table["data"], units, setting("basis"), setting("decimal"))


def setting(name: str) -> Any:
    """A choice that outlives its widget."""
    return st.session_state.setdefault(f"kept_{name}", DEFAULTS[name])


def keep(name: str, value: Any) -> None:
    """Remember a choice."""
    st.session_state[f"kept_{name}"] = value


def current() -> Assessment | None:
    """The assessment of the table at hand; None, with the problems on screen, if it cannot be made."""
    table = source()
    try:
        found: Assessment = _assess(
            table["name"],
            table["data"],
            tuple(sorted(table["units"].items())),
            setting("basis"),
            setting("decimal"),
            setting("target"),
            setting("law"),
            setting("unit"),
            setting("limit"),
            setting("bomb"),
            setting("composition"),
        )
        return found
    except StructuralProblems as problems:
        count = len(problems.problems)
        st.error(f"{table['name']} cannot be used yet. To mend: {count} {'thing' if count == 1 else 'things'}.")
        problem_list(problems.problems)
    except EnergyError as problem:
        st.error(str(problem))
    return None


def problem_list(problems: list[Any]) -> None:
    """Problems with row, column, value and cure: a few in full, many in a table that scrolls."""
    rows = problem_rows(problems)
    if len(rows) <= FEW:
        st.table(safe(rows), hide_index=True)
    else:
        st.dataframe(rows, hide_index=True, width="stretch")


def footer() -> None:
    """The usual cautions, quietly."""
    st.divider()
    st.caption(" ".join(CAUTIONS))
