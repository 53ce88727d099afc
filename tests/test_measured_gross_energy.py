"""Measured gross energy of published feeds against the equations of the catalogue: how far they lie apart."""

import csv
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import energy
from energy.catalogue.reader import systems
from energy.evaluate import STATUS, evaluate
from energy.samples import Samples

HERE = Path(__file__).parent / "data"
SYSTEMS = systems()


def rows(name):
    return list(csv.DictReader((HERE / name).read_text(encoding="utf-8").splitlines()))


FEEDS = rows("measured_gross_energy.csv")
MISPRINTED = {"zhao2017_sheepdiet_PV"}
UNCERTAIN = {r["id"] for r in FEEDS if r["basis"].startswith("basis not certain")}


def number(row, name):
    return float(row[name]) if row[name].strip() else np.nan


def per_dry(row, name):
    """kg/kg of dry matter."""
    dry = 1000.0 if row["basis"] == "DM" else number(row, "dry_matter_g_per_kg")
    return number(row, f"{name}_g_per_kg") / dry


def table(fields, need):
    """Sound rows that have what an equation needs, as arrays per kg of dry matter, and their measured GE."""
    sound = [r for r in FEEDS if r["id"] not in MISPRINTED | UNCERTAIN]
    use = [r for r in sound if all(np.isfinite(per_dry(r, n)) for n in need)]
    dry = np.array([1.0 if r["basis"] == "DM" else number(r, "dry_matter_g_per_kg") / 1000 for r in use])
    columns = {f: np.array([per_dry(r, f) for r in use]) for f in fields}
    return columns, np.array([number(r, "ge_mj_per_kg") for r in use]) / dry


#: id -> (needs, formula by hand on g per kg or % of dry matter -> MJ/kg DM, median %, 95th percentile %, its own error)
EQUATIONS = {
    "gfe_1995_ge": (("crude_protein", "crude_fat", "crude_fibre", "ash"),
                    lambda p, f, c, a: 23.9 * p + 39.8 * f + 20.1 * c + 17.5 * (1 - p - f - c - a), "none printed"),
    "schiemann_1971_ge_kcal": (("crude_protein", "crude_fat", "crude_fibre", "ash"),
                               lambda p, f, c, a: 4.184 * (5.72 * p + 9.50 * f + 4.79 * c + 4.17 * (1 - p - f - c - a)),
                               "none printed"),
    "maff_1984_ge": (("crude_protein", "crude_fat", "crude_fibre", "ash"),
                     lambda p, f, c, a: 22.6 * p + 40.7 * f + 19.2 * c + 17.7 * (1 - p - f - c - a), "none printed"),
    "sauvant_2004_ge": (("crude_protein", "crude_fat", "crude_fibre", "ash"),
                        lambda p, f, c, a: 17.3 + 6.17 * p + 21.93 * f + 3.87 * c - 18.67 * a,
                        "135 kcal/kg DM too low on 2,279 samples without the family correction (Song et al. 2025)"),
    "ewan_1989_ge": (("crude_protein", "crude_fat", "ash"),
                     lambda p, f, a: 4.184e-3 * (4143 + 5600 * f + 1500 * p - 4400 * a),
                     "218 kcal/kg DM too low on 2,279 samples (Song et al. 2025)"),
    "song_2025_ge_cp_ee": (("crude_protein", "crude_fat"), lambda p, f: 4.184e-3 * (4299 + 700 * p + 5300 * f),
                           "R squared 0.342"),
    "song_2025_ge_cp_ee_ash": (("crude_protein", "crude_fat", "ash"),
                               lambda p, f, a: 4.184e-3 * (4341 + 1100 * p + 5400 * f - 2400 * a), "R squared 0.372"),
    # sugars are printed in none of these rows; the term for them counts above 80 g per kg only
    "cvb_vanes_1978_ge": (("crude_protein", "crude_fat", "crude_fibre", "ash"),
                          lambda p, f, c, a: 24.14 * p + 36.57 * f + 20.92 * c + 16.99 * (1 - p - f - c - a),
                          "none printed"),
    # printed for complete fish feeds; here on every feed that has its inputs
    "nrc_2011_ge_fish": (("crude_protein", "crude_fat", "ash"),
                         lambda p, f, a: 23.6 * p + 39.5 * f + 17.2 * (1 - p - f - a), "none printed"),
    "ge_heats_feed": (("crude_protein", "crude_fat", "crude_fibre", "ash"),
                      lambda p, f, c, a: 23.9 * p + 39.8 * f + 17.5 * (1 - p - f - a) + (20.1 - 17.5) * np.nan_to_num(c),
                      "root mean square 1.02 % on the 34 rows of this file with crude fibre, from which its u was set"),
}  # fmt: skip
#: what a row may lack: crude fibre then stays inside the nitrogen-free extract
MAY_LACK = {"ge_heats_feed": {"crude_fibre"}}
#: median and 95th percentile of |measured - computed| in % of the computed, by the formulas above on the file's rows
SPREAD = {
    "gfe_1995_ge": (14, 1.02, 2.23), "schiemann_1971_ge_kcal": (14, 1.00, 2.42), "maff_1984_ge": (14, 1.33, 3.37),
    "sauvant_2004_ge": (14, 1.25, 2.88), "ewan_1989_ge": (37, 2.59, 5.96), "song_2025_ge_cp_ee": (57, 2.26, 7.35),
    "song_2025_ge_cp_ee_ash": (37, 3.30, 6.93), "cvb_vanes_1978_ge": (14, 1.18, 3.76),
    "nrc_2011_ge_fish": (37, 2.88, 6.16), "ge_heats_feed": (37, 1.49, 4.84),
}  # fmt: skip


