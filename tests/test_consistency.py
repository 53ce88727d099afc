"""Two columns that say one thing twice."""

import pandas as pd
import pytest

import energy


def told(target, protein, nitrogen, **more):
    columns = {"crude protein [% as is]": protein, "nitrogen [% as is]": nitrogen, "moisture [%]": 12,
               "crude fat [% as is]": 3, "ash [% as is]": 5, "gross energy [MJ/kg as is]": 16}  # fmt: skip
    table = pd.DataFrame({"sample_id": ["x"], **{k: [v] for k, v in (columns | more).items()}})
    return [p.what for p in energy.assess(table, target=target).problems if "times the nitrogen" in p.what]


@pytest.mark.parametrize(
    ("target", "protein", "nitrogen", "expected"),
    [
        ("growing_pig", 17.2, 2.752, 0),  # 6.25
        ("growing_pig", 15.0, 2.752, 1),  # 5.45: right for nuts, never for a feed
        ("human", 15.0, 2.752, 0),
        ("human", 15.0, 1.5, 1),  # 10: no protein
        ("human", 2.0, 15.0, 1),  # the two columns were swapped
    ],
)
def test_protein_beside_nitrogen(target, protein, nitrogen, expected):
    """Factors: 6.25 by definition of crude protein of feeds; 4.8 (cabbage) to 6.38 (milk) for foods, FAO/WHO 1973."""
    assert len(told(target, protein, nitrogen)) == expected


def test_the_factor_stated_decides():
    assert told("human", 17.2, 2.752, nitrogen_factor=5.7)[0].startswith("protein is 6.25 times")


PROXIMATE = {"dry matter [%]": 88.0, "crude protein [g/kg DM]": 150.0, "crude fat [g/kg DM]": 30.0,
             "crude fibre [g/kg DM]": 200.0, "ash [g/kg DM]": 70.0, "gross energy [MJ/kg DM]": 18.2}  # fmt: skip


def unlike(target="cattle", **row):
    table = pd.DataFrame([{"sample_id": "first", **PROXIMATE}, {"sample_id": "second", **PROXIMATE, **row}])
    return [p for p in energy.assess(table, target=target).problems if "is given as" in p.what]


@pytest.mark.parametrize(("nfe", "told"), [(550.0, 0), (552.0, 0), (545.0, 0), (575.0, 1), (500.0, 1), (484.0, 1)])
def test_nitrogen_free_extract_is_what_is_left(nfe, told):
    """1000 - 150 - 30 - 200 - 70 = 550 g/kg; 484 g/kg are 550 as is."""
    assert len(unlike(**{"nitrogen-free extract [g/kg DM]": nfe})) == told


def test_row_and_amount_are_named():
    """500 g/kg of dry matter at 88 % are 44 g per 100 g as is, where 48.4 are left: 4.4 too little."""
    (problem,) = unlike(**{"nitrogen-free extract [g/kg DM]": 500.0})
    assert (problem.sample_id, problem.row, problem.column) == ("second", 3, "nitrogen_free_extract")
    assert "44 g per 100 g as is, but 100 less water, crude protein" in problem.what
    assert "is 48.4: 4.4 too little" in problem.what


def test_nitrogen_free_extract_on_another_basis():
    """550 g/kg of dry matter are 484 as is."""
    assert unlike(**{"nitrogen-free extract [g/kg as is]": 484.0}) == []


def test_organic_matter_is_dry_matter_less_ash():
    """930 g/kg."""
    assert unlike(**{"organic matter [g/kg DM]": 930.0}) == []
    assert len(unlike(**{"organic matter [g/kg DM]": 990.0})) == 1


FOOD = {"moisture [g/100 g]": 36.9, "crude protein [g/100 g as is]": 8.6, "fat [g/100 g as is]": 1.6,
        "ash [g/100 g as is]": 1.8, "total dietary fibre [g/100 g as is]": 2.6,
        "gross energy [kJ/100 g as is]": 1155.0}  # fmt: skip


@pytest.mark.parametrize(("carbohydrate", "told"), [(51.1, 0), (51.5, 0), (48.5, 1), (61.1, 1)])
def test_carbohydrate_by_difference_of_a_food(carbohydrate, told):
    """100 - 36.9 - 8.6 - 1.6 - 1.8 = 51.1, fibre inside; 48.5 is what is left without the fibre."""
    row = {"sample_id": "bread", **FOOD, "carbohydrate by difference [g/100 g as is]": carbohydrate}
    problems = energy.assess(pd.DataFrame([row]), target="human").problems
    assert len([p for p in problems if "is given as" in p.what]) == told


def test_carbohydrate_that_was_determined_may_differ():
    row = {"sample_id": "bread", **FOOD, "available carbohydrate [g/100 g as is]": 45.0}
    assert energy.assess(pd.DataFrame([row]), target="human").problems == []


def test_more_than_the_whole_is_told_with_its_amount():
    """95 + 9 + 2 + 3 = 109 g per 100 g."""
    row = {
        "sample_id": "s",
        "moisture [%]": 95.0,
        "protein [g/100 g as is]": 9.0,
        "fat [g/100 g as is]": 2.0,
        "ash [g/100 g as is]": 3.0,
    }
    told = [p for p in energy.assess(pd.DataFrame([row]), target="human").problems if "add up to" in p.what]
    assert len(told) == 1
    assert "109 g per 100 g as is: 9 g less than nothing" in told[0].what
    assert told[0].row == 2


def test_the_scatter_of_a_food_without_carbohydrate_is_not_told():
    row = {
        "sample_id": "s",
        "moisture [%]": 74.0,
        "protein [g/100 g as is]": 23.1,
        "fat [g/100 g as is]": 2.0,
        "ash [g/100 g as is]": 1.1,
    }
    assert not [p for p in energy.assess(pd.DataFrame([row]), target="human").problems if "add up to" in p.what]
