"""One dry matter for silages: what left the oven with the water is put back, on both routes alike.

Oven drying of a silage drives off acids and alcohols, so that its dry matter is too low and amounts per kg of dry
matter too high. Where the table says `form` grass_silage or maize_silage and `moisture_method` oven, the published
correction is applied to every amount of the feed, whatever basis it stands on. The matter put back counts as
nitrogen-free extract in the composition and, at the same heat, in the gross energy of the dried sample that was burned.
Digestible, metabolizable and net energy gain the same: they are the gross energy less what was measured in faeces,
urine, gas and heat, and these losses only change their denominator. Digestibilities and what is measured on faeces,
excreta or another diet stand as given.
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
#: what the matter put back is part of, with what a kg of it brings
GAINS = {
    **dict.fromkeys(("gross_energy", "digestible_energy", "metabolizable_energy", "net_energy"), HEAT),
    **dict.fromkeys(("nitrogen_free_extract", "carbohydrate_by_difference", "nonstructural_carbohydrate", "organic_matter",
                     "digestible_nitrogen_free_extract", "digestible_organic_matter"), 1.0),
}  # fmt: skip
#: losses of energy per mass of feed: of the energies, only what is named here or in GAINS is per mass of this feed
LOSSES = ("faecal_energy", "urinary_energy", "methane_energy", "heat_increment", "heat_production")


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
        if methods[i] in KEEP:
            continue
        if methods[i] != "oven":
            _tell_method(samples, i, entry["title"], methods[i])
            continue
        if np.isnan(dry[i]):
            _tell(samples, i, f"the dry matter of {entry['title']} is not given, so that the loss of volatiles in the oven cannot be "
                  "corrected; amounts per kg of dry matter are taken as they stand.",
                  "Add dry matter [%] or moisture [%].")  # fmt: skip
            continue
        corrected = 0.01 * entry["constant"] + entry["slope"] * dry[i]
        factor[i], added[i] = dry[i] / corrected, corrected - dry[i]
        _tell(samples, i, f"oven dry matter of {entry['title']} corrected for volatiles from {100 * dry[i]:.2f} to "
              f"{100 * corrected:.2f} % ({entry['constant']} + {entry['slope']} x, {entry['source']}; recalled). Amounts and "
              "energies per kg of dry matter are per kg of the corrected one; the volatiles count on both routes as "
              "nitrogen-free extract. Digestibilities stand as given.",
              "Nothing to mend, if the moisture was determined in an oven.")  # fmt: skip
    if added.any():
        _apply(samples, dry, factor, added)


def _given(samples: Samples, name: str) -> np.ndarray:
    return samples.columns.get(name, np.full(len(samples), np.nan))


def _dry_matter(samples: Samples) -> np.ndarray:
    """(n,) dry matter as the oven gave it, row by row from what the row states: dry matter, moisture or the powder."""
    powder = _given(samples, "preparation_yield") * (1 - _given(samples, "residual_moisture"))
    dry = _given(samples, "dry_matter")
    for other in (1 - _given(samples, "moisture"), powder):
        dry = np.where(np.isnan(dry), other, dry)
    return dry


def _apply(samples: Samples, dry: np.ndarray, factor: np.ndarray, added: np.ndarray) -> None:
    """Put the matter back in place. dry, added: kg per kg as is; factor: oven dry matter over the corrected one."""
    on_basis = _scale_and_gain(samples, dry, factor, added)
    for name, basis in samples.basis.items():
        of_feed = dictionary()[name].dimension == "mass_fraction"
        if of_feed or name in GAINS or name in LOSSES:
            scale, gain = (np.choose(basis, [pair[k] for pair in on_basis]) for k in (0, 1))
            _rescale(samples, name, scale, GAINS.get(name, 0.0) * gain)
    if "gas_production" in samples.columns:
        _rescale(samples, "gas_production", factor, np.zeros(len(samples)))
    only_powder = np.isnan(_given(samples, "dry_matter")) & np.isnan(_given(samples, "moisture"))
    back = np.where(only_powder, added / (1 - _given(samples, "residual_moisture")), 0.0)
    for name, change in (("dry_matter", added), ("moisture", -added), ("preparation_yield", back)):
        if name in samples.columns:
            samples.columns[name] = samples.columns[name] + change


def _scale_and_gain(
    samples: Samples, dry: np.ndarray, factor: np.ndarray, added: np.ndarray
) -> list[tuple[np.ndarray, np.ndarray]]:
    """Per basis, in the order of BASES: what a value is multiplied by, and the matter put back per kg of the basis."""
    solids = 1 - _given(samples, "residual_moisture")  # of the powder, which lost its volatiles as well
    ash = _dry_ash(samples, dry, solids)
    left = 1 - factor * ash  # organic matter per kg of the corrected dry matter
    found = [(np.ones_like(dry), added), (factor, (1 - factor) * solids), (factor, 1 - factor),
             (factor * (1 - ash) / left, (1 - factor) / left)]  # fmt: skip
    return [(np.where(np.isnan(s), 1.0, s), np.where(np.isnan(g), 0.0, g)) for s, g in found]


def _dry_ash(samples: Samples, dry: np.ndarray, solids: np.ndarray) -> np.ndarray:
    """(n,) ash per kg of oven dry matter; NaN where it is not known."""
    basis = samples.basis.get("ash")
    if basis is None:
        return np.full(len(samples), np.nan)
    per = np.select([basis == BASIS_CODE[b] for b in ("as_is", "as_analysed", "dry_matter")],
                    [dry, solids, np.ones_like(dry)], np.nan)  # fmt: skip
    return np.asarray(samples.columns["ash"] / per)


def _rescale(samples: Samples, name: str, scale: np.ndarray, gain: np.ndarray) -> None:
    samples.columns[name] = samples.columns[name] * scale + gain
    if name in samples.u:
        samples.u[name] = samples.u[name] * scale


def _tell_method(samples: Samples, i: int, title: str, method: str | None) -> None:
    if method:
        _tell(samples, i, f"the dry matter of {title} was determined by {method.replace('_', ' ')}, for which no correction of "
              "volatiles is known here; it is taken as it stands.",
              "With moisture_method oven the loss is corrected; toluene and karl_fischer lose nothing.")  # fmt: skip
        return
    _tell(samples, i, f"the dry matter of {title} depends on how it was dried, and no method is stated.",
          "Fill in moisture_method (oven, toluene, karl_fischer); with oven the loss of volatiles is corrected.")  # fmt: skip


def _tell(samples: Samples, i: int, what: str, cure: str) -> None:
    row = None if samples.rows is None else int(samples.rows[i])
    samples.problems.append(
        Problem(what, cure, samples.source, row, "dry_matter", None, "warning", str(samples.ids[i]))
    )
