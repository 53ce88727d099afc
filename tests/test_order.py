"""What energies cannot do on their way through an eater, each reported with its reason and never clipped."""

import pandas as pd
import pytest

import energy

PLAIN = {"dry matter [%]": 88.0, "crude protein [g/kg DM]": 150.0, "crude fat [g/kg DM]": 30.0,
         "crude fibre [g/kg DM]": 200.0, "ash [g/kg DM]": 70.0, "gross energy [MJ/kg DM]": 18.2}  # fmt: skip


def assess(target="cattle", systems="all", **row):
    samples = energy.read_samples(pd.DataFrame([{"sample_id": "s", **PLAIN, **row}]), target=target)
    return energy.assess(samples, unit="MJ/kg DM", systems=systems)


def told(a, word):
    return [p.what for p in a.problems if word in p.what]


@pytest.mark.parametrize(
    ("row", "words"),
    [
        ({"DE [MJ/kg DM]": 19.0}, "digestible energy, of a trial of 16.72 MJ/kg is more than gross energy"),
        ({"DE [MJ/kg DM]": 12.0, "ME [MJ/kg DM]": 12.5}, "metabolizable energy of 11 MJ/kg is more than digestible"),
        ({"ME [MJ/kg DM]": 10.0, "net energy [MJ/kg DM]": 10.5}, "net energy of 9.24 MJ/kg is more than metabolizable"),
        ({"AMEn [MJ/kg DM]": 18.5}, "nitrogen-corrected apparent metabolizable energy, of a trial of 16.28 MJ/kg is more than gross"),
        ({"methane energy [MJ/kg DM]": 3.0}, "energy in methane is 16.5 % of gross energy, over 15 %"),
        ({"faecal energy [MJ/kg DM]": 18.9}, "energy in faeces is 103.8 % of gross energy"),
        ({"energy digestibility [%]": 104.0}, "digestibility of energy of 104 % is impossible"),
        ({"digestible crude protein [g/kg DM]": 160.0}, "digestible crude protein of 14.08 % is more than protein"),
        ({"ADF [g/kg DM]": 300.0, "NDF [g/kg DM]": 250.0}, "acid detergent fibre of 26.4 % is more than neutral"),
    ],
)  # fmt: skip
def test_given_values_that_cannot_stand_together(row, words):
    row = dict(row)
    found = [p.what.replace(", of a trial", "") for p in assess(**row).problems]
    assert any(words.replace(", of a trial", "") in what for what in found), found


@pytest.mark.parametrize("me", [12.0, 11.999])
def test_equal_energies_are_possible(me):
    assert told(assess(systems="default", **{"DE [MJ/kg DM]": 12.0, "ME [MJ/kg DM]": me}), "impossible") == []


def test_a_digestibility_over_one_hundred_by_equation_is_marked_and_kept():
    """Zhao et al. 2017: 38.982 + 1.660 x CP; 40 % of protein give 105.4 %."""
    a = assess("sheep", **{"crude protein [g/kg DM]": 400.0})
    row = a.results.set_index("system").loc["zhao_2017_sheep_ged_cp"]
    assert row["value"] == pytest.approx(38.982 + 1.660 * 40)
    assert row["status"] == "implausible"
    assert "a digestibility of 105.4 %, over 100 %" in row["reason"]


def test_a_digestible_energy_above_its_gross_energy_is_marked_and_kept():
    """Hales et al. 2022 on DE 20: ME = 1.0001 x 20 - 0.3926 Mcal exceeds a GE of 18.2 MJ by far."""
    a = assess("cattle", **{"DE [MJ/kg DM]": 20.0})
    row = a.results.set_index("system").loc["hales_2022_me_linear"]
    assert row["value"] == pytest.approx(1.0001 * 20 - 0.3926 * 4.184)
    assert row["status"] == "implausible"
    assert "more than gross energy" in row["reason"]


def test_a_me_above_its_own_de_is_marked():
    """The cubic of 2019, 1.3764 DE - 0.9483 - 0.057 DE^2, stays below DE; galyean below too: no false alarm."""
    a = assess("cattle", **{"DE [MJ/kg DM]": 14.0})
    found = a.results.set_index("system")
    assert set(found.loc[["hales_2019_me_quadratic", "galyean_2016_me_linear", "nrc_1976_de_me"], "status"]) <= {
        "ok", "outside_domain"
    }  # fmt: skip


