"""Headers: `name [unit basis]`, `name #2 [unit]`, `u(name) [unit]` -> what the column is."""

from __future__ import annotations

import difflib
import re
from dataclasses import dataclass

from energy.problems import Problem, UnitProblem
from energy.quantities import TEXT_COLUMNS, Quantity, dictionary, method_columns, normal_form, synonym_index
from energy.samples import BASES
from energy.units import Unit, parse_unit

#: words that mean different things to different laboratories, with what to write instead
AMBIGUOUS = {
    "carbohydrate": "'carbohydrate by difference', 'available carbohydrate', 'carbohydrate_total' (determined) or "
    "'available carbohydrate as monosaccharides'",
    "fibre": "'total dietary fibre' or 'crude fibre'",
    "energy": "'gross energy' (bomb) or 'declared energy'",
}
_AMBIGUOUS_WORDS = {
    "carbohydrate": "carbohydrate", "carbohydrates": "carbohydrate", "carbs": "carbohydrate", "cho": "carbohydrate",
    "total carbohydrate": "carbohydrate", "carbohydrate total": "carbohydrate", "fibre": "fibre", "fiber": "fibre",
    "energy": "energy", "kcal": "energy", "kj": "energy", "calories": "energy",
}  # fmt: skip
#: how laboratories spell bases when they stand in a column of their own
BASIS_WORDS = {"as is": "as_is", "as received": "as_is", "as fed": "as_is", "as sold": "as_is", "fresh": "as_is",
               "dry matter": "dry_matter", "dm": "dry_matter", "dry": "dry_matter", "as analysed": "as_analysed",
               "as analyzed": "as_analysed", "organic matter": "organic_matter", "om": "organic_matter",
               **{b.replace("_", " "): b for b in BASES}}  # fmt: skip


#: columns without a meaning whose name lets suppose that another one was meant
PERHAPS_TARGET = ("species", "animal", "eater", "use")


@dataclass(frozen=True)
class Meaning:
    """What a header is. kind: text, quantity, u or unused. problem: why it cannot be used yet."""

    header: str
    kind: str
    quantity: str | None = None
    replicate: int = 1
    unit: Unit | None = None
    basis: str | None = None
    implied_method: str | None = None
    problem: Problem | None = None

    @property
    def missing(self) -> str:
        """'unit', 'basis', 'name' or '' for the mapping form."""
        if self.problem is None:
            return ""
        return {"unit": "unit", "basis": "basis"}.get(str(self.problem.value), "name")


def basis_of(text: str) -> str | None:
    """A basis word -> one of BASES, None if it is none."""
    return BASIS_WORDS.get(normal_form(text))


def split_header(header: str) -> tuple[str, str | None, int, bool]:
    """(name, unit text or None, replicate, is it a u-column)."""
    name, unit = header.strip(), None
    match = re.fullmatch(r"(.*?)\s*\[(.*)\]\s*(?:#\s*(\d+))?", name, flags=re.DOTALL)
    number = None
    if match:
        name, unit, number = match[1], match[2].strip(), match[3]
    elif normal_form(name) not in synonym_index():
        match = re.fullmatch(r"(.*?)\s*\(([^()]*(?:\([^()]*\))?[^()]*)\)\s*", name)
        if match and not re.match(r"[uU]\(", name):
            name, unit = match[1], match[2].strip()
    match = re.fullmatch(r"(.*?)\s*#\s*(\d+)", name)
    if match:
        name, number = match[1], match[2]
    is_u = re.fullmatch(r"u\((.*)\)", name.strip())
    return (is_u[1] if is_u else name).strip(), unit, int(number or 1), is_u is not None


