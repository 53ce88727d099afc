"""Silages: one dry matter on both routes."""

import pandas as pd
import pytest

import energy


def silage(form="maize_silage", method="oven", **change):
    row = {"sample_id": "s", "form": form, "moisture_method": method, "dry matter [%]": 30.0,
           "crude protein [g/kg DM]": 80.0, "crude fat [g/kg DM]": 30.0, "crude fibre [g/kg DM]": 200.0,
           "ash [g/kg DM]": 40.0, "gross energy [MJ/kg DM]": 18.6, **change}  # fmt: skip
    row = {header: value for header, value in row.items() if value is not None or header == "moisture_method"}
    return energy.read_samples(pd.DataFrame([row]), target="dairy_cow")


@pytest.mark.parametrize(
    ("form", "expected"), [("maize_silage", 2.22 + 0.960 * 30), ("grass_silage", 2.08 + 0.975 * 30)]
)
def test_dry_matter_by_hand(form, expected):
    """Weissbach and Kuhla 1995 (recalled): 31.02 % and 31.33 %."""
    assert 100 * silage(form).columns["dry_matter"][0] == pytest.approx(expected)


def test_amounts_per_kg_as_is_stay():
    s = silage()
    assert s.columns["crude_protein"][0] * s.columns["dry_matter"][0] == pytest.approx(0.080 * 0.30)


def test_the_volatiles_enter_both_routes_at_one_heat():
    """The measurement part per kg as is is that of the dried material: 18.6 x 0.3 less its computed heat x 0.3."""
    dried = 0.08 * 23.9 + 0.03 * 39.8 + 0.2 * 20.1 + (1 - 0.08 - 0.03 - 0.2 - 0.04) * 17.5
    a = energy.assess(silage(), basis="as_is")
    assert a.verdicts["measurement_part"][0] == pytest.approx(0.3 * (18.6 - dried), rel=1e-9)


def test_gross_energy_as_is_gains_the_volatiles():
    a = energy.assess(silage(), basis="as_is")
    assert a.verdicts["bomb"][0] == pytest.approx(18.6 * 0.30 + 17.5 * (0.3102 - 0.30), rel=1e-9)


def test_it_is_said():
    (problem,) = silage().problems
    assert "30.00 to 31.02 %" in problem.what
    assert "Weissbach and Kuhla 1995" in problem.what


def test_without_a_method_nothing_is_guessed():
    s = silage(method=None)
    assert s.columns["dry_matter"][0] == pytest.approx(0.30)
    assert "moisture_method" in s.problems[0].cure


@pytest.mark.parametrize("method", ["toluene", "karl_fischer"])
def test_methods_that_keep_the_volatiles_need_no_correction(method):
    s = silage(method=method)
    assert s.columns["dry_matter"][0] == pytest.approx(0.30)
    assert s.problems == []


def test_another_form_is_left_alone():
    assert silage("hay").columns["dry_matter"][0] == pytest.approx(0.30)


#: dry matter 30 % by oven is 2.22 + 0.960 x 30 = 31.02 %: of 1 kg of it, 0.3/0.3102 kg stayed in the oven
F = 0.30 / 0.3102


def test_a_powder_as_analysed_lost_its_volatiles_as_well():
    """Powder with 5 % water: 18 MJ/kg hold 0.95 kg of oven dry matter; 18 F + 17.5 (1 - F) 0.95, by hand."""
    s = silage(**{"crude protein [g/kg DM]": None, "crude protein [g/kg as analysed]": 76.0, "residual moisture [%]": 5.0,
                  "gross energy [MJ/kg DM]": None, "gross energy [MJ/kg as analysed]": 18.0})  # fmt: skip
    assert s.columns["crude_protein"][0] == pytest.approx(0.076 * F)
    assert s.columns["gross_energy"][0] == pytest.approx(18.0 * F + 17.5 * (1 - F) * 0.95)


