"""Values of one sample that say the same thing twice and do not agree: told, never mended."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from energy.catalogue.derived import derived_rules
from energy.display import quantity_figures
from energy.problems import Problem
from energy.quantities import dictionary
from energy.resolve import rule_choices, working_basis
from energy.samples import Samples

#: protein per nitrogen of any food or feed in use lies between these (FAO/WHO 1973: cabbage 4.8, almonds 5.18, milk 6.38), with 2 %
#: for the rounding of both figures
LOWEST, HIGHEST = 4.8 * 0.98, 6.38 * 1.02
#: crude protein of a feed is N x 6.25 by definition
FEED = 6.25
#: by definition what the other determinations leave
LEFT = ("nitrogen_free_extract", "carbohydrate_by_difference", "nonstructural_carbohydrate", "organic_matter")
#: beside the methods (twice the standard uncertainty of what is left), rounding may open this much, kg/kg: five figures
#: printed to 0.1 g per 100 g
ROUNDING = 5 * 0.0005
BASIS_WORDS = {"as_is": "as is", "dry_matter": "of dry matter"}


def find(samples: Samples, feed: bool) -> list[Problem]:
    """Values that contradict what others of the same sample say. feed : crude protein is N x 6.25 by definition."""
    twice = [p for name in LEFT for p in _not_what_is_left(samples, name)]
    return _protein_and_nitrogen(samples, feed) + twice + _less_than_nothing(samples, feed)


def _less_than_nothing(samples: Samples, feed: bool) -> list[Problem]:
    """Determinations that add up to more than the whole, so that less than nothing is left as carbohydrate."""
    name = "nitrogen_free_extract" if feed else "carbohydrate_by_difference"
    if name in samples.columns:
        return []
    rules, choice = derived_rules()[name], rule_choices(samples)[name]
    by_difference = np.isin(choice, [k for k, rule in enumerate(rules, 1) if "solids" in rule.requires])
    if not by_difference.any():
        return []
    left, u = quantity_figures(samples, name)
    with np.errstate(invalid="ignore"):
        off = by_difference & (left < -(2 * np.nan_to_num(u) + ROUNDING))
    basis = BASIS_WORDS[working_basis(samples, rule_choices(samples))]
    title = dictionary()[name].title
    return [
        Problem(f"the determinations add up to {100 * (1 - left[i]):.4g} g per 100 g {basis}: {100 * -left[i]:.2g} g less than nothing is "
                f"left as {title}. It is computed with as it stands.", "Check the determinations and their bases.", samples.source,
                None if samples.rows is None else int(samples.rows[i]), name, f"{100 * left[i]:.4g}", "warning", str(samples.ids[i]))
        for i in np.flatnonzero(off).tolist()
    ]  # fmt: skip


def _not_what_is_left(samples: Samples, name: str) -> list[Problem]:
    """A value by difference that is not the difference, by more than rounding and the methods can open."""
    if name not in samples.columns:
        return []
    rest = _without(samples, name)
    rules, choice = derived_rules()[name], rule_choices(rest)[name]
    by_difference = np.isin(choice, [k for k, rule in enumerate(rules, 1) if "solids" in rule.requires])
    if not by_difference.any():
        return []
    given, left, u = quantity_figures(samples, name)[0], *quantity_figures(rest, name)
    with np.errstate(invalid="ignore"):
        off = by_difference & (np.abs(given - left) > 2 * np.nan_to_num(u) + ROUNDING)
    words = " and ".join(dict.fromkeys(rule.words for k, rule in enumerate(rules, 1) if (choice[off] == k).any()))
    basis = BASIS_WORDS[working_basis(samples, rule_choices(samples))]
    title = dictionary()[name].title
    return [
        Problem(f"{title} is given as {100 * given[i]:.4g} g per 100 g {basis}, but {words} is {100 * left[i]:.4g}: "
                f"{100 * abs(given[i] - left[i]):.2g} too {'much' if given[i] > left[i] else 'little'}. The value given is used.",
                "Check the determinations and their bases, or leave the column out: it is found by difference.",
                samples.source, None if samples.rows is None else int(samples.rows[i]), name, f"{100 * given[i]:.4g}",
                "warning", str(samples.ids[i]))
        for i in np.flatnonzero(off).tolist()
    ]  # fmt: skip


def _without(samples: Samples, name: str) -> Samples:
    """The samples as if a quantity had not been given; protein as given, where it is, and not by its nitrogen."""
    columns = {q: values for q, values in samples.columns.items() if q != name}
    if {"crude_protein", "nitrogen"} <= columns.keys():
        columns["nitrogen"] = np.where(np.isnan(columns["crude_protein"]), columns["nitrogen"], np.nan)
    return replace(samples, columns=columns, voided={q: v for q, v in samples.voided.items() if q in columns}, memo={})


def _protein_and_nitrogen(samples: Samples, feed: bool) -> list[Problem]:
    """Crude protein beside a nitrogen that is not its own."""
    if not {"crude_protein", "nitrogen"} <= set(samples.columns):
        return []
    protein, nitrogen = samples.columns["crude_protein"], samples.columns["nitrogen"]
    alike = samples.basis["crude_protein"] == samples.basis["nitrogen"]
    with np.errstate(divide="ignore", invalid="ignore"):
        factor = protein / nitrogen
    low, high = (0.98 * FEED, 1.02 * FEED) if feed else (LOWEST, HIGHEST)
    stated = samples.columns.get("nitrogen_factor")
    if stated is not None:
        known = ~np.isnan(stated)
        low, high = (np.where(known, k * stated, x) for k, x in ((0.98, low), (1.02, high)))  # type: ignore[assignment]
    wrong = alike & np.isfinite(factor) & ((factor < low) | (factor > high))
    meant = "6.25, by definition" if feed else "between 4.8 and 6.38, or what the column nitrogen_factor says"
    return [
        Problem(f"{dictionary()['crude_protein'].title} is {factor[i]:.2f} times the nitrogen given beside it; it should be "
                f"{meant}. The nitrogen is used.", "Mend or leave out the one that is wrong.", samples.source,
                None if samples.rows is None else int(samples.rows[i]), "crude_protein", f"{factor[i]:.4g}", "warning",
                str(samples.ids[i]))
        for i in np.flatnonzero(wrong).tolist()
    ]  # fmt: skip
