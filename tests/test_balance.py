"""Mass and energy balance of samples: by hand, by simulation, and what cannot be told apart."""

import numpy as np
import pytest
from scipy import stats

import energy
from energy.assessment import demo_paths
from energy.balance import balances
from energy.catalogue.reader import systems
from energy.samples import Samples

HEATS = systems()["ge_heats_best"]
#: general heats of ge_heats_best, MJ/kg: 5.65, 9.40, 4.15 kcal/g and 17.4 for fibre, with the u of each
H = {"crude_protein": 23.6396, "crude_fat": 39.3296, "available_carbohydrate": 17.3636, "total_dietary_fibre": 17.4}
U_H = {"crude_protein": 0.28 * 4.184, "crude_fat": 0.13 * 4.184, "available_carbohydrate": 0.16 * 4.184,
       "total_dietary_fibre": 0.5}  # fmt: skip
TRUE = {"moisture": 0.10, "crude_protein": 0.12, "crude_fat": 0.15, "ash": 0.03, "available_carbohydrate": 0.52,
        "total_dietary_fibre": 0.08}  # fmt: skip
U = {"moisture": 0.0018, "crude_protein": 0.004, "crude_fat": 0.0025, "ash": 0.0015, "available_carbohydrate": 0.010,
     "total_dietary_fibre": 0.004, "gross_energy": 0.05}  # fmt: skip
GE = sum(H.get(c, 0.0) * x for c, x in TRUE.items())
NAMES = list(U)
#: rows of A: components sum to one; GE less the sum of heat times amount
A = np.array([[1, 1, 1, 1, 1, 1, 0], [*(-H.get(c, 0.0) for c in NAMES[:-1]), 1]], dtype=float)


def batch(n, error=None, size=0.0, scatter=1.0, seed=7):
    rng = np.random.default_rng(seed)
    values = {c: x + scatter * U[c] * rng.normal(size=n) for c, x in {**TRUE, "gross_energy": GE}.items()}
    if error:
        values[error] = values[error] + size
    return Samples.from_arrays(values, u={c: np.full(n, u) for c, u in U.items()}, target="human")


def covariance():
    """V of the two residuals by hand: A S A' and the variance of the heats in the energy balance."""
    v = A @ np.diag([U[c] ** 2 for c in NAMES]) @ A.T
    # the heats enter as h_c (C - TDF) + h_fi TDF with C = AC + TDF, so each amount has its own heat
    v[1, 1] += sum((U_H[c] * TRUE[c]) ** 2 for c in H)
    return v


def test_residuals_and_global_test_by_hand():
    off = batch(1, "crude_fat", 0.02, scatter=0.0)
    found = balances(off, HEATS)
    r = np.array([0.02, -0.02 * H["crude_fat"]])
    v = covariance()
    v[1, 1] += (U_H["crude_fat"] * (TRUE["crude_fat"] + 0.02)) ** 2 - (U_H["crude_fat"] * TRUE["crude_fat"]) ** 2
    assert found.mass[0] == pytest.approx(0.02)
    assert found.energy[0] == pytest.approx(-0.02 * H["crude_fat"], rel=1e-9)
    assert found.chi_square[0] == pytest.approx(r @ np.linalg.inv(v) @ r, rel=1e-6)
    assert found.p_value[0] == pytest.approx(stats.chi2.sf(found.chi_square[0], 2))
    assert found.columns["crude_fat"]["size"][0] == pytest.approx(0.02, rel=1e-9)


def test_a_sample_that_closes_needs_no_change():
    found = balances(batch(1, scatter=0.0), HEATS)
    assert found.chi_square[0] == pytest.approx(0, abs=1e-18)
    for c, x in {**TRUE, "gross_energy": GE}.items():
        assert found.columns[c]["value"][0] == pytest.approx(x, rel=1e-9)


def test_reconciled_values_are_better_known():
    found = balances(batch(1), HEATS)
    assert all(found.columns[c]["u"][0] < U[c] for c in U)


