"""Corrections of a bomb run, the heat capacity, net values, preparation and the open vessel, against printed examples."""

import csv
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import linregress
from uncertainties import ufloat

from energy.bomb import heat_capacity, open_vessel, preparation
from energy.bomb.constants import CALORIE, constants, in_joule, value
from energy.bomb.corrections import (
    SULFUR_REASON,
    Budget,
    Term,
    aid_share,
    burnt_beside,
    ignition,
    nitric_acid_share,
    nitric_acid_titrated,
    sulfur,
)
from energy.bomb.net_value import constant_pressure, net_calorific_value
from energy.bomb.rating import over_rating, rating_sentence, run_energy
from energy.problems import WrongUse


def calories(joule):
    return np.asarray(joule) / CALORIE


PRINTED = {r["id"]: float(r["printed"]) for r in csv.DictReader((Path(__file__).parent / "data" / "bomb_worked_examples.csv").open())}  # fmt: skip
STATUS = {"read", "read_secondary", "memory_high", "memory_medium", "derived", "house"}


def budget(taken, mass, *terms):
    one = np.atleast_1d
    return Budget(one(float(taken)), one(0.0), terms, one(float(mass)), one(0.0))


# ---- constants -------------------------------------------------------------------------------------------------------


def test_every_constant_says_where_it_is_from_and_how_it_is_known():
    assert all(c.source and c.source_status in STATUS and c.unit for c in constants().values())


def test_constants_that_are_arithmetic_close():
    # RT at 298.15 K: 8.314462618 x 298.15 = 2478.96 J/mol; per 1 % is 1/100 of a gram
    rt = 8.314462618 * 298.15
    assert value("pressure_hydrogen") == pytest.approx(rt / (4 * 1.008) / 100, abs=0.005)
    assert value("pressure_oxygen") == pytest.approx(-rt / (2 * 15.999) / 100, abs=0.0005)
    assert value("pressure_nitrogen") == pytest.approx(-rt / (2 * 14.007) / 100, abs=0.0005)
    # ISO 1928: 8.937 x 24.43 - 6.15 per 1 % hydrogen
    assert value("net_hydrogen") == pytest.approx(-(8.937 * 24.43 - 6.15), abs=0.05)
    assert value("soot") == pytest.approx(393_500 / 12.011, abs=2)
    assert value("nitric_acid_molar_mass") == pytest.approx(1.008 + 14.007 + 3 * 15.999, abs=1e-9)


def test_benzoic_acid_weighed_in_air_is_the_vacuum_value_with_its_buoyancy():
    # secondary certificates: 26434 x [1 + 0.0012 (1/1.320 - 1/8.4)] = 26434 x 1.000766 = 26454
    assert heat_capacity.buoyancy() == pytest.approx(1.000766, abs=5e-7)
    assert value("benzoic_acid_vacuum") * heat_capacity.buoyancy() == pytest.approx(value("benzoic_acid_air"), abs=0.5)
    assert heat_capacity.buoyancy(weights="weights_density_steel") == pytest.approx(1.000759, abs=5e-7)


# ---- printed examples ------------------------------------------------------------------------------------------------


def test_heat_capacity_of_the_printed_benzoic_run():
    found, _ = heat_capacity.of_runs(0.8562, 26460.0, 2.284)
    assert found == pytest.approx(PRINTED["W3"], abs=0.01)


