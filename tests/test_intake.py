"""A laboratory's table -> clean samples, with every problem found."""

import numpy as np
import pandas as pd
import pytest

from energy.intake import inspect_table, read_samples
from energy.problems import StructuralProblems, WrongUse

HEAD = "sample_id,moisture [%],protein [g/100 g as is],fat [g/100 g as is],gross energy [kJ/100 g as is]\n"


def read(text, name="table.csv", **more):
    data = text.encode() if isinstance(text, str) else text
    return read_samples(data, name=name, **more)


def stops(text, **more):
    with pytest.raises(StructuralProblems) as found:
        read(text, **more)
    return [str(p) for p in found.value.problems]


def test_values_come_in_internal_units():
    s = read(HEAD + "a,40,8.5,1.5,1100\n")
    assert s.columns["crude_protein"][0] == pytest.approx(0.085)  # kg/kg
    assert s.columns["gross_energy"][0] == pytest.approx(11.0)  # MJ/kg


def test_ids_stay_text():
    s = read(HEAD + "001,40,8,1,1100\nNA,40,8,1,1100\n1e5,40,8,1,1100\n")
    assert list(s.ids) == ["001", "NA", "1e5"]


@pytest.mark.parametrize("separator", [",", ";", "\t"])
def test_separators(separator):
    s = read((HEAD + "a,40,8,1,1100\n").replace(",", separator))
    assert s.columns["crude_fat"][0] == pytest.approx(0.01)


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "latin-1"])
def test_encodings(encoding):
    text = "sample_id,name,fat [g/100 g as is]\na,Käse,1\n"
    assert read(text.encode(encoding)).text["name"][0] == "Käse"


def test_decimal_comma_when_unmistakable():
    s = read("sample_id;fat [g/100 g as is]\na;12,5\n")
    assert s.columns["crude_fat"][0] == pytest.approx(0.125)


def test_a_thousands_comma_is_not_guessed():
    assert any("decimal" in p for p in stops('sample_id;gross energy [kJ/kg as is]\na;"1,234"\n'))


def test_a_declared_decimal_comma_is_believed():
    s = read('sample_id;fat [g/kg as is]\na;"1,234"\n', decimal="comma")
    assert s.columns["crude_fat"][0] == pytest.approx(1.234e-3)


def test_replicates_are_averaged():
    s = read("sample_id,gross energy [kJ/g DM],gross energy #2 [kJ/g DM]\na,18,18.2\n")
    assert s.columns["gross_energy"][0] == pytest.approx(18.1)
    assert s.replicates["gross_energy"][0] == 2


def test_repeated_headers_are_replicates():
    s = read("sample_id,GE [kJ/g DM],GE [kJ/g DM]\na,18,18.2\n")
    assert s.columns["gross_energy"][0] == pytest.approx(18.1)


def test_infoods_tagnames():
    s = read("sample_id,PROCNT [g/100 g as is],FIBTG [g/100 g as is]\na,10,3\n")
    assert {"crude_protein", "total_dietary_fibre"} <= set(s.columns)


def test_a_censored_value_is_half_with_rectangular_u():
    # uniform on 0..0.5: mean 0.25, standard deviation 0.5/sqrt(12)
    s = read("sample_id,fat [g/100 g as is]\na,<0.5\n")
    assert s.columns["crude_fat"][0] == pytest.approx(0.0025)
    assert s.u["crude_fat"][0] == pytest.approx(0.005 / np.sqrt(12))
    assert s.censored["crude_fat"][0]


@pytest.mark.parametrize("cell", ["n.d.", "trace", "> 5", "12 %", "abc", "-"])
def test_a_bad_cell_voids_only_itself_and_says_where(cell):
    s = read(f"sample_id,fat [g/100 g as is],ash [g/100 g as is]\na,{cell},1\nb,2,1\n")
    problem = next(p for p in s.problems if p.severity == "cell")
    assert (problem.row, problem.sample_id, problem.value) == (2, "a", cell)
    assert problem.cure
    assert s.voided["crude_fat"].tolist() == [True, False]
    assert s.columns["ash"].tolist() == pytest.approx([0.01, 0.01])


def test_all_problems_of_a_file_come_at_once():
    found = stops("sample_id,protein [g/100 g],carbohydrate [%],fat,energy [kJ]\na,1,2,3,4\na,1,2,3,4\n")
    assert len(found) == 5
    text = " ".join(found)
    for word in ("basis is not said", "available carbohydrate", "has no unit", "gross energy", "stands twice"):
        assert word in text


@pytest.mark.parametrize("header", ["carbohydrate [g/100 g as is]", "fibre [g/100 g as is]", "energy [kJ/100 g as is]"])
def test_words_that_mean_several_things_are_refused(header):
    assert any("several things" in p for p in stops(f"sample_id,{header}\na,1\n"))


