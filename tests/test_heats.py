"""Heats of combustion against enthalpies of formation of the package `chemicals` (CRC handbook, NIST WebBook).

Q = -(c(-393.51) + h/2(-285.83) - Hf) / M, to CO2 gas, water liquid, nitrogen gas, 25 degC, constant pressure.
"""

import re
import tomllib
from pathlib import Path

import chemicals
import pytest

from energy.catalogue import tables

TEXT = (Path(tables.FOLDER) / "component_heats.toml").read_text(encoding="utf-8")
HEATS = {h["id"]: h for h in tomllib.loads(TEXT)["component_heat"]}
ATOMS = {"C": 12.011, "H": 1.008, "N": 14.007, "O": 15.999}  # IUPAC abridged standard atomic weights

# id, CAS, formula, phase of the enthalpy of formation, handbook
SUBSTANCES = """
glucose_alpha_d                  26655-34-5 C6H12O6   s CRC
fructose_beta_d                  57-48-7    C6H12O6   s WEBBOOK
galactose                        59-23-4    C6H12O6   s CRC
ribose                           50-69-1    C5H10O5   s CRC
xylose                           58-86-6    C5H10O5   s CRC
sucrose                          57-50-1    C12H22O11 s CRC
lactose_anhydrous_beta           5965-66-2  C12H22O11 s CRC
lactose_monohydrate_alpha        5989-81-1  C12H24O12 s CRC
xylitol                          87-99-0    C5H12O5   s CRC
mannitol                         69-65-8    C6H14O6   s WEBBOOK
sorbitol                         50-70-4    C6H14O6   s WEBBOOK
erythritol                       149-32-6   C4H10O4   l WEBBOOK
glycerol                         56-81-5    C3H8O3    l CRC
ethanol                          64-17-5    C2H6O     l CRC
propylene_glycol_1_2_propanediol 57-55-6    C3H8O2    l CRC
acetic_acid                      64-19-7    C2H4O2    l CRC
propionic_acid                   79-09-4    C3H6O2    l CRC
butyric_acid                     107-92-6   C4H8O2    l CRC
citric_acid_anhydrous            77-92-9    C6H8O7    s CRC
lactic_acid_l_crystalline        79-33-4    C3H6O3    s WEBBOOK
malic_acid                       97-67-6    C4H6O5    s WEBBOOK
succinic_acid                    110-15-6   C4H6O4    s CRC
fumaric_acid                     110-17-8   C4H4O4    s CRC
oxalic_acid                      144-62-7   C2H2O4    s CRC
ascorbic_acid                    50-81-7    C6H8O6    s CRC
caproic_acid_6_0                 142-62-1   C6H12O2   l CRC
caprylic_acid_8_0                124-07-2   C8H16O2   l CRC
capric_acid_10_0                 334-48-5   C10H20O2  s CRC
lauric_acid_12_0                 143-07-7   C12H24O2  s CRC
myristic_acid_14_0               544-63-8   C14H28O2  s CRC
palmitic_acid_16_0               57-10-3    C16H32O2  s CRC
stearic_acid_18_0                57-11-4    C18H36O2  s CRC
oleic_acid                       112-80-1   C18H34O2  l WEBBOOK
linoleic_acid                    60-33-3    C18H32O2  l WEBBOOK
glycine                          56-40-6    C2H5NO2   s CRC
valine_l                         72-18-4    C5H11NO2  s CRC
leucine_l                        61-90-5    C6H13NO2  s CRC
isoleucine_l                     73-32-5    C6H13NO2  s CRC
proline_l                        147-85-3   C5H9NO2   s CRC
phenylalanine_l                  63-91-2    C9H11NO2  s CRC
tyrosine_l                       60-18-4    C9H11NO3  s CRC
tryptophan_l                     73-22-3    C11H12N2O2 s CRC
serine_l                         56-45-1    C3H7NO3   s CRC
threonine_l                      72-19-5    C4H9NO3   s CRC
lysine_dl                        70-54-2    C6H14N2O2 s CRC
histidine_l                      71-00-1    C6H9N3O2  s CRC
aspartic_acid_l                  56-84-8    C4H7NO4   s CRC
glutamic_acid_l                  56-86-0    C5H9NO4   s CRC
glutamine_l                      56-85-9    C5H10N2O3 s CRC
urea                             57-13-6    CH4N2O    s CRC
creatinine                       60-27-5    C4H7N3O   s CRC
creatine                         57-00-1    C4H9N3O2  s CRC
uric_acid                        69-93-2    C5H4N4O3  s CRC
benzoic_acid_calibrant           65-85-0    C7H6O2    s CRC
"""
ROWS = [line.split() for line in SUBSTANCES.strip().splitlines()]


def heat_of_combustion(cas, formula, phase, handbook):
    """kJ/g from the enthalpy of formation; alanine is left out, its two handbooks contradict each other."""
    n = {element: int(count or 1) for element, count in re.findall(r"([A-Z])(\d*)", formula)}
    known = (chemicals.reaction.Hfs if phase == "s" else chemicals.reaction.Hfl)(cas, method=handbook) / 1000
    return -(n["C"] * -393.51 + n["H"] / 2 * -285.83 - known) / sum(ATOMS[e] * k for e, k in n.items())


@pytest.mark.parametrize("row", ROWS, ids=[r[0] for r in ROWS])
def test_heat_of_a_pure_substance(row):
    assert HEATS[row[0]]["kJ_per_g"] == pytest.approx(heat_of_combustion(*row[1:]), rel=0.001)


@pytest.mark.parametrize("acid", ["glycine", "valine_l", "leucine_l", "threonine_l", "glutamic_acid_l", "proline_l"])
def test_amino_acids_agree_with_another_handbook(acid):
    cas, formula = next((r[1], r[2]) for r in ROWS if r[0] == acid)
    assert HEATS[acid]["kJ_per_g"] == pytest.approx(heat_of_combustion(cas, formula, "s", "WEBBOOK"), rel=0.02)


@pytest.mark.parametrize("entry", HEATS.values(), ids=list(HEATS))
def test_both_units_of_an_entry_agree(entry):
    """Computed pairs agree to their last digit; a source that prints both rounds them apart."""
    apart = 0.05 if entry["source_status"].startswith("read") else 0.008
    assert entry["kJ_per_g"] == pytest.approx(4.184 * entry["kcal_per_g"], abs=apart)


@pytest.mark.parametrize("entry", HEATS.values(), ids=list(HEATS))
def test_a_heat_has_its_place_in_a_source(entry):
    assert entry["locator"].strip()
    assert entry["source_status"] in ("read", "read_secondary", "derived", "memory_high", "memory_medium")
