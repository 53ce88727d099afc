"""The composition of products from their recipes: shares times ingredients, with cooking yield and moisture loss.

Per kg of what goes in, a component is the sum of share times content. Cooking takes water away (or brings it in), and
fat where the moisture loss is given besides the yield: what the water does not account for is fat that dripped off or was
taken up (the yield method with separate factors for water and fat, as food composition tables use it; common practice, no
source). Everything else stays, and stands in a smaller or larger mass: divided by the yield.

Energies by specific factors are not those of one food group for the whole product: `energy_of` sums the ingredients' own.
"""

from __future__ import annotations

import difflib
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from energy.catalogue.records import System
from energy.display import basis_factor, quantity_figures
from energy.evaluate import MISSING, evaluate
from energy.problems import Problem, StructuralProblems
from energy.quantities import dictionary
from energy.recipe_table import Recipes
from energy.samples import Samples

if TYPE_CHECKING:
    import pandas as pd

#: components of a product, in the order shown; each only where an ingredient gives it
COMPONENTS = (
    "moisture", "crude_protein", "crude_fat", "ash", "carbohydrate_total", "available_carbohydrate",
    "carbohydrate_by_difference", "total_dietary_fibre", "sugars", "starch", "polyols", "erythritol", "organic_acids",
    "alcohol", "salatrim", "crude_fibre",
)  # fmt: skip
#: a component that an ingredient may lack: it is then counted as none, and told
MAY_BE_ABSENT = (
    "total_dietary_fibre", "sugars", "starch", "polyols", "erythritol", "organic_acids", "alcohol", "salatrim", "crude_fibre",
)  # fmt: skip
#: what a law or a balance cannot do without
ESSENTIAL = ("crude_protein", "crude_fat")
BOUNDS = ("low", "middle", "high")


@dataclass
class Mixed:
    """p products made from q ingredients.

    samples : the products, as is, with u; censored values at half their limit. low, high : the same with every censored
    value at nothing and at its limit. shares : (p, q) kg per kg of what goes in. made, water_lost, fat_lost : (p,) kg per
    kg of what goes in; water and fat gained are negative. assumed : what was counted as none, in words.
    """

    recipes: Recipes
    ingredients: Samples
    samples: Samples
    low: Samples
    high: Samples
    shares: np.ndarray
    made: np.ndarray
    water_lost: np.ndarray
    fat_lost: np.ndarray
    problems: list[Problem] = field(default_factory=list)
    assumed: list[str] = field(default_factory=list)

    def balance(self) -> pd.DataFrame:
        """Mass balance per product, g per 100 g of what goes in; `components` is the sum of what was determined in it."""
        import pandas as pd

        columns = self.samples.columns
        parts = [c for c in ("moisture", "crude_protein", "crude_fat", "ash", "available_carbohydrate", "total_dietary_fibre")
                 if c in columns]  # fmt: skip
        return pd.DataFrame(
            {
                "product": self.recipes.products,
                "goes in": 100 * self.shares.sum(axis=1),
                "water lost": 100 * self.water_lost,
                "fat lost": 100 * self.fat_lost,
                "comes out": 100 * self.made,
                "components of 100 g product": 100 * np.sum([columns[c] for c in parts], axis=0),
                "counted in it": ", ".join(dictionary()[c].title for c in parts),
            }
        )

    def lines(self) -> pd.DataFrame:
        """Every product, ingredient and component: share, content, what it brings per 100 g of product, its origin."""
        import pandas as pd

        rows = []
        origin = self.ingredients.text.get("origin", np.full(len(self.ingredients), None, dtype=object))
        for p, q in zip(*np.nonzero(self.shares), strict=True):
            for c in self.samples.columns:
                if c not in COMPONENTS:
                    continue
                content = self._contents[c][0][q]
                rows.append({
                    "product": self.recipes.products[p], "ingredient": self.ingredients.ids[q], "component": c,
                    "share": 100 * self.shares[p, q], "content": 100 * content,
                    "brings": 100 * self.shares[p, q] * content / self.made[p], "origin": origin[q] or "not said",
                })  # fmt: skip
        return pd.DataFrame(rows)

    _contents: dict[str, tuple[np.ndarray, np.ndarray]] = field(default_factory=dict, repr=False)

    def energy_of(self, system: System) -> tuple[np.ndarray, np.ndarray]:
        """(p,) energy by a system as the sum over ingredients, each by the factors of its own group, and its u; MJ/kg as is.

        NaN where an ingredient of the product has no figure. What cooking takes off as fat is taken off by the system's
        own figure only through `samples`: here nothing but water may be lost, else NaN.
        """
        blocks = evaluate(self.ingredients, [system])
        value = np.where(blocks.status[0] < MISSING, blocks.value[0], np.nan) * basis_factor(
            self.ingredients, blocks.basis, "as_is"
        )
        u = blocks.u[0] * basis_factor(self.ingredients, blocks.basis, "as_is")
        # water and salt have no food group, and no energy by any
        bears = (
            np.sum([x for c, (x, _) in self._contents.items() if c not in ("moisture", "ash", "gross_energy")], axis=0)
            > 0
        )
        value, u = np.where(bears, value, 0.0), np.where(bears, u, 0.0)
        used = self.shares > 0
        lacking = (used & np.isnan(value)).any(axis=1) | (np.abs(self.fat_lost) > 1e-12)
        total = self.shares @ np.nan_to_num(value) / self.made
        spread = np.sqrt(self.shares**2 @ np.nan_to_num(u) ** 2) / self.made
        return np.where(lacking, np.nan, total), np.where(lacking, np.nan, spread)


