"""The object users hold: columns, leading figures, units, wrong use, house files."""

import numpy as np
import pandas as pd
import pytest

import energy
from energy.assessment import demo_paths
from energy.problems import CatalogueProblem, WrongUse
from energy.samples import Samples

RESULTS = ["sample_id", "target", "stage", "route", "system", "value", "unit", "basis", "u", "leading", "status", "reason", "source",
           "locator", "source_status"]  # fmt: skip
VERDICTS = ["sample_id", "target", "stage", "bomb_system", "composition_system", "bomb", "composition", "difference",
            "difference_percent", "measurement_part", "heats_part", "convention_part", "u_difference", "limit_lower", "limit_upper",
            "coverage", "verdict", "reason", "probable_cause", "next_measurement", "unit", "basis"]  # fmt: skip
TEN = {"crude_protein": [0.1], "crude_fat": [0.1], "available_carbohydrate": [0.1], "total_dietary_fibre": [0.1]}


@pytest.fixture(scope="module")
def demo():
    return energy.assess(demo_paths()[0], target="human", law="eu_1169_2011")


def test_results_have_the_columns_of_the_contract(demo):
    assert list(demo.results.columns) == RESULTS


def test_verdicts_have_the_columns_of_the_contract(demo):
    assert list(demo.verdicts.columns)[: len(VERDICTS)] == VERDICTS


def test_empty_tables_keep_their_columns(demo):
    assert {"sample_id", "law", "declared_kj", "verdict", "locator"} <= set(demo.declared.columns)
    assert {"sample_id", "mass_sum", "chi_square"} <= set(demo.balances.columns)


def test_every_figure_says_where_it_comes_from(demo):
    for column in ("system", "unit", "basis", "status", "source", "locator", "source_status"):
        assert (demo.results[column].astype(str).str.len() > 0).all()
    assert demo.results.loc[demo.results["value"].notna(), "u"].notna().all()


def test_what_is_missing_says_why(demo):
    gone = demo.results[demo.results["value"].isna()]
    assert (gone["reason"].str.len() > 0).all()
    assert set(gone["status"]) <= {"missing_input", "missing_factor", "problem"}


def test_one_figure_leads_per_sample_and_stage(demo):
    known = demo.results[demo.results["value"].notna()]
    leads = known.groupby(["sample_id", "stage"], observed=True)["leading"].sum()
    assert set(leads) == {1}


def test_without_a_law_the_bomb_leads():
    a = energy.assess(demo_paths()[0], target="human")
    lead = a.select(stage="ME", sample_id="002")
    assert lead.loc[lead["leading"], "route"].tolist() == ["bomb"]


@pytest.mark.parametrize(("unit", "value"), [("kJ/100 g", 790.0), ("kcal/100 g", 190.0)])
def test_kj_and_kcal_are_two_sums(unit, value):
    """10 g each: 170 + 370 + 170 + 80 kJ; 40 + 90 + 40 + 20 kcal; not 190 x 4.184 = 795."""
    a = energy.assess(Samples.from_arrays(TEN), target="human", law="eu_1169_2011", unit=unit)
    lead = a.select(stage="ME")
    lead = lead[lead["leading"]]
    assert lead["value"].tolist() == pytest.approx([value])
    assert len(a.results[a.results["system"].astype(str).str.startswith("eu_")]) == 1


def test_a_law_with_converted_unit_says_so():
    a = energy.assess(Samples.from_arrays(TEN), target="human", law="fsanz_sch11", unit="kcal/100 g")
    found = a.results[a.results["system"] == "fsanz_sch11"].iloc[0]
    assert "4.18" in found["reason"]


def test_a_unit_on_dry_matter_divides_by_dry_matter(demo):
    other = energy.assess(demo_paths()[0], target="human", law="eu_1169_2011", unit="kJ/100 g DM")
    one, two = demo.select(sample_id="001"), other.select(sample_id="001")
    dry = 1 - demo.samples.columns["moisture"][0]
    kj = one.loc[one["system"] == "eu_1169_2011", "value"].iloc[0] * 100
    assert two.loc[two["system"] == "eu_1169_2011", "value"].iloc[0] == pytest.approx(kj / dry)


def test_all_laws_at_once():
    a = energy.assess(Samples.from_arrays({**TEN, "gross_energy": [9.0]}), target="human", law="all")
    assert {"eu_1169_2011", "fsanz_sch11", "us_21cfr_101_9_b"} <= set(a.verdicts["composition_system"])


