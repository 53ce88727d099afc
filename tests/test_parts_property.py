"""A difference is its three parts, and a part is its lines, for any composition: to 1e-12 of the larger energy."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import energy
from energy.catalogue.tables import food_groups
from energy.reasons import main_pair

PARTS = ("measurement", "heats", "convention")
AMOUNTS = st.lists(st.floats(0.0, 1.0), min_size=7, max_size=7)


def shares(raw):
    """Seven numbers to moisture, protein, fat, ash, carbohydrate, fibre and sugars that sum to one, sugars inside."""
    weights = np.array(raw[:6]) + 0.01
    found = weights / weights.sum()
    return [*found.tolist(), float(found[4]) * raw[6]]


def closes(a, sample="s"):
    for stage, group in a.verdicts.groupby("stage"):
        row = group.iloc[0]
        if not np.isfinite(row["difference"]):
            continue
        room = 1e-12 * max(abs(row["bomb"]), abs(row["composition"]))
        total = sum(row[f"{part}_part"] for part in PARTS)
        assert abs(total - row["difference"]) <= room, stage
    lines = a.explain(sample)
    told = a.blocks.pairs[main_pair(a, 0)]
    row = a.verdicts.set_index(["bomb_system", "composition_system"]).loc[[(told.bomb, told.composition)]].iloc[0]
    if not np.isfinite(row["difference"]):
        return
    room = 1e-12 * max(abs(row["bomb"]), abs(row["composition"])) * max(len(lines), 1)
    for part, total in lines.groupby("part")["contribution"].sum().items():
        assert abs(total - row[f"{part}_part"]) <= room, part


@given(AMOUNTS, st.floats(1.0, 38.0), st.sampled_from(["", *food_groups()]), st.booleans(),
       st.sampled_from(["eu_1169_2011", "us_21cfr_101_9_c", "us_ah74_specific", None]))  # fmt: skip
@settings(max_examples=20, deadline=None)
def test_parts_of_a_food(raw, bomb, group, determined, law):
    water, protein, fat, ash, carbohydrate, fibre, sugars = shares(raw)
    row = {"sample_id": "s", "moisture [%]": 100 * water, "protein [g/100 g as is]": 100 * protein, "fat [g/100 g as is]": 100 * fat,
           "ash [g/100 g as is]": 100 * ash, "total dietary fibre [g/100 g as is]": 100 * fibre, "sugars [g/100 g as is]": 100 * sugars,
           "gross energy [MJ/kg as is]": bomb, "food_group": group}  # fmt: skip
    if determined:
        row["available carbohydrate [g/100 g as is]"] = 100 * carbohydrate
    closes(energy.assess(pd.DataFrame([row]), target="human", law=law))


@given(AMOUNTS, st.floats(1.0, 30.0), st.sampled_from(["dog", "cat", "growing_pig", "sow", "horse", "cattle", "fish"]))
@settings(max_examples=20, deadline=None)
def test_parts_of_a_feed(raw, bomb, target):
    water, protein, fat, ash, _, fibre, _ = shares(raw)
    row = {"sample_id": "s", "moisture [%]": 100 * water, "crude protein [% as fed]": 100 * protein,
           "crude fat [% as fed]": 100 * fat, "ash [% as fed]": 100 * ash, "crude fibre [% as fed]": 100 * fibre,
           "gross energy [MJ/kg as fed]": bomb}  # fmt: skip
    closes(energy.assess(pd.DataFrame([row]), target=target))


def test_a_part_that_is_off_is_noticed():
    row = {"sample_id": "s", "moisture [%]": 10.0, "protein [g/100 g as is]": 12.0, "fat [g/100 g as is]": 5.0, "ash [g/100 g as is]": 2.0,
           "gross energy [MJ/kg as is]": 17.0}  # fmt: skip
    a = energy.assess(pd.DataFrame([row]), target="human")
    a.blocks.heats[:] += 1e-9
    with pytest.raises(AssertionError):
        closes(a)
