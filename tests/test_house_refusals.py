"""House files that are broken in small ways: each is refused with a message, none crashes or is taken in silence."""

import pytest

from energy.catalogue import reader
from energy.problems import CatalogueProblem

EQUATION = """
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
TABLE = """
[publication]
key = "house"
citation = "our own"
[[factor_table]]
id = "house_table"
title = "t"
target = ["human"]
stage = "ME"
route = "composition"
leading = "kJ"
twin = "none"
basis = "as_is"
source_status = "house"
locator = "sheet 1"
[[factor_table.component]]
name = "protein"
quantity = "crude_protein"
kJ = 17
absent = "missing_input"
source_status = "house"
"""
CHECK = (
    EQUATION
    + """[[equation.check]]
name = "c"
inputs = { crude_protein = 1 }
inputs_unit = "g/100 g"
expected = 4
unit = "kcal/100 g"
tolerance = 0.1
kind = "published"
source = "x"
source_status = "house"
"""
)
L, Q = 'locator = "sheet 1"', 'quantity = "crude_protein", unit = "g/g as is"'
T = 'table = "merrill_watt_table13.csv", unit = "kcal/g", '
CASES = [
    (EQUATION, L, L + "\nnitrogen_factor = [1]"),
    (EQUATION, L, L + "\nnitrogen_factor = nan"),
    (EQUATION, L, L + "\nnitrogen_factor = -6"),
    (EQUATION, L, L + '\nresidual_sd = "a"'),
    (EQUATION, L, L + "\ndomain = 5"),
    (EQUATION, L, L + "\ndomain = [5]"),
    (EQUATION, L, L + '\ndomain = [{ symbol = "P", low = "a" }]'),
    (EQUATION, L, L + "\nrequires_methods = 5"),
    (EQUATION, L, L + "\nexcludes = 5"),
    (EQUATION, "P = {", "P = 5 #"),
    (EQUATION, Q, 'constant = "a", unit = "kcal/g"'),
    (EQUATION, Q, 'constant = 5, unit = "kcal/g", u = "q"'),
    (EQUATION, Q, 'constant = nan, unit = "kcal/g"'),
    (EQUATION, Q, 'table = "nope.csv", row = "protein", column = "x", unit = "kcal/g"'),
    (EQUATION, Q, 'table = "/etc/passwd", row = "protein", column = "x", unit = "kcal/g"'),
    (EQUATION, Q, T + 'row = "protein", column = "nope"'),
    (EQUATION, Q, T + 'row = "nope", column = "factor_kcal_per_g"'),
    (EQUATION, Q, T + 'column = "factor_kcal_per_g"'),
    (EQUATION, Q, T + 'row = "protein", column = "factor_kcal_per_g", fallback = "a"'),
    (EQUATION, Q, T + 'row = "protein", column = "factor_kcal_per_g", slug = "nope"'),
    (EQUATION, Q, T + 'row = "protein", column = "closes", slug = "eggs"'),
    (EQUATION, '"kcal/g as is"', '"kcal/g"'),  # no basis said: taken as 'as is' without a word
    (EQUATION, 'id = "house_me"', 'id = ""'),
    (EQUATION, 'id = "house_me"', 'id = "a b/<script>"'),
    (EQUATION, 'title = "t"', 'title = ""'),
    (EQUATION, "[[equation]]", "[equation]"),
    (TABLE, "kJ = 17", 'kJ = "a"'),
    (TABLE, "kJ = 17", "kJ = nan"),
    (TABLE, "kJ = 17", "kJ = inf"),
    (TABLE, "kJ = 17", 'table = "nope.csv"\nrow = "protein"\ncolumn = "x"\nunit = "kJ"'),
    (TABLE, "kJ = 17", 'table = "merrill_watt_table13.csv"'),
    (TABLE, "kJ = 17", "kJ = 17\nsubtract = 5"),
    (TABLE, 'basis = "as_is"', 'basis = "wet"'),
    (TABLE, "[[factor_table.component]]", "component = [5]\n[factor_table.x]"),
    (CHECK, "{ crude_protein = 1 }", "{ nope = 1 }"),
    (CHECK, "{ crude_protein = 1 }", '{ crude_protein = "a" }'),
    (CHECK, "expected = 4\n", ""),
    (CHECK, "expected = 4", 'expected = "x"'),
    (CHECK, 'unit = "kcal/100 g"', 'unit = "zorkmid"'),
    (CHECK, "tolerance = 0.1", "tolerance = -1"),
]


@pytest.mark.parametrize(("text", "old", "new"), CASES, ids=[c[2][-60:] for c in CASES])
def test_a_broken_house_file_is_refused(tmp_path, text, old, new):
    assert text.count(old) == 1
    path = tmp_path / "house.toml"
    path.write_text(text.replace(old, new), encoding="utf-8")
    with pytest.raises(CatalogueProblem):
        reader.with_house(path)


@pytest.mark.parametrize("text", ["equation = [5]\n", "factor_table = 5\n"])
def test_a_list_of_the_wrong_kind_is_refused(tmp_path, text):
    path = tmp_path / "house.toml"
    path.write_text(text + '[publication]\ncitation = "a"\n', encoding="utf-8")
    with pytest.raises(CatalogueProblem):
        reader.with_house(path)


def test_a_component_named_twice_is_refused(tmp_path):
    path = tmp_path / "house.toml"
    path.write_text(TABLE + TABLE[TABLE.index("[[factor_table.component]]") :], encoding="utf-8")
    with pytest.raises(CatalogueProblem):
        reader.with_house(path)
