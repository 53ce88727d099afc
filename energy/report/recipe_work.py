"""Products from recipes as tables for a screen: what goes in and comes out, what they hold, and their labels."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from energy.assessment import demo_paths
from energy.declare import Declared
from energy.intake import read_samples
from energy.quantities import DISPLAY_SCALE, dictionary
from energy.recipe import Mixed, mix
from energy.recipe_table import read_recipes
from energy.report import label_work
from energy.rounding import text_of

if TYPE_CHECKING:
    import pandas as pd


def demo() -> tuple[bytes, bytes]:
    """The invented recipes and ingredients."""
    folder: Path = demo_paths()[0].parent
    return (folder / "recipe_products.csv").read_bytes(), (folder / "recipe_ingredients.csv").read_bytes()


def made(recipes: bytes, ingredients: bytes, recipes_name: str, ingredients_name: str) -> Mixed:
    """Products of two tables. Raises StructuralProblems with everything that is wrong in them."""
    return mix(
        read_recipes(recipes, name=recipes_name), read_samples(ingredients, target="human", name=ingredients_name)
    )


def balance(m: Mixed) -> pd.DataFrame:
    """Mass balance as people read it, g per 100 g of what goes in."""
    table = m.balance()
    for name in table.columns[1:6]:
        table[name] = [f"{x + 0.0:.1f}" for x in table[name]]
    return table


def composition(m: Mixed) -> pd.DataFrame:
    """Components of 100 g of each product with u; low to high where an ingredient lies below its limit."""
    import pandas as pd

    rows = []
    for p, product in enumerate(m.recipes.products):
        for c, values in m.samples.columns.items():
            entry = dictionary()[c]
            scale = DISPLAY_SCALE[entry.dimension]
            low, high = m.low.columns[c][p] / scale, m.high.columns[c][p] / scale
            u = m.samples.u[c][p] / scale
            rows.append({
                "product": str(product), "holds": entry.title,
                "per 100 g": f"{values[p] / scale:.4g}" + (" MJ/kg" if entry.dimension == "energy" else " g"),
                "u": f"{u:.2g}" if np.isfinite(u) else "",
                "low to high": f"{low:.4g} to {high:.4g}" if high - low > 1e-9 else "",
            })  # fmt: skip
    return pd.DataFrame(rows)


def brings(m: Mixed, product: str) -> pd.DataFrame:
    """What each ingredient brings to 100 g of a product, and where its figure is from."""
    lines = m.lines()
    lines = lines[lines["product"] == product]
    return lines.assign(
        component=[dictionary()[c].title for c in lines["component"]],
        **{name: [f"{x:.4g}" for x in lines[name]] for name in ("share", "content", "brings")},
    ).rename(
        columns={
            "share": "share, %",
            "content": "g per 100 g of it",
            "brings": "g per 100 g of product",
            "origin": "figure is",
        }
    )


def labels(m: Mixed, law: str, **wishes: Any) -> pd.DataFrame:
    """The figures to print for each product under a law, at the low, the middle and the high composition."""
    import pandas as pd

    found = {name: label_work.judge(batch, "human", law, **wishes)
             for name, batch in (("low", m.low), ("middle", m.samples), ("high", m.high))}  # fmt: skip
    rows = []
    for k, d in enumerate(found["middle"]):
        if d.law.by_group:  # a product has no food group: each ingredient counts by the factors of its own
            rows += _by_ingredient(m, d)
            continue
        for p, product in enumerate(m.recipes.products):
            row = {"product": str(product), "law": d.law.title}
            for unit in ("kJ", "kcal"):
                texts = [
                    found[name][k].text(unit, p) if unit in d.computed else "" for name in ("low", "middle", "high")
                ]
                row[f"to print, {unit}"] = texts[1]
                row[f"low to high, {unit}"] = "" if texts[0] == texts[2] else f"{texts[0]} to {texts[2]}"
            first = d.energy.leading
            row["the sum"] = d.sum_words(first, p) if np.isfinite(d.computed[first][p]) else ""
            rows.append(row)
    return pd.DataFrame(rows).fillna("")


def _by_ingredient(m: Mixed, d: Declared) -> list[dict[str, str]]:
    value, u = m.energy_of(d.law)
    unit, size = ("kJ", 100.0) if d.energy.leading == "kJ" else ("kcal", 100 / 4.184)
    rows = []
    for p, product in enumerate(m.recipes.products):
        figure = value[p] * size * d.amount[p]
        known = np.isfinite(figure)
        text = text_of(d.rules.rounding_set, f"energy_{unit}", float(figure)) if known else ""
        told = (f"sum over the ingredients, each by its own group's factors: {figure:.5g} {unit}, u {u[p] * size * d.amount[p]:.2g}" if known else
                "an ingredient has no food group, or fat came or went in cooking")  # fmt: skip
        rows.append({"product": str(product), "law": d.law.title, f"to print, {unit}": text, "the sum": told})
    return rows
