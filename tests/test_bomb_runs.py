"""The run sheet: what is read, and what is told with row, column, value and cure."""

import pandas as pd
import pytest

from energy.bomb.runs import OUTCOME_COLUMNS, read_runs, read_thermograms, run_columns, template
from energy.problems import StructuralProblems

SHEET = "run_id,sample_id,kind,sample_mass [g],rise [K],ignition_heat [J]\n1,a,test,1.0,2.0,50\n2,a,test,0.9,1.8,50\n"


def read(text, **wishes):
    return read_runs(text.encode(), name="runs.csv", **wishes)


def stopped(text, **wishes):
    with pytest.raises(StructuralProblems) as found:
        read(text, **wishes)
    return [str(p) for p in found.value.problems]


def test_a_plain_sheet_is_read():
    sheet = read(SHEET)
    assert sheet.text["run_id"].tolist() == ["1", "2"]
    assert sheet.number["rise"].tolist() == [2.0, 1.8]
    assert sheet.problems == []


@pytest.mark.parametrize(
    ("header", "cell", "column", "value"),
    [
        ("sample_mass [mg]", "1000", "sample_mass", 1.0),
        ("bag_heat [kJ/g]", "46.2", "bag_heat", 46_200.0),
        ("bag_heat [MJ/kg]", "46.2", "bag_heat", 46_200.0),
        ("bag_heat [cal/g]", "10000", "bag_heat", 41_840.0),
        ("heat_capacity [kJ/K]", "10", "heat_capacity", 10_000.0),
        ("heat_capacity [cal/°C]", "2400", "heat_capacity", 2400 * 4.184),
        ("oxygen_pressure [bar]", "30", "oxygen_pressure", 3.0),
        ("firing_time [min]", "5", "firing_time", 300.0),
        ("residual_moisture [%]", "4", "residual_moisture", 0.04),
        ("residual_moisture [g/kg]", "40", "residual_moisture", 0.04),
        ("bomb_volume [ml]", "340", "bomb_volume", 0.34),
    ],
)
def test_units_stand_in_the_headers(header, cell, column, value):
    base = "" if column == "sample_mass" else ",sample_mass [g]"
    sheet = read(f"run_id,sample_id{base},{header}\n1,a{',1' if base else ''},{cell}\n")
    assert sheet.number[column][0] == pytest.approx(value)


def test_all_problems_of_a_sheet_come_at_once():
    told = stopped("run_id,sample_mass,rise [J],mas [g],rise [K]\n1,1,2,3,2\n1,1,2,3,2\n")
    assert len(told) >= 4
    assert any("sample_mass" in t and "no unit" in t for t in told)
    assert any("rise [J]" in t for t in told)
    assert any("mas [g]" in t and "Did you mean" in t for t in told)
    assert any("row 3" in t and "stands twice" in t for t in told)


def test_a_sheet_without_ids_or_masses_is_refused():
    told = stopped("sample_id,rise [K]\na,2\n")
    assert any("run_id" in t for t in told)
    assert any("sample_mass" in t for t in told)


@pytest.mark.parametrize(
    ("cell", "words"), [("x", "not a number"), ("<0.5", "not a limit"), ("-1", "impossible"), ("0", "impossible")]
)
def test_a_bad_cell_voids_its_row_and_says_where(cell, words):
    sheet = read(f"run_id,sample_id,sample_mass [g],rise [K]\n1,a,{cell},2\n2,a,1,2\n")
    assert sheet.is_void.tolist() == [True, False]
    problem = next(p for p in sheet.problems if p.row == 2)
    assert words in str(problem)
    assert "sample_mass" in str(problem.column)


def test_an_implausible_cell_is_used_and_told():
    sheet = read("run_id,sample_id,sample_mass [g],rise [K]\n1,a,1,25\n")
    assert sheet.number["rise"][0] == 25
    assert sheet.problems[0].severity == "warning"


