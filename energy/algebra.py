"""Exact algebra on small expression trees: sums, products, quotients, slopes, and numpy source text.

A node is a float, a name (str) or a tuple:

    ("lin", c0, ((atom, k), ...))   c0 + k*atom + ...     every sum and every multiple is one of these
    ("*", a, b)  ("/", a, b)        of two nodes without constant factors
    ("**", a, p)                    p a float
    ("exp", a)  ("log", a)  ("sqrt", a)  ("min", a, b)  ("max", a, b)
    ("where", "<", left, right, a, b)

Nodes are built by the functions here only, which fold constants, gather like terms and cancel equal factors,
so that equal expressions are equal tuples. Being tuples they can be hashed, and shared parts are computed once.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from typing import Any

Node = Any  # float | str | tuple; a recursive alias costs mypy more than it gives

COMPARISONS = ("<", "<=", ">", ">=")
FUNCTIONS = ("exp", "log", "sqrt")


def is_constant(node: Node) -> bool:
    """True for a plain number."""
    return isinstance(node, float)


def _sort_key(item: tuple[Node, float]) -> tuple[bool, str]:
    atom = item[0]
    return (not isinstance(atom, str), atom if isinstance(atom, str) else repr(atom))


def _linear(constant: float, coefficients: dict[Node, float]) -> Node:
    terms = tuple(sorted(((a, k) for a, k in coefficients.items() if k != 0.0), key=_sort_key))
    if not terms:
        return constant
    if constant == 0.0 and len(terms) == 1 and terms[0][1] == 1.0:
        return terms[0][0]
    return ("lin", constant, terms)


def _as_linear(node: Node) -> tuple[float, tuple[tuple[Node, float], ...]]:
    if isinstance(node, float):
        return node, ()
    if isinstance(node, tuple) and node[0] == "lin":
        return node[1], node[2]
    return 0.0, ((node, 1.0),)


def add(*nodes: Node) -> Node:
    """Sum of nodes."""
    constant = 0.0
    coefficients: dict[Node, float] = {}
    for node in nodes:
        c0, terms = _as_linear(node)
        constant += c0
        for atom, k in terms:
            coefficients[atom] = coefficients.get(atom, 0.0) + k
    return _linear(constant, coefficients)


def scale(k: float, node: Node) -> Node:
    """k times a node."""
    if k == 0.0:
        return 0.0
    c0, terms = _as_linear(node)
    return _linear(k * c0, {atom: k * c for atom, c in terms})


def subtract(a: Node, b: Node) -> Node:
    """a minus b."""
    return add(a, scale(-1.0, b))


def _split(node: Node) -> tuple[float, Node]:
    """(k, core) with node = k * core, for a node that is a plain multiple of one atom."""
    if isinstance(node, tuple) and node[0] == "lin" and node[1] == 0.0 and len(node[2]) == 1:
        atom, k = node[2][0]
        return k, atom
    return 1.0, node


def multiply(a: Node, b: Node) -> Node:
    """a times b."""
    if isinstance(a, float):
        return scale(a, b)
    if isinstance(b, float):
        return scale(b, a)
    k1, x = _split(a)
    k2, y = _split(b)
    if x == y:
        return scale(k1 * k2, power(x, 2.0))
    for first, second in ((x, y), (y, x)):
        if isinstance(first, tuple) and first[0] == "/" and first[2] == second:
            return scale(k1 * k2, first[1])
    left, right = sorted((x, y), key=lambda n: _sort_key((n, 1.0)))
    return scale(k1 * k2, ("*", left, right))


def divide(a: Node, b: Node) -> Node:
    """a over b; raises ZeroDivisionError for a constant zero."""
    if isinstance(b, float):
        return a / b if isinstance(a, float) else scale(1.0 / b, a)
    k2, y = _split(b)
    k1, x = _split(a)
    k = k1 / k2
    if x == y:
        return k
    if isinstance(x, tuple) and x[0] == "*" and y in x[1:]:
        return scale(k, x[2] if x[1] == y else x[1])
    if isinstance(x, float):
        return scale(k * x, ("/", 1.0, y))
    return scale(k, ("/", x, y))


def power(a: Node, p: float) -> Node:
    """a to a constant power; raises OverflowError or ValueError for impossible constants."""
    if p == 0.0:
        return 1.0
    if p == 1.0:
        return a
    if isinstance(a, float):
        value = a**p
        if isinstance(value, complex):
            raise ValueError("a negative number to a fractional power")
        return value
    return ("**", a, p)


def apply(function: str, *arguments: Node) -> Node:
    """exp, log, sqrt of one node; min, max of two."""
    if all(isinstance(x, float) for x in arguments):
        import math

        if function in ("min", "max"):
            return min(arguments) if function == "min" else max(arguments)
        return float(getattr(math, function)(arguments[0]))
    return (function, *arguments)


def where(comparison: str, left: Node, right: Node, a: Node, b: Node) -> Node:
    """a where `left comparison right` holds, else b."""
    if a == b:
        return a
    return ("where", comparison, left, right, a, b)


def names(node: Node) -> set[str]:
    """Every name that occurs in a node."""
    if isinstance(node, str):
        return {node}
    if isinstance(node, float):
        return set()
    found: set[str] = set()
    for child in children(node):
        found |= names(child)
    return found


def children(node: Node) -> list[Node]:
    """The nodes directly inside a tuple node."""
    if not isinstance(node, tuple):
        return []
    head = node[0]
    if head == "lin":
        return [atom for atom, _ in node[2]]
    if head == "**":
        return [node[1]]
    if head == "where":
        return list(node[2:])
    return list(node[1:])


def rebuild(node: Node, change: Callable[[Node], Node]) -> Node:
    """The node with every child replaced by change(child)."""
    if not isinstance(node, tuple):
        return node
    head = node[0]
    if head == "lin":
        return add(node[1], *(scale(k, change(atom)) for atom, k in node[2]))
    if head == "*":
        return multiply(change(node[1]), change(node[2]))
    if head == "/":
        return divide(change(node[1]), change(node[2]))
    if head == "**":
        return power(change(node[1]), node[2])
    if head == "where":
        return where(node[1], *(change(child) for child in node[2:]))
    return apply(head, *(change(child) for child in node[1:]))


def substitute(node: Node, values: Mapping[str, Node]) -> Node:
    """The node with names replaced by nodes."""
    if isinstance(node, str):
        return values.get(node, node)
    return rebuild(node, lambda child: substitute(child, values))


def slope(node: Node, name: str) -> Node:
    """Partial derivative of a node with respect to a name."""
    if isinstance(node, str):
        return 1.0 if node == name else 0.0
    if isinstance(node, float) or name not in names(node):
        return 0.0
    head = node[0]
    if head == "lin":
        return add(*(scale(k, slope(atom, name)) for atom, k in node[2]))
    if head == "*":
        _, a, b = node
        return add(multiply(slope(a, name), b), multiply(a, slope(b, name)))
    if head == "/":
        _, a, b = node
        return add(
            divide(slope(a, name), b),
            scale(-1.0, divide(multiply(a, slope(b, name)), power(b, 2.0))),
        )
    if head == "**":
        _, a, p = node
        return scale(p, multiply(power(a, p - 1.0), slope(a, name)))
    if head == "exp":
        return multiply(node, slope(node[1], name))
    if head == "log":
        return divide(slope(node[1], name), node[1])
    if head == "sqrt":
        return divide(slope(node[1], name), scale(2.0, node))
    if head in ("min", "max"):
        _, a, b = node
        return where("<" if head == "min" else ">", a, b, slope(a, name), slope(b, name))
    _, comparison, left, right, a, b = node
    return where(comparison, left, right, slope(a, name), slope(b, name))


def variance(node: Node, variance_of: Mapping[str, Node]) -> Node:
    """First-order variance (JCGM 100, eq. 10) for independent inputs: sum of slope**2 * variance."""
    terms = []
    for name in sorted(names(node) & set(variance_of)):
        terms.append(multiply(power(slope(node, name), 2.0), variance_of[name]))
    return add(*terms) if terms else 0.0


class Source:
    """Turns nodes into lines of Python that compute with numpy, each shared part once.

    Only names that were registered, numbers and numpy functions can appear in the text.
    """

    def __init__(self, roots: Iterable[Node], variables: Mapping[str, str]):
        self.variables = dict(variables)
        self.lines: list[str] = []
        self.known: dict[Node, str] = {}
        self.uses: dict[Node, int] = {}
        for root in roots:
            self._count(root)

    def _count(self, node: Node) -> None:
        if not isinstance(node, tuple):
            return
        self.uses[node] = self.uses.get(node, 0) + 1
        if self.uses[node] == 1:
            for child in children(node):
                self._count(child)

    def text(self, node: Node) -> str:
        """An expression for the node; lines it needs first are appended to `lines`."""
        if isinstance(node, float):
            return repr(node)
        if isinstance(node, str):
            return self.variables[node]
        if node in self.known:
            return self.known[node]
        expression = self._expression(node)
        if self.uses.get(node, 0) > 1:
            expression = self._store(node, expression)
        return expression

    def _store(self, node: Node, expression: str) -> str:
        name = f"t{len(self.known)}"
        self.lines.append(f"{name} = {expression}")
        self.known[node] = name
        return name

    def _expression(self, node: Node) -> str:
        head = node[0]
        if head == "lin":
            return self._linear(node)
        if head == "**":
            return self._power(node)
        if head == "where":
            _, comparison, left, right, a, b = node
            return f"where({self.text(left)} {comparison} {self.text(right)}, {self.text(a)}, {self.text(b)})"
        parts = [self.text(child) for child in node[1:]]
        if head in ("*", "/"):
            return f"({parts[0]} {head} {parts[1]})"
        return f"{ {'min': 'minimum', 'max': 'maximum'}.get(head, head) }({', '.join(parts)})"

    def _linear(self, node: Node) -> str:
        _, constant, terms = node
        pieces = []
        for atom, k in terms:
            text = self.text(atom)
            pieces.append(text if k == 1.0 else f"{k!r}*{text}")
        if constant != 0.0:
            pieces.append(repr(constant))
        return "(" + " + ".join(pieces) + ")"

    def _power(self, node: Node) -> str:
        _, base, p = node
        if p == 2.0 or p == 3.0:
            text = self.text(base)
            if not text.isidentifier():
                text = self._store(base, text)
            return "(" + "*".join([text] * int(p)) + ")"
        if p == 0.5:
            return f"sqrt({self.text(base)})"
        return f"power({self.text(base)}, {p!r})"
