"""Tolerances of label laws: classes, one-sided limits, what is widened and rounded, feed law, and what has no rule."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from energy.catalogue.reader import systems
from energy.label_law import label_law
from energy.label_tolerance import energy_rule, feed_limits, label_tolerance
from energy.problems import WrongUse


def limits(rule_set, quantity, declared, *more):
    lower, upper = label_tolerance(rule_set, quantity, declared, *more)
    return float(lower[0]), float(upper[0])


def rule(law):
    return energy_rule(systems()[law], label_law(law))


def test_the_leaflet_example_is_widened_and_rounded():
    """Leaflet on the EU guidance: protein 6.4 g is 6.35 to 6.44; less and plus 2 g, rounded: 4.4 and 8.4."""
    assert limits("eu_guidance_2012", "crude_protein", 6.4, "eu_guidance_2012") == (4.4, 8.4)


@pytest.mark.parametrize(
    ("declared", "expected"),
    [(9.9, (7.9, 11.9)), (10, (8, 12)), (40, (32, 48)), (40.1, (32.1, 48.1)), (0, (-2, 2))],
)
def test_european_class_bounds_of_protein(declared, expected):
    """EU guidance 2012, table 1: below 10 g 2 g, 10 to 40 g 20 %, above 40 g 8 g."""
    assert limits("eu_guidance_2012", "crude_protein", declared) == pytest.approx(expected)


def test_a_limit_is_not_below_nought_once_rounded():
    """1.0 g less 2 g is nothing (a content cannot be negative)."""
    assert limits("eu_guidance_2012", "crude_protein", 1.0, "eu_guidance_2012")[0] == 0


def test_the_united_states_limit_energy_from_above_only():
    """21 CFR 101.9(g)(5): not more than 20 % above; no lower limit stated."""
    assert limits("us_21cfr_101_9_g", "energy", 250) == (-np.inf, 300)


def test_japan_changes_from_kilocalories_to_a_share_at_25():
    """Appended table 9: below 25 kcal 5 kcal, else 20 %."""
    assert limits("jp_food_labelling_standard", "energy", 24) == (19, 29)
    assert limits("jp_food_labelling_standard", "energy", 25) == (20, 30)


def test_a_limit_in_kilocalories_is_not_applied_to_kilojoules():
    assert np.isnan(limits("jp_food_labelling_standard", "energy", 100, "", "kJ")).all()


def test_a_share_of_any_value_holds_in_either_unit():
    """GB 28050, table 2: 120 %, written beside kJ."""
    assert limits("cn_gb28050", "energy", 100, "", "kcal") == (-np.inf, 120)


@pytest.mark.parametrize(
    ("law", "kind"),
    [("eu_1169_2011", "propagated"), ("us_21cfr_101_9_b", "limits"), ("fsanz_sch11", "none"), ("codex_cacgl2", "none"),
     ("in_fss_labelling_2020", "none"), ("aafco_pf9_modified_atwater", "none"), ("gfe_2008_me_compound", "feed"),
     ("ec_152_2009_annex_vii", "feed")],
)  # fmt: skip
def test_what_kind_of_rule_a_law_has_for_energy(law, kind):
    assert rule(law).kind == kind


def test_a_law_without_a_row_has_no_rule_and_no_status():
    found = energy_rule(systems()["eu_1169_2011"], label_law("a law that is not there"))
    assert (found.kind, found.source_status) == ("none", "")


def test_european_food_and_feed_limits_hold_measurement_uncertainty_already():
    assert rule("eu_1169_2011").contains_uncertainty == "yes"
    assert rule("gfe_2008_me_compound").contains_uncertainty == "yes"


def test_the_weakest_source_is_told():
    """Japan: 20 % on energy recalled with high, 5 kcal with medium confidence."""
    assert rule("jp_food_labelling_standard").source_status == "memory_medium"


def test_feed_law_is_asymmetric_and_a_fallback():
    """Regulation (EC) 767/2009, Annex IV: energy value 5 % below and 10 % above the declared one."""
    law = "gfe_2008_me_compound"
    lower, upper = feed_limits(systems()[law], label_law(law), np.array([1000.0]))
    assert (lower[0], upper[0]) == (950, 1100)
    assert "fallback" in rule(law).words
    assert rule(law).source_status == "memory_high"  # the sizes were read; that they are a fallback is recalled


def test_poultry_has_an_absolute_tolerance():
    """Regulation (EC) 152/2009, Annex VII: 0.4 MJ/kg, 40 kJ per 100 g, on either side."""
    law = "ec_152_2009_annex_vii"
    lower, upper = feed_limits(systems()[law], label_law(law), np.array([1200.0]))
    assert (lower[0], upper[0]) == (1160, 1240)


def test_an_unknown_set_names_those_there_are():
    with pytest.raises(WrongUse, match="eu_guidance_2012"):
        label_tolerance("nowhere", "energy", 1.0)


@given(st.floats(0, 100), st.sampled_from(["crude_protein", "crude_fat", "available_carbohydrate", "sugars"]))
def test_a_declared_value_lies_inside_its_own_limits(declared, quantity):
    lower, upper = limits("eu_guidance_2012", quantity, declared)
    assert lower <= declared + 1e-9
    assert upper >= declared - 1e-9