def read_header(header: str, where: str, units: dict[str, str], basis: str | None) -> Meaning:
    """The meaning of one header; a problem inside says what is missing."""
    name, unit_text, replicate, is_u = split_header(header)
    unit_text = units.get(header, unit_text)
    plain = normal_form(name)
    if plain.replace(" ", "_") in TEXT_COLUMNS or plain.replace(" ", "_") in method_columns():
        return Meaning(header, "text", plain.replace(" ", "_"))
    quantity = synonym_index().get(plain)
    if quantity is None:
        return _unknown(header, plain, unit_text, where)
    entry = dictionary()[quantity]
    implied = next((m for word, m in entry.header_implies.items() if normal_form(word) == plain), None)
    kind = "u" if is_u else "quantity"
    if unit_text is None and entry.dimension == "number":
        unit_text = "1"
    if unit_text is None or (not unit_text and entry.dimension != "number"):
        what = f"{entry.title} has no unit."
        cure = f"Write '{name} [unit basis]', for example '{name} [{_example(entry)}]'."
        return Meaning(header, kind, quantity, replicate, problem=_problem(header, where, what, cure, "unit"))
    try:
        unit = parse_unit(unit_text, entry.dimension)
        if unit.dimension == "volume_fraction" and quantity != "alcohol":
            raise UnitProblem(unit_text, "'% vol' is for alcohol only.", "Give g/100 g or g/100 ml.")
    except UnitProblem as found:
        bare = basis_of(unit_text)
        what = f"{entry.title} has no unit, only a basis." if bare else f"the unit '{unit_text}': {found.what}"
        plain_kinds = ("fraction", "number", "mass", "heat", "gas_yield")
        cure = f"Write '{name} [{_example(entry)}]'." if entry.dimension in plain_kinds else found.cure
        return Meaning(header, kind, quantity, replicate, basis=bare,
                       problem=_problem(header, where, what, cure, "unit"))  # fmt: skip
    stated = entry.basis == "stated"
    if not stated and not entry.own_matter and unit.basis not in (None, entry.basis):
        meant = {
            "none": "no basis",
            "as_is": "the material as it is",
            "as_analysed": "the powder as analysed",
            "dry_matter": "dry matter",
        }[entry.basis]
        what = f"{entry.title} is a figure of {meant}; on '{(unit.basis or '').replace('_', ' ')}' it would mean something else."
        cure = f"Give '{name} [{unit.display}]', or leave the column out."
        return Meaning(header, kind, quantity, replicate, problem=_problem(header, where, what, cure, "name"))
    if entry.own_matter and not is_u and (unit.basis or basis) != entry.basis:
        what = f"{entry.title} in {unit.display or unit_text}: it is not said that this is of its own dry matter."
        cure = (
            f"Write '{name} [{unit.display} DM]'; the moisture in the table is that of the feed and leads nowhere here."
        )
        return Meaning(header, kind, quantity, replicate, unit, problem=_problem(header, where, what, cure, "basis"))
    on = unit.basis or (basis if stated else None)
    if stated and on is None and not is_u:
        what = f"{entry.title} in {unit.display or unit_text}: the basis is not said."
        cure = f"Write '{name} [{unit_text} as is]' or '[{unit_text} DM]', or state one basis for all (--basis as_is)."
        return Meaning(header, kind, quantity, replicate, unit, problem=_problem(header, where, what, cure, "basis"))
    return Meaning(header, kind, quantity, replicate, unit, on, implied)


def _example(entry: Quantity) -> str:
    unit = {"energy": "kJ/100 g", "density": "g/ml", "fraction": "%", "number": "1", "mass": "kg", "heat": "kJ",
            "gas_yield": "ml/200 mg"}.get(entry.dimension, "g/100 g")  # fmt: skip
    return f"{unit} DM" if entry.own_matter else f"{unit} as is" if entry.basis == "stated" else unit


def _problem(header: str, where: str, what: str, cure: str, about: str) -> Problem:
    return Problem(what=what, cure=cure, where=where, row=None, column=header, value=about if about else None,
                   severity="structural")  # fmt: skip


def _unknown(header: str, plain: str, unit_text: str | None, where: str) -> Meaning:
    if plain in _AMBIGUOUS_WORDS:
        word = _AMBIGUOUS_WORDS[plain]
        cure = f"Say which is meant: {AMBIGUOUS[word]}."
        return Meaning(
            header, "quantity", problem=_problem(header, where, f"'{header}' can mean several things.", cure, "name")
        )
    if unit_text is None:
        return Meaning(header, "unused")
    near = difflib.get_close_matches(plain, synonym_index(), n=3, cutoff=0.6)
    cure = (
        f"Did you mean {', '.join(repr(n) for n in near)}?"
        if near
        else "See the names in the README, or drop its unit to keep it as a note."
    )
    return Meaning(
        header, "quantity", problem=_problem(header, where, "this name is not in the dictionary.", cure, "name")
    )
