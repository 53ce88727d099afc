"""Algebra keeps values and slopes; second routes: plain Python arithmetic, sympy, a complex step."""

import cmath

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from energy import algebra
from energy.formula import parse

LEAVES = st.sampled_from(["x", "y", "2.5", "0.3", "7"])
EXPRESSIONS = st.recursive(
    LEAVES,
    lambda inner: st.one_of(
        st.builds("({} + {})".format, inner, inner),
        st.builds("({} - {})".format, inner, inner),
        st.builds("{}*{}".format, inner, inner),
        st.builds("({})/(3 + {})".format, inner, LEAVES),
        st.builds("exp(0.1*{})".format, LEAVES),
        st.builds("sqrt(1 + {}*{})".format, LEAVES, LEAVES),
        st.builds("({})**2".format, inner),
    ),
    max_leaves=12,
)
FUNCTIONS = {"exp": cmath.exp, "sqrt": cmath.sqrt, "log": cmath.log}


def at(text, x, y):
    return eval(text, {"__builtins__": {}}, {**FUNCTIONS, "x": x, "y": y})  # our own generated texts


def value(node, point):
    source = algebra.Source([node], {k: k for k in point})
    final = source.text(node)
    import numpy as np

    space = {n: getattr(np, n) for n in ("exp", "log", "sqrt", "minimum", "maximum", "where", "power")}
    space.update(point)
    exec("\n".join([*source.lines, f"out = {final}"]), space)
    return float(space["out"])


@given(EXPRESSIONS, st.floats(0.1, 3), st.floats(0.1, 3))
def test_simplifying_keeps_the_value(text, x, y):
    expected = at(text, x, y).real if isinstance(at(text, x, y), complex) else at(text, x, y)
    assume(abs(expected) < 1e12)
    assert value(parse(text).node, {"x": x, "y": y}) == pytest.approx(expected, rel=1e-9, abs=1e-9)


@given(EXPRESSIONS, st.floats(0.1, 3), st.floats(0.1, 3))
def test_slope_agrees_with_a_complex_step(text, x, y):
    expected = complex(at(text, x + 1e-30j, y)).imag / 1e-30
    assume(abs(expected) < 1e12)
    found = value(algebra.slope(parse(text).node, "x"), {"x": x, "y": y})
    assert found == pytest.approx(expected, rel=1e-9, abs=1e-9)


def test_a_factor_that_cancels_is_gone():
    assert parse("(x/y)*y").node == "x"


def test_equal_sums_are_equal_nodes():
    assert parse("2*x + y - 3").node == parse("y + x - 3 + x").node


def test_variance_of_a_sum_by_hand():
    # u**2 of 3x - 2y is 9 u_x**2 + 4 u_y**2
    node = algebra.variance(parse("3*x - 2*y").node, {"x": 0.25, "y": 1.0})
    assert node == pytest.approx(9 * 0.25 + 4)


def test_a_shared_part_is_computed_once():
    node = parse("(x + y)*exp(x*y) + exp(x*y)").node
    source = algebra.Source([node], {"x": "x", "y": "y"})
    final = source.text(node)
    assert "\n".join([*source.lines, final]).count("exp(") == 1