def mix(recipes: Recipes, ingredients: Samples, target: str | None = "human") -> Mixed:
    """Compose products. Raises StructuralProblems where an ingredient has no composition or no dry matter basis fits."""
    shares = _matrix(recipes, ingredients)
    problems = list(recipes.problems)
    contents, assumed = _contents(ingredients, shares, recipes, problems)
    made, water, fat = _cooked(recipes)
    middle = _composed(contents, shares, made, water, fat)
    bounds = {}
    for k, bound in ((0.0, "low"), (2.0, "high")):
        at = {c: (np.where(_censored(ingredients, c), k * v, v), u) for c, (v, u) in contents.items()}
        bounds[bound] = _composed(at, shares, made, water, fat)
    u = {c: _u(contents[c][1], shares, made, recipes.u_yield, middle[c], c) for c in middle}
    for c, values in middle.items():
        for p in np.flatnonzero(values < -1e-9).tolist():
            problems.append(Problem(
                f"{recipes.products[p]} would hold {100 * values[p]:.3g} % of {dictionary()[c].title}: more is lost than goes in.",
                "Mend the cooking yield or the moisture loss.", recipes.source, severity="cell"))  # fmt: skip
    bad = np.any([values < -1e-9 for values in middle.values()], axis=0)
    made_of = {"low": bounds["low"], "middle": middle, "high": bounds["high"]}
    batches = {
        name: Samples.from_arrays({c: np.where(bad, np.nan, np.maximum(v, 0.0)) for c, v in columns.items()}, u=u,
                                  ids=recipes.products, target=target,
                                  text={"origin": np.full(len(recipes), "calculated", dtype=object)})
        for name, columns in made_of.items()
    }  # fmt: skip
    found = Mixed(recipes, ingredients, batches["middle"], batches["low"], batches["high"], shares, made, water, fat, problems,
                  assumed, contents)  # fmt: skip
    found.samples.problems = list(problems)
    return found


def _matrix(recipes: Recipes, ingredients: Samples) -> np.ndarray:
    place = {str(i): q for q, i in enumerate(ingredients.ids)}
    problems = []
    for k, name in enumerate(recipes.ingredient.tolist()):
        if name not in place:
            near = difflib.get_close_matches(name, place, n=2, cutoff=0.6)
            problems.append(Problem("the ingredient has no row in the table of compositions.",
                                    f"Did you mean {' or '.join(near)}?" if near else "Add it there, under this very name.",
                                    recipes.source, int(recipes.rows[k]), "ingredient", name, "structural"))  # fmt: skip
    if problems:
        raise StructuralProblems(problems)
    shares = np.zeros((len(recipes), len(ingredients)))
    np.add.at(shares, (recipes.product, np.array([place[n] for n in recipes.ingredient.tolist()])), recipes.share)
    return shares


def _censored(ingredients: Samples, column: str) -> np.ndarray:
    found = ingredients.censored.get(column)
    return np.zeros(len(ingredients), dtype=bool) if found is None else found


