"""Rounding of labels: every step boundary, ties, and what a printed figure can mean."""

from decimal import ROUND_HALF_EVEN, ROUND_HALF_UP, Decimal

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from energy import rounding
from energy.problems import WrongUse

US, EU, FSANZ = "us_21cfr_101_9", "eu_guidance_2012", "fsanz_1_2_8"


def value(rule_set, quantity, x):
    return float(rounding.rounded(rule_set, quantity, x).value[0])


@pytest.mark.parametrize(
    ("energy", "printed"),
    [(0, 0), (4.99, 0), (5, 5), (7.4, 5), (7.5, 10), (12.4, 10), (47.4, 45), (47.5, 50), (50, 50), (50.1, 50), (54.9, 50), (55, 60),
     (102.5, 100), (150.5, 150), (74, 70), (46, 45), (104.9, 100), (105, 110)],
)  # fmt: skip
def test_us_calories(energy, printed):
    """21 CFR 101.9(c)(1): below 5 kcal 0, to 50 kcal by 5, above by 10; the public article prints 102.5, 150.5, 74, 46."""
    assert value(US, "energy_kcal", energy) == printed


@pytest.mark.parametrize(
    ("grams", "printed"),
    [(0.49, 0), (0.5, 0.5), (0.74, 0.5), (0.75, 1.0), (2.5, 2.5), (4.74, 4.5), (4.99, 5), (5, 5), (5.4, 5), (5.5, 6)],
)
def test_us_fat(grams, printed):
    """Below 0.5 g 0, below 5 g by 0.5, else by 1 (the table of FDA's inspection guide)."""
    assert value(US, "crude_fat", grams) == printed


@pytest.mark.parametrize(
    ("grams", "printed"),
    [
        (0.5, 0),
        (0.54, 0.5),
        (0.55, 0.6),
        (2.25, 2.3),
        (9.94, 9.9),
        (9.95, 10.0),
        (10, 10),
        (10.49, 10),
        (10.5, 11),
        (13.5, 14),
        (12.5, 13),
    ],
)
def test_eu_grams(grams, printed):
    """Guidance 2012: to 0.5 g nothing, below 10 g by 0.1, from 10 g by 1; midway upwards, as 12.5 to 13 in the trade article."""
    assert value(EU, "crude_fat", grams) == pytest.approx(printed)


@pytest.mark.parametrize(("energy", "printed"), [(0.4, 0), (0.5, 1), (2.5, 3), (726.44, 726), (737.5, 738)])
def test_eu_energy(energy, printed):
    assert value(EU, "energy_kJ", energy) == printed


@pytest.mark.parametrize("x", ["0.5", "2.5", "47.5", "50", "55", "0.05", "0.15", "0.25", "1.005", "2.675", "1234.5"])
@pytest.mark.parametrize("step", ["0.01", "0.1", "0.5", "1", "5", "10"])
@pytest.mark.parametrize(("tie", "mode"), [("half_up", ROUND_HALF_UP), ("half_even", ROUND_HALF_EVEN)])
def test_ties_fall_as_decimals_do(x, step, tie, mode):
    expected = (Decimal(x) / Decimal(step)).quantize(Decimal(1), mode) * Decimal(step)
    assert float(rounding.nearest(float(x), float(step), tie)) == pytest.approx(float(expected), abs=1e-12)


@given(st.decimals(0, 100_000, places=3), st.sampled_from(["0.01", "0.1", "0.5", "1", "5", "10"]))
def test_rounding_is_decimal_for_any_value(x, step):
    expected = (x / Decimal(step)).quantize(Decimal(1), ROUND_HALF_UP) * Decimal(step)
    assert float(rounding.nearest(float(x), float(step))) == pytest.approx(float(expected), rel=1e-12, abs=1e-12)


def test_what_arithmetic_leaves_behind_is_no_part_of_a_figure():
    """1.1 x 25 is 27.500000000000004, 0.145 x 100 is 14.499999999999998 in binary."""
    assert value(EU, "energy_kJ", 1.1 * 25) == 28
    assert value(EU, "energy_kJ", 0.145 * 100) == 15


@pytest.mark.parametrize(
    ("x", "digits", "printed"), [(1234.0, 3, 1230), (1235.0, 3, 1240), (0.012345, 3, 0.0123), (99.95, 3, 100)]
)
def test_significant_digits(x, digits, printed):
    assert float(rounding.significant(x, digits)) == pytest.approx(printed)


def test_a_label_can_mean_what_rounds_to_it():
    """14 g of protein: from 13.5 to 14.4 with one decimal, as the trade article of 2022 reads it."""
    low, high = rounding.meaning(EU, "crude_protein", 14, one_more_decimal=True)
    assert (low[0], high[0]) == (13.5, 14.4)


@given(
    st.floats(0, 2000),
    st.sampled_from([(US, "energy_kcal"), (US, "crude_fat"), (EU, "crude_protein"), (EU, "energy_kJ")]),
)
def test_a_value_lies_in_the_meaning_of_its_own_figure(x, rule):
    x = round(x, 4)
    printed = rounding.rounded(*rule, x).value
    low, high = rounding.meaning(*rule, printed)
    assert low[0] <= x <= high[0] + 1e-12


def test_figures_are_printed_as_the_rule_prints_them():
    assert rounding.text_of(EU, "crude_fat", 0.3) == "0 or <0.5"
    assert rounding.text_of(EU, "crude_fat", 9.96) == "10"
    assert rounding.text_of(EU, "crude_fat", 2.04) == "2.0"
    assert rounding.text_of(US, "carbohydrate_by_difference", 0.7).lower().startswith("less than 1")


def test_no_rule_is_said_and_nothing_is_rounded():
    assert np.isnan(rounding.rounded("", "energy_kJ", 123.456).value[0])
    assert "no rule" in rounding.text_of("", "energy_kJ", 123.456)


def test_an_unknown_set_and_a_negative_figure_are_refused():
    with pytest.raises(WrongUse):
        rounding.rounded("nowhere", "energy_kJ", 1.0)
    with pytest.raises(WrongUse):
        rounding.rounded(EU, "energy_kJ", -1.0)


@pytest.mark.parametrize(
    ("rule_set", "quantity"), [(s, q) for s, qs in rounding.rule_sets().items() for q in qs if q != "any"]
)
def test_every_rule_says_where_it_is_from(rule_set, quantity):
    for rule in rounding.rules(rule_set, quantity):
        assert rule.source
        assert rule.locator
        assert rule.source_status in ("read", "read_secondary", "memory_high", "memory_medium", "derived", "house")
        assert rule.tie_status in ("read", "read_secondary", "memory_high", "memory_medium", "derived", "house")


def test_classes_leave_no_gap():
    x = np.round(np.arange(0, 120, 0.01), 2)
    for rule_set, quantities in rounding.rule_sets().items():
        for quantity in quantities:
            assert (rounding.rounded(rule_set, quantity, x).row >= 0).all(), (rule_set, quantity)
