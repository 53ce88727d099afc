"""Control charts: the published cumulative sums, limits by hand, drift against statsmodels-free least squares."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from energy.bomb.charts import cusum, drift, individuals, reasons

#: Montgomery, Introduction to Statistical Quality Control, Table 9.1 (mean 10, sigma 1, k 0.5, h 5), as public test files
#: carry it, with the sums printed there
SERIES = [9.45, 7.99, 9.29, 11.66, 12.16, 10.18, 8.04, 11.46, 9.20, 10.34, 9.03, 11.47, 10.51, 9.40, 10.08, 9.37, 10.62, 10.31, 8.52,
          10.84, 10.90, 9.33, 12.29, 11.50, 10.60, 11.08, 10.38, 11.62, 11.31, 10.52]  # fmt: skip
UPPER = [0, 0, 0, 1.16, 2.82, 2.50, 0.04, 1.00, 0, 0, 0, 0.97, 0.98, 0, 0, 0, 0.12, 0, 0, 0.34, 0.74, 0, 1.79, 2.79, 2.89, 3.47, 3.35,
         4.47, 5.28, 5.30]  # fmt: skip


def test_published_sums_are_reproduced():
    found = cusum(SERIES, 10.0, 1.0)
    assert found.upper == pytest.approx(UPPER, abs=1e-9)
    assert found.lower[1] == pytest.approx(1.56)


def test_the_first_signal_is_at_observation_29_and_began_after_22():
    found = cusum(SERIES, 10.0, 1.0)
    assert int(np.flatnonzero(found.signal)[0]) + 1 == 29
    assert found.since_upper[28] + 1 == 22


def test_a_missing_value_leaves_the_sums_where_they_are():
    """By hand: 2 above the centre less 0.5, three times, the gap passed over."""
    assert cusum([12, 12, np.nan, 12], 10.0, 1.0).upper == pytest.approx([1.5, 3.0, 3.0, 4.5])


@given(st.lists(st.floats(-5, 5), min_size=1, max_size=40))
def test_sums_without_a_loop_are_those_of_the_recursion(values):
    found, high, low = cusum(values, 0.0, 1.0), 0.0, 0.0
    for i, x in enumerate(values):
        high, low = max(0.0, high + x - 0.5), max(0.0, low - x - 0.5)
        assert found.upper[i] == pytest.approx(high, abs=1e-9)
        assert found.lower[i] == pytest.approx(low, abs=1e-9)


def test_limits_from_the_mean_moving_range_by_hand():
    """10, 12, 11, 15: ranges 2, 1, 4, mean 7/3; over 2/sqrt(pi) = 1.12838."""
    found = individuals([10, 12, 11, 15])
    assert found.centre == 12
    assert found.sigma == pytest.approx(7 / 3 / 1.1283791671)
    assert found.limits()[1] == pytest.approx(12 + 3 * 7 / 3 / 1.1283791671)


def test_a_point_beyond_its_limits_is_told_with_its_side():
    chart = individuals([0.0, 2.5, -3.5], centre=0.0, sigma=1.0)
    told = reasons(chart, cusum([0.0, 2.5, -3.5], 0.0, 1.0))
    assert told[0] == ""
    assert told[1].startswith("warning: 2.5 standard deviations above")
    assert told[2].startswith("action: 3.5 standard deviations below")


def test_a_shift_says_when_it_began():
    told = reasons(individuals(SERIES, 10.0, 1.0), cusum(SERIES, 10.0, 1.0))
    assert "upward shift" in told[28]
    assert "after point 22" in told[28]


def test_drift_per_month_and_its_u_by_least_squares():
    """Slope and its standard error by the textbook sums; a month is 365.25/12 days."""
    t, x = np.array([0.0, 30.0, 61.0, 90.0, 122.0]), np.array([1.0, 1.4, 1.3, 1.9, 2.2])
    dt = t - t.mean()
    slope = (dt * x).sum() / (dt**2).sum()
    left = x - x.mean() - slope * dt
    error = np.sqrt((left**2).sum() / 3 / (dt**2).sum())
    found = drift(t, x)
    assert found.per_month == pytest.approx(slope * 365.25 / 12)
    assert found.u == pytest.approx(error * 365.25 / 12)


def test_two_points_make_no_drift():
    assert drift([0, 1], [1, 2]).words == "too few points for a drift"
