"""The terminal: what it prints, what it writes, how it exits."""

import subprocess
import sys

import pandas as pd
import pytest

from energy.__main__ import main
from energy.assessment import demo_paths

WIDE = str(demo_paths()[0])
ASSESS = ["assess", WIDE, "--target", "human", "--law", "eu_1169_2011"]


def test_board_goes_to_stdout_and_the_rest_to_stderr(capsys):
    assert main(ASSESS) == 0
    out, err = capsys.readouterr()
    assert "discordant" in out
    assert "licensed adviser" in err
    assert "licensed adviser" not in out


def test_csv_is_tidy(tmp_path, capsys):
    goal = tmp_path / "result.csv"
    assert main([*ASSESS, "--out", str(goal)]) == 0
    table = pd.read_csv(goal, dtype={"sample_id": str}, keep_default_na=False)
    assert {"001", "NA"} <= set(table["sample_id"])
    assert (tmp_path / "result_verdicts.csv").exists()


@pytest.mark.parametrize("ending", ["xlsx", "parquet", "json", "html"])
def test_other_endings(tmp_path, capsys, ending):
    goal = tmp_path / f"result.{ending}"
    assert main([*ASSESS, "--out", str(goal)]) == 0
    assert goal.stat().st_size > 1000


def test_workbook_keeps_ids_as_text(tmp_path, capsys):
    main([*ASSESS, "--out", str(tmp_path / "r.xlsx")])
    table = pd.read_excel(
        tmp_path / "r.xlsx", sheet_name="verdicts", engine="calamine", dtype=str, keep_default_na=False
    )
    assert {"001", "NA"} <= set(table["sample_id"])


def test_structural_problems_are_all_listed_and_nothing_is_written(tmp_path, capsys):
    table = tmp_path / "t.csv"
    table.write_text("sample_id,protein,carbohydrate [%]\na,1,2\n")
    assert main(["assess", str(table), "--target", "human", "--out", str(tmp_path / "r.csv")]) == 1
    out, err = capsys.readouterr()
    assert out == ""
    assert "protein" in err
    assert "carbohydrate" in err
    assert not (tmp_path / "r.csv").exists()


@pytest.mark.parametrize(
    "arguments",
    [
        [*ASSESS[:2], "--target", "unicorn"],
        [*ASSESS[:2]],
        [*ASSESS, "--limit", "five"],
        [*ASSESS, "--out", "result.docx"],
        [*ASSESS, "--out", "/nowhere/result.csv"],
        [*ASSESS, "--fail-on", "sad"],
        ["equations", "nothing"],
    ],
)
def test_wrong_use_is_2_without_a_traceback(arguments, capsys):
    assert main(arguments) == 2
    err = capsys.readouterr().err
    assert err
    assert "Traceback" not in err


def test_fail_on_is_3(capsys):
    assert main([*ASSESS, "--fail-on", "discordant"]) == 3


def test_fail_on_not_met_is_0(capsys):
    assert main([*ASSESS, "--fail-on", "biased"]) == 0


def test_demo_writes_beside_never_over(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    assert main(["demo"]) == 0
    first = {p: p.stat().st_mtime_ns for p in (tmp_path / "energy-demo").iterdir()}
    assert main(["demo"]) == 0
    assert {p: p.stat().st_mtime_ns for p in (tmp_path / "energy-demo").iterdir()} == first
    assert (tmp_path / "energy-demo-2" / "foods_wide_evidence.html").exists()
    assert "Evidence is in" in capsys.readouterr().err


def test_equations_lists_and_shows(capsys):
    assert main(["equations"]) == 0
    assert "eu_1169_2011" in capsys.readouterr().out
    assert main(["equations", "miller_payne_1959"]) == 0
    assert "recalled" in capsys.readouterr().out


@pytest.mark.parametrize("kind", ["samples", "long"])
def test_a_template_is_a_table_the_tool_reads(kind, capsys):
    from energy.intake import inspect_table

    main(["template", kind])
    text = capsys.readouterr().out
    values = ",".join(["1"] * len(text.split(",")))
    found = inspect_table(f"{text}{values}\n".encode(), name="t.csv")
    assert all(m.problem is None for m in found)


def test_python_m_energy_runs():
    found = subprocess.run([sys.executable, "-m", "energy", "--help"], capture_output=True, text=True, check=True)
    assert "assess" in found.stdout


def test_a_table_of_several_species_is_taken_species_by_species(tmp_path, capsys):
    table = tmp_path / "mixed.csv"
    table.write_text(
        "sample_id,target,moisture [%],crude protein [% as is],crude fat [% as is],crude fibre [% as is],ash [% as is],"
        "gross energy [MJ/kg as is]\na,dog,8,25,14,2.5,7,19.1\nb,cat,78,10,5,0.4,2,5.0\n"
    )
    assert main(["assess", str(table), "--out", str(tmp_path / "out.csv")]) == 0
    printed = capsys.readouterr().out
    assert "target dog" in printed
    assert "target cat" in printed
    assert set(pd.read_csv(tmp_path / "out.csv")["target"]) == {"dog", "cat"}
    assert set(pd.read_csv(tmp_path / "out_verdicts.csv")["sample_id"]) == {"a", "b"}


def test_documents_of_several_species_stand_side_by_side(tmp_path):
    table = tmp_path / "mixed.csv"
    table.write_text(
        "sample_id,target,moisture [%],crude protein [% as is],crude fat [% as is],crude fibre [% as is],ash [% as is]\n"
        "a,dog,8,25,14,2.5,7\nb,cat,78,10,5,0.4,2\n"
    )
    assert main(["assess", str(table), "--out", str(tmp_path / "out.html")]) == 0
    assert sorted(p.name for p in tmp_path.glob("*.html")) == ["out_cat.html", "out_dog.html"]


@pytest.mark.parametrize("target", ["dog", "growing_pig", "fish"])
def test_a_template_for_feeds_can_be_filled_in_and_read(target, tmp_path, capsys):
    assert main(["template", "samples", "--target", target]) == 0
    header = capsys.readouterr().out.strip().split(",")
    given = {"sample_id": "1", "target": target, "dry matter [%]": "90"}
    table = tmp_path / "filled.csv"
    table.write_text(",".join(header) + "\n" + ",".join(given.get(h, "") for h in header) + "\n")
    assert main(["assess", str(table)]) == 0


def test_a_template_for_nobody_known_is_refused(capsys):
    assert main(["template", "samples", "--target", "unicorn"]) == 2
    assert "rabbit" in capsys.readouterr().err


def test_equations_are_listed_by_the_kind_of_their_stage(capsys):
    assert main(["equations", "--target", "poultry", "--stage", "AMEn"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert len(lines) >= 20
    assert all(" AMEn " in line for line in lines)


def test_one_equation_is_shown_with_methods_symbols_and_basis(capsys):
    assert main(["equations", "gfe_2008_me_compound"]) == 0
    shown = capsys.readouterr().out
    for words in ("fat_method acid_hydrolysis", "CP = crude_protein [g/kg any basis]", "residual sd       0.25", "any"):
        assert words in shown
