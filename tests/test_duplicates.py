"""Replicates of a table: repeatability limits by hand from a pooled batch or from print, and what is told."""

import numpy as np
import pytest

import energy
from energy.duplicates import judge, published_limits
from energy.quantities import dictionary
from energy.replicates import MEAN, MEDIAN, TWO_MORE

NAN = np.nan


def read(tmp_path, lines, header="GE [MJ/kg as is],GE #2 [MJ/kg as is]"):
    path = tmp_path / "t.csv"
    path.write_text("sample_id," + header + "\n" + "\n".join(lines) + "\n", encoding="utf-8")
    return energy.read_samples(path)


def told(samples):
    return [p for p in samples.problems if "replicates" in p.what]


def batch(n, half=0.0005, level=18.0):
    """n pairs that lie `half` of their level on both sides of it: relative variance 2 half^2 each."""
    return [f"s{i},{level * (1 - half):.6f},{level * (1 + half):.6f}" for i in range(n)]


def test_a_wide_pair_is_told_by_sample_and_column(tmp_path):
    # 20 pairs of relative difference 0.001, s_r = 0.001 / sqrt 2; the wide pair is an outlier and left out of it;
    # r = 2.8 s_r = 0.198 %, on a mean of 20: 0.0396 MJ/kg
    samples = read(tmp_path, [*batch(20), "odd,19.8,20.2"])
    (problem,) = told(samples)
    assert (problem.sample_id, problem.column, problem.row, problem.severity) == ("odd", "gross_energy", 22, "warning")
    assert "19.8 and 20.2 MJ/kg lie 0.4 apart, more than the 0.0396" in problem.what
    assert "20 degrees of freedom, 1 of its samples left out" in problem.what
    assert "twice more" in problem.cure
    assert samples.columns["gross_energy"][-1] == pytest.approx(20.0)
    # u of the others is theirs: 1.29 % between laboratories, and s_r / sqrt 2 within
    assert samples.u["gross_energy"][0] == pytest.approx(18 * np.hypot(0.0129, 0.001 / 2), rel=1e-4)


def test_cochran_is_named_with_it(tmp_path):
    # C = 0.02^2 / (20 x 0.001^2 + 0.02^2) = 0.952
    (problem,) = told(read(tmp_path, [*batch(20), "odd,19.8,20.2"]))
    assert "Cochran's test calls their scatter an outlier of the batch (C 0.952" in problem.what


def test_even_duplicates_say_nothing(tmp_path):
    assert told(read(tmp_path, batch(20))) == []


def test_where_rounding_hides_the_scatter_the_published_limit_holds(tmp_path):
    # most pairs read alike: the one that differs in the last digit is not too far apart
    assert told(read(tmp_path, [*(f"s{i},18.00,18.00" for i in range(15)), "x,18.00,18.05"])) == []


def test_few_degrees_of_freedom_use_the_published_limit(tmp_path):
    # 0.107 MJ/kg: 2.8 x 0.0381 kJ/g (Sibbald & Morse 1982)
    samples = read(tmp_path, ["a,18.00,18.10", "b,18.00,18.12"])
    (problem,) = told(samples)
    assert problem.sample_id == "b"
    assert "0.107" in problem.what
    assert "Sibbald & Morse 1982" in problem.what


@pytest.mark.parametrize(("name", "level", "limit"), [
    ("crude_protein", 0.15, 0.002), ("crude_protein", 0.30, 0.003), ("crude_protein", 0.50, 0.004),
    ("crude_fat", 0.03, 0.002), ("crude_fat", 0.08, 0.0032), ("crude_fibre", 0.05, 0.006), ("crude_fibre", 0.20, 0.012),
])  # fmt: skip
def test_limits_of_regulation_152_2009(name, level, limit):
    """Annex III C, H and I as recalled: protein 0.2 g below 20, 1 % to 40, then 0.4; fat 0.2, 4 %; fibre 0.6, 6 %."""
    for factor, done in ((0.98, MEAN), (1.02, TWO_MORE)):
        half = factor * limit / 2
        found = judge(dictionary()[name], np.array([[level - half], [level + half]]), None, "%")
        assert found.accepted.done.tolist() == [done]


def test_four_that_stay_apart_give_their_median(tmp_path):
    # s_r = 0.107 / 2.8 = 0.0382, 3.6 s_r = 0.1376
    header = ",".join(f"GE #{k} [MJ/kg as is]" for k in (1, 2, 3, 4))
    samples = read(tmp_path, ["near,18.00,18.13,18.05,18.02", "apart,18.00,18.30,18.05,18.02"], header)
    assert samples.columns["gross_energy"] == pytest.approx([18.05, 18.035])
    assert [p.sample_id for p in told(samples)] == ["apart"]
    assert samples.memo["runs"]["gross_energy"].shape == (4, 2)  # the runs that disagree stay on record
    assert samples.memo["accepted"]["gross_energy"].done.tolist() == [MEAN, MEDIAN]


def test_a_quantity_without_a_limit_is_not_judged(tmp_path):
    assert told(read(tmp_path, ["a,1.0,9.0"], "ash [% as is],ash #2 [% as is]")) == []


def test_values_below_a_limit_are_not_judged():
    found = judge(dictionary()["crude_fat"], np.array([[0.0025, 0.03], [0.03, 0.031]]), np.array([True, False]), "%")
    assert found.findings == []


def test_every_published_limit_covers_all_levels():
    for limits in published_limits().values():
        assert limits[0].low == 0
        assert [a.high for a in limits[:-1]] == [b.low for b in limits[1:]]
        assert limits[-1].high == np.inf
