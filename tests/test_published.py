"""Every printed value, one test each, through `assess`."""

import csv
import json
from pathlib import Path

import pandas as pd
import pytest

import energy
from energy.catalogue.reader import systems
from energy.quantities import dictionary

SYSTEMS = systems()
CHECKS = [(s.id, c) for s in SYSTEMS.values() for c in s.checks]
PRINTED = list(csv.DictReader((Path(__file__).parent / "published_values.csv").open(encoding="utf-8")))


def figure(system, inputs, unit, text=None, units=None):
    """The figure of one system for one sample, from a table as a user would give it."""
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
    assert all(c.source and c.source_status for _, c in CHECKS)
    assert all(r["source"] and r["source_status"] for r in PRINTED)


def test_there_are_enough_printed_values():
    """22 exact rows of label examples and 30 further printed values, recalled ones not counted."""
    exact = [c for _, c in CHECKS if c.kind == "published" and "NOT exact" not in c.note]
    further = [r for r in PRINTED if r["kind"] == "published" and r["source_status"].startswith("read")]
    assert len(exact) >= 22
    assert len(further) >= 30


def test_second_unit_of_a_law_by_its_own_conversion():
    # Schedule 11: kcal = kJ / 4.18, so 17 kJ of 1 g protein are 4.0670 kcal, not 4.0631
    found = figure("fsanz_sch11", {"crude_protein": 1, "crude_fat": 0, "available_carbohydrate": 0}, "kcal/100 g")
    assert found["value"] == pytest.approx(17 / 4.18)
    assert "4.18 kJ" in found["reason"]


def test_us_kilojoules_come_from_unrounded_kilocalories():
    # butter: 716.8186 kcal x 4.184 = 2999.169 kJ; from the printed 717 it would be 2999.9
    found = figure("us_ah74_specific", {"crude_protein": 0.85, "crude_fat": 81.11, "carbohydrate_by_difference": 0.06,
                                        "nitrogen_factor": 6.38}, "kJ/100 g", {"food_group": "butter"})  # fmt: skip
    assert found["value"] == pytest.approx(2999.169, abs=0.001)
