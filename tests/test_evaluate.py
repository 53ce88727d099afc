"""Blocks of value, u and status. Second route for u: the package `uncertainties`."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from uncertainties import ufloat

import energy
from energy import evaluate
from energy.samples import Samples

BASE = {
    "moisture": 0.38,
    "crude_protein": 0.086,
    "crude_fat": 0.016,
    "ash": 0.018,
    "total_dietary_fibre": 0.026,
    "gross_energy": 11.5,
}
U = {"moisture": 0.002, "crude_protein": 0.003, "crude_fat": 0.0025, "ash": 0.001, "total_dietary_fibre": 0.003, "gross_energy": 0.06,
     "available_carbohydrate": 0.004, "carbohydrate_by_difference": 0.004, "residual_moisture": 0.002, "dry_matter": 0.002,
     "nitrogen": 0.0004, "sugars": 0.002, "alcohol": 0.001, "polyols": 0.003, "preparation_yield": 0.003,
     "organic_acids": 0.001}  # fmt: skip


def assess(columns, basis="as_is", group=None, **more):
    text = {"food_group": [group]} if group else None
    u = {k: [U[k]] for k in columns if k in U}
    samples = Samples.from_arrays({k: [v] for k, v in columns.items()}, basis=basis, u=u, text=text)
    return energy.assess(samples, target="human", law="eu_1169_2011", **more)


def row(a, system):
    return a.results[a.results["system"] == system].iloc[0]


def numbers(columns):
    return {k: ufloat(v, U[k]) if k in U else v for k, v in columns.items()}


def carbohydrate(x):
    return 1 - x["moisture"] - x["crude_protein"] - x["crude_fat"] - x["ash"] - x.get("alcohol", 0)


def eu(p, f, available, fibre=0.0, polyols=0.0, alcohol=0.0, acids=0.0):
    return 17 * p + 37 * f + 17 * (available - polyols) + 8 * fibre + 10 * polyols + 29 * alcohol + 13 * acids


def general(ge, p, f, c):
    """Bomb route with general digestibilities, MJ/kg: heats 5.65 9.40 4.15 kcal/g, 92 95 97 %, 1.25 kcal per g digested protein."""
    k = 4.184
    share = (5.65 * 0.92 * p + 9.4 * 0.95 * f + 4.15 * 0.97 * c) / (5.65 * p + 9.4 * f + 4.15 * c)
    return ge * share - 1.25 * 0.92 * k * p


def bran(ge, p, f, c):
    k = 4.184
    share = (5.8 * 0.4 * p + 9.3 * 0.9 * f + 4.2 * 0.56 * c) / (5.8 * p + 9.3 * f + 4.2 * c)
    return ge * share - 1.25 * 0.4 * k * p


def case(name, columns, system, formula, basis="as_is", group=None):
    return pytest.param(columns, system, formula, basis, group, id=name)


DIFF = {k: v for k, v in BASE.items()}
AVAIL = {
    "crude_protein": 0.09,
    "crude_fat": 0.1,
    "available_carbohydrate": 0.5,
    "total_dietary_fibre": 0.05,
    "gross_energy": 15.0,
}
DM = {"moisture": 0.7, "crude_protein": 0.3, "crude_fat": 0.2, "available_carbohydrate": 0.4, "gross_energy": 20.0}
POWDER = {"moisture": 0.75, "residual_moisture": 0.04, "gross_energy": 21.0}
BRAN = {"moisture": 0.12, "crude_protein": 0.15, "crude_fat": 0.045, "ash": 0.058, "gross_energy": 16.5}
CASES = [
    case("eu by difference", DIFF, "eu_1169_2011",
         lambda x: eu(x["crude_protein"], x["crude_fat"], carbohydrate(x) - x["total_dietary_fibre"], x["total_dietary_fibre"])),
    case("eu kcal by difference", DIFF, "eu_1169_2011_kcal",
         lambda x: 4.184 * (4 * x["crude_protein"] + 9 * x["crude_fat"] + 4 * (carbohydrate(x) - x["total_dietary_fibre"])
                            + 2 * x["total_dietary_fibre"])),
    case("eu determined", AVAIL, "eu_1169_2011",
         lambda x: eu(x["crude_protein"], x["crude_fat"], x["available_carbohydrate"], x["total_dietary_fibre"])),
    case("eu polyols", {**AVAIL, "polyols": 0.2}, "eu_1169_2011",
         lambda x: eu(x["crude_protein"], x["crude_fat"], x["available_carbohydrate"], x["total_dietary_fibre"], x["polyols"])),
    case("eu alcohol", {**AVAIL, "alcohol": 0.05}, "eu_1169_2011",
         lambda x: eu(x["crude_protein"], x["crude_fat"], x["available_carbohydrate"], x["total_dietary_fibre"], alcohol=x["alcohol"])),
    case("eu acids by difference", {**DIFF, "organic_acids": 0.01}, "eu_1169_2011",
         lambda x: eu(x["crude_protein"], x["crude_fat"], carbohydrate(x) - x["total_dietary_fibre"] - x["organic_acids"],
                      x["total_dietary_fibre"], acids=x["organic_acids"])),
    case("eu on dry matter", DM, "eu_1169_2011",
         lambda x: (1 - x["moisture"]) * eu(x["crude_protein"], x["crude_fat"], x["available_carbohydrate"]), "dry_matter"),
    case("bomb general by difference", DIFF, "bomb_atwater_general",
         lambda x: general(x["gross_energy"], x["crude_protein"], x["crude_fat"], carbohydrate(x))),
    case("bomb general determined", AVAIL, "bomb_atwater_general",
         lambda x: general(x["gross_energy"], x["crude_protein"], x["crude_fat"],
                           x["available_carbohydrate"] + x["total_dietary_fibre"])),
    case("bomb general on dry matter", DM, "bomb_atwater_general",
         lambda x: (1 - x["moisture"]) * general(x["gross_energy"], x["crude_protein"], x["crude_fat"], x["available_carbohydrate"]),
         "dry_matter"),
    case("bomb by group", BRAN, "bomb_atwater_by_group",
         lambda x: bran(x["gross_energy"], x["crude_protein"] * 6.31 / 6.25, x["crude_fat"],
                        1 - x["moisture"] - x["crude_protein"] * 6.31 / 6.25 - x["crude_fat"] - x["ash"]), group="wheat_bran"),
    case("gross energy as is", BASE, "gross_energy_measured", lambda x: x["gross_energy"]),
    case("gross energy of a powder", POWDER, "gross_energy_measured",
         lambda x: x["gross_energy"] / (1 - x["residual_moisture"]) * (1 - x["moisture"]), "as_analysed"),
    case("gross energy by yield", {"preparation_yield": 0.26, "residual_moisture": 0.04, "gross_energy": 21.0}, "gross_energy_measured",
         lambda x: x["gross_energy"] / (1 - x["residual_moisture"]) * (x["preparation_yield"] * (1 - x["residual_moisture"])),
         "as_analysed"),
    case("heats, general", DIFF, "ge_heats_best",
         lambda x: 4.184 * (5.65 * x["crude_protein"] + 9.4 * x["crude_fat"] + 4.15 * (carbohydrate(x) - x["total_dietary_fibre"]))
         + 17.4 * x["total_dietary_fibre"]),
    case("heats, sugars", {**AVAIL, "sugars": 0.2}, "ge_heats_best",
         lambda x: 4.184 * (5.65 * x["crude_protein"] + 9.4 * x["crude_fat"] + 4.15 * (x["available_carbohydrate"] - x["sugars"]))
         + 16.5 * x["sugars"] + 17.4 * x["total_dietary_fibre"]),
    case("atwater by difference", DIFF, "atwater_general_unrounded",
         lambda x: 4.184 * (4.05 * x["crude_protein"] + 8.93 * x["crude_fat"] + 4.03 * carbohydrate(x))),
    case("atwater from nitrogen", {"moisture": 0.4, "nitrogen": 0.016, "crude_fat": 0.02, "ash": 0.02}, "eu_1169_2011",
         lambda x: eu(6.25 * x["nitrogen"], x["crude_fat"], 1 - x["moisture"] - 6.25 * x["nitrogen"] - x["crude_fat"] - x["ash"])),
    case("atwater from dry matter", {"dry_matter": 0.6, "crude_protein": 0.09, "crude_fat": 0.02, "ash": 0.02},
         "atwater_general_unrounded",
         lambda x: 4.184 * (4.05 * x["crude_protein"] + 8.93 * x["crude_fat"]
                            + 4.03 * (x["dry_matter"] - x["crude_protein"] - x["crude_fat"] - x["ash"]))),
    case("atwater from a given difference", {"crude_protein": 0.09, "crude_fat": 0.02, "carbohydrate_by_difference": 0.5},
         "atwater_general_unrounded",
         lambda x: 4.184 * (4.05 * x["crude_protein"] + 8.93 * x["crude_fat"] + 4.03 * x["carbohydrate_by_difference"])),
]  # fmt: skip


@pytest.mark.parametrize(("columns", "system", "formula", "basis", "group"), CASES)
def test_value_and_u_agree_with_uncertainties(columns, system, formula, basis, group):
    expected = formula(numbers(columns))
    found = row(assess(columns, basis, group), system)
    assert found["value"] == pytest.approx(expected.nominal_value, rel=1e-12)
    assert found["u"] == pytest.approx(expected.std_dev, rel=1e-9)


def test_there_are_twenty_cases():
    assert len(CASES) == 20


def test_u_of_a_difference_counts_shared_inputs_once():
    a = assess(AVAIL)
    x = numbers(AVAIL)
    bomb = general(
        x["gross_energy"], x["crude_protein"], x["crude_fat"], x["available_carbohydrate"] + x["total_dietary_fibre"]
    )
    law = eu(x["crude_protein"], x["crude_fat"], x["available_carbohydrate"], x["total_dietary_fibre"])
    found = a.verdicts[a.verdicts["composition_system"] == "eu_1169_2011"].iloc[0]
    assert found["u_difference"] == pytest.approx((bomb - law).std_dev, rel=1e-9)


def test_monte_carlo_agrees_with_first_order():
    rng = np.random.default_rng(7)
    draws = {k: rng.normal(v, U[k], 200_000) for k, v in AVAIL.items()}
    trial = general(draws["gross_energy"], draws["crude_protein"], draws["crude_fat"],
                    draws["available_carbohydrate"] + draws["total_dietary_fibre"])  # fmt: skip
    assert row(assess(AVAIL), "bomb_atwater_general")["u"] == pytest.approx(trial.std(), rel=0.02)


FRACTIONS = st.floats(0.001, 0.2)


@given(
    FRACTIONS,
    FRACTIONS,
    FRACTIONS,
    FRACTIONS,
    st.floats(5, 38),
    st.sampled_from(["", "wheat_bran", "eggs", "cocoa"]),
    st.booleans(),
)
@settings(max_examples=60, deadline=None)
def test_the_three_parts_are_the_difference(protein, fat, ash, fibre, ge, group, sugars):
    columns = {"moisture": [0.2], "crude_protein": [protein], "crude_fat": [fat], "ash": [ash], "total_dietary_fibre": [fibre],
               "gross_energy": [ge]}  # fmt: skip
    if sugars:
        columns["sugars"] = [0.05]
    a = energy.assess(Samples.from_arrays(columns, text={"food_group": [group]}), target="human", law="eu_1169_2011")
    v = a.verdicts
    assert len(v) == 3
    assert np.max(np.abs(v["measurement_part"] + v["heats_part"] + v["convention_part"] - v["difference"])) < 1e-12
    assert np.max(np.abs(v["bomb"] - v["composition"] - v["difference"])) < 1e-12


def batch(n=50):
    rng = np.random.default_rng(3)
    columns = {k: rng.uniform(0.6, 1.2, n) * v for k, v in BASE.items()}
    columns["crude_fat"][::7] = np.nan
    columns["total_dietary_fibre"][::5] = np.nan
    groups = np.array(["", "wheat_bran", "eggs"], dtype=object)[rng.integers(0, 3, n)]
    return columns, groups


def values(columns, groups, **more):
    a = energy.assess(
        Samples.from_arrays(columns, text={"food_group": groups}), target="human", law="eu_1169_2011", **more
    )
    return a.blocks


@pytest.mark.parametrize("chunk", [1, 7, 16_384])
def test_the_same_bits_for_every_chunk(monkeypatch, chunk):
    expected = values(*batch())
    monkeypatch.setattr(evaluate, "CHUNK", chunk)
    found = values(*batch())
    for name in ("value", "u", "status", "difference", "measurement", "u_measurement"):
        assert np.array_equal(getattr(found, name), getattr(expected, name), equal_nan=True)


def test_the_order_of_rows_does_not_matter():
    columns, groups = batch()
    order = np.random.default_rng(1).permutation(len(groups))
    one, two = values(columns, groups), values({k: v[order] for k, v in columns.items()}, groups[order])
    assert np.array_equal(one.value[:, order], two.value, equal_nan=True)


def test_a_gap_voids_only_what_uses_it():
    a = energy.assess(Samples.from_arrays({"crude_protein": [0.1, 0.1], "crude_fat": [np.nan, 0.1], "available_carbohydrate": [0.5, 0.5],
                                           "gross_energy": [15.0, 15.0]}), target="human", law="eu_1169_2011")  # fmt: skip
    found = a.results.set_index(["sample_id", "system"])["status"]
    assert found["1", "gross_energy_measured"] == "ok"
    assert found["1", "eu_1169_2011"] == "missing_input"
    assert found["2", "eu_1169_2011"] == "assumed"


def test_a_component_without_a_factor_is_told():
    # Table 13 has no protein row for sugar
    a = energy.assess(Samples.from_arrays({"crude_protein": [0.1], "crude_fat": [0.0], "carbohydrate_by_difference": [0.8]},
                                          text={"food_group": ["sugar_cane_or_beet"]}), target="human",
                      composition_system="us_ah74_specific")  # fmt: skip
    found = row(a, "us_ah74_specific")
    assert found["status"] == "missing_factor"
    assert np.isnan(found["value"])


def test_an_unusable_cell_gives_no_figure():
    s = energy.read_samples(
        b"sample_id,protein [% as is],fat [% as is],available carbohydrate [% as is]\na,x,1,50\n", name="t.csv"
    )
    found = row(energy.assess(s, target="human", law="eu_1169_2011"), "eu_1169_2011")
    assert found["status"] == "problem"
    assert np.isnan(found["value"])
    assert "could not be used" in found["reason"]


def test_nitrogen_wins_and_each_law_multiplies_by_its_own_factor():
    # milk: protein 3.19 by 6.38 is nitrogen 0.5, hence 3.125 g by 6.25: 17 x 3.125 = 53.125 kJ
    s = Samples.from_arrays(
        {"crude_protein": [0.0319], "nitrogen_factor": [6.38], "crude_fat": [0.0], "available_carbohydrate": [0.0]}
    )
    found = row(energy.assess(s, target="human", law="eu_1169_2011", unit="kJ/100 g"), "eu_1169_2011")
    assert found["value"] == pytest.approx(53.125)


@pytest.mark.parametrize(("basis", "factor"), [("as_is", 1.0), ("dry_matter", 1 / 0.62), ("as_analysed", 0.96 / 0.62)])
def test_the_same_sample_on_any_basis(basis, factor):
    moved = ("crude_protein", "crude_fat", "ash", "total_dietary_fibre", "gross_energy")
    columns = {k: [v * (factor if k in moved else 1)] for k, v in BASE.items()}
    columns["residual_moisture"] = [0.04]
    a = energy.assess(Samples.from_arrays(columns, basis=basis), target="human", law="eu_1169_2011")
    plain = assess(BASE)
    for system in ("gross_energy_measured", "eu_1169_2011", "bomb_atwater_general", "ge_heats_best"):
        assert row(a, system)["value"] == pytest.approx(row(plain, system)["value"], rel=1e-12)


def test_a_batch_that_knows_only_dry_matter_works_on_it():
    columns = {
        k: [v]
        for k, v in {
            "crude_protein": 0.14,
            "crude_fat": 0.03,
            "available_carbohydrate": 0.7,
            "gross_energy": 18.0,
        }.items()
    }
    a = energy.assess(Samples.from_arrays(columns, basis="dry_matter"), target="human", law="eu_1169_2011")
    assert set(a.results["basis"]) == {"dry_matter"}
    assert row(a, "eu_1169_2011")["value"] == pytest.approx(17 * 0.14 + 37 * 0.03 + 17 * 0.7)


def test_the_hand_written_numpy_of_the_benchmark_says_the_same():
    """A second route for every block: slopes written out by hand in tests/benchmarks/bench_assess.py."""
    import importlib.util
    from pathlib import Path

    path = Path(__file__).parent / "benchmarks" / "bench_assess.py"
    spec = importlib.util.spec_from_file_location("bench_assess", path)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    module.agree(module.batch(200))


def test_a_row_without_its_dry_matter_in_a_batch_that_knows_it_is_told_what_to_add():
    rows = [{"sample_id": i, "dry matter [%]": d, "crude protein [g/kg DM]": 100.0, "crude fat [g/kg DM]": 20.0,
             "crude fibre [g/kg DM]": 300.0, "NFE [g/kg DM]": 500.0} for i, d in (("a", 88.0), ("b", None))]  # fmt: skip
    found = energy.assess(energy.read_samples(pd.DataFrame(rows), target="horse")).results.set_index(
        ["sample_id", "system"]
    )
    assert found.loc[("a", "ge_heats_feed"), "status"] == "ok"
    reason = found.loc[("b", "ge_heats_feed"), "reason"]
    assert reason.startswith("needs dry matter: protein is given per dry matter, but needed as is")