def test_a_value_per_kg_of_organic_matter():
    """40 g of ash per kg of oven dry matter leave 1 - 0.04 F of the corrected one; the 80 g of protein stay 80 g."""
    protein = 0.080 / 0.96  # per kg of organic matter of the oven dry matter
    s = silage(**{"crude protein [g/kg DM]": None, "crude protein [g/kg OM]": 1000 * protein})
    assert s.columns["crude_protein"][0] == pytest.approx(0.080 * F / (1 - 0.04 * F))


def test_bases_tell_one_energy():
    """18.6 MJ per kg of oven dry matter are 18.6 x 0.95 of a powder with 5 % water and 18.6/0.96 of organic matter."""
    want = 18.6 * 0.30 + 17.5 * (0.3102 - 0.30)
    for header, value in (("as is", 5.58), ("DM", 18.6), ("as analysed", 17.67), ("OM", 18.6 / 0.96)):
        s = silage(
            **{"gross energy [MJ/kg DM]": None, "residual moisture [%]": 5.0, f"gross energy [MJ/kg {header}]": value}
        )
        a = energy.assess(s, basis="as_is")
        assert a.verdicts["bomb"][0] == pytest.approx(want, rel=1e-9), header


@pytest.mark.parametrize(
    "how", [{"moisture [%]": 70.0}, {"preparation yield [%]": 31.578947368421, "residual moisture [%]": 5.0}]
)
def test_dry_matter_told_in_another_way_is_corrected_too(how):
    """0.31578947 x 0.95 = 0.3."""
    s = silage(**{"dry matter [%]": None, **how})
    a = energy.assess(s, basis="as_is")
    assert a.verdicts["bomb"][0] == pytest.approx(18.6 * 0.30 + 17.5 * (0.3102 - 0.30), rel=1e-9)


def test_without_any_dry_matter_it_is_said():
    (problem,) = silage(**{"dry matter [%]": None}).problems
    assert "not given" in problem.what
    assert "cannot be corrected" in problem.what


def test_energies_of_a_trial_close_on_the_corrected_dry_matter():
    """18.6 - 6.0 = 12.6 digestible, less 0.6 in urine and 1.2 in methane: the losses keep their amounts per kg as is."""
    s = silage(**{"faecal energy [MJ/kg DM]": 6.0, "DE [MJ/kg DM]": 12.6, "urinary energy [MJ/kg DM]": 0.6,
                  "methane energy [MJ/kg DM]": 1.2, "ME [MJ/kg DM]": 10.8})  # fmt: skip
    c = {name: values[0] for name, values in s.columns.items()}
    assert c["methane_energy"] == pytest.approx(1.2 * F)
    assert c["gross_energy"] - c["faecal_energy"] == pytest.approx(c["digestible_energy"])
    assert c["digestible_energy"] - c["urinary_energy"] - c["methane_energy"] == pytest.approx(
        c["metabolizable_energy"]
    )


def test_gas_is_per_corrected_dry_matter():
    s = silage(**{"gas production [ml/200 mg DM]": 50.0})
    assert s.columns["gas_production"][0] == pytest.approx(50.0 * 5 * F)


def test_what_was_found_in_faeces_is_left_alone():
    s = silage(**{"marker in faeces [g/kg DM]": 5.0, "gross energy of faeces [MJ/kg DM]": 17.0})
    assert s.columns["marker_in_faeces"][0] == pytest.approx(0.005)
    assert s.columns["gross_energy_of_faeces"][0] == pytest.approx(17.0)


def test_the_volatiles_are_nitrogen_free_extract_where_it_is_given():
    s = silage(**{"nitrogen-free extract [g/kg DM]": 650.0})
    assert s.columns["nitrogen_free_extract"][0] == pytest.approx(0.650 * F + (1 - F))


def test_a_stated_uncertainty_keeps_its_share():
    s = silage(**{"u(gross energy) [MJ/kg DM]": 0.06})
    assert s.u["gross_energy"][0] == pytest.approx(0.06 * F)


def test_another_method_is_named():
    (problem,) = silage(method="freeze_drying", **{"residual moisture [%]": 4.0}).problems
    assert "freeze drying" in problem.what
    assert "no method is stated" not in problem.what
