"""Which rules belong to a label law: its rounding, its tolerances, its claims; rows of `catalogue/label_laws.csv`."""

from __future__ import annotations

import csv
from dataclasses import dataclass
from functools import cache

from energy.catalogue.records import System
from energy.catalogue.tables import FOLDER

#: what is said of a bomb figure, by whether the law lets one stand
BOMB_WORDS = {
    "yes": "the law admits a bomb method: the figure by that method may stand on the label",
    "no": "the law admits calculation only: a bomb figure is evidence about the label, not the label",
    "unknown": "the text at hand does not say whether a bomb figure may stand: it is evidence about the label",
}


@dataclass(frozen=True)
class LabelLaw:
    """What belongs to one law. Empty sets: no rule was found.

    per : what the law states its figures for ("100 g", "serving", "kg"). energy_from : "unrounded", "either" or
    "not_said": the grams the law's energy is computed from. rounding_status, tolerance_status : how it is known that the
    set is this law's, "" where the set is the law's own. feed : the feed law whose limits hold where the law's entry
    has no tolerance of its own.
    """

    law: str
    rounding_set: str = ""
    rounding_status: str = ""
    tolerance_set: str = ""
    tolerance_status: str = ""
    claim_set: str = ""
    per: str = "100 g"
    energy_from: str = "not_said"
    source_status: str = "derived"
    words: str = ""
    source: str = ""
    locator: str = ""

    @property
    def feed(self) -> str:
        """Id of a feed law, "" where the tolerance set is one of label_tolerances.csv."""
        return self.tolerance_set.removeprefix("feed:") if self.tolerance_set.startswith("feed:") else ""


@cache
def _laws() -> dict[str, LabelLaw]:
    with (FOLDER / "label_laws.csv").open(encoding="utf-8", newline="") as handle:
        return {row["law"]: LabelLaw(**row) for row in csv.DictReader(handle)}


def label_law(law: str) -> LabelLaw:
    """The rules of a law by its id; a law without a row has none."""
    return _laws().get(law, LabelLaw(law))


def declares(system: System) -> bool:
    """Whether a figure by this system may be declared: a law's sum of factors, or a law's formula for a feed."""
    if system.twin_of is not None or system.route != "composition":
        return False
    return bool(system.law and system.components) or system.id in _laws()


def bomb_words(system: System) -> str:
    """Whether a bomb figure may stand on the label of a law, in words."""
    return BOMB_WORDS[system.bomb_allowed]


@dataclass(frozen=True)
class Claim:
    """A claim whose condition is an energy: at most (or strictly below) so much, in `unit` per `per`."""

    claim_set: str
    claim: str
    unit: str
    per: str
    at_most: float
    strictly: bool
    source: str
    locator: str
    source_status: str

    def met(self, energy: float) -> bool:
        """Whether an energy meets the condition."""
        return energy < self.at_most if self.strictly else energy <= self.at_most


@cache
def claims(claim_set: str, per: str) -> tuple[Claim, ...]:
    """The claims of a set for one way of stating energy (100g, 100ml, serving)."""
    with (FOLDER / "label_claims.csv").open(encoding="utf-8", newline="") as handle:
        rows = [row for row in csv.DictReader(handle) if row["claim_set"] == claim_set and row["per"] == per]
    return tuple(
        Claim(row["claim_set"], row["claim"], row["unit"], row["per"], float(row["at_most"]), row["strictly"] == "yes",
              row["source"], row["locator"], row["source_status"])
        for row in rows
    )  # fmt: skip
