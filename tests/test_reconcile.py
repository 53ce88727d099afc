"""Data reconciliation against published cases; every number as printed there or, where marked, by a second route."""

import numpy as np
import pytest
from scipy import stats

from energy.problems import WrongUse
from energy.reconcile import reconcile, reconcile_independent, solve_unmeasured, without_unmeasured

# ---- R1: heat exchanger with bypass, Narasimhan and Jordache 2000, chapter 1 --------------------------------------

EXCHANGER = np.array([[1, -1, -1, 0, 0, 0], [0, 1, 0, -1, 0, 0], [0, 0, 1, 0, -1, 0], [0, 0, 0, 1, 1, -1]], dtype=float)
MEASURED = np.array([101.91, 64.45, 34.65, 64.20, 36.44, 98.88])


def test_reconciled_flows_of_the_book():
    found = reconcile(MEASURED, np.eye(6), EXCHANGER)
    np.testing.assert_allclose(found.value[0], [100.22, 64.50, 35.72, 64.50, 35.72, 100.22], atol=5e-3)
    assert found.global_test[0] == pytest.approx(6.4075, abs=5e-4)
    assert found.global_test[0] < stats.chi2.ppf(0.95, found.freedom)
    np.testing.assert_allclose(found.u, 0.57735, atol=5e-6)
    np.testing.assert_allclose(found.constraint_test[0], [1.6224, 0.1768, 1.2657, 1.0161], atol=5e-5)
    np.testing.assert_allclose(found.adjustment_test[0], [2.0698, 0.0612, 1.3105, 0.3674, 0.8818, 1.6412], atol=5e-5)


def test_an_error_of_four_is_found_on_its_stream():
    found = reconcile(np.add(MEASURED, [0, 4, 0, 0, 0, 0]), np.eye(6), EXCHANGER)
    assert found.global_test[0] == pytest.approx(16.674, abs=5e-4)
    np.testing.assert_allclose(found.adjustment_test[0], [1.2533, 3.2047, 0.4940, 2.0004, 1.6983, 2.4577], atol=5e-5)
    np.testing.assert_allclose(found.size[0], [1.535, 3.925, -0.605, -2.45, 2.08, -3.01], atol=5e-3)
    assert found.ratio[0].argmax() == 1


def test_taking_a_measurement_out_lowers_the_global_test_by_its_ratio():
    y = np.add(MEASURED, [0, 4, 0, 0, 0, 0])
    whole = reconcile(y, np.eye(6), EXCHANGER)
    out = np.array([False, True, False, False, False, False])
    less = reconcile(y, np.eye(6), without_unmeasured(EXCHANGER, out))
    assert less.global_test[0] == pytest.approx(6.40375, abs=5e-6)
    assert whole.global_test[0] - less.global_test[0] == pytest.approx(whole.ratio[0, 1])


@pytest.mark.parametrize(
    ("out", "expected", "j"),
    [([2], [100.4875, 64.2325, 36.255, 64.2325, 36.255, 100.4875], 4.69015),
     ([2, 4], [100.395, 64.325, 36.07, 64.325, 36.07, 100.395], 4.6217)],
)  # fmt: skip
def test_unmeasured_streams_are_worked_out(out, expected, j):
    mask = np.isin(np.arange(6), out)
    found = reconcile(np.where(mask, 0.0, MEASURED), np.eye(6), without_unmeasured(EXCHANGER, mask))
    value = found.value.copy()
    value[:, mask] = solve_unmeasured(EXCHANGER, found.value, mask)
    np.testing.assert_allclose(value[0], expected, atol=5e-5)
    assert found.global_test[0] == pytest.approx(j, abs=5e-5)


# ---- R2: twelve streams, six nodes, Mitsas 2010, Measurement 43:702-707 -------------------------------------------


def nodes(text, k):
    rows = np.zeros((len(text), k))
    for i, terms in enumerate(text):
        for t in terms.split():
            rows[i, abs(int(t)) - 1] = np.sign(int(t))
    return rows


TWELVE = nodes(["1 -2 -3 -4", "2 -5 -6 -7", "3 5 6 7 -8", "4 -9 -10", "8 9 -11", "10 11 -12"], 12)
Y12 = [100.49, 29.46, 40.41, 30.05, 15.17, 4.98, 9.92, 70.68, 10.03, 19.82, 81.06, 101.57]
U12 = np.array([1.0, 0.3, 0.4, 0.3, 0.3, 0.1, 0.2, 0.7, 0.3, 0.4, 0.8, 1.0])


