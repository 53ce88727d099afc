"""Formulas as text: a small white-listed arithmetic language, read with Python's ast and never executed as is.

Allowed: numbers, symbols in plain ASCII letters, digits and underscores, + - * / **, exp, log, sqrt, min, max and
where(condition, a, b) with one comparison as condition. Everything else is refused with a `FormulaProblem`.
"""

from __future__ import annotations

import ast
import math
import re
from dataclasses import dataclass
from functools import cached_property

from energy import algebra
from energy.algebra import Node
from energy.problems import FormulaProblem

LONGEST_TEXT = 2000
DEEPEST = 40
LARGEST_POWER = 10.0

_CURE = "Write plain arithmetic: numbers, symbols, + - * / **, exp, log, sqrt, min, max, where(a < b, x, y)."
_COMPARISONS = {ast.Lt: "<", ast.LtE: "<=", ast.Gt: ">", ast.GtE: ">="}
_ARGUMENTS = {"exp": 1, "log": 1, "sqrt": 1, "min": 2, "max": 2, "where": 3}


@dataclass(frozen=True)
class Formula:
    """A parsed formula: `text` as published, `node` for arithmetic."""

    text: str
    node: Node
    tree: ast.expr

    @cached_property
    def symbols(self) -> frozenset[str]:
        """Names of the symbols, also of those that cancel."""
        return frozenset(n.id for n in ast.walk(self.tree) if isinstance(n, ast.Name) and n.id not in _ARGUMENTS)

    @cached_property
    def latex(self) -> str:
        """Typeset form of the formula as it is written."""
        return _latex(self.tree)


def parse(text: str) -> Formula:
    """Read a formula. Raises FormulaProblem; never runs the text."""
    tree = _read(text)
    try:
        node = _node(tree, text)
    except (OverflowError, ZeroDivisionError, ValueError) as error:
        raise FormulaProblem(text, f"a number in it cannot be computed ({error}).", _CURE) from None
    return Formula(text=text.strip(), node=node, tree=tree)


def _read(text: str) -> ast.expr:
    """The syntax tree, after checks that need no parsing (length, letters, nesting)."""
    if not isinstance(text, str) or not text.strip():
        raise FormulaProblem(str(text), "it is empty.", _CURE)
    if len(text) > LONGEST_TEXT:
        raise FormulaProblem(text, f"it has {len(text)} characters; {LONGEST_TEXT} are allowed.", _CURE)
    strange = sorted({c for c in text if not (32 <= ord(c) < 127 or c in "\n\t")})
    if strange:
        shown = ", ".join(f"{c!r} (U+{ord(c):04X})" for c in strange[:5])
        raise FormulaProblem(text, f"it holds characters outside plain ASCII: {shown}.", "Retype these letters.")
    depth = deepest = 0
    for c in text:
        depth += (c in "([{") - (c in ")]}")
        deepest = max(deepest, depth)
    if deepest > DEEPEST:
        raise FormulaProblem(text, f"brackets are nested {deepest} deep; {DEEPEST} are allowed.", _CURE)
    try:
        tree = ast.parse(" ".join(text.split()), mode="eval").body
    except (SyntaxError, ValueError, MemoryError, RecursionError):
        raise FormulaProblem(text, "it is not arithmetic.", _CURE) from None
    if _depth(tree) > 4 * DEEPEST:
        raise FormulaProblem(text, "it is nested too deeply.", _CURE)
    return tree


def _depth(tree: ast.AST) -> int:
    """Depth of a syntax tree, without recursion."""
    deepest, stack = 0, [(tree, 1)]
    while stack:
        node, depth = stack.pop()
        deepest = max(deepest, depth)
        stack.extend((child, depth + 1) for child in ast.iter_child_nodes(node))
    return deepest


def _number(tree: ast.Constant, text: str) -> float:
    if isinstance(tree.value, bool) or not isinstance(tree.value, (int, float)):
        raise FormulaProblem(text, f"{tree.value!r} is not a number.", _CURE)
    value = float(tree.value)
    if not math.isfinite(value):
        raise FormulaProblem(text, "a number in it is too large.", _CURE)
    return value


def _node(tree: ast.expr, text: str) -> Node:
    if isinstance(tree, ast.Constant):
        return _number(tree, text)
    if isinstance(tree, ast.Name):
        if not re.fullmatch(r"[A-Za-z][A-Za-z0-9_]*", tree.id) or "__" in tree.id or tree.id in _ARGUMENTS:
            raise FormulaProblem(text, f"'{tree.id}' is not a symbol.", _CURE)
        return tree.id
    if isinstance(tree, ast.UnaryOp) and isinstance(tree.op, (ast.USub, ast.UAdd)):
        inner = _node(tree.operand, text)
        return algebra.scale(-1.0, inner) if isinstance(tree.op, ast.USub) else inner
    if isinstance(tree, ast.BinOp):
        return _binary(tree, text)
    if isinstance(tree, ast.Call):
        return _call(tree, text)
    raise FormulaProblem(text, f"'{ast.unparse(tree)[:40]}' is not allowed.", _CURE)