def by_hand(identity):
    need, formula, _ = EQUATIONS[identity]
    columns, measured = table(need, set(need) - MAY_LACK.get(identity, set()))
    computed = formula(*(columns[n] for n in need))
    return columns, measured, computed


@pytest.mark.parametrize("identity", EQUATIONS)
def test_the_catalogue_gives_what_the_formula_by_hand_gives(identity):
    columns, _, computed = by_hand(identity)
    found = evaluate(Samples.from_arrays(columns, basis="dry_matter"), [SYSTEMS[identity]])
    np.testing.assert_allclose(found.value[0], computed, rtol=1e-9)


@pytest.mark.parametrize("identity", EQUATIONS)
def test_how_far_measured_and_computed_lie_apart(identity):
    """Reported with `pytest -s`: equation, rows, median and 95th percentile, and the equation's own published error."""
    columns, measured, _ = by_hand(identity)
    computed = evaluate(Samples.from_arrays(columns, basis="dry_matter"), [SYSTEMS[identity]]).value[0]
    gap = np.abs(measured - computed) / computed * 100
    found = (len(gap), np.median(gap), np.percentile(gap, 95))
    sys.stdout.write(
        f"{identity:<24} n {found[0]:>3}  median {found[1]:.2f} %  P95 {found[2]:.2f} %  own error: {EQUATIONS[identity][2]}\n"
    )
    assert found[0] == SPREAD[identity][0]
    assert found[1:] == pytest.approx(SPREAD[identity][1:], abs=0.006)


def test_fish_diets_by_the_factors_of_nrc_2011():
    """Animals 2020, 10, 229: four trout diets by 23.6, 39.5, 17.2 kJ/g lie up to 4 % above the measured energy."""
    fish = [r for r in FEEDS if r["id"].startswith("ani2020")]
    for r in fish:
        p, f, a, dry = (number(r, f"{n}_g_per_kg") / 1000 for n in ("crude_protein", "crude_fat", "ash", "dry_matter"))
        computed = 23.6 * p + 39.5 * f + 17.2 * (dry - p - f - a)
        samples = Samples.from_arrays({"crude_protein": [p], "crude_fat": [f], "ash": [a], "dry_matter": [dry]})
        found = evaluate(samples, [SYSTEMS["nrc_2011_ge_fish"]]).value[0, 0]
        assert found == pytest.approx(computed, rel=1e-9)
        assert -4.0 < 100 * (number(r, "ge_mj_per_kg") - found) / found < 0


# ---- tables whose basis or print is wrong: the tool must notice -------------------------------------------------


