"""Silages: one dry matter on both routes."""

import pandas as pd
import pytest

import energy


def silage(form="maize_silage", method="oven", **change):
    row = {"sample_id": "s", "form": form, "moisture_method": method, "dry matter [%]": 30.0,
           "crude protein [g/kg DM]": 80.0, "crude fat [g/kg DM]": 30.0, "crude fibre [g/kg DM]": 200.0,
           "ash [g/kg DM]": 40.0, "gross energy [MJ/kg DM]": 18.6, **change}  # fmt: skip
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
