"""Expressions in measured columns, written as one piece of numpy that runs over chunks of rows small enough for cache."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from energy import algebra
from energy.algebra import Node
from energy.quantities import dictionary
from energy.resolve import Parameter, Resolver
from energy.samples import Samples

CHUNK = 16_384
PARTS = ("difference", "measurement", "heats", "convention")

_FUNCTIONS: dict[str, Any] = {
    name: getattr(np, name) for name in ("exp", "log", "sqrt", "minimum", "maximum", "where", "power")
}


def compile_roots(
    roots: Mapping[tuple[str, int], Node], pairs: Sequence[tuple[int, int, int]]
) -> tuple[Callable[[list[np.ndarray], list[np.ndarray]], None], tuple[str, ...], tuple[tuple[str, int], ...]]:
    """One numpy function for all roots. pairs: (pair, row of the bomb system, row of the composition system)."""
    inputs = tuple(sorted(set().union(*(algebra.names(n) for n in roots.values()))))
    variables = {name: f"v{k}" for k, name in enumerate(inputs)}
    source = algebra.Source(roots.values(), variables)
    place: dict[tuple[str, int], int] = {}
    for key in [k for k in roots if k[0] != "at_own"] + [(kind, p) for p, _, _ in pairs for kind in PARTS]:
        place[key] = len(place)
    lines: list[str] = []
    for key, node in roots.items():
        text = source.text(node)
        lines.extend(source.lines)
        source.lines.clear()
        lines.append(f"own{key[1]} = {text}" if key[0] == "at_own" else f"out[{place[key]}][...] = {text}")
    for p, b, c in pairs:
        bomb, composition = f"out[{place['value', b]}]", f"out[{place['value', c]}]"
        at_heats = f"out[{place['at_heats', p]}]"
        lines += [
            f"out[{place['difference', p]}][...] = {bomb} - {composition}",
            f"out[{place['measurement', p]}][...] = {bomb} - {at_heats}",
            f"out[{place['heats', p]}][...] = {at_heats} - own{p}",
            f"out[{place['convention', p]}][...] = own{p} - {composition}",
        ]
    body = ["def run(v, out):", *(f"    {variables[n]} = v[{k}]" for k, n in enumerate(inputs))]
    body += [f"    {line}" for line in lines] or ["    pass"]
    space: dict[str, Any] = {}
    # our own text: registered names, numbers and the functions above, nothing else can be in it
    exec(compile("\n".join(body), "<systems>", "exec"), {"__builtins__": {}, **_FUNCTIONS}, space)
    return space["run"], inputs, tuple(place)


def leaf(samples: Samples, name: str) -> np.ndarray | None:
    """The array behind a name: a column, a column filled with zeros, or a standard uncertainty."""
    if name.startswith(("@", "V@")):
        return None
    if name.startswith("U:"):
        column = name[2:].removesuffix("?")
        array = samples.u.get(column)
        if array is None:
            array = np.full(len(samples), np.nan)
        return _filled(samples, "U:" + column, array, dictionary()[column].absent_u) if name.endswith("?") else array
    if name.endswith("?"):
        column = name[:-1]
        return _filled(samples, column, samples.columns[column], 6.25 if column == "nitrogen_factor" else 0.0)
    return samples.columns[name]


def _filled(samples: Samples, key: str, array: np.ndarray, fill: float) -> np.ndarray:
    """The column with `fill` where it is empty; made once per batch."""
    memo: dict[str, np.ndarray] = samples.memo.setdefault("filled", {})
    if key not in memo:
        empty = np.isnan(array)
        memo[key] = np.where(empty, fill, array) if empty.any() else array
    return memo[key]


def take(
    column: np.ndarray | None, name: str, parameters: Mapping[str, Parameter], here: Any, codes: np.ndarray | None
) -> np.ndarray:
    if column is not None:
        return column[here]
    assert codes is not None
    parameter = parameters[name.removeprefix("V")]
    return np.take(parameter.variances if name.startswith("V") else parameter.values, codes[here])


@dataclass(frozen=True)
class Program:
    """Compiled expressions in measured columns, for rows of one signature."""

    call: Callable[[list[np.ndarray], list[np.ndarray]], None]
    inputs: tuple[str, ...]
    outputs: tuple[Any, ...]
    parameters: Mapping[str, Parameter]

    def run(self, samples: Samples, rows: np.ndarray | None, out: Mapping[Any, np.ndarray]) -> None:
        """Fill out[key] ((n,) arrays of the whole batch) in the rows given; rows None = all of them."""
        leaves, codes = [leaf(samples, name) for name in self.inputs], samples.memo.get("group_codes")
        count = len(samples) if rows is None else len(rows)
        for low in range(0, count, CHUNK):
            high = min(low + CHUNK, count)
            here: Any = slice(low, high) if rows is None else rows[low:high]
            taken = [take(column, name, self.parameters, here, codes)
                     for column, name in zip(leaves, self.inputs, strict=True)]  # fmt: skip
            if rows is None:
                self.call(taken, [out[key][here] for key in self.outputs])
                continue
            made = [np.empty(high - low) for _ in self.outputs]
            self.call(taken, made)
            for key, array in zip(self.outputs, made, strict=True):
                out[key][here] = array


def compiled(roots: Mapping[Any, Node], resolver: Resolver) -> Program:
    """A program for expressions the resolver made; keys are pairs (kind, name or number)."""
    call, inputs, outputs = compile_roots(roots, [])
    return Program(call, inputs, outputs, dict(resolver.parameters))


def values_of(samples: Samples, resolver: Resolver, nodes: Sequence[Node], rows: np.ndarray) -> np.ndarray:
    """(nodes, len(rows)): expressions in measured columns, for rows of the resolver's own signature."""
    program = compiled({("value", k): node for k, node in enumerate(nodes)}, resolver)
    leaves, codes = [leaf(samples, name) for name in program.inputs], samples.memo.get("group_codes")
    out = np.empty((len(nodes), len(rows)))
    for low in range(0, len(rows), CHUNK):
        here = rows[low : low + CHUNK]
        program.call([take(column, name, program.parameters, here, codes)
                      for column, name in zip(leaves, program.inputs, strict=True)],
                     [line[low : low + CHUNK] for line in out])  # fmt: skip
    return out