def assess(row, basis, target, energy_basis=None, u=0.06):
    """A row as a user would hand it in, all on one basis unless the energy has its own."""
    energy_basis = energy_basis or basis
    names = {"crude_protein": "crude protein", "crude_fat": "crude fat", "crude_fibre": "crude fibre", "ash": "ash"}
    given = {f"{words} [g/kg {basis}]": number(row, f"{n}_g_per_kg") for n, words in names.items()
             if np.isfinite(number(row, f"{n}_g_per_kg"))}  # fmt: skip
    given |= {"sample_id": row["id"], f"gross energy [MJ/kg {energy_basis}]": number(row, "ge_mj_per_kg")}
    given |= {"dry matter [g/kg]": number(row, "dry_matter_g_per_kg")}
    given |= {} if u is None else {f"u(gross energy) [MJ/kg {energy_basis}]": u}
    return energy.assess(energy.read_samples(pd.DataFrame([given]), target=target)).verdicts.iloc[0]


@pytest.mark.parametrize("row", [r for r in FEEDS if r["id"] in UNCERTAIN], ids=lambda r: r["id"])
def test_an_air_dry_composition_beside_a_dry_matter_energy_is_noticed(row):
    """Wan et al. 2017, diets: organic matter and ash add up to the dry matter, so the composition is air-dry."""
    found = assess(row, "as is", "sheep")
    assert found["verdict"] == "discordant"
    assert "fits dry matter, not the material as it is" in found["probable_cause"]


@pytest.mark.parametrize("row", [r for r in FEEDS if r["id"] in UNCERTAIN], ids=lambda r: r["id"])
def test_the_right_basis_closes_the_gap(row):
    """The same diets with the energy per kg of dry matter: inside the limit, where the printed table lies beyond it."""
    wrong, right = assess(row, "as is", "sheep"), assess(row, "as is", "sheep", energy_basis="DM")
    assert wrong["measurement_part"] > wrong["limit_upper"]
    assert abs(right["measurement_part"]) < right["limit_upper"]
    assert right["verdict"] != "discordant"


AIR_DRY = [r for r in FEEDS if r["id"].startswith("shu2018")]


@pytest.mark.parametrize("row", AIR_DRY, ids=lambda r: r["id"])
def test_a_table_headed_dry_matter_that_is_air_dry_is_noticed(row):
    """Shu et al. 2018: taken as dry matter the bomb lies 7 to 11 % low; taken as fed it closes within 1.5 %."""
    wrong, right = assess(row, "DM", "poultry"), assess(row, "as is", "poultry")
    assert wrong["verdict"] == "discordant"
    assert wrong["probable_cause"] != ""
    assert abs(right["measurement_part"] / right["composition"]) < 0.016
    assert right["verdict"] != "discordant"


def test_wrong_bases_are_noticed_with_the_uncertainty_between_laboratories():
    """No u given: 1.29 % of GE (Bourdillon et al. 1990). All six diets are told; of the gluten feeds one stays open."""
    diets = [assess(r, "as is", "sheep", u=None)["verdict"] for r in FEEDS if r["id"] in UNCERTAIN]
    feeds = {r["id"]: assess(r, "DM", "poultry", u=None)["verdict"] for r in AIR_DRY}
    assert set(diets) == {"discordant"}
    assert {i for i, verdict in feeds.items() if verdict != "discordant"} == {"shu2018_cgf_10"}


SHEEP_DIETS = [r for r in FEEDS if r["id"].startswith("zhao2017")]


def test_a_misprint_inside_the_limit_is_not_noticed():
    """Zhao et al. 2017, diet PV: 17.27 printed, faeces and digestible energy add up to 17.66 MJ/kg DM.

    The misprint is 2.2 %, the limit 3 %; and without crude fibre the heats are low, which hides it. Known limit.
    """
    (row,) = [r for r in SHEEP_DIETS if r["id"] in MISPRINTED]
    as_printed, mended = assess(row, "DM", "sheep"), assess({**row, "ge_mj_per_kg": "17.66"}, "DM", "sheep")
    assert as_printed["verdict"] == "inconclusive"
    assert mended["difference"] - as_printed["difference"] == pytest.approx((17.66 - 17.27) * 0.9225, abs=1e-6)
    assert mended["difference"] < mended["limit_upper"]


def test_the_misprinted_diet_is_the_lowest_of_its_table():
    """The ten other diets lie 0.6 to 4.5 % above the heats without crude fibre, 23.9, 39.8 and 17.5 kJ/g; it does not."""
    found = {r["id"]: assess(r, "DM", "sheep") for r in SHEEP_DIETS}
    percent = {i: 100 * v["measurement_part"] / v["composition"] for i, v in found.items()}
    misprinted = percent.pop("zhao2017_sheepdiet_PV")
    assert abs(misprinted) < 0.1
    assert all(0.5 < p < 4.5 for p in percent.values())


