"""Bounds of validity are held against the figure in the unit and on the basis they were printed in."""

import pandas as pd
import pytest

import energy


def status(system, target, **columns):
    table = pd.DataFrame({"sample_id": ["x"], **{name: [value] for name, value in columns.items()}})
    a = energy.assess(table, target=target, systems="all")
    return a.results.set_index("system").loc[system, "status"]


@pytest.mark.parametrize(("moisture", "expected"), [(0, "ok"), (12, "ok")])
def test_a_bound_per_dry_matter_sees_dry_matter(moisture, expected):
    """IPCC 2019: NDF from 35 % DM. 38 % DM is inside also where the feed holds 12 % water (33.4 % as it is)."""
    found = status("ipcc_2019_ym_dairy_high", "dairy_cow", **{
        "moisture [%]": moisture, "ndf [% DM]": 38, "gross energy [MJ/kg DM]": 18.5, "energy digestibility [%]": 72,
    })  # fmt: skip
    assert found == expected


def test_a_bound_is_not_escaped_by_water():
    """Channiwala and Parikh: oxygen to 50 % DM. 52 % DM in a material of 15 % water (44.2 % as it is) is outside."""
    found = status("channiwala_2002", "none", **{
        "moisture [%]": 15, "carbon [% DM]": 40, "hydrogen [% DM]": 5, "oxygen [% DM]": 52, "nitrogen [% DM]": 1,
        "sulfur [% DM]": 0.1, "ash [% DM]": 2, "gross energy [MJ/kg DM]": 15,
    })  # fmt: skip
    assert found == "outside_domain"


@pytest.mark.parametrize(("fat", "expected"), [(2, "ok"), (14, "outside_domain")])
def test_a_bound_on_a_result_in_kilocalories(fat, expected):
    """Carpenter and Clegg: 53 + 38 (12 + 2.25 x 2 + 1.1 x 40 + 3) = 2466 kcal/kg, inside 1300 to 3500.

    With 14 % fat 53 + 38 (12 + 31.5 + 44 + 3) = 3492; 40.5 % starch more gives 3513, outside.
    """
    starch = 40 if fat == 2 else 40.5
    found = status("carpenter_clegg_1956_me", "poultry", **{
        "moisture [%]": 12, "crude protein [% as is]": 12, "crude fat [% as is]": fat, "starch [% as is]": starch,
        "sugars [% as is]": 3, "starch_method": "polarimetric",
    })  # fmt: skip
    assert found == expected


@pytest.mark.parametrize(("fibre", "expected"), [(11, "ok"), (18, "outside_domain")])
def test_a_bound_on_a_result_per_dry_matter_of_a_moist_feed(fibre, expected):
    """The equation's own result per kg of dry matter is held against 10.72 to 13.74, whatever the water."""
    table = pd.DataFrame({"sample_id": ["x"], "dry matter [%]": [88], "crude fibre [% DM]": [fibre]})
    a = energy.assess(table, target="rabbit", systems="all", unit="MJ/kg DM")
    row = a.results.set_index("system").loc["blas_2000_de_rabbit_cf"]
    assert (10.72 <= row["value"] <= 13.74) == (expected == "ok")
    assert row["status"] == expected


def test_the_message_names_unit_and_basis():
    table = pd.DataFrame({"sample_id": ["x"], "dry matter [%]": [88], "crude fibre [% DM]": [25]})
    a = energy.assess(table, target="rabbit", systems="all")
    reason = a.results.set_index("system").loc["blas_2000_de_rabbit_cf", "reason"]
    assert "result from 10.72 to 13.74 MJ/kg DM" in reason


@pytest.mark.parametrize(("form", "expected"), [("", "assumed"), ("grass_silage", "ok")])
def test_nonprotein_nitrogen_of_a_silage_is_not_urea(form, expected):
    """In a silage it is amino acids, peptides and ammonia; in a feed with urea it is taken for it and told."""
    found = status("ge_heats_feed", "cattle", **{
        "form": form, "moisture_method": "toluene", "dry matter [%]": 35, "crude protein [% DM]": 15,
        "crude fat [% DM]": 3.5, "crude fibre [% DM]": 24, "ash [% DM]": 9, "npn [% DM]": 1.2,
        "gross energy [MJ/kg DM]": 18.5,
    })  # fmt: skip
    assert found == expected


def test_alcohol_is_counted_once_where_the_extract_is_given():
    """GfE heats: 3 % alcohol inside 40 % nitrogen-free extract adds 3 % x (29.67 - 17.5) = 0.365 MJ/kg."""
    base = {"dry matter [%]": 100, "crude protein [% DM]": 15, "crude fat [% DM]": 3, "crude fibre [% DM]": 30,
            "ash [% DM]": 12, "nitrogen free extract [% DM]": 40, "gross energy [MJ/kg DM]": 18}  # fmt: skip

    def value(alcohol):
        table = pd.DataFrame({"sample_id": ["x"], **{k: [v] for k, v in base.items()}, "alcohol [% DM]": [alcohol]})
        a = energy.assess(table, target="cattle", unit="MJ/kg DM")
        return a.results.set_index("system").loc["ge_heats_feed", "value"]

    assert value(3) - value(0) == pytest.approx(0.03 * (29.67 - 17.5), abs=1e-9)
