"""Budgets, covariances and degrees of freedom of figures, against the library `uncertainties` and by hand."""

import numpy as np
import pytest
from uncertainties import covariance_matrix, ufloat

import energy
from energy.samples import Samples

VALUES = {"moisture": 0.36, "crude_protein": 0.09, "crude_fat": 0.04, "ash": 0.015, "gross_energy": 11.6}
U = {"moisture": 0.003, "crude_protein": 0.002, "crude_fat": 0.0015, "ash": 0.001, "gross_energy": 0.06}
KCAL = 4.184


@pytest.fixture(scope="module")
def found():
    columns = {c: np.array([x]) for c, x in VALUES.items()}
    samples = Samples.from_arrays(columns, u={c: np.array([x]) for c, x in U.items()}, ids=["s"])
    return energy.assess(samples, target="human", law="eu_1169_2011")


def by_uncertainties():
    """Two systems written out: general Atwater unrounded (kcal/g by difference) and the European Union's, MJ/kg."""
    w, p, f, a = (ufloat(VALUES[c], U[c]) for c in ("moisture", "crude_protein", "crude_fat", "ash"))
    carbohydrate = 1 - w - p - f - a
    return (17.0 * p + 37.0 * f + 17.0 * carbohydrate), (4.05 * p + 8.93 * f + 4.03 * carbohydrate) * KCAL


def test_covariance_of_two_systems_that_share_inputs(found):
    expected = covariance_matrix(by_uncertainties())
    table = found.covariance("s").loc[
        ["eu_1169_2011", "atwater_general_unrounded"], ["eu_1169_2011", "atwater_general_unrounded"]
    ]
    assert table.to_numpy() == pytest.approx(np.array(expected), rel=1e-9)


def test_a_budget_is_what_each_determination_brings(found):
    """EU: slopes 17 - 17 = 0 for protein, 37 - 17 = 20 for fat, -17 for moisture and ash."""
    budget = found.budget("s", "eu_1169_2011").set_index("input")["contribution"].abs()
    expected = {"fat": 20 * 0.0015, "moisture": 17 * 0.003, "ash": 17 * 0.001}
    for words, value in expected.items():
        name = next(i for i in budget.index if words in i.lower())
        assert budget[name] == pytest.approx(value)


def test_shares_of_a_budget_are_one(found):
    assert found.budget("s", "eu_1169_2011")["share"].sum() == pytest.approx(1.0)


def test_the_budget_of_the_bomb_value_is_its_own_u(found):
    line = found.budget("s", "gross_energy_measured").iloc[0]
    assert (abs(line["contribution"]), line["share"]) == (pytest.approx(0.06), pytest.approx(1.0))


def test_few_degrees_of_freedom_by_welch_and_satterthwaite():
    """JCGM 100, G.4.1 by hand: u_c^4 / (u_fat,effect^4 / nu), only fat has few; slopes of GE less heats by difference."""
    columns = {c: np.array([x]) for c, x in VALUES.items()}
    samples = Samples.from_arrays(columns, u={c: np.array([x]) for c, x in U.items()}, ids=["s"])
    samples.freedom = {"crude_fat": np.array([12.0])}
    a = energy.assess(samples, target="human")
    total = np.hypot(a.blocks.u_measurement[0, 0], a.blocks.u_model[0, 0])
    effect = (9.40 - 4.15) * KCAL * U["crude_fat"]  # fat takes the place of carbohydrate found by difference
    freedom = total**4 / (effect**4 / 12.0)
    from scipy import stats

    assert a.coverage_factor[0, 0] == pytest.approx(stats.t.ppf(stats.norm.cdf(1.96), freedom), rel=1e-9)