# ---- elements ---------------------------------------------------------------------------------------------------

BIOMASS = rows("heat_of_combustion_elements.csv")


def elements(*ids):
    """Heats by element equations in MJ/kg, their status, and the measured heats of the 536 samples."""
    names = ("carbon", "hydrogen", "oxygen", "nitrogen", "sulfur")
    columns = {n: np.array([float(r[f"{n}_percent"]) / 100 for r in BIOMASS]) for n in names}
    columns["ash"] = np.array([float(r["rest_by_difference_percent"]) / 100 for r in BIOMASS])
    found = evaluate(Samples.from_arrays(columns, basis="dry_matter"), [SYSTEMS[i] for i in ids])
    return found.value, found.status, np.array([float(r["heat_mj_per_kg"]) for r in BIOMASS])


def test_the_elemental_set_is_whole():
    assert len(BIOMASS) == 536


@pytest.mark.parametrize(
    ("identity", "median", "bias"),
    [("channiwala_2002", 2.7, 0.02), ("boie_perry_2018", 3.1, -0.23), ("boie_classical", 3.1, -0.02),
     ("dulong_perry_2018", None, -1.90)],
)  # fmt: skip
def test_heat_by_elements_on_measured_biomass(identity, median, bias):
    """Median deviation about 2.7 % for Channiwala and Parikh, who state 1.45 % on their own points."""
    value, _, measured = elements(identity)
    gap = value[0] - measured
    assert gap.mean() == pytest.approx(bias, abs=0.02)
    if median is not None:
        assert np.median(np.abs(gap) / measured) * 100 == pytest.approx(median, abs=0.1)


def test_by_plain_arithmetic():
    """Channiwala and Parikh on row 4, alfalfa: 0.3491x45.1 + 1.1783x4.97 + 0.1005x0.16 - 0.1034x35.6 - 0.0151x3.3 - 0.0211x10.87."""
    expected = 0.3491 * 45.1 + 1.1783 * 4.97 + 0.1005 * 0.16 - 0.1034 * 35.6 - 0.0151 * 3.3 - 0.0211 * 10.87
    assert elements("channiwala_2002")[0][0, 3] == pytest.approx(expected, abs=1e-9)


#: row: (sample, why it is probably a keying error): more than 20 % off by an equation that is 2.7 % off in the median
KEYING_ERRORS = {
    28: "hydrogen 11.55 %, twice that of any wood", 58: "hydrogen 0.03 %", 99: "oxygen and heat do not belong together",
    146: "carbon 19.12 % in a plant", 221: "carbon 14.61 %, oxygen 81.8 % in oak: exchanged they still give 29.0 and not 17.2 MJ/kg",
    233: "carbon 97.18 %, no oxygen in wood: more carbon than charcoal at the heat of wood",
    329: "hydrogen 0.27 %, oxygen 73.8 % as the rest to 100: more oxygen than cellulose (49 %) or sugars (53 %) hold", 395: "oxygen 70.05 %", 477: "hydrogen 0.68 %",
    493: "oxygen 28.3 % with carbon 36.5 % leaves a third unexplained",
}  # fmt: skip


def test_probable_keying_errors_are_listed():
    value, _, measured = elements("channiwala_2002")
    far = np.abs(value[0] - measured) / measured > 0.2
    assert {int(BIOMASS[i]["row"]) for i in np.flatnonzero(far)} == set(KEYING_ERRORS)


def test_dulong_is_marked_outside_its_domain_on_foods_and_feeds():
    """Its oxygen ends at 10 %; biomass holds 30 to 50 %."""
    _, status, _ = elements("dulong_perry_2018")
    assert (status[0] == STATUS.index("outside_domain")).mean() > 0.9


def test_heat_per_oxygen_is_a_net_heat():
    """13.1 kJ/g lies 1.65 MJ/kg below gross heats on the set: it is not to be compared with a bomb."""
    value, _, measured = elements("thornton_huggett")
    assert (value[0] - measured).mean() == pytest.approx(-1.65, abs=0.05)
    assert SYSTEMS["thornton_huggett"].stage == "other"
    assert "net heat" in SYSTEMS["thornton_huggett"].title.lower()