def _contents(
    ingredients: Samples, shares: np.ndarray, recipes: Recipes, problems: list[Problem]
) -> tuple[dict[str, tuple[np.ndarray, np.ndarray]], list[str]]:
    """component -> (q,) content as is and its u; components some used ingredient lacks are dropped or counted as none."""
    given = set(ingredients.columns)
    wanted = [c for c in COMPONENTS if c in given or (c == "moisture" and "dry_matter" in given)
              or (c == "crude_protein" and "nitrogen" in given)]  # fmt: skip
    used = shares.sum(axis=0) > 0
    found: dict[str, tuple[np.ndarray, np.ndarray]] = {}
    assumed = []
    for c in (*wanted, *(["gross_energy"] if "gross_energy" in given else [])):
        # a product has no nitrogen factor of one food: its protein is the ingredients' nitrogen times 6.25
        value, u = quantity_figures(ingredients, "nitrogen" if c == "crude_protein" else c)
        if c == "crude_protein":
            value, u = 6.25 * value, 6.25 * u
        factor = (
            np.ones(len(ingredients)) if c == "moisture" else basis_factor(ingredients, _basis(ingredients), "as_is")
        )
        value, u = value * factor, np.nan_to_num(u * factor)
        gone = used & np.isnan(value)
        names = ", ".join(str(i) for i in ingredients.ids[gone][:5]) + (" and more" if gone.sum() > 5 else "")
        title = dictionary()[c].title
        if not gone.any():
            found[c] = (value, u)
        elif c in MAY_BE_ABSENT:
            assumed.append(f"{title} is not given for {names}: counted as none in what they go into")
            found[c] = (np.nan_to_num(value), u)
        else:
            what = f"{title} is not known as is for {names}, so no product has it."
            severity = "cell" if c in ESSENTIAL or c == "moisture" else "warning"
            problems.append(Problem(what, "Give it, or the moisture that brings it to as is.", ingredients.source, column=title,
                                    severity=severity))  # fmt: skip
    for c in ESSENTIAL:
        if c not in found and not any(dictionary()[c].title in p.what for p in problems):
            problems.append(
                Problem(f"no ingredient gives {dictionary()[c].title}.", "Add its column.", ingredients.source)
            )
    if not any(c in found for c in COMPONENTS):
        raise StructuralProblems([*problems, Problem("the ingredients have no composition that can be mixed.",
                                                     "Give moisture, protein, fat and the rest per 100 g as is.", ingredients.source,
                                                     severity="structural")])  # fmt: skip
    return found, assumed


def _basis(ingredients: Samples) -> str:
    from energy.catalogue.reader import systems

    return evaluate(ingredients, [systems()["gross_energy_measured"]]).basis


def _cooked(recipes: Recipes) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """(p,) kg of product, water lost and fat lost per kg of what goes in; nothing is lost where nothing is said."""
    made, lost = recipes.cooking_yield.copy(), recipes.moisture_loss.copy()
    made = np.where(np.isnan(made), 1 - np.nan_to_num(lost), made)
    lost = np.where(np.isnan(lost), 1 - made, lost)
    fat = 1 - made - lost
    return made, lost, np.where(np.abs(fat) < 1e-12, 0.0, fat)


def _composed(
    contents: dict[str, tuple[np.ndarray, np.ndarray]],
    shares: np.ndarray,
    made: np.ndarray,
    water: np.ndarray,
    fat: np.ndarray,
) -> dict[str, np.ndarray]:
    found = {}
    for c, (value, _) in contents.items():
        if c == "gross_energy" and np.any(fat):
            continue  # the heat of the fat that came or went is not measured
        into = shares @ np.where(np.isnan(value), 0.0, value)
        taken = {"moisture": water, "crude_fat": fat}.get(c, 0.0)
        found[c] = (into - taken) / made
    return found


def _u(
    u: np.ndarray, shares: np.ndarray, made: np.ndarray, u_yield: np.ndarray, value: np.ndarray, column: str
) -> np.ndarray:
    """(p,) of sums of independent ingredients, and of the yield: d(x/y)/dy = -x/y, and for water (1 - x)/y besides."""
    own = shares**2 @ u**2 / made**2
    # moisture = (into - 1 + made)/made: its slope with respect to the yield is (1 - moisture)/made
    slope = (1 - value) / made if column == "moisture" else value / made
    return np.asarray(np.sqrt(own + (slope * np.nan_to_num(u_yield)) ** 2))
