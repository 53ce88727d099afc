"""Interlaboratory precision: serum glucose of ASTM E691 and creosote oil of ISO 5725, statistics worked out apart."""

import csv
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import beta

from energy.interlaboratory import between_two_means, mandel_h_critical, mandel_k_critical, precision
from energy.problems import WrongUse
from energy.replicates import grubbs

ROWS = list(csv.DictReader((Path(__file__).parent / "data" / "interlaboratory_glucose.csv").open(encoding="utf-8")))


def glucose(material):
    return np.array([float(r["glucose"]) for r in ROWS if r["material"] == material]).reshape(8, 3)


#: mean, s of the means, s_r, s_R, largest Cochran C, its laboratory
GLUCOSE = {
    "A": (41.5183, 0.6061, 1.0632, 1.0632, 0.3630, 3, "none"),
    "B": (79.6079, 0.8627, 1.4961, 1.4961, 0.4273, 3, "none"),
    "C": (135.1388, 2.6567, 2.7509, 3.4789, 0.7239, 3, "outlier"),
    "D": (194.7171, 2.5950, 2.6251, 3.3657, 0.3977, 1, "none"),
    "E": (294.4921, 2.6931, 3.9350, 4.1923, 0.6813, 1, "outlier"),
}


@pytest.mark.parametrize("material", GLUCOSE)
def test_glucose(material):
    found = precision(glucose(material))
    mean, s_means, s_r, s_R, c, laboratory, judged = GLUCOSE[material]
    assert (found.mean, found.s_means, found.s_r, found.s_R) == pytest.approx((mean, s_means, s_r, s_R), abs=6e-5)
    assert found.cochran.statistic == pytest.approx(c, abs=6e-5)
    assert (found.cochran.index, found.cochran.judged) == (laboratory, judged)
    assert found.negative == (material in "AB")


def test_critical_values_for_eight_laboratories():
    found = precision(glucose("C"))
    assert (found.cochran.critical_5, found.cochran.critical_1) == pytest.approx((0.5157, 0.6152), abs=6e-5)
    assert (found.grubbs.critical_5, found.grubbs.critical_1) == pytest.approx((2.1266, 2.2744), abs=6e-5)
    assert found.grubbs.statistic == pytest.approx(2.142, abs=5e-4)
    assert (found.grubbs.index, found.grubbs.judged) == (3, "straggler")


def test_mandel_h_and_k():
    assert precision(glucose("A")).h == pytest.approx([-0.39, -0.13, -0.11, -0.10, -0.09, 0.83, -1.75, 1.75], abs=0.006)
    assert precision(glucose("C")).k == pytest.approx([0.21, 0.79, 0.63, 2.41, 0.44, 0.47, 0.77, 0.38], abs=0.006)


def test_creosote():
    means = np.array([24.140, 20.155, 19.500, 20.300, 20.705, 17.570, 20.100, 20.940, 21.185])
    half = np.array([0.28, 0.49, 0.40, 0.00, 0.35, 1.98, 0.80, 0.32, 0.95]) / 2
    found = precision(np.transpose([means - half, means + half]))
    assert (found.mean, found.s_means) == pytest.approx((20.5106, 1.7269), abs=6e-5)
    assert (found.s_r, found.s_L, found.s_R) == pytest.approx((0.5853, 1.6766, 1.7758), abs=6e-5)
    assert found.cochran.statistic == pytest.approx(0.63578, abs=6e-6)
    assert (found.cochran.critical_5, found.cochran.critical_1) == pytest.approx((0.6385, 0.7544), abs=6e-5)
    assert found.cochran.judged == "none"  # just not a straggler
    one_sided = grubbs(means, sides=1)
    assert one_sided.statistic == pytest.approx(2.1017, abs=6e-5)
    assert one_sided.critical_5 == pytest.approx(2.1096, abs=6e-5)
    assert (found.grubbs.critical_5, found.grubbs.judged) == (pytest.approx(2.2150, abs=6e-5), "none")


def test_unequal_replicates_by_hand():
    # laboratories 1, 3 | 5, 7, 9 | 4: s_r^2 = 10/3; n = (6 - 14/6) / 2; mean 29/6
    found = precision([[1, 3, np.nan], [5, 7, 9], [4, np.nan, np.nan]])
    s_d2 = (2 * (2 - 29 / 6) ** 2 + 3 * (7 - 29 / 6) ** 2 + (4 - 29 / 6) ** 2) / 2
    assert found.s_r == pytest.approx(np.sqrt(10 / 3))
    assert found.s_L == pytest.approx(np.sqrt((s_d2 - 10 / 3) / ((6 - 14 / 6) / 2)))
    assert found.s_R == pytest.approx(np.hypot(found.s_r, found.s_L))
    assert "3 laboratories" in found.sentence


@pytest.mark.parametrize(("p", "n"), [(8, 3), (5, 2), (12, 4)])
def test_critical_values_of_mandel_by_the_beta_distribution(p, n):
    # k^2 / p is the share of one sum of squares in p equal ones; h^2 p / (p-1)^2 that of one deviation in all
    assert mandel_k_critical(0.05, p, n) ** 2 / p == pytest.approx(beta.ppf(0.95, (n - 1) / 2, (p - 1) * (n - 1) / 2))
    assert mandel_h_critical(0.05, p) ** 2 * p / (p - 1) ** 2 == pytest.approx(beta.ppf(0.95, 0.5, (p - 2) / 2))


def test_means_of_two_laboratories():
    assert between_two_means(120, 300, 2, 2) == pytest.approx(288, abs=0.5)  # sqrt(300^2 - 120^2 / 2)
    assert between_two_means(120, 300) == pytest.approx(300)


def test_refuses_what_has_no_replicates():
    with pytest.raises(WrongUse):
        precision([[1.0], [2.0]])
