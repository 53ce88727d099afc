"""The same sample written in other units and on another basis gives the same figure by every entry of the catalogue."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import energy
from energy.catalogue.reader import systems
from energy.evaluate import evaluate
from energy.quantities import dictionary

ENTRIES = tuple(systems().values())
#: what one kg/kg, one MJ/kg ... is in each unit, written out; 1 kcal = 4.184 kJ, 1 lb = 0.45359237 kg
WRITINGS = {
    "mass_fraction": {"%": 100, "g/kg": 1000, "g/100 g": 100, "mg/g": 1000},
    "energy": {
        "MJ/kg": 1,
        "kcal/kg": 1000 / 4.184,
        "kJ/g": 1,
        "Mcal/lb": 0.45359237 / 4.184,
        "kcal/100 g": 100 / 4.184,
    },
    "fraction": {"%": 100, "g/kg": 1000, "fraction": 1},
    "number": {"1": 1},
    "density": {"g/ml": 1, "kg/l": 1},
    "mass": {"kg": 1, "g": 1000},
    "heat": {"MJ": 1, "kJ": 1000, "kcal": 1000 / 4.184},
    "gas_yield": {"ml/g": 1, "ml/200 mg": 0.2},
}
LEFT_OUT = {"declared_energy", "residual_moisture", "preparation_yield", "moisture"}
QUANTITIES = {name: q for name, q in dictionary().items() if name not in LEFT_OUT}


def sample(seed):
    """kg/kg, MJ/kg ... of every quantity as is: a plausible whole of which the rest is carbohydrate by difference."""
    rng = np.random.default_rng(seed)
    values = {}
    for name, q in QUANTITIES.items():
        low, high = max(q.range[0], 0.0), q.range[1]
        values[name] = {"mass_fraction": rng.uniform(0.01, 0.05), "energy": rng.uniform(8, 18)}.get(
            q.dimension, low + (high - low) * rng.uniform(0.2, 0.6)
        )
    values |= {"dry_matter": rng.uniform(0.8, 0.92), "crude_protein": rng.uniform(0.08, 0.2), "ash": 0.05,
               "nitrogen_factor": 6.25, "feed_family_correction": 0.4}  # fmt: skip
    del values["nitrogen"], values["nitrogen_free_extract"]  # by rule, so that the rules are tried too
    return values


def written(values, draw):
    row = {"sample_id": "s", "food_group": "wheat_97_100_extraction", "fat_method": "acid_hydrolysis"}
    for name, value in values.items():
        q = QUANTITIES[name]
        unit, size = draw(list(WRITINGS[q.dimension].items()))
        basis, divisor = "", 1.0
        if q.basis == "stated":
            basis, divisor = draw([(" as is", 1.0), (" DM", values["dry_matter"])])
            if q.dimension == "mass":  # of feed: less of it is dry
                divisor = 1 / divisor
        elif q.own_matter:
            basis = " DM"
        row[f"{name} [{unit}{basis}]"] = value / divisor * size
    return energy.read_samples(pd.DataFrame([row]), target="none")


@settings(max_examples=12, deadline=None)
@given(st.integers(0, 10_000), st.randoms(use_true_random=False))
def test_every_entry_gives_the_same_figure(seed, random):
    values = sample(seed)
    plain = evaluate(written(values, lambda options: options[0]), ENTRIES)
    other = evaluate(written(values, random.choice), ENTRIES)
    assert plain.basis == other.basis == "as_is"
    np.testing.assert_allclose(other.value, plain.value, rtol=1e-12)


def test_nearly_every_entry_was_tried():
    """Most entries have a figure for the full sample, so that the property above is no empty promise."""
    found = evaluate(written(sample(1), lambda options: options[0]), ENTRIES)
    assert np.isfinite(found.value[:, 0]).mean() > 0.97


@pytest.mark.parametrize("shown", ["kcal/kg", "MJ/kg DM", "Mcal/lb", "kJ/100 g"])
def test_results_shown_in_another_unit_are_the_same_energy(shown):
    frame = {"sample_id": "s", "dry matter [%]": 88.0, "crude protein [% as is]": 17.0, "crude fat [% as is]": 4.0,
             "starch [% as is]": 40.0, "sugars [% as is]": 4.0}  # fmt: skip
    samples = energy.read_samples(pd.DataFrame([frame]), target="poultry")
    value = energy.assess(samples, unit=shown).results.set_index("system").loc["ec_152_2009_annex_vii", "value"]
    by_law = 0.1551 * 17 + 0.3431 * 4 + 0.1669 * 40 + 0.1301 * 4  # MJ/kg as is
    size = {"kcal/kg": 1000 / 4.184, "MJ/kg DM": 1 / 0.88, "Mcal/lb": 0.45359237 / 4.184, "kJ/100 g": 100}[shown]
    assert value == pytest.approx(by_law * size, rel=1e-12)
