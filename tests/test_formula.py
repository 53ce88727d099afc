"""The formula language: what it reads, how it is typeset, and what it refuses."""

import subprocess
import sys
import time

import pytest

from energy.formula import parse
from energy.problems import FormulaProblem

HOSTILE = {
    "import": "__import__('os').system('true')",
    "attribute": "x.__class__",
    "call of a call": "(lambda: 1)()",
    "huge power": "9**9**9",
    "large power": "x**1000",
    "symbol as power": "x**y",
    "deep nesting": "(" * 500 + "x" + ")" * 500,
    "deep signs": "-" * 1500 + "x",
    "one megabyte": "x+" * 500_000 + "x",
    "look-alike letter": "\u0435*2",  # Cyrillic e
    "full-width digit": "\uff11+x",
    "overflowing number": "1e400",
    "overflowing product": "1e300*1e300",
    "division by zero": "x/0",
    "log of a negative": "log(-1)",
    "list": "[x for x in (1, 2)]",
    "assignment": "(x := 1)",
    "text": "'abc'",
    "format text": "f'{x}'",
    "keyword": "max(x, y=1)",
    "star": "max(*x)",
    "subscript": "x[0]",
    "comparison": "x < y",
    "boolean": "True",
    "dunder": "__builtins__",
    "empty": "  ",
    "two lines": "x\ny",
    "null": "x\x00",
    "complex": "1j*x",
    "matrix product": "x @ y",
    "unknown function": "eval(x)",
}


@pytest.mark.parametrize("text", HOSTILE.values(), ids=HOSTILE)
def test_a_hostile_formula_is_a_clear_problem(text):
    start = time.perf_counter()
    with pytest.raises(FormulaProblem) as problem:
        parse(text)
    assert problem.value.what
    assert problem.value.cure
    assert len(str(problem.value)) < 600
    assert time.perf_counter() - start < 1.0


def test_a_hostile_formula_runs_nothing(tmp_path):
    mark = tmp_path / "mark"
    code = f"from energy.formula import parse\ntry: parse(\"__import__('pathlib').Path('{mark}').touch()\")\nexcept Exception: pass"
    subprocess.run([sys.executable, "-c", code], check=True)
    assert not mark.exists()


@pytest.mark.parametrize(
    ("text", "latex"),
    [
        ("4*P + 9*F", r"4\,\mathrm{P} + 9\,\mathrm{F}"),
        ("a/(b + c)", r"\frac{\mathrm{a}}{\mathrm{b} + \mathrm{c}}"),
        ("GE*(1 - x)", r"\mathrm{GE}\left(1 - \mathrm{x}\right)"),
        ("a - (b - c)", r"\mathrm{a} - \left(\mathrm{b} - \mathrm{c}\right)"),
        ("CF_DM**2", r"\mathrm{CF}_{\mathrm{DM}}^{2}"),
        ("sqrt(x)", r"\sqrt{\mathrm{x}}"),
        ("log(x)", r"\ln\left(\mathrm{x}\right)"),
    ],
)
def test_typeset_by_hand(text, latex):
    assert parse(text).latex == latex


def test_symbols_are_kept_even_if_they_cancel():
    assert parse("x - x + y").symbols == {"x", "y"}


def test_where_chooses():
    assert parse("where(x < 2, 1, 3)").node == ("where", "<", "x", 2.0, 1.0, 3.0)
