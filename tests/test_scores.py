"""Scores; the mechanics example of a statistics handbook (its u values are printed rounded), and by hand."""

import numpy as np
import pytest

from energy.scores import en, word, z, z_prime, zeta, zeta_of_difference


def test_z_by_hand():
    assert z([12.0, 7.0], 10.0, 2.0).tolist() == [1.0, -1.5]


def test_z_prime_by_hand():
    assert z_prime(15.0, 10.0, 3.0, 4.0) == pytest.approx(1.0)  # sqrt(9 + 16) = 5


#: u(reference) that the printed zeta 0.785 implies: (0.006 / 0.785)^2 - 0.004^2
U_REFERENCE = np.sqrt((0.006 / 0.785) ** 2 - 0.004**2)


def test_zeta_of_the_second_laboratory():
    # handbook: x 1.006 gives 0.785, x 0.996 gives -0.523, reference 1.000
    assert zeta(0.996, 1.0, 0.004, U_REFERENCE) == pytest.approx(-0.523, abs=0.0005)


@pytest.mark.parametrize(("result", "expected"), [(1.006, 0.393), (0.996, -0.262)])
def test_en_with_expanded_uncertainties(result, expected):
    assert en(result, 1.0, 0.008, 2 * U_REFERENCE) == pytest.approx(expected, abs=0.0006)


def test_en_is_half_of_zeta_at_k_2():
    assert en(5.3, 5.0, 0.2, 0.4) == pytest.approx(zeta(5.3, 5.0, 0.1, 0.2) / 2, rel=1e-12)


def test_zeta_on_a_difference():
    assert zeta_of_difference(-0.6, 0.2) == pytest.approx(-3.0)


def test_words():
    assert [word(s) for s in (2.0, -2.1, 3.0, 3.1, np.nan)] == ["satisfactory", "warning", "warning", "action", ""]
