"""GE -> DE -> ME -> NE with each loss: what is lost is exactly what two neighbouring figures differ by."""

import pandas as pd
import pytest

import energy

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
    """The first figure less all losses is the last figure."""
    found = partition(target, **CASES[target])
    found = found[found["route"] == route]
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
