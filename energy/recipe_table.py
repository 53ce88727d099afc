"""A table of recipes -> shares, yields and every problem: one row per product and ingredient.

Columns: product, ingredient, amount [g, kg, % ...]; once per product, on any of its rows: cooking yield [%] (mass of the
product per mass of what went in), moisture loss [%] (water lost per mass of what went in), u(cooking yield) [%].
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from energy import cells
from energy.headers import split_header
from energy.problems import Problem, StructuralProblems
from energy.tabular import RawTable, read_table

#: heading without unit -> column
NAMES = {
    "product": "product", "recipe": "product", "dish": "product",
    "ingredient": "ingredient", "component": "ingredient",
    "amount": "amount", "share": "amount", "quantity": "amount", "mass": "amount",
    "cooking yield": "cooking_yield", "yield": "cooking_yield",
    "moisture loss": "moisture_loss", "water loss": "moisture_loss",
    "note": "note",
}  # fmt: skip
UNITS = {
    "amount": {"g": 1e-3, "kg": 1.0, "mg": 1e-6, "t": 1e3, "%": 0.01, "g/100 g": 0.01, "g/kg": 1e-3, "oz": 0.028349523125,
               "lb": 0.45359237},
    "cooking_yield": {"%": 0.01, "kg/kg": 1.0, "1": 1.0},
    "moisture_loss": {"%": 0.01, "kg/kg": 1.0, "1": 1.0},
}  # fmt: skip
#: units in which amounts are shares of the product's ingredients
SHARES = ("%", "g/100 g", "g/kg")
#: shares may add up to one within this, as rounded recipes do
SUM_ROOM = 0.005
#: a yield beyond this is taken for a slip (boiled pasta and rice lie between 2 and 3; common practice, no source)
HIGHEST_YIELD = 4.0


@dataclass
class Recipes:
    """p products, k lines.

    products : (p,) ids. product, share : (k,) index of the product, kg of the ingredient per kg of what goes in.
    ingredient : (k,) ids. cooking_yield, u_yield, moisture_loss : (p,) kg per kg of what goes in, NaN where not given.
    rows : (k,) as the user counts.
    """

    products: np.ndarray
    product: np.ndarray
    ingredient: np.ndarray
    share: np.ndarray
    cooking_yield: np.ndarray
    u_yield: np.ndarray
    moisture_loss: np.ndarray
    rows: np.ndarray
    problems: list[Problem] = field(default_factory=list)
    source: str = ""

    def __len__(self) -> int:
        return len(self.products)


def read_recipes(
    table: Any, units: Mapping[str, str] | None = None, decimal: str | None = None, name: str | None = None
) -> Recipes:
    """Read a table of recipes from a path, bytes (with `name`) or DataFrame.

    units : header -> unit, where the header gives none. Raises StructuralProblems with everything that is wrong.
    """
    raw = read_table(table, name)
    return _Reader(raw, dict(units or {}), decimal).read()


class _Reader:
    def __init__(self, raw: RawTable, units: dict[str, str], decimal: str | None):
        self.raw, self.units, self.decimal = raw, units, decimal
        self.problems: list[Problem] = []

    def tell(self, what: str, cure: str, line: int | None = None, column: str | None = None, value: str | None = None,
             severity: str = "structural") -> None:  # fmt: skip
        row = None if line is None else int(self.raw.rows[line])
        self.problems.append(Problem(what, cure, self.raw.where, row, column, value, severity))

    def read(self) -> Recipes:
        place = self._headers()
        if self.problems:
            raise StructuralProblems(self.problems)
        texts = {
            c: np.array([str(t).strip() for t in self.raw.cells[:, k]], dtype=object) for c, (k, _) in place.items()
        }
        comma = self._comma(texts)
        numbers = {c: self._numbers(c, texts[c], place[c][1], comma) for c in texts if c in UNITS or c == "u_yield"}
        for column in ("product", "ingredient"):
            for i in np.flatnonzero(texts[column] == "").tolist():
                self.tell(f"the {column} is not named.", "Write it on every row.", i, column)
        if self.problems:
            raise StructuralProblems(self.problems)
        products, first = np.unique(texts["product"].astype(str), return_index=True)
        products = products[np.argsort(first)]
        index = {p: j for j, p in enumerate(products.tolist())}
        product = np.array([index[str(p)] for p in texts["product"]])
        share = self._shares(products, product, texts["ingredient"], numbers["amount"], place["amount"][1])
        once = {
            c: self._once(c, product, len(products), numbers.get(c))
            for c in ("cooking_yield", "moisture_loss", "u_yield")
        }
        self._check_yield(products, product, once)
        if any(p.severity == "structural" for p in self.problems):
            raise StructuralProblems(self.problems)
        return Recipes(
            products.astype(object), product, texts["ingredient"], share, once["cooking_yield"], once["u_yield"],
            once["moisture_loss"], self.raw.rows, self.problems, self.raw.where,
        )  # fmt: skip

    def _headers(self) -> dict[str, tuple[int, float]]:
        """column -> (place, size of its unit)."""
        found: dict[str, tuple[int, float]] = {}
        for k, header in enumerate(self.raw.headers):
            plain, unit, _, is_u = split_header(header)
            column = NAMES.get(" ".join(plain.lower().replace("_", " ").split()))
            if column is None or column == "note":
                if column is None:
                    self.tell("the column is not known and not used.", f"Known: {', '.join(dict.fromkeys(NAMES))}.", None, header,
                              None, "warning")  # fmt: skip
                continue
            if is_u:
                if column != "cooking_yield":
                    self.tell("an uncertainty is taken for the cooking yield only.", "Remove the column.", None, header)
                    continue
                column = "u_yield"
            if column in found:
                self.tell(f"there are two columns for {column.replace('_', ' ')}.", "Keep one.", None, header)
                continue
            size = 1.0
            known = UNITS.get("cooking_yield" if column == "u_yield" else column)
            if known is not None:
                written = (unit or self.units.get(header) or "").strip()
                if written not in known:
                    self.tell("the header gives no unit." if not written else f"'{written}' is not a unit of this column.",
                              f"Write one of: {', '.join(known)}; for example '{plain} [{next(iter(known))}]'.", None, header)  # fmt: skip
                    continue
                size = known[written]
                if column == "amount":
                    self.as_shares = written in SHARES
            found[column] = (k, size)
        for column in ("product", "ingredient", "amount"):
            if column not in found and not any(p.column and column in p.column.lower() for p in self.problems):
                self.tell(f"there is no column '{column}'.", "A recipe table needs: product, ingredient, amount [g].")
        self.problems = [p for p in self.problems if p.severity != "warning" or len(found) >= 3]
        return found if not any(p.severity == "structural" for p in self.problems) else self._stop()

    def _stop(self) -> dict[str, tuple[int, float]]:
        raise StructuralProblems([p for p in self.problems if p.severity == "structural"])

    def _comma(self, texts: dict[str, np.ndarray]) -> bool:
        if self.decimal is not None or self.raw.typed:
            return self.decimal == "comma"
        flat = np.concatenate([t for c, t in texts.items() if c in UNITS or c == "u_yield"])
        found = cells.decimal_of(flat[flat != ""], self.raw.separator)
        if found == "ambiguous":
            example = next(str(t) for t in flat if "," in t)
            self.tell(f"'{example}' can be read with a decimal comma or a thousands comma.",
                      "Declare it: decimal='comma' or 'point'.", value=example)  # fmt: skip
        return found == "comma"

    def _numbers(self, column: str, texts: np.ndarray, size: float, comma: bool) -> np.ndarray:
        found = cells.numbers(texts, comma)
        for i, (what, cure) in found.bad.items():
            self.tell(what, cure, i, column, str(texts[i]))
        for i in np.flatnonzero(found.censored).tolist():
            self.tell(
                "a recipe needs a number here, not a limit.", "Write the amount that is used.", i, column, str(texts[i])
            )
        for i in np.flatnonzero(found.value < 0).tolist():
            self.tell(
                "it is negative.",
                "Write the amount that goes in; what is lost belongs to the yield.",
                i,
                column,
                str(texts[i]),
            )
        if column == "amount":
            for i in np.flatnonzero(texts == "").tolist():
                self.tell("the amount is missing.", "Write how much goes in; 0 if none.", i, column)
        return found.value * size

    def _shares(self, products: np.ndarray, product: np.ndarray, ingredient: np.ndarray, amount: np.ndarray, size: float) -> np.ndarray:  # fmt: skip
        total = np.bincount(product, weights=amount, minlength=len(products))
        for j in np.flatnonzero(~(total > 0)).tolist():
            self.tell(f"the amounts of '{products[j]}' add up to nothing.", "Give at least one amount.")
        if self.as_shares:
            for j in np.flatnonzero(np.abs(total - 1) > SUM_ROOM).tolist():
                self.tell(f"the shares of '{products[j]}' add up to {100 * total[j]:.4g} %, not to 100.",
                          "Mend them, or give amounts in g.")  # fmt: skip
        pairs: dict[tuple[int, str], int] = {}
        for i, key in enumerate(zip(product.tolist(), ingredient.tolist(), strict=True)):
            if key in pairs:
                self.tell(f"'{ingredient[i]}' stands twice in '{products[product[i]]}' (also row {self.raw.rows[pairs[key]]}).",
                          "Add the two up into one row.", i, "ingredient", str(ingredient[i]))  # fmt: skip
            pairs.setdefault(key, i)
        return np.asarray(amount / np.where(total > 0, total, 1.0)[product])

    def _once(self, column: str, product: np.ndarray, count: int, given: np.ndarray | None) -> np.ndarray:
        """One value per product, wherever among its rows it stands."""
        found = np.full(count, np.nan)
        if given is None:
            return found
        for i in np.flatnonzero(~np.isnan(given)).tolist():
            j = product[i]
            if not np.isnan(found[j]) and found[j] != given[i]:
                self.tell(f"another {column.replace('_', ' ')} is given for the same product.",
                          "Write it once per product, or alike on all its rows.", i, column)  # fmt: skip
            found[j] = given[i]
        return found

    def _check_yield(self, products: np.ndarray, product: np.ndarray, once: dict[str, np.ndarray]) -> None:
        made, lost = once["cooking_yield"], once["moisture_loss"]
        for j, name in enumerate(products.tolist()):
            line = int(np.flatnonzero(product == j)[0])
            if made[j] == 0 or made[j] > HIGHEST_YIELD:
                self.tell(f"a cooking yield of {100 * made[j]:.4g} % for '{name}' cannot be.",
                          "Give the mass of the product per 100 g of what went in.", line, "cooking yield")  # fmt: skip
            if lost[j] >= 1:
                self.tell(f"a moisture loss of {100 * lost[j]:.4g} % for '{name}' leaves nothing.",
                          "Give the water lost per 100 g of what went in.", line, "moisture loss")  # fmt: skip
