"""The agreement panel's tables and sentences: a batch with a planted drift, wild samples and kinds; figures by hand."""

import numpy as np
import pytest

import energy
from energy.problems import WrongUse
from energy.report.agreement import drift_sentence, group_table, left_out, of_kind, panel, sentences
from energy.samples import Samples


def batch(slope=0.0, n=40, wild=None, seed=1, groups=("butter", "eggs")):
    """Foods whose measured energy is their computed one times 1 + slope x place, with 0.2 % of scatter."""
    generator = np.random.default_rng(seed)
    columns = {
        "moisture": generator.uniform(0.1, 0.4, n), "crude_protein": generator.uniform(0.05, 0.2, n),
        "crude_fat": generator.uniform(0.02, 0.3, n), "ash": np.full(n, 0.02),
    }  # fmt: skip
    words = np.array([groups[i % len(groups)] for i in range(n)], dtype=object)
    plain = Samples.from_arrays(
        {**columns, "gross_energy": np.full(n, 15.0)}, text={"food_group": words}, target="human"
    )
    table = energy.assess(plain, target="human").verdicts
    computed = table[table["stage"] == "GE"].drop_duplicates("sample_id")["composition"].to_numpy()
    measured = computed * (1 + slope * np.arange(n) / (n - 1) + generator.normal(0, 0.002, n))
    for i, factor in (wild or {}).items():
        measured[i] *= factor
    samples = Samples.from_arrays({**columns, "gross_energy": measured}, text={"food_group": words}, target="human")
    return energy.assess(samples, target="human")


def test_points_are_those_of_the_verdicts():
    found = panel(batch(), percent=False)
    p = found.points
    assert p["difference"].to_numpy() == pytest.approx((p["bomb"] - p["composition"]).to_numpy())
    assert p["ratio"].to_numpy() == pytest.approx((100 * p["bomb"] / p["composition"]).to_numpy())
    assert p["order"].tolist() == list(range(1, 41))
    assert set(p["kind"]) == {"Butter", "Eggs"}


def test_a_planted_drift_is_seen_before_a_single_sample_is_wild():
    found = panel(batch(slope=0.02))
    assert found.drift.seen
    assert found.drift.total == pytest.approx(2.0, abs=0.4)
    assert not found.points["wild"].any()
    assert "drifts by +" in drift_sentence(found.drift, 40)
    assert found.drift.line["ratio"].tolist() == pytest.approx([100.0, 102.0], abs=0.4)


def test_no_drift_is_told_as_none():
    found = panel(batch())
    assert not found.drift.seen
    assert "No drift is seen along the 40 samples" in drift_sentence(found.drift, 40)


def test_a_wild_sample_moves_neither_bias_nor_drift_and_is_named():
    found = panel(batch(wild={7: 4.184}))
    assert abs(found.limits.bias) < 0.3
    assert abs(found.drift.total) < 0.5
    row = found.points.iloc[7]
    assert row["wild"]
    assert row["beyond"] == "above"
    assert row["plotted"] < row["difference"]
    assert f"1 of 40 differs wildly from the rest. It is {row['sample']}." in sentences(found)[0]


def test_groups_largest_first_and_small_ones_counted():
    a = batch(n=25, groups=("butter", "eggs", "butter", "butter", "eggs"))
    found = panel(a)
    assert group_table(found)["kind of material"].tolist() == ["all", "Butter", "Eggs"]
    assert left_out(found) == ""
    assert of_kind(a, "GE", "Eggs").n == 10
    with pytest.raises(WrongUse, match="no kind of material"):
        of_kind(a, "GE", "wood")


def test_two_samples_make_no_panel():
    assert panel(batch(n=2)) is None