def test_a_near_name_is_proposed():
    assert any("protein" in p for p in stops("sample_id,protien [g/100 g as is]\na,1\n"))


def test_basis_for_all_is_taken():
    s = read("sample_id,protein [g/100 g]\na,10\n", basis="dry_matter")
    assert s.basis["crude_protein"].tolist() == [2]


def test_units_by_hand():
    s = read("sample_id,Eiweiss protein\na,10\n".replace("Eiweiss ", ""), units={"protein": "g/100 g as is"})
    assert s.columns["crude_protein"][0] == pytest.approx(0.1)


def test_units_file(tmp_path):
    path = tmp_path / "units.toml"
    path.write_text('protein = "g/kg DM"\n')
    assert read("sample_id,protein\na,100\n", units=path).columns["crude_protein"][0] == pytest.approx(0.1)


def test_per_volume_needs_the_density():
    head = "sample_id,protein [g/100 ml as is],density [g/ml]\n"
    assert read(head + "a,3.4,1.03\n").columns["crude_protein"][0] == pytest.approx(0.034 / 1.03)
    s = read(head + "a,3.4,\n")
    assert any("density" in p.cure for p in s.problems)
    assert np.isnan(s.columns["crude_protein"][0])


def test_as_analysed_needs_the_powder_moisture():
    s = read("sample_id,moisture [%],GE [kJ/g as analysed],residual moisture [%]\na,75,21,4\nb,75,21,\n")
    assert s.columns["gross_energy"][0] == pytest.approx(21.0)
    assert s.voided["gross_energy"].tolist() == [False, True]
    assert "residual_moisture" in s.problems[0].cure


@pytest.mark.parametrize("value", ["-3", "150"])
def test_an_impossible_value_is_voided(value):
    s = read(f"sample_id,fat [g/100 g as is]\na,{value}\n")
    assert s.voided["crude_fat"][0]


def test_an_implausible_value_warns_and_stays():
    s = read("sample_id,GE [MJ/kg as is]\na,60\n")
    assert s.columns["gross_energy"][0] == 60
    assert s.problems[0].severity == "warning"


def test_stated_uncertainty_is_scaled_like_its_value():
    s = read("sample_id,GE [kJ/100 g as is],u(GE) [kJ/100 g]\na,1800,9\n")
    assert s.u["gross_energy"][0] == pytest.approx(0.09)


def test_a_pair_of_duplicates_never_sets_u():
    s = read("sample_id,GE [MJ/kg as is],GE #2 [MJ/kg as is]\na,18,18.0001\n")
    assert s.u["gross_energy"][0] == pytest.approx(0.0129 * 18.00005)  # Bourdillon et al. 1990: 1.29 %


def test_ten_pairs_pool_with_the_between_laboratory_part():
    rows = "".join(f"s{i},18,{18 * (1 + 0.02)}\n" for i in range(12))
    s = read("sample_id,GE [MJ/kg as is],GE #2 [MJ/kg as is]\n" + rows)
    # each pair deviates by +-0.01/1.01 relative: s_r = sqrt(2)*0.01/1.01; of the mean: over sqrt(2)
    mean, spread = 18 * 1.01, 0.01 / 1.01
    assert s.u["gross_energy"][0] == pytest.approx(mean * np.hypot(spread, 0.0129), rel=1e-6)


LONG = "sample_id,analyte,result,unit,basis,method,U,k\n"


def test_long_table():
    s = read(
        LONG
        + "a,protein,8.5,g/100 g,as received,Kjeldahl,0.4,2\na,GE,18.1,kJ/g,dry matter,,,\na,GE,18.3,kJ/g,dry matter,,,\n"
    )
    assert s.columns["gross_energy"][0] == pytest.approx(18.2)
    assert s.basis["gross_energy"].tolist() == [2]
    assert s.u["crude_protein"][0] == pytest.approx(0.002)
    assert s.replicates["gross_energy"][0] == 2


def test_long_table_methods_are_known_words():
    s = read(LONG + "a,fat,8.5,g/100 g,as is,Soxhlet,,\nb,fat,8.5,g/100 g,as is,Weibull-Stoldt,,\n")
    assert s.text["fat_method"].tolist() == ["ether_extract", "acid_hydrolysis"]


def test_long_table_two_bases_for_one_value_is_a_problem():
    s = read(LONG + "a,GE,18.1,kJ/g,dry matter,,,\na,GE,11.3,kJ/g,as is,,,\n")
    assert any("two bases" in p.what for p in s.problems)
    assert any("two bases" in str(p) for p in s.problems)


def test_U_without_k_is_told():
    s = read(LONG + "a,fat,8.5,g/100 g,as is,,0.4,\n")
    assert any("coverage factor" in p.what for p in s.problems)


