"""Conformity as a probability: JCGM 106 to its digits, Monte Carlo, and laws that hold for all figures."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from energy.conformity import OUTCOMES, acceptance_limit, decide, global_risk, lot_uncertainty, probability_within
from energy.problems import WrongUse


@pytest.mark.parametrize(("y", "outside"), [(10, 0.01242), (10.5, 0.10574), (12, 0.99379)])
def test_specific_risk_between_two_limits(y, outside):
    """u = 0.4, limits 9 and 11 (published test values)."""
    assert 1 - probability_within(y, 0.4, 9, 11) == pytest.approx(outside, abs=5e-6)


def test_ball_bearings():
    """JCGM 106:2012, 9.5.4: gamma of shape 4 and mean 1 um, limit 2 um, u 0.25 um."""
    product = stats.gamma(4, scale=0.25)
    found = global_risk(product, 0.25, upper=2.0)
    assert found.outside == pytest.approx(0.04238, abs=5e-6)
    assert found.consumer == pytest.approx(0.00802, abs=5e-6)
    assert found.producer == pytest.approx(0.01744, abs=5e-6)
    limit = acceptance_limit(product, 0.25, 2.0, 0.001)
    assert limit == pytest.approx(1.6718, abs=5e-5)
    assert global_risk(product, 0.25, upper=2.0, accept_upper=limit).producer == pytest.approx(0.0755, abs=5e-5)


@pytest.mark.parametrize(
    ("u", "accept", "false_accept", "false_reject"), [(0.25, 2.0, 0.0080, 0.0149), (0.5, 2 * 0.91, 0.0081, 0.0661)]
)
def test_normal_product_between_two_limits(u, accept, false_accept, false_reject):
    """Product SD 1, limits +/- 2 (Deaver); limits pulled to 0.91 of themselves."""
    found = global_risk(stats.norm(), u, lower=-2, upper=2, accept_lower=-accept, accept_upper=accept)
    assert found.consumer == pytest.approx(false_accept, abs=6e-5)
    assert found.producer == pytest.approx(false_reject, abs=6e-5)


@pytest.mark.parametrize(
    ("share", "false_accept", "among"),
    [(60, 4.83860, 8.26008), (70, 3.92234, 5.72322), (80, 2.85583, 3.63227), (90, 1.59995, 1.79880), (95, 0.87101, 0.92390), (99, 0.19992, 0.20244)],
)  # fmt: skip
def test_four_to_one(share, false_accept, among):
    """Measurement SD a quarter of the product's, by the share of product inside its limits (published table)."""
    limit = stats.norm.ppf(0.5 + share / 200)
    found = global_risk(stats.norm(), 0.25, lower=-limit, upper=limit)
    assert 100 * found.consumer == pytest.approx(false_accept, abs=6e-6)
    assert 100 * found.consumer_among_accepted == pytest.approx(among, abs=6e-6)


@pytest.mark.parametrize(("y", "u", "lower", "upper", "freedom"), [
    (105, 6, -np.inf, 120, np.inf), (118, 4, 80, 120, np.inf), (122, 3, 80, 120, 6), (79, 2, 80, np.inf, 12),
])  # fmt: skip
def test_probability_is_the_share_of_trials(y, u, lower, upper, freedom):
    """200,000 draws of what the item may be; half a point is ten of their standard deviations."""
    rng = np.random.default_rng(20261201)
    draws = y + u * (rng.normal(size=200_000) if np.isinf(freedom) else rng.standard_t(freedom, 200_000))
    share = np.mean((draws >= lower) & (draws <= upper))
    assert probability_within(y, u, lower, upper, freedom) == pytest.approx(share, abs=0.005)


@given(st.floats(50, 2000), st.floats(0.5, 200), st.floats(50, 2000), st.floats(0, 500))
def test_a_larger_declared_energy_never_lowers_the_chance_of_an_upper_limit(y, u, declared, more):
    small, large = (probability_within(y, u, -np.inf, 1.2 * d) for d in (declared, declared + more))
    assert large >= small


@given(st.floats(-5, 5), st.floats(0.1, 3), st.floats(0.1, 5))
def test_both_tails_and_the_middle_are_one(y, u, width):
    parts = (
        probability_within(y, u, -np.inf, -width),
        probability_within(y, u, -width, width),
        probability_within(y, u, width, np.inf),
    )
    assert sum(float(p) for p in parts) == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("rule", "value", "word"),
    [("simple", 119.9, "within"), ("simple", 120.1, "outside"), ("guarded", 119.9, "outside"), ("guarded", 109.9, "within"),
     ("conditional", 109.9, "within"), ("conditional", 119.9, "inconclusive"), ("conditional", 130.1, "outside")],
)  # fmt: skip
def test_decision_rules(rule, value, word):
    """Upper limit 120, U = 10."""
    code = decide(rule, np.array([value]), np.array([10.0]), np.array([-np.inf]), np.array([120.0]))
    assert OUTCOMES[code[0]] == word


def test_a_missing_value_is_not_judged():
    code = decide("simple", np.array([np.nan]), np.array([1.0]), np.array([0.0]), np.array([1.0]))
    assert OUTCOMES[code[0]] == ""


def test_an_unknown_rule_is_refused():
    with pytest.raises(WrongUse):
        decide("lenient", np.array([1.0]), np.array([1.0]), np.array([0.0]), np.array([1.0]))


def test_a_lot_is_known_less_well_than_its_sample():
    """sqrt(3^2 + 4^2 + 12^2 / 9) by hand = sqrt(9 + 16 + 16)."""
    assert float(lot_uncertainty(3.0, 4.0, 12.0, 9)) == pytest.approx(41**0.5)
