"""Verdict words and limits, by hand."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from energy.compare import VERDICTS, read_limit, verdict_codes
from energy.problems import WrongUse


def word(measurement, u, limit=5.0, coverage=2.0):
    m = np.array([measurement])
    return VERDICTS[verdict_codes(m, np.array([u]), np.array([-limit]), np.array([limit]), coverage)[0]]


@pytest.mark.parametrize(
    ("measurement", "u", "expected"),
    [
        (0.5, 1.0, "concordant"),  # -1.5 to 2.5
        (3.0, 1.0, "biased"),  # 1 to 5
        (-3.0, 1.0, "biased"),
        (4.0, 1.0, "inconclusive"),  # 2 to 6
        (0.0, 3.0, "inconclusive"),  # -6 to 6
        (8.0, 1.0, "discordant"),  # 6 to 10
        (-8.0, 1.0, "discordant"),
        (7.0, 1.0, "inconclusive"),  # 5 to 9 touches the limit
        (1.0, np.nan, "inconclusive"),  # no uncertainty known
        (np.nan, 1.0, "not_computed"),
    ],
)
def test_words_by_hand(measurement, u, expected):
    assert word(measurement, u) == expected


@given(st.floats(-50, 50), st.floats(0.01, 10))
def test_mirror_images_get_the_same_word(measurement, u):
    assert word(measurement, u) == word(-measurement, u)


@given(st.floats(0, 50), st.floats(0.01, 10), st.floats(0.1, 20))
def test_a_larger_difference_is_never_better(measurement, u, more):
    order = ["concordant", "biased", "inconclusive", "discordant"]
    one, two = word(measurement, u), word(measurement + more, u)
    assert order.index(two) >= order.index(one) or {one, two} == {"inconclusive", "biased"}


@pytest.mark.parametrize(("text", "relative", "floor"), [(0.05, 0.05, 0), ("5%", 0.05, 0), ("5 %", 0.05, 0), ("0.03", 0.03, 0),
                                                         ("100 kJ/100 g", 0, 1.0)])  # fmt: skip
def test_limits_are_read(text, relative, floor):
    found = read_limit(text)
    assert (found.relative, found.floor) == pytest.approx((relative, floor))


@pytest.mark.parametrize("text", ["five", "-5%", "0", "5 parrots", 7])
def test_odd_limits_are_refused(text):
    with pytest.raises(WrongUse):
        read_limit(text)