def test_methane_by_equation_over_fifteen_percent_is_marked():
    """Blaxter and Clapperton 1965 at a digestibility of 20 % and nine times maintenance: 1.30 + 2.24 + 9 x 1.37."""
    a = assess("cattle", **{"energy digestibility [%]": 20.0, "feeding level": 9.0})
    row = a.results.set_index("system").loc["blaxter_1965_ch4"]
    assert row["value"] / 18.2 == pytest.approx((1.30 + 2.24 + 9 * 1.37) / 100)
    assert row["status"] == "implausible"
    assert "methane takes 15.9 % of gross energy" in row["reason"]


def test_a_figure_that_fits_is_left_alone():
    a = assess("cattle", systems="default", **{"energy digestibility [%]": 70.0})
    assert set(a.results["status"]) <= {"ok", "assumed", "missing_input", "outside_domain"}
    assert a.problems == []


def test_the_gross_energy_computed_stands_in_where_none_is_measured():
    row = {**PLAIN, "DE [MJ/kg DM]": 21.0}
    del row["gross energy [MJ/kg DM]"]
    samples = energy.read_samples(pd.DataFrame([{"sample_id": "s", **row}]), target="cattle")
    found = energy.assess(samples, unit="MJ/kg DM", systems="all").results.set_index("system")
    assert found.loc["hales_2022_me_linear", "status"] == "implausible"


def test_people_are_told_by_the_verdict_instead():
    samples = energy.read_samples(pd.DataFrame([{"sample_id": "s", **PLAIN}]), target="none")
    assert energy.assess(samples).problems == []


TRIAL = {"feed intake [kg DM]": 1.0, "excreta output [kg DM]": 0.45, "gross energy of excreta [MJ/kg DM]": 17.0}


@pytest.mark.parametrize("target", ["poultry", "duck"])
def test_nitrogen_that_is_lost_puts_amen_above_ame_without_reproach(target):
    """18.2 - 0.45 x 17 = 10.55; 8.14 g N lost per kg at 34.39 kJ/g add 0.27994 MJ (Shu et al. 2018: force-fed ducks)."""
    a = assess(target, "default", **TRIAL, **{"nitrogen retained [g/kg DM]": -8.14})
    row = a.results.set_index("system").loc["trial_chain_amen_total"]
    assert row["value"] == pytest.approx(10.55 + 8.14 * 0.03439)
    assert row["status"] == "ok"
    assert told(a, "impossible") == []


def test_a_wrong_bomb_value_does_not_accuse_the_composition():
    """1.65 instead of 16.5 MJ/kg: the composition still gives some 18 MJ GE and 14 MJ DE per kg of dry matter."""
    more = {"NDF [g/kg DM]": 180.0, "ADF [g/kg DM]": 60.0, "starch [g/kg DM]": 450.0, "gross energy [MJ/kg DM]": 1.82,
            "crude fibre [g/kg DM]": 50.0}  # fmt: skip
    found = assess("growing_pig", "default", **more).results.set_index("system")
    assert found.loc["noblet_perez_1993_de_ndf", "status"] == "ok"
    assert found.loc["noblet_perez_1993_de_ge_ndf", "status"] == "implausible"


def test_columns_of_a_trial_that_nothing_uses_are_told():
    a = assess("growing_pig", "default", **TRIAL)
    assert len(told(a, "is given, but no figure computed here for growing pig")) == 3


def test_what_would_use_an_unused_column_is_named():
    a = assess("growing_pig", "default", **{"energy digestibility [%]": 82.0})
    (problem,) = [p for p in a.problems if p.column == "energy_digestibility"]
    assert "ge_times_measured_digestibility" in problem.cure


def test_columns_of_a_trial_that_are_used_are_not_told():
    a = assess("poultry", "default", **TRIAL, **{"nitrogen retained [g/kg DM]": 9.0})
    assert told(a, "is given, but no figure") == []
