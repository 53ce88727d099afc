"""`reduce`, `calibrate` and `template runs` in the terminal."""

import json
from pathlib import Path

import pandas as pd
import pytest

import energy
from energy.__main__ import main
from energy.bomb.cautions import CAUTIONS

DEMO = Path(__file__).parent.parent / "demo_data"
RUNS = [str(DEMO / "bomb_runs.csv"), "--thermograms", str(DEMO / "bomb_thermograms.csv")]


def test_reduce_prints_the_samples_and_tells_the_rest_apart(capsys):
    assert main(["reduce", *RUNS]) == 0
    out, err = capsys.readouterr()
    assert "wheat bran" in out
    assert "burn a third" in out
    assert "soot" in out
    assert "row 8" in err
    assert CAUTIONS[0] in err


def test_calibrate_prints_the_heat_capacity(capsys):
    assert main(["calibrate", *RUNS]) == 0
    out, _ = capsys.readouterr()
    assert "calibration of bench 1" in out
    assert "wheat bran" not in out


def test_the_help_carries_the_cautions(capsys):
    with pytest.raises(SystemExit):
        main(["reduce", "--help"])
    said = " ".join(capsys.readouterr().out.split())
    for words in ("rated for", "No oil", "explosives", "Stand away", "Vent slowly", "inspection", "local codes"):
        assert words in said


def test_a_written_csv_is_a_sample_table(tmp_path, capsys):
    goal = tmp_path / "ge.csv"
    assert main(["reduce", *RUNS, "--out", str(goal)]) == 0
    samples = energy.read_samples(goal)
    assert "gross_energy" in samples.columns
    assert len(pd.read_csv(tmp_path / "ge_runs.csv")) == len(pd.read_csv(DEMO / "bomb_runs.csv"))


@pytest.mark.parametrize("ending", ["xlsx", "parquet", "json", "html"])
def test_other_endings(tmp_path, capsys, ending):
    goal = tmp_path / f"ge.{ending}"
    assert main(["reduce", *RUNS, "--out", str(goal)]) == 0
    assert goal.stat().st_size > 1000


def test_the_json_holds_the_budgets(tmp_path, capsys):
    goal = tmp_path / "ge.json"
    main(["reduce", *RUNS, "--out", str(goal)])
    lines = [b for b in json.loads(goal.read_text())["budgets"] if b["run_id"] == "R08"]
    assert sum(b["heat_j"] for b in lines[:-1]) == pytest.approx(lines[-1]["heat_j"])


def test_gross_energies_are_put_beside_a_sample_table(tmp_path, capsys):
    table = tmp_path / "s.csv"
    table.write_text("sample_id,crude protein [% DM]\nwheat bran,17\n009,20\n")
    goal = tmp_path / "joined.csv"
    assert main(["reduce", *RUNS, "--samples", str(table), "--basis", "dry_matter", "--out", str(goal)]) == 0
    joined = pd.read_csv(goal, dtype={"sample_id": str})
    assert joined["sample_id"].tolist() == ["wheat bran", "009"]
    assert joined["gross_energy [MJ/kg DM]"].notna().tolist() == [True, False]


def test_a_heat_capacity_with_its_unit(tmp_path, capsys):
    table = tmp_path / "r.csv"
    table.write_text("run_id,sample_id,sample_mass [g],rise [K]\n1,a,1,2\n")
    assert main(["reduce", str(table), "--heat-capacity", "2400 cal/C"]) == 0
    assert "20.083" in capsys.readouterr().out  # 2400 x 4.184 x 2 = 20083 J/g


@pytest.mark.parametrize("text", ["10062", "10062 J", "much J/K"])
def test_an_amount_without_its_unit_is_refused(tmp_path, capsys, text):
    table = tmp_path / "r.csv"
    table.write_text("run_id,sample_id,sample_mass [g],rise [K]\n1,a,1,2\n")
    assert main(["reduce", str(table), "--heat-capacity", text]) == 2
    assert "Traceback" not in capsys.readouterr().err


def test_a_sheet_that_cannot_be_used_lists_everything_and_writes_nothing(tmp_path, capsys):
    table, goal = tmp_path / "r.csv", tmp_path / "o.csv"
    table.write_text("run,sample_mass,rise [J]\n1,1,2\n1,1,2\n")
    assert main(["reduce", str(table), "--out", str(goal)]) == 1
    err = capsys.readouterr().err
    assert "sample_mass" in err
    assert "rise [J]" in err
    assert "stands twice" in err
    assert not goal.exists()


def test_the_template_of_a_run_sheet(capsys):
    assert main(["template", "runs"]) == 0
    assert capsys.readouterr().out.startswith("run_id,sample_id,kind")
