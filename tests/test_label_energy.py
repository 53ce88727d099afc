"""A law's energy from the analysis, from the grams as printed, and the spread that rounding alone allows."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from energy.catalogue.reader import systems
from energy.label_energy import coefficients, energy_of, label_energy, label_grams, spread
from energy.samples import Samples


def food(**grams):
    return Samples.from_arrays({q: np.array([g / 100]) for q, g in grams.items()}, basis="as_is")


#: the unnamed food of the trade article of January 2022: 726.44 kJ from the analysis
ARTICLE = {"crude_protein": 13.84, "crude_fat": 12.76, "available_carbohydrate": 1.12}


def parts(grams, law="eu_1169_2011", rule_set="eu_guidance_2012"):
    samples, system = food(**grams), systems()[law]
    found = label_energy(samples, system, systems())
    return found, label_grams(found.grams, rule_set), coefficients(samples, system)


def test_energy_from_the_analysis_and_from_printed_grams():
    """The article: 726.44 kJ from the analysis; 14, 13 and 1.1 g give 737.7 kJ."""
    found, label, k = parts(ARTICLE)
    assert found.sums["kJ"].value[0] == pytest.approx(726.44)
    assert energy_of(label.printed, k)[0] == pytest.approx(737.7)


def test_the_spread_of_rounding_by_hand():
    """14, 13 and 1.1 g mean 13.5 to 14.5, 12.5 to 13.5, 1.05 to 1.15: 229.5 + 462.5 + 17.85, 246.5 + 499.5 + 19.55."""
    _, label, k = parts(ARTICLE)
    low, high = spread(label, k)
    assert (low[0], high[0]) == (pytest.approx(709.85), pytest.approx(765.55))


def test_the_two_units_are_two_sums():
    """4 x 13.84 + 9 x 12.76 + 4 x 1.12 = 174.68 kcal, which is not 726.44 / 4.184 = 173.62."""
    found, _, _ = parts(ARTICLE)
    assert found.sums["kcal"].value[0] == pytest.approx(174.68)
    assert found.sums["kcal"].own


def test_australia_converts_by_its_own_figure():
    """Schedule 11, S11-2(4): kcal = kJ / 4.18; 17 x 10 + 37 x 10 = 540 kJ."""
    sums = parts({"crude_protein": 10, "crude_fat": 10, "available_carbohydrate": 0}, "fsanz_sch11")[0].sums
    assert sums["kJ"].value[0] == pytest.approx(540)
    assert sums["kcal"].value[0] == pytest.approx(540 / 4.18)
    assert not sums["kcal"].own


def test_what_a_component_takes_out_is_taken_out_of_its_gram():
    """Method (C): carbohydrate less insoluble fibre at 4 kcal/g, so a gram of insoluble fibre brings -4 + 0."""
    k = coefficients(food(**ARTICLE), systems()["us_21cfr_101_9_c"])
    assert float(k["carbohydrate_by_difference"][0]) == 4
    assert float(k["insoluble_fibre"][0]) == -4


def test_what_is_not_in_the_food_adds_no_spread():
    _, label, k = parts({"crude_protein": 0, "crude_fat": 100, "available_carbohydrate": 0})
    low, high = spread(label, k)
    assert (low[0], high[0]) == (pytest.approx(37 * 99.5), pytest.approx(37 * 100.5))


def test_a_little_printed_as_nought_may_be_anything_up_to_half_a_gram():
    """EU guidance: 0.5 g or less may be printed as 0 g; 37 x 0.5 = 18.5 kJ."""
    _, label, k = parts({"crude_protein": 0, "crude_fat": 0.3, "available_carbohydrate": 0})
    low, high = spread(label, k)
    assert (low[0], high[0]) == (0, pytest.approx(18.5))


def test_without_rules_grams_stand_unrounded():
    _, label, k = parts(ARTICLE, rule_set="")
    assert energy_of(label.printed, k)[0] == pytest.approx(726.44)
    assert not any(label.ruled.values())


def test_a_missing_nutrient_gives_no_energy():
    found = label_energy(food(crude_protein=10, crude_fat=5), systems()["eu_1169_2011"], systems())
    assert np.isnan(found.sums["kJ"].value[0])


@given(*[st.floats(0, 30)] * 3)
def test_the_spread_holds_the_energy_of_the_analysis(protein, fat, carbohydrate):
    found, label, k = parts({"crude_protein": protein, "crude_fat": fat, "available_carbohydrate": carbohydrate})
    low, high = spread(label, k)
    assert low[0] - 1e-6 <= found.sums["kJ"].value[0] <= high[0] + 1e-6
