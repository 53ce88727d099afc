"""What can go wrong, and how it is said.

Everything a user reads when something is wrong starts here: one `Problem` says where, what and how to
mend it. Exceptions carry their facts as attributes and write their sentence from them.

    EnergyError
    ├── UnitProblem          a unit text that cannot be read, or that would be misread
    ├── FormulaProblem       a formula that is refused
    ├── CatalogueProblem     an entry that breaks a rule of the catalogue
    ├── StructuralProblems   a table that cannot be used at all; carries every Problem found
    └── WrongUse             an argument that names nothing we have
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing wrong with what the user gave us.

    where : file, sheet or entry. row : row as the user counts it (the header is row 1), None for a whole
    column or file. column : header as written. value : cell as written. severity : "structural" stops
    everything, "cell" voids what depends on that cell, "warning" computes and tells.
    """

    what: str
    cure: str
    where: str = ""
    row: int | None = None
    column: str | None = None
    value: str | None = None
    severity: str = "cell"
    sample_id: str | None = None

    def place(self) -> str:
        """Where it is, in words."""
        parts = [self.where] if self.where else []
        if self.row is not None:
            parts.append(f"row {self.row}")
        if self.sample_id is not None:
            parts.append(f"sample {self.sample_id}")
        if self.column is not None:
            parts.append(f"column '{self.column}'")
        if self.value is not None:
            parts.append(f"value '{self.value}'")
        return ", ".join(parts)

    def __str__(self) -> str:
        place = self.place()
        return f"{place}: {self.what} {self.cure}" if place else f"{self.what} {self.cure}"


class EnergyError(Exception):
    """Parent of every error this package raises on purpose."""


class UnitProblem(EnergyError):
    """A unit text that is not understood, or that would be misread."""

    def __init__(self, text: str, what: str, cure: str):
        self.text, self.what, self.cure = text, what, cure
        super().__init__(f"unit '{text}': {what} {cure}")


class FormulaProblem(EnergyError):
    """A formula that is refused; `text` is cut to what can be shown."""

    def __init__(self, text: str, what: str, cure: str):
        self.text, self.what, self.cure = text[:120], what, cure
        super().__init__(f"formula '{self.text}': {what} {cure}")


class CatalogueProblem(EnergyError):
    """An entry of the catalogue, or of a house file, that breaks a rule."""

    def __init__(self, where: str, what: str, cure: str):
        self.where, self.what, self.cure = where, what, cure
        super().__init__(f"{where}: {what} {cure}")


class WrongUse(EnergyError):
    """An argument that names nothing we have; the cure lists what there is."""

    def __init__(self, what: str, cure: str):
        self.what, self.cure = what, cure
        super().__init__(f"{what} {cure}")


class StructuralProblems(EnergyError):
    """A table that cannot be used; every problem found is in `problems`."""

    def __init__(self, problems: Iterable[Problem]):
        self.problems = list(problems)
        lines = "\n".join(f"- {p}" for p in self.problems)
        count = len(self.problems)
        super().__init__(f"{count} problem{'s' if count != 1 else ''} in the table:\n{lines}")