def test_an_unknown_kind_is_told_with_the_known_ones():
    sheet = read("run_id,sample_id,kind,sample_mass [g],rise [K]\n1,a,trial,1,2\n")
    assert "test, calibration, control, blank" in str(sheet.problems[0])
    assert sheet.is_void[0]


def test_decimal_commas_are_understood_where_unmistakable():
    sheet = read("run_id;sample_id;sample_mass [g];rise [K]\n1;a;0,9021;2,0412\n")
    assert sheet.number["sample_mass"][0] == 0.9021


def test_a_date_is_year_month_day():
    sheet = read("run_id,sample_id,date,sample_mass [g],rise [K]\n1,a,3/4/2026,1,2\n")
    assert "2026-05-31" in str(sheet.problems[0])


def test_the_template_is_a_sheet_that_can_be_read():
    header = template()
    row = {"run_id": "1", "sample_id": "a", "kind": "test", "sample_mass [g]": "1", "rise [K]": "2"}
    line = ",".join(row.get(h, "") for h in header.split(","))
    assert read(f"{header}\n{line}\n").problems == []


def test_a_workbook_is_read_like_a_text_table(tmp_path):
    path = tmp_path / "runs.xlsx"
    pd.DataFrame({"run_id": ["01"], "sample_id": ["a"], "sample_mass [g]": [1.0], "rise [K]": [2.0],
                  "date": [pd.Timestamp("2026-03-02")]}).to_excel(path, index=False)  # fmt: skip
    sheet = read_runs(path)
    assert sheet.text["run_id"][0] == "01"
    assert sheet.text["date"][0] == "2026-03-02"


def test_thermograms_want_units_and_columns():
    with pytest.raises(StructuralProblems, match=r"time \[s\]"):
        read_thermograms(b"run_id,time,temperature\n1,0,20\n", name="t.csv")
    with pytest.raises(StructuralProblems, match="run_id"):
        read_thermograms(b"time [s],temperature [C]\n0,20\n", name="t.csv")


def test_minutes_become_seconds_and_a_bad_reading_is_left_out():
    found, told = read_thermograms("run_id,time [min],temperature [°C]\n1,0,20\n1,1,x\n1,2,21\n".encode(), name="t.csv")
    assert found.time[0].tolist()[:2] == [0.0, 120.0]
    assert told[0].row == 3


def test_a_thermogram_without_a_run_is_told():
    sheet = read_runs(
        SHEET.encode(), b"run_id,time [s],temperature [C]\n9,0,20\n", name="r.csv", thermograms_name="t.csv"
    )
    assert "'9'" in str(sheet.problems[-1])


def test_no_word_names_two_columns():
    from energy.bomb.runs import normal_form

    words = [normal_form(w) for c in run_columns().values() for w in (c.name, *c.synonyms)]
    assert len(words) == len(set(words))


def test_outcome_columns_hold_what_the_record_needs():
    needed = {"run_id", "sample_id", "kind", "instrument", "operator", "date", "batch", "rise", "heat_capacity",
              "calibration_id", "gross_energy", "u", "status", "reason"}  # fmt: skip
    assert needed <= set(OUTCOME_COLUMNS)


@pytest.mark.parametrize(
    ("head", "cells", "words"),
    [
        ("ignition_mass [mg]", "10", "not said of what"),
        ("ignition_mass [mg],ignition_material", "10,gold", "cotton_thread"),
        ("ignition_length [cm],ignition_material", "10,cotton thread", "per g"),
        ("firing_time [min],main_end [min]", "9,5", "ends before the firing"),
        ("residual_moisture [%]", "100", "impossible"),
    ],
)
def test_what_cannot_be_reckoned_is_told_in_its_row(head, cells, words):
    sheet = read(f"run_id,sample_id,sample_mass [g],rise [K],{head}\n1,a,1,2,{cells}\n")
    assert sheet.is_void[0]
    assert words in str(sheet.problems[0])
    assert sheet.problems[0].row == 2
