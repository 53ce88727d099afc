"""One dry matter for silages: what left the oven with the water is put back, on both routes alike.

Oven drying of a silage drives off acids and alcohols, so that its dry matter is too low and amounts per kg of dry
matter too high. Where the table says `form` grass_silage or maize_silage and `moisture_method` oven, the published
correction is applied; the matter put back counts as nitrogen-free extract in the composition and, at the same heat,
in the gross energy of the dried sample that was burned.
"""

from __future__ import annotations

import numpy as np

from energy.catalogue.tables import silage_corrections
from energy.problems import Problem
from energy.quantities import dictionary
from energy.samples import BASIS_CODE, Samples

#: heat of the volatile matter put back, MJ/kg: that of the nitrogen-free extract (GfE 1995), as in the composition
HEAT = 17.5
#: methods that keep the volatiles in the dry matter
KEEP = ("karl_fischer", "toluene")


def correct(samples: Samples) -> None:
    """Correct the dry matter of oven-dried silages in place and say so; ask for the method where none is stated."""
    forms = samples.text.get("form")
    if forms is None:
        return
    known = silage_corrections()
    methods = samples.text.get("moisture_method", np.full(len(samples), None, dtype=object))
    dry = _dry_matter(samples)
    factor, added = np.ones(len(samples)), np.zeros(len(samples))
    for i in np.flatnonzero([f in known for f in forms]).tolist():
        entry = known[forms[i]]
        if np.isnan(dry[i]) or methods[i] in KEEP:
            continue
        if methods[i] != "oven":
            _tell(samples, i, f"the dry matter of {entry['title']} depends on how it was dried, and no method is stated.",
                  "Fill in moisture_method (oven, toluene, karl_fischer); with oven the loss of volatiles is corrected.")  # fmt: skip
            continue
        corrected = 0.01 * entry["constant"] + entry["slope"] * dry[i]
        factor[i], added[i] = dry[i] / corrected, corrected - dry[i]
        _tell(samples, i, f"oven dry matter of {entry['title']} corrected for volatiles from {100 * dry[i]:.2f} to "
              f"{100 * corrected:.2f} % ({entry['constant']} + {entry['slope']} x, {entry['source']}; recalled). Amounts per "
              "kg of dry matter are per kg of the corrected one; the volatiles count on both routes as nitrogen-free "
              "extract.", "Nothing to mend, if the moisture was determined in an oven.")  # fmt: skip
    if added.any():
        _apply(samples, dry, factor, added)


def _dry_matter(samples: Samples) -> np.ndarray:
    if "dry_matter" in samples.columns:
        return samples.columns["dry_matter"].copy()
    return 1 - samples.columns.get("moisture", np.full(len(samples), np.nan))


def _apply(samples: Samples, dry: np.ndarray, factor: np.ndarray, added: np.ndarray) -> None:
    for name in ("dry_matter", "moisture"):
        if name in samples.columns:
            samples.columns[name] = samples.columns[name] + (added if name == "dry_matter" else -added)
    for name, basis in samples.basis.items():
        on_dry = basis == BASIS_CODE["dry_matter"]
        if dictionary()[name].dimension == "mass_fraction":
            samples.columns[name] = np.where(on_dry, samples.columns[name] * factor, samples.columns[name])
        elif name == "gross_energy":
            back = np.where(on_dry, HEAT * (1 - factor), HEAT * added)
            samples.columns[name] = np.where(on_dry, samples.columns[name] * factor, samples.columns[name]) + back


def _tell(samples: Samples, i: int, what: str, cure: str) -> None:
    row = None if samples.rows is None else int(samples.rows[i])
    samples.problems.append(
        Problem(what, cure, samples.source, row, "dry_matter", None, "warning", str(samples.ids[i]))
    )
