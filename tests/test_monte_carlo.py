"""Monte Carlo against first order: every linear entry of the catalogue, shared inputs by hand, and curves told as such."""

import numpy as np
import pytest

from energy.catalogue.reader import systems
from energy.evaluate import evaluate
from energy.monte_carlo import FIRST_ORDER, MONTE_CARLO, NEITHER, bends, monte_carlo
from energy.problems import WrongUse
from energy.quantities import dictionary
from energy.resolve import Resolver, signatures
from energy.samples import Samples
from energy.sensitivity import covariance_of

SYSTEMS = systems()
#: what most entries can be computed from, where their own symbols are not enough (a basis, a derived quantity)
BESIDE = {
    "dry_matter": 0.9, "crude_protein": 0.15, "crude_fat": 0.05, "crude_fibre": 0.06, "ash": 0.06, "gross_energy": 17.0,
    "feeding_level": 2.0, "feed_family_correction": 0.3, "ndf": 0.2, "adf": 0.1,
}  # fmt: skip
#: entries that ask for no measured amount at all: nothing to draw
WITHOUT_INPUTS = {s.id for s in SYSTEMS.values() if not any(x.quantity for x in s.inputs.values())}


def plausible(quantity):
    """A value a little below the middle of what the dictionary calls plausible."""
    low, high = dictionary()[quantity].range
    return max(low, 0) + 0.3 * (
        min(high, 0.3 if dictionary()[quantity].dimension == "mass_fraction" else high) - max(low, 0)
    )


def sample_for(system, beside=False):
    """One sample with every quantity the entry names, on the basis the paper names; u is 2 % of each value."""
    names = {x.quantity: x.basis for x in system.inputs.values() if x.quantity in dictionary()}
    columns = {q: BESIDE.get(q, plausible(q)) for q in names}
    basis = {q: b for q, b in names.items() if b in ("as_is", "dry_matter") and dictionary()[q].basis == "stated"}
    if beside or len(columns) < len({x.quantity for x in system.inputs.values() if x.quantity}):
        columns |= {q: v for q, v in BESIDE.items() if q not in columns}
    text = {"food_group": ["wheat_97_100_extraction"]} if system.by_group else None
    u = {q: [0.02 * v] for q, v in columns.items()}
    return Samples.from_arrays({q: [v] for q, v in columns.items()}, basis=basis, u=u, text=text)


def computable(system):
    for beside in (False, True):
        samples = sample_for(system, beside)
        if evaluate(samples, [system]).u[0, 0] > 0:
            return samples
    return None


def curved(samples, system):
    resolver = Resolver(signatures(samples)[0][0], frozenset(samples.columns))
    return bends(resolver.system(system))


FOUND = {s.id: computable(s) for s in SYSTEMS.values() if s.id not in WITHOUT_INPUTS}
CURVED = {i: curved(s, SYSTEMS[i]) for i, s in FOUND.items() if s is not None}
LINEAR = [i for i, bent in CURVED.items() if not bent]


def test_hardly_an_entry_is_left_out():
    left = sorted(i for i, s in FOUND.items() if s is None)
    assert left == []
    assert len(LINEAR) > 200


@pytest.mark.parametrize("identity", LINEAR)
def test_both_agree_on_every_linear_entry(identity):
    found = monte_carlo(FOUND[identity], 0, SYSTEMS[identity], trials=100_000, seed=7)
    by_blocks = evaluate(FOUND[identity], [SYSTEMS[identity]])
    assert found.u == pytest.approx(by_blocks.u[0, 0], rel=0.02)
    assert found.mean == pytest.approx(by_blocks.value[0, 0], abs=0.02 * found.u)
    assert found.trust == FIRST_ORDER, found.reason


@pytest.mark.parametrize("identity", [i for i, bent in CURVED.items() if bent])
def test_on_a_curved_entry_it_says_which_to_trust(identity):
    found = monte_carlo(FOUND[identity], 0, SYSTEMS[identity], trials=100_000, seed=7)
    by_blocks = evaluate(FOUND[identity], [SYSTEMS[identity]])
    assert found.u_first_order == pytest.approx(by_blocks.u[0, 0], rel=1e-9)
    if abs(found.u - by_blocks.u[0, 0]) > 0.02 * found.u:
        assert found.trust in (MONTE_CARLO, NEITHER)
        assert "no straight line in" in found.reason or "of the draws" in found.reason


def test_a_steep_curve_is_not_trusted_to_first_order():
    # a digestibility of 0.5 known to 40 %, on a gross energy known to 30 %: u^2 of the product holds
    # (17 * 0.2)^2 + (0.5 * 5.1)^2 and beyond first order (5.1 * 0.2)^2
    system = next(s for s in SYSTEMS.values() if s.stage == "DE" and set(x.quantity for x in s.inputs.values() if x.quantity)
                  == {"gross_energy", "energy_digestibility"})  # fmt: skip
    samples = Samples.from_arrays({"gross_energy": [17.0], "energy_digestibility": [0.5]},
                                  u={"gross_energy": [5.1], "energy_digestibility": [0.2]}, basis="dry_matter")  # fmt: skip
    found = monte_carlo(samples, 0, system)
    first = (17 * 0.2) ** 2 + (0.5 * 5.1) ** 2
    assert found.u_first_order == pytest.approx(np.sqrt(first), rel=1e-9)
    assert found.u == pytest.approx(np.sqrt(first + (5.1 * 0.2) ** 2), rel=0.02)
    assert found.trust == MONTE_CARLO
    assert "no straight line in" in found.reason
    assert "Trust monte carlo" in found.sentence