def test_bomb_method_of_the_us_is_no_metabolizable_energy():
    a = energy.assess(Samples.from_arrays({**TEN, "gross_energy": [9.0]}), target="human", law="us_21cfr_101_9_b")
    found = a.results[a.results["system"] == "us_21cfr_101_9_e"].iloc[0]
    # 9 MJ/kg less 1.25 kcal/g x 4.184 x 0.1 g/g
    assert found["value"] == pytest.approx(9 - 1.25 * 4.184 * 0.1)
    assert found["stage"] == "label"


def test_wide_is_a_view_of_the_block(demo):
    wide = demo.wide("value")
    assert wide.shape == (len(demo.samples), len(demo.choice.systems))
    assert np.shares_memory(wide.to_numpy(), demo.blocks.value)


@pytest.mark.parametrize(
    ("arguments", "word"),
    [
        ({"target": "unicorn"}, "unicorn"),
        ({}, "for whom"),
        ({"target": "dog", "law": "eu_1169_2011"}, "not for dog"),
        ({"target": "human", "law": "eu_1169"}, "eu_1169_2011"),
        ({"target": "human", "law": "miller_payne_1959"}, "not a law"),
        ({"target": "human", "bomb_system": "eu_1169_2011"}, "no bomb system"),
        ({"target": "human", "composition_system": "nothing"}, "nothing"),
        ({"target": "human", "unit": "parrots"}, "parrots"),
        ({"target": "human", "basis": "wet"}, "wet"),
        ({"target": "human", "systems": "some"}, "some"),
        ({"target": "human", "unit": "kJ/100 ml"}, "per volume"),
    ],
)
def test_wrong_use_names_the_thing_and_the_cure(arguments, word):
    with pytest.raises(WrongUse, match=word) as problem:
        energy.assess(Samples.from_arrays(TEN), **arguments)
    assert problem.value.cure


def test_several_targets_in_one_table_are_told():
    s = Samples.from_arrays({"crude_fat": [0.1, 0.2]}, text={"target": ["human", "dog"]})
    with pytest.raises(WrongUse, match="several targets"):
        energy.assess(s)


HOUSE = """
[publication]
key = "house"
citation = "Method book of the house, edition 3"
[[equation]]
id = "house_me"
title = "House equation"
target = ["human"]
stage = "ME"
route = "composition"
formula = "4*P + 9*F**2"
result = "kJ/g as is"
source_status = "house"
locator = "page 12"
requires_methods = { fat_method = ["acid_hydrolysis"] }
[equation.symbols]
P = { quantity = "crude_protein", unit = "g/g as is" }
F = { quantity = "crude_fat", unit = "g/g as is" }
[[equation.domain]]
symbol = "F"
high = 0.3
locator = "page 13"
"""


@pytest.fixture
def house(tmp_path):
    path = tmp_path / "house.toml"
    path.write_text(HOUSE)
    return path


def house_figure(house, fat=0.2, method="acid_hydrolysis"):
    s = Samples.from_arrays({"crude_protein": [0.1], "crude_fat": [fat]}, u={"crude_protein": [0.01], "crude_fat": [0.02]},
                            text={"fat_method": [method]})  # fmt: skip
    a = energy.assess(s, target="human", composition_system="house_me", house=house)
    return a.results[a.results["system"] == "house_me"].iloc[0]


def test_adding_an_equation_is_one_edit(house):
    found = house_figure(house)
    assert found["value"] == pytest.approx(4 * 0.1 + 9 * 0.04)
    # slopes 4 and 18 F = 3.6: u = hypot(4 x 0.01, 3.6 x 0.02)
    assert found["u"] == pytest.approx(np.hypot(0.04, 0.072))
    listed = energy.equations(house=house).set_index("id").loc["house_me"]
    assert listed["latex"] == r"4\,\mathrm{P} + 9\,\mathrm{F}^{2}"
    assert listed["source"] == "Method book of the house, edition 3"


def test_outside_its_domain_it_computes_and_says_so(house):
    found = house_figure(house, fat=0.4)
    assert found["status"] == "outside_domain"
    assert found["value"] == pytest.approx(0.4 + 9 * 0.16)


def test_another_method_is_told(house):
    assert house_figure(house, method="ether_extract")["status"] == "method_mismatch"


def test_an_unknown_method_is_an_assumption(house):
    assert house_figure(house, method=None)["status"] == "assumed"


def test_a_hostile_house_file_is_a_clear_problem(tmp_path):
    path = tmp_path / "house.toml"
    path.write_text(HOUSE.replace("4*P + 9*F**2", "().__class__.__bases__[0]"))
    with pytest.raises(CatalogueProblem):
        energy.assess(Samples.from_arrays(TEN), target="human", house=path)


