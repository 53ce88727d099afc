"""Conversion between as is, as analysed, dry matter and organic matter, as algebra.

The conversion is part of a formula, so that moisture's uncertainty goes where it belongs. Amounts are per mass of
material: x per kg as is = x per kg dry matter * dry matter; x per kg powder = x per kg dry matter * (1 - residual).
"""

from __future__ import annotations

from energy.algebra import Node, divide, multiply, subtract


def dry_part(basis: str, dry_matter: Node | None, residual: Node | None, ash: Node | None) -> Node | None:
    """kg dry matter per kg of the basis; None if what it needs is not known. ash is per kg dry matter."""
    if basis == "dry_matter":
        return 1.0
    if basis == "as_is":
        return dry_matter
    if basis == "as_analysed":
        return None if residual is None else subtract(1.0, residual)
    if basis == "organic_matter":
        return None if ash is None else divide(1.0, subtract(1.0, ash))
    raise ValueError(f"basis '{basis}' is not known")


def convert(value: Node, source: Node | None, goal: Node | None) -> Node | None:
    """A value per kg of one basis, per kg of another; source and goal are their dry parts."""
    if source == goal and source is not None:
        return value
    if source is None or goal is None:
        return None
    return multiply(divide(value, source), goal)
