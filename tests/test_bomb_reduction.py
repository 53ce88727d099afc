"""reduce_runs and calibrate: from a sheet to gross energies, and what is told on the way."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from uncertainties import ufloat

import energy
from energy.bomb.constants import CALORIE, value
from energy.bomb.corrections import SULFUR_REASON
from energy.bomb.runs import OUTCOME_COLUMNS, RunSheet
from energy.problems import WrongUse

DATA = Path(__file__).parent / "data" / "thermograms"
DEMO = Path(__file__).parent.parent / "demo_data"
NAMES = sorted(p.stem for p in DATA.glob("*.csv"))


def sheet(rows, head="run_id,sample_id,kind,sample_mass [g],rise [K],ignition_heat [J]"):
    return f"{head}\n{rows}".encode()


def reduced(rows, head="run_id,sample_id,kind,sample_mass [g],rise [K],ignition_heat [J]", **wishes):
    wishes.setdefault("heat_capacity", 10_000.0)
    return energy.reduce_runs(sheet(rows, head), name="runs.csv", **wishes)


CALIBRATION = "".join(
    f"K{i},,calibration,1.0,{r},50,\n" for i, r in enumerate((2.6500, 2.6510, 2.6505, 2.6495, 2.6504))
)
HEAD = "run_id,sample_id,kind,sample_mass [g],rise [K],ignition_heat [J],bucket_water [g]"


# ---- printed examples through the whole way --------------------------------------------------------------------------


def test_printed_calibration_from_its_sheet():
    # the Chinese sheet: 0.8562 g, 26460 J/g, 2.284 K, ignition neglected: 9919.02 J/K
    found = energy.calibrate(
        b"run_id,kind,sample_mass [g],rise [K],certificate_heat [J/g],certificate_basis\n1,calibration,0.8562,2.284,26460,air\n",
        name="runs.csv",
    )
    assert found.runs["heat_capacity"][0] == pytest.approx(9919.02, abs=0.01)
    assert any("at least 5" in note for note in found.notes)


def test_mahler_example_from_its_sheet():
    # Villavecchia: gross 8296.4 cal/g, the vessel of 2674 cal/K, rise 3.1 + 0.0325
    found = energy.reduce_runs(
        b"run_id,sample_id,sample_mass [g],rise [K],heat_capacity [cal/C],nitric_acid_heat [cal],ignition_material,ignition_mass [mg]\n"
        b"1,fuel,1,3.1325,2674,28.75,iron_wire_mahler,32\n",
        name="runs.csv",
    )
    assert found.gross[0] / CALORIE == pytest.approx(8296.4, abs=0.05)


def test_all_six_thermograms_are_read_and_reduced_and_the_two_bad_ones_warn():
    units = {"bench_run_a": 1, "bench_run_b": 1}
    long = pd.concat(
        pd.read_csv(DATA / f"{n}.csv").assign(run_id=n, time=lambda t, n=n: t["time"] * units.get(n, 60)) for n in NAMES
    ).rename(columns={"time": "time [s]", "temperature": "temperature [°C]"})
    runs = pd.DataFrame({"run_id": NAMES, "sample_id": NAMES, "sample_mass [g]": 1.0})
    found = energy.reduce_runs(runs, long, heat_capacity=10_000.0)
    table = found.runs.set_index("run_id")
    assert table["rise"].notna().all()
    assert "not steady" in table.loc["cn_example1_benzoic", "reason"]
    assert "before firing" in table.loc["deltastate_naphthalene", "reason"]
    assert (table.loc[["cn_example1_benzoic", "deltastate_naphthalene"], "status"] == "warned").all()
    assert table.loc["deltastate_benzoic", "status"] == "ok"


# ---- one run ---------------------------------------------------------------------------------------------------------


def test_a_run_by_hand():
    # (10000 x 1.75 - 50) / 0.95 = 18368.42 J/g
    found = reduced("1,a,test,0.95,1.75,50\n")
    assert found.runs["gross_energy"][0] == pytest.approx((10_000 * 1.75 - 50) / 0.95 * 1e-3)


def test_its_uncertainty_by_a_second_route():
    found = reduced("1,a,test,0.95,1.75,50\n", u_heat_capacity=6.0)
    ge = (ufloat(10_000, 6) * ufloat(1.75, value("u_rise")) - ufloat(50, 5)) / ufloat(0.95, value("u_mass"))
    assert found.runs["u"][0] == pytest.approx(ge.s * 1e-3, rel=1e-6)


def test_the_budget_of_a_run_adds_up():
    found = energy.reduce_runs(DEMO / "bomb_runs.csv", DEMO / "bomb_thermograms.csv")
    for run in ("R01", "R08", "R10"):
        table = found.budget(run)
        assert table["heat_j"][:-1].sum() == pytest.approx(table["heat_j"].iloc[-1])
        ge = found.runs.set_index("run_id").loc[run, "gross_energy"]
        assert table["j_per_g"].iloc[-1] == pytest.approx(ge * 1e3)


def test_the_budget_of_a_calibration_adds_up_to_what_was_taken_up():
    # by hand: 1.0 g at 26454 J/g and 50 J of ignition
    found = energy.reduce_runs(sheet(CALIBRATION, HEAD), name="r.csv")
    table = found.budget("K0")
    assert table["heat_j"].tolist() == pytest.approx([26_454, 50, 26_504])


def test_sulfur_is_off_with_its_reason_and_on_when_asked_for():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K],sulfur [%]"
    off, on = reduced("1,a,test,1,2,2\n", head), reduced("1,a,test,1,2,2\n", head, sulfur="separate")
    assert SULFUR_REASON in off.notes
    assert off.gross[0] - on.gross[0] == pytest.approx(2 * 94.1)


def test_nitric_acid_as_a_share_where_nobody_titrated():
    # (20000 - 50) J at 19950 J/g: 0.0012 of it
    found = reduced("1,a,test,1,2,50\n", nitric_acid="share")
    assert found.gross[0] == pytest.approx(19_950 * (1 - 0.0012))


def test_mass_from_the_mass_with_its_bag():
    head = "run_id,sample_id,kind,total_mass [g],rise [K],bag_mass [g],bag_heat [J/g]"
    found = reduced("1,a,test,1.04,2,0.04,46000\n", head)
    assert found.gross[0] == pytest.approx((20_000 - 0.04 * 46_000) / 1.0)


def test_an_aid_that_brings_more_than_a_third_is_told():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K],aid_mass [g],aid_heat [J/g]"
    found = reduced("1,a,test,1,2,0.2,45900\n2,a,test,1,2,0.1,45900\n", head)
    assert "more than a third" in found.runs["reason"][0]
    assert found.runs["status"].tolist() == ["warned", "ok"]


def test_an_aid_without_its_heat_is_told():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K],aid_mass [g],aid_heat [J/g]"
    assert "heat is not given" in reduced("1,a,test,1,2,0.2,\n", head).runs["reason"][0]


def test_a_sooty_run_stays_visible_and_counts_for_nothing():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K],rejected"
    found = reduced("1,a,test,1,1.9,soot\n2,a,test,1,2,\n3,a,test,1,2,lid leaked\n", head)
    assert found.runs["status"].tolist() == ["rejected", "ok", "rejected"]
    assert "rejected, not corrected" in found.runs["reason"][0]
    assert "lid leaked" in found.runs["reason"][2]
    assert found.samples["n"].tolist() == [1]
    assert found.samples["gross_energy"][0] == pytest.approx(20.0)


def test_moisture_of_another_day_is_told():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K],pellet_date,moisture_date"
    assert "2 days away" in reduced("1,a,test,1,2,2026-05-04,2026-05-06\n", head).runs["reason"][0]


def test_a_moisture_without_its_day_is_asked_about():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K],residual_moisture [%]"
    assert any("both belong to one day" in note for note in reduced("1,a,test,1,2,4\n", head).notes)


def test_the_run_over_the_vessel_s_rating_is_told_and_none_is_called_safe():
    found = reduced("1,a,test,1,4,0\n2,a,test,1,2,0\n", rated_energy=30_000.0)
    assert "do not fire" in found.runs["reason"][0]
    assert not any("safe" in r for r in found.runs["reason"])


def test_a_charge_can_be_predicted_before_it_is_fired():
    head = "run_id,sample_id,kind,sample_mass [g],expected_energy [kJ/g],rated_energy [kJ]"
    found = reduced("1,oil,test,1.2,39.5,30\n", head)
    assert found.energy[0] == pytest.approx(47_400)
    assert "rated for" in found.runs["reason"][0]


def test_every_lack_of_a_run_is_told():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K]"
    found = energy.reduce_runs(sheet("1,a,test,,2\n2,a,test,1,\n3,a,test,1,2\n", head), name="r.csv")
    assert found.runs["status"].tolist() == ["problem"] * 3
    assert "mass" in found.runs["reason"][0]
    assert "temperature rise" in found.runs["reason"][1]
    assert "no heat capacity" in found.runs["reason"][2]


def test_a_bag_heavier_than_the_whole_and_an_aid_hotter_than_the_run_are_told():
    head = "run_id,sample_id,kind,total_mass [g],rise [K],bag_mass [g],bag_heat [J/g]"
    found = reduced("1,a,test,0.03,2,0.04,46000\n2,a,test,1.5,2,0.5,46000\n", head)
    assert found.runs["status"].tolist() == ["problem", "problem"]
    assert "nothing is left" in found.runs["reason"][0]
    assert "more heat than the calorimeter took up" in found.runs["reason"][1]


def test_a_calibration_nobody_knows_is_told():
    head = "run_id,sample_id,kind,calibration_id,sample_mass [g],rise [K]"
    found = energy.reduce_runs(sheet("1,,calibration,A,1,2.6\n2,x,test,B,1,2\n", head), name="r.csv")
    assert "names is not known" in found.runs["reason"][1]


# ---- calibration -----------------------------------------------------------------------------------------------------


def test_the_sheet_s_own_calibration_is_used():
    found = energy.reduce_runs(sheet(CALIBRATION + "1,a,test,1,2,50,\n", HEAD), name="r.csv")
    by_hand = np.mean((26_454 + 50) / np.array([2.6500, 2.6510, 2.6505, 2.6495, 2.6504]))
    assert found.calibrations[0].mean == pytest.approx(by_hand)
    assert found.runs["heat_capacity"].iloc[-1] == pytest.approx(by_hand)


def test_the_wrong_basis_of_benzoic_acid_is_caught_and_left_out():
    head = "run_id,kind,sample_mass [g],rise [K],certificate_heat [J/g],certificate_basis"
    rows = "".join(f"{i},calibration,1,2.65,26454,air\n" for i in range(5)) + "9,calibration,1,2.65,26434,air\n"
    found = energy.calibrate(sheet(rows, head), name="r.csv")
    assert found.calibrations[0].n == 5
    assert found.runs["status"].iloc[-1] == "problem"
    assert "in vacuum" in str(found.problems[0])
    assert found.problems[0].row == 7


def test_a_certificate_without_basis_is_asked_for():
    head = "run_id,kind,sample_mass [g],rise [K],certificate_heat [J/g]"
    found = energy.calibrate(sheet("1,calibration,1,2.65,26454\n", head), name="r.csv")
    assert "basis" in found.runs["reason"][0]


def test_both_bases_give_one_heat_capacity():
    head = "run_id,kind,sample_mass [g],rise [K],certificate_heat [J/g],certificate_basis"
    found = energy.calibrate(
        sheet("1,calibration,1,2.65,26454,air\n2,calibration,1,2.65,26434,in vacuum\n", head), name="r.csv"
    )
    first, second = found.runs["heat_capacity"]
    assert first == pytest.approx(second, rel=2e-5)


def test_bomb_conditions_outside_the_certificate_are_told_with_their_size():
    # 10 ml of water in 0.340 dm3: the formula would give 21 J/g, and is not applied
    head = "run_id,kind,sample_mass [g],rise [K],oxygen_pressure [MPa],bomb_water [g],bomb_volume [dm3],final_temperature [C]"
    found = energy.calibrate(sheet("1,calibration,1,2.65,3.0,10,0.340,25\n", head), name="r.csv")
    assert "+21 J/g" in found.runs["reason"][0]
    assert found.calibrations[0].mean == pytest.approx(26_454 / 2.65)


def test_another_mass_of_bucket_water_is_reckoned():
    rows = CALIBRATION.replace(",\n", ",2000\n") + "1,a,test,1,2,50,2000\n2,a,test,1,2,50,2010\n"
    table = energy.reduce_runs(sheet(rows, HEAD), name="r.csv").runs.set_index("run_id")
    assert table.loc["2", "heat_capacity"] - table.loc["1", "heat_capacity"] == pytest.approx(41.84)


def test_corrections_unlike_those_of_the_calibration_are_told():
    found = energy.reduce_runs(sheet(CALIBRATION + "1,a,test,1,2,,\n", HEAD), name="r.csv")
    assert "ignition was counted in the calibration but not in this run" in found.runs["reason"].iloc[-1]


def test_another_wire_than_in_the_calibration_is_told():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K],ignition_material,ignition_mass [mg]"
    rows = "1,,calibration,1,2.6,platinum wire,10\n2,x,test,1,2,iron wire,10\n3,x,test,1,2,platinum wire,10\n"
    reasons = energy.reduce_runs(sheet(rows, head), name="r.csv").runs["reason"]
    assert "another wire" in reasons[1]
    assert reasons[2] == ""


def test_two_instruments_keep_their_own_heat_capacity():
    head = "run_id,sample_id,kind,instrument,sample_mass [g],rise [K]"
    rows = "1,,calibration,A,1,2.6\n2,,calibration,B,1,2.4\n3,x,test,A,1,2\n4,x,test,B,1,2\n5,x,test,,1,2\n"
    found = energy.reduce_runs(sheet(rows, head), name="r.csv")
    c = found.runs.set_index("run_id")["heat_capacity"]
    assert c["3"] == pytest.approx(26_454 / 2.6)
    assert c["4"] == pytest.approx(26_454 / 2.4)
    assert "several calibrations" in found.runs["reason"].iloc[-1]


def test_a_calibration_of_another_sheet_can_be_handed_on():
    known = energy.calibrate(sheet(CALIBRATION, HEAD), name="r.csv").calibrations
    found = energy.reduce_runs(sheet("1,a,test,1,2,50\n"), name="r.csv", calibrations=known)
    assert found.runs["heat_capacity"][0] == pytest.approx(known[0].mean)
    assert found.runs["calibration_id"][0] == known[0].id


def test_a_sheet_without_calibration_runs_cannot_calibrate():
    with pytest.raises(WrongUse, match="calibration"):
        energy.calibrate(sheet("1,a,test,1,2,50\n"), name="r.csv")


# ---- samples ---------------------------------------------------------------------------------------------------------


def pair(*energies):
    rows = "".join(f"{i},a,test,1,{q / 10_000},0\n" for i, q in enumerate(energies))
    return reduced(rows).samples.iloc[0]


def test_duplicates_within_r_give_their_mean():
    # r = 107 J/g, Sibbald and Morse 1982
    found = pair(18_000, 18_100)
    assert (found["status"], found["n"]) == ("mean", 2)
    assert found["gross_energy"] == pytest.approx(18.05)


def test_duplicates_beyond_r_ask_for_a_third_run():
    found = pair(18_000, 18_120)
    assert found["status"] == "third_run"
    assert "burn a third" in found["reason"]


def test_three_runs_within_their_critical_range_give_their_mean():
    # 3.3/2.8 x 107 = 126 J/g (ISO 5725-6)
    assert pair(18_000, 18_120, 18_060)["status"] == "mean"
    assert pair(18_000, 18_130, 18_060)["status"] == "fourth_run"


def test_runs_too_far_apart_widen_the_uncertainty():
    # a value anywhere between two runs 600 J/g apart: 600/sqrt(12) = 173 J/g
    assert pair(18_000, 18_600)["u"] > 0.173
    assert pair(18_000, 18_100)["u"] < 0.05


def test_a_single_run_is_told():
    assert pair(18_000)["status"] == "single"


def test_a_pair_that_agrees_does_not_set_its_own_uncertainty():
    # repeatability 107/2.8 J/g over root two, at least
    assert pair(18_000, 18_000)["u"] >= 107 / 2.8 / np.sqrt(2) * 1e-3


def test_from_powder_to_dry_matter_and_as_is():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K],residual_moisture [%],received_mass [g],dried_mass [g]"
    found = reduced("1,a,test,1,2,4,200,60\n2,a,test,1,2,4,200,60\n", head).samples.iloc[0]
    assert found["gross_energy_dry_matter"] == pytest.approx(20 / 0.96)
    assert found["gross_energy_as_is"] == pytest.approx(6.0)
    assert found["dry_matter"] == pytest.approx(0.288)  # 60/200 x 0.96


def test_the_samples_join_a_sample_table_and_are_assessed():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K],residual_moisture [%]"
    found = reduced("1,007,test,1,1.8,4\n2,007,test,1,1.8,4\n", head)
    samples = energy.read_samples(found.sample_table)
    assert samples.columns["gross_energy"][0] == pytest.approx(18.0)
    other = pd.DataFrame({"sample_id": ["007", "008"], "crude protein [% DM]": [12.0, 14.0]})
    joined = found.joined(other)
    assert len(joined) == 2
    assert joined["gross_energy [MJ/kg as analysed]"].tolist()[0] == pytest.approx(18.0)
    assert np.isnan(joined["gross_energy [MJ/kg as analysed]"][1])


def test_a_control_is_nobody_s_sample():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K]"
    found = reduced("1,house,control,1,1.8\n2,a,test,1,1.8\n", head)
    assert found.samples["kind"].tolist() == ["control", "test"]
    assert found.sample_table["sample_id"].tolist() == ["a"]


def test_wet_and_powder_in_one_sheet_keep_their_bases():
    head = "run_id,sample_id,kind,preparation,sample_mass [g],rise [K],residual_moisture [%]"
    found = reduced("1,w,test,wet in bag,1,0.5,\n2,p,test,pellet,1,1.8,4\n", head)
    samples = energy.read_samples(found.sample_table)
    bases = dict(zip(samples.ids, samples.frame["gross_energy_basis"], strict=True))
    assert bases == {"w": "as_is", "p": "as_analysed"}
    with pytest.raises(WrongUse, match="burnt wet"):
        found.joined(pd.DataFrame({"sample_id": ["w"]}))
    on_dry = found.joined(pd.DataFrame({"sample_id": ["p"]}), basis="dry_matter")
    assert on_dry["gross_energy [MJ/kg DM]"][0] == pytest.approx(18 / 0.96)


def test_fuel_values_come_on_request_and_are_kept_apart():
    head = "run_id,sample_id,kind,sample_mass [g],rise [K],residual_moisture [%],hydrogen [%],oxygen [%],nitrogen [%]"
    table = reduced("1,a,test,1,1.9,5,6,40,1\n", head).fuel_values
    dry = 19_000 / 0.95
    assert table["net_calorific_value"][0] == pytest.approx(((dry - 212.2 * 6 - 0.8 * 41) * 0.95 - 24.43 * 5) * 1e-3)
    assert "not the net energy" in table["note"][0]


# ---- the whole -------------------------------------------------------------------------------------------------------


def test_the_outcome_has_its_columns_and_one_row_per_run():
    found = energy.reduce_runs(DEMO / "bomb_runs.csv", DEMO / "bomb_thermograms.csv")
    assert list(found.runs.columns) == list(OUTCOME_COLUMNS)
    assert len(found.runs) == len(pd.read_csv(DEMO / "bomb_runs.csv"))


def test_the_planted_faults_of_the_demo_are_told():
    found = energy.reduce_runs(DEMO / "bomb_runs.csv", DEMO / "bomb_thermograms.csv")
    reasons = found.runs.set_index("run_id")["reason"]
    for run, words in {"K7": "in vacuum", "R05": "soot", "R10": "more than a third", "R12": "days away",
                       "R13": "after period", "R14": "nitric acid"}.items():  # fmt: skip
        assert words in reasons[run], run
    assert found.samples.set_index("sample_id").loc["layer mash", "status"] == "third_run"
    # the calorimeter was invented with 10062 J/K
    known = found.calibrations[0]
    assert abs(known.mean - 10_062) < 2.6 * known.u


def test_arrays_give_what_a_sheet_gives():
    from_arrays = energy.reduce_runs(
        RunSheet.from_arrays({"sample_mass": [0.95], "rise": [1.75], "ignition_heat": [50]}), heat_capacity=10_000.0
    )
    assert from_arrays.gross[0] == pytest.approx(reduced("1,a,test,0.95,1.75,50\n").gross[0])


def test_a_heat_capacity_of_nothing_is_refused():
    with pytest.raises(WrongUse, match="impossible"):
        reduced("1,a,test,1,2,0\n", heat_capacity=0.0)


@pytest.mark.parametrize("wish", [{"method": "reynolds"}, {"sulfur": "maybe"}, {"nitric_acid": "guess"}])
def test_an_unknown_wish_names_the_known_ones(wish):
    with pytest.raises(WrongUse, match="One of"):
        reduced("1,a,test,1,2,0\n", **wish)
