"""Propagation of distributions: the GUM's own examples (JCGM 100, annex H) and closed forms as second routes."""

import numpy as np
import pytest
from scipy import stats

from energy.problems import WrongUse
from energy.propagation import (
    Arcsine,
    CorrelatedNormal,
    Normal,
    Rectangular,
    StudentT,
    Triangular,
    effective_freedom,
    first_order,
    numerical_tolerance,
    propagate,
    shortest_interval,
)

# ---- JCGM 100, H.1: end gauge, nm -------------------------------------------------------------------------------------

GAUGE = {
    "l_s": Normal(50_000_623, 25), "d": Normal(215, 9.682), "alpha_s": Rectangular(11.5e-6, 2e-6),
    "d_alpha": Rectangular(0, 1e-6), "d_theta": Rectangular(0, 0.05), "theta_mean": Normal(-0.1, 0.2),
    "cycle": Arcsine(0, 0.5),
}  # fmt: skip


def gauge(x):
    theta = x["theta_mean"] + x["cycle"]
    return x["l_s"] + x["d"] - x["l_s"] * (x["d_alpha"] * theta + x["alpha_s"] * x["d_theta"])


def test_end_gauge_by_first_order():
    length, covariance = first_order(gauge, GAUGE)
    assert length[0] == pytest.approx(50_000_838, abs=0.5)
    assert np.sqrt(covariance[0, 0]) == pytest.approx(31.66, abs=0.01)  # printed 32


def test_end_gauge_degrees_of_freedom():
    d = effective_freedom([5.8, 3.9, 6.7], [24, 5, 8])
    assert d == pytest.approx(25.4, abs=0.3)  # printed from rounded parts
    assert effective_freedom([25, 9.682, 2.887, 16.599], [18, 25.4, 50, 2]) == pytest.approx(16.75, abs=0.005)
    assert effective_freedom([1.0, 2.0], [np.inf, np.inf]) == np.inf


def test_end_gauge_by_monte_carlo():
    found = propagate(gauge, GAUGE, seed=1, trials=200_000)
    assert found.mean[0] == pytest.approx(50_000_838, abs=0.5)
    assert found.u[0] == pytest.approx(33.81, rel=0.01)  # with second-order terms, printed 34


# ---- H.2: correlated means -----------------------------------------------------------------------------------------

READINGS = np.array([
    [5.007, 4.994, 5.005, 4.990, 4.999],
    [19.663e-3, 19.639e-3, 19.640e-3, 19.685e-3, 19.678e-3],
    [1.0456, 1.0438, 1.0468, 1.0428, 1.0433],
])  # fmt: skip
CIRCUIT = {("V", "I", "phi"): CorrelatedNormal.of(READINGS.mean(axis=1), np.cov(READINGS) / 5)}


def circuit(x):
    z = x["V"] / x["I"]
    return np.array([z * np.cos(x["phi"]), z * np.sin(x["phi"]), z])


@pytest.mark.parametrize("way", ["first order", "monte carlo"])
def test_resistance_reactance_impedance(way):
    if way == "first order":
        value, covariance = first_order(circuit, CIRCUIT)
        u = np.sqrt(np.diag(covariance))
        r = covariance / np.outer(u, u)
    else:
        found = propagate(circuit, CIRCUIT, seed=2, trials=200_000)
        value, u, r = found.mean, found.u, found.correlation
    # by Monte Carlo the mean of X is lower by half its curvature times u^2, some 0.002
    assert value == pytest.approx([127.732, 219.847, 254.260], abs=0.0015 if way == "first order" else 0.004)
    assert u == pytest.approx([0.071, 0.295, 0.236], abs=0.0015)
    assert [r[0, 1], r[0, 2], r[1, 2]] == pytest.approx([-0.588, -0.485, 0.993], abs=0.004)


def test_leaving_the_correlation_out_triples_u():
    m, u = READINGS.mean(axis=1), READINGS.std(axis=1, ddof=1) / np.sqrt(5)
    alone = {n: Normal(a, b) for n, a, b in zip(("V", "I", "phi"), m, u, strict=True)}
    assert np.sqrt(first_order(circuit, alone)[1][0, 0]) == pytest.approx(0.19, abs=0.006)


# ---- H.3: calibration line of a thermometer ---------------------------------------------------------------------------


