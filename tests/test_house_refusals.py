"""House files that are broken in small ways: each is refused with a message, none crashes or is taken in silence."""

import pytest

import energy
from energy.catalogue import reader
from energy.problems import CatalogueProblem
from energy.samples import Samples

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


def refused(tmp_path, text):
    path = tmp_path / "house.toml"
    path.write_text(text, encoding="utf-8")
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
        ('"4*P"', '"9**9**9*P"', "power"),
        ('"4*P"', '"P.real"', "not allowed"),
        ('"4*P"', '"4*\\u0420"', "outside plain ASCII"),
        ('"4*P"', '"' + "P+" * 1100 + 'P"', "characters"),
        ('"4*P"', '"' + "(" * 50 + "P" + ")" * 50 + '"', "nested"),
        ('"4*P"', '"4/0*P"', "cannot be computed"),
        ('unit = "g/g as is"', 'unit = "stone"', "unit"),
        ("P = {", 'Q = { quantity = "crude_fat", unit = "g/g as is" }\nP = {', "never used"),
        ('locator = "sheet 1"', 'locator = "sheet 1"\nnitrogen_factor = "six"', "nitrogen_factor"),
        ("[publication]", "[publication", "cannot be read"),
        ("[publication]", "[somewhere]", "publication"),
    ],
)
def test_a_broken_house_file_is_refused_clearly(tmp_path, old, new, word):
    assert EQUATION.count(old) == 1
    message = refused(tmp_path, EQUATION.replace(old, new))
    assert word in message
    assert "house.toml" in message


def test_the_same_id_twice_in_one_house_file_is_refused(tmp_path):
    entry = EQUATION[EQUATION.index("[[equation]]") :]
    assert "'house_me' is there twice" in refused(tmp_path, EQUATION + entry)


def test_a_file_that_is_not_text_is_refused(tmp_path):
    path = tmp_path / "house.toml"
    path.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(CatalogueProblem, match="cannot be read"):
        reader.with_house(path)


def test_a_house_file_that_is_not_there_is_refused(tmp_path):
    with pytest.raises(CatalogueProblem, match="cannot be read"):
        reader.with_house(tmp_path / "none.toml")


def test_a_sound_house_file_is_taken(tmp_path):
    path = tmp_path / "house.toml"
    path.write_text(EQUATION)
    assert "house_me" in reader.with_house(path)
    assert "house_me" not in reader.systems()


def test_a_house_equation_computes(tmp_path):
    path = tmp_path / "house.toml"
    path.write_text(EQUATION)
    samples = Samples.from_arrays({"crude_protein": [0.1]})
    found = energy.assess(samples, target="human", house=path, composition_system="house_me", unit="kcal/100 g").results
    value = found.loc[found["system"] == "house_me", "value"].iloc[0]
    assert value == pytest.approx(40)  # 4 kcal/g x 10 g
