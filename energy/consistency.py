"""Values of one sample that say the same thing twice and do not agree: told, never mended."""

from __future__ import annotations

import numpy as np

from energy.problems import Problem
from energy.quantities import dictionary
from energy.samples import Samples

#: protein per nitrogen of any food or feed in use lies between these (FAO/WHO 1973: cabbage 4.8, almonds 5.18, milk 6.38), with 2 %
#: for the rounding of both figures
LOWEST, HIGHEST = 4.8 * 0.98, 6.38 * 1.02
#: crude protein of a feed is N x 6.25 by definition
FEED = 6.25


def find(samples: Samples, feed: bool) -> list[Problem]:
    """Crude protein beside a nitrogen that is not its own. feed : the factor is 6.25 by definition."""
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