def test_mahler_example_in_every_line():
    capacity = (2200 + 474) * CALORIE  # water of 1 cal/(g °C), as the book reckons
    acid = Term("nitric_acid", "", np.array([in_joule("nitric_acid_1923") * 0.125]), np.zeros(1))
    wire = ignition(1, mass=0.032, material="iron_wire_mahler")
    gross = budget(capacity * (3.1 + 0.0325), 1, wire, acid).per_gram
    plain = budget(capacity * 3.1, 1).per_gram
    assert calories(gross) == pytest.approx(PRINTED["W11 gross"], abs=0.05)
    assert calories(plain) == pytest.approx(PRINTED["W11 uncorrected"], abs=0.05)
    for start, printed in ((gross, "W11 net"), (plain, "W11 net uncorrected")):
        # the book takes 6 (M + 9 H) from the value of the fuel as burnt: hydrogen and moisture both of the fuel
        dry = start / 0.97
        net, _ = net_calorific_value(dry, 0.045 / 0.97, moisture=0.03, method="mahler")
        assert calories(net) == pytest.approx(PRINTED[printed], abs=0.06)
        assert calories(start - net) == pytest.approx(PRINTED["W11 subtracted"], abs=1e-6)


def test_a_failed_check_sample_is_seen_in_the_numbers():
    # Delta State 1980: C = (1.0956 x 6318 + 4.1 x 2.3)/2.839 = 2441.5 cal/K by hand; naphthalene with 1.752 K then gives
    # (2441.5 x 1.752 - 6.7 x 2.3)/0.9726 = 4382 cal/g, against about 9600: the record is wrong by a factor near 2
    wire = ignition(1, length=4.1, material="nickel_chromium_wire_length")
    c, _ = heat_capacity.of_runs(1.0956, 6318 * CALORIE, 2.839, (wire,))
    assert calories(c) == pytest.approx(2441.5, abs=0.1)
    burnt = ignition(1, length=6.7, material="nickel_chromium_wire_length")
    assert calories(budget(c[0] * 1.752, 0.9726, burnt).per_gram) == pytest.approx(4382, abs=1)


# ---- single corrections ----------------------------------------------------------------------------------------------


def test_nitric_acid_by_titration():
    # 59.7 kJ/mol x 10 ml x 0.1 mmol/ml = 59.7 J; printed neighbours 5.98 and 6.0 J/ml lie within 1 %
    heat, u = nitric_acid_titrated(10.0, 0.1)
    assert heat == pytest.approx(59.7)
    v, f = ufloat(10.0, 0.05), ufloat(59.7, 0.6)
    assert u == pytest.approx((v * 0.1 * f).std_dev, rel=1e-9)  # second route: uncertainties


def test_nitric_acid_of_older_books_is_per_gram_of_acid():
    # Mahin and Carr: 230 cal/g, 63.01 g/mol: 60.6 kJ/mol, so 10 ml of 0.1 mol/l give 60.6 J
    heat, _ = nitric_acid_titrated(10.0, 0.1, "nitric_acid_1923")
    assert heat == pytest.approx(60.6, abs=0.05)


def test_nitric_acid_as_a_share_has_three_steps():
    # GB/T 213: 0.0010 to 16 700 J/g, 0.0012 to 25 100, 0.0016 above
    assert nitric_acid_share([16_700, 16_701, 25_100, 25_101]).tolist() == [0.0010, 0.0012, 0.0012, 0.0016]


def test_sulfur_is_off_and_says_why():
    found = sulfur(1, 1.0, 0.02)
    assert found.heat[0] == 0
    assert found.note == SULFUR_REASON
    assert "food and feed" in SULFUR_REASON


@pytest.mark.parametrize(("convention", "per_percent"), [("separate", 94.1), ("total_acid", 55.2)])
def test_sulfur_in_both_conventions(convention, per_percent):
    # 2 % sulfur in 0.5 g: one hundredth of a gram, the amount both constants are for
    assert sulfur(1, 0.5, 0.02, convention).heat[0] == pytest.approx(per_percent)


def test_the_sulfur_of_coal_that_one_book_counts():
    # ISO's separate convention and the teaching text's 2.25 cal per mg sulfur: 94.1 J per 10 mg
    assert value("sulfur_separate") == pytest.approx(2.25 * 10 * CALORIE, abs=0.1)