def _binary(tree: ast.BinOp, text: str) -> Node:
    if isinstance(tree.op, ast.Pow):
        exponent = _node(tree.right, text)
        if not algebra.is_constant(exponent) or abs(exponent) > LARGEST_POWER:
            raise FormulaProblem(
                text, f"'{ast.unparse(tree)[:40]}': a power must be a number up to {LARGEST_POWER:g}.", _CURE
            )
        return _finite(algebra.power(_node(tree.left, text), exponent), text)
    left, right = _node(tree.left, text), _node(tree.right, text)
    if isinstance(tree.op, ast.Add):
        return _finite(algebra.add(left, right), text)
    if isinstance(tree.op, ast.Sub):
        return _finite(algebra.subtract(left, right), text)
    if isinstance(tree.op, ast.Mult):
        return _finite(algebra.multiply(left, right), text)
    if isinstance(tree.op, ast.Div):
        return _finite(algebra.divide(left, right), text)
    raise FormulaProblem(text, f"the operator in '{ast.unparse(tree)[:40]}' is not allowed.", _CURE)


def _finite(node: Node, text: str) -> Node:
    if isinstance(node, float) and not math.isfinite(node):
        raise FormulaProblem(text, "a number in it is too large.", _CURE)
    return node


def _call(tree: ast.Call, text: str) -> Node:
    name = tree.func.id if isinstance(tree.func, ast.Name) else ast.unparse(tree.func)[:40]
    if name not in _ARGUMENTS or not isinstance(tree.func, ast.Name):
        raise FormulaProblem(text, f"the function '{name}' is not allowed.", _CURE)
    if tree.keywords or len(tree.args) != _ARGUMENTS[name] or any(isinstance(a, ast.Starred) for a in tree.args):
        raise FormulaProblem(text, f"'{name}' takes {_ARGUMENTS[name]} value(s).", _CURE)
    if name == "where":
        return _where(tree, text)
    return _finite(algebra.apply(name, *(_node(a, text) for a in tree.args)), text)


def _where(tree: ast.Call, text: str) -> Node:
    condition = tree.args[0]
    if not isinstance(condition, ast.Compare) or len(condition.ops) != 1 or type(condition.ops[0]) not in _COMPARISONS:
        raise FormulaProblem(text, "'where' needs one comparison (<, <=, >, >=) as its condition.", _CURE)
    return algebra.where(
        _COMPARISONS[type(condition.ops[0])],
        _node(condition.left, text),
        _node(condition.comparators[0], text),
        _node(tree.args[1], text),
        _node(tree.args[2], text),
    )


# ---- typesetting ------------------------------------------------------------------------------------------

_ADD, _MUL, _POW = 1, 2, 3


def symbol_latex(name: str) -> str:
    """A symbol upright, with what follows the first underscore as its index."""
    head, _, index = name.partition("_")
    index = index.replace("_", r"\,")
    return rf"\mathrm{{{head}}}" + (rf"_{{\mathrm{{{index}}}}}" if index else "")


def _latex(tree: ast.expr, outer: int = 0) -> str:
    if isinstance(tree, ast.Constant):
        return f"{tree.value!r}"
    if isinstance(tree, ast.Name):
        return symbol_latex(tree.id)
    if isinstance(tree, ast.UnaryOp):
        sign = "-" if isinstance(tree.op, ast.USub) else ""
        return _bracket(sign + _latex(tree.operand, _MUL), _ADD, outer)
    if isinstance(tree, ast.BinOp):
        return _latex_binary(tree, outer)
    if isinstance(tree, ast.Call) and isinstance(tree.func, ast.Name):
        return _latex_call(tree, tree.func.id)
    if isinstance(tree, ast.Compare):
        sign = {"<": "<", "<=": r"\le", ">": ">", ">=": r"\ge"}[_COMPARISONS[type(tree.ops[0])]]
        return f"{_latex(tree.left)} {sign} {_latex(tree.comparators[0])}"
    raise FormulaProblem(ast.unparse(tree), "it cannot be typeset.", _CURE)


def _bracket(text: str, level: int, outer: int) -> str:
    return rf"\left({text}\right)" if level < outer else text


def _latex_binary(tree: ast.BinOp, outer: int) -> str:
    left, right = tree.left, tree.right
    if isinstance(tree.op, ast.Div):
        return rf"\frac{{{_latex(left)}}}{{{_latex(right)}}}"
    if isinstance(tree.op, ast.Pow):
        return rf"{_latex(left, _POW + 1)}^{{{_latex(right)}}}"
    if isinstance(tree.op, ast.Mult):
        return (
            _bracket(rf"{_latex(left, _MUL)}\,{_latex(right, _MUL)}".replace(r"\,\left", r"\left"), _MUL, outer)
            if not isinstance(right, ast.Constant)
            else _bracket(rf"{_latex(left, _MUL)} \cdot {_latex(right, _MUL)}", _MUL, outer)
        )
    sign = "+" if isinstance(tree.op, ast.Add) else "-"
    tight = _ADD + 1 if sign == "-" else _ADD
    return _bracket(f"{_latex(left, _ADD)} {sign} {_latex(right, tight)}", _ADD, outer)


def _latex_call(tree: ast.Call, name: str) -> str:
    arguments = [_latex(a) for a in tree.args]
    if name == "where":
        condition, a, b = arguments
        return rf"\begin{{cases}} {a} & {condition} \\ {b} & \text{{otherwise}} \end{{cases}}"
    if name == "sqrt":
        return rf"\sqrt{{{arguments[0]}}}"
    return rf"\{'ln' if name == 'log' else name}\left({', '.join(arguments)}\right)"
