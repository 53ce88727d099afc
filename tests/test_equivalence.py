"""Two one-sided tests: the published test values of three designs."""

import numpy as np
import pytest

from energy.equivalence import of_mean, of_pairs, of_two_groups
from energy.problems import WrongUse

A = [452, 874, 554, 447, 356, 754, 558, 574, 664, 682, 547, 435, 245]
B = [546, 547, 774, 465, 459, 665, 467, 365, 589, 534, 456, 651, 654, 665, 546, 537]


@pytest.mark.parametrize(("equal", "se", "freedom", "p", "interval"), [
    (True, 51.11428, 27, (0.02821, 0.01436), (-112.99323, 96.76246)),
    (False, 53.61855, 19.169, (0.03628, 0.02002), (-120.27336, 104.04259)),
])  # fmt: skip
def test_two_samples(equal, se, freedom, p, interval):
    found = of_two_groups(A, B, -110, 110, alpha=0.025, equal_variances=equal)
    assert found.difference == pytest.approx(-8.11538, abs=5e-6)
    assert (found.standard_error, found.freedom) == pytest.approx((se, freedom), abs=5e-4)
    assert (found.p_lower, found.p_upper) == pytest.approx(p, abs=6e-6)
    assert found.interval == pytest.approx(interval, abs=6e-6)
    assert not found.equivalent  # the 95 % interval leaves the margin


def test_at_five_per_cent_it_is_equivalent():
    found = of_two_groups(A, B, -110, 110, equal_variances=True)
    assert found.equivalent
    assert found.p == pytest.approx(0.02821, abs=6e-6)  # the larger of the two
    assert "are equivalent" in found.sentence


def test_one_sample():
    found = of_mean(0.52 - 0.5, 0.5, 300, -0.1, 0.1)
    assert (found.p_lower, found.p_upper) == pytest.approx((2.108e-5, 0.0029668), rel=3e-4)
    assert found.interval == pytest.approx((-0.02763, 0.06763), abs=6e-6)


def test_paired_from_summary():
    # SDs 1.17 and 1.30, r 0.745: SD of the difference sqrt(1.17^2 + 1.30^2 - 2 x 0.745 x 1.17 x 1.30)
    sd = np.sqrt(1.17**2 + 1.30**2 - 2 * 0.745 * 1.17 * 1.30)
    found = of_mean(5.83 - 5.75, sd, 65, -0.34, 0.34)
    assert (found.p_lower, found.p_upper) == pytest.approx((0.0001606, 0.0108135), rel=5e-4)
    assert found.interval == pytest.approx((-0.10430, 0.26430), abs=6e-6)


def test_pairs_are_one_sample_of_differences():
    x, y = np.array([1.0, 2.0, 4.0, np.nan]), np.array([1.5, 2.1, 4.6, 9.0])
    found = of_pairs(x, y, -1, 1)  # differences 0.5, 0.1, 0.6: mean 0.4, variance 0.07
    assert (found.difference, found.standard_error, found.freedom) == pytest.approx((0.4, np.sqrt(0.07 / 3), 2))


@pytest.mark.parametrize("wrong", [(0.0, 1.0, 1, -1, 1), (0.0, 1.0, 9, 1, -1), (0.0, 0.0, 9, -1, 1)])
def test_impossible_questions(wrong):
    with pytest.raises(WrongUse):
        of_mean(*wrong)
