"""The board of verdicts: words and marks, for the terminal and as a table for screens."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    import pandas as pd

    from energy.assessment import Assessment

#: verdict -> a mark of its own; never colour alone
MARKS = {
    "concordant": "◆",
    "biased": "◪",
    "inconclusive": "◇",
    "discordant": "✕",
    "screening": "▤",
    "single_route": "╱",
    "not_computed": "·",
}
WORDS = {"single_route": "one route only", "not_computed": "not computed"}
#: the figures of a comparison, in the order they are read
FIGURES = (
    "bomb", "composition", "difference", "difference_percent", "measurement_part", "heats_part", "convention_part",
)  # fmt: skip
CAUTIONS = (
    "This does not replace the law's text or a licensed adviser: label, allergen and medical decisions rest with them.",
    "Bomb work uses oxygen under pressure: the maker's manual, local codes and licensed people decide.",
)


def word(verdict: str) -> str:
    """A verdict with its mark, as people read it."""
    return f"{MARKS[verdict]} {WORDS.get(verdict, verdict)}"


def board(assessment: Assessment) -> pd.DataFrame:
    """One row per sample, with the GE verdict beside it, and the figures of its first comparison that has both routes.

    Comparisons beyond GE come first; a sample with one route only shows the figure beyond GE that it has.
    """
    table = assessment.verdicts
    if table.empty:
        return table
    ge = table[table["stage"] == "GE"].drop_duplicates("sample_id").set_index("sample_id")
    whole = table["bomb"].notna() & table["composition"].notna()
    in_order = table.assign(place=np.where(table["stage"] == "GE", 1, np.where(whole, 0, 2)))
    in_order.loc[(table["stage"] == "GE") & ~whole, "place"] = 3
    rest = in_order.sort_values("place", kind="stable").drop_duplicates("sample_id").set_index("sample_id")
    found = ge[["food_name"]].copy()
    found.insert(0, "verdict", [word(v) for v in ge["verdict"]])
    main = rest.reindex(ge.index)
    for name in (*FIGURES, "stage"):
        found[name] = main[name]
    found["probable_cause"] = ge["probable_cause"]
    found["next_measurement"] = ge["next_measurement"]
    found["reason"] = ge["reason"]
    return found.reset_index()


def counts(assessment: Assessment) -> str:
    """How many samples have each GE verdict, in words."""
    table = assessment.verdicts
    found = table[table["stage"] == "GE"].drop_duplicates("sample_id")["verdict"].value_counts()
    parts = [f"{found[v]} {WORDS.get(v, v)}" for v in MARKS if v in found]
    n = int(found.sum())
    return f"{n} sample{'s' if n != 1 else ''}: {', '.join(parts)}"


def text(assessment: Assessment, width: int = 118) -> str:
    """The board as fixed-width text."""
    found = board(assessment)
    unit = f"{assessment.shown.unit} {assessment.shown.basis.replace('_', ' ')}"
    lines = [
        f"Bomb against composition, target {assessment.target}, "
        + (f"law {assessment.law}" if assessment.law else "no law chosen") + f"; energies in {unit}",
        "Verdict: do bomb and composition describe the same material? The convention part is expected, not a fault.",
        "",
        f"{'sample':<8}{'name':<30}{'verdict':<17}{'stage':<6}{'bomb':>8}{'compos.':>9}{'diff':>8}{'measur.':>9}{'heats':>7}{'conv.':>8}",
        "-" * 110,
    ]  # fmt: skip
    digits = 0 if assessment.shown.scale < 0.5 else 2
    for row in map(_Row, found.to_dict(orient="records")):
        figures = [_number(v, digits) for v in (row.bomb, row.composition, row.difference, row.measurement_part,
                                                row.heats_part, row.convention_part)]  # fmt: skip
        name = str(row.food_name or "")
        lines.append(
            f"{row.sample_id!s:<8.8}{name:<30.29}{row.verdict:<17}{row.stage:<6}{figures[0]:>8}{figures[1]:>9}{figures[2]:>8}"
            f"{figures[3]:>9}{figures[4]:>7}{figures[5]:>8}"
        )
        if row.probable_cause:
            lines.append(_wrap(f"probable cause: {row.probable_cause}", width))
            lines.append(_wrap(f"next: {row.next_measurement}", width))
    lines += ["-" * 110, counts(assessment), "Marks: " + "  ".join(f"{m} {WORDS.get(v, v)}" for v, m in MARKS.items())]
    return "\n".join(lines)


class _Row:
    """One line of the board."""

    def __init__(self, line: dict[Any, Any]):
        self.__dict__.update(line)

    def __getattr__(self, name: str) -> Any:
        raise AttributeError(name)


def _number(value: float, digits: int) -> str:
    return "" if not np.isfinite(value) else f"{value:.{digits}f}"


def _wrap(sentence: str, width: int) -> str:
    import textwrap

    return textwrap.fill(sentence, width, initial_indent=" " * 10, subsequent_indent=" " * 12)
