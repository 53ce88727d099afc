"""One battery of rules over every entry, and what the reader refuses."""

import math

import pytest
import sympy

from energy import algebra
from energy.catalogue import reader
from energy.catalogue.records import SOURCE_STATUS
from energy.problems import CatalogueProblem

SYSTEMS = reader.systems()
every_system = pytest.mark.parametrize("system", SYSTEMS.values(), ids=list(SYSTEMS))


@every_system
def test_a_number_has_its_place_in_a_source(system):
    assert system.citation.strip()
    assert system.locator.strip()
    assert system.source_status in SOURCE_STATUS


@every_system
def test_unit_and_basis_are_said(system):
    assert system.result_unit
    assert system.result_scale > 0
    assert system.result_basis in ("as_is", "dry_matter", "any")


@every_system
def test_every_symbol_is_used_and_every_used_symbol_told(system):
    used = system.formula.symbols | (system.heats.symbols if system.heats else frozenset())
    assert used == set(system.symbols)


@every_system
def test_it_can_be_typeset(system):
    assert system.formula.latex.count("{") == system.formula.latex.count("}")


@every_system
def test_slopes_agree_with_sympy(system):
    names = sorted(system.formula.symbols)
    symbols = {n: sympy.Symbol(n) for n in names}
    expression = sympy.sympify(system.formula.text, locals=symbols)
    point = {n: 0.31 + 0.07 * k for k, n in enumerate(names)}
    for name in names:
        expected = float(sympy.diff(expression, symbols[name]).subs({symbols[n]: v for n, v in point.items()}))
        assert _value(algebra.slope(system.formula.node, name), point) == pytest.approx(expected, rel=1e-9, abs=1e-12)


def _value(node, point):
    source = algebra.Source([node], {k: k for k in point})
    final = source.text(node)
    space = {"sqrt": math.sqrt, "exp": math.exp, "log": math.log, **point}
    exec("\n".join([*source.lines, f"out = {final}"]), space)
    return space["out"]


def test_at_least_forty_systems_for_people():
    assert len([s for s in SYSTEMS.values() if "human" in s.targets]) >= 40


@pytest.mark.parametrize("system", [s for s in SYSTEMS.values() if s.twin_of], ids=lambda s: s.id)
def test_pairs_of_factors_belong_together(system):
    """Published pairs run from 4.00 to 4.33 kJ per kcal; anything else is a slip of the pen."""
    leading = SYSTEMS[system.twin_of]
    for one, other in zip(leading.components, system.components, strict=True):
        assert one.name == other.name
        if one.factor:
            ratio = one.factor / other.factor
            assert 4.0 <= (ratio if leading.energy_family == "J" else 1 / ratio) <= 4.34


def test_targets_have_a_reason_for_their_limits():
    assert all(t["reason"] and 0 < t["limit_look"] <= t["limit_act"] for t in reader.targets().values())


@pytest.mark.parametrize("slug", sorted(reader.food_groups()))
def test_nitrogen_factors_lie_in_the_published_range(slug):
    factor = reader.food_groups()[slug]["nitrogen_factor"]
    assert factor == "" or 5.1 <= float(factor) <= 6.4  # almonds 5.18 to milk 6.38 (FAO/WHO 1973)


HOUSE = """
[publication]
key = "house"
citation = "our own"
[[equation]]
id = "house_me"
title = "t"
target = ["human"]
stage = "ME"
route = "composition"
formula = "4*P"
result = "kcal/g as is"
source_status = "house"
locator = "sheet 1"
[equation.symbols]
P = { quantity = "crude_protein", unit = "g/g as is" }
"""


def refused(tmp_path, text):
    path = tmp_path / "house.toml"
    path.write_text(text)
    with pytest.raises(CatalogueProblem) as problem:
        reader.with_house(path)
    return str(problem.value)


@pytest.mark.parametrize(
    ("old", "new", "word"),
    [
        ('citation = "our own"', 'citation = ""', "source"),
        ('locator = "sheet 1"', 'locator = " "', "source"),
        ('locator = "sheet 1"\n', "", "locator"),
        ('"4*P"', '"4*P + Q"', "Q"),
        ('"crude_protein"', '"protine"', "not a quantity"),
        ('"kcal/g as is"', '"kcal"', "unit"),
        ('"g/g as is"', '"kJ/g"', "not of mass per mass"),
        ('stage = "ME"', 'stage = "MX"', "stage"),
        ('route = "composition"', 'route = "guess"', "route"),
        ('["human"]', '["unicorn"]', "unicorn"),
        ('"house_me"', '"eu_1169_2011"', "twice"),
        ('source_status = "house"', 'source_status = "low"', "source_status"),
        ('"4*P"', "\"__import__('os')\"", "not allowed"),
        ('"4*P"', '"P*1e400"', "too large"),
        ("[publication]", "[publication", "cannot be read"),
    ],
)
def test_a_broken_house_file_is_refused_clearly(tmp_path, old, new, word):
    assert word in refused(tmp_path, HOUSE.replace(old, new))


def test_a_sound_house_file_is_taken(tmp_path):
    path = tmp_path / "house.toml"
    path.write_text(HOUSE)
    assert "house_me" in reader.with_house(path)
