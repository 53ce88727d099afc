"""Every printed value, one test each, through `assess`."""

import csv
import json
from pathlib import Path

import pandas as pd
import pytest

import energy
from energy.catalogue.reader import systems
from energy.catalogue.records import SOURCE_STATUS
from energy.quantities import dictionary

SYSTEMS = systems()
CHECKS = [(s.id, c) for s in SYSTEMS.values() for c in s.checks]
PRINTED = list(
    csv.DictReader((Path(__file__).parent / "published_values.csv").read_text(encoding="utf-8").splitlines())
)


def feed_figure(system, inputs, unit, text=None, units=None):
    """The figure of a feed system for one sample, from a table as a user would give it; unit "" for a share."""
    row = {"sample_id": "check", **(text or {}), **{f"{q} [{units[q]}]": v for q, v in inputs.items()}}
    target = next(t for t in SYSTEMS[system].targets if t != "human")
    samples = energy.read_samples(pd.DataFrame([row]), target=target)
    shown = unit if "/" in unit else None
    found = energy.assess(samples, unit=shown, systems="all").results
    return found[found["system"] == system].iloc[0]


def figure(system, inputs, unit, text=None, units=None):
    """The figure of one system for one sample, from a table as a user would give it."""
    if "human" not in SYSTEMS[system].targets or (units and set(units) == set(inputs)):
        return feed_figure(system, inputs, unit, text, units)
    row = {"sample_id": "check", **(text or {})}
    for name, value in inputs.items():
        known = dictionary()[name]
        if units and name in units:
            given = units[name]
        elif known.dimension == "number":
            given = "1"
        elif known.dimension == "energy":
            given = f"{unit} as is"
        else:
            given = "g/100 g as is" if known.basis == "stated" else "g/100 g"
        row[f"{name} [{given}]"] = value
    kind = SYSTEMS[system]
    wanted = {} if kind.stage == "GE" else {f"{kind.route}_system": kind.twin_of or system}
    samples = energy.read_samples(pd.DataFrame([row]), target="human")
    found = energy.assess(samples, unit=unit, systems="all" if kind.stage in ("GE", "label") else "default",
                          **({} if kind.stage == "label" else wanted)).results  # fmt: skip
    return found[found["system"] == system].iloc[0]


@pytest.mark.parametrize(("system", "check"), CHECKS, ids=[f"{s}-{c.name[:40]}" for s, c in CHECKS])
def test_worked_value_of_the_catalogue(system, check):
    found = figure(system, check.inputs, check.unit, check.text, check.units)
    assert found["value"] == pytest.approx(check.expected, abs=check.tolerance * (1 + 1e-9)), check.source


@pytest.mark.parametrize("row", PRINTED, ids=[r["id"] for r in PRINTED])
def test_printed_value(row):
    found = figure(row["system"], json.loads(row["inputs"]), row["unit"], json.loads(row["text"]))
    assert found["value"] == pytest.approx(float(row["expected"]), abs=float(row["tolerance"])), row["source"]


def test_every_check_says_where_it_stands():
    assert all(c.source.strip() and c.source_status in SOURCE_STATUS for _, c in CHECKS)
    assert all(r["source"] and r["locator"] and r["source_status"] in SOURCE_STATUS for r in PRINTED)


def test_there_are_enough_printed_values():
    """22 exact rows of labels and food tables, and 30 further printed values; recalled ones are not counted."""
    exact = [c for _, c in CHECKS
             if c.kind == "published" and c.source_status.startswith("read") and "NOT exact" not in c.note]  # fmt: skip
    further = [r for r in PRINTED if r["kind"] == "published" and r["source_status"].startswith("read")]
    assert len(exact) >= 22
    assert len(further) >= 30


@pytest.mark.parametrize(
    "system",
    [s for s in SYSTEMS.values() if s.components and not s.by_group],
    ids=lambda s: s.id,
)
def test_every_factor_has_its_printed_value(system):
    """One gram of each component of each table stands in published_values.csv, in the unit of the table."""
    tried = {q for r in PRINTED if r["system"] == system.id for q, x in json.loads(r["inputs"]).items() if x == 1}
    assert {c.quantity for c in system.components if c.source_status.startswith("read")} <= tried


def test_a_printed_value_is_no_better_known_than_its_factor():
    """A row that calls itself read belongs to a component the catalogue calls read too."""
    for r in PRINTED:
        given = {q for q, x in json.loads(r["inputs"]).items() if x == 1}
        if r["kind"] == "published" and r["source_status"].startswith("read") and given:
            statuses = {c.source_status for c in SYSTEMS[r["system"]].components if c.quantity in given}
            assert not statuses or any(s.startswith("read") for s in statuses), r["id"]


def test_second_unit_of_a_law_by_its_own_conversion():
    # Schedule 11: kcal = kJ / 4.18, so 17 kJ of 1 g protein are 4.0670 kcal, not 4.0631
    found = figure("fsanz_sch11", {"crude_protein": 1, "crude_fat": 0, "available_carbohydrate": 0}, "kcal/100 g")
    assert found["value"] == pytest.approx(17 / 4.18)
    assert "4.18 kJ" in found["reason"]


def test_us_kilojoules_come_from_unrounded_kilocalories():
    # butter: 0.85 x 4.27 + 81.11 x 8.79 + 0.06 x 3.87 = 716.8186 kcal x 4.184 = 2999.169 kJ; from 717 it would be 2999.9
    found = figure("us_ah74_specific", {"crude_protein": 0.85, "crude_fat": 81.11, "carbohydrate_by_difference": 0.06,
                                        "nitrogen_factor": 6.38}, "kJ/100 g", {"food_group": "butter"})  # fmt: skip
    assert found["value"] == pytest.approx(2999.169, abs=0.001)


def test_a_component_that_has_no_factor_in_a_law_is_not_given_one():
    """The French decree of 1993 knows no fibre factor: 10 g of fibre add nothing."""
    without = {"crude_protein": 5, "crude_fat": 5, "available_carbohydrate": 5}
    assert figure("fr_arrete_1993_12_03", {**without, "total_dietary_fibre": 10}, "kJ/100 g")["value"] == (
        pytest.approx(5 * 17 + 5 * 37 + 5 * 17)
    )