def test_long_table_order_of_rows_does_not_matter():
    rows = ["a,moisture,40,%,,,,", "a,fat,2,g/100 g,as is,,,", "b,fat,3,g/kg,as is,,,", "b,moisture,10,%,,,,"]
    one, two = read(LONG + "\n".join(rows)), read(LONG + "\n".join(rows[::-1]))
    at = {i: k for k, i in enumerate(two.ids)}
    assert one.columns["crude_fat"].tolist() == [two.columns["crude_fat"][at[i]] for i in one.ids]


def test_workbook(tmp_path):
    path = tmp_path / "t.xlsx"
    pd.DataFrame({"sample_id": ["001", "b"], "fat [g/100 g as is]": [1.5, None]}).to_excel(path, index=False)
    s = read_samples(path)
    assert list(s.ids) == ["001", "b"]
    assert s.columns["crude_fat"][0] == pytest.approx(0.015)


def test_parquet_and_frame(tmp_path):
    frame = pd.DataFrame({"sample_id": ["001", "NA"], "fat [g/100 g as is]": [1.5, 2.0]})
    frame.to_parquet(tmp_path / "t.parquet")
    for table in (frame, tmp_path / "t.parquet"):
        s = read_samples(table)
        assert list(s.ids) == ["001", "NA"]
        assert s.columns["crude_fat"].tolist() == pytest.approx([0.015, 0.02])


@pytest.mark.parametrize(
    ("data", "name", "word"),
    [
        (b"", "a.csv", "empty"),
        (b"\x89PNG\r\n\x1a\n123", "a.csv", "not a text table"),
        (b"PK\x03\x04rubbish", "a.xlsx", "not a workbook"),
        (b"PAR1rubbish", "a.parquet", "not a Parquet"),
        (b"sample_id,fat [g/100 g as is]\n", "a.csv", "no row"),
        (b"a\n1\n", "a.csv", "sample_id"),
        (b"sample_id,fat [g/100 g as is]\na,1,5\n", "a.csv", "cells"),
    ],
)
def test_wrong_files_say_what_they_are(data, name, word):
    assert word in " ".join(stops(data, name=name))


def test_a_missing_file_says_so():
    with pytest.raises(StructuralProblems, match="no such file"):
        read_samples("/nowhere/at/all.csv")


@pytest.mark.parametrize(("name", "value"), [("basis", "wet"), ("decimal", "dot"), ("target", "unicorn")])
def test_wrong_arguments_list_what_there_is(name, value):
    with pytest.raises(WrongUse):
        read("sample_id,fat [g/100 g as is]\na,1\n", **{name: value})


def test_the_form_is_told_what_is_missing():
    found = inspect_table(b"sample_id,protein,fat [g/100 g]\na,1,2\n", name="t.csv")
    assert [m.problem is None for m in found] == [True, False, False]
    assert [m.quantity for m in found][1:] == ["crude_protein", "crude_fat"]


def test_alcohol_with_oven_moisture_warns():
    s = read("sample_id,moisture [%],moisture_method,alcohol [g/100 g as is]\na,85,oven,9\n")
    assert any("alcohol" in p.what for p in s.problems)


def test_an_unused_column_is_kept_and_told():
    s = read("sample_id,fat [g/100 g as is],clerk\na,1,x\n")
    assert s.text["clerk"][0] == "x"
    assert any(p.column == "clerk" for p in s.problems)


def test_an_unknown_food_group_is_told_with_near_ones():
    s = read("sample_id,food_group,fat [g/100 g as is]\na,wheat_brann,1\n")
    assert "wheat_bran" in s.problems[0].cure


def test_moisture_on_dry_matter_is_not_taken_for_moisture():
    assert any("mean something else" in p for p in stops("sample_id,moisture [% DM]\na,10\n"))


@pytest.mark.parametrize(
    ("header", "cure"),
    [("gas production [ml]", "[ml/200 mg]"), ("energy digestibility [g]", "[%]"), ("feed intake [%]", "[kg as is]"),
     ("gross energy consumed [MJ/kg]", "[kJ]")],
)  # fmt: skip
def test_a_wrong_unit_of_a_feed_column_is_told_with_a_right_one(header, cure):
    with pytest.raises(StructuralProblems) as found:
        read_samples(pd.DataFrame({"sample_id": ["1"], header: [1.0]}), target="cattle")
    assert cure in found.value.problems[0].cure


def test_a_lower_bound_below_zero_lets_a_quantity_be_negative():
    s = read_samples(pd.DataFrame({"sample_id": ["1"], "nitrogen retained [g/kg DM]": [-8.0]}), target="poultry")
    assert s.columns["nitrogen_retained"][0] == pytest.approx(-0.008)
    assert s.problems == []