# ---- results that share their inputs -------------------------------------------------------------------------------

VALUES = {"moisture": 0.12, "nitrogen": 0.022, "crude_fat": 0.025, "ash": 0.016, "total_dietary_fibre": 0.11}
U = {"moisture": 0.003, "nitrogen": 0.0005, "crude_fat": 0.0025, "ash": 0.002, "total_dietary_fibre": 0.005}
#: MJ/kg per kg/kg, by hand. EU, carbohydrate by difference less fibre, protein 6.25 N (its factor 17 is that of
#: carbohydrate, so that nitrogen cancels); Table 13 of Merrill & Watt, wheat of 97 to 100 % extraction: 3.59, 8.37 and
#: 3.78 kcal/g on 5.83 N, fat, and carbohydrate by difference with the fibre inside
EU = {"moisture": -17, "nitrogen": 0, "crude_fat": 37 - 17, "ash": -17, "total_dietary_fibre": 8 - 17}
TABLE_13 = {n: 4.184 * s for n, s in {"moisture": -3.78, "nitrogen": 5.83 * (3.59 - 3.78), "crude_fat": 8.37 - 3.78,
                                      "ash": -3.78, "total_dietary_fibre": 0}.items()}  # fmt: skip


@pytest.fixture(scope="module")
def wheat():
    return Samples.from_arrays({n: [v] for n, v in VALUES.items()}, u={n: [v] for n, v in U.items()},
                               text={"food_group": ["wheat_97_100_extraction"]})  # fmt: skip


PAIR = SYSTEMS["eu_1169_2011"], SYSTEMS["us_ah74_specific"]


def test_two_composition_systems_by_hand(wheat):
    by_hand = np.sqrt(sum(((EU[n] - TABLE_13[n]) * U[n]) ** 2 for n in U))
    alone = [np.sqrt(sum((slopes[n] * U[n]) ** 2 for n in U)) for slopes in (EU, TABLE_13)]
    found = monte_carlo(wheat, 0, *PAIR, seed=3)
    assert found.u_first_order == pytest.approx(by_hand, rel=1e-9)
    assert found.u == pytest.approx(by_hand, rel=0.02)
    assert found.trust == FIRST_ORDER
    as_if_independent = np.hypot(*alone)
    assert as_if_independent > 1.2 * by_hand
    assert evaluate(wheat, list(PAIR)).u[:, 0] == pytest.approx(alone, rel=1e-9)


def test_covariance_closes_the_same_sum(wheat):
    shared = sum(EU[n] * TABLE_13[n] * U[n] ** 2 for n in U)
    assert covariance_of(wheat, *PAIR)[0] == pytest.approx(shared, rel=1e-9)


def test_a_system_less_itself_is_nothing():
    samples = sample_for(SYSTEMS["eu_1169_2011"])
    found = monte_carlo(samples, 0, SYSTEMS["eu_1169_2011"], SYSTEMS["eu_1169_2011"])
    assert (found.value, found.u, found.trust) == (0.0, 0.0, FIRST_ORDER)


# ---- what is known of an input -----------------------------------------------------------------------------------


def simple(**changes):
    samples = Samples.from_arrays({"crude_protein": [0.2], "crude_fat": [0.1], "available_carbohydrate": [0.5]},
                                  u={"crude_protein": [0.004], "crude_fat": [0.002], "available_carbohydrate": [0.0]})  # fmt: skip
    for name, value in changes.items():
        setattr(samples, name, value)
    return samples


def test_few_degrees_of_freedom_widen_the_interval():
    # JCGM 101, 6.4.9: t with nu = 4 has the variance nu / (nu - 2) = 2 times the squared scale
    found = monte_carlo(simple(freedom={"crude_protein": np.array([4.0])}), 0, SYSTEMS["eu_1169_2011"], trials=300_000)
    assert found.u == pytest.approx(np.sqrt(2 * (17 * 0.004) ** 2 + (37 * 0.002) ** 2), rel=0.03)
    assert found.trust == MONTE_CARLO
    assert "few degrees of freedom" in found.reason


def test_a_value_below_a_limit_is_a_rectangle():
    samples = simple(censored={"crude_protein": np.array([True])})
    samples.u["crude_fat"][:] = 0.0
    found = monte_carlo(samples, 0, SYSTEMS["eu_1169_2011"], trials=100_000)
    # the shortest interval of a rectangle may lie anywhere in it; its length is 95 % of the whole
    assert found.high - found.low == pytest.approx(0.95 * 2 * 17 * 0.004 * np.sqrt(3), rel=0.01)
    assert "below a limit" in found.reason


def test_the_same_seed_gives_the_same_figure():
    first, second = (monte_carlo(simple(), 0, SYSTEMS["eu_1169_2011"], seed=5, trials=1000) for _ in range(2))
    assert first == second


def test_the_adaptive_procedure_settles():
    found = monte_carlo(simple(), 0, SYSTEMS["eu_1169_2011"])
    assert found.settled
    assert 100_000 <= found.trials <= 2_000_000


def test_a_sample_that_lacks_an_input_is_told():
    with pytest.raises(WrongUse, match="lacks what"):
        monte_carlo(simple(), 0, SYSTEMS["bomb_atwater_general"])