def test_the_constant_of_a_wire_belongs_to_the_method():
    standard = ignition(1, mass=0.010, material="nickel_chromium_wire").heat[0]
    sheet = ignition(1, mass=0.010, material="nickel_chromium_wire_sheet").heat[0]
    assert (standard, sheet) == (pytest.approx(60.0), pytest.approx(14.0))  # by hand, 6000 and 1400 J/g


@pytest.mark.parametrize("wish", [{"mass": 0.01}, {"mass": 0.01, "material": "gold"},
                                  {"mass": 0.01, "material": "nickel_chromium_wire_length"}])  # fmt: skip
def test_ignition_that_cannot_be_reckoned_is_refused(wish):
    with pytest.raises(WrongUse):
        ignition(1, **wish)


def test_an_aid_counts_with_its_own_blank():
    found = burnt_beside("aid", "paraffin", 1, 0.2, 45_900.0, 50.0)
    assert found.heat[0] == pytest.approx(9180.0)
    assert found.u[0] == pytest.approx((ufloat(0.2, value("u_mass")) * ufloat(45_900, 50)).std_dev, rel=1e-9)
    assert aid_share([found], np.array([20_000.0]))[0] == pytest.approx(0.459)


# ---- the budget ------------------------------------------------------------------------------------------------------


@given(st.lists(st.floats(0, 500), min_size=0, max_size=6), st.floats(5000, 40_000), st.floats(0.2, 1.5))
def test_the_budget_adds_up(heats, taken, mass):
    terms = [Term(f"t{k}", f"t{k}", np.array([h]), np.array([1.0])) for k, h in enumerate(heats)]
    rows = budget(taken, mass, *terms).rows(0)
    assert sum(r[1] for r in rows[:-1]) == pytest.approx(rows[-1][1], abs=1e-6)
    assert sum(r[3] for r in rows[:-1]) == pytest.approx(rows[-1][3], rel=1e-9)


def test_the_uncertainty_of_a_run_by_a_second_route():
    c, dt, wire, acid, m = (ufloat(10_000, 5), ufloat(1.75, 0.001), ufloat(50, 5), ufloat(45, 3), ufloat(1.0, 0.0002))
    whole = (c * dt - wire - acid) / m
    one = np.atleast_1d
    terms = [Term(n, n, one(t.n), one(t.s)) for n, t in (("ignition", wire), ("nitric_acid", acid))]
    found = Budget(one(17_500.0), one((c * dt).s), tuple(terms), one(1.0), one(0.0002))
    assert found.per_gram[0] == pytest.approx(whole.n)
    assert found.u_per_gram[0] == pytest.approx(whole.s, rel=1e-9)


# ---- heat capacity ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("heat", "basis"), [(26_434, "air"), (26_454, "vacuum"), (26_434, ""), (26_454, "weighed")])
def test_the_wrong_basis_of_benzoic_acid_is_caught(heat, basis):
    assert heat_capacity.certificate_trouble(heat, basis)


@pytest.mark.parametrize(("heat", "basis"), [(26_434, "vacuum"), (26_454, "air"), (26_460, "air"), (26_454.4, "air")])
def test_the_right_basis_is_left_alone(heat, basis):
    assert heat_capacity.certificate_trouble(heat, basis) == ""


def test_both_bases_are_one_acid():
    found = heat_capacity.heat_weighed_in_air([26_434.0, 26_454.0], ["vacuum", "air"])
    assert found[0] == pytest.approx(found[1], abs=0.5)


def test_conditions_by_hand():
    # 1.0 g in 0.340 dm3 with 1 ml of water at 3.0 MPa and 25 °C: f - 1 = 1e-6 [20 (29.608 - 30) + 42 (2.941 - 3) + 30
    # (2.941 - 3)] = -12.1e-6
    factor, inside = heat_capacity.conditions_factor(3.0, 1.0, 1.0, 0.340, 25.0)
    assert inside
    assert factor == pytest.approx(1 - 12.1e-6, abs=1e-7)


