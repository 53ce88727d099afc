"""Feeding trials: what was eaten and voided, each on the basis it was weighed on."""

import pandas as pd
import pytest

import energy
from energy.assessment import demo_paths
from energy.problems import StructuralProblems

#: 1 kg of feed with 88 % dry matter and 17.6 MJ/kg as fed, 20 MJ/kg of dry matter
FED = {"sample_id": "t", "dry matter [%]": 88.0, "gross energy [MJ/kg as fed]": 17.6, "excreta output [kg DM]": 0.25,
       "gross energy of excreta [MJ/kg DM]": 15.0, "nitrogen retained [g/kg DM]": 8.0}  # fmt: skip


def ame(**change):
    samples = energy.read_samples(pd.DataFrame([FED | change]), target="poultry")
    found = energy.assess(samples, unit="MJ/kg DM", systems="all").results.set_index("system")
    return found.loc["trial_ame_total", "value"]


@pytest.mark.parametrize(
    "intake", [{"feed intake [kg DM]": 0.88}, {"feed intake [kg as fed]": 1.0}, {"feed intake [g as is]": 1000.0}]
)
def test_feed_weighed_as_fed_or_dry_is_one_feed(intake):
    """20 - 0.25 x 15 / 0.88 MJ/kg of dry matter, by hand."""
    assert ame(**intake) == pytest.approx(20 - 0.25 * 15 / 0.88)


def test_a_kilogram_of_dry_matter_is_another_trial():
    """20 - 0.25 x 15 / 1."""
    assert ame(**{"feed intake [kg DM]": 1.0}) == pytest.approx(20 - 0.25 * 15)


def test_the_invented_broiler_grower_by_hand():
    """H04, 1 kg eaten as fed with 17.34 MJ and 0.88 kg dry matter; 0.27 kg dry excreta take 0.27 x 15.2 = 4.104 MJ;
    16.4 g N/kg DM x 0.88 kg x 34.39 kJ = 0.49632 MJ: 17.34 - 4.104 - 0.49632 = 12.73968 MJ/kg as fed."""
    path = next(p for p in demo_paths() if p.stem == "feeds_poultry")
    found = energy.assess(path).results.set_index(["sample_id", "system"])
    assert found.loc[("H04", "trial_chain_amen_total"), "value"] == pytest.approx(12.73968)


def test_energy_of_a_trial_with_dogs_on_dry_matter():
    """440 kcal digested less 30 x 1.25 by 100 g as fed; 92 g of dry matter with 92 % are the same food."""
    row = {"sample_id": "t", "dry matter [%]": 92.0, "gross energy consumed [kcal]": 500.0,
           "gross energy voided in faeces [kcal]": 60.0, "crude protein consumed [g]": 35.0,
           "crude protein in faeces [g]": 5.0, "feed intake [g DM]": 92.0}  # fmt: skip
    samples = energy.read_samples(pd.DataFrame([row]), target="dog")
    found = energy.assess(samples, unit="kcal/100 g", systems="all").results.set_index("system")
    assert found.loc["fediaf_trial_me_no_urine_dog_1_25", "value"] == pytest.approx(440 - 37.5)


def refused(header):
    with pytest.raises(StructuralProblems) as found:
        energy.read_samples(pd.DataFrame([{"sample_id": "t", header: 1.0}]), target="poultry")
    return found.value.problems[0]


def test_the_basis_of_feed_is_asked_for():
    problem = refused("feed intake [kg]")
    assert "the basis is not said" in problem.what
    assert "[kg DM]" in problem.cure


@pytest.mark.parametrize("unit", ["kg", "kg as is"])
def test_excreta_are_told_by_their_own_dry_matter(unit):
    problem = refused(f"excreta output [{unit}]")
    assert "of its own dry matter" in problem.what
    assert "'excreta output [kg DM]'" in problem.cure


@pytest.mark.parametrize(
    "header", ["gross energy of excreta [MJ/kg as is]", "gross energy of faeces [MJ/kg as is]",
               "nitrogen of excreta [% as is]", "marker in faeces [g/kg as is]", "marker in excreta [g/kg]"],
)  # fmt: skip
def test_moisture_of_the_feed_is_not_that_of_excreta(header):
    assert "of its own dry matter" in refused(header).what