def test_equations_can_be_narrowed():
    table = energy.equations(target="human", stage="ME", route="bomb")
    assert {"bomb_atwater_general", "bomb_atwater_by_group", "miller_payne_1959"} <= set(table["id"])
    assert table.loc[table["id"] == "miller_payne_1959", "source_words"].iloc[0].startswith("recalled")


def test_no_eater_means_the_check_of_gross_energy_alone():
    a = energy.assess(Samples.from_arrays({**TEN, "gross_energy": [9.0]}), target="none")
    assert a.verdicts["stage"].tolist() == ["GE"]


def test_a_law_by_bomb_alone_is_shown_without_a_comparison_of_its_own():
    a = energy.assess(Samples.from_arrays({**TEN, "gross_energy": [9.0]}), target="human", law="us_21cfr_101_9_e")
    assert a.select(stage="label")["leading"].tolist() == [True]


def test_what_was_given_is_handed_back_as_stated():
    s = energy.read_samples(b"sample_id,fat [g/kg DM],GE [kJ/g DM],u(GE) [kJ/g]\na,120,18,0.1\n", name="t.csv")
    found = energy.assess(s, target="human").inputs("a").set_index("quantity")
    assert found.loc["fat", ["value", "unit", "basis", "u_from"]].tolist() == [
        pytest.approx(12.0),
        "g/100 g",
        "dry_matter",
        "default",
    ]
    assert found["u"].iloc[1] == pytest.approx(0.1)
    assert found["u_from"].iloc[1] == "given"


@pytest.mark.parametrize(
    ("name", "kilojoules"),
    [("glycerol", 1800), ("tagatose", 1100), ("polydextrose", 500), ("unavailable_carbohydrate", 800)],
)
def test_what_has_its_own_factor_leaves_carbohydrate_by_difference(name, kilojoules):
    """Schedule 11: 18, 11, 5, 8 kJ per g; 100 g of it are not counted again as carbohydrate found by difference."""
    s = Samples.from_arrays({"moisture": [0.0], "crude_protein": [0.0], "crude_fat": [0.0], "ash": [0.0], name: [1.0]})
    found = energy.assess(s, target="human", law="fsanz_sch11", unit="kJ/100 g").select(system="fsanz_sch11")
    assert found["value"].tolist() == pytest.approx([kilojoules])


@pytest.mark.parametrize("law", ["us_21cfr_101_9_c", "ca_cfia_atwater"])
def test_sugar_alcohols_without_a_name_stay_carbohydrate(law):
    """These laws have factors for named sugar alcohols only; a bare sum must not vanish: 100 g at 4 kcal."""
    s = Samples.from_arrays(
        {"crude_protein": [0.0], "crude_fat": [0.0], "carbohydrate_by_difference": [1.0], "polyols": [1.0]}
    )
    found = energy.assess(s, target="human", law=law, unit="kcal/100 g").select(system=law)
    assert found["value"].tolist() == pytest.approx([400])


def test_soluble_fibre_follows_from_the_total():
    # 7 g protein, 2 g fat, 7 g carbohydrate, all of it fibre, 3 g insoluble: 28 + 18 + 2 x 4 = 54 kcal by method (C)
    s = Samples.from_arrays({"crude_protein": [0.07], "crude_fat": [0.02], "carbohydrate_by_difference": [0.07],
                             "total_dietary_fibre": [0.07], "insoluble_fibre": [0.03]})  # fmt: skip
    found = energy.assess(s, target="human", law="us_21cfr_101_9_c", unit="kcal/100 g").select(
        system="us_21cfr_101_9_c"
    )
    assert found["value"].tolist() == pytest.approx([54])


@pytest.mark.parametrize("unit", ["Btu/lb", None, "MJ/kg", "kcal/kg"])
def test_a_law_has_its_leading_figure_in_every_unit(unit):
    a = energy.assess(
        Samples.from_arrays({**TEN, "gross_energy": [9.7]}), target="human", law="eu_1169_2011", unit=unit
    )
    lead = a.select(stage="ME")
    assert lead.loc[lead["leading"], "system"].astype(str).str.startswith("eu_1169_2011").tolist() == [True]


def test_btu_are_made_from_the_laws_leading_sum():
    # 7.9 MJ/kg by the kJ factors; 2326 J/kg are one Btu/lb
    a = energy.assess(Samples.from_arrays(TEN), target="human", law="eu_1169_2011", unit="Btu/lb")
    found = a.select(system="eu_1169_2011").iloc[0]
    assert found["value"] == pytest.approx(7.9e6 / 2326)
    assert "1 Btu/lb = 2326 J/kg" in found["reason"]