def test_conditions_outside_the_certificate_are_told_and_not_extrapolated():
    # 10 ml of water: the formula would give +782e-6, 21 J/g
    factor, inside = heat_capacity.conditions_factor(3.0, 1.0, 10.0, 0.340, 25.0)
    assert not inside
    assert factor == 1
    assert heat_capacity.conditions_size(3.0, 1.0, 10.0, 0.340, 25.0) == pytest.approx(21, abs=0.5)


def test_another_mass_of_bucket_water():
    # 10 g more water: 41.84 J/K more (common practice, no source)
    assert heat_capacity.for_other_water(10_000.0, 2010.0, 2000.0) == pytest.approx(10_041.84)


def test_summary_of_calibration_runs():
    values = [10_002.0, 9_995.0, 10_010.0, 9_990.0, 10_003.0]
    found = heat_capacity.summary("c", list("abcde"), values, [2.6, 2.61, 2.59, 2.6, 2.6])
    assert found.mean == pytest.approx(10_000)
    assert found.sd == pytest.approx(np.std(values, ddof=1))
    # by hand: sd / sqrt(5) with the certificate's 1.5 in 26454
    assert found.u == pytest.approx(np.hypot(np.std(values, ddof=1) / np.sqrt(5), 10_000 * 1.5 / 26_454), rel=1e-6)
    assert found.warnings == ()


def test_a_trend_with_the_rise_is_told():
    rise = np.array([1.0, 1.5, 2.0, 2.5, 3.0, 3.5])
    values = 10_000 + 8 * rise + np.array([0.5, -0.5, 0.3, -0.4, 0.2, -0.1])
    found = heat_capacity.summary("c", list("abcdef"), values, rise)
    second = linregress(rise, values)
    assert found.trend == pytest.approx(second.slope)
    assert found.trend_p == pytest.approx(second.pvalue, rel=1e-6)
    assert any("changes with the rise" in w for w in found.warnings)


def test_an_outlier_scatter_and_few_runs_are_told():
    far = heat_capacity.summary("c", list("abcdefg"), [10_000, 10_001, 9_999, 10_002, 9_998, 10_000, 10_100], [2.6] * 7)
    assert far.outlier == "g"
    assert any("scatter" in w for w in far.warnings)
    assert any("at least 5" in w for w in heat_capacity.summary("c", ["a"], [10_000], [2.6], [5.0]).warnings)


# ---- net values ------------------------------------------------------------------------------------------------------


def test_net_value_of_iso_by_hand():
    # (28000 - 212.2 x 5 - 0.8 (10 + 1)) x 0.95 - 24.43 x 5 = 25461.54 J/g
    net, _ = net_calorific_value(28_000.0, 0.05, 0.10, 0.01, 0.05)
    assert net == pytest.approx((28_000 - 212.2 * 5 - 0.8 * 11) * 0.95 - 24.43 * 5)


def test_net_at_constant_volume_by_the_worksheet():
    # GB/T 213: (28000 - 206 x 5) x 0.95 - 23 x 5
    net, _ = net_calorific_value(28_000.0, 0.05, moisture=0.05, method="constant_volume")
    assert net == pytest.approx((28_000 - 206 * 5) * 0.95 - 23 * 5)


def test_the_simple_net_value_is_lower_by_its_mixed_latent_heat():
    # 24.42 x 8.94 = 218.3 against 212.2 J/g per 1 % hydrogen: 6.15 J/g too low, 37 J/g at 6 %
    simple, _ = net_calorific_value(28_000.0, 0.06, method="simple")
    proper, _ = net_calorific_value(28_000.0, 0.06)
    assert proper - simple == pytest.approx(37, abs=0.5)


def test_constant_pressure_of_sucrose():
    # C12H22O11 + 12 O2 -> 12 CO2 + 11 H2O(l): no change in moles of gas, so both values are one
    h, o = 22 * 1.008 / 342.297, 11 * 15.999 / 342.297
    at_p, _ = constant_pressure(16_487.0, h, o, 0.0)
    assert at_p == pytest.approx(16_487.0, abs=0.3)