def test_twelve_streams_as_the_author_and_the_collection_print_them():
    found = reconcile(Y12, np.diag(U12**2), TWELVE)
    author = [100.59, 29.80, 40.71, 30.07, 15.00, 4.96, 9.84, 70.51, 10.14, 19.93, 80.66, 100.59]
    collection = [100.582, 29.80123, 40.70946, 30.07136, 14.99722, 4.960802, 9.843208, 70.51069, 10.14599, 19.92537,
                  80.65668, 100.582]  # fmt: skip
    np.testing.assert_allclose(found.value[0], author, atol=0.01)
    np.testing.assert_allclose(found.value[0], collection, atol=6e-4)
    assert found.global_test[0] == pytest.approx(3.89135, abs=5e-5)


def test_measurements_in_the_same_balances_cannot_be_told_apart():
    found = reconcile(Y12, np.diag(U12**2), TWELVE)
    np.testing.assert_allclose(found.adjustment_test[0, 4:7], 0.8836, atol=5e-5)
    np.testing.assert_allclose(found.ratio[0, 4:7], found.ratio[0, 4])


# ---- R3: steam turbine, VDI 2048 part 1 (2000); 95 % half-widths are 1.96 u ---------------------------------------

TURBINE = np.array([
    [1, 1, 0, 0, 0.4, 0, 0, 0, 0, 0, 0], [0, 0, 1, 1, -1, 0, -1, -1, -1, 0, 0], [0, 0, 0, 0, 0, 0, 1, 1, 1, -1, 0],
], dtype=float)  # fmt: skip
TURBINE[0, [2, 3]] = -1
TURBINE[1, 5] = -1
FLOWS = np.array([46.241, 45.668, 44.575, 44.319, 0.525, 69.978, 10.364, 3.744, 4.391, 18.498, 2.092])
HALF = np.array([2.5, 2.5, 0.535, 0.532, 0.105, 0.854, 0.168, 0.058, 0.058, 0.205, 0.272])


def turbine(correlated, half=HALF):
    u = half / 1.96
    s = np.diag(u**2)
    if correlated:
        for i, j, rho in ((0, 1, 0.2), (2, 3, 0.39951)):
            s[i, j] = s[j, i] = rho * u[i] * u[j]
    return reconcile(FLOWS, s, TURBINE)


def test_turbine_with_correlations_as_printed():
    found = turbine(True)
    value = [44.696, 44.123, 44.643, 44.386, 0.524, 70.005, 10.364, 3.744, 4.391, 18.499, 2.092]
    width = [1.611, 1.611, 0.425, 0.424, 0.105, 0.615, 0.133, 0.057, 0.057, 0.137, 0.272]
    np.testing.assert_allclose(found.value[0], value, atol=6e-4)
    np.testing.assert_allclose(1.96 * found.u[0], width, atol=6e-4)
    assert found.global_test[0] == pytest.approx(2.53705, abs=5e-5)
    np.testing.assert_allclose(found.adjustment_test[0, [0, 1, 2, 3, 5, 6, 9]],
                               [1.58381, 1.58381, 0.40853, 0.40853, 0.08913, 0.00387, 0.01610], atol=2e-4)  # fmt: skip


def test_turbine_without_correlations():
    found = turbine(False)
    np.testing.assert_allclose(found.value[0, :6], [44.6918, 44.1188, 44.6385, 44.3818, 0.524194, 69.997], atol=6e-4)
    assert found.global_test[0] == pytest.approx(3.06022, abs=5e-5)


def test_a_measurement_in_no_balance_stays_as_it_is():
    found = turbine(True)
    assert found.value[0, 10] == FLOWS[10]
    assert found.adjustment_test[0, 10] == 0
    assert found.ratio[0, 10] == 0
    assert np.isnan(found.size[0, 10])


def test_the_column_printed_wrong_is_noticed():
    """The same table prints 0.02959 for V and 0.00258 for A6 and A5; the formula gives 0.11110 and 0.00387."""
    found = turbine(True).adjustment_test[0]
    assert found[4] == pytest.approx(0.11110, abs=5e-5)
    np.testing.assert_allclose(found[[7, 8]], 0.00387, atol=5e-5)


def test_widths_claimed_too_small_fail_the_global_test():
    """Ours: half-widths 0.80 and 0.79 for the two feed-water flows; J 24.48 over 7.815, both flows alike."""
    found = turbine(False, np.r_[0.80, 0.79, HALF[2:]])
    assert found.global_test[0] == pytest.approx(24.48351, abs=5e-4)
    np.testing.assert_allclose(found.adjustment_test[0, :2], 4.9447, atol=5e-4)


