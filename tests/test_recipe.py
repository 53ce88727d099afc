"""Products from recipes: by hand, the mass balance, limits carried through, and everything wrong told at once."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import energy
from energy.catalogue.reader import systems
from energy.problems import StructuralProblems
from energy.recipe import mix
from energy.recipe_table import read_recipes

INGREDIENTS = pd.DataFrame(
    {
        "sample_id": ["flour", "water", "salt", "oil"],
        "moisture [%]": ["13", "100", "0", "0"],
        "protein [g/100 g as is]": ["10", "0", "0", "0"],
        "fat [g/100 g as is]": ["1", "0", "0", "100"],
        "available carbohydrate [g/100 g as is]": ["72", "0", "0", "0"],
        "total dietary fibre [g/100 g as is]": ["3.5", "0", "0", "0"],
        "ash [g/100 g as is]": ["0.5", "0", "100", "0"],
        "food_group": ["wheat_70_74_extraction", "", "", "other_vegetable_fats_and_oils"],
    }
)


def recipe(**more):
    rows = {
        "product": ["loaf"] * 3,
        "ingredient": ["flour", "water", "salt"],
        "amount [g]": ["600", "380", "20"],
        **more,
    }
    return read_recipes(pd.DataFrame(rows))


def made(**more):
    return mix(recipe(**more), energy.read_samples(INGREDIENTS))


def test_nothing_lost_is_the_weighted_mean():
    """600 of 1000 g are flour: protein 0.6 x 10 = 6 g, ash 0.6 x 0.5 + 2 = 2.3 g, moisture 0.6 x 13 + 38 = 45.8 g."""
    columns = made().samples.columns
    assert columns["crude_protein"][0] == pytest.approx(0.06)
    assert columns["ash"][0] == pytest.approx(0.023)
    assert columns["moisture"][0] == pytest.approx(0.458)


def test_a_cooking_yield_takes_water_and_thickens_the_rest():
    """Yield 88 %: protein 6 / 0.88, moisture (45.8 - 12) / 0.88."""
    found = made(**{"cooking yield [%]": ["88", "", ""]})
    assert found.samples.columns["crude_protein"][0] == pytest.approx(0.06 / 0.88)
    assert found.samples.columns["moisture"][0] == pytest.approx((0.458 - 0.12) / 0.88)
    assert found.water_lost[0] == pytest.approx(0.12)


def test_fat_is_what_the_water_does_not_account_for():
    """Yield 70 %, 33 % water lost: 3 % gained is fat; fat (0.6 + 3) / 0.7 per 100 g."""
    found = made(**{"cooking yield [%]": ["70", "", ""], "moisture loss [%]": ["33", "", ""]})
    assert found.fat_lost[0] == pytest.approx(-0.03)
    assert found.samples.columns["crude_fat"][0] == pytest.approx((0.006 + 0.03) / 0.7)


def test_u_of_sums_and_of_the_yield_by_hand():
    """u(protein) 0.6 x 0.3 / 0.88 from the flour, and 6/0.88 x 0.02/0.88 from the yield, in g per 100 g."""
    table = INGREDIENTS.assign(**{"u(protein) [g/100 g as is]": ["0.3", "0", "0", "0"]})
    sheet = recipe(**{"cooking yield [%]": ["88", "", ""], "u(cooking yield) [%]": ["2", "", ""]})
    found = mix(sheet, energy.read_samples(table)).samples
    assert found.u["crude_protein"][0] == pytest.approx(
        np.hypot(0.006 * 0.3 / 0.88, 0.06 / 0.88 * 0.02 / 0.88), rel=1e-9
    )


def test_a_value_below_its_limit_is_carried_as_low_middle_and_high():
    """Flour with sugars '<0.6': 0, 0.3 and 0.6 g, times 0.6."""
    table = INGREDIENTS.assign(**{"sugars [g/100 g as is]": ["<0.6", "0", "0", "0"]})
    found = mix(recipe(), energy.read_samples(table))
    three = [batch.columns["sugars"][0] for batch in (found.low, found.samples, found.high)]
    assert three == pytest.approx([0.0, 0.0018, 0.0036])


def test_energies_of_ingredients_are_by_their_own_groups():
    """Flour by the factors of its group (Table 13: 4.05, 8.37, 4.12 kcal/g, N x 5.70), oil by its own (8.84)."""
    rows = {"product": ["mix"] * 2, "ingredient": ["flour", "oil"], "amount [%]": ["90", "10"]}
    found = mix(read_recipes(pd.DataFrame(rows)), energy.read_samples(INGREDIENTS))
    value, _ = found.energy_of(systems()["us_ah74_specific"])
    nitrogen = 10 / 6.25
    carbohydrate = 100 - 13 - 5.70 * nitrogen - 1 - 0.5  # by difference, with the protein of the group
    flour = 4.05 * 5.70 * nitrogen + 8.37 * 1 + 4.12 * carbohydrate
    whole = 0.9 * flour + 0.1 * 884
    assert value[0] / 4.184 * 100 == pytest.approx(whole, rel=1e-6)


def test_gross_energy_of_the_ingredients_is_carried_where_only_water_goes():
    table = INGREDIENTS.assign(**{"gross energy [MJ/kg as is]": ["16.0", "0", "0", "39.5"]})
    found = mix(recipe(**{"cooking yield [%]": ["88", "", ""]}), energy.read_samples(table))
    assert found.samples.columns["gross_energy"][0] == pytest.approx(0.6 * 16 / 0.88)


AMOUNTS = st.lists(st.floats(1, 500), min_size=3, max_size=3)


@given(AMOUNTS, st.floats(0.6, 1.0), st.floats(0.1, 50))
@settings(max_examples=25, deadline=None)
def test_only_the_ratio_of_amounts_matters_and_the_components_stay_whole(amounts, share, times):
    """Components of every ingredient sum to one, and so do the product's."""
    flour, water, salt = amounts
    total = flour + water + salt
    keep = 1 - share * (0.13 * flour + water) / total  # no more water than there is
    found = []
    for factor in (1.0, times):
        rows = {"product": ["x"] * 3, "ingredient": ["flour", "water", "salt"], "amount [g]": [a * factor for a in amounts],
                "cooking yield [%]": [100 * keep, None, None]}  # fmt: skip
        found.append(mix(read_recipes(pd.DataFrame(rows)), energy.read_samples(INGREDIENTS)).samples.columns)
    names = ("moisture", "crude_protein", "crude_fat", "ash", "available_carbohydrate", "total_dietary_fibre")
    assert sum(found[0][c][0] for c in names) == pytest.approx(1.0)
    for c in names:
        assert found[1][c][0] == pytest.approx(found[0][c][0], rel=1e-9, abs=1e-12)