def shift(column):
    """Size of an error that shifts the balances by five of their own standard deviations."""
    a = A[:, NAMES.index(column)]
    return 5 / np.sqrt(a @ np.linalg.inv(covariance()) @ a)


LIKE = {"moisture": {"moisture", "ash"}, "ash": {"moisture", "ash"},
        "available_carbohydrate": {"available_carbohydrate", "total_dietary_fibre"},
        "total_dietary_fibre": {"available_carbohydrate", "total_dietary_fibre"}}  # fmt: skip


@pytest.mark.parametrize("column", NAMES)
def test_a_planted_error_is_inside_the_set_of_suspects(column):
    """2,000 samples: the culprit (moisture and ash, the two carbohydrates count as one) in at least 95 % of the sets."""
    suspects = balances(batch(2000, column, shift(column)), HEATS).suspects()
    alike = LIKE.get(column, {column})
    assert np.mean([bool(alike & set(s)) for s in suspects]) >= 0.95


@pytest.mark.parametrize("column", ["moisture", "crude_fat", "gross_energy", "available_carbohydrate"])
def test_a_planted_error_is_mostly_named_first(column):
    suspects = balances(batch(2000, column, -shift(column)), HEATS).suspects()
    assert np.mean([s[0] in LIKE.get(column, {column}) for s in suspects if s]) >= 0.65


def test_pure_scatter_fails_as_often_as_it_says():
    """10,000 samples whose heats are right: the model variance only lowers the share of 5 %."""
    found = balances(batch(10_000), HEATS)
    assert (found.p_value < 0.05).mean() < 0.055


def test_with_carbohydrate_by_difference_nothing_can_be_isolated():
    values = {c: np.array([x]) for c, x in TRUE.items() if c not in ("available_carbohydrate",)}
    values["crude_fat"] = values["crude_fat"] + 0.03
    s = Samples.from_arrays({**values, "gross_energy": np.array([GE])}, target="human")
    found = balances(s, HEATS)
    assert found.freedom[0] == 1
    assert np.isnan(found.mass[0])
    assert found.suspects() == [[]]


def test_the_basis_on_which_a_sample_is_written_changes_nothing():
    dry = 0.9
    wet = batch(1, "crude_protein", 0.02)
    on_dry = {c: (v if c == "moisture" else v / (1 - wet.columns["moisture"])) for c, v in wet.columns.items()}
    u = {c: (U[c] if c == "moisture" else U[c] / (1 - wet.columns["moisture"][0])) for c in U}
    other = Samples.from_arrays(on_dry, basis="dry_matter", u={c: np.array([x]) for c, x in u.items()}, target="human")
    assert dry == pytest.approx(1 - TRUE["moisture"])
    one, two = balances(wet, HEATS), balances(other, HEATS)
    assert two.mass[0] == pytest.approx(one.mass[0], abs=1e-12)
    assert two.energy[0] == pytest.approx(one.energy[0], abs=1e-12)
    assert two.columns["crude_protein"]["ratio"].argmax() == one.columns["crude_protein"]["ratio"].argmax()


def test_fibre_counted_twice_is_found_in_the_demo():
    a = energy.assess(demo_paths()[0], target="human")
    row = a.balances.set_index("sample_id").loc["F03"]
    assert set(row["suspects"].split(", ")) == {"total_dietary_fibre", "available_carbohydrate"}
    assert row["size_available_carbohydrate"] == pytest.approx(13.6, abs=0.05)  # the fibre of the sample, g per 100 g


def test_a_wrong_unit_of_the_bomb_is_found_in_the_demo():
    a = energy.assess(demo_paths()[0], target="human")
    table = a.balances.set_index("sample_id")
    assert table.loc["F01", "suspects"] == "gross_energy"
    assert table.loc["001", "suspects"] == ""
    assert table.loc["001", "p_value"] > 0.05


def test_feeds_have_an_energy_balance():
    path = next(p for p in demo_paths() if "growing_pig" in p.name)
    table = energy.assess(path).balances.set_index("sample_id")
    assert table.loc["P01", "freedom"] == 1
    assert table.loc["P05", "p_value"] < 1e-6