T = [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
B = [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160]


def test_thermometer_correction():
    (y2, y1), ((v2, c), (_, v1)) = np.polyfit(np.array(T) - 20, B, 1, cov=True)
    assert (y1, np.sqrt(v1), y2, np.sqrt(v2)) == pytest.approx((-0.1712, 0.0029, 0.00218, 0.00067), abs=5e-5)
    assert c / np.sqrt(v1 * v2) == pytest.approx(-0.930, abs=5e-4)
    line = CorrelatedNormal.of([y1, y2], [[v1, c], [c, v2]])
    value, covariance = first_order(lambda x: x["y1"] + 10 * x["y2"], {("y1", "y2"): line})
    assert value[0] == pytest.approx(-0.1494, abs=5e-5)
    assert np.sqrt(covariance[0, 0]) == pytest.approx(0.0041, abs=5e-5)


# ---- distributions -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("distribution", "reference"), [
    (Normal(3, 2), stats.norm(3, 2)),
    (Rectangular(3, 2), stats.uniform(1, 4)),
    (Triangular(3, 2), stats.triang(0.5, 1, 4)),
    (Arcsine(3, 2), stats.arcsine(1, 4)),
    (StudentT(3, 2, 7), stats.t(7, 3, 2)),
])  # fmt: skip
def test_draws_follow_their_distribution(distribution, reference):
    draws = distribution.draw(np.random.default_rng(3), 20_000)[0]
    assert stats.kstest(draws, reference.cdf).pvalue > 0.001
    assert np.sqrt(distribution.covariance[0, 0]) == pytest.approx(reference.std(), rel=1e-12)


def test_an_impossible_covariance_is_refused():
    with pytest.raises(WrongUse, match="covariance"):
        CorrelatedNormal.of([0, 0], [[1, 2], [2, 1]])


# ---- the procedure -------------------------------------------------------------------------------------------------


def test_sum_of_two_rectangles():
    # JCGM 101, 9.2.3 in kind: the sum of rectangles has u = sqrt(2 / 3) and 95 % within 2 (1 - sqrt(0.05)) (triangle)
    found = propagate(lambda x: x["a"] + x["b"], {"a": Rectangular(0, 1), "b": Rectangular(0, 1)}, seed=4)
    assert found.settled
    assert found.u[0] == pytest.approx(np.sqrt(2 / 3), rel=0.01)
    assert found.high[0] == pytest.approx(2 * (1 - np.sqrt(0.05)), abs=0.03)
    assert found.low[0] == pytest.approx(-2 * (1 - np.sqrt(0.05)), abs=0.03)


def test_shortest_interval_of_a_skew_distribution():
    # exponential: density falls, so the shortest interval starts at 0 and ends at -ln(0.05)
    found = propagate(lambda x: -np.log(x["p"]), {"p": Rectangular(0.5, 0.5)}, seed=5, trials=100_000)
    assert found.low[0] == pytest.approx(0, abs=0.01)
    assert found.high[0] == pytest.approx(-np.log(0.05), abs=0.06)
    assert found.central()[0][0] == pytest.approx(-np.log(0.975), abs=0.003)


def test_shortest_interval_by_hand():
    low, high = shortest_interval(np.array([[0.0, 5.0, 6.0, 7.0, 20.0]]), 0.4)
    assert (low[0], high[0]) == (5.0, 7.0)


def test_same_seed_same_numbers():
    given = {"a": Normal(1, 0.1)}
    a, b = (propagate(lambda x: x["a"] ** 3, given, seed=9, trials=1000) for _ in range(2))
    assert a.u[0] == b.u[0]
    assert a.u[0] != propagate(lambda x: x["a"] ** 3, given, seed=10, trials=1000).u[0]


def test_numerical_tolerance_by_hand():
    # u = 0.00035 = 35e-5 with two digits: half of 1e-5 (JCGM 101, 7.9.2, example 1 in kind); u = 2 with one: 0.5
    assert numerical_tolerance(np.array([0.00035]), 2)[0] == pytest.approx(5e-6)
    assert numerical_tolerance(np.array([2.0]), 1)[0] == pytest.approx(0.5)


def test_draws_without_a_number_are_counted():
    found = propagate(
        lambda x: np.sqrt(np.where(x["a"] < 0, np.nan, x["a"])), {"a": Normal(0, 1)}, seed=6, trials=10_000
    )
    assert found.invalid == pytest.approx(0.5, abs=0.03)


@pytest.mark.parametrize("wrong", [{"probability": 1.0}, {"trials": 3}])
def test_impossible_wishes(wrong):
    with pytest.raises(WrongUse):
        propagate(lambda x: x["a"], {"a": Normal(0, 1)}, seed=1, **wrong)