def test_the_mass_balance_is_shown():
    balance = made(**{"cooking yield [%]": ["88", "", ""]}).balance().iloc[0]
    assert balance[["goes in", "water lost", "fat lost", "comes out"]].tolist() == pytest.approx([100, 12, 0, 88])
    assert balance["components of 100 g product"] == pytest.approx(100)


def test_what_each_ingredient_brings_and_where_its_value_is_from():
    table = INGREDIENTS.assign(origin=["measured", "literature", "literature", "measured"])
    lines = mix(recipe(), energy.read_samples(table)).lines().set_index(["ingredient", "component"])
    assert lines.loc[("flour", "crude_protein"), "brings"] == pytest.approx(6.0)
    assert lines.loc[("water", "moisture"), "origin"] == "literature"


def test_fibre_that_one_ingredient_lacks_is_counted_as_none_and_told():
    table = INGREDIENTS.assign(**{"total dietary fibre [g/100 g as is]": ["", "0", "0", "0"]})
    found = mix(recipe(), energy.read_samples(table))
    assert any("fibre" in text and "flour" in text for text in found.assumed)


def test_protein_that_one_ingredient_lacks_leaves_no_protein():
    table = INGREDIENTS.assign(**{"protein [g/100 g as is]": ["", "0", "0", "0"]})
    found = mix(recipe(), energy.read_samples(table))
    assert "crude_protein" not in found.samples.columns
    assert any("flour" in p.what for p in found.problems)


def test_more_water_lost_than_goes_in_is_told():
    found = made(**{"cooking yield [%]": ["30", "", ""]})
    assert any("more is lost than goes in" in p.what for p in found.problems)
    assert np.isnan(found.samples.columns["crude_protein"][0])


def test_an_unknown_ingredient_is_told_with_its_row_and_a_likely_name():
    rows = pd.DataFrame({"product": ["a"], "ingredient": ["fluor"], "amount [g]": ["1"]})
    with pytest.raises(StructuralProblems) as caught:
        mix(read_recipes(rows), energy.read_samples(INGREDIENTS))
    problem = caught.value.problems[0]
    assert (problem.row, problem.value) == (2, "fluor")
    assert "flour" in problem.cure


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"amount [g]": ["600", "-1", "20"]}, "negative"),
        ({"amount [g]": ["600", "", "20"]}, "amount is missing"),
        ({"amount [g]": ["600", "<5", "20"]}, "not a limit"),
        ({"ingredient": ["flour", "flour", "salt"]}, "stands twice"),
        ({"cooking yield [%]": ["88", "90", ""]}, "another cooking yield"),
        ({"cooking yield [%]": ["880", "", ""]}, "cannot be"),
        ({"product": ["loaf", "", "loaf"]}, "not named"),
    ],
)
def test_what_is_wrong_in_a_recipe_is_told(change, words):
    with pytest.raises(StructuralProblems) as caught:
        recipe(**change)
    assert any(words in p.what for p in caught.value.problems)


def test_shares_that_do_not_add_up_are_told():
    rows = {"product": ["a"] * 2, "ingredient": ["flour", "water"], "amount [%]": ["60", "30"]}
    with pytest.raises(StructuralProblems) as caught:
        read_recipes(pd.DataFrame(rows))
    assert "add up to 90 %" in caught.value.problems[0].what


def test_an_amount_without_a_unit_is_not_guessed():
    with pytest.raises(StructuralProblems) as caught:
        read_recipes(pd.DataFrame({"product": ["a"], "ingredient": ["flour"], "amount": ["1"]}))
    assert "no unit" in caught.value.problems[0].what


def test_all_problems_of_a_table_come_at_once():
    with pytest.raises(StructuralProblems) as caught:
        recipe(**{"amount [g]": ["x", "-1", ""]})
    assert len(caught.value.problems) >= 3
