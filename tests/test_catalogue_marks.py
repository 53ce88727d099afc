"""How feed entries are known, whom they speak of and where they hold, as their sources say it."""

import pandas as pd
import pytest

import energy
from energy.catalogue.reader import systems

SYSTEMS = systems()
#: entry -> the weakest of what it rests on, and why
MARKS = {
    "arc_1980_k_kl": "memory_high",  # which pair is kl is recalled
    "arc_1980_k_kf": "memory_high",  # which pair is kf is recalled
    "blaxter_1965_ch4": "memory_high",  # what L means and that the unit is % of GE are recalled
    "blok_2006_ne_digestible": "memory_medium",  # the meanings of the short names are recalled
    "li_2017_pig_me_losses": "derived",  # an identity of ours that gives the paper's table
    "trial_amen_alt_titus": "read_secondary",  # Titus as quoted
    "nrc_1976_tdn_de": "read_secondary",  # NRC 1976 as quoted by NRC 1996
    "nrc_1976_de_me": "read_secondary",
    "king_taverner_1975_de_ndf": "memory_medium",  # the authors' names are recalled, the signs restored
    "king_taverner_1975_de_ge_ndf": "memory_medium",
    "morgan_1975_me_de_ratio": "derived",  # decimal points restored by sense
    "agsci_1975_de_all": "derived",
    "diggs_1965_pig_n_correction": "derived",  # sign and use are ours
}


@pytest.mark.parametrize(("entry", "mark"), MARKS.items())
def test_mixed_facts_take_the_weakest_mark(entry, mark):
    assert SYSTEMS[entry].source_status == mark


@pytest.mark.parametrize("s", SYSTEMS.values(), ids=lambda s: s.id)
def test_an_entry_is_understood_without_its_neighbours(s):
    words = f"{s.title} {s.domain_words} {s.locator}".lower()
    assert not any(x in words for x in ("as above", "do not implement", "_ndf", "nrc_2006_"))


@pytest.mark.parametrize(
    ("entry", "words"),
    [
        ("hales_2019_me_quadratic", "high-concentrate diets for finishing cattle"),
        ("galyean_2016_me_linear", "beef cattle"),
        ("wang_2014_cgf_de", "finishing pigs"),
        ("wang_2014_cgf_me", "finishing pigs"),
        ("nrc_1985_me_dog_acid_ee", "(NRC 1985)"),
    ],
)
def test_a_title_claims_no_more_than_the_paper(entry, words):
    assert words in SYSTEMS[entry].title


@pytest.mark.parametrize("entry", ["gfe_1995_ge", "gfe_2008_me_compound"])
def test_what_was_read_in_the_law_is_placed_in_the_law(entry):
    assert SYSTEMS[entry].locator.startswith("German feed ordinance")


def test_the_german_law_takes_a_bomb_value_for_net_energy():
    """Annex 2, note 1: GE by bomb calorimeter, or by formula."""
    assert SYSTEMS["futtmv_2013_nel"].bomb_allowed == "yes"


def pig(protein):
    row = {"sample_id": "s", "dry matter [%]": 88.0, "crude protein [g/kg as is]": protein, "fat_method": "acid_hydrolysis",
           "crude fat [g/kg as is]": 30.0, "crude fibre [g/kg as is]": 40.0, "ash [g/kg as is]": 50.0,
           "starch_method": "polarimetric", "starch [g/kg as is]": 400.0}  # fmt: skip
    a = energy.assess(energy.read_samples(pd.DataFrame([row]), target="growing_pig"))
    return a.results.set_index("system").loc["gfe_2008_me_compound", "status"]


@pytest.mark.parametrize(("protein", "status"), [(135.0, "ok"), (130.0, "outside_domain"), (225.0, "outside_domain")])
def test_bounds_of_the_pig_formula_are_of_dry_matter(protein, status):
    """GfE 2008: 150 to 250 g of protein per kg DM, which are 132 to 220 g/kg at 88 % dry matter."""
    assert pig(protein) == status


def test_oxygen_of_a_wet_sample_is_looked_at_on_dry_matter():
    """9 % oxygen as is with 20 % dry matter are 45 %: beyond the 10 % of Dulong's formula."""
    row = {"sample_id": "s", "dry matter [%]": 20.0, "carbon [% as is]": 9.0, "hydrogen [% as is]": 1.2,
           "oxygen [% as is]": 9.0, "ash [% as is]": 0.5, "gross energy [MJ/kg as is]": 3.7}  # fmt: skip
    a = energy.assess(energy.read_samples(pd.DataFrame([row]), target="cattle"), systems="all")
    assert a.results.set_index("system").loc["dulong_handbook", "status"] == "outside_domain"


def test_methane_of_cattle_follows_the_newer_guideline_by_digestibility():
    """IPCC 2019 Table 10.12: mixed rations at a digestibility of 62 to 71 %, 6.3 % of GE."""
    row = {"sample_id": "s", "dry matter [%]": 88.0, "crude protein [g/kg DM]": 140.0, "crude fat [g/kg DM]": 30.0,
           "crude fibre [g/kg DM]": 180.0, "ash [g/kg DM]": 70.0, "gross energy [MJ/kg DM]": 18.4,
           "energy digestibility [%]": 68.0}  # fmt: skip
    a = energy.assess(energy.read_samples(pd.DataFrame([row]), target="cattle"), unit="MJ/kg DM")
    found = a.results[a.results["stage"] == "CH4E"].set_index("system")
    assert found.index[found["status"] == "ok"].tolist() == ["ipcc_2019_ym_cattle_mixed"]
    assert found.loc["ipcc_2019_ym_cattle_mixed", "value"] == pytest.approx(18.4 * 0.063)


RABBIT = {"sample_id": "s", "dry matter [%]": 89.0, "crude protein [g/kg DM]": 178.0, "crude fat [g/kg DM]": 32.0,
          "crude fibre [g/kg DM]": 160.0, "ash [g/kg DM]": 86.0, "ADF [g/kg DM]": 205.0, "gross energy [MJ/kg DM]": 18.3}  # fmt: skip


def rabbit(**more):
    return energy.assess(energy.read_samples(pd.DataFrame([RABBIT | more]), target="rabbit"), unit="MJ/kg DM").verdicts


def test_rabbits_are_compared_by_digestible_energy_where_a_digestibility_was_measured():
    """18.3 x 0.62."""
    found = rabbit(**{"energy digestibility [%]": 62.0}).set_index("stage")
    assert found.loc["DE", "bomb"] == pytest.approx(18.3 * 0.62)


def test_rabbits_without_one_have_a_gross_energy_check_only():
    assert set(rabbit()["stage"]) == {"GE"}
