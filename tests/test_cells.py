"""Cells: text -> number."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from energy.cells import decimal_of, numbers


def column(*texts, comma=False):
    return numbers(np.array(texts, dtype=object), comma)


@pytest.mark.parametrize(
    ("text", "value"), [("12.5", 12.5), ("1e3", 1000), (" 7 ".strip(), 7), ("\u22123", -3), ("+2", 2), (".5", 0.5)]
)
def test_plain_numbers(text, value):
    assert column(text).value[0] == value


@given(st.floats(-1e6, 1e6).map(lambda x: round(x, 4)))
def test_a_decimal_comma_means_the_same_number(x):
    assert column(f"{x:.4f}".replace(".", ","), comma=True).value[0] == pytest.approx(x, abs=1e-9)


@pytest.mark.parametrize("text", ["inf", "nan", "1e400", "0x10", "1_000", "--1", "1.2.3"])
def test_what_is_no_number_is_told(text):
    found = column(text)
    assert np.isnan(found.value[0])
    assert 0 in found.bad


@pytest.mark.parametrize(
    ("texts", "separator", "kind"),
    [
        (["1.5", "2"], ",", "point"),
        (["1,5", "2"], ";", "comma"),
        (["1,234", "5"], ";", "ambiguous"),
        (["1,5", "2.5"], ";", "ambiguous"),
        (["<0,5", "3"], ";", "comma"),
    ],
)
def test_which_decimal(texts, separator, kind):
    assert decimal_of(np.array(texts, dtype=object), separator) == kind
