"""Unit text at the door. Expected factors: SI and the definitions named beside them."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from energy.problems import UnitProblem
from energy.units import parse_unit


@pytest.mark.parametrize(
    ("text", "dimension", "scale", "basis"),
    [
        ("kJ/100g", "energy", 0.01, None),
        ("kJ/100 g as is", "energy", 0.01, "as_is"),
        ("kcal/100g", "energy", 0.04184, None),  # thermochemical calorie 4.184 J
        ("MJ/kg as is", "energy", 1.0, "as_is"),
        ("cal/g", "energy", 0.004184, None),
        ("Cal/g", "energy", 4.184, None),  # the large calorie is a kilocalorie
        ("cal_IT/g", "energy", 0.0041868, None),  # international table calorie 4.1868 J
        ("kcal/oz", "energy", 4.184e-3 / 28.349523125e-3, None),  # ounce of the pound of 1959
        ("Btu/lb", "energy", 2326e-6, None),  # the international Btu is defined by 2326 J/kg
        ("Mcal/lb", "energy", 4.184 / 0.45359237, None),
        ("%", "mass_fraction", 0.01, None),
        ("% DM", "mass_fraction", 0.01, "dry_matter"),
        ("g/kg DM", "mass_fraction", 0.001, "dry_matter"),
        ("g/100 g as received", "mass_fraction", 0.01, "as_is"),
        ("mg/100 g", "mass_fraction", 1e-5, None),
        ("kJ/g as analysed", "energy", 1.0, "as_analysed"),
    ],
)
def test_a_unit_is_read_rightly(text, dimension, scale, basis):
    unit = parse_unit(text)
    assert (unit.dimension, unit.basis) == (dimension, basis)
    assert unit.scale == pytest.approx(scale, rel=1e-9)


def test_per_volume_is_marked():
    assert parse_unit("g/100 ml").per_volume


def test_alcohol_by_volume_counts_grams():
    # 5 % vol is 5 ml of ethanol at 0.78924 g/ml in 100 ml: 3.9462 g per 100 ml
    assert 5 * parse_unit("% vol").scale == pytest.approx(0.039462, rel=1e-9)


def test_density_is_read_as_density():
    assert parse_unit("kg/l", "density").scale == pytest.approx(1.0)


@pytest.mark.parametrize("text", ["CAL/g", "Calories/g", "kJ", "foo", "kJ/100x", "g/0 g", "kJ/100 g/kg", "", "mcal/kg"])
def test_what_could_be_misread_is_refused_with_a_cure(text):
    with pytest.raises(UnitProblem) as problem:
        parse_unit(text)
    assert problem.value.cure


def test_an_energy_unit_for_a_mass_is_refused():
    with pytest.raises(UnitProblem, match="not of mass per mass"):
        parse_unit("kJ/g", "mass_fraction")


@given(st.sampled_from(["kJ", "kcal", "MJ", "cal"]), st.integers(1, 1000), st.sampled_from(["g", "kg", "lb"]))
def test_twice_the_mass_is_half_the_scale(top, count, bottom):
    one, two = parse_unit(f"{top}/{count} {bottom}"), parse_unit(f"{top}/{2 * count} {bottom}")
    assert one.scale == pytest.approx(2 * two.scale, rel=1e-12)
