"""GE -> DE -> ME -> NE with each loss: what is lost is exactly what two neighbouring figures differ by."""

import pandas as pd
import pytest

import energy
from energy.assessment import demo_paths

FEED = {"sample_id": "s", "dry matter [%]": 88.0, "crude protein [g/kg DM]": 150.0, "crude fat [g/kg DM]": 30.0,
        "crude fibre [g/kg DM]": 200.0, "ash [g/kg DM]": 70.0, "NDF [g/kg DM]": 400.0, "ADF [g/kg DM]": 250.0,
        "starch [g/kg DM]": 200.0, "gross energy [MJ/kg DM]": 18.2}  # fmt: skip


def partition(target, unit="MJ/kg DM", **more):
    samples = energy.read_samples(pd.DataFrame([{**FEED, **more}]), target=target)
    return energy.assess(samples, unit=unit).partition("s")


def lines(found, route):
    return list(found[found["route"] == route][["step", "value"]].itertuples(index=False, name=None))


CASES = {
    "dog": {}, "cat": {}, "growing_pig": {}, "sow": {}, "horse": {"energy digestibility [%]": 60.0}, "rabbit": {},
    "cattle": {"energy digestibility [%]": 68.0}, "dairy_cow": {"energy digestibility [%]": 68.0},
    "sheep": {"energy digestibility [%]": 68.0, "urinary energy [MJ/kg DM]": 0.6, "methane energy [MJ/kg DM]": 1.2},
    "fish": {"energy digestibility [%]": 75.0},
}  # fmt: skip


@pytest.mark.parametrize("route", ["bomb", "composition"])
@pytest.mark.parametrize("target", CASES)
def test_figures_and_losses_close(target, route):
    """The first figure less all losses is the last figure; gain is another use of the energy of maintenance."""
    found = partition(target, **CASES[target])
    found = found[(found["route"] == route) & (found["step"] != "net energy for gain")]
    losses = found["stage"] == "loss"
    assert found["value"].iloc[0] - found.loc[losses, "value"].sum() == pytest.approx(
        found.loc[~losses, "value"].iloc[-1]
    )


def test_measured_losses_stand_apart():
    """18.2 x 0.68 = 12.376; urine 0.6 and methane 1.2 leave 10.576."""
    found = lines(partition("sheep", **CASES["sheep"]), "bomb")
    assert [(s, round(v, 3)) for s, v in found] == [
        ("gross energy", 18.2), ("energy in faeces", 5.824), ("digestible energy", 12.376), ("energy in urine", 0.6),
        ("energy in methane", 1.2), ("metabolizable energy", 10.576),
    ]  # fmt: skip


def test_losses_of_horses_by_their_equations():
    """Kienzle and Zeyner 2010: urine 0.008 x 150, methane 0.002 x 200 MJ/kg DM."""
    found = dict(lines(partition("horse", **CASES["horse"]), "bomb"))
    assert found["energy in urine"] == pytest.approx(1.2)
    assert found["energy in methane"] == pytest.approx(0.4)


def test_pigs_reach_net_energy():
    steps = [s for s, _ in lines(partition("growing_pig"), "bomb")]
    assert steps == ["gross energy", "energy in faeces", "digestible energy", "energy in urine and gas",
                     "metabolizable energy", "heat increment", "net energy"]  # fmt: skip


def test_urine_of_dogs_by_hand():
    """NRC 2006: 1.04 kcal per g of protein; 13.2 g per 100 g as fed take 13.728 kcal."""
    found = dict(lines(partition("dog", "kcal/100 g"), "bomb"))
    assert found["energy in urine and gas"] == pytest.approx(1.04 * 13.2)


def test_the_composition_route_starts_with_its_chains_own_gross_energy():
    """5.7 x 13.2 + 9.4 x 2.64 + 4.1 x (88 - 13.2 - 2.64 - 6.16) kcal/100 g."""
    found = dict(lines(partition("dog", "kcal/100 g"), "composition"))
    assert found["gross energy"] == pytest.approx(5.7 * 13.2 + 9.4 * 2.64 + 4.1 * (88 - 13.2 - 2.64 - 6.16))


def test_every_line_has_its_source():
    found = partition("growing_pig")
    assert (found["source"].str.len() > 0).all()
    assert (found["locator"].str.len() > 0).all()


BALANCE = {"energy digestibility [%]": 63.0, "urinary energy [MJ/kg DM]": 0.75, "methane energy [MJ/kg DM]": 1.13}


def test_heat_increment_of_a_balance_is_taken_within_the_chain_of_net_energy():
    """ME = 1.0001 x 11.466 - 0.3926 x 4.184 = 9.8245 MJ, 2.34811 Mcal; NEm = 1.47197 Mcal, 6.15874 MJ; by hand."""
    found = partition("cattle", **BALANCE)
    me = (1.0001 * 18.2 * 0.63 - 0.3926 * 4.184) / 4.184
    nem = 1.37 * me - 0.138 * me**2 + 0.0105 * me**3 - 1.12
    heat = found[found["step"] == "heat increment"].iloc[0]
    assert heat["value"] == pytest.approx(4.184 * (me - nem))
    assert "not the one that stands above" in heat["words"]


def test_the_metabolizable_energy_shown_stays_that_of_the_balance():
    """18.2 x 0.63 - 0.75 - 1.13."""
    found = dict(lines(partition("cattle", **BALANCE), "bomb"))
    assert found["metabolizable energy"] == pytest.approx(18.2 * 0.63 - 0.75 - 1.13)


def test_net_energy_for_gain_stands_beside_that_for_maintenance():
    """Garrett's cubic at the ME of the chain, by hand."""
    found = dict(lines(partition("cattle", **CASES["cattle"]), "bomb"))
    me = (1.0001 * 18.2 * 0.68 - 0.3926 * 4.184) / 4.184
    assert found["net energy for gain"] == pytest.approx(4.184 * (1.42 * me - 0.174 * me**2 + 0.0122 * me**3 - 1.65))
    assert "net energy for maintenance" in found


@pytest.mark.parametrize(("sample", "expected"), [("B04", 3.662), ("B05", 3.506)])
def test_heat_increment_of_the_invented_balances(sample, expected):
    """By hand from Mcal: 4.336 x 0.63 gives ME 2.33935 and NEm 1.46412; 4.258 x 0.48 gives 1.65144 and 0.81341."""
    path = next(p for p in demo_paths() if p.stem == "feeds_cattle")
    found = energy.assess(path, unit="MJ/kg DM").partition(sample)
    heat = found[(found["route"] == "bomb") & (found["step"] == "heat increment")]
    assert heat["value"].item() == pytest.approx(expected, abs=0.0005)
