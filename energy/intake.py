"""A laboratory's table, wide or long, -> Samples, with every problem of the file found at once."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from energy import long
from energy.catalogue.records import TARGETS
from energy.headers import Meaning, basis_of, read_header
from energy.long import LongTable
from energy.problems import WrongUse
from energy.quantities import normal_form
from energy.samples import BASES, Samples
from energy.tabular import read_table
from energy.targets import target_slug, targets_like
from energy.wide import WideTable


def read_samples(
    table: Any,
    units: Mapping[str, str] | str | Path | None = None,
    basis: str | None = None,
    target: str | None = None,
    decimal: str | None = None,
    name: str | None = None,
) -> Samples:
    """Read a table.

    table : path (CSV, XLSX, Parquet), bytes (with `name`), or DataFrame. units : header -> "unit basis", or a TOML file
    of that. basis : one of BASES for headers that give a unit alone. decimal : "point", "comma" or None (found out,
    if unmistakable). Raises StructuralProblems with every problem that stops the file; lesser ones are in `.problems`.
    """
    raw = read_table(table, name)
    wanted = units_given(units)
    on = _basis(basis)
    if decimal not in (None, "point", "comma"):
        raise WrongUse(f"decimal = '{decimal}' is not known.", "Use 'point' or 'comma'.")
    target = target_slug(target)
    if target is not None and target not in TARGETS:
        raise WrongUse(f"The target '{target}' is not known.", targets_like(target))
    forms = {normal_form(h) for h in raw.headers}
    reader = LongTable(raw, wanted, on, decimal) if forms >= long.NEEDED else WideTable(raw, wanted, on, decimal)
    samples = reader.read()
    samples.target = target
    return samples


def inspect_table(
    table: Any, units: Mapping[str, str] | None = None, basis: str | None = None, name: str | None = None
) -> list[Meaning]:
    """The meaning of every header, for a form that asks for what is missing."""
    raw = read_table(table, name)
    return [read_header(h, raw.where, dict(units or {}), basis) for h in raw.headers]


def units_given(units: Mapping[str, str] | str | Path | None) -> dict[str, str]:
    """Header -> unit, from a mapping or a TOML file of such lines. Raises WrongUse."""
    if units is None or isinstance(units, Mapping):
        return dict(units or {})
    try:
        found = tomllib.loads(Path(units).read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as error:
        raise WrongUse(
            f"The units file '{units}' cannot be read ({error}).", 'Lines like: "protein" = "g/100 g as is".'
        ) from None
    return {str(k): str(v) for k, v in found.items()}


def _basis(text: str | None) -> str | None:
    if text is None or text in BASES:
        return text
    found = basis_of(text)
    if found is None:
        raise WrongUse(f"The basis '{text}' is not known.", f"One of: {', '.join(BASES)}.")
    return found
