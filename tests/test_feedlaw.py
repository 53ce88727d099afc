"""Feed law as limits. Expected intervals are worked out by hand in the comments beside them."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from energy.feedlaw import ANIMALS, feed_tolerance, laws
from energy.problems import WrongUse

EU = "eu_767_2009_annex_iv"
NEVADA = "nv_nac_587_620"
US = "us_analytical_variations"
INF = math.inf
#: every law, constituent and animal that has a limit
CASES = sorted(
    {
        (row["law"], row["constituent"], animal)
        for row in laws()
        for animal in ANIMALS
        if row["animal"] in (animal, "any")
    }
)


def rows_of(law, constituent=None):
    return [row for row in laws() if row["law"] == law and constituent in (None, row["constituent"])]


@pytest.mark.parametrize(
    ("constituent", "declared", "lower", "upper"),
    [
        ("crude_fat", 5, 4, 7),  # 5 - 1; 5 + 2
        ("crude_fat", 16, 14, 20),  # 12.5 % of 16 = 2; 25 % of 16 = 4
        ("crude_fat", 30, 27, 36),  # 30 - 3; 30 + 6
        ("crude_protein", 6, 5, 7),  # 1 point either way
        ("crude_protein", 18, 15.75, 20.25),  # 12.5 % of 18 = 2.25
        ("crude_protein", 44, 41, 47),  # 3 points either way
        ("crude_ash", 6, 4, 7),  # 6 - 2; 6 + 1
        ("crude_ash", 16, 12, 18),  # 25 % of 16 = 4; 12.5 % of 16 = 2
        ("crude_ash", 40, 32, 44),  # 40 - 8; 40 + 4
        ("crude_fibre", 4, 2.25, 5.75),  # 1.75 points either way
        ("crude_fibre", 12, 9.9, 14.1),  # 17.5 % of 12 = 2.1
        ("crude_fibre", 25, 21.5, 28.5),  # 3.5 points either way
        ("sugar", 8, 6.25, 11.5),  # 8 - 1.75; 8 + 3.5
        ("sugar", 12, 9.9, 16.2),  # 17.5 % of 12 = 2.1; 35 % of 12 = 4.2
        ("sugar", 40, 36.5, 47),  # 40 - 3.5; 40 + 7
        ("starch", 14, 9.1, 18.9),  # 35 % of 14 = 4.9
        ("starch", 55, 48, 62),  # 7 points either way
        ("calcium", 0.8, 0.5, 1.4),  # 0.8 - 0.3; 0.8 + 0.6
        ("calcium", 3, 2.1, 4.8),  # 30 % of 3 = 0.9; 60 % of 3 = 1.8
        ("magnesium", 6, 4.5, 9),  # 6 - 1.5; 6 + 3
        ("sodium", 1, 0.7, 1.6),  # 30 % of 1 = 0.3; 60 % of 1 = 0.6
        ("total_phosphorus", 2, 1.4, 2.6),  # 30 % of 2 = 0.6
        ("potassium", 2.5, 2, 3.5),  # 20 % of 2.5 = 0.5; 40 % of 2.5 = 1
        ("ash_insoluble_in_hydrochloric_acid", 2, -INF, 2.6),  # none below; 30 % of 2 = 0.6
        ("moisture", 1, -INF, 1.4),  # none below; 0.4 points
        ("moisture", 3, -INF, 3.6),  # none below; 20 % of 3 = 0.6
        ("moisture", 10, -INF, 11),  # none below; 1 point
        ("moisture", 75, -INF, 81),  # none below; 8 % of 75 = 6
        ("energy_value", 12, 11.4, 13.2),  # 5 % of 12 = 0.6; 10 % of 12 = 1.2, MJ/kg
        ("protein_value", 150, 135, 180),  # 10 % of 150 = 15; 20 % of 150 = 30, in any unit
    ],
)
def test_annex_iv_of_767_2009(constituent, declared, lower, upper):
    assert feed_tolerance(EU, constituent, declared) == pytest.approx((lower, upper), abs=1e-12)


@pytest.mark.parametrize(
    ("constituent", "declared", "lower", "upper"),
    [
        ("crude_fat", 12, 10, 16),  # under 16: 12 - 2; 12 + 4
        ("crude_fat", 20, 17.5, 25),  # 12.5 % of 20 = 2.5; 25 % of 20 = 5
        ("crude_protein", 12, 10, 14),  # under 16: 2 points either way
        ("crude_protein", 20, 17.5, 22.5),  # 12.5 % of 20 = 2.5
        ("crude_ash", 6, 4, 7),  # no rows of its own: those of every animal
    ],
)
def test_annex_iv_for_animals_not_kept_for_food(constituent, declared, lower, upper):
    assert feed_tolerance(EU, constituent, declared, "non_food_producing") == pytest.approx((lower, upper), abs=1e-12)


@pytest.mark.parametrize(
    ("law", "constituent", "declared", "animal", "lower", "upper"),
    [
        ("ec_152_2009_annex_vii", "energy_value", 12.5, "food_producing", 12.1, 12.9),  # 0.4 MJ/kg either way
        ("fr_order_1989_energy", "energy_value", 12.5, "food_producing", 11.7, 13.3),  # 0.8 MJ/kg either way
        ("ec_95_10_dietetic", "energy_value", 16, "non_food_producing", 13.6, 18.4),  # 15 % of 16 = 2.4
        ("fr_order_1989", "crude_protein", 20, "food_producing", 18, INF),  # from 20: 2 points, below only
        ("fr_order_1989", "crude_protein", 16, "food_producing", 14.4, INF),  # 10 % of 16 = 1.6
        ("fr_order_1989", "starch", 40, "food_producing", 37.5, INF),  # from 25: 2.5 points
        ("fr_order_1989", "crude_fat", 5, "food_producing", 4.2, INF),  # under 8: 0.8 points
        ("eu_939_2010_superseded", "crude_protein", 16, "food_producing", 14, INF),  # 12.5 % of 16 = 2
        ("eu_939_2010_superseded", "crude_ash", 24, "food_producing", -INF, 27),  # from 24: 3 points, ash above
        ("eu_939_2010_superseded", "energy_value", 10, "food_producing", 9.5, INF),  # 5 % of 10 = 0.5
        (NEVADA, "crude_protein", 18, "food_producing", 17.4, INF),  # class 10.1-20: 0.6; a minimum
        (NEVADA, "crude_fibre", 35, "food_producing", -INF, 36.5),  # class from 30.1: 1.5; a maximum
        (NEVADA, "crude_ash", 7, "food_producing", 6.4, 7.6),  # class 5.1-10: 0.6; side not said
        (NEVADA, "crude_protein", 10.05, "food_producing", 9.45, INF),  # between 10 and 10.1: the higher class, 0.6
        (US, "crude_protein", 20, "food_producing", 19.4, INF),  # 20/20 + 2 = 3 % of 20 = 0.6
        (US, "crude_fat", 5, "food_producing", 4.5, INF),  # 10 % of 5 = 0.5
        (US, "crude_fibre", 5, "food_producing", -INF, 5.6),  # 30/5 + 6 = 12 % of 5 = 0.6
        (US, "moisture", 10, "food_producing", -INF, 11.2),  # 12 % of 10 = 1.2
        (US, "crude_ash", 9, "food_producing", 8.28, 9.72),  # 45/9 + 3 = 8 % of 9 = 0.72
        (US, "calcium", 1, "food_producing", 0.8, 1.2),  # 14/1 + 6 = 20 % of 1 = 0.2
        (US, "total_phosphorus", 1, "food_producing", 0.89, 1.11),  # 3/1 + 8 = 11 % of 1 = 0.11
        (US, "crude_protein", 0, "food_producing", -0.2, INF),  # (20/X + 2) % of X = 0.2 + 0.02 X; X = 0: 0.2
    ],
)
def test_other_laws(law, constituent, declared, animal, lower, upper):
    assert feed_tolerance(law, constituent, declared, animal) == pytest.approx((lower, upper), abs=1e-12)


def boundaries(law, constituent, animal):
    rows = [row for row in rows_of(law, constituent) if row["animal"] in (animal, "any")]
    return sorted({row["class_low"] for row in rows} - {0.0})


def jumps(law, constituent, animal):
    """Class boundaries where an end of the interval jumps by more than 1e-9."""
    found = []
    for bound in boundaries(law, constituent, animal):
        around = np.array([np.nextafter(bound, 0), bound, np.nextafter(bound, INF)])
        for end in feed_tolerance(law, constituent, around, animal):
            if np.isfinite(end).all() and np.ptp(end) > 1e-9:
                found.append(bound)
    return sorted(set(found))


@pytest.mark.parametrize(("law", "constituent", "animal"), [c for c in CASES if c[0] != NEVADA])
def test_limits_are_continuous_where_classes_meet(law, constituent, animal):
    assert jumps(law, constituent, animal) == []


@pytest.mark.parametrize(
    ("constituent", "where"),
    [
        ("crude_protein", [10, 20, 30]),  # 0.4 | 0.4 | 0.6 | 0.8 | 1.0
        ("crude_fat", []),  # 0.5 throughout
        ("crude_fibre", [10, 20, 30]),  # 0.5 | 0.5 | 0.8 | 1.0 | 1.5
        ("crude_ash", [5, 10, 20]),  # 0.4 | 0.6 | 0.8 | 1.0 | 1.0
    ],
)
def test_the_table_of_nevada_has_steps(constituent, where):
    assert jumps(NEVADA, constituent, "food_producing") == where


def test_annex_iv_has_boundaries_to_be_continuous_at():
    assert boundaries(EU, "moisture", "food_producing") == [2, 5, 12.5]


@pytest.mark.parametrize(("law", "constituent", "animal"), CASES)
@given(declared=st.floats(0, 100))
def test_the_declared_value_is_inside_its_interval(law, constituent, animal, declared):
    lower, upper = feed_tolerance(law, constituent, declared, animal)
    assert lower <= declared <= upper


@pytest.mark.parametrize(("law", "constituent", "animal"), CASES)
def test_no_declared_value_falls_into_two_classes_or_none(law, constituent, animal):
    declared = np.unique([0, 100, *(b + d for b in boundaries(law, constituent, animal) for d in (-0.01, 0, 0.01))])
    for side in {row["side"] for row in rows_of(law, constituent)}:
        rows = [r for r in rows_of(law, constituent) if r["animal"] in (animal, "any") and r["side"] == side]
        for value in declared:
            inside = [
                r["class_low"] < value < (INF if r["class_high"] is None else r["class_high"])
                or (value == r["class_low"] and r["class_low_included"])
                or (value == r["class_high"] and r["class_high_included"])
                for r in rows
            ]
            assert sum(inside) == 1, f"{side} {value}"


@pytest.mark.parametrize(("law", "constituent", "animal"), CASES)
def test_many_at_once_are_the_same_as_one_by_one(law, constituent, animal):
    declared = np.linspace(0, 100, 41)
    together = feed_tolerance(law, constituent, declared, animal)
    alone = np.array([feed_tolerance(law, constituent, value, animal) for value in declared]).T
    np.testing.assert_array_equal(together, alone)


def test_shape_is_kept():
    lower, upper = feed_tolerance(EU, "crude_fat", [[4.0, 10.0, 30.0], [5.0, 12.0, 40.0]])
    assert lower.shape == upper.shape == (2, 3)


def test_an_empty_batch_is_answered_empty():
    assert [end.size for end in feed_tolerance(EU, "crude_fat", [])] == [0, 0]


def test_nothing_declared_has_no_interval():
    assert np.isnan(feed_tolerance(EU, "moisture", np.nan)).all()


def test_the_declared_values_given_are_not_changed():
    declared = np.array([4.0, 10.0])
    feed_tolerance(EU, "crude_fat", declared)
    assert declared.tolist() == [4.0, 10.0]


def test_an_unknown_law_is_refused_with_the_nearest():
    with pytest.raises(WrongUse) as refusal:
        feed_tolerance("eu_767_2009", "crude_fat", 10)
    assert EU in refusal.value.cure


def test_a_law_like_none_is_refused_with_all():
    with pytest.raises(WrongUse, match=r"There are: ec_152_2009_annex_vii, .*us_analytical_variations"):
        feed_tolerance("zzz", "crude_fat", 10)


def test_an_unknown_constituent_is_refused_with_the_nearest():
    with pytest.raises(WrongUse, match=r"sets no limit of 'crude_fiber'.*crude_fibre"):
        feed_tolerance(EU, "crude_fiber", 10)


def test_a_constituent_of_another_law_is_refused():
    with pytest.raises(WrongUse, match="fr_order_1989 sets no limit of 'moisture'"):
        feed_tolerance("fr_order_1989", "moisture", 10)


def test_an_unknown_animal_is_refused():
    with pytest.raises(WrongUse, match="there is no kind of animal 'pet'"):
        feed_tolerance(EU, "crude_fat", 10, "pet")


def test_a_law_for_other_animals_is_refused():
    with pytest.raises(WrongUse, match="animal='non_food_producing'"):
        feed_tolerance("ec_95_10_dietetic", "energy_value", 16)


def test_a_negative_declared_value_is_refused():
    with pytest.raises(WrongUse, match="negative: -2"):
        feed_tolerance(EU, "crude_fat", [3.0, np.nan, -2.0])


def test_an_infinite_declared_value_is_refused():
    with pytest.raises(WrongUse, match="infinite"):
        feed_tolerance(EU, "energy_value", INF)


def test_more_than_all_of_the_feed_is_refused():
    with pytest.raises(WrongUse, match=r"180.*divided by 10"):
        feed_tolerance(EU, "crude_protein", 180)


@pytest.mark.parametrize(
    ("law", "status", "superseded"),
    [
        (EU, "read_secondary", False),
        ("ec_152_2009_annex_vii", "memory_medium", False),
        ("fr_order_1989_energy", "read_secondary", True),
        ("fr_order_1989", "read_secondary", True),
        ("ec_95_10_dietetic", "memory_medium", True),
        ("eu_939_2010_superseded", "memory_high", True),
        (NEVADA, "read_secondary", False),
        (US, "memory_medium", False),
    ],
)
def test_each_law_says_how_it_is_known_and_whether_it_stands(law, status, superseded):
    assert {(row["source_status"], row["superseded"]) for row in rows_of(law)} == {(status, superseded)}


def test_these_are_the_laws():
    assert {row["law"] for row in laws()} == {
        EU, NEVADA, US, "ec_152_2009_annex_vii", "ec_95_10_dietetic", "eu_939_2010_superseded", "fr_order_1989",
        "fr_order_1989_energy",
    }  # fmt: skip


def test_every_limit_has_source_place_and_how_it_is_known():
    assert all(row["source"] and row["locator"] and row["how_known"] for row in laws())


def test_a_limit_is_stated_in_one_way_only():
    ways = [[row["absolute"], row["relative"], row["formula_a"]] for row in laws()]
    assert all(sum(way is not None for way in row) <= 1 for row in ways)


def test_only_ash_insoluble_and_moisture_are_without_a_limit_below_in_annex_iv():
    free = [row for row in laws() if row["absolute"] is row["relative"] is row["formula_a"] is None]
    assert {(row["law"], row["constituent"], row["side"]) for row in free} == {
        (EU, "ash_insoluble_in_hydrochloric_acid", "below_label"),
        (EU, "moisture", "below_label"),
    }


@pytest.mark.parametrize("constituent", ["energy_value", "protein_value"])
def test_annex_iv_says_when_its_energy_and_protein_values_apply(constituent):
    assert all("only where no EU, official national or CEN method" in r["note"] for r in rows_of(EU, constituent))


def test_changing_what_laws_returns_changes_no_law():
    laws()[0]["absolute"] = 99.0
    assert laws()[0]["absolute"] != 99.0
