"""Verdict words and limits, by hand."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

import energy
from energy.compare import VERDICTS, coverage_of, read_limit, verdict_codes
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
        (4.0, 1.0, "biased"),  # 2 to 6, but u is a fifth of the limit: the estimate decides
        (4.0, 2.0, "inconclusive"),  # 0 to 8, and u is two fifths of it
        (-4.0, 1.2, "biased"),
        (5.1, 1.0, "inconclusive"),  # the estimate is outside, the interval is not
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
    assert order.index(two) >= order.index(one)


@pytest.mark.parametrize(
    ("text", "low", "high"),
    [
        (0.05, -1.0, 1.0),
        ("5%", -1.0, 1.0),
        ("5 %", -1.0, 1.0),
        ("0.03", -0.6, 0.6),
        ("100 kJ/100 g", -1.0, 1.0),
        ("-5%/+10%", -1.0, 2.0),  # the shape of Regulation (EC) 767/2009, Annex IV
        ("-0.4/+0.8 MJ/kg", -0.4, 0.8),
    ],
)
def test_limits_are_read(text, low, high):
    """Of a reference of 20 MJ/kg."""
    lower, upper = read_limit(text).edges(np.array([20.0]))
    assert (lower[0], upper[0]) == pytest.approx((low, high))


@pytest.mark.parametrize(
    ("m", "expected"), [(-1.4, "inconclusive"), (1.4, "biased"), (-2.0, "discordant"), (2.0, "inconclusive")]
)
def test_a_limit_need_not_be_as_wide_below_as_above(m, expected):
    """-1 to +2 with u 0.25 and two u: -1.4 +/- 0.5 straddles -1; 1.4 lies inside; -2 is out; 2 +/- 0.5 straddles 2."""
    codes = verdict_codes(np.array([m]), np.array([0.26]), np.array([-1.0]), np.array([2.0]), 2.0)
    assert VERDICTS[codes[0]] == expected


def test_few_degrees_of_freedom_widen_the_interval():
    """Student's t for 95 % and 10 degrees of freedom is 2.228 (any table); the normal deviate is 1.960."""
    found = coverage_of(1.959964, np.array([10.0, np.inf]))
    assert found == pytest.approx([2.2281, 1.959964], abs=1e-4)


@pytest.mark.parametrize("text", ["five", "-5%", "0", "5 parrots", 7, "-5/+10", "120%"])
def test_odd_limits_are_refused(text):
    with pytest.raises(WrongUse):
        read_limit(text)


def near_infrared(origin, bomb):
    row = {"sample_id": "s", "moisture [%]": 10.0, "protein [g/100 g as is]": 12.0, "fat [g/100 g as is]": 5.0, "ash [g/100 g as is]": 2.0,
           "u(moisture) [%]": 0.1, "u(protein) [g/100 g as is]": 0.1, "u(fat) [g/100 g as is]": 0.1, "u(ash) [g/100 g as is]": 0.05,
           "gross energy [MJ/kg as is]": bomb, "u(gross energy) [MJ/kg as is]": 0.03, "origin": origin}  # fmt: skip
    return energy.assess(pd.DataFrame([row]), target="human", limit="12%").verdicts.iloc[0]


#: 5.65 x 12 + 9.40 x 5 + 4.15 x 71 kcal per 100 g
COMPUTED = (5.65 * 0.12 + 9.40 * 0.05 + 4.15 * 0.71) * 4.184


@pytest.mark.parametrize("bomb", [COMPUTED, 1.3 * COMPUTED])
def test_a_near_infrared_composition_caps_the_verdict_at_screening(bomb):
    assert near_infrared("nir", bomb)["verdict"] == "screening"
    assert near_infrared("measured", bomb)["verdict"] in ("concordant", "discordant")


def test_zeta_and_en_are_the_part_over_its_u():
    v = near_infrared("measured", 1.05 * COMPUTED)
    assert v["zeta"] == pytest.approx(v["measurement_part"] / v["u_measurement_part"])
    assert v["en"] == pytest.approx(v["zeta"] / 2)