def test_constant_pressure_of_benzoic_acid():
    # C7H6O2 + 7.5 O2 -> 7 CO2 + 3 H2O(l): dn = -0.5, so 0.5 RT / 122.12 g = 10.15 J/g more
    at_p, u = constant_pressure(26_413.0, 6 * 1.008 / 122.121, 2 * 15.999 / 122.121, 0.0, 2.0)
    assert at_p - 26_413.0 == pytest.approx(0.5 * 2478.96 / 122.121, abs=0.1)
    assert u > 2.0


# ---- preparation -----------------------------------------------------------------------------------------------------


def test_from_powder_to_dry_matter_and_as_is():
    # 200 g freeze-dried to 60 g with 4 % water left: dry matter 0.3 x 0.96 = 28.8 %
    y = preparation.powder_yield(200.0, 60.0)
    assert preparation.dry_matter(y, 0.04) == pytest.approx(0.288)
    dry, u_dry = preparation.on_dry_matter(19_200.0, 30.0, 0.04, 0.002)
    second = ufloat(19_200, 30) / (1 - ufloat(0.04, 0.002))
    assert (dry, u_dry) == (pytest.approx(second.n), pytest.approx(second.s, rel=1e-9))
    as_is, u_as_is = preparation.as_it_is(19_200.0, 30.0, y, 0.001)
    third = ufloat(19_200, 30) * ufloat(0.3, 0.001)
    assert (as_is, u_as_is) == (pytest.approx(third.n), pytest.approx(third.s, rel=1e-9))


def test_moisture_of_another_day_is_told():
    assert preparation.day_warning("2026-05-04", "2026-05-04") == ""
    assert "2 days" in preparation.day_warning("2026-05-04", "2026-05-06")


# ---- open vessel -----------------------------------------------------------------------------------------------------


def test_heat_of_solution_by_hand():
    # 100 g of water and 50 J/K of vessel warm by 2.000 K: (418.4 + 50) x 2 = 936.8 J; 5 g of a 50 g/mol salt: 9368 J/mol
    found = open_vessel.heat_given_off(100.0, 2.0, 5.0, 50.0, molar_mass=50.0, u_hardware=2.0)
    assert found.heat == pytest.approx(936.8)
    assert found.per_amount == pytest.approx(9368.0)
    assert found.enthalpy_change == pytest.approx(-9368.0)
    second = (ufloat(100, value("u_mass")) * 4.184 + ufloat(50, 2)) * ufloat(2.0, value("u_rise"))
    assert found.u == pytest.approx(second.s, rel=1e-6)


def test_heat_capacity_of_a_vessel_by_mixing():
    # 100 g at 20 °C in the vessel, 100 g at 60 °C poured in, 39 °C after: 4.184 (100 x 21/19 - 100) = 44.04 J/K
    found, u = open_vessel.vessel_heat_capacity(100.0, 20.0, 100.0, 60.0, 39.0, 0.01)
    assert found == pytest.approx(4.184 * (100 * 21 / 19 - 100))
    cold, hot, mixed = ufloat(20, 0.01), ufloat(60, 0.01), ufloat(39, 0.01)
    assert u == pytest.approx((4.184 * (100 * (hot - mixed) / (mixed - cold) - 100)).s, rel=1e-6)


# ---- cautions --------------------------------------------------------------------------------------------------------


def test_a_charge_over_the_rating_is_told_and_one_below_is_never_called_safe():
    energy = run_energy(1.2, 39_000.0, 0.0)
    assert over_rating(energy, 30_000.0)[0]
    assert not over_rating(run_energy(0.5, 39_000.0), 30_000.0)[0]
    assert "do not fire" in rating_sentence(float(energy), 30_000.0)
