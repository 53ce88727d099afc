"""Species and uses in people's spelling, and what to say of one that is not known."""

from __future__ import annotations

import difflib

from energy.catalogue.records import TARGETS
from energy.quantities import normal_form

#: what people call a species or use, and which of ours it may be
PEOPLE_SAY = {
    "pig": ["growing_pig", "sow"], "piglet": ["growing_pig"], "swine": ["growing_pig", "sow"], "chicken": ["poultry"], "hen": ["poultry"],
    "broiler": ["poultry"], "turkey": ["poultry"], "beef": ["cattle"], "ruminant": ["cattle", "dairy_cow", "sheep"],
    "people": ["human"], "food": ["human"], "pony": ["horse"], "lamb": ["sheep"], "salmon": ["fish"], "carp": ["fish"],
}  # fmt: skip


def target_slug(word: str | None) -> str | None:
    """'Growing pig' is growing_pig: capitals and spaces say nothing else."""
    if not word:
        return word
    slug = normal_form(word).replace(" ", "_")
    return slug if slug in TARGETS else word


def targets_like(word: str) -> str:
    """The cure for a species or use that is not known: those it may mean, else all."""
    near = PEOPLE_SAY.get(normal_form(word)) or [t for t in TARGETS if normal_form(word) in t.split("_")]
    near = near or difflib.get_close_matches(word, TARGETS, n=3, cutoff=0.6)
    return f"Did you mean {' or '.join(near)}?" if near else f"One of: {', '.join(TARGETS)}."
