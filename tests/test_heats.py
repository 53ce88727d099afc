"""Heats of combustion against enthalpies of formation of the package `chemicals` (CRC handbook, NIST WebBook).

Q = -(c(-393.51) + h/2(-285.83) - Hf) / M, to CO2 gas, water liquid, nitrogen gas, 25 degC, constant pressure.
"""

import tomllib
from pathlib import Path

import chemicals
import pytest

from energy.catalogue import reader

HEATS = {
    h["id"]: h for h in tomllib.loads((Path(reader.FOLDER) / "component_heats.toml").read_text())["component_heat"]
}
# id, CAS, method, phase, C, H, N, O, relative tolerance
SUBSTANCES = [
    ("glucose_alpha_d", "26655-34-5", "CRC", "s", 6, 12, 0, 6, 0.001),
    ("sucrose", "57-50-1", "CRC", "s", 12, 22, 0, 11, 0.001),
    ("xylitol", "87-99-0", "CRC", "s", 5, 12, 0, 5, 0.001),
    ("sorbitol", "50-70-4", "WEBBOOK", "s", 6, 14, 0, 6, 0.001),
    ("glycerol", "56-81-5", "CRC", "l", 3, 8, 0, 3, 0.001),
    ("ethanol", "64-17-5", "CRC", "l", 2, 6, 0, 1, 0.001),
    ("acetic_acid", "64-19-7", "CRC", "l", 2, 4, 0, 2, 0.001),
    ("citric_acid_anhydrous", "77-92-9", "CRC", "s", 6, 8, 0, 7, 0.001),
    ("lactic_acid_l_crystalline", "79-33-4", "WEBBOOK", "s", 3, 6, 0, 3, 0.001),
    ("succinic_acid", "110-15-6", "CRC", "s", 4, 6, 0, 4, 0.001),
    ("palmitic_acid_16_0", "57-10-3", "CRC", "s", 16, 32, 0, 2, 0.02),
    ("stearic_acid_18_0", "57-11-4", "CRC", "s", 18, 36, 0, 2, 0.02),
    ("glycine", "56-40-6", "CRC", "s", 2, 5, 1, 2, 0.02),
    ("leucine_l", "61-90-5", "CRC", "s", 6, 13, 1, 2, 0.02),
    ("urea", "57-13-6", "CRC", "s", 1, 4, 2, 1, 0.001),
    ("uric_acid", "69-93-2", "CRC", "s", 5, 4, 4, 3, 0.001),
]
ATOMS = {"C": 12.011, "H": 1.008, "N": 14.007, "O": 15.999}  # IUPAC abridged standard atomic weights


@pytest.mark.parametrize("row", SUBSTANCES, ids=[r[0] for r in SUBSTANCES])
def test_heat_of_a_pure_substance(row):
    name, cas, method, phase, c, h, n, o, tolerance = row
    formation = (chemicals.reaction.Hfs if phase == "s" else chemicals.reaction.Hfl)(cas, method=method) / 1000
    mass = c * ATOMS["C"] + h * ATOMS["H"] + n * ATOMS["N"] + o * ATOMS["O"]
    heat = -(c * -393.51 + h / 2 * -285.83 - formation) / mass
    assert HEATS[name]["kJ_per_g"] == pytest.approx(heat, rel=tolerance)


@pytest.mark.parametrize("entry", HEATS.values(), ids=list(HEATS))
def test_both_units_of_an_entry_agree(entry):
    assert entry["kJ_per_g"] == pytest.approx(
        4.184 * entry["kcal_per_g"], abs=0.05
    )  # a source that prints both rounds them apart
