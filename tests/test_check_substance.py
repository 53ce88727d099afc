"""Pure substances burnt and reduced like samples, against their heats of combustion by zeta."""

import numpy as np
import pandas as pd
import pytest

import energy
from energy.bomb.check_substance import check, named, substances
from energy.bomb.record import record

E = 10_000.0  # J/K, of the runs below


def sheet(name, heat, mass=1.0, ignition=50.0, calibration=26454.0, basis="air"):
    """Runs whose rises are worked out here: (heat x mass + ignition) / E; benzoic acid at 26 454 J/g weighed in air."""
    rows = [{"run_id": f"K{k}", "sample_id": "benzoic acid", "kind": "calibration", "sample_mass [g]": m, "rise [K]": (26454 * m + ignition) / E,
             "certificate_heat [J/g]": calibration, "certificate_basis": basis} for k, m in enumerate((0.98, 0.99, 1.0, 1.01, 1.02))]  # fmt: skip
    rows.append(
        {
            "run_id": "S",
            "sample_id": name,
            "kind": "control",
            "sample_mass [g]": mass,
            "rise [K]": (heat * mass + ignition) / E,
        }
    )
    table = pd.DataFrame(rows).assign(**{"ignition_heat [J]": ignition, "instrument": "b", "date": "2026-03-02"})
    return energy.reduce_runs(table)


@pytest.mark.parametrize(
    ("name", "heat"),
    [
        ("sucrose", 16486.9),
        ("hippuric acid", 23542.7),
        ("acetanilide", 31245.8),
        ("salicylic acid", 21888.8),
        ("stearic acid", 39652.0),
    ],
)
def test_a_run_that_gives_the_literature_heat_is_satisfactory(name, heat):
    """NIST WebBook (sucrose, stearic acid), An et al. 2003 (hippuric acid, acetanilide), Camarillo and Flores 2006."""
    ((_, found),) = record(sheet(name, heat)).checks
    assert found.measured == pytest.approx(heat / 1000, rel=1e-9)
    assert (found.word, found.zeta) == ("satisfactory", pytest.approx(0.0, abs=1e-6))


def test_half_a_per_cent_calls_for_action():
    ((_, found),) = record(sheet("sucrose", 16486.9 * 1.005)).checks
    assert found.word == "action"
    assert "calibration" in found.words


def test_zeta_by_hand():
    """Sucrose 16.4869, u 0.0053; bomb conditions up to 0.0776 %, air up to 0.0757 %, both rectangular; measured u 0.01."""
    other = (16.4869 * (26.434 / 26.4135 - 1)) ** 2 / 3 + (16.4869 * (26.454 / 26.434 - 1)) ** 2 / 3
    room = np.sqrt(0.01**2 + 0.0053**2 + other)
    assert check(substances()["sucrose"], 16.50, 0.01).zeta == pytest.approx((16.50 - 16.4869) / room)


def test_benzoic_acid_is_held_against_its_heat_weighed_in_air():
    """26.454 weighed in air, 26.434 in vacuum (certificates of SRM 39j and of secondary benzoic acids): 0.076 % is a wrong basis."""
    benzoic = substances()["benzoic_acid"]
    assert check(benzoic, 26.454, 0.005).word == "satisfactory"
    assert check(benzoic, 26.434, 0.005).zeta == pytest.approx(-0.020 / np.hypot(0.005, 0.0015))
    assert check(benzoic, 26.434, 0.005).word == "action"


def test_a_run_without_u_is_not_judged():
    found = check(substances()["sucrose"], 16.49, np.nan)
    assert found.word == ""
    assert found.words.endswith("not judged: the run has no u")


def test_the_wrong_basis_is_caught_in_a_sheet_too():
    found = sheet("sucrose", 16486.9, calibration=26434.0, basis="air")
    assert any("vacuum" in reason for reason in found.runs["reason"])


def test_names_are_found_as_people_write_them():
    assert named("Hippuric_Acid").title == "hippuric acid"
    assert named("house feed") is None


@pytest.mark.parametrize("substance", substances().values(), ids=lambda s: s.name)
def test_every_substance_says_where_its_heat_is_from(substance):
    assert substance.source
    assert substance.source_status in ("read", "read_secondary", "memory_high", "derived")
    assert substance.u > 0