def test_a_kilocalorie_sum_shown_in_joules_says_so():
    found = (
        energy.assess(Samples.from_arrays(TEN), target="human", law="eu_1169_2011")
        .select(system="eu_1169_2011_kcal")
        .iloc[0]
    )
    assert "1 kcal = 4.184 kJ" in found["reason"]


# ---- a table for several eaters ---------------------------------------------------------------------------------

MIXED = pd.DataFrame(
    {
        "sample_id": ["a", "b", "c", "d"],
        "target": ["dog", "cat", "dog", "human"],
        "moisture [%]": [8.0, 78.0, 76.0, 38.0],
        "crude protein [% as is]": [25.0, 10.0, 9.0, 8.6],
        "crude fat [% as is]": [14.0, 5.0, 6.0, 1.6],
        "crude fibre [% as is]": [2.5, 0.4, 0.5, 1.0],
        "ash [% as is]": [7.0, 2.0, 2.1, 1.8],
        "gross energy [MJ/kg as is]": [19.1, 5.0, 5.3, 11.5],
    }
)


def test_each_target_is_assessed_by_its_own_systems():
    found = energy.assess_each(MIXED)
    assert {t: list(a.samples.ids) for t, a in found.items()} == {"dog": ["a", "c"], "cat": ["b"], "human": ["d"]}
    assert "nrc_2006_chain_cat_bomb" in set(found["cat"].results["system"])
    assert "nrc_2006_chain_cat_bomb" not in set(found["dog"].results["system"])


def test_a_sample_is_the_same_alone_and_among_others():
    alone = energy.assess(MIXED[MIXED["target"] == "dog"]).results
    pd.testing.assert_frame_equal(alone, energy.assess_each(MIXED)["dog"].results)


def test_samples_for_another_target_are_left_out_and_told():
    a = energy.assess(energy.read_samples(MIXED), target="dog")
    assert list(a.samples.ids) == ["a", "c"]
    assert any("1 for cat, 1 for human" in p.what for p in a.problems)


def test_several_targets_need_a_choice():
    with pytest.raises(energy.WrongUse, match="several targets") as found:
        energy.assess(MIXED)
    assert "assess_each" in found.value.cure


@pytest.mark.parametrize("wrong", [None, "unicorn"])
def test_every_sample_without_a_known_target_is_listed(wrong):
    with pytest.raises(energy.WrongUse, match="No known target is named for b") as found:
        energy.assess_each(MIXED.assign(target=["dog", wrong, "dog", "human"]))
    assert "rabbit" in found.value.cure


def test_nobody_of_that_kind_is_in_the_table():
    with pytest.raises(energy.WrongUse, match="No sample of the table is for horse"):
        energy.assess(MIXED, target="horse")


def test_agreement_of_the_routes_over_the_batch():
    """Limits of agreement by hand: mean and standard deviation of measured less computed gross energy."""
    rng = np.random.default_rng(4)
    n = 30
    columns = {"moisture": np.full(n, 0.1), "crude_protein": rng.uniform(0.05, 0.3, n), "crude_fat": rng.uniform(0.01, 0.3, n),
               "ash": np.full(n, 0.02)}  # fmt: skip
    computed = (5.65 * columns["crude_protein"] + 9.40 * columns["crude_fat"]
                + 4.15 * (0.88 - columns["crude_protein"] - columns["crude_fat"])) * 4.184  # fmt: skip
    off = rng.normal(0.1, 0.2, n)
    a = energy.assess(Samples.from_arrays({**columns, "gross_energy": computed + off}), target="human")
    whole = a.agreement(robust=False)[0]
    assert whole.limits.bias == pytest.approx(off.mean(), rel=1e-6)
    assert whole.limits.sd == pytest.approx(off.std(ddof=1), rel=1e-6)


def test_an_amount_per_mass_is_shown_on_its_basis():
    """Half of 20 g digestible nitrogen per kg DM; 10 g/kg DM are 8.8 g/kg as is at 88 % dry matter."""
    columns = {"dry_matter": np.array([0.88]), "digestible_nitrogen": np.array([0.020])}
    samples = Samples.from_arrays(columns, basis={"digestible_nitrogen": "dry_matter"})
    for unit, basis, expected in (("MJ/kg DM", "dry_matter", 10.0), ("MJ/kg as is", "as_is", 8.8)):
        found = energy.assess(samples, target="growing_pig", systems="all", unit=unit).results
        row = found[found["system"] == "noblet_inra_2004_urine_energy_n_urine"].iloc[0]
        assert (row["value"], row["basis"]) == (pytest.approx(expected), basis)
