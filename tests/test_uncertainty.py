"""Pooled repeatability; expected values by hand."""

import numpy as np
import pytest

from energy.uncertainty import mean_of, pooled_relative_sd


def test_mean_skips_what_is_missing():
    mean, count = mean_of(np.array([[1.0, 2.0], [3.0, np.nan]]))
    assert mean.tolist() == [2.0, 2.0]
    assert count.tolist() == [2, 1]


def test_pooled_sd_by_hand():
    # pairs 9, 11 (mean 10: +-0.1) and 19, 21 (mean 20: +-0.05); pooled: sqrt((2*0.01 + 2*0.0025) / 2)
    sd, freedom = pooled_relative_sd(np.array([[9.0, 19.0], [11.0, 21.0]]))
    assert sd == pytest.approx(np.sqrt((2 * 0.01 + 2 * 0.0025) / 2))
    assert freedom == 2


def test_single_values_have_no_freedom():
    assert pooled_relative_sd(np.array([[1.0, 2.0]]))[1] == 0
