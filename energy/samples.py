"""Samples: clean numbers of a batch, as stated, with everything needed to compute from them.

A `Samples` holds plain float64 arrays, one per quantity, in internal units (kg/kg, MJ/kg, g/ml) and *on the
basis each value was stated on*; conversion to one basis is algebra done later, so that its uncertainty is
not lost.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from energy.problems import Problem
from energy.quantities import dictionary

if TYPE_CHECKING:
    import pandas as pd

BASES = ("as_is", "as_analysed", "dry_matter", "organic_matter")
BASIS_CODE = {name: code for code, name in enumerate(BASES)}

#: where a standard uncertainty comes from, worst last
U_SOURCES = ("none", "given", "replicates", "default")


@dataclass
class Samples:
    """A batch of n samples.

    ids : n texts, unique. columns : quantity -> (n,) float64, NaN where there is no value.
    u : quantity -> (n,) standard uncertainty in the column's unit, NaN where unknown.
    u_source : quantity -> (n,) int8 index into U_SOURCES.
    freedom : quantity -> (n,) degrees of freedom of u; only columns in which they are few somewhere (inf elsewhere).
    basis : quantity -> (n,) int8 index into BASES (only quantities whose basis the table states).
    text : text or method column -> (n,) object array of str or None.
    voided : quantity -> (n,) bool, True where a cell was unusable (the value is NaN because of a problem).
    censored : quantity -> (n,) bool, True where the cell said '<x' (the value is x/2).
    replicates : quantity -> (n,) int number of values behind the mean.
    target : default target of the batch, None when the column `target` or nothing says it.
    rows : (n,) row in the file of each sample's first line, as the user counts.
    """

    ids: np.ndarray
    columns: dict[str, np.ndarray]
    u: dict[str, np.ndarray] = field(default_factory=dict)
    u_source: dict[str, np.ndarray] = field(default_factory=dict)
    freedom: dict[str, np.ndarray] = field(default_factory=dict)
    basis: dict[str, np.ndarray] = field(default_factory=dict)
    text: dict[str, np.ndarray] = field(default_factory=dict)
    voided: dict[str, np.ndarray] = field(default_factory=dict)
    censored: dict[str, np.ndarray] = field(default_factory=dict)
    replicates: dict[str, np.ndarray] = field(default_factory=dict)
    target: str | None = None
    problems: list[Problem] = field(default_factory=list)
    rows: np.ndarray | None = None
    source: str = ""
    memo: dict[str, Any] = field(default_factory=dict, repr=False)

    def __len__(self) -> int:
        return len(self.ids)

    @classmethod
    def from_arrays(
        cls,
        columns: Mapping[str, Any],
        *,
        basis: str | Mapping[str, str] = "as_is",
        u: Mapping[str, Any] | None = None,
        ids: Any = None,
        text: Mapping[str, Any] | None = None,
        target: str | None = None,
    ) -> Samples:
        """Samples from arrays already in internal units (kg/kg, MJ/kg); defaults of u are filled in.

        basis : one of BASES for all, or quantity -> basis. For programs; people use read_samples.
        """
        arrays = {name: np.ascontiguousarray(values, dtype=float) for name, values in columns.items()}
        n = len(next(iter(arrays.values())))
        known = dictionary()
        stated = [name for name in arrays if known[name].basis == "stated"]
        named = {name: basis if isinstance(basis, str) else basis.get(name, "as_is") for name in stated}
        given = {name: np.broadcast_to(np.asarray(v, dtype=float), n).copy() for name, v in (u or {}).items()}
        samples = cls(
            ids=np.array([str(i) for i in (ids if ids is not None else range(1, n + 1))], dtype=object),
            columns=arrays,
            u=given,
            u_source={name: np.full(n, 1, dtype=np.int8) for name in given},
            basis={name: np.full(n, BASIS_CODE[b], dtype=np.int8) for name, b in named.items()},
            text={name: np.asarray(v, dtype=object) for name, v in (text or {}).items()},
            target=target,
        )
        samples.fill_default_u()
        return samples

    def take(self, rows: np.ndarray) -> Samples:
        """The samples of some rows ((k,) indices), as a batch of their own; problems of the other rows are left out."""

        def some(arrays: Mapping[str, np.ndarray]) -> dict[str, np.ndarray]:
            return {name: values[rows] for name, values in arrays.items()}

        ids = self.ids[rows]
        mine = set(ids)
        declared = self.memo.get("declared")
        return Samples(
            ids=ids,
            columns=some(self.columns),
            u=some(self.u),
            u_source=some(self.u_source),
            freedom=some(self.freedom),
            basis=some(self.basis),
            text=some(self.text),
            voided=some(self.voided),
            censored=some(self.censored),
            replicates=some(self.replicates),
            target=self.target,
            problems=[p for p in self.problems if p.sample_id is None or p.sample_id in mine],
            rows=None if self.rows is None else self.rows[rows],
            source=self.source,
            memo={"declared": some(declared)} if declared else {},
        )

    def fill_default_u(self) -> None:
        """Put the dictionary's default where a value has no standard uncertainty, and mark it 'default'."""
        for name, values in self.columns.items():
            default = dictionary()[name].default_u
            u = self.u.setdefault(name, np.full(len(self), np.nan))
            source = self.u_source.setdefault(name, np.zeros(len(self), dtype=np.int8))
            need = np.isnan(u) & ~np.isnan(values)
            if default is not None and need.any():
                u[need] = np.hypot(default[0], default[1] * np.abs(values[need]))
                source[need] = U_SOURCES.index("default")

    @cached_property
    def frame(self) -> pd.DataFrame:
        """The clean values as a table: text columns, then each quantity in internal units as stated."""
        import pandas as pd

        table: dict[str, Any] = {"sample_id": self.ids}
        table.update({name: values for name, values in self.text.items() if name != "sample_id"})
        for name, values in self.columns.items():
            table[name] = values
            if name in self.basis:
                table[f"{name}_basis"] = np.array(BASES, dtype=object)[self.basis[name]]
        return pd.DataFrame(table)


def by_near_infrared(samples: Samples) -> np.ndarray:
    """(n,) bool: the composition was predicted from a near-infrared spectrum, so its constituents share one measurement."""
    if "origin" not in samples.text:
        return np.zeros(len(samples), dtype=bool)
    words = ("nir", "nirs", "near infrared", "near-infrared", "near_infrared")
    return np.array([str(o).strip().lower() in words for o in samples.text["origin"]], dtype=bool)