# ---- R4: crude distillation tower, Zhang et al. 2010, Comput Chem Eng 34:154-162 -----------------------------------


def test_very_unequal_sizes():
    tower = nodes(["1 -2 3 -11", "2 -4 -5 -6 -7 -8 9 11 -12", "-3 -9 -10 12"], 12)
    y = [190.26, 174.71, 3.1157, 32.458, 33.474, 7.3519, 0.31392, 92.432, 29.118, 24.275, 18.225, 54.838]
    u = np.array([2.1412, 1.9484, 0.0341, 0.3451, 0.4001, 0.0868, 0.00356, 1.0594, 0.3607, 0.3001, 0.20011, 0.6453])
    found = reconcile(y, np.diag(u**2), tower)
    expected = [190.0493, 174.9345, 3.11259, 32.45643, 33.47189, 7.3518, 0.31392, 92.4172, 28.77742, 24.03806, 18.22737,
                55.92806]  # fmt: skip
    np.testing.assert_allclose(found.value[0], expected, rtol=2e-5)
    assert found.global_test[0] == pytest.approx(4.40013, abs=5e-5)
    assert found.constraint_test[0, 2] == pytest.approx(2.0921, abs=5e-5)
    # above 1.96 one by one, below 2.8578 for twelve at once: no alarm
    assert 1.96 < found.adjustment_test[0].max() < stats.norm.ppf(0.5 + 0.5 * 0.95 ** (1 / 12))


# ---- the rules ------------------------------------------------------------------------------------------------------


def test_many_cases_at_once_are_the_same_as_one_by_one():
    rng = np.random.default_rng(4)
    many = MEASURED + rng.normal(size=(50, 6))
    together = reconcile(many, np.eye(6), EXCHANGER)
    alone = [reconcile(y, np.eye(6), EXCHANGER) for y in many]
    np.testing.assert_allclose(together.value, np.concatenate([a.value for a in alone]))
    np.testing.assert_allclose(together.ratio, np.concatenate([a.ratio for a in alone]))


def test_reconciled_values_close_the_balances():
    found = reconcile(MEASURED, np.diag([1, 2, 3, 4, 5, 6.0]), EXCHANGER)
    np.testing.assert_allclose(EXCHANGER @ found.value[0], 0, atol=1e-12)


def test_a_variance_of_zero_means_fixed():
    found = reconcile(MEASURED, np.diag([1, 0, 1, 1, 1, 1.0]), EXCHANGER)
    assert found.value[0, 1] == MEASURED[1]
    assert found.u[0, 1] == 0


def test_dependent_balances_are_reported_and_not_inverted():
    with pytest.raises(WrongUse, match="depend on each other"):
        reconcile(MEASURED, np.eye(6), np.vstack([EXCHANGER, EXCHANGER[0] + EXCHANGER[1]]))


def test_nothing_is_left_where_every_balance_has_its_own_unmeasured_input():
    with pytest.raises(WrongUse, match="No balance is left"):
        without_unmeasured(np.array([[1.0, -1.0]]), np.array([True, False]))


def test_the_global_test_has_its_distribution():
    """20,000 cases of pure scatter: 5 % beyond the 95 % point of chi-square with four degrees of freedom."""
    rng = np.random.default_rng(11)
    true = np.array([100, 64, 36, 64, 36, 100.0])
    found = reconcile(true + rng.normal(size=(20_000, 6)), np.eye(6), EXCHANGER)
    assert (found.global_test > stats.chi2.ppf(0.95, 4)).mean() == pytest.approx(0.05, abs=0.005)


@pytest.mark.parametrize("m", [1, 2])
def test_the_closed_form_says_the_same_as_the_matrices(m):
    rng = np.random.default_rng(5)
    k, n = 7, 40
    y, u, a = rng.normal(size=(k, n)), rng.uniform(0.1, 2, (k, n)), rng.normal(size=(m, k, n))
    a[:, 3] = 0  # a measurement in no balance
    model = rng.uniform(0, 0.5, (m, n))
    residual = np.einsum("mkn,kn->mn", a, y)
    quick = reconcile_independent(y, u**2, a, residual, model)
    for i in range(n):
        slow = reconcile(y[:, i], np.diag(u[:, i] ** 2), a[:, :, i], model=np.diag(model[:, i]))
        for name in ("value", "u", "global_test", "constraint_test", "adjustment_test", "ratio", "size"):
            np.testing.assert_allclose(
                getattr(quick, name)[i], getattr(slow, name)[0], rtol=1e-9, atol=1e-12, err_msg=name
            )
