"""How two routes agree over a batch, ready for a screen: points, limits, groups, and a slow drift."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from energy import agreement
from energy.agreement import GroupAgreement, LimitsOfAgreement
from energy.catalogue import tables
from energy.problems import WrongUse
from energy.robust import algorithm_a

if TYPE_CHECKING:
    import pandas as pd

    from energy.assessment import Assessment

PERCENT = "% of their mean"
#: points farther out than this many times the half width of the limits stand at the edge of the chart, marked
EDGE = 2.5
#: kinds with a colour of their own; the others share one
NAMED_KINDS = 5
OTHERS = "other kinds"
#: a chart holds about so many points beside those that stand out
DRAWN = 3_000
#: so many wild samples are named
NAMED_WILD = 10
#: fewest samples of a kind for a centre of its own, and of a batch for a drift. Ours
OWN_CENTRE, DRIFT_NEEDS = 5, 8
#: a longer batch is looked at in so many steps, each the median of its samples
STEPS = 400


@dataclass(frozen=True)
class Drift:
    """A slow change of bomb / composition along the batch.

    total : change from the first to the last sample, in %, by the median of all slopes (Theil and Sen), kinds brought to
    one centre; p : how probable as strong an order is by chance (Kendall). line : order and ratio of both ends.
    """

    total: float
    p: float
    centre: float
    line: pd.DataFrame

    @property
    def seen(self) -> bool:
        """More than chance, at 1 %: a batch is looked at often."""
        return self.p < 0.01


@dataclass(frozen=True)
class Panel:
    """What the panel shows. points : one row per sample with both figures; bands : the three lines with intervals."""

    points: pd.DataFrame
    unit: str
    limits: LimitsOfAgreement | None
    bands: pd.DataFrame
    kinds: list[str]
    drift: Drift | None
    groups: list[GroupAgreement] = field(default_factory=list)
    energy_unit: str = ""

    @property
    def short_unit(self) -> str:
        """The unit of the differences, for an axis."""
        return "%" if self.unit == PERCENT else self.unit

    @property
    def drawn(self) -> pd.DataFrame:
        """The points a chart holds: all that stand out, and of the others of a long table every so many."""
        step = -(-len(self.points) // DRAWN)
        keep = (np.arange(len(self.points)) % step == 0) | self.points["wild"].to_numpy(bool)
        return self.points[keep]


def kind_of_material(a: Assessment) -> np.ndarray:
    """(n,) what a sample is a kind of: its food group, else its form, else the species or use it is for."""
    unnamed = "no food group named" if a.target in ("human", "none") else a.target.replace("_", " ")
    found = np.full(len(a.samples), unnamed, dtype=object)
    titles = {slug: row["food_group"] for slug, row in tables.food_groups().items()}
    for column in ("form", "food_group"):
        words = a.samples.text.get(column)
        if words is not None:
            given = np.array([bool(w) and str(w) != "None" for w in words], dtype=bool)
            found[given] = [titles.get(str(w), str(w).replace("_", " ")) for w in words[given]]
    return found


def panel(a: Assessment, stage: str = "GE", percent: bool = True) -> Panel | None:
    """Bomb against composition at a stage, robust to a few wild samples. None with fewer than three complete samples.

    percent : differences in % of the mean of the two, else in the unit shown. Made once per assessment.
    """
    made: dict[tuple[str, bool], Panel | None] = vars(a).setdefault("_agreement_panels", {})
    if (stage, percent) not in made:
        made[stage, percent] = _panel(a, stage, percent)
    return made[stage, percent]


def _panel(a: Assessment, stage: str, percent: bool) -> Panel | None:
    import pandas as pd

    table = a.verdicts
    table = table[(table["stage"] == stage) & table["bomb"].notna() & table["composition"].notna()]
    table = table.drop_duplicates("sample_id")
    if len(table) < agreement.NEEDED:
        return None
    place = {str(identity): i for i, identity in enumerate(a.samples.ids)}
    rows = np.array([place[str(s)] for s in table["sample_id"]])
    bomb, composition = table["bomb"].to_numpy(float), table["composition"].to_numpy(float)
    mean = (bomb + composition) / 2
    batch = a.samples.text.get("batch")
    points = pd.DataFrame({
        "sample": table["sample_id"].to_numpy(), "name": table["food_name"].fillna("").to_numpy(),
        "kind": kind_of_material(a)[rows], "order": rows + 1,
        "batch": ["" if batch is None or batch[i] is None else str(batch[i]) for i in rows],
        "bomb": bomb, "composition": composition, "mean": mean, "ratio": 100 * bomb / composition,
        "difference": 100 * (bomb - composition) / mean if percent else bomb - composition,
    })  # fmt: skip
    points = points[np.isfinite(points["difference"]) & np.isfinite(points["ratio"])].reset_index(drop=True)
    if len(points) < agreement.NEEDED:
        return None
    difference = points["difference"].to_numpy(float)
    limits = _limits(points, difference, percent)
    points["wild"] = np.isin(np.arange(len(points)), agreement.wild_pairs(np.zeros(len(points)), difference))
    _to_the_edge(points, limits)
    counts = points["kind"].value_counts()
    named = [str(k) for k in counts.index[:NAMED_KINDS]]
    points["shown_kind"] = np.where(points["kind"].isin(named), points["kind"], OTHERS)
    energy_unit = f"{table['unit'].iloc[0]} {str(table['basis'].iloc[0]).replace('_', ' ')}"
    kinds = [*named, *([OTHERS] if len(counts) > NAMED_KINDS else [])]
    groups = agreement.by_group(points["composition"], points["bomb"], points["kind"].to_numpy(object))
    return Panel(points, PERCENT if percent else energy_unit, limits, _bands(limits), kinds, _drift(points), groups,
                 energy_unit)  # fmt: skip


def _limits(points: pd.DataFrame, difference: np.ndarray, percent: bool) -> LimitsOfAgreement:
    x, y = points["composition"].to_numpy(float), points["bomb"].to_numpy(float)
    if not percent:
        return agreement.limits_of_agreement(x, y, robust=True)
    # in per cent the pair is (mean - d / 2, mean + d / 2) with d in per cent: same difference, same mean
    half = difference / 2
    return agreement.limits_of_agreement(points["mean"] - half, points["mean"] + half, robust=True)


def _to_the_edge(points: pd.DataFrame, limits: LimitsOfAgreement) -> None:
    """Wild points stand at the edge of the chart, so that the others can be seen; `beyond` says on which side."""
    reach = EDGE * max(limits.upper - limits.bias, 1e-12)
    points["plotted"] = points["difference"].clip(limits.bias - reach, limits.bias + reach)
    points["beyond"] = _side(points["difference"] - points["plotted"])
    centre, spread = _centre(points["ratio"].to_numpy(float))
    reach = EDGE * 1.96 * max(spread, 1e-12)
    points["plotted_ratio"] = points["ratio"].clip(centre - reach, centre + reach)
    points["beyond_ratio"] = _side(points["ratio"] - points["plotted_ratio"])


def _side(cut: pd.Series[float]) -> np.ndarray:
    return np.select([cut > 0, cut < 0], ["above", "below"], "")


def _bands(limits: LimitsOfAgreement) -> pd.DataFrame:
    import pandas as pd

    return pd.DataFrame([
        {"what": "upper limit", "at": limits.upper, "low": limits.upper_interval[0], "high": limits.upper_interval[1]},
        {"what": "bias", "at": limits.bias, "low": limits.bias_interval[0], "high": limits.bias_interval[1]},
        {"what": "lower limit", "at": limits.lower, "low": limits.lower_interval[0], "high": limits.lower_interval[1]},
    ])  # fmt: skip


def _centre(values: np.ndarray) -> tuple[float, float]:
    found = algorithm_a(values)
    return found.centre, found.sd


def _drift(points: pd.DataFrame) -> Drift | None:
    """The batch's drift, each kind that is common enough brought to the batch's centre first."""
    import pandas as pd
    from scipy.stats import kendalltau, theilslopes

    if len(points) < DRIFT_NEEDS:
        return None
    ratio, order = points["ratio"].to_numpy(float), points["order"].to_numpy(float)
    centre, _ = _centre(ratio)
    level = ratio.copy()
    kinds = points["kind"].to_numpy(object)
    for kind, count in points["kind"].value_counts().items():
        if count >= OWN_CENTRE:
            level[kinds == kind] -= _centre(ratio[kinds == kind])[0] - centre
    if len(level) > STEPS:
        parts = np.array_split(np.arange(len(level)), STEPS)
        order, level = (np.array([np.median(v[p]) for p in parts]) for v in (order, level))
    if np.ptp(level) == 0:
        return None
    found = theilslopes(level, order)
    ends = np.array([order.min(), order.max()])
    line = pd.DataFrame({"order": ends, "ratio": found[1] + found[0] * ends})
    return Drift(float(found[0] * np.ptp(ends)), float(kendalltau(order, level).pvalue), centre, line)


def sentences(found: Panel) -> list[str]:
    """What the panel says, in words: bias and limits, wild samples by name, the lines, the concordance."""
    said = []
    if found.limits is not None:
        wild = found.points.loc[found.points["wild"], "sample"].astype(str).tolist()
        more = f" and {len(wild) - NAMED_WILD} more" if len(wild) > NAMED_WILD else ""
        named = (
            f" They are {', '.join(wild[:NAMED_WILD])}{more}."
            if len(wild) > 1
            else f" It is {wild[0]}."
            if wild
            else ""
        )
        said.append(f"Bomb less composition. {found.limits.sentence(found.unit)}{named}")
    whole = found.groups[0]
    lines = [line.sentence for line in (whole.passing_bablok, whole.deming) if line is not None]
    if lines:
        said.append(f"Lines of bomb (y) on composition (x), {found.energy_unit}. {' '.join(lines)}")
    if whole.concordance is not None:
        said.append(whole.concordance.sentence)
    return said


def drift_sentence(drift: Drift, n: int) -> str:
    """What the order of the batch says."""
    if not drift.seen:
        return f"No drift is seen along the {n} samples ({drift.total:+.1f} % from first to last, p {drift.p:.2g})."
    return (f"Measured over computed drifts by {drift.total:+.1f} % from the first to the last of {n} samples (p {drift.p:.2g})."
            " No single sample need be wrong: look at the moisture and the fat method, and at the heat capacity of the bomb,"
            " over that time.")  # fmt: skip


GROUP_COLUMNS = ("kind of material", "samples", "bias", "95 of 100 lie between", "wild", "slope", "concordance", "note")


def group_table(found: Panel) -> pd.DataFrame:
    """One line per kind of material that has three samples, texts; differences in the energy's unit, slope by Passing and Bablok."""
    import pandas as pd

    def line(g: GroupAgreement) -> dict[str, str]:
        limits, slope, lin = g.limits, g.passing_bablok, g.concordance
        return dict(zip(GROUP_COLUMNS, (
            g.group, str(g.n), f"{limits.bias:+.3g}" if limits else "",
            f"{limits.lower:+.3g} to {limits.upper:+.3g}" if limits else "",
            str(len(limits.wild)) if limits else "",
            f"{slope.slope:.3f} ({slope.slope_interval[0]:.3f} to {slope.slope_interval[1]:.3f})" if slope else "",
            f"{lin.value:.3f}" if lin else "", g.note), strict=True))  # fmt: skip

    return pd.DataFrame([line(g) for g in found.groups if g.limits], columns=list(GROUP_COLUMNS))


def left_out(found: Panel) -> str:
    """How many kinds are too small for a line of their own, '' where none is."""
    small = [g for g in found.groups if g.limits is None]
    return f"{len(small)} more kinds have fewer than {agreement.NEEDED} samples." if small else ""


def of_kind(a: Assessment, stage: str, kind: str) -> GroupAgreement:
    """Agreement of bomb with composition over one kind of material, or 'all'. Raises WrongUse for a kind that is not there."""
    found = panel(a, stage)
    for group in found.groups if found else ():
        if group.group == kind:
            return group
    raise WrongUse(f"There is no kind of material '{kind}' with both figures.",
                   f"Kinds: {', '.join(g.group for g in found.groups) if found else 'none'}.")  # fmt: skip
